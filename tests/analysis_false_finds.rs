//! What is not hum and must not be taken for it: music, voices, gliding tones, noise.

mod analysis_signals;

use analysis_signals::{Noise, add_note, music, run, speech, speech_like_noise, steady, trials, with_noise};
use std::f64::consts::TAU;

const RATE: u32 = 4000;

#[test]
fn bass_and_tuning_notes_are_no_hum() {
    for (note_hz, seed) in [(48.999, 3), (440.0, 4)] {
        let mut samples = vec![0.0; 20 * RATE as usize];
        for i in 0..20 {
            add_note(&mut samples, RATE, f64::from(i), 0.45, note_hz, 0.3);
        }
        let mains = run(RATE, vec![with_noise(samples, 1e-3, seed)]).analysis.mains;
        assert!(!mains.found, "{note_hz} Hz: {mains:?}");
    }
}

/// What is recorded on lines without hum, each kind with numbers of its own drawn from the seed.
/// A clip of so many seconds from a seed.
type Clip = fn(f64, u64) -> Vec<f64>;

const KINDS: [(&str, Clip); 7] = [
    ("music", |duration_s, seed| music(RATE, duration_s, seed)),
    ("a voice", |duration_s, seed| speech(RATE, duration_s, seed)),
    ("speech-like noise", |duration_s, seed| speech_like_noise(RATE, duration_s, seed)),
    ("white noise", |duration_s, _| vec![0.0; count_in(duration_s)]),
    ("red noise", red_noise),
    ("a gliding tone", gliding_tone),
    ("a drifting tone", drifting_tone),
];

fn count_in(duration_s: f64) -> usize {
    (duration_s * f64::from(RATE)) as usize
}

/// Noise that falls by 6 dB an octave above a corner.
fn red_noise(duration_s: f64, seed: u64) -> Vec<f64> {
    let mut noise = Noise::new(seed);
    let kept = (-TAU * noise.between(2.0, 80.0) / f64::from(RATE)).exp();
    let step = |slow: &mut f64, _| {
        *slow = kept * *slow + (1.0 - kept) * noise.normal();
        Some(*slow)
    };
    (0..count_in(duration_s)).scan(0.0, step).collect()
}

/// A tone that goes from one frequency to another.
fn gliding_tone(duration_s: f64, seed: u64) -> Vec<f64> {
    let mut noise = Noise::new(seed);
    let (from, to) = (noise.between(30.0, 300.0), noise.between(30.0, 300.0));
    let phase = |t: f64| from * t + 0.5 * (to - from) / duration_s * t * t;
    (0..count_in(duration_s)).map(|n| 0.1 * (TAU * phase(n as f64 / f64::from(RATE))).sin()).collect()
}

/// A tone off the mains whose frequency drifts by a few hundredths, as an oscillator's does.
fn drifting_tone(duration_s: f64, seed: u64) -> Vec<f64> {
    let mut noise = Noise::new(seed);
    let middle_hz = noise.between(70.0, 320.0);
    let drift = noise.between(0.02, 0.05);
    let (swing_hz, swings_per_s) = (noise.between(0.5, 2.0), noise.between(0.05, 0.5));
    let mut phase = 0.0;
    let tone = (0..count_in(duration_s)).map(|n| {
        let t = n as f64 / f64::from(RATE);
        let frequency_hz =
            middle_hz * (1.0 + drift * t / duration_s) + swing_hz * (TAU * swings_per_s * t).sin();
        phase += TAU * frequency_hz / f64::from(RATE);
        0.1 * phase.sin()
    });
    tone.collect()
}

#[test]
fn hum_free_clips_give_no_find() {
    let clips = trials(35);
    for seed in 0..clips {
        let (kind, clip) = KINDS[(seed % 7) as usize];
        let duration_s = [8.0, 12.0, 20.0, 30.0][(seed / 7 % 4) as usize];
        // Hiss 60 to 20 dB under it.
        let sigma = 0.1 * 10f64.powf(-(1.0 + 2.0 * Noise::new(seed).uniform()));
        let analysis = run(RATE, vec![with_noise(clip(duration_s, seed), sigma, seed)]).analysis;
        assert!(!analysis.mains.found, "{kind}, seed {seed}: {:?} {:?}", analysis.mains, analysis.harmonics);
    }
    println!("{clips} clips without hum: no find");
}

/// A sustained note: harmonics with vibrato, swelling by up to 6 dB.
fn drone(note_hz: f64, seed: u64, duration_s: f64) -> Vec<f64> {
    let mut noise = Noise::new(seed);
    let (depth, vibrato_hz) = (noise.between(0.001, 0.006), noise.between(4.0, 6.0));
    let swell_hz = noise.between(0.1, 0.3);
    let count = (duration_s * f64::from(RATE)) as usize;
    let mut phase = 0.0;
    let note = (0..count).map(|n| {
        let t = n as f64 / f64::from(RATE);
        phase += TAU * note_hz * (1.0 + depth * (TAU * vibrato_hz * t).sin()) / f64::from(RATE);
        let swell = 0.5 + 0.5 * (TAU * swell_hz * t).sin().powi(2);
        0.1 * swell * (1..=8).map(|k| (f64::from(k) * phase).sin() / f64::from(k)).sum::<f64>()
    });
    with_noise(note.collect(), 1e-3, seed + 1000)
}

#[test]
fn sustained_notes_with_vibrato_are_no_hum() {
    // They, their halves or their thirds lie in an island's range.
    for (i, note_hz) in [48.999, 51.913, 61.735, 97.999, 103.826, 110.0, 123.471, 146.832, 155.563, 185.0]
        .into_iter()
        .enumerate()
    {
        let mains = run(RATE, vec![drone(note_hz, 900 + i as u64, 15.0)]).analysis.mains;
        assert!(!mains.found, "{note_hz:.2} Hz: {mains:?}");
    }
}

#[test]
fn sustained_notes_of_four_octaves_are_no_hum() {
    // A seventh of F4 lies at 49.89 Hz.
    for step in 0..40u32 {
        let note_hz = 440.0 * 2f64.powf((f64::from(step) - 44.0) / 12.0);
        let mains = run(RATE, vec![drone(note_hz, 900 + u64::from(step), 15.0)]).analysis.mains;
        assert!(!mains.found, "{note_hz:.2} Hz: {mains:?}");
    }
}

#[test]
fn a_pattern_of_notes_repeated_exactly_is_no_hum() {
    for seed in 0..12 {
        let mut noise = Noise::new(1100 + seed);
        let step_s = noise.between(0.1, 0.3);
        let pitches: Vec<f64> =
            (0..4).map(|_| 32.703 * 2f64.powf((noise.uniform() * 24.0).floor() / 12.0)).collect();
        let mut samples = vec![0.0; 15 * RATE as usize];
        let steps = (14.5 / step_s) as usize;
        for i in 0..steps {
            add_note(&mut samples, RATE, i as f64 * step_s, step_s, pitches[i % 4], 0.1);
        }
        let mains = run(RATE, vec![with_noise(samples, 1e-3, seed)]).analysis.mains;
        assert!(!mains.found, "seed {seed}, {step_s} s, {pitches:?}: {mains:?}");
    }
}

#[test]
fn multiples_of_a_note_are_counted_from_no_island() {
    // A2 and its multiples, as steady as a machine: 55 Hz is no reason to call it a rectifier's.
    let note = steady(110.0, &[(1, 0.05), (2, 0.03), (3, 0.02)], RATE, 20.0);
    let mains = run(RATE, vec![with_noise(note, 2e-3, 72)]).analysis.mains;
    assert!(!mains.found, "{mains:?}");
}
