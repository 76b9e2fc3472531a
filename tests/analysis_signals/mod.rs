//! Synthetic signals with fixed seeds that the analyser's tests share.
#![allow(dead_code)]

use notchwright::analysis::{AnalyseOptions, AnalysisRun, PhaseTrack, analyse};
use notchwright::capture::MemoryCapture;
use rand::{RngExt, SeedableRng};
use rand_xoshiro::Xoshiro256PlusPlus;
use std::f64::consts::TAU;

/// Seeded white Gaussian noise.
pub struct Noise {
    generator: Xoshiro256PlusPlus,
    spare: Option<f64>,
}

impl Noise {
    pub fn new(seed: u64) -> Self {
        Self { generator: Xoshiro256PlusPlus::seed_from_u64(seed), spare: None }
    }

    /// From 0 to 1.
    pub fn uniform(&mut self) -> f64 {
        self.generator.random::<f64>()
    }

    /// Between two values.
    pub fn between(&mut self, from: f64, to: f64) -> f64 {
        from + (to - from) * self.uniform()
    }

    /// Mean 0, variance 1 (Marsaglia's polar method, 1964).
    pub fn normal(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        loop {
            let (u, v) = (self.between(-1.0, 1.0), self.between(-1.0, 1.0));
            let s = u * u + v * v;
            if s > 0.0 && s < 1.0 {
                let scale = (-2.0 * s.ln() / s).sqrt();
                self.spare = Some(v * scale);
                return u * scale;
            }
        }
    }
}

/// Trials of each case: few enough for every day, or as many as the environment asks
/// for (`NOTCHWRIGHT_TRIALS=300`).
pub fn trials(everyday: u64) -> u64 {
    std::env::var("NOTCHWRIGHT_TRIALS").map_or(everyday, |count| count.parse().expect("a number of trials"))
}

/// Samples with white noise of a standard deviation added.
pub fn with_noise(mut samples: Vec<f64>, sigma: f64, seed: u64) -> Vec<f64> {
    let mut noise = Noise::new(seed);
    samples.iter_mut().for_each(|x| *x += sigma * noise.normal());
    samples
}

/// Harmonics (order, amplitude) of a constant frequency.
pub fn steady(frequency_hz: f64, lines: &[(u32, f64)], rate: u32, duration_s: f64) -> Vec<f64> {
    let phases: Vec<f64> = lines.iter().map(|(k, _)| f64::from(*k)).collect();
    hum(&PhaseTrack::constant(frequency_hz, duration_s), lines, &phases, rate, duration_s)
}

/// A line at `centre_hz` whose frequency swings by ± `swing_hz` as a sine of `rate_hz`.
pub fn phase_of_wander(centre_hz: f64, swing_hz: f64, rate_hz: f64, duration_s: f64) -> PhaseTrack {
    let knots = (duration_s * 10.0).ceil() as usize;
    let time_s: Vec<f64> = (0..=knots).map(|i| i as f64 * duration_s / knots as f64).collect();
    let phase = |t: f64| TAU * centre_hz * t + swing_hz / rate_hz * (1.0 - (TAU * rate_hz * t).cos());
    PhaseTrack {
        phase_rad: time_s.iter().map(|&t| phase(t)).collect(),
        frequency_hz: time_s.iter().map(|&t| centre_hz + swing_hz * (TAU * rate_hz * t).sin()).collect(),
        time_s,
    }
}

/// Harmonics (order, amplitude) along a track, each with its phase.
pub fn hum(track: &PhaseTrack, lines: &[(u32, f64)], phases: &[f64], rate: u32, duration_s: f64) -> Vec<f64> {
    let count = (duration_s * f64::from(rate)) as usize;
    (0..count)
        .map(|n| {
            let phase = track.phase_at(n as f64 / f64::from(rate));
            lines.iter().zip(phases).map(|(&(k, a), theta)| a * (f64::from(k) * phase + theta).cos()).sum()
        })
        .collect()
}

/// The analysis of channels held in memory.
pub fn run(rate: u32, planes: Vec<Vec<f64>>) -> AnalysisRun {
    let mut capture = MemoryCapture::new("synthetic", rate, planes);
    let run = analyse(&mut [&mut capture], &AnalyseOptions::default(), &mut |_| {}).expect("analysis");
    assert_finite(&run);
    run
}

/// Every number of an account is finite: JSON knows no other.
pub fn assert_finite(run: &AnalysisRun) {
    let json = serde_json::to_value(&run.analysis).expect("JSON");
    let text = json.to_string();
    assert!(!text.contains("NaN") && !text.contains("inf"), "{text}");
    let read: notchwright::analysis::Analysis =
        serde_json::from_value(json).expect("numbers, none of them null");
    assert_eq!(read.harmonics.len(), run.analysis.harmonics.len());
    assert!(run.spectrum.level_dbfs.iter().all(|level| level.is_finite()));
}

/// One note: a few harmonics that set in and die away.
pub fn add_note(samples: &mut [f64], rate: u32, from_s: f64, length_s: f64, frequency_hz: f64, level: f64) {
    let rate = f64::from(rate);
    let first = (from_s * rate) as usize;
    let count = (length_s * rate) as usize;
    for (i, slot) in samples.iter_mut().skip(first).take(count).enumerate() {
        let t = i as f64 / rate;
        let attack = (t / 0.01).min(1.0);
        let release = ((length_s - t) / 0.03).clamp(0.0, 1.0);
        let decay = (-1.5 * t / length_s).exp();
        let tone: f64 = (1..=6)
            .filter(|&k| f64::from(k) * frequency_hz < 0.45 * rate)
            .map(|k| (TAU * f64::from(k) * frequency_hz * t).sin() / f64::from(k * k))
            .sum();
        *slot += level * attack * release * decay * tone;
    }
}

/// A bass line and two upper parts, in equal temperament on A4 = 440 Hz.
pub fn music(rate: u32, duration_s: f64, seed: u64) -> Vec<f64> {
    let mut noise = Noise::new(seed);
    let mut samples = vec![0.0; (duration_s * f64::from(rate)) as usize];
    let scale = [0, 2, 4, 5, 7, 9, 11];
    for (lowest, span, level) in [(-38i32, 12, 0.25), (-12, 14, 0.15), (0, 14, 0.12)] {
        let mut at = 0.0;
        while at < duration_s {
            let length_s = [0.25, 0.5, 0.5, 1.0, 2.0][(noise.uniform() * 5.0) as usize];
            let step = (noise.uniform() * f64::from(span)) as i32;
            let semitone = lowest + step / 7 * 12 + scale[(step % 7) as usize];
            let frequency_hz = 440.0 * 2f64.powf(f64::from(semitone) / 12.0);
            add_note(&mut samples, rate, at, length_s, frequency_hz, level * noise.between(0.5, 1.0));
            at += length_s;
        }
    }
    samples
}

/// Syllables of a gliding voice, with breath between.
pub fn speech(rate: u32, duration_s: f64, seed: u64) -> Vec<f64> {
    let mut noise = Noise::new(seed);
    let mut samples = vec![0.0; (duration_s * f64::from(rate)) as usize];
    let mut at = 0usize;
    while at < samples.len() {
        let length = (noise.between(0.08, 0.3) * f64::from(rate)) as usize;
        let pause = (noise.between(0.02, 0.25) * f64::from(rate)) as usize;
        let (from, to) = (noise.between(85.0, 180.0), noise.between(85.0, 180.0));
        let mut phase = 0.0;
        for i in 0..length.min(samples.len() - at) {
            let u = i as f64 / length as f64;
            phase += TAU * (from + (to - from) * u) / f64::from(rate);
            let envelope = (std::f64::consts::PI * u).sin();
            let voice: f64 = (1..=12).map(|k| (f64::from(k) * phase).sin() / f64::from(k)).sum();
            samples[at + i] += envelope * (0.1 * voice + 0.01 * noise.normal());
        }
        at += length + pause;
    }
    samples
}

/// Noise with two resonances, in bursts as long and as often as syllables.
pub fn speech_like_noise(rate: u32, duration_s: f64, seed: u64) -> Vec<f64> {
    let mut noise = Noise::new(seed);
    let rate = f64::from(rate);
    let count = (duration_s * rate) as usize;
    let centres = [noise.between(80.0, 700.0), noise.between(700.0, 1500.0)];
    let per_s = noise.between(2.5, 6.0);
    let resonance = |centre_hz: f64| {
        let radius = (-TAU * 0.5 * 60.0 / rate).exp();
        (2.0 * radius * (TAU * centre_hz / rate).cos(), radius * radius)
    };
    let poles = centres.map(resonance);
    let mut past = [[0.0; 2]; 2];
    let sample = |n: usize| {
        let t = n as f64 / rate;
        let syllable = (TAU * per_s * t + 0.7 * (TAU * 0.37 * t).sin()).sin().max(0.0);
        let excited = 0.01 * noise.normal();
        let mut sum = 0.0;
        for ((a, b), y) in poles.iter().zip(&mut past) {
            let next = excited + a * y[0] - b * y[1];
            *y = [next, y[0]];
            sum += next;
        }
        syllable * sum
    };
    (0..count).map(sample).collect()
}

/// Mean square.
pub fn power(samples: &[f64]) -> f64 {
    samples.iter().map(|x| x * x).sum::<f64>() / samples.len() as f64
}
