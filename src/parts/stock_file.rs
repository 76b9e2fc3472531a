//! Stock lists as files: their keys, their checks, and the built-in list.

use std::path::Path;

use serde::{Deserialize, Deserializer};

use super::quantity::{self, Amperes, Farads, Fraction, Henries, Hertz, Ohms, PerKelvin, Volts, Watts};
use super::stock::COPPER_DRIFT_PER_K;
use super::yaml::{self, YamlError};
use super::{CapacitorLine, CoilLine, PartsError, ResistorLine, Series, Stock, TrimmerLine, Unit};

const BUILT_IN: &str = include_str!("built_in.yaml");

/// How to write a key that is missing.
const EXAMPLES: &[(&str, &str)] = &[
    ("coils", "- { inductance: 1 H, resistance: 45 Ω, tolerance: 5 % }"),
    ("capacitors", "- { dielectric: film, series: E12, from: 1 nF, to: 1 µF, tolerance: 5 %, loss: 0.0005 }"),
    ("resistors", "- { kind: metal film, series: E96, from: 10 Ω, to: 1 MΩ, tolerance: 1 % }"),
    ("trimmers", "- { kind: cermet multi-turn, values: [100 Ω, 2 kΩ], resolution: 0.5 % }"),
    ("coils.inductance", "inductance: 1 H"),
    ("coils.resistance", "resistance: 45 Ω"),
    ("coils.tolerance", "tolerance: 5 %"),
    ("capacitors.dielectric", "dielectric: polypropylene film"),
    ("capacitors.series", "series: E12"),
    ("capacitors.from", "from: 1 nF"),
    ("capacitors.to", "to: 4.7 µF"),
    ("capacitors.tolerance", "tolerance: 5 %"),
    ("capacitors.loss", "loss: 0.0005"),
    ("resistors.kind", "kind: metal film"),
    ("resistors.series", "series: E96"),
    ("resistors.from", "from: 10 Ω"),
    ("resistors.to", "to: 1 MΩ"),
    ("resistors.tolerance", "tolerance: 1 %"),
    ("trimmers.kind", "kind: cermet multi-turn"),
    ("trimmers.values", "values: [100 Ω, 2 kΩ]"),
    ("trimmers.resolution", "resolution: 0.5 %"),
];

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct StockRecord {
    #[serde(default)]
    coils: Vec<CoilRecord>,
    #[serde(default)]
    capacitors: Vec<CapacitorRecord>,
    #[serde(default)]
    resistors: Vec<ResistorRecord>,
    #[serde(default)]
    trimmers: Vec<TrimmerRecord>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct CoilRecord {
    inductance: Henries,
    resistance: Ohms,
    tolerance: Fraction,
    current: Option<Amperes>,
    resonance: Option<Hertz>,
    drift: Option<PerKelvin>,
    resistance_drift: Option<PerKelvin>,
    number: Option<String>,
    price: Option<f64>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct CapacitorRecord {
    dielectric: String,
    series: Series,
    from: Farads,
    to: Farads,
    tolerance: Fraction,
    loss: Loss,
    drift: Option<PerKelvin>,
    voltage: Option<Volts>,
    number: Option<String>,
    price: Option<f64>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct ResistorRecord {
    kind: String,
    series: Series,
    from: Ohms,
    to: Ohms,
    tolerance: Fraction,
    drift: Option<PerKelvin>,
    power: Option<Watts>,
    number: Option<String>,
    price: Option<f64>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct TrimmerRecord {
    kind: String,
    values: Vec<Ohms>,
    resolution: Fraction,
    drift: Option<PerKelvin>,
    number: Option<String>,
    price: Option<f64>,
}

/// tan δ: a bare number, or percent.
struct Loss(f64);

impl<'de> Deserialize<'de> for Loss {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let wanted = "the loss factor tan δ, such as `0.0005`";
        yaml::from_text(deserializer, wanted, |text| {
            let bare = text.trim().parse::<f64>().ok().filter(|loss| loss.is_finite());
            let loss = bare.or_else(|| quantity::parse(text, Unit::Fraction).ok());
            loss.map(Self).ok_or_else(|| format!("read `{text}`; wanted {wanted}"))
        })
    }
}

impl<'de> Deserialize<'de> for Series {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let wanted = "a series of IEC 60063: E3, E6, E12, E24, E48, E96 or E192";
        yaml::from_text(deserializer, wanted, |text| {
            let steps = text.trim().strip_prefix(['E', 'e']).and_then(|steps| steps.parse().ok());
            let known = steps.filter(|steps| Self::STEPS.contains(steps));
            known.map(Self).ok_or_else(|| format!("read `{text}`; wanted {wanted}"))
        })
    }
}

impl Stock {
    /// The built-in list of typical values.
    pub fn built_in() -> Self {
        Self::from_text(Path::new("built-in stock list"), BUILT_IN)
            .map(|stock| Self { path: None, ..stock })
            .expect("the built-in list is a stock list")
    }

    /// Reads the stock list at `path`.
    ///
    /// # Errors
    /// [`PartsError`] when the file cannot be read, or is no stock list, or
    /// holds too little for any filter.
    pub fn read(path: &Path) -> Result<Self, PartsError> {
        let bytes = std::fs::read(path).map_err(|source| PartsError::Io { path: path.to_owned(), source })?;
        Ok(Self::from_text(path, &yaml::decode(path, bytes)?)?)
    }

    /// Reads a stock list from `text`, the contents of `path`.
    ///
    /// # Errors
    /// [`YamlError`] naming line, key, what was read and what would do.
    pub fn from_text(path: &Path, text: &str) -> Result<Self, YamlError> {
        let record: StockRecord = yaml::read_with_examples(path, text, EXAMPLES)?;
        let check = Check { path, text };
        let stock = Self {
            path: Some(path.display().to_string()),
            coils: check.each("coils", record.coils, Check::coil)?,
            capacitors: check.each("capacitors", record.capacitors, Check::capacitor)?,
            resistors: check.each("resistors", record.resistors, Check::resistor)?,
            trimmers: check.each("trimmers", record.trimmers, Check::trimmer)?,
        };
        check.enough(&stock)?;
        Ok(stock)
    }
}

/// Checks of what the types cannot hold, with the place for the message.
struct Check<'a> {
    path: &'a Path,
    text: &'a str,
}

impl Check<'_> {
    fn each<R, L>(
        &self,
        list: &str,
        records: Vec<R>,
        convert: impl Fn(&Self, &str, R) -> Result<L, YamlError>,
    ) -> Result<Vec<L>, YamlError> {
        let keyed = records.into_iter().enumerate();
        keyed.map(|(index, record)| convert(self, &format!("{list}[{index}]"), record)).collect()
    }

    fn coil(&self, key: &str, record: CoilRecord) -> Result<CoilLine, YamlError> {
        Ok(CoilLine {
            inductance_h: self.positive(key, "inductance", record.inductance.0, Unit::Henry, "1 H")?,
            resistance_ohm: self.positive(key, "resistance", record.resistance.0, Unit::Ohm, "45 Ω")?,
            tolerance: self.tolerance(key, record.tolerance)?,
            resistance_drift_per_k: record.resistance_drift.map_or(COPPER_DRIFT_PER_K, |drift| drift.0),
            drift_per_k: record.drift.map_or(0.0, |drift| drift.0),
            current_a: self.limit(
                key,
                "current",
                record.current.map(|limit| limit.0),
                Unit::Ampere,
                "20 mA",
            )?,
            resonance_hz: self.limit(
                key,
                "resonance",
                record.resonance.map(|hz| hz.0),
                Unit::Hertz,
                "18 kHz",
            )?,
            number: record.number,
            price: self.price(key, record.price)?,
        })
    }

    fn capacitor(&self, key: &str, record: CapacitorRecord) -> Result<CapacitorLine, YamlError> {
        let loss = record.loss.0;
        if !(0.0..1.0).contains(&loss) {
            let problem = format!("read {loss}; wanted a loss factor from 0 to 1, such as `0.0005`");
            return Err(self.wrong(key, "loss", problem));
        }
        let line = CapacitorLine {
            dielectric: record.dielectric,
            series: record.series,
            from_f: self.positive(key, "from", record.from.0, Unit::Farad, "1 nF")?,
            to_f: self.positive(key, "to", record.to.0, Unit::Farad, "4.7 µF")?,
            tolerance: self.tolerance(key, record.tolerance)?,
            loss,
            drift_per_k: record.drift.map_or(0.0, |drift| drift.0),
            voltage_v: self.limit(key, "voltage", record.voltage.map(|limit| limit.0), Unit::Volt, "63 V")?,
            number: record.number,
            price: self.price(key, record.price)?,
        };
        self.range(key, line.series, line.from_f, line.to_f, Unit::Farad)?;
        Ok(line)
    }

    fn resistor(&self, key: &str, record: ResistorRecord) -> Result<ResistorLine, YamlError> {
        let line = ResistorLine {
            kind: record.kind,
            series: record.series,
            from_ohm: self.positive(key, "from", record.from.0, Unit::Ohm, "10 Ω")?,
            to_ohm: self.positive(key, "to", record.to.0, Unit::Ohm, "1 MΩ")?,
            tolerance: self.tolerance(key, record.tolerance)?,
            drift_per_k: record.drift.map_or(0.0, |drift| drift.0),
            power_w: self.limit(key, "power", record.power.map(|limit| limit.0), Unit::Watt, "0.25 W")?,
            number: record.number,
            price: self.price(key, record.price)?,
        };
        self.range(key, line.series, line.from_ohm, line.to_ohm, Unit::Ohm)?;
        Ok(line)
    }

    fn trimmer(&self, key: &str, record: TrimmerRecord) -> Result<TrimmerLine, YamlError> {
        if record.values.is_empty() {
            return Err(self.wrong(key, "values", "the list is empty; write for instance `[100 Ω, 2 kΩ]`"));
        }
        for (index, value) in record.values.iter().enumerate() {
            self.positive(key, &format!("values[{index}]"), value.0, Unit::Ohm, "2 kΩ")?;
        }
        if !(record.resolution.0 > 0.0 && record.resolution.0 < 1.0) {
            let read = record.resolution.0 * 100.0;
            let problem = format!("read {read} %; wanted the finest setting, above 0 %, such as `0.5 %`");
            return Err(self.wrong(key, "resolution", problem));
        }
        Ok(TrimmerLine {
            kind: record.kind,
            values_ohm: record.values.iter().map(|ohms| ohms.0).collect(),
            resolution: record.resolution.0,
            drift_per_k: record.drift.map_or(0.0, |drift| drift.0),
            number: record.number,
            price: self.price(key, record.price)?,
        })
    }

    /// Every notch wants a capacitor, and a coil or resistors with it.
    fn enough(&self, stock: &Stock) -> Result<(), YamlError> {
        let lists = [
            ("coils", stock.coils.is_empty()),
            ("capacitors", stock.capacitors.is_empty()),
            ("resistors", stock.resistors.is_empty()),
        ];
        let [coils, capacitors, resistors] = lists.map(|(_, empty)| !empty);
        if capacitors && (coils || resistors) {
            return Ok(());
        }
        let empty: Vec<String> =
            lists.iter().filter(|(_, empty)| *empty).map(|(name, _)| format!("no {name}")).collect();
        let key = if capacitors { "coils" } else { "capacitors" };
        let problem = format!(
            "the stock list holds {}: no filter can be made of it; list capacitors, and coils or resistors, \
             or leave `stock` out of the brief for the built-in list",
            empty.join(", ")
        );
        Err(YamlError::at(self.path, self.text, key, problem))
    }

    fn wrong(&self, key: &str, name: &str, problem: impl Into<String>) -> YamlError {
        YamlError::at(self.path, self.text, &format!("{key}.{name}"), problem)
    }

    fn positive(
        &self,
        key: &str,
        name: &str,
        value: f64,
        unit: Unit,
        example: &str,
    ) -> Result<f64, YamlError> {
        if value > 0.0 {
            return Ok(value);
        }
        let read = quantity::print(value, unit);
        let problem = format!("read {read}; wanted more than zero, such as `{example}`");
        Err(self.wrong(key, name, problem))
    }

    fn limit(
        &self,
        key: &str,
        name: &str,
        value: Option<f64>,
        unit: Unit,
        example: &str,
    ) -> Result<Option<f64>, YamlError> {
        value.map(|value| self.positive(key, name, value, unit, example)).transpose()
    }

    fn tolerance(&self, key: &str, tolerance: Fraction) -> Result<f64, YamlError> {
        if (0.0..1.0).contains(&tolerance.0) {
            return Ok(tolerance.0);
        }
        let read = tolerance.0 * 100.0;
        let problem = format!("read {read} %; wanted from 0 % to below 100 %, such as `5 %` for ± 5 %");
        Err(self.wrong(key, "tolerance", problem))
    }

    fn price(&self, key: &str, price: Option<f64>) -> Result<Option<f64>, YamlError> {
        match price {
            Some(price) if !(price >= 0.0 && price.is_finite()) => {
                let problem =
                    format!("read {price}; wanted the price of one as a plain number, such as `0.60`");
                Err(self.wrong(key, "price", problem))
            }
            fine => Ok(fine),
        }
    }

    fn range(&self, key: &str, series: Series, from: f64, to: f64, unit: Unit) -> Result<(), YamlError> {
        let shown = |value| quantity::print(value, unit);
        if from > to {
            let problem = format!(
                "read from {} to {}: turned round; write the smaller value at `from`",
                shown(from),
                shown(to)
            );
            return Err(self.wrong(key, "from", problem));
        }
        if series.between(from, to).is_empty() {
            let problem =
                format!("{series} has no value from {} to {}; widen the range", shown(from), shown(to));
            return Err(self.wrong(key, "from", problem));
        }
        Ok(())
    }
}
