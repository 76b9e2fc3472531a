//! Whether it is hum, and how sure that is.

use super::comb::weight;
use super::neighbours::{Standing, standings};
use super::supplies::{FAMILIES, SUPPLIES, nearest_supply, prior};
use super::tracker::{Cells, Tracked};

/// Power over noise in 1/T, from medians over time, from which an order counts.
const COUNTS: f64 = 9.0;
/// Median over mean amplitude of a line that is there all the time.
const STEADY: f64 = 0.5;
/// Power over the highest sidebands' excess over noise, from which a line stands alone.
const ALONE: f64 = 8.0;
/// The same for a line far over the noise.
const ALONE_STRONG: f64 = 60.0;
/// Share of the time below which loud moments alone make a line: noise around a weak one
/// leaves it nearly half of the time.
const SELDOM: f64 = 0.4;
/// Most that one order adds.
const MOST_FROM_ONE: f64 = 40.0;
/// Evidence at which the find is as likely chance as not.
const EVEN: f64 = 14.0;

/// Share of the frequency from which a wander is a far one.
const FAR: f64 = 0.02;

/// Share of its nominal within which a railway's supply is looked for: it is held well.
const RAILWAY_STRAY: f64 = 0.03;
/// Change of frequency in a second, as a share of it, that no supply shows: struck
/// notes, whose phase is set anew each time, do. Grids keep under 1 Hz/s in faults.
const HASTY: f64 = 0.008;

/// How the frequency of a comb moves.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub(super) struct Motion {
    /// From the lowest to the highest frequency of the fundamental.
    pub range_hz: f64,
    /// RMS change in a second.
    pub hz_per_s: f64,
}

/// The verdict on one comb.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Verdict {
    pub found: bool,
    /// 0 to 1: how sure, see [`Verdict::of`].
    pub confidence: f64,
    /// Nats, see [`Verdict::of`]; low orders count more.
    pub evidence: f64,
    /// Orders that are there all the time.
    pub lasting: Vec<u32>,
    /// The lines fit a second supply as well: its nominal frequency.
    pub ambiguous: Option<f64>,
}

impl Verdict {
    /// Evidence is the sum over lasting orders of their log-likelihood ratio
    /// (power over noise in 1/T), less what the best of all frequencies tried
    /// shows by chance. Confidence is 1/(1 + e^−(evidence − 14)/3): ½ where the
    /// find may as well be chance or programme, 0.95 nine nats above; it is
    /// halved where the order numbers cannot be known.
    pub fn of(fine: &Cells, tracked: &Tracked, frequency_hz: f64, duration_s: f64, motion: &Motion) -> Self {
        let lines = fine.orders.iter().zip(&tracked.lines).zip(standings(fine, tracked));
        let lasting: Vec<(u32, f64)> = lines
            .filter(|((_, line), _)| line.lasting >= COUNTS && line.steadiness >= STEADY && line.throughout)
            .filter(|((_, line), _)| line.presence >= SELDOM)
            .filter(|(_, beside)| beside.is_none_or(|beside| stands_alone(&beside)))
            .map(|((&order, line), _)| (order, line.lasting))
            .collect();
        let family = FAMILIES.iter().find(|f| f.from_hz <= frequency_hz && frequency_hz <= f.to_hz);
        let searched_hz = family.map_or(30.0, |f| f.to_hz - f.from_hz);
        let tried = (searched_hz * duration_s.max(1.0) * 5.0).ln();
        let weighed: f64 = lasting.iter().map(|&(k, r)| weight(k) * (r - 3.0).min(MOST_FROM_ONE)).sum();
        let evidence = prior(frequency_hz) * weighed - tried;
        let orders: Vec<u32> = lasting.into_iter().map(|(order, _)| order).collect();
        // One line that moves far is a gliding tone: a supply's other orders move with it.
        let alone_far =
            motion.range_hz > FAR * frequency_hz && (orders.len() < 2 || !orders.iter().any(|&k| k <= 2));
        let hasty = motion.hz_per_s > HASTY * frequency_hz.min(100.0);
        let plausible = are_a_supplys(&orders, frequency_hz) && !alone_far && !hasty;
        let ambiguous = if plausible { other_fit(&orders, frequency_hz) } else { None };
        let mut confidence = 1.0 / (1.0 + (-(evidence - EVEN) / 3.0).exp());
        if !plausible {
            confidence *= 0.1;
        }
        let found = confidence >= 0.5;
        if ambiguous.is_some() {
            confidence *= 0.5;
        }
        Self { found, confidence, evidence, lasting: orders, ambiguous }
    }
}

/// Whether these orders can be all that is heard of a supply. A railway's or an
/// aircraft's shows its fundamental; a public one its fundamental, or its second
/// (rectifiers), or third and fifth; or multiples of the third or the sixth alone
/// (three-phase loads); in its usual range the third and any other will do. Anything
/// else is a comb of somebody's notes and their tempo.
fn are_a_supplys(orders: &[u32], frequency_hz: f64) -> bool {
    let Some(supply) = nearest_supply(frequency_hz) else { return false };
    let has = |order: u32| orders.contains(&order);
    let stray = (frequency_hz / supply.nominal_hz - 1.0).abs();
    let only = |of: u32| orders.len() >= 2 && has(of) && orders.iter().all(|k| k.is_multiple_of(of));
    match supply.nominal_hz {
        50.0 | 60.0 => {
            let third = has(3) && (has(5) || (orders.len() >= 2 && stray <= supply.usual));
            has(1) || has(2) || third || only(3) || only(6)
        }
        hz if hz < 50.0 => has(1) && stray <= RAILWAY_STRAY,
        _ => has(1) && (orders.len() >= 2 || stray <= supply.usual),
    }
}

fn stands_alone(beside: &Standing) -> bool {
    // A strong line shows sidebands that noise would hide beside a weak one.
    let needed = (beside.over_noise / 20.0).clamp(ALONE, ALONE_STRONG);
    beside.over_noise >= COUNTS && beside.over_highest >= needed
}

/// Another public supply whose comb has all these lines within its usual range.
fn other_fit(orders: &[u32], frequency_hz: f64) -> Option<f64> {
    let common = orders.iter().copied().reduce(gcd)?;
    let lowest_hz = f64::from(common) * frequency_hz;
    let own = nearest_supply(frequency_hz)?;
    let public = SUPPLIES.iter().filter(|supply| supply.nominal_hz == 50.0 || supply.nominal_hz == 60.0);
    let others = public.filter(|supply| supply.nominal_hz != own.nominal_hz);
    others
        .map(|supply| (supply, (lowest_hz / supply.nominal_hz).round().max(1.0)))
        .find(|(supply, n)| (lowest_hz / n / supply.nominal_hz - 1.0).abs() <= supply.usual && *n <= 24.0)
        .map(|(supply, _)| supply.nominal_hz)
}

fn gcd(a: u32, b: u32) -> u32 {
    if b == 0 { a } else { gcd(b, a % b) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn multiples_of_300_hz_fit_both_public_supplies() {
        assert_eq!(other_fit(&[6, 12, 18], 50.0), Some(60.0));
        assert_eq!(other_fit(&[5, 10], 60.0), Some(50.0));
        assert_eq!(other_fit(&[2, 4, 6], 50.0), None);
        assert_eq!(other_fit(&[1], 50.0), None);
        assert_eq!(other_fit(&[3], 60.0), None);
    }
}
