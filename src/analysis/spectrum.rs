//! Averaged spectra in which a tone reads its true level.

use super::orders::power_dbfs;
use super::window::FLAT_TOP;
use num_complex::Complex64;
use realfft::{RealFftPlanner, RealToComplex};
use std::sync::Arc;

/// Longest segment in seconds, and in samples: the transform of more takes too much memory.
const SEGMENT_S: f64 = 4.0;
const LONGEST_SEGMENT: usize = 1 << 18;
/// About so many segments are looked at in a long recording, evenly spread.
const SEGMENTS: usize = 64;

/// A spectrum for charts.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Spectrum {
    /// Frequencies of the bins, rising from 0.
    pub frequency_hz: Vec<f64>,
    /// Mean power in each bin as that of a tone: a full-scale sine reads 0 dBFS.
    pub level_dbfs: Vec<f64>,
    /// Noise bandwidth of a bin: noise reads its power in this bandwidth.
    pub resolution_hz: f64,
}

/// Averages spectra over the length of a recording (Welch 1967) under a
/// flat-top window, so that a tone between bins reads within 0.01 dB.
pub struct SpectrumMeter {
    sample_rate_hz: f64,
    segment: usize,
    /// Samples from one segment to the next.
    step: usize,
    /// Samples still to go by before the next segment.
    skip: usize,
    window: Vec<f64>,
    window_sum: f64,
    fft: Arc<dyn RealToComplex<f64>>,
    input: Vec<f64>,
    bins: Vec<Complex64>,
    scratch: Vec<Complex64>,
    held: Vec<f64>,
    power: Vec<f64>,
    segments: usize,
}

impl SpectrumMeter {
    /// For a recording of `duration_s`: segments of 4 s (of 2¹⁸ samples from 64 kHz up), or of the
    /// whole if it is shorter.
    pub fn new(sample_rate_hz: f64, duration_s: f64) -> Self {
        let segment = ((SEGMENT_S.min(duration_s) * sample_rate_hz) as usize).clamp(16, LONGEST_SEGMENT) & !1;
        // Under a flat top three segments in the length of one lose little.
        let step = (segment / 3).max((duration_s * sample_rate_hz) as usize / SEGMENTS).max(1);
        let window = FLAT_TOP.samples(segment);
        let fft = RealFftPlanner::new().plan_fft_forward(segment);
        Self {
            sample_rate_hz,
            segment,
            step,
            skip: 0,
            window_sum: window.iter().sum(),
            window,
            input: fft.make_input_vec(),
            bins: fft.make_output_vec(),
            scratch: fft.make_scratch_vec(),
            fft,
            held: Vec::new(),
            power: vec![0.0; segment / 2 + 1],
            segments: 0,
        }
    }

    /// Takes the next samples.
    pub fn push(&mut self, samples: &[f64]) {
        let passed = self.skip.min(samples.len());
        self.skip -= passed;
        self.held.extend_from_slice(&samples[passed..]);
        let mut from = 0;
        while from + self.segment <= self.held.len() {
            self.add_segment(from);
            from += self.step;
        }
        let dropped = from.min(self.held.len());
        self.held.drain(..dropped);
        self.skip += from - dropped;
    }

    /// The average so far; silence where nothing was long enough.
    pub fn finish(mut self) -> Spectrum {
        if self.segments == 0 {
            self.held.resize(self.segment, 0.0);
            self.add_segment(0);
        }
        let bin_hz = self.sample_rate_hz / self.segment as f64;
        let last = self.power.len() - 1;
        let level = |i: usize, p: f64| {
            // Every bin but the first and last stands for two, ± f.
            let sides = if i == 0 || i == last { 1.0 } else { 2.0 };
            power_dbfs(sides * p / (self.segments as f64 * self.window_sum * self.window_sum))
        };
        Spectrum {
            frequency_hz: (0..=last).map(|i| i as f64 * bin_hz).collect(),
            level_dbfs: self.power.iter().enumerate().map(|(i, &p)| level(i, p)).collect(),
            resolution_hz: FLAT_TOP.noise_bandwidth() * bin_hz,
        }
    }

    fn add_segment(&mut self, from: usize) {
        let samples = &self.held[from..from + self.segment];
        for ((slot, x), w) in self.input.iter_mut().zip(samples).zip(&self.window) {
            *slot = x * w;
        }
        self.fft
            .process_with_scratch(&mut self.input, &mut self.bins, &mut self.scratch)
            .expect("buffers made by the plan itself");
        for (sum, bin) in self.power.iter_mut().zip(&self.bins) {
            *sum += bin.norm_sqr();
        }
        self.segments += 1;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::TAU;

    #[test]
    fn a_tone_between_bins_reads_its_true_level() {
        for frequency in [50.0, 50.1, 333.3] {
            let mut meter = SpectrumMeter::new(8000.0, 12.0);
            let tone: Vec<f64> =
                (0..96000).map(|n| 0.1 * (TAU * frequency * f64::from(n) / 8000.0).sin()).collect();
            for piece in tone.chunks(1000) {
                meter.push(piece);
            }
            let spectrum = meter.finish();
            let peak = spectrum.level_dbfs.iter().copied().fold(f64::MIN, f64::max);
            assert!((peak + 20.0).abs() < 0.02, "{frequency} Hz reads {peak} dBFS");
        }
    }

    #[test]
    fn a_short_or_silent_recording_gives_finite_levels() {
        let mut meter = SpectrumMeter::new(100.0, 0.0);
        meter.push(&[0.0; 7]);
        assert!(meter.finish().level_dbfs.iter().all(|level| level.is_finite()));
    }
}
