//! Whole recordings through a network: prediction beside measurement, start, files, verdict.

use std::f64::consts::TAU;
use std::path::Path;

use notchwright::analysis::{Analysis, CaptureSummary, Harmonic, Mains, PhaseTrack};
use notchwright::capture::{Capture, MemoryCapture, SampleFormat, WavCapture, WavWriter};
use notchwright::network::{Branch, Circuit, Load, Section, Source, TwoPort};
use notchwright::parts::{Part, PartKind};
use notchwright::plan::{Builds, Centre, Design, KeepBand, LineBrief, Predicted, ReductionTarget};
use notchwright::simulation::{
    SimulateOptions, SimulationError, SimulationRun, Start, insertion_loss_db, simulate,
};
use tempfile::TempDir;

const HUM_HZ: f64 = 49.97;

/// Two shunt traps of 10 H coils: a deep notch at 50 Hz, one at 150 Hz.
fn traps(coil_resistance_ohm: f64) -> Circuit {
    let mut parts = Vec::new();
    let mut sections = Vec::new();
    for (index, (hz, henry)) in [(HUM_HZ, 10.0), (149.0, 1.0)].into_iter().enumerate() {
        let mut coil = Part::ideal(&format!("L{}", index + 1), PartKind::Coil, henry);
        coil.series_resistance_ohm = coil_resistance_ohm;
        parts.push(coil);
        let farad = 1.0 / (henry * (TAU * hz).powi(2));
        parts.push(Part::ideal(&format!("C{}", index + 1), PartKind::Capacitor, farad));
        parts.push(Part::ideal(&format!("R{}", index + 1), PartKind::Resistor, 3000.0));
        let at = index * 3;
        sections.push(Section {
            kind: "shunt trap".to_owned(),
            stages: vec![
                TwoPort::Series { series: Branch::Part(at + 2) },
                TwoPort::Shunt { shunt: Branch::series([Branch::Part(at), Branch::Part(at + 1)]) },
            ],
        });
    }
    Circuit {
        source: Source { resistance_ohm: 350.0, inductance_h: 0.0 },
        load: Load { resistance_ohm: 1e6, capacitance_f: 220e-12 },
        sections,
        parts,
    }
}

fn design(circuit: Circuit) -> Design {
    let flat_loss_db = insertion_loss_db(&circuit, 0.0);
    let predicted = [1, 3].map(|order| {
        let frequency_hz = HUM_HZ * f64::from(order);
        let reduction_db = insertion_loss_db(&circuit, frequency_hz);
        Predicted { order, frequency_hz, reduction_db, reduction_worst_db: 0.0, target_db: Some(20.0) }
    });
    Design {
        met: true,
        summary: "two shunt traps".to_owned(),
        sections: Vec::new(),
        circuit,
        predicted: predicted.to_vec(),
        keep: Vec::new(),
        flat_loss_db,
        trims: Vec::new(),
        builds: Builds { count: 0, seed: 0, meeting_pct: 100.0, band: Vec::new() },
        price: None,
    }
}

fn brief(circuit: &Circuit) -> LineBrief {
    LineBrief {
        line: "weir gauge".to_owned(),
        full_scale_v: 2.0,
        source: circuit.source,
        load: circuit.load,
        keep: vec![KeepBand { from_hz: 0.0, to_hz: 8.0, allowed_db: 1.0 }],
        target: ReductionTarget::ReduceByDb(20.0),
        orders: Some(vec![1, 3]),
        allow_hz: 0.2,
        guard_hz: 5.0,
        centre: Centre::Nominal,
        temperature_from_c: 20.0,
        temperature_to_c: 20.0,
        stock: None,
    }
}

/// What an analyser would have found: these orders, on the only channel or a chosen one.
fn analysis(capture: &dyn Capture, channel: usize, orders: &[u32]) -> Analysis {
    let format = capture.format();
    let harmonics = orders.iter().map(|&order| Harmonic {
        order,
        frequency_hz: HUM_HZ * f64::from(order),
        level_dbfs: -30.0,
        rms_v: None,
        phase_deg: 0.0,
        over_floor_db: 80.0,
        ..Harmonic::default()
    });
    Analysis {
        captures: vec![CaptureSummary {
            path: capture.name().to_owned(),
            sample_rate_hz: format.sample_rate_hz,
            channels: format.channels,
            channel,
            duration_s: format.duration_s(),
            full_scale_v: None,
            clipped_samples: 0,
            ..CaptureSummary::default()
        }],
        mains: Mains {
            found: !orders.is_empty(),
            nominal_hz: Some(50.0),
            frequency_hz: Some(HUM_HZ),
            frequency_se_hz: None,
            spread_hz: None,
            spread_floor_hz: None,
            share_of_time: None,
            confidence: 1.0,
        },
        harmonics: harmonics.collect(),
        ..Analysis::default()
    }
}

/// Uniform noise of this RMS from a seed.
fn noise(seed: u64, count: usize, rms: f64) -> Vec<f64> {
    let mut state = seed;
    let mut next = move || {
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (state >> 33) as f64 / f64::from(1_u32 << 30) - 1.0
    };
    (0..count).map(|_| next() * rms * 3_f64.sqrt()).collect()
}

/// Hum of orders 1 and 3 on an offset, over noise of this RMS.
fn humming(rate_hz: u32, seconds: f64, noise_rms: f64) -> Vec<f64> {
    humming_over(noise(7, (seconds * f64::from(rate_hz)) as usize, noise_rms), rate_hz)
}

fn humming_over(mut samples: Vec<f64>, rate_hz: u32) -> Vec<f64> {
    for (n, sample) in samples.iter_mut().enumerate() {
        let phase = TAU * HUM_HZ * n as f64 / f64::from(rate_hz);
        *sample += 0.05 + 0.3 * (phase + 0.4).cos() + 0.1 * (3.0 * phase - 2.0).cos();
    }
    samples
}

struct Outcome {
    run: SimulationRun,
    filtered: Vec<Vec<f64>>,
    removed: Vec<Vec<f64>>,
}

fn read(path: &Path) -> Vec<Vec<f64>> {
    let mut capture = WavCapture::open(path).expect("opened");
    let mut planes = vec![Vec::new(); capture.format().channels];
    let frames = capture.format().frames as usize;
    capture.read_block(&mut planes, frames).expect("read");
    planes
}

fn outcome(
    capture: &mut dyn Capture,
    circuit: Circuit,
    brief: &LineBrief,
    orders: &[u32],
    channel: usize,
    options: &SimulateOptions,
) -> Result<Outcome, SimulationError> {
    let folder = TempDir::new().expect("folder");
    let (filtered, removed) = (folder.path().join("filtered.wav"), folder.path().join("removed.wav"));
    let analysis = analysis(capture, channel, orders);
    let track = PhaseTrack::constant(HUM_HZ, capture.format().duration_s());
    let mut shares = Vec::new();
    let run = simulate(
        capture,
        &design(circuit),
        brief,
        &analysis,
        (!orders.is_empty()).then_some(&track),
        options,
        &filtered,
        &removed,
        &mut |share| shares.push(share),
    )?;
    assert!(shares.is_sorted() && shares.last().is_some_and(|&share| share == 1.0), "{shares:?}");
    Ok(Outcome { run, filtered: read(&filtered), removed: read(&removed) })
}

#[test]
fn measured_and_predicted_reduction_agree_up_to_60_db() {
    let rate = 4000;
    let frames = 60 * rate as usize;
    // With this noise what a notch of 60 dB leaves of order 1 stands 40 dB over it in 1/T.
    let residual_rms = 0.3 / 2_f64.sqrt() * 1e-3;
    let noise_rms = residual_rms * 1e-2 * (frames as f64 / 2.0).sqrt();
    for (coil_ohm, depth_db) in [(700.0, 20.9), (60.0, 39.2), (5.5, 59.7)] {
        for seed in 1..=4 {
            let circuit = traps(coil_ohm);
            let brief = brief(&circuit);
            let samples = humming_over(noise(seed, frames, noise_rms), rate);
            let mut capture = MemoryCapture::new("made", rate, vec![samples]);
            let options = SimulateOptions::default();
            let got = outcome(&mut capture, circuit, &brief, &[1, 3], 1, &options).expect("simulated");
            let first = &got.run.simulation.residual[0];
            assert!((first.predicted_db - depth_db).abs() < 0.1, "a case of another depth: {first:?}");
            for residual in &got.run.simulation.residual {
                let off = residual.reduction_db - residual.predicted_db;
                assert!(off.abs() < 0.1, "order {}: off by {off} dB: {residual:?}", residual.order);
                assert!(!residual.at_noise_floor);
                assert_eq!(residual.target_db, Some(20.0));
            }
        }
    }
}

#[test]
fn a_line_that_wanders_through_the_null_leaves_its_power_not_its_mean() {
    // ± 0.15 Hz about the null in a slow sine: behind the null the residual turns its sign.
    let (rate, seconds, wander_hz, period_s) = (2000, 120.0, 0.15, 60.0);
    let frequency = |t: f64| HUM_HZ + wander_hz * (TAU * t / period_s).cos();
    let phase = |t: f64| TAU * (HUM_HZ * t + wander_hz * period_s / TAU * (TAU * t / period_s).sin());
    let frames = (seconds * f64::from(rate)) as usize;
    let samples = noise(5, frames, 1e-5).into_iter().enumerate();
    let samples: Vec<f64> =
        samples.map(|(n, noise)| noise + 0.3 * phase(n as f64 / f64::from(rate)).cos()).collect();
    let time_s: Vec<f64> = (0..=1200).map(|n| f64::from(n) * 0.1).collect();
    let track = PhaseTrack {
        phase_rad: time_s.iter().map(|&t| phase(t)).collect(),
        frequency_hz: time_s.iter().map(|&t| frequency(t)).collect(),
        time_s: time_s.clone(),
    };
    let circuit = traps(3.0);
    let power = time_s.iter().map(|&t| circuit.insertion(frequency(t)).norm_sqr()).sum::<f64>();
    let over_time_db = -10.0 * (power / time_s.len() as f64).log10();
    let mut capture = MemoryCapture::new("made", rate, vec![samples]);
    let found = analysis(&capture, 1, &[1]);
    let brief = brief(&circuit);
    let folder = TempDir::new().expect("folder");
    let out = [folder.path().join("filtered.wav"), folder.path().join("removed.wav")];
    let (design, options) = (design(circuit), SimulateOptions::default());
    let run = simulate(
        &mut capture,
        &design,
        &brief,
        &found,
        Some(&track),
        &options,
        &out[0],
        &out[1],
        &mut |_| {},
    )
    .expect("simulated");
    let residual = &run.simulation.residual[0];
    assert!(residual.predicted_db > over_time_db + 10.0, "a deep null: {residual:?}, {over_time_db}");
    let off = residual.reduction_db - over_time_db;
    assert!(off.abs() < 0.5, "{} dB for {over_time_db} dB", residual.reduction_db);
    assert!(run.simulation.notes.iter().any(|note| note.contains("the hum went through")));
}

#[test]
fn a_settled_start_has_no_click_and_a_start_at_rest_rings() {
    let circuit = traps(60.0);
    let brief = brief(&circuit);
    let rate = 4000;
    let steady = |start: Start| {
        let mut capture = MemoryCapture::new("made", rate, vec![humming(rate, 4.0, 0.0)]);
        let options = SimulateOptions { start, ..SimulateOptions::default() };
        outcome(&mut capture, traps(60.0), &brief, &[1, 3], 1, &options).expect("simulated")
    };
    let settled = steady(Start::Settled);
    let gain = |order: f64| circuit.insertion(HUM_HZ * order);
    let expected = |n: usize| {
        let phase = TAU * HUM_HZ * n as f64 / f64::from(rate);
        let (one, three) = (gain(1.0), gain(3.0));
        0.05 * gain(0.0).re
            + 0.3 * one.norm() * (phase + 0.4 + one.arg()).cos()
            + 0.1 * three.norm() * (3.0 * phase - 2.0 + three.arg()).cos()
    };
    for (n, got) in settled.filtered[0].iter().enumerate() {
        // The file is in 32-bit float: steps of 2⁻²⁵ of a value near ½.
        assert!((got - expected(n)).abs() < 1e-6, "sample {n}: {got} for {}", expected(n));
    }
    let at_rest = steady(Start::AtRest);
    let ringing = at_rest.filtered[0].iter().enumerate().take(200);
    let most = ringing.fold(0.0_f64, |most, (n, got)| most.max((got - expected(n)).abs()));
    assert!(most > 0.05, "{most}");
    let late = at_rest.filtered[0][12_000] - expected(12_000);
    assert!(late.abs() < 1e-6, "settled after three seconds: {late:e}");
}

#[test]
fn filtered_and_removed_make_the_input_less_the_flat_loss_on_every_channel() {
    let circuit = traps(60.0);
    let brief = brief(&circuit);
    let rate = 2000;
    let planes = vec![noise(1, 5000, 0.1), humming(rate, 2.5, 1e-3), noise(3, 5000, 0.2)];
    let mut capture = MemoryCapture::new("made", rate, planes.clone());
    let flat = 10_f64.powf(-insertion_loss_db(&circuit, 0.0) / 20.0);
    let options = SimulateOptions::default();
    let got = outcome(&mut capture, circuit, &brief, &[1, 3], 2, &options).expect("simulated");
    assert_eq!(got.run.simulation.channel, 2);
    for (channel, input) in planes.iter().enumerate() {
        let parts = got.filtered[channel].iter().zip(&got.removed[channel]);
        for ((filtered, removed), input) in parts.zip(input) {
            assert!((filtered + removed - flat * input).abs() < 1e-6);
        }
    }
    // The same channel alone comes out the same.
    let mut alone = MemoryCapture::new("made", rate, vec![planes[0].clone()]);
    let options = SimulateOptions::default();
    let circuit = traps(60.0);
    let single = outcome(&mut alone, circuit, &brief, &[1, 3], 1, &options).expect("simulated");
    assert_eq!(single.filtered[0], got.filtered[0]);
}

#[test]
fn files_are_written_as_the_recording_is_stored_unless_asked_otherwise() {
    let folder = TempDir::new().expect("folder");
    let path = folder.path().join("in.wav");
    let mut writer = WavWriter::create(&path, 2000, 1, SampleFormat::I24).expect("created");
    writer.write_block(&[humming(2000, 2.0, 1e-3)]).expect("written");
    writer.finish().expect("finished");
    for (asked, expected) in [(None, SampleFormat::I24), (Some(SampleFormat::F32), SampleFormat::F32)] {
        let mut capture = WavCapture::open(&path).expect("opened");
        let circuit = traps(60.0);
        let brief = brief(&circuit);
        let out = [folder.path().join("filtered.wav"), folder.path().join("removed.wav")];
        let options = SimulateOptions { sample_format: asked, ..SimulateOptions::default() };
        let found = analysis(&capture, 1, &[1, 3]);
        let track = PhaseTrack::constant(HUM_HZ, 2.0);
        let design = design(circuit);
        simulate(
            &mut capture,
            &design,
            &brief,
            &found,
            Some(&track),
            &options,
            &out[0],
            &out[1],
            &mut |_| {},
        )
        .expect("simulated");
        for path in out {
            let written = WavCapture::open(path).expect("opened");
            assert_eq!(written.sample_format(), expected);
            assert_eq!(written.format(), capture.format());
        }
    }
}

#[test]
fn what_misses_the_brief_is_named_with_its_figures() {
    let circuit = traps(700.0);
    let mut brief = brief(&circuit);
    brief.keep[0].allowed_db = 0.001;
    brief.target = ReductionTarget::ReduceByDb(40.0);
    let mut capture = MemoryCapture::new("made", 2000, vec![humming(2000, 10.0, 1e-5)]);
    let options = SimulateOptions::default();
    let got = outcome(&mut capture, circuit, &brief, &[1, 3], 1, &options).expect("simulated");
    let simulation = &got.run.simulation;
    assert!(!simulation.met);
    assert_eq!(simulation.misses.len(), 3, "{:?}", simulation.misses);
    assert!(simulation.misses[0].starts_with("order 1 (49.97 Hz)"), "{:?}", simulation.misses);
    assert!(simulation.misses[2].starts_with("keep band 0 Hz to 8 Hz"), "{:?}", simulation.misses);
}

#[test]
fn of_orders_the_plan_never_saw_only_those_are_asked_for_that_stand_near_the_strongest() {
    let circuit = traps(700.0);
    let brief = LineBrief { orders: None, ..brief(&circuit) };
    let mut samples = humming(2000, 10.0, 1e-6);
    for (n, sample) in samples.iter_mut().enumerate() {
        let phase = TAU * HUM_HZ * n as f64 / 2000.0;
        // 29.5 and 9.5 dB below order 1; 20 dB is asked.
        *sample += 0.01 * (5.0 * phase).cos() + 0.1 * (7.0 * phase).cos();
    }
    let mut capture = MemoryCapture::new("made", 2000, vec![samples]);
    let options = SimulateOptions::default();
    let got = outcome(&mut capture, circuit, &brief, &[1, 3, 5, 7], 1, &options).expect("simulated");
    let asked = |order| got.run.simulation.residual.iter().find(|r| r.order == order).unwrap().target_db;
    assert_eq!([1, 3, 5, 7].map(asked), [Some(20.0), Some(20.0), None, Some(20.0)]);
}

#[test]
fn a_level_to_leave_is_held_against_what_is_left() {
    let circuit = traps(60.0);
    let mut brief = brief(&circuit);
    let before_dbfs = 20.0 * 0.3_f64.log10();
    let loss_db = insertion_loss_db(&circuit, HUM_HZ);
    // 2 V full scale: a sine of 0 dBFS has √2 V RMS.
    let left_v = 0.3 * 2.0 / 2_f64.sqrt() * 10_f64.powf(-loss_db / 20.0);
    brief.orders = Some(vec![1]);
    for (target, met) in [
        (ReductionTarget::LeaveV(left_v * 1.02), true),
        (ReductionTarget::LeaveV(left_v * 0.98), false),
        (ReductionTarget::LeaveDbfs(before_dbfs - loss_db + 0.2), true),
        (ReductionTarget::LeaveDbfs(before_dbfs - loss_db - 0.2), false),
    ] {
        brief.target = target;
        let mut capture = MemoryCapture::new("made", 2000, vec![humming(2000, 10.0, 1e-5)]);
        let options = SimulateOptions::default();
        let got = outcome(&mut capture, traps(60.0), &brief, &[1, 3], 1, &options).expect("simulated");
        assert_eq!(got.run.simulation.met, met, "{target:?}: {:?}", got.run.simulation);
        assert_eq!(got.run.simulation.residual[1].target_db, None, "order 3 is not asked for");
    }
}

#[test]
fn a_residual_in_the_noise_is_an_upper_bound_and_the_prediction_decides() {
    let circuit = traps(3.0);
    let mut brief = brief(&circuit);
    brief.orders = Some(vec![1]);
    for (asked_db, met) in [(60.0, true), (66.0, false)] {
        brief.target = ReductionTarget::ReduceByDb(asked_db);
        let mut bounds = 0;
        for seed in 1..=20 {
            let samples = humming_over(noise(seed, 4000, 0.3), 2000);
            let mut capture = MemoryCapture::new("made", 2000, vec![samples]);
            let options = SimulateOptions::default();
            let got = outcome(&mut capture, traps(3.0), &brief, &[1], 1, &options).expect("simulated");
            let simulation = &got.run.simulation;
            let residual = &simulation.residual[0];
            assert!(residual.at_noise_floor, "{residual:?}");
            bounds += usize::from(residual.reduction_db < residual.predicted_db);
            assert_eq!(simulation.met, met, "{:?}", simulation.misses);
            assert!(simulation.notes.iter().any(|note| note.contains("upper bound")));
        }
        assert!(bounds >= 18, "a bound in {bounds} of 20 recordings");
    }
}

#[test]
fn loss_of_a_band_reads_the_same_on_the_samples_as_from_the_response() {
    let circuit = traps(60.0);
    let mut brief = brief(&circuit);
    brief.keep = vec![KeepBand { from_hz: 300.0, to_hz: 320.0, allowed_db: 12.0 }];
    let mut capture = MemoryCapture::new("made", 1000, vec![noise(11, 300_000, 0.1)]);
    let options = SimulateOptions::default();
    let got = outcome(&mut capture, circuit, &brief, &[], 1, &options).expect("simulated");
    let band = &got.run.simulation.keep[0];
    let middle = insertion_loss_db(&traps(60.0), 310.0);
    let measured = band.measured_db.expect("noise is in the band");
    assert!((measured - middle).abs() < 0.05, "{measured} dB measured, {middle} dB at its middle");
    assert!((band.loss_db - insertion_loss_db(&traps(60.0), 300.0)).abs() < 1e-9, "{band:?}");
    let third = &got.run.simulation.third_octaves[0];
    assert!((third.mid_hz - 316.227_766).abs() < 1e-5);
    let loss = third.before_dbfs - third.after_dbfs;
    assert!((loss - insertion_loss_db(&traps(60.0), third.mid_hz)).abs() < 0.2, "{loss}");
    assert!(got.run.simulation.residual.is_empty() && got.run.simulation.hum_a_weighted_dbfs.is_none());
    assert!(got.run.simulation.misses.iter().any(|miss| miss.contains("no mains hum was found")));
}

#[test]
fn headroom_is_the_peak_before_over_the_peak_after() {
    let circuit = traps(60.0);
    let brief = brief(&circuit);
    let mut capture = MemoryCapture::new("made", 2000, vec![humming(2000, 4.0, 0.0)]);
    let options = SimulateOptions::default();
    let got = outcome(&mut capture, circuit, &brief, &[1, 3], 1, &options).expect("simulated");
    let peak = |planes: &[Vec<f64>]| planes[0].iter().fold(0.0_f64, |peak, x| peak.max(x.abs()));
    let simulation = &got.run.simulation;
    let after_dbfs = 20.0 * peak(&got.filtered).log10();
    assert!((simulation.peak_after_dbfs - after_dbfs).abs() < 1e-4);
    let gained = simulation.peak_before_dbfs - after_dbfs;
    assert!((simulation.headroom_gained_db - gained).abs() < 1e-4);
    assert!(simulation.headroom_gained_db > 10.0, "{}", simulation.headroom_gained_db);
    let hum = simulation.hum_a_weighted_dbfs.expect("hum was found");
    assert!(hum.before - hum.after > 15.0, "{hum:?}");
}

#[test]
fn a_channel_that_is_not_there_is_named() {
    let circuit = traps(60.0);
    let brief = brief(&circuit);
    let mut capture = MemoryCapture::new("weir.wav", 2000, vec![humming(2000, 1.0, 0.0)]);
    let options = SimulateOptions::default();
    let error = outcome(&mut capture, circuit, &brief, &[1], 2, &options).err().expect("refused");
    assert!(matches!(error, SimulationError::NoSuchChannel { channel: 2, channels: 1, .. }), "{error}");
    assert!(error.to_string().contains("weir.wav"), "{error}");
}
