//! Hum and rest as hearing weighs them.

use super::spectrum::Spectrum;
use super::weighting::{a_weighting_db, bs468_weighting_db, weighted_level_dbfs};
use serde::{Deserialize, Serialize};

/// Weighted levels, for audio: RMS of both, relative to the RMS of a full-scale sine. The
/// quasi-peak detector that belongs to ITU-R BS.468-4 is not used.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Weighted {
    /// The hum's harmonics through A-weighting (IEC 61672-1).
    pub hum_a_dbfs: f64,
    /// The hum's harmonics through the weighting of ITU-R BS.468-4.
    pub hum_468_dbfs: f64,
    /// All else through A-weighting; `None` where the capture is too short to part it from
    /// the hum.
    pub rest_a_dbfs: Option<f64>,
    /// All else through the weighting of ITU-R BS.468-4.
    pub rest_468_dbfs: Option<f64>,
}

/// Lowest sample rate at which a recording is taken for audio, hertz.
const AUDIO_RATE_HZ: f64 = 8000.0;
/// Half the main lobe of the spectrum's window, in units of its noise bandwidth: a
/// five-term flat top reaches 5 bins to either side, and its noise bandwidth is 3.77.
const HALF_LOBE: f64 = 5.0 / 3.77;
/// Most of the room between two harmonics that their lobes may fill.
const MOST_FILLED: f64 = 0.5;

impl Weighted {
    /// `lines` are (frequency in hertz, level in dBFS) of the hum; `wander_hz` is how far its
    /// fundamental strays to either side.
    pub(super) fn of(
        lines: &[(f64, f64)],
        fundamental_hz: f64,
        wander_hz: f64,
        spectrum: &Spectrum,
        rate_hz: f64,
    ) -> Option<Self> {
        if rate_hz < AUDIO_RATE_HZ || lines.is_empty() {
            return None;
        }
        let rest = rest_of(spectrum, lines, fundamental_hz, wander_hz);
        let weigh =
            |weighting: fn(f64) -> f64| rest.as_ref().map(|rest| weighted_level_dbfs(rest, weighting));
        Some(Self {
            hum_a_dbfs: weighted_level_dbfs(lines, a_weighting_db),
            hum_468_dbfs: weighted_level_dbfs(lines, bs468_weighting_db),
            rest_a_dbfs: weigh(a_weighting_db),
            rest_468_dbfs: weigh(bs468_weighting_db),
        })
    }
}

/// The spectrum's bins as lines that add up to the power of all but the hum: each bin
/// holds the power of a noise bandwidth, which is wider than the bin. Under a line of
/// the hum stands what lies beside it.
fn rest_of(
    spectrum: &Spectrum,
    lines: &[(f64, f64)],
    fundamental_hz: f64,
    wander_hz: f64,
) -> Option<Vec<(f64, f64)>> {
    let (&first_hz, &second_hz) = (spectrum.frequency_hz.first()?, spectrum.frequency_hz.get(1)?);
    let bin_hz = second_hz - first_hz;
    let lobe_hz = HALF_LOBE * spectrum.resolution_hz + bin_hz;
    if 2.0 * lobe_hz > MOST_FILLED * fundamental_hz {
        return None;
    }
    let mut power: Vec<f64> = spectrum.level_dbfs.iter().map(|level| 10f64.powf(level / 10.0)).collect();
    let last = power.len() - 1;
    for &(hertz, _) in lines {
        let reach_hz = lobe_hz + wander_hz * hertz / fundamental_hz;
        let from = ((hertz - reach_hz) / bin_hz).floor().max(0.0) as usize;
        let to = (((hertz + reach_hz) / bin_hz).ceil() as usize).min(last);
        if from >= last {
            continue;
        }
        let beside = 0.5 * (power[from] + power[to]);
        power[from..=to].fill(beside);
    }
    let share_db = 10.0 * (bin_hz / spectrum.resolution_hz).log10();
    // Nothing is heard of a constant, whose weight is −∞ dB.
    let audible = spectrum.frequency_hz.iter().zip(&power).skip(1);
    Some(audible.map(|(&hertz, p)| (hertz, 10.0 * p.max(1e-40).log10() + share_db)).collect())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::analysis::SpectrumMeter;
    use rand::{RngExt, SeedableRng};
    use rand_xoshiro::Xoshiro256PlusPlus;
    use std::f64::consts::TAU;

    const RATE_HZ: f64 = 16_000.0;

    fn spectrum_of(sample: impl FnMut(f64) -> f64) -> Spectrum {
        let mut meter = SpectrumMeter::new(RATE_HZ, 12.0);
        let samples: Vec<f64> =
            (0..(12.0 * RATE_HZ) as usize).map(|n| n as f64 / RATE_HZ).map(sample).collect();
        meter.push(&samples);
        meter.finish()
    }

    #[test]
    fn a_tone_of_1_khz_reads_the_same_weighted_and_unweighted() {
        let hum = |t: f64| 0.1 * (TAU * 50.0 * t).cos() + 0.03 * (TAU * 150.0 * t).cos();
        let spectrum = spectrum_of(|t| 0.05 * (TAU * 1000.0 * t).sin() + hum(t));
        let lines = [(50.0, -20.0), (150.0, -30.5)];
        let weighted = Weighted::of(&lines, 50.0, 0.01, &spectrum, RATE_HZ).expect("audio");
        let tone_dbfs = 20.0 * 0.05_f64.log10();
        assert!((weighted.rest_a_dbfs.unwrap() - tone_dbfs).abs() < 0.1, "{weighted:?}");
        assert!((weighted.rest_468_dbfs.unwrap() - tone_dbfs).abs() < 0.1, "{weighted:?}");
        // A-weighting takes 30.2 dB at 50 Hz and, between 16.1 at 125 Hz and 13.4 at 160 Hz, 14 at 150 Hz.
        let heard = 10.0 * (10_f64.powf(-5.02) + 10_f64.powf(-4.45)).log10();
        assert!((weighted.hum_a_dbfs - heard).abs() < 0.3, "{weighted:?}");
    }

    #[test]
    fn white_noise_loses_what_a_weighting_takes_of_it() {
        let mut random = Xoshiro256PlusPlus::seed_from_u64(4);
        let sd = 0.01;
        let spectrum = spectrum_of(|_| sd * ((0..12).map(|_| random.random::<f64>()).sum::<f64>() - 6.0));
        let weighted = Weighted::of(&[(50.0, -60.0)], 50.0, 0.0, &spectrum, RATE_HZ).expect("audio");
        let mean_gain =
            (1..8000).map(|f| 10_f64.powf(a_weighting_db(f64::from(f)) / 10.0)).sum::<f64>() / 8000.0;
        let expected = 10.0 * (2.0 * sd * sd * mean_gain).log10();
        assert!((weighted.rest_a_dbfs.unwrap() - expected).abs() < 0.2, "{weighted:?}, expected {expected}");
    }

    #[test]
    fn what_is_no_audio_or_too_short_is_not_weighted() {
        let spectrum = spectrum_of(|_| 0.0);
        assert_eq!(Weighted::of(&[(50.0, -20.0)], 50.0, 0.0, &spectrum, 1000.0), None);
        assert_eq!(Weighted::of(&[], 50.0, 0.0, &spectrum, RATE_HZ), None);
        let mut short = SpectrumMeter::new(RATE_HZ, 0.2);
        short.push(&[0.0; 3200]);
        let weighted = Weighted::of(&[(50.0, -20.0)], 50.0, 0.0, &short.finish(), RATE_HZ).expect("audio");
        assert_eq!(weighted.rest_a_dbfs, None);
    }
}
