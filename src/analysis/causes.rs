//! What usually makes hum of this shape, with the numbers that point there.
//!
//! Common practice, as a table: a pattern is a function from the measured levels
//! to a weight and its evidence, or to nothing. To add a cause, add a row.

use super::findings::{Cause, Harmonic};
use super::passes::top_hz;

/// One row: what it is, what to try first, and what tells it.
struct Pattern {
    cause: &'static str,
    first_cure: &'static str,
    tells: fn(&Levels) -> Option<(f64, String)>,
}

/// Orders that must lie below the top for a pattern to be told as such.
const ENOUGH_ORDERS: u32 = 7;

const PATTERNS: [Pattern; 5] = [
    Pattern {
        cause: "magnetic pick-up from a transformer or by a loop",
        first_cure: "move or turn the line away from transformers and motors, twist the pair, make the loop between \
                     signal and return small",
        tells: nearly_pure,
    },
    Pattern {
        cause: "earth loop or shared return",
        first_cure: "earth the screen at one end only, feed both ends from one outlet, or isolate the signal \
                     (transformer, differential input); never lift a protective earth",
        tells: falling_odd,
    },
    Pattern {
        cause: "rectifier ripple from a supply",
        first_cure: "check the reservoir capacitors and regulator of the supply that feeds the line, and take its \
                     return to the supply, not through the signal",
        tells: even_orders,
    },
    Pattern {
        cause: "phase-angle dimmer or poor rectifier",
        first_cure: "switch dimmers and switching supplies off one by one while watching the comb; keep their \
                     cables apart from the line",
        tells: long_comb,
    },
    Pattern {
        cause: "neutral current of three-phase loads",
        first_cure: "route the line away from risers and distribution boards, and look for a neutral joined to \
                     earth in a second place",
        tells: triplen,
    },
];

/// Causes that the pattern points to, the likeliest first; `undetermined` with
/// what was seen where nothing does. Empty where no harmonic was found.
///
/// The sample rate sets how far could be looked: a cause told from fewer than the first
/// few orders is called possible, no more, and its evidence says where the look ended.
pub(super) fn likely_causes(harmonics: &[Harmonic], clipped: bool, rate_hz: f64) -> Vec<Cause> {
    let Some(any) = harmonics.first() else { return Vec::new() };
    let levels = Levels::new(harmonics);
    let looked = Looked::new(any.frequency_hz / f64::from(any.order), rate_hz);
    let mut pointed: Vec<(f64, Cause)> = PATTERNS
        .iter()
        .filter_map(|pattern| {
            let (weight, evidence) = (pattern.tells)(&levels)?;
            let cause = Cause {
                cause: looked.softened(pattern.cause),
                evidence: with_caution(looked.bounded(evidence), clipped),
                first_cure: pattern.first_cure.to_owned(),
            };
            Some((weight, cause))
        })
        .collect();
    pointed.sort_by(|a, b| b.0.total_cmp(&a.0));
    if pointed.is_empty() {
        return vec![undetermined(&levels, &looked, clipped)];
    }
    pointed.into_iter().map(|(_, cause)| cause).collect()
}

fn with_caution(evidence: String, clipped: bool) -> String {
    if clipped {
        format!("{evidence}; the capture is clipped, which makes harmonics of its own")
    } else {
        evidence
    }
}

/// How far the sample rate let one look.
struct Looked {
    top_hz: f64,
    orders: u32,
}

impl Looked {
    fn new(fundamental_hz: f64, rate_hz: f64) -> Self {
        let top_hz = top_hz(rate_hz);
        Self { top_hz, orders: (top_hz / fundamental_hz) as u32 }
    }

    /// Too few orders for the patterns, which look at the first ten or so.
    fn is_short(&self) -> bool {
        self.orders < ENOUGH_ORDERS
    }

    fn softened(&self, cause: &str) -> String {
        if self.is_short() { format!("possibly {cause}") } else { cause.to_owned() }
    }

    fn bounded(&self, evidence: String) -> String {
        if !self.is_short() {
            return evidence;
        }
        format!(
            "{evidence}; at this sample rate one could look up to {:.0} Hz only, and higher orders are not known",
            self.top_hz
        )
    }
}

fn undetermined(levels: &Levels, looked: &Looked, clipped: bool) -> Cause {
    let strongest = levels.strongest();
    let evidence = format!(
        "{} orders, the strongest {} at {:.1} dBFS, odd orders {:.1} dB and even orders {:.1} dB against it: no \
         pattern of common practice",
        levels.found.len(),
        strongest.0,
        strongest.1,
        db(levels.power(|k| k % 2 == 1)) - strongest.1,
        db(levels.power(|k| k % 2 == 0)) - strongest.1,
    );
    Cause {
        cause: "undetermined".to_owned(),
        evidence: with_caution(looked.bounded(evidence), clipped),
        first_cure:
            "record again with the sensor replaced by an equal resistor, and with the input shorted: what \
                     stays enters after the line"
                .to_owned(),
    }
}

/// The levels by order.
struct Levels {
    found: Vec<(u32, f64)>,
}

impl Levels {
    fn new(harmonics: &[Harmonic]) -> Self {
        Self { found: harmonics.iter().map(|h| (h.order, h.level_dbfs)).collect() }
    }

    fn at(&self, order: u32) -> Option<f64> {
        self.found.iter().find(|(k, _)| *k == order).map(|&(_, level)| level)
    }

    /// The level, or one that is well below all that was found.
    fn at_or_low(&self, order: u32) -> f64 {
        self.at(order).unwrap_or(-400.0)
    }

    fn power(&self, which: fn(u32) -> bool) -> f64 {
        self.found.iter().filter(|(k, _)| which(*k)).map(|(_, level)| 10f64.powf(level / 10.0)).sum()
    }

    fn strongest(&self) -> (u32, f64) {
        self.found.iter().copied().max_by(|a, b| a.1.total_cmp(&b.1)).unwrap_or((1, -400.0))
    }
}

fn db(power: f64) -> f64 {
    10.0 * power.max(1e-40).log10()
}

fn nearly_pure(levels: &Levels) -> Option<(f64, String)> {
    let first = levels.at(1)?;
    let others = levels.power(|k| k > 1);
    if others == 0.0 {
        return Some((1.0, format!("order 1 at {first:.1} dBFS and no other order over the noise")));
    }
    let below = first - db(others);
    (below >= 20.0).then(|| {
        (
            below / 20.0,
            format!("order 1 at {first:.1} dBFS, all other orders together {below:.1} dB below it"),
        )
    })
}

fn falling_odd(levels: &Levels) -> Option<(f64, String)> {
    let (first, third) = (levels.at(1)?, levels.at(3)?);
    let fifth = levels.at_or_low(5);
    let odd_over_even = db(levels.power(|k| k % 2 == 1 && k > 1)) - db(levels.power(|k| k % 2 == 0));
    let falls = first > third && third >= fifth;
    let counts = first - third < 40.0 && odd_over_even >= 6.0;
    (falls && counts).then(|| {
        let tail = levels.at(5).map_or(String::new(), |level| format!(", order 5 {:.1} dB", first - level));
        let even = if odd_over_even < 200.0 {
            format!("odd orders from 3 up stand {odd_over_even:.1} dB over the even ones")
        } else {
            "no even order is over the noise".to_owned()
        };
        let evidence = format!("order 3 is {:.1} dB{tail} below order 1, and {even}", first - third);
        (if fifth > -400.0 { 1.5 } else { 0.9 }, evidence)
    })
}

fn even_orders(levels: &Levels) -> Option<(f64, String)> {
    let second = levels.at(2)?;
    let even_over_odd = db(levels.power(|k| k % 2 == 0)) - db(levels.power(|k| k % 2 == 1));
    (even_over_odd >= 6.0).then(|| {
        let odd = if even_over_odd < 200.0 {
            format!("even orders together stand {even_over_odd:.1} dB over the odd ones")
        } else {
            "no odd order is over the noise".to_owned()
        };
        (1.5 + 0.02 * even_over_odd.min(50.0), format!("order 2 at {second:.1} dBFS; {odd}"))
    })
}

fn long_comb(levels: &Levels) -> Option<(f64, String)> {
    let strongest = levels.strongest().1;
    let high: Vec<f64> = levels.found.iter().filter(|(k, _)| *k >= 10).map(|&(_, level)| level).collect();
    if high.len() < 6 {
        return None;
    }
    let below = strongest - db(levels.power(|k| k >= 10));
    (below <= 25.0).then(|| {
        let top = levels.found.iter().map(|&(k, _)| k).max().unwrap_or(0);
        let evidence = format!(
            "{} orders from 10 up to {top} are over the noise, together only {below:.1} dB below the strongest line",
            high.len()
        );
        (1.0 + (25.0 - below) / 12.0, evidence)
    })
}

fn triplen(levels: &Levels) -> Option<(f64, String)> {
    let (third, ninth) = (levels.at(3)?, levels.at(9)?);
    let beside_third = levels.at_or_low(5);
    let beside_ninth = levels.at_or_low(7).max(levels.at_or_low(11));
    let stands =
        third - beside_third >= 6.0 && ninth - beside_ninth >= 3.0 && third > levels.at_or_low(1) - 6.0;
    stands.then(|| {
        let evidence = format!(
            "order 3 at {third:.1} dBFS and order 9 at {ninth:.1} dBFS stand over orders 5 ({}), 7 and 11 ({})",
            shown(beside_third),
            shown(beside_ninth)
        );
        (2.0, evidence)
    })
}

fn shown(level: f64) -> String {
    if level <= -400.0 { "under the noise".to_owned() } else { format!("{level:.1} dBFS") }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn first_cause(levels: &[(u32, f64)], rate_hz: f64) -> Cause {
        let harmonics: Vec<Harmonic> = levels
            .iter()
            .map(|&(order, level_dbfs)| Harmonic {
                order,
                frequency_hz: 50.0 * f64::from(order),
                level_dbfs,
                rms_v: None,
                phase_deg: 0.0,
                over_floor_db: 40.0,
            })
            .collect();
        likely_causes(&harmonics, false, rate_hz).remove(0)
    }

    #[test]
    fn each_pattern_of_common_practice_is_told() {
        let slow: Vec<(u32, f64)> = (1..=40).map(|k| (k, -30.0 - 0.3 * f64::from(k))).collect();
        let cases: [(&[(u32, f64)], &str); 6] = [
            (&[(1, -20.0), (3, -50.0)], "magnetic"),
            (&[(1, -20.0), (3, -30.0), (5, -38.0), (7, -45.0)], "earth loop"),
            (&[(2, -30.0), (4, -40.0), (6, -46.0)], "rectifier ripple"),
            (&slow, "dimmer"),
            (&[(1, -30.0), (3, -25.0), (5, -45.0), (7, -50.0), (9, -40.0)], "neutral"),
            (&[(1, -30.0), (2, -33.0), (3, -31.0)], "undetermined"),
        ];
        for (levels, want) in cases {
            let cause = first_cause(levels, 48_000.0);
            assert!(cause.cause.contains(want), "{levels:?}: {cause:?}");
            assert!(cause.evidence.chars().any(|c| c.is_ascii_digit()), "{}", cause.evidence);
        }
    }

    #[test]
    fn where_the_rate_hides_the_harmonics_the_claim_is_softer() {
        let hidden = first_cause(&[(1, -20.0)], 150.0);
        assert!(hidden.cause.starts_with("possibly magnetic"), "{hidden:?}");
        assert!(hidden.evidence.contains("no other order over the noise"), "{hidden:?}");
        assert!(hidden.evidence.contains("up to 68 Hz only"), "{hidden:?}");
        let seen = first_cause(&[(1, -20.0)], 1000.0);
        assert!(seen.cause.starts_with("magnetic") && !seen.evidence.contains("only"), "{seen:?}");
    }

    #[test]
    fn nothing_found_has_no_cause() {
        assert!(likely_causes(&[], false, 48_000.0).is_empty());
    }
}
