//! First look at a channel: its peak, mean and clipping, and which lines persist.

use super::decimator::Decimator;
use super::window::BLACKMAN_HARRIS;
use num_complex::Complex64;
use realfft::{RealFftPlanner, RealToComplex};
use std::sync::Arc;

/// Highest frequency in which combs are looked for.
pub(super) const SURVEY_TOP_HZ: f64 = 1250.0;
/// Longest segment in seconds.
const SEGMENT_S: f64 = 4.0;
/// Length of the opening that is kept for a longer look, in seconds.
const OPENING_S: f64 = 120.0;
/// Most segments kept, whatever the length.
const MOST_SEGMENTS: usize = 240;

/// Everything the first pass gathers on one channel.
pub(super) struct ChannelSurvey {
    levels: Levels,
    decimator: Decimator,
    segment: usize,
    hop: usize,
    window: Vec<f64>,
    fft: Arc<dyn RealToComplex<f64>>,
    input: Vec<f64>,
    bins: Vec<Complex64>,
    scratch: Vec<Complex64>,
    held: Vec<f64>,
    skip: usize,
    ratios: Vec<Vec<f32>>,
    powers: Vec<Vec<f32>>,
    times_s: Vec<f64>,
    taken: usize,
    opening: Vec<f64>,
    kept: usize,
}

/// What the first pass says of a channel.
pub(super) struct Surveyed {
    /// Largest absolute sample.
    pub peak: f64,
    /// Mean sample.
    pub mean: f64,
    /// RMS about the mean.
    pub rms: f64,
    /// Samples in flat runs at the extremes.
    pub clipped: u64,
    /// Power over the local noise, by segment and bin.
    pub ratios: Vec<Vec<f32>>,
    /// Mean square of a tone in each bin, by segment and bin.
    pub powers: Vec<Vec<f32>>,
    /// Middle of each segment.
    pub times_s: Vec<f64>,
    /// Width of a bin in hertz.
    pub bin_hz: f64,
    /// Segments that count as independent.
    pub independent: f64,
    /// The beginning of the capture at a lower rate.
    pub opening: Vec<f64>,
    /// That rate in hertz.
    pub opening_rate_hz: f64,
}

impl ChannelSurvey {
    pub fn new(sample_rate_hz: f64, duration_s: f64) -> Self {
        let decimator = Decimator::new(sample_rate_hz, SURVEY_TOP_HZ.min(0.5 * sample_rate_hz));
        let rate_hz = decimator.output_rate_hz();
        let segment_s = (duration_s / 5.0).clamp(1f64.min(duration_s / 2.0), SEGMENT_S);
        let segment = ((segment_s * rate_hz) as usize).max(16) & !1;
        let total = (duration_s * rate_hz) as usize;
        let hop = (segment / 3).max(total / MOST_SEGMENTS).max(1);
        let fft = RealFftPlanner::new().plan_fft_forward(segment);
        Self {
            levels: Levels::default(),
            decimator,
            segment,
            hop,
            window: BLACKMAN_HARRIS.samples(segment),
            input: fft.make_input_vec(),
            bins: fft.make_output_vec(),
            scratch: fft.make_scratch_vec(),
            fft,
            held: Vec::new(),
            skip: 0,
            ratios: Vec::new(),
            powers: Vec::new(),
            times_s: Vec::new(),
            taken: 0,
            opening: Vec::new(),
            kept: 0,
        }
    }

    /// Takes the next samples.
    pub fn push(&mut self, samples: &[f64]) {
        self.levels.push(samples);
        self.decimator.push(samples, &mut self.held);
        self.keep_opening();
        self.take_segments();
    }

    /// Closes the survey.
    pub fn finish(mut self) -> Surveyed {
        self.decimator.finish(&mut self.held);
        self.keep_opening();
        self.take_segments();
        let rate_hz = self.decimator.output_rate_hz();
        let overlap = self.segment as f64 / self.hop as f64;
        // Blackman–Harris segments correlate little beyond half their length.
        let independent = self.ratios.len() as f64 / (overlap / 1.8).max(1.0);
        let (mean, rms) = self.levels.mean_and_rms();
        Surveyed {
            peak: self.levels.peak(),
            mean,
            rms,
            clipped: self.levels.clipped(),
            ratios: self.ratios,
            powers: self.powers,
            times_s: self.times_s,
            bin_hz: rate_hz / self.segment as f64,
            independent: independent.max(1.0),
            opening: self.opening,
            opening_rate_hz: rate_hz,
        }
    }

    /// Copies what the decimator has added to `held` since the last time.
    fn keep_opening(&mut self) {
        let most = (OPENING_S * self.decimator.output_rate_hz()) as usize;
        let room = most.saturating_sub(self.opening.len());
        self.opening.extend(self.held[self.kept..].iter().take(room));
        self.kept = self.held.len();
    }

    fn take_segments(&mut self) {
        loop {
            let dropped = self.skip.min(self.held.len());
            self.held.drain(..dropped);
            self.kept -= dropped;
            self.skip -= dropped;
            if self.skip > 0 || self.held.len() < self.segment {
                return;
            }
            self.add_segment();
            self.skip = self.hop;
        }
    }

    fn add_segment(&mut self) {
        let samples = &self.held[..self.segment];
        let mean = samples.iter().sum::<f64>() / self.segment as f64;
        for ((slot, x), w) in self.input.iter_mut().zip(samples).zip(&self.window) {
            *slot = (x - mean) * w;
        }
        self.fft
            .process_with_scratch(&mut self.input, &mut self.bins, &mut self.scratch)
            .expect("buffers made by the plan itself");
        let rate_hz = self.decimator.output_rate_hz();
        let bin_hz = rate_hz / self.segment as f64;
        let top = ((SURVEY_TOP_HZ / bin_hz) as usize + 2).min(self.bins.len());
        let sum: f64 = self.window.iter().sum();
        let power: Vec<f64> = self.bins[..top].iter().map(|bin| 2.0 * bin.norm_sqr() / (sum * sum)).collect();
        let floor = local_floor(&power, bin_hz);
        self.ratios.push(power.iter().zip(&floor).map(|(p, n)| (p / n).min(1e6) as f32).collect());
        self.powers.push(power.iter().map(|&p| p as f32).collect());
        let middle = self.taken * self.hop + self.segment / 2;
        self.times_s.push(middle as f64 / rate_hz);
        self.taken += 1;
    }
}

/// Noise under a spectrum: medians over stretches wider than any line, joined
/// by straight lines of their logarithm. Scaled so that noise reads 1 on average.
fn local_floor(power: &[f64], bin_hz: f64) -> Vec<f64> {
    let half = ((6.0 / bin_hz).max(20.0)) as usize;
    let step = (half / 2).max(1);
    // What arithmetic leaves where there is nothing at all.
    let least = 1e-24 * power.iter().copied().fold(0.0, f64::max) + 1e-32;
    let knots: Vec<f64> = (0..=power.len() / step + 1)
        .map(|i| {
            let centre = (i * step).min(power.len() - 1);
            let around = &power[centre.saturating_sub(half)..(centre + half + 1).min(power.len())];
            let mut sorted = around.to_vec();
            let middle = sorted.len() / 2;
            let (_, median, _) = sorted.select_nth_unstable_by(middle, f64::total_cmp);
            (median.max(least) / std::f64::consts::LN_2).ln()
        })
        .collect();
    (0..power.len())
        .map(|m| {
            let (i, u) = (m / step, (m % step) as f64 / step as f64);
            (knots[i] * (1.0 - u) + knots[i + 1] * u).exp()
        })
        .collect()
}

/// Peak, mean, RMS and flat runs at the extremes.
#[derive(Default)]
struct Levels {
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
    fn push(&mut self, samples: &[f64]) {
        let Some(&start) = samples.first() else { return };
        let first = *self.first.get_or_insert(start);
        for &x in samples {
            let apart = x - first;
            self.sum += apart;
            self.squares += apart * apart;
            self.high.push(x);
            self.low.push(-x);
        }
        self.count += samples.len() as f64;
    }

    fn peak(&self) -> f64 {
        self.high.extreme().max(self.low.extreme())
    }

    fn mean_and_rms(&self) -> (f64, f64) {
        let count = self.count.max(1.0);
        let apart = self.sum / count;
        (self.first.unwrap_or(0.0) + apart, (self.squares / count - apart * apart).max(0.0).sqrt())
    }

    fn clipped(&self) -> u64 {
        self.high.clipped() + self.low.clipped()
    }
}

/// Runs of equal samples at the largest value so far.
#[derive(Default)]
struct FlatTop {
    largest: Option<f64>,
    run: u64,
    runs_of_two: u64,
    runs_of_four: u64,
    in_twos: u64,
    in_fours: u64,
}

/// From here on a sample is at the limit of the converter: one step under full
/// scale in the coarsest format, 8 bits.
const CONVERTER_LIMIT: f64 = 1.0 - 1.0 / 127.9;

impl FlatTop {
    fn push(&mut self, x: f64) {
        let largest = self.largest.unwrap_or(f64::NEG_INFINITY);
        if x > largest {
            *self = Self { largest: Some(x), run: 1, ..Self::default() };
        } else if x == largest {
            self.run += 1;
        } else if self.run > 0 {
            self.close();
        }
    }

    fn close(&mut self) {
        if self.run >= 2 {
            self.runs_of_two += 1;
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

    /// At the converter's limit two equal samples count; below it only where
    /// at least three tops of four or more equal samples are cut at one height,
    /// since a slow signal rests on its one largest value without being clipped.
    fn clipped(&self) -> u64 {
        let mut closed = Self { ..*self };
        closed.close();
        if closed.extreme() >= CONVERTER_LIMIT {
            closed.in_twos
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
    use std::f64::consts::TAU;

    fn clipped_at(limit: f64, gain: f64) -> u64 {
        let mut levels = Levels::default();
        let tone =
            (0..8000).map(|n| (gain * (TAU * 50.0 * f64::from(n) / 8000.0).sin()).clamp(-limit, limit));
        levels.push(&tone.collect::<Vec<_>>());
        levels.clipped()
    }

    #[test]
    fn samples_cut_at_the_limit_or_below_it_are_counted() {
        // A sine of twice the limit is above it for two thirds of the time.
        for limit in [1.0, 0.6] {
            let share = clipped_at(limit, 2.0 * limit) as f64 / 8000.0;
            assert!((share - 2.0 / 3.0).abs() < 0.02, "limit {limit}: {share}");
        }
        assert_eq!(clipped_at(1.0, 0.9), 0);
    }

    #[test]
    fn a_constant_leaves_no_rms_at_all() {
        let mut levels = Levels::default();
        levels.push(&[0.3; 5000]);
        assert_eq!(levels.mean_and_rms(), (0.3, 0.0));
    }

    #[test]
    fn the_floor_is_that_of_the_noise_and_not_of_a_line() {
        let mut power = vec![1.0; 2000];
        power[400] = 1e6;
        for p in local_floor(&power, 0.25) {
            assert!((p * std::f64::consts::LN_2 - 1.0).abs() < 1e-9);
        }
    }
}
