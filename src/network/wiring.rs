//! Which part lies between which nodes.

use super::branch::Branch;
use super::chain::TwoPort;
use super::circuit::Circuit;

/// The common line.
pub(super) const GROUND: usize = 0;

/// The source's far side and the network's input.
pub(super) const INPUT: usize = 1;

/// The network's output and the load.
pub(super) const OUTPUT: usize = 2;

/// One part between two nodes.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Wire {
    /// Section that it belongs to.
    pub section: usize,
    /// Index into the circuit's parts.
    pub part: usize,
    /// Node towards the source.
    pub from: usize,
    /// Node towards the load, or ground.
    pub to: usize,
}

/// All parts with their nodes.
#[derive(Debug)]
pub(super) struct Wiring {
    /// The parts from the source on.
    pub wires: Vec<Wire>,
    /// Node that each node was joined with by a wire; itself where none.
    joined: Vec<usize>,
    section: usize,
}

impl Wiring {
    /// The wiring of a circuit, from [`INPUT`] to [`OUTPUT`].
    pub(super) fn of(circuit: &Circuit) -> Self {
        let mut wiring = Self { wires: Vec::new(), joined: vec![GROUND, INPUT, OUTPUT], section: 0 };
        let mut node = INPUT;
        for (index, section) in circuit.sections.iter().enumerate() {
            wiring.section = index;
            node = wiring.chain(&section.stages, node);
        }
        wiring.join(node, OUTPUT);
        for index in 0..wiring.wires.len() {
            let Wire { from, to, .. } = wiring.wires[index];
            wiring.wires[index].from = wiring.root(from);
            wiring.wires[index].to = wiring.root(to);
        }
        wiring
    }

    /// The node that stands for `node` and all that wires join it with.
    pub(super) fn root(&self, mut node: usize) -> usize {
        while self.joined[node] != node {
            node = self.joined[node];
        }
        node
    }

    /// A wire between two nodes; the lower number stays.
    pub(super) fn join(&mut self, a: usize, b: usize) {
        let (a, b) = (self.root(a), self.root(b));
        self.joined[a.max(b)] = a.min(b);
    }

    /// How many nodes there are, joined ones counted too.
    pub(super) fn nodes(&self) -> usize {
        self.joined.len()
    }

    /// More nodes, up to `count` in all, joined with nothing.
    pub(super) fn grow(&mut self, count: usize) {
        self.joined.extend(self.joined.len()..count);
    }

    fn fresh(&mut self) -> usize {
        self.joined.push(self.joined.len());
        self.joined.len() - 1
    }

    /// Lays out two-ports one after the other; returns the last node.
    fn chain(&mut self, ports: &[TwoPort], from: usize) -> usize {
        ports.iter().fold(from, |node, port| self.port(port, node))
    }

    fn port(&mut self, port: &TwoPort, from: usize) -> usize {
        match port {
            TwoPort::Series { series } => {
                let to = self.fresh();
                self.branch(series, from, to);
                to
            }
            TwoPort::Shunt { shunt } => {
                self.branch(shunt, from, GROUND);
                from
            }
            TwoPort::Beside { beside } => {
                let ends: Vec<usize> = beside.iter().map(|chain| self.chain(chain, from)).collect();
                ends.windows(2).for_each(|pair| self.join(pair[0], pair[1]));
                ends[0]
            }
        }
    }

    fn branch(&mut self, branch: &Branch, from: usize, to: usize) {
        match branch {
            Branch::Part(part) => {
                self.wires.push(Wire { section: self.section, part: *part, from, to });
            }
            Branch::Series { series } => {
                let mut node = from;
                for (index, inner) in series.iter().enumerate() {
                    let next = if index + 1 == series.len() { to } else { self.fresh() };
                    self.branch(inner, node, next);
                    node = next;
                }
            }
            Branch::Parallel { parallel } => {
                parallel.iter().for_each(|inner| self.branch(inner, from, to));
            }
        }
    }
}
