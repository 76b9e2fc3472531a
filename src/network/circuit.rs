//! A whole circuit: source, sections, load, and the parts they are made of.

use std::collections::HashMap;
use std::f64::consts::TAU;

use num_complex::Complex64;
use serde::{Deserialize, Serialize};

use super::chain::{Chain, TwoPort};
use super::evaluate;
use crate::parts::Part;

/// What drives the line: an EMF behind a resistance and an inductance.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Source {
    /// Resistance in ohm.
    pub resistance_ohm: f64,
    /// Inductance in henry.
    #[serde(default)]
    pub inductance_h: f64,
}

/// What the line feeds: a resistance and a capacitance side by side.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Load {
    /// Resistance in ohm.
    pub resistance_ohm: f64,
    /// Capacitance in farad.
    #[serde(default)]
    pub capacitance_f: f64,
}

/// One section: two-ports that make one notch (or several) together.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Section<P = usize> {
    /// Name of the kind, `shunt trap`.
    pub kind: String,
    /// Its two-ports from the source on.
    pub stages: Vec<TwoPort<P>>,
}

/// Source, sections, load and parts.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(try_from = "CircuitRecord", into = "CircuitRecord")]
pub struct Circuit {
    /// What drives it.
    pub source: Source,
    /// What it feeds.
    pub load: Load,
    /// The sections from the source on; branches hold indices into `parts`.
    pub sections: Vec<Section>,
    /// The parts.
    pub parts: Vec<Part>,
}

/// Why a network is not one.
#[derive(Debug, thiserror::Error)]
pub enum NetworkError {
    /// A branch names a part that the list does not hold.
    #[error(
        "the network names the part `{reference}`, which its parts list does not hold; add it to `parts` or correct the name"
    )]
    UnknownPart {
        /// The name.
        reference: String,
    },
    /// Two parts of one name.
    #[error("two parts are named `{reference}`; each part needs a name of its own: rename one")]
    SharedName {
        /// The name.
        reference: String,
    },
    /// A part at two places.
    #[error(
        "the network uses the part `{reference}` at two places; each place needs a part of its own in `parts`"
    )]
    UsedTwice {
        /// The name.
        reference: String,
    },
    /// Nothing where a part was expected.
    #[error(
        "section `{kind}` of the network holds an empty `series`, `parallel` or `beside` list; name at least one part in it or leave it out"
    )]
    Empty {
        /// Kind of the section.
        kind: String,
    },
    /// A number that no passive part has.
    #[error(
        "`{reference}` has a value, resistance or capacitance of {value}; expected a number in ohm, farad or henry that is not negative, and above zero for the load's resistance"
    )]
    NotPassive {
        /// The part, `source` or `load`.
        reference: String,
        /// What was read.
        value: f64,
    },
}

impl Source {
    /// R + jωL.
    pub fn impedance(&self, omega: f64) -> Complex64 {
        Complex64::new(self.resistance_ohm, omega * self.inductance_h)
    }
}

impl Load {
    /// 1/R + jωC.
    pub fn admittance(&self, omega: f64) -> Complex64 {
        Complex64::new(1.0 / self.resistance_ohm, omega * self.capacitance_f)
    }
}

impl Circuit {
    /// Chain matrix of all sections at `frequency_hz`.
    pub fn chain(&self, frequency_hz: f64) -> Chain {
        evaluate::chain_with(self, self.parts.as_slice(), TAU * frequency_hz)
    }

    /// Load voltage over source EMF at `frequency_hz`.
    pub fn transfer(&self, frequency_hz: f64) -> Complex64 {
        evaluate::transfer(self, self.parts.as_slice(), frequency_hz)
    }

    /// Load voltage with the network over load voltage without it.
    pub fn insertion(&self, frequency_hz: f64) -> Complex64 {
        self.transfer(frequency_hz) * self.wire_loading(frequency_hz)
    }

    /// Insertion gain in decibels: negative where the network takes away, −∞ in a perfect null.
    pub fn insertion_db(&self, frequency_hz: f64) -> f64 {
        10.0 * self.insertion(frequency_hz).norm_sqr().log10()
    }

    /// Output impedance at the load, source and load included, at `frequency_hz`.
    pub fn output_impedance(&self, frequency_hz: f64) -> Complex64 {
        evaluate::output_impedance(self, self.parts.as_slice(), frequency_hz)
    }

    /// All two-ports from the source on.
    pub(super) fn ports(&self) -> impl DoubleEndedIterator<Item = &TwoPort> {
        self.sections.iter().flat_map(|section| &section.stages)
    }

    /// M₁₁ + M₁₂Yl + Zs(M₂₁ + M₂₂Yl).
    pub(super) fn loading(&self, chain: &Chain, omega: f64) -> Complex64 {
        let load = self.load.admittance(omega);
        let m = &chain.m;
        m[0][0] + m[0][1] * load + self.source.impedance(omega) * (m[1][0] + m[1][1] * load)
    }

    /// Source EMF over load voltage with the source wired straight to the load: 1 + ZsYl.
    pub(super) fn wire_loading(&self, frequency_hz: f64) -> Complex64 {
        let omega = TAU * frequency_hz;
        1.0 + self.source.impedance(omega) * self.load.admittance(omega)
    }
}

/// A circuit as files hold it: branches name parts by their references.
#[derive(Serialize, Deserialize)]
struct CircuitRecord {
    source: Source,
    load: Load,
    network: Vec<Section<String>>,
    parts: Vec<Part>,
}

impl From<Circuit> for CircuitRecord {
    fn from(circuit: Circuit) -> Self {
        let mut name =
            |index: &usize| Ok::<_, std::convert::Infallible>(circuit.parts[*index].reference.clone());
        let sections =
            circuit.sections.iter().map(|section| map_section(section, &mut name)).collect::<Result<_, _>>();
        let Ok(sections) = sections;
        Self { source: circuit.source, load: circuit.load, network: sections, parts: circuit.parts }
    }
}

impl TryFrom<CircuitRecord> for Circuit {
    type Error = NetworkError;

    fn try_from(record: CircuitRecord) -> Result<Self, NetworkError> {
        check_numbers(&record)?;
        let mut names = HashMap::new();
        for (index, part) in record.parts.iter().enumerate() {
            if names.insert(part.reference.as_str(), index).is_some() {
                return Err(NetworkError::SharedName { reference: part.reference.clone() });
            }
        }
        let mut used = vec![false; record.parts.len()];
        let mut index = |reference: &String| {
            let found = names.get(reference.as_str()).copied();
            let found = found.ok_or_else(|| NetworkError::UnknownPart { reference: reference.clone() })?;
            if std::mem::replace(&mut used[found], true) {
                return Err(NetworkError::UsedTwice { reference: reference.clone() });
            }
            Ok(found)
        };
        let sections = record
            .network
            .iter()
            .map(|section| {
                if section.stages.iter().any(TwoPort::has_gaps) {
                    return Err(NetworkError::Empty { kind: section.kind.clone() });
                }
                map_section(section, &mut index)
            })
            .collect::<Result<_, _>>()?;
        Ok(Self { source: record.source, load: record.load, sections, parts: record.parts })
    }
}

/// Refuses numbers that no passive circuit has; a load may be infinite, not zero.
fn check_numbers(record: &CircuitRecord) -> Result<(), NetworkError> {
    let (source, load) = (&record.source, &record.load);
    // A short circuit has no load voltage to speak of; an open end is allowed.
    if load.resistance_ohm.is_nan() || load.resistance_ohm <= 0.0 {
        return Err(NetworkError::NotPassive { reference: "load".to_owned(), value: load.resistance_ohm });
    }
    let mut numbers = vec![
        ("source", source.resistance_ohm),
        ("source", source.inductance_h),
        ("load", load.capacitance_f),
    ];
    for part in &record.parts {
        let own = [
            part.value_si,
            part.series_resistance_ohm,
            part.self_capacitance_f,
            part.setting_ohm.unwrap_or_default(),
        ];
        numbers.extend(own.map(|number| (part.reference.as_str(), number)));
    }
    match numbers.into_iter().find(|(_, number)| !(number.is_finite() && *number >= 0.0)) {
        None => Ok(()),
        Some((reference, value)) => Err(NetworkError::NotPassive { reference: reference.to_owned(), value }),
    }
}

fn map_section<P, Q, E>(
    section: &Section<P>,
    name: &mut impl FnMut(&P) -> Result<Q, E>,
) -> Result<Section<Q>, E> {
    let stages = section.stages.iter().map(|stage| stage.try_map(name)).collect::<Result<_, E>>()?;
    Ok(Section { kind: section.kind.clone(), stages })
}

#[cfg(test)]
mod tests {
    use super::*;

    const LINE: &str = "
source: { resistance_ohm: 350 }
load: { resistance_ohm: 1e6 }
network: [{ kind: shunt trap, stages: [{ series: R1 }, { shunt: { series: [C1] } }] }]
parts:
  - { ref: R1, kind: resistor, value: 1 kΩ, value_si: 1000, tolerance_pct: 1 }
  - { ref: C1, kind: capacitor, value: 1 µF, value_si: 1e-6, tolerance_pct: 5 }
";

    fn read(changed: (&str, &str)) -> Result<Circuit, String> {
        let text = LINE.replacen(changed.0, changed.1, 1);
        assert!(text != LINE || changed.0.is_empty(), "the change is made");
        serde_yaml::from_str(&text).map_err(|error| error.to_string())
    }

    #[test]
    fn a_circuit_is_read_with_its_parts_by_name() {
        let circuit = read(("", "")).expect("it is right");
        assert_eq!(circuit.sections[0].stages[1].parts(), [&1]);
    }

    #[test]
    fn a_circuit_that_is_none_is_refused_with_the_name_of_the_part() {
        for (changed, told) in [
            (("shunt: { series: [C1] }", "shunt: C7"), "`C7`, which its parts list does not hold"),
            (("shunt: { series: [C1] }", "shunt: R1"), "the part `R1` at two places"),
            (("shunt: { series: [C1] }", "shunt: { series: [] }"), "section `shunt trap`"),
            (("shunt: { series: [C1] }", "beside: [[]]"), "section `shunt trap`"),
            (("ref: C1", "ref: R1"), "two parts are named `R1`"),
            (("value_si: 1e-6", "value_si: -1e-6"), "`C1` has a value"),
            (("value_si: 1e-6", "value_si: .nan"), "`C1` has a value"),
            (("resistance_ohm: 1e6", "resistance_ohm: 0"), "`load` has a value"),
        ] {
            let error = read(changed).expect_err(told);
            assert!(error.contains(told), "{error}");
        }
    }
}
