//! Gaussian noise whose power density falls as 1/f.

use crate::analysis_signals::Noise;
use num_complex::Complex64;
use realfft::RealFftPlanner;

/// Below this frequency the density is level.
pub const LEVEL_BELOW_HZ: f64 = 1.0;

/// One-sided density (mean square per hertz) at a frequency, for 1 at 1 Hz.
pub fn density(frequency_hz: f64) -> f64 {
    1.0 / frequency_hz.max(LEVEL_BELOW_HZ)
}

/// Mean square of the whole noise up to half the rate, for a density of 1 at 1 Hz.
pub fn power(rate: u32) -> f64 {
    LEVEL_BELOW_HZ + (0.5 * f64::from(rate) / LEVEL_BELOW_HZ).ln()
}

/// So many samples: white spectral lines, each times the root of the density, of a period
/// twice as long, so that the end knows nothing of the start.
pub fn pink(count: usize, rate: u32, noise: &mut Noise) -> Vec<f64> {
    let length = 2 * count;
    let fft = RealFftPlanner::<f64>::new().plan_fft_inverse(length);
    let step_hz = f64::from(rate) / length as f64;
    let mut lines = fft.make_input_vec();
    let last = lines.len() - 1;
    for (m, line) in lines.iter_mut().enumerate() {
        let sd = (0.25 * density(m as f64 * step_hz) * step_hz).sqrt();
        *line = sd * Complex64::new(noise.normal(), noise.normal());
    }
    lines[0] = Complex64::ZERO;
    lines[last] = Complex64::ZERO;
    let mut samples = fft.make_output_vec();
    fft.process(&mut lines, &mut samples).expect("buffers made by the plan itself");
    samples.truncate(count);
    samples
}
