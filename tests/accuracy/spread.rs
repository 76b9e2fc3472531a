//! The spread of the 1 s means over ten minutes of wander.

use super::Share;
use crate::analysis_signals::{Noise, hum, run};
use notchwright::analysis::PhaseTrack;
use rayon::prelude::*;
use std::f64::consts::TAU;

/// How the frequency strays.
#[derive(Debug, Clone, Copy)]
pub enum Wander {
    /// Gaussian, forgetting itself in so many seconds (Ornstein and Uhlenbeck).
    Gaussian { memory_s: f64 },
    /// A sine that turns once in so many seconds.
    Sine { turn_s: f64 },
    /// From one end to the other.
    Ramp,
}

const RATE: u32 = 400;
const DURATION_S: f64 = 600.0;
/// Knots of the true track a second.
const KNOTS_PER_S: f64 = 10.0;

impl Wander {
    /// Stray at each knot, of standard deviation 1 (Gaussian) or half-width 1.
    fn strays(self, noise: &mut Noise) -> Vec<f64> {
        let count = (DURATION_S * KNOTS_PER_S) as usize + 1;
        let start = noise.between(0.0, TAU);
        let mut state = noise.normal();
        (0..count)
            .map(|i| {
                let t = i as f64 / KNOTS_PER_S;
                match self {
                    Self::Gaussian { memory_s } => {
                        let kept = (-1.0 / (KNOTS_PER_S * memory_s)).exp();
                        state = kept * state + (1.0 - kept * kept).sqrt() * noise.normal();
                        state
                    }
                    Self::Sine { turn_s } => (TAU * t / turn_s + start).sin(),
                    Self::Ramp => 2.0 * t / DURATION_S - 1.0,
                }
            })
            .collect()
    }

    /// A line at `centre_hz` that strays by `size_hz`.
    fn track(self, centre_hz: f64, size_hz: f64, noise: &mut Noise) -> PhaseTrack {
        let frequency_hz: Vec<f64> =
            self.strays(noise).into_iter().map(|stray| centre_hz + size_hz * stray).collect();
        let mut phase = 0.0;
        let mut phase_rad = vec![0.0];
        for pair in frequency_hz.windows(2) {
            phase += TAU * 0.5 * (pair[0] + pair[1]) / KNOTS_PER_S;
            phase_rad.push(phase);
        }
        let time_s = (0..frequency_hz.len()).map(|i| i as f64 / KNOTS_PER_S).collect();
        PhaseTrack { time_s, phase_rad, frequency_hz }
    }
}

/// The half-width about the mean that holds the 1 s means for 95 % of the time.
pub fn true_spread_hz(track: &PhaseTrack, duration_s: f64) -> f64 {
    let mean = (track.phase_at(duration_s) - track.phase_at(0.0)) / (TAU * duration_s);
    let steps = ((duration_s - 1.0) * 4.0) as usize;
    let mut strays: Vec<f64> = (0..=steps)
        .map(|i| i as f64 / 4.0)
        .map(|t| ((track.phase_at(t + 1.0) - track.phase_at(t)) / TAU - mean).abs())
        .collect();
    strays.sort_by(f64::total_cmp);
    strays[((0.95 * strays.len() as f64) as usize).min(strays.len() - 1)]
}

/// Spread as found over the true one, and the true one over its floor.
#[derive(Debug, Clone, Copy)]
pub struct Found {
    pub ratio: f64,
    pub over_floor: f64,
    pub below_is_said: bool,
}

/// Ten minutes at 400 Hz of a line with its third harmonic, so far over white noise.
pub fn found(wander: Wander, size_hz: f64, hum_to_noise_db: f64, seed: u64) -> Found {
    let mut noise = Noise::new(11_000 + seed);
    let track = wander.track(noise.between(49.95, 50.05), size_hz, &mut noise);
    let lines = [(1, 0.1), (3, 0.03)];
    let power: f64 = lines.iter().map(|(_, a)| 0.5 * a * a).sum();
    let sd = (power / 10f64.powf(hum_to_noise_db / 10.0)).sqrt();
    let signal = hum(&track, &lines, &[0.3, 1.7], RATE, DURATION_S);
    let done = run(RATE, vec![signal.iter().map(|x| x + sd * noise.normal()).collect()]).analysis;
    assert!(done.track.len() <= 600, "{} points", done.track.len());
    let truth = true_spread_hz(&track, DURATION_S);
    let spread = done.mains.spread_hz.expect("found");
    let floor = done.mains.spread_floor_hz.expect("found");
    if std::env::var("NOTCHWRIGHT_SHOW").is_ok() {
        println!("{wander:?} {size_hz} seed {seed}: truth {truth:.5} spread {spread:.5} floor {floor:.6}");
    }
    let below_is_said = done.notes.iter().any(|note| note.contains("below what noise alone shows"));
    assert_eq!(below_is_said, spread < floor, "{:?}", done.notes);
    Found { ratio: spread / truth, over_floor: truth / floor, below_is_said }
}

/// Share of the trials with the spread within 10 %; trials not five times over the floor are left out.
pub fn score(wander: Wander, size_hz: f64, hum_to_noise_db: f64, trials: u64) -> Share {
    let all: Vec<Found> =
        (0..trials).into_par_iter().map(|seed| found(wander, size_hz, hum_to_noise_db, seed)).collect();
    let count = all.len() as f64;
    let over = all.iter().map(|one| one.over_floor).sum::<f64>() / count;
    let mean = all.iter().map(|one| one.ratio).sum::<f64>() / count;
    let sd = (all.iter().map(|one| (one.ratio - mean).powi(2)).sum::<f64>() / count).sqrt();
    let kept: Vec<bool> =
        all.iter().filter(|one| one.over_floor >= 5.0).map(|one| (one.ratio - 1.0).abs() < 0.1).collect();
    let name = format!("spread, {wander:?}, {size_hz} Hz, {hum_to_noise_db:+.0} dB");
    println!("{name}: {over:.1} times the floor, found/true {mean:.3} ± {sd:.3}");
    Share::of(&name, &kept)
}
