//! Phase and frequency from noisy phases: filter, smoother, likelihood.
//!
//! State: phase φ and angular frequency ω; ω is a random walk of strength q
//! (rad²/s³). Filter after Kalman (1960), fixed-interval smoother after Rauch,
//! Tung and Striebel (1965). With q = 0 this is the least-squares line through
//! the phases, which for one tone in white noise reaches the Cramér–Rao bound.

use std::f64::consts::TAU;

/// Phases measured at times, each with its variance.
#[derive(Debug, Clone, Default)]
pub(super) struct Phases {
    pub time_s: Vec<f64>,
    pub phase_rad: Vec<f64>,
    pub variance: Vec<f64>,
}

/// The smoothed track.
#[derive(Debug, Clone, Default)]
pub(super) struct Smoothed {
    pub phase_rad: Vec<f64>,
    pub omega: Vec<f64>,
    pub phase_variance: Vec<f64>,
    pub omega_variance: Vec<f64>,
}

/// Phase advance over the whole capture.
#[derive(Debug, Clone, Copy)]
pub(super) struct Advance {
    pub phase_rad: f64,
    pub variance: f64,
}

/// What wander must gain in likelihood, in nats, before it is believed: a one-sided
/// test at 2.3 %. A steady line read as wandering loses precision (at half a nat, five
/// harmonics err by 1.13 times the bound instead of 1.06); a wander that stays unseen
/// is at most about as large as the stated error.
const WANDER_COST: f64 = 2.0;

/// How far off the reference the frequency may be at the start: ± 3 Hz.
const START_OMEGA_VARIANCE: f64 = (3.0 * TAU) * (3.0 * TAU);

#[derive(Clone, Copy)]
struct State {
    phase: f64,
    omega: f64,
    p00: f64,
    p01: f64,
    p11: f64,
}

impl State {
    fn start(phases: &Phases) -> Self {
        Self {
            phase: phases.phase_rad[0],
            omega: 0.0,
            p00: phases.variance[0],
            p01: 0.0,
            p11: START_OMEGA_VARIANCE,
        }
    }

    fn predicted(&self, dt: f64, q: f64) -> Self {
        Self {
            phase: self.phase + self.omega * dt,
            omega: self.omega,
            p00: self.p00 + dt * (2.0 * self.p01 + dt * self.p11) + q * dt * dt * dt / 3.0,
            p01: self.p01 + dt * self.p11 + q * dt * dt / 2.0,
            p11: self.p11 + q * dt,
        }
    }

    /// The state after a measurement, the innovation and its variance.
    fn updated(&self, phase: f64, variance: f64) -> (Self, f64, f64) {
        let innovation = phase - self.phase;
        let s = self.p00 + variance;
        let next = Self {
            phase: self.phase + self.p00 / s * innovation,
            omega: self.omega + self.p01 / s * innovation,
            p00: self.p00 * variance / s,
            p01: self.p01 * variance / s,
            p11: (self.p11 - self.p01 * self.p01 / s).max(0.0),
        };
        (next, innovation, s)
    }
}

impl Phases {
    /// Logarithm of the likelihood of q, but for a constant.
    pub fn log_likelihood(&self, q: f64) -> f64 {
        let mut state = State::start(self);
        let mut sum = 0.0;
        for i in 1..self.time_s.len() {
            let dt = self.time_s[i] - self.time_s[i - 1];
            let (next, innovation, s) = state.predicted(dt, q).updated(self.phase_rad[i], self.variance[i]);
            sum -= 0.5 * (s.ln() + innovation * innovation / s);
            state = next;
        }
        sum
    }

    /// The strength of wander that makes the phases likeliest; 0 where none
    /// does better than no wander by more than chance.
    pub fn likeliest_wander(&self) -> f64 {
        if self.time_s.len() < 5 {
            return 0.0;
        }
        let none = self.log_likelihood(0.0);
        let best = (-44..=10)
            .map(|i| 10f64.powf(f64::from(i) / 4.0))
            .map(|q| (q, self.log_likelihood(q)))
            .max_by(|a, b| a.1.total_cmp(&b.1));
        match best {
            Some((q, likelihood)) if likelihood > none + WANDER_COST => q,
            _ => 0.0,
        }
    }

    /// Phase and frequency at each time from all measurements.
    pub fn smoothed(&self, q: f64) -> Smoothed {
        let n = self.time_s.len();
        let mut filtered = Vec::with_capacity(n);
        let mut state = State::start(self);
        filtered.push(state);
        for i in 1..n {
            let dt = self.time_s[i] - self.time_s[i - 1];
            state = state.predicted(dt, q).updated(self.phase_rad[i], self.variance[i]).0;
            filtered.push(state);
        }
        let mut out = Smoothed {
            phase_rad: vec![0.0; n],
            omega: vec![0.0; n],
            phase_variance: vec![0.0; n],
            omega_variance: vec![0.0; n],
        };
        let mut later = filtered[n - 1];
        for i in (0..n).rev() {
            if i + 1 < n {
                later = smoothed_step(&filtered[i], &later, self.time_s[i + 1] - self.time_s[i], q);
            }
            out.phase_rad[i] = later.phase;
            out.omega[i] = later.omega;
            out.phase_variance[i] = later.p00.max(0.0);
            out.omega_variance[i] = later.p11.max(0.0);
        }
        out
    }

    /// Phase at `duration_s` less phase at 0, and its variance: the phase at the
    /// start is carried as a third state.
    pub fn advance(&self, q: f64, duration_s: f64) -> Advance {
        let lead = self.time_s[0];
        let (r, w) = (self.variance[0], START_OMEGA_VARIANCE);
        let mut state = State::start(self);
        let mut start = state.phase;
        // Covariances of the start with phase and frequency, and its variance.
        let (mut c0, mut c1) = (r, -w * lead);
        let mut v = r + w * lead * lead + q * lead * lead * lead / 3.0;
        for i in 1..self.time_s.len() {
            let dt = self.time_s[i] - self.time_s[i - 1];
            let predicted = state.predicted(dt, q);
            c0 += dt * c1;
            let (next, innovation, s) = predicted.updated(self.phase_rad[i], self.variance[i]);
            start += c0 / s * innovation;
            v -= c0 * c0 / s;
            c1 -= predicted.p01 * c0 / s;
            c0 -= predicted.p00 * c0 / s;
            state = next;
        }
        let tail = duration_s - self.time_s[self.time_s.len() - 1];
        let end = state.predicted(tail, q);
        c0 += tail * c1;
        Advance { phase_rad: end.phase - start, variance: (end.p00 - 2.0 * c0 + v).max(0.0) }
    }
}

fn smoothed_step(now: &State, later: &State, dt: f64, q: f64) -> State {
    let ahead = now.predicted(dt, q);
    let det = ahead.p00 * ahead.p11 - ahead.p01 * ahead.p01;
    if det <= 1e-14 * ahead.p00 * ahead.p11 {
        // No wander and nothing left to learn: straight back.
        let phase = later.phase - later.omega * dt;
        return State { phase, omega: later.omega, p00: later.p00, p01: later.p01, p11: later.p11 };
    }
    // Gain G = P Fᵀ P⁻¹(ahead).
    let (a00, a01) = (now.p00 + dt * now.p01, now.p01);
    let (a10, a11) = (now.p01 + dt * now.p11, now.p11);
    let (i00, i01, i11) = (ahead.p11 / det, -ahead.p01 / det, ahead.p00 / det);
    let (g00, g01) = (a00 * i00 + a01 * i01, a00 * i01 + a01 * i11);
    let (g10, g11) = (a10 * i00 + a11 * i01, a10 * i01 + a11 * i11);
    let (dp, dw) = (later.phase - ahead.phase, later.omega - ahead.omega);
    let (d00, d01, d11) = (later.p00 - ahead.p00, later.p01 - ahead.p01, later.p11 - ahead.p11);
    State {
        phase: now.phase + g00 * dp + g01 * dw,
        omega: now.omega + g10 * dp + g11 * dw,
        p00: now.p00 + g00 * g00 * d00 + 2.0 * g00 * g01 * d01 + g01 * g01 * d11,
        p01: now.p01 + g00 * g10 * d00 + (g00 * g11 + g01 * g10) * d01 + g01 * g11 * d11,
        p11: now.p11 + g10 * g10 * d00 + 2.0 * g10 * g11 * d01 + g11 * g11 * d11,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn zigzag(q_like: f64) -> Phases {
        let time_s: Vec<f64> = (0..80).map(|i| 0.3 + 0.25 * f64::from(i)).collect();
        let noise = |i: usize| 0.01 * ((i * 7919 % 101) as f64 / 50.0 - 1.0);
        let phase_rad = time_s.iter().enumerate().map(|(i, t)| 0.4 * t + q_like * (0.5 * t).sin() + noise(i));
        Phases { phase_rad: phase_rad.collect(), variance: vec![3.3e-5; 80], time_s }
    }

    #[test]
    fn without_wander_it_is_the_line_of_least_squares() {
        let phases = zigzag(0.0);
        let n = phases.time_s.len() as f64;
        let mean_t = phases.time_s.iter().sum::<f64>() / n;
        let mean_p = phases.phase_rad.iter().sum::<f64>() / n;
        let (mut sxy, mut sxx) = (0.0, 0.0);
        for (t, p) in phases.time_s.iter().zip(&phases.phase_rad) {
            sxy += (t - mean_t) * (p - mean_p);
            sxx += (t - mean_t) * (t - mean_t);
        }
        let advance = phases.advance(0.0, 20.35);
        assert!((advance.phase_rad / 20.35 - sxy / sxx).abs() < 1e-6);
        let se = advance.variance.sqrt() / 20.35;
        assert!((se - (3.3e-5 / sxx).sqrt()).abs() < 1e-3 * se);
        let smoothed = phases.smoothed(0.0);
        assert!(smoothed.omega.iter().all(|w| (w - sxy / sxx).abs() < 1e-5));
    }

    #[test]
    fn a_slow_swing_is_followed_and_calls_for_wander() {
        let phases = zigzag(0.5);
        let q = phases.likeliest_wander();
        assert!(q > 1e-4, "{q}");
        assert_eq!(zigzag(0.0).likeliest_wander(), 0.0);
        let smoothed = phases.smoothed(q);
        for (i, t) in phases.time_s.iter().enumerate() {
            let want = 0.4 + 0.25 * (0.5 * t).cos();
            let sd = smoothed.omega_variance[i].sqrt();
            assert!(
                (smoothed.omega[i] - want).abs() < 4.0 * sd,
                "{t}: {} ± {sd} for {want}",
                smoothed.omega[i]
            );
            assert!(sd < 0.1, "{t}: {sd}");
        }
    }
}
