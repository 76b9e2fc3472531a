//! Branches: parts in series and in parallel, as impedance fractions.

use num_complex::Complex64;
use serde::{Deserialize, Serialize};

use crate::parts::{Part, PartKind};

/// An impedance N/D with the denominator kept apart.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Fraction {
    /// N, whose zeros are the impedance's shorts.
    pub numerator: Complex64,
    /// D, whose zeros are its opens.
    pub denominator: Complex64,
}

impl Fraction {
    /// N₁/D₁ + N₂/D₂.
    #[must_use]
    pub fn in_series(self, other: Self) -> Self {
        Self {
            numerator: self.numerator * other.denominator + other.numerator * self.denominator,
            denominator: self.denominator * other.denominator,
        }
    }

    /// (N₁/D₁)∥(N₂/D₂).
    #[must_use]
    pub fn in_parallel(self, other: Self) -> Self {
        Self {
            numerator: self.numerator * other.numerator,
            denominator: self.numerator * other.denominator + other.numerator * self.denominator,
        }
    }
}

/// Parts in series and in parallel. `P` names a part: an index into the
/// circuit's parts while computing, its reference in files.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(untagged)]
pub enum Branch<P = usize> {
    /// One part.
    Part(P),
    /// One after the other.
    Series {
        /// The branches, at least one.
        series: Vec<Branch<P>>,
    },
    /// Side by side.
    Parallel {
        /// The branches, at least one.
        parallel: Vec<Branch<P>>,
    },
}

impl<P> Branch<P> {
    /// The branches one after the other.
    pub fn series(branches: impl IntoIterator<Item = Self>) -> Self {
        Self::Series { series: branches.into_iter().collect() }
    }

    /// The branches side by side.
    pub fn parallel(branches: impl IntoIterator<Item = Self>) -> Self {
        Self::Parallel { parallel: branches.into_iter().collect() }
    }

    /// The same branch with every part renamed by `name`.
    ///
    /// # Errors
    /// The first error of `name`.
    pub fn try_map<Q, E>(&self, name: &mut impl FnMut(&P) -> Result<Q, E>) -> Result<Branch<Q>, E> {
        Ok(match self {
            Self::Part(part) => Branch::Part(name(part)?),
            Self::Series { series } => Branch::Series { series: map_all(series, name)? },
            Self::Parallel { parallel } => Branch::Parallel { parallel: map_all(parallel, name)? },
        })
    }

    /// The parts, from the input side on.
    pub fn parts(&self) -> Vec<&P> {
        match self {
            Self::Part(part) => vec![part],
            Self::Series { series: inner } | Self::Parallel { parallel: inner } => {
                inner.iter().flat_map(Branch::parts).collect()
            }
        }
    }
}

fn map_all<P, Q, E>(
    branches: &[Branch<P>],
    name: &mut impl FnMut(&P) -> Result<Q, E>,
) -> Result<Vec<Branch<Q>>, E> {
    branches.iter().map(|branch| branch.try_map(name)).collect()
}

impl Branch<usize> {
    /// Impedance at `omega` rad/s with these parts.
    ///
    /// # Panics
    /// When the branch names a part that is not there, or holds no part.
    pub fn impedance(&self, parts: &[Part], omega: f64) -> Fraction {
        match self {
            Self::Part(index) => part_impedance(&parts[*index], omega),
            Self::Series { series } => series
                .iter()
                .map(|branch| branch.impedance(parts, omega))
                .reduce(Fraction::in_series)
                .expect("not empty"),
            Self::Parallel { parallel } => parallel
                .iter()
                .map(|branch| branch.impedance(parts, omega))
                .reduce(Fraction::in_parallel)
                .expect("not empty"),
        }
    }
}

/// Impedance of one part at `omega` rad/s, losses included.
///
/// Coil: (r + jωL)∥C_self. Capacitor: r + 1/jωC. Resistor and trimmer: R.
pub fn part_impedance(part: &Part, omega: f64) -> Fraction {
    let r = part.series_resistance_ohm;
    match part.kind {
        PartKind::Resistor | PartKind::Trimmer => Fraction {
            numerator: Complex64::new(part.setting_ohm.unwrap_or(part.value_si), 0.0),
            denominator: Complex64::new(1.0, 0.0),
        },
        PartKind::Capacitor => {
            let susceptance = omega * part.value_si;
            Fraction {
                numerator: Complex64::new(1.0, susceptance * r),
                denominator: Complex64::new(0.0, susceptance),
            }
        }
        PartKind::Coil => {
            let winding = Complex64::new(r, omega * part.value_si);
            let own = Complex64::new(0.0, omega * part.self_capacitance_f);
            Fraction { numerator: winding, denominator: 1.0 + own * winding }
        }
    }
}
