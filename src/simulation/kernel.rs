//! The insertion ratio as a kernel: sampled exactly, its ringing measured.

use std::sync::Arc;

use num_complex::Complex64;
use rayon::prelude::*;
use realfft::RealFftPlanner;

use super::SimulationError;
use super::slow::{SlowPole, poles_within};
use crate::network::Circuit;

/// Up to this fraction of the sample rate the response is the network's own.
pub const EXACT_UP_TO: f64 = 0.45;

/// Longest FFT, samples, that is preferred to recursions: about 10 MB a channel.
const LONG_FFT: usize = 1 << 18;

/// Longest FFT of all, samples: about 40 MB a channel.
pub const LONGEST_FFT: usize = 1 << 20;

/// Shortest FFT, samples: below this, blocks cost more than they save.
const SHORTEST_FFT: usize = 4096;

/// Root of the kernel's energy that may lie outside the kept taps, relative to
/// the largest response. It bounds what a tone is off by, also deep in a notch:
/// in a notch of 80 dB this is still 1e-8 of what is left.
const TAIL: f64 = 1e-12;

/// A response sampled on the grid of an FFT, with the length of its ringing.
///
/// The response of a network is not real at half the sample rate, and its slope
/// is not zero there, so that its sampled kernel would never die away. From
/// 0.45 to 0.5 of the rate it is led over to the real part at half the rate,
/// along an error function, whose kernel dies away like a Gaussian.
#[derive(Clone)]
pub struct Kernel {
    fft_len: usize,
    before: usize,
    after: usize,
    spectrum: Arc<[Complex64]>,
    sample_rate_hz: f64,
    slow: Arc<[SlowPole]>,
}

impl Kernel {
    /// The insertion ratio of a circuit. Poles whose ringing is too long for an FFT
    /// of moderate length are taken out as recursions.
    ///
    /// # Errors
    /// [`SimulationError::ResponseNotFinite`]; [`SimulationError::RingsTooLong`]
    /// when neither recursions nor [`LONGEST_FFT`] hold its ringing.
    pub fn of_circuit(circuit: &Circuit, sample_rate_hz: f64) -> Result<Self, SimulationError> {
        let response = |hz: f64| circuit.insertion(hz);
        match Self::sampled(response, Vec::new(), sample_rate_hz, LONG_FFT) {
            Err(SimulationError::RingsTooLong { .. }) => {}
            done => return done,
        }
        // From poles that ring as long as the FFT holds, to those of 5 kHz.
        let slowest = 4.0 * sample_rate_hz / LONG_FFT as f64;
        let mut radii = (0..20).map(|n| slowest * 3_f64.powi(n)).take_while(|radius| *radius < 3e4);
        let recursive = radii.find_map(|radius| {
            let slow = poles_within(circuit, radius, sample_rate_hz).filter(|slow| !slow.is_empty())?;
            Self::sampled(response, slow, sample_rate_hz, LONG_FFT).ok()
        });
        recursive.map_or_else(|| Self::new(response, sample_rate_hz), Ok)
    }

    /// Samples `response` (of a frequency in hertz) for this rate, on as long a
    /// grid as its ringing needs.
    ///
    /// # Errors
    /// [`SimulationError::ResponseNotFinite`]; [`SimulationError::RingsTooLong`]
    /// when [`LONGEST_FFT`] does not hold its ringing.
    pub fn new(
        response: impl Fn(f64) -> Complex64 + Sync,
        sample_rate_hz: f64,
    ) -> Result<Self, SimulationError> {
        Self::sampled(response, Vec::new(), sample_rate_hz, LONGEST_FFT)
    }

    /// The response less what the recursions do, on a grid of at most `longest`.
    fn sampled(
        response: impl Fn(f64) -> Complex64 + Sync,
        slow: Vec<SlowPole>,
        sample_rate_hz: f64,
        longest: usize,
    ) -> Result<Self, SimulationError> {
        let at_half = response(sample_rate_hz / 2.0).re;
        let shaped = |cycles: f64| {
            let value = response(cycles * sample_rate_hz);
            let own = share_of_own(cycles);
            let recursions: Complex64 = slow.iter().map(|pole| pole.response(cycles)).sum();
            value * own + at_half * (1.0 - own) - recursions
        };
        let mut fft_len = SHORTEST_FFT;
        let grid = |bin: usize, fft_len: usize| shaped(bin as f64 / fft_len as f64);
        let mut spectrum: Vec<Complex64> =
            (0..=fft_len / 2).into_par_iter().map(|bin| grid(bin, fft_len)).collect();
        loop {
            refuse_not_finite(&spectrum, fft_len, sample_rate_hz)?;
            let taps = taps_of(&spectrum, fft_len);
            let largest = spectrum.iter().map(|value| value.norm()).fold(0.0, f64::max);
            let (before, after) = support(&taps, TAIL * largest);
            if before + after < fft_len / 2 {
                let (spectrum, slow) = (spectrum.into(), slow.into());
                return Ok(Self { fft_len, before, after, spectrum, sample_rate_hz, slow });
            }
            if fft_len == longest {
                let middle = &taps[fft_len / 4..fft_len * 3 / 4];
                let left = middle.iter().map(|tap| tap * tap).sum::<f64>().sqrt() / largest;
                let longest_s = fft_len as f64 / 2.0 / sample_rate_hz;
                return Err(SimulationError::RingsTooLong { longest_s, left, allowed: TAIL });
            }
            // Every other point of the finer grid is there already.
            fft_len *= 2;
            let between: Vec<Complex64> =
                (0..fft_len / 4).into_par_iter().map(|half| grid(2 * half + 1, fft_len)).collect();
            let last = spectrum[fft_len / 4];
            spectrum = spectrum.iter().zip(&between).flat_map(|(&even, &odd)| [even, odd]).collect();
            spectrum.push(last);
        }
    }

    /// Samples of one FFT.
    pub fn fft_len(&self) -> usize {
        self.fft_len
    }

    /// Taps before time zero: what leading over at half the rate spreads forwards.
    pub fn before(&self) -> usize {
        self.before
    }

    /// Taps after time zero: the ringing.
    pub fn after(&self) -> usize {
        self.after
    }

    /// Samples that come out of one FFT.
    pub fn hop(&self) -> usize {
        self.fft_len - self.before - self.after
    }

    /// Sampling rate in hertz.
    pub fn sample_rate_hz(&self) -> f64 {
        self.sample_rate_hz
    }

    /// What becomes of a constant.
    pub fn gain_at_dc(&self) -> f64 {
        self.spectrum[0].re + self.slow.iter().map(|pole| pole.response(0.0).re).sum::<f64>()
    }

    /// How many slow poles (pairs count once) run as recursions.
    pub fn recursions(&self) -> usize {
        self.slow.len()
    }

    pub(super) fn slow(&self) -> &[SlowPole] {
        &self.slow
    }

    /// What is applied at the bins of the FFT, from 0 to half the rate: the
    /// response less what the recursions do.
    pub fn spectrum(&self) -> &[Complex64] {
        &self.spectrum
    }

    /// The taps of what is applied by FFT, from −[`before`](Self::before) to [`after`](Self::after).
    pub fn taps(&self) -> Vec<f64> {
        let ring = taps_of(&self.spectrum, self.fft_len);
        let early = &ring[self.fft_len - self.before..];
        early.iter().chain(&ring[..=self.after]).copied().collect()
    }
}

impl std::fmt::Debug for Kernel {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let Self { fft_len, before, after, sample_rate_hz, .. } = self;
        let slow = self.slow.len();
        write!(
            f,
            "Kernel {{ {before} + {after} taps in {fft_len} at {sample_rate_hz} Hz, {slow} recursions }}"
        )
    }
}

/// The kernel as a ring: tap n at index n, tap −n at index `fft_len` − n.
fn taps_of(spectrum: &[Complex64], fft_len: usize) -> Vec<f64> {
    let inverse = RealFftPlanner::<f64>::new().plan_fft_inverse(fft_len);
    let mut bins = spectrum.to_vec();
    bins[0].im = 0.0;
    bins[fft_len / 2].im = 0.0;
    let mut taps = inverse.make_output_vec();
    inverse.process(&mut bins, &mut taps).expect("lengths are the plan's own");
    let scale = 1.0 / fft_len as f64;
    taps.iter_mut().for_each(|tap| *tap *= scale);
    taps
}

/// How many taps before and after time zero hold all but `allowed` (root of the
/// energy) of the ring.
fn support(ring: &[f64], allowed: f64) -> (usize, usize) {
    let half = ring.len() / 2;
    let budget = allowed * allowed / 2.0;
    let kept = |taps: &mut dyn Iterator<Item = f64>| {
        let mut energy = 0.0;
        taps.take_while(|tap| {
            energy += tap * tap;
            energy <= budget
        })
        .count()
    };
    let after = half - 1 - kept(&mut ring[..half].iter().rev().copied()).min(half - 1);
    let before = half - kept(&mut ring[half..].iter().copied());
    (before, after)
}

/// 1 up to 0.45 cycles a sample, 0 at 0.5, an error function between.
fn share_of_own(cycles: f64) -> f64 {
    /// Where the error function is cut: it is 1e-12 off its end there.
    const REACH: f64 = 5.0;
    if cycles <= EXACT_UP_TO {
        return 1.0;
    }
    let along = (cycles - EXACT_UP_TO) / (0.5 - EXACT_UP_TO);
    0.5 * (1.0 - error_function(REACH * (2.0 * along.min(1.0) - 1.0)))
}

/// erf(x) = 2/√π · e^(−x²) · Σ 2ⁿ x^(2n+1) / (1·3·…·(2n+1)): all terms of one sign
/// (Abramowitz and Stegun 7.1.6).
fn error_function(x: f64) -> f64 {
    let (mut term, mut sum, mut n) = (x, x, 0.0);
    while term.abs() > 1e-17 * sum.abs() {
        n += 1.0;
        term *= 2.0 * x * x / (2.0 * n + 1.0);
        sum += term;
    }
    std::f64::consts::FRAC_2_SQRT_PI * (-x * x).exp() * sum
}

fn refuse_not_finite(spectrum: &[Complex64], fft_len: usize, rate_hz: f64) -> Result<(), SimulationError> {
    match spectrum.iter().position(|value| !value.is_finite()) {
        None => Ok(()),
        Some(bin) => Err(SimulationError::ResponseNotFinite {
            frequency_hz: bin as f64 / fft_len as f64 * rate_hz,
            found: spectrum[bin].to_string(),
        }),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_error_function_has_its_handbook_values() {
        // Abramowitz and Stegun, table 7.1 (from memory).
        assert!((error_function(0.5) - 0.520_499_877_8).abs() < 1e-10);
        assert!((error_function(1.0) - 0.842_700_792_9).abs() < 1e-10);
        assert!((error_function(-2.0) + 0.995_322_265_0).abs() < 1e-10);
        assert!((error_function(5.0) - 1.0).abs() < 1e-11);
        assert_eq!(error_function(0.0), 0.0);
    }

    #[test]
    fn a_piece_of_wire_is_one_tap() {
        let kernel = Kernel::new(|_| Complex64::new(1.0, 0.0), 8000.0).expect("kernel");
        assert_eq!((kernel.before(), kernel.after()), (0, 0));
        assert!((kernel.taps()[0] - 1.0).abs() < 1e-15);
    }

    #[test]
    fn the_taps_of_one_pole_ring_as_long_as_the_pole_says() {
        let tau_s = 0.01;
        let pole = |f: f64| 1.0 / Complex64::new(1.0, std::f64::consts::TAU * f * tau_s);
        let kernel = Kernel::new(pole, 48_000.0).expect("kernel");
        let seconds = kernel.after() as f64 / 48_000.0;
        assert!((24.0..32.0).contains(&(seconds / tau_s)), "{} time constants", seconds / tau_s);
        assert!(kernel.before() < 400, "{} taps before", kernel.before());
        assert!((kernel.taps().iter().sum::<f64>() - 1.0).abs() < 1e-10, "gain at DC");
    }

    #[test]
    fn a_pole_slower_than_the_memory_allows_is_an_error() {
        let pole = |f: f64| 1.0 / Complex64::new(1.0, std::f64::consts::TAU * f * 30.0);
        let error = Kernel::new(pole, 48_000.0).expect_err("30 s at 48 kHz");
        assert!(matches!(error, SimulationError::RingsTooLong { .. }), "{error}");
    }

    #[test]
    fn a_response_that_is_no_number_is_an_error() {
        let error = Kernel::new(|f| Complex64::new(1.0 / (f - 500.0), 0.0), 8000.0).expect_err("a pole");
        let SimulationError::ResponseNotFinite { frequency_hz, .. } = error else { panic!("{error}") };
        assert_eq!(frequency_hz, 500.0);
    }
}
