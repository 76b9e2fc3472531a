//! Section kinds: what each is made of, where a design starts, its Q and depth.
//!
//! A kind is one file with one [`Kind`] and one line in [`KINDS`]. It turns
//! lines to be reduced, and coils that are sold, into [`Draft`]s: two-ports over
//! slots, each slot a coil of the list or a value that the search may choose.

mod bridged_t;
mod comb_trap;
mod high_pass;
mod low_pass;
mod notched_high_pass;
mod notched_low_pass;
mod series_tank;
mod shunt_trap;
mod twin_t;

use std::f64::consts::TAU;

use super::{Branch, TwoPort};
use crate::parts::{CoilLine, PartKind};

pub use bridged_t::BridgedT;
pub use comb_trap::CombTrap;
pub use high_pass::HighPass;
pub use low_pass::LowPass;
pub use notched_high_pass::NotchedHighPass;
pub use notched_low_pass::NotchedLowPass;
pub use series_tank::SeriesTank;
pub use shunt_trap::ShuntTrap;
pub use twin_t::TwinT;

/// Every kind the planner knows.
pub const KINDS: &[&dyn Kind] = &[
    &LowPass,
    &HighPass,
    &NotchedLowPass,
    &NotchedHighPass,
    &ShuntTrap,
    &SeriesTank,
    &BridgedT,
    &TwinT,
    &CombTrap,
];

/// The kind of this name.
pub fn kind_named(name: &str) -> Option<&'static dyn Kind> {
    KINDS.iter().copied().find(|kind| kind.name() == name)
}

/// A kind of section.
pub trait Kind: Sync {
    /// Its name, as files and pages write it.
    fn name(&self) -> &'static str;

    /// Designs to start from, for all lines of the setting together; empty where
    /// the kind does not suit them or no coil does.
    fn drafts(&self, setting: &Setting, coils: &[CoilLine]) -> Vec<Draft>;

    /// Notches of a finished section, by rising frequency; empty for a plain
    /// low-pass or high-pass. `values` are those of the draft's slots, the
    /// resistances those that the section sees towards source and load.
    fn notches(&self, values: &[SlotValue], source_ohm: f64, load_ohm: f64) -> Vec<Notch>;

    /// Whether a section is one notch in an otherwise flat response and nothing
    /// else, so that its Q can be held against the window of a single notch.
    fn is_single_notch(&self) -> bool {
        false
    }
}

/// A line to be reduced.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Line {
    /// Order of the harmonic.
    pub order: u32,
    /// Centre of its design spread in hertz.
    pub frequency_hz: f64,
    /// Reduction asked for in decibels.
    pub target_db: f64,
}

/// What a section is to do, and between what.
#[derive(Debug, Clone, PartialEq)]
pub struct Setting {
    /// Resistance seen towards the source.
    pub source_ohm: f64,
    /// Resistance seen towards the load.
    pub load_ohm: f64,
    /// Lines to be reduced, at least one, by rising frequency.
    pub lines: Vec<Line>,
    /// Highest kept frequency below the lowest line, where there is one.
    pub kept_below_hz: Option<f64>,
    /// Lowest kept frequency above the lowest line, where there is one.
    pub kept_above_hz: Option<f64>,
    /// Whether the keep bands reach down to 0 Hz.
    pub keeps_dc: bool,
    /// Smallest and largest capacitance that can be made from the list.
    pub capacitance_f: (f64, f64),
    /// Smallest and largest resistance that can be made from the list.
    pub resistance_ohm: (f64, f64),
}

impl Setting {
    /// The lowest line.
    fn lowest(&self) -> Line {
        self.lines[0]
    }

    fn may_have_capacitance(&self, farad: f64) -> bool {
        (self.capacitance_f.0..=self.capacitance_f.1).contains(&farad)
    }

    /// C = `factor`/(ω²L) for a corner of L and C at `corner_hz`, or the nearest
    /// capacitance that can be made, where the corner then lies within `between_hz`:
    /// it is where a search starts, and must not be given up for lying off the list.
    fn corner_capacitance_f(
        &self,
        factor: f64,
        inductance_h: f64,
        corner_hz: f64,
        between_hz: (f64, f64),
    ) -> Option<f64> {
        let wanted_f = factor / ((TAU * corner_hz).powi(2) * inductance_h);
        let farad = wanted_f.max(self.capacitance_f.0).min(self.capacitance_f.1);
        let moved_hz = corner_hz * (wanted_f / farad).sqrt();
        (between_hz.0..=between_hz.1).contains(&moved_hz).then_some(farad)
    }

    /// A capacitance left to the search, starting here.
    fn free_capacitance(&self, farad: f64) -> Freedom {
        Freedom::within(farad, self.capacitance_f)
    }

    /// A resistance left to the search, starting here.
    fn free_resistance(&self, ohm: f64) -> Freedom {
        Freedom::within(ohm, self.resistance_ohm)
    }
}

/// A value that the search may choose, SI.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Freedom {
    /// Where it starts.
    pub start: f64,
    /// Smallest.
    pub lowest: f64,
    /// Largest.
    pub highest: f64,
}

impl Freedom {
    fn within(start: f64, (lowest, highest): (f64, f64)) -> Self {
        Self { start: start.clamp(lowest, highest), lowest, highest }
    }
}

/// What stands in a slot.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Slot {
    /// The coil at this index of the list.
    Coil(usize),
    /// A capacitor of `factor` times the freedom's value.
    Capacitor {
        /// Index of the freedom.
        freedom: usize,
        /// Multiple of it.
        factor: f64,
    },
    /// A resistor of `factor` times the freedom's value.
    Resistor {
        /// Index of the freedom.
        freedom: usize,
        /// Multiple of it.
        factor: f64,
    },
}

/// Value of one slot in a finished section.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct SlotValue {
    /// What stands in the slot.
    pub kind: PartKind,
    /// Ohm, farad or henry.
    pub value_si: f64,
    /// Resistance in series with it.
    pub series_resistance_ohm: f64,
}

/// A trim that suits the kind: which slot makes up for the deviations of which.
#[derive(Debug, Clone, PartialEq)]
pub struct NaturalTrim {
    /// The slot adjusted.
    pub slot: usize,
    /// The line at which least output is sought.
    pub order: u32,
    /// Other slots' deviations that the trim makes up for: to first order the
    /// adjusted value moves by −exponent times each one's relative deviation.
    pub makes_up_for: Vec<(usize, f64)>,
}

/// A section before its values are chosen.
#[derive(Debug, Clone, PartialEq)]
pub struct Draft {
    /// Name of the kind.
    pub kind: &'static str,
    /// Orders the section is to deal with, by notches or by its slope.
    pub covers: Vec<u32>,
    /// Two-ports from the source on, over slots.
    pub stages: Vec<TwoPort<usize>>,
    /// What stands in each slot.
    pub slots: Vec<Slot>,
    /// Values to be chosen.
    pub freedoms: Vec<Freedom>,
    /// Trims that suit it, in the order of work.
    pub trims: Vec<NaturalTrim>,
}

/// One notch of a finished section.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Notch {
    /// Where it lies, hertz.
    pub frequency_hz: f64,
    /// Loaded Q.
    pub q: f64,
    /// Loaded depth relative to the flat level, decibels; `None` for a full null.
    pub depth_db: Option<f64>,
}

/// Resonance of L and C, hertz: ω₀² = 1/LC.
pub fn resonance_hz(inductance_h: f64, capacitance_f: f64) -> f64 {
    1.0 / (TAU * (inductance_h * capacitance_f).sqrt())
}

/// Capacitance that resonates with L: C = 1/(ω₀²L).
pub fn resonant_capacitance_f(inductance_h: f64, frequency_hz: f64) -> f64 {
    1.0 / ((TAU * frequency_hz).powi(2) * inductance_h)
}

/// Q of a coil by itself: Q_L = ω₀L/r.
pub fn coil_q(coil: &CoilLine, frequency_hz: f64) -> f64 {
    TAU * frequency_hz * coil.inductance_h / coil.resistance_ohm
}

/// R₁∥R₂.
pub fn parallel_ohm(a: f64, b: f64) -> f64 {
    if a.is_infinite() {
        b
    } else if b.is_infinite() {
        a
    } else {
        a * b / (a + b)
    }
}

/// Coils that are still coils at this frequency, with their place in the list:
/// self-resonance at least five times above it.
fn usable_coils(coils: &[CoilLine], frequency_hz: f64) -> impl Iterator<Item = (usize, &CoilLine)> {
    coils
        .iter()
        .enumerate()
        .filter(move |(_, coil)| coil.resonance_hz.is_none_or(|own_hz| own_hz >= 5.0 * frequency_hz))
}

fn series(branch: Branch) -> TwoPort {
    TwoPort::Series { series: branch }
}

fn shunt(branch: Branch) -> TwoPort {
    TwoPort::Shunt { shunt: branch }
}

fn part(slot: usize) -> Branch {
    Branch::Part(slot)
}

/// Collects slots and freedoms of a draft while its stages are laid out.
#[derive(Default)]
struct Bench {
    slots: Vec<Slot>,
    freedoms: Vec<Freedom>,
}

impl Bench {
    fn coil(&mut self, index: usize) -> Branch {
        self.slots.push(Slot::Coil(index));
        part(self.slots.len() - 1)
    }

    fn capacitor(&mut self, freedom: Freedom) -> Branch {
        self.freedoms.push(freedom);
        self.tied_capacitor(1.0)
    }

    fn resistor(&mut self, freedom: Freedom) -> Branch {
        self.freedoms.push(freedom);
        self.tied_resistor(1.0)
    }

    /// A multiple of the last freedom.
    fn tied_capacitor(&mut self, factor: f64) -> Branch {
        self.slots.push(Slot::Capacitor { freedom: self.freedoms.len() - 1, factor });
        part(self.slots.len() - 1)
    }

    /// A multiple of the last freedom.
    fn tied_resistor(&mut self, factor: f64) -> Branch {
        self.slots.push(Slot::Resistor { freedom: self.freedoms.len() - 1, factor });
        part(self.slots.len() - 1)
    }

    fn draft(self, kind: &dyn Kind, setting: &Setting, stages: Vec<TwoPort>) -> Draft {
        Draft {
            kind: kind.name(),
            covers: setting.lines.iter().map(|line| line.order).collect(),
            stages,
            slots: self.slots,
            freedoms: self.freedoms,
            trims: Vec::new(),
        }
    }
}
