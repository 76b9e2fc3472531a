//! Synthetic signals with fixed seeds that the analyser's tests share.
#![allow(dead_code)]

use notchwright::analysis::PhaseTrack;
use rand::{RngExt, SeedableRng};
use rand_xoshiro::Xoshiro256PlusPlus;
use std::f64::consts::TAU;

/// Seeded white Gaussian noise.
pub struct Noise {
    generator: Xoshiro256PlusPlus,
    spare: Option<f64>,
}

impl Noise {
    pub fn new(seed: u64) -> Self {
        Self { generator: Xoshiro256PlusPlus::seed_from_u64(seed), spare: None }
    }

    /// From 0 to 1.
    pub fn uniform(&mut self) -> f64 {
        self.generator.random::<f64>()
    }

    /// Between two values.
    pub fn between(&mut self, from: f64, to: f64) -> f64 {
        from + (to - from) * self.uniform()
    }

    /// Mean 0, variance 1 (Marsaglia's polar method, 1964).
    pub fn normal(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        loop {
            let (u, v) = (self.between(-1.0, 1.0), self.between(-1.0, 1.0));
            let s = u * u + v * v;
            if s > 0.0 && s < 1.0 {
                let scale = (-2.0 * s.ln() / s).sqrt();
                self.spare = Some(v * scale);
                return u * scale;
            }
        }
    }
}

/// A line at `centre_hz` whose frequency swings by ± `swing_hz` as a sine of `rate_hz`.
pub fn phase_of_wander(centre_hz: f64, swing_hz: f64, rate_hz: f64, duration_s: f64) -> PhaseTrack {
    let knots = (duration_s * 10.0).ceil() as usize;
    let time_s: Vec<f64> = (0..=knots).map(|i| i as f64 * duration_s / knots as f64).collect();
    let phase = |t: f64| TAU * centre_hz * t + swing_hz / rate_hz * (1.0 - (TAU * rate_hz * t).cos());
    PhaseTrack {
        phase_rad: time_s.iter().map(|&t| phase(t)).collect(),
        frequency_hz: time_s.iter().map(|&t| centre_hz + swing_hz * (TAU * rate_hz * t).sin()).collect(),
        time_s,
    }
}
