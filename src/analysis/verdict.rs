//! Whether it is hum, and how sure that is.

use super::comb::weight;
use super::supplies::{FAMILIES, SUPPLIES, nearest_supply, prior};
use super::tracker::{Cells, Tracked};

/// Power over noise in 1/T, from medians over time, from which an order counts.
const COUNTS: f64 = 9.0;
/// Median over mean amplitude of a line that is there all the time.
const STEADY: f64 = 0.5;
/// Most that one order adds.
const MOST_FROM_ONE: f64 = 40.0;
/// Evidence at which the find is as likely chance as not.
const EVEN: f64 = 14.0;

/// Share of the frequency from which a wander is a far one.
const FAR: f64 = 0.02;

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
    pub fn of(cells: &Cells, tracked: &Tracked, frequency_hz: f64, duration_s: f64, range_hz: f64) -> Self {
        let lasting: Vec<(u32, f64)> = cells
            .orders
            .iter()
            .zip(&tracked.lines)
            .filter(|(_, line)| line.lasting >= COUNTS && line.steadiness >= STEADY && line.throughout)
            .map(|(&order, line)| (order, line.lasting))
            .collect();
        let family = FAMILIES.iter().find(|f| f.from_hz <= frequency_hz && frequency_hz <= f.to_hz);
        let searched_hz = family.map_or(30.0, |f| f.to_hz - f.from_hz);
        let tried = (searched_hz * duration_s.max(1.0) * 5.0).ln();
        let weighed: f64 = lasting.iter().map(|&(k, r)| weight(k) * (r - 3.0).min(MOST_FROM_ONE)).sum();
        let evidence = prior(frequency_hz) * weighed - tried;
        let orders: Vec<u32> = lasting.into_iter().map(|(order, _)| order).collect();
        // A supply shows low orders; high ones alone are somebody's note. One line
        // that moves far is a gliding tone: a supply's other orders move with it.
        let low = orders.iter().any(|&k| k <= 6) || orders.len() >= 3;
        let alone_far =
            range_hz > FAR * frequency_hz && (orders.len() < 2 || !orders.iter().any(|&k| k <= 2));
        // Every third line alone is no railway's: a public supply's, or a note's.
        let thirds = frequency_hz < 20.0 && orders.iter().all(|k| k.is_multiple_of(3));
        // One line says nothing of its order: only a fundamental, or a rectifier's
        // second on a public supply, is taken at its word.
        let unnumbered = match orders[..] {
            [order] => order > if frequency_hz < 20.0 { 1 } else { 2 },
            _ => false,
        };
        let plausible = low && !alone_far && !thirds && !unnumbered;
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
