//! What signal and hum do to the converter, and whether a filter before it is needed.
//!
//! What a passive filter before the converter buys is headroom, and with it gain: the first
//! stages are spared the hum, do not clip or bend on it, and the wanted signal can be
//! amplified further above the converter's own noise. Everything else, averaging or a notch
//! in software does on the samples as well and for nothing. So the question is whether
//! headroom is short, whether it is the hum that takes it, and whether the converter's
//! noise matters at all.

use super::findings::CaptureSummary;
use super::orders::{OrderLevel, power_dbfs};
use super::spectrum::Spectrum;
use serde::{Deserialize, Serialize};
use std::f64::consts::TAU;

/// A converter with less room than this over the largest sample is short of it, decibels.
pub const SHORT_OF_HEADROOM_DB: f64 = 6.0;
/// Share of the peak from which the hum is what takes the headroom.
const TAKES_HEADROOM: f64 = 0.3;
/// The same where nothing is clipped yet.
const LARGER_PART: f64 = 0.5;
/// What the hum's absence must at least gain before resolution is looked at, decibels.
const LARGE_GAIN_DB: f64 = 10.0;
/// Noise less than this over that of the steps of the sample format is theirs, decibels:
/// triangular dither, which makes 4.8 dB more, included.
const STEPS_NOISE_DB: f64 = 6.0;
/// Points in a period of the hum's highest order.
const POINTS_OF_A_PERIOD: usize = 64;

/// What one capture does to the converter.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Converter {
    /// Largest sample, relative to full scale.
    pub peak_dbfs: f64,
    /// What is left up to full scale; 0 or less where samples reach it.
    pub headroom_db: f64,
    /// Peak over RMS, both about the mean; 3.0 dB is a sine, 12 dB and more is noise.
    pub crest_factor_db: f64,
    /// What the hum does to it; `None` where none was found.
    pub hum: Option<HumOnConverter>,
    /// Whether a filter before the converter is needed.
    pub filter_needed: FilterNeed,
}

/// The hum's part in the peak.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct HumOnConverter {
    /// The hum's own peak as a fraction of full scale: one period made of the harmonics' levels
    /// and phases, as loud as it is in the loudest twentieth of the time.
    pub peak: f64,
    /// That over the peak of the recording, 1 at most.
    pub share_of_peak: f64,
    /// What full scale would gain at least if the hum were gone, in decibels. The rest's peak
    /// is taken for this as high as it can reasonably be: its mean and its RMS times the
    /// crest factor √(2 ln N) of Gaussian noise of so many samples, or the recording's
    /// peak less the hum's, whichever is more. A rest of few and high peaks that fall
    /// between the hum's own may gain less, by no more than the hum's share.
    pub gain_least_db: f64,
    /// What it would gain at most: the rest's peak is not under the recording's less the hum's,
    /// and not under its own RMS.
    pub gain_most_db: f64,
    /// The least gain in bits: 6.02 dB each.
    pub bits_least: f64,
    /// The most gain in bits.
    pub bits_most: f64,
}

/// Whether a filter before the converter is needed, why, and that in a sentence.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct FilterNeed {
    /// The answer.
    pub answer: Needed,
    /// What it hangs on.
    pub why: WhyNeeded,
    /// Both in plain words.
    pub statement: String,
}

/// Whether a filter before the converter is needed, the most pressing answer first.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Needed {
    /// It gains what nothing behind the converter can.
    #[serde(rename = "needed")]
    Yes,
    /// It may: what to measure first is said.
    #[serde(rename = "may_help")]
    Perhaps,
    /// Software does the same.
    #[serde(rename = "not_needed")]
    No,
}

/// What the answer hangs on.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum WhyNeeded {
    /// Samples are cut off, and the hum is a good part of the peak.
    Clipping,
    /// Samples are cut off, but the hum has little part in it.
    RestClips,
    /// Headroom is short, and the hum is the larger part of the peak.
    HumTakesHeadroom,
    /// Headroom is short, but the hum has little part in it.
    RestTakesHeadroom,
    /// Headroom is not short, but the hum stands far over the rest, whose noise is that of
    /// the sample format's steps: more gain would resolve it better.
    Resolution,
    /// Headroom is not short.
    HeadroomInHand,
    /// There is no hum.
    NoHum,
}

/// The hum of a capture as it is given here.
pub(super) struct HumHeard<'a> {
    /// Its orders over the noise.
    pub levels: Vec<&'a OrderLevel>,
    /// How far its loudest stretch stands over these levels, decibels.
    pub loudest_db: f64,
}

impl Converter {
    pub(super) fn of(summary: &CaptureSummary, hum: Option<&HumHeard>, spectrum: &Spectrum) -> Self {
        let peak_dbfs = amplitude_db(summary.peak);
        let crest_factor_db = if summary.rms > 0.0 {
            amplitude_db(summary.peak_about_mean / summary.rms).max(0.0)
        } else {
            0.0
        };
        let hum = hum.map(|hum| HumOnConverter::of(summary, hum));
        let filter_needed = FilterNeed::of(summary, hum.as_ref(), spectrum);
        Self { peak_dbfs, headroom_db: -peak_dbfs, crest_factor_db, hum, filter_needed }
    }
}

impl HumOnConverter {
    fn of(summary: &CaptureSummary, hum: &HumHeard) -> Self {
        let louder = 10f64.powf(hum.loudest_db / 20.0);
        let peak = louder * peak_of_period(&hum.levels);
        let power =
            |level: &&OrderLevel| 0.5 * 10f64.powf(level.mean_power_dbfs.max(level.level_dbfs) / 10.0);
        let hum_power: f64 = hum.levels.iter().map(power).sum();
        let rest_rms = (summary.rms * summary.rms - hum_power).max(0.0).sqrt();
        let samples = (summary.duration_s * f64::from(summary.sample_rate_hz)).max(2.0);
        let mean = summary.mean.abs();
        let left_over = (summary.peak - peak).max(0.0);
        let highest = (mean + (2.0 * samples.ln()).sqrt() * rest_rms).max(left_over).min(summary.peak);
        let lowest = (mean + rest_rms).max(left_over).min(summary.peak);
        let gain_db = |rest: f64| amplitude_db(summary.peak / rest.max(1e-6 * summary.peak)).max(0.0);
        let (gain_least_db, gain_most_db) = (gain_db(highest), gain_db(lowest));
        Self {
            peak,
            share_of_peak: (peak / summary.peak.max(1e-20)).min(1.0),
            gain_least_db,
            gain_most_db,
            bits_least: gain_least_db / BIT_DB,
            bits_most: gain_most_db / BIT_DB,
        }
    }
}

/// 20·log₁₀ 2.
const BIT_DB: f64 = 6.0206;

impl FilterNeed {
    fn of(summary: &CaptureSummary, hum: Option<&HumOnConverter>, spectrum: &Spectrum) -> Self {
        let Some(hum) = hum else {
            return Self {
                answer: Needed::No,
                why: WhyNeeded::NoHum,
                statement: "no: no hum was found".to_owned(),
            };
        };
        let headroom_db = -amplitude_db(summary.peak);
        let clipped = summary.clipped_samples;
        let share_pct = 100.0 * hum.share_of_peak;
        let gain = gain_told(hum);
        let (answer, why, statement) = if clipped > 0 && hum.share_of_peak >= TAKES_HEADROOM {
            let words = format!(
                "yes: {clipped} samples are cut off, and the hum is {share_pct:.0} % of the peak; what is lost there no \
                 software brings back. Less gain cures the clipping too, and costs resolution"
            );
            (Needed::Yes, WhyNeeded::Clipping, words)
        } else if clipped > 0 {
            let words = format!(
                "no: {clipped} samples are cut off, but the hum is only {share_pct:.0} % of the peak; record at less \
                 gain, and take the hum out in software"
            );
            (Needed::No, WhyNeeded::RestClips, words)
        } else if headroom_db < SHORT_OF_HEADROOM_DB && hum.share_of_peak >= LARGER_PART {
            let words = format!(
                "perhaps: the largest sample stands {:.1} dB below full scale, and the hum is {share_pct:.0} % of it. \
                 Without the hum there would be {gain} more room for gain; that helps where the converter's own noise \
                 sets the resolution, which a recording with the input shorted shows",
                headroom_db.max(0.0)
            );
            (Needed::Perhaps, WhyNeeded::HumTakesHeadroom, words)
        } else if headroom_db < SHORT_OF_HEADROOM_DB {
            let words = format!(
                "no: the largest sample stands {:.1} dB below full scale, but the hum is only {share_pct:.0} % of it. \
                 {SOFTWARE}",
                headroom_db.max(0.0)
            );
            (Needed::No, WhyNeeded::RestTakesHeadroom, words)
        } else if hum.gain_least_db >= LARGE_GAIN_DB && noise_is_of_steps(summary, spectrum) {
            let bits = summary.sample_bits.unwrap_or_default();
            let words = format!(
                "perhaps: headroom is not short ({headroom_db:.1} dB), but the noise is that of the steps of {bits} bits, \
                 and the hum stands far over the rest. First use the headroom in hand, or more bits; beyond that, \
                 taking the hum off before the converter lets the gain rise by {gain} more"
            );
            (Needed::Perhaps, WhyNeeded::Resolution, words)
        } else {
            let words = format!("no: headroom is not short ({headroom_db:.1} dB). {SOFTWARE}");
            (Needed::No, WhyNeeded::HeadroomInHand, words)
        };
        Self { answer, why, statement }
    }
}

/// What does the work of a filter where headroom is not the matter.
const SOFTWARE: &str =
    "Averaging over whole mains periods or a notch in software does the same and costs no parts";

/// `5.0 to 9.8 dB (0.8 to 1.6 bits)`.
fn gain_told(hum: &HumOnConverter) -> String {
    if hum.gain_most_db - hum.gain_least_db < 0.1 {
        return format!("{:.1} dB ({:.1} bits)", hum.gain_least_db, hum.bits_least);
    }
    format!(
        "{:.1} to {:.1} dB ({:.1} to {:.1} bits)",
        hum.gain_least_db, hum.gain_most_db, hum.bits_least, hum.bits_most
    )
}

/// Whether the noise is no more than what rounding to so many bits makes: LSB²/12, spread
/// evenly up to half the sample rate (common practice).
fn noise_is_of_steps(summary: &CaptureSummary, spectrum: &Spectrum) -> bool {
    let (Some(bits), true) = (summary.sample_bits, spectrum.level_dbfs.len() > 8) else { return false };
    let step = 2f64.powi(1 - i32::from(bits));
    let half_rate_hz = 0.5 * f64::from(summary.sample_rate_hz);
    let of_steps = power_dbfs(step * step / 12.0 * spectrum.resolution_hz / half_rate_hz);
    let mut levels = spectrum.level_dbfs.clone();
    let middle = levels.len() / 2;
    let (_, median, _) = levels.select_nth_unstable_by(middle, f64::total_cmp);
    *median <= of_steps + STEPS_NOISE_DB
}

/// Largest value in one period of all orders together.
fn peak_of_period(levels: &[&OrderLevel]) -> f64 {
    let top = levels.iter().map(|level| level.order).max().unwrap_or(1) as usize;
    let points = POINTS_OF_A_PERIOD * top;
    let lines: Vec<(f64, f64, f64)> = levels
        .iter()
        .map(|level| {
            (10f64.powf(level.level_dbfs / 20.0), f64::from(level.order), level.phase_deg.to_radians())
        })
        .collect();
    (0..points)
        .map(|n| {
            let turn = TAU * n as f64 / points as f64;
            lines.iter().map(|(amplitude, k, phase)| amplitude * (k * turn + phase).cos()).sum::<f64>().abs()
        })
        .fold(0.0, f64::max)
}

/// 20·log₁₀ that stays finite: nothing reads −400 dB.
fn amplitude_db(ratio: f64) -> f64 {
    20.0 * ratio.max(1e-20).log10()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn order(order: u32, amplitude: f64, phase_deg: f64) -> OrderLevel {
        let level_dbfs = 20.0 * amplitude.log10();
        OrderLevel {
            order,
            frequency_hz: 50.0 * f64::from(order),
            level_dbfs,
            mean_power_dbfs: level_dbfs,
            level_se_db: 0.01,
            phase_deg,
            over_floor_db: 60.0,
            floor_dbfs: level_dbfs - 60.0,
        }
    }

    /// A minute at 1 kHz of 16 bits: hum of this amplitude, and a rest of this peak and RMS.
    fn of(hum: f64, rest_peak: f64, rest_rms: f64, clipped_samples: u64) -> Converter {
        let rms = (0.5 * hum * hum + rest_rms * rest_rms).sqrt();
        let summary = CaptureSummary {
            sample_rate_hz: 1000,
            duration_s: 60.0,
            clipped_samples,
            peak: (hum + rest_peak).min(1.0),
            peak_about_mean: (hum + rest_peak).min(1.0),
            rms,
            sample_bits: Some(16),
            ..CaptureSummary::default()
        };
        let level = order(1, hum, 30.0);
        let heard = HumHeard { levels: vec![&level], loudest_db: 0.0 };
        Converter::of(&summary, Some(&heard), &Spectrum::default())
    }

    #[test]
    fn the_peak_of_the_hum_is_that_of_its_waveform() {
        let (first, third) = (order(1, 0.1, 0.0), order(3, 0.03, 0.0));
        assert!((peak_of_period(&[&first, &third]) - 0.13).abs() < 1e-4);
        // With the third harmonic against the crest: cos x − 0.3 cos 3x has its peak of 1.002 beside it.
        let against = order(3, 0.03, 180.0);
        let expected = (0..10_000)
            .map(|n| TAU * f64::from(n) / 1e4)
            .map(|x| 0.1 * x.cos() - 0.03 * (3.0 * x).cos())
            .fold(0.0, f64::max);
        assert!((peak_of_period(&[&first, &against]) - expected).abs() < 1e-4);
    }

    #[test]
    fn hum_of_half_the_peak_costs_up_to_one_bit() {
        let converter = of(0.4, 0.4, 0.1, 0);
        let hum = converter.hum.expect("hum");
        assert!((hum.share_of_peak - 0.5).abs() < 1e-3);
        assert!((hum.bits_most - 1.0).abs() < 0.01, "{hum:?}");
        // The rest's peak taken as that of noise, 4.7 times its RMS: 0.8 over 0.47.
        assert!((hum.gain_least_db - 4.6).abs() < 0.2, "{hum:?}");
    }

    #[test]
    fn a_sine_has_a_crest_factor_of_3_db() {
        let converter = of(0.5, 0.0, 0.0, 0);
        assert!((converter.crest_factor_db - 3.01).abs() < 0.01);
        assert!((converter.headroom_db - 6.02).abs() < 0.01);
    }

    #[test]
    fn where_headroom_is_not_short_no_filter_is_needed() {
        let need = of(0.1, 0.05, 0.01, 0).filter_needed;
        assert_eq!((need.answer, need.why), (Needed::No, WhyNeeded::HeadroomInHand));
        assert!(need.statement.contains("costs no parts"), "{}", need.statement);
    }

    #[test]
    fn where_headroom_is_short_it_matters_who_takes_it() {
        let answer = |hum: f64, rest: f64, clipped: u64| {
            let need = of(hum, rest, 0.2 * rest, clipped).filter_needed;
            (need.answer, need.why)
        };
        assert_eq!(answer(0.7, 0.2, 0), (Needed::Perhaps, WhyNeeded::HumTakesHeadroom));
        assert_eq!(answer(0.1, 0.8, 0), (Needed::No, WhyNeeded::RestTakesHeadroom));
        assert_eq!(answer(0.8, 0.5, 300), (Needed::Yes, WhyNeeded::Clipping));
        assert_eq!(answer(0.1, 1.2, 300), (Needed::No, WhyNeeded::RestClips));
    }

    #[test]
    fn far_over_the_noise_of_the_steps_more_gain_would_resolve_more() {
        let spectrum = |level: f64| Spectrum {
            frequency_hz: (0..100).map(f64::from).collect(),
            level_dbfs: vec![level; 100],
            resolution_hz: 1.0,
        };
        let level = order(1, 0.1, 0.0);
        let heard = HumHeard { levels: vec![&level], loudest_db: 0.0 };
        let summary = CaptureSummary {
            sample_rate_hz: 1000,
            duration_s: 60.0,
            peak: 0.1,
            peak_about_mean: 0.1,
            rms: 0.1 / 2f64.sqrt(),
            sample_bits: Some(16),
            ..CaptureSummary::default()
        };
        // Rounding to 16 bits: −98.1 dBFS in all, 27 dB less in 1 of 500 Hz.
        let why = |level: f64| Converter::of(&summary, Some(&heard), &spectrum(level)).filter_needed.why;
        assert_eq!(why(-123.0), WhyNeeded::Resolution);
        assert_eq!(why(-110.0), WhyNeeded::HeadroomInHand);
    }
}
