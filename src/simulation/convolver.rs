//! Samples through a kernel, block by block.

use std::sync::Arc;

use num_complex::Complex64;
use realfft::{ComplexToReal, RealFftPlanner, RealToComplex};

use super::Kernel;
use super::slow::Recursion;

/// What was on the line before the first sample, for ever: a level and tones.
#[derive(Debug, Clone, Default)]
pub struct Past {
    /// The level.
    pub level: f64,
    /// The tones on it.
    pub tones: Vec<Tone>,
}

/// A tone: the real part of phasor · e^(j·radians·n) at sample n.
#[derive(Debug, Clone, Copy)]
pub struct Tone {
    /// Phase advance a sample, radians.
    pub radians: f64,
    /// Amplitude and phase at sample 0.
    pub phasor: Complex64,
}

impl Past {
    /// The line's value `back` samples before the first.
    pub fn before(&self, back: usize) -> f64 {
        let tone = |tone: &Tone| (tone.phasor * Complex64::cis(-tone.radians * back as f64)).re;
        self.level + self.tones.iter().map(tone).sum::<f64>()
    }
}

/// One channel on its way through a [`Kernel`], by overlap-save: each FFT takes
/// the last `after + before` samples again, and gives `hop` samples that no
/// wrapping round has touched.
///
/// However the samples are cut into blocks, the same FFTs are done: the result
/// does not depend on it, to the last bit.
pub struct Convolver {
    kernel: Kernel,
    forward: Arc<dyn RealToComplex<f64>>,
    inverse: Arc<dyn ComplexToReal<f64>>,
    /// Samples waiting for the FFT, from `filled - (before + after)` before the next output on.
    window: Vec<f64>,
    filled: usize,
    work: Vec<f64>,
    bins: Vec<Complex64>,
    scratch: Vec<Complex64>,
    recursions: Vec<Recursion>,
}

impl Convolver {
    /// A line that has been at rest for ever.
    pub fn new(kernel: &Kernel) -> Self {
        let mut planner = RealFftPlanner::<f64>::new();
        let forward = planner.plan_fft_forward(kernel.fft_len());
        let inverse = planner.plan_fft_inverse(kernel.fft_len());
        let scratch = forward.get_scratch_len().max(inverse.get_scratch_len());
        Self {
            window: vec![0.0; kernel.fft_len()],
            filled: kernel.after(),
            work: forward.make_input_vec(),
            bins: forward.make_output_vec(),
            scratch: vec![Complex64::default(); scratch],
            recursions: kernel.slow().iter().map(|&pole| Recursion::new(pole)).collect(),
            kernel: kernel.clone(),
            forward,
            inverse,
        }
    }

    /// A line on which something was before the first sample.
    #[must_use]
    pub fn after_a_past(mut self, past: &Past) -> Self {
        let after = self.kernel.after();
        for (place, back) in self.window.iter_mut().zip((1..=after).rev()) {
            *place = past.before(back);
        }
        self.recursions.iter_mut().for_each(|recursion| recursion.settle(past));
        self
    }

    /// Takes samples; appends what is finished to `out`.
    pub fn push(&mut self, mut samples: &[f64], out: &mut Vec<f64>) {
        while !samples.is_empty() {
            let room = self.window.len() - self.filled;
            let (now, later) = samples.split_at(room.min(samples.len()));
            self.window[self.filled..][..now.len()].copy_from_slice(now);
            self.filled += now.len();
            samples = later;
            if self.filled == self.window.len() {
                self.transform(self.kernel.hop(), out);
            }
        }
    }

    /// The end: `future(n)` is taken for what would have come n samples after the
    /// last, from 1 on; appends what is still to come out.
    pub fn finish(mut self, future: impl Fn(usize) -> f64, out: &mut Vec<f64>) {
        let before = self.kernel.before();
        let coming: Vec<f64> = (1..=before).map(future).collect();
        self.push(&coming, out);
        let due = self.filled - before - self.kernel.after();
        self.window[self.filled..].fill(0.0);
        self.transform(due, out);
    }

    /// One FFT forth and back; its first `count` good samples come out.
    fn transform(&mut self, count: usize, out: &mut Vec<f64>) {
        let (after, hop) = (self.kernel.after(), self.kernel.hop());
        self.work.copy_from_slice(&self.window);
        let forth = self.forward.process_with_scratch(&mut self.work, &mut self.bins, &mut self.scratch);
        forth.expect("lengths are the plan's own");
        for (bin, response) in self.bins.iter_mut().zip(self.kernel.spectrum()) {
            *bin *= response;
        }
        self.bins[0].im = 0.0;
        self.bins.last_mut().expect("more than one bin").im = 0.0;
        let back = self.inverse.process_with_scratch(&mut self.bins, &mut self.work, &mut self.scratch);
        back.expect("lengths are the plan's own");
        let scale = 1.0 / self.kernel.fft_len() as f64;
        let first = out.len();
        out.extend(self.work[after..after + count].iter().map(|sample| sample * scale));
        for recursion in &mut self.recursions {
            recursion.add(&self.window[after..after + count], &mut out[first..]);
        }
        self.window.copy_within(hop.., 0);
        self.filled = self.window.len() - hop;
    }
}
