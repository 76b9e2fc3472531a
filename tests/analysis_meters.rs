//! Levels along a phase track: weak residuals beside strong lines and signals.

mod analysis_signals;

use analysis_signals::{Noise, phase_of_wander};
use notchwright::analysis::{OrderLevel, OrderMeter, PhaseTrack};
use std::f64::consts::TAU;

fn measure(rate: f64, track: &PhaseTrack, orders: &[u32], samples: &[f64]) -> Vec<OrderLevel> {
    let mut meter = OrderMeter::new(rate, track, orders);
    for piece in samples.chunks(4099) {
        meter.push(piece);
    }
    meter.finish()
}

/// Density (mean square per hertz) that puts a line of this amplitude so far over the noise in 1/T.
fn noise_sd(amplitude: f64, over_db: f64, duration_s: f64, rate: f64) -> f64 {
    let in_one_over_t = 0.5 * amplitude * amplitude / 10f64.powf(over_db / 10.0);
    (in_one_over_t * duration_s * rate / 2.0).sqrt()
}

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
    // Bound for the amplitude of one known tone over T: relative variance N/(2P).
    let (rate, duration_s, over_db) = (1000.0, 20.0, 50.0);
    let track = phase_of_wander(50.0, 0.1, 0.05, duration_s);
    let sd = noise_sd(0.1, over_db, duration_s, rate);
    let bound_db = 20.0 / 10f64.ln() * (10f64.powf(-over_db / 10.0) / 2.0).sqrt();
    let mut noise = Noise::new(11);
    let trials = 60;
    let (mut squares, mut within, mut stated) = (0.0, 0, 0.0);
    for _ in 0..trials {
        let samples: Vec<f64> = (0..(duration_s * rate) as usize)
            .map(|n| 0.1 * (track.phase_at(n as f64 / rate) + 2.0).cos() + sd * noise.normal())
            .collect();
        let level = &measure(rate, &track, &[1], &samples)[0];
        let error = level.level_dbfs + 20.0;
        squares += error * error;
        within += usize::from(error.abs() < 0.05);
        stated += level.level_se_db / trials as f64;
    }
    let ratio = (squares / trials as f64).sqrt() / bound_db;
    println!("level error over its bound: {ratio:.3}, stated/bound {:.3}", stated / bound_db);
    assert!(ratio < 1.25, "error {ratio} of the bound");
    assert!((stated / bound_db - 1.07).abs() < 0.12, "stated {stated} dB, bound {bound_db} dB");
    assert!(within >= 57, "{within} of {trials} within 0.05 dB");
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
