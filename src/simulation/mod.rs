//! The recording through the network; residual hum, in-band loss, settling.
//!
//! The recording already contains source and load: what it is sent through is
//! the insertion ratio, load voltage with the network over load voltage without
//! it, sampled exactly and applied by overlapping FFT blocks ([`Kernel`],
//! [`Convolver`]). No bilinear warping, no fitted filter.

mod convolver;
mod error;
mod kernel;
mod outcome;

pub use convolver::Convolver;
pub use error::SimulationError;
pub use kernel::{EXACT_UP_TO, Kernel, LONGEST_FFT};
pub use outcome::*;
