//! The line brief: what the line is, what must be kept, what must go.

mod file;

use std::path::{Path, PathBuf};

use serde::{Deserialize, Serialize};

use crate::network::{Load, Source};
use crate::parts::quantity::print;
use crate::parts::yaml::{YamlError, line_of};
use crate::parts::{PartsError, Stock, Unit};

/// Where the design spread is centred.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Centre {
    /// On the nominal frequency: public grids average to it.
    Nominal,
    /// On the measured mean: islands and generators.
    Measured,
}

/// How far each harmonic is to go down.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(into = "TargetRecord", try_from = "TargetRecord")]
pub enum ReductionTarget {
    /// By this many decibels of insertion loss.
    ReduceByDb(f64),
    /// To this level, volts RMS.
    LeaveV(f64),
    /// To this level, decibels relative to full scale.
    LeaveDbfs(f64),
}

/// A band of the wanted signal and the loss it may have.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct KeepBand {
    /// Lower edge in hertz.
    pub from_hz: f64,
    /// Upper edge in hertz.
    pub to_hz: f64,
    /// Allowed insertion loss (or gain) in decibels, flat part included.
    pub allowed_db: f64,
}

/// The brief, read and checked, in SI units.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LineBrief {
    /// Name of the line.
    pub line: String,
    /// Peak volts of a full-scale sample at the notch's place.
    pub full_scale_v: f64,
    /// What drives the line.
    pub source: Source,
    /// What it feeds.
    pub load: Load,
    /// What must be kept, at least one band.
    pub keep: Vec<KeepBand>,
    /// How far the hum is to go down.
    pub target: ReductionTarget,
    /// Orders to reduce; `None`: every harmonic found that needs it.
    pub orders: Option<Vec<u32>>,
    /// Wander to design for where the capture shows less, hertz at the fundamental.
    pub allow_hz: f64,
    /// Loss is judged outside ± this of each notched line.
    pub guard_hz: f64,
    /// Centre of the design spread.
    pub centre: Centre,
    /// Coldest, °C.
    pub temperature_from_c: f64,
    /// Warmest, °C.
    pub temperature_to_c: f64,
    /// The stock list named, as written in the brief; `None`: the built-in one.
    pub stock: Option<String>,
}

/// A target as files hold it: one of three keys, so that YAML needs no tag for it.
#[derive(Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct TargetRecord {
    #[serde(default, skip_serializing_if = "Option::is_none")]
    reduce_by_db: Option<f64>,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    leave_v: Option<f64>,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    leave_dbfs: Option<f64>,
}

impl From<ReductionTarget> for TargetRecord {
    fn from(target: ReductionTarget) -> Self {
        let mut record = Self::default();
        match target {
            ReductionTarget::ReduceByDb(db) => record.reduce_by_db = Some(db),
            ReductionTarget::LeaveV(volts) => record.leave_v = Some(volts),
            ReductionTarget::LeaveDbfs(dbfs) => record.leave_dbfs = Some(dbfs),
        }
        record
    }
}

impl TryFrom<TargetRecord> for ReductionTarget {
    type Error = &'static str;

    fn try_from(record: TargetRecord) -> Result<Self, Self::Error> {
        match (record.reduce_by_db, record.leave_v, record.leave_dbfs) {
            (Some(db), None, None) => Ok(Self::ReduceByDb(db)),
            (None, Some(volts), None) => Ok(Self::LeaveV(volts)),
            (None, None, Some(dbfs)) => Ok(Self::LeaveDbfs(dbfs)),
            _ => Err("a target holds one of the keys `reduce_by_db`, `leave_v` and `leave_dbfs`"),
        }
    }
}

/// Why a brief, or the stock list it names, could not be read.
#[derive(Debug, thiserror::Error)]
pub enum BriefError {
    /// The file system refused.
    #[error("{path}: {source}; check the name of the line brief", path = path.display())]
    Io {
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// The file is no line brief, or its values do not fit together.
    #[error(transparent)]
    Wrong(#[from] YamlError),
    /// The stock list it names is at fault.
    #[error(transparent)]
    Stock(#[from] PartsError),
}

/// A stretch of frequencies as one would say it: `80 Hz to 15 kHz`.
pub fn span(from_hz: f64, to_hz: f64) -> String {
    let [from, to] = [from_hz, to_hz].map(|hz| print(hz, Unit::Hertz));
    format!("{from} to {to}")
}

impl KeepBand {
    /// The parts of the band outside ± `guard_hz` of each line, rising, as
    /// (from, to) in hertz: where loss is judged. Empty when nothing is left.
    pub fn judged(&self, lines_hz: &[f64], guard_hz: f64) -> Vec<(f64, f64)> {
        let mut lines = lines_hz.to_vec();
        lines.sort_by(f64::total_cmp);
        let mut ranges = Vec::new();
        let mut from_hz = self.from_hz;
        for line_hz in lines {
            let guard_from_hz = (line_hz - guard_hz).min(self.to_hz);
            if guard_from_hz > from_hz {
                ranges.push((from_hz, guard_from_hz));
            }
            from_hz = from_hz.max(line_hz + guard_hz);
        }
        if from_hz < self.to_hz {
            ranges.push((from_hz, self.to_hz));
        }
        ranges
    }

    /// The share of the band outside ± `guard_hz` of each line, 0 to 1.
    pub fn judged_share(&self, lines_hz: &[f64], guard_hz: f64) -> f64 {
        let judged: f64 = self.judged(lines_hz, guard_hz).iter().map(|(from, to)| to - from).sum();
        judged / (self.to_hz - self.from_hz)
    }
}

impl LineBrief {
    /// The stock list that the brief at `brief_path` names, looked for beside
    /// it, or the built-in one.
    ///
    /// # Errors
    /// [`BriefError`] when the list is not there, or is at fault.
    pub fn stock(&self, brief_path: &Path) -> Result<Stock, BriefError> {
        let Some(name) = &self.stock else { return Ok(Stock::built_in()) };
        let path = brief_path.parent().unwrap_or(Path::new("")).join(name);
        Stock::read(&path).map_err(|error| match error {
            PartsError::Io { path, source } => {
                let problem = format!(
                    "read `{name}`, and {} cannot be read ({source}); name a stock list beside the brief, \
                     or leave `stock` out for the built-in list",
                    path.display()
                );
                self.wrong(brief_path, "stock", problem)
            }
            error => error.into(),
        })
    }

    /// Checks that something of each keep band is left to judge once the lines
    /// are known: outside ± guard of every one of `orders` of `fundamental_hz`.
    ///
    /// # Errors
    /// [`BriefError::Wrong`] naming the band at fault in the brief at `brief_path`.
    pub fn check_keep_bands(
        &self,
        brief_path: &Path,
        fundamental_hz: f64,
        orders: &[u32],
    ) -> Result<(), BriefError> {
        let lines_hz: Vec<f64> = orders.iter().map(|&order| f64::from(order) * fundamental_hz).collect();
        match self.keep.iter().position(|band| band.judged(&lines_hz, self.guard_hz).is_empty()) {
            None => Ok(()),
            Some(index) => Err(self.nothing_left(brief_path, index, fundamental_hz)),
        }
    }

    fn nothing_left(&self, brief_path: &Path, index: usize, fundamental_hz: f64) -> BriefError {
        let band = &self.keep[index];
        let problem = format!(
            "read from {} Hz to {} Hz, all of it within ± {} Hz of lines of {} hum: nothing is \
             left to judge; widen the band, or lower `guard`",
            band.from_hz,
            band.to_hz,
            self.guard_hz,
            print(fundamental_hz, Unit::Hertz)
        );
        self.wrong(brief_path, &format!("keep[{index}]"), problem)
    }

    /// An error placed in the brief's file, where that can still be read.
    fn wrong(&self, brief_path: &Path, key: &str, problem: String) -> BriefError {
        let line = std::fs::read_to_string(brief_path).ok().and_then(|text| line_of(&text, key));
        YamlError { file: brief_path.to_owned(), line, key: key.to_owned(), problem }.into()
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::parts::yaml;

    #[test]
    fn a_keep_band_is_judged_outside_the_guards() {
        let band = KeepBand { from_hz: 0.0, to_hz: 120.0, allowed_db: 1.0 };
        assert_eq!(band.judged(&[], 5.0), [(0.0, 120.0)]);
        assert_eq!(band.judged(&[100.0, 50.0], 5.0), [(0.0, 45.0), (55.0, 95.0), (105.0, 120.0)]);
        assert_eq!(band.judged(&[50.0, 54.0, 118.0], 5.0), [(0.0, 45.0), (59.0, 113.0)]);
        assert_eq!(band.judged(&[300.0], 5.0), [(0.0, 120.0)]);
        assert_eq!(band.judged_share(&[50.0], 6.0), 0.9);
    }

    #[test]
    fn nothing_is_left_of_a_band_within_a_guard() {
        let band = KeepBand { from_hz: 46.0, to_hz: 54.0, allowed_db: 1.0 };
        assert!(band.judged(&[50.0], 5.0).is_empty());
        assert_eq!(band.judged_share(&[50.0], 5.0), 0.0);
    }

    #[test]
    fn targets_are_written_as_plain_keys_and_read_back() {
        for (target, text) in [
            (ReductionTarget::ReduceByDb(40.0), "reduce_by_db: 40.0\n"),
            (ReductionTarget::LeaveV(2e-5), "leave_v: 0.00002\n"),
            (ReductionTarget::LeaveDbfs(-90.0), "leave_dbfs: -90.0\n"),
        ] {
            let written = yaml::write(Path::new("plan.yaml"), &target).unwrap();
            assert_eq!(written, text);
            assert_eq!(yaml::read::<ReductionTarget>(Path::new("plan.yaml"), &written).unwrap(), target);
        }
    }
}
