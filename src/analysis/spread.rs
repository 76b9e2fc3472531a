//! How far the line wanders, with the estimator's own noise taken out.
//!
//! The 1 s mean frequencies come from a smoother that is set quicker than the
//! likeliest one, so that it follows all of the wander; what it then shows of
//! noise is known, since it is linear: seeded noise of the phases' own variance
//! is sent through the same smoother.

use super::kalman::Phases;
use rand::{RngExt, SeedableRng};
use rand_xoshiro::Xoshiro256PlusPlus;
use std::f64::consts::TAU;

/// Share of the time that the half-width holds.
const SHARE: f64 = 0.95;
/// How much quicker than the likeliest the smoother is set.
const QUICKER: f64 = 4.0;
/// Shortest capture that has a spread, in seconds.
const SHORTEST_S: f64 = 3.0;
/// Runs of noise sent through the smoother.
const NOISE_RUNS: u64 = 8;

/// The 1 s mean frequencies of one capture.
#[derive(Debug, Clone, Default)]
pub(super) struct Wander {
    /// By cell, hertz.
    pub means_hz: Vec<f64>,
    /// What noise alone would show about its mean, hertz, from several runs.
    noise_hz: Vec<f64>,
}

/// Half-widths in hertz.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Spread {
    pub spread_hz: f64,
    pub floor_hz: f64,
}

impl Wander {
    /// `reference` gives the reference's phase at a time; `wander` the likeliest strength.
    pub fn measure(phases: &Phases, wander: f64, reference: impl Fn(f64) -> f64) -> Option<Self> {
        let count = phases.time_s.len();
        let cell_s = (phases.time_s[count - 1] - phases.time_s[0]) / (count - 1) as f64;
        let second = (1.0 / cell_s).round().max(1.0) as usize;
        if (count as f64) * cell_s < SHORTEST_S || second + 2 > count {
            return None;
        }
        let strength = (QUICKER * wander).max(least_strength(phases, cell_s, count));
        let smoothed = phases.smoothed(strength).phase_rad;
        let absolute: Vec<f64> =
            smoothed.iter().zip(&phases.time_s).map(|(p, &t)| p + reference(t)).collect();
        let means_hz = second_means(&absolute, &phases.time_s, second);
        let mut noise_hz = Vec::new();
        let mut generator = Xoshiro256PlusPlus::seed_from_u64(0x5eed);
        for _ in 0..NOISE_RUNS {
            let noise = phases.variance.iter().map(|v| v.sqrt() * normal(&mut generator)).collect();
            let run = Phases { phase_rad: noise, ..phases.clone() };
            let means = second_means(&run.smoothed(strength).phase_rad, &run.time_s, second);
            let mean = means.iter().sum::<f64>() / means.len() as f64;
            noise_hz.extend(means.iter().map(|m| m - mean));
        }
        Some(Self { means_hz, noise_hz })
    }
}

impl Wander {
    /// How far the 1 s means stray from a frequency at most.
    pub fn furthest_hz(&self, from_hz: f64) -> f64 {
        self.means_hz.iter().map(|mean| (mean - from_hz).abs()).fold(0.0, f64::max)
    }
}

/// The spread of several captures about their common mean.
pub(super) fn spread_about(mean_hz: f64, wanders: &[Wander]) -> Option<Spread> {
    let strays: Vec<f64> = wanders.iter().flat_map(|w| w.means_hz.iter().map(|m| m - mean_hz)).collect();
    let noise: Vec<f64> = wanders.iter().flat_map(|w| w.noise_hz.iter().copied()).collect();
    if strays.is_empty() || noise.is_empty() {
        return None;
    }
    let power = |values: &[f64]| values.iter().map(|v| v * v).sum::<f64>() / values.len() as f64;
    let (seen, own) = (power(&strays), power(&noise));
    let shrink = if seen > 0.0 { (1.0 - own / seen).max(0.0).sqrt() } else { 0.0 };
    Some(Spread { spread_hz: shrink * half_width(&strays), floor_hz: half_width(&noise) })
}

/// The least wander that the smoother is set for: it then looks at a sixth of
/// the capture at a time, and at no more than 20 s (time constant (R·Δ/q)^¼).
fn least_strength(phases: &Phases, cell_s: f64, count: usize) -> f64 {
    let looks_s = (count as f64 * cell_s / 6.0).clamp(1.0, 20.0);
    let variance = phases.variance.iter().sum::<f64>() / count as f64;
    variance * cell_s / looks_s.powi(4)
}

fn second_means(phase: &[f64], time_s: &[f64], second: usize) -> Vec<f64> {
    let ends = phase.iter().zip(time_s).skip(second);
    ends.zip(phase.iter().zip(time_s)).map(|((p1, t1), (p0, t0))| (p1 - p0) / (TAU * (t1 - t0))).collect()
}

fn half_width(strays: &[f64]) -> f64 {
    let mut sizes: Vec<f64> = strays.iter().map(|s| s.abs()).collect();
    let at = ((sizes.len() as f64 * SHARE) as usize).min(sizes.len() - 1);
    *sizes.select_nth_unstable_by(at, f64::total_cmp).1
}

/// Box and Muller (1958).
fn normal(generator: &mut Xoshiro256PlusPlus) -> f64 {
    let (u, v): (f64, f64) = (generator.random(), generator.random());
    (-2.0 * (1.0 - u).ln()).sqrt() * (TAU * v).cos()
}
