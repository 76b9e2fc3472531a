//! The recording through the network; residual hum, in-band loss, settling.
//!
//! The recording already contains source and load: what it is sent through is
//! the insertion ratio, load voltage with the network over load voltage without
//! it, sampled exactly and applied by overlapping FFT blocks ([`Kernel`],
//! [`Convolver`]); poles too slow for that run as exact recursions. No bilinear warping, no fitted filter.

mod bands;
mod character;
mod convolver;
mod error;
mod extension;
mod kernel;
mod meters;
mod outcome;
mod run;
mod slow;
mod verdict;

use std::path::Path;

pub use bands::{BandMeter, BandPowers, third_octaves};
pub use character::{group_delay_range_s, group_delay_s, insertion_loss_db, largest_loss_db, settling_s};
pub use convolver::{Convolver, Past, Tone};
pub use error::SimulationError;
pub use kernel::{EXACT_UP_TO, Kernel, LONGEST_FFT};
pub use outcome::*;
pub use run::{SimulateOptions, SimulationRun, Start};

use crate::analysis::{Analysis, PhaseTrack};
use crate::capture::Capture;
use crate::plan::{Design, LineBrief};

/// Sends every channel of a recording through a design's network, writes what
/// comes out and what was taken away, and measures the analysed channel before and
/// after. `track` is the phase of the hum as the analyser found it over this
/// recording; `None` where it found none.
///
/// `filtered_path` and `removed_path` (input scaled by the flat loss, less filtered)
/// are written straight: the caller stages names. `progress` is told the share done.
///
/// # Errors
/// [`SimulationError`]: reading and writing, a network that rings too long or has no
/// response, a channel that is not there.
#[allow(clippy::too_many_arguments)]
pub fn simulate(
    capture: &mut dyn Capture,
    design: &Design,
    brief: &LineBrief,
    analysis: &Analysis,
    track: Option<&PhaseTrack>,
    options: &SimulateOptions,
    filtered_path: &Path,
    removed_path: &Path,
    progress: &mut dyn FnMut(f64),
) -> Result<SimulationRun, SimulationError> {
    let job = run::Job { design, brief, analysis, track, options };
    job.run(capture, filtered_path, removed_path, progress)
}
