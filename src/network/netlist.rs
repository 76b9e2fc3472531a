//! The circuit as plain text, one element a line, for a page of linear algebra to check.

use std::collections::HashMap;
use std::fmt::Write as _;
use std::io;

use super::circuit::Circuit;
use super::values::PartValue;
use super::wiring::{GROUND, INPUT, OUTPUT, Wiring};
use crate::parts::PartKind;

impl Circuit {
    /// The netlist.
    ///
    /// One element a line: name, node, node, value (`R1 n1 n2 350`), in ohm, henry
    /// or farad with all digits. The first letter of the name tells which: R, L, C.
    /// The source EMF stands between node `in` and ground `0`, the load voltage
    /// between `out` and `0`. Source and load are `RS`, `LS`, `RL`, `CL`. What a
    /// part loses follows it as elements of its own: `R_L1` in series with `L1`,
    /// `C_L1` across both, `R_C1` in series with `C1`; trimmers stand at their
    /// setting. What is zero (or an infinite load) is left out, or is a wire and
    /// said to be one. Lines that start with `#` are comments.
    pub fn netlist(&self, title: &str) -> String {
        Draft::new(self).write(title)
    }

    /// Writes [`Circuit::netlist`].
    ///
    /// # Errors
    /// Those of the writer.
    pub fn write_netlist(&self, title: &str, writer: &mut impl io::Write) -> io::Result<()> {
        writer.write_all(self.netlist(title).as_bytes())
    }
}

/// Opening words of every netlist.
const LEGEND: &str = "\
# One element a line: name, node, node, value in ohm, henry or farad.
# The first letter of the name tells which. R_L1 and C_L1 are what coil L1 loses.
# The source EMF stands at node in, the load voltage at node out, 0 is the common line.
";

/// One element, or a wire in its place.
struct Element {
    name: String,
    from: usize,
    to: usize,
    value: f64,
}

/// A netlist being laid out: elements between numbered nodes, comments between them.
struct Draft<'a> {
    circuit: &'a Circuit,
    wiring: Wiring,
    /// Nodes inside parts get numbers above all of the wiring's.
    next_node: usize,
    lines: Vec<Line>,
    /// Node of the source EMF.
    emf: usize,
}

enum Line {
    Comment(String),
    Element(Element),
}

impl<'a> Draft<'a> {
    fn new(circuit: &'a Circuit) -> Self {
        let wiring = Wiring::of(circuit);
        let next_node = wiring.nodes();
        let mut draft = Self { circuit, wiring, next_node, lines: Vec::new(), emf: 0 };
        draft.emf = draft.node();
        draft.source();
        draft.parts();
        draft.load();
        draft
    }

    fn node(&mut self) -> usize {
        self.next_node += 1;
        self.next_node - 1
    }

    fn comment(&mut self, text: String) {
        self.lines.push(Line::Comment(text));
    }

    fn element(&mut self, name: &str, from: usize, to: usize, value: f64) {
        self.lines.push(Line::Element(Element { name: name.to_owned(), from, to, value }));
    }

    fn source(&mut self) {
        self.comment("source".to_owned());
        let source = self.circuit.source;
        self.in_series([("RS", source.resistance_ohm), ("LS", source.inductance_h)], self.emf, INPUT);
    }

    /// Elements one after the other; those of no value are wires.
    fn in_series(&mut self, elements: [(&str, f64); 2], from: usize, to: usize) {
        match elements.map(|(_, value)| value != 0.0) {
            [true, true] => {
                let middle = self.node();
                self.element(elements[0].0, from, middle, elements[0].1);
                self.element(elements[1].0, middle, to, elements[1].1);
            }
            [true, false] => self.element(elements[0].0, from, to, elements[0].1),
            [false, true] => self.element(elements[1].0, from, to, elements[1].1),
            [false, false] => self.wire(elements[0].0, from, to),
        }
    }

    fn wire(&mut self, name: &str, from: usize, to: usize) {
        self.comment(format!("{name} is 0 ohm: a wire"));
        self.wiring.grow(self.next_node);
        self.wiring.join(from, to);
    }

    fn load(&mut self) {
        self.comment("load".to_owned());
        let load = self.circuit.load;
        let output = self.wiring.root(OUTPUT);
        if load.resistance_ohm.is_finite() {
            self.element("RL", output, GROUND, load.resistance_ohm);
        }
        if load.capacitance_f != 0.0 {
            self.element("CL", output, GROUND, load.capacitance_f);
        }
    }

    fn parts(&mut self) {
        let mut section = None;
        for wire in self.wiring.wires.clone() {
            if section != Some(wire.section) {
                section = Some(wire.section);
                let kind = &self.circuit.sections[wire.section].kind;
                self.comment(format!("section {}: {}", wire.section + 1, one_line(kind)));
            }
            self.part(wire.part, wire.from, wire.to);
        }
    }

    fn part(&mut self, index: usize, from: usize, to: usize) {
        let part = &self.circuit.parts[index];
        let value = PartValue::from(part);
        let loss = value.series_resistance_ohm;
        match part.kind {
            PartKind::Resistor | PartKind::Trimmer => {
                let name = element_name('R', &part.reference);
                match value.value_si {
                    0.0 => self.wire(&name, from, to),
                    ohm => self.element(&name, from, to, ohm),
                }
            }
            PartKind::Capacitor => {
                let name = element_name('C', &part.reference);
                let end = if loss == 0.0 { to } else { self.node() };
                self.element(&name, from, end, value.value_si);
                if loss != 0.0 {
                    self.element(&format!("R_{name}"), end, to, loss);
                }
            }
            PartKind::Coil => {
                let name = element_name('L', &part.reference);
                self.in_series([(&name, value.value_si), (&format!("R_{name}"), loss)], from, to);
                if value.self_capacitance_f != 0.0 {
                    self.element(&format!("C_{name}"), from, to, value.self_capacitance_f);
                }
            }
        }
    }

    fn write(mut self, title: &str) -> String {
        self.wiring.grow(self.next_node);
        let mut names = HashMap::from([(self.wiring.root(GROUND), "0".to_owned())]);
        // Where source and output are one node, the EMF's name comes first.
        names.entry(self.wiring.root(OUTPUT)).or_insert_with(|| "out".to_owned());
        names.entry(self.wiring.root(self.emf)).or_insert_with(|| "in".to_owned());
        let mut text = format!("# {}\n{LEGEND}", one_line(title));
        let mut inner = 0;
        for line in &self.lines {
            let Element { name, from, to, value } = match line {
                Line::Comment(comment) => {
                    let _ = writeln!(text, "# {comment}");
                    continue;
                }
                Line::Element(element) => element,
            };
            let mut node = |node: usize| {
                let name = names.entry(self.wiring.root(node)).or_insert_with(|| {
                    inner += 1;
                    format!("n{inner}")
                });
                name.clone()
            };
            let (from, to) = (node(*from), node(*to));
            let _ = writeln!(text, "{name} {from} {to} {}", digits(*value));
        }
        text
    }
}

/// The reference, with the letter of its kind in front where it starts otherwise.
fn element_name(letter: char, reference: &str) -> String {
    let plain: String = reference.chars().map(|c| if c.is_alphanumeric() { c } else { '_' }).collect();
    if plain.starts_with(letter) { plain } else { format!("{letter}_{plain}") }
}

/// The shortest text that reads back as the same number.
fn digits(value: f64) -> String {
    let text = format!("{value:?}");
    text.strip_suffix(".0").unwrap_or(&text).to_owned()
}

fn one_line(text: &str) -> String {
    text.split_whitespace().collect::<Vec<_>>().join(" ")
}
