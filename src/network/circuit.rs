//! A whole circuit: source, sections, load, and the parts they are made of.

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
        let mut index = |reference: &String| {
            let found = record.parts.iter().position(|part| part.reference == *reference);
            found.ok_or_else(|| NetworkError::UnknownPart { reference: reference.clone() })
        };
        let sections = record
            .network
            .iter()
            .map(|section| map_section(section, &mut index))
            .collect::<Result<_, _>>()?;
        Ok(Self { source: record.source, load: record.load, sections, parts: record.parts })
    }
}

fn map_section<P, Q, E>(
    section: &Section<P>,
    name: &mut impl FnMut(&P) -> Result<Q, E>,
) -> Result<Section<Q>, E> {
    let stages = section.stages.iter().map(|stage| stage.try_map(name)).collect::<Result<_, E>>()?;
    Ok(Section { kind: section.kind.clone(), stages })
}
