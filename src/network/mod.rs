//! Passive two-ports, their chain, response, noise, stress, netlist.
//!
//! Every two-port is held as a pair (matrix M, scalar d) whose quotient M/d is
//! its chain (ABCD) matrix, and every impedance as a fraction N/D: nothing
//! divides before the very end, so that DC, lossless resonances and perfect
//! nulls are exact.

mod branch;
mod chain;
mod circuit;
mod evaluate;
pub mod kinds;
mod ladder;
mod netlist;
mod noise;
mod resonances;
mod stress;
mod values;
mod wiring;

pub use branch::{Branch, Fraction, part_impedance};
pub use chain::{Chain, TwoPort};
pub use circuit::{Circuit, Load, NetworkError, Section, Source};
pub use evaluate::Evaluator;
pub use noise::{BOLTZMANN_J_K, Noise};
pub use resonances::{Resonance, Resonances};
pub use stress::PartStress;
pub use values::PartValue;
