//! What can be bought: the stock list as plans use it, and the parts made from it.

use std::f64::consts::TAU;

use super::part::{Part, PartKind};
use super::quantity::{Unit, print};

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

/// Drift of copper's resistance at 20 °C, per kelvin (common practice).
pub const COPPER_DRIFT_PER_K: f64 = 0.0039;

impl CoilLine {
    /// Capacitance across the winding that makes it resonate where the list
    /// says, farad: C = 1/((2πf)²L); zero where no resonance is given.
    pub fn self_capacitance_f(&self) -> f64 {
        self.resonance_hz.map_or(0.0, |hz| 1.0 / ((TAU * hz).powi(2) * self.inductance_h))
    }

    /// ωL/r of the coil at `frequency_hz`.
    pub fn q(&self, frequency_hz: f64) -> f64 {
        TAU * frequency_hz * self.inductance_h / self.resistance_ohm
    }

    /// This coil as a part of a circuit.
    pub fn part(&self, reference: &str) -> Part {
        Part {
            value: print(self.inductance_h, Unit::Henry),
            tolerance_pct: percent(self.tolerance),
            drift_per_k: self.drift_per_k,
            series_resistance_ohm: self.resistance_ohm,
            series_resistance_drift_per_k: self.resistance_drift_per_k,
            self_capacitance_f: self.self_capacitance_f(),
            material: Some(format!("winding {}", print(self.resistance_ohm, Unit::Ohm))),
            current_limit_a: self.current_a,
            number: self.number.clone(),
            price: self.price,
            ..Part::ideal(reference, PartKind::Coil, self.inductance_h)
        }
    }
}

impl CapacitorLine {
    /// All values of this line, rising, farad.
    pub fn values_f(&self) -> Vec<f64> {
        self.series.between(self.from_f, self.to_f)
    }

    /// A capacitor of this line as a part of a circuit.
    ///
    /// Its loss tan δ becomes the series resistance that gives it at
    /// `at_frequency_hz` (the hum's fundamental, where the notch is deepest and
    /// the loss matters): r = tan δ/(2πfC). At other frequencies a constant r
    /// errs little, since there the loss hides behind the reactance.
    pub fn part(&self, reference: &str, value_f: f64, at_frequency_hz: f64) -> Part {
        Part {
            value: print(value_f, Unit::Farad),
            tolerance_pct: percent(self.tolerance),
            drift_per_k: self.drift_per_k,
            series_resistance_ohm: self.loss / (TAU * at_frequency_hz * value_f),
            material: Some(self.dielectric.clone()),
            voltage_limit_v: self.voltage_v,
            number: self.number.clone(),
            price: self.price,
            ..Part::ideal(reference, PartKind::Capacitor, value_f)
        }
    }
}

impl ResistorLine {
    /// All values of this line, rising, ohm.
    pub fn values_ohm(&self) -> Vec<f64> {
        self.series.between(self.from_ohm, self.to_ohm)
    }

    /// A resistor of this line as a part of a circuit.
    pub fn part(&self, reference: &str, value_ohm: f64) -> Part {
        Part {
            value: print(value_ohm, Unit::Ohm),
            tolerance_pct: percent(self.tolerance),
            drift_per_k: self.drift_per_k,
            material: Some(self.kind.clone()),
            power_limit_w: self.power_w,
            number: self.number.clone(),
            price: self.price,
            ..Part::ideal(reference, PartKind::Resistor, value_ohm)
        }
    }
}

impl TrimmerLine {
    /// A trimmer of this line, used as a rheostat set to `setting_ohm`.
    ///
    /// It is set to a reading, so what its value may be off by is how finely
    /// it sets: `tolerance_pct` is the list's resolution, as a share of the
    /// track, taken at the setting.
    pub fn part(&self, reference: &str, track_ohm: f64, setting_ohm: f64) -> Part {
        let share = if setting_ohm > 0.0 { track_ohm / setting_ohm } else { 1.0 };
        Part {
            value: print(track_ohm, Unit::Ohm),
            tolerance_pct: two_digits_up(100.0 * self.resolution * share),
            drift_per_k: self.drift_per_k,
            setting_ohm: Some(setting_ohm),
            material: Some(self.kind.clone()),
            number: self.number.clone(),
            price: self.price,
            ..Part::ideal(reference, PartKind::Trimmer, track_ohm)
        }
    }
}

/// A positive value to two digits, never less than it is.
fn two_digits_up(value: f64) -> f64 {
    let decimals = 1 - value.log10().floor() as i32;
    let scale = 10f64.powi(decimals.abs());
    let up = |value: f64| (value * (1.0 - 1e-12)).ceil();
    if decimals >= 0 { up(value * scale) / scale } else { up(value / scale) * scale }
}

/// A fraction in percent, free of the noise that 100·0.07 would leave.
fn percent(fraction: f64) -> f64 {
    (fraction * 1e10).round() / 1e8
}

/// One value that a line of the stock list offers.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Offer {
    /// The value in SI units.
    pub value_si: f64,
    /// Index of the line in its list.
    pub line: usize,
}

impl Stock {
    /// What to tell of the list itself: that the built-in one holds typical values.
    pub fn remark(&self) -> Option<&'static str> {
        self.path.is_none().then_some(
            "no stock list was named: the built-in list holds typical values (common practice), \
             no maker's; write your own list before you order",
        )
    }

    /// Every capacitor value on the list once, rising: of lines that share a
    /// value, the one of least tolerance, then least loss.
    pub fn capacitor_offers(&self) -> Vec<Offer> {
        offers(&self.capacitors, CapacitorLine::values_f, |line| (line.tolerance, line.loss))
    }

    /// Every resistor value on the list once, rising: of lines that share a
    /// value, the one of least tolerance, then least drift.
    pub fn resistor_offers(&self) -> Vec<Offer> {
        offers(&self.resistors, ResistorLine::values_ohm, |line| (line.tolerance, line.drift_per_k.abs()))
    }

    /// Every trimmer track on the list, rising.
    pub fn trimmer_offers(&self) -> Vec<Offer> {
        offers(
            &self.trimmers,
            |line| line.values_ohm.clone(),
            |line| (line.resolution, line.drift_per_k.abs()),
        )
    }
}

fn offers<L>(lines: &[L], values: impl Fn(&L) -> Vec<f64>, rank: impl Fn(&L) -> (f64, f64)) -> Vec<Offer> {
    let mut all: Vec<Offer> = lines
        .iter()
        .enumerate()
        .flat_map(|(line, entry)| values(entry).into_iter().map(move |value_si| Offer { value_si, line }))
        .collect();
    let order = |offer: &Offer| {
        let (first, second) = rank(&lines[offer.line]);
        [offer.value_si, first, second]
    };
    all.sort_by(|a, b| order(a).partial_cmp(&order(b)).expect("values on a list are numbers"));
    all.dedup_by(|later, kept| later.value_si <= kept.value_si * (1.0 + 1e-9));
    all
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::network::part_impedance;

    fn coil() -> CoilLine {
        CoilLine { resonance_hz: Some(3e3), ..Stock::built_in().coils.last().expect("has coils").clone() }
    }

    #[test]
    fn a_coil_with_its_own_capacitance_resonates_where_the_list_says() {
        let part = coil().part("L1");
        let size = |hz: f64| {
            let z = part_impedance(&part, TAU * hz);
            (z.numerator / z.denominator).norm()
        };
        assert!(size(3e3) > size(2.99e3) && size(3e3) > size(3.01e3));
    }

    #[test]
    fn a_capacitor_has_its_loss_at_the_frequency_asked_for() {
        let line = &Stock::built_in().capacitors[0];
        let part = line.part("C1", 1e-6, 50.0);
        let z = part_impedance(&part, TAU * 50.0);
        let z = z.numerator / z.denominator;
        assert!((z.re / -z.im / line.loss - 1.0).abs() < 1e-12);
    }

    #[test]
    fn parts_carry_value_tolerance_and_limits_as_ordered() {
        let stock = Stock::built_in();
        let capacitor = stock.capacitors[0].part("C2", 39e-9, 50.0);
        assert_eq!((capacitor.reference.as_str(), capacitor.value.as_str()), ("C2", "39 nF"));
        assert_eq!(capacitor.tolerance_pct, 5.0);
        let resistor = stock.resistors[0].part("R1", 4750.0);
        assert_eq!((resistor.value.as_str(), resistor.tolerance_pct), ("4.75 kΩ", 1.0));
        assert!(resistor.power_limit_w.is_some());
        let trimmer = stock.trimmers[0].part("R2", 2000.0, 500.0);
        assert_eq!((trimmer.value_si, trimmer.setting_ohm), (2000.0, Some(500.0)));
        assert_eq!(trimmer.tolerance_pct, 4.0 * percent(stock.trimmers[0].resolution));
    }

    #[test]
    fn offers_rise_and_hold_each_value_once_from_the_closest_line() {
        let stock = Stock::built_in();
        let offers = stock.capacitor_offers();
        assert!(offers.windows(2).all(|pair| pair[0].value_si < pair[1].value_si));
        let shared = offers.iter().find(|offer| offer.value_si == 1e-6).expect("1 µF is common");
        let least = stock
            .capacitors
            .iter()
            .filter(|line| line.from_f <= 1e-6 && line.to_f >= 1e-6)
            .map(|line| line.tolerance)
            .fold(f64::INFINITY, f64::min);
        assert_eq!(stock.capacitors[shared.line].tolerance, least);
    }
}
