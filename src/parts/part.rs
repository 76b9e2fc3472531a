//! One part of a circuit, with what it loses and how far it may be off.

use serde::{Deserialize, Serialize};

/// Temperature at which values hold, °C (copper tables use 20 °C; common practice).
pub const REFERENCE_TEMPERATURE_C: f64 = 20.0;

/// What a part is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum PartKind {
    /// Fixed resistor.
    Resistor,
    /// Capacitor.
    Capacitor,
    /// Coil.
    Coil,
    /// Variable resistor, used as a rheostat.
    Trimmer,
}

/// One part: nominal value, losses, tolerance, drift, limits.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Part {
    /// Reference on the schematic, `C2`.
    #[serde(rename = "ref")]
    pub reference: String,
    /// What it is.
    pub kind: PartKind,
    /// The value as one would order it, `39 µF`.
    pub value: String,
    /// The nominal value in ohm, farad or henry; a trimmer's whole track.
    pub value_si: f64,
    /// Tolerance, ± percent.
    pub tolerance_pct: f64,
    /// Drift of the value, parts per kelvin (1e-6 is 1 ppm/K).
    #[serde(default)]
    pub drift_per_k: f64,
    /// Resistance in series with the value: a coil's winding, a capacitor's loss.
    #[serde(default)]
    pub series_resistance_ohm: f64,
    /// Drift of that resistance (copper: +0.0039).
    #[serde(default)]
    pub series_resistance_drift_per_k: f64,
    /// A coil's own capacitance, across winding and resistance.
    #[serde(default)]
    pub self_capacitance_f: f64,
    /// A trimmer's resistance as planned; the whole track when left out.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub setting_ohm: Option<f64>,
    /// Material or make: `polypropylene film`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub material: Option<String>,
    /// Current limit in ampere.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub current_limit_a: Option<f64>,
    /// Voltage limit in volt.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub voltage_limit_v: Option<f64>,
    /// Power limit in watt.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub power_limit_w: Option<f64>,
    /// The user's own order number.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub number: Option<String>,
    /// Price of one, in the stock list's currency.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub price: Option<f64>,
}

impl Part {
    /// A part without losses, tolerance, drift or limits.
    pub fn ideal(reference: &str, kind: PartKind, value_si: f64) -> Self {
        Self {
            reference: reference.to_owned(),
            kind,
            value: String::new(),
            value_si,
            tolerance_pct: 0.0,
            drift_per_k: 0.0,
            series_resistance_ohm: 0.0,
            series_resistance_drift_per_k: 0.0,
            self_capacitance_f: 0.0,
            setting_ohm: None,
            material: None,
            current_limit_a: None,
            voltage_limit_v: None,
            power_limit_w: None,
            number: None,
            price: None,
        }
    }

    /// The part as built: off its nominal value by `deviation` (a fraction),
    /// and at `temperature_c`.
    #[must_use]
    pub fn as_built(&self, deviation: f64, temperature_c: f64) -> Self {
        let kelvin = temperature_c - REFERENCE_TEMPERATURE_C;
        let mut built = self.clone();
        let factor = (1.0 + deviation) * (1.0 + self.drift_per_k * kelvin);
        built.value_si *= factor;
        built.setting_ohm = self.setting_ohm.map(|ohm| ohm * factor);
        built.series_resistance_ohm *= 1.0 + self.series_resistance_drift_per_k * kelvin;
        built
    }
}
