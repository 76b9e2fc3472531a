//! The fast way to a response: the ladder walked from the load to the source,
//! several frequencies at a time.
//!
//! The walk carries voltage and current instead of a whole matrix: start with
//! V = 1, I = Yl, d = 1 at the load; a series branch N/D makes V ← DV + NI,
//! I ← DI, d ← Dd, a branch to ground V ← NV, I ← DV + NI, d ← Nd; at the source
//! H = d/(V + Zs·I). These are the chain matrices of [`super::chain`] applied to
//! a vector. What comes out as 0/0, or too large or too small to be trusted, is
//! told by [`is_sound`], and is left to the scaled matrices.

use std::ops::{Add, Mul, Sub};

use super::branch::Branch;
use super::chain::TwoPort;
use super::values::Values;
use crate::parts::PartKind;

/// N complex numbers, one a frequency, in a form that compilers turn into
/// vector instructions.
#[derive(Debug, Clone, Copy)]
pub(super) struct Lanes<const N: usize> {
    pub re: [f64; N],
    pub im: [f64; N],
}

impl<const N: usize> Lanes<N> {
    pub(super) const ZERO: Self = Self { re: [0.0; N], im: [0.0; N] };
    pub(super) const ONE: Self = Self { re: [1.0; N], im: [0.0; N] };

    pub(super) fn new(lane: impl Fn(usize) -> (f64, f64)) -> Self {
        let mut lanes = Self::ZERO;
        for k in 0..N {
            (lanes.re[k], lanes.im[k]) = lane(k);
        }
        lanes
    }
}

/// N complex frequencies s at which a response is looked at.
pub(super) trait Places<const N: usize> {
    /// `constant` + `slope`·s in each lane.
    fn linear(&self, constant: f64, slope: f64) -> Lanes<N>;
}

/// jω: on the axis, where signals are.
impl<const N: usize> Places<N> for [f64; N] {
    fn linear(&self, constant: f64, slope: f64) -> Lanes<N> {
        Lanes::new(|k| (constant, slope * self[k]))
    }
}

/// Anywhere in the plane, where zeros and poles are.
impl<const N: usize> Places<N> for Lanes<N> {
    fn linear(&self, constant: f64, slope: f64) -> Lanes<N> {
        Lanes::new(|k| (constant + slope * self.re[k], slope * self.im[k]))
    }
}

impl<const N: usize> Add for Lanes<N> {
    type Output = Self;
    fn add(self, other: Self) -> Self {
        Self::new(|k| (self.re[k] + other.re[k], self.im[k] + other.im[k]))
    }
}

impl<const N: usize> Sub for Lanes<N> {
    type Output = Self;
    fn sub(self, other: Self) -> Self {
        Self::new(|k| (self.re[k] - other.re[k], self.im[k] - other.im[k]))
    }
}

impl<const N: usize> Mul for Lanes<N> {
    type Output = Self;
    fn mul(self, other: Self) -> Self {
        Self::new(|k| {
            (
                self.re[k] * other.re[k] - self.im[k] * other.im[k],
                self.re[k] * other.im[k] + self.im[k] * other.re[k],
            )
        })
    }
}

/// An impedance N/D; `None` stands for D = 1, which half of all parts have.
#[derive(Clone, Copy)]
struct Ratio<const N: usize> {
    n: Lanes<N>,
    d: Option<Lanes<N>>,
}

/// The product with a denominator that may be 1.
fn times<const N: usize>(value: Lanes<N>, denominator: Option<Lanes<N>>) -> Lanes<N> {
    denominator.map_or(value, |d| value * d)
}

impl<const N: usize> Ratio<N> {
    fn in_series(self, other: Self) -> Self {
        let d = match (self.d, other.d) {
            (Some(a), Some(b)) => Some(a * b),
            (a, b) => a.or(b),
        };
        Self { n: times(self.n, other.d) + times(other.n, self.d), d }
    }

    fn in_parallel(self, other: Self) -> Self {
        Self { n: self.n * other.n, d: Some(times(self.n, other.d) + times(other.n, self.d)) }
    }

    fn of_part<V: Values + ?Sized>(index: usize, values: &V, at: &impl Places<N>) -> Self {
        let part = values.value(index);
        let (value, r) = (part.value_si, part.series_resistance_ohm);
        match part.kind {
            PartKind::Resistor | PartKind::Trimmer => Self { n: at.linear(value, 0.0), d: None },
            PartKind::Capacitor => Self { n: at.linear(1.0, value * r), d: Some(at.linear(0.0, value)) },
            PartKind::Coil => {
                let winding = at.linear(r, value);
                let own = part.self_capacitance_f;
                let d = (own != 0.0).then(|| Lanes::ONE + at.linear(0.0, own) * winding);
                Self { n: winding, d }
            }
        }
    }

    fn of_branch<V: Values + ?Sized>(branch: &Branch, values: &V, at: &impl Places<N>) -> Self {
        let all = |branches: &[Branch], join: fn(Self, Self) -> Self| {
            let parts = branches.iter().map(|branch| Self::of_branch(branch, values, at));
            parts.reduce(join).expect("not empty")
        };
        match branch {
            Branch::Part(index) => Self::of_part(*index, values, at),
            Branch::Series { series } => all(series, Self::in_series),
            Branch::Parallel { parallel } => all(parallel, Self::in_parallel),
        }
    }
}

/// Voltage and current at one place of the ladder, both still to be divided by d.
#[derive(Clone, Copy)]
struct Wave<const N: usize> {
    v: Lanes<N>,
    i: Lanes<N>,
}

impl<const N: usize> Wave<N> {
    fn through_series(&mut self, z: &Ratio<N>) {
        self.v = times(self.v, z.d) + z.n * self.i;
        self.i = times(self.i, z.d);
    }

    fn through_shunt(&mut self, z: &Ratio<N>) {
        self.i = times(self.v, z.d) + z.n * self.i;
        self.v = z.n * self.v;
    }
}

/// W waves walked together (one for H, two for a matrix), and their common d.
#[derive(Clone, Copy)]
pub(super) struct Walk<const N: usize, const W: usize> {
    waves: [Wave<N>; W],
    pub d: Lanes<N>,
}

impl<const N: usize> Walk<N, 2> {
    /// Both columns of a straight wire's matrix.
    fn through() -> Self {
        let (one, zero) = (Lanes::ONE, Lanes::ZERO);
        Self { waves: [Wave { v: one, i: zero }, Wave { v: zero, i: one }], d: one }
    }

    /// Both columns side by side; see [`super::chain::Chain::beside`].
    fn beside(&self, other: &Self) -> Self {
        let [Wave { v: a11, i: a21 }, Wave { v: a12, i: a22 }] = self.waves;
        let [Wave { v: b11, i: b21 }, Wave { v: b12, i: b22 }] = other.waves;
        let both = self.d * other.d;
        let m21 = a22 * b11 + b22 * a11 - both - both + a21 * b12 + b21 * a12;
        Self {
            waves: [
                Wave { v: a11 * b12 + b11 * a12, i: m21 },
                Wave { v: a12 * b12, i: a22 * b12 + b22 * a12 },
            ],
            d: self.d * b12 + other.d * a12,
        }
    }
}

impl<const N: usize, const W: usize> Walk<N, W> {
    /// Starts at the load with these voltages and currents.
    pub(super) fn from_load(start: [(Lanes<N>, Lanes<N>); W]) -> Self {
        Self { waves: start.map(|(v, i)| Wave { v, i }), d: Lanes::ONE }
    }

    /// One two-port further towards the source.
    pub(super) fn back_through<V: Values + ?Sized>(
        &mut self,
        port: &TwoPort,
        values: &V,
        at: &impl Places<N>,
    ) {
        match port {
            TwoPort::Series { series } => {
                let z = Ratio::of_branch(series, values, at);
                self.waves.iter_mut().for_each(|wave| wave.through_series(&z));
                self.d = times(self.d, z.d);
            }
            TwoPort::Shunt { shunt } => {
                let z = Ratio::of_branch(shunt, values, at);
                self.waves.iter_mut().for_each(|wave| wave.through_shunt(&z));
                self.d = self.d * z.n;
            }
            TwoPort::Beside { beside } => {
                let matrices = beside.iter().map(|chain| {
                    let mut walk = Walk::<N, 2>::through();
                    chain.iter().rev().for_each(|port| walk.back_through(port, values, at));
                    walk
                });
                let m = matrices.reduce(|a, b| a.beside(&b)).expect("at least one chain");
                self.back_through_matrix(&m);
            }
        }
    }

    fn back_through_matrix(&mut self, m: &Walk<N, 2>) {
        let [first, second] = &m.waves;
        for wave in &mut self.waves {
            let Wave { v, i } = *wave;
            *wave = Wave { v: first.v * v + second.v * i, i: first.i * v + second.i * i };
        }
        self.d = self.d * m.d;
    }

    /// V + Zs·I of wave `which`.
    pub(super) fn at_source(&self, which: usize, source: Lanes<N>) -> Lanes<N> {
        self.waves[which].v + source * self.waves[which].i
    }
}

/// Whether |re| or |im| of a divisor is of a size that neither overflow nor
/// underflow has touched.
pub(super) fn is_sound(re: f64, im: f64) -> bool {
    (1e-120..1e120).contains(&re.abs().max(im.abs()))
}
