//! The supplies that hum, and how far each may stray.

/// One kind of supply.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Supply {
    /// Nominal frequency in hertz.
    pub nominal_hz: f64,
    /// Share of the nominal within which an interconnected system keeps.
    pub usual: f64,
    /// Lowest frequency that is taken for this supply, in hertz.
    pub from_hz: f64,
    /// Highest frequency that is taken for this supply, in hertz.
    pub to_hz: f64,
}

/// 50 Hz: ± 1 % on interconnected systems, ± 15 % on islands (EN 50160); 60 Hz alike
/// (common practice). Railway: 16.17 to 17.0 Hz (EN 50163, from memory). Aircraft: 393
/// to 407 Hz in steady state (MIL-STD-704, from memory), all of it usual: 392, 415 and
/// 440 Hz are notes.
pub(super) const SUPPLIES: [Supply; 4] = [
    Supply { nominal_hz: 16.7, usual: 0.01, from_hz: 16.17, to_hz: 17.0 },
    Supply { nominal_hz: 50.0, usual: 0.01, from_hz: 42.5, to_hz: 57.5 },
    Supply { nominal_hz: 60.0, usual: 0.01, from_hz: 51.0, to_hz: 69.0 },
    Supply { nominal_hz: 400.0, usual: 0.0175, from_hz: 393.0, to_hz: 407.0 },
];

/// A rounding's width beyond the ends of a range.
const BEYOND: f64 = 1.0005;

impl Supply {
    /// Share of the nominal by which a frequency is off it.
    pub fn stray(&self, frequency_hz: f64) -> f64 {
        (frequency_hz / self.nominal_hz - 1.0).abs()
    }

    /// Whether an interconnected system of this nominal keeps such a frequency.
    pub fn is_usual(&self, frequency_hz: f64) -> bool {
        self.stray(frequency_hz) <= self.usual
    }

    /// A public supply: 50 or 60 Hz.
    pub fn is_public(&self) -> bool {
        self.nominal_hz == 50.0 || self.nominal_hz == 60.0
    }

    /// 0 where the usual range ends, 1 at the end of all that is taken for this supply.
    pub fn remoteness(&self, frequency_hz: f64) -> f64 {
        let end_hz = if frequency_hz < self.nominal_hz { self.from_hz } else { self.to_hz };
        let room = (self.stray(end_hz) - self.usual).max(1e-6);
        ((self.stray(frequency_hz) - self.usual) / room).clamp(0.0, 1.0)
    }
}

/// A stretch of fundamentals searched together, since its supplies overlap.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Family {
    /// Lowest fundamental in hertz.
    pub from_hz: f64,
    /// Highest fundamental in hertz.
    pub to_hz: f64,
}

/// The stretches: railway, public supplies, aircraft. The railway's is searched wider than
/// it is claimed, so that peaks of noise in it lie apart.
pub(super) const FAMILIES: [Family; 3] = [
    Family { from_hz: 15.4, to_hz: 18.0 },
    Family { from_hz: 42.5, to_hz: 69.0 },
    Family { from_hz: 393.0, to_hz: 407.0 },
];

/// The supply whose nominal is nearest, if the frequency is within its range.
pub(super) fn nearest_supply(frequency_hz: f64) -> Option<Supply> {
    let inside = SUPPLIES
        .into_iter()
        .filter(|supply| (supply.from_hz / BEYOND..=supply.to_hz * BEYOND).contains(&frequency_hz));
    inside.min_by(|a, b| a.stray(frequency_hz).total_cmp(&b.stray(frequency_hz)))
}

/// Whether a frequency is one that an interconnected supply keeps.
pub(super) fn is_usual(frequency_hz: f64) -> bool {
    nearest_supply(frequency_hz).is_some_and(|supply| supply.is_usual(frequency_hz))
}

/// How readily a frequency is taken for a supply's before anything is heard: 1
/// within the usual range of a public supply, less towards the end of an island's,
/// and less for railways and aircraft, since few lines run near them.
pub(super) fn prior(frequency_hz: f64) -> f64 {
    let Some(supply) = nearest_supply(frequency_hz) else { return 0.4 };
    let common = if supply.is_public() { 1.0 } else { 0.8 };
    common * (1.0 - 0.5 * supply.remoteness(frequency_hz).sqrt())
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

    #[test]
    fn concert_pitches_are_no_aircrafts_and_no_railways() {
        for note_hz in [391.995, 415.305, 440.0, 17.324] {
            assert_eq!(nearest_supply(note_hz), None, "{note_hz} Hz");
        }
    }
}
