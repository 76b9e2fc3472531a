//! A cascade of drafts: one network over slots, one list of values to choose.

use std::f64::consts::TAU;

use super::shelf::{Made, Shelf, slot_kind};
use crate::network::kinds::{Draft, Freedom, NaturalTrim, Slot};
use crate::network::{Branch, Circuit, Load, PartValue, Section, Source, TwoPort};
use crate::parts::PartKind;

/// Sections one after the other, their slots and freedoms counted through.
#[derive(Debug, Clone, PartialEq)]
pub struct Assembly {
    /// Orders that each section deals with.
    pub covers: Vec<Vec<u32>>,
    /// The sections between source and load; branches hold slots, no part is listed.
    pub network: Circuit,
    /// First slot of each section, and one past the last.
    pub first_slot: Vec<usize>,
    /// All slots.
    pub slots: Vec<Slot>,
    /// All freedoms.
    pub freedoms: Vec<Freedom>,
    /// All natural trims.
    pub trims: Vec<NaturalTrim>,
}

impl Assembly {
    /// The drafts from the source on.
    pub fn cascade(drafts: &[&Draft], (source, load): (Source, Load)) -> Self {
        let mut all = Self {
            covers: Vec::new(),
            network: Circuit { source, load, sections: Vec::new(), parts: Vec::new() },
            first_slot: vec![0],
            slots: Vec::new(),
            freedoms: Vec::new(),
            trims: Vec::new(),
        };
        for draft in drafts {
            let (slots, freedoms) = (all.slots.len(), all.freedoms.len());
            all.covers.push(draft.covers.clone());
            all.network.sections.push(Section {
                kind: draft.kind.to_owned(),
                stages: draft.stages.iter().map(|stage| moved(stage, slots)).collect(),
            });
            all.slots.extend(draft.slots.iter().map(|slot| match *slot {
                Slot::Coil(index) => Slot::Coil(index),
                Slot::Capacitor { freedom, factor } => {
                    Slot::Capacitor { freedom: freedom + freedoms, factor }
                }
                Slot::Resistor { freedom, factor } => Slot::Resistor { freedom: freedom + freedoms, factor },
            }));
            all.freedoms.extend(&draft.freedoms);
            all.trims.extend(draft.trims.iter().map(|trim| NaturalTrim {
                slot: trim.slot + slots,
                order: trim.order,
                makes_up_for:
                    trim.makes_up_for.iter().map(|&(slot, exponent)| (slot + slots, exponent)).collect(),
            }));
            all.first_slot.push(all.slots.len());
        }
        all
    }

    /// Where the search starts: the logarithms of the freedoms' starts.
    pub fn start(&self) -> Vec<f64> {
        self.freedoms.iter().map(|freedom| freedom.start.ln()).collect()
    }

    /// Number of coils.
    pub fn coils(&self) -> usize {
        self.slots.iter().filter(|slot| matches!(slot, Slot::Coil(_))).count()
    }

    /// The value of a slot: as made, or as the freedoms have it.
    pub fn slot_value(&self, slot: usize, x: &[f64], made: &[Option<Made>], shelf: &Shelf) -> f64 {
        if let Some(made) = &made[slot] {
            return made.value_si;
        }
        match self.slots[slot] {
            Slot::Coil(index) => shelf.stock().coils[index].inductance_h,
            Slot::Capacitor { freedom, factor } | Slot::Resistor { freedom, factor } => {
                factor * x[freedom].exp()
            }
        }
    }

    /// Values of all slots, with losses at `loss_hz`.
    pub fn values(&self, x: &[f64], made: &[Option<Made>], shelf: &Shelf, loss_hz: f64) -> Vec<PartValue> {
        (0..self.slots.len())
            .map(|slot| {
                let value_si = self.slot_value(slot, x, made, shelf);
                let kind = slot_kind(&self.slots[slot]);
                let (series_resistance_ohm, self_capacitance_f) = match self.slots[slot] {
                    Slot::Coil(index) => {
                        let coil = &shelf.stock().coils[index];
                        (coil.resistance_ohm, coil.self_capacitance_f())
                    }
                    Slot::Capacitor { .. } => (shelf.loss_near(value_si) / (TAU * loss_hz * value_si), 0.0),
                    Slot::Resistor { .. } => (0.0, 0.0),
                };
                PartValue { kind, value_si, series_resistance_ohm, self_capacitance_f }
            })
            .collect()
    }

    /// Slots that take their value from a freedom.
    pub fn slots_of(&self, freedom: usize) -> Vec<usize> {
        (0..self.slots.len())
            .filter(|&slot| match self.slots[slot] {
                Slot::Coil(_) => false,
                Slot::Capacitor { freedom: own, .. } | Slot::Resistor { freedom: own, .. } => own == freedom,
            })
            .collect()
    }

    /// What the freedom is a value of.
    pub fn kind_of(&self, freedom: usize) -> PartKind {
        self.slots_of(freedom).first().map_or(PartKind::Resistor, |&slot| slot_kind(&self.slots[slot]))
    }
}

/// A stage with its slots counted from `by` on.
fn moved(stage: &TwoPort, by: usize) -> TwoPort {
    let moved = stage.try_map(&mut |slot: &usize| Ok::<_, std::convert::Infallible>(slot + by));
    let Ok(moved) = moved;
    moved
}

/// A branch over slots as a branch over parts, where a slot may be several.
pub fn expanded(stage: &TwoPort, slot_branch: &[Branch]) -> TwoPort {
    match stage {
        TwoPort::Series { series } => TwoPort::Series { series: expanded_branch(series, slot_branch) },
        TwoPort::Shunt { shunt } => TwoPort::Shunt { shunt: expanded_branch(shunt, slot_branch) },
        TwoPort::Beside { beside } => TwoPort::Beside {
            beside: beside
                .iter()
                .map(|chain| chain.iter().map(|port| expanded(port, slot_branch)).collect())
                .collect(),
        },
    }
}

fn expanded_branch(branch: &Branch, slot_branch: &[Branch]) -> Branch {
    match branch {
        Branch::Part(slot) => slot_branch[*slot].clone(),
        Branch::Series { series } => {
            Branch::series(series.iter().map(|inner| expanded_branch(inner, slot_branch)))
        }
        // A bank inside a parallel branch lies side by side with the rest.
        Branch::Parallel { parallel } => {
            Branch::parallel(parallel.iter().flat_map(|inner| match expanded_branch(inner, slot_branch) {
                Branch::Parallel { parallel } => parallel,
                other => vec![other],
            }))
        }
    }
}
