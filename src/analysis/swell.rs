//! How far the amplitude of a comb swells and fades, less what noise makes of it.
//!
//! A generator's voltage is regulated; a bowed or blown note is not.

use super::tracker::{Cells, Tracked, along_track};
use num_complex::Complex64;
use std::f64::consts::TAU;

/// Length of the stretches over which the amplitude is taken, in seconds. Under a Hann
/// window a line 2 Hz away, another supply's or a note's, makes no swing.
const STRETCH_S: f64 = 1.0;
/// Fewest stretches that tell anything; each begins in the middle of the one before.
const FEWEST: usize = 4;

/// RMS swing of the common amplitude of these orders about its mean, as a share of the
/// mean; `None` where the cells are too few to tell. Each order counts by its power over
/// the noise beside it, and the swing that this noise would show is taken out.
pub(super) fn swell(fine: &Cells, tracked: &Tracked, orders: &[u32]) -> Option<f64> {
    let hop = ((0.5 * STRETCH_S / fine.length_s).round() as usize).max(1);
    let window = hann(2 * hop);
    let count = (fine.count() / hop).saturating_sub(1);
    if count < FEWEST {
        return None;
    }
    let mut amplitude = vec![0.0; count];
    let mut information = 0.0;
    for (line, _) in fine.orders.iter().enumerate().filter(|(_, order)| orders.contains(order)) {
        let turned = along_track(fine, line, tracked);
        let mean = turned.iter().sum::<Complex64>() / turned.len() as f64;
        let worth = mean.norm_sqr() / fine.variance(line);
        for (i, sum) in amplitude.iter_mut().enumerate() {
            let part = &turned[i * hop..i * hop + window.len()];
            let along: f64 = part.iter().zip(&window).map(|(z, w)| w * (mean.conj() * z).re).sum();
            *sum += worth * along / mean.norm_sqr().max(1e-40);
        }
        information += worth;
    }
    if information <= 0.0 {
        return None;
    }
    amplitude.iter_mut().for_each(|sum| *sum /= information);
    // What noise shows seldom, as a variance of so many stretches.
    let seldom = 1.0 + 3.0 * (2.0 / count as f64).sqrt();
    let noise = seldom * window.iter().map(|w| w * w).sum::<f64>() / information;
    let mean = amplitude.iter().sum::<f64>() / count as f64;
    let square = amplitude.iter().map(|a| (a - mean) * (a - mean)).sum::<f64>() / count as f64;
    Some((square - noise).max(0.0).sqrt() / mean.abs().max(1e-20))
}

/// A Hann window that sums to 1.
fn hann(length: usize) -> Vec<f64> {
    let n = length as f64;
    (0..length).map(|i| (1.0 - (TAU * (i as f64 + 0.5) / n).cos()) / n).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::analysis::PhaseTrack;
    use crate::analysis::gather::Gather;
    use crate::analysis::tracker::track;

    fn swell_of(amplitude: impl Fn(f64) -> f64) -> f64 {
        let (rate_hz, duration_s) = (1000.0, 20.0);
        let reference = PhaseTrack::constant(52.0, duration_s);
        let samples: Vec<f64> = (0..(rate_hz * duration_s) as usize)
            .map(|n| n as f64 / rate_hz)
            .map(|t| amplitude(t) * ((TAU * 52.0 * t).cos() + 0.3 * (TAU * 104.0 * t).cos()))
            .collect();
        let mut gather = Gather::new(rate_hz, &reference, &[1, 2], samples.len() as u64);
        gather.push(&samples);
        let gathered = gather.finish();
        let tracked = track(&gathered.cells, &[1, 2], 0.3, duration_s).expect("long enough");
        swell(&gathered.fine, &tracked, &[1, 2]).expect("long enough")
    }

    #[test]
    fn a_note_that_swells_by_a_third_shows_it_and_a_regulated_voltage_shows_none() {
        assert!(swell_of(|_| 0.1) < 1e-3);
        let swung = swell_of(|t| 0.1 * (1.0 + 0.3 * (TAU * 0.2 * t).sin()));
        assert!((swung / (0.3 / 2f64.sqrt()) - 1.0).abs() < 0.1, "{swung}");
    }
}
