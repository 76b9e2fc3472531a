//! The comb trap: several L–C traps to ground on one series resistor.

use std::f64::consts::TAU;

use super::{
    Bench, Draft, Kind, Line, NaturalTrim, Notch, Setting, SlotValue, coil_q, parallel_ohm, resonance_hz,
    resonant_capacitance_f, series, shunt, usable_coils,
};
use crate::network::Branch;
use crate::parts::{CoilLine, PartKind};

/// Each ω_k² = 1/L_kC_k; traps pull on each other, so the search solves them
/// together. Of equal Q on one resistor the coils go as L_k ∝ 1/k.
pub struct CombTrap;

impl Kind for CombTrap {
    fn name(&self) -> &'static str {
        "comb trap"
    }

    fn drafts(&self, setting: &Setting, coils: &[CoilLine]) -> Vec<Draft> {
        if setting.lines.len() < 2 {
            return Vec::new();
        }
        let lowest = setting.lowest();
        let mut drafts: Vec<Draft> = Vec::new();
        for (_, base) in usable_coils(coils, lowest.frequency_hz) {
            let product = base.inductance_h * lowest.frequency_hz;
            let chosen: Option<Vec<usize>> = setting
                .lines
                .iter()
                .map(|line| nearest_coil(setting, coils, line, product / line.frequency_hz))
                .collect();
            let Some(chosen) = chosen else { continue };
            let draft = self.draft_with(setting, coils, &chosen);
            if drafts.iter().all(|other| other.slots != draft.slots) {
                drafts.push(draft);
            }
        }
        drafts
    }

    fn notches(&self, values: &[SlotValue], source_ohm: f64, load_ohm: f64) -> Vec<Notch> {
        let series_ohm = values.first().map_or(0.0, |resistor| resistor.value_si);
        let around_ohm = parallel_ohm(source_ohm + series_ohm, load_ohm);
        let mut notches: Vec<Notch> = values
            .windows(2)
            .filter(|pair| pair[0].kind == PartKind::Coil)
            .map(|pair| {
                let frequency_hz = resonance_hz(pair[0].value_si, pair[1].value_si);
                let lost_ohm = pair[0].series_resistance_ohm + pair[1].series_resistance_ohm;
                Notch {
                    frequency_hz,
                    q: TAU * frequency_hz * pair[0].value_si / (around_ohm + lost_ohm),
                    depth_db: Some(20.0 * ((around_ohm + lost_ohm) / lost_ohm).log10()),
                }
            })
            .collect();
        notches.sort_by(|a, b| a.frequency_hz.total_cmp(&b.frequency_hz));
        notches
    }
}

impl CombTrap {
    fn draft_with(&self, setting: &Setting, coils: &[CoilLine], chosen: &[usize]) -> Draft {
        let mut bench = Bench::default();
        // R from the depth of the trap that needs most of it.
        let wanted_ohm = setting
            .lines
            .iter()
            .zip(chosen)
            .map(|(line, &coil)| coils[coil].resistance_ohm * (10f64.powf(line.target_db / 20.0) - 1.0))
            .fold(0.0, f64::max);
        let series_ohm = (wanted_ohm - setting.source_ohm).max(0.0);
        let mut stages = vec![series(bench.resistor(setting.free_resistance(series_ohm)))];
        let mut trims = Vec::new();
        for (line, &coil) in setting.lines.iter().zip(chosen) {
            let farad = resonant_capacitance_f(coils[coil].inductance_h, line.frequency_hz);
            let coil_slot = bench.slots.len();
            stages.push(shunt(Branch::series([
                bench.coil(coil),
                bench.capacitor(setting.free_capacitance(farad)),
            ])));
            trims.push(NaturalTrim {
                slot: coil_slot + 1,
                order: line.order,
                makes_up_for: vec![(coil_slot, 1.0)],
            });
        }
        let mut draft = bench.draft(self, setting, stages);
        draft.trims = trims;
        draft
    }
}

/// The usable coil nearest to an inductance by ratio, the better Q winning where
/// two are as near; its capacitor must be one that can be made.
fn nearest_coil(setting: &Setting, coils: &[CoilLine], line: &Line, henry: f64) -> Option<usize> {
    usable_coils(coils, line.frequency_hz)
        .filter(|(_, coil)| {
            setting.may_have_capacitance(resonant_capacitance_f(coil.inductance_h, line.frequency_hz))
        })
        .min_by(|(_, a), (_, b)| {
            let cost = |coil: &CoilLine| {
                (coil.inductance_h / henry).ln().abs() - 0.3 * coil_q(coil, line.frequency_hz).ln()
            };
            cost(a).total_cmp(&cost(b))
        })
        .map(|(index, _)| index)
}
