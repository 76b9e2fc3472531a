//! The stock list as the search reaches into it: single values, pairs, banks.

use crate::network::kinds::Slot;
use crate::parts::{Offer, Part, PartKind, Stock};

/// A part of the list, by its line and value.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Listed {
    /// What it is.
    pub kind: PartKind,
    /// Index of its line in the list of its kind.
    pub line: usize,
    /// Ohm, farad or henry.
    pub value_si: f64,
}

/// Listed parts that stand for one value.
#[derive(Debug, Clone, PartialEq)]
pub struct Made {
    /// The parts: one, or several side by side.
    pub parts: Vec<Listed>,
    /// What they come to.
    pub value_si: f64,
}

/// Most parts put side by side for one value.
const LARGEST_BANK: usize = 4;

/// The list's values in order.
pub struct Shelf<'a> {
    stock: &'a Stock,
    capacitors: Vec<Listed>,
    resistors: Vec<Listed>,
}

impl<'a> Shelf<'a> {
    /// Lays out all values of the list.
    pub fn new(stock: &'a Stock) -> Self {
        let listed = |kind, offers: Vec<Offer>| {
            offers.into_iter().map(|Offer { value_si, line }| Listed { kind, line, value_si }).collect()
        };
        let capacitors = listed(PartKind::Capacitor, stock.capacitor_offers());
        let resistors = listed(PartKind::Resistor, stock.resistor_offers());
        Self { stock, capacitors, resistors }
    }

    /// The list.
    pub fn stock(&self) -> &Stock {
        self.stock
    }

    /// Smallest and largest capacitance that can be made, or `None` without capacitors.
    pub fn capacitance_f(&self) -> Option<(f64, f64)> {
        Some((self.capacitors.first()?.value_si, LARGEST_BANK as f64 * self.capacitors.last()?.value_si))
    }

    /// The largest single capacitor, or zero without capacitors.
    pub fn largest_capacitor_f(&self) -> f64 {
        self.capacitors.last().map_or(0.0, |listed| listed.value_si)
    }

    /// Smallest and largest listed resistance, or `None` without resistors.
    pub fn resistance_ohm(&self) -> Option<(f64, f64)> {
        Some((self.resistors.first()?.value_si, self.resistors.last()?.value_si))
    }

    fn list(&self, kind: PartKind) -> &[Listed] {
        match kind {
            PartKind::Capacitor => &self.capacitors,
            PartKind::Resistor | PartKind::Trimmer => &self.resistors,
            PartKind::Coil => &[],
        }
    }

    /// All listed values from `from_si` to `to_si`.
    pub fn near(&self, kind: PartKind, from_si: f64, to_si: f64) -> &[Listed] {
        let list = self.list(kind);
        let start = list.partition_point(|listed| listed.value_si < from_si);
        let end = list.partition_point(|listed| listed.value_si <= to_si);
        &list[start..end.max(start)]
    }

    /// The listed values next below and next above, one part each; with `banks`, above
    /// the largest capacitor also the fewest side by side.
    pub fn singles(&self, kind: PartKind, value_si: f64, banks: bool) -> Vec<Made> {
        let list = self.list(kind);
        let above = list.partition_point(|listed| listed.value_si < value_si);
        let mut made: Vec<Made> = [above.checked_sub(1), Some(above)]
            .into_iter()
            .flatten()
            .filter_map(|index| list.get(index))
            .map(|&listed| Made { parts: vec![listed], value_si: listed.value_si })
            .collect();
        if banks && above == list.len() && kind == PartKind::Capacitor {
            made.extend(self.bank(value_si));
        }
        made
    }

    /// The two side by side that come nearest to a capacitance, the larger first.
    pub fn pair(&self, kind: PartKind, value_si: f64) -> Option<Made> {
        if kind != PartKind::Capacitor {
            return None;
        }
        let list = &self.capacitors;
        let largest = list.partition_point(|listed| listed.value_si < value_si);
        let mut best: Option<Made> = None;
        for &first in list[..largest].iter().rev().take_while(|first| first.value_si >= 0.5 * value_si) {
            let rest = value_si - first.value_si;
            let above = list.partition_point(|listed| listed.value_si < rest);
            for second in
                [above.checked_sub(1), Some(above)].into_iter().flatten().filter_map(|i| list.get(i))
            {
                let sum = first.value_si + second.value_si;
                if best.as_ref().is_none_or(|made| (sum - value_si).abs() < (made.value_si - value_si).abs())
                {
                    best = Some(Made { parts: vec![first, *second], value_si: sum });
                }
            }
        }
        best
    }

    /// The fewest side by side that come near a capacitance above the largest
    /// single one: n of the largest, or n − 1 and the nearest to the rest.
    fn bank(&self, value_si: f64) -> Vec<Made> {
        let Some(&largest) = self.capacitors.last() else { return Vec::new() };
        let whole = (value_si / largest.value_si).floor() as usize;
        if whole == 0 || whole > LARGEST_BANK {
            return Vec::new();
        }
        let rest = value_si - whole as f64 * largest.value_si;
        let above = self.capacitors.partition_point(|listed| listed.value_si < rest);
        [above.checked_sub(1), Some(above)]
            .into_iter()
            .flatten()
            .filter_map(|index| self.capacitors.get(index))
            .filter(|_| whole < LARGEST_BANK)
            .map(|&last| {
                let mut parts = vec![largest; whole];
                parts.push(last);
                Made { value_si: parts.iter().map(|listed| listed.value_si).sum(), parts }
            })
            .collect()
    }

    /// Tolerance, as a fraction, of one part near this value.
    pub fn tolerance_near(&self, kind: PartKind, value_si: f64) -> (f64, f64) {
        let list = self.list(kind);
        let above =
            list.partition_point(|listed| listed.value_si < value_si).min(list.len().saturating_sub(1));
        list.get(above).map_or((0.0, 0.0), |listed| self.tolerance_and_drift(listed))
    }

    fn tolerance_and_drift(&self, listed: &Listed) -> (f64, f64) {
        match listed.kind {
            PartKind::Capacitor => {
                let line = &self.stock.capacitors[listed.line];
                (line.tolerance, line.drift_per_k)
            }
            PartKind::Resistor => {
                let line = &self.stock.resistors[listed.line];
                (line.tolerance, line.drift_per_k)
            }
            PartKind::Coil => {
                let line = &self.stock.coils[listed.line];
                (line.tolerance, line.drift_per_k)
            }
            PartKind::Trimmer => (0.0, self.stock.trimmers[listed.line].drift_per_k),
        }
    }

    /// Loss factor of the capacitors near this value.
    pub fn loss_near(&self, value_si: f64) -> f64 {
        let list = &self.capacitors;
        let above =
            list.partition_point(|listed| listed.value_si < value_si).min(list.len().saturating_sub(1));
        list.get(above).map_or(0.0, |listed| self.stock.capacitors[listed.line].loss)
    }

    /// The part as the circuit holds it, its losses at `frequency_hz`; the
    /// reference is left to the circuit.
    pub fn part(&self, listed: &Listed, frequency_hz: f64) -> Part {
        match listed.kind {
            PartKind::Coil => self.stock.coils[listed.line].part(""),
            PartKind::Capacitor => self.stock.capacitors[listed.line].part("", listed.value_si, frequency_hz),
            PartKind::Resistor => self.stock.resistors[listed.line].part("", listed.value_si),
            PartKind::Trimmer => self.stock.trimmers[listed.line].part("", listed.value_si, listed.value_si),
        }
    }
}

/// What a slot holds.
pub fn slot_kind(slot: &Slot) -> PartKind {
    match slot {
        Slot::Coil(_) => PartKind::Coil,
        Slot::Capacitor { .. } => PartKind::Capacitor,
        Slot::Resistor { .. } => PartKind::Resistor,
    }
}
