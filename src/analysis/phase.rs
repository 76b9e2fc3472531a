//! The phase of the fundamental against time: what all harmonics share.

use std::f64::consts::TAU;

/// Phase of the fundamental, in radians, at knots in time, unwrapped.
///
/// Harmonic k of a capture is modelled as Aₖ cos(k·φ(t) + θₖ).
#[derive(Debug, Clone, PartialEq)]
pub struct PhaseTrack {
    /// Knots in seconds from the start of the capture, rising.
    pub time_s: Vec<f64>,
    /// φ at each knot, radians.
    pub phase_rad: Vec<f64>,
    /// dφ/dt over 2π at each knot, hertz.
    pub frequency_hz: Vec<f64>,
}

impl PhaseTrack {
    /// A line of constant frequency over `duration_s`, phase 0 at the start.
    pub fn constant(frequency_hz: f64, duration_s: f64) -> Self {
        Self {
            time_s: vec![0.0, duration_s],
            phase_rad: vec![0.0, TAU * frequency_hz * duration_s],
            frequency_hz: vec![frequency_hz; 2],
        }
    }

    /// Whether the frequency is the same all along.
    pub(super) fn is_constant(&self) -> bool {
        self.frequency_hz.iter().all(|hertz| *hertz == self.frequency_hz[0])
    }

    /// φ(t) by the cubic that keeps phase and frequency at both knots
    /// (Hermite); straight on at the end's frequency outside the knots.
    pub fn phase_at(&self, time_s: f64) -> f64 {
        let last = self.time_s.len() - 1;
        if time_s <= self.time_s[0] {
            return self.phase_rad[0] + TAU * self.frequency_hz[0] * (time_s - self.time_s[0]);
        }
        if time_s >= self.time_s[last] {
            return self.phase_rad[last] + TAU * self.frequency_hz[last] * (time_s - self.time_s[last]);
        }
        let right = self.time_s.partition_point(|&knot| knot <= time_s);
        let left = right - 1;
        let step_s = self.time_s[right] - self.time_s[left];
        let u = (time_s - self.time_s[left]) / step_s;
        let (p0, p1) = (self.phase_rad[left], self.phase_rad[right]);
        let (m0, m1) = (TAU * self.frequency_hz[left] * step_s, TAU * self.frequency_hz[right] * step_s);
        let advance = p1 - p0;
        p0 + u * (m0 + u * ((3.0 * advance - 2.0 * m0 - m1) + u * (m0 + m1 - 2.0 * advance)))
    }

    /// Phase advance over the knots divided by 2π times their time, hertz.
    pub fn mean_frequency_hz(&self) -> f64 {
        let last = self.time_s.len() - 1;
        (self.phase_rad[last] - self.phase_rad[0]) / (TAU * (self.time_s[last] - self.time_s[0]))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_ramp_of_frequency_is_kept_exactly_between_knots() {
        let phase = |t: f64| TAU * (50.0 * t + 0.05 * t * t);
        let frequency = |t: f64| 50.0 + 0.1 * t;
        let time_s = vec![0.0, 2.0, 3.0];
        let track = PhaseTrack {
            phase_rad: time_s.iter().map(|&t| phase(t)).collect(),
            frequency_hz: time_s.iter().map(|&t| frequency(t)).collect(),
            time_s,
        };
        for t in [0.0, 0.3, 1.9, 2.5, 3.0] {
            assert!((track.phase_at(t) - phase(t)).abs() < 1e-9, "at {t} s");
        }
        assert!((track.mean_frequency_hz() - 50.15).abs() < 1e-12);
    }
}
