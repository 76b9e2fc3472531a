//! Two-ports and their chain matrices with the denominator kept apart.

use num_complex::Complex64;
use serde::{Deserialize, Serialize};

use super::branch::{Branch, is_zero};
use super::values::Values;
use crate::parts::Part;

/// A chain matrix M/d: V₁ = (M₁₁V₂ + M₁₂I₂)/d, I₁ = (M₂₁V₂ + M₂₂I₂)/d, with I₂
/// flowing out of the second port. Of a reciprocal two-port det M = d².
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Chain {
    /// M, by rows.
    pub m: [[Complex64; 2]; 2],
    /// d.
    pub d: Complex64,
}

impl Chain {
    /// A straight piece of wire.
    pub const THROUGH: Self = {
        let one = Complex64::new(1.0, 0.0);
        let zero = Complex64::new(0.0, 0.0);
        Self { m: [[one, zero], [zero, one]], d: one }
    };

    /// This two-port, then `next`.
    #[must_use]
    pub fn then(&self, next: &Self) -> Self {
        let (a, b) = (&self.m, &next.m);
        let entry = |row: usize, column: usize| a[row][0] * b[0][column] + a[row][1] * b[1][column];
        Self { m: [[entry(0, 0), entry(0, 1)], [entry(1, 0), entry(1, 1)]], d: self.d * next.d }.rescaled()
    }

    /// This two-port with `other` side by side: both inputs joined, both outputs joined.
    ///
    /// Admittances add: y₁₁ = M₂₂/M₁₂, y₂₂ = M₁₁/M₁₂, y₁₂ = y₂₁ = −d/M₁₂; cleared
    /// of the common denominator M₁₂M₁₂′ nothing is left to divide by.
    ///
    /// Two chains with M₁₂ = 0 are wires with branches to ground hung on them:
    /// side by side they do what they do one after the other.
    #[must_use]
    pub fn beside(&self, other: &Self) -> Self {
        if is_zero(self.m[0][1]) && is_zero(other.m[0][1]) {
            return self.then(other);
        }
        let [[a11, a12], [a21, a22]] = self.m;
        let [[b11, b12], [b21, b22]] = other.m;
        Self {
            m: [
                [a11 * b12 + b11 * a12, a12 * b12],
                [
                    a22 * b11 + b22 * a11 - 2.0 * self.d * other.d + a21 * b12 + b21 * a12,
                    a22 * b12 + b22 * a12,
                ],
            ],
            d: self.d * b12 + other.d * a12,
        }
        .rescaled()
    }

    /// The same quotient with entries of moderate size, so that long chains
    /// neither overflow nor underflow. A power of two: rounds nothing.
    fn rescaled(self) -> Self {
        let size =
            self.m.iter().flatten().chain([&self.d]).map(|z| z.re.abs().max(z.im.abs())).fold(0.0, f64::max);
        if (1e-60..1e60).contains(&size) || size == 0.0 || !size.is_finite() {
            return self;
        }
        let scale = (-size.log2().round()).exp2();
        Self { m: self.m.map(|row| row.map(|z| z * scale)), d: self.d * scale }
    }
}

/// A passive two-port over the common ground line.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(untagged)]
pub enum TwoPort<P = usize> {
    /// A branch in the line.
    Series {
        /// The branch.
        series: Branch<P>,
    },
    /// A branch from the line to ground.
    Shunt {
        /// The branch.
        shunt: Branch<P>,
    },
    /// Chains side by side between the same two nodes: bridged-T, twin-T.
    Beside {
        /// The chains, at least one, each at least one two-port long.
        beside: Vec<Vec<TwoPort<P>>>,
    },
}

impl<P> TwoPort<P> {
    /// The same two-port with every part renamed by `name`.
    ///
    /// # Errors
    /// The first error of `name`.
    pub fn try_map<Q, E>(&self, name: &mut impl FnMut(&P) -> Result<Q, E>) -> Result<TwoPort<Q>, E> {
        Ok(match self {
            Self::Series { series } => TwoPort::Series { series: series.try_map(name)? },
            Self::Shunt { shunt } => TwoPort::Shunt { shunt: shunt.try_map(name)? },
            Self::Beside { beside } => TwoPort::Beside {
                beside: beside
                    .iter()
                    .map(|chain| chain.iter().map(|port| port.try_map(name)).collect())
                    .collect::<Result<_, E>>()?,
            },
        })
    }

    /// Whether a list in it is empty where a part was expected.
    pub(super) fn has_gaps(&self) -> bool {
        match self {
            Self::Series { series: branch } | Self::Shunt { shunt: branch } => branch.has_gaps(),
            Self::Beside { beside } => {
                let gap = |chain: &Vec<Self>| chain.is_empty() || chain.iter().any(Self::has_gaps);
                beside.is_empty() || beside.iter().any(gap)
            }
        }
    }

    /// The parts, from the input side on.
    pub fn parts(&self) -> Vec<&P> {
        match self {
            Self::Series { series: branch } | Self::Shunt { shunt: branch } => branch.parts(),
            Self::Beside { beside } => beside.iter().flatten().flat_map(TwoPort::parts).collect(),
        }
    }
}

impl TwoPort<usize> {
    /// Chain matrix at `omega` rad/s with these parts.
    ///
    /// # Panics
    /// When a branch names a part that is not there, or `beside` is empty.
    pub fn chain(&self, parts: &[Part], omega: f64) -> Chain {
        self.chain_from(parts, omega)
    }

    /// The same from any list of values.
    pub(super) fn chain_from<V: Values + ?Sized>(&self, values: &V, omega: f64) -> Chain {
        let zero = Complex64::new(0.0, 0.0);
        match self {
            Self::Series { series } => {
                let z = series.impedance_of(values, omega);
                Chain { m: [[z.denominator, z.numerator], [zero, z.denominator]], d: z.denominator }
            }
            Self::Shunt { shunt } => {
                let z = shunt.impedance_of(values, omega);
                Chain { m: [[z.numerator, zero], [z.denominator, z.numerator]], d: z.numerator }
            }
            Self::Beside { beside } => beside
                .iter()
                .map(|chain| chain_of(chain, values, omega))
                .reduce(|a, b| a.beside(&b))
                .expect("at least one chain"),
        }
    }
}

/// Chain matrix of two-ports one after the other.
pub(super) fn chain_of<'a, V: Values + ?Sized>(
    ports: impl IntoIterator<Item = &'a TwoPort>,
    values: &V,
    omega: f64,
) -> Chain {
    ports.into_iter().fold(Chain::THROUGH, |chain, port| chain.then(&port.chain_from(values, omega)))
}
