//! The recording through the network; residual hum, in-band loss, settling.

mod outcome;

pub use outcome::*;
