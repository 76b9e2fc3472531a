//! The convolution against the response itself, and against closed forms.

use std::f64::consts::TAU;

use notchwright::network::{Branch, Circuit, Load, Section, Source, TwoPort};
use notchwright::parts::{Part, PartKind};
use notchwright::simulation::{Convolver, Kernel, Past, Tone};
use num_complex::Complex64;
use proptest::prelude::*;

/// A coil and a capacitor across the line behind 350 Ω, loaded with 30 kΩ: a
/// shunt trap at 50 Hz.
fn shunt_trap(coil_resistance_ohm: f64) -> Circuit {
    let mut coil = Part::ideal("L1", PartKind::Coil, 10.0);
    coil.series_resistance_ohm = coil_resistance_ohm;
    let capacitor = Part::ideal("C1", PartKind::Capacitor, 1.0 / (10.0 * (TAU * 50.0).powi(2)));
    Circuit {
        source: Source { resistance_ohm: 3500.0, inductance_h: 0.0 },
        load: Load { resistance_ohm: 30e3, capacitance_f: 220e-12 },
        sections: vec![Section {
            kind: "shunt trap".to_owned(),
            stages: vec![TwoPort::Shunt { shunt: Branch::series([Branch::Part(0), Branch::Part(1)]) }],
        }],
        parts: vec![coil, capacitor],
    }
}

fn filtered(kernel: &Kernel, past: &Past, samples: &[f64], block: usize) -> Vec<f64> {
    let mut convolver = Convolver::new(kernel).after_a_past(past);
    let mut out = Vec::new();
    for part in samples.chunks(block) {
        convolver.push(part, &mut out);
    }
    convolver.finish(|_| 0.0, &mut out);
    assert_eq!(out.len(), samples.len(), "as many samples out as in");
    out
}

fn level(level: f64) -> Past {
    Past { level, tones: Vec::new() }
}

/// A cosine that has always been there.
fn endless(hz: f64, rate: f64) -> Past {
    let tone = Tone { radians: TAU * hz / rate, phasor: Complex64::new(1.0, 0.0) };
    Past { level: 0.0, tones: vec![tone] }
}

#[test]
fn a_settled_tone_comes_out_with_the_insertion_ratio() {
    let circuit = shunt_trap(3.0);
    for rate in [360.0, 8000.0, 48_000.0] {
        let kernel = Kernel::of_circuit(&circuit, rate).expect("kernel");
        let highest = 0.45 * rate;
        for hz in [0.0, 0.05, 1.0, 12.0, 49.9, 50.0, 50.1, 150.0, 0.3 * rate, highest] {
            let tone = |n: f64| Complex64::cis(TAU * hz * n / rate).re;
            let ratio = circuit.insertion(hz);
            let samples: Vec<f64> = (0..40_000).map(|n| tone(f64::from(n))).collect();
            let out = filtered(&kernel, &endless(hz, rate), &samples, 1000);
            // The last few samples see the end coming.
            let worst = out[..39_000].iter().enumerate().fold(0.0_f64, |worst, (n, got)| {
                let expected = (ratio * Complex64::cis(TAU * hz * n as f64 / rate)).re;
                worst.max((got - expected).abs())
            });
            assert!(worst < 1e-6 * ratio.norm(), "{hz} Hz at {rate} Hz: {worst:e} of {:e}", ratio.norm());
        }
    }
}

#[test]
fn a_constant_comes_out_with_the_gain_at_dc() {
    // A divider: 350 Ω to 650 Ω in series, 1 kΩ across.
    let circuit = Circuit {
        source: Source { resistance_ohm: 350.0, inductance_h: 0.0 },
        load: Load { resistance_ohm: 1e4, capacitance_f: 1e-7 },
        sections: vec![Section {
            kind: "divider".to_owned(),
            stages: vec![
                TwoPort::Series { series: Branch::Part(0) },
                TwoPort::Shunt { shunt: Branch::Part(1) },
            ],
        }],
        parts: vec![
            Part::ideal("R1", PartKind::Resistor, 650.0),
            Part::ideal("R2", PartKind::Resistor, 1000.0),
        ],
    };
    let kernel = Kernel::of_circuit(&circuit, 1000.0).expect("kernel");
    let out = filtered(&kernel, &level(0.75), &[0.75; 5000], 512);
    let expected = 0.75 * circuit.insertion(0.0).re;
    // What the kernel leaves out of its tail, 1e-12 of the largest response, is all there may be.
    let worst = out[..4000].iter().fold(0.0_f64, |worst, got| worst.max((got - expected).abs()));
    assert!(worst < 1e-12, "off by {worst:e}");
}

#[test]
fn ringing_follows_the_closed_form_of_one_section() {
    // A lossy resonance: the insertion ratio is 1 − (ω₀/Q) s / (s² + (ω₀/Q) s + ω₀²), whose
    // answer to a step at t = 0 is 1 − (ω₀/Q)/ω_d · e^(−αt) sin ω_d t, α = ω₀/2Q, ω_d² = ω₀² − α².
    let (f0, q, rate) = (50.0, 6.0, 48_000.0);
    let w0 = TAU * f0;
    let ratio = |hz: f64| {
        let s = Complex64::new(0.0, TAU * hz);
        let through = s * s + w0 * w0;
        through / (through + s * w0 / q)
    };
    let kernel = Kernel::new(ratio, rate).expect("kernel");
    let (alpha, wd) = (w0 / (2.0 * q), w0 * (1.0 - 1.0 / (4.0 * q * q)).sqrt());
    // A tone switched on: e^(jωt) less what each pole leaves of it, by partial fractions.
    let hz = 62.0;
    let s = Complex64::new(0.0, TAU * hz);
    let poles = [Complex64::new(-alpha, wd), Complex64::new(-alpha, -wd)];
    let switched = |t: f64| {
        let mut sum = ratio(hz) * (s * t).exp();
        for (p, other) in [(poles[0], poles[1]), (poles[1], poles[0])] {
            sum += (p * p + w0 * w0) / ((p - other) * (p - s)) * (p * t).exp();
        }
        sum.im
    };
    // The sine starts at a zero crossing, on a sample.
    let samples: Vec<f64> =
        (0..30_000).map(|n| (TAU * hz * (f64::from(n) - 500.0) / rate).sin() * f64::from(n >= 500)).collect();
    let out = filtered(&kernel, &Past::default(), &samples, 4096);
    let peak = out.iter().fold(0.0_f64, |peak, sample| peak.max(sample.abs()));
    for (n, got) in out.iter().enumerate().take(29_000).skip(520) {
        let expected = switched((n as f64 - 500.0) / rate);
        assert!((got - expected).abs() < 1e-4 * peak, "sample {n}: {got} for {expected}");
    }
    let before = out[..480].iter().fold(0.0_f64, |most, sample| most.max(sample.abs()));
    assert!(before < 1e-4 * peak, "nothing comes before its cause: {before:e}");
}

#[test]
fn a_kernel_as_long_as_its_ringing_loses_nothing_of_it() {
    let circuit = shunt_trap(60.0);
    let short = Kernel::of_circuit(&circuit, 8000.0).expect("kernel");
    let taps = short.taps();
    // The transform of the taps alone is the response, at any frequency.
    for hz in [0.0, 0.37, 49.3, 50.0, 61.7, 1234.5, 3599.0] {
        let sum: Complex64 = taps
            .iter()
            .enumerate()
            .map(|(n, tap)| tap * Complex64::cis(-TAU * hz * (n as f64 - short.before() as f64) / 8000.0))
            .sum();
        let error = (sum - circuit.insertion(hz)).norm();
        assert!(error < 1e-10, "{hz} Hz: off by {error:e}");
    }
}

#[test]
fn poles_slower_than_any_fft_run_as_recursions_and_stay_exact() {
    // A coupling capacitor with a time constant of 100 s, then the trap, on a coil of Q 30.
    let mut circuit = shunt_trap(100.0);
    circuit.parts.push(Part::ideal("C2", PartKind::Capacitor, 100e-6));
    circuit.load.resistance_ohm = 1e6;
    circuit.sections[0].stages.push(TwoPort::Series { series: Branch::Part(2) });
    for rate in [360.0, 8000.0, 48_000.0, 192_000.0] {
        let kernel = Kernel::of_circuit(&circuit, rate).expect("kernel");
        assert!(kernel.recursions() > 0, "{kernel:?}");
        assert!(kernel.gain_at_dc().abs() < 1e-12, "a capacitor in series blocks DC");
        for hz in [0.0, 0.001, 0.05, 1.0, 49.9, 50.0, 150.0, 0.3 * rate] {
            let ratio = circuit.insertion(hz);
            let samples: Vec<f64> = (0..40_000).map(|n| (TAU * hz * f64::from(n) / rate).cos()).collect();
            let out = filtered(&kernel, &endless(hz, rate), &samples, 5000);
            let worst = out[..39_000].iter().enumerate().fold(0.0_f64, |worst, (n, got)| {
                let expected = (ratio * Complex64::cis(TAU * hz * n as f64 / rate)).re;
                worst.max((got - expected).abs())
            });
            let allowed = 1e-6 * ratio.norm().max(1e-5);
            assert!(worst < allowed, "{hz} Hz at {rate} Hz: {worst:e} of {:e}", ratio.norm());
        }
    }
}

/// Samples from a seed, uniform over ±1.
fn noise(seed: u64, count: usize) -> Vec<f64> {
    let mut state = seed | 1;
    (0..count)
        .map(|_| {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            (state >> 33) as f64 / f64::from(1_u32 << 30) - 1.0
        })
        .collect()
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(24))]

    #[test]
    fn the_sum_of_two_signals_comes_out_as_the_sum_of_both(
        a in -2.0_f64..2.0,
        b in -2.0_f64..2.0,
        seed in any::<u64>(),
    ) {
        let circuit = shunt_trap(300.0);
        let kernel = Kernel::of_circuit(&circuit, 2000.0).expect("kernel");
        let (x, y) = (noise(seed, 6000), noise(seed ^ 0x5555, 6000));
        let both: Vec<f64> = x.iter().zip(&y).map(|(x, y)| a * x + b * y).collect();
        let through = |samples: &[f64]| filtered(&kernel, &Past::default(), samples, 700);
        let (fx, fy, fboth) = (through(&x), through(&y), through(&both));
        for ((x, y), both) in fx.iter().zip(&fy).zip(&fboth) {
            prop_assert!((a * x + b * y - both).abs() < 1e-12);
        }
    }

    #[test]
    fn the_size_of_the_blocks_does_not_show_in_any_bit(
        sizes in prop::collection::vec(1_usize..9000, 1..6),
        length in 1_usize..30_000,
        seed in any::<u64>(),
    ) {
        let circuit = shunt_trap(300.0);
        let kernel = Kernel::of_circuit(&circuit, 2000.0).expect("kernel");
        let samples = noise(seed, length);
        let at_once = filtered(&kernel, &level(0.5), &samples, length);
        let mut convolver = Convolver::new(&kernel).after_a_past(&level(0.5));
        let mut out = Vec::new();
        let mut rest = samples.as_slice();
        for size in sizes.iter().cycle() {
            let (now, later) = rest.split_at((*size).min(rest.len()));
            convolver.push(now, &mut out);
            rest = later;
            if rest.is_empty() {
                break;
            }
        }
        convolver.finish(|_| 0.0, &mut out);
        prop_assert_eq!(out, at_once);
    }
}
