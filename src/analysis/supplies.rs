//! The supplies that hum, and how far each may stray.

/// One kind of supply.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Supply {
    /// Nominal frequency in hertz.
    pub nominal_hz: f64,
    /// Share of the nominal within which an interconnected system keeps.
    pub usual: f64,
    /// Share of the nominal within which an island or a generator keeps.
    pub island: f64,
}

/// 50 and 60 Hz: ± 1 % on interconnected systems, ± 15 % on islands (EN 50160).
/// Railway: EN 50163 gives 16.7 Hz a similar ± 1 % where it is tied to the grid;
/// aircraft: 400 Hz, 360 to 440 Hz in practice (from memory).
pub(super) const SUPPLIES: [Supply; 4] = [
    Supply { nominal_hz: 16.7, usual: 0.01, island: 0.08 },
    Supply { nominal_hz: 50.0, usual: 0.01, island: 0.15 },
    Supply { nominal_hz: 60.0, usual: 0.01, island: 0.15 },
    Supply { nominal_hz: 400.0, usual: 0.02, island: 0.1 },
];

/// A stretch of fundamentals searched together, since its supplies overlap.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Family {
    /// Lowest fundamental in hertz.
    pub from_hz: f64,
    /// Highest fundamental in hertz.
    pub to_hz: f64,
}

/// The stretches: railway, public supplies, aircraft.
pub(super) const FAMILIES: [Family; 3] = [
    Family { from_hz: 15.4, to_hz: 18.0 },
    Family { from_hz: 42.5, to_hz: 69.0 },
    Family { from_hz: 360.0, to_hz: 440.0 },
];

/// The supply whose nominal is nearest, if the frequency is within its island range.
pub(super) fn nearest_supply(frequency_hz: f64) -> Option<Supply> {
    let strays = |supply: &Supply| (frequency_hz / supply.nominal_hz - 1.0).abs();
    let inside = SUPPLIES.into_iter().filter(|supply| strays(supply) <= supply.island * 1.001);
    inside.min_by(|a, b| strays(a).total_cmp(&strays(b)))
}

/// Whether a frequency is one that an interconnected supply keeps.
pub(super) fn is_usual(frequency_hz: f64) -> bool {
    nearest_supply(frequency_hz)
        .is_some_and(|supply| (frequency_hz / supply.nominal_hz - 1.0).abs() <= supply.usual)
}

/// How readily a frequency is taken for a supply's before anything is heard: 1
/// within the usual range, less towards the edge of the island's.
pub(super) fn prior(frequency_hz: f64) -> f64 {
    let Some(supply) = nearest_supply(frequency_hz) else { return 0.4 };
    let stray = (frequency_hz / supply.nominal_hz - 1.0).abs();
    if stray <= supply.usual {
        return 1.0;
    }
    1.0 - 0.5 * ((stray - supply.usual) / (supply.island - supply.usual)).min(1.0).sqrt()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn each_frequency_has_the_supply_next_to_it() {
        let nominal = |f: f64| nearest_supply(f).map(|supply| supply.nominal_hz);
        assert_eq!(nominal(49.98), Some(50.0));
        assert_eq!(nominal(59.985), Some(60.0));
        assert_eq!(nominal(47.0), Some(50.0));
        assert_eq!(nominal(16.69), Some(16.7));
        assert_eq!(nominal(100.0), None);
        assert!(prior(50.2) > prior(49.0) && prior(49.0) > prior(45.0));
    }
}
