//! Whether it is hum, and how sure that is.

use super::comb::weight;
use super::neighbours::{Standing, standings};
use super::quiet::over_even_noise;
use super::supplies::{FAMILIES, SUPPLIES, is_usual, nearest_supply, prior};
use super::swell::swell;
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
/// Width in hertz in which public supplies are expected, and as much again: half of all that
/// hums is there.
const EXPECTED_HZ: f64 = 4.4;
/// A faint line at the end of the usual range may be read so far beyond it.
const MISREAD: f64 = 1.02;
/// Most that one order adds.
const MOST_FROM_ONE: f64 = 40.0;
/// Evidence at which the find is as likely chance as not.
const EVEN: f64 = 14.0;

/// RMS swing of the amplitude, as a share, that a generator's regulator allows (common
/// practice keeps the voltage within a tenth).
const MOST_SWELL: f64 = 0.1;
/// The same for any supply, whose loads may be switched while it is recorded.
const MOST_SWELL_OF_ANY: f64 = 0.6;
/// Power over the highest pair of sidebands that a machine's line has (40 dB).
const STEADY_AS_A_MACHINE: f64 = 10_000.0;
/// Share of the power about its frequency that a machine's line has.
const LEAST_SHARE: f64 = 0.05;
/// Most that the score reaches just outside the usual range of a supply.
const ISLAND_CEILING: f64 = 0.9;
/// Most that it reaches where two supplies fit.
const AMBIGUOUS_CEILING: f64 = 0.6;

/// Share of the frequency from which a wander is a far one.
const FAR: f64 = 0.02;

/// Change of frequency in a second, as a share of it, that no supply shows: struck
/// notes, whose phase is set anew each time, do. Grids keep under 1 Hz/s in faults.
const HASTY: f64 = 0.008;

/// Shortest stay that tells, in seconds, of a comb and of a single line.
const LEAST_STAY_S: f64 = 3.5;
const LEAST_STAY_OF_ONE_LINE_S: f64 = 8.0;
/// RMS swing of the amplitude of what comes and goes while it is there: a struck note fades.
const MOST_SWELL_OF_A_STAY: f64 = 0.15;
/// Evidence that a stay must give: as for 0.95, and more for having been picked.
const CLEAR_STAY: f64 = 25.0;
/// Change of frequency in a second, as a share of it: ten times what grids show day by day
/// (common practice: some 10 mHz/s), since programme shakes the track; notes struck anew show more.
const GRID_HASTE: f64 = 2e-3;

/// How the frequency of a comb moves.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub(super) struct Motion {
    /// From the lowest to the highest frequency of the fundamental.
    pub range_hz: f64,
    /// RMS change in a second.
    pub hz_per_s: f64,
}

/// What else hums while a comb is followed.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Company {
    /// Nothing that is known.
    Alone,
    /// A supply of another frequency, whose lines shake the track a little.
    BesideAnother,
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
    /// (power over noise in 1/T; 3 less under programme), less what the best of all frequencies tried
    /// shows by chance. Confidence is 1/(1 + e^−(evidence − 14)/3): ½ where the
    /// find may as well be chance or programme, 0.95 nine nats above. What is over
    /// ½ is pressed under 0.9 to 0.7 outside the usual range of a supply, and
    /// under 0.6 where the order numbers cannot be known; a tenth of it is left
    /// where the comb cannot be a supply's.
    pub fn of(
        fine: &Cells,
        tracked: &Tracked,
        frequency_hz: f64,
        duration_s: f64,
        motion: &Motion,
        company: Company,
    ) -> Self {
        let expected = nearest_supply(frequency_hz)
            .is_some_and(|s| s.is_public() && s.stray(frequency_hz) <= MISREAD * s.usual);
        let heard: Vec<Heard> = heard_all_the_time(fine, tracked, expected);
        let alone = heard.iter().filter(|line| line.stands_alone());
        let lasting: Vec<(u32, f64)> = alone.map(|line| (line.order, line.says())).collect();
        let family = FAMILIES.iter().find(|f| f.from_hz <= frequency_hz && frequency_hz <= f.to_hz);
        let searched_hz = if expected { EXPECTED_HZ } else { family.map_or(30.0, |f| f.to_hz - f.from_hz) };
        let tried = (searched_hz * duration_s.max(1.0) * 5.0).ln();
        let weighed: f64 = lasting.iter().map(|&(k, nats)| weight(k) * nats).sum();
        let evidence = prior(frequency_hz) * weighed - tried;
        let orders: Vec<u32> = lasting.into_iter().map(|(order, _)| order).collect();
        // One line that moves far is a gliding tone: a supply's other orders move with it.
        let alone_far =
            motion.range_hz > FAR * frequency_hz && (orders.len() < 2 || !orders.iter().any(|&k| k <= 2));
        let played = if expected {
            is_beside_the_line(fine, tracked, &heard, &orders)
        } else {
            is_played(fine, tracked, &heard, company)
        };
        let hasty = motion.hz_per_s > HASTY * frequency_hz.min(100.0);
        let plausible = are_a_supplys(&orders, frequency_hz) && !alone_far && !hasty && !played;
        let ambiguous = if plausible { other_fit(&orders, frequency_hz) } else { None };
        let chance = 1.0 / (1.0 + (-(evidence - EVEN) / 3.0).exp());
        let confidence =
            if plausible { below_ceiling(chance, frequency_hz, ambiguous.is_some()) } else { 0.1 * chance };
        let found = confidence >= 0.5;
        Self { found, confidence, evidence, lasting: orders, ambiguous }
    }
}

impl Verdict {
    /// Whether the evidence would do for a stretch that was picked for it.
    pub fn stands_clear(&self) -> bool {
        self.evidence >= CLEAR_STAY
    }

    /// On hum that comes and goes, from a stretch in which it stands clear. That stretch was
    /// picked for it, so more is asked: a comb of two orders or a long stay, a frequency as
    /// steady as a grid's, no vibrato, and of what `goes` a level that does not fade.
    pub fn of_a_stay(
        fine: &Cells,
        tracked: &Tracked,
        frequency_hz: f64,
        stay_s: f64,
        motion: &Motion,
        goes: bool,
    ) -> Self {
        let verdict = Self::of(fine, tracked, frequency_hz, stay_s, motion, Company::Alone);
        let heard = heard_all_the_time(fine, tracked, true);
        let shaken = heard.iter().filter(|line| line.beside.is_none_or(|beside| is_shaken(&beside))).count();
        let least_s = if verdict.lasting.len() >= 2 { LEAST_STAY_S } else { LEAST_STAY_OF_ONE_LINE_S };
        let clear = verdict.stands_clear()
            && stay_s >= least_s
            && is_usual(frequency_hz)
            && 2 * shaken <= heard.len()
            && !(goes
                && swell(fine, tracked, &verdict.lasting).is_none_or(|swell| swell > MOST_SWELL_OF_A_STAY))
            && motion.hz_per_s <= GRID_HASTE * frequency_hz;
        if clear { verdict } else { Self { found: false, confidence: 0.1 * verdict.confidence, ..verdict } }
    }
}

/// A line that is there all the time.
struct Heard {
    order: u32,
    /// Power over noise in 1/T, from medians over time.
    lasting: f64,
    /// The same from means, where the noise is even.
    over_even: Option<f64>,
    beside: Option<Standing>,
}

impl Heard {
    /// Nats that it adds: what stands in even noise is no programme's.
    fn says(&self) -> f64 {
        let against_programme = self.lasting - 3.0;
        self.over_even.map_or(against_programme, |over| over.max(against_programme)).min(MOST_FROM_ONE)
    }

    fn stands_alone(&self) -> bool {
        self.beside.is_none_or(|beside| {
            // A strong line shows sidebands that noise would hide beside a weak one.
            let needed = (beside.over_noise / 20.0).clamp(ALONE, ALONE_STRONG);
            (beside.over_noise >= COUNTS || self.over_even.is_some_and(|over| over >= COUNTS))
                && beside.over_highest >= needed
        })
    }
}

/// Where no public supply is `expected`, even noise is no reason to claim one.
fn heard_all_the_time(fine: &Cells, tracked: &Tracked, expected: bool) -> Vec<Heard> {
    let all = tracked.lines.iter().zip(standings(fine, tracked)).enumerate();
    let there =
        all.filter(|(_, (line, _))| line.steadiness >= STEADY && line.throughout && line.presence >= SELDOM);
    there
        .map(|(i, (line, beside))| Heard {
            order: fine.orders[i],
            lasting: line.lasting,
            over_even: expected.then(|| over_even_noise(fine, i, tracked)).flatten(),
            beside,
        })
        .filter(|line| line.lasting >= COUNTS || line.over_even.is_some_and(|over| over >= COUNTS))
        .collect()
}

/// Whether a comb swells or shakes as somebody's note does. Where generators, islands,
/// railways and aircraft may be, notes are too: there a comb must be as steady as a machine.
fn is_played(fine: &Cells, tracked: &Tracked, heard: &[Heard], company: Company) -> bool {
    let orders: Vec<u32> = heard.iter().map(|line| line.order).collect();
    let swells = swell(fine, tracked, &orders).is_none_or(|swell| swell > MOST_SWELL);
    let shaken = heard.iter().filter(|line| line.beside.is_none_or(|beside| is_shaken(&beside))).count();
    // A louder line that the cells fold onto this one turns in them.
    let is_image = |line: &Heard| line.beside.is_some_and(|beside| beside.share < LEAST_SHARE);
    swells || (company == Company::Alone && (2 * shaken > heard.len() || heard.iter().any(is_image)))
}

/// Whether what is heard where a public supply may be is somebody else's: the flank of a
/// note beside it comes and goes against the supply's phase, and of the comb of a
/// rhythm hardly a line stands alone.
fn is_beside_the_line(fine: &Cells, tracked: &Tracked, heard: &[Heard], alone: &[u32]) -> bool {
    let swells = |orders: &[u32]| swell(fine, tracked, orders).is_some_and(|swell| swell > MOST_SWELL_OF_ANY);
    // Notes beside one order do not hide that others hold still.
    let still = alone.iter().filter(|order| !swells(&[**order])).count();
    let comes_and_goes = swells(alone) && still < 2;
    comes_and_goes || 4 * alone.len() < heard.len()
}

fn is_shaken(beside: &Standing) -> bool {
    beside.over_vibrato < (beside.over_noise / 20.0).clamp(ALONE, STEADY_AS_A_MACHINE)
}

/// A score from ½ up, pressed together under the most that can be known: less the
/// farther a frequency is from what interconnected systems keep, and little where the
/// order numbers are a guess.
fn below_ceiling(score: f64, frequency_hz: f64, ambiguous: bool) -> f64 {
    let remote = nearest_supply(frequency_hz).map_or(1.0, |supply| supply.remoteness(frequency_hz));
    let ceiling = match (ambiguous, is_usual(frequency_hz)) {
        (true, _) => AMBIGUOUS_CEILING,
        (_, true) => 1.0,
        _ => ISLAND_CEILING - 0.2 * remote,
    };
    if score < 0.5 { score } else { 0.5 + (score - 0.5) * (2.0 * ceiling - 1.0) }
}

/// Whether what is left in the account is high orders that no supply shows alone: they are
/// multiples of many notes.
pub(super) fn are_a_notes(listed: &[u32], frequency_hz: f64) -> bool {
    listed.iter().all(|order| *order > 3) && !are_a_supplys(listed, frequency_hz)
}

/// Whether these orders can be all that is heard of a supply. A railway's or an
/// aircraft's shows its fundamental; a public one its fundamental, or its second
/// (rectifiers), or third and fifth; or multiples of the third or the sixth alone
/// (three-phase loads); in its usual range the third and any other will do. Anything
/// else is a comb of somebody's notes and their tempo.
fn are_a_supplys(orders: &[u32], frequency_hz: f64) -> bool {
    let Some(supply) = nearest_supply(frequency_hz) else { return false };
    let has = |order: u32| orders.contains(&order);
    let usual = supply.is_usual(frequency_hz);
    // Without its fundamental a comb is counted from a guess: 110 Hz and its multiples
    // are a note, and only at 50 or 60 Hz more likely a rectifier's.
    let guessed = orders.iter().copied().reduce(gcd).is_none_or(|common| common > 1);
    if guessed && !usual {
        return false;
    }
    let only = |of: u32| orders.len() >= 2 && has(of) && orders.iter().all(|k| k.is_multiple_of(of));
    if !supply.is_public() {
        return has(1);
    }
    let third = has(3) && (has(5) || (orders.len() >= 2 && usual));
    has(1) || has(2) || third || only(3) || only(6)
}

/// Another public supply whose comb has all these lines within its usual range.
fn other_fit(orders: &[u32], frequency_hz: f64) -> Option<f64> {
    let common = orders.iter().copied().reduce(gcd)?;
    let lowest_hz = f64::from(common) * frequency_hz;
    let own = nearest_supply(frequency_hz)?;
    let public = SUPPLIES.iter().filter(|supply| supply.is_public());
    let others = public.filter(|supply| supply.nominal_hz != own.nominal_hz);
    others
        .map(|supply| (supply, (lowest_hz / supply.nominal_hz).round().max(1.0)))
        .find(|(supply, n)| supply.is_usual(lowest_hz / n) && *n <= 24.0)
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
