//! Where a response can be steep: zeros and poles of the insertion ratio near the axis.
//!
//! The ratio is d·(1 + ZsYl) over the loading M₁₁ + M₁₂Yl + Zs(M₂₁ + M₂₂Yl): two
//! polynomials in s, which the walk of [`super::ladder`] reads anywhere in the plane, so
//! that no coefficients are formed. All roots of one move together by Newton's
//! steps that keep off each other (Ehrlich, Comm. ACM 10, 1967; Aberth, Math. Comp. 27,
//! 1973). Their number and the radii they start from are read off the positive axis:
//! there r·p′(r)/p(r) grows by one with each root passed, since polynomials of passive
//! networks over a common ground have no negative coefficients (Fialkow and Gerst
//! 1952, as remembered).

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::evaluate::{Evaluator, walk_to_source, wire_lanes};
use super::ladder::Lanes;

/// A zero or a pole near the axis; its mirror image is meant with it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Resonance {
    /// Where on the axis it is nearest, hertz.
    pub frequency_hz: f64,
    /// How far off the axis it is: half the width at 3 dB, hertz.
    pub half_width_hz: f64,
    /// Whether it is a pole.
    pub is_pole: bool,
}

/// The zeros and the poles near the axis, within some range of frequency.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Resonances {
    zeros: Vec<Complex64>,
    poles: Vec<Complex64>,
}

/// A polynomial of the ratio.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Side {
    Zeros,
    Poles,
}

/// Roots up to this factor off the range asked for are sought with those inside.
const BEYOND: f64 = 10.0;
/// Roots up to this factor off the range are told: those inside may be pushed there.
const TOLD_BEYOND: f64 = 1.6;
/// Estimates may stray this factor off what is sought.
const STRAY: f64 = 30.0;
/// Radii a decade at which the roots are counted.
const A_DECADE: f64 = 4.0;
/// A root's distance from the axis is taken as no less than this share of its size.
const NEAREST: f64 = 1e-5;
/// A zero and a pole this near, as a share of their distance from the axis, cancel: what is
/// left of them is the same share of a neper.
const CANCELLED: f64 = 3e-4;
/// Difference step for Newton's steps, as a share of s.
const DIFFERENCE: f64 = 1e-6;

/// How roots are followed.
struct Pursuit {
    /// Most steps.
    steps: usize,
    /// Largest step as a share of s.
    longest: f64,
    /// A root is found when the step is this share of its distance from the axis: the
    /// next one would be far smaller still.
    found: f64,
    /// Smallest and largest |s|.
    within: (f64, f64),
}

impl Resonances {
    /// All of them.
    pub fn iter(&self) -> impl Iterator<Item = Resonance> {
        let zeros = self.zeros.iter().map(|&zero| resonance(zero, false));
        zeros.chain(self.poles.iter().map(|&pole| resonance(pole, true)))
    }

    /// Forgets those for which `wanted` is false.
    pub fn retain(&mut self, wanted: impl Fn(Resonance) -> bool) {
        self.zeros.retain(|&zero| wanted(resonance(zero, false)));
        self.poles.retain(|&pole| wanted(resonance(pole, true)));
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.zeros.is_empty() && self.poles.is_empty()
    }

    /// Without the pairs that cancel.
    fn without_cancelled(mut self) -> Self {
        self.zeros.retain(|zero| {
            let near =
                |pole: &Complex64| (pole - zero).norm() < CANCELLED * off_axis(*zero).min(off_axis(*pole));
            let cancelling = self.poles.iter().position(near);
            cancelling.map(|pole| self.poles.swap_remove(pole)).is_none()
        });
        self
    }
}

fn resonance(s: Complex64, is_pole: bool) -> Resonance {
    Resonance { frequency_hz: s.im / TAU, half_width_hz: off_axis(s) / TAU, is_pole }
}

fn off_axis(s: Complex64) -> f64 {
    s.re.abs().max(NEAREST * s.norm())
}

impl Evaluator<'_> {
    /// The zeros and poles of the insertion ratio between two frequencies, and somewhat
    /// beyond, that lie nearer to the axis than to 0 (Q above 0.7); without those that cancel.
    pub fn resonances(&self, from_hz: f64, to_hz: f64) -> Resonances {
        let told = TAU * from_hz / TOLD_BEYOND..=TAU * to_hz * TOLD_BEYOND;
        let near = |side| {
            let mut roots = self.roots_between(side, TAU * from_hz / BEYOND, TAU * to_hz * BEYOND);
            roots.retain(|s| s.im >= s.re.abs() && told.contains(&s.norm()));
            roots
        };
        Resonances { zeros: near(Side::Zeros), poles: near(Side::Poles) }.without_cancelled()
    }

    /// The same, started from those of somewhat other values and many times faster; `None`
    /// where one was lost on the way.
    pub fn resonances_from(&self, known: &Resonances) -> Option<Resonances> {
        Some(Resonances {
            zeros: self.followed(Side::Zeros, &known.zeros)?,
            poles: self.followed(Side::Poles, &known.poles)?,
        })
    }

    fn followed(&self, side: Side, known: &[Complex64]) -> Option<Vec<Complex64>> {
        /// What a root may move by, as a factor.
        const MOVED: f64 = 1.5;
        let pursuit = Pursuit { steps: 12, longest: 0.2, found: 0.05, within: (0.0, f64::INFINITY) };
        let mut roots = apart(known);
        let all = (0..roots.len()).collect();
        let lost = self.pursue(side, &mut roots, all, &pursuit);
        let stayed = |(root, known): (&Complex64, &Complex64)| {
            root.im > 0.0 && (1.0 / MOVED..MOVED).contains(&(root.norm() / known.norm()))
        };
        (lost.is_empty() && roots.iter().zip(known).all(stayed)).then_some(roots)
    }

    /// All roots anywhere in the plane with |s| between two radii, and some others.
    ///
    /// Estimates also fall for roots beyond the radii, and some get lost. So the growth
    /// that the roots found do not account for is looked for again, until there is none.
    fn roots_between(&self, side: Side, from: f64, to: f64) -> Vec<Complex64> {
        /// Most times that roots are looked for.
        const ROUNDS: u32 = 8;
        let pursuit = Pursuit { steps: 40, longest: 1.0, found: 1e-3, within: (from / STRAY, to * STRAY) };
        let growth = Growth::read(|r| self.polynomial(side, &[Complex64::new(r, 0.0)])[0].norm(), from, to);
        let mut roots: Vec<Complex64> = Vec::new();
        for round in 0..ROUNDS {
            let starts = growth.starts(&roots, f64::from(round));
            if starts.is_empty() {
                break;
            }
            let waiting = (roots.len()..roots.len() + starts.len()).collect();
            roots.extend(starts);
            let mut lost = self.pursue(side, &mut roots, waiting, &pursuit).into_iter();
            let mut next_lost = lost.next();
            let mut index = 0;
            roots.retain(|_| {
                let is_lost = next_lost == Some(index);
                if is_lost {
                    next_lost = lost.next();
                }
                index += 1;
                !is_lost
            });
        }
        roots
    }

    /// Moves those estimates that are `waiting` to roots; which of them did not get there.
    fn pursue(
        &self,
        side: Side,
        roots: &mut [Complex64],
        mut waiting: Vec<usize>,
        pursuit: &Pursuit,
    ) -> Vec<usize> {
        let (least, most) = pursuit.within;
        for _ in 0..pursuit.steps {
            if waiting.is_empty() {
                break;
            }
            let steps = self.steps(side, roots, &waiting);
            let mut strayed = true;
            let mut left = Vec::with_capacity(waiting.len());
            for (index, step) in waiting.into_iter().zip(steps) {
                let size = roots[index].norm();
                let step = step * (pursuit.longest * size / step.norm()).min(1.0);
                let moved = roots[index] - step;
                let radius = moved.norm();
                // A root at 0 itself would leave no direction.
                roots[index] = match radius > least {
                    true => moved * (radius.min(most) / radius),
                    false => Complex64::new(-least, 0.0),
                };
                if step.norm() > pursuit.found * off_axis(roots[index]) {
                    strayed &= roots[index] != moved;
                    left.push(index);
                }
            }
            waiting = left;
            // What has no root of its own wanders about for ever.
            if strayed {
                break;
            }
        }
        waiting
    }

    /// Newton's steps of the estimates `of` some, each with its distance from all others in
    /// it: (p/p′)/(1 − (p/p′)·Σ 1/(s − sⱼ)).
    fn steps(&self, side: Side, roots: &[Complex64], of: &[usize]) -> Vec<Complex64> {
        let mut steps = Vec::with_capacity(of.len());
        for pair in of.chunks(2) {
            let [one, other] = [roots[pair[0]], roots[pair[pair.len() - 1]]];
            let [by, other_by] = [one, other].map(|s| DIFFERENCE * s);
            let values = self.polynomial(side, &[one, one + by, other, other + other_by]);
            steps.push(newton(values[0], values[1], by));
            if pair.len() == 2 {
                steps.push(newton(values[2], values[3], other_by));
            }
        }
        for (step, &index) in steps.iter_mut().zip(of) {
            let others = roots.iter().enumerate().filter(|&(other, _)| other != index);
            let pull: Complex64 = others.map(|(_, other)| 1.0 / (roots[index] - other)).sum();
            let kept_off = *step / (1.0 - *step * pull);
            if kept_off.is_finite() {
                *step = kept_off;
            }
        }
        steps
    }

    fn polynomial<const N: usize>(&self, side: Side, s: &[Complex64; N]) -> [Complex64; N] {
        let at = Lanes::<N>::new(|k| (s[k].re, s[k].im));
        let (d, loading) = walk_to_source(self.circuit, self.values, &at);
        let value = match side {
            Side::Zeros => d * wire_lanes(self.circuit, &at),
            Side::Poles => loading,
        };
        std::array::from_fn(|k| Complex64::new(value.re[k], value.im[k]))
    }
}

/// How a polynomial grows along the positive axis.
struct Growth {
    radii: Vec<f64>,
    /// ln p at each.
    logs: Vec<f64>,
}

impl Growth {
    /// A number of radii a decade.
    fn read(size: impl Fn(f64) -> f64, from: f64, to: f64) -> Self {
        let spaces = (A_DECADE * (to / from).log10()).ceil().max(4.0);
        let radii: Vec<f64> =
            (0..=spaces as i32).map(|n| from * (to / from).powf(f64::from(n) / spaces)).collect();
        let logs = radii.iter().map(|&r| size(r).ln()).collect();
        Self { radii, logs }
    }

    /// A start for each root that is still to be found, at the radii where the count grows, all
    /// round; other ones for another `turn`.
    fn starts(&self, found: &[Complex64], turn: f64) -> Vec<Complex64> {
        /// From one start to the next: the golden angle, so that none are mirror images.
        const ANGLE: f64 = 2.399_963;
        /// What a root beyond the radii may show of itself.
        const NONE: f64 = 0.4;
        let left: Vec<f64> = self
            .radii
            .iter()
            .zip(&self.logs)
            .map(|(&r, log)| log - found.iter().map(|root| (r - root).norm().ln()).sum::<f64>())
            .collect();
        let counts: Vec<f64> = (1..left.len())
            .map(|n| (left[n] - left[n - 1]) / (self.radii[n] / self.radii[n - 1]).ln())
            .collect();
        let (first, last) = (counts[0], counts[counts.len() - 1]);
        let rise = last - first;
        if !rise.is_finite() || rise < NONE {
            return Vec::new();
        }
        let count = rise.ceil();
        (0..count as usize)
            .map(|start| {
                let passed = first + (start as f64 + 0.5) / count * rise;
                let space = counts.iter().position(|&count| count >= passed).unwrap_or(counts.len() - 1);
                let radius = (self.radii[space] * self.radii[space + 1]).sqrt();
                // No two on one place, whatever the spaces.
                let radius = radius * (1.0 + 0.1 * (start as f64 / count - 0.5));
                Complex64::from_polar(radius, 0.4 + turn + ANGLE * start as f64)
            })
            .collect()
    }
}

/// p/p′ from two values `by` apart; 0 at a root itself, and where nothing can be told.
fn newton(here: Complex64, beside: Complex64, by: Complex64) -> Complex64 {
    // What a complex division squares must neither overflow nor vanish.
    let size = here.re.abs().max(here.im.abs()).max(beside.re.abs()).max(beside.im.abs());
    let step = by * (here / size) / ((beside / size) - (here / size));
    if step.is_finite() { step } else { Complex64::default() }
}

/// Starts moved off each other: roots that fell on one must be able to part.
fn apart(known: &[Complex64]) -> Vec<Complex64> {
    /// Least distance, as a share of |s|.
    const LEAST: f64 = 3e-3;
    let mut starts: Vec<Complex64> = Vec::with_capacity(known.len());
    for &root in known {
        let mut start = root;
        while starts.iter().any(|other| (start - other).norm() < LEAST * start.norm()) {
            start *= 1.0 + 2.0 * LEAST;
        }
        starts.push(start);
    }
    starts
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::network::{Branch, Circuit, Load, Section, Source, TwoPort};
    use crate::parts::{Part, PartKind};

    fn circuit(stages: Vec<TwoPort>, parts: Vec<Part>) -> Circuit {
        Circuit {
            source: Source { resistance_ohm: 100.0, inductance_h: 0.0 },
            load: Load { resistance_ohm: 1e6, capacitance_f: 0.0 },
            sections: vec![Section { kind: "test".to_owned(), stages }],
            parts,
        }
    }

    /// A coil and a capacitor to ground for each frequency, behind a resistor each.
    fn traps(lines_hz: &[f64], winding_ohm: f64) -> Circuit {
        let mut parts = Vec::new();
        let mut stages = Vec::new();
        for &hz in lines_hz {
            let first = parts.len();
            parts.push(Part::ideal("R", PartKind::Resistor, 1e3));
            parts.push(Part { series_resistance_ohm: winding_ohm, ..Part::ideal("L", PartKind::Coil, 1.0) });
            parts.push(Part::ideal("C", PartKind::Capacitor, 1.0 / (TAU * hz).powi(2)));
            stages.push(TwoPort::Series { series: Branch::Part(first) });
            let trap = [Branch::Part(first + 1), Branch::Part(first + 2)];
            stages.push(TwoPort::Shunt { shunt: Branch::series(trap) });
        }
        circuit(stages, parts)
    }

    fn zeros(resonances: &Resonances) -> Vec<Resonance> {
        let mut zeros: Vec<Resonance> = resonances.iter().filter(|one| !one.is_pole).collect();
        zeros.sort_by(|a, b| a.frequency_hz.total_cmp(&b.frequency_hz));
        zeros
    }

    #[test]
    fn the_zeros_of_traps_are_where_coil_and_capacitor_resonate() {
        let circuit = traps(&[50.0, 150.0, 151.0], 2.0);
        let found = circuit.evaluator(&circuit.values()).resonances(20.0, 500.0);
        let zeros = zeros(&found);
        assert_eq!(zeros.len(), 3, "{found:?}");
        for (zero, hz) in zeros.iter().zip([50.0_f64, 150.0, 151.0]) {
            // s² + s·r/L + ω² = 0: σ = r/2L.
            let half_width_hz = 1.0 / TAU;
            assert!((zero.half_width_hz - half_width_hz).abs() < 1e-6, "{zero:?}");
            assert!((zero.frequency_hz - (hz * hz - half_width_hz.powi(2)).sqrt()).abs() < 1e-6, "{zero:?}");
        }
    }

    #[test]
    fn traps_without_loss_have_their_zeros_on_the_axis_and_alike_ones_are_found_twice() {
        let circuit = traps(&[60.0, 60.0], 0.0);
        let zeros = zeros(&circuit.evaluator(&circuit.values()).resonances(20.0, 500.0));
        assert_eq!(zeros.len(), 2);
        assert!(
            zeros.iter().all(|zero| (zero.frequency_hz - 60.0).abs() < 1e-4 && zero.half_width_hz < 1e-3)
        );
    }

    #[test]
    fn the_pole_of_coil_and_capacitor_in_a_line_has_the_width_that_the_ends_give_it() {
        // 100 Ω, 1 H and 1 µF into 1 MΩ: s² + s(R/L + 1/R'C) + (1 + R/R')/LC = 0.
        let parts = vec![Part::ideal("L", PartKind::Coil, 1.0), Part::ideal("C", PartKind::Capacitor, 1e-6)];
        let stages =
            vec![TwoPort::Series { series: Branch::Part(0) }, TwoPort::Shunt { shunt: Branch::Part(1) }];
        let circuit = circuit(stages, parts);
        let found: Vec<Resonance> =
            circuit.evaluator(&circuit.values()).resonances(10.0, 1e4).iter().collect();
        assert_eq!(found.len(), 1, "{found:?}");
        let sigma = 0.5 * (100.0 + 1.0);
        assert!(found[0].is_pole);
        assert!((TAU * found[0].half_width_hz - sigma).abs() < 1e-4);
        assert!((TAU * found[0].frequency_hz - (1.0001e6 - sigma * sigma).sqrt()).abs() < 1e-4);
    }

    #[test]
    fn resonances_of_a_build_are_found_from_those_of_the_nominal_parts() {
        let circuit = traps(&[50.0, 150.0, 151.0, 250.0], 2.0);
        let known = circuit.evaluator(&circuit.values()).resonances(20.0, 500.0);
        let mut values = circuit.values();
        // The second and the third trap change places.
        for (index, factor) in [(2, 1.08), (5, 0.97), (8, 1.02), (10, 0.94)] {
            values[index].value_si *= factor;
        }
        let followed = zeros(&circuit.evaluator(&values).resonances_from(&known).expect("none is lost"));
        let afresh = zeros(&circuit.evaluator(&values).resonances(20.0, 500.0));
        assert_eq!(followed.len(), afresh.len());
        for (one, other) in followed.iter().zip(&afresh) {
            let near = |a: f64, b: f64| (a - b).abs() < 0.01 * other.half_width_hz;
            assert!(near(one.frequency_hz, other.frequency_hz), "{one:?} {other:?}");
            assert!(near(one.half_width_hz, other.half_width_hz), "{one:?} {other:?}");
        }
    }
}
