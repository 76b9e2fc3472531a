//! Hum that comes and goes: pumps, switched loads, levels that step or swing.

mod analysis_signals;

use analysis_signals::{Noise, add_note, music, power, run, steady, with_noise};
use notchwright::analysis::Analysis;

const RATE: u32 = 4000;
const COMB: [(u32, f64); 4] = [(1, 0.05), (2, 0.01), (3, 0.02), (5, 0.01)];

/// Hum of 30 s whose amplitude is `gain` of the time, in noise 40 dB under it.
fn of_gain(frequency_hz: f64, gain: impl Fn(f64) -> f64, seed: u64) -> Analysis {
    let mut samples = steady(frequency_hz, &COMB, RATE, 30.0);
    for (n, x) in samples.iter_mut().enumerate() {
        *x *= gain(n as f64 / f64::from(RATE));
    }
    run(RATE, vec![with_noise(samples, 4e-4, seed)]).analysis
}

fn assert_found(analysis: &Analysis, frequency_hz: f64, share: f64) {
    let mains = &analysis.mains;
    let found_hz = mains.frequency_hz.unwrap_or_else(|| panic!("{mains:?} {:?}", analysis.notes));
    assert!((found_hz - frequency_hz).abs() < 2e-3, "{found_hz} for {frequency_hz}");
    let orders: Vec<u32> = analysis.harmonics.iter().map(|line| line.order).collect();
    assert_eq!(orders, [1, 2, 3, 5]);
    let read = mains.share_of_time.unwrap_or(1.0);
    assert!((read - share).abs() < 0.03, "{read} for {share}: {:?}", analysis.notes);
}

#[test]
fn a_pump_that_runs_for_a_third_of_the_time_is_found_and_told() {
    let analysis = of_gain(50.03, |t| f64::from(u8::from((10.0..20.0).contains(&t))), 1);
    assert_found(&analysis, 50.03, 1.0 / 3.0);
    let told =
        |note: &String| note.contains("33 % of the time, from 10.0 s on") && note.contains("-26.0 dBFS");
    assert!(analysis.notes.iter().any(told), "{:?}", analysis.notes);
}

#[test]
fn hum_that_begins_or_ends_while_it_is_recorded_is_found() {
    let starts = of_gain(59.97, |t| f64::from(u8::from(t > 18.0)), 2);
    assert_found(&starts, 59.97, 0.4);
    let ends = of_gain(49.98, |t| f64::from(u8::from(t < 12.0)), 3);
    assert_found(&ends, 49.98, 0.4);
}

#[test]
fn a_pump_that_is_off_for_a_fifth_of_the_time_is_found() {
    let once = of_gain(50.02, |t| f64::from(u8::from(!(12.0..18.0).contains(&t))), 4);
    assert_found(&once, 50.02, 0.8);
    let again_and_again = of_gain(50.02, |t| f64::from(u8::from(t % 10.0 < 8.0)), 5);
    assert_found(&again_and_again, 50.02, 0.8);
}

#[test]
fn a_level_that_steps_by_14_db_or_swings_by_20_is_found_to_be_there_all_the_time() {
    for (seed, frequency_hz) in [(6, 50.03), (7, 59.98)] {
        let steps = of_gain(frequency_hz, |t| if t < 15.0 { 0.2 } else { 1.0 }, seed);
        assert_found(&steps, frequency_hz, 1.0);
        let swing = |t: f64| 10f64.powf(-0.5 + 0.5 * (std::f64::consts::TAU * t / 15.0).sin());
        assert_found(&of_gain(frequency_hz, swing, seed), frequency_hz, 1.0);
    }
}

#[test]
fn a_pump_is_found_at_any_time_of_day_and_any_level() {
    let mut missed = Vec::new();
    for seed in 0..20 {
        let mut noise = Noise::new(300 + seed);
        let nominal_hz = if seed % 2 == 0 { 50.0 } else { 60.0 };
        let frequency_hz = nominal_hz * noise.between(0.992, 1.008);
        let (from_s, length_s) = (noise.between(0.0, 18.0), noise.between(8.0, 20.0));
        let level = 10f64.powf(noise.between(-1.0, 0.0));
        let gain = |t: f64| if (from_s..from_s + length_s).contains(&t) { level } else { 0.0 };
        let mains = of_gain(frequency_hz, gain, seed).mains;
        if mains.frequency_hz.is_none_or(|found_hz| (found_hz - frequency_hz).abs() > 0.01) {
            missed.push((seed, frequency_hz, from_s, length_s, level, mains));
        }
    }
    assert!(missed.is_empty(), "{missed:#?}");
}

#[test]
fn a_pump_under_music_that_is_softer_is_found() {
    for seed in 0..6 {
        let mut samples = steady(50.02, &COMB, RATE, 30.0);
        samples[..10 * RATE as usize].fill(0.0);
        let programme = music(RATE, 30.0, 60 + seed);
        let gain = (0.05 * power(&samples) / power(&programme)).sqrt();
        samples.iter_mut().zip(&programme).for_each(|(x, m)| *x += gain * m);
        let mains = run(RATE, vec![with_noise(samples, 1e-4, seed)]).analysis.mains;
        assert!(mains.frequency_hz.is_some_and(|f| (f - 50.02).abs() < 0.01), "seed {seed}: {mains:?}");
    }
}

#[test]
fn long_notes_of_another_tuning_on_the_mains_are_no_pump() {
    // B1 of a tuning at 430 Hz is 60.34 Hz, G1 of one at 448 Hz 49.89 Hz: struck, they decay.
    for (seed, note_hz) in [(0, 60.34), (1, 49.89), (2, 60.34), (3, 49.89)] {
        let mut samples = vec![0.0; 30 * RATE as usize];
        let mut noise = Noise::new(seed);
        let mut at_s = 0.0;
        while at_s < 29.0 {
            let length_s = noise.between(2.0, 6.0);
            let pitch = if noise.uniform() < 0.5 { note_hz } else { note_hz * 1.1892 };
            add_note(&mut samples, RATE, at_s, length_s, pitch, 0.2);
            at_s += length_s;
        }
        let mains = run(RATE, vec![with_noise(samples, 1e-4, seed)]).analysis.mains;
        assert!(!mains.found, "{note_hz} Hz, seed {seed}: {mains:?}");
    }
}
