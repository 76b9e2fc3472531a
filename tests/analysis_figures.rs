//! The figures of the account: levels with their errors, levels over time, what the hum does
//! to the converter, weighted levels, causes.

mod analysis_signals;

use analysis_signals::{Noise, assert_finite, hum, music, phase_of_wander, run};
use notchwright::analysis::{AnalyseOptions, Analysis, AnalysisRun, Needed, PhaseTrack, WhyNeeded, analyse};
use notchwright::capture::{Capture, CaptureError, Format, MemoryCapture, SampleFormat};
use std::f64::consts::TAU;

const RATE: u32 = 1000;

/// Noise and hum of order 1 and 3 whose amplitude changes over time.
fn switched(duration_s: f64, swing_hz: f64, amplitude: impl Fn(f64) -> f64, noise_sd: f64) -> Vec<f64> {
    let track = phase_of_wander(50.01, swing_hz, 0.05, duration_s);
    let mut noise = Noise::new(3);
    (0..(duration_s * f64::from(RATE)) as usize)
        .map(|n| {
            let t = n as f64 / f64::from(RATE);
            let phase = track.phase_at(t);
            amplitude(t) * (phase.cos() + 0.2 * (3.0 * phase).cos()) + noise_sd * noise.normal()
        })
        .collect()
}

#[test]
fn a_pump_that_switches_on_is_told_with_its_time_and_levels() {
    let pump = |t: f64| if t < 12.0 { 0.010 } else { 0.020 };
    let analysis = run(RATE, vec![switched(40.0, 0.05, pump, 1e-3)]).analysis;
    assert!(analysis.mains.found);
    let [step] = &analysis.level_changes[..] else { panic!("{:?}", analysis.level_changes) };
    assert!((step.time_s - 12.0).abs() < 0.5, "{step:?}");
    assert!((step.from_dbfs + 40.0).abs() < 0.3 && (step.to_dbfs + 34.0).abs() < 0.3, "{step:?}");
    assert!(analysis.notes.iter().any(|note| note.contains("a step at 12.")), "{:?}", analysis.notes);
    assert!(analysis.causes.iter().any(|cause| cause.cause.contains("switched")), "{:?}", analysis.causes);
    assert!(analysis.level_track.len() <= 600 && analysis.level_track.len() > 20);
    let level_at = |time_s: f64| {
        let near = |a: f64, b: f64| (a - time_s).abs().total_cmp(&(b - time_s).abs());
        analysis.level_track.iter().min_by(|a, b| near(a.time_s, b.time_s)).expect("points").level_dbfs
    };
    assert!((level_at(6.0) + 39.8).abs() < 0.5 && (level_at(30.0) + 33.8).abs() < 0.5);
}

#[test]
fn a_constant_level_whose_frequency_drifts_by_a_tenth_of_a_hertz_is_no_change() {
    let analysis = run(RATE, vec![switched(60.0, 0.1, |_| 0.02, 1e-3)]).analysis;
    assert!(analysis.mains.spread_hz.expect("a spread") > 0.08, "{:?}", analysis.mains);
    assert!(analysis.level_changes.is_empty(), "{:?}", analysis.level_changes);
    assert!(!analysis.notes.iter().any(|note| note.contains("the level of")), "{:?}", analysis.notes);
    for point in &analysis.level_track {
        assert!((point.level_dbfs + 33.8).abs() < 0.8, "{point:?}");
    }
}

#[test]
fn music_over_a_steady_hum_makes_no_steps_of_it() {
    for seed in 1..5 {
        let mut samples = music(RATE, 30.0, seed);
        let track = PhaseTrack::constant(50.01, 30.0);
        let lines = hum(&track, &[(1, 0.15), (3, 0.05)], &[0.3, 1.0], RATE, 30.0);
        samples.iter_mut().zip(lines).for_each(|(sample, hum)| *sample += hum);
        let analysis = run(RATE, vec![samples]).analysis;
        assert!(analysis.mains.found, "seed {seed}");
        assert!(analysis.level_changes.is_empty(), "seed {seed}: {:?}", analysis.level_changes);
    }
}

#[test]
fn a_level_states_the_error_that_noise_makes() {
    // 40 dB over the noise in 1/T: an error of 20/ln 10·√(10⁻⁴/2) = 0.06 dB.
    let (duration_s, amplitude) = (20.0, 0.1);
    let sd = (0.5 * amplitude * amplitude * 1e-4 * duration_s * f64::from(RATE) / 2.0).sqrt();
    let (mut squares, mut stated, trials) = (0.0, 0.0, 40);
    let mut noise = Noise::new(8);
    for _ in 0..trials {
        let samples: Vec<f64> = (0..20_000)
            .map(|n| amplitude * (TAU * 50.02 * f64::from(n) / 1000.0).cos() + sd * noise.normal())
            .collect();
        let level = run(RATE, vec![samples]).analysis.harmonics[0].clone();
        squares += (level.level_dbfs + 20.0).powi(2) / f64::from(trials);
        stated += level.level_se_db.expect("an error") / f64::from(trials);
    }
    let ratio = squares.sqrt() / stated;
    assert!((0.75..1.3).contains(&ratio), "RMS error {:.4} dB, stated {stated:.4} dB", squares.sqrt());
    assert!((stated / 0.0614 - 1.07).abs() < 0.15, "stated {stated:.4} dB");
}

fn of_several(planes: &[(&str, Vec<f64>)]) -> AnalysisRun {
    let mut captures: Vec<MemoryCapture> =
        planes.iter().map(|(name, plane)| MemoryCapture::new(name, RATE, vec![plane.clone()])).collect();
    let mut given: Vec<&mut dyn Capture> =
        captures.iter_mut().map(|capture| capture as &mut dyn Capture).collect();
    let done = analyse(&mut given, &AnalyseOptions::default(), &mut |_| {}).expect("analysis");
    assert_finite(&done);
    done
}

#[test]
fn captures_stand_side_by_side_and_the_merged_error_is_that_of_their_mean() {
    let (loud, soft) = (switched(20.0, 0.0, |_| 0.02, 1e-3), switched(20.0, 0.0, |_| 0.005, 1e-3));
    let nothing: Vec<f64> = switched(20.0, 0.0, |_| 0.0, 1e-3);
    let analysis = of_several(&[("sensor", loud.clone()), ("resistor", soft), ("shorted", nothing)]).analysis;
    let level = |i: usize| analysis.captures[i].hum.as_ref().map(|hum| hum.levels[0].level_dbfs);
    assert!((level(0).expect("hum") - level(1).expect("hum") - 12.04).abs() < 0.2);
    assert_eq!(level(2), None);
    let twice = of_several(&[("a", loud.clone()), ("b", loud.clone())]).analysis;
    let once = of_several(&[("a", loud)]).analysis;
    let error = |analysis: &Analysis| analysis.harmonics[0].level_se_db.expect("an error");
    assert!((error(&twice) / error(&once) - 0.5_f64.sqrt()).abs() < 0.01);
}

/// A recording of integers.
struct Integers {
    inner: MemoryCapture,
    format: SampleFormat,
}

impl Integers {
    fn of(samples: &[f64], rate: u32, format: SampleFormat) -> Self {
        let steps = 2f64.powi(i32::from(format.bits()) - 1);
        let rounded =
            samples.iter().map(|x| (x * steps).round().clamp(-steps, steps - 1.0) / steps).collect();
        Self { inner: MemoryCapture::new("integers", rate, vec![rounded]), format }
    }
}

impl Capture for Integers {
    fn format(&self) -> &Format {
        self.inner.format()
    }
    fn name(&self) -> &str {
        self.inner.name()
    }
    fn sample_format(&self) -> SampleFormat {
        self.format
    }
    fn rewind(&mut self) -> Result<(), CaptureError> {
        self.inner.rewind()
    }
    fn read_block(&mut self, planes: &mut [Vec<f64>], frames: usize) -> Result<usize, CaptureError> {
        self.inner.read_block(planes, frames)
    }
}

fn of_integers(samples: &[f64], rate: u32) -> Analysis {
    let mut capture = Integers::of(samples, rate, SampleFormat::I16);
    let done = analyse(&mut [&mut capture], &AnalyseOptions::default(), &mut |_| {}).expect("analysis");
    assert_finite(&done);
    done.analysis
}

#[test]
fn a_sine_with_noise_has_the_crest_factor_and_the_share_of_the_peak_that_it_was_made_with() {
    let (amplitude, sd) = (0.3, 0.01);
    let samples = switched(40.0, 0.0, |_| amplitude / 1.2, sd);
    let peak = samples.iter().fold(0.0_f64, |peak, x| peak.max(x.abs()));
    let rms = (samples.iter().map(|x| x * x).sum::<f64>() / samples.len() as f64).sqrt();
    let analysis = of_integers(&samples, RATE);
    let capture = &analysis.captures[0];
    let converter = capture.converter.as_ref().expect("figures");
    assert_eq!(capture.sample_bits, Some(16));
    assert!((converter.crest_factor_db - 20.0 * (peak / rms).log10()).abs() < 0.05, "{converter:?}");
    assert!((converter.headroom_db + 20.0 * peak.log10()).abs() < 0.01, "{converter:?}");
    // 1 and 3 in phase: the crest is the sum of both amplitudes.
    let hum = converter.hum.as_ref().expect("hum");
    assert!((hum.peak - amplitude).abs() < 0.004, "{hum:?}");
    // The noise alone peaks at about 4 times its RMS.
    let truly = 20.0 * (peak / (4.1 * sd)).log10();
    assert!(hum.gain_least_db <= truly && truly <= hum.gain_most_db, "{truly} dB: {hum:?}");
    assert_eq!(converter.filter_needed.answer, Needed::No);
    assert_eq!(converter.filter_needed.why, WhyNeeded::HeadroomInHand);
}

#[test]
fn hum_that_takes_half_of_full_scale_costs_one_bit() {
    // A slow signal of half of full scale, and hum of the same peak over it.
    let track = PhaseTrack::constant(50.0, 60.0);
    let hum = hum(&track, &[(1, 0.48)], &[0.4], RATE, 60.0);
    let mut noise = Noise::new(4);
    let slow = |t: f64| 0.48 * (TAU * 0.31 * t).sin();
    let samples: Vec<f64> =
        hum.iter().enumerate().map(|(n, x)| x + slow(n as f64 / 1000.0) + 1e-4 * noise.normal()).collect();
    let analysis = of_integers(&samples, RATE);
    let converter = analysis.captures[0].converter.as_ref().expect("figures");
    let hum = converter.hum.as_ref().expect("hum");
    assert!((hum.share_of_peak - 0.5).abs() < 0.01, "{hum:?}");
    assert!(hum.bits_least <= 1.0 && (hum.bits_most - 1.0).abs() < 0.05, "{hum:?}");
    assert_eq!(converter.filter_needed.why, WhyNeeded::HumTakesHeadroom, "{converter:?}");
}

#[test]
fn hum_that_is_cut_off_calls_for_a_filter_and_a_signal_that_is_cut_off_does_not() {
    let clipped = |hum: f64, signal: f64| {
        let mut noise = Noise::new(6);
        let samples: Vec<f64> = (0..40_000)
            .map(|n| f64::from(n) / 1000.0)
            .map(|t| hum * (TAU * 50.02 * t).cos() + signal * (TAU * 3.1 * t).sin() + 1e-3 * noise.normal())
            .collect();
        let analysis = of_integers(&samples, RATE);
        assert!(analysis.captures[0].clipped_samples > 100, "{:?}", analysis.captures);
        let need = analysis.captures[0].converter.clone().expect("figures").filter_needed;
        (need.answer, need.why)
    };
    assert_eq!(clipped(0.8, 0.4), (Needed::Yes, WhyNeeded::Clipping));
    assert_eq!(clipped(0.1, 1.1), (Needed::No, WhyNeeded::RestClips));
}

#[test]
fn audio_is_weighted_and_what_is_no_audio_is_not() {
    let rate = 16_000;
    let mut noise = Noise::new(9);
    let samples: Vec<f64> = (0..10 * rate)
        .map(|n| f64::from(n) / f64::from(rate))
        .map(|t| 0.1 * (TAU * 50.0 * t).cos() + 0.02 * (TAU * 1010.0 * t).sin() + 1e-5 * noise.normal())
        .collect();
    let weighted = of_integers(&samples, rate as u32).captures[0].weighted.expect("audio");
    // 1 kHz weighs 0 dB, and 10 Hz beside it is no order of the hum; −30.2 dB is A at 50 Hz (IEC 61672-1).
    let tone_dbfs = 20.0 * 0.02_f64.log10();
    assert!((weighted.rest_a_dbfs.expect("the rest") - tone_dbfs).abs() < 0.1, "{weighted:?}");
    assert!((weighted.rest_468_dbfs.expect("the rest") - tone_dbfs).abs() < 0.1, "{weighted:?}");
    assert!((weighted.hum_a_dbfs + 50.2).abs() < 0.1, "{weighted:?}");
    assert_eq!(run(RATE, vec![switched(20.0, 0.0, |_| 0.02, 1e-3)]).analysis.captures[0].weighted, None);
}

#[test]
fn an_analysis_written_before_these_figures_is_still_read() {
    let old = r#"{
        "captures": [{"path": "a.wav", "sample_rate_hz": 1000, "channels": 1, "channel": 1, "duration_s": 60.0,
            "full_scale_v": 2.0, "clipped_samples": 0, "peak": 0.4, "mean": 0.0, "rms": 0.1}],
        "mains": {"found": true, "nominal_hz": 50.0, "frequency_hz": 50.01, "frequency_se_hz": 0.001,
            "spread_hz": 0.01, "spread_floor_hz": 0.001, "confidence": 0.9},
        "harmonics": [{"order": 1, "frequency_hz": 50.01, "level_dbfs": -20.0, "rms_v": 0.1, "phase_deg": 3.0,
            "over_floor_db": 60.0}],
        "track": [],
        "causes": [{"cause": "undetermined", "evidence": "1 order", "first_cure": "record again"}]
    }"#;
    let read: Analysis = serde_json::from_str(old).expect("an older analysis");
    assert_eq!(read.harmonics[0].level_se_db, None);
    assert!(read.level_track.is_empty() && read.captures[0].converter.is_none());
    assert_eq!(read.causes[0].confidence, 0.0);
}
