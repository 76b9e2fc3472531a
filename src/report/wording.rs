//! Numbers as people read them: units, sensible digits, a true minus sign,
//! and words where there is no number.

use crate::analysis::{Converter, Weighted};

/// What stands where a figure is not finite.
pub(super) const UNKNOWN: &str = "not known";

/// A number with `decimals` digits after the point and a true minus sign.
pub(super) fn number(value: f64, decimals: usize) -> String {
    if !value.is_finite() {
        return UNKNOWN.to_owned();
    }
    let text = format!("{value:.decimals$}");
    // What rounds to nothing has no sign.
    match text.strip_prefix('-') {
        Some(digits) if digits.chars().any(|c| c.is_ascii_digit() && c != '0') => format!("\u{2212}{digits}"),
        Some(digits) => digits.to_owned(),
        None => text,
    }
}

/// A number with a unit behind it, or words when it is not finite.
pub(super) fn with_unit(value: f64, decimals: usize, unit: &str) -> String {
    if value.is_finite() { format!("{}\u{a0}{unit}", number(value, decimals)) } else { UNKNOWN.to_owned() }
}

/// Decibels: two digits where a tenth is much, one elsewhere.
pub(super) fn decibel(value: f64) -> String {
    if value == f64::INFINITY {
        return "a full null".to_owned();
    }
    with_unit(value, if value.abs() < 9.95 { 2 } else { 1 }, "dB")
}

/// A level relative to full scale; silence is said in words.
pub(super) fn dbfs(value: f64) -> String {
    if value == f64::NEG_INFINITY { "silence".to_owned() } else { with_unit(value, 1, "dBFS") }
}

/// A value with an SI prefix and `digits` significant digits: `4.70 µF`.
pub(super) fn si(value: f64, unit: &str, digits: usize) -> String {
    const PREFIXES: [(i32, &str); 9] =
        [(-12, "p"), (-9, "n"), (-6, "µ"), (-3, "m"), (0, ""), (3, "k"), (6, "M"), (9, "G"), (12, "T")];
    if !value.is_finite() {
        return UNKNOWN.to_owned();
    }
    if value == 0.0 {
        return format!("0\u{a0}{unit}");
    }
    // Rounded first, so that 999.96 becomes 1.00 k and not 1000.
    let decade = |x: f64| x.abs().log10().floor() as i32;
    let quantum = 10_f64.powi(decade(value) + 1 - digits as i32);
    let rounded = (value / quantum).round() * quantum;
    let exponent = ((decade(rounded) as f64 + 1e-9) / 3.0).floor() as i32 * 3;
    let exponent = exponent.clamp(-12, 12);
    let prefix = PREFIXES.iter().find(|(power, _)| *power == exponent).map_or("", |(_, prefix)| prefix);
    let scaled = rounded / 10_f64.powi(exponent);
    let decimals = (digits as i32 - 1 - decade(scaled)).clamp(0, 12) as usize;
    format!("{}\u{a0}{prefix}{unit}", number(scaled, decimals))
}

/// A frequency in a sentence: enough digits to set a generator by.
pub(super) fn hertz(value: f64) -> String {
    let text = match value.abs() {
        size if size >= 10_000.0 => return with_unit(value / 1000.0, 2, "kHz"),
        size if size >= 1000.0 => number(value, 1),
        size if size >= 100.0 => number(value, 2),
        _ => number(value, 3),
    };
    if value.is_finite() { format!("{text}\u{a0}Hz") } else { text }
}

/// A difference of frequencies to two digits, in hertz where that reads well.
pub(super) fn small_hertz(value: f64) -> String {
    match value.abs() {
        size if size >= 0.0095 => {
            with_unit(value, (1 - size.log10().floor() as i32).clamp(0, 4) as usize, "Hz")
        }
        _ => si(value, "Hz", 2),
    }
}

/// A frequency without needless zeros, for edges and marks: `12 Hz`, `0.5 Hz`, `1.25 kHz`.
pub(super) fn hertz_short(value: f64) -> String {
    if !value.is_finite() {
        return UNKNOWN.to_owned();
    }
    let (scaled, unit) = if value.abs() >= 1000.0 { (value / 1000.0, "kHz") } else { (value, "Hz") };
    format!("{}\u{a0}{unit}", short(scaled))
}

/// A band of frequencies: `0 to 12 Hz`, but `80 Hz to 15 kHz`.
pub(super) fn band(from_hz: f64, to_hz: f64) -> String {
    let (from, to) = (hertz_short(from_hz), hertz_short(to_hz));
    match (from.split_once('\u{a0}'), to.split_once('\u{a0}')) {
        (Some((digits, unit)), Some((_, same))) if unit == same || from_hz == 0.0 => {
            format!("{digits} to {to}")
        }
        _ => format!("{from} to {to}"),
    }
}

/// What lies below this, in hertz, no notch and no sample clock tells apart.
const LEAST_TOLD_HZ: f64 = 1e-5;

/// A deviation in hertz, to two digits: `± 0.0083 Hz`; `within 0.00001 Hz` where
/// more digits would promise more than a sample clock holds.
pub fn deviation(hertz: f64) -> String {
    if !hertz.is_finite() {
        return UNKNOWN.to_owned();
    }
    if hertz < LEAST_TOLD_HZ {
        return "within 0.00001 Hz".to_owned();
    }
    let decimals = (1 - hertz.log10().floor() as i32).clamp(0, 6) as usize;
    format!("± {hertz:.decimals$} Hz")
}

/// The wander that the estimator's noise alone would feign.
pub fn noise_alone(floor_hz: f64) -> String {
    match floor_hz {
        floor if !floor.is_finite() => "what noise alone would show is not known".to_owned(),
        floor if floor < LEAST_TOLD_HZ => "noise alone would show less than 0.00001 Hz".to_owned(),
        floor => format!("noise alone would show {}", deviation(floor)),
    }
}

/// The confidence that there is mains hum, with what it is.
pub fn confidence(score: f64) -> String {
    format!("{score:.2} of 1, and 0.5 counts as found (a score, not a probability)")
}

/// What signal and hum do to the converter, in a line.
pub fn converter(converter: &Converter) -> String {
    let head = format!(
        "largest sample {:.1} dB below full scale, crest factor {:.1} dB",
        converter.headroom_db.max(0.0),
        converter.crest_factor_db
    );
    let Some(hum) = &converter.hum else { return head };
    let gain = if hum.gain_most_db < 0.05 {
        "without it no room would be gained".to_owned()
    } else if hum.gain_most_db - hum.gain_least_db < 0.1 {
        format!("without it {:.1} dB ({:.1} bits) more room", hum.gain_least_db, hum.bits_least)
    } else {
        format!(
            "without it {:.1} to {:.1} dB ({:.1} to {:.1} bits) more room",
            hum.gain_least_db, hum.gain_most_db, hum.bits_least, hum.bits_most
        )
    };
    format!(
        "{head}; the hum's own peak is {:.0} % of that of the recording, {gain}",
        100.0 * hum.share_of_peak
    )
}

/// A level's standard error: no finer than a converter's own linearity lets one read it.
pub fn level_error(error_db: f64) -> String {
    match error_db {
        error if !error.is_finite() => UNKNOWN.to_owned(),
        error if error < 0.005 => "< 0.01\u{a0}dB".to_owned(),
        error => format!("±\u{a0}{}", with_unit(error, 2, "dB")),
    }
}

/// Hum and rest as hearing weighs them, in a line.
pub fn weighted(levels: &Weighted) -> String {
    let rest = match (levels.rest_a_dbfs, levels.rest_468_dbfs) {
        (Some(a), Some(bs468)) => format!("all else {a:.1} dBFS A, {bs468:.1} dBFS BS.468-4"),
        _ => "too short to weigh all else".to_owned(),
    };
    format!(
        "hum {:.1} dBFS A, {:.1} dBFS BS.468-4; {rest} (RMS; the quasi-peak detector is not used)",
        levels.hum_a_dbfs, levels.hum_468_dbfs
    )
}

/// Text whose words and units a page must not part.
pub(super) fn unbroken(text: &str) -> String {
    text.replace(' ', "\u{a0}")
}

/// Words that were written to stand behind a label, as a sentence of their own:
/// a capital at its head unless that is a name, a full stop at its end.
pub(super) fn sentence(text: &str) -> String {
    let text = text.trim();
    let head = text.split(' ').next().unwrap_or_default();
    let is_word = head.trim_end_matches([',', ':']).chars().all(|c| c.is_ascii_lowercase() || c == '-');
    let mut letters = text.chars();
    let begun = match letters.next() {
        Some(first) if is_word => first.to_uppercase().chain(letters).collect(),
        _ => text.to_owned(),
    };
    if begun.is_empty() || begun.ends_with(['.', '!', '?']) { begun } else { format!("{begun}.") }
}

/// At most three digits after the point, none needless.
pub(super) fn short(value: f64) -> String {
    let text = number(value, 3);
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text }
}

/// Seconds, or minutes and hours where there are many.
pub(super) fn duration(seconds: f64) -> String {
    match seconds {
        s if !s.is_finite() => UNKNOWN.to_owned(),
        s if s < 1.0 => si(s, "s", 2),
        s if s < 120.0 => with_unit(s, 1, "s"),
        s if s < 7200.0 => with_unit(s / 60.0, 1, "min"),
        s => with_unit(s / 3600.0, 1, "h"),
    }
}

/// Volts RMS of a level, by the peak volts of a full-scale sample (AES17).
pub(super) fn volts_rms(level_dbfs: f64, full_scale_v: f64) -> f64 {
    10_f64.powf(level_dbfs / 20.0) * full_scale_v / std::f64::consts::SQRT_2
}

/// `1`, `1 and 3`, `1, 3 and 5`.
pub(super) fn listing<T: std::fmt::Display>(items: &[T]) -> String {
    match items {
        [] => String::new(),
        [only] => only.to_string(),
        [head @ .., last] => {
            let head: Vec<String> = head.iter().map(T::to_string).collect();
            format!("{} and {last}", head.join(", "))
        }
    }
}

/// `1 part`, `2 parts`.
pub(super) fn counted(count: usize, one: &str, many: &str) -> String {
    format!("{count} {}", if count == 1 { one } else { many })
}

/// How far the frequency wanders, and how much of that could be noise.
pub fn wander(spread_hz: f64, floor_hz: Option<f64>) -> String {
    let spread = deviation(spread_hz);
    match floor_hz {
        Some(floor) if spread_hz <= floor => {
            format!("too little to tell from the noise of the measurement ({})", noise_alone(floor))
        }
        Some(floor) => format!("{spread} for 95 % of the time ({})", noise_alone(floor)),
        None => format!("{spread} for 95 % of the time"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn wander_below_the_noise_is_not_given_as_a_figure() {
        assert_eq!(
            wander(0.001, Some(0.002)),
            "too little to tell from the noise of the measurement (noise alone would show ± 0.0020 Hz)"
        );
        assert!(wander(0.026, Some(6.8e-6)).starts_with("± 0.026 Hz for 95"));
    }

    #[test]
    fn values_carry_the_prefix_that_keeps_them_between_one_and_a_thousand() {
        assert_eq!(si(39e-6, "F", 3), "39.0\u{a0}µF");
        assert_eq!(si(0.000_999_96, "V", 3), "1.00\u{a0}mV");
        assert_eq!(si(1e6, "Ω", 3), "1.00\u{a0}MΩ");
        assert_eq!(si(-0.0123, "V", 3), "\u{2212}12.3\u{a0}mV");
        assert_eq!(si(0.0, "V", 3), "0\u{a0}V");
        assert_eq!(si(f64::NAN, "V", 3), UNKNOWN);
    }

    #[test]
    fn what_rounds_to_nothing_has_no_sign() {
        assert_eq!(number(-0.001, 2), "0.00");
        assert_eq!(number(-0.01, 2), "\u{2212}0.01");
    }

    #[test]
    fn edges_of_bands_have_no_needless_digits() {
        assert_eq!(hertz_short(12.0), "12\u{a0}Hz");
        assert_eq!(hertz_short(0.5), "0.5\u{a0}Hz");
        assert_eq!(hertz_short(1250.0), "1.25\u{a0}kHz");
        assert_eq!(hertz_short(100.0), "100\u{a0}Hz");
    }

    #[test]
    fn wander_reads_in_hertz_until_it_is_tiny() {
        assert_eq!(small_hertz(0.2), "0.20\u{a0}Hz");
        assert_eq!(small_hertz(0.011), "0.011\u{a0}Hz");
        assert_eq!(small_hertz(0.0016), "1.6\u{a0}mHz");
        assert_eq!(small_hertz(2.5), "2.5\u{a0}Hz");
    }

    #[test]
    fn both_ends_of_a_band_name_their_unit_where_it_differs() {
        assert_eq!(band(80.0, 15_000.0), "80\u{a0}Hz to 15\u{a0}kHz");
        assert_eq!(band(0.0, 12.0), "0 to 12\u{a0}Hz");
        assert_eq!(band(0.0, 2000.0), "0 to 2\u{a0}kHz");
        assert_eq!(band(1000.0, 2000.0), "1 to 2\u{a0}kHz");
    }

    #[test]
    fn no_frequency_is_told_finer_than_a_sample_clock_holds_it() {
        assert_eq!(deviation(61e-9), "within 0.00001 Hz");
        assert_eq!(deviation(0.0083), "± 0.0083 Hz");
        assert_eq!(deviation(0.2), "± 0.20 Hz");
        assert_eq!(noise_alone(6.8e-6), "noise alone would show less than 0.00001 Hz");
        assert_eq!(noise_alone(5.6e-5), "noise alone would show ± 0.000056 Hz");
    }

    #[test]
    fn notes_become_sentences_and_names_stay_as_they_are() {
        assert_eq!(sentence("the line is taken as settled"), "The line is taken as settled.");
        assert_eq!(sentence("order 2: in the noise"), "Order 2: in the noise.");
        assert_eq!(sentence("gauge.wav was cut short"), "gauge.wav was cut short.");
        assert_eq!(sentence("26 s see little."), "26 s see little.");
        assert_eq!(sentence(""), "");
    }

    #[test]
    fn full_scale_sine_is_full_scale_over_root_two() {
        assert!((volts_rms(0.0, 2.0) - 2.0_f64.sqrt()).abs() < 1e-12);
    }

    #[test]
    fn lists_read_as_one_would_say_them() {
        assert_eq!(listing(&[1, 3, 5]), "1, 3 and 5");
        assert_eq!(listing(&[1]), "1");
    }

    proptest! {
        #[test]
        fn no_figure_ever_reads_as_computer_speech(bits in any::<u64>()) {
            let value = f64::from_bits(bits);
            for text in [decibel(value), dbfs(value), si(value, "V", 3), hertz(value), hertz_short(value), small_hertz(value), duration(value), deviation(value), noise_alone(value), band(0.0, value)] {
                let lower = text.to_lowercase();
                prop_assert!(!lower.contains("nan") && !lower.contains("inf"), "{value}: {text}");
            }
        }

        #[test]
        fn a_prefixed_value_reads_back_within_its_digits(exponent in -11.0..11.0_f64) {
            let value = 10_f64.powf(exponent);
            let text = si(value, "V", 4);
            let (digits, unit) = text.split_once('\u{a0}').unwrap();
            let scale = match unit.trim_end_matches('V') {
                "p" => 1e-12, "n" => 1e-9, "µ" => 1e-6, "m" => 1e-3, "" => 1.0, "k" => 1e3, "M" => 1e6, "G" => 1e9, _ => 1e12,
            };
            let read = digits.parse::<f64>().unwrap() * scale;
            prop_assert!((read / value - 1.0).abs() <= 0.5e-3, "{value}: {text}");
            prop_assert!(digits.parse::<f64>().unwrap() < 1000.0);
        }
    }
}
