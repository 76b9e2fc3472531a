//! Levels from the cells in which the phase was followed: no further pass over the samples.

use super::PhaseTrack;
use super::orders::{LineMeans, OrderLevel};
use super::tracker::{Cells, Tracked, turned};
use super::window::BLACKMAN_HARRIS;
use num_complex::Complex64;
use std::f64::consts::TAU;

/// Fewest cells: short captures are read again, which costs little.
const FEWEST_CELLS: usize = 100;
/// Farthest that the highest order may turn against the reference within a cell, in turns:
/// the cell then still reads 95 % of it.
const FARTHEST: f64 = 0.17;
/// Length in seconds of the stretches whose power is averaged.
const STRETCH_S: f64 = 5.0;

/// The levels of all orders of the cells along `track`; `None` where the cells are too few,
/// or where the line strays so far from the reference that they read it weakly.
pub(super) fn levels_of(
    cells: &Cells,
    tracked: &Tracked,
    reference: &PhaseTrack,
    track: &PhaseTrack,
) -> Option<Vec<OrderLevel>> {
    let whole = cells.whole();
    let top = f64::from(cells.orders.iter().copied().max()?);
    let farthest_hz = tracked.smoothed.omega.iter().fold(0.0, |most: f64, w| most.max(w.abs())) / TAU;
    if whole < FEWEST_CELLS || top * farthest_hz * cells.length_s > FARTHEST {
        return None;
    }
    // The cells are turned along the reference and the offset; the track begins at phase 0.
    let first_s = cells.time_s[0];
    let start = reference.phase_at(first_s) + tracked.smoothed.phase_rad[0] - track.phase_at(first_s);
    let lines: Vec<Vec<Complex64>> = (0..cells.orders.len())
        .map(|line| {
            let k = f64::from(cells.orders[line]);
            let begun = Complex64::cis(TAU * (k * (start / TAU).rem_euclid(1.0)).fract());
            let along = turned(cells, line, &tracked.smoothed.phase_rad).zip(&tracked.smoothed.omega);
            along.take(whole).map(|(z, omega)| begun * z / cells.response(k * omega / TAU)).collect()
        })
        .collect();
    let mut means = LineMeans::new(&cells.orders, cells.length_s, whole);
    for b in 0..whole {
        means.take(&lines.iter().map(|line| line[b]).collect::<Vec<_>>());
    }
    let powers: Vec<f64> = lines
        .iter()
        .zip(&cells.density)
        .map(|(line, density)| power_in_stretches(line, *density, cells.length_s))
        .collect();
    Some(means.levels(track, &cells.density, &powers))
}

/// Mean over stretches of a line's own power in each, less the noise that a stretch lets in.
fn power_in_stretches(line: &[Complex64], density: f64, cell_s: f64) -> f64 {
    let parts = (line.len() as f64 * cell_s / STRETCH_S).ceil().max(1.0) as usize;
    let length = line.len() / parts;
    let window = BLACKMAN_HARRIS.samples(length);
    let weight: f64 = window.iter().sum();
    let bandwidth_hz = window.iter().map(|w| w * w).sum::<f64>() / (weight * weight * cell_s);
    let amplitude =
        |part: &[Complex64]| part.iter().zip(&window).map(|(z, w)| w * z).sum::<Complex64>() / weight;
    let power: f64 = line.chunks_exact(length).map(|part| 0.5 * amplitude(part).norm_sqr()).sum();
    let count = line.chunks_exact(length).count() as f64;
    (power / count - density * bandwidth_hz).max(0.0)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::analysis::gather::Gather;
    use crate::analysis::orders::OrderMeter;
    use crate::analysis::reference::refined_track;
    use crate::analysis::tracker::track;

    /// A line that wanders by ± 5 mHz about 3 mHz off the reference, with noise.
    #[test]
    fn the_cells_read_what_another_pass_would() {
        let (rate_hz, duration_s) = (2000.0, 40.0);
        let reference = PhaseTrack::constant(50.0, duration_s);
        let phase = |t: f64| TAU * 50.003 * t + 0.5 * (1.0 - (0.06 * t).cos());
        let mut state = 1u64;
        let mut noise = || {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            (state >> 11) as f64 / (1u64 << 53) as f64 - 0.5
        };
        let samples: Vec<f64> = (0..(rate_hz * duration_s) as usize)
            .map(|n| phase(n as f64 / rate_hz))
            .map(|p| 0.1 * (p + 0.4).cos() + 0.01 * (7.0 * p - 1.0).cos() + 0.01 * noise())
            .collect();
        let orders: Vec<u32> = (1..=8).collect();
        let mut gather = Gather::new(rate_hz, &reference, &orders, samples.len() as u64);
        gather.push(&samples);
        let cells = gather.finish().cells;
        let tracked = track(&cells, &[1, 7], 0.3, duration_s).expect("long enough");
        let along = refined_track(&reference, &tracked, duration_s);
        let read = levels_of(&cells, &tracked, &reference, &along).expect("near the reference");
        let mut meter = OrderMeter::new(rate_hz, &along, &orders);
        meter.push(&samples);
        for (cells, again) in
            read.iter().zip(meter.finish()).filter(|(level, _)| [1, 7].contains(&level.order))
        {
            assert!((cells.level_dbfs - again.level_dbfs).abs() < 0.01, "{cells:?} {again:?}");
            assert!((cells.mean_power_dbfs - again.mean_power_dbfs).abs() < 0.02, "{cells:?} {again:?}");
            assert!((cells.phase_deg - again.phase_deg).abs() < 0.1, "{cells:?} {again:?}");
            assert!((cells.over_floor_db - again.over_floor_db).abs() < 0.5, "{cells:?} {again:?}");
        }
    }
}
