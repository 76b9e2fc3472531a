//! What the network does of itself: loss, delay, settling.

use std::f64::consts::TAU;

use super::Kernel;
use crate::network::Circuit;

/// Points on which a keep band is searched for its largest loss, of either spacing.
const POINTS: usize = 2000;

/// Rate below which settling is not read off a recording's own kernel, hertz:
/// leading over at half the rate would be seen in the step.
const SETTLING_RATE_HZ: f64 = 8000.0;

/// Insertion loss in decibels, positive for a loss.
pub fn insertion_loss_db(circuit: &Circuit, frequency_hz: f64) -> f64 {
    -20.0 * circuit.insertion(frequency_hz).norm().max(1e-20).log10()
}

/// The largest loss or gain between two frequencies outside the stretches of
/// `left_out` (ranges in hertz), signed: a gain is negative. `None` where nothing is left.
pub fn largest_loss_db(circuit: &Circuit, from_hz: f64, to_hz: f64, left_out: &[(f64, f64)]) -> Option<f64> {
    let edges = left_out.iter().flat_map(|&(low, high)| [low, high]);
    grid(from_hz, to_hz)
        .chain(edges)
        .filter(|hz| (from_hz..=to_hz).contains(hz))
        .filter(|hz| left_out.iter().all(|&(low, high)| *hz <= low || *hz >= high))
        .map(|hz| insertion_loss_db(circuit, hz))
        .max_by(|a, b| a.abs().total_cmp(&b.abs()))
}

/// Even steps for the top of a band, even ratios for its bottom.
fn grid(from_hz: f64, to_hz: f64) -> impl Iterator<Item = f64> {
    let lowest = from_hz.max(to_hz * 1e-4);
    let share = |n: usize| n as f64 / (POINTS - 1) as f64;
    let even = (0..POINTS).map(move |n| from_hz + (to_hz - from_hz) * share(n));
    even.chain((0..POINTS).map(move |n| lowest * (to_hz / lowest).powf(share(n))))
}

/// Group delay −dφ/dω in seconds at a frequency, from the ratio's own slope;
/// `None` in a null, where there is no phase.
pub fn group_delay_s(circuit: &Circuit, frequency_hz: f64) -> Option<f64> {
    let step_hz = (1e-4 * frequency_hz).max(1e-3);
    let here = circuit.insertion(frequency_hz);
    let slope = (circuit.insertion(frequency_hz + step_hz) - circuit.insertion(frequency_hz - step_hz))
        / (2.0 * step_hz * TAU);
    (here.norm() > 1e-9).then(|| -(slope / here).im)
}

/// Smallest and largest group delay between two frequencies outside `left_out`.
pub fn group_delay_range_s(
    circuit: &Circuit,
    from_hz: f64,
    to_hz: f64,
    left_out: &[(f64, f64)],
) -> Option<(f64, f64)> {
    grid(from_hz, to_hz)
        .step_by(10)
        .filter(|hz| left_out.iter().all(|&(low, high)| *hz <= low || *hz >= high))
        .filter_map(|hz| group_delay_s(circuit, hz))
        .fold(None, |range, delay| {
            let (least, most) = range.unwrap_or((delay, delay));
            Some((least.min(delay), most.max(delay)))
        })
}

/// Time after a step until its response stays within 1 % of where it ends, of its
/// largest value where the network blocks DC; seconds. `kernel` is the recording's;
/// at a low rate a faster one is made.
pub fn settling_s(circuit: &Circuit, kernel: &Kernel) -> f64 {
    let rate_hz = kernel.sample_rate_hz();
    let faster = (SETTLING_RATE_HZ / rate_hz).log2().ceil();
    if faster > 0.0
        && let Ok(finer) = Kernel::of_circuit(circuit, rate_hz * faster.exp2())
    {
        return settling_of(&finer);
    }
    settling_of(kernel)
}

fn settling_of(kernel: &Kernel) -> f64 {
    let mut sum = 0.0;
    let by_fft: Vec<f64> = kernel
        .taps()
        .iter()
        .map(|tap| {
            sum += tap;
            sum
        })
        .collect();
    let slow = |n: f64| kernel.slow().iter().map(|pole| pole.step_at(n)).sum::<f64>();
    let early =
        by_fft.iter().skip(kernel.before()).enumerate().map(|(n, step)| (n as f64, step + slow(n as f64)));
    // Beyond the taps only recursions ring on: two thousand looks at ten time constants.
    let slowest = kernel.slow().iter().map(|pole| pole.time_constant()).fold(0.0, f64::max);
    let stride = (slowest / 200.0).max(1.0);
    let looks = if slowest > 0.0 { 2000 } else { 0 };
    let late = (1..=looks).map(|look| {
        let n = kernel.after() as f64 + stride * f64::from(look);
        (n, sum + slow(n))
    });
    let steps: Vec<(f64, f64)> = early.chain(late).collect();
    let end = kernel.gain_at_dc();
    let largest = steps.iter().fold(0.0_f64, |largest, (_, step)| largest.max(step.abs()));
    let whole = if end.abs() > 0.01 * largest { end.abs() } else { largest };
    let last = steps.iter().rposition(|(_, step)| (step - end).abs() > 0.01 * whole);
    let settled = last.map_or(0.0, |last| steps.get(last + 1).unwrap_or(&steps[last]).0);
    settled / kernel.sample_rate_hz()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::network::{Branch, Load, Section, Source, TwoPort};
    use crate::parts::{Part, PartKind};

    /// 1 kΩ source, 1 µF across a load of 1 GΩ: one pole of 1 ms.
    fn low_pass() -> Circuit {
        Circuit {
            source: Source { resistance_ohm: 1000.0, inductance_h: 0.0 },
            load: Load { resistance_ohm: 1e9, capacitance_f: 0.0 },
            sections: vec![Section {
                kind: "low-pass".to_owned(),
                stages: vec![TwoPort::Shunt { shunt: Branch::Part(0) }],
            }],
            parts: vec![Part::ideal("C1", PartKind::Capacitor, 1e-6)],
        }
    }

    #[test]
    fn one_pole_settles_to_a_hundredth_in_ln_100_time_constants() {
        for rate_hz in [100.0, 48_000.0] {
            let kernel = Kernel::of_circuit(&low_pass(), rate_hz).expect("kernel");
            let settling = settling_s(&low_pass(), &kernel);
            assert!((settling - 100_f64.ln() * 1e-3).abs() < 2e-4, "{settling} s at {rate_hz} Hz");
        }
    }

    #[test]
    fn one_pole_delays_slow_signals_by_its_time_constant() {
        for (hz, expected) in [(0.0, 1e-3), (1.0, 1e-3), (159.154_943, 0.5e-3)] {
            let delay = group_delay_s(&low_pass(), hz).expect("no null");
            assert!((delay - expected).abs() < 1e-7, "{delay} s at {hz} Hz");
        }
    }

    #[test]
    fn the_largest_loss_is_at_the_edge_or_beside_the_guard() {
        let whole = largest_loss_db(&low_pass(), 0.0, 159.154_943, &[]).expect("a band");
        assert!((whole - 3.0103).abs() < 1e-4, "{whole}");
        let beside = largest_loss_db(&low_pass(), 0.0, 159.154_943, &[(100.0, 200.0)]).expect("a band");
        assert!((beside - insertion_loss_db(&low_pass(), 100.0)).abs() < 1e-9, "{beside}");
        assert_eq!(largest_loss_db(&low_pass(), 110.0, 150.0, &[(100.0, 200.0)]), None);
    }
}
