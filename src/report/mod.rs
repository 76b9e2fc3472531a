//! Charts, schematic, parts list, bench sheet, the page.
//!
//! Everything here is a pure function of the findings: [`charts`], [`parts_csv`]
//! and [`page`] return text, and the caller writes the files. Only
//! [`Excerpt::take`] reads recordings, for the players of the page.

mod bench;
mod cautions;
mod charts;
mod excerpt;
mod page;
mod partslist;
mod schematic;
mod verdict;
mod wav;
mod wording;

pub use cautions::{CAUTIONS, Caution};
pub use excerpt::{Excerpt, Recordings};
pub use partslist::parts_csv;
pub use schematic::schematic_svg;
pub use wording::{confidence, converter, deviation, level_error, noise_alone, wander, weighted};

use crate::analysis::{Analysis, Spectrum};
use crate::plan::Plan;
use crate::simulation::Simulation;

/// All that the report is made from.
#[derive(Clone, Copy)]
pub struct Material<'a> {
    /// What was found on the recording.
    pub analysis: &'a Analysis,
    /// The filter proposed.
    pub plan: &'a Plan,
    /// What the filter did to the recording.
    pub simulation: &'a Simulation,
    /// Spectrum of the measured channel before the filter.
    pub spectrum_before: &'a Spectrum,
    /// Spectrum of the same channel after it.
    pub spectrum_after: &'a Spectrum,
    /// What the players play; `None` leaves them out.
    pub excerpt: Option<&'a Excerpt>,
}

/// Why the report could not be made.
#[derive(Debug, thiserror::Error)]
pub enum ReportError {
    /// A recording for the players could not be read.
    #[error(transparent)]
    Capture(#[from] crate::capture::CaptureError),
    /// The channel to play is not in one of the recordings.
    #[error(
        "{name}: channel {channel} was to be played, but the recording has {channels}; name one from 1 to {channels}"
    )]
    Channel {
        /// The recording.
        name: String,
        /// The channel asked for, 1 first.
        channel: usize,
        /// Channels it has.
        channels: usize,
    },
    /// The three recordings do not run in step.
    #[error(
        "{name}: sampled at {rate_hz} Hz, but the recording before the filter at {expected_hz} Hz; simulate again so that both come from one run"
    )]
    Rate {
        /// The recording.
        name: String,
        /// Its rate.
        rate_hz: u32,
        /// The rate of the recording before the filter.
        expected_hz: u32,
    },
    /// The page template and the data it was given do not fit: a fault of this program.
    #[error("the page could not be composed ({0}); this is a fault of notchwright, please report it")]
    Template(#[from] minijinja::Error),
}

/// The names of the files that [`charts`] returns.
pub const CHART_NAMES: [&str; 6] =
    ["spectrum.svg", "response.svg", "track.svg", "level.svg", "harmonics.svg", "schematic.svg"];

/// The charts and the schematic: file name and SVG of each.
pub fn charts(material: &Material) -> Vec<(&'static str, String)> {
    charts::all(material, charts::Size::WIDE)
        .into_iter()
        .map(|chart| (chart.file, chart.svg))
        .chain([("schematic.svg", schematic_svg(&material.plan.design.circuit))])
        .collect()
}

/// The page: one HTML document that needs nothing from outside.
///
/// # Errors
/// [`ReportError::Template`] when template and data do not fit.
pub fn page(material: &Material) -> Result<String, ReportError> {
    page::compose(material)
}
