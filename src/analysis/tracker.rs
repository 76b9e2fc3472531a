//! The phase of the line from the phasors of all its harmonics.
//!
//! Three steps. A search over windows, as long as the wander allows, finds the
//! offset from the reference that fits all clear harmonics together. The phase of
//! the clearest harmonic then joins the windows. Last, phases measured in every
//! cell by all significant harmonics, each with weight k²Aₖ²/noise (the Gauss–Newton
//! step of the joint least squares), go through the Kalman smoother, again and again
//! until nothing moves.

use super::heavy_tail::{HeavyTail, median, typical_variance};
use super::kalman::{Advance, Phases, Smoothed};
use super::phasors::{BlockPhasors, block_response};
use super::presence::{is_there_throughout, share_present};
use super::stays::Stay;
use num_complex::Complex64;
use rayon::prelude::*;
use std::f64::consts::{LN_2, TAU};
use std::sync::Arc;

/// Longest window of the search in seconds.
const LONGEST_WINDOW_S: f64 = 32.0;
/// Offsets that the search tries side by side.
const TOGETHER: usize = 8;
/// Rounds of the last step.
const ROUNDS: usize = 8;
/// Of these, so many in which cells differ in worth only by what they read: until the track is
/// found, cells that it has not reached look as if programme disturbed them.
const PLAIN_ROUNDS: usize = 3;
/// A harmonic counts from this ratio of power to noise in 1/T.
const SIGNIFICANT: f64 = 8.0;
/// What a window of its own must gain, in nats.
const WINDOW_COST: f64 = 2.0;
/// Power over the noise of a component from which one cell tells whether a line is there:
/// a tenth of the amplitude is then three standard deviations.
const CLEAR_IN_A_CELL: f64 = 900.0;
/// Share of the mean amplitude under which the line is taken to be gone (20 dB).
const GONE: f64 = 0.1;
/// Variance of a phase that nothing is known of, in rad²: many turns.
const UNKNOWN: f64 = 1e4;
/// Nats of a line that are told from noise.
const TOLD_NATS: f64 = 6.0;
/// Phasors are limited in the search to so many times the typical one.
const LARGEST: f64 = 2.5;

/// Phasors averaged over a few blocks, so that neighbours are nearly independent.
#[derive(Debug, Clone)]
pub(super) struct Cells {
    pub orders: Vec<u32>,
    pub length_s: f64,
    pub time_s: Vec<f64>,
    /// By order, then by cell.
    pub values: Vec<Vec<Complex64>>,
    /// One-sided noise density around each order: mean square per hertz.
    pub density: Vec<f64>,
    /// Part of a whole cell that each is made of: the last may be short.
    share: Vec<f64>,
    blocks: usize,
    gathered: usize,
    sums: Vec<Complex64>,
    sum_time: f64,
}

impl Cells {
    /// Cells of so many blocks, with room for so many of them.
    pub fn new(orders: &[u32], hop_s: f64, blocks: usize, room: usize) -> Self {
        Self {
            orders: orders.to_vec(),
            length_s: blocks as f64 * hop_s,
            time_s: Vec::with_capacity(room),
            values: orders.iter().map(|_| Vec::with_capacity(room)).collect(),
            density: Vec::new(),
            share: Vec::with_capacity(room),
            blocks,
            gathered: 0,
            sums: vec![Complex64::ZERO; orders.len()],
            sum_time: 0.0,
        }
    }

    /// Takes a block in.
    pub fn take(&mut self, block: &BlockPhasors) {
        for (sum, value) in self.sums.iter_mut().zip(&block.values) {
            *sum += value;
        }
        self.sum_time += block.time_s;
        self.gathered += 1;
        if self.gathered == self.blocks {
            self.close();
        }
    }

    /// Closes the last cell, which may be short.
    pub fn finish(&mut self) {
        if self.gathered > 0 && self.count() > 0 {
            self.close();
        }
    }

    fn close(&mut self) {
        let share = 1.0 / self.gathered as f64;
        for (line, sum) in self.values.iter_mut().zip(&mut self.sums) {
            line.push(*sum * share);
            *sum = Complex64::ZERO;
        }
        self.time_s.push(self.sum_time * share);
        self.share.push(self.gathered as f64 / self.blocks as f64);
        (self.gathered, self.sum_time) = (0, 0.0);
    }

    /// The cells of a stretch of time, which begins at 0.
    pub fn during(&self, stay: &Stay) -> Self {
        let inside = |t: f64| stay.from_s <= t - 0.5 * self.length_s && t + 0.5 * self.length_s <= stay.to_s;
        let kept: Vec<usize> = (0..self.count()).filter(|&b| inside(self.time_s[b])).collect();
        Self {
            time_s: kept.iter().map(|&b| self.time_s[b] - stay.from_s).collect(),
            values: self.values.iter().map(|line| kept.iter().map(|&b| line[b]).collect()).collect(),
            share: kept.iter().map(|&b| self.share[b]).collect(),
            ..self.clone()
        }
    }

    /// All cells, empty outside some stretches of time: they say nothing there.
    pub fn only_during(mut self, stays: &[Stay]) -> Self {
        for b in 0..self.count() {
            let t = self.time_s[b];
            if !stays.iter().any(|stay| stay.from_s < t && t < stay.to_s) {
                self.share[b] = 0.0;
                self.values.iter_mut().for_each(|line| line[b] = Complex64::ZERO);
            }
        }
        self
    }

    pub fn count(&self) -> usize {
        self.time_s.len()
    }

    /// Cells but for a last one that is short.
    pub fn whole(&self) -> usize {
        self.share.iter().take_while(|share| **share == 1.0).count()
    }

    /// What a whole cell reads of a line so far off its reference, against one on it.
    pub fn response(&self, offset_hz: f64) -> f64 {
        self.response_of(self.blocks as f64, offset_hz)
    }

    /// What a cell of so many blocks reads of a line so far off its reference.
    fn response_of(&self, blocks: f64, offset_hz: f64) -> f64 {
        let hop_s = self.length_s / self.blocks as f64;
        let half_turn = std::f64::consts::PI * offset_hz * hop_s;
        let mean = if half_turn.sin().abs() < 1e-9 {
            1.0
        } else {
            (blocks * half_turn).sin() / (blocks * half_turn.sin())
        };
        block_response(offset_hz, hop_s) * mean
    }

    /// What each cell reads of a line whose phase moves against the reference, against one that
    /// stands still: the last cell may be shorter, and reads more.
    fn responses(&self, line: usize, phase: &[f64]) -> Vec<f64> {
        let k = f64::from(self.orders[line]);
        let last = phase.len() - 1;
        let one = |b: usize| {
            let (from, to) = (b.saturating_sub(1), (b + 1).min(last));
            let offset_hz = (phase[to] - phase[from]) / (TAU * (self.time_s[to] - self.time_s[from]));
            self.response_of((self.share[b] * self.blocks as f64).round().max(1.0), k * offset_hz)
        };
        (0..=last).map(one).collect()
    }

    /// Noise variance of each component of a cell.
    pub fn variance(&self, line: usize) -> f64 {
        let values = &self.values[line];
        let power = values.iter().map(Complex64::norm_sqr).sum::<f64>() / values.len().max(1) as f64;
        // Where nothing but the line is there, arithmetic is the noise.
        (self.density[line] / self.length_s).max(1e-12 * power).max(1e-34)
    }
}

/// What the tracker found.
#[derive(Debug, Clone)]
pub(super) struct Tracked {
    /// Offset from the reference's phase, by cell.
    pub smoothed: Smoothed,
    /// The phases that went into the smoother.
    pub phases: Phases,
    /// Wander of the angular frequency, rad²/s³.
    pub wander: f64,
    /// Advance of the offset over the capture.
    pub advance: Advance,
    /// Orders followed.
    pub orders: Vec<u32>,
    /// How each stands, in their sequence.
    pub lines: Vec<Line>,
}

impl Tracked {
    /// How an order stands; `None` where it was not followed.
    pub fn line_of(&self, order: u32) -> Option<&Line> {
        self.orders.iter().position(|followed| *followed == order).map(|i| &self.lines[i])
    }
}

/// How one harmonic stands in the cells.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct Line {
    /// Power over noise in 1/T from medians over time: what comes and goes does not count.
    pub lasting: f64,
    /// Median over time of its amplitude over the mean one: 1 for a steady line.
    pub steadiness: f64,
    /// Share of the time for which it is there, see [`share_present`].
    pub presence: f64,
    /// Whether it is there in nearly every cell, see [`is_there_throughout`].
    pub throughout: bool,
    /// Mean square.
    pub power: f64,
}

/// Tracks the phase; `clear` are the orders to begin with, the clearest first,
/// `reach_hz` how far off the fundamental may be.
pub(super) fn track(cells: &Cells, clear: &[u32], reach_hz: f64, duration_s: f64) -> Option<Tracked> {
    if cells.count() < 4 {
        return None;
    }
    let start = Search::new(cells, clear, reach_hz)?;
    let mut phase = start.joined_phase();
    let lead_order = f64::from(cells.orders[start.lead()]);
    let mut phase_sd = 0.5 / lead_order;
    let mut judged = phase.clone();
    let mut found = None;
    for round in 0..ROUNDS {
        let look = Look {
            phase: &phase,
            judged: &judged,
            phase_sd,
            lead: start.lead(),
            robust: round >= PLAIN_ROUNDS,
        };
        let (phases, apart) = measured_phases(cells, &look);
        let wander = phases.likeliest_wander().min(quickest_wander(&phases));
        let smoothed = phases.smoothed(wander);
        let count = phase.len() as f64;
        let moved =
            phase.iter().zip(&smoothed.phase_rad).map(|(a, b)| (a - b) * (a - b)).sum::<f64>() / count;
        let posterior = smoothed.phase_variance.iter().sum::<f64>() / count;
        phase_sd = (posterior + 0.1 * moved).sqrt();
        phase.clone_from(&smoothed.phase_rad);
        judged = by_the_others(&phases, &smoothed);
        found = Some((phases, apart, wander, smoothed));
    }
    let (phases, apart, wander, smoothed) = found?;
    let mut advance = phases.advance(wander, duration_s);
    advance.variance /= 1.0 - apart;
    let lines = (0..cells.orders.len()).map(|i| standing(cells, i, &smoothed.phase_rad)).collect();
    let orders = cells.orders.clone();
    Some(Tracked { smoothed, phases, wander, advance, orders, lines })
}

/// The quickest wander that can be told from noise: over the smoother's time constant, the
/// fourth root of R·Δ/q, the line must be told for itself. A quicker smoother follows the noise,
/// and finds it the more likely the more it does.
fn quickest_wander(phases: &Phases) -> f64 {
    let count = phases.time_s.len();
    let length_s = (phases.time_s[count - 1] - phases.time_s[0]).max(1e-9);
    // Information on the phase in a second: 1/(R·Δ).
    let in_a_second = phases.variance.iter().map(|variance| 1.0 / variance).sum::<f64>() / length_s;
    in_a_second.powi(3) / (2.0 * TOLD_NATS).powi(4)
}

/// Along what, and how, the phases of one round are measured.
struct Look<'a> {
    phase: &'a [f64],
    /// The phase by which a cell's noise is judged.
    judged: &'a [f64],
    phase_sd: f64,
    lead: usize,
    robust: bool,
}

/// The phase of each cell as all other cells tell it. A track that wanders runs through the cells
/// that count most; judged by that, they would look quiet, and count the more.
fn by_the_others(phases: &Phases, smoothed: &Smoothed) -> Vec<f64> {
    let shares = smoothed.phase_variance.iter().zip(&phases.variance).map(|(own, all)| (own / all).min(0.9));
    let both = smoothed.phase_rad.iter().zip(&phases.phase_rad);
    both.zip(shares).map(|((smooth, seen), h)| smooth - h / (1.0 - h) * (seen - smooth)).collect()
}

/// One measured phase a cell, by all significant harmonics together, and the share of their
/// information on frequency that goes into each harmonic's own phase.
fn measured_phases(cells: &Cells, look: &Look) -> (Phases, f64) {
    let Look { phase, judged, phase_sd, lead, robust } = *look;
    let count = cells.count();
    let (mut pull, mut information) = (vec![0.0; count], vec![0.0; count]);
    let mut lines: Vec<(usize, f64)> = Vec::new();
    for line in 0..cells.orders.len() {
        let k = f64::from(cells.orders[line]);
        let mean = mean_of(turned(cells, line, phase), cells);
        let ratio = mean.norm_sqr() * count as f64 / (2.0 * cells.variance(line));
        if ratio > SIGNIFICANT && k * phase_sd < 0.6 {
            lines.push((line, k));
        }
    }
    if lines.is_empty() {
        lines.push((lead, f64::from(cells.orders[lead])));
    }
    let mut middles = Middles::default();
    for (line, k) in lines {
        let mut own = Middle::default();
        let seen = Seen {
            turned: turned(cells, line, phase).collect(),
            judged: turned(cells, line, judged).collect(),
            reads: cells.responses(line, phase),
        };
        let Worth { mean, variance, typical, weights, efficiency } =
            weighted_mean(&seen, cells, cells.variance(line), robust);
        for (b, z) in seen.turned.iter().enumerate() {
            let weight = cells.share[b] * weights.as_ref().map_or(1.0, |w| w[b]) / variance;
            let there = seen.reads[b] * share_there(*z, mean * seen.reads[b], typical);
            pull[b] += weight * k * there * mean.norm_sqr() * stray(*z, mean * there, variance) * there;
            let told = efficiency * weight * k * k * there * there * mean.norm_sqr();
            information[b] += told;
            own.take(cells.time_s[b], told);
        }
        middles.0.push(own);
    }
    let least = 1e-13;
    let phases = Phases {
        time_s: cells.time_s.clone(),
        phase_rad: (0..count).map(|b| phase[b] + pull[b] / information[b].max(1e-30)).collect(),
        variance: information.iter().map(|i| (1.0 / i.max(1e-30)).clamp(least, UNKNOWN)).collect(),
    };
    (phases, middles.share_apart())
}

/// Where in time the information of one harmonic lies.
#[derive(Default)]
struct Middle {
    sum: f64,
    first: f64,
    second: f64,
}

impl Middle {
    fn take(&mut self, time_s: f64, information: f64) {
        self.sum += information;
        self.first += information * time_s;
        self.second += information * time_s * time_s;
    }
}

/// The same of all harmonics.
#[derive(Default)]
struct Middles(Vec<Middle>);

impl Middles {
    /// Each harmonic's own phase is unknown, so that what harmonics heard at different times say
    /// of each other is lost: the spread between their middles over the spread of all.
    fn share_apart(&self) -> f64 {
        let sum = |part: fn(&Middle) -> f64| self.0.iter().map(part).sum::<f64>();
        let (total, first, second) = (sum(|m| m.sum), sum(|m| m.first), sum(|m| m.second));
        let whole = second - first * first / total.max(1e-30);
        let within = sum(|m| m.second - m.first * m.first / m.sum.max(1e-30));
        (1.0 - within / whole.max(1e-30)).clamp(0.0, 0.9)
    }
}

/// A line's phasors along a track, and what each cell reads of the line's amplitude.
struct Seen {
    turned: Vec<Complex64>,
    /// As the other cells tell the phase.
    judged: Vec<Complex64>,
    reads: Vec<f64>,
}

impl Seen {
    /// The amplitude that fits best, each cell with a weight of its own.
    fn mean(&self, weight: impl Fn(usize) -> f64) -> Complex64 {
        let (mut sum, mut total) = (Complex64::ZERO, 1e-30);
        for (b, (z, reads)) in self.turned.iter().zip(&self.reads).enumerate() {
            sum += weight(b) * reads * z;
            total += weight(b) * reads * reads;
        }
        sum / total
    }

    /// Squared distance of each cell from what it should read.
    fn squares(&self, mean: Complex64) -> Vec<f64> {
        self.judged.iter().zip(&self.reads).map(|(z, reads)| (z - mean * reads).norm_sqr()).collect()
    }
}

/// Angle of a cell to what it should read: where the cell tells it clearly, the angle itself,
/// elsewhere the part across, which noise does not wrap.
fn stray(z: Complex64, expected: Complex64, variance: f64) -> f64 {
    let turned = expected.conj() * z;
    let amplitude = (z.norm_sqr() / expected.norm_sqr().max(1e-40)).sqrt();
    if expected.norm_sqr() > CLEAR_IN_A_CELL * variance && (0.5..2.0).contains(&amplitude) {
        turned.arg()
    } else {
        turned.im / expected.norm_sqr().max(1e-40)
    }
}

/// Amplitude of a line in a cell over its mean one, where that tells that it is gone: a
/// cell without the line says nothing of its phase. Elsewhere 1.
fn share_there(z: Complex64, mean: Complex64, variance: f64) -> f64 {
    let share = (z.norm_sqr() / mean.norm_sqr().max(1e-40)).sqrt();
    if mean.norm_sqr() > CLEAR_IN_A_CELL * variance && share < GONE { share } else { 1.0 }
}

fn mean_of(values: impl Iterator<Item = Complex64>, cells: &Cells) -> Complex64 {
    let total: f64 = cells.share.iter().sum();
    values.zip(&cells.share).map(|(z, share)| z * share).sum::<Complex64>() / total
}

/// A line's phasors against a phase of the fundamental, given cell by cell.
pub(super) fn turned<'a>(
    cells: &'a Cells,
    line: usize,
    phase: &'a [f64],
) -> impl Iterator<Item = Complex64> + 'a {
    let k = f64::from(cells.orders[line]);
    cells.values[line].iter().zip(phase).map(move |(z, p)| z * Complex64::cis(-k * p))
}

/// A line's phasors in short cells, turned along the track of the longer ones.
pub(super) fn along_track(fine: &Cells, line: usize, tracked: &Tracked) -> Vec<Complex64> {
    let times = tracked.phases.time_s.iter().copied();
    let knots: Vec<(f64, f64)> = times.zip(tracked.smoothed.phase_rad.iter().copied()).collect();
    let phase: Vec<f64> = fine.time_s.iter().map(|&t| between(&knots, t)).collect();
    turned(fine, line, &phase).collect()
}

/// What the cells of a line are worth.
struct Worth {
    /// Mean phasor.
    mean: Complex64,
    /// Noise variance of a component.
    variance: f64,
    /// The same in a typical cell: of hum that is switched the first is mostly its own coming and going.
    typical: f64,
    /// Weights where the noise is so heavy-tailed (music, clicks) that cells differ.
    weights: Option<Vec<f64>>,
    /// What the weights' sum tells of a position, over what it seems to.
    efficiency: f64,
}

fn weighted_mean(seen: &Seen, cells: &Cells, variance: f64, robust: bool) -> Worth {
    let mut mean = component_median(&seen.turned);
    let typical = typical_variance(&seen.squares(mean));
    let even =
        |mean| Worth { mean, variance, typical: typical.min(variance), weights: None, efficiency: 1.0 };
    let has_gaps = cells.share.contains(&0.0);
    if !robust || has_gaps || seen.turned.len() < 16 || typical > 0.5 * variance {
        return even(seen.mean(|b| cells.share[b]));
    }
    let mut tail = HeavyTail::likeliest(&seen.squares(mean));
    let mut weights = Vec::new();
    for round in 0..6 {
        let squares = seen.squares(mean);
        if round == 3 {
            tail = HeavyTail::likeliest(&squares);
        }
        weights = squares.iter().map(|square| tail.weight(*square)).collect();
        mean = seen.mean(|b| weights[b]);
    }
    let variance = tail.variance;
    Worth { mean, variance, typical: variance, weights: Some(weights), efficiency: tail.efficiency() }
}

/// How a harmonic stands along the track.
fn standing(cells: &Cells, line: usize, phase: &[f64]) -> Line {
    let count = cells.count();
    let group = (count / 24).max(1);
    let turned: Vec<Complex64> = turned(cells, line, phase).collect();
    let groups: Vec<Complex64> =
        turned.chunks_exact(group).map(|part| part.iter().sum::<Complex64>() / group as f64).collect();
    let middle = component_median(&groups);
    let mut squares: Vec<f64> = groups.iter().map(|z| (z - middle).norm_sqr()).collect();
    let expected = 2.0 * cells.variance(line) / group as f64;
    let mut scatter = median(&mut squares) / LN_2;
    if groups.len() < 16 {
        scatter = scatter.max(expected);
    }
    let scatter = scatter.max(1e-34).max(1e-3 * expected);
    // The median of n Gaussians strays π/2 as much, in power, as their mean.
    let lasting = middle.norm_sqr() * groups.len() as f64 / (scatter * std::f64::consts::FRAC_PI_2);
    let mean = groups.iter().sum::<Complex64>() / groups.len() as f64;
    let steadiness = (mean.conj() * middle).re / mean.norm_sqr().max(1e-40);
    let throughout = is_there_throughout(&turned, mean);
    let power = 0.5 * (mean.norm_sqr() - scatter / groups.len() as f64).max(0.0);
    let presence = share_present(&turned);
    Line { lasting, steadiness: steadiness.clamp(0.0, 2.0), presence, throughout, power }
}

fn component_median(values: &[Complex64]) -> Complex64 {
    let mut re: Vec<f64> = values.iter().map(|z| z.re).collect();
    let mut im: Vec<f64> = values.iter().map(|z| z.im).collect();
    Complex64::new(median(&mut re), median(&mut im))
}

/// The windowed search for the offset from the reference.
struct Search<'a> {
    cells: &'a Cells,
    /// Lines to use.
    lines: Arc<[SearchLine]>,
    window: usize,
    fits: Vec<Fit>,
}

/// One harmonic in the search.
#[derive(Clone)]
struct SearchLine {
    line: usize,
    order: f64,
    /// Phasors, none larger than a few times the typical one: a click or a heart
    /// beat must not decide a window.
    values: Vec<Complex64>,
    /// Noise variance of a component.
    variance: f64,
}

impl SearchLine {
    fn new(cells: &Cells, line: usize) -> Self {
        let values = &cells.values[line];
        let most = LARGEST
            * median(&mut values.iter().map(|z| z.norm()).filter(|size| *size > 0.0).collect::<Vec<_>>());
        let values: Vec<Complex64> =
            values.iter().map(|z| z * (most / z.norm().max(1e-30)).min(1.0)).collect();
        // Where limiting took noise away, the noise is what differs from cell to cell.
        let differences = values.windows(2).map(|pair| (pair[1] - pair[0]).norm_sqr()).sum::<f64>();
        let left = differences / (4.0 * (values.len().max(2) - 1) as f64);
        let variance = cells.variance(line).min(left).max(1e-3 * cells.variance(line));
        Self { line, order: f64::from(cells.orders[line]), values, variance }
    }

    /// Σ z e^(−j2πk·offset·t) over the cells of a window, by Horner's rule.
    fn sum_at(&self, bounds: (usize, usize), offset_hz: f64, cell_s: f64) -> Complex64 {
        self.sums_at(bounds, [offset_hz; TOGETHER], cell_s)[0]
    }

    /// [`Self::sum_at`] at several offsets side by side: each product of one waits for its last.
    fn sums_at(
        &self,
        bounds: (usize, usize),
        offsets_hz: [f64; TOGETHER],
        cell_s: f64,
    ) -> [Complex64; TOGETHER] {
        let steps = offsets_hz.map(|offset_hz| Complex64::cis(-TAU * self.order * offset_hz * cell_s));
        let (step_re, step_im) = (steps.map(|step| step.re), steps.map(|step| step.im));
        let (mut re, mut im) = ([0.0; TOGETHER], [0.0; TOGETHER]);
        for z in self.values[bounds.0..bounds.1].iter().rev() {
            for i in 0..TOGETHER {
                let turned = re[i] * step_re[i] - im[i] * step_im[i];
                im[i] = re[i] * step_im[i] + im[i] * step_re[i] + z.im;
                re[i] = turned + z.re;
            }
        }
        std::array::from_fn(|i| Complex64::new(re[i], im[i]))
    }
}

/// Best offset in one window.
#[derive(Clone, Copy)]
struct Fit {
    middle_s: f64,
    offset_hz: f64,
    /// Log-likelihood over what noise would give.
    gain: f64,
}

impl<'a> Search<'a> {
    fn new(cells: &'a Cells, clear: &[u32], reach_hz: f64) -> Option<Self> {
        let position = |k: &u32| cells.orders.iter().position(|order| order == k);
        let mut chosen: Vec<usize> = clear.iter().filter_map(position).collect();
        // Low orders carry the search over the widest range.
        if chosen.iter().any(|&i| cells.orders[i] <= 12) {
            chosen.retain(|&i| cells.orders[i] <= 12);
        }
        chosen.truncate(8);
        if chosen.is_empty() {
            chosen = (0..cells.orders.len().min(3)).collect();
        }
        if chosen.is_empty() {
            return None;
        }
        let lines: Arc<[SearchLine]> = chosen.into_iter().map(|i| SearchLine::new(cells, i)).collect();
        let longest = ((LONGEST_WINDOW_S / cells.length_s) as usize).clamp(4, cells.count());
        let shortest = ((1.0 / cells.length_s) as usize).clamp(4, longest);
        let lengths = std::iter::successors(Some(longest), |&n| (n / 2 >= shortest).then_some(n / 2));
        let mut tried: Vec<Self> = lengths
            .map(|window| {
                let mut search = Self { cells, lines: lines.clone(), window, fits: Vec::new() };
                search.fit_all(reach_hz);
                search
            })
            .collect();
        let most = tried.iter().map(Self::gain).fold(f64::MIN, f64::max);
        // The longest that holds nearly all: long windows do not slip a cycle.
        let chosen = tried.iter().position(|search| search.gain() >= most - 0.12 * most.abs())?;
        Some(tried.swap_remove(chosen))
    }

    fn gain(&self) -> f64 {
        self.fits.iter().map(|fit| fit.gain).sum()
    }

    /// The line with the most power over noise.
    fn lead(&self) -> usize {
        let best = self.lines.iter().max_by(|a, b| self.strength(a).total_cmp(&self.strength(b)));
        best.map_or(0, |line| line.line)
    }

    fn strength(&self, line: &SearchLine) -> f64 {
        let sums = self.fits.iter().enumerate();
        let power =
            sums.map(|(w, fit)| line.sum_at(self.bounds(w), fit.offset_hz, self.cells.length_s).norm_sqr());
        power.sum::<f64>() / line.variance
    }

    fn bounds(&self, window: usize) -> (usize, usize) {
        let count = self.cells.count();
        let parts = count.div_ceil(self.window);
        (window * count / parts, (window + 1) * count / parts)
    }

    fn fit_all(&mut self, reach_hz: f64) {
        let top = self.lines.iter().map(|line| line.order).fold(1.0, f64::max);
        let reach_hz = reach_hz.min(0.45 / (self.cells.length_s * top));
        let parts = self.cells.count().div_ceil(self.window);
        self.fits = (0..parts).into_par_iter().map(|w| self.fit(self.bounds(w), reach_hz, top)).collect();
    }

    fn fit(&self, bounds: (usize, usize), reach_hz: f64, top: f64) -> Fit {
        let cells = bounds.1 - bounds.0;
        let length_s = cells as f64 * self.cells.length_s;
        let steps = (6.0 * length_s * top * reach_hz).ceil().max(1.0) as i32;
        let step_hz = reach_hz / f64::from(steps);
        let offset_hz = |i: usize| (i as f64 - f64::from(steps)) * step_hz;
        let mut grid = vec![0.0; 2 * steps as usize + 1];
        for (n, places) in grid.chunks_mut(TOGETHER).enumerate() {
            let offsets_hz = std::array::from_fn(|i| offset_hz(n * TOGETHER + i));
            for line in self.lines.iter() {
                let sums = line.sums_at(bounds, offsets_hz, self.cells.length_s);
                let scale = 1.0 / (2.0 * line.variance * cells as f64);
                places.iter_mut().zip(sums).for_each(|(place, sum)| *place += scale * sum.norm_sqr());
            }
        }
        let best = (0..grid.len()).max_by(|&a, &b| grid[a].total_cmp(&grid[b])).unwrap_or(0);
        // A parabola through the peak and its neighbours.
        let shift = if best > 0 && best + 1 < grid.len() {
            let (l, c, r) = (grid[best - 1], grid[best], grid[best + 1]);
            (0.5 * (l - r) / (l - 2.0 * c + r).min(-1e-30)).clamp(-0.5, 0.5)
        } else {
            0.0
        };
        // What the highest of so many sums of exponentials reaches by chance (after Laurent and
        // Massart 2000, from memory, less what one exponential needs less).
        let lines = self.lines.len() as f64;
        let tries = (1.0 + 2.0 * reach_hz * length_s * top).ln();
        let chance = lines + tries + (2.0 * (lines - 1.0) * tries).sqrt() + WINDOW_COST;
        Fit {
            middle_s: 0.5 * (self.cells.time_s[bounds.0] + self.cells.time_s[bounds.1 - 1]),
            offset_hz: (best as f64 - f64::from(steps) + shift) * step_hz,
            gain: grid[best] - chance,
        }
    }

    /// Offset phase at each cell: the integral of the fitted offsets, then
    /// joined from window to window by the phase of the clearest line.
    fn joined_phase(&self) -> Vec<f64> {
        let offsets = self.offsets();
        let mut phase = vec![0.0; offsets.len()];
        for b in 1..phase.len() {
            let dt = self.cells.time_s[b] - self.cells.time_s[b - 1];
            phase[b] = phase[b - 1] + TAU * 0.5 * (offsets[b] + offsets[b - 1]) * dt;
        }
        let correction = self.phase_correction(&phase);
        phase.iter().zip(correction).map(|(p, c)| p + c).collect()
    }

    fn offsets(&self) -> Vec<f64> {
        let sure: Vec<&Fit> = self.fits.iter().filter(|fit| fit.gain > 2.0).collect();
        let best = self.fits.iter().max_by(|a, b| a.gain.total_cmp(&b.gain));
        let knots: Vec<(f64, f64)> = if sure.is_empty() {
            best.iter().map(|fit| (fit.middle_s, fit.offset_hz)).collect()
        } else {
            sure.iter().map(|fit| (fit.middle_s, fit.offset_hz)).collect()
        };
        self.cells.time_s.iter().map(|&t| between(&knots, t)).collect()
    }

    fn phase_correction(&self, phase: &[f64]) -> Vec<f64> {
        let line = self.lead();
        let k = f64::from(self.cells.orders[line]);
        let variance = self.cells.variance(line);
        let turned: Vec<Complex64> = turned(self.cells, line, phase).collect();
        let length = (self.window / 2).max(1);
        let hop = (length / 2).max(1);
        let mut knots: Vec<(f64, f64)> = Vec::new();
        let mut from = 0;
        while from + length <= turned.len() {
            let sum: Complex64 = turned[from..from + length].iter().sum();
            if sum.norm_sqr() / (2.0 * variance * length as f64) > 5.0 {
                let angle = sum.arg();
                let last = knots.last().map_or(angle, |&(_, last)| last);
                let near = angle + TAU * ((last - angle) / TAU).round();
                let middle_s = 0.5 * (self.cells.time_s[from] + self.cells.time_s[from + length - 1]);
                knots.push((middle_s, near));
            }
            from += hop;
        }
        self.cells.time_s.iter().map(|&t| between(&knots, t) / k).collect()
    }
}

/// Straight lines between knots, level outside; 0 where there are none.
pub(super) fn between(knots: &[(f64, f64)], t: f64) -> f64 {
    let right = knots.partition_point(|knot| knot.0 <= t);
    match (right.checked_sub(1).map(|left| knots[left]), knots.get(right)) {
        (Some((t0, y0)), Some(&(t1, y1))) => y0 + (y1 - y0) * (t - t0) / (t1 - t0),
        (Some((_, y)), None) => y,
        (None, Some(&(_, y))) => y,
        (None, None) => 0.0,
    }
}
