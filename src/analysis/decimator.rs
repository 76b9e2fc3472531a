//! Fewer samples a second where only low frequencies matter, with a known response.

use pulp::{Arch, Simd, WithSimd};
use std::f64::consts::{PI, TAU};

/// Stop-band rejection of the decimating filters in decibels.
const REJECTION_DB: f64 = 120.0;
/// Taps come in whole numbers of the widest registers.
const LANES: usize = 8;

/// Linear-phase low-passes that keep every M-th sample between them.
///
/// Each is a sinc under a Kaiser window (Kaiser 1974: β and length from the
/// rejection and the width of the transition). Large M is split in two, the first
/// filter with the wide transition, where that costs fewer products. They are
/// centred: output m stands at the time of input m·M. Their response is even in
/// frequency and real, so that [`Decimator::gain_at`] takes it out of a reading exactly.
pub(super) struct Decimator {
    stages: Vec<Stage>,
    between: Vec<f64>,
    sample_rate_hz: f64,
}

/// One low-pass that keeps every `factor`-th sample.
struct Stage {
    factor: usize,
    /// Taps on either side of the middle one.
    reach: usize,
    /// All taps, and zeros up to a whole number of lanes.
    taps: Vec<f64>,
    rate_hz: f64,
    /// Inputs still needed; before the start of the capture stand zeros.
    held: Vec<f64>,
    arch: Arch,
}

impl Decimator {
    /// Keeps what lies below `pass_hz`; nothing is filtered where the rate
    /// allows no decimation.
    pub fn new(sample_rate_hz: f64, pass_hz: f64) -> Self {
        let factor = (sample_rate_hz / (2.4 * pass_hz)).floor().max(1.0) as usize;
        let split = |first: usize| -> Vec<Stage> {
            let rate_hz = sample_rate_hz / first as f64;
            let stages = [(sample_rate_hz, first), (rate_hz, factor / first)];
            let real = stages.into_iter().filter(|(_, factor)| *factor > 1);
            real.map(|(rate_hz, factor)| Stage::new(rate_hz, pass_hz, factor)).collect()
        };
        let firsts = (1..=factor).filter(|first| factor.is_multiple_of(*first)).map(split);
        let stages = firsts.min_by(|a, b| products(a).total_cmp(&products(b))).unwrap_or_default();
        Self { stages, between: Vec::new(), sample_rate_hz }
    }

    /// Samples in for one sample out.
    pub fn factor(&self) -> usize {
        self.stages.iter().map(|stage| stage.factor).product()
    }

    /// Rate of the output in hertz.
    pub fn output_rate_hz(&self) -> f64 {
        self.sample_rate_hz / self.factor() as f64
    }

    /// The filters' (real) gain at a frequency.
    pub fn gain_at(&self, frequency_hz: f64) -> f64 {
        self.stages.iter().map(|stage| stage.gain_at(frequency_hz)).product()
    }

    /// Takes samples in; appends what is ready to `out`.
    pub fn push(&mut self, samples: &[f64], out: &mut Vec<f64>) {
        match &mut self.stages[..] {
            [] => out.extend_from_slice(samples),
            [only] => only.push(samples, out),
            [first, second, ..] => {
                self.between.clear();
                first.push(samples, &mut self.between);
                second.push(&self.between, out);
            }
        }
    }

    /// What is still inside, with zeros after the end of the capture.
    pub fn finish(&mut self, out: &mut Vec<f64>) {
        match &mut self.stages[..] {
            [] => {}
            [only] => only.finish(out),
            [first, second, ..] => {
                self.between.clear();
                first.finish(&mut self.between);
                second.push(&self.between, out);
                second.finish(out);
            }
        }
    }
}

/// Products for one sample that goes in.
fn products(stages: &[Stage]) -> f64 {
    let mut inputs = 1.0;
    let mut sum = 0.0;
    for stage in stages {
        inputs /= stage.factor as f64;
        sum += inputs * stage.taps.len() as f64;
    }
    sum
}

impl Stage {
    fn new(rate_hz: f64, pass_hz: f64, factor: usize) -> Self {
        let half = kaiser_low_pass(rate_hz, pass_hz, factor);
        let reach = half.len() - 1;
        let mut taps: Vec<f64> = half.iter().rev().chain(&half[1..]).copied().collect();
        taps.resize(taps.len().next_multiple_of(LANES), 0.0);
        Self { factor, reach, taps, rate_hz, held: vec![0.0; reach], arch: Arch::new() }
    }

    fn gain_at(&self, frequency_hz: f64) -> f64 {
        let omega = TAU * frequency_hz / self.rate_hz;
        let sides = self.taps[self.reach..=2 * self.reach].iter().enumerate().skip(1);
        self.taps[self.reach] + sides.map(|(n, h)| 2.0 * h * (omega * n as f64).cos()).sum::<f64>()
    }

    fn push(&mut self, samples: &[f64], out: &mut Vec<f64>) {
        self.held.extend_from_slice(samples);
        let Self { factor, taps, held, .. } = self;
        let (factor, length) = (*factor, taps.len());
        let ready = (held.len() + factor).saturating_sub(length) / factor;
        let from = out.len();
        out.resize(from + ready, 0.0);
        self.arch.dispatch(Thin { taps, held, factor, out: &mut out[from..] });
        held.drain(..ready * factor);
    }

    fn finish(&mut self, out: &mut Vec<f64>) {
        let tail = vec![0.0; self.taps.len() - 1 - self.reach];
        self.push(&tail, out);
    }
}

/// The filter at every `factor`-th place of `held`, for the widest registers there are.
struct Thin<'a> {
    taps: &'a [f64],
    held: &'a [f64],
    factor: usize,
    out: &'a mut [f64],
}

impl WithSimd for Thin<'_> {
    type Output = ();

    #[inline(always)]
    fn with_simd<S: Simd>(self, simd: S) {
        let taps = S::as_simd_f64s(self.taps).0;
        for (m, slot) in self.out.iter_mut().enumerate() {
            let from = m * self.factor;
            let held = S::as_simd_f64s(&self.held[from..from + self.taps.len()]).0;
            // Two sums, as the next product need not wait for the last.
            let (mut even, mut odd) = (simd.splat_f64s(0.0), simd.splat_f64s(0.0));
            let (pairs, last) = taps.as_chunks::<2>();
            let (held_pairs, held_last) = held.as_chunks::<2>();
            for (tap, x) in pairs.iter().zip(held_pairs) {
                even = simd.mul_add_e_f64s(tap[0], x[0], even);
                odd = simd.mul_add_e_f64s(tap[1], x[1], odd);
            }
            if let ([tap], [x]) = (last, held_last) {
                even = simd.mul_add_e_f64s(*tap, *x, even);
            }
            *slot = simd.reduce_sum_f64s(simd.add_f64s(even, odd));
        }
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
