//! Makes the demo captures in `demo-audio/`, always the same, from fixed seeds,
//! and prints what is true of them: `cargo run --release --example make_demo_captures`.
//!
//! Both are invented. Neither the sluice house nor the rehearsal room exists,
//! and the tune was made up for this file.
//!
//! * `tide-gauge.wav`: 8 minutes of a pressure cell in a sluice house beside
//!   pump motors, 800 Hz, 24 bit; a full-scale sample is 2 V. Tide, surge and
//!   waves lie below 12 Hz; 50 Hz hum with falling odd orders wanders as a grid
//!   does, and grows when a second pump starts after five minutes.
//! * `rehearsal-room.wav`: 26 s of a band's sketch over an earth loop's buzz,
//!   32 kHz, 16 bit; a full-scale sample is 4 V. 60 Hz hum with forty orders;
//!   the bass plays B1 (61.7 Hz) and A♯1 (58.3 Hz) beside it.

use std::f64::consts::TAU;
use std::path::Path;

use hound::{SampleFormat, WavSpec, WavWriter};
use rand::{RngExt, SeedableRng};
use rand_xoshiro::Xoshiro256PlusPlus;

/// A line of the mains: its order, and its level in dBFS (AES17: the RMS of a
/// full-scale sine is 0 dBFS) before anything is switched.
type Line = (u32, f64);

/// How the frequency of a grid moves, and where its mean lies.
struct Grid {
    /// Phase advance over the capture divided by 2πT, hertz: exactly this.
    mean_hz: f64,
    /// Standard deviation of the frequency about its mean, hertz: exactly this.
    wander_hz: f64,
    /// Time constants of the two low-passes that shape the wander, seconds.
    slowness_s: [f64; 2],
}

const TIDE_SEED: u64 = 7_301;
const TIDE_RATE_HZ: u32 = 800;
const TIDE_SECONDS: f64 = 480.0;
const TIDE_GRID: Grid = Grid { mean_hz: 49.987_6, wander_hz: 0.012, slowness_s: [40.0, 6.0] };
/// One pump: odd orders that fall, and a trace of the second.
const TIDE_LINES: &[Line] = &[(1, -18.0), (2, -66.0), (3, -30.0), (5, -38.0), (7, -48.0)];
/// When the second pump starts, seconds.
const SECOND_PUMP_AT_S: f64 = 300.0;
/// What the second pump makes of each line's amplitude.
const SECOND_PUMP_FACTOR: f64 = 1.4;
/// Time constant of its start, seconds.
const SECOND_PUMP_RISE_S: f64 = 0.8;

const ROOM_SEED: u64 = 4_127;
const ROOM_RATE_HZ: u32 = 32_000;
const ROOM_SECONDS: f64 = 26.0;
const ROOM_GRID: Grid = Grid { mean_hz: 60.009, wander_hz: 0.005, slowness_s: [12.0, 3.0] };
const ROOM_ORDERS: u32 = 40;
/// Level of the music over the capture, dBFS.
const MUSIC_DBFS: f64 = -17.0;
/// Level of the room's own noise, dBFS.
const ROOM_NOISE_DBFS: f64 = -68.0;
/// Tempo of the tune, beats a second, and when it starts.
const BEATS_PER_S: f64 = 96.0 / 60.0;
const FIRST_BEAT_S: f64 = 0.8;

fn main() -> Result<(), hound::Error> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-audio");
    std::fs::create_dir_all(&folder)?;
    let tide = tide_gauge();
    write(&folder.join("tide-gauge.wav"), TIDE_RATE_HZ, 24, &tide)?;
    let room = rehearsal_room();
    write(&folder.join("rehearsal-room.wav"), ROOM_RATE_HZ, 16, &room)
}

/// A generator of the project's own noise.
struct Noise(Xoshiro256PlusPlus);

impl Noise {
    fn seeded(seed: u64) -> Self {
        Self(Xoshiro256PlusPlus::seed_from_u64(seed))
    }

    /// Even over 0 to 1.
    fn even(&mut self) -> f64 {
        self.0.random()
    }

    /// A random phase, radians.
    fn phase(&mut self) -> f64 {
        TAU * self.even()
    }

    /// Gaussian of variance 1 (Box and Muller 1958).
    fn gaussian(&mut self) -> f64 {
        let radius = (-2.0 * (1.0 - self.even()).ln()).sqrt();
        radius * self.phase().cos()
    }
}

/// A first-order low-pass, sample by sample.
struct LowPass {
    share: f64,
    state: f64,
}

impl LowPass {
    fn new(time_constant_s: f64, rate_hz: f64) -> Self {
        Self { share: 1.0 - (-1.0 / (time_constant_s * rate_hz)).exp(), state: 0.0 }
    }

    fn next(&mut self, input: f64) -> f64 {
        self.state += self.share * (input - self.state);
        self.state
    }
}

fn mean(values: &[f64]) -> f64 {
    values.iter().sum::<f64>() / values.len() as f64
}

fn rms(values: &[f64]) -> f64 {
    (values.iter().map(|value| value * value).sum::<f64>() / values.len() as f64).sqrt()
}

/// Level in dBFS of an RMS given as a fraction of full scale (AES17).
fn dbfs(rms: f64) -> f64 {
    20.0 * (rms * std::f64::consts::SQRT_2).log10()
}

/// Amplitude of a sine of this level, as a fraction of full scale.
fn amplitude(dbfs: f64) -> f64 {
    10f64.powf(dbfs / 20.0)
}

/// Scales to a level over the whole length.
fn at_level(mut samples: Vec<f64>, level_dbfs: f64) -> Vec<f64> {
    let factor = amplitude(level_dbfs) / (rms(&samples) * std::f64::consts::SQRT_2);
    samples.iter_mut().for_each(|sample| *sample *= factor);
    samples
}

impl Grid {
    /// Frequency at each sample, hertz: noise through two low-passes, brought
    /// to the mean and the wander stated.
    fn frequency(&self, noise: &mut Noise, rate_hz: f64, frames: usize) -> Vec<f64> {
        let [mut slow, mut slower] = self.slowness_s.map(|seconds| LowPass::new(seconds, rate_hz));
        let mut draw = || slower.next(slow.next(noise.gaussian()));
        for _ in 0..(5.0 * self.slowness_s[0] * rate_hz) as usize {
            draw();
        }
        let raw: Vec<f64> = (0..frames).map(|_| draw()).collect();
        let centre = mean(&raw);
        let centred: Vec<f64> = raw.iter().map(|value| value - centre).collect();
        let factor = self.wander_hz / rms(&centred);
        centred.iter().map(|value| self.mean_hz + factor * value).collect()
    }

    /// Phase of the fundamental at each sample, radians, 0 at the first.
    fn phase(&self, noise: &mut Noise, rate_hz: f64, frames: usize) -> Vec<f64> {
        let frequency = self.frequency(noise, rate_hz, frames);
        let mut second_means: Vec<f64> = frequency
            .chunks_exact(rate_hz as usize)
            .map(|second| (mean(second) - self.mean_hz).abs())
            .collect();
        second_means.sort_by(f64::total_cmp);
        let holding_95 = second_means[(0.95 * second_means.len() as f64).ceil() as usize - 1];
        println!("  mean frequency {:.4} Hz; 1 s means within ± {holding_95:.4} Hz for 95 %", self.mean_hz);
        let advance = frequency.iter().scan(0.0, |phase, hertz| {
            let now = *phase;
            *phase += TAU * hertz / rate_hz;
            Some(now)
        });
        advance.collect()
    }
}

/// Hum of these lines on one phase, each times `swell` at that sample.
fn hum(noise: &mut Noise, lines: &[Line], phase: &[f64], swell: &[f64]) -> Vec<f64> {
    let mut samples = vec![0.0; phase.len()];
    for &(order, level_dbfs) in lines {
        let (size, offset) = (amplitude(level_dbfs), noise.phase());
        for ((sample, phase), swell) in samples.iter_mut().zip(phase).zip(swell) {
            *sample += size * swell * (f64::from(order) * phase + offset).cos();
        }
        let held_dbfs = level_dbfs + 20.0 * mean(swell).log10();
        println!("  order {order:2}: {held_dbfs:6.2} dBFS, mean over the capture");
    }
    samples
}

/// Tide, surge, waves, pump hum, sensor noise.
fn tide_gauge() -> Vec<f64> {
    println!("tide-gauge.wav: full scale 2 V");
    let noise = &mut Noise::seeded(TIDE_SEED);
    let rate_hz = f64::from(TIDE_RATE_HZ);
    let frames = (TIDE_SECONDS * rate_hz) as usize;
    let time_s: Vec<f64> = (0..frames).map(|n| n as f64 / rate_hz).collect();
    let phase = TIDE_GRID.phase(noise, rate_hz, frames);
    let swell: Vec<f64> = time_s
        .iter()
        .map(|t| {
            let since_s = (t - SECOND_PUMP_AT_S).max(0.0);
            1.0 + (SECOND_PUMP_FACTOR - 1.0) * (1.0 - (-since_s / SECOND_PUMP_RISE_S).exp())
        })
        .collect();
    let mut samples = hum(noise, TIDE_LINES, &phase, &swell);
    for (sample, water) in samples.iter_mut().zip(water(noise, &time_s)) {
        *sample += water;
    }
    let mut drift = LowPass::new(0.5, rate_hz);
    for sample in &mut samples {
        // White noise of the cell, and its slow drift below a third of a hertz.
        *sample += 2.5e-5 * noise.gaussian() + 2e-3 * drift.next(noise.gaussian());
    }
    samples
}

/// Level of the water: the mean level, a half-day tide near half ebb, surge in
/// the channel, waves about a peak of 6 s period, chop at the gate up to 10 Hz.
fn water(noise: &mut Noise, time_s: &[f64]) -> Vec<f64> {
    let mut components = vec![(1.0 / 44_714.0, 0.22, 2.9)];
    components.extend((0..6).map(|_| (0.004 + 0.03 * noise.even(), 0.012, noise.phase())));
    components.extend((0..40).map(|_| {
        let hertz: f64 = 0.06 + 0.5 * noise.even();
        let size = 0.025 * (-((hertz / 0.165).ln() / 0.35).powi(2)).exp() + 0.000_4 / hertz;
        (hertz, size, noise.phase())
    }));
    components.extend((0..80).map(|_| {
        let hertz = 0.6 * (10.0f64 / 0.6).powf(noise.even());
        (hertz, 0.001_2 / hertz, noise.phase())
    }));
    let mut level = vec![0.16; time_s.len()];
    for (hertz, size, offset) in components {
        for (sample, t) in level.iter_mut().zip(time_s) {
            *sample += size * (TAU * hertz * t + offset).sin();
        }
    }
    println!("  water: RMS about its mean {:.2} dBFS", dbfs(rms_about_mean(&level)));
    level
}

fn rms_about_mean(values: &[f64]) -> f64 {
    let centre = mean(values);
    rms(&values.iter().map(|value| value - centre).collect::<Vec<_>>())
}

/// Buzz, tune, room noise.
fn rehearsal_room() -> Vec<f64> {
    println!("rehearsal-room.wav: full scale 4 V");
    let noise = &mut Noise::seeded(ROOM_SEED);
    let rate_hz = f64::from(ROOM_RATE_HZ);
    let frames = (ROOM_SECONDS * rate_hz) as usize;
    let phase = ROOM_GRID.phase(noise, rate_hz, frames);
    // An earth loop: odd orders stand out, even ones 12 dB below; each a little off the rule.
    let lines: Vec<Line> = (1..=ROOM_ORDERS)
        .map(|order| {
            let base_dbfs = if order % 2 == 1 { -30.0 } else { -42.0 };
            let level_dbfs = base_dbfs - 17.0 * f64::from(order).log10() + 3.0 * (noise.even() - 0.5);
            (order, (100.0 * level_dbfs).round() / 100.0)
        })
        .collect();
    let buzz = hum(noise, &lines, &phase, &vec![1.0; frames]);
    let music = at_level(tune(noise, rate_hz, frames), MUSIC_DBFS);
    let room = at_level(room_noise(noise, rate_hz, frames), ROOM_NOISE_DBFS);
    println!(
        "  buzz {:.1} dBFS, music {MUSIC_DBFS:.1} dBFS, room {ROOM_NOISE_DBFS:.1} dBFS",
        dbfs(rms(&buzz))
    );
    buzz.iter().zip(&music).zip(&room).map(|((buzz, music), room)| buzz + music + room).collect()
}

/// Air and traffic: white noise, and more of it below 200 Hz.
fn room_noise(noise: &mut Noise, rate_hz: f64, frames: usize) -> Vec<f64> {
    let mut rumble = LowPass::new(1.0 / (TAU * 200.0), rate_hz);
    (0..frames).map(|_| 0.3 * noise.gaussian() + 4.0 * rumble.next(noise.gaussian())).collect()
}

/// What plays a note.
#[derive(Clone, Copy)]
enum Voice {
    Bass,
    Pluck,
    Pad,
}

/// A note: beat, length in beats, semitones above A4 (440 Hz), loudness.
struct Note(Voice, f64, f64, i32, f64);

/// Semitones above A4 of the notes the tune uses, by octave 1.
const B: i32 = -34;
const A_SHARP: i32 = -35;
const A: i32 = -36;
const G: i32 = -38;
const F_SHARP: i32 = -39;
const E: i32 = -41;
const D: i32 = -43;
const C_SHARP: i32 = -44;
const OCTAVE: i32 = 12;

/// Ten bars of four beats in B minor: root of the bass, the pad's three notes.
const BARS: [(i32, [i32; 3]); 10] = [
    (B, [B + OCTAVE, D + 3 * OCTAVE, F_SHARP + 2 * OCTAVE]),
    (B, [B + OCTAVE, D + 3 * OCTAVE, F_SHARP + 2 * OCTAVE]),
    (G, [B + OCTAVE, D + 3 * OCTAVE, G + 2 * OCTAVE]),
    (A, [A + OCTAVE, C_SHARP + 3 * OCTAVE, E + 3 * OCTAVE]),
    (B, [B + OCTAVE, D + 3 * OCTAVE, F_SHARP + 2 * OCTAVE]),
    (A_SHARP, [A_SHARP + OCTAVE, C_SHARP + 3 * OCTAVE, F_SHARP + 2 * OCTAVE]),
    (B, [B + OCTAVE, D + 3 * OCTAVE, F_SHARP + 2 * OCTAVE]),
    (E + OCTAVE, [B + OCTAVE, E + 3 * OCTAVE, G + 2 * OCTAVE]),
    (F_SHARP, [A_SHARP + OCTAVE, C_SHARP + 3 * OCTAVE, F_SHARP + 2 * OCTAVE]),
    (B, [B + OCTAVE, D + 3 * OCTAVE, F_SHARP + 2 * OCTAVE]),
];

/// The melody: beat, length, semitones above A4.
const MELODY: [(f64, f64, i32); 34] = [
    (0.0, 1.5, F_SHARP + 3 * OCTAVE),
    (1.5, 0.5, E + 4 * OCTAVE),
    (2.0, 2.0, D + 4 * OCTAVE),
    (4.5, 0.5, C_SHARP + 4 * OCTAVE),
    (5.0, 1.0, D + 4 * OCTAVE),
    (6.0, 2.0, B + 2 * OCTAVE),
    (8.0, 1.0, G + 3 * OCTAVE),
    (9.0, 0.5, F_SHARP + 3 * OCTAVE),
    (9.5, 1.5, D + 4 * OCTAVE),
    (11.0, 1.0, B + 2 * OCTAVE),
    (12.0, 1.5, C_SHARP + 4 * OCTAVE),
    (13.5, 0.5, E + 4 * OCTAVE),
    (14.0, 2.0, A + 3 * OCTAVE),
    (16.0, 0.5, B + 3 * OCTAVE),
    (16.5, 0.5, A + 3 * OCTAVE),
    (17.0, 1.0, F_SHARP + 3 * OCTAVE),
    (18.0, 2.0, D + 4 * OCTAVE),
    (20.0, 1.5, C_SHARP + 4 * OCTAVE),
    (21.5, 0.5, A_SHARP + 2 * OCTAVE),
    (22.0, 2.0, C_SHARP + 4 * OCTAVE),
    (24.0, 1.0, D + 4 * OCTAVE),
    (25.0, 1.0, F_SHARP + 3 * OCTAVE),
    (26.0, 0.5, B + 2 * OCTAVE),
    (26.5, 1.5, B + 3 * OCTAVE),
    (28.0, 1.0, G + 3 * OCTAVE),
    (29.0, 0.5, F_SHARP + 3 * OCTAVE),
    (29.5, 0.5, E + 4 * OCTAVE),
    (30.0, 2.0, B + 2 * OCTAVE),
    (32.0, 1.0, A_SHARP + 2 * OCTAVE),
    (33.0, 1.0, C_SHARP + 4 * OCTAVE),
    (34.0, 1.0, E + 4 * OCTAVE),
    (35.0, 1.0, A_SHARP + 3 * OCTAVE),
    (36.0, 2.0, B + 3 * OCTAVE),
    (38.0, 2.0, B + 2 * OCTAVE),
];

/// The bass in each bar: beat, length, semitones above the root.
const BASS_FIGURE: [(f64, f64, i32); 4] = [(0.0, 1.5, 0), (1.5, 0.5, 0), (2.0, 1.0, OCTAVE), (3.0, 1.0, 7)];

fn score() -> Vec<Note> {
    let mut notes = Vec::new();
    for (bar, (root, chord)) in BARS.iter().enumerate() {
        let start = 4.0 * bar as f64;
        notes.extend(
            BASS_FIGURE.map(|(beat, length, up)| Note(Voice::Bass, start + beat, length, root + up, 1.0)),
        );
        notes.extend(chord.map(|pitch| Note(Voice::Pad, start, 4.0, pitch, 0.16)));
    }
    notes.extend(MELODY.map(|(beat, length, pitch)| Note(Voice::Pluck, beat, length, pitch, 0.5)));
    notes
}

fn tune(noise: &mut Noise, rate_hz: f64, frames: usize) -> Vec<f64> {
    let mut samples = vec![0.0; frames];
    for Note(voice, beat, beats, pitch, loudness) in score() {
        // Nobody plays to the millisecond, nor to the cent.
        let start_s = FIRST_BEAT_S + beat / BEATS_PER_S + 0.006 * noise.even();
        let hertz = 440.0 * 2f64.powf((f64::from(pitch) + 0.04 * (noise.even() - 0.5)) / 12.0);
        let length_s = beats / BEATS_PER_S;
        let first = (start_s * rate_hz) as usize;
        play(voice, noise, hertz, length_s, rate_hz, &mut samples[first.min(frames)..], loudness);
    }
    for beat in 0..80 {
        let start_s = FIRST_BEAT_S + 0.5 * f64::from(beat) / BEATS_PER_S;
        let loudness = if beat % 4 == 2 { 0.12 } else { 0.04 };
        brush(noise, rate_hz, &mut samples[(start_s * rate_hz) as usize..], loudness);
    }
    samples
}

/// One note of partials, each with its own decay (the pad: with its own swell).
fn play(
    voice: Voice,
    noise: &mut Noise,
    hertz: f64,
    length_s: f64,
    rate_hz: f64,
    samples: &mut [f64],
    loudness: f64,
) {
    let (partials, fall, decay_s, release_s) = match voice {
        Voice::Bass => (9, 1.3, 1.6, 0.08),
        Voice::Pluck => (14, 1.1, 0.9, 0.25),
        Voice::Pad => (6, 1.8, f64::INFINITY, 0.5),
    };
    for partial in 1..=partials {
        let number = f64::from(partial);
        // Strings are stiff: their partials lie a little above the multiples.
        let stiffness = if matches!(voice, Voice::Pad) { 0.0 } else { 1e-4 };
        let partial_hz = number * hertz * (1.0 + stiffness * number * number).sqrt();
        if partial_hz > 0.4 * rate_hz {
            break;
        }
        let size = loudness * number.powf(-fall);
        let (offset, detune_hz) = (noise.phase(), 0.3 + 0.4 * noise.even());
        for (n, sample) in samples.iter_mut().enumerate() {
            let t = n as f64 / rate_hz;
            let release = if t > length_s { (-(t - length_s) / release_s).exp() } else { 1.0 };
            if release < 1e-4 {
                break;
            }
            let shape = match voice {
                Voice::Pad => (1.0 - (-t / 0.35).exp()) * (0.7 + 0.3 * (TAU * detune_hz * t).cos()),
                _ => (1.0 - (-t / 0.003).exp()) * (-t * number.sqrt() / decay_s).exp(),
            };
            *sample += size * shape * release * (TAU * partial_hz * t + offset).sin();
        }
    }
}

/// A short stroke of a brush: noise without its low end.
fn brush(noise: &mut Noise, rate_hz: f64, samples: &mut [f64], loudness: f64) {
    let mut low = LowPass::new(1.0 / (TAU * 2500.0), rate_hz);
    for (n, sample) in samples.iter_mut().enumerate().take((0.25 * rate_hz) as usize) {
        let t = n as f64 / rate_hz;
        let white = noise.gaussian();
        *sample += loudness * (white - low.next(white)) * (1.0 - (-t / 0.004).exp()) * (-t / 0.05).exp();
    }
}

/// Writes one channel of integers with triangular dither of ± 1 step (TPDF).
fn write(path: &Path, sample_rate: u32, bits: u16, samples: &[f64]) -> Result<(), hound::Error> {
    let spec = WavSpec { channels: 1, sample_rate, bits_per_sample: bits, sample_format: SampleFormat::Int };
    let full_scale = f64::from(1u32 << (bits - 1));
    let noise = &mut Noise::seeded(u64::from(bits));
    let peak = samples.iter().fold(0.0, |peak: f64, sample| peak.max(sample.abs()));
    assert!(peak < 0.95, "a demo must not clip: peak {peak}");
    let mut writer = WavWriter::create(path, spec)?;
    for sample in samples {
        let dithered = sample * full_scale + noise.even() - noise.even();
        writer.write_sample(dithered.round() as i32)?;
    }
    writer.finalize()?;
    println!("  peak {:.1} dBFS, {} samples at {sample_rate} Hz", 20.0 * peak.log10(), samples.len());
    Ok(())
}
