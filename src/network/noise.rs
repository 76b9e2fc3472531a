//! Thermal noise at the load: what the source makes of itself, and what the network adds.
//!
//! A passive network at one temperature has the open-circuit noise of its
//! impedance's real part (Johnson, Phys. Rev. 32, 1928, p. 97; Nyquist, the same
//! volume, p. 110): S = 4kT·Re(Z) V²/Hz. What each resistance contributes follows
//! from its own transfer; the network's share is what is left.

use num_complex::Complex64;

use super::circuit::Circuit;

/// Boltzmann's constant, J/K: exact since the SI of 2019.
pub const BOLTZMANN_J_K: f64 = 1.380_649e-23;

/// Mean square noise voltage at the load by origin, V²/Hz at a frequency or V² over a band.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Noise {
    /// All of it.
    pub total: f64,
    /// Of the source's resistance.
    pub source: f64,
    /// Of the load's resistance.
    pub load: f64,
    /// Of the network's own resistances.
    pub network: f64,
}

impl Noise {
    /// How much the network raises the noise above that of source and load alone
    /// behind the same network, decibels.
    pub fn added_db(&self) -> f64 {
        10.0 * (self.total / (self.source + self.load)).log10()
    }

    fn combined(self, other: Self, of: impl Fn(f64, f64) -> f64) -> Self {
        Self {
            total: of(self.total, other.total),
            source: of(self.source, other.source),
            load: of(self.load, other.load),
            network: of(self.network, other.network),
        }
    }
}

/// Simpson's rule halves a panel at most so often.
const DEEPEST_HALVING: u32 = 24;

/// Panels that every band starts with.
const PANELS: u32 = 16;

impl Circuit {
    /// Noise density at the load, V²/Hz, all parts at `temperature_k` kelvin.
    ///
    /// Total 4kT·Re(Z_out); source 4kT·R_s|H|²; load 4kT·|Z_out|²/R_l.
    pub fn noise_density(&self, frequency_hz: f64, temperature_k: f64) -> Noise {
        let impedance = self.output_impedance(frequency_hz);
        let transfer = self.transfer(frequency_hz);
        self.noise_from(impedance, transfer, temperature_k)
    }

    /// The same with the source wired straight to the load; `network` is zero.
    pub fn noise_density_without(&self, frequency_hz: f64, temperature_k: f64) -> Noise {
        let omega = std::f64::consts::TAU * frequency_hz;
        let loading = self.wire_loading(frequency_hz);
        let impedance = self.source.impedance(omega) / loading;
        Noise { network: 0.0, ..self.noise_from(impedance, 1.0 / loading, temperature_k) }
    }

    /// Noise at the load over a band, V²; the square root of `total` is RMS volts.
    ///
    /// Adaptive Simpson integration of [`Circuit::noise_density`] to a relative 1e-6.
    pub fn noise_in_band(&self, from_hz: f64, to_hz: f64, temperature_k: f64) -> Noise {
        let density = |hz| self.noise_density(hz, temperature_k);
        integral(&density, from_hz, to_hz)
    }

    fn noise_from(&self, impedance: Complex64, transfer: Complex64, temperature_k: f64) -> Noise {
        let scale = 4.0 * BOLTZMANN_J_K * temperature_k;
        let total = scale * impedance.re;
        let source = scale * self.source.resistance_ohm * transfer.norm_sqr();
        let load = scale * impedance.norm_sqr() / self.load.resistance_ohm;
        // Not below zero where rounding is all that is left of a lossless network.
        Noise { total, source, load, network: (total - source - load).max(0.0) }
    }
}

/// Integral of `density` over `from..to`.
fn integral(density: &impl Fn(f64) -> Noise, from: f64, to: f64) -> Noise {
    // Panels grow with the cube: narrow where networks of low frequency do most.
    let edge = |k: u32| from + (to - from) * (f64::from(k) / f64::from(PANELS)).powi(3);
    let panels: Vec<Panel> = (0..PANELS).map(|k| Panel::new(density, edge(k), edge(k + 1))).collect();
    let coarse: f64 = panels.iter().map(|panel| panel.area().total.abs()).sum();
    let sum = |a: Noise, b: Noise| a.combined(b, |a, b| a + b);
    panels
        .into_iter()
        .map(|panel| panel.refined(density, 1e-6 * coarse / f64::from(PANELS), DEEPEST_HALVING))
        .fold(Noise::default(), sum)
}

/// A stretch of the band with the density at its ends and its middle.
#[derive(Clone, Copy)]
struct Panel {
    from: f64,
    to: f64,
    density: [Noise; 3],
}

impl Panel {
    fn new(density: &impl Fn(f64) -> Noise, from: f64, to: f64) -> Self {
        Self { from, to, density: [from, f64::midpoint(from, to), to].map(density) }
    }

    /// Simpson's rule.
    fn area(&self) -> Noise {
        let width = self.to - self.from;
        let [first, middle, last] = self.density;
        first.combined(last, |a, b| a + b).combined(middle, |ends, m| width * (ends + 4.0 * m) / 6.0)
    }

    /// The area, halved until halving changes no share by more than `allowed`.
    fn refined(self, density: &impl Fn(f64) -> Noise, allowed: f64, halvings: u32) -> Noise {
        let middle = f64::midpoint(self.from, self.to);
        let half = |from: f64, to: f64, ends: [Noise; 2]| Panel {
            from,
            to,
            density: [ends[0], density(f64::midpoint(from, to)), ends[1]],
        };
        let [first, mid, last] = self.density;
        let (left, right) = (half(self.from, middle, [first, mid]), half(middle, self.to, [mid, last]));
        let fine = left.area().combined(right.area(), |a, b| a + b);
        let change = fine.combined(self.area(), |a, b| (a - b).abs());
        let largest = change.total.max(change.source).max(change.load).max(change.network);
        if largest <= allowed || halvings == 0 {
            return fine;
        }
        let rest = |panel: Panel| panel.refined(density, allowed / 2.0, halvings - 1);
        rest(left).combined(rest(right), |a, b| a + b)
    }
}
