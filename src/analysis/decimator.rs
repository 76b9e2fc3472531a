//! Fewer samples a second where only low frequencies matter, with a known response.

use std::f64::consts::{PI, TAU};

/// Stop-band rejection of the decimating filter in decibels.
const REJECTION_DB: f64 = 120.0;

/// A linear-phase low-pass that keeps every M-th sample.
///
/// The filter is a sinc under a Kaiser window (Kaiser 1974: β and length from
/// the rejection and the width of the transition). It is centred: output m
/// stands at the time of input m·M. Its response is even in frequency and real,
/// so that [`Decimator::gain_at`] takes it out of a reading exactly.
pub(super) struct Decimator {
    factor: usize,
    /// Taps from the centre outwards.
    half_taps: Vec<f64>,
    sample_rate_hz: f64,
    /// Inputs still needed; before the start of the capture stand zeros.
    held: Vec<f64>,
}

impl Decimator {
    /// Keeps what lies below `pass_hz`; nothing is filtered where the rate
    /// allows no decimation.
    pub fn new(sample_rate_hz: f64, pass_hz: f64) -> Self {
        let factor = (sample_rate_hz / (2.4 * pass_hz)).floor().max(1.0) as usize;
        let half_taps =
            if factor == 1 { vec![1.0] } else { kaiser_low_pass(sample_rate_hz, pass_hz, factor) };
        let held = vec![0.0; half_taps.len() - 1];
        Self { factor, half_taps, sample_rate_hz, held }
    }

    /// Samples in for one sample out.
    pub fn factor(&self) -> usize {
        self.factor
    }

    /// Rate of the output in hertz.
    pub fn output_rate_hz(&self) -> f64 {
        self.sample_rate_hz / self.factor as f64
    }

    /// The filter's (real) gain at a frequency.
    pub fn gain_at(&self, frequency_hz: f64) -> f64 {
        let omega = TAU * frequency_hz / self.sample_rate_hz;
        let sides = self.half_taps.iter().enumerate().skip(1);
        self.half_taps[0] + sides.map(|(n, h)| 2.0 * h * (omega * n as f64).cos()).sum::<f64>()
    }

    /// Takes samples in; appends what is ready to `out`.
    pub fn push(&mut self, samples: &[f64], out: &mut Vec<f64>) {
        if self.factor == 1 {
            out.extend_from_slice(samples);
            return;
        }
        self.held.extend_from_slice(samples);
        let reach = self.half_taps.len() - 1;
        let mut centre = reach;
        while centre + reach < self.held.len() {
            out.push(self.output_at(centre));
            centre += self.factor;
        }
        self.held.drain(..(centre - reach).min(self.held.len()));
    }

    /// What is still inside, with zeros after the end of the capture.
    pub fn finish(&mut self, out: &mut Vec<f64>) {
        let tail = vec![0.0; self.half_taps.len() - 1];
        self.push(&tail, out);
    }

    fn output_at(&self, centre: usize) -> f64 {
        let reach = self.half_taps.len() - 1;
        let right = &self.held[centre + 1..=centre + reach];
        let left = &self.held[centre - reach..centre];
        let pairs = self.half_taps[1..].iter().zip(right).zip(left.iter().rev());
        self.half_taps[0] * self.held[centre] + pairs.map(|((h, r), l)| h * (r + l)).sum::<f64>()
    }
}

/// Half of a symmetrical low-pass, centre first, unit gain at zero frequency.
fn kaiser_low_pass(sample_rate_hz: f64, pass_hz: f64, factor: usize) -> Vec<f64> {
    // Only what would fold into the pass band has to be stopped.
    let stop_hz = sample_rate_hz / factor as f64 - pass_hz;
    let transition = TAU * (stop_hz - pass_hz) / sample_rate_hz;
    let reach = ((REJECTION_DB - 7.95) / (2.285 * transition) / 2.0).ceil() as usize;
    let beta = 0.1102 * (REJECTION_DB - 8.7);
    let cutoff = (stop_hz + pass_hz) / sample_rate_hz;
    let mut taps: Vec<f64> = (0..=reach)
        .map(|n| {
            let x = PI * cutoff * n as f64;
            let sinc = if n == 0 { 1.0 } else { x.sin() / x };
            let edge = n as f64 / (reach + 1) as f64;
            sinc * bessel_i0(beta * (1.0 - edge * edge).sqrt())
        })
        .collect();
    let sum = taps[0] + 2.0 * taps[1..].iter().sum::<f64>();
    taps.iter_mut().for_each(|tap| *tap /= sum);
    taps
}

/// Modified Bessel function I₀ by its power series.
fn bessel_i0(x: f64) -> f64 {
    let quarter = x * x / 4.0;
    let (mut term, mut sum, mut n) = (1.0, 1.0, 1.0);
    while term > 1e-17 * sum {
        term *= quarter / (n * n);
        sum += term;
        n += 1.0;
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_tone_keeps_its_phase_and_has_the_stated_gain() {
        let (rate, f) = (48000.0, 4321.0);
        let mut decimator = Decimator::new(rate, 5000.0);
        let samples: Vec<f64> = (0..9600).map(|n| (TAU * f * n as f64 / rate).cos()).collect();
        let mut out = Vec::new();
        for piece in samples.chunks(777) {
            decimator.push(piece, &mut out);
        }
        decimator.finish(&mut out);
        assert_eq!(decimator.factor(), 4);
        assert_eq!(out.len(), 2400);
        let gain = decimator.gain_at(f);
        for (m, y) in out.iter().enumerate().skip(100).take(2200) {
            let want = gain * (TAU * f * m as f64 / decimator.output_rate_hz()).cos();
            assert!((y - want).abs() < 1e-9, "sample {m}: {y} for {want}");
        }
    }

    #[test]
    fn what_would_fold_into_the_pass_band_is_120_db_down() {
        let decimator = Decimator::new(48000.0, 5000.0);
        for f in [7000.0, 7500.0, 11000.0, 12000.0, 20000.0] {
            assert!(decimator.gain_at(f).abs() < 1.3e-6, "{f} Hz: {}", decimator.gain_at(f));
        }
    }
}
