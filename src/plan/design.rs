//! The plan: what `plan.yaml` and `--json` carry.

use super::brief::LineBrief;
use crate::network::Circuit;
use serde::{Deserialize, Serialize};

/// A filter, what it will do, and whether that meets the brief.
///
/// `Plan` flattens [`Design`], so that the keys of the winner stand at the top
/// level and each alternative has the same keys.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Plan {
    /// The winner's keys.
    #[serde(flatten)]
    pub design: Design,
    /// The brief planned for.
    pub brief: LineBrief,
    /// Nominal frequency of the supply, hertz.
    pub nominal_hz: f64,
    /// Measured mean frequency, hertz.
    pub mean_hz: f64,
    /// Half-width of the design spread at the fundamental about `centre_hz`.
    pub design_spread_hz: f64,
    /// Centre of the design spread at the fundamental.
    pub centre_hz: f64,
    /// The Q window of each order to be reduced.
    pub q_windows: Vec<QWindow>,
    /// What stands in the way, in numbers; empty when the brief is met.
    pub obstacles: Vec<String>,
    /// Other designs worth a look, best first.
    pub alternatives: Vec<Design>,
    /// Remarks: DC on coils, floors, what was assumed.
    #[serde(default)]
    pub notes: Vec<String>,
}

/// One designed filter with its predictions.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Design {
    /// Whether at least 95 % of builds meet the brief.
    pub met: bool,
    /// One line: what it is, `notched low-pass, 1 coil, 5 parts`.
    pub summary: String,
    /// The sections from the source on.
    pub sections: Vec<SectionSummary>,
    /// The circuit: its keys `source`, `load`, `network` and `parts` stand beside these.
    #[serde(flatten)]
    pub circuit: Circuit,
    /// What each order will lose.
    pub predicted: Vec<Predicted>,
    /// What each keep band will lose.
    pub keep: Vec<KeepResult>,
    /// Least insertion loss over the keep bands: the flat part, decibels.
    pub flat_loss_db: f64,
    /// Trims in the order of work.
    pub trims: Vec<Trim>,
    /// The builds that were drawn.
    pub builds: Builds,
    /// Sum of the parts' prices, where all are known.
    pub price: Option<f64>,
}

/// One section, in words and figures.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct SectionSummary {
    /// Name of the kind.
    pub kind: String,
    /// Lowest order it notches; `None` for a plain low-pass or high-pass.
    pub order: Option<u32>,
    /// Where its notch lies, hertz.
    pub notch_hz: Option<f64>,
    /// Loaded Q, where the kind has one.
    pub q: Option<f64>,
    /// Loaded depth, decibels.
    pub depth_db: Option<f64>,
    /// References of its parts.
    pub parts: Vec<String>,
    /// All its notches, where it has more than the one above.
    #[serde(default)]
    pub notches: Vec<Notched>,
}

/// One notch of a section.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Notched {
    /// Order it is nearest to.
    pub order: u32,
    /// Where it lies, hertz.
    pub notch_hz: f64,
    /// Loaded Q.
    pub q: f64,
    /// Loaded depth, decibels; `None` for a full null.
    pub depth_db: Option<f64>,
}

/// The Q window of one order.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct QWindow {
    /// Order.
    pub order: u32,
    /// Least Q that the keep bands allow.
    pub q_min: f64,
    /// Largest Q that spread, coil and target allow.
    pub q_max: f64,
    /// Loaded Q of the chosen design at this order, where single notches alone take it down.
    pub q_chosen: Option<f64>,
    /// What closes the window (`spread`, `coil`, `tolerance`, `keep band`), or `None` when open.
    pub closed_by: Option<String>,
}

/// What one order will lose.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Predicted {
    /// Order.
    pub order: u32,
    /// Measured mean frequency of this order, hertz.
    pub frequency_hz: f64,
    /// Insertion loss at that frequency with nominal parts, decibels.
    pub reduction_db: f64,
    /// Least insertion loss over spread and temperature, in 95 % of builds after trim.
    pub reduction_worst_db: f64,
    /// What the brief asks of this order; `None` where it asks nothing.
    pub target_db: Option<f64>,
}

/// What one keep band will lose.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct KeepResult {
    /// Lower edge in hertz.
    pub from_hz: f64,
    /// Upper edge in hertz.
    pub to_hz: f64,
    /// Allowed loss, decibels.
    pub allowed_db: f64,
    /// Largest loss or gain by nominal parts, outside the guards, decibels; a gain is negative.
    pub loss_db: f64,
    /// The same over temperature, in 95 % of builds after trim.
    pub loss_worst_db: f64,
    /// Part of the band left to judge outside the guards, 0 to 1.
    pub judged_share: f64,
}

/// One trim: what to turn or pad, until which reading.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Trim {
    /// Order of work, 1 first.
    pub step: u32,
    /// Reference of the part adjusted.
    pub part: String,
    /// How: `turn` a trimmer, or `pad` with listed small parts.
    pub method: String,
    /// Smallest value the adjusted part can take, SI.
    pub from_si: f64,
    /// Largest value it can take, SI.
    pub to_si: f64,
    /// Generator frequency at which to read, hertz.
    pub frequency_hz: f64,
    /// What to aim at: `least output` at that frequency, or a value.
    pub aim: String,
    /// Half-width of what is left after the trim, as a fraction of the value.
    pub residue: f64,
    /// The whole instruction in a sentence.
    pub instruction: String,
}

/// Builds drawn over tolerance and temperature.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Builds {
    /// How many.
    pub count: u32,
    /// Seed of the generator.
    pub seed: u64,
    /// Share that meets the brief, percent.
    pub meeting_pct: f64,
    /// Band of the response that holds 95 % of builds at each frequency (2.5 to 97.5 %).
    pub band: Vec<BandPoint>,
}

/// Response at one frequency: nominal, and the band of the builds, as insertion gain in decibels.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BandPoint {
    /// Frequency in hertz.
    pub frequency_hz: f64,
    /// Nominal insertion gain, decibels (negative: loss).
    pub nominal_db: f64,
    /// Lower edge of the band.
    pub low_db: f64,
    /// Upper edge of the band.
    pub high_db: f64,
}
