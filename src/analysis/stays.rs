//! Hum that comes and goes: the stretches of time in which a public supply's lines stand clear.
//!
//! In each segment of the survey a line within 1 % of 50 or 60 Hz, or of a multiple, stands
//! clear where it is 20 dB over what is beside it on either side. Segments that agree in
//! frequency make stays; the longest of even level is what the verdict looks at.

use super::survey::Surveyed;
use super::tracker::Cells;

/// Power over that beside it from which a line stands clear (20 dB).
const CLEAR: f64 = 100.0;
/// Offsets in hertz that count as beside a line.
const NEAREST_HZ: f64 = 1.25;
const FARTHEST_HZ: f64 = 5.0;
/// Half the main lobe of the survey's window in bins, and some more.
const LOBE_BINS: f64 = 5.0;
/// Share of the nominal within which a line is looked for.
const USUAL: f64 = 0.01;
/// Orders looked at; one up to the third must be clear.
const ORDERS: u32 = 10;
const LOWEST: u32 = 3;
/// Lines of one comb, and segments of one supply, agree so well in hertz.
const LINES_AGREE_HZ: f64 = 0.12;
const SEGMENTS_AGREE_HZ: f64 = 0.2;
/// Power within which a stretch is of even level (8 dB).
const EVEN: f64 = 6.3;
/// Power over that within a stay from which its end is not yet come (−10 dB).
const THERE: f64 = 0.1;
/// The level near an end is that of so many seconds, and so far inside it is surely there.
const NEAR_END_S: f64 = 2.5;
const INSIDE_S: f64 = 1.3;
/// Longest gap within a stay, in seconds.
const DROPOUT_S: f64 = 0.75;

/// A stretch of time.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Stay {
    pub from_s: f64,
    pub to_s: f64,
}

impl Stay {
    pub fn length_s(&self) -> f64 {
        self.to_s - self.from_s
    }
}

/// Where a comb comes and goes.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Stays {
    /// Every stretch in which it stands clear.
    pub all: Vec<Stay>,
    /// The longest of even level.
    pub even: Stay,
    /// Its clearest order, and mean square while it is there.
    pub loudest: Option<(u32, f64)>,
}

impl Stays {
    pub fn share(&self, duration_s: f64) -> f64 {
        (self.all.iter().map(Stay::length_s).sum::<f64>() / duration_s).min(1.0)
    }
}

/// A comb that stands clear for a part of the time.
pub(super) struct Passing {
    pub frequency_hz: f64,
    /// Orders that stand clear, the clearest first.
    pub orders: Vec<u32>,
    pub stays: Stays,
}

/// Lines of one segment.
struct Clear {
    segment: usize,
    frequency_hz: f64,
    power: f64,
    lines: Vec<(u32, f64)>,
}

/// The public supply's comb that stands clear in most segments, if in any.
pub(super) fn passing(survey: &Surveyed) -> Option<Passing> {
    let of = |nominal_hz: f64| agreeing(clear_segments(survey, nominal_hz));
    let clear = [50.0, 60.0].map(of).into_iter().max_by_key(Vec::len)?;
    let (first, last) = even_run(&clear)?;
    let run = &clear[first..=last];
    let mut orders: Vec<(u32, f64)> = Vec::new();
    for order in 1..=ORDERS {
        let powers: Vec<f64> = run.iter().filter_map(|clear| power_of(clear, order)).collect();
        if 2 * powers.len() > run.len() {
            orders.push((order, powers.iter().sum()));
        }
    }
    orders.sort_by(|a, b| b.1.total_cmp(&a.1));
    let whole = runs(&clear).map(|run| stay_of(survey, run)).collect();
    Some(Passing {
        frequency_hz: run.iter().map(|clear| clear.frequency_hz).sum::<f64>() / run.len() as f64,
        orders: orders.into_iter().map(|(order, _)| order).collect(),
        stays: Stays { all: whole, even: stay_of(survey, run), loudest: None },
    })
}

fn power_of(clear: &Clear, order: u32) -> Option<f64> {
    clear.lines.iter().find(|(k, _)| *k == order).map(|(_, power)| *power)
}

/// A run of segments as a stretch: half of a segment about its middle is surely in it.
fn stay_of(survey: &Surveyed, run: &[Clear]) -> Stay {
    let quarter_s = 0.25 / survey.bin_hz;
    let middle_s = |clear: Option<&Clear>| clear.map_or(0.0, |clear| survey.times_s[clear.segment]);
    Stay { from_s: middle_s(run.first()) - quarter_s, to_s: middle_s(run.last()) + quarter_s }
}

fn runs(clear: &[Clear]) -> impl Iterator<Item = &[Clear]> {
    clear.chunk_by(|a, b| b.segment == a.segment + 1)
}

/// First and last of the longest run of even level.
fn even_run(clear: &[Clear]) -> Option<(usize, usize)> {
    let mut best: Option<(usize, usize)> = None;
    for first in 0..clear.len() {
        let (mut low, mut high) = (f64::MAX, 0.0f64);
        for last in first..clear.len() {
            (low, high) = (low.min(clear[last].power), high.max(clear[last].power));
            let joined = clear[last].segment - clear[first].segment == last - first;
            if !joined || high > EVEN * low {
                break;
            }
            if best.is_none_or(|(a, b)| last - first > b - a) {
                best = Some((first, last));
            }
        }
    }
    best
}

/// The segments about the median frequency.
fn agreeing(mut clear: Vec<Clear>) -> Vec<Clear> {
    let mut frequencies_hz: Vec<f64> = clear.iter().map(|clear| clear.frequency_hz).collect();
    frequencies_hz.sort_by(f64::total_cmp);
    if let Some(&median_hz) = frequencies_hz.get(frequencies_hz.len() / 2) {
        clear.retain(|clear| (clear.frequency_hz - median_hz).abs() < SEGMENTS_AGREE_HZ);
    }
    clear
}

fn clear_segments(survey: &Surveyed, nominal_hz: f64) -> Vec<Clear> {
    let segments = survey.powers.iter().enumerate();
    segments.filter_map(|(segment, row)| clear_in(row, survey.bin_hz, nominal_hz, segment)).collect()
}

fn clear_in(row: &[f32], bin_hz: f64, nominal_hz: f64, segment: usize) -> Option<Clear> {
    let found = (1..=ORDERS).filter_map(|k| Some((k, clear_line(row, bin_hz, f64::from(k) * nominal_hz)?)));
    let found: Vec<(u32, (f64, f64))> = found.collect();
    let low = found.iter().filter(|(k, _)| *k <= LOWEST);
    let (order, (line_hz, _)) = low.max_by(|a, b| a.1.1.total_cmp(&b.1.1))?;
    let about_hz = line_hz / f64::from(*order);
    let own = found.iter().filter(|(k, (hz, _))| (hz - f64::from(*k) * about_hz).abs() < LINES_AGREE_HZ);
    let lines: Vec<(u32, f64)> = own.clone().map(|&(k, (_, power))| (k, power)).collect();
    let orders: f64 = own.clone().map(|(k, _)| f64::from(*k)).sum();
    let frequency_hz = own.map(|(_, (hz, _))| hz).sum::<f64>() / orders;
    let power = lines.iter().map(|(_, power)| power).sum();
    Some(Clear { segment, frequency_hz, power, lines })
}

/// Frequency and power of a line about here that stands clear on both sides.
fn clear_line(row: &[f32], bin_hz: f64, about_hz: f64) -> Option<(f64, f64)> {
    let bin = |hz: f64| (hz / bin_hz).round() as usize;
    let (low, high) = (bin(about_hz * (1.0 - USUAL)), bin(about_hz * (1.0 + USUAL)));
    let (nearest, farthest) = ((NEAREST_HZ / bin_hz).max(LOBE_BINS).ceil() as usize, bin(FARTHEST_HZ));
    if low <= farthest || high + farthest >= row.len() || nearest + 3 > farthest {
        return None;
    }
    let top = (low..=high).max_by(|&a, &b| row[a].total_cmp(&row[b]))?;
    let [left, line, right] = [row[top - 1], row[top], row[top + 1]].map(f64::from);
    let mean = |side: &[f32]| side.iter().map(|p| f64::from(*p)).sum::<f64>() / side.len() as f64;
    let below = mean(&row[top - farthest..=top - nearest]);
    let above = mean(&row[top + nearest..=top + farthest]);
    if line < left.max(right) || line < CLEAR * below.max(above) || line <= 0.0 {
        return None;
    }
    // A parabola through the logarithms.
    let [l, c, r] = [left, line, right].map(|power| power.max(1e-60).ln());
    let shift = (0.5 * (l - r) / (l - 2.0 * c + r).min(-1e-12)).clamp(-0.5, 0.5);
    Some(((top as f64 + shift) * bin_hz, line))
}

/// The stays with their ends read off short cells, and how loud the comb is then.
pub(super) fn with_sharp_ends(stays: &Stays, fine: &Cells, orders: &[u32], reach_s: f64) -> Stays {
    let comb = Comb::new(fine, orders);
    let mut all: Vec<Stay> = Vec::new();
    for stay in stays.all.iter().filter_map(|stay| comb.sharpened(stay, reach_s)) {
        // Where programme hides the comb it may well be there.
        match all.last_mut().filter(|last| !comb.is_gone_between(last, &stay)) {
            Some(last) => last.to_s = stay.to_s.max(last.to_s),
            None => all.push(stay),
        }
    }
    let own = all.iter().find(|stay| stay.from_s < stays.even.to_s && stays.even.from_s < stay.to_s);
    let even = own.map_or(stays.even, |own| Stay {
        from_s: stays.even.from_s.max(own.from_s + fine.length_s),
        to_s: stays.even.to_s.min(own.to_s - fine.length_s),
    });
    let loudest = orders.first().and_then(|&order| Some((order, comb.level(fine, order, &even)?)));
    Stays { all, even, loudest }
}

/// Power of a comb's orders in short cells.
struct Comb<'a> {
    times_s: &'a [f64],
    cell_s: f64,
    power: Vec<f64>,
}

impl<'a> Comb<'a> {
    fn new(fine: &'a Cells, orders: &[u32]) -> Self {
        let own = |i: &usize| orders.contains(&fine.orders[*i]);
        let lines: Vec<usize> = (0..fine.orders.len()).filter(own).collect();
        let in_cell = |b: usize| lines.iter().map(|&i| fine.values[i][b].norm_sqr()).sum();
        let power = (0..fine.count()).map(in_cell).collect();
        Self { times_s: &fine.time_s, cell_s: fine.length_s, power }
    }

    fn at(&self, time_s: f64) -> usize {
        self.times_s.partition_point(|t| *t < time_s)
    }

    /// Median over a stretch of time.
    fn typical(&self, from_s: f64, to_s: f64) -> Option<f64> {
        median(self.power.get(self.at(from_s)..self.at(to_s))?.to_vec())
    }

    /// Level near either end: one that steps or swings is there at its least too.
    fn near_ends(&self, stay: &Stay) -> Option<(f64, f64)> {
        let near_s = (0.5 * stay.length_s()).min(NEAR_END_S);
        Some((self.typical(stay.from_s, stay.from_s + near_s)?, self.typical(stay.to_s - near_s, stay.to_s)?))
    }

    fn sharpened(&self, stay: &Stay, reach_s: f64) -> Option<Stay> {
        let (head, tail) = self.near_ends(stay)?;
        let inside_s = (0.5 * stay.length_s()).min(INSIDE_S);
        let (first, last) = (self.at(stay.from_s + inside_s), self.at(stay.to_s - inside_s));
        // A dropout of a moment is no end.
        let lasting = ((DROPOUT_S / self.cell_s) as usize).max(1);
        let is_low = |b: usize, least: f64| self.power[b] < THERE * least;
        // From a little inside outwards, over the survey's own end, until it is gone.
        let earliest = self.at(stay.from_s - reach_s);
        let from = (earliest..first)
            .rev()
            .find(|&b| (b.saturating_sub(lasting)..=b).all(|b| is_low(b, head)))
            .map_or(earliest, |b| b + 1);
        let latest = self.at(stay.to_s + reach_s);
        let to = (last..latest)
            .find(|&b| (b..(b + lasting).min(self.power.len())).all(|b| is_low(b, tail)))
            .unwrap_or(latest);
        let half_s = 0.5 * self.cell_s;
        (from < to).then(|| Stay { from_s: self.times_s[from] - half_s, to_s: self.times_s[to - 1] + half_s })
    }

    fn is_gone_between(&self, before: &Stay, after: &Stay) -> bool {
        let least = match (self.near_ends(before), self.near_ends(after)) {
            (Some((_, tail)), Some((head, _))) => tail.min(head),
            _ => return true,
        };
        self.typical(before.to_s, after.from_s).is_some_and(|typical| typical < THERE * least)
    }

    /// Mean square of one order in a stretch.
    fn level(&self, fine: &Cells, order: u32, stay: &Stay) -> Option<f64> {
        let line = fine.orders.iter().position(|k| *k == order)?;
        let inside = fine.values[line].get(self.at(stay.from_s)..self.at(stay.to_s))?;
        median(inside.iter().map(|z| 0.5 * z.norm_sqr()).collect())
    }
}

fn median(mut values: Vec<f64>) -> Option<f64> {
    let middle = values.len() / 2;
    (!values.is_empty()).then(|| *values.select_nth_unstable_by(middle, f64::total_cmp).1)
}
