//! Poles too slow for an FFT, as exact recursions.
//!
//! A pole p with residue r rings as r·e^(pt) and would need a kernel as long. It
//! is taken out of the response as the recursion u[n] = e^(pT) u[n−1] + x[n], whose
//! own response r·T/(1 − e^(pT) z⁻¹) differs from r/(jω − p) by something smooth:
//! that difference stays in the sampled kernel, so that the sum is exact whatever
//! the recursion does on its own.

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::convolver::Past;
use crate::network::{Branch, Circuit, Section, TwoPort};
use crate::parts::{Part, PartKind};

/// Points on a contour: what a pole a tenth off it adds is then 1e-11.
const POINTS: usize = 256;
/// Most poles that are sought inside one contour.
const MOST_POLES: usize = 8;
/// How well the poles found must account for the contour, relative.
const ACCOUNTED: f64 = 1e-9;

/// One slow pole, or a pair of complex ones of which this has the positive imaginary part.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct SlowPole {
    /// e^(pT) − 1: kept as such, because 1 − e^(pT) would lose its digits.
    less_one: Complex64,
    /// r·T, twice for a pair.
    gain: Complex64,
    /// p·T.
    advance: Complex64,
}

impl SlowPole {
    fn new(pole: Complex64, residue: Complex64, rate_hz: f64) -> Self {
        let advance = pole / rate_hz;
        let share = if pole.im == 0.0 { 1.0 } else { 2.0 };
        Self { less_one: exp_less_one(advance), gain: residue / rate_hz * share, advance }
    }

    /// The recursion's response at a frequency in cycles a sample: its real
    /// impulse response transformed.
    pub fn response(&self, cycles: f64) -> Complex64 {
        let one = self.section(self.gain, self.less_one, cycles);
        let other = self.section(self.gain.conj(), self.less_one.conj(), cycles);
        0.5 * (one + other)
    }

    /// g·(1/(1 − e^(pT) z⁻¹) − ½): half of the first sample, as a band-limited jump has it.
    fn section(&self, gain: Complex64, less_one: Complex64, cycles: f64) -> Complex64 {
        gain * (1.0 / step_down(less_one, TAU * cycles) - 0.5)
    }

    /// Sum of the recursion's impulse response up to sample `n`.
    pub fn step_at(&self, n: f64) -> f64 {
        (self.gain * (exp_less_one(self.advance * (n + 1.0)) / self.less_one - 0.5)).re
    }

    /// Samples until an e-th is left.
    pub fn time_constant(&self) -> f64 {
        -1.0 / self.advance.re
    }
}

/// 1 − e^(pT) e^(−jθ) without losing digits where both are near 1.
fn step_down(less_one: Complex64, theta: f64) -> Complex64 {
    let half = (theta / 2.0).sin();
    let one_less = Complex64::new(2.0 * half * half, theta.sin());
    one_less - less_one * Complex64::cis(-theta)
}

/// e^z − 1: (e^x − 1) cos y − 2 sin²(y/2) + j e^x sin y.
fn exp_less_one(z: Complex64) -> Complex64 {
    let half = (z.im / 2.0).sin();
    Complex64::new(z.re.exp_m1() * z.im.cos() - 2.0 * half * half, z.re.exp() * z.im.sin())
}

/// One recursion on its way.
#[derive(Debug, Clone)]
pub(super) struct Recursion {
    pole: SlowPole,
    state: Complex64,
}

impl Recursion {
    /// At rest.
    pub fn new(pole: SlowPole) -> Self {
        Self { pole, state: Complex64::default() }
    }

    /// As an endless past has left it: geometric sums.
    pub fn settle(&mut self, past: &Past) {
        let less_one = self.pole.less_one;
        let constant = -past.level / less_one;
        let tones = past.tones.iter().map(|tone| {
            let ahead = 0.5 * tone.phasor * Complex64::cis(-tone.radians) / step_down(less_one, tone.radians);
            let back =
                0.5 * tone.phasor.conj() * Complex64::cis(tone.radians) / step_down(less_one, -tone.radians);
            ahead + back
        });
        self.state = constant + tones.sum::<Complex64>();
    }

    /// Adds the recursion's part of these samples to `out`.
    pub fn add(&mut self, samples: &[f64], out: &mut [f64]) {
        let SlowPole { less_one, gain, .. } = self.pole;
        let mut state = self.state;
        for (sample, out) in samples.iter().zip(out) {
            state += state * less_one + sample;
            *out += (gain * (state - 0.5 * sample)).re;
        }
        self.state = state;
    }
}

/// The poles of the insertion ratio nearer to zero than `radius` (rad/s); `None`
/// where the contour does not account for them: one lies too near it, or too many inside.
///
/// The moments ∮ sᵏ R ds / 2πj are Σ rᵢ pᵢᵏ over the poles inside; from them
/// Prony's method has the poles, and a small contour round each has it to rounding
/// (Kravanja and Van Barel, Computing the Zeros of Analytic Functions, 2000).
pub(super) fn poles_within(circuit: &Circuit, radius: f64, rate_hz: f64) -> Option<Vec<SlowPole>> {
    let ratio = |s: Complex64| dissipated(circuit, s.re).insertion(s.im / TAU);
    let moments = contour_moments(&ratio, Complex64::default(), radius, 2 * MOST_POLES + 4);
    let size = moments.iter().map(|moment| moment.norm()).fold(0.0, f64::max);
    if size < ACCOUNTED {
        return Some(Vec::new());
    }
    let found = (1..=MOST_POLES).find_map(|count| {
        let rough = prony(&moments, count)?;
        let poles = polished(&ratio, &rough, radius)?;
        accounts_for(&poles, &moments, radius, size).then_some(poles)
    })?;
    let slow = found.into_iter().filter(|(pole, _)| pole.im >= 0.0);
    Some(slow.map(|(pole, residue)| SlowPole::new(pole, residue, rate_hz)).collect())
}

/// ∮ zᵏ R dz / 2πj for z = (s − centre)/radius on the unit circle, k from 0.
fn contour_moments(
    ratio: &impl Fn(Complex64) -> Complex64,
    centre: Complex64,
    radius: f64,
    count: usize,
) -> Vec<Complex64> {
    let mut moments = vec![Complex64::default(); count];
    for point in 0..POINTS {
        let z = Complex64::cis(TAU * (point as f64 + 0.5) / POINTS as f64);
        let mut value = ratio(centre + radius * z) / POINTS as f64;
        for moment in &mut moments {
            value *= z;
            *moment += value;
        }
    }
    moments
}

/// Poles (as fractions of the radius) whose powers make up the moments.
fn prony(moments: &[Complex64], count: usize) -> Option<Vec<Complex64>> {
    let rows = (0..count).map(|row| {
        let mut equation: Vec<Complex64> = moments[row..row + count].to_vec();
        equation.push(-moments[row + count]);
        equation
    });
    roots(&solve(rows.collect())?)
}

/// Gaussian elimination with row pivots; each row ends with its right-hand side.
fn solve(mut rows: Vec<Vec<Complex64>>) -> Option<Vec<Complex64>> {
    let count = rows.len();
    for column in 0..count {
        let pivot = (column..count)
            .max_by(|&a, &b| rows[a][column].norm().total_cmp(&rows[b][column].norm()))
            .filter(|&row| rows[row][column].norm() > f64::MIN_POSITIVE)?;
        rows.swap(column, pivot);
        let (upper, lower) = rows.split_at_mut(column + 1);
        let top = &upper[column];
        for row in lower {
            let factor = row[column] / top[column];
            row.iter_mut().zip(top).for_each(|(entry, above)| *entry -= factor * above);
        }
    }
    let mut solution = vec![Complex64::default(); count];
    for row in (0..count).rev() {
        let known: Complex64 = (row + 1..count).map(|column| rows[row][column] * solution[column]).sum();
        solution[row] = (rows[row][count] - known) / rows[row][row];
    }
    Some(solution)
}

/// Roots of zⁿ + cₙ₋₁ zⁿ⁻¹ + … + c₀, all at once (Durand 1960, Kerner 1966).
fn roots(coefficients: &[Complex64]) -> Option<Vec<Complex64>> {
    let count = coefficients.len();
    let value = |z: Complex64| coefficients.iter().rev().fold(Complex64::new(1.0, 0.0), |sum, c| sum * z + c);
    let mut roots: Vec<Complex64> = (0..count).map(|n| Complex64::new(0.4, 0.9).powi(n as i32)).collect();
    for _ in 0..500 {
        let mut moved = 0.0_f64;
        for index in 0..count {
            let others = (0..count).filter(|&other| other != index);
            let product: Complex64 = others.map(|other| roots[index] - roots[other]).product();
            let step = value(roots[index]) / product;
            roots[index] -= step;
            moved = moved.max(step.norm());
        }
        if moved < 1e-15 {
            break;
        }
    }
    roots.iter().all(|root| root.is_finite() && root.norm() < 1.0).then_some(roots)
}

/// Poles and residues, each from a small contour of its own.
fn polished(
    ratio: &impl Fn(Complex64) -> Complex64,
    rough: &[Complex64],
    radius: f64,
) -> Option<Vec<(Complex64, Complex64)>> {
    let mut poles: Vec<(Complex64, Complex64)> =
        rough.iter().map(|z| (z * radius, Complex64::default())).collect();
    for _ in 0..3 {
        let places: Vec<Complex64> = poles.iter().map(|(pole, _)| *pole).collect();
        for (index, (pole, residue)) in poles.iter_mut().enumerate() {
            let others = places.iter().enumerate().filter(|(other, _)| *other != index);
            let nearest =
                others.map(|(_, other)| (other - places[index]).norm()).fold(f64::INFINITY, f64::min);
            let own = 0.3 * nearest.min(radius - places[index].norm());
            let moments = contour_moments(ratio, places[index], own, 2);
            if own <= 0.0 || moments[0].norm() < f64::MIN_POSITIVE {
                return None;
            }
            *pole += own * moments[1] / moments[0];
            *residue = own * moments[0];
            // A real network has its poles real, or in pairs.
            if pole.im.abs() < 1e-9 * pole.norm() {
                (pole.im, residue.im) = (0.0, 0.0);
            }
        }
    }
    poles.iter().all(|(pole, _)| pole.re < 0.0).then_some(poles)
}

fn accounts_for(poles: &[(Complex64, Complex64)], moments: &[Complex64], radius: f64, size: f64) -> bool {
    moments.iter().enumerate().all(|(power, moment)| {
        let sum: Complex64 =
            poles.iter().map(|(pole, residue)| residue / radius * (pole / radius).powi(power as i32)).sum();
        (sum - moment).norm() <= ACCOUNTED * size
    })
}

/// The circuit whose response at jω is this one's at σ + jω: every coil gets σL in
/// series, every capacitor σC across it (uniform dissipation: Darlington, J. Math.
/// Phys. 18, 1939; here σ may be negative, it is arithmetic only).
fn dissipated(circuit: &Circuit, sigma: f64) -> Circuit {
    let mut parts = circuit.parts.clone();
    let sections = circuit
        .sections
        .iter()
        .map(|section| Section {
            kind: section.kind.clone(),
            stages: section.stages.iter().map(|port| dissipated_port(port, &mut parts, sigma)).collect(),
        })
        .collect();
    let mut moved = Circuit { source: circuit.source, load: circuit.load, sections, parts };
    moved.source.resistance_ohm += sigma * circuit.source.inductance_h;
    moved.load.resistance_ohm =
        1.0 / (1.0 / circuit.load.resistance_ohm + sigma * circuit.load.capacitance_f);
    moved
}

fn dissipated_port(port: &TwoPort, parts: &mut Vec<Part>, sigma: f64) -> TwoPort {
    match port {
        TwoPort::Series { series } => TwoPort::Series { series: dissipated_branch(series, parts, sigma) },
        TwoPort::Shunt { shunt } => TwoPort::Shunt { shunt: dissipated_branch(shunt, parts, sigma) },
        TwoPort::Beside { beside } => TwoPort::Beside {
            beside: beside
                .iter()
                .map(|chain| chain.iter().map(|port| dissipated_port(port, parts, sigma)).collect())
                .collect(),
        },
    }
}

fn dissipated_branch(branch: &Branch, parts: &mut Vec<Part>, sigma: f64) -> Branch {
    let mut inside =
        |branches: &[Branch]| branches.iter().map(|branch| dissipated_branch(branch, parts, sigma)).collect();
    match branch {
        Branch::Series { series } => Branch::Series { series: inside(series) },
        Branch::Parallel { parallel } => Branch::Parallel { parallel: inside(parallel) },
        Branch::Part(index) => dissipated_part(*index, parts, sigma),
    }
}

fn dissipated_part(index: usize, parts: &mut Vec<Part>, sigma: f64) -> Branch {
    let mut part = parts[index].clone();
    let mut add = |part: Part| {
        parts.push(part);
        Branch::Part(parts.len() - 1)
    };
    let resistor = |ohm: f64| Part::ideal("dissipation", PartKind::Resistor, ohm);
    let (loss_ohm, across_f) = match part.kind {
        PartKind::Resistor | PartKind::Trimmer => return Branch::Part(index),
        PartKind::Coil => {
            part.series_resistance_ohm += sigma * part.value_si;
            (0.0, part.self_capacitance_f)
        }
        PartKind::Capacitor => {
            let loss_ohm = std::mem::take(&mut part.series_resistance_ohm);
            (loss_ohm, part.value_si)
        }
    };
    let mut branch = add(part);
    if sigma * across_f != 0.0 {
        branch = Branch::parallel([branch, add(resistor(1.0 / (sigma * across_f)))]);
    }
    if loss_ohm != 0.0 {
        branch = Branch::series([branch, add(resistor(loss_ohm))]);
    }
    branch
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::network::{Load, Source};

    /// A coupling capacitor of 10 µF into 1 MΩ: one pole at 10 s; behind it 1 kΩ and 1 µF, 1 ms.
    pub(in crate::simulation) fn coupled() -> Circuit {
        let mut coupling = Part::ideal("C1", PartKind::Capacitor, 10e-6);
        coupling.series_resistance_ohm = 5.0;
        Circuit {
            source: Source { resistance_ohm: 1000.0, inductance_h: 0.0 },
            load: Load { resistance_ohm: 1e6, capacitance_f: 0.0 },
            sections: vec![Section {
                kind: "coupling".to_owned(),
                stages: vec![
                    TwoPort::Shunt { shunt: Branch::Part(1) },
                    TwoPort::Series { series: Branch::Part(0) },
                ],
            }],
            parts: vec![coupling, Part::ideal("C2", PartKind::Capacitor, 1e-6)],
        }
    }

    #[test]
    fn a_dissipated_circuit_reads_the_ratio_off_the_axis() {
        // One pole at −1000 with a gain of 1: R(s) = 1/(1 + s/1000), no coupling.
        let mut circuit = coupled();
        circuit.load.resistance_ohm = 1e12;
        circuit.sections[0].stages.pop();
        for s in [Complex64::new(-300.0, 200.0), Complex64::new(500.0, -70.0)] {
            let got = dissipated(&circuit, s.re).insertion(s.im / TAU);
            assert!((got - 1.0 / (1.0 + s / 1000.0)).norm() < 1e-8, "{s}: {got}");
        }
    }

    #[test]
    fn the_slow_pole_of_a_coupling_capacitor_is_found_alone() {
        let found = poles_within(&coupled(), 10.0, 48_000.0).expect("accounted for");
        assert_eq!(found.len(), 1);
        // 10 µF into 1 MΩ + 1 kΩ + 5 Ω, a little off for the 1 µF beside.
        let seconds = found[0].time_constant() / 48_000.0;
        assert!((seconds - 10.010_05).abs() < 1e-2, "{seconds} s");
        assert!(poles_within(&coupled(), 1e-3, 48_000.0).expect("accounted for").is_empty());
    }

    #[test]
    fn a_recursion_has_the_response_it_states() {
        let pole = SlowPole::new(Complex64::new(-3.0, 40.0), Complex64::new(2.0, 1.0), 1000.0);
        let mut recursion = Recursion::new(pole);
        let mut impulse = vec![0.0; 12_000];
        impulse[0] = 1.0;
        let mut out = vec![0.0; 12_000];
        recursion.add(&impulse, &mut out);
        for cycles in [0.0, 0.006, 0.1, 0.4] {
            let sum: Complex64 =
                out.iter().enumerate().map(|(n, y)| y * Complex64::cis(-TAU * cycles * n as f64)).sum();
            assert!((sum - pole.response(cycles)).norm() < 1e-12, "{cycles}: {sum}");
        }
        let partial: f64 = out[..=700].iter().sum();
        assert!((partial - pole.step_at(700.0)).abs() < 1e-12, "{partial}");
    }
}
