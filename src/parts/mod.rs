//! Quantities with units, preferred values, stock lists, what real parts lose.

mod part;
pub mod preferred;
pub mod quantity;
mod stock;
mod stock_file;
pub mod yaml;

pub use part::{Part, PartKind, REFERENCE_TEMPERATURE_C};
pub use quantity::{QuantityError, Unit};
pub use stock::{CapacitorLine, CoilLine, Offer, ResistorLine, Series, Stock, TrimmerLine};
pub use yaml::YamlError;

use std::path::PathBuf;

/// Why a stock list could not be read.
#[derive(Debug, thiserror::Error)]
pub enum PartsError {
    /// The file system refused.
    #[error("{path}: {source}; check the stock list's name, it is looked for beside the brief", path = path.display())]
    Io {
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// The file is not a stock list.
    #[error(transparent)]
    Yaml(#[from] YamlError),
}
