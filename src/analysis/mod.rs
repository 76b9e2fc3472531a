//! What hums: fundamental, harmonics, frequency track, spread, supplies, cause.

mod account;
mod agreement;
mod analyse;
mod besides;
mod causes;
mod coherent;
mod comb;
mod company;
mod converter;
mod decimator;
mod findings;
mod folding;
mod gather;
mod heavy_tail;
mod kalman;
mod level_track;
mod levels;
mod likeliest;
mod neighbours;
mod orders;
mod passes;
mod passing;
mod phase;
mod phasors;
mod presence;
mod quiet;
mod reading;
mod reference;
mod reread;
mod run_up;
mod spectrum;
mod spread;
mod stays;
mod steps;
mod supplies;
mod survey;
mod swell;
mod tracker;
mod verdict;
mod weighted;
mod weighting;
mod window;

pub use analyse::{AnalysisRun, analyse};
pub use causes::BENCH_CAPTURES;
pub use converter::{Converter, FilterNeed, HumOnConverter, Needed, SHORT_OF_HEADROOM_DB, WhyNeeded};
pub use findings::*;
pub use orders::{OrderLevel, OrderMeter};
pub use phase::PhaseTrack;
pub use spectrum::{Spectrum, SpectrumMeter};
pub use weighted::Weighted;
pub use weighting::{a_weighting_db, bs468_weighting_db, weighted_level_dbfs};

/// What the user asks of the analyser.
#[derive(Debug, Clone, Default)]
pub struct AnalyseOptions {
    /// Channel to analyse, 1 first; `None` picks the one with the strongest hum.
    pub channel: Option<usize>,
    /// Peak volts of a full-scale sample; `None` when no brief says.
    pub full_scale_v: Option<f64>,
}

/// Why a recording could not be analysed.
#[derive(Debug, thiserror::Error)]
pub enum AnalysisError {
    /// Reading failed.
    #[error(transparent)]
    Capture(#[from] crate::capture::CaptureError),
    /// A channel was asked for that the recording does not have.
    #[error(
        "{name}: channel {wanted} was asked for, the recording has {channels}; give a number from 1 to {channels}"
    )]
    NoSuchChannel {
        /// The recording.
        name: String,
        /// The channel asked for, 1 first.
        wanted: usize,
        /// Channels in the recording.
        channels: usize,
    },
    /// Nothing was given to analyse.
    #[error("no capture was given; at least one recording is needed")]
    NoCapture,
}
