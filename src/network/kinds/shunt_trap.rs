//! The shunt trap: R in the line, then L and C in series to ground.

use std::f64::consts::TAU;

use super::{
    Bench, Draft, Kind, NaturalTrim, Notch, Setting, SlotValue, coil_q, parallel_ohm, resonance_hz,
    resonant_capacitance_f, series, shunt, usable_coils,
};
use crate::network::Branch;
use crate::parts::CoilLine;

/// ω₀² = 1/LC. With R_t = (R_s + R)∥R_l: Q = ω₀L/(R_t + r), and the depth below
/// the flat level is (R_t + r)/r = Q_L/Q.
pub struct ShuntTrap;

impl Kind for ShuntTrap {
    fn name(&self) -> &'static str {
        "shunt trap"
    }

    fn drafts(&self, setting: &Setting, coils: &[CoilLine]) -> Vec<Draft> {
        let [line] = setting.lines[..] else { return Vec::new() };
        let mut drafts = Vec::new();
        for (index, coil) in usable_coils(coils, line.frequency_hz) {
            let capacitance_f = resonant_capacitance_f(coil.inductance_h, line.frequency_hz);
            if !setting.may_have_capacitance(capacitance_f) {
                continue;
            }
            // R from the depth: Q = Q_L·10^(−D/20) leaves (R_s + R)∥R_l = ω₀L/Q − r.
            let q = coil_q(coil, line.frequency_hz) * 10f64.powf(-line.target_db / 20.0);
            let wanted_ohm = TAU * line.frequency_hz * coil.inductance_h / q - coil.resistance_ohm;
            let series_ohm = (1.2 * wanted_ohm - setting.source_ohm).max(0.0);
            for with_resistor in [true, false] {
                let mut bench = Bench::default();
                let mut stages = Vec::new();
                if with_resistor {
                    stages.push(series(bench.resistor(setting.free_resistance(series_ohm))));
                } else if setting.source_ohm < 0.2 * wanted_ohm {
                    continue;
                }
                let coil_slot = bench.slots.len();
                let trap = Branch::series([
                    bench.coil(index),
                    bench.capacitor(setting.free_capacitance(capacitance_f)),
                ]);
                stages.push(shunt(trap));
                let mut draft = bench.draft(self, setting, stages);
                draft.trims.push(NaturalTrim {
                    slot: coil_slot + 1,
                    order: line.order,
                    makes_up_for: vec![(coil_slot, 1.0)],
                });
                drafts.push(draft);
            }
        }
        drafts
    }

    fn notches(&self, values: &[SlotValue], source_ohm: f64, load_ohm: f64) -> Vec<Notch> {
        let (resistor, coil, capacitor) = match values {
            [coil, capacitor] => (0.0, coil, capacitor),
            [resistor, coil, capacitor] => (resistor.value_si, coil, capacitor),
            _ => return Vec::new(),
        };
        let frequency_hz = resonance_hz(coil.value_si, capacitor.value_si);
        let lost_ohm = coil.series_resistance_ohm + capacitor.series_resistance_ohm;
        let around_ohm = parallel_ohm(source_ohm + resistor, load_ohm) + lost_ohm;
        vec![Notch {
            frequency_hz,
            q: TAU * frequency_hz * coil.value_si / around_ohm,
            depth_db: Some(20.0 * (around_ohm / lost_ohm).log10()),
        }]
    }

    fn is_single_notch(&self) -> bool {
        true
    }
}
