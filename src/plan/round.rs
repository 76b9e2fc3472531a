//! From free values to parts of the list: rounding, with the rest re-optimised.

use super::optimise::{NUDGE, Point, Problem, TOUCH_UP};
use super::shelf::{Made, slot_kind};
use crate::parts::PartKind;

/// Points carried from one rounded value to the next.
const BEAM: usize = 2;
/// With more values to choose than this, each is rounded to the better neighbour as
/// it stands, and the rest is re-optimised only now and then.
const MANY: usize = 8;
/// Values rounded between two re-optimisations where there are many.
const BETWEEN: usize = 6;

/// Where two capacitors side by side may stand for one.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Pairs {
    /// Nowhere, and nothing larger than the largest listed either.
    Never,
    /// Nowhere but where more than the largest listed is wanted.
    Nowhere,
    /// In the slots of this freedom.
    In(usize),
    /// Everywhere.
    Everywhere,
}

impl Pairs {
    fn allow(self, freedom: usize) -> bool {
        match self {
            Self::Never | Self::Nowhere => false,
            Self::In(only) => only == freedom,
            Self::Everywhere => true,
        }
    }
}

/// Settles every slot but those in `trimmed`, the coarsest values first, each time
/// re-optimising what is still free. `pairs` tells where two capacitors side by
/// side may stand where one listed value does not do.
///
/// `None` where the list offers nothing for a slot.
pub fn rounded(problem: &Problem, from: &Point, trimmed: &[usize], pairs: Pairs) -> Option<Point> {
    let assembly = problem.assembly;
    let mut order: Vec<usize> = (0..assembly.freedoms.len()).collect();
    // Capacitors come in coarse steps, so the resistors after them can make up
    // for theirs; freedoms with a trimmed slot last.
    order.sort_by_key(|&freedom| {
        let slots = assembly.slots_of(freedom);
        let adjusts = slots.iter().any(|slot| trimmed.contains(slot));
        (adjusts, assembly.kind_of(freedom) != PartKind::Capacitor)
    });
    let many = order.len() > MANY;
    let mut beam = vec![from.clone()];
    for (turn, freedom) in order.into_iter().enumerate() {
        let slots: Vec<usize> =
            assembly.slots_of(freedom).into_iter().filter(|slot| !trimmed.contains(slot)).collect();
        if slots.is_empty() {
            continue;
        }
        let mut next: Vec<Point> = Vec::new();
        for point in &beam {
            for choice in choices(problem, point, &slots, pairs.allow(freedom), pairs != Pairs::Never) {
                let mut trial = point.clone();
                for (&slot, made) in slots.iter().zip(choice) {
                    trial.made[slot] = Some(made);
                }
                if many {
                    trial.worst = problem.worst(&trial);
                    next.push(trial);
                } else {
                    next.push(problem.improve(&trial, TOUCH_UP));
                }
            }
        }
        next.sort_by(|a, b| a.worst.total_cmp(&b.worst));
        next.truncate(if many { 1 } else { BEAM });
        if many && turn % BETWEEN == BETWEEN - 1 {
            next.iter_mut().for_each(|point| *point = problem.improve(point, NUDGE));
        }
        beam = next;
    }
    beam.into_iter().next()
}

/// Ways to make all slots of one freedom: all rounded down, all rounded up, and
/// all in pairs.
fn choices(problem: &Problem, point: &Point, slots: &[usize], pairs: bool, banks: bool) -> Vec<Vec<Made>> {
    let per_slot: Vec<Vec<Made>> = slots
        .iter()
        .map(|&slot| {
            let value = problem.assembly.slot_value(slot, &point.x, &point.made, problem.shelf);
            let kind = slot_kind(&problem.assembly.slots[slot]);
            let mut made = problem.shelf.singles(kind, value, banks);
            if pairs {
                made.extend(problem.shelf.pair(kind, value));
            }
            made
        })
        .collect();
    let most = per_slot.iter().map(Vec::len).max().unwrap_or(0);
    if per_slot.iter().any(Vec::is_empty) {
        return Vec::new();
    }
    (0..most)
        .map(|choice| per_slot.iter().map(|made| made[choice.min(made.len() - 1)].clone()).collect())
        .collect()
}
