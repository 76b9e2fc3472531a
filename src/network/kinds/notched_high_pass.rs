//! The notched high-pass: C in the line, L and C to ground, C in the line.

use std::f64::consts::TAU;

use super::high_pass::{between_above_hz, corner_above_hz};
use super::{
    Bench, Draft, Kind, NaturalTrim, Notch, Setting, SlotValue, resonance_hz, resonant_capacitance_f, series,
    shunt, usable_coils,
};
use crate::network::Branch;
use crate::parts::{CoilLine, PartKind};

/// The dual of the notched low-pass: the trap notches the highest line, the
/// slope takes all below it. Suits where all keep bands lie above the lines.
pub struct NotchedHighPass;

impl Kind for NotchedHighPass {
    fn name(&self) -> &'static str {
        "notched high-pass"
    }

    fn drafts(&self, setting: &Setting, coils: &[CoilLine]) -> Vec<Draft> {
        let (Some(corner_hz), Some(line)) = (corner_above_hz(setting), setting.lines.last()) else {
            return Vec::new();
        };
        let between_hz = between_above_hz(setting);
        let mut drafts = Vec::new();
        for (index, coil) in usable_coils(coils, corner_hz) {
            let trap_f = resonant_capacitance_f(coil.inductance_h, line.frequency_hz);
            let series_f = setting.corner_capacitance_f(1.5, coil.inductance_h, corner_hz, between_hz);
            let Some(series_f) = series_f.filter(|_| setting.may_have_capacitance(trap_f)) else { continue };
            let mut bench = Bench::default();
            let first = series(bench.capacitor(setting.free_capacitance(series_f)));
            let trap =
                shunt(Branch::series([bench.coil(index), bench.capacitor(setting.free_capacitance(trap_f))]));
            let last = series(bench.capacitor(setting.free_capacitance(series_f)));
            let mut draft = bench.draft(self, setting, vec![first, trap, last]);
            draft.trims.push(NaturalTrim { slot: 2, order: line.order, makes_up_for: vec![(1, 1.0)] });
            drafts.push(draft);
        }
        drafts
    }

    fn notches(&self, values: &[SlotValue], _source_ohm: f64, _load_ohm: f64) -> Vec<Notch> {
        let Some(coil) = values.iter().position(|slot| slot.kind == PartKind::Coil) else {
            return Vec::new();
        };
        let (coil, Some(capacitor)) = (&values[coil], values.get(coil + 1)) else { return Vec::new() };
        // The zeros have the trap's own Q; against the plain high-pass, whose
        // shunt arm is ω₀L, the arm at resonance is r: lower by Q_L.
        let frequency_hz = resonance_hz(coil.value_si, capacitor.value_si);
        let lost_ohm = coil.series_resistance_ohm + capacitor.series_resistance_ohm;
        let q = TAU * frequency_hz * coil.value_si / lost_ohm;
        vec![Notch { frequency_hz, q, depth_db: Some(20.0 * q.log10()) }]
    }
}
