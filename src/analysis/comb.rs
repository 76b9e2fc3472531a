//! Combs of lines that are there all the time: what tells hum from music.
//!
//! In each bin the median over the segments of power over local noise is taken:
//! a note that sounds for less than half of the time leaves no trace in it. A
//! candidate's score is the sum over its harmonics of how far that median stands
//! above what noise shows, in standard deviations, capped so that no single
//! strong line outweighs a comb.

use super::stays::Stays;
use super::supplies::{FAMILIES, Family, prior};
use super::survey::{SURVEY_TOP_HZ, Surveyed};

/// Orders looked at.
const ORDERS: u32 = 24;
/// Standard deviations that noise reaches often, with so many candidates.
const QUIET: f64 = 3.0;
/// Score from which a further supply is looked at.
const OTHER_SCORE: f64 = 5.0;
/// Most that one line counts.
const CAP: f64 = 12.0;

/// A fundamental that the survey points to.
#[derive(Debug, Clone)]
pub(super) struct Candidate {
    /// Frequency of the fundamental at the middle of each segment.
    pub path_hz: Vec<f64>,
    /// Score: standard deviations above noise, summed over lines.
    pub score: f64,
    /// Mean square of its persistent lines.
    pub power: f64,
    /// Orders that stand out, the clearest first.
    pub orders: Vec<u32>,
    /// Where it is there, if not all the time.
    pub stays: Option<Stays>,
}

impl Candidate {
    /// Mean over the segments.
    pub fn mean_hz(&self) -> f64 {
        self.path_hz.iter().sum::<f64>() / self.path_hz.len() as f64
    }
}

/// The best candidate of each family, in the sequence of the families.
pub(super) fn candidates(survey: &Surveyed, sample_rate_hz: f64) -> Vec<Candidate> {
    if survey.ratios.is_empty() {
        return Vec::new();
    }
    let view = View::new(survey, sample_rate_hz);
    FAMILIES.iter().filter_map(|family| view.best(family)).collect()
}

/// Candidates once all lines of another are taken out: further supplies.
pub(super) fn candidates_besides(survey: &Surveyed, sample_rate_hz: f64, main: &Candidate) -> Vec<Candidate> {
    let mut view = View::new(survey, sample_rate_hz);
    let lowest_hz = main.path_hz.iter().copied().fold(f64::MAX, f64::min);
    let highest_hz = main.path_hz.iter().copied().fold(0.0, f64::max);
    // A main lobe of the survey's window, and as much again for strong lines.
    let beside_hz = 8.0 * survey.bin_hz;
    for (m, standing) in view.standing.iter_mut().enumerate() {
        let f = m as f64 * survey.bin_hz;
        let order = (f / main.mean_hz()).round().max(1.0);
        if f > order * lowest_hz - beside_hz && f < order * highest_hz + beside_hz {
            *standing = 0.0;
        }
    }
    FAMILIES
        .iter()
        .filter_map(|family| view.best_steady(family))
        .filter(|other| other.score >= OTHER_SCORE)
        .collect()
}

struct View<'a> {
    survey: &'a Surveyed,
    /// Median over time of each bin, as standard deviations above noise.
    standing: Vec<f64>,
    top_hz: f64,
}

impl<'a> View<'a> {
    fn new(survey: &'a Surveyed, sample_rate_hz: f64) -> Self {
        let bins = survey.ratios[0].len();
        let mut column = Vec::with_capacity(survey.ratios.len());
        let standing = (0..bins)
            .map(|m| {
                column.clear();
                column.extend(survey.ratios.iter().map(|segment| f64::from(segment[m])));
                deviations(&mut column, survey.independent)
            })
            .collect();
        Self { survey, standing, top_hz: SURVEY_TOP_HZ.min(0.5 * sample_rate_hz) }
    }

    fn best(&self, family: &Family) -> Option<Candidate> {
        let grid = self.grid(family);
        let steady = self.steadiest(&grid)?;
        let steady = self.along(vec![steady; self.survey.ratios.len()]);
        let Some(path) = self.wandering_path(&grid) else { return Some(steady) };
        let wandering = self.along(path);
        // A path that is free to wander always finds a little more.
        let best = if wandering.score > 1.25 * steady.score + 4.0 { wandering } else { steady };
        Some(best)
    }

    /// As [`View::best`], by the standing of the bins alone.
    fn best_steady(&self, family: &Family) -> Option<Candidate> {
        let steady = self.steadiest(&self.grid(family))?;
        let standing = |line: f64| counted(interpolated(&self.standing, line / self.survey.bin_hz));
        let orders: Vec<u32> =
            self.orders(steady).filter(|&(_, line)| standing(line) > 0.0).map(|(k, _)| k).collect();
        let path_hz = vec![steady; self.survey.ratios.len()];
        Some(Candidate {
            path_hz,
            score: self.steady_score(steady) * prior(steady),
            power: 0.0,
            orders,
            stays: None,
        })
    }

    fn grid(&self, family: &Family) -> Vec<f64> {
        let step_hz = 0.04 * self.survey.bin_hz * (family.from_hz / 50.0).max(0.5);
        let count = ((family.to_hz - family.from_hz) / step_hz) as usize;
        let all = (0..=count).map(|i| family.from_hz + i as f64 * step_hz);
        all.filter(|&f| f < self.top_hz).collect()
    }

    fn steadiest(&self, grid: &[f64]) -> Option<f64> {
        let scored = grid.iter().map(|&f| (f, self.steady_score(f) * prior(f)));
        // A strong line counts alike as far as its lobe reaches: of equals the clearest.
        let clearest = |f: f64| self.power_on_lines(f);
        let better = |a: &(f64, f64), b: &(f64, f64)| {
            a.1.total_cmp(&b.1).then_with(|| clearest(a.0).total_cmp(&clearest(b.0)))
        };
        scored.max_by(better).map(|(f, _)| f)
    }

    fn orders(&self, f: f64) -> impl Iterator<Item = (u32, f64)> + use<> {
        let top_hz = self.top_hz;
        (1..=ORDERS).map(move |k| (k, f64::from(k) * f)).take_while(move |&(_, line)| line <= top_hz)
    }

    fn steady_score(&self, f: f64) -> f64 {
        self.orders(f)
            .map(|(k, line)| weight(k) * counted(interpolated(&self.standing, line / self.survey.bin_hz)))
            .sum()
    }

    /// Power on the lines that stand out: what neither the limit to a line's score nor that
    /// to its ratio to the noise levels out.
    fn power_on_lines(&self, f: f64) -> f64 {
        let heard = self.orders(f).map(|(_, line)| line / self.survey.bin_hz);
        let heard = heard.filter(|&at| counted(interpolated(&self.standing, at)) > 0.0);
        let power = |at: f64| self.survey.powers.iter().map(|row| interpolated_f32(row, at)).sum::<f64>();
        heard.map(power).sum()
    }

    /// Score and orders along a path of the fundamental.
    fn along(&self, path_hz: Vec<f64>) -> Candidate {
        let lowest = path_hz.iter().copied().fold(f64::MAX, f64::min);
        let mut found: Vec<(u32, f64)> = Vec::new();
        let (mut score, mut power) = (0.0, 0.0);
        for (k, _) in self.orders(lowest) {
            let at = |f: &f64| f64::from(k) * f / self.survey.bin_hz;
            let read = |rows: &[Vec<f32>]| -> Vec<f64> {
                rows.iter().zip(&path_hz).map(|(row, f)| interpolated_f32(row, at(f))).collect()
            };
            let standing = deviations(&mut read(&self.survey.ratios), self.survey.independent);
            if counted(standing) > 0.0 {
                score += weight(k) * counted(standing);
                power += median(&mut read(&self.survey.powers));
                found.push((k, standing));
            }
        }
        found.sort_by(|a, b| b.1.total_cmp(&a.1));
        score *= prior(path_hz.iter().sum::<f64>() / path_hz.len() as f64);
        let orders = found.into_iter().map(|(k, _)| k).collect();
        Candidate { path_hz, score, power, orders, stays: None }
    }

    /// The path of the best sum of clipped scores that moves little from
    /// segment to segment (Viterbi 1967).
    fn wandering_path(&self, grid: &[f64]) -> Option<Vec<f64>> {
        let usable = grid.iter().take_while(|&&f| f < self.top_hz).count();
        // Every third candidate and steps of so many will do for a path.
        let grid: Vec<f64> = grid[..usable].iter().copied().step_by(3).collect();
        if grid.len() < 3 {
            return None;
        }
        let step_s = match self.survey.times_s[..] {
            [a, b, ..] => b - a,
            _ => return None,
        };
        let reach = ((1.0 * step_s / (grid[1] - grid[0])) as usize).clamp(1, 25);
        let local = |row: &[f32], f: f64| -> f64 {
            self.orders(f)
                .map(|(k, line)| {
                    weight(k) * interpolated_f32(row, line / self.survey.bin_hz).max(1.0).ln().min(3.0)
                })
                .sum()
        };
        let mut total: Vec<f64> = grid.iter().map(|&f| local(&self.survey.ratios[0], f)).collect();
        let mut back: Vec<Vec<u8>> = Vec::new();
        for row in &self.survey.ratios[1..] {
            let mut from = vec![0u8; grid.len()];
            let mut next = vec![0.0; grid.len()];
            for i in 0..grid.len() {
                let low = i.saturating_sub(reach);
                let high = (i + reach).min(grid.len() - 1);
                let cost = |j: usize| total[j] - 0.25 * (j.abs_diff(i)) as f64;
                let best = (low..=high).max_by(|&a, &b| cost(a).total_cmp(&cost(b))).unwrap_or(i);
                from[i] = (best + reach - i) as u8;
                next[i] = cost(best) + local(row, grid[i]);
            }
            total = next;
            back.push(from);
        }
        let mut at = (0..grid.len()).max_by(|&a, &b| total[a].total_cmp(&total[b]))?;
        let mut path = vec![grid[at]];
        for from in back.iter().rev() {
            at = at + usize::from(from[at]) - reach;
            path.push(grid[at]);
        }
        path.reverse();
        Some(path)
    }
}

/// Low orders are the likelier ones.
pub(super) fn weight(order: u32) -> f64 {
    1.0 / (1.0 + 0.05 * f64::from(order - 1))
}

fn counted(standing: f64) -> f64 {
    (standing.min(QUIET + CAP) - QUIET).max(0.0)
}

/// Median of ratios as standard deviations above the median of noise: the
/// logarithm of the median of n exponentials strays by 1/(ln 2·√n).
fn deviations(ratios: &mut [f64], independent: f64) -> f64 {
    let above = (median(ratios) / std::f64::consts::LN_2).max(1e-3).ln();
    above * independent.sqrt() * std::f64::consts::LN_2
}

fn median(values: &mut [f64]) -> f64 {
    let middle = values.len() / 2;
    let (low, &mut high, _) = values.select_nth_unstable_by(middle, f64::total_cmp);
    let below = low.iter().copied().fold(f64::MIN, f64::max);
    if values.len().is_multiple_of(2) { 0.5 * (below + high) } else { high }
}

fn interpolated(values: &[f64], at: f64) -> f64 {
    let i = (at as usize).min(values.len() - 1);
    let next = (i + 1).min(values.len() - 1);
    let u = (at - i as f64).clamp(0.0, 1.0);
    values[i] * (1.0 - u) + values[next] * u
}

fn interpolated_f32(values: &[f32], at: f64) -> f64 {
    let i = (at as usize).min(values.len() - 1);
    let next = (i + 1).min(values.len() - 1);
    let u = (at - i as f64).clamp(0.0, 1.0);
    f64::from(values[i]) * (1.0 - u) + f64::from(values[next]) * u
}
