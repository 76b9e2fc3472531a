//! What usually makes hum of this shape, with the numbers that point there.
//!
//! Common practice, as a table: a pattern is a function from what was measured to how well
//! it fits and its evidence, or to nothing. To add a cause, add a row to `PATTERNS`.

mod circumstances;
mod orders;
mod shapes;

use super::findings::{Cause, Harmonic, LevelChange, Mains, OtherSupply};
use super::passes::top_hz;
use orders::{Orders, db};

/// What was measured, as far as it points to a cause.
pub(super) struct Signs<'a> {
    pub mains: &'a Mains,
    pub harmonics: &'a [Harmonic],
    pub changes: &'a [LevelChange],
    pub other_supplies: &'a [OtherSupply],
    /// Whether samples are cut off, which makes harmonics.
    pub clipped: bool,
    pub rate_hz: f64,
    /// Length of the longest capture.
    pub duration_s: f64,
}

/// How well a pattern fits, 0 to 1, and the numbers that say so.
type Told = Option<(f64, String)>;

/// Causes of one kind exclude each other; those of different kinds do not.
#[derive(Clone, Copy, PartialEq)]
enum Kind {
    /// Who makes such harmonics, and how they get in.
    Shape,
    /// When it hums, and at which frequency.
    Circumstance,
}

/// One row.
struct Pattern {
    cause: &'static str,
    kind: Kind,
    /// Where to look first.
    look_first: &'static str,
    /// What to try first.
    first_cure: &'static str,
    /// What to measure, and what it shows if this is the cause.
    test: &'static str,
    tells: fn(&Seen) -> Told,
}

/// The signs, with the levels by order.
struct Seen<'a> {
    signs: &'a Signs<'a>,
    orders: Orders,
}

/// Orders that must lie below the top for a pattern to be told as such.
const ENOUGH_ORDERS: u32 = 7;
/// Most that a recording alone lets one claim.
const MOST: f64 = 0.9;
/// What another cause that fits as well takes off.
const RIVAL: f64 = 0.4;
/// What is left of a claim where the sample rate hides the higher orders.
const SHORT_LOOK: f64 = 0.6;
/// What is left of a claim on harmonics that clipping may have made.
const CLIPPED: f64 = 0.7;

const PATTERNS: [Pattern; 14] = [
    Pattern {
        cause: "magnetic pick-up from a transformer or by a loop",
        kind: Kind::Shape,
        look_first: "transformers, motors and mains cables within a metre or two of the line, and wide loops between \
                     signal and return",
        first_cure: "move or turn the line away from transformers and motors, twist the pair, make the loop between \
                     signal and return small",
        test: "turn or move the cable by a hand's width and record again: magnetic pick-up changes by decibels",
        tells: shapes::nearly_pure,
    },
    Pattern {
        cause: "earth loop or shared return",
        kind: Kind::Shape,
        look_first: "every place where screen or signal return meets earth or another device's chassis",
        first_cure: "earth the screen at one end only, feed both ends from one outlet, or isolate the signal \
                     (transformer, differential input); never lift a protective earth",
        test: "unplug the other devices' signal cables one by one, or put a battery-fed recorder at the far end: an \
               earth loop's hum falls when its second connection opens",
        tells: shapes::falling_odd,
    },
    Pattern {
        cause: "rectifier ripple from a supply",
        kind: Kind::Shape,
        look_first: "the supply that feeds sensor and amplifier: its reservoir capacitors, its regulator, the way of \
                     its return",
        first_cure: "check the reservoir capacitors and regulator of the supply that feeds the line, and take its \
                     return to the supply, not through the signal",
        test: "feed the line from a battery or another supply and record again: ripple goes with its supply",
        tells: shapes::even_orders,
    },
    Pattern {
        cause: "vibration of cores or flicker of lamps, sensed by the sensor itself",
        kind: Kind::Shape,
        look_first: "transformers and lamps near the sensor: cores shake, and lamps flicker, at twice the mains \
                     frequency",
        first_cure: "set the sensor apart from the transformer, on soft feet, or shade it",
        test: "replace the sensor by an equal resistor and record again: what the sensor itself senses is gone",
        tells: shapes::twice_the_mains,
    },
    Pattern {
        cause: "phase-angle dimmer or poor rectifier",
        kind: Kind::Shape,
        look_first: "dimmers, speed controllers and switching supplies on the same circuit, and their cables beside \
                     the line",
        first_cure: "switch dimmers and switching supplies off one by one while watching the comb; keep their \
                     cables apart from the line",
        test: "set dimmers to full and to off and record each: the high orders change with the setting",
        tells: shapes::long_comb,
    },
    Pattern {
        cause: "neutral current of three-phase loads",
        kind: Kind::Shape,
        look_first: "risers, distribution boards and their neutral bars along the line's way",
        first_cure: "route the line away from risers and distribution boards, and look for a neutral joined to \
                     earth in a second place",
        test: "record at night or with the building's loads off: orders 3 and 9 fall with the loads of all three phases",
        tells: shapes::triplen,
    },
    Pattern {
        cause: "three-phase rectifier: a motor drive, a charger, a large uninterruptible supply",
        kind: Kind::Shape,
        look_first: "drives and chargers, their motor cables, and the earth conductors between them and the line",
        first_cure: "keep motor cables screened and apart from the line, and take their screens to the drive's own \
                     earth",
        test: "stop the drive, or run it at half load, and record again: orders 5 and 7 follow its load",
        tells: shapes::six_pulse,
    },
    Pattern {
        cause: "single-phase rectifiers with capacitor input: many switching supplies on one circuit",
        kind: Kind::Shape,
        look_first: "lamps, computers and chargers on the circuit that feeds the devices at either end of the line",
        first_cure: "feed the devices on the line from another circuit than the switching supplies, and cure the \
                     common return as for an earth loop",
        test: "unplug the switching supplies on the circuit and record again: orders 3, 5 and 7 fall together",
        tells: shapes::peaky_odd,
    },
    Pattern {
        cause: "half-wave rectified load, or a core that direct current saturates",
        kind: Kind::Shape,
        look_first: "heaters with a half-power diode, simple chargers, and transformers on the same circuit",
        first_cure: "switch such a load to full power or off, or move it to another circuit",
        test: "switch it to full power and record again: the even orders go, order 1 stays",
        tells: shapes::half_wave,
    },
    Pattern {
        cause: "a load that is switched or runs up: pump, compressor, heater, lamp",
        kind: Kind::Circumstance,
        look_first: "what starts and stops near the line, and which circuit it shares with it",
        first_cure: "put that load on another circuit, lead its cable apart from the line, and check its earth",
        test: "write down when the loads nearby switch while recording again: the level keeps its times",
        tells: circumstances::switched_load,
    },
    Pattern {
        cause: "generator or island supply",
        kind: Kind::Circumstance,
        look_first: "a generator, a ship's or building's own supply, or a recorder whose speed varies",
        first_cure: "design for its wander (brief: centre measured, allow as wide as it wanders), or cure the coupling; a \
                     narrow notch does not follow it",
        test: "record a steady generator's tone along: a recorder's varying speed moves that too, a supply's does not",
        tells: circumstances::island,
    },
    Pattern {
        cause: "inverter or uninterruptible supply kept by a crystal",
        kind: Kind::Circumstance,
        look_first: "an inverter, or an uninterruptible supply in its own clock, that feeds a device on the line",
        first_cure: "feed that device from the grid or a battery and see whether the hum goes",
        test: "record ten minutes: a grid wanders by some millihertz, a crystal does not",
        tells: circumstances::crystal,
    },
    Pattern {
        cause: "traction current of an electric railway",
        kind: Kind::Circumstance,
        look_first: "the railway's way and the earth currents along it: pipes, cable screens, rails",
        first_cure: "earth the screen at one end only, and lead the line square to the track",
        test: "record while a train passes or starts, and in the night's pause: the level follows the traffic",
        tells: circumstances::railway,
    },
    Pattern {
        cause: "a second supply: an aircraft's or ship's, an inverter, or hum that was in the material before",
        kind: Kind::Circumstance,
        look_first: "converters and inverters of that frequency, and material that was recorded elsewhere",
        first_cure: "switch the converters off one by one while watching that line",
        test: "record the line with nothing played into it: hum of the material is gone then",
        tells: circumstances::second_supply,
    },
];

/// The two recordings that part what comes before the line from what comes after.
pub const BENCH_CAPTURES: &str = "Two recordings tell where it enters (`notchwright analyse a.wav b.wav` sets their levels side by \
                     side): with the sensor replaced by an equal resistor, hum that stays enters along the cable or \
                     after it; with the input shorted where a filter would stand, hum that stays enters behind it, \
                     and no filter there will help";

/// Causes that the signs point to, the likeliest first; `undetermined` with what was seen
/// where no pattern of the harmonics fits. Empty where no harmonic was found.
///
/// The sample rate sets how far could be looked: a cause told from fewer than the first
/// few orders is called possible, no more, and its evidence says where the look ended.
pub(super) fn likely_causes(signs: &Signs) -> Vec<Cause> {
    let Some(any) = signs.harmonics.first() else { return Vec::new() };
    let seen = Seen { signs, orders: Orders::new(signs.harmonics) };
    let looked = Looked::new(any.frequency_hz / f64::from(any.order), signs.rate_hz);
    let told: Vec<(&Pattern, f64, String)> = PATTERNS
        .iter()
        .filter_map(|pattern| (pattern.tells)(&seen).map(|(fit, evidence)| (pattern, fit, evidence)))
        .collect();
    let mut pointed: Vec<(&Pattern, f64, String)> = told
        .iter()
        .map(|(pattern, fit, evidence)| {
            let rivals =
                told.iter().filter(|(other, ..)| other.kind == pattern.kind && other.cause != pattern.cause);
            let rival = rivals.map(|(_, fit, _)| *fit).fold(0.0, f64::max);
            let (mut score, mut evidence) = (fit * (1.0 - RIVAL * rival), evidence.clone());
            if pattern.kind == Kind::Shape {
                score *= looked.trust() * if signs.clipped { CLIPPED } else { 1.0 };
                evidence = with_caution(looked.bounded(evidence), signs.clipped);
            }
            (*pattern, score.min(MOST), evidence)
        })
        .collect();
    pointed.sort_by(|a, b| b.1.total_cmp(&a.1));
    // What speaks of something else is no alternative.
    let next = |i: usize| {
        let mut others = pointed[i + 1..].iter().chain(&pointed[..i]);
        others.find(|(other, ..)| other.kind == pointed[i].0.kind)
    };
    let mut causes: Vec<Cause> = (0..pointed.len())
        .map(|i| {
            let (pattern, score, evidence) = &pointed[i];
            Cause {
                cause: looked.softened(pattern),
                evidence: evidence.clone(),
                confidence: (score * 100.0).round() / 100.0,
                look_first: pattern.look_first.to_owned(),
                first_cure: pattern.first_cure.to_owned(),
                tell_apart: told_apart(pattern, next(i).map(|(next, ..)| *next), i == 0),
            }
        })
        .collect();
    if pointed.iter().all(|(pattern, ..)| pattern.kind != Kind::Shape) {
        causes.push(undetermined(&seen, &looked, causes.is_empty()));
    }
    causes
}

/// What to measure to tell a cause from the next of its kind in the list.
fn told_apart(pattern: &Pattern, next: Option<&Pattern>, is_first: bool) -> String {
    let mut text = capitalised(pattern.test);
    if let Some(next) = next {
        text += &format!(". Against {}: {}", next.cause, next.test);
    }
    if is_first {
        text += &format!(". {BENCH_CAPTURES}");
    }
    text
}

fn capitalised(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or(String::new(), |first| first.to_uppercase().chain(letters).collect())
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

    fn trust(&self) -> f64 {
        if self.is_short() { SHORT_LOOK } else { 1.0 }
    }

    fn softened(&self, pattern: &Pattern) -> String {
        if self.is_short() && pattern.kind == Kind::Shape {
            format!("possibly {}", pattern.cause)
        } else {
            pattern.cause.to_owned()
        }
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

fn undetermined(seen: &Seen, looked: &Looked, is_first: bool) -> Cause {
    let orders = &seen.orders;
    let strongest = orders.strongest();
    let against = |power: f64| {
        if power > 0.0 {
            format!("{:.1} dB against it", db(power) - strongest.1)
        } else {
            "under the noise".to_owned()
        }
    };
    let evidence = format!(
        "{} orders, the strongest {} at {:.1} dBFS, odd orders together {}, even orders {}: no pattern of common practice",
        orders.count(),
        strongest.0,
        strongest.1,
        against(orders.power(|k| k % 2 == 1)),
        against(orders.power(|k| k % 2 == 0)),
    );
    Cause {
        cause: "undetermined".to_owned(),
        evidence: with_caution(looked.bounded(evidence), seen.signs.clipped),
        confidence: 0.0,
        look_first: "where the hum enters: before the line, along it, or after it".to_owned(),
        first_cure:
            "record again with the sensor replaced by an equal resistor, and with the input shorted: what \
                     stays enters after the line"
                .to_owned(),
        tell_apart: if is_first { BENCH_CAPTURES.to_owned() } else { String::new() },
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn harmonics(levels: &[(u32, f64)]) -> Vec<Harmonic> {
        let harmonic = |&(order, level_dbfs): &(u32, f64)| Harmonic {
            order,
            frequency_hz: 50.0 * f64::from(order),
            level_dbfs,
            over_floor_db: 100.0 + level_dbfs,
            ..Harmonic::default()
        };
        levels.iter().map(harmonic).collect()
    }

    fn causes_of(levels: &[(u32, f64)], rate_hz: f64) -> Vec<Cause> {
        likely_causes(&Signs {
            mains: &Mains::default(),
            harmonics: &harmonics(levels),
            changes: &[],
            other_supplies: &[],
            clipped: false,
            rate_hz,
            duration_s: 60.0,
        })
    }

    fn first_cause(levels: &[(u32, f64)], rate_hz: f64) -> Cause {
        causes_of(levels, rate_hz).remove(0)
    }

    #[test]
    fn each_pattern_of_common_practice_is_told() {
        let slow: Vec<(u32, f64)> = (1..=40).map(|k| (k, -30.0 - 0.3 * f64::from(k))).collect();
        let cases: [(&[(u32, f64)], &str); 10] = [
            (&[(1, -20.0), (3, -50.0)], "magnetic"),
            (&[(1, -20.0), (3, -30.0), (5, -38.0), (7, -45.0)], "earth loop"),
            (&[(2, -30.0), (4, -40.0), (6, -46.0)], "rectifier ripple"),
            (&[(2, -30.0)], "vibration"),
            (&slow, "dimmer"),
            (&[(1, -30.0), (3, -25.0), (5, -45.0), (7, -50.0), (9, -40.0)], "neutral"),
            (&[(1, -40.0), (5, -30.0), (7, -33.0), (11, -41.0), (13, -44.0)], "three-phase rectifier"),
            (&[(1, -30.0), (3, -33.0), (5, -32.0), (7, -36.0), (9, -44.0)], "single-phase rectifiers"),
            (&[(1, -30.0), (2, -35.0), (4, -44.0), (6, -50.0)], "half-wave"),
            (&[(1, -30.0), (2, -33.0), (3, -31.0)], "undetermined"),
        ];
        for (levels, want) in cases {
            let cause = first_cause(levels, 48_000.0);
            assert!(cause.cause.contains(want), "{levels:?}: {cause:?}");
            assert!(cause.evidence.chars().any(|c| c.is_ascii_digit()), "{}", cause.evidence);
            assert!((0.0..=0.9).contains(&cause.confidence), "{cause:?}");
            assert!(!cause.look_first.is_empty() && cause.tell_apart.contains("equal resistor"), "{cause:?}");
        }
    }

    #[test]
    fn a_cause_with_a_rival_is_less_sure_and_says_how_to_tell_them_apart() {
        let alone = first_cause(&[(1, -20.0), (3, -30.0), (5, -38.0), (7, -45.0)], 48_000.0);
        let ripple = causes_of(&[(2, -30.0), (4, -40.0), (6, -46.0)], 48_000.0);
        assert!(alone.confidence > 0.8, "{alone:?}");
        assert!(ripple.len() > 1 && ripple[0].confidence < alone.confidence, "{ripple:?}");
        assert!(ripple[0].tell_apart.contains(&format!("Against {}", ripple[1].cause)), "{:?}", ripple[0]);
    }

    #[test]
    fn nothing_is_claimed_of_a_single_line_just_over_the_noise() {
        let mut weak = harmonics(&[(1, -85.0)]);
        weak[0].over_floor_db = 15.0;
        let causes = likely_causes(&Signs {
            mains: &Mains::default(),
            harmonics: &weak,
            changes: &[],
            other_supplies: &[],
            clipped: false,
            rate_hz: 1000.0,
            duration_s: 60.0,
        });
        assert_eq!(causes[0].cause, "undetermined");
        assert_eq!(causes[0].confidence, 0.0);
    }

    #[test]
    fn switching_wander_and_other_supplies_are_causes_beside_the_shape() {
        let harmonics = harmonics(&[(1, -38.0)]);
        let mains = Mains {
            found: true,
            nominal_hz: Some(50.0),
            frequency_hz: Some(50.1),
            spread_hz: Some(0.4),
            spread_floor_hz: Some(0.001),
            ..Mains::default()
        };
        let step = |time_s: f64| LevelChange {
            time_s,
            over_s: 0.0,
            order: 1,
            from_dbfs: -52.1,
            to_dbfs: -38.0,
            orders: vec![1],
        };
        let railway = OtherSupply { nominal_hz: 16.7, frequency_hz: 16.69, level_dbfs: -60.0 };
        let causes = likely_causes(&Signs {
            mains: &mains,
            harmonics: &harmonics,
            changes: &[step(12.3), step(30.0)],
            other_supplies: &[railway],
            clipped: false,
            rate_hz: 1000.0,
            duration_s: 60.0,
        });
        for (want, number) in
            [("switched", "12.3 s"), ("generator", "0.40 Hz"), ("railway", "16.69"), ("magnetic", "-38.0")]
        {
            let cause = causes.iter().find(|cause| cause.cause.contains(want));
            assert!(cause.is_some_and(|cause| cause.evidence.contains(number)), "{want}: {causes:?}");
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
        assert!(seen.confidence > hidden.confidence);
    }

    #[test]
    fn nothing_found_has_no_cause() {
        assert!(causes_of(&[], 48_000.0).is_empty());
    }
}
