//! Whether a line stands in noise that is the same all the time, as electronics makes it.
//!
//! Against programme, medians over time tell what is always there, at the price of a third
//! of the evidence. Where nothing but even noise is beside a line, the mean over the whole
//! capture tells more, and chance alone can deceive.

use super::tracker::{Cells, Tracked, along_track};
use num_complex::Complex64;
use std::f64::consts::LN_2;

/// Cells taken together are so long, in seconds: nearly independent of the next.
const TOGETHER_S: f64 = 0.24;
/// Fewest of them that tell anything.
const FEWEST: usize = 12;
/// Nats that a stretch of its own wins.
const WON_IN_ONE: f64 = 1.0;
/// Standard deviations by which even noise may seem uneven.
const UNEVEN: f64 = 3.0;

/// Power over noise in 1/T of a line of the fine cells, from means over time and less what
/// following the noise wins, where that is even; `None` where it is not, or the cells are too few to tell.
pub(super) fn over_even_noise(fine: &Cells, line: usize, tracked: &Tracked) -> Option<f64> {
    let together = ((TOGETHER_S / fine.length_s).round() as usize).max(1);
    let turned = along_track(fine, line, tracked);
    let groups: Vec<Complex64> =
        turned.chunks_exact(together).map(|part| part.iter().sum::<Complex64>() / together as f64).collect();
    if groups.len() < FEWEST {
        return None;
    }
    let count = groups.len() as f64;
    let mean = groups.iter().sum::<Complex64>() / count;
    let mut squares: Vec<f64> = groups.iter().map(|z| (z - mean).norm_sqr()).collect();
    let scatter = squares.iter().sum::<f64>() / (count - 1.0);
    // The median of an exponential is ln 2 of its mean.
    let typical = median(&mut squares) / LN_2;
    let beside = 2.0 * fine.variance(line) / together as f64;
    // Mean over median of n exponentials strays by about 1/√n; a note near the line, or
    // leaving it, makes more there than farther off.
    if scatter > typical.min(beside) * (1.0 + UNEVEN / count.sqrt()) {
        return None;
    }
    Some(mean.norm_sqr() * count / scatter.max(beside) - won_by_following(tracked))
}

/// Nats that a track free to wander wins by following noise: so many for each stretch of the
/// smoother's time constant, (R·Δ/q)^¼.
fn won_by_following(tracked: &Tracked) -> f64 {
    let (times_s, wander) = (&tracked.phases.time_s, tracked.wander);
    let (Some(&first_s), Some(&last_s)) = (times_s.first(), times_s.last()) else { return 0.0 };
    if wander <= 0.0 || times_s.len() < 2 {
        return 0.0;
    }
    let cell_s = (last_s - first_s) / (times_s.len() - 1) as f64;
    let constant_s = (median(&mut tracked.phases.variance.clone()) * cell_s / wander).powf(0.25);
    WON_IN_ONE * (last_s - first_s) / constant_s
}

fn median(values: &mut [f64]) -> f64 {
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f64::total_cmp).1
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::analysis::PhaseTrack;
    use crate::analysis::gather::Gather;
    use crate::analysis::tracker::track;
    use rand::{RngExt, SeedableRng};
    use rand_xoshiro::Xoshiro256PlusPlus;
    use std::f64::consts::TAU;

    /// A line of amplitude 0.1 in noise of unit variance times a level that may vary.
    fn over(level: impl Fn(f64) -> f64) -> Option<f64> {
        let (rate_hz, duration_s) = (1000.0, 40.0);
        let mut generator = Xoshiro256PlusPlus::seed_from_u64(5);
        let mut uniform = move || generator.random::<f64>() - 0.5;
        let samples: Vec<f64> = (0..(rate_hz * duration_s) as usize)
            .map(|n| n as f64 / rate_hz)
            .map(|t| 0.1 * (TAU * 50.0 * t).cos() + level(t) * 12f64.sqrt() * uniform())
            .collect();
        let reference = PhaseTrack::constant(50.0, duration_s);
        let mut gather = Gather::new(rate_hz, &reference, &[1], samples.len() as u64);
        gather.push(&samples);
        let gathered = gather.finish();
        let tracked = track(&gathered.cells, &[1], 0.3, duration_s).expect("long enough");
        over_even_noise(&gathered.fine, 0, &tracked)
    }

    #[test]
    fn in_even_noise_a_line_reads_its_power_over_that_in_1_over_t() {
        // 0.005 over 0.002/Hz in 1/40 Hz.
        let read = over(|_| 1.0).expect("even");
        assert!((read / 100.0 - 1.0).abs() < 0.35, "{read}");
    }

    #[test]
    fn bursts_are_no_even_noise() {
        assert_eq!(over(|t| if t % 1.0 < 0.2 { 2.0 } else { 0.2 }), None);
    }
}
