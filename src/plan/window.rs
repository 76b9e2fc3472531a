//! The Q window of each order: where one notch alone would have to lie.

use super::design::{Design, QWindow};
use super::requirements::{OrderTask, Task};
use crate::network::kinds::kind_named;
use crate::parts::Stock;

/// Largest Q of a single notch that still takes D dB at a detuning of δ (a
/// fraction of its frequency): Q ≤ 1/(2δ·√(10^(D/10) − 1)), from
/// |H|² = (1−x²)²/((1−x²)² + (x/Q)²) near x = 1.
pub fn largest_q_for_detuning(detuning: f64, target_db: f64) -> f64 {
    1.0 / (2.0 * detuning * (10f64.powf(target_db / 10.0) - 1.0).sqrt())
}

/// Largest Q of a trap whose coil has Q_L by itself: Q ≤ Q_L·10^(−D/20).
pub fn largest_q_of_trap(coil_q: f64, target_db: f64) -> f64 {
    coil_q * 10f64.powf(-target_db / 20.0)
}

/// Largest Q of a bridged-T with loss compensation, however deep: Q_L/2 (Tuttle 1940).
pub fn largest_q_of_bridged_t(coil_q: f64) -> f64 {
    coil_q / 2.0
}

/// Least Q of a single notch that loses no more than A dB at x = f/f₀:
/// Q ≥ x/(|1 − x²|·√(10^(A/10) − 1)).
pub fn least_q_for_loss(x: f64, allowed_db: f64) -> f64 {
    x / ((1.0 - x * x).abs() * (10f64.powf(allowed_db / 10.0) - 1.0).sqrt())
}

/// Detuning that a trim by reading leaves, as a fraction of the frequency (half of
/// what it leaves on the capacitance), and what temperature adds.
const TRIM_RESIDUE: f64 = 0.002;

/// The windows of all orders, with the Q that the design has there.
pub fn windows(task: &Task, stock: &Stock, design: &Design, temperature_c: (f64, f64)) -> Vec<QWindow> {
    task.orders.iter().map(|order| window(task, order, stock, design, temperature_c)).collect()
}

/// The widest design spread, in hertz at the fundamental, at which a single notch of
/// this Q still reaches the order's target beside trim residue and temperature;
/// `None` where these alone are too much.
pub fn widest_spread_hz(q: f64, order: &OrderTask, stock: &Stock, temperature_c: (f64, f64)) -> Option<f64> {
    let detuning = 1.0 / (2.0 * q * (10f64.powf(order.target_db / 10.0) - 1.0).sqrt());
    let left = detuning - TRIM_RESIDUE - drift_detuning(stock, temperature_c);
    (left > 0.0).then(|| left * order.centre_hz / f64::from(order.order))
}

fn window(
    task: &Task,
    order: &OrderTask,
    stock: &Stock,
    design: &Design,
    temperature_c: (f64, f64),
) -> QWindow {
    let spread = order.spread_hz / order.centre_hz;
    // A notch can always be trimmed where small capacitors are listed.
    let tolerance = TRIM_RESIDUE;
    let drift = drift_detuning(stock, temperature_c);
    let by_spread = largest_q_for_detuning(spread, order.target_db);
    let by_detuning = largest_q_for_detuning(spread + tolerance + drift, order.target_db);
    let coil_q = stock.coils.iter().map(|coil| coil.q(order.centre_hz)).fold(0.0, f64::max);
    let by_coil = match coil_q > 0.0 {
        true => largest_q_of_trap(coil_q, order.target_db).max(largest_q_of_bridged_t(coil_q)),
        // Without coils there is the twin-T of Q = 1/4.
        false => 0.25,
    };
    let q_max = by_detuning.min(by_coil);
    let q_min = least_q_for_bands(task, order);
    let closed_by = (q_min > q_max).then(|| {
        // The one bound that alone would close it, from the hardest to mend on.
        let cause = if by_coil < q_min && by_coil <= by_detuning {
            "coil"
        } else if by_spread < q_min {
            "spread"
        } else if by_detuning < q_min {
            "tolerance"
        } else {
            "keep band"
        };
        cause.to_owned()
    });
    let q_chosen = chosen_q(design, order.order);
    QWindow { order: order.order, q_min, q_max, q_chosen, closed_by }
}

/// Lowest loaded Q of the single notches that take an order down; `None` where
/// another kind of section has a part in it, whose Q says little by itself.
fn chosen_q(design: &Design, order: u32) -> Option<f64> {
    let notches =
        design.sections.iter().flat_map(|section| section.notches.iter().map(move |notch| (section, notch)));
    notches
        .filter(|(_, notch)| notch.order == order)
        .map(|(section, notch)| {
            kind_named(&section.kind).filter(|kind| kind.is_single_notch()).map(|_| notch.q)
        })
        .reduce(|one, other| Some(one?.min(other?)))
        .flatten()
}

/// Least Q of a notch at this order by the keep bands of the task, the loss allowed
/// shared among the orders to be reduced.
pub fn least_q_for_bands(task: &Task, order: &OrderTask) -> f64 {
    let share = 1.0 / task.orders.len() as f64;
    task.keep
        .iter()
        .flat_map(|band| task.judged(band).into_iter().map(move |edges| (edges, band.allowed_db)))
        .flat_map(|((from_hz, to_hz), allowed_db)| {
            [from_hz, to_hz].map(|hz| least_q_for_loss(hz / order.centre_hz, allowed_db * share))
        })
        .fold(0.0, f64::max)
}

/// Half the sum of both drifts over the half-range of temperature about 20 °C.
fn drift_detuning(stock: &Stock, (from_c, to_c): (f64, f64)) -> f64 {
    let kelvin = (from_c - 20.0).abs().max((to_c - 20.0).abs());
    let coil = stock.coils.iter().map(|coil| coil.drift_per_k).reduce(f64::min).unwrap_or(0.0);
    let capacitor = stock.capacitors.iter().map(|line| line.drift_per_k).reduce(f64::max).unwrap_or(0.0);
    (coil + capacitor).abs() / 2.0 * kelvin
}
