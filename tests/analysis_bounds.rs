//! The mean frequency against the Cramér–Rao bound, in seeded trials; drift and its spread.

mod accuracy;
mod analysis_signals;

use accuracy::frequency::{self, Colour, FIVE, ONE};
use accuracy::{Score, trials_or};
use analysis_signals::{Noise, hum, phase_of_wander, run};
use notchwright::analysis::{AnalysisRun, PhaseTrack};
use std::f64::consts::TAU;

fn keeps_to_the_bound(colour: Colour) {
    for lines in [&ONE[..], &FIVE[..]] {
        for hum_to_noise_db in [-10.0, 15.0, 40.0] {
            let score = frequency::score(lines, colour, hum_to_noise_db, trials_or(40));
            score.assert_within(1.1);
            score.assert_stated_error_is_true();
        }
    }
}

#[test]
fn frequency_errors_keep_to_the_cramer_rao_bound() {
    keeps_to_the_bound(Colour::White);
}

#[test]
fn frequency_errors_keep_to_the_bound_of_one_over_f_noise() {
    keeps_to_the_bound(Colour::OneOverF);
}

fn wandering(swing_hz: f64, rate_hz: f64, duration_s: f64, seed: u64) -> (AnalysisRun, PhaseTrack) {
    let rate = 1000;
    let track = phase_of_wander(50.02, swing_hz, rate_hz, duration_s);
    let mut noise = Noise::new(seed);
    let lines = [(1, 0.1), (3, 0.03), (5, 0.01)];
    let signal = hum(&track, &lines, &[0.0, 1.0, 2.0], rate, duration_s);
    let samples = signal.iter().map(|x| x + 0.01 * noise.normal()).collect();
    (run(rate, vec![samples]), track)
}

#[test]
fn under_drift_the_mean_is_the_phase_advance_and_the_swing_is_the_spread() {
    for (swing_hz, rate_hz, duration_s) in [(0.05, 0.02, 60.0), (0.015, 0.011, 120.0), (0.02, 0.05, 60.0)] {
        let (run, track) = wandering(swing_hz, rate_hz, duration_s, 5);
        let mains = run.analysis.mains;
        let error = mains.frequency_hz.expect("found") - track.mean_frequency_hz();
        println!("swing {swing_hz}: mean error {error:.2e}, {mains:?}");
        assert!(error.abs() < 4.0 * mains.frequency_se_hz.expect("found"), "mean off by {error}");
        assert!(error.abs() < 2e-4);
        // The true half-width of the 1 s means about the mean, over 95 % of the time.
        let mean = track.mean_frequency_hz();
        let seconds = (duration_s * 4.0) as usize - 4;
        let mut strays: Vec<f64> = (0..seconds)
            .map(|i| i as f64 / 4.0)
            .map(|t| ((track.phase_at(t + 1.0) - track.phase_at(t)) / TAU - mean).abs())
            .collect();
        strays.sort_by(f64::total_cmp);
        let truth = strays[(0.95 * strays.len() as f64) as usize];
        let spread = mains.spread_hz.expect("long enough");
        assert!((spread / truth - 1.0).abs() < 0.1, "spread {spread}, truth {truth}");
        for point in &run.analysis.track {
            let h = 0.01;
            let want =
                (track.phase_at(point.time_s + h) - track.phase_at(point.time_s - h)) / (2.0 * h * TAU);
            assert!((point.frequency_hz - want).abs() < 6.0 * point.se_hz + 1e-3, "{point:?} for {want}");
        }
    }
}

#[test]
fn without_wander_the_spread_is_below_its_floor() {
    let mut below = 0;
    for seed in 0..10 {
        let (run, _) = wandering(0.0, 0.1, 30.0, 100 + seed);
        let mains = &run.analysis.mains;
        let (spread, floor) = (mains.spread_hz.expect("long"), mains.spread_floor_hz.expect("long"));
        assert!(floor > 0.0 && floor < 0.002, "{floor}");
        assert!(spread < 3.0 * floor, "{spread} over {floor}");
        below += usize::from(spread < floor);
    }
    assert!(below >= 8, "{below} of 10");
}

/// A swing about as large as can just be told from noise, begun at any part of its turn.
#[test]
fn a_wander_at_the_edge_of_what_can_be_seen_leaves_the_stated_error_true() {
    for swing_hz in [0.001, 0.002, 0.004, 0.008] {
        let trial = |seed| frequency::with_hidden_wander(swing_hz, seed);
        let outcomes: Vec<_> = (0..trials_or(40)).map(trial).collect();
        Score::of(&format!("hidden wander of {swing_hz} Hz"), &outcomes).assert_stated_error_is_true();
    }
}
