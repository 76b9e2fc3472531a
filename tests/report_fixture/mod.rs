//! A tide gauge with a notched low-pass, built from the data the rooms hand on:
//! what the report's tests look at.
#![allow(dead_code)]

use std::f64::consts::TAU;

use notchwright::analysis::*;
use notchwright::capture::MemoryCapture;
use notchwright::network::{Branch, Circuit, Load, Section, Source, TwoPort};
use notchwright::parts::{Part, PartKind};
use notchwright::plan::*;
use notchwright::report::{Excerpt, Material, Recordings};
use notchwright::simulation::*;
use rand::{RngExt, SeedableRng};
use rand_xoshiro::Xoshiro256PlusPlus;

pub const RATE_HZ: u32 = 1000;
const SECONDS: f64 = 60.0;
const FULL_SCALE_V: f64 = 2.0;
const MEAN_HZ: f64 = 50.013;
const WORST_SHARE: f64 = 0.05;

/// Order, level in dBFS.
const HUM: [(u32, f64); 5] = [(1, -24.0), (3, -36.0), (5, -46.0), (7, -55.0), (9, -61.0)];

/// Everything a report is made from, owned.
#[derive(Clone)]
pub struct Findings {
    pub analysis: Analysis,
    pub plan: Plan,
    pub simulation: Simulation,
    pub before: Spectrum,
    pub after: Spectrum,
    pub excerpt: Option<Excerpt>,
}

impl Findings {
    pub fn material(&self) -> Material<'_> {
        Material {
            analysis: &self.analysis,
            plan: &self.plan,
            simulation: &self.simulation,
            spectrum_before: &self.before,
            spectrum_after: &self.after,
            excerpt: self.excerpt.as_ref(),
        }
    }
}

fn part(reference: &str, kind: PartKind, value_si: f64, value: &str, tolerance_pct: f64) -> Part {
    Part { value: value.to_owned(), tolerance_pct, ..Part::ideal(reference, kind, value_si) }
}

fn circuit() -> Circuit {
    let film = |reference: &str, value_si: f64, value: &str, price: f64| Part {
        material: Some("polypropylene film".to_owned()),
        voltage_limit_v: Some(63.0),
        price: Some(price),
        drift_per_k: -250e-6,
        ..part(reference, PartKind::Capacitor, value_si, value, 1.0)
    };
    let coil = Part {
        series_resistance_ohm: 300.0,
        series_resistance_drift_per_k: 0.0039,
        drift_per_k: 150e-6,
        material: Some("laminated core".to_owned()),
        current_limit_a: Some(5e-3),
        number: Some("OWN-COIL-10H".to_owned()),
        price: Some(18.50),
        ..part("L1", PartKind::Coil, 10.0, "10 H", 3.0)
    };
    Circuit {
        source: Source { resistance_ohm: 350.0, inductance_h: 0.0 },
        load: Load { resistance_ohm: 1e6, capacitance_f: 220e-12 },
        sections: vec![Section {
            kind: "notched low-pass".to_owned(),
            stages: vec![
                TwoPort::Shunt { shunt: Branch::Part(0) },
                TwoPort::Series { series: Branch::parallel([Branch::Part(1), Branch::Part(2)]) },
                TwoPort::Shunt { shunt: Branch::Part(3) },
            ],
        }],
        parts: vec![
            film("C1", 36e-6, "36 µF", 6.40),
            coil,
            film("C2", 1.0 / ((TAU * 50.0).powi(2) * 10.0), "1.01 µF", 0.60),
            film("C3", 18e-6, "18 µF", 3.80),
        ],
    }
}

fn gain_db(circuit: &Circuit, frequency_hz: f64) -> f64 {
    20.0 * circuit.insertion(frequency_hz).norm().log10()
}

/// A build: every part off within its tolerance, the tank trimmed to the
/// mains within 0.3 %.
fn build(circuit: &Circuit, random: &mut Xoshiro256PlusPlus) -> Circuit {
    let mut built = circuit.clone();
    let celsius = random.random_range(10.0..35.0);
    for part in &mut built.parts {
        let deviation = part.tolerance_pct / 100.0 * random.random_range(-1.0..1.0);
        *part = part.as_built(deviation, celsius);
    }
    let residue: f64 = random.random_range(-0.003..0.003);
    built.parts[2].value_si = (1.0 + residue) / ((TAU * 50.0).powi(2) * built.parts[1].value_si);
    built
}

fn sorted(values: impl Iterator<Item = f64>) -> Vec<f64> {
    let mut values: Vec<f64> = values.collect();
    values.sort_by(f64::total_cmp);
    values
}

fn quantile(sorted: &[f64], share: f64) -> f64 {
    sorted[((sorted.len() - 1) as f64 * share).round() as usize]
}

fn band(circuit: &Circuit, builds: &[Circuit]) -> Vec<BandPoint> {
    let mut grid: Vec<f64> = (0..=240).map(|n| 0.1 * 5000.0_f64.powf(n as f64 / 240.0)).collect();
    grid.extend((-8..=8).map(|n| 50.0 + 0.05 * f64::from(n)));
    grid.sort_by(f64::total_cmp);
    grid.into_iter()
        .map(|frequency_hz| {
            let gains = sorted(builds.iter().map(|b| gain_db(b, frequency_hz)));
            BandPoint {
                frequency_hz,
                nominal_db: gain_db(circuit, frequency_hz),
                low_db: quantile(&gains, 0.025),
                high_db: quantile(&gains, 0.975),
            }
        })
        .collect()
}

fn design(summary: &str, circuit: Circuit) -> Design {
    let mut random = Xoshiro256PlusPlus::seed_from_u64(7);
    let builds: Vec<Circuit> = (0..200).map(|_| build(&circuit, &mut random)).collect();
    let least = |build: &Circuit, order: f64| {
        [49.8, 50.0, 50.2].into_iter().map(|f| -gain_db(build, f * order)).fold(f64::INFINITY, f64::min)
    };
    let predicted: Vec<Predicted> = [1, 3, 5]
        .into_iter()
        .map(|order| Predicted {
            order,
            frequency_hz: MEAN_HZ * f64::from(order),
            reduction_db: -gain_db(&circuit, MEAN_HZ * f64::from(order)),
            reduction_worst_db: quantile(
                &sorted(builds.iter().map(|b| least(b, f64::from(order)))),
                WORST_SHARE,
            ),
            target_db: (order <= 3).then_some(40.0),
        })
        .collect();
    let loss = |circuit: &Circuit| {
        (1..=120)
            .map(|n| -gain_db(circuit, f64::from(n) * 0.1))
            .max_by(|a, b| a.abs().total_cmp(&b.abs()))
            .unwrap()
    };
    let losses = sorted(builds.iter().map(loss));
    let loss_worst_db = quantile(&losses, 1.0 - WORST_SHARE);
    let meeting =
        builds.iter().filter(|b| loss(b) <= 0.5 && least(b, 1.0) >= 40.0 && least(b, 3.0) >= 40.0).count();
    let meeting_pct = 100.0 * meeting as f64 / builds.len() as f64;
    let price = circuit.parts.iter().map(|p| p.price).sum();
    Design {
        met: meeting_pct >= 95.0,
        summary: summary.to_owned(),
        sections: vec![SectionSummary {
            kind: "notched low-pass".to_owned(),
            order: Some(1),
            notch_hz: Some(50.0),
            q: None,
            depth_db: Some(-gain_db(&circuit, 50.0)),
            parts: circuit.parts.iter().map(|p| p.reference.clone()).collect(),
            notches: Vec::new(),
        }],
        predicted,
        keep: vec![KeepResult {
            from_hz: 0.0,
            to_hz: 12.0,
            allowed_db: 0.5,
            loss_db: loss(&circuit),
            loss_worst_db,
            judged_share: 1.0,
        }],
        flat_loss_db: -gain_db(&circuit, 0.01),
        trims: vec![Trim {
            step: 1,
            part: "C2".to_owned(),
            method: "pad".to_owned(),
            from_si: 0.95e-6,
            to_si: 1.10e-6,
            frequency_hz: 50.0,
            aim: "least output".to_owned(),
            residue: 0.003,
            instruction:
                "Set the generator to 50.00 Hz and add 1 nF to 47 nF beside C2 until the output is least."
                    .to_owned(),
        }],
        builds: Builds { count: 200, seed: 7, meeting_pct, band: band(&circuit, &builds) },
        price,
        circuit,
    }
}

fn tones(gain: impl Fn(f64) -> (f64, f64), noise: f64) -> Vec<f64> {
    let mut random = Xoshiro256PlusPlus::seed_from_u64(3);
    let signal = [(0.02, 0.25, 0.3), (0.22, 0.06, 1.0), (0.61, 0.03, 2.0), (3.1, 0.004, 0.0)];
    (0..(SECONDS * f64::from(RATE_HZ)) as usize)
        .map(|n| {
            let t = n as f64 / f64::from(RATE_HZ);
            let wander = 0.35 * (TAU * t / 45.0).sin();
            let slow: f64 = signal
                .iter()
                .map(|(hz, a, phase)| {
                    let (g, p) = gain(*hz);
                    a * g * (TAU * hz * t + phase + p).cos()
                })
                .sum();
            let swell = 1.0 + 0.3 * (-((t - 40.0) / 6.0).powi(2)).exp();
            let hum: f64 = HUM
                .iter()
                .map(|&(order, level)| {
                    let k = f64::from(order);
                    let (g, p) = gain(MEAN_HZ * k);
                    swell * g * 10_f64.powf(level / 20.0) * (TAU * k * MEAN_HZ * t + k * wander + p).cos()
                })
                .sum();
            slow + hum + noise * (random.random::<f64>() - 0.5)
        })
        .collect()
}

/// Welch's mean of windowed periodograms (Hann), as levels of lines.
pub fn spectrum(samples: &[f64]) -> Spectrum {
    let length = 8192;
    let fft = realfft::RealFftPlanner::<f64>::new().plan_fft_forward(length);
    let window: Vec<f64> = (0..length).map(|n| 0.5 - 0.5 * (TAU * n as f64 / length as f64).cos()).collect();
    let mut power = vec![0.0; length / 2 + 1];
    let blocks = samples.len() / length;
    for block in 0..blocks {
        let mut input: Vec<f64> =
            samples[block * length..][..length].iter().zip(&window).map(|(s, w)| s * w).collect();
        let mut output = fft.make_output_vec();
        fft.process(&mut input, &mut output).unwrap();
        for (sum, bin) in power.iter_mut().zip(&output) {
            *sum += bin.norm_sqr() / blocks as f64;
        }
    }
    let scale = (4.0 / length as f64).powi(2);
    let resolution_hz = f64::from(RATE_HZ) / length as f64;
    Spectrum {
        frequency_hz: (0..power.len()).map(|n| n as f64 * resolution_hz).collect(),
        level_dbfs: power.iter().map(|p| 10.0 * (p * scale).log10()).collect(),
        resolution_hz,
    }
}

/// The plan meets its brief, and so does the recording.
pub fn tide_gauge() -> Findings {
    static MADE: std::sync::OnceLock<Findings> = std::sync::OnceLock::new();
    MADE.get_or_init(make_tide_gauge).clone()
}

fn make_tide_gauge() -> Findings {
    let design_chosen = design("notched low-pass, 1 coil, 4 parts", circuit());
    let chosen = design_chosen.circuit.clone();
    let through = |f: f64| {
        let z = chosen.insertion(f);
        (z.norm(), z.arg())
    };
    let flat = chosen.insertion(0.01).norm();
    let before = tones(|_| (1.0, 0.0), 2e-4);
    let after = tones(through, 2e-6);
    let removed: Vec<f64> = before.iter().zip(&after).map(|(b, a)| b * flat - a).collect();

    let harmonics: Vec<Harmonic> = HUM
        .iter()
        .map(|&(order, level_dbfs)| Harmonic {
            order,
            frequency_hz: MEAN_HZ * f64::from(order),
            level_dbfs,
            rms_v: Some(10_f64.powf(level_dbfs / 20.0) * FULL_SCALE_V / 2_f64.sqrt()),
            phase_deg: 37.0 * f64::from(order) - 180.0,
            over_floor_db: level_dbfs + 112.0,
            ..Harmonic::default()
        })
        .collect();
    let residual: Vec<Residual> = HUM
        .iter()
        .map(|&(order, before_dbfs)| {
            let frequency_hz = MEAN_HZ * f64::from(order);
            let predicted_db = -gain_db(&chosen, frequency_hz);
            let reduction_db = (predicted_db + 0.04).min(before_dbfs + 118.0);
            Residual {
                order,
                frequency_hz,
                before_dbfs,
                after_dbfs: before_dbfs - reduction_db,
                reduction_db,
                predicted_db,
                target_db: (order <= 3).then_some(40.0),
                at_noise_floor: reduction_db < predicted_db,
            }
        })
        .collect();
    let mut alternatives = vec![
        design("notched low-pass, 1 coil of 5 H, 4 parts", circuit()),
        design("bridged-T and low-pass, 1 coil, 8 parts", circuit()),
        design("twin-T at order 1, no coil, 6 parts", circuit()),
    ];
    alternatives[2].met = false;
    alternatives[2].builds.meeting_pct = 0.0;
    let simulation = Simulation {
        met: true,
        misses: vec![],
        capture: "tide-gauge.wav".to_owned(),
        channel: 1,
        keep: vec![KeepMeasured {
            from_hz: 0.0,
            to_hz: 12.0,
            allowed_db: 0.5,
            loss_db: design_chosen.keep[0].loss_db,
            measured_db: Some(0.11),
        }],
        third_octaves: [0.2, 0.251, 0.501, 0.631, 3.16]
            .iter()
            .map(|&mid_hz| ThirdOctave { mid_hz, before_dbfs: -30.0 - mid_hz, after_dbfs: -30.1 - mid_hz })
            .collect(),
        residual,
        settling_s: 0.31,
        group_delay_spread_s: 4.1e-3,
        group_delay_s: 21.3e-3,
        headroom_gained_db: 1.6,
        peak_before_dbfs: -8.2,
        peak_after_dbfs: -9.8,
        hum_a_weighted_dbfs: Some(BeforeAfter { before: -51.0, after: -98.4 }),
        hum_468_weighted_dbfs: Some(BeforeAfter { before: -53.1, after: -101.2 }),
        notes: vec!["The start is settled: the hum and the mean were extended backwards.".to_owned()],
    };
    let track: Vec<TrackPoint> = (0..60)
        .map(|n| {
            let time_s = f64::from(n) + 0.5;
            let frequency_hz =
                MEAN_HZ + 0.35 / 45.0 * (TAU * time_s / 45.0).cos() + 0.004 * (time_s * 1.9).sin();
            TrackPoint { time_s, frequency_hz, se_hz: 0.002 + 0.003 * f64::from(n % 7) / 7.0 }
        })
        .collect();
    let level_track = (0..60)
        .map(|n| {
            let time_s = f64::from(n) + 0.5;
            let level_dbfs = if time_s < 38.4 { -24.6 } else { -22.3 } + 0.2 * (time_s * 2.3).sin();
            LevelPoint { time_s, level_dbfs }
        })
        .collect();
    let analysis = Analysis {
        captures: vec![CaptureSummary {
            path: "demo-audio/tide-gauge.wav".to_owned(),
            sample_rate_hz: RATE_HZ,
            channels: 1,
            channel: 1,
            duration_s: SECONDS,
            full_scale_v: Some(FULL_SCALE_V),
            clipped_samples: 0,
            peak: 0.39,
            mean: 0.01,
            rms: 0.2,
            ..CaptureSummary::default()
        }],
        mains: Mains {
            found: true,
            nominal_hz: Some(50.0),
            frequency_hz: Some(MEAN_HZ),
            frequency_se_hz: Some(2.1e-5),
            spread_hz: Some(0.011),
            spread_floor_hz: Some(0.0016),
            share_of_time: None,
            confidence: 0.9999,
        },
        harmonics,
        track,
        causes: vec![
            Cause {
                cause: "Earth loop or shared return".to_owned(),
                evidence: "fundamental with falling odd orders: order 3 is 12 dB below order 1, order 5 is 22 dB below"
                    .to_owned(),
                first_cure: "earth the screen at one end only, or isolate the transmitter; never lift a protective earth"
                    .to_owned(),
                confidence: 0.72,
                look_first: "every place where the screen meets earth".to_owned(),
                tell_apart: "Unplug the second device: an earth loop's hum falls".to_owned(),
            },
            Cause {
                cause: "Magnetic pick-up from pump motors".to_owned(),
                evidence: "the level swells by 2.3 dB within the recording".to_owned(),
                first_cure: "move the cable away from the motor leads, twist it".to_owned(),
                ..Cause::default()
            },
        ],
        level_track,
        level_changes: vec![LevelChange {
            time_s: 38.4,
            over_s: 0.0,
            order: 1,
            from_dbfs: -25.1,
            to_dbfs: -22.8,
            orders: vec![1, 3],
        }],
        other_supplies: vec![],
        folding: vec![],
        notes: vec![
            "60 s see little of what a grid does: EN 50160 allows 50 Hz ± 1 % for 99.5 % of a year.".to_owned(),
        ],
    };
    let plan = Plan {
        brief: LineBrief {
            line: "Sluice house tide gauge, pressure cell 2".to_owned(),
            full_scale_v: FULL_SCALE_V,
            source: chosen.source,
            load: chosen.load,
            keep: vec![KeepBand { from_hz: 0.0, to_hz: 12.0, allowed_db: 0.5 }],
            target: ReductionTarget::ReduceByDb(40.0),
            orders: Some(vec![1, 3]),
            allow_hz: 0.2,
            guard_hz: 5.0,
            centre: Centre::Nominal,
            temperature_from_c: 10.0,
            temperature_to_c: 35.0,
            stock: Some("bench-stock.yaml".to_owned()),
        },
        nominal_hz: 50.0,
        mean_hz: MEAN_HZ,
        design_spread_hz: 0.2,
        centre_hz: 50.0,
        q_windows: vec![
            QWindow { order: 1, q_min: 1.42, q_max: 0.1, q_chosen: None, closed_by: Some("coil".to_owned()) },
            QWindow { order: 3, q_min: 0.37, q_max: f64::INFINITY, q_chosen: None, closed_by: None },
        ],
        obstacles: vec![],
        alternatives,
        notes: vec!["The coil is an aerial: 1 µT at 50 Hz induces 47 µV in 1500 turns on 1 cm².".to_owned()],
        design: design_chosen,
    };
    let mut recordings = [("before", before.clone()), ("after", after.clone()), ("removed", removed)]
        .map(|(name, samples)| MemoryCapture::new(name, RATE_HZ, vec![samples]));
    let [ref mut a, ref mut b, ref mut c] = recordings;
    let hum: Vec<f64> = HUM.iter().map(|(order, _)| MEAN_HZ * f64::from(*order)).collect();
    let excerpt = Excerpt::take(Recordings { before: a, after: b, removed: c }, 1, &hum).unwrap();
    Findings {
        analysis,
        plan,
        simulation,
        before: spectrum(&before),
        after: spectrum(&after),
        excerpt: Some(excerpt),
    }
}

/// A recording on which nothing was found, and a plan that asks and offers nothing.
pub fn nothing_found() -> Findings {
    let mut findings = tide_gauge();
    let mains = &mut findings.analysis.mains;
    (mains.found, mains.nominal_hz, mains.frequency_hz, mains.frequency_se_hz) = (false, None, None, None);
    (mains.spread_hz, mains.spread_floor_hz, mains.confidence) = (None, None, 0.02);
    findings.analysis.harmonics.clear();
    findings.analysis.track.clear();
    findings.analysis.causes.clear();
    findings.simulation.residual.clear();
    findings.plan.design.predicted.clear();
    findings.plan.design.trims.clear();
    findings.plan.q_windows.clear();
    findings.plan.alternatives.clear();
    findings.excerpt = None;
    findings
}

/// Hum that lies below what the brief would leave: a plan without parts.
pub fn quiet_enough() -> Findings {
    let mut findings = tide_gauge();
    let design = &mut findings.plan.design;
    design.summary = "no filter".to_owned();
    design.circuit.sections.clear();
    design.circuit.parts.clear();
    design.sections.clear();
    design.predicted.clear();
    design.trims.clear();
    design.builds.band.clear();
    findings.plan.q_windows.clear();
    findings.plan.alternatives.clear();
    (findings.plan.design.met, findings.simulation.met) = (true, true);
    findings
}

/// Figures that are not figures wherever one can be, and texts that would be
/// markup if they were not escaped.
pub fn hostile() -> Findings {
    let mut findings = tide_gauge();
    let script = "<script>alert(\"1\")</script> & <b>'x'</b>";
    findings.plan.brief.line = script.to_owned();
    findings.plan.notes.push(script.to_owned());
    findings.plan.obstacles.push(script.to_owned());
    findings.plan.design.summary = script.to_owned();
    findings.plan.design.circuit.parts[0].material = Some(script.to_owned());
    findings.plan.design.circuit.parts[0].price = None;
    findings.plan.design.price = None;
    findings.analysis.notes.push(script.to_owned());
    findings.analysis.causes[0].evidence = script.to_owned();
    findings.analysis.captures[0].path = script.to_owned();
    findings.simulation.met = false;
    findings.simulation.misses.push(script.to_owned());
    findings.simulation.settling_s = f64::INFINITY;
    findings.simulation.group_delay_s = f64::NAN;
    findings.simulation.peak_before_dbfs = f64::NEG_INFINITY;
    findings.simulation.headroom_gained_db = f64::NAN;
    findings.simulation.keep[0].measured_db = Some(f64::NAN);
    findings.simulation.third_octaves[0].after_dbfs = f64::NEG_INFINITY;
    findings.simulation.residual[0].after_dbfs = f64::NEG_INFINITY;
    findings.simulation.residual[0].reduction_db = f64::INFINITY;
    findings.simulation.residual[1].before_dbfs = f64::NAN;
    findings.plan.design.predicted[0].reduction_db = f64::INFINITY;
    findings.plan.design.predicted[1].reduction_worst_db = f64::NAN;
    findings.plan.design.keep[0].loss_worst_db = f64::NAN;
    findings.plan.design.builds.band[3].low_db = f64::NEG_INFINITY;
    findings.plan.design.builds.band[9].high_db = f64::NAN;
    findings.plan.design.flat_loss_db = f64::NAN;
    findings.plan.q_windows[0].q_max = f64::NAN;
    findings.analysis.mains.frequency_se_hz = Some(f64::NAN);
    findings.analysis.mains.spread_hz = Some(f64::INFINITY);
    findings.analysis.harmonics[2].level_dbfs = f64::NEG_INFINITY;
    findings.analysis.track[5].se_hz = f64::NAN;
    findings.analysis.track[6].frequency_hz = f64::NAN;
    findings.before.level_dbfs[10] = f64::NEG_INFINITY;
    findings.after.level_dbfs[11] = f64::NAN;
    findings
}
