//! The level of the hum over time, and where it changes.
//!
//! From the tracker's cells turned along the phase track: a drift of the frequency turns
//! phasors and leaves their size alone, so that it is no change of level.

use super::findings::{LevelChange, LevelPoint};
use super::orders::{power_db, power_dbfs};
use super::run_up::run_ups;
use super::steps::{Step, steps};
use super::tracker::{Cells, Tracked, turned};
use num_complex::Complex64;
use std::f64::consts::TAU;

/// Most points told.
const MOST_POINTS: usize = 600;
/// Most orders looked at.
const MOST_ORDERS: usize = 8;
/// Orders this far under the strongest are not looked at, as a ratio of powers (26 dB).
const LEAST_POWER: f64 = 2.5e-3;
/// Power over noise that a group of cells has: a level then strays by about 1.4 dB.
const CLEAR: f64 = 20.0;
/// Share of an order's power that keeps its phase along the track: noise and other people's
/// notes do not; a supply that hums for a fifth of the time does.
const COHERENT: f64 = 0.2;
/// Power over noise in the whole capture from which an order is looked at.
const HEARD: f64 = 100.0;
/// Fewest groups in which a level over time is told.
const FEWEST_GROUPS: usize = 4;
/// Shortest time between two steps, in seconds.
const SHORTEST_S: f64 = 2.0;
/// Smallest step told, in decibels.
const LEAST_STEP_DB: f64 = 1.0;
/// Steps of several orders within this time are one, in seconds; half of it to either side.
const TOGETHER_S: f64 = 1.0;
/// Groups to either side of a step whose phasors are averaged to see whether it keeps phase,
/// and the share of the step that is then left.
const COHERENT_GROUPS: usize = 16;
const LEAST_COHERENT: f64 = 0.6;
/// Least swing told, in decibels.
const LEAST_SWING_DB: f64 = 1.5;

/// What the level does in one capture.
#[derive(Debug, Clone, Default)]
pub(super) struct LevelOverTime {
    pub points: Vec<LevelPoint>,
    pub changes: Vec<LevelChange>,
    /// Lowest and highest level for nine tenths of the time, where it swings by more than
    /// noise shows.
    pub swing_dbfs: Option<(f64, f64)>,
    /// How far the loudest stretch stands over the amplitude averaged along the track.
    pub loudest_db: f64,
}

/// One order in groups of cells.
struct Line {
    order: u32,
    /// Phasors along the track.
    phasors: Vec<Complex64>,
    /// Noise variance of a phasor, both components together.
    noise: f64,
    mean: Complex64,
}

impl Line {
    /// Mean square of a group, less the noise in it.
    fn power(&self, group: usize) -> f64 {
        0.5 * (self.phasors[group].norm_sqr() - self.noise)
    }

    /// Whether the phasors averaged with their phases step as their amplitudes do. A note
    /// near the line does not keep its phase along the track and leaves that average alone.
    fn keeps_phase(&self, step: &Step, ends: &[usize]) -> bool {
        let amplitude = |part: &[Complex64]| (part.iter().sum::<Complex64>() / part.len() as f64).norm();
        let (before, after) = (&self.phasors[ends[0]..step.at], &self.phasors[step.at..ends[2]]);
        let near = |part: usize| part.min(COHERENT_GROUPS);
        let from = amplitude(&before[before.len() - near(before.len())..]);
        let to = amplitude(&after[..near(after.len())]);
        (to - from) / (step.to - step.from) >= LEAST_COHERENT
    }
}

impl LevelOverTime {
    pub fn measure(cells: &Cells, tracked: &Tracked) -> Self {
        let (lines, group) = heard(cells, tracked);
        let groups = lines.first().map_or(0, |line| line.phasors.len());
        if groups < FEWEST_GROUPS {
            return Self::default();
        }
        let group_s = group as f64 * cells.length_s;
        let start_s = cells.time_s[0] - 0.5 * cells.length_s;
        let middle_s = |index: f64| start_s + (index + 0.5) * group_s;
        let mut changes = changes(&lines, group_s, |at| start_s + at as f64 * group_s);
        let points = points(&lines, middle_s);
        let mut swing_dbfs = if changes.is_empty() { swing(&lines, &points) } else { None };
        if let Some((low, high)) = swing_dbfs {
            changes = slow_changes(&lines, &points, low, high);
            swing_dbfs = swing_dbfs.filter(|_| changes.is_empty());
        }
        let coherent: f64 = lines.iter().map(|line| 0.5 * line.mean.norm_sqr()).sum();
        let loudest = if changes.is_empty() && swing_dbfs.is_none() {
            0.0
        } else {
            let mut levels: Vec<f64> = points.iter().map(|point| point.level_dbfs).collect();
            levels.sort_by(f64::total_cmp);
            levels[(levels.len() - 1) * 19 / 20] - power_dbfs(coherent)
        };
        Self { points, changes, swing_dbfs, loudest_db: loudest.max(0.0) }
    }

    /// What is said of it, where the level is not the same all along.
    pub fn note(&self) -> Option<String> {
        if let Some((low, high)) = self.swing_dbfs {
            return Some(format!(
                "the level of the hum swings between {low:.1} and {high:.1} dBFS for nine tenths of the time"
            ));
        }
        let first = self.changes.first()?;
        let others = match self.changes.len() - 1 {
            0 => String::new(),
            1 => "; one more change follows".to_owned(),
            more => format!("; {more} more changes follow"),
        };
        let along: Vec<String> =
            first.orders.iter().filter(|order| **order != first.order).map(u32::to_string).collect();
        let along = match along.len() {
            0 => String::new(),
            1 => format!(", order {} with it", along[0]),
            _ => format!(", orders {} with it", along.join(", ")),
        };
        let how = if first.over_s > 0.0 {
            format!("gradually, half of it by {:.1} s", first.time_s)
        } else {
            format!("a step at {:.1} s", first.time_s)
        };
        Some(format!(
            "the level of order {} changes: from {:.1} to {:.1} dBFS; {how}{along}{others}",
            first.order, first.from_dbfs, first.to_dbfs
        ))
    }
}

/// The strong orders in groups of cells so long that the strongest stands clear of the
/// noise in each, and how many cells a group has.
fn heard(cells: &Cells, tracked: &Tracked) -> (Vec<Line>, usize) {
    let count = cells.count();
    let along = |line: usize| -> Vec<Complex64> {
        let k = f64::from(cells.orders[line]);
        let phase = &tracked.smoothed.phase_rad;
        let offsets = tracked.smoothed.omega.iter().map(|omega| k * omega / TAU);
        turned(cells, line, phase).zip(offsets).map(|(z, hertz)| z / cells.response(hertz).max(0.3)).collect()
    };
    let mut lines: Vec<Line> = (0..cells.orders.len())
        .map(|i| {
            let phasors = along(i);
            let mean = phasors.iter().sum::<Complex64>() / count.max(1) as f64;
            Line { order: cells.orders[i], phasors, noise: 2.0 * cells.variance(i), mean }
        })
        .filter(|line| line.mean.norm_sqr() * count as f64 > HEARD * line.noise)
        .collect();
    let strongest = lines.iter().map(|line| line.mean.norm_sqr()).fold(0.0, f64::max);
    lines.retain(|line| line.mean.norm_sqr() >= LEAST_POWER * strongest);
    lines.sort_by(|a, b| b.mean.norm_sqr().total_cmp(&a.mean.norm_sqr()));
    lines.truncate(MOST_ORDERS);
    let clearest = lines.iter().map(|line| line.mean.norm_sqr() / line.noise).fold(0.0, f64::max);
    let group = ((CLEAR / clearest.max(1e-30)).ceil() as usize).clamp(1, count.max(1));
    for line in &mut lines {
        let parts = line.phasors.chunks_exact(group);
        line.phasors = parts.map(|part| part.iter().sum::<Complex64>() / group as f64).collect();
        line.noise /= group as f64;
    }
    lines.retain(|line| {
        let power = line.phasors.iter().map(Complex64::norm_sqr).sum::<f64>() / line.phasors.len() as f64;
        line.mean.norm_sqr() >= COHERENT * power
    });
    (lines, group)
}

/// Steps of all lines, those at one time together.
fn changes(lines: &[Line], group_s: f64, time_s: impl Fn(usize) -> f64) -> Vec<LevelChange> {
    let shortest = (SHORTEST_S / group_s).ceil() as usize;
    let mut all: Vec<(&Line, Step)> = Vec::new();
    for line in lines {
        let amplitude: Vec<f64> =
            (0..line.phasors.len()).map(|g| (2.0 * line.power(g)).max(0.0).sqrt()).collect();
        let found = steps(&amplitude, (0.5 * line.noise).sqrt(), shortest);
        let least = (0.25 * line.noise).sqrt();
        let told =
            |step: &Step| (20.0 * ((step.to + least) / (step.from + least)).log10()).abs() >= LEAST_STEP_DB;
        let ends: Vec<usize> =
            std::iter::once(0).chain(found.iter().map(|step| step.at)).chain([amplitude.len()]).collect();
        let kept = found
            .iter()
            .zip(ends.windows(3))
            .filter(|(step, ends)| told(step) && line.keeps_phase(step, ends));
        all.extend(kept.map(|(step, _)| (line, *step)));
    }
    all.sort_by_key(|(_, step)| step.at);
    let near = (TOGETHER_S / group_s).ceil() as usize;
    let mut changes = Vec::new();
    while let Some(&(_, first)) = all.first() {
        let count = all.partition_point(|(_, step)| step.at <= first.at + near);
        let together: Vec<(&Line, Step)> = all.drain(..count).collect();
        changes.extend(change(&together, &time_s));
    }
    changes
}

/// Steps at one time as one change: the time, and the levels, of the one of most power.
fn change(together: &[(&Line, Step)], time_s: impl Fn(usize) -> f64) -> Option<LevelChange> {
    let size = |step: &Step| (step.to * step.to - step.from * step.from).abs();
    let (line, step) = together.iter().max_by(|a, b| size(&a.1).total_cmp(&size(&b.1)))?;
    // A line that is gone reads what noise lets one know.
    let level = |amplitude: f64| power_dbfs((0.5 * amplitude * amplitude).max(0.125 * line.noise));
    let mut orders: Vec<u32> = together.iter().map(|(line, _)| line.order).collect();
    orders.sort_unstable();
    orders.dedup();
    Some(LevelChange {
        time_s: time_s(step.at),
        over_s: 0.0,
        order: line.order,
        from_dbfs: level(step.from),
        to_dbfs: level(step.to),
        orders,
    })
}

/// Changes that take their time, between two levels that the sum of all lines keeps.
fn slow_changes(lines: &[Line], points: &[LevelPoint], low: f64, high: f64) -> Vec<LevelChange> {
    let levels: Vec<f64> = points.iter().map(|point| point.level_dbfs).collect();
    let together = lines[0].phasors.len() / points.len();
    let mean_power = |line: &Line, (from, to): (usize, usize)| {
        let groups = from * together..to * together;
        let sum: f64 = groups.clone().map(|group| line.power(group)).sum();
        (sum / groups.len().max(1) as f64).max(0.125 * line.noise)
    };
    let mut changes = Vec::new();
    for run_up in run_ups(&levels, low, high) {
        let powers =
            lines.iter().map(|line| (line, mean_power(line, run_up.before), mean_power(line, run_up.after)));
        let moved: Vec<(&Line, f64, f64)> =
            powers.filter(|(_, from, to)| power_db(to / from).abs() >= LEAST_STEP_DB).collect();
        let most = moved.iter().max_by(|a, b| (a.2 - a.1).abs().total_cmp(&(b.2 - b.1).abs()));
        let Some(&(line, from, to)) = most else { continue };
        let mut orders: Vec<u32> = moved.iter().map(|(line, ..)| line.order).collect();
        orders.sort_unstable();
        changes.push(LevelChange {
            time_s: points[run_up.middle].time_s,
            over_s: points[run_up.end].time_s - points[run_up.start].time_s,
            order: line.order,
            from_dbfs: power_dbfs(from),
            to_dbfs: power_dbfs(to),
            orders,
        });
    }
    changes
}

/// All lines together, in at most so many points as are told.
fn points(lines: &[Line], middle_s: impl Fn(f64) -> f64) -> Vec<LevelPoint> {
    let groups = lines[0].phasors.len();
    let together = groups.div_ceil(MOST_POINTS);
    let least: f64 = lines.iter().map(|line| 0.25 * line.noise).sum();
    (0..groups / together)
        .map(|i| {
            let part = i * together..(i + 1) * together;
            let sum: f64 = part.flat_map(|g| lines.iter().map(move |line| line.power(g))).sum();
            let middle = i as f64 * together as f64 + 0.5 * (together as f64 - 1.0);
            LevelPoint {
                time_s: middle_s(middle),
                level_dbfs: power_dbfs((sum / together as f64).max(least)),
            }
        })
        .collect()
}

/// The 5th and the 95th hundredth of the levels, where they lie apart by more than noise does.
fn swing(lines: &[Line], points: &[LevelPoint]) -> Option<(f64, f64)> {
    let mut levels: Vec<f64> = points.iter().map(|point| point.level_dbfs).collect();
    levels.sort_by(f64::total_cmp);
    let at = |share: f64| levels[((levels.len() - 1) as f64 * share).round() as usize];
    let (low, high) = (at(0.05), at(0.95));
    let together = lines[0].phasors.len() / points.len().max(1);
    let power: f64 = lines.iter().map(|line| line.mean.norm_sqr()).sum();
    // Variance of a sum of powers with noise: 2·signal·noise each.
    let variance: f64 = lines.iter().map(|line| 2.0 * line.mean.norm_sqr() * line.noise).sum();
    let strays = (variance / together.max(1) as f64).sqrt() / power.max(1e-40);
    let by_noise_db = 2.0 * power_db(1.0 + 1.65 * strays);
    let own_db = ((high - low).powi(2) - by_noise_db.powi(2)).max(0.0).sqrt();
    (own_db >= LEAST_SWING_DB && high - low > 1.5 * by_noise_db).then_some((low, high))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::analysis::PhaseTrack;
    use crate::analysis::gather::Gather;
    use crate::analysis::tracker::track;
    use rand::{RngExt, SeedableRng};
    use rand_xoshiro::Xoshiro256PlusPlus;

    const RATE_HZ: f64 = 1000.0;

    /// Orders 1 and 3 with these amplitudes over time, and noise.
    fn level_of(
        duration_s: f64,
        noise_sd: f64,
        phase: impl Fn(f64) -> f64,
        amplitude: impl Fn(f64) -> f64,
    ) -> LevelOverTime {
        let mut random = Xoshiro256PlusPlus::seed_from_u64(5);
        let mut normal = || (0..12).map(|_| random.random::<f64>()).sum::<f64>() - 6.0;
        let samples: Vec<f64> = (0..(RATE_HZ * duration_s) as usize)
            .map(|n| n as f64 / RATE_HZ)
            .map(|t| amplitude(t) * (phase(t).cos() + 0.3 * (3.0 * phase(t)).cos()) + noise_sd * normal())
            .collect();
        let reference = PhaseTrack::constant(50.0, duration_s);
        let mut gather = Gather::new(RATE_HZ, &reference, &[1, 2, 3], samples.len() as u64);
        gather.push(&samples);
        let gathered = gather.finish();
        let tracked = track(&gathered.cells, &[1, 3], 0.3, duration_s).expect("long enough");
        LevelOverTime::measure(&gathered.cells, &tracked)
    }

    fn steady(t: f64) -> f64 {
        TAU * 50.0 * t
    }

    /// A frequency that drifts by 0.1 Hz to either side.
    fn drifting(t: f64) -> f64 {
        TAU * 50.0 * t + 0.1 / 0.05 * (1.0 - (TAU * 0.05 * t).cos())
    }

    #[test]
    fn a_pump_that_switches_on_is_told_with_its_time_and_its_levels() {
        let pump = |t: f64| if t < 12.3 { 0.0035 } else { 0.0178 };
        for phase in [steady as fn(f64) -> f64, drifting] {
            let level = level_of(40.0, 1e-3, phase, pump);
            let [step] = &level.changes[..] else { panic!("{:?}", level.changes) };
            assert!((step.time_s - 12.3).abs() < 0.5, "{step:?}");
            assert!((step.from_dbfs + 49.1).abs() < 0.5 && (step.to_dbfs + 35.0).abs() < 0.5, "{step:?}");
            assert_eq!((step.order, &step.orders[..]), (1, &[1, 3][..]));
            let note = level.note().expect("a note");
            assert!(note.starts_with("the level of order 1 changes: from -49."), "{note}");
            assert!(level.loudest_db > 2.0 && level.loudest_db < 5.0, "{}", level.loudest_db);
        }
    }

    #[test]
    fn a_drift_of_the_frequency_is_no_change_of_level() {
        for noise_sd in [1e-5, 3e-3, 3e-2] {
            let level = level_of(60.0, noise_sd, drifting, |_| 0.02);
            assert!(level.changes.is_empty() && level.swing_dbfs.is_none(), "{:?}", level.note());
            let away = level.points.iter().map(|point| (point.level_dbfs + 33.6).abs()).fold(0.0, f64::max);
            assert!(!level.points.is_empty() && away < 200.0 * noise_sd.max(5e-4), "{noise_sd}: {away} dB");
        }
    }

    #[test]
    fn a_level_that_swings_is_told_as_such_and_not_as_steps() {
        let level = level_of(60.0, 1e-4, steady, |t| 0.02 * (1.0 + 0.4 * (TAU * t / 15.0).sin()));
        assert!(level.changes.is_empty(), "{:?}", level.changes);
        let (low, high) = level.swing_dbfs.expect("a swing");
        // 20·log10(0.6) and 20·log10(1.4), nearly.
        assert!((low + 33.6 + 4.3).abs() < 0.6 && (high + 33.6 - 2.9).abs() < 0.4, "{low} to {high}");
    }

    #[test]
    fn a_pump_that_runs_up_slowly_is_told_as_a_change_and_not_as_a_swing() {
        let pump = |t: f64| 0.02 * (1.0 + 0.4 * (1.0 - (-(t - 40.0).max(0.0) / 8.0).exp()));
        let level = level_of(120.0, 1e-4, steady, pump);
        let [change] = &level.changes[..] else { panic!("{:?}", level.changes) };
        assert!((change.time_s - 45.5).abs() < 2.0 && change.over_s > 4.0, "{change:?}");
        assert!((change.from_dbfs + 34.0).abs() < 0.2 && (change.to_dbfs + 31.1).abs() < 0.3, "{change:?}");
        assert!(level.note().is_some_and(|note| note.contains("gradually")), "{:?}", level.note());
    }

    #[test]
    fn a_quarter_of_an_hour_has_no_more_than_600_points_and_its_step_keeps_its_time() {
        let level = level_of(900.0, 1e-3, steady, |t| if t < 700.0 { 0.01 } else { 0.02 });
        assert!(level.points.len() <= 600 && level.points.len() > 300, "{}", level.points.len());
        assert!((level.changes[0].time_s - 700.0).abs() < 0.5, "{:?}", level.changes);
    }
}
