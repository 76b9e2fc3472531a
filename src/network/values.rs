//! Part values as plain numbers, split from what else a part carries.

use num_complex::Complex64;

use super::branch::Fraction;
use crate::parts::{Part, PartKind, REFERENCE_TEMPERATURE_C};

/// The numbers of one part that its impedance depends on: cheap to copy and to
/// change, a thousand times a second or a million.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PartValue {
    /// What the part is.
    pub kind: PartKind,
    /// Value in ohm, farad or henry; a trimmer's setting.
    pub value_si: f64,
    /// Resistance in series with the value: a coil's winding, a capacitor's loss.
    pub series_resistance_ohm: f64,
    /// A coil's own capacitance, across winding and resistance.
    pub self_capacitance_f: f64,
}

impl PartValue {
    /// The part as built: off its nominal value by `deviation` (a fraction),
    /// and at `temperature_c`. The numbers are those of [`Part::as_built`].
    pub fn as_built(part: &Part, deviation: f64, temperature_c: f64) -> Self {
        let kelvin = temperature_c - REFERENCE_TEMPERATURE_C;
        let nominal = Self::from(part);
        Self {
            value_si: nominal.value_si * (1.0 + deviation) * (1.0 + part.drift_per_k * kelvin),
            series_resistance_ohm: nominal.series_resistance_ohm
                * (1.0 + part.series_resistance_drift_per_k * kelvin),
            ..nominal
        }
    }

    /// Impedance at `omega` rad/s, losses included.
    ///
    /// Coil: (r + jωL)∥C_self. Capacitor: r + 1/jωC. Resistor and trimmer: R.
    pub fn impedance(&self, omega: f64) -> Fraction {
        let one = Complex64::new(1.0, 0.0);
        let r = self.series_resistance_ohm;
        match self.kind {
            PartKind::Resistor | PartKind::Trimmer => {
                Fraction { numerator: Complex64::new(self.value_si, 0.0), denominator: one }
            }
            PartKind::Capacitor => {
                let susceptance = omega * self.value_si;
                Fraction {
                    numerator: Complex64::new(1.0, susceptance * r),
                    denominator: Complex64::new(0.0, susceptance),
                }
            }
            PartKind::Coil => {
                let winding = Complex64::new(r, omega * self.value_si);
                let own = Complex64::new(0.0, omega * self.self_capacitance_f);
                Fraction { numerator: winding, denominator: one + own * winding }
            }
        }
    }
}

impl From<&Part> for PartValue {
    fn from(part: &Part) -> Self {
        Self {
            kind: part.kind,
            value_si: part.setting_ohm.unwrap_or(part.value_si),
            series_resistance_ohm: part.series_resistance_ohm,
            self_capacitance_f: part.self_capacitance_f,
        }
    }
}

/// A list that part values can be read from: the parts themselves, or their numbers.
pub(super) trait Values {
    /// The value of the part at `index`.
    fn value(&self, index: usize) -> PartValue;
}

impl Values for [Part] {
    fn value(&self, index: usize) -> PartValue {
        PartValue::from(&self[index])
    }
}

impl Values for [PartValue] {
    fn value(&self, index: usize) -> PartValue {
        self[index]
    }
}
