//! Power in bands, before and after, from averaged spectra.

use std::sync::Arc;

use num_complex::Complex64;
use realfft::{RealFftPlanner, RealToComplex};

/// Longest segment, samples: 2.7 s at 48 kHz, 45 s at a few kilohertz.
const LONGEST_SEGMENT: usize = 1 << 17;
/// Longest segment, seconds: slow signals are told apart to a few hundredths of a hertz.
const LONGEST_SEGMENT_S: f64 = 50.0;
/// Segments that a short recording is cut into, at least (half of each overlaps the next).
const SHARE_OF_RECORDING: u64 = 4;
/// Bins a band must span for its power to be told from its neighbours'.
const BINS_A_BAND: f64 = 4.0;

/// Averages power spectra over a recording (Welch 1967): Hann window, half
/// overlapped, each segment less its own mean under the window, so that an offset
/// does not stand for the signal. (The plain mean would not do: a hum's last,
/// unfinished period moves it by more than a quiet signal holds.)
pub struct BandMeter {
    bin_hz: f64,
    window: Vec<f64>,
    fft: Arc<dyn RealToComplex<f64>>,
    input: Vec<f64>,
    bins: Vec<Complex64>,
    scratch: Vec<Complex64>,
    held: Vec<f64>,
    power: Vec<f64>,
    segments: u32,
}

impl BandMeter {
    /// For a recording of `frames` samples at this rate.
    pub fn new(sample_rate_hz: f64, frames: u64) -> Self {
        let longest = (LONGEST_SEGMENT_S * sample_rate_hz).min(LONGEST_SEGMENT as f64) as u64;
        let wanted = longest.min(frames / SHARE_OF_RECORDING).max(16);
        let segment = 1_usize << wanted.ilog2();
        let turn = std::f64::consts::TAU / segment as f64;
        let fft = RealFftPlanner::new().plan_fft_forward(segment);
        Self {
            bin_hz: sample_rate_hz / segment as f64,
            window: (0..segment).map(|n| 0.5 - 0.5 * (turn * n as f64).cos()).collect(),
            input: fft.make_input_vec(),
            bins: fft.make_output_vec(),
            scratch: fft.make_scratch_vec(),
            fft,
            held: Vec::with_capacity(segment),
            power: vec![0.0; segment / 2 + 1],
            segments: 0,
        }
    }

    /// Takes the next samples.
    pub fn push(&mut self, mut samples: &[f64]) {
        let segment = self.window.len();
        while !samples.is_empty() {
            let (now, later) = samples.split_at((segment - self.held.len()).min(samples.len()));
            self.held.extend_from_slice(now);
            samples = later;
            if self.held.len() == segment {
                self.add_segment();
                self.held.drain(..segment / 2);
            }
        }
    }

    /// The average.
    pub fn finish(self) -> BandPowers {
        let energy: f64 = self.window.iter().map(|w| w * w).sum();
        let rate_hz = self.bin_hz * self.window.len() as f64;
        let scale = 2.0 / (energy * rate_hz * f64::from(self.segments.max(1)));
        let density = self.power.iter().map(|power| power * scale).collect();
        BandPowers { bin_hz: self.bin_hz, density }
    }

    fn add_segment(&mut self) {
        let weighted: f64 = self.held.iter().zip(&self.window).map(|(sample, weight)| sample * weight).sum();
        let mean = weighted / self.window.iter().sum::<f64>();
        for ((slot, sample), weight) in self.input.iter_mut().zip(&self.held).zip(&self.window) {
            *slot = (sample - mean) * weight;
        }
        let done = self.fft.process_with_scratch(&mut self.input, &mut self.bins, &mut self.scratch);
        done.expect("buffers made by the plan itself");
        for (sum, bin) in self.power.iter_mut().zip(&self.bins) {
            *sum += bin.norm_sqr();
        }
        self.segments += 1;
    }
}

/// Power density over frequency, one-sided.
#[derive(Debug, Clone)]
pub struct BandPowers {
    bin_hz: f64,
    /// Mean square per hertz at each bin.
    density: Vec<f64>,
}

impl BandPowers {
    /// Mean square between two frequencies, without the stretches of `left_out`.
    pub fn mean_square(&self, from_hz: f64, to_hz: f64, left_out: &[(f64, f64)]) -> f64 {
        // A bin counts by the part of its width that lies in the band.
        let first = (from_hz / self.bin_hz - 0.5).max(0.0) as usize;
        let last = ((to_hz / self.bin_hz + 0.5).ceil() as usize).min(self.density.len() - 1);
        (first..=last.max(first).min(self.density.len() - 1))
            .map(|bin| {
                let (low, high) = ((bin as f64 - 0.5) * self.bin_hz, (bin as f64 + 0.5) * self.bin_hz);
                let (low, high) = (low.max(from_hz), high.min(to_hz));
                let out: f64 = left_out.iter().map(|&(a, b)| (high.min(b) - low.max(a)).max(0.0)).sum();
                self.density[bin] * (high - low - out).max(0.0)
            })
            .sum()
    }

    /// Whether a band is wide enough to be told from its neighbours.
    pub fn resolves(&self, width_hz: f64) -> bool {
        width_hz >= BINS_A_BAND * self.bin_hz
    }
}

/// Third-octaves whose mid-bands lie between two frequencies: (lower edge, exact
/// mid-band, upper edge) in hertz, base ten: 1000·10^(n/10), edges a factor of
/// 10^(1/20) away (IEC 61260-1, base-ten system).
pub fn third_octaves(from_hz: f64, to_hz: f64) -> impl Iterator<Item = (f64, f64, f64)> {
    /// 0.1 Hz: below, no recording that people make resolves a third-octave.
    const LOWEST: i32 = -40;
    let number = |hz: f64| 10.0 * (hz / 1000.0).log10();
    let first = (number(from_hz.max(1e-9)).ceil() as i32).max(LOWEST);
    let last = number(to_hz.max(1e-9)).floor() as i32;
    (first..=last).map(|n| {
        let mid = |tenths: f64| 1000.0 * 10_f64.powf(tenths / 10.0);
        let n = f64::from(n);
        (mid(n - 0.5), mid(n), mid(n + 0.5))
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::TAU;

    #[test]
    fn a_tone_is_in_its_band_and_in_no_other() {
        let rate = 1000.0;
        let mut meter = BandMeter::new(rate, 60_000);
        let tone: Vec<f64> = (0..60_000).map(|n| 5.0 + 0.1 * (TAU * 63.1 * n as f64 / rate).sin()).collect();
        for block in tone.chunks(777) {
            meter.push(block);
        }
        let powers = meter.finish();
        for (low, mid, high) in third_octaves(10.0, 400.0) {
            let power = powers.mean_square(low, high, &[]);
            let expected = if (low..high).contains(&63.1) { 0.005 } else { 0.0 };
            assert!((power - expected).abs() < 1e-5, "{mid} Hz: {power}");
        }
        assert!(powers.mean_square(0.0, 500.0, &[(60.0, 66.0)]) < 1e-8, "left out");
    }

    #[test]
    fn noise_reads_its_density_times_the_band() {
        let mut state = 1_u64;
        let mut meter = BandMeter::new(1000.0, 400_000);
        let noise: Vec<f64> = (0..400_000)
            .map(|_| {
                state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
                (state >> 40) as f64 / f64::from(1 << 24) - 0.5
            })
            .collect();
        meter.push(&noise);
        let powers = meter.finish();
        let share = powers.mean_square(100.0, 200.0, &[]) * 12.0;
        assert!((share - 0.2).abs() < 0.004, "{share}");
    }

    #[test]
    fn hum_and_offset_leave_a_quiet_band_quiet() {
        let mut meter = BandMeter::new(4000.0, 80_000);
        let hum: Vec<f64> =
            (0..80_000).map(|n| 0.3 + 0.1 * (1.0 + TAU * 50.02 * f64::from(n) / 4000.0).cos()).collect();
        meter.push(&hum);
        let quiet = meter.finish().mean_square(0.0, 12.0, &[]);
        assert!(quiet < 1e-14, "{quiet:e}: more than 117 dB under the hum");
    }

    #[test]
    fn mid_bands_are_the_exact_ones() {
        let mids: Vec<f64> = third_octaves(90.0, 1000.0).map(|(_, mid, _)| mid).collect();
        assert_eq!(mids.len(), 11);
        assert!((mids[0] - 100.0).abs() < 1e-9 && (mids[1] - 125.892_541).abs() < 1e-6);
        assert_eq!(third_octaves(0.0, 12.0).last().map(|(_, mid, _)| mid.round()), Some(10.0));
    }
}
