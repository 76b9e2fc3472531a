//! Windows as sums of cosines: their values, their transforms, their ramps.

use std::f64::consts::{PI, TAU};

/// A window a₀ − a₁cos(2πu) + a₂cos(4πu) − … for u from 0 to 1.
#[derive(Debug, Clone, Copy)]
pub(super) struct CosineWindow(&'static [f64]);

/// Minimum 4-term Blackman–Harris: side lobes 92 dB down, main lobe ± 4/L
/// (Harris, Proc. IEEE 66, 1978). Shifted by a quarter of its length it sums
/// to a constant.
pub(super) const BLACKMAN_HARRIS: CosineWindow = CosineWindow(&[0.35875, 0.48829, 0.14128, 0.01168]);

/// A five-term flat top: a tone between two bins reads within 0.01 dB
/// (coefficients from memory, as SciPy's `flattop`; D'Antona and Ferrero 2006).
pub(super) const FLAT_TOP: CosineWindow =
    CosineWindow(&[0.21557895, 0.41663158, 0.277263158, 0.083578947, 0.006947368]);

impl CosineWindow {
    /// Value at u in 0..1.
    pub fn at(&self, u: f64) -> f64 {
        let signs = [1.0, -1.0].into_iter().cycle();
        self.0.iter().zip(signs).enumerate().map(|(i, (a, sign))| sign * a * (TAU * i as f64 * u).cos()).sum()
    }

    /// `length` samples, periodic (the next would repeat the first).
    pub fn samples(&self, length: usize) -> Vec<f64> {
        (0..length).map(|n| self.at(n as f64 / length as f64)).collect()
    }

    /// Integral from 0 to u over the whole integral: a ramp from 0 to 1.
    pub fn ramp(&self, u: f64) -> f64 {
        let u = u.clamp(0.0, 1.0);
        let mut sum = self.0[0] * u;
        let mut sign = -1.0;
        for (i, a) in self.0.iter().enumerate().skip(1) {
            let turn = TAU * i as f64;
            sum += sign * a * (turn * u).sin() / turn;
            sign = -sign;
        }
        sum / self.0[0]
    }

    /// Transform of the centred window, 1 at zero offset; offset in units of 1/L.
    pub fn response(&self, offset: f64) -> f64 {
        let sinc = |x: f64| if x.abs() < 1e-9 { 1.0 } else { (PI * x).sin() / (PI * x) };
        // Centred, every cosine term is positive.
        let sides = self.0.iter().enumerate().skip(1);
        let sum: f64 =
            sides.map(|(i, a)| 0.5 * a * (sinc(offset - i as f64) + sinc(offset + i as f64))).sum();
        (self.0[0] * sinc(offset) + sum) / self.0[0]
    }

    /// Equivalent noise bandwidth in units of 1/L.
    pub fn noise_bandwidth(&self) -> f64 {
        let sides: f64 = self.0[1..].iter().map(|a| a * a).sum();
        1.0 + sides / (2.0 * self.0[0] * self.0[0])
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn blackman_harris_shifted_by_quarters_sums_to_a_constant() {
        for i in 0..50 {
            let u = f64::from(i) / 200.0;
            let sum: f64 = (0..4).map(|q| BLACKMAN_HARRIS.at(u + 0.25 * f64::from(q))).sum();
            assert!((sum - 4.0 * 0.35875).abs() < 1e-12);
        }
    }

    #[test]
    fn the_textbook_noise_bandwidths_are_met() {
        // Harris 1978, table 1: 2.00 bins; SciPy's flattop: 3.77 bins.
        assert!((BLACKMAN_HARRIS.noise_bandwidth() - 2.0).abs() < 0.01);
        assert!((FLAT_TOP.noise_bandwidth() - 3.77).abs() < 0.01);
    }

    #[test]
    fn the_transform_is_that_of_the_samples() {
        let length = 512;
        let samples = BLACKMAN_HARRIS.samples(length);
        let sum: f64 = samples.iter().sum();
        for offset in [0.0, 0.3, 1.0, 2.7, 4.4] {
            let direct: f64 = samples
                .iter()
                .enumerate()
                .map(|(n, w)| w * (TAU * offset * (n as f64 - 256.0) / length as f64).cos())
                .sum();
            assert!((direct / sum - BLACKMAN_HARRIS.response(offset)).abs() < 1e-5);
        }
        assert!(BLACKMAN_HARRIS.response(5.3).abs() < 3e-5);
    }

    #[test]
    fn a_ramp_goes_from_nothing_to_one() {
        assert!(BLACKMAN_HARRIS.ramp(0.0).abs() < 1e-15);
        assert!((BLACKMAN_HARRIS.ramp(0.5) - 0.5).abs() < 1e-12);
        assert!((BLACKMAN_HARRIS.ramp(1.0) - 1.0).abs() < 1e-12);
    }
}
