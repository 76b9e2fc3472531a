//! The track: 1 s means beside a strong harmonic, steps, ramps and sines.

use super::{Outcome, Score};
use crate::analysis_signals::{Noise, hum, run};
use notchwright::analysis::{AnalysisRun, PhaseTrack};
use rayon::prelude::*;
use std::f64::consts::TAU;

/// Largest error of any 1 s mean of the track in hertz: a line 60 dB over white noise, with a
/// tenth of one harmonic beside it.
pub fn worst_second_hz(rate: u32, frequency_hz: f64, order: u32, duration_s: f64, seed: u64) -> Option<f64> {
    let mut noise = Noise::new(15_000 + seed);
    let track = PhaseTrack::constant(frequency_hz, duration_s);
    let mut lines = vec![(1, 0.1)];
    if order > 1 {
        lines.push((order, 0.01));
    }
    let phases = [noise.between(0.0, TAU), noise.between(0.0, TAU)];
    let sd = 0.1 * 0.5f64.sqrt() * 1e-3;
    let signal = hum(&track, &lines, &phases[..lines.len()], rate, duration_s);
    let done = run(rate, vec![signal.iter().map(|x| x + sd * noise.normal()).collect()]);
    if !done.analysis.mains.found {
        return None;
    }
    Some(seconds(&done, duration_s).map(|(_, f)| (f - frequency_hz).abs()).fold(0.0, f64::max))
}

/// The 1 s means that the track shows: start and hertz.
pub fn seconds(done: &AnalysisRun, duration_s: f64) -> impl Iterator<Item = (f64, f64)> {
    let phase = done.phase.as_ref().expect("found");
    (0..duration_s as usize).map(|second| second as f64).map(move |from_s| {
        let advance = phase.phase_at(from_s + 1.0) - phase.phase_at(from_s);
        (from_s, advance / TAU)
    })
}

/// Fundamentals from 45 to 65 Hz, so many of them for each order from none to the 50th.
pub fn beside_each_order(fundamentals: u32) -> Vec<(f64, u32)> {
    let each = |k: u32| {
        // Steps of the golden section spread evenly without a pattern.
        (0..fundamentals)
            .map(move |i| (45.0 + 20.0 * (0.618_034 * f64::from(k * fundamentals + i)).fract(), k))
    };
    (1..=50).flat_map(each).collect()
}

/// The worst of these fundamentals, each beside a harmonic, and those that are not found.
pub fn worst_of(rate: u32, duration_s: f64, cases: &[(f64, u32)]) -> (f64, Vec<(f64, u32)>) {
    let errors: Vec<Option<f64>> = cases
        .par_iter()
        .enumerate()
        .map(|(seed, &(frequency_hz, order))| {
            worst_second_hz(rate, frequency_hz, order, duration_s, seed as u64)
        })
        .collect();
    let missed: Vec<(f64, u32)> =
        cases.iter().zip(&errors).filter(|(_, error)| error.is_none()).map(|(case, _)| *case).collect();
    let worst = errors.into_iter().flatten().fold(0.0, f64::max);
    println!(
        "{} cases of {duration_s} s at {rate} Hz: worst second {worst:.2e} Hz off; not found: {missed:?}",
        cases.len()
    );
    (worst, missed)
}

/// How the frequency moves in 40 s.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Motion {
    /// By so many hertz at once, in the middle.
    Step(f64),
    /// From 1 Hz under the middle to 1 Hz over it, at so many hertz a second.
    Ramp(f64),
    /// ± 0.05 Hz, once in so many seconds.
    Sine(f64),
}

const FOLLOWED_S: f64 = 40.0;

impl Motion {
    fn offset_hz(self, t: f64) -> f64 {
        let from_middle_s = t - 0.5 * FOLLOWED_S;
        match self {
            Self::Step(hertz) => 0.5 * hertz * from_middle_s.signum(),
            Self::Ramp(hertz_a_second) => (hertz_a_second * from_middle_s).clamp(-1.0, 1.0),
            Self::Sine(turn_s) => 0.05 * (TAU * t / turn_s).sin(),
        }
    }

    /// Whether a second about this time holds a corner, which no smooth track follows.
    fn has_corner(self, t: f64) -> bool {
        let from_middle_s = (t - 0.5 * FOLLOWED_S).abs();
        match self {
            Self::Step(_) => from_middle_s < 1.5,
            Self::Ramp(hertz_a_second) => (from_middle_s - 1.0 / hertz_a_second).abs() < 1.5,
            Self::Sine(_) => false,
        }
    }

    fn track(self) -> PhaseTrack {
        let step_s = 0.002;
        let count = (FOLLOWED_S / step_s) as usize;
        let time_s: Vec<f64> = (0..=count).map(|i| i as f64 * step_s).collect();
        let frequency_hz: Vec<f64> = time_s.iter().map(|&t| 50.0 + self.offset_hz(t)).collect();
        let mut phase = 0.0;
        let mut phase_rad = vec![0.0];
        for i in 0..count {
            phase += TAU * (50.0 + self.offset_hz((i as f64 + 0.5) * step_s)) * step_s;
            phase_rad.push(phase);
        }
        PhaseTrack { time_s, phase_rad, frequency_hz }
    }
}

/// Each point of the track against the frequency at its time, three harmonics 20 dB over white
/// noise at 2 kHz; the bound is taken as the stated error. Points about a corner are left out.
pub fn points(motion: Motion, seed: u64) -> Vec<Option<Outcome>> {
    let rate = 2000;
    let mut noise = Noise::new(17_000 + seed);
    let lines = [(1, 0.1), (3, 0.03), (5, 0.02)];
    let phases = [noise.between(0.0, TAU), noise.between(0.0, TAU), noise.between(0.0, TAU)];
    let signal = hum(&motion.track(), &lines, &phases, rate, FOLLOWED_S);
    let sd = (lines.iter().map(|(_, a)| 0.5 * a * a).sum::<f64>() * 0.01).sqrt();
    let done = run(rate, vec![signal.iter().map(|x| x + sd * noise.normal()).collect()]).analysis;
    if !done.mains.found {
        return vec![None];
    }
    assert!(done.track.len() <= 600, "{} points", done.track.len());
    let apart = done.track.iter().filter(|point| !motion.has_corner(point.time_s));
    apart
        .map(|point| {
            let error = point.frequency_hz - 50.0 - motion.offset_hz(point.time_s);
            Some(Outcome { error, bound: point.se_hz, stated: point.se_hz })
        })
        .collect()
}

/// Score of all points, and the largest error.
pub fn followed(motion: Motion, trials: u64) -> (Score, f64) {
    let all: Vec<Option<Outcome>> =
        (0..trials).into_par_iter().flat_map_iter(|seed| points(motion, seed)).collect();
    let worst = all.iter().flatten().map(|outcome| outcome.error.abs()).fold(0.0, f64::max);
    println!("{motion:?}: worst point {worst:.2e} Hz off");
    (Score::of(&format!("track points, {motion:?}"), &all), worst)
}
