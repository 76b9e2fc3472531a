//! What was on the line before the recording, and what would have come after it.

use num_complex::Complex64;

use super::convolver::{Past, Tone};
use crate::analysis::PhaseTrack;

/// Length of the stretch at the start that the model is fitted to, seconds.
pub(super) const FIT_S: f64 = 0.5;

/// Sweeps of the fit: each takes out what the lines leak into each other,
/// a factor of a thousand and more a sweep.
const SWEEPS: usize = 3;

/// Hum on a level, as the recording starts: level + Re Σ cₖ e^(jkφ(t)).
#[derive(Debug, Clone)]
pub(super) struct Extension<'a> {
    track: Option<&'a PhaseTrack>,
    sample_rate_hz: f64,
    level: f64,
    /// Order and phasor of each harmonic.
    lines: Vec<(u32, Complex64)>,
}

impl<'a> Extension<'a> {
    /// Fits the level, and the harmonics of `orders` along `track`, to the samples
    /// at the start of a recording, under a Hann window over whole periods.
    pub fn fit(start: &[f64], sample_rate_hz: f64, track: Option<&'a PhaseTrack>, orders: &[u32]) -> Self {
        let frames = track.map_or(start.len(), |track| {
            let period = sample_rate_hz / track.frequency_hz[0];
            let periods = (start.len() as f64 / period).floor();
            ((periods * period).round() as usize).clamp(1, start.len())
        });
        let mut rest = start[..frames].to_vec();
        let turn = std::f64::consts::TAU / frames as f64;
        let window: Vec<f64> = (0..frames).map(|n| 1.0 - (turn * (n as f64 + 0.5)).cos()).collect();
        let weight: f64 = window.iter().sum();
        // Time from the middle, so that level and slope do not disturb each other.
        let along = |n: usize| n as f64 + 0.5 - frames as f64 / 2.0;
        let spread: f64 = window.iter().enumerate().map(|(n, w)| w * along(n) * along(n)).sum();
        let turns: Vec<Complex64> = track.map_or(Vec::new(), |track| {
            (0..frames).map(|n| Complex64::cis(track.phase_at(n as f64 / sample_rate_hz))).collect()
        });
        let highest = orders.iter().copied().max().unwrap_or(0) as usize;
        let mut phasors = vec![Complex64::default(); highest + 1];
        let wanted: Vec<bool> = (0..=highest).map(|k| orders.contains(&(k as u32))).collect();
        let (mut level, mut slope) = (0.0, 0.0);
        for _ in 0..SWEEPS {
            let (mut step, mut tilt) = (0.0, 0.0);
            for (n, (sample, w)) in rest.iter().zip(&window).enumerate() {
                step += w * sample;
                tilt += w * sample * along(n);
            }
            (step, tilt) = (step / weight, tilt / spread.max(f64::MIN_POSITIVE));
            level += step;
            slope += tilt;
            rest.iter_mut().enumerate().for_each(|(n, sample)| *sample -= step + tilt * along(n));
            if turns.is_empty() || highest == 0 {
                continue;
            }
            let found = project(&rest, &window, weight, &turns, &wanted);
            for (sample, &one) in rest.iter_mut().zip(&turns) {
                *sample -= sum_of_lines(&found, one);
            }
            phasors.iter_mut().zip(&found).for_each(|(sum, now)| *sum += now);
        }
        let at_start = level + slope * along(0);
        let lines = orders.iter().map(|&order| (order, phasors[order as usize])).collect();
        let lines = if track.is_some() { lines } else { Vec::new() };
        Self { track, sample_rate_hz, level: at_start, lines }
    }

    /// The hum alone, `frame` samples after the start (negative: before it).
    pub fn hum_at(&self, frame: f64) -> f64 {
        let Some(track) = self.track else { return 0.0 };
        let phase = track.phase_at(frame / self.sample_rate_hz);
        self.lines.iter().map(|&(order, c)| (c * Complex64::cis(f64::from(order) * phase)).re).sum()
    }

    /// Hum on the level of the start, for ever: before its first knot the track
    /// runs straight on.
    pub fn past(&self) -> Past {
        let tones = self.track.map_or(Vec::new(), |track| {
            let radians = std::f64::consts::TAU * track.frequency_hz[0] / self.sample_rate_hz;
            let turned = |order: u32| Complex64::cis(f64::from(order) * track.phase_at(0.0));
            let tone = |&(order, phasor): &(u32, Complex64)| Tone {
                radians: f64::from(order) * radians,
                phasor: phasor * turned(order),
            };
            self.lines.iter().map(tone).collect()
        });
        Past { level: self.level, tones }
    }
}

/// Phasor of each wanted order: 2 Σ w x e^(−jkφ) / Σ w.
fn project(
    rest: &[f64],
    window: &[f64],
    weight: f64,
    turns: &[Complex64],
    wanted: &[bool],
) -> Vec<Complex64> {
    let mut found = vec![Complex64::default(); wanted.len()];
    for ((sample, w), one) in rest.iter().zip(window).zip(turns) {
        let back = one.conj();
        let mut turned = Complex64::new(2.0 * w * sample / weight, 0.0);
        for (phasor, &wanted) in found[1..].iter_mut().zip(&wanted[1..]) {
            turned *= back;
            if wanted {
                *phasor += turned;
            }
        }
    }
    found
}

fn sum_of_lines(phasors: &[Complex64], one: Complex64) -> f64 {
    // Horner, from the highest order down.
    phasors.iter().rev().fold(Complex64::default(), |sum, phasor| sum * one + phasor).re
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::TAU;

    #[test]
    fn hum_on_an_offset_is_carried_on_backwards() {
        let rate = 8000.0;
        let track = PhaseTrack::constant(49.93, 10.0);
        let line = |n: f64| {
            let phase = TAU * 49.93 * n / rate;
            0.7 + 0.1 * (phase + 0.3).cos() + 0.02 * (3.0 * phase - 1.0).cos() + 0.01 * (20.0 * phase).sin()
        };
        let start: Vec<f64> = (0..4000).map(|n| line(f64::from(n))).collect();
        let extension = Extension::fit(&start, rate, Some(&track), &[1, 3, 20]);
        for back in [1, 10, 1000, 20_000] {
            let error = extension.past().before(back) - line(-(back as f64));
            assert!(error.abs() < 1e-6, "{back} samples before: off by {error}");
        }
    }

    #[test]
    fn without_hum_the_level_is_carried_on() {
        let extension = Extension::fit(&[0.25; 300], 1000.0, None, &[]);
        assert!((extension.past().before(500) - 0.25).abs() < 1e-12);
        assert_eq!(extension.hum_at(3.0), 0.0);
    }
}
