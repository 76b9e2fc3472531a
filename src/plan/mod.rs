//! The line brief, the Q window, the search, builds, trim.

mod brief;
mod design;

pub use brief::{BriefError, Centre, KeepBand, LineBrief, ReductionTarget};
pub use design::*;
