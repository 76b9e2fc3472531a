//! Levels of harmonics against the bound of a known tone's amplitude.

use super::frequency::Colour;
use super::{Outcome, Score, Share};
use crate::analysis_signals::{Noise, hum, phase_of_wander, run};
use notchwright::analysis::{OrderLevel, OrderMeter, PhaseTrack};
use rayon::prelude::*;
use std::f64::consts::TAU;

/// Relative error of an amplitude as decibels.
const DB: f64 = 20.0 / std::f64::consts::LN_10;

/// What the meter reads of samples.
pub fn measure(rate: f64, track: &PhaseTrack, orders: &[u32], samples: &[f64]) -> Vec<OrderLevel> {
    let mut meter = OrderMeter::new(rate, track, orders);
    for piece in samples.chunks(4099) {
        meter.push(piece);
    }
    meter.finish()
}

/// Standard deviation of white noise that puts a line of this amplitude so far over the noise in 1/T.
pub fn noise_sd(amplitude: f64, over_db: f64, duration_s: f64, rate: f64) -> f64 {
    let in_one_over_t = 0.5 * amplitude * amplitude / 10f64.powf(over_db / 10.0);
    (in_one_over_t * duration_s * rate / 2.0).sqrt()
}

/// Bound of the level in decibels: the amplitude of a known tone in T has the relative variance N/(2P).
pub fn bound_db(over_db: f64) -> f64 {
    DB * (10f64.powf(-over_db / 10.0) / 2.0).sqrt()
}

/// One tone along a track that is known, drifting by a tenth of a hertz.
pub fn along_a_known_track(over_db: f64, seed: u64) -> Outcome {
    let (rate, duration_s) = (1000.0, 20.0);
    let track = phase_of_wander(50.0, 0.1, 0.05, duration_s);
    let sd = noise_sd(0.1, over_db, duration_s, rate);
    let mut noise = Noise::new(8000 + seed);
    let samples: Vec<f64> = (0..(duration_s * rate) as usize)
        .map(|n| 0.1 * (track.phase_at(n as f64 / rate) + 2.0).cos() + sd * noise.normal())
        .collect();
    let level = &measure(rate, &track, &[1], &samples)[0];
    Outcome { error: level.level_dbfs + 20.0, bound: bound_db(over_db), stated: level.level_se_db }
}

/// Drift of the whole analyser's trials: ± 0.1 Hz, once in 25 s.
pub const DRIFT: f64 = 0.1;

/// Every harmonic of the whole analyser's account; the lowest stands `over_db` over the noise in 1/T.
pub fn of_an_analysis(
    lines: &[(u32, f64)],
    colour: Colour,
    over_db: f64,
    swing_hz: f64,
    seed: u64,
) -> Vec<Option<Outcome>> {
    let (rate, duration_s) = (2000u32, 20.0);
    let mut noise = Noise::new(9000 + seed);
    let track = phase_of_wander(noise.between(49.9, 50.1), swing_hz, 0.04, duration_s);
    let phases: Vec<f64> = lines.iter().map(|_| noise.between(0.0, TAU)).collect();
    let signal = hum(&track, lines, &phases, rate, duration_s);
    let beside = colour.samples(signal.len(), rate, &mut noise);
    // The line that stands lowest over the noise around it sets the noise.
    let density = |k: u32| colour.density(50.0 * f64::from(k), rate);
    let lowest = lines.iter().map(|&(k, a)| 0.5 * a * a * duration_s / density(k)).fold(f64::MAX, f64::min);
    let scale = (lowest / 10f64.powf(over_db / 10.0)).sqrt();
    let samples = signal.iter().zip(beside).map(|(x, n)| x + scale * n).collect();
    let done = run(rate, vec![samples]);
    lines
        .iter()
        .map(|&(order, amplitude)| {
            let listed = done.analysis.harmonics.iter().find(|h| h.order == order)?;
            let level = done.levels.iter().find(|level| level.order == order)?;
            let floor = scale * scale * density(order) / duration_s;
            let over = 10.0 * (0.5 * amplitude * amplitude / floor).log10();
            Some(Outcome {
                error: listed.level_dbfs - 20.0 * amplitude.log10(),
                bound: bound_db(over),
                stated: level.level_se_db,
            })
        })
        .collect()
}

pub fn score_known_track(over_db: f64, trials: u64) -> Score {
    let outcomes: Vec<_> =
        (0..trials).into_par_iter().map(|seed| Some(along_a_known_track(over_db, seed))).collect();
    Score::of(&format!("level, known track, {over_db:.0} dB over 1/T"), &outcomes)
}

/// Score of all levels, and the share within 0.05 dB.
pub fn score(
    lines: &[(u32, f64)],
    colour: Colour,
    over_db: f64,
    swing_hz: f64,
    trials: u64,
) -> (Score, Share) {
    let outcomes: Vec<Option<Outcome>> = (0..trials)
        .into_par_iter()
        .flat_map_iter(|seed| of_an_analysis(lines, colour, over_db, swing_hz, seed))
        .collect();
    let of = if colour == Colour::White { "white" } else { "1/f" };
    let name = format!("levels, {} lines, {of}, {over_db:.0} dB, drift {swing_hz} Hz", lines.len());
    let within: Vec<bool> = outcomes.iter().map(|o| o.is_some_and(|o| o.error.abs() < 0.05)).collect();
    (Score::of(&name, &outcomes), Share::of(&format!("{name}: 0.05 dB"), &within))
}
