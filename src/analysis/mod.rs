//! What hums: fundamental, harmonics, frequency track, spread, supplies, cause.

mod decimator;
mod findings;
mod orders;
mod phase;
mod phasors;
mod spectrum;
mod window;

pub use findings::*;
pub use orders::{OrderLevel, OrderMeter};
pub use phase::PhaseTrack;
pub use spectrum::{Spectrum, SpectrumMeter};

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
}
