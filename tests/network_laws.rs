//! Laws that every passive network keeps, tried on random ones of up to eight
//! sections, and agreement with a nodal solver that reads the netlist.

mod nodal;

use std::convert::Infallible;
use std::f64::consts::TAU;

use num_complex::Complex64;
use proptest::prelude::*;

use nodal::Nodal;
use notchwright::network::{Branch, Circuit, Load, Section, Source, TwoPort};
use notchwright::parts::{Part, PartKind};

fn decades(from: f64, to: f64) -> impl Strategy<Value = f64> {
    (from.log10()..to.log10()).prop_map(|exponent| 10f64.powf(exponent))
}

/// Parts as they are sold, losses included.
fn part() -> impl Strategy<Value = Part> {
    let ideal = |kind, value| Part::ideal("X", kind, value);
    prop_oneof![
        decades(10.0, 1e6).prop_map(move |ohm| ideal(PartKind::Resistor, ohm)),
        (decades(100.0, 1e5), 0.05..1.0).prop_map(move |(track, share)| Part {
            setting_ohm: Some(track * share),
            ..ideal(PartKind::Trimmer, track)
        }),
        (decades(1e-9, 1e-4), prop_oneof![Just(0.0), decades(0.01, 10.0)]).prop_map(move |(farad, loss)| {
            Part { series_resistance_ohm: loss, ..ideal(PartKind::Capacitor, farad) }
        }),
        (decades(1e-3, 10.0), decades(0.1, 300.0), prop_oneof![Just(0.0), decades(1e-11, 1e-9)]).prop_map(
            move |(henry, loss, own)| Part {
                series_resistance_ohm: loss,
                self_capacitance_f: own,
                ..ideal(PartKind::Coil, henry)
            }
        ),
    ]
}

fn branch() -> impl Strategy<Value = Branch<Part>> {
    part().prop_map(Branch::Part).prop_recursive(2, 5, 3, |inner| {
        let several = prop::collection::vec(inner, 2..=3);
        prop_oneof![several.clone().prop_map(Branch::series), several.prop_map(Branch::parallel)]
    })
}

fn series() -> impl Strategy<Value = TwoPort<Part>> {
    branch().prop_map(|series| TwoPort::Series { series })
}

fn shunt() -> impl Strategy<Value = TwoPort<Part>> {
    branch().prop_map(|shunt| TwoPort::Shunt { shunt })
}

/// A series branch, or a tee.
fn leg() -> impl Strategy<Value = Vec<TwoPort<Part>>> {
    prop_oneof![
        series().prop_map(|only| vec![only]),
        (series(), shunt(), series()).prop_map(|(first, middle, last)| vec![first, middle, last]),
    ]
}

fn port() -> impl Strategy<Value = TwoPort<Part>> {
    let beside = prop::collection::vec(leg(), 2..=3).prop_map(|beside| TwoPort::Beside { beside });
    prop_oneof![series(), shunt(), beside]
}

/// One to eight sections of one to three two-ports between a source and a load.
fn circuit() -> impl Strategy<Value = Circuit> {
    let sections = prop::collection::vec(prop::collection::vec(port(), 1..=3), 1..=8);
    let terminals = (
        decades(1.0, 1e5),
        prop_oneof![Just(0.0), decades(1e-3, 1.0)],
        decades(100.0, 1e7),
        prop_oneof![Just(0.0), decades(1e-11, 1e-8)],
    );
    (sections, terminals).prop_map(|(sections, (source, inductance_h, load, capacitance_f))| {
        let mut parts = Vec::new();
        let mut place = |part: &Part| {
            parts.push(Part { reference: format!("{}{}", letter(part), parts.len() + 1), ..part.clone() });
            Ok::<usize, Infallible>(parts.len() - 1)
        };
        let mut placed = |stage: &TwoPort<Part>| {
            let Ok(stage) = stage.try_map(&mut place);
            stage
        };
        let sections = sections
            .iter()
            .map(|stages| Section {
                kind: "random".to_owned(),
                stages: stages.iter().map(&mut placed).collect(),
            })
            .collect();
        Circuit {
            source: Source { resistance_ohm: source, inductance_h },
            load: Load { resistance_ohm: load, capacitance_f },
            sections,
            parts,
        }
    })
}

fn letter(part: &Part) -> &'static str {
    match part.kind {
        PartKind::Resistor => "R",
        PartKind::Trimmer => "TR",
        PartKind::Capacitor => "C",
        PartKind::Coil => "L",
    }
}

fn close(got: Complex64, expected: Complex64) -> bool {
    (got - expected).norm() <= 1e-9 * expected.norm() + 1e-12
}

/// The same network seen from its load.
fn mirrored(circuit: &Circuit) -> Circuit {
    fn port(stage: &TwoPort) -> TwoPort {
        match stage {
            TwoPort::Beside { beside } => {
                TwoPort::Beside { beside: beside.iter().map(|chain| ports(chain)).collect() }
            }
            other => other.clone(),
        }
    }
    fn ports(stages: &[TwoPort]) -> Vec<TwoPort> {
        stages.iter().rev().map(port).collect()
    }
    let turned = |section: &Section| Section { kind: section.kind.clone(), stages: ports(&section.stages) };
    Circuit {
        source: Source { resistance_ohm: circuit.load.resistance_ohm, inductance_h: 0.0 },
        load: Load { resistance_ohm: circuit.source.resistance_ohm, capacitance_f: 0.0 },
        sections: circuit.sections.iter().rev().map(turned).collect(),
        parts: circuit.parts.clone(),
    }
}

/// All impedances `factor` times as large.
fn scaled(circuit: &Circuit, factor: f64) -> Circuit {
    let mut scaled = circuit.clone();
    scaled.source.resistance_ohm *= factor;
    scaled.source.inductance_h *= factor;
    scaled.load.resistance_ohm *= factor;
    scaled.load.capacitance_f /= factor;
    for part in &mut scaled.parts {
        match part.kind {
            PartKind::Capacitor => part.value_si /= factor,
            _ => part.value_si *= factor,
        }
        part.setting_ohm = part.setting_ohm.map(|ohm| ohm * factor);
        part.series_resistance_ohm *= factor;
        part.self_capacitance_f /= factor;
    }
    scaled
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 120, ..ProptestConfig::default() })]

    #[test]
    fn the_determinant_of_the_chain_matrix_is_the_square_of_its_denominator(
        circuit in circuit(), hz in decades(0.1, 2e4),
    ) {
        let chain = circuit.chain(hz);
        let [[a, b], [c, d]] = chain.m;
        let size = (a * d).norm() + (b * c).norm();
        prop_assert!((a * d - b * c - chain.d * chain.d).norm() <= 1e-12 * size);
    }

    #[test]
    fn no_load_gets_more_power_than_its_source_has_to_give(circuit in circuit(), hz in decades(0.1, 2e4)) {
        let delivered = circuit.transfer(hz).norm_sqr() / circuit.load.resistance_ohm;
        let available = 1.0 / (4.0 * circuit.source.resistance_ohm);
        prop_assert!(delivered <= available * (1.0 + 1e-9), "{delivered} W of {available} W");
    }

    #[test]
    fn a_network_turned_round_passes_the_same_current(circuit in circuit(), hz in decades(0.1, 2e4)) {
        let mut circuit = circuit;
        circuit.source.inductance_h = 0.0;
        circuit.load.capacitance_f = 0.0;
        let current = circuit.transfer(hz) / circuit.load.resistance_ohm;
        let back = mirrored(&circuit);
        let current_back = back.transfer(hz) / back.load.resistance_ohm;
        let allowed = 1e-9 * current.norm() + 1e-13 / circuit.load.resistance_ohm.min(back.load.resistance_ohm);
        prop_assert!((current - current_back).norm() <= allowed, "{current} A, back {current_back} A");
    }

    #[test]
    fn all_impedances_times_a_factor_leave_the_response_alone(
        circuit in circuit(), hz in decades(0.1, 2e4), factor in decades(1e-3, 1e3),
    ) {
        let (before, after) = (circuit.transfer(hz), scaled(&circuit, factor).transfer(hz));
        prop_assert!(close(after, before), "{before} became {after}");
    }

    #[test]
    fn a_nodal_solver_gets_the_transfer_back_from_the_netlist(circuit in circuit(), hz in decades(0.1, 2e4)) {
        let expected = Nodal::read(&circuit.netlist("random")).transfer_hz(hz);
        let got = circuit.transfer(hz);
        prop_assert!(close(got, expected), "{got}, not {expected}, at {hz} Hz\n{}", circuit.netlist("failing"));
    }

    #[test]
    fn a_nodal_solver_gets_the_output_impedance_back_from_the_netlist(
        circuit in circuit(), hz in decades(0.1, 2e4),
    ) {
        let expected = Nodal::read(&circuit.netlist("random")).output_impedance(TAU * hz);
        let got = circuit.output_impedance(hz);
        prop_assert!((got - expected).norm() <= 1e-9 * expected.norm(), "{got} Ω, not {expected} Ω at {hz} Hz\n{}", circuit.netlist("failing"));
    }

    #[test]
    fn at_dc_the_response_is_that_of_wires_for_coils_and_breaks_for_capacitors(circuit in circuit()) {
        let expected = Nodal::read(&circuit.netlist("random")).transfer(0.0);
        let got = circuit.transfer(0.0);
        prop_assert!(close(got, expected), "{got}, not {expected}\n{}", circuit.netlist("failing"));
    }

    #[test]
    fn many_frequencies_at_once_give_what_each_gives_alone(
        circuit in circuit(), hz in prop::collection::vec(decades(0.1, 2e4), 1..10),
    ) {
        let values = circuit.values();
        let mut decibels = vec![0.0; hz.len()];
        circuit.evaluator(&values).insertion_db_each(&hz, &mut decibels);
        for (hz, decibels) in hz.iter().zip(decibels) {
            let alone = circuit.insertion_db(*hz);
            prop_assert!((alone - decibels).abs() <= 1e-9 * alone.abs().max(1.0), "{alone} dB, {decibels} dB");
        }
    }

    #[test]
    fn the_walk_along_the_ladder_and_the_product_of_matrices_agree(circuit in circuit(), hz in decades(0.1, 2e4)) {
        let (chain, omega) = (circuit.chain(hz), TAU * hz);
        let (source, load) = (circuit.source.impedance(omega), circuit.load.admittance(omega));
        let [[a, b], [c, d]] = chain.m;
        let by_matrix = chain.d / (a + b * load + source * (c + d * load));
        prop_assert!(close(circuit.transfer(hz), by_matrix));
    }

    #[test]
    fn source_and_load_never_make_more_noise_than_there_is(circuit in circuit(), hz in decades(0.1, 2e4)) {
        let noise = circuit.noise_density(hz, 290.0);
        prop_assert!(noise.source + noise.load <= noise.total * (1.0 + 1e-9), "{noise:?}");
    }

    #[test]
    fn what_enters_and_does_not_reach_the_load_is_heat_in_the_parts(
        circuit in circuit(), hz in decades(0.1, 2e4),
    ) {
        let (chain, omega) = (circuit.chain(hz), TAU * hz);
        let load = circuit.load.admittance(omega);
        let [[a, b], [c, d]] = chain.m;
        let (voltage, current) = (a + b * load, c + d * load);
        let loading = voltage + circuit.source.impedance(omega) * current;
        let entering = ((voltage / loading) * (current / loading).conj()).re;
        let reaching_load = circuit.transfer(hz).norm_sqr() / circuit.load.resistance_ohm;
        let heat: f64 = circuit.stress(1.0, hz).iter().map(|part| part.power_w()).sum();
        let given = (current / loading).norm();
        prop_assert!((heat - (entering - reaching_load)).abs() <= 1e-9 * given, "{heat} W, {entering} W less {reaching_load} W");
    }

    #[test]
    fn a_circuit_read_back_from_its_file_is_the_same(circuit in circuit()) {
        let text = serde_yaml::to_string(&circuit).expect("it is written");
        let back: Circuit = serde_yaml::from_str(&text).expect("it is read");
        prop_assert_eq!(back, circuit);
    }
}
