//! Branches: parts in series and in parallel, as impedance fractions.

use num_complex::Complex64;
use serde::{Deserialize, Serialize};

use super::values::{PartValue, Values};
use crate::parts::Part;

/// An impedance N/D with the denominator kept apart.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Fraction {
    /// N, whose zeros are the impedance's shorts.
    pub numerator: Complex64,
    /// D, whose zeros are its opens.
    pub denominator: Complex64,
}

impl Fraction {
    /// A break: no current at any voltage.
    pub const OPEN: Self =
        Self { numerator: Complex64::new(1.0, 0.0), denominator: Complex64::new(0.0, 0.0) };

    /// A wire: no voltage at any current.
    pub const SHORT: Self =
        Self { numerator: Complex64::new(0.0, 0.0), denominator: Complex64::new(1.0, 0.0) };

    /// N₁/D₁ + N₂/D₂.
    ///
    /// Two opens (two capacitors at DC) would make 0/0: they are an open. It is
    /// the only way to 0/0 from two fractions that are not 0/0 themselves.
    #[must_use]
    pub fn in_series(self, other: Self) -> Self {
        if is_zero(self.denominator) && is_zero(other.denominator) {
            return Self::OPEN;
        }
        Self {
            numerator: self.numerator * other.denominator + other.numerator * self.denominator,
            denominator: self.denominator * other.denominator,
        }
    }

    /// (N₁/D₁)∥(N₂/D₂). Two shorts are a short.
    #[must_use]
    pub fn in_parallel(self, other: Self) -> Self {
        if is_zero(self.numerator) && is_zero(other.numerator) {
            return Self::SHORT;
        }
        Self {
            numerator: self.numerator * other.numerator,
            denominator: self.numerator * other.denominator + other.numerator * self.denominator,
        }
    }

    /// N/D as one number; infinite for an open.
    pub fn quotient(self) -> Complex64 {
        self.numerator / self.denominator
    }
}

/// Whether both parts are exactly zero.
pub(super) fn is_zero(z: Complex64) -> bool {
    z.re == 0.0 && z.im == 0.0
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

    /// Whether a list in it is empty where a part was expected.
    pub(super) fn has_gaps(&self) -> bool {
        match self {
            Self::Part(_) => false,
            Self::Series { series: inner } | Self::Parallel { parallel: inner } => {
                inner.is_empty() || inner.iter().any(Self::has_gaps)
            }
        }
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
        self.impedance_of(parts, omega)
    }

    /// The same from any list of values.
    pub(super) fn impedance_of<V: Values + ?Sized>(&self, values: &V, omega: f64) -> Fraction {
        match self {
            Self::Part(index) => values.value(*index).impedance(omega),
            Self::Series { series } => series
                .iter()
                .map(|branch| branch.impedance_of(values, omega))
                .reduce(Fraction::in_series)
                .expect("not empty"),
            Self::Parallel { parallel } => parallel
                .iter()
                .map(|branch| branch.impedance_of(values, omega))
                .reduce(Fraction::in_parallel)
                .expect("not empty"),
        }
    }
}

/// Impedance of one part at `omega` rad/s, losses included.
///
/// Coil: (r + jωL)∥C_self. Capacitor: r + 1/jωC. Resistor and trimmer: R.
pub fn part_impedance(part: &Part, omega: f64) -> Fraction {
    PartValue::from(part).impedance(omega)
}
