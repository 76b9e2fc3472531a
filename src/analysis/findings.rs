//! The account of a recording: what `analysis.yaml` and `--json` carry.

use super::converter::Converter;
use super::weighted::Weighted;
use serde::{Deserialize, Serialize};

/// Everything the analyser has to say about one or more captures of a line.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Analysis {
    /// The recordings, in the order given.
    pub captures: Vec<CaptureSummary>,
    /// The mains hum, or that there is none.
    pub mains: Mains,
    /// Harmonics found above the noise, by order.
    pub harmonics: Vec<Harmonic>,
    /// Frequency of the fundamental against time.
    pub track: Vec<TrackPoint>,
    /// Level of the hum against time, in the capture of the track: at most 600 points;
    /// empty where noise lets none be told.
    #[serde(default)]
    pub level_track: Vec<LevelPoint>,
    /// Where the level goes from one that stays to another: loads that are switched, or run up.
    #[serde(default)]
    pub level_changes: Vec<LevelChange>,
    /// Likely causes, the likeliest first; empty where nothing was found.
    pub causes: Vec<Cause>,
    /// Supplies besides the main one.
    #[serde(default)]
    pub other_supplies: Vec<OtherSupply>,
    /// Harmonics above half the sample rate, and where they fold to.
    #[serde(default)]
    pub folding: Vec<FoldedHarmonic>,
    /// Remarks for the user: short capture, clipping, what cannot be known.
    #[serde(default)]
    pub notes: Vec<String>,
}

/// One recording as it was read.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct CaptureSummary {
    /// Path as given.
    pub path: String,
    /// Sampling rate in hertz.
    pub sample_rate_hz: u32,
    /// Channels in the file.
    pub channels: usize,
    /// Channel analysed, 1 first.
    pub channel: usize,
    /// Length in seconds.
    pub duration_s: f64,
    /// Peak volts of a full-scale sample, where the brief says.
    pub full_scale_v: Option<f64>,
    /// Samples at the converter's limit, in runs.
    pub clipped_samples: u64,
    /// Largest sample as a fraction of full scale.
    pub peak: f64,
    /// Mean as a fraction of full scale.
    pub mean: f64,
    /// RMS about the mean as a fraction of full scale.
    pub rms: f64,
    /// Largest distance of a sample from the mean, as a fraction of full scale.
    #[serde(default)]
    pub peak_about_mean: f64,
    /// Bits of a sample; `None` where samples are floating-point numbers.
    #[serde(default)]
    pub sample_bits: Option<u16>,
    /// The hum in this capture alone; `None` where none counts.
    #[serde(default)]
    pub hum: Option<CaptureHum>,
    /// What the signal does to the converter, and whether a filter before it is needed;
    /// `None` where the capture is left out of the account.
    #[serde(default)]
    pub converter: Option<Converter>,
    /// Weighted as hearing is; `None` where no hum was found, and under 8 kHz.
    #[serde(default)]
    pub weighted: Option<Weighted>,
}

/// The hum of one capture, so that captures can be held against each other.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CaptureHum {
    /// Mean frequency of the fundamental.
    pub frequency_hz: f64,
    /// Every order that any of the captures has over the noise; none where the hum is another
    /// supply's and the capture is left out of the account.
    pub levels: Vec<CaptureLevel>,
}

/// One harmonic in one capture.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CaptureLevel {
    /// Order, 1 for the fundamental.
    pub order: u32,
    /// RMS relative to the RMS of a full-scale sine.
    pub level_dbfs: f64,
    /// Its standard error in decibels, from the noise around the line.
    pub level_se_db: f64,
    /// Line power over the noise power in a bandwidth of 1/T, in decibels: under about
    /// 10 dB the level may be the noise's.
    pub over_floor_db: f64,
}

/// The mains fundamental.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Mains {
    /// Whether hum was found at all.
    pub found: bool,
    /// Nominal frequency of the supply (16.7, 50, 60, 400), where one fits.
    pub nominal_hz: Option<f64>,
    /// Mean frequency: phase advance over the capture divided by 2πT.
    pub frequency_hz: Option<f64>,
    /// Standard error of `frequency_hz`.
    pub frequency_se_hz: Option<f64>,
    /// Half-width about the mean holding the 1 s mean frequency for 95 % of the time.
    pub spread_hz: Option<f64>,
    /// What the estimator's noise alone would show as spread.
    pub spread_floor_hz: Option<f64>,
    /// Share of the time for which the hum is there, where it comes and goes.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub share_of_time: Option<f64>,
    /// How sure the finding is, from 0 to 1; 0.5 and more counts as found. Of finds with a
    /// confidence c, at least about a share c is right, over noise, voices and music with hum
    /// in half of the recordings (`tests/analysis_confidence.rs`). It grows with how far the lines stand over what noise shows by chance, each
    /// line counted up to a limit. Outside the range that interconnected systems keep
    /// (50 or 60 Hz ± 1 %) it stays under 0.9, farther off under 0.7, since sustained
    /// notes lie there; under 0.6 where the lines fit two supplies.
    pub confidence: f64,
}

/// One harmonic of the mains.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Harmonic {
    /// Order, 1 for the fundamental.
    pub order: u32,
    /// Mean frequency in hertz.
    pub frequency_hz: f64,
    /// RMS relative to the RMS of a full-scale sine (AES17): of the amplitude averaged along
    /// the phase track.
    pub level_dbfs: f64,
    /// Standard error of the level in decibels, from the noise around the line. It says
    /// nothing of a level that changes over time.
    #[serde(default)]
    pub level_se_db: Option<f64>,
    /// The mean of the line's power over time, same reference: over the level where the
    /// line swings or is switched. This is what a power meter reads.
    #[serde(default)]
    pub mean_power_dbfs: Option<f64>,
    /// RMS volts of the level, where full scale is known.
    pub rms_v: Option<f64>,
    /// Phase of the cosine at the start of the capture, degrees.
    pub phase_deg: f64,
    /// Line power over the noise power in a bandwidth of 1/T, in decibels.
    pub over_floor_db: f64,
}

/// One point of the frequency track.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct TrackPoint {
    /// Middle of the window, seconds from the start.
    pub time_s: f64,
    /// Frequency of the fundamental in the window.
    pub frequency_hz: f64,
    /// Its standard error.
    pub se_hz: f64,
}

/// The level of the hum about a moment.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LevelPoint {
    /// Middle of the window, seconds from the start.
    pub time_s: f64,
    /// Power of the hum's strong orders together (those that keep their phase along the track,
    /// within 26 dB of the strongest, eight at most). Taken along the phase track, so that a
    /// drift of the frequency is no change of level; programme near a line still adds to it.
    /// Where the hum is gone, what noise reads.
    pub level_dbfs: f64,
}

/// A change in the level of the hum from one that stays to another that stays.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LevelChange {
    /// When half of it is done, seconds from the start.
    pub time_s: f64,
    /// How long the middle half of it takes, in seconds; 0 for a step.
    #[serde(default)]
    pub over_s: f64,
    /// The order whose power changes most.
    pub order: u32,
    /// Its level up to the change.
    pub from_dbfs: f64,
    /// Its level after it.
    pub to_dbfs: f64,
    /// Every order that changes here.
    pub orders: Vec<u32>,
}

/// One likely cause.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Cause {
    /// What the pattern points to; `undetermined` is an answer.
    pub cause: String,
    /// The measured numbers that point there.
    pub evidence: String,
    /// How well the recording fits this cause and not the others, from 0 to 1: a score, no
    /// probability. It grows with the margin by which the pattern's limits are kept, and is
    /// lowered by every other cause that fits as well, by a sample rate that hides the
    /// higher orders, and by clipping. It stays under 0.9, since a recording alone proves no
    /// cause; 0 where nothing is claimed.
    #[serde(default)]
    pub confidence: f64,
    /// Where to look first.
    #[serde(default)]
    pub look_first: String,
    /// What to try first.
    pub first_cure: String,
    /// What to measure to tell this cause from the next of its kind in the list.
    #[serde(default)]
    pub tell_apart: String,
}

/// Another supply on the same line.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct OtherSupply {
    /// Nominal frequency.
    pub nominal_hz: f64,
    /// Measured frequency.
    pub frequency_hz: f64,
    /// Level of its strongest line.
    pub level_dbfs: f64,
}

/// A harmonic that lies above half the sample rate.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct FoldedHarmonic {
    /// Order of the harmonic.
    pub order: u32,
    /// True frequency.
    pub frequency_hz: f64,
    /// Where it appears in the recording.
    pub appears_at_hz: f64,
    /// What that means for the reading, where it falls on something.
    pub remark: String,
}
