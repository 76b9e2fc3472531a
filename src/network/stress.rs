//! Volts across and amperes through every part.
//!
//! Solved as a whole by Kirchhoff's laws rather than along the chain: every part
//! is a row D·V − N·I = 0, every node a sum of currents, so that opens, shorts and
//! perfect nulls need no division, and the chain's results can be checked by it.

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::branch::Fraction;
use super::circuit::Circuit;
use super::evaluate::NEAR_DC_RAD_S;
use super::values::PartValue;
use super::wiring::{GROUND, INPUT, OUTPUT, Wiring};
use crate::parts::Part;

/// What one part has to bear.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PartStress {
    /// Voltage across it, source side to load side, in the units of the EMF (peak or RMS).
    pub voltage_v: Complex64,
    /// Current through it towards the load or ground, in the same units.
    pub current_a: Complex64,
}

impl PartStress {
    /// Power turned to heat in watt, where the EMF was RMS volts.
    pub fn power_w(&self) -> f64 {
        (self.voltage_v * self.current_a.conj()).re
    }

    /// The largest share of a limit of `part` that is used, 1 at the limit; `None`
    /// where the part states none. The EMF must have been RMS volts for power, and
    /// what the limits mean for voltage and current.
    pub fn share_of_limits(&self, part: &Part) -> Option<f64> {
        let shares = [
            part.voltage_limit_v.map(|limit| self.voltage_v.norm() / limit),
            part.current_limit_a.map(|limit| self.current_a.norm() / limit),
            part.power_limit_w.map(|limit| self.power_w() / limit),
        ];
        shares.into_iter().flatten().reduce(f64::max)
    }
}

impl Circuit {
    /// Stress of each part, in the order of `parts`, with a source EMF of `emf_v`
    /// volts at `frequency_hz`; 0 Hz is DC. A part that the network does not use bears nothing.
    pub fn stress(&self, emf_v: f64, frequency_hz: f64) -> Vec<PartStress> {
        // At DC itself a node between capacitors has no voltage that follows from anything.
        let omega = if frequency_hz == 0.0 { NEAR_DC_RAD_S } else { TAU * frequency_hz };
        let wiring = Wiring::of(self);
        let (voltages, currents) = self.solved(&wiring, emf_v, omega);
        let nothing = Complex64::new(0.0, 0.0);
        let mut stress = vec![PartStress { voltage_v: nothing, current_a: nothing }; self.parts.len()];
        for (wire, current) in wiring.wires.iter().zip(currents) {
            stress[wire.part] =
                PartStress { voltage_v: voltages[wire.from] - voltages[wire.to], current_a: current };
        }
        stress
    }

    /// Voltage of each node, and current through each part of the wiring.
    fn solved(&self, wiring: &Wiring, emf_v: f64, omega: f64) -> (Vec<Complex64>, Vec<Complex64>) {
        let source = Fraction { numerator: self.source.impedance(omega), denominator: ONE };
        let load = Fraction { numerator: ONE, denominator: self.load.admittance(omega) };
        let mut equations = Equations::new(wiring);
        for wire in &wiring.wires {
            let impedance = PartValue::from(&self.parts[wire.part]).impedance(omega);
            equations.element(wire.from, wire.to, impedance, 0.0);
        }
        equations.element(GROUND, wiring.root(INPUT), source, emf_v);
        equations.element(wiring.root(OUTPUT), GROUND, load, 0.0);
        let solution = eliminated(equations.rows);
        let voltage = |column: &Option<usize>| column.map_or(ZERO, |column| solution[column]);
        let voltages = equations.columns.iter().map(voltage).collect();
        (voltages, solution[equations.nodes..].to_vec())
    }
}

const ZERO: Complex64 = Complex64::new(0.0, 0.0);
const ONE: Complex64 = Complex64::new(1.0, 0.0);

/// Kirchhoff's equations: a row and a voltage for each node, then a row and a
/// current for each element; the right-hand side comes last in each row.
struct Equations {
    /// Column of each node; `None` for ground and what is joined with another node.
    columns: Vec<Option<usize>>,
    nodes: usize,
    elements: usize,
    rows: Vec<Vec<Complex64>>,
}

impl Equations {
    fn new(wiring: &Wiring) -> Self {
        let ends = wiring.wires.iter().flat_map(|wire| [wire.from, wire.to]);
        let mut columns = vec![None; wiring.nodes()];
        let mut nodes = 0;
        for node in [wiring.root(INPUT), wiring.root(OUTPUT)].into_iter().chain(ends) {
            if node != GROUND && columns[node].is_none() {
                columns[node] = Some(nodes);
                nodes += 1;
            }
        }
        // Source and load are elements too.
        let size = nodes + wiring.wires.len() + 2;
        Self { columns, nodes, elements: 0, rows: vec![vec![ZERO; size + 1]; size] }
    }

    /// D·(V_from − V_to + EMF) = N·I, and I leaves one node for the other.
    fn element(&mut self, from: usize, to: usize, impedance: Fraction, emf_v: f64) {
        let row = self.nodes + self.elements;
        self.elements += 1;
        for (node, sign) in [(from, 1.0), (to, -1.0)] {
            if let Some(column) = self.columns[node] {
                self.rows[row][column] += sign * impedance.denominator;
                self.rows[column][row] += sign;
            }
        }
        self.rows[row][row] -= impedance.numerator;
        *self.rows[row].last_mut().expect("a right-hand side") = -emf_v * impedance.denominator;
    }
}

/// Gaussian elimination with rows scaled to one size and partial pivoting.
fn eliminated(mut rows: Vec<Vec<Complex64>>) -> Vec<Complex64> {
    let size = rows.len();
    for row in &mut rows {
        let largest = row[..size].iter().map(|z| z.norm()).fold(0.0, f64::max);
        row.iter_mut().for_each(|z| *z /= largest);
    }
    for column in 0..size {
        let pivot = (column..size)
            .max_by(|a, b| rows[*a][column].norm_sqr().total_cmp(&rows[*b][column].norm_sqr()))
            .expect("a row is left");
        rows.swap(column, pivot);
        let (done, rest) = rows.split_at_mut(column + 1);
        let pivot_row = &done[column];
        for row in rest.iter_mut().filter(|row| row[column] != ZERO) {
            let factor = row[column] / pivot_row[column];
            for (entry, above) in row[column..].iter_mut().zip(&pivot_row[column..]) {
                *entry -= factor * above;
            }
        }
    }
    let mut solution = vec![ZERO; size];
    for index in (0..size).rev() {
        let known: Complex64 = (index + 1..size).map(|k| rows[index][k] * solution[k]).sum();
        solution[index] = (rows[index][size] - known) / rows[index][index];
    }
    solution
}
