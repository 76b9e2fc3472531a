//! Plain high-passes, first to third order, with and without a coil.

use std::f64::consts::TAU;

use super::{Bench, Draft, Kind, Notch, Setting, SlotValue, series, shunt, usable_coils};
use crate::parts::CoilLine;

/// C–R, C–R–C–R, and C–L–C. Suits where all keep bands lie above the highest line.
pub struct HighPass;

impl Kind for HighPass {
    fn name(&self) -> &'static str {
        "high-pass"
    }

    fn drafts(&self, setting: &Setting, coils: &[CoilLine]) -> Vec<Draft> {
        let Some(corner_hz) = corner_above_hz(setting) else { return Vec::new() };
        let omega = TAU * corner_hz;
        let mut drafts = Vec::new();
        let level_ohm = (setting.source_ohm * setting.load_ohm).sqrt().max(2.0 * setting.source_ohm);
        for cells in 1..=3 {
            let mut bench = Bench::default();
            let mut stages = Vec::new();
            for cell in 0..cells {
                let ohm = level_ohm * 3f64.powi(cell);
                stages.push(series(bench.capacitor(setting.free_capacitance(1.0 / (omega * ohm)))));
                stages.push(shunt(bench.resistor(setting.free_resistance(ohm))));
            }
            drafts.push(bench.draft(self, setting, stages));
        }
        for (index, coil) in usable_coils(coils, corner_hz) {
            let Some(farad) =
                setting.corner_capacitance_f(2.0, coil.inductance_h, corner_hz, between_above_hz(setting))
            else {
                continue;
            };
            let mut bench = Bench::default();
            let stages = vec![
                series(bench.capacitor(setting.free_capacitance(farad))),
                shunt(bench.coil(index)),
                series(bench.capacitor(setting.free_capacitance(farad))),
            ];
            drafts.push(bench.draft(self, setting, stages));
        }
        drafts
    }

    fn notches(&self, _values: &[SlotValue], _source_ohm: f64, _load_ohm: f64) -> Vec<Notch> {
        Vec::new()
    }
}

/// Where a corner may lie: from the highest line to the lowest kept frequency.
pub(super) fn between_above_hz(setting: &Setting) -> (f64, f64) {
    let highest_hz = setting.lines.last().map_or(0.0, |line| line.frequency_hz);
    (highest_hz, setting.kept_above_hz.unwrap_or(f64::INFINITY))
}

/// A corner between the highest line and the keep bands, where all of them lie above.
pub(super) fn corner_above_hz(setting: &Setting) -> Option<f64> {
    let highest_hz = setting.lines.last()?.frequency_hz;
    let kept_hz = setting.kept_above_hz?;
    (setting.kept_below_hz.is_none() && kept_hz > highest_hz)
        .then(|| (kept_hz * (kept_hz * highest_hz).sqrt()).sqrt())
}
