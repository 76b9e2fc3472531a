//! The notched low-pass: C to ground, a tank in the line, C to ground.

use std::f64::consts::TAU;

use super::low_pass::corner_below_hz;
use super::{
    Bench, Draft, Kind, NaturalTrim, Notch, Setting, SlotValue, resonance_hz, resonant_capacitance_f, series,
    shunt, usable_coils,
};
use crate::network::Branch;
use crate::parts::{CoilLine, PartKind};

/// The tank notches the lowest line, the slope takes all above it: a third-order
/// low-pass with one pair of zeros (common practice). One coil serves all
/// harmonics where the keep band ends below the hum. A resistor before it makes
/// the source that the network sees steadier, one across the load damps it.
pub struct NotchedLowPass;

impl Kind for NotchedLowPass {
    fn name(&self) -> &'static str {
        "notched low-pass"
    }

    fn drafts(&self, setting: &Setting, coils: &[CoilLine]) -> Vec<Draft> {
        if setting.kept_above_hz.is_some() {
            return Vec::new();
        }
        let line = setting.lowest();
        let between_hz = (setting.kept_below_hz.unwrap_or(0.0), line.frequency_hz);
        let mut drafts = Vec::new();
        for (index, coil) in usable_coils(coils, line.frequency_hz) {
            let tank_f = resonant_capacitance_f(coil.inductance_h, line.frequency_hz);
            let corner_hz = corner_below_hz(setting);
            let shunt_f = setting.corner_capacitance_f(1.5, coil.inductance_h, corner_hz, between_hz);
            let Some(shunt_f) = shunt_f.filter(|_| setting.may_have_capacitance(tank_f)) else { continue };
            for (before, across) in [(false, false), (true, false), (false, true)] {
                let mut bench = Bench::default();
                let mut stages = Vec::new();
                if before {
                    stages.push(series(bench.resistor(setting.free_resistance(0.3 * setting.source_ohm))));
                }
                stages.push(shunt(bench.capacitor(setting.free_capacitance(shunt_f))));
                let coil_slot = bench.slots.len();
                stages.push(series(Branch::parallel([
                    bench.coil(index),
                    bench.capacitor(setting.free_capacitance(tank_f)),
                ])));
                stages.push(shunt(bench.capacitor(setting.free_capacitance(0.6 * shunt_f))));
                if across {
                    let ohm = (60.0 * (setting.source_ohm + coil.resistance_ohm)).min(setting.load_ohm);
                    stages.push(shunt(bench.resistor(setting.free_resistance(ohm))));
                }
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

    fn notches(&self, values: &[SlotValue], _source_ohm: f64, _load_ohm: f64) -> Vec<Notch> {
        let Some(coil) = values.iter().position(|slot| slot.kind == PartKind::Coil) else {
            return Vec::new();
        };
        let Some(capacitor) = values.get(coil + 1) else { return Vec::new() };
        vec![null_of_tank(&values[coil], capacitor)]
    }
}

/// The zeros have the coil's own Q, whatever stands around the tank; what the
/// tank's capacitor adds to the plain low-pass at resonance is R_p/ω₀L = Q_L.
fn null_of_tank(coil: &SlotValue, capacitor: &SlotValue) -> Notch {
    let frequency_hz = resonance_hz(coil.value_si, capacitor.value_si);
    let q = TAU * frequency_hz * coil.value_si / coil.series_resistance_ohm;
    Notch { frequency_hz, q, depth_db: Some(20.0 * q.log10()) }
}
