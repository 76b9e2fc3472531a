//! Frequency, spread and levels against what theory allows, in seeded trials.

mod analysis_signals;

use analysis_signals::{Noise, hum, phase_of_wander, run};
use notchwright::analysis::{AnalysisRun, PhaseTrack};
use std::f64::consts::TAU;

/// Cramér–Rao bound of the frequency in hertz: var(ω) ≥ 24σ²/(Σk²Aₖ²·N(N²−1)) in
/// rad/sample (Kay 1993; Σk²Aₖ² for harmonics: Nielsen et al. 2017).
fn frequency_bound_hz(lines: &[(u32, f64)], sigma: f64, samples: f64, rate: f64) -> f64 {
    let weight: f64 = lines.iter().map(|&(k, a)| (f64::from(k) * a).powi(2)).sum();
    (24.0 * sigma * sigma / (weight * samples * (samples * samples - 1.0))).sqrt() * rate / TAU
}

fn sigma_for(lines: &[(u32, f64)], hum_to_noise_db: f64) -> f64 {
    let power: f64 = lines.iter().map(|(_, a)| 0.5 * a * a).sum();
    (power / 10f64.powf(hum_to_noise_db / 10.0)).sqrt()
}

/// Trials of each case: few enough for every day, or as many as the environment asks
/// for (`NOTCHWRIGHT_TRIALS=400`).
fn trials() -> u64 {
    std::env::var("NOTCHWRIGHT_TRIALS").map_or(40, |count| count.parse().expect("a number of trials"))
}

/// RMS error over the bound, and standard deviation of the error over its stated error.
fn trial(lines: &[(u32, f64)], hum_to_noise_db: f64, trials: u64) -> (f64, f64) {
    let (rate, duration_s) = (8000u32, 10.0);
    let samples = duration_s * f64::from(rate);
    let sigma = sigma_for(lines, hum_to_noise_db);
    let bound = frequency_bound_hz(lines, sigma, samples, f64::from(rate));
    let (mut squares, mut normalised) = (0.0, 0.0);
    for seed in 0..trials {
        let mut noise = Noise::new(1000 + seed);
        let truth = noise.between(49.9, 50.1);
        let track = PhaseTrack::constant(truth, duration_s);
        let phases: Vec<f64> = lines.iter().map(|_| noise.between(0.0, TAU)).collect();
        let signal = hum(&track, lines, &phases, rate, duration_s);
        let mains =
            run(rate, vec![signal.iter().map(|x| x + sigma * noise.normal()).collect()]).analysis.mains;
        let error = mains.frequency_hz.unwrap_or_else(|| panic!("seed {seed}: not found")) - truth;
        squares += (error / bound).powi(2);
        normalised += (error / mains.frequency_se_hz.expect("found")).powi(2);
    }
    let n = trials as f64;
    ((squares / n).sqrt(), (normalised / n).sqrt())
}

#[test]
fn frequency_errors_keep_to_the_cramer_rao_bound() {
    let one = [(1, 0.1)];
    let five = [(1, 0.1), (2, 0.02), (3, 0.05), (5, 0.03), (7, 0.015)];
    for (name, lines, db) in [
        ("one tone", &one[..], -10.0),
        ("one tone", &one[..], 15.0),
        ("one tone", &one[..], 40.0),
        ("five harmonics", &five[..], -10.0),
        ("five harmonics", &five[..], 15.0),
        ("five harmonics", &five[..], 40.0),
    ] {
        let (ratio, normalised) = trial(lines, db, trials());
        println!("{name} at {db} dB: error/bound {ratio:.3}, normalised error {normalised:.3}");
        assert!(ratio < 1.1 * chance(trials()), "{name} at {db} dB: {ratio} of the bound");
        assert_true_error(&format!("{name} at {db} dB"), normalised, trials());
    }
}

/// What so many trials alone may put an RMS off by, as a factor (95 % of the time, one-sided).
fn chance(trials: u64) -> f64 {
    1.0 + 1.65 / (2.0 * trials as f64).sqrt()
}

/// The stated error is neither too large nor too small a claim.
fn assert_true_error(name: &str, normalised: f64, trials: u64) {
    let range = 0.9 / chance(trials)..1.15 * chance(trials);
    assert!(range.contains(&normalised), "{name}: normalised error {normalised}, not in {range:?}");
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

#[test]
fn levels_are_within_0_05_db_at_50_db_over_the_noise() {
    let (rate, duration_s) = (1000u32, 20.0);
    let track = phase_of_wander(50.0, 0.1, 0.04, duration_s);
    let lines = [(1, 0.1), (3, 0.1)];
    let in_one_over_t = 0.5 * 0.1f64.powi(2) / 1e5;
    let sigma = (in_one_over_t * duration_s * f64::from(rate) / 2.0).sqrt();
    let (mut within, trials) = (0, 20);
    for seed in 0..trials {
        let mut noise = Noise::new(300 + seed);
        let signal = hum(&track, &lines, &[0.5, 1.5], rate, duration_s);
        let samples = signal.iter().map(|x| x + sigma * noise.normal()).collect();
        let harmonics = run(rate, vec![samples]).analysis.harmonics;
        for order in [1, 3] {
            let line = harmonics.iter().find(|h| h.order == order).expect("found");
            within += u64::from((line.level_dbfs + 20.0).abs() < 0.05);
            assert!((line.over_floor_db - 50.0).abs() < 3.0, "{line:?}");
        }
    }
    assert!(within >= 37, "{within} of {} within 0.05 dB", 2 * trials);
}

/// A swing about as large as can just be told from noise, begun at any part of its turn.
#[test]
fn a_wander_at_the_edge_of_what_can_be_seen_leaves_the_stated_error_true() {
    let (rate, duration_s, turn_s) = (1000, 20.0, 12.0);
    for swing_hz in [0.001, 0.002, 0.004, 0.008] {
        let mut squares = 0.0;
        for seed in 0..trials() {
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
            let error_hz = mains.frequency_hz.expect("found") - advance / (TAU * duration_s);
            squares += (error_hz / mains.frequency_se_hz.expect("found")).powi(2);
        }
        let normalised = (squares / trials() as f64).sqrt();
        println!("swing {swing_hz} Hz: normalised error {normalised:.3}");
        assert_true_error(&format!("swing {swing_hz} Hz"), normalised, trials());
    }
}
