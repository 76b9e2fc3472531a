//! Published figures of notch networks and of thermal noise.

use std::f64::consts::TAU;

use notchwright::network::{Branch, Circuit, Load, Section, Source, TwoPort};
use notchwright::parts::{Part, PartKind};

fn series(branch: Branch) -> TwoPort {
    TwoPort::Series { series: branch }
}

fn shunt(branch: Branch) -> TwoPort {
    TwoPort::Shunt { shunt: branch }
}

fn resistor(ohm: f64) -> Part {
    Part::ideal("R", PartKind::Resistor, ohm)
}

fn capacitor(farad: f64) -> Part {
    Part::ideal("C", PartKind::Capacitor, farad)
}

fn coil(henry: f64, ohm: f64) -> Part {
    Part { series_resistance_ohm: ohm, ..Part::ideal("L", PartKind::Coil, henry) }
}

fn circuit(source_ohm: f64, load_ohm: f64, stages: Vec<TwoPort>, parts: Vec<Part>) -> Circuit {
    Circuit {
        source: Source { resistance_ohm: source_ohm, inductance_h: 0.0 },
        load: Load { resistance_ohm: load_ohm, capacitance_f: 0.0 },
        sections: vec![Section { kind: "test".to_owned(), stages }],
        parts,
    }
}

/// Part 0 across a tee of parts 1 (arm), 2 (down), 3 (arm).
fn bridged_tee() -> Vec<TwoPort> {
    let tee = vec![series(Branch::Part(1)), shunt(Branch::Part(2)), series(Branch::Part(3))];
    vec![TwoPort::Beside { beside: vec![vec![series(Branch::Part(0))], tee] }]
}

/// A bridged-T for `null_hz` with the resistance that undoes the coil's loss.
fn tuttle(source_ohm: f64, load_ohm: f64, null_hz: f64, henry: f64, quality: f64) -> Circuit {
    let omega = TAU * null_hz;
    let farad = 2.0 / (henry * omega.powi(2));
    let loss = omega * henry / quality;
    let down = omega * henry * quality / 4.0;
    let parts = vec![coil(henry, loss), capacitor(farad), resistor(down), capacitor(farad)];
    circuit(source_ohm, load_ohm, bridged_tee(), parts)
}

fn twin_tee(source_ohm: f64, load_ohm: f64, ohm: f64, farad: f64) -> Circuit {
    let tee = |first: usize| {
        vec![series(Branch::Part(first)), shunt(Branch::Part(first + 1)), series(Branch::Part(first + 2))]
    };
    let parts = vec![
        resistor(ohm),
        capacitor(2.0 * farad),
        resistor(ohm),
        capacitor(farad),
        resistor(ohm / 2.0),
        capacitor(farad),
    ];
    circuit(source_ohm, load_ohm, vec![TwoPort::Beside { beside: vec![tee(0), tee(3)] }], parts)
}

/// Loaded Q by the width between the −3 dB points about `null_hz`, found by bisection.
fn quality_by_width(circuit: &Circuit, null_hz: f64) -> f64 {
    let edge = |mut inside: f64, mut outside: f64| {
        for _ in 0..200 {
            let middle = f64::midpoint(inside, outside);
            let below = circuit.transfer(middle).norm_sqr() < 0.5;
            if below { inside = middle } else { outside = middle }
        }
        inside
    };
    null_hz / (edge(null_hz, 100.0 * null_hz) - edge(null_hz, null_hz / 100.0))
}

/// Tuttle, "Bridged-T and parallel-T null circuits for measurements at radio
/// frequencies", Proc. IRE 28 (1940), pp. 23–29: ω₀² = 2/LC with R = L/(2Cr)
/// (volume and title from memory).
#[test]
fn the_bridged_t_nulls_at_the_root_of_two_over_lc_in_spite_of_its_coils_loss() {
    for quality in [3.0, 8.0, 30.0] {
        for (source, load) in [(50.0, 1e5), (600.0, 600.0), (1e4, 1e6)] {
            let circuit = tuttle(source, load, 50.0, 1.0, quality);
            let (coil, capacitor, down) = (&circuit.parts[0], circuit.parts[1].value_si, &circuit.parts[2]);
            let by_formula = coil.value_si / (2.0 * capacitor * coil.series_resistance_ohm);
            assert!((down.value_si / by_formula - 1.0).abs() < 1e-12);
            assert!(circuit.transfer(50.0).norm() < 1e-13, "Q_L {quality}, {source} Ω, {load} Ω");
            assert!(circuit.transfer(50.5).norm() > 1e-4);
        }
    }
}

/// The design's figure for the same network: from zero source into an open, Q = Q_L/2;
/// here by the width between the −3 dB points.
#[test]
fn the_bridged_t_has_half_its_coils_q() {
    for quality in [8.0, 15.0, 50.0] {
        let circuit = tuttle(0.0, f64::INFINITY, 50.0, 1.0, quality);
        let measured = quality_by_width(&circuit, 50.0);
        assert!((measured / (quality / 2.0) - 1.0).abs() < 0.03, "Q_L {quality} gives {measured}");
    }
}

/// Handbook values, from memory: 31.83 kΩ and 100 nF null 50 Hz, f₀ = 1/(2πRC), Q = 1/4.
#[test]
fn the_twin_t_of_the_handbooks_nulls_at_50_hz_with_a_q_of_a_quarter() {
    let rounded = twin_tee(0.0, f64::INFINITY, 31.83e3, 100e-9);
    assert!(rounded.transfer(50.0).norm() < 1e-4, "31.83 kΩ is rounded to four digits");
    let exact = twin_tee(0.0, f64::INFINITY, 1.0 / (TAU * 50.0 * 100e-9), 100e-9);
    assert!(exact.transfer(50.0).norm() < 1e-14);
    assert!((quality_by_width(&exact, 50.0) - 0.25).abs() < 1e-6);
}

/// The symmetrical twin-T: with R = √(2·Rs·Rl) as much is lost far below the null
/// as far above. Algebra: far below Rl/(Rs + 2R + Rl), far above the same with
/// R/2 to ground between source and load.
#[test]
fn the_symmetrical_twin_t_loses_alike_far_below_and_far_above() {
    for (source, load) in [(1e3, 499_280.0), (600.0, 600.0), (350.0, 1e6)] {
        let ohm = (2.0_f64 * source * load).sqrt();
        let circuit = twin_tee(source, load, ohm, 1.0 / (TAU * 50.0 * ohm));
        let (below, above) = (circuit.insertion_db(0.0), circuit.insertion_db(1e9));
        assert!((below - above).abs() < 1e-6, "{below} dB below, {above} dB above");
        let skewed = twin_tee(source, load, 2.0 * ohm, 1.0 / (TAU * 100.0 * ohm));
        assert!((skewed.insertion_db(0.0) - skewed.insertion_db(1e9)).abs() > 0.1);
    }
}

/// A design figure, made with NumPy's linear algebra: over 49 dB at orders 1, 3 and
/// 5, and 0.5 dB at 12 Hz, where 39 µF stands at the source, 0.97 µF across the coil
/// (51.1 Hz) and 18.6 µF at the load.
#[test]
fn the_notched_low_pass_of_one_large_coil_takes_all_orders() {
    let notched = |first: f64, last: f64| {
        let tank = Branch::parallel([Branch::Part(1), Branch::Part(2)]);
        let stages = vec![shunt(Branch::Part(0)), series(tank), shunt(Branch::Part(3))];
        let parts = vec![capacitor(first), coil(10.0, 300.0), capacitor(0.97e-6), capacitor(last)];
        circuit(350.0, 30e3, stages, parts)
    };
    let circuit = notched(39e-6, 18.6e-6);
    for order in [1.0, 3.0, 5.0] {
        assert!(circuit.insertion_db(50.0 * order) < -49.0, "order {order}");
    }
    let keep = (0..=120).map(|tenth| circuit.insertion_db(0.1 * f64::from(tenth)).abs());
    let largest = keep.fold(0.0, f64::max);
    assert!((largest - 0.5).abs() < 0.02, "{largest} dB");
    assert!(notched(18.6e-6, 39e-6).insertion_db(12.0) < -5.0, "turned round it does not keep 12 Hz");
}

/// A text-book figure, from memory: 10 kΩ at 290 K has 12.66 nV/√Hz.
#[test]
fn ten_kilohms_at_290_kelvin_make_12_66_nanovolts_per_root_hertz() {
    let line = circuit(10e3, f64::INFINITY, vec![], vec![]);
    let density = line.noise_density(1e3, 290.0).total.sqrt();
    assert!((density - 12.66e-9).abs() < 0.005e-9, "{density} V/√Hz");
}

/// kT/C, from memory a text-book result: 64.4 µV in 1 pF at 300 K, whatever the resistance.
#[test]
fn the_whole_noise_of_a_resistor_on_a_capacitor_is_k_t_over_c() {
    for ohm in [1e3, 1e6] {
        let line = circuit(ohm, f64::INFINITY, vec![shunt(Branch::Part(0))], vec![capacitor(1e-12)]);
        let corner = 1.0 / (TAU * ohm * 1e-12);
        // Up to 1e6 corners all but 2/(π·1e6) of it is in the band.
        let noise = line.noise_in_band(0.0, 1e6 * corner, 300.0);
        assert!((noise.total.sqrt() - 64.4e-6).abs() < 0.1e-6, "{} V", noise.total.sqrt());
        assert!((noise.network / noise.total).abs() < 1e-9, "a capacitor makes none");
    }
}

/// By hand: of three equal resistors source, series and load, the middle one makes
/// 4kTR/9 of the 4kT·2R/3 at the load.
#[test]
fn a_series_resistor_adds_its_own_share_of_the_noise() {
    let line = circuit(1e3, 1e3, vec![series(Branch::Part(0))], vec![resistor(1e3)]);
    let noise = line.noise_density(50.0, 290.0);
    assert!((noise.network / noise.total - 1.0 / 6.0).abs() < 1e-12, "{noise:?}");
    assert!((noise.load / noise.total - 4.0 / 6.0).abs() < 1e-12, "{noise:?}");
    assert!(line.noise_density_without(50.0, 290.0).network == 0.0);
}

/// By hand: at the null of a lossless trap all of the EMF lies across the series
/// resistors, and coil and capacitor bear it times their reactance over R.
#[test]
fn in_a_perfect_null_coil_and_capacitor_bear_more_than_the_source_gives() {
    let henry = 1.0;
    let farad = 1.0 / (henry * (TAU * 50.0_f64).powi(2));
    let trap = Branch::series([Branch::Part(1), Branch::Part(2)]);
    let parts = vec![resistor(60.0), coil(henry, 0.0), capacitor(farad)];
    let line = circuit(40.0, 1e6, vec![series(Branch::Part(0)), shunt(trap)], parts);
    let stress = line.stress(2.0, 50.0);
    assert!((stress[0].voltage_v.norm() - 1.2).abs() < 1e-9);
    assert!((stress[0].power_w() - 0.02 * 1.2).abs() < 1e-9);
    for part in &stress[1..] {
        assert!((part.current_a.norm() - 0.02).abs() < 1e-12);
        assert!((part.voltage_v.norm() - 0.02 * TAU * 50.0 * henry).abs() < 1e-9);
    }
}

/// By hand: DC divides between capacitors in series as one over their values.
#[test]
fn dc_divides_between_capacitors_in_series() {
    let both = Branch::series([Branch::Part(0), Branch::Part(1)]);
    let line = circuit(350.0, 1e6, vec![shunt(both)], vec![capacitor(1e-6), capacitor(3e-6)]);
    let stress = line.stress(10.0, 0.0);
    let on_load = 10.0 * 1e6 / (1e6 + 350.0);
    assert!((stress[0].voltage_v.re - 0.75 * on_load).abs() < 1e-9, "{stress:?}");
    assert!((stress[1].voltage_v.re - 0.25 * on_load).abs() < 1e-9, "{stress:?}");
}

/// The form that the design lays down, line by line.
#[test]
fn the_netlist_names_source_load_and_each_loss() {
    let trap = Branch::series([Branch::Part(1), Branch::Part(2)]);
    let named = |reference: &str, part: Part| Part { reference: reference.to_owned(), ..part };
    let parts = vec![
        named("P1", Part { setting_ohm: Some(350.0), ..Part::ideal("", PartKind::Trimmer, 500.0) }),
        named("L1", Part { self_capacitance_f: 1e-10, ..coil(4.7, 170.0) }),
        named("C1", Part { series_resistance_ohm: 0.5, ..capacitor(2.2e-6) }),
    ];
    let mut line = circuit(350.0, 1e6, vec![series(Branch::Part(0)), shunt(trap)], parts);
    line.source.inductance_h = 0.01;
    line.load.capacitance_f = 220e-12;
    let netlist = line.netlist("gauge\nline");
    assert!(netlist.starts_with("# gauge line\n"), "a title is one comment line");
    let elements: Vec<&str> = netlist.lines().filter(|line| !line.starts_with('#')).collect();
    let expected = [
        "RS in n1 350",
        "LS n1 n2 0.01",
        "R_P1 n2 out 350",
        "L1 out n3 4.7",
        "R_L1 n3 n4 170",
        "C_L1 out n4 1e-10",
        "C1 n4 n5 2.2e-6",
        "R_C1 n5 0 0.5",
        "RL out 0 1000000",
        "CL out 0 2.2e-10",
    ];
    assert_eq!(elements, expected);
}
