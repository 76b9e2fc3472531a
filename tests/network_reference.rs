//! The networks of `reference/networks.json`, solved there by nodal analysis with
//! `numpy.linalg.solve`, come out of the chain of two-ports alike.

use num_complex::Complex64;
use serde::Deserialize;
use std::collections::BTreeMap;

use notchwright::network::{Branch, Circuit, Load, Section, Source, TwoPort};
use notchwright::parts::{Part, PartKind};

#[derive(Deserialize)]
struct Reference {
    networks: BTreeMap<String, Solved>,
}

#[derive(Deserialize)]
struct Solved {
    elements: Vec<(String, String, String, f64)>,
    frequency_hz: Vec<f64>,
    h_re: Vec<f64>,
    h_im: Vec<f64>,
    zout_re: Vec<f64>,
}

fn reference() -> BTreeMap<String, Solved> {
    let text = include_str!("reference/networks.json");
    serde_json::from_str::<Reference>(text).expect("the reference file is well formed").networks
}

/// A circuit whose parts are added as its two-ports are written down.
struct Bench {
    parts: Vec<Part>,
}

impl Bench {
    fn part(&mut self, kind: PartKind, value_si: f64, series_resistance_ohm: f64) -> Branch {
        let reference = format!("X{}", self.parts.len() + 1);
        self.parts.push(Part { series_resistance_ohm, ..Part::ideal(&reference, kind, value_si) });
        Branch::Part(self.parts.len() - 1)
    }

    fn resistor(&mut self, ohm: f64) -> Branch {
        self.part(PartKind::Resistor, ohm, 0.0)
    }

    fn capacitor(&mut self, farad: f64) -> Branch {
        self.part(PartKind::Capacitor, farad, 0.0)
    }

    fn coil(&mut self, henry: f64, ohm: f64) -> Branch {
        self.part(PartKind::Coil, henry, ohm)
    }

    fn trap(&mut self, (henry, ohm): (f64, f64), farad: f64) -> Branch {
        Branch::series([self.coil(henry, ohm), self.capacitor(farad)])
    }
}

fn series(branch: Branch) -> TwoPort {
    TwoPort::Series { series: branch }
}

fn shunt(branch: Branch) -> TwoPort {
    TwoPort::Shunt { shunt: branch }
}

/// The network `name` with the values of its element list.
fn circuit(name: &str, solved: &Solved) -> Circuit {
    let value = |index: usize| solved.elements[index].3;
    let coil = |index: usize| (value(index), value(index + 1));
    let last = solved.elements.len() - 1;
    let mut bench = Bench { parts: Vec::new() };
    let (stages, load) = match name {
        "shunt_trap" => {
            let stages = vec![series(bench.resistor(value(1))), shunt(bench.trap(coil(2), value(4)))];
            (stages, (value(last - 1), value(last)))
        }
        "series_tank" => {
            let tank = Branch::parallel([bench.coil(value(1), value(2)), bench.capacitor(value(3))]);
            (vec![series(tank)], (value(last - 1), value(last)))
        }
        "bridged_t" => (vec![bridged_t(&mut bench, coil(1), [3, 4, 5].map(value))], (value(last), 0.0)),
        "twin_t_symmetrical" => {
            (vec![twin_t(&mut bench, [1, 2, 3].map(value), [4, 5, 6].map(value))], (value(last), 0.0))
        }
        "comb_trap" => {
            let stages = vec![
                series(bench.resistor(value(1))),
                shunt(bench.trap(coil(2), value(4))),
                shunt(bench.trap(coil(5), value(7))),
            ];
            (stages, (value(last - 1), value(last)))
        }
        "cascade" => {
            let stages = vec![
                bridged_t(&mut bench, coil(1), [3, 4, 5].map(value)),
                series(bench.resistor(value(6))),
                shunt(bench.trap(coil(7), value(9))),
                twin_t(&mut bench, [10, 11, 12].map(value), [13, 14, 15].map(value)),
            ];
            (stages, (value(last - 1), value(last)))
        }
        other => panic!("no circuit is written down for the reference network {other}"),
    };
    Circuit {
        source: Source { resistance_ohm: value(0), inductance_h: 0.0 },
        load: Load { resistance_ohm: load.0, capacitance_f: load.1 },
        sections: vec![Section { kind: name.to_owned(), stages }],
        parts: bench.parts,
    }
}

fn bridged_t(bench: &mut Bench, coil: (f64, f64), [first, second, middle]: [f64; 3]) -> TwoPort {
    let bridge = vec![series(bench.coil(coil.0, coil.1))];
    let tee =
        vec![series(bench.capacitor(first)), shunt(bench.resistor(middle)), series(bench.capacitor(second))];
    TwoPort::Beside { beside: vec![bridge, tee] }
}

/// Resistor tee (arm, arm, capacitor down) beside capacitor tee (arm, arm, resistor down).
fn twin_t(bench: &mut Bench, low: [f64; 3], high: [f64; 3]) -> TwoPort {
    let low_pass =
        vec![series(bench.resistor(low[0])), shunt(bench.capacitor(low[2])), series(bench.resistor(low[1]))];
    let high_pass = vec![
        series(bench.capacitor(high[0])),
        shunt(bench.resistor(high[2])),
        series(bench.capacitor(high[1])),
    ];
    TwoPort::Beside { beside: vec![low_pass, high_pass] }
}

#[test]
fn every_reference_network_has_the_transfer_that_nodal_analysis_gives() {
    for (name, solved) in reference() {
        let circuit = circuit(&name, &solved);
        for (k, frequency) in solved.frequency_hz.iter().enumerate() {
            let expected = Complex64::new(solved.h_re[k], solved.h_im[k]);
            let got = circuit.transfer(*frequency);
            let allowed = 1e-9 * expected.norm() + 1e-12;
            assert!((got - expected).norm() <= allowed, "{name} at {frequency} Hz: {got}, not {expected}");
        }
    }
}

#[test]
fn every_reference_network_has_the_output_resistance_that_nodal_analysis_gives() {
    for (name, solved) in reference() {
        let circuit = circuit(&name, &solved);
        for (frequency, expected) in solved.frequency_hz.iter().zip(&solved.zout_re) {
            let got = circuit.output_impedance(*frequency).re;
            assert!(
                (got - expected).abs() <= 1e-9 * expected,
                "{name} at {frequency} Hz: {got} Ω, not {expected} Ω"
            );
        }
    }
}

#[test]
fn the_reference_networks_are_six_and_each_has_its_points() {
    let networks = reference();
    assert_eq!(networks.len(), 6);
    for (name, solved) in networks {
        let points = solved.frequency_hz.len();
        assert!(points > 50, "{name} has {points} points only");
        assert!([solved.h_re.len(), solved.h_im.len(), solved.zout_re.len()] == [points; 3], "{name}");
    }
}
