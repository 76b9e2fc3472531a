//! The mean frequency of hum under music that is 20 dB louder.

use super::frequency::power_of;
use super::{Outcome, Score};
use crate::analysis_signals::{Noise, hum, music, phase_of_wander, power, run};
use notchwright::analysis::PhaseTrack;
use rayon::prelude::*;
use std::f64::consts::{PI, TAU};

/// The hum's harmonics.
pub const LINES: [(u32, f64); 5] = [(1, 0.1), (2, 0.02), (3, 0.05), (5, 0.03), (7, 0.015)];
const RATE: u32 = 8000;
const DURATION_S: f64 = 60.0;
/// A wandering hum turns once in so many seconds.
const TURN_S: f64 = 40.0;
/// White noise under the hum, so that the rests are not without any.
const NOISE_UNDER_HUM_DB: f64 = 20.0;

/// One-sided density of `samples` around a frequency in each second: the mean of the
/// periodogram under a Hann window over ± 2 Hz.
fn densities(samples: &[f64], frequency_hz: f64) -> Vec<f64> {
    let length = RATE as usize;
    let window: Vec<f64> = (0..length).map(|n| (PI * n as f64 / length as f64).sin().powi(2)).collect();
    let window_power: f64 = window.iter().map(|w| w * w).sum();
    let offsets = [-2.0, -1.0, 0.0, 1.0, 2.0];
    samples
        .chunks_exact(length)
        .map(|second| {
            let power_at = |offset_hz: f64| {
                let step = TAU * (frequency_hz + offset_hz) / f64::from(RATE);
                let (mut re, mut im) = (0.0, 0.0);
                for (n, (x, w)) in second.iter().zip(&window).enumerate() {
                    let (sin, cos) = (step * n as f64).sin_cos();
                    re += w * x * cos;
                    im += w * x * sin;
                }
                (re * re + im * im) * 2.0 / (window_power * f64::from(RATE))
            };
            offsets.iter().map(|&offset| power_at(offset)).sum::<f64>() / offsets.len() as f64
        })
        .collect()
}

/// Bound from the programme's own power: in a second of density S the phase of harmonic k has
/// the information k²Aₖ²·1 s/S about the fundamental's, and the frequency is the slope of the
/// weighted regression of phase on time. Each harmonic's own phase is unknown, so that each has
/// its own middle in time.
fn bound_hz(beside: &[f64], fundamental_hz: f64) -> f64 {
    let information = |(k, a): (u32, f64)| -> f64 {
        let k = f64::from(k);
        let weights: Vec<(f64, f64)> = densities(beside, k * fundamental_hz)
            .into_iter()
            .enumerate()
            .map(|(i, density)| (i as f64 + 0.5, (k * a).powi(2) / density))
            .collect();
        let total: f64 = weights.iter().map(|(_, w)| w).sum();
        let mean = weights.iter().map(|(t, w)| w * t).sum::<f64>() / total;
        weights.iter().map(|(t, w)| w * ((t - mean).powi(2) + 1.0 / 12.0)).sum()
    };
    LINES.into_iter().map(information).sum::<f64>().sqrt().recip() / TAU
}

/// The programme of a trial with its noise, and the recording.
pub fn under_music(over_hum_db: f64, swing_hz: f64, seed: u64) -> Option<Outcome> {
    let mut noise = Noise::new(6000 + seed);
    let truth = noise.between(49.9, 50.1);
    let phases: Vec<f64> = LINES.iter().map(|_| noise.between(0.0, TAU)).collect();
    let track = if swing_hz > 0.0 {
        phase_of_wander(truth, swing_hz, 1.0 / TURN_S, DURATION_S)
    } else {
        PhaseTrack::constant(truth, DURATION_S)
    };
    let truth = track.mean_frequency_hz();
    let signal = hum(&track, &LINES, &phases, RATE, DURATION_S);
    let programme = music(RATE, DURATION_S, 7000 + seed);
    let scale = (power_of(&LINES) * 10f64.powf(over_hum_db / 10.0) / power(&programme)).sqrt();
    let sd = (power_of(&LINES) * 10f64.powf(-NOISE_UNDER_HUM_DB / 10.0)).sqrt();
    let beside: Vec<f64> = programme.iter().map(|x| scale * x + sd * noise.normal()).collect();
    let samples = signal.iter().zip(&beside).map(|(x, n)| x + n).collect();
    let mains = run(RATE, vec![samples]).analysis.mains;
    let bound = bound_hz(&beside, truth);
    if std::env::var("NOTCHWRIGHT_SHOW").is_ok() {
        println!(
            "seed {seed}: bound {bound:.2e}, error {:?}, stated {:?}",
            mains.frequency_hz.map(|f| (f - truth) / bound),
            mains.frequency_se_hz.map(|s| s / bound)
        );
    }
    Some(Outcome { error: mains.frequency_hz? - truth, bound, stated: mains.frequency_se_hz? })
}

/// Trials of a hum that is steady, or swings by so much; for the latter the bound is of a steady one.
pub fn score(over_hum_db: f64, swing_hz: f64, trials: u64) -> Score {
    let outcomes: Vec<_> =
        (0..trials).into_par_iter().map(|seed| under_music(over_hum_db, swing_hz, seed)).collect();
    let steady = if swing_hz > 0.0 { format!(", swing {swing_hz} Hz") } else { String::new() };
    Score::of(&format!("5 harmonics, music +{over_hum_db:.0} dB, 60 s{steady}"), &outcomes)
}
