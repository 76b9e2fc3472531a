//! What can be bought: the stock list as plans use it.

/// A series of preferred values of IEC 60063, by its number of steps a decade.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Series(pub u16);

/// A coil that is sold.
#[derive(Debug, Clone, PartialEq)]
pub struct CoilLine {
    /// Inductance in henry.
    pub inductance_h: f64,
    /// Winding resistance in ohm at the reference temperature.
    pub resistance_ohm: f64,
    /// Tolerance as a fraction.
    pub tolerance: f64,
    /// Drift of the winding resistance per kelvin (copper: 0.0039).
    pub resistance_drift_per_k: f64,
    /// Drift of the inductance per kelvin.
    pub drift_per_k: f64,
    /// Current limit in ampere.
    pub current_a: Option<f64>,
    /// Self-resonance in hertz.
    pub resonance_hz: Option<f64>,
    /// The user's own order number.
    pub number: Option<String>,
    /// Price of one.
    pub price: Option<f64>,
}

/// A range of capacitors that is sold.
#[derive(Debug, Clone, PartialEq)]
pub struct CapacitorLine {
    /// Dielectric, in words.
    pub dielectric: String,
    /// Preferred series.
    pub series: Series,
    /// Smallest value in farad.
    pub from_f: f64,
    /// Largest value in farad.
    pub to_f: f64,
    /// Tolerance as a fraction.
    pub tolerance: f64,
    /// Loss factor tan δ.
    pub loss: f64,
    /// Drift per kelvin.
    pub drift_per_k: f64,
    /// Voltage limit in volt.
    pub voltage_v: Option<f64>,
    /// The user's own order number.
    pub number: Option<String>,
    /// Price of one.
    pub price: Option<f64>,
}

/// A range of resistors that is sold.
#[derive(Debug, Clone, PartialEq)]
pub struct ResistorLine {
    /// Kind, in words.
    pub kind: String,
    /// Preferred series.
    pub series: Series,
    /// Smallest value in ohm.
    pub from_ohm: f64,
    /// Largest value in ohm.
    pub to_ohm: f64,
    /// Tolerance as a fraction.
    pub tolerance: f64,
    /// Drift per kelvin.
    pub drift_per_k: f64,
    /// Power limit in watt.
    pub power_w: Option<f64>,
    /// The user's own order number.
    pub number: Option<String>,
    /// Price of one.
    pub price: Option<f64>,
}

/// Trimmers that are sold.
#[derive(Debug, Clone, PartialEq)]
pub struct TrimmerLine {
    /// Kind, in words.
    pub kind: String,
    /// Track resistances in ohm.
    pub values_ohm: Vec<f64>,
    /// Finest setting as a fraction of the track.
    pub resolution: f64,
    /// Drift per kelvin.
    pub drift_per_k: f64,
    /// The user's own order number.
    pub number: Option<String>,
    /// Price of one.
    pub price: Option<f64>,
}

/// A whole stock list.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Stock {
    /// Where it was read from; `None` for the built-in list of typical values.
    pub path: Option<String>,
    /// Coils.
    pub coils: Vec<CoilLine>,
    /// Capacitors.
    pub capacitors: Vec<CapacitorLine>,
    /// Resistors.
    pub resistors: Vec<ResistorLine>,
    /// Trimmers.
    pub trimmers: Vec<TrimmerLine>,
}
