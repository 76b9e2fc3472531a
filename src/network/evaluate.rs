//! Response of a circuit with part values of one's own choice, fast.

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::branch::is_zero;
use super::chain::{Chain, chain_of};
use super::circuit::{Circuit, Load, Source};
use super::ladder::{Lanes, Places, Walk, is_sound};
use super::values::{PartValue, Values};

/// Frequencies walked together by [`Evaluator::insertion_power_each`].
const LANES: usize = 4;

/// Angular frequency that stands for DC where DC itself gives 0/0: low enough
/// that every network of real parts has reached its limit (ωτ < 1e-8 at τ = 1e4 s).
pub(super) const NEAR_DC_RAD_S: f64 = 1e-12;

/// Relative distance from a frequency at which a lossless network gives 0/0.
const NUDGE: f64 = 1.0 / (1u32 << 30) as f64;

/// A circuit seen with these part values instead of its own: nothing is copied,
/// nothing is allocated, so that a search or a draw of builds can change numbers
/// in one array and look again.
///
/// ```
/// # use notchwright::network::*;
/// # use notchwright::parts::{Part, PartKind};
/// let circuit = Circuit {
///     source: Source { resistance_ohm: 350.0, inductance_h: 0.0 },
///     load: Load { resistance_ohm: 1e6, capacitance_f: 220e-12 },
///     sections: vec![Section {
///         kind: "plain low-pass".into(),
///         stages: vec![
///             TwoPort::Series { series: Branch::Part(0) },
///             TwoPort::Shunt { shunt: Branch::Part(1) },
///         ],
///     }],
///     parts: vec![
///         Part::ideal("R1", PartKind::Resistor, 1e3),
///         Part::ideal("C1", PartKind::Capacitor, 1e-6),
///     ],
/// };
/// let mut values = circuit.values();
/// let before = circuit.evaluator(&values).insertion_db(50.0);
/// values[1].value_si *= 2.0;
/// assert!(circuit.evaluator(&values).insertion_db(50.0) < before);
/// ```
#[derive(Debug, Clone, Copy)]
pub struct Evaluator<'a> {
    pub(super) circuit: &'a Circuit,
    pub(super) values: &'a [PartValue],
}

impl Circuit {
    /// The values of the parts as plain numbers, in the order of `parts`.
    pub fn values(&self) -> Vec<PartValue> {
        self.parts.iter().map(PartValue::from).collect()
    }

    /// This circuit with `values` (one for each of `parts`, same order) in place of its own.
    pub fn evaluator<'a>(&'a self, values: &'a [PartValue]) -> Evaluator<'a> {
        Evaluator { circuit: self, values }
    }
}

impl Evaluator<'_> {
    /// Load voltage over source EMF.
    pub fn transfer(&self, frequency_hz: f64) -> Complex64 {
        transfer(self.circuit, self.values, frequency_hz)
    }

    /// Load voltage with the network over load voltage without it.
    pub fn insertion(&self, frequency_hz: f64) -> Complex64 {
        self.transfer(frequency_hz) * self.circuit.wire_loading(frequency_hz)
    }

    /// Insertion gain in decibels: negative where the network takes away, −∞ in a perfect null.
    pub fn insertion_db(&self, frequency_hz: f64) -> f64 {
        10.0 * self.insertion(frequency_hz).norm_sqr().log10()
    }

    /// Output impedance at the load, source and load included, ohm.
    pub fn output_impedance(&self, frequency_hz: f64) -> Complex64 {
        output_impedance(self.circuit, self.values, frequency_hz)
    }

    /// |insertion|² at each of `frequencies_hz`, into `out`: several times faster
    /// than one call each, and without the logarithm.
    ///
    /// # Panics
    /// When the two lengths differ.
    pub fn insertion_power_each(&self, frequencies_hz: &[f64], out: &mut [f64]) {
        assert_eq!(frequencies_hz.len(), out.len(), "one place for each frequency");
        for (some, out) in frequencies_hz.chunks(LANES).zip(out.chunks_mut(LANES)) {
            // A short last chunk is filled up with its own last frequency.
            let padded = std::array::from_fn(|lane| some[lane.min(some.len() - 1)]);
            let power = self.insertion_power::<LANES>(&padded);
            out.copy_from_slice(&power[..some.len()]);
        }
    }

    /// Insertion gain in decibels at each of `frequencies_hz`, into `out`.
    ///
    /// # Panics
    /// When the two lengths differ.
    pub fn insertion_db_each(&self, frequencies_hz: &[f64], out: &mut [f64]) {
        self.insertion_power_each(frequencies_hz, out);
        out.iter_mut().for_each(|power| *power = 10.0 * power.log10());
    }

    fn insertion_power<const N: usize>(&self, frequencies_hz: &[f64; N]) -> [f64; N] {
        let omega = frequencies_hz.map(|hz| TAU * hz);
        let (d, loading) = walk_to_source(self.circuit, self.values, &omega);
        let wire = wire_lanes(self.circuit, &omega);
        let power = |z: &Lanes<N>, k: usize| z.re[k] * z.re[k] + z.im[k] * z.im[k];
        std::array::from_fn(|k| {
            if is_sound(loading.re[k], loading.im[k]) {
                power(&d, k) * power(&wire, k) / power(&loading, k)
            } else {
                self.insertion(frequencies_hz[k]).norm_sqr()
            }
        })
    }
}

/// Load voltage over source EMF of a circuit with these values.
pub(super) fn transfer<V: Values + ?Sized>(circuit: &Circuit, values: &V, frequency_hz: f64) -> Complex64 {
    let (d, loading) = walk_to_source(circuit, values, &[TAU * frequency_hz]);
    if is_sound(loading.re[0], loading.im[0]) {
        return lane(&d) / lane(&loading);
    }
    limit(frequency_hz, |omega| {
        let chain = chain_with(circuit, values, omega);
        (chain.d, circuit.loading(&chain, omega))
    })
}

/// (M₁₂ + Zs·M₂₂)/(M₁₁ + M₁₂Yl + Zs(M₂₁ + M₂₂Yl)): what the load's terminals look
/// back into, the load itself included.
pub(super) fn output_impedance<V: Values + ?Sized>(
    circuit: &Circuit,
    values: &V,
    frequency_hz: f64,
) -> Complex64 {
    let omega = [TAU * frequency_hz];
    let source = source_lanes(&circuit.source, &omega);
    let start = [(Lanes::ONE, load_lanes(&circuit.load, &omega)), (Lanes::ZERO, Lanes::ONE)];
    let mut walk = Walk::<1, 2>::from_load(start);
    circuit.ports().rev().for_each(|port| walk.back_through(port, values, &omega));
    let (loading, open) = (walk.at_source(0, source), walk.at_source(1, source));
    if is_sound(loading.re[0], loading.im[0]) {
        return lane(&open) / lane(&loading);
    }
    limit(frequency_hz, |omega| {
        let chain = chain_with(circuit, values, omega);
        let open = chain.m[0][1] + circuit.source.impedance(omega) * chain.m[1][1];
        (open, circuit.loading(&chain, omega))
    })
}

/// Chain matrix of all sections with these values.
pub(super) fn chain_with<V: Values + ?Sized>(circuit: &Circuit, values: &V, omega: f64) -> Chain {
    chain_of(circuit.ports(), values, omega)
}

/// d and M₁₁ + M₁₂Yl + Zs(M₂₁ + M₂₂Yl), by walking from the load to the source.
pub(super) fn walk_to_source<V: Values + ?Sized, const N: usize>(
    circuit: &Circuit,
    values: &V,
    at: &impl Places<N>,
) -> (Lanes<N>, Lanes<N>) {
    let mut walk = Walk::<N, 1>::from_load([(Lanes::ONE, load_lanes(&circuit.load, at))]);
    circuit.ports().rev().for_each(|port| walk.back_through(port, values, at));
    let loading = walk.at_source(0, source_lanes(&circuit.source, at));
    (walk.d, loading)
}

/// 1 + ZsYl: source EMF over load voltage without the network.
pub(super) fn wire_lanes<const N: usize>(circuit: &Circuit, at: &impl Places<N>) -> Lanes<N> {
    Lanes::ONE + source_lanes(&circuit.source, at) * load_lanes(&circuit.load, at)
}

fn source_lanes<const N: usize>(source: &Source, at: &impl Places<N>) -> Lanes<N> {
    at.linear(source.resistance_ohm, source.inductance_h)
}

fn load_lanes<const N: usize>(load: &Load, at: &impl Places<N>) -> Lanes<N> {
    at.linear(1.0 / load.resistance_ohm, load.capacitance_f)
}

fn lane(lanes: &Lanes<1>) -> Complex64 {
    Complex64::new(lanes.re[0], lanes.im[0])
}

/// The quotient of `fraction` at `frequency_hz`; where that is 0/0 (capacitors
/// with nothing but capacitors between them at DC, two lossless traps on one
/// frequency), its limit: from just above DC, or the mean from both sides.
fn limit(frequency_hz: f64, fraction: impl Fn(f64) -> (Complex64, Complex64)) -> Complex64 {
    let omega = TAU * frequency_hz;
    let quotient = |omega| {
        let (numerator, denominator) = fraction(omega);
        numerator / denominator
    };
    let (numerator, denominator) = fraction(omega);
    if !(is_zero(denominator) && is_zero(numerator)) {
        return numerator / denominator;
    }
    if omega == 0.0 {
        return Complex64::new(quotient(NEAR_DC_RAD_S).re, 0.0);
    }
    (quotient(omega * (1.0 + NUDGE)) + quotient(omega * (1.0 - NUDGE))) / 2.0
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::network::{Branch, Section, TwoPort};
    use crate::parts::{Part, PartKind};

    fn circuit(stages: Vec<TwoPort>, parts: Vec<Part>) -> Circuit {
        Circuit {
            source: Source { resistance_ohm: 100.0, inductance_h: 0.0 },
            load: Load { resistance_ohm: 900.0, capacitance_f: 0.0 },
            sections: vec![Section { kind: "test".to_owned(), stages }],
            parts,
        }
    }

    fn series(branch: Branch) -> TwoPort {
        TwoPort::Series { series: branch }
    }

    fn shunt(branch: Branch) -> TwoPort {
        TwoPort::Shunt { shunt: branch }
    }

    fn capacitors(count: usize) -> Vec<Part> {
        (0..count).map(|_| Part::ideal("C", PartKind::Capacitor, 1e-6)).collect()
    }

    #[test]
    fn dc_does_not_pass_capacitors_with_a_floating_node_between_them() {
        let both = Branch::series([Branch::Part(0), Branch::Part(1)]);
        let ladder = vec![series(Branch::Part(0)), shunt(Branch::Part(1)), series(Branch::Part(2))];
        for (stages, count) in [
            (vec![series(both)], 2),
            (vec![series(Branch::Part(0)), series(Branch::Part(1))], 2),
            (ladder, 3),
        ] {
            let circuit = circuit(stages, capacitors(count));
            assert!(circuit.transfer(0.0).norm() < 1e-20);
            assert!((circuit.output_impedance(0.0).re - 900.0).abs() < 1e-9, "the load alone is left");
        }
    }

    #[test]
    fn capacitors_in_series_to_ground_leave_dc_alone() {
        let both = Branch::series([Branch::Part(0), Branch::Part(1)]);
        let circuit = circuit(vec![shunt(both)], capacitors(2));
        assert!((circuit.transfer(0.0) - 0.9).norm() < 1e-15);
    }

    #[test]
    fn two_lossless_traps_on_one_frequency_null_it() {
        // 1/(2π) Hz is resonance to the last digit for 1 H and 1 F.
        let trap = |first: usize| shunt(Branch::series([Branch::Part(first), Branch::Part(first + 1)]));
        let pair = [Part::ideal("L", PartKind::Coil, 1.0), Part::ideal("C", PartKind::Capacitor, 1.0)];
        let circuit = circuit(vec![trap(0), trap(2)], [pair.clone(), pair].concat());
        let hz = 1.0 / TAU;
        assert!(circuit.transfer(hz).norm() < 1e-12, "{}", circuit.transfer(hz));
        assert!(circuit.output_impedance(hz).norm() < 1e-6);
        let values = circuit.values();
        let mut power = [f64::NAN; 3];
        circuit.evaluator(&values).insertion_power_each(&[0.0, hz, 2.0 * hz], &mut power);
        assert!((power[0] - 1.0).abs() < 1e-12 && power[1] < 1e-24 && power[2] > 1e-6, "{power:?}");
    }

    #[test]
    fn a_wire_beside_a_wire_is_a_wire() {
        let stages = vec![TwoPort::Beside {
            beside: vec![
                vec![series(Branch::Part(0))],
                vec![series(Branch::Part(1)), shunt(Branch::Part(2))],
            ],
        }];
        let mut parts = vec![Part::ideal("L", PartKind::Coil, 1.0); 2];
        parts.extend(capacitors(1));
        assert!((circuit(stages, parts).transfer(0.0) - 0.9).norm() < 1e-15);
    }

    #[test]
    fn a_ladder_too_long_for_plain_numbers_is_still_exact() {
        // Sixty times the same attenuator of 1 MΩ to ground: the products leave f64's range.
        let resistor = |ohm| Part::ideal("R", PartKind::Resistor, ohm);
        let stages = (0..60).map(|k| shunt(Branch::Part(k))).collect();
        let circuit = circuit(stages, (0..60).map(|_| resistor(6e6)).collect());
        let expected = 1.0 / (1.0 + 100.0 * (1.0 / 900.0 + 60.0 / 6e6));
        assert!((circuit.transfer(50.0) - expected).norm() < 1e-12);
    }

    #[test]
    fn a_build_has_the_same_numbers_either_way() {
        let part = Part {
            series_resistance_ohm: 45.0,
            series_resistance_drift_per_k: 0.0039,
            drift_per_k: 150e-6,
            ..Part::ideal("L1", PartKind::Coil, 1.0)
        };
        assert_eq!(PartValue::as_built(&part, -0.03, 35.0), PartValue::from(&part.as_built(-0.03, 35.0)));
    }
}
