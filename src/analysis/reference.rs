//! The phase along which phasors are taken, and frequencies along it.

use super::PhaseTrack;
use super::comb::Candidate;
use super::folding::is_half_rate;
use super::tracker::Tracked;
use super::verdict::Motion;
use std::f64::consts::TAU;

/// The phase along the candidate's path: its frequencies joined by straight lines.
pub(super) fn reference_track(candidate: &Candidate, times_s: &[f64], duration_s: f64) -> PhaseTrack {
    let path = &candidate.path_hz;
    if path.iter().all(|f| *f == path[0]) {
        return PhaseTrack::constant(path[0], duration_s);
    }
    let smooth = |i: usize| {
        let around = &path[i.saturating_sub(1)..(i + 2).min(path.len())];
        around.iter().sum::<f64>() / around.len() as f64
    };
    let mut time_s = vec![0.0];
    let mut frequency_hz = vec![smooth(0)];
    for (i, &t) in times_s.iter().enumerate().filter(|(_, t)| **t > 0.0 && **t < duration_s) {
        time_s.push(t);
        frequency_hz.push(smooth(i));
    }
    time_s.push(duration_s);
    frequency_hz.push(smooth(path.len() - 1));
    let mut phase_rad = vec![0.0];
    for i in 1..time_s.len() {
        let step = 0.5 * (frequency_hz[i] + frequency_hz[i - 1]) * (time_s[i] - time_s[i - 1]);
        phase_rad.push(phase_rad[i - 1] + TAU * step);
    }
    PhaseTrack { time_s, phase_rad, frequency_hz }
}

/// Reference and offset as one track with knots at the cells and both ends.
pub(super) fn refined_track(reference: &PhaseTrack, tracked: &Tracked, duration_s: f64) -> PhaseTrack {
    let cells = &tracked.phases.time_s;
    let smoothed = &tracked.smoothed;
    let last = cells.len() - 1;
    let mut track = PhaseTrack { time_s: Vec::new(), phase_rad: Vec::new(), frequency_hz: Vec::new() };
    let mut knot = |time_s: f64, cell: usize| {
        let offset = smoothed.phase_rad[cell] + smoothed.omega[cell] * (time_s - cells[cell]);
        track.time_s.push(time_s);
        track.phase_rad.push(reference.phase_at(time_s) + offset);
        track.frequency_hz.push(reference_frequency_hz(reference, time_s) + smoothed.omega[cell] / TAU);
    };
    knot(0.0, 0);
    for (i, &time_s) in cells.iter().enumerate() {
        knot(time_s, i);
    }
    if cells[last] < duration_s {
        knot(duration_s, last);
    }
    // Phase 0 at the start, as in a track of constant frequency.
    let start = track.phase_rad[0];
    track.phase_rad.iter_mut().for_each(|phase| *phase -= start);
    track
}

pub(super) fn mean_frequency_hz(reference: &PhaseTrack, tracked: &Tracked, duration_s: f64) -> f64 {
    let carried = reference.phase_at(duration_s) - reference.phase_at(0.0);
    (carried + tracked.advance.phase_rad) / (TAU * duration_s)
}

pub(super) fn reference_frequency_hz(reference: &PhaseTrack, time_s: f64) -> f64 {
    let h = 0.05;
    (reference.phase_at(time_s + h) - reference.phase_at(time_s - h)) / (2.0 * h * TAU)
}

/// How the fundamental moves; not at all where that cannot be told.
pub(super) fn motion(reference: &PhaseTrack, tracked: &Tracked, rate_hz: f64) -> Motion {
    let times = &tracked.phases.time_s;
    let offsets = times.iter().zip(&tracked.smoothed.omega);
    let frequency_hz: Vec<f64> =
        offsets.map(|(&t, omega)| reference_frequency_hz(reference, t) + omega / TAU).collect();
    let low = frequency_hz.iter().copied().fold(f64::MAX, f64::min);
    let high = frequency_hz.iter().copied().fold(f64::MIN, f64::max);
    // At half the rate a line beats with its own image.
    if is_half_rate(0.5 * (low + high), rate_hz) {
        return Motion::default();
    }
    let in_a_second = times.partition_point(|t| t - times[0] < 1.0).max(1);
    let pairs = frequency_hz.iter().zip(frequency_hz.iter().skip(in_a_second));
    let squares: Vec<f64> = pairs.map(|(a, b)| (a - b) * (a - b)).collect();
    let hz_per_s = (squares.iter().sum::<f64>() / squares.len().max(1) as f64).sqrt();
    Motion { range_hz: high - low, hz_per_s }
}
