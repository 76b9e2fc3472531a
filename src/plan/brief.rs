//! The line brief: what the line is, what must be kept, what must go.

use crate::network::{Load, Source};
use serde::{Deserialize, Serialize};

/// Where the design spread is centred.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Centre {
    /// On the nominal frequency: public grids average to it.
    Nominal,
    /// On the measured mean: islands and generators.
    Measured,
}

/// How far each harmonic is to go down.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum ReductionTarget {
    /// By this many decibels of insertion loss.
    ReduceByDb(f64),
    /// To this level, volts RMS.
    LeaveV(f64),
    /// To this level, decibels relative to full scale.
    LeaveDbfs(f64),
}

/// A band of the wanted signal and the loss it may have.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct KeepBand {
    /// Lower edge in hertz.
    pub from_hz: f64,
    /// Upper edge in hertz.
    pub to_hz: f64,
    /// Allowed insertion loss (or gain) in decibels, flat part included.
    pub allowed_db: f64,
}

/// The brief, read and checked, in SI units.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LineBrief {
    /// Name of the line.
    pub line: String,
    /// Peak volts of a full-scale sample at the notch's place.
    pub full_scale_v: f64,
    /// What drives the line.
    pub source: Source,
    /// What it feeds.
    pub load: Load,
    /// What must be kept, at least one band.
    pub keep: Vec<KeepBand>,
    /// How far the hum is to go down.
    pub target: ReductionTarget,
    /// Orders to reduce; `None`: every harmonic found that needs it.
    pub orders: Option<Vec<u32>>,
    /// Wander to design for where the capture shows less, hertz at the fundamental.
    pub allow_hz: f64,
    /// Loss is judged outside ± this of each notched line.
    pub guard_hz: f64,
    /// Centre of the design spread.
    pub centre: Centre,
    /// Coldest, °C.
    pub temperature_from_c: f64,
    /// Warmest, °C.
    pub temperature_to_c: f64,
    /// The stock list named, as written in the brief; `None`: the built-in one.
    pub stock: Option<String>,
}
