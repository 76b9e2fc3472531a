//! Quantities with units and SI prefixes: read from text, and printed as one would order a part.

use super::yaml::from_text;

/// What kind of quantity is wanted, and so which units are right.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Unit {
    /// Resistance in ohm; also the letter code of IEC 60062.
    Ohm,
    /// Capacitance in farad; also the letter code of IEC 60062.
    Farad,
    /// Inductance in henry.
    Henry,
    /// Frequency in hertz.
    Hertz,
    /// Voltage in volt; dBu and dBV are read as volts RMS.
    Volt,
    /// Current in ampere.
    Ampere,
    /// Power in watt.
    Watt,
    /// Temperature in degrees Celsius; kelvin are turned into them.
    Celsius,
    /// Level difference in decibel.
    Decibel,
    /// Level in decibel relative to full scale.
    DecibelFullScale,
    /// Fraction, from percent or ppm.
    Fraction,
    /// Drift per kelvin, from ppm/K or %/K.
    PerKelvin,
}

/// What text can stand for one kind of quantity.
struct UnitFacts {
    unit: Unit,
    /// What it is called in messages, with its article.
    name: &'static str,
    /// The symbol printed.
    symbol: &'static str,
    /// A well-formed example.
    example: &'static str,
    /// Spellings read, each with its power of ten.
    spellings: &'static [(&'static str, i32)],
    /// Whether SI prefixes may stand before the spelling.
    prefixed: bool,
    /// Letters of the code of IEC 60062 with their powers of ten.
    letters: &'static [(char, i32)],
}

/// SI prefixes with their powers of ten; µ in both code points, and `u`.
const PREFIXES: &[(&str, i32)] = &[
    ("f", -15),
    ("p", -12),
    ("n", -9),
    ("\u{b5}", -6),
    ("\u{3bc}", -6),
    ("u", -6),
    ("m", -3),
    ("k", 3),
    ("M", 6),
    ("G", 9),
    ("T", 12),
];

/// Letters for resistance of IEC 60062; lower-case `k` is common usage (from memory of both).
const RESISTANCE_LETTERS: &[(char, i32)] =
    &[('L', -3), ('R', 0), ('K', 3), ('k', 3), ('M', 6), ('G', 9), ('T', 12)];

/// Letters for capacitance of IEC 60062; `u` for µ is common usage (from memory of both).
const CAPACITANCE_LETTERS: &[(char, i32)] =
    &[('p', -12), ('n', -9), ('\u{b5}', -6), ('\u{3bc}', -6), ('u', -6), ('m', -3), ('F', 0)];

const FACTS: &[UnitFacts] = &[
    UnitFacts {
        unit: Unit::Ohm,
        name: "a resistance",
        symbol: "Ω",
        example: "4.7 kΩ",
        spellings: &[
            ("\u{3a9}", 0),
            ("\u{2126}", 0),
            ("ohms", 0),
            ("ohm", 0),
            ("Ohms", 0),
            ("Ohm", 0),
            ("OHM", 0),
            ("K\u{3a9}", 3),
            ("K\u{2126}", 3),
            ("Kohm", 3),
        ],
        prefixed: true,
        letters: RESISTANCE_LETTERS,
    },
    UnitFacts {
        unit: Unit::Farad,
        name: "a capacitance",
        symbol: "F",
        example: "220 pF",
        spellings: &[("F", 0)],
        prefixed: true,
        letters: CAPACITANCE_LETTERS,
    },
    UnitFacts {
        unit: Unit::Henry,
        name: "an inductance",
        symbol: "H",
        example: "100 mH",
        spellings: &[("H", 0)],
        prefixed: true,
        letters: &[],
    },
    UnitFacts {
        unit: Unit::Hertz,
        name: "a frequency",
        symbol: "Hz",
        example: "12 Hz",
        spellings: &[("Hz", 0)],
        prefixed: true,
        letters: &[],
    },
    UnitFacts {
        unit: Unit::Volt,
        name: "a voltage",
        symbol: "V",
        example: "2 V",
        spellings: &[("V", 0)],
        prefixed: true,
        letters: &[],
    },
    UnitFacts {
        unit: Unit::Ampere,
        name: "a current",
        symbol: "A",
        example: "20 mA",
        spellings: &[("A", 0)],
        prefixed: true,
        letters: &[],
    },
    UnitFacts {
        unit: Unit::Watt,
        name: "a power",
        symbol: "W",
        example: "0.25 W",
        spellings: &[("W", 0)],
        prefixed: true,
        letters: &[],
    },
    UnitFacts {
        unit: Unit::Celsius,
        name: "a temperature",
        symbol: "°C",
        example: "10 °C",
        spellings: &[("°C", 0), ("\u{ba}C", 0), ("\u{2103}", 0), ("degC", 0), ("K", 0)],
        prefixed: false,
        letters: &[],
    },
    UnitFacts {
        unit: Unit::Decibel,
        name: "a level difference",
        symbol: "dB",
        example: "40 dB",
        spellings: &[("dB", 0)],
        prefixed: false,
        letters: &[],
    },
    UnitFacts {
        unit: Unit::DecibelFullScale,
        name: "a level",
        symbol: "dBFS",
        example: "-90 dBFS",
        spellings: &[("dBFS", 0)],
        prefixed: false,
        letters: &[],
    },
    UnitFacts {
        unit: Unit::Fraction,
        name: "a percentage",
        symbol: "%",
        example: "5 %",
        spellings: &[("%", -2), ("ppm", -6)],
        prefixed: false,
        letters: &[],
    },
    UnitFacts {
        unit: Unit::PerKelvin,
        name: "a drift",
        symbol: "ppm/K",
        example: "150 ppm/K",
        spellings: &[("ppm/K", -6), ("ppm/°C", -6), ("%/K", -2), ("%/°C", -2)],
        prefixed: false,
        letters: &[],
    },
];

/// 0 dBu in volts RMS: 1 mW in 600 Ω, √0.6 V (common practice).
const ZERO_DBU_V: f64 = 0.774_596_669_241_483_4;

/// 0 °C in kelvin (definition of the Celsius scale).
const ZERO_CELSIUS_K: f64 = 273.15;

/// Why text is not the quantity wanted: what was read, what is wrong with it, what would do.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("read `{read}`{problem}; wanted {wanted} with its unit, such as `{example}`{hint}")]
pub struct QuantityError {
    /// The text as read.
    pub read: String,
    /// What is wrong with it, to follow the text.
    pub problem: String,
    /// The kind of quantity wanted.
    pub wanted: &'static str,
    /// A text that would do.
    pub example: String,
    /// A further hint, or nothing.
    pub hint: String,
}

impl Unit {
    fn facts(self) -> &'static UnitFacts {
        FACTS.iter().find(|facts| facts.unit == self).expect("the table holds every unit")
    }

    /// What is wanted, for messages: `a frequency with its unit, such as …`.
    fn wanted(self) -> String {
        let facts = self.facts();
        format!("{} with its unit, such as `{}`", facts.name, facts.example)
    }

    /// The symbol printed after a number.
    pub fn symbol(self) -> &'static str {
        self.facts().symbol
    }
}

/// The value of `text` in the SI unit of `unit` (°C for temperatures, decibels
/// for levels, a fraction for percentages).
///
/// dBu and dBV become volts RMS: 0.7746·10^(x/20) and 10^(x/20).
///
/// ```
/// use notchwright::parts::{Unit, quantity::parse};
///
/// assert_eq!(parse("4.7 kΩ", Unit::Ohm)?, 4700.0);
/// assert_eq!(parse("2n2", Unit::Farad)?, 2.2e-9);
/// # Ok::<(), notchwright::parts::QuantityError>(())
/// ```
///
/// # Errors
/// [`QuantityError`] when the number or its unit is missing or wrong.
pub fn parse(text: &str, unit: Unit) -> Result<f64, QuantityError> {
    let facts = unit.facts();
    let clean = text.trim().replace('\u{2212}', "-");
    if let Some(value) = letter_code(&clean, facts.letters) {
        return Ok(value);
    }
    let (number, suffix) = split_number(&clean);
    let suffix = suffix.trim();
    if number.is_empty() {
        let problem = if clean.is_empty() { "" } else { ", which does not begin with a number" };
        return Err(refusal(text, problem, facts, facts.example, ""));
    }
    if suffix.starts_with(',') {
        return Err(decimal_comma(text, &clean, facts));
    }
    if suffix.is_empty() {
        let example = format!("{number} {}", facts.symbol);
        return Err(refusal(text, ", which has no unit", facts, &example, ""));
    }
    match value_of(number, suffix, facts) {
        Some(value) if value.is_finite() => Ok(value),
        Some(_) => Err(refusal(text, ", which is too large a number", facts, facts.example, "")),
        None => Err(wrong_unit(text, number, suffix, facts)),
    }
}

/// The number with its exponent, then all that follows.
fn split_number(text: &str) -> (&str, &str) {
    let bytes = text.as_bytes();
    let digits = |mut at: usize| {
        while bytes.get(at).is_some_and(u8::is_ascii_digit) {
            at += 1;
        }
        at
    };
    let start = usize::from(matches!(bytes.first(), Some(b'+' | b'-')));
    let whole = digits(start);
    let mut end = whole;
    if bytes.get(whole) == Some(&b'.') {
        end = digits(whole + 1);
    }
    if end == start || (end == start + 1 && bytes[start] == b'.') {
        return ("", text);
    }
    if matches!(bytes.get(end), Some(b'e' | b'E')) {
        let sign = usize::from(matches!(bytes.get(end + 1), Some(b'+' | b'-')));
        let exponent_end = digits(end + 1 + sign);
        if exponent_end > end + 1 + sign {
            end = exponent_end;
        }
    }
    text.split_at(end)
}

/// The value of a number and its unit, when the unit is one of these facts'.
fn value_of(number: &str, suffix: &str, facts: &UnitFacts) -> Option<f64> {
    if let Some(power) = power_of(suffix, facts) {
        let value = scaled(number, power)?;
        let kelvin = facts.unit == Unit::Celsius && suffix == "K";
        return Some(if kelvin { value - ZERO_CELSIUS_K } else { value });
    }
    let reference_v = match (facts.unit, suffix) {
        (Unit::Volt, "dBu") => ZERO_DBU_V,
        (Unit::Volt, "dBV") => 1.0,
        _ => return None,
    };
    Some(reference_v * 10f64.powf(scaled(number, 0)? / 20.0))
}

/// The power of ten of a unit with its prefix.
fn power_of(suffix: &str, facts: &UnitFacts) -> Option<i32> {
    facts.spellings.iter().find_map(|&(spelling, power)| {
        let prefix = suffix.strip_suffix(spelling)?.trim_end();
        if prefix.is_empty() {
            return Some(power);
        }
        if !facts.prefixed || power != 0 {
            return None;
        }
        PREFIXES.iter().find(|&&(name, _)| name == prefix).map(|&(_, power)| power)
    })
}

/// `number`·10^`power`, rounded once: the double nearest to the decimal value,
/// so that `4.7 nF` and the preferred value 4.7e-9 are equal.
fn scaled(number: &str, power: i32) -> Option<f64> {
    let (mantissa, exponent) = match number.find(['e', 'E']) {
        Some(at) => (&number[..at], number[at + 1..].parse::<i32>().ok()?),
        None => (number, 0),
    };
    format!("{mantissa}e{}", exponent.checked_add(power)?).parse().ok()
}

/// The letter code of IEC 60062: the letter is the multiplier and stands for
/// the decimal point (`4K7`, `2n2`, `R47`, `100n`); `4.7k` is common usage.
fn letter_code(text: &str, letters: &[(char, i32)]) -> Option<f64> {
    let at = text.find(|c: char| !c.is_ascii_digit() && c != '.')?;
    let letter = text[at..].chars().next()?;
    let &(_, power) = letters.iter().find(|&&(known, _)| known == letter)?;
    let (before, after) = (&text[..at], &text[at + letter.len_utf8()..]);
    let digits = |part: &str| part.bytes().all(|byte| byte.is_ascii_digit());
    let pointed = before.contains('.');
    if !digits(after) || (before.is_empty() && after.is_empty()) || (pointed && !after.is_empty()) {
        return None;
    }
    let number = if pointed { before.to_owned() } else { format!("0{before}.{after}0") };
    scaled(&number, power)
}

fn refusal(text: &str, problem: &str, facts: &UnitFacts, example: &str, hint: &str) -> QuantityError {
    let (read, problem) = match text.trim() {
        "" => (String::new(), ", which is nothing".to_owned()),
        read => (read.to_owned(), problem.to_owned()),
    };
    QuantityError { read, problem, wanted: facts.name, example: example.to_owned(), hint: hint.to_owned() }
}

fn decimal_comma(text: &str, clean: &str, facts: &UnitFacts) -> QuantityError {
    let pointed = clean.replacen(',', ".", 1);
    let (number, suffix) = split_number(&pointed);
    let example = match value_of(number, suffix.trim(), facts) {
        Some(_) => pointed.clone(),
        None => format!("{number} {}", facts.symbol),
    };
    let hint = ": a decimal point, not a decimal comma, and no mark between thousands";
    refusal(text, ", which has a comma in the number", facts, &example, hint)
}

/// Tells a unit of another kind from one that is none, and a wrong letter case.
fn wrong_unit(text: &str, number: &str, suffix: &str, facts: &UnitFacts) -> QuantityError {
    let other = FACTS.iter().find(|other| value_of(number, suffix, other).is_some());
    if let Some(other) = other {
        let problem = format!(", which is {}", other.name);
        return refusal(text, &problem, facts, facts.example, "");
    }
    let lower = suffix.to_lowercase();
    let recased = facts.spellings.iter().flat_map(|&(spelling, power)| {
        let prefixes = if facts.prefixed && power == 0 { PREFIXES } else { &[] };
        [("", 0)].iter().chain(prefixes).map(move |&(prefix, _)| format!("{prefix}{spelling}"))
    });
    let hint = match recased.into_iter().find(|spelling| spelling.to_lowercase() == lower) {
        Some(spelling) => format!(" (`{suffix}`: mind capitals, as in `{number} {spelling}`)"),
        None => String::new(),
    };
    refusal(text, &format!(", whose unit `{suffix}` is none of these"), facts, facts.example, &hint)
}

/// Text of a value as one would order the part: three to six digits as needed,
/// a prefix that leaves 1 to 1000 before it. Capacitances use p, n and µ only
/// (`1000 µF`), as the trade writes them (common practice).
pub fn print(value: f64, unit: Unit) -> String {
    let symbol = unit.symbol();
    match unit {
        Unit::Fraction => format!("{} %", trimmed(value * 100.0)),
        Unit::PerKelvin => format!("{} ppm/K", trimmed(value * 1e6)),
        Unit::Celsius | Unit::Decibel | Unit::DecibelFullScale => format!("{} {symbol}", trimmed(value)),
        _ => {
            let (scaled, prefix) = engineering(value, unit);
            format!("{} {prefix}{symbol}", trimmed(scaled))
        }
    }
}

/// Prefixes printed, by powers of a thousand from pico on.
const PRINTED: [&str; 8] = ["p", "n", "µ", "m", "", "k", "M", "G"];

fn engineering(value: f64, unit: Unit) -> (f64, &'static str) {
    if value == 0.0 || !value.is_finite() {
        return (value, "");
    }
    let highest = if unit == Unit::Farad { 2 } else { PRINTED.len() - 1 };
    // Six digits: what rounds up to 1000 belongs to the next prefix.
    let thousands = ((value.abs() * (1.0 + 5e-7)).log10() / 3.0).floor() as i32;
    let index = (thousands + 4).clamp(0, highest as i32);
    let exponent = 3 * (index - 4);
    let scaled = if exponent < 0 { value * 10f64.powi(-exponent) } else { value / 10f64.powi(exponent) };
    (scaled, PRINTED[index as usize])
}

/// Up to six digits, no trailing zeros, no exponent.
fn trimmed(value: f64) -> String {
    let magnitude = if value == 0.0 { 0 } else { value.abs().log10().floor() as i32 };
    let decimals = (5 - magnitude).clamp(0, 12) as usize;
    let text = format!("{value:.decimals$}");
    match text.contains('.') {
        true => text.trim_end_matches('0').trim_end_matches('.').to_owned(),
        false => text,
    }
}

macro_rules! quantities {
    ($($name:ident = $unit:ident, $doc:literal;)+) => {$(
        #[doc = $doc]
        #[derive(Debug, Clone, Copy, PartialEq, PartialOrd)]
        pub struct $name(pub f64);

        impl<'de> serde::Deserialize<'de> for $name {
            fn deserialize<D: serde::Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
                let unit = Unit::$unit;
                from_text(deserializer, &unit.wanted(), |text| parse(text, unit)).map(Self)
            }
        }
    )+};
}

quantities! {
    Ohms = Ohm, "A resistance in ohm, read from text with its unit.";
    Farads = Farad, "A capacitance in farad, read from text with its unit.";
    Henries = Henry, "An inductance in henry, read from text with its unit.";
    Hertz = Hertz, "A frequency in hertz, read from text with its unit.";
    Volts = Volt, "A voltage in volt, read from text with its unit.";
    Amperes = Ampere, "A current in ampere, read from text with its unit.";
    Watts = Watt, "A power in watt, read from text with its unit.";
    DegreesCelsius = Celsius, "A temperature in °C, read from text with its unit.";
    Decibels = Decibel, "A level difference in decibel, read from text with its unit.";
    Fraction = Fraction, "A fraction, read from text in percent or ppm.";
    PerKelvin = PerKelvin, "A drift per kelvin, read from text in ppm/K or %/K.";
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn message(text: &str, unit: Unit) -> String {
        parse(text, unit).expect_err("not a quantity").to_string()
    }

    #[test]
    fn each_unit_reads_in_each_of_its_spellings() {
        let cases = [
            ("350 Ω", Unit::Ohm, 350.0),
            ("350 \u{2126}", Unit::Ohm, 350.0),
            ("350 ohm", Unit::Ohm, 350.0),
            ("4.7kΩ", Unit::Ohm, 4700.0),
            ("4.7 k ohm", Unit::Ohm, 4700.0),
            ("1 MOhm", Unit::Ohm, 1e6),
            ("10 KΩ", Unit::Ohm, 1e4),
            ("5 mΩ", Unit::Ohm, 5e-3),
            ("220 pF", Unit::Farad, 220e-12),
            ("4.7 µF", Unit::Farad, 4.7e-6),
            ("4.7 \u{3bc}F", Unit::Farad, 4.7e-6),
            ("4.7 uF", Unit::Farad, 4.7e-6),
            ("100\u{a0}mH", Unit::Henry, 0.1),
            ("18 kHz", Unit::Hertz, 18e3),
            ("1.5e3 Hz", Unit::Hertz, 1500.0),
            (".5 Hz", Unit::Hertz, 0.5),
            ("2 V", Unit::Volt, 2.0),
            ("20 µV", Unit::Volt, 20e-6),
            ("20 mA", Unit::Ampere, 20e-3),
            ("0.25 W", Unit::Watt, 0.25),
            ("-10 °C", Unit::Celsius, -10.0),
            ("\u{2212}10 °C", Unit::Celsius, -10.0),
            ("0.5 dB", Unit::Decibel, 0.5),
            ("-90 dBFS", Unit::DecibelFullScale, -90.0),
            ("5 %", Unit::Fraction, 0.05),
            ("-250 ppm/K", Unit::PerKelvin, -250e-6),
            ("0.39 %/K", Unit::PerKelvin, 0.0039),
        ];
        for (text, unit, value) in cases {
            assert_eq!(parse(text, unit), Ok(value), "{text}");
        }
    }

    #[test]
    fn audio_levels_are_volts_rms() {
        // 0 dBu is 1 mW in 600 Ω: √(0.001·600) V; 0 dBV is 1 V (common practice).
        assert!((parse("0 dBu", Unit::Volt).unwrap() - 0.6f64.sqrt()).abs() < 1e-15);
        assert!((parse("4 dBu", Unit::Volt).unwrap() - 1.227_7).abs() < 5e-5);
        assert!((parse("-10 dBV", Unit::Volt).unwrap() - 0.316_228).abs() < 5e-7);
    }

    #[test]
    fn kelvin_are_turned_into_degrees_celsius() {
        assert!((parse("300 K", Unit::Celsius).unwrap() - 26.85).abs() < 1e-9);
    }

    #[test]
    fn the_letter_code_reads_as_iec_60062_has_it() {
        // Examples of the code in IEC 60062 (from memory): 0.1 Ω is R10, 3.32 Ω is 3R32,
        // 59.04 Ω is 59R04, 590 Ω is 590R, 5.9 kΩ is 5K9, 0.1 pF is p10, 3.32 pF is 3p32.
        let ohms = [("R10", 0.1), ("3R32", 3.32), ("59R04", 59.04), ("590R", 590.0), ("5K9", 5900.0)];
        for (text, value) in ohms {
            assert_eq!(parse(text, Unit::Ohm), Ok(value), "{text}");
        }
        let usage = [("4K7", 4700.0), ("4k7", 4700.0), ("R47", 0.47), ("1M", 1e6), ("4.7k", 4700.0)];
        for (text, value) in usage {
            assert_eq!(parse(text, Unit::Ohm), Ok(value), "{text}");
        }
        let farads =
            [("p10", 0.1e-12), ("3p32", 3.32e-12), ("2n2", 2.2e-9), ("100n", 100e-9), ("4u7", 4.7e-6)];
        for (text, value) in farads {
            assert_eq!(parse(text, Unit::Farad), Ok(value), "{text}");
        }
    }

    #[test]
    fn letter_codes_of_the_wrong_kind_are_refused() {
        for (text, unit) in [("4m7", Unit::Ohm), ("4K7", Unit::Farad), ("4K7", Unit::Henry), ("R", Unit::Ohm)]
        {
            assert!(parse(text, unit).is_err(), "{text}");
        }
    }

    #[test]
    fn a_missing_unit_says_which_is_wanted() {
        assert_eq!(
            message("12", Unit::Hertz),
            "read `12`, which has no unit; wanted a frequency with its unit, such as `12 Hz`"
        );
    }

    #[test]
    fn a_decimal_comma_gets_a_hint_with_the_point() {
        let said = message("0,5 dB", Unit::Decibel);
        assert!(
            said.contains("`0,5 dB`") && said.contains("`0.5 dB`") && said.contains("decimal comma"),
            "{said}"
        );
    }

    #[test]
    fn a_unit_of_another_kind_is_named() {
        let said = message("12 V", Unit::Hertz);
        assert!(said.contains("which is a voltage") && said.contains("wanted a frequency"), "{said}");
    }

    #[test]
    fn wrong_capitals_get_a_hint() {
        let said = message("12 hz", Unit::Hertz);
        assert!(said.contains("mind capitals, as in `12 Hz`"), "{said}");
    }

    #[test]
    fn text_without_a_number_is_refused() {
        for text in
            ["", "  ", "Hz", "-", ".", "- 3 Hz", "many Hz", "1 000 Hz", "nan Hz", "inf Hz", "1e999 Hz"]
        {
            let said = message(text, Unit::Hertz);
            assert!(said.contains("wanted a frequency"), "{text}: {said}");
        }
    }

    #[test]
    fn values_print_as_one_would_order_them() {
        let cases = [
            (39e-6, Unit::Farad, "39 µF"),
            (4.7e-9, Unit::Farad, "4.7 nF"),
            (470e-9, Unit::Farad, "470 nF"),
            (1000e-6, Unit::Farad, "1000 µF"),
            (4700.0, Unit::Ohm, "4.7 kΩ"),
            (1e6, Unit::Ohm, "1 MΩ"),
            (0.47, Unit::Ohm, "470 mΩ"),
            (999.9999, Unit::Ohm, "1 kΩ"),
            (10.0, Unit::Henry, "10 H"),
            (0.1, Unit::Henry, "100 mH"),
            (0.0, Unit::Hertz, "0 Hz"),
            (0.05, Unit::Fraction, "5 %"),
            (-250e-6, Unit::PerKelvin, "-250 ppm/K"),
            (-10.5, Unit::Celsius, "-10.5 °C"),
        ];
        for (value, unit, text) in cases {
            assert_eq!(print(value, unit), text);
        }
    }

    proptest! {
        #[test]
        fn what_is_printed_reads_back(mantissa in 100u32..1000, exponent in -11i32..6) {
            let value: f64 = format!("{mantissa}e{exponent}").parse().unwrap();
            for unit in [Unit::Ohm, Unit::Farad, Unit::Henry, Unit::Hertz, Unit::Volt] {
                prop_assert_eq!(parse(&print(value, unit), unit), Ok(value));
            }
        }

        #[test]
        fn no_text_makes_it_panic(text in "\\PC{0,12}") {
            for facts in FACTS {
                let _ = parse(&text, facts.unit);
            }
        }
    }
}
