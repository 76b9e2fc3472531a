//! The mean frequency in stationary noise, white and 1/f.

use super::pink::{self, pink};
use super::{Outcome, Score};
use crate::analysis_signals::{Noise, hum, phase_of_wander, run};
use notchwright::analysis::PhaseTrack;
use rayon::prelude::*;
use std::f64::consts::TAU;

/// One tone, and five harmonics of unequal level: order and amplitude.
pub const ONE: [(u32, f64); 1] = [(1, 0.1)];
pub const FIVE: [(u32, f64); 5] = [(1, 0.1), (2, 0.02), (3, 0.05), (5, 0.03), (7, 0.015)];

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Colour {
    White,
    OneOverF,
}

impl Colour {
    /// One-sided density at a frequency of noise of mean square 1.
    pub fn density(self, frequency_hz: f64, rate: u32) -> f64 {
        match self {
            Self::White => 2.0 / f64::from(rate),
            Self::OneOverF => pink::density(frequency_hz) / pink::power(rate),
        }
    }

    /// Noise of mean square 1 (1/f: from where it is level up to half the rate).
    pub fn samples(self, count: usize, rate: u32, noise: &mut Noise) -> Vec<f64> {
        match self {
            Self::White => (0..count).map(|_| noise.normal()).collect(),
            Self::OneOverF => {
                let scale = 1.0 / pink::power(rate).sqrt();
                pink(count, rate, noise).into_iter().map(|x| scale * x).collect()
            }
        }
    }
}

/// Mean square of harmonics.
pub fn power_of(lines: &[(u32, f64)]) -> f64 {
    lines.iter().map(|(_, a)| 0.5 * a * a).sum()
}

/// Cramér–Rao bound of the frequency in hertz: var(ω) ≥ 24σ²/(A²N(N² − 1)) in rad/sample for
/// one tone in white noise (Kay 1993), which is 12·S/(A²T³) in rad²/s² for the one-sided
/// density S = 2σ²/rate; A²/S becomes Σk²Aₖ²/S(fₖ) for harmonics (Nielsen et al. 2017), each
/// with the density around it, since noise in different bins is independent.
pub fn bound_hz(
    lines: &[(u32, f64)],
    fundamental_hz: f64,
    duration_s: f64,
    density: impl Fn(f64) -> f64,
) -> f64 {
    let weight = |&(k, a): &(u32, f64)| (f64::from(k) * a).powi(2) / density(f64::from(k) * fundamental_hz);
    let total: f64 = lines.iter().map(weight).sum();
    (12.0 / (total * duration_s.powi(3))).sqrt() / TAU
}

/// 10 s at 8 kHz of a steady line.
pub fn in_noise(lines: &[(u32, f64)], colour: Colour, hum_to_noise_db: f64, seed: u64) -> Option<Outcome> {
    let (rate, duration_s) = (8000u32, 10.0);
    let scale = (power_of(lines) / 10f64.powf(hum_to_noise_db / 10.0)).sqrt();
    let mut noise = Noise::new(1000 + seed);
    let truth = noise.between(49.9, 50.1);
    let track = PhaseTrack::constant(truth, duration_s);
    let phases: Vec<f64> = lines.iter().map(|_| noise.between(0.0, TAU)).collect();
    let signal = hum(&track, lines, &phases, rate, duration_s);
    let beside = colour.samples(signal.len(), rate, &mut noise);
    let samples = signal.iter().zip(beside).map(|(x, n)| x + scale * n).collect();
    let mains = run(rate, vec![samples]).analysis.mains;
    let bound = bound_hz(lines, truth, duration_s, |f| scale * scale * colour.density(f, rate));
    Some(Outcome { error: mains.frequency_hz? - truth, bound, stated: mains.frequency_se_hz? })
}

/// Trials of a steady line in noise.
pub fn score(lines: &[(u32, f64)], colour: Colour, hum_to_noise_db: f64, trials: u64) -> Score {
    let what = if lines.len() == 1 { "one tone".to_owned() } else { format!("{} harmonics", lines.len()) };
    let of = if colour == Colour::White { "white" } else { "1/f" };
    let outcomes: Vec<_> =
        (0..trials).into_par_iter().map(|seed| in_noise(lines, colour, hum_to_noise_db, seed)).collect();
    Score::of(&format!("{what}, {of} noise, {hum_to_noise_db:+.0} dB"), &outcomes)
}

/// A swing about as large as can just be told from noise, begun at any part of its turn. Its
/// bound is taken as the stated error: only that is asked to be true.
pub fn with_hidden_wander(swing_hz: f64, seed: u64) -> Option<Outcome> {
    let (rate, duration_s, turn_s) = (1000, 20.0, 12.0);
    let mut noise = Noise::new(4000 + seed);
    let centre_hz = noise.between(49.95, 50.05);
    let skip_s = noise.between(0.0, turn_s);
    let longer = phase_of_wander(centre_hz, swing_hz, 1.0 / turn_s, duration_s + turn_s);
    let samples = (0..(duration_s * f64::from(rate)) as usize)
        .map(|n| skip_s + n as f64 / f64::from(rate))
        .map(|t| 0.1 * longer.phase_at(t).cos() + 0.3 * noise.normal())
        .collect();
    let advance = longer.phase_at(skip_s + duration_s) - longer.phase_at(skip_s);
    let mains = run(rate, vec![samples]).analysis.mains;
    let error = mains.frequency_hz? - advance / (TAU * duration_s);
    Some(Outcome { error, bound: mains.frequency_se_hz?, stated: mains.frequency_se_hz? })
}
