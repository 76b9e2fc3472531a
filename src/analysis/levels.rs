//! Peak, mean, RMS and clipping of a channel, streaming.
//!
//! Samples are taken in short runs: sums and extremes of a run in lanes that the machine
//! adds at once, and sample by sample only where a run touches the largest value so far.

/// Samples of a run.
const RUN: usize = 64;
/// Sums taken side by side.
const LANES: usize = 8;

/// What passed through a channel: extremes, mean, RMS about it, samples cut off.
#[derive(Default)]
pub(super) struct Levels {
    count: f64,
    /// The first sample. Sums are taken of what differs from it, so that a
    /// constant leaves nothing, not even rounding.
    first: Option<f64>,
    sum: f64,
    squares: f64,
    high: FlatTop,
    low: FlatTop,
}

impl Levels {
    pub fn push(&mut self, samples: &[f64]) {
        let Some(&start) = samples.first() else { return };
        let first = *self.first.get_or_insert(start);
        for run in samples.chunks(RUN) {
            let of_run = Run::of(run, first);
            self.sum += of_run.sum;
            self.squares += of_run.squares;
            if self.high.is_touched_by(of_run.high) {
                run.iter().for_each(|&x| self.high.push(x));
            }
            if self.low.is_touched_by(-of_run.low) {
                run.iter().for_each(|&x| self.low.push(-x));
            }
        }
        self.count += samples.len() as f64;
    }

    /// Largest absolute sample.
    pub fn peak(&self) -> f64 {
        self.high.extreme().max(self.low.extreme())
    }

    /// Largest distance of a sample from the mean.
    pub fn peak_about_mean(&self) -> f64 {
        let (mean, _) = self.mean_and_rms();
        (self.high.extreme() - mean).max(self.low.extreme() + mean).max(0.0)
    }

    /// Mean, and RMS about it.
    pub fn mean_and_rms(&self) -> (f64, f64) {
        let count = self.count.max(1.0);
        let apart = self.sum / count;
        (self.first.unwrap_or(0.0) + apart, (self.squares / count - apart * apart).max(0.0).sqrt())
    }

    /// Samples cut off, see [`FlatTop::clipped`].
    pub fn clipped(&self) -> u64 {
        self.high.clipped() + self.low.clipped()
    }
}

/// Sums and extremes of a run of samples.
struct Run {
    sum: f64,
    squares: f64,
    high: f64,
    low: f64,
}

impl Run {
    fn of(run: &[f64], first: f64) -> Self {
        let (mut sum, mut squares) = ([0.0; LANES], [0.0; LANES]);
        let (mut high, mut low) = ([f64::NEG_INFINITY; LANES], [f64::INFINITY; LANES]);
        let mut take = |lane: usize, x: f64| {
            let apart = x - first;
            sum[lane] += apart;
            squares[lane] += apart * apart;
            high[lane] = if x > high[lane] { x } else { high[lane] };
            low[lane] = if x < low[lane] { x } else { low[lane] };
        };
        let whole = run.chunks_exact(LANES);
        let rest = whole.remainder();
        for part in whole {
            for (lane, &x) in part.iter().enumerate() {
                take(lane, x);
            }
        }
        rest.iter().for_each(|&x| take(0, x));
        Self {
            sum: sum.iter().sum(),
            squares: squares.iter().sum(),
            high: high.into_iter().fold(f64::NEG_INFINITY, f64::max),
            low: low.into_iter().fold(f64::INFINITY, f64::min),
        }
    }
}

/// Samples at the largest value so far, alone and in runs.
#[derive(Default, Clone, Copy)]
struct FlatTop {
    largest: Option<f64>,
    run: u64,
    at_largest: u64,
    runs_of_four: u64,
    in_twos: u64,
    in_fours: u64,
    /// Samples from [`NEAR_LIMIT`] up, whatever the largest is.
    near: u64,
}

/// From here on a sample is at the limit of the converter: one step under full
/// scale in the coarsest format, 8 bits.
const CONVERTER_LIMIT: f64 = 1.0 - 1.0 / 127.9;
/// Samples from here up to the limit are what a signal that is not cut off has most of.
const NEAR_LIMIT: f64 = 0.97;
/// Fewest samples at the limit that are called cut off where each stands alone: a
/// recording scaled to full scale has one, and seldom a second of the same value.
const FEWEST_ALONE: u64 = 3;

impl FlatTop {
    /// Whether a run with this largest sample changes anything here.
    fn is_touched_by(&self, high: f64) -> bool {
        self.run > 0 || self.largest.is_none_or(|largest| high >= largest) || high >= NEAR_LIMIT
    }

    fn push(&mut self, x: f64) {
        self.near += u64::from(x >= NEAR_LIMIT);
        let largest = self.largest.unwrap_or(f64::NEG_INFINITY);
        if x > largest {
            *self = Self { largest: Some(x), run: 1, at_largest: 1, near: self.near, ..Self::default() };
        } else if x == largest {
            self.run += 1;
            self.at_largest += 1;
        } else if self.run > 0 {
            self.close();
        }
    }

    fn close(&mut self) {
        if self.run >= 2 {
            self.in_twos += self.run;
        }
        if self.run >= 4 {
            self.runs_of_four += 1;
            self.in_fours += self.run;
        }
        self.run = 0;
    }

    fn extreme(&self) -> f64 {
        self.largest.unwrap_or(0.0)
    }

    /// At the converter's limit all samples count, also those that stand alone, where
    /// there are at least three of them and more than lie in the 3 % under the limit: what
    /// is cut off piles up at the limit, while a recording that was scaled to full scale
    /// has one sample there and many under it. Where they do not pile up, two equal
    /// neighbours still count. Below the limit samples count only where at least three
    /// tops of four or more equal ones are cut at one height, since a slow signal rests
    /// on its one largest value without being clipped.
    fn clipped(&self) -> u64 {
        let mut closed = *self;
        closed.close();
        let under_limit = closed.near.saturating_sub(closed.at_largest);
        if closed.extreme() >= CONVERTER_LIMIT {
            let piled_up = closed.at_largest >= FEWEST_ALONE && closed.at_largest > under_limit;
            if piled_up { closed.at_largest } else { closed.in_twos }
        } else if closed.extreme() > 0.05 && closed.runs_of_four >= 3 {
            closed.in_fours
        } else {
            0
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::{RngExt, SeedableRng};
    use rand_xoshiro::Xoshiro256PlusPlus;
    use std::f64::consts::TAU;

    fn levels_of(samples: &[f64]) -> Levels {
        let mut levels = Levels::default();
        samples.chunks(1000).for_each(|piece| levels.push(piece));
        levels
    }

    fn tone(limit: f64, gain: f64, frequency_hz: f64) -> Vec<f64> {
        let wave = |n: i32| gain * (TAU * frequency_hz * f64::from(n) / 8000.0).sin();
        (0..8000).map(|n| wave(n).clamp(-limit, limit)).collect()
    }

    #[test]
    fn samples_cut_at_the_limit_or_below_it_are_counted() {
        // A sine of twice the limit is above it for two thirds of the time.
        for limit in [1.0, 0.6] {
            let share = levels_of(&tone(limit, 2.0 * limit, 50.0)).clipped() as f64 / 8000.0;
            assert!((share - 2.0 / 3.0).abs() < 0.02, "limit {limit}: {share}");
        }
        assert_eq!(levels_of(&tone(1.0, 0.9, 50.0)).clipped(), 0);
    }

    #[test]
    fn samples_that_stand_alone_at_the_limit_are_counted_where_they_pile_up_there() {
        // Noise so quick that most of what is cut off is one sample long.
        let mut random = Xoshiro256PlusPlus::seed_from_u64(1);
        let mut normal = || (0..12).map(|_| random.random::<f64>()).sum::<f64>() - 6.0;
        let noise: Vec<f64> = (0..48_000).map(|_| 0.3 * normal()).collect();
        let cut: Vec<f64> = noise.iter().map(|x| x.clamp(-1.0, 1.0 - 1.0 / 32768.0)).collect();
        let beyond = noise.iter().filter(|x| **x >= 1.0 - 1.0 / 32768.0 || **x <= -1.0).count() as u64;
        assert!(beyond > 20, "{beyond}");
        assert_eq!(levels_of(&cut).clipped(), beyond);
    }

    #[test]
    fn a_recording_scaled_to_full_scale_is_not_clipped() {
        let mut random = Xoshiro256PlusPlus::seed_from_u64(2);
        let noise: Vec<f64> =
            (0..48_000).map(|_| (0..12).map(|_| random.random::<f64>() - 0.5).sum()).collect();
        let peak = noise.iter().fold(0.0_f64, |peak, x| peak.max(x.abs()));
        let scaled: Vec<f64> = noise.iter().map(|x| (x / peak * 32767.0).round() / 32768.0).collect();
        assert_eq!(levels_of(&scaled).clipped(), 0);
        // Nor is a tone whose every crest is one sample of the same value.
        assert_eq!(levels_of(&tone(1.0, 1.0, 200.0)).clipped(), 0);
    }

    #[test]
    fn a_constant_leaves_no_rms_at_all() {
        let levels = levels_of(&[0.3; 5000]);
        assert_eq!(levels.mean_and_rms(), (0.3, 0.0));
        assert_eq!(levels.peak_about_mean(), 0.0);
    }

    #[test]
    fn peaks_are_told_from_zero_and_from_the_mean() {
        let levels = levels_of(&[0.5, 0.7, 0.3, 0.5]);
        assert_eq!(levels.peak(), 0.7);
        assert!((levels.peak_about_mean() - 0.2).abs() < 1e-15);
    }
}
