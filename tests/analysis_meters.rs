//! Levels along a phase track: weak residuals beside strong lines and signals.

mod accuracy;
mod analysis_signals;

use accuracy::frequency::{Colour, FIVE, ONE};
use accuracy::levels::{self, measure, noise_sd};
use accuracy::trials_or;
use analysis_signals::Noise;
use notchwright::analysis::PhaseTrack;
use std::f64::consts::TAU;

#[test]
fn a_residual_60_db_under_another_harmonic_reads_true_beside_a_strong_slow_signal() {
    let (rate, duration_s) = (2000.0, 30.0);
    let track = PhaseTrack::constant(50.017, duration_s);
    let weak = 1e-4;
    let sd = noise_sd(weak, 55.0, duration_s, rate);
    let mut noise = Noise::new(7);
    let samples: Vec<f64> = (0..(duration_s * rate) as usize)
        .map(|n| {
            let t = n as f64 / rate;
            let phase = track.phase_at(t);
            let slow = 0.01 * (TAU * 11.93 * t).sin() + 0.01 * (TAU * 0.31 * t).cos() + 0.02;
            weak * (phase + 1.0).cos() + 0.1 * (3.0 * phase).cos() + slow + sd * noise.normal()
        })
        .collect();
    let levels = measure(rate, &track, &[1, 2, 3], &samples);
    let want = 20.0 * weak.log10();
    assert!((levels[0].level_dbfs - want).abs() < 0.05, "{:?}", levels[0]);
    assert!((levels[0].over_floor_db - 55.0).abs() < 1.5, "{:?}", levels[0]);
    assert!((levels[0].phase_deg - 1f64.to_degrees()).abs() < 0.5);
    assert!((levels[2].level_dbfs + 20.0).abs() < 1e-4);
    assert!(levels[1].over_floor_db < 10.0, "nothing is there: {:?}", levels[1]);
}

#[test]
fn levels_keep_their_bound_with_a_tenth_of_a_hertz_of_drift() {
    for over_db in [30.0, 50.0] {
        let score = levels::score_known_track(over_db, trials_or(100));
        score.assert_within(1.1);
        score.assert_stated_error_is_true();
    }
}

#[test]
fn levels_of_an_analysis_keep_their_bound_and_are_within_0_05_db_at_50_db_over_the_noise() {
    for (lines, colour) in
        [(&ONE[..], Colour::White), (&FIVE[..], Colour::White), (&FIVE[..], Colour::OneOverF)]
    {
        for (over_db, drift_hz) in [(30.0, 0.0), (50.0, 0.0), (50.0, levels::DRIFT)] {
            let (score, within) = levels::score(lines, colour, over_db, drift_hz, trials_or(40));
            score.assert_within(1.1);
            score.assert_stated_error_is_true();
            if over_db >= 50.0 {
                within.assert_at_least(0.95);
            }
        }
    }
}

/// A note that lies a few hertz off a line leaks into the even mean of all blocks, not into the faded one.
#[test]
fn a_level_beside_a_strong_tone_a_few_hertz_off_is_read_from_the_faded_mean() {
    let (rate, duration_s, over_db) = (1000.0, 20.0, 50.0);
    let track = PhaseTrack::constant(50.0, duration_s);
    let sd = noise_sd(0.01, over_db, duration_s, rate);
    for offset_hz in [2.03, 3.37, 5.71, 11.13] {
        let mut noise = Noise::new(17);
        let samples: Vec<f64> = (0..(duration_s * rate) as usize)
            .map(|n| n as f64 / rate)
            .map(|t| {
                0.01 * track.phase_at(t).cos()
                    + 0.1 * (TAU * (50.0 + offset_hz) * t).cos()
                    + sd * noise.normal()
            })
            .collect();
        let level = &measure(rate, &track, &[1], &samples)[0];
        let error_db = (level.level_dbfs + 40.0).abs();
        assert!(error_db < 4.0 * levels::bound_db(over_db), "{offset_hz} Hz beside it: {level:?}");
    }
}

#[test]
fn a_hundred_orders_at_48_khz_read_true() {
    let (rate, duration_s) = (48000.0, 3.0);
    let track = PhaseTrack::constant(49.98, duration_s);
    let orders: Vec<u32> = (1..=100).collect();
    let amplitude = |k: u32| 0.2 / f64::from(k * k);
    let samples: Vec<f64> = (0..(duration_s * rate) as usize)
        .map(|n| {
            let phase = track.phase_at(n as f64 / rate);
            orders.iter().map(|&k| amplitude(k) * (f64::from(k) * phase + f64::from(k)).cos()).sum()
        })
        .collect();
    for level in measure(rate, &track, &orders, &samples) {
        let want = 20.0 * amplitude(level.order).log10();
        assert!((level.level_dbfs - want).abs() < 0.01, "want {want}: {level:?}");
        let turn = (level.phase_deg - f64::from(level.order).to_degrees()).rem_euclid(360.0);
        assert!(turn.min(360.0 - turn) < 0.1, "{level:?}");
    }
}

#[test]
fn silence_and_scraps_give_finite_levels() {
    for (samples, duration_s) in [(vec![0.0; 4000], 4.0), (vec![0.1; 30], 0.03), (vec![], 0.001)] {
        let track = PhaseTrack::constant(50.0, duration_s);
        for level in measure(1000.0, &track, &[1, 3], &samples) {
            let figures =
                [level.level_dbfs, level.level_se_db, level.phase_deg, level.over_floor_db, level.floor_dbfs];
            assert!(figures.iter().all(|figure| figure.is_finite()), "{level:?}");
        }
    }
}
