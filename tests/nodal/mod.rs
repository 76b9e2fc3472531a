//! A small nodal solver that knows nothing of two-ports: it reads a netlist, writes
//! down Kirchhoff's current law and Ohm's, and eliminates.

#![allow(dead_code)] // each test file that includes this uses a part of it

use std::collections::BTreeMap;
use std::f64::consts::TAU;

use num_complex::Complex64;

/// Elements of a netlist between numbered nodes.
pub struct Nodal {
    elements: Vec<Element>,
    nodes: BTreeMap<String, usize>,
}

struct Element {
    kind: char,
    from: usize,
    to: usize,
    value: f64,
}

impl Nodal {
    /// Reads the text form: name, node, node, value; `#` starts a comment.
    pub fn read(netlist: &str) -> Self {
        let mut nodal = Self { elements: Vec::new(), nodes: BTreeMap::new() };
        for line in netlist.lines().filter(|line| !line.starts_with('#') && !line.trim().is_empty()) {
            let words: Vec<&str> = line.split_whitespace().collect();
            let [name, from, to, value] = words[..] else { panic!("four words, not `{line}`") };
            let kind = name.chars().next().expect("a name");
            assert!("RLC".contains(kind), "`{name}` is neither R, L nor C");
            let value = value.parse().unwrap_or_else(|_| panic!("a value, not `{value}`"));
            let (from, to) = (nodal.node(from), nodal.node(to));
            nodal.elements.push(Element { kind, from, to, value });
        }
        nodal
    }

    fn node(&mut self, name: &str) -> usize {
        let next = self.nodes.len();
        *self.nodes.entry(name.to_owned()).or_insert(next)
    }

    /// Voltage at `out` with 1 V at `in`.
    pub fn transfer(&self, omega: f64) -> Complex64 {
        self.at_out(omega, 1.0, 0.0)
    }

    /// Voltage at `out` with `in` on ground and 1 A into `out`.
    pub fn output_impedance(&self, omega: f64) -> Complex64 {
        self.at_out(omega, 0.0, 1.0)
    }

    /// Every element has an equation of its own with its current as an unknown: were
    /// admittances added, 0.1 Ω at a node of 1 nF would drown the capacitor.
    fn at_out(&self, omega: f64, volts_at_in: f64, amperes_into_out: f64) -> Complex64 {
        let nodes = self.nodes.len();
        let size = nodes + self.elements.len();
        let (zero, one) = (Complex64::new(0.0, 0.0), Complex64::new(1.0, 0.0));
        let mut rows = vec![vec![zero; size + 1]; size];
        for (index, element) in self.elements.iter().enumerate() {
            let Element { kind, from, to, value } = *element;
            let current = nodes + index;
            rows[from][current] += one;
            rows[to][current] -= one;
            let (voltage, impedance) = match kind {
                'R' => (one, Complex64::new(value, 0.0)),
                'L' => (one, Complex64::new(0.0, omega * value)),
                _ => (Complex64::new(0.0, omega * value), one),
            };
            rows[current][from] += voltage;
            rows[current][to] -= voltage;
            rows[current][current] -= impedance;
        }
        let out = self.nodes["out"];
        rows[out][size] += amperes_into_out;
        let floating = if omega == 0.0 { self.floating() } else { Vec::new() };
        let held = [("0", 0.0), ("in", volts_at_in)].map(|(name, volts)| (self.nodes[name], volts));
        for (node, volts) in floating.into_iter().map(|node| (node, 0.0)).chain(held) {
            rows[node].fill(zero);
            rows[node][node] = one;
            rows[node][size] = Complex64::new(volts, 0.0);
        }
        eliminate(rows)[out]
    }

    /// The same at a frequency in hertz.
    pub fn transfer_hz(&self, frequency_hz: f64) -> Complex64 {
        self.transfer(TAU * frequency_hz)
    }

    /// Voltage at `out` over what source and load alone would give, wired straight.
    pub fn insertion(&self, netlist: &str, frequency_hz: f64) -> Complex64 {
        let value = |name: &str| {
            let line = netlist.lines().find(|line| line.starts_with(&format!("{name} ")))?;
            line.split_whitespace().last()?.parse::<f64>().ok()
        };
        let omega = TAU * frequency_hz;
        let source = Complex64::new(value("RS").unwrap_or(0.0), omega * value("LS").unwrap_or(0.0));
        let load = Complex64::new(value("RL").map_or(0.0, f64::recip), omega * value("CL").unwrap_or(0.0));
        self.transfer_hz(frequency_hz) * (1.0 + source * load)
    }

    /// Nodes that capacitors alone connect with the rest, one of each such group: at
    /// DC their voltage follows from nothing, and any will do.
    fn floating(&self) -> Vec<usize> {
        let mut group: Vec<usize> = (0..self.nodes.len()).collect();
        for element in self.elements.iter().filter(|element| element.kind != 'C') {
            let (keep, drop) = (group[element.from], group[element.to]);
            group.iter_mut().filter(|node| **node == drop).for_each(|node| *node = keep);
        }
        let held = ["0", "in"].map(|name| group[self.nodes[name]]);
        (0..group.len()).filter(|node| group[*node] == *node && !held.contains(node)).collect()
    }
}

/// Gauss–Jordan elimination with partial pivoting.
fn eliminate(mut rows: Vec<Vec<Complex64>>) -> Vec<Complex64> {
    let size = rows.len();
    for column in 0..size {
        let pivot = (column..size)
            .max_by(|a, b| rows[*a][column].norm().total_cmp(&rows[*b][column].norm()))
            .expect("a row");
        rows.swap(column, pivot);
        let pivot_row = rows[column].clone();
        for (index, row) in rows.iter_mut().enumerate() {
            if index != column {
                let factor = row[column] / pivot_row[column];
                row.iter_mut().zip(&pivot_row).for_each(|(entry, above)| *entry -= factor * above);
            }
        }
    }
    (0..size).map(|k| rows[k][size] / rows[k][k]).collect()
}
