//! The bridged-T with loss compensation: a coil across two equal capacitors,
//! a resistor from their middle to ground.

use std::f64::consts::TAU;

use super::{
    Bench, Draft, Kind, NaturalTrim, Notch, Setting, SlotValue, coil_q, series, shunt, usable_coils,
};
use crate::network::TwoPort;
use crate::parts::CoilLine;

/// Full null in spite of the coil's loss at ω₀² = 2/LC with R = L/(2Cr) =
/// ω₀L·Q_L/4 (W. N. Tuttle, "Bridged-T and Parallel-T Null Circuits for
/// Measurements at Radio Frequencies", Proc. IRE 28, 1940). Q = Q_L/2 from a zero
/// source into an open.
pub struct BridgedT;

impl Kind for BridgedT {
    fn name(&self) -> &'static str {
        "bridged-T"
    }

    fn drafts(&self, setting: &Setting, coils: &[CoilLine]) -> Vec<Draft> {
        let [line] = setting.lines[..] else { return Vec::new() };
        let omega = TAU * line.frequency_hz;
        let mut drafts = Vec::new();
        for (index, coil) in usable_coils(coils, line.frequency_hz) {
            let capacitance_f = 2.0 / (omega * omega * coil.inductance_h);
            let null_ohm = omega * coil.inductance_h * coil_q(coil, line.frequency_hz) / 4.0;
            // It wants R_s well below R, or it is no notch any more.
            if !setting.may_have_capacitance(capacitance_f) || setting.source_ohm > 3.0 * null_ohm {
                continue;
            }
            let mut bench = Bench::default();
            let bridge = bench.coil(index);
            let first = bench.capacitor(setting.free_capacitance(capacitance_f));
            let second = bench.tied_capacitor(1.0);
            let middle = bench.resistor(setting.free_resistance(null_ohm));
            let stage = TwoPort::Beside {
                beside: vec![vec![series(bridge)], vec![series(first), shunt(middle), series(second)]],
            };
            let mut draft = bench.draft(self, setting, vec![stage]);
            // ω₀² = (1/C₁ + 1/C₂)/L, and R follows L/(r(C₁ + C₂)).
            draft.trims.push(NaturalTrim {
                slot: 1,
                order: line.order,
                makes_up_for: vec![(0, 2.0), (2, 1.0)],
            });
            draft.trims.push(NaturalTrim { slot: 3, order: line.order, makes_up_for: vec![(0, -2.0)] });
            drafts.push(draft);
        }
        drafts
    }

    fn notches(&self, values: &[SlotValue], _source_ohm: f64, _load_ohm: f64) -> Vec<Notch> {
        let [coil, first, second, _] = values else { return Vec::new() };
        let frequency_hz = ((1.0 / first.value_si + 1.0 / second.value_si) / coil.value_si).sqrt() / TAU;
        let coil_q = TAU * frequency_hz * coil.value_si / coil.series_resistance_ohm;
        vec![Notch { frequency_hz, q: coil_q / 2.0, depth_db: None }]
    }

    fn is_single_notch(&self) -> bool {
        true
    }
}
