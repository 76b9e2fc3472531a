//! Line briefs as files: their keys, their defaults, their checks.

use std::f64::consts::SQRT_2;
use std::path::Path;

use serde::{Deserialize, Deserializer};

use super::{BriefError, Centre, KeepBand, LineBrief, ReductionTarget};
use crate::network::{Load, Source};
use crate::parts::Unit;
use crate::parts::quantity::{Decibels, DegreesCelsius, Farads, Henries, Hertz, Ohms, parse, print};
use crate::parts::yaml::{self, YamlError};

/// Wander designed for where the brief says nothing, hertz.
const DEFAULT_ALLOW_HZ: f64 = 0.2;
/// Guard about each notched line where the brief says nothing, hertz.
const DEFAULT_GUARD_HZ: f64 = 5.0;
/// Temperatures where the brief says nothing, °C.
const DEFAULT_TEMPERATURE_C: (f64, f64) = (10.0, 35.0);
/// Grids among which a given list of orders is checked before the hum is measured, hertz.
const COMMON_GRIDS_HZ: [f64; 2] = [50.0, 60.0];
/// 0 K in °C.
const ABSOLUTE_ZERO_C: f64 = -273.15;
/// Highest order that makes sense to name.
const HIGHEST_ORDER: u32 = 1000;

/// How to write a key that is missing.
const EXAMPLES: &[(&str, &str)] = &[
    ("line", "line: name of the line"),
    ("full_scale", "full_scale: 2 V"),
    ("source", "source: { resistance: 350 Ω }"),
    ("source.resistance", "resistance: 350 Ω"),
    ("load", "load: { resistance: 1 MΩ, capacitance: 220 pF }"),
    ("load.resistance", "resistance: 1 MΩ"),
    ("keep", "keep: [{ from: 0 Hz, to: 12 Hz, loss: 0.5 dB }]"),
    ("keep.from", "from: 0 Hz"),
    ("keep.to", "to: 12 Hz"),
    ("keep.loss", "loss: 0.5 dB"),
    ("hum", "hum: { reduce_by: 40 dB }"),
    ("hum.orders", "orders: [1, 3]"),
    ("temperature", "temperature: { from: 10 °C, to: 35 °C }"),
    ("temperature.from", "from: 10 °C"),
    ("temperature.to", "to: 35 °C"),
];

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct BriefRecord {
    line: String,
    full_scale: FullScale,
    source: SourceRecord,
    load: LoadRecord,
    keep: Vec<KeepRecord>,
    hum: HumRecord,
    temperature: Option<TemperatureRecord>,
    stock: Option<String>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct SourceRecord {
    resistance: Ohms,
    inductance: Option<Henries>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct LoadRecord {
    resistance: Ohms,
    capacitance: Option<Farads>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct KeepRecord {
    from: Hertz,
    to: Hertz,
    loss: Decibels,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct HumRecord {
    reduce_by: Option<Decibels>,
    leave: Option<Leave>,
    orders: Option<Vec<u32>>,
    allow: Option<Hertz>,
    guard: Option<Hertz>,
    centre: Option<CentreName>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct TemperatureRecord {
    from: DegreesCelsius,
    to: DegreesCelsius,
}

/// Peak volts of a full-scale sample. In dBu and dBV, as studios state it, it
/// is the RMS of the sine that just reaches full scale: the peak is √2 times that.
struct FullScale(f64);

impl<'de> Deserialize<'de> for FullScale {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        yaml::from_text(deserializer, "a voltage with its unit, such as `2 V`", |text| {
            let level = ["dBu", "dBV"].iter().any(|unit| text.trim_end().ends_with(unit));
            let factor = if level { SQRT_2 } else { 1.0 };
            parse(text, Unit::Volt).map(|volts| Self(volts * factor))
        })
    }
}

/// The level to leave: volts RMS (dBu and dBV too), or dBFS.
#[derive(Clone, Copy)]
enum Leave {
    Volts(f64),
    Dbfs(f64),
}

impl<'de> Deserialize<'de> for Leave {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let wanted = "a level with its unit, such as `20 µV` or `-90 dBFS`";
        yaml::from_text(deserializer, wanted, |text| match text.trim_end().ends_with("dBFS") {
            true => parse(text, Unit::DecibelFullScale).map(Self::Dbfs).map_err(|error| error.to_string()),
            false => {
                parse(text, Unit::Volt).map(Self::Volts).map_err(|error| format!("{error} or `-90 dBFS`"))
            }
        })
    }
}

/// Names of where the design spread may be centred.
struct CentreName(Centre);

impl<'de> Deserialize<'de> for CentreName {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let wanted = "`nominal` (public grids) or `measured` (islands, generators)";
        yaml::from_text(deserializer, wanted, |text| match text.trim() {
            "nominal" => Ok(Self(Centre::Nominal)),
            "measured" => Ok(Self(Centre::Measured)),
            _ => Err(format!("read `{text}`; wanted {wanted}")),
        })
    }
}

impl LineBrief {
    /// Reads and checks the line brief at `path`.
    ///
    /// # Errors
    /// [`BriefError`] naming file, line, key, what was read and what would do.
    pub fn read(path: &Path) -> Result<Self, BriefError> {
        let bytes = std::fs::read(path).map_err(|source| BriefError::Io { path: path.to_owned(), source })?;
        Ok(Self::from_text(path, &yaml::decode(path, bytes)?)?)
    }

    /// Reads and checks a line brief from `text`, the contents of `path`.
    ///
    /// # Errors
    /// [`YamlError`] naming line, key, what was read and what would do.
    pub fn from_text(path: &Path, text: &str) -> Result<Self, YamlError> {
        let record: BriefRecord = yaml::read_with_examples(path, text, EXAMPLES)?;
        let check = Check { path, text };
        let (temperature_from_c, temperature_to_c) = check.temperature(record.temperature)?;
        let hum = record.hum;
        let allow_hz = hum.allow.map_or(DEFAULT_ALLOW_HZ, |hz| hz.0);
        let guard_hz = hum.guard.map_or(DEFAULT_GUARD_HZ, |hz| hz.0);
        let brief = Self {
            line: record.line,
            full_scale_v: check.positive("full_scale", record.full_scale.0, Unit::Volt, "2 V")?,
            source: check.source(&record.source)?,
            load: check.load(&record.load)?,
            keep: check.keep(&record.keep)?,
            target: check.target(hum.reduce_by, hum.leave)?,
            orders: check.orders(hum.orders)?,
            allow_hz: check.not_negative("hum.allow", allow_hz, Unit::Hertz, "0.2 Hz")?,
            guard_hz: check.not_negative("hum.guard", guard_hz, Unit::Hertz, "5 Hz")?,
            centre: hum.centre.map_or(Centre::Nominal, |centre| centre.0),
            temperature_from_c,
            temperature_to_c,
            stock: record.stock,
        };
        check.something_left(&brief)?;
        Ok(brief)
    }
}

/// Checks of what the types cannot hold, with the place for the message.
struct Check<'a> {
    path: &'a Path,
    text: &'a str,
}

impl Check<'_> {
    fn wrong(&self, key: &str, problem: impl Into<String>) -> YamlError {
        YamlError::at(self.path, self.text, key, problem)
    }

    fn positive(&self, key: &str, value: f64, unit: Unit, example: &str) -> Result<f64, YamlError> {
        if value > 0.0 {
            return Ok(value);
        }
        let read = print(value, unit);
        Err(self.wrong(key, format!("read {read}; wanted more than zero, such as `{example}`")))
    }

    fn not_negative(&self, key: &str, value: f64, unit: Unit, example: &str) -> Result<f64, YamlError> {
        if value >= 0.0 {
            return Ok(value);
        }
        let read = print(value, unit);
        Err(self.wrong(key, format!("read {read}; wanted zero or more, such as `{example}`")))
    }

    fn source(&self, record: &SourceRecord) -> Result<Source, YamlError> {
        let inductance_h = record.inductance.map_or(0.0, |henries| henries.0);
        Ok(Source {
            resistance_ohm: self.not_negative(
                "source.resistance",
                record.resistance.0,
                Unit::Ohm,
                "350 Ω",
            )?,
            inductance_h: self.not_negative("source.inductance", inductance_h, Unit::Henry, "10 mH")?,
        })
    }

    fn load(&self, record: &LoadRecord) -> Result<Load, YamlError> {
        let capacitance_f = record.capacitance.map_or(0.0, |farads| farads.0);
        Ok(Load {
            resistance_ohm: self.positive("load.resistance", record.resistance.0, Unit::Ohm, "1 MΩ")?,
            capacitance_f: self.not_negative("load.capacitance", capacitance_f, Unit::Farad, "220 pF")?,
        })
    }

    fn keep(&self, records: &[KeepRecord]) -> Result<Vec<KeepBand>, YamlError> {
        if records.is_empty() {
            let problem = "the list is empty; say what the line is for, such as \
                           `- { from: 0 Hz, to: 12 Hz, loss: 0.5 dB }`";
            return Err(self.wrong("keep", problem));
        }
        records
            .iter()
            .enumerate()
            .map(|(index, record)| self.keep_band(&format!("keep[{index}]"), record))
            .collect()
    }

    fn keep_band(&self, key: &str, record: &KeepRecord) -> Result<KeepBand, YamlError> {
        let (from_hz, to_hz) = (record.from.0, record.to.0);
        self.not_negative(&format!("{key}.from"), from_hz, Unit::Hertz, "0 Hz")?;
        if to_hz <= from_hz {
            let what = if to_hz < from_hz { "turned round" } else { "no width" };
            let problem = format!(
                "read from {from_hz} Hz to {to_hz} Hz: {what}; write the lower frequency at `from`, the higher at `to`"
            );
            return Err(self.wrong(&format!("{key}.to"), problem));
        }
        let allowed_db = record.loss.0;
        if allowed_db <= 0.0 {
            let problem = format!(
                "read {allowed_db} dB; wanted more than zero, such as `0.5 dB`: a passive filter always loses something"
            );
            return Err(self.wrong(&format!("{key}.loss"), problem));
        }
        Ok(KeepBand { from_hz, to_hz, allowed_db })
    }

    fn target(
        &self,
        reduce_by: Option<Decibels>,
        leave: Option<Leave>,
    ) -> Result<ReductionTarget, YamlError> {
        let choose = "write one of `reduce_by: 40 dB`, `leave: 20 µV` and `leave: -90 dBFS`";
        match (reduce_by, leave) {
            (Some(_), Some(_)) => Err(self
                .wrong("hum.leave", format!("stands beside `reduce_by`, and only one can hold; {choose}"))),
            (None, None) => {
                Err(self.wrong("hum.reduce_by", format!("neither it nor `leave` is there; {choose}")))
            }
            (Some(Decibels(db)), None) => {
                self.positive("hum.reduce_by", db, Unit::Decibel, "40 dB").map(ReductionTarget::ReduceByDb)
            }
            (None, Some(Leave::Volts(volts))) => {
                self.positive("hum.leave", volts, Unit::Volt, "20 µV").map(ReductionTarget::LeaveV)
            }
            (None, Some(Leave::Dbfs(dbfs))) if dbfs < 0.0 => Ok(ReductionTarget::LeaveDbfs(dbfs)),
            (None, Some(Leave::Dbfs(dbfs))) => Err(self
                .wrong("hum.leave", format!("read {dbfs} dBFS; wanted less than zero, such as `-90 dBFS`"))),
        }
    }

    fn orders(&self, orders: Option<Vec<u32>>) -> Result<Option<Vec<u32>>, YamlError> {
        let Some(mut orders) = orders else { return Ok(None) };
        if orders.is_empty() {
            let problem = "the list is empty; write for instance `[1, 3]`, or leave `orders` out for every \
                           harmonic that needs it";
            return Err(self.wrong("hum.orders", problem));
        }
        for (index, order) in orders.iter().enumerate() {
            let key = format!("hum.orders[{index}]");
            if !(1..=HIGHEST_ORDER).contains(order) {
                let problem =
                    format!("read {order}; wanted an order from 1, the fundamental, to {HIGHEST_ORDER}");
                return Err(self.wrong(&key, problem));
            }
            if orders[..index].contains(order) {
                return Err(
                    self.wrong(&key, format!("read {order}, which stands there twice; name each order once"))
                );
            }
        }
        orders.sort_unstable();
        Ok(Some(orders))
    }

    fn temperature(&self, record: Option<TemperatureRecord>) -> Result<(f64, f64), YamlError> {
        let Some(record) = record else { return Ok(DEFAULT_TEMPERATURE_C) };
        let (from_c, to_c) = (record.from.0, record.to.0);
        if from_c < ABSOLUTE_ZERO_C {
            let problem =
                format!("read {from_c} °C, below absolute zero; wanted the coldest, such as `10 °C`");
            return Err(self.wrong("temperature.from", problem));
        }
        if to_c < from_c {
            let problem = format!(
                "read from {from_c} °C to {to_c} °C: turned round; write the coldest at `from`, the warmest at `to`"
            );
            return Err(self.wrong("temperature.to", problem));
        }
        Ok((from_c, to_c))
    }

    /// With orders given, a band that lies within the guards on every common
    /// grid is at fault whatever the capture shows.
    fn something_left(&self, brief: &LineBrief) -> Result<(), YamlError> {
        let Some(orders) = &brief.orders else { return Ok(()) };
        let left = |band: &KeepBand, grid_hz: &f64| {
            let lines_hz: Vec<f64> = orders.iter().map(|&order| f64::from(order) * grid_hz).collect();
            !band.judged(&lines_hz, brief.guard_hz).is_empty()
        };
        let lost = brief.keep.iter().position(|band| !COMMON_GRIDS_HZ.iter().any(|grid| left(band, grid)));
        let Some(index) = lost else { return Ok(()) };
        let band = &brief.keep[index];
        let problem = format!(
            "read from {} Hz to {} Hz, all of it within ± {} Hz of the lines of orders {orders:?} at 50 Hz and at \
             60 Hz alike: nothing is left to judge; widen the band, or lower `guard`",
            band.from_hz, band.to_hz, brief.guard_hz
        );
        Err(self.wrong(&format!("keep[{index}]"), problem))
    }
}
