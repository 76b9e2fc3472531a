//! First look at a channel: its peak, mean and clipping, and which lines persist.

use super::decimator::Decimator;
use super::levels::Levels;
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
    /// Largest distance of a sample from the mean.
    pub peak_about_mean: f64,
    /// Mean sample.
    pub mean: f64,
    /// RMS about the mean.
    pub rms: f64,
    /// Samples cut off at the extremes.
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
            opening: Vec::with_capacity(total.min((OPENING_S * rate_hz) as usize) + 1),
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
            peak_about_mean: self.levels.peak_about_mean(),
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

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_floor_is_that_of_the_noise_and_not_of_a_line() {
        let mut power = vec![1.0; 2000];
        power[400] = 1e6;
        for p in local_floor(&power, 0.25) {
            assert!((p * std::f64::consts::LN_2 - 1.0).abs() < 1e-9);
        }
    }
}
