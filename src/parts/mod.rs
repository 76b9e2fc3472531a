//! Quantities with units, preferred values, stock lists, what real parts lose.

mod part;
mod stock;

pub use part::{Part, PartKind, REFERENCE_TEMPERATURE_C};
pub use stock::{CapacitorLine, CoilLine, ResistorLine, Series, Stock, TrimmerLine};
