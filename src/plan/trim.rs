//! Trims: which part is adjusted, over which range, and what is left after it.

use super::optimise::{Point, Problem};
use super::shelf::{Listed, Made, Shelf, slot_kind};
use crate::network::kinds::{NaturalTrim, Slot};
use crate::parts::PartKind;

/// How one slot is made so that it can be adjusted.
#[derive(Debug, Clone, PartialEq)]
pub struct Adjustable {
    /// The slot.
    pub slot: usize,
    /// Order whose line the reading is taken at.
    pub order: u32,
    /// Fixed parts: side by side with the adjusted one for a capacitor, before it
    /// for a resistor; may be empty.
    pub fixed: Vec<Listed>,
    /// The part adjusted: the pad, or the trimmer's whole track.
    pub adjusted: Listed,
    /// Planned value of the adjusted part.
    pub planned_si: f64,
    /// Smallest and largest value that it can take.
    pub range_si: (f64, f64),
    /// Half-width of what is left, as a fraction of the planned value.
    pub residue: f64,
}

/// Pads put side by side, each chosen by the reading that the one before left.
const PADS: i32 = 3;

/// Makes a slot adjustable with what the list holds; `None` where neither a
/// trimmer nor small parts can.
pub fn adjustable(problem: &Problem, point: &Point, trim: &NaturalTrim) -> Option<Adjustable> {
    let (assembly, shelf) = (problem.assembly, problem.shelf);
    let value_si = assembly.slot_value(trim.slot, &point.x, &point.made, shelf);
    let kind = slot_kind(&assembly.slots[trim.slot]);
    let (own, _) = shelf.tolerance_near(kind, value_si);
    let made_up: f64 = trim
        .makes_up_for
        .iter()
        .map(|&(slot, exponent)| exponent.abs() * tolerance_of(problem, point, slot))
        .sum();
    let reach_si = value_si * (own + made_up);
    match kind {
        PartKind::Capacitor => padded(shelf, trim, value_si, reach_si),
        PartKind::Resistor => turned(shelf, trim, value_si, reach_si),
        _ => None,
    }
}

fn tolerance_of(problem: &Problem, point: &Point, slot: usize) -> f64 {
    let shelf = problem.shelf;
    match problem.assembly.slots[slot] {
        Slot::Coil(index) => shelf.stock().coils[index].tolerance,
        other => {
            let value = problem.assembly.slot_value(slot, &point.x, &point.made, shelf);
            shelf.tolerance_near(slot_kind(&other), value).0
        }
    }
}

/// A capacitor somewhat too small, and a pad beside it that makes up the rest.
fn padded(shelf: &Shelf, trim: &NaturalTrim, value_si: f64, reach_si: f64) -> Option<Adjustable> {
    let pads = shelf.near(PartKind::Capacitor, reach_si, 2.6 * reach_si);
    let mut best: Option<(f64, Listed, Made)> = None;
    for &pad in pads {
        let rest = value_si - pad.value_si;
        let singles = shelf.singles(PartKind::Capacitor, rest, true);
        for made in singles.into_iter().chain(shelf.pair(PartKind::Capacitor, rest)) {
            // A second fixed capacitor is worth a thousandth of the value.
            let off = (made.value_si - rest).abs() / value_si + 1e-3 * (made.parts.len() - 1) as f64;
            if best.as_ref().is_none_or(|(least, ..)| off < *least) {
                best = Some((off, pad, made));
            }
        }
    }
    let (_, pad, made) = best?;
    let to_si = pad.value_si + reach_si;
    // Steps of a series of n a decade leave up to g = 1 − 10^(−1/n) of what is
    // still missing; the last pad is chosen the nearest, and is off by its tolerance.
    let line = &shelf.stock().capacitors[pad.line];
    let gap = 1.0 - 10f64.powf(-1.0 / f64::from(line.series.0));
    let left_si = to_si * gap.powi(PADS - 1) * (gap / 2.0 + line.tolerance);
    let left_si = left_si.max(shelf.capacitance_f()?.0 / 2.0);
    Some(Adjustable {
        slot: trim.slot,
        order: trim.order,
        fixed: made.parts,
        adjusted: pad,
        planned_si: pad.value_si,
        range_si: (0.0, to_si),
        residue: left_si / pad.value_si,
    })
}

/// A fixed resistor somewhat too small, and a trimmer behind it.
fn turned(shelf: &Shelf, trim: &NaturalTrim, value_si: f64, reach_si: f64) -> Option<Adjustable> {
    let offer = shelf.stock().trimmer_offers().into_iter().find(|offer| offer.value_si >= 2.2 * reach_si)?;
    let track_si = offer.value_si;
    let rest = value_si - track_si / 2.0;
    let fixed: Vec<Listed> = shelf
        .singles(PartKind::Resistor, rest, false)
        .into_iter()
        .find(|made| rest > 0.05 * value_si && (made.value_si / rest - 1.0).abs() < 0.1)
        .map_or(Vec::new(), |made| made.parts);
    let planned_si = value_si - fixed.iter().map(|listed| listed.value_si).sum::<f64>();
    if planned_si <= 0.0 || planned_si >= track_si {
        return None;
    }
    let resolution = shelf.stock().trimmers[offer.line].resolution;
    Some(Adjustable {
        slot: trim.slot,
        order: trim.order,
        fixed,
        adjusted: Listed { kind: PartKind::Trimmer, line: offer.line, value_si: track_si },
        planned_si,
        range_si: (0.0, track_si),
        residue: resolution * track_si / planned_si,
    })
}
