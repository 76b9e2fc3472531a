//! The track: 1 s means beside a strong harmonic, steps, ramps and sines.

use crate::analysis_signals::{Noise, hum, run};
use notchwright::analysis::{AnalysisRun, PhaseTrack};
use rayon::prelude::*;
use std::f64::consts::TAU;

/// Largest error of any 1 s mean of the track in hertz: a line 60 dB over white noise, with a
/// tenth of one harmonic beside it.
pub fn worst_second_hz(rate: u32, frequency_hz: f64, order: u32, duration_s: f64, seed: u64) -> f64 {
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
    if std::env::var("NOTCHWRIGHT_DEBUG").is_ok() {
        println!("{:?} {:?}", done.analysis.mains, seconds(&done, duration_s).collect::<Vec<_>>());
    }
    if !done.analysis.mains.found {
        return f64::INFINITY;
    }
    seconds(&done, duration_s).map(|(_, f)| (f - frequency_hz).abs()).fold(0.0, f64::max)
}

/// The 1 s means that the track shows: start and hertz.
pub fn seconds(done: &AnalysisRun, duration_s: f64) -> impl Iterator<Item = (f64, f64)> {
    let phase = done.phase.as_ref().expect("found");
    (0..duration_s as usize).map(|second| second as f64).map(move |from_s| {
        let advance = phase.phase_at(from_s + 1.0) - phase.phase_at(from_s);
        (from_s, advance / TAU)
    })
}

/// The worst over frequencies from 45 to 65 Hz and a harmonic each.
pub fn worst_of(rate: u32, duration_s: f64, cases: &[(f64, u32)]) -> f64 {
    let errors: Vec<f64> = cases
        .par_iter()
        .enumerate()
        .map(|(seed, &(frequency_hz, order))| {
            let error = worst_second_hz(rate, frequency_hz, order, duration_s, seed as u64);
            if std::env::var("NOTCHWRIGHT_SHOW").is_ok() {
                println!("{duration_s} s, {frequency_hz} Hz, order {order}: {error:.2e} Hz");
            }
            error
        })
        .collect();
    let worst = errors.into_iter().fold(0.0, f64::max);
    println!("{} cases of {duration_s} s at {rate} Hz: worst second {worst:.2e} Hz off", cases.len());
    worst
}
