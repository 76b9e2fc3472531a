//! Plain low-passes, first to third order, with and without a coil.

use std::f64::consts::TAU;

use super::{Bench, Draft, Kind, Notch, Setting, SlotValue, series, shunt, usable_coils};
use crate::parts::CoilLine;

/// R–C, R–C–R–C, and C–L–C (with or without a resistor before it). Suits where
/// no keep band lies above the lowest line.
pub struct LowPass;

impl Kind for LowPass {
    fn name(&self) -> &'static str {
        "low-pass"
    }

    fn drafts(&self, setting: &Setting, coils: &[CoilLine]) -> Vec<Draft> {
        if setting.kept_above_hz.is_some() {
            return Vec::new();
        }
        let corner_hz = corner_below_hz(setting);
        let omega = TAU * corner_hz;
        let mut drafts = Vec::new();
        let level_ohm = (3.0 * setting.source_ohm).min(0.1 * setting.load_ohm).max(10.0);
        for cells in 1..=3 {
            let mut bench = Bench::default();
            let mut stages = Vec::new();
            for cell in 0..cells {
                let ohm = level_ohm * 3f64.powi(cell);
                stages.push(series(bench.resistor(setting.free_resistance(ohm))));
                stages.push(shunt(bench.capacitor(setting.free_capacitance(1.0 / (omega * ohm)))));
            }
            drafts.push(bench.draft(self, setting, stages));
        }
        for (index, coil) in usable_coils(coils, setting.lowest().frequency_hz) {
            // Impedance level at which the coil's reactance is that of a
            // maximally flat C–L–C (1, 2, 1) at the corner.
            let between_hz = (setting.kept_below_hz.unwrap_or(0.0), setting.lowest().frequency_hz);
            let Some(farad) = setting.corner_capacitance_f(2.0, coil.inductance_h, corner_hz, between_hz)
            else {
                continue;
            };
            for with_resistor in [false, true] {
                let mut bench = Bench::default();
                let mut stages = Vec::new();
                if with_resistor {
                    let ohm =
                        (omega * coil.inductance_h / 2.0 - setting.source_ohm).max(0.2 * setting.source_ohm);
                    stages.push(series(bench.resistor(setting.free_resistance(ohm))));
                }
                stages.push(shunt(bench.capacitor(setting.free_capacitance(farad))));
                stages.push(series(bench.coil(index)));
                stages.push(shunt(bench.capacitor(setting.free_capacitance(farad / 2.0))));
                drafts.push(bench.draft(self, setting, stages));
            }
            let mut bench = Bench::default();
            let stages = vec![
                series(bench.coil(index)),
                shunt(bench.capacitor(setting.free_capacitance(farad / 2.0))),
            ];
            drafts.push(bench.draft(self, setting, stages));
        }
        drafts
    }

    fn notches(&self, _values: &[SlotValue], _source_ohm: f64, _load_ohm: f64) -> Vec<Notch> {
        Vec::new()
    }
}

/// A corner between the keep band and the lowest line.
pub(super) fn corner_below_hz(setting: &Setting) -> f64 {
    let line_hz = setting.lowest().frequency_hz;
    let kept_hz = setting.kept_below_hz.unwrap_or(line_hz / 10.0).max(line_hz / 50.0);
    (kept_hz * (kept_hz * line_hz).sqrt()).sqrt()
}
