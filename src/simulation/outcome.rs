//! What the simulation measured: what `simulation.yaml` and `--json` carry.

use serde::{Deserialize, Serialize};

/// The recording after the filter, in figures.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Simulation {
    /// Whether residual and loss, as measured, meet the brief.
    pub met: bool,
    /// What misses, one line each; empty when met.
    pub misses: Vec<String>,
    /// The recording simulated.
    pub capture: String,
    /// Channel measured, 1 first.
    pub channel: usize,
    /// Each harmonic before and after, on the samples.
    pub residual: Vec<Residual>,
    /// Loss of each keep band, computed and measured.
    pub keep: Vec<KeepMeasured>,
    /// Loss by third-octaves (IEC 61260-1 mid-bands) within the keep bands.
    pub third_octaves: Vec<ThirdOctave>,
    /// Time to settle to 1 % after a step, seconds.
    pub settling_s: f64,
    /// Largest less smallest group delay over the keep bands, seconds.
    pub group_delay_spread_s: f64,
    /// Group delay at the middle of the first keep band, seconds.
    pub group_delay_s: f64,
    /// Peak before less peak after, decibels.
    pub headroom_gained_db: f64,
    /// Largest sample before, decibels relative to full scale.
    pub peak_before_dbfs: f64,
    /// Largest sample after.
    pub peak_after_dbfs: f64,
    /// A-weighted (IEC 61672-1) hum level before and after, dBFS.
    pub hum_a_weighted_dbfs: Option<BeforeAfter>,
    /// ITU-R BS.468-4 weighted hum level (RMS, not quasi-peak), dBFS.
    pub hum_468_weighted_dbfs: Option<BeforeAfter>,
    /// Remarks: start, drift, fast or slow playback.
    #[serde(default)]
    pub notes: Vec<String>,
}

/// A figure before and after the filter.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct BeforeAfter {
    /// Before.
    pub before: f64,
    /// After.
    pub after: f64,
}

/// One harmonic before and after.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Residual {
    /// Order.
    pub order: u32,
    /// Mean frequency, hertz.
    pub frequency_hz: f64,
    /// Level before, dBFS.
    pub before_dbfs: f64,
    /// Level after, dBFS.
    pub after_dbfs: f64,
    /// Before less after.
    pub reduction_db: f64,
    /// What the response predicts at the measured frequency.
    pub predicted_db: f64,
    /// What the brief asks of this order in this recording, where it asks something.
    pub target_db: Option<f64>,
    /// Whether the residual is so near the noise that `after_dbfs` is an upper bound.
    pub at_noise_floor: bool,
}

/// Loss of one keep band in this recording.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct KeepMeasured {
    /// Lower edge in hertz.
    pub from_hz: f64,
    /// Upper edge in hertz.
    pub to_hz: f64,
    /// Allowed loss, decibels.
    pub allowed_db: f64,
    /// Largest loss or gain of the response outside the guards, decibels.
    pub loss_db: f64,
    /// Loss of the band's power on the samples, decibels, where the band holds signal.
    pub measured_db: Option<f64>,
}

/// Loss in one third-octave.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ThirdOctave {
    /// Exact mid-band frequency, hertz.
    pub mid_hz: f64,
    /// Level before, dBFS.
    pub before_dbfs: f64,
    /// Level after, dBFS.
    pub after_dbfs: f64,
}
