//! The series tank: L and C side by side in the line.

use std::f64::consts::TAU;

use super::{
    Bench, Draft, Kind, NaturalTrim, Notch, Setting, SlotValue, parallel_ohm, resonance_hz,
    resonant_capacitance_f, series, usable_coils,
};
use crate::network::Branch;
use crate::parts::CoilLine;

/// ω₀² ≈ 1/LC. Q = (R_s + R_l)√(C/L), lowered by the coil's own parallel loss
/// R_p = Q_L·ω₀L; depth (R_s + R_l)/(R_s + R_l + R_p). For low R_s + R_l only.
pub struct SeriesTank;

impl Kind for SeriesTank {
    fn name(&self) -> &'static str {
        "series tank"
    }

    fn drafts(&self, setting: &Setting, coils: &[CoilLine]) -> Vec<Draft> {
        let [line] = setting.lines[..] else { return Vec::new() };
        let around_ohm = setting.source_ohm + setting.load_ohm;
        let mut drafts = Vec::new();
        for (index, coil) in usable_coils(coils, line.frequency_hz) {
            let capacitance_f = resonant_capacitance_f(coil.inductance_h, line.frequency_hz);
            let reactance_ohm = TAU * line.frequency_hz * coil.inductance_h;
            let peak_ohm = reactance_ohm * reactance_ohm / coil.resistance_ohm;
            if !setting.may_have_capacitance(capacitance_f) || peak_ohm < 0.5 * around_ohm {
                continue;
            }
            let mut bench = Bench::default();
            let tank = Branch::parallel([
                bench.coil(index),
                bench.capacitor(setting.free_capacitance(capacitance_f)),
            ]);
            let mut draft = bench.draft(self, setting, vec![series(tank)]);
            draft.trims.push(NaturalTrim { slot: 1, order: line.order, makes_up_for: vec![(0, 1.0)] });
            drafts.push(draft);
        }
        drafts
    }

    fn notches(&self, values: &[SlotValue], source_ohm: f64, load_ohm: f64) -> Vec<Notch> {
        let [coil, capacitor] = values else { return Vec::new() };
        let around_ohm = source_ohm + load_ohm;
        let frequency_hz = resonance_hz(coil.value_si, capacitor.value_si);
        let reactance_ohm = TAU * frequency_hz * coil.value_si;
        let own_ohm = reactance_ohm * reactance_ohm / coil.series_resistance_ohm;
        vec![Notch {
            frequency_hz,
            q: parallel_ohm(around_ohm, own_ohm) / reactance_ohm,
            depth_db: Some(20.0 * ((around_ohm + own_ohm) / around_ohm).log10()),
        }]
    }

    fn is_single_notch(&self) -> bool {
        true
    }
}
