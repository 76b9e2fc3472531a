//! Harmonics above half the sample rate, and where they fold to.

use super::findings::FoldedHarmonic;
use super::supplies::{SUPPLIES, Supply};

/// Highest order listed at least.
const ORDERS: u32 = 15;
/// Highest order listed where it is the one that folds onto 0 Hz.
const SLOWEST_FOLD: u32 = 40;

/// Every harmonic up to the 15th that the sample rate folds or that lies at half of
/// it; up to the one that folds onto 0 Hz where that is not much higher.
pub(super) fn folded_harmonics(fundamental_hz: f64, sample_rate_hz: f64) -> Vec<FoldedHarmonic> {
    let half = 0.5 * sample_rate_hz;
    let onto_zero = (sample_rate_hz / fundamental_hz).round() as u32;
    let last = if onto_zero <= SLOWEST_FOLD { ORDERS.max(onto_zero) } else { ORDERS };
    (1..=last)
        .filter(|&k| {
            let frequency_hz = f64::from(k) * fundamental_hz;
            frequency_hz > half || is_half_rate(frequency_hz, sample_rate_hz)
        })
        .map(|order| {
            let frequency_hz = f64::from(order) * fundamental_hz;
            let appears_at_hz = appears_at(frequency_hz, sample_rate_hz);
            let remark = remark(order, appears_at_hz, fundamental_hz, sample_rate_hz);
            FoldedHarmonic { order, frequency_hz, appears_at_hz, remark }
        })
        .collect()
}

/// Whether a frequency is half the sample rate, as near as matters: a public grid's 1 %.
pub(super) fn is_half_rate(frequency_hz: f64, sample_rate_hz: f64) -> bool {
    (frequency_hz - 0.5 * sample_rate_hz).abs() < 0.01 * frequency_hz
}

/// What a sample rate hides of the public supplies, whatever is found.
pub(super) fn hidden_supplies(sample_rate_hz: f64) -> Vec<String> {
    let public = SUPPLIES.iter().filter(|supply| supply.is_public());
    public.filter_map(|supply| hidden(supply, sample_rate_hz)).collect()
}

fn hidden(supply: &Supply, sample_rate_hz: f64) -> Option<String> {
    let nominal_hz = supply.nominal_hz;
    // Up to here a supply of this nominal and its image are apart by more than it strays.
    let cure = format!("record at {} Hz or more", (2.5 * nominal_hz).ceil());
    if is_half_rate(nominal_hz, sample_rate_hz) {
        return Some(format!(
            "{nominal_hz} Hz is half the sample rate of {sample_rate_hz} Hz: a supply of {nominal_hz} Hz can vanish \
             there or show at a level that beats, and whether it is there cannot be known; {cure}"
        ));
    }
    (nominal_hz > 0.5 * sample_rate_hz).then(|| {
        format!(
            "{nominal_hz} Hz is above half the sample rate of {sample_rate_hz} Hz: a supply of {nominal_hz} Hz appears \
             at {:.2} Hz and cannot be told there from a signal of that frequency; {cure}",
            appears_at(nominal_hz, sample_rate_hz)
        )
    })
}

/// Distance to the nearest multiple of the rate.
pub(super) fn appears_at(frequency_hz: f64, sample_rate_hz: f64) -> f64 {
    (frequency_hz - (frequency_hz / sample_rate_hz).round() * sample_rate_hz).abs()
}

fn remark(order: u32, appears_at_hz: f64, fundamental_hz: f64, sample_rate_hz: f64) -> String {
    if is_half_rate(f64::from(order) * fundamental_hz, sample_rate_hz) {
        return format!(
            "half the sample rate: f and {sample_rate_hz} Hz − f cannot be told apart, and the level beats with the phase"
        );
    }
    // Twice the 1 % of a public grid, at this order, is too near to be told apart.
    let near = 0.02 * fundamental_hz;
    if appears_at_hz < near {
        return "folds onto 0 Hz: it looks like a slow change of the wanted signal".to_owned();
    }
    let beside = (appears_at_hz / fundamental_hz).round();
    if beside >= 1.0 && (appears_at_hz - beside * fundamental_hz).abs() < near {
        return format!("folds onto order {beside}: what is read there is the two together");
    }
    if appears_at_hz < fundamental_hz {
        return "appears below the fundamental, where wanted signal may be".to_owned();
    }
    "appears as a line of its own".to_owned()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn at_150_hz_the_second_harmonic_of_50_hz_lands_on_the_fundamental() {
        let folded = folded_harmonics(50.0, 150.0);
        let second = folded.iter().find(|f| f.order == 2).expect("folded");
        assert!((second.appears_at_hz - 50.0).abs() < 1e-9);
        assert!(second.remark.contains("order 1"), "{}", second.remark);
        assert!(folded.iter().find(|f| f.order == 3).expect("folded").remark.contains("0 Hz"));
    }

    #[test]
    fn at_100_hz_the_fundamental_is_half_the_rate() {
        let folded = folded_harmonics(49.98, 100.0);
        assert_eq!(folded[0].order, 1);
        assert!(folded[0].remark.contains("cannot be told apart"));
    }

    #[test]
    fn a_harmonic_at_half_the_rate_and_the_one_that_folds_onto_0_hz_are_told() {
        let folded = folded_harmonics(49.988, 800.0);
        let remark = |order| &folded.iter().find(|f| f.order == order).expect("listed").remark;
        assert!(remark(8).starts_with("half the sample rate"), "{}", remark(8));
        assert!(remark(16).starts_with("folds onto 0 Hz"), "{}", remark(16));
    }

    #[test]
    fn a_rate_that_hides_a_supply_says_which_and_where_it_went() {
        let at_100 = hidden_supplies(100.0);
        assert!(at_100[0].contains("50 Hz is half the sample rate"), "{at_100:?}");
        assert!(at_100[1].contains("appears at 40.00 Hz"), "{at_100:?}");
        assert!(hidden_supplies(110.0)[0].contains("appears at 50.00 Hz"));
        assert!(hidden_supplies(128.0).is_empty());
    }

    #[test]
    fn at_48_khz_nothing_that_matters_folds() {
        assert!(folded_harmonics(50.0, 48000.0).is_empty());
    }
}
