//! Where nothing meets the brief: which design is the nearest, and what stands in the way.

use super::requirements::Task;
use super::search::Made;
use super::window::{least_q_for_bands, widest_spread_hz, windows};
use super::{Design, QWindow, span};
use crate::parts::Stock;

/// Share of the whole merit that is lost where a band loses twice what is allowed.
const EXCESS_WEIGHT: f64 = 0.5;
/// Share of the whole merit that a unit of effort (a part) must bring.
const EFFORT_WEIGHT: f64 = 0.004;
/// A band counts as held up to this share over the loss allowed.
const HELD: f64 = 0.02;
/// A target counts as met up to this many decibels short.
const REACHED_DB: f64 = 0.05;
/// Least decibels by which some order must go down more than the wanted signal does.
const LEAST_USE_DB: f64 = 1.0;

/// How near a design is to a brief that it misses: of 1, the mean over all orders of
/// the share of the target that is reached, less a half where a band loses twice
/// what is allowed (and so on in proportion), less a little for each part.
///
/// Reductions count by what 95 % of builds do, less the flat loss: what takes the
/// wanted signal down along with the hum brings nobody nearer.
fn merit(made: &Made) -> f64 {
    reached(&made.design) - EXCESS_WEIGHT * excess(&made.design) - EFFORT_WEIGHT * made.effort()
}

/// Mean share of the targets that is reached, 0 to 1.
fn reached(design: &Design) -> f64 {
    let flat_db = design.flat_loss_db.max(0.0);
    let shares: Vec<f64> = design
        .predicted
        .iter()
        .filter_map(|order| Some(((order.reduction_worst_db - flat_db) / order.target_db?).clamp(0.0, 1.0)))
        .collect();
    shares.iter().sum::<f64>() / shares.len().max(1) as f64
}

/// Loss over what is allowed as a share of it, of the worst band; 0 where all are held.
fn excess(design: &Design) -> f64 {
    let over = design.keep.iter().map(|band| band.loss_worst_db.abs() / band.allowed_db - 1.0);
    over.fold(0.0, f64::max)
}

/// Least reduction over all orders that 95 % of builds reach, decibels.
fn least_reduction_db(design: &Design) -> f64 {
    design.predicted.iter().map(|order| order.reduction_worst_db).fold(f64::INFINITY, f64::min)
}

fn meets_targets(design: &Design) -> bool {
    let short = |order: &super::Predicted| {
        order.target_db.is_some_and(|db| order.reduction_worst_db < db - REACHED_DB)
    };
    !design.predicted.iter().any(short)
}

/// Whether the hum goes down by more than the wanted signal at its worst does.
fn is_of_use(made: &Made) -> bool {
    let loss_db = made.design.keep.iter().map(|band| band.loss_worst_db.abs()).fold(0.0, f64::max);
    made.design.predicted.iter().any(|order| order.reduction_worst_db > loss_db + LEAST_USE_DB)
}

/// The nearest first; behind it the ends of the trade-off (the bands held; all
/// targets met at the least loss), then the others. What reduces hum less than it costs
/// the signal stands last.
pub fn sorted(mut made: Vec<Made>) -> Vec<Made> {
    made.sort_by(|a, b| is_of_use(b).cmp(&is_of_use(a)).then(merit(b).total_cmp(&merit(a))));
    let mut place = 1;
    for end_of in [held, deepest] {
        let Some(end) = end_of(&made) else { continue };
        if end >= place && is_of_use(&made[end]) {
            let moved = made.remove(end);
            made.insert(place, moved);
            place += 1;
        }
    }
    if made.iter().any(is_of_use) {
        made.retain(is_of_use);
    }
    made
}

/// Of those that meet all targets, the one of least loss.
fn deepest(made: &[Made]) -> Option<usize> {
    let all = (0..made.len()).filter(|&index| meets_targets(&made[index].design));
    all.min_by(|&a, &b| excess(&made[a].design).total_cmp(&excess(&made[b].design)))
}

/// Of those that hold all bands, the one that reaches most.
fn held(made: &[Made]) -> Option<usize> {
    let all = (0..made.len()).filter(|&index| excess(&made[index].design) <= HELD);
    all.max_by(|&a, &b| reached(&made[a].design).total_cmp(&reached(&made[b].design)))
}

/// What stands in the way of the brief, in numbers: what the nearest misses; what
/// each of target and loss would have to become, by the best networks found that
/// hold to the other; and what closes the Q window of a single notch.
pub fn obstacles(made: &[Made], task: &Task, stock: &Stock, temperature_c: (f64, f64)) -> Vec<String> {
    let mut all = misses(&made[0].design);
    all.extend(target_that_can_be_met(made, task));
    all.extend(loss_that_meets_the_targets(made, task));
    let windows = windows(task, stock, &made[0].design, temperature_c);
    let narrowest = windows
        .iter()
        .filter(|window| window.closed_by.is_some())
        .max_by(|a, b| (a.q_min / a.q_max).total_cmp(&(b.q_min / b.q_max)));
    all.extend(narrowest.map(|window| closed_window(window, task, stock, temperature_c)));
    all
}

/// Missed orders told one by one.
const TOLD_ORDERS: usize = 3;

fn misses(design: &Design) -> Vec<String> {
    let mut missed: Vec<(u32, f64, f64)> = design
        .predicted
        .iter()
        .filter_map(|order| {
            let short_db = order.target_db? - order.reduction_worst_db;
            (short_db > 0.0).then_some((order.order, order.reduction_worst_db, short_db))
        })
        .collect();
    let more = missed.split_off(missed.len().min(TOLD_ORDERS));
    let orders = missed.iter().map(|(order, reduction_db, short_db)| {
        let way = if *reduction_db < 0.0 { "up" } else { "down" };
        format!(
            "order {order} goes {way} by {:.1} dB in 95 % of builds, {short_db:.1} dB less than asked",
            reduction_db.abs()
        )
    });
    let worst = more.iter().max_by(|a, b| a.2.total_cmp(&b.2));
    let others = worst.map(|(order, _, short_db)| {
        format!("{} more orders fall short, the worst of them order {order} by {short_db:.1} dB", more.len())
    });
    let orders = orders.chain(others);
    let bands = design.keep.iter().filter(|band| band.loss_worst_db.abs() > band.allowed_db).map(|band| {
        format!(
            "{} {} {:.2} dB in 95 % of builds, {:.2} dB more than allowed",
            span(band.from_hz, band.to_hz),
            if band.loss_worst_db < 0.0 { "gains" } else { "loses" },
            band.loss_worst_db.abs(),
            band.loss_worst_db.abs() - band.allowed_db
        )
    });
    let mut all: Vec<String> = orders.chain(bands).collect();
    if all.is_empty() {
        all.push(format!(
            "each order and band is met in 95 % of builds, but all of them together in {:.1} % only",
            design.builds.meeting_pct
        ));
    }
    all
}

fn target_that_can_be_met(made: &[Made], task: &Task) -> Option<String> {
    let holding = made.iter().filter(|made| excess(&made.design) <= HELD);
    let best_db = holding.map(|made| least_reduction_db(&made.design)).max_by(f64::total_cmp);
    let asked_db = task.orders.iter().map(|order| order.target_db).fold(0.0, f64::max);
    let orders = counted_orders(task);
    Some(match best_db {
        Some(db) if db >= LEAST_USE_DB => format!(
            "with all keep bands held, the best network found takes {db:.1} dB off {orders}: \
             the target would have to come down from {asked_db:.1} to {db:.1} dB"
        ),
        _ => {
            format!("with all keep bands held, no network found takes {LEAST_USE_DB} dB or more off {orders}")
        }
    })
}

fn loss_that_meets_the_targets(made: &[Made], task: &Task) -> Option<String> {
    let best = &made[deepest(made)?].design;
    let worst = best.keep.iter().max_by(|a, b| {
        let over = |band: &super::KeepResult| band.loss_worst_db.abs() / band.allowed_db;
        over(a).total_cmp(&over(b))
    })?;
    Some(format!(
        "with all targets met on {}, the best network found loses {:.2} dB from {}: \
         the loss allowed would have to rise from {} to {:.2} dB",
        counted_orders(task),
        worst.loss_worst_db.abs(),
        span(worst.from_hz, worst.to_hz),
        worst.allowed_db,
        worst.loss_worst_db.abs()
    ))
}

fn counted_orders(task: &Task) -> String {
    match task.orders.len() {
        1 => format!("order {}", task.orders[0].order),
        count => format!("all {count} orders"),
    }
}

/// Largest loss that is offered as a way out, decibels.
const MOST_LOSS_DB: f64 = 20.0;

/// Rounded so that what opens the window still does.
fn up_to_tenths(value: f64) -> f64 {
    (10.0 * value - 1e-6).ceil() / 10.0
}

/// Why the window is closed, and what each bound alone would have to become.
fn closed_window(window: &QWindow, task: &Task, stock: &Stock, temperature_c: (f64, f64)) -> String {
    let order = task.orders.iter().find(|order| order.order == window.order).expect("a window has its order");
    let coil_q = stock.coils.iter().map(|coil| coil.q(order.centre_hz)).fold(0.0, f64::max);
    let mut cures: Vec<String> = Vec::new();
    let opens = |change: &dyn Fn(&mut Task)| {
        let mut changed = task.clone();
        change(&mut changed);
        least_q_for_bands(&changed, order) <= window.q_max
    };
    // More loss than this is no wanted signal any more.
    let most = task.keep.iter().map(|band| MOST_LOSS_DB / band.allowed_db).fold(f64::INFINITY, f64::min);
    let loss = smallest(1.0, most, |factor| {
        opens(&|task| task.keep.iter_mut().for_each(|band| band.allowed_db *= factor))
    });
    if let Some(factor) = loss {
        let allowed: Vec<String> =
            task.keep.iter().map(|band| format!("{:.1}", up_to_tenths(band.allowed_db * factor))).collect();
        cures.push(format!("a loss of {} dB allowed", allowed.join(" and ")));
    }
    let most_hz = task.centre_hz / 2.0;
    if let Some(guard_hz) = smallest(task.guard_hz, most_hz, |hz| opens(&|task| task.guard_hz = hz)) {
        cures.push(format!("a guard of {:.1} Hz", up_to_tenths(guard_hz)));
    }
    if window.closed_by.as_deref() == Some("coil") {
        cures.push(format!(
            "a coil of Q {:.0} at {:.0} Hz (the best listed has {coil_q:.1}; a bridged-T reaches half of it)",
            (2.0 * window.q_min).ceil(),
            order.centre_hz
        ));
    }
    if window.closed_by.as_deref() == Some("spread")
        && let Some(wander_hz) = widest_spread_hz(window.q_min, order, stock, temperature_c)
    {
        // Two digits, whatever it is: a zero would say nothing.
        let decimals = (1 - wander_hz.log10().floor() as i32).clamp(0, 9) as usize;
        cures.push(format!(
            "a wander of ± {wander_hz:.decimals$} Hz at most (designed for: ± {:.3} Hz)",
            task.spread_hz
        ));
    }
    format!(
        "a single notch at order {} needs a Q of {:.2} for the keep bands, and {} allows {:.2}{}",
        window.order,
        window.q_min,
        window.closed_by.as_deref().unwrap_or("the list"),
        window.q_max,
        if cures.is_empty() {
            String::new()
        } else {
            let these = if cures.len() == 1 { "this" } else { "any of these" };
            format!("; {these} alone would open it: {}", cures.join(", "))
        }
    )
}

/// Smallest value between `from` and `to` that holds, where a larger one always does;
/// `None` where not even `to` does.
fn smallest(from: f64, to: f64, holds: impl Fn(f64) -> bool) -> Option<f64> {
    if !holds(to) {
        return None;
    }
    let (mut low, mut high) = (from, to);
    for _ in 0..40 {
        let middle = 0.5 * (low + high);
        if holds(middle) {
            high = middle;
        } else {
            low = middle;
        }
    }
    Some(high)
}
