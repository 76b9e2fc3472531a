//! What the brief asks, as figures at frequencies: spread, targets, judged bands.

use serde::{Deserialize, Serialize};

use super::PlanError;
use super::brief::{Centre, KeepBand, LineBrief, ReductionTarget};
use crate::analysis::{Analysis, Harmonic};

/// A line to be reduced, with the spread it is designed for.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct OrderTask {
    /// Order.
    pub order: u32,
    /// Centre of the design spread at this order, hertz.
    pub centre_hz: f64,
    /// Half-width of the design spread at this order, hertz.
    pub spread_hz: f64,
    /// Measured mean frequency of this order, hertz.
    pub measured_hz: f64,
    /// Reduction asked for, decibels.
    pub target_db: f64,
}

/// The brief and the findings, put together.
#[derive(Debug, Clone, PartialEq)]
pub struct Task {
    /// Lines to be reduced, by rising order.
    pub orders: Vec<OrderTask>,
    /// Keep bands.
    pub keep: Vec<KeepBand>,
    /// Nominal frequency of the supply, hertz.
    pub nominal_hz: f64,
    /// Measured mean frequency, hertz.
    pub mean_hz: f64,
    /// Centre of the design spread at the fundamental.
    pub centre_hz: f64,
    /// Half-width of the design spread at the fundamental.
    pub spread_hz: f64,
    /// Loss is judged outside ± this of each line.
    pub guard_hz: f64,
    /// What was assumed.
    pub notes: Vec<String>,
}

impl Task {
    /// Puts the brief and the findings together.
    ///
    /// The design spread is the larger of `allow` and |mean − centre| + measured
    /// spread, k times that at order k. Where the brief names no orders: with
    /// `reduce_by`, the harmonics not already that far below the strongest; with
    /// `leave`, those above it.
    ///
    /// # Errors
    /// [`PlanError::NoHum`] where the analysis found none;
    /// [`PlanError::NothingToJudge`] where a keep band lies inside the guards.
    pub fn new(analysis: &Analysis, brief: &LineBrief) -> Result<Self, PlanError> {
        let mains = &analysis.mains;
        let Some(mean_hz) = mains.frequency_hz.filter(|_| mains.found) else { return Err(PlanError::NoHum) };
        let mut notes = Vec::new();
        let nominal_hz = mains.nominal_hz.unwrap_or(mean_hz);
        if mains.nominal_hz.is_none() && brief.centre == Centre::Nominal {
            notes.push(format!(
                "{mean_hz:.3} Hz fits no nominal supply frequency; the design is centred on it as measured"
            ));
        }
        let centre_hz = match brief.centre {
            Centre::Nominal => nominal_hz,
            Centre::Measured => mean_hz,
        };
        let seen_hz = (mean_hz - centre_hz).abs() + mains.spread_hz.unwrap_or(0.0);
        let spread_hz = brief.allow_hz.max(seen_hz);
        let orders = targets(analysis, brief, &mut notes)
            .into_iter()
            .map(|(order, target_db)| OrderTask {
                order,
                centre_hz: f64::from(order) * centre_hz,
                spread_hz: f64::from(order) * spread_hz,
                measured_hz: f64::from(order) * mean_hz,
                target_db,
            })
            .collect();
        let task = Self {
            orders,
            keep: brief.keep.clone(),
            nominal_hz,
            mean_hz,
            centre_hz,
            spread_hz,
            guard_hz: brief.guard_hz,
            notes,
        };
        for band in &task.keep {
            if task.judged(band).is_empty() {
                return Err(PlanError::NothingToJudge {
                    from_hz: band.from_hz,
                    to_hz: band.to_hz,
                    guard_hz: brief.guard_hz,
                });
            }
        }
        Ok(task)
    }

    /// Parts of a keep band that are judged: outside the guards of all lines.
    pub fn judged(&self, band: &KeepBand) -> Vec<(f64, f64)> {
        let lines: Vec<f64> = self.orders.iter().map(|order| order.centre_hz).collect();
        band.judged(&lines, self.guard_hz)
    }

    /// Every order's spread, and all judged parts of the keep bands, with what is asked there.
    pub fn stretches(&self) -> Vec<Stretch> {
        let lines = self.orders.iter().enumerate().map(|(index, order)| Stretch {
            from_hz: order.centre_hz - order.spread_hz,
            to_hz: order.centre_hz + order.spread_hz,
            rule: Rule::Reduce { order: index, target_db: order.target_db },
        });
        let kept = self.keep.iter().enumerate().flat_map(|(index, band)| {
            let rule = Rule::Keep { band: index, allowed_db: band.allowed_db };
            self.judged(band).into_iter().map(move |(from_hz, to_hz)| Stretch { from_hz, to_hz, rule })
        });
        lines.chain(kept).collect()
    }
}

/// Orders to be reduced and by how many decibels, by rising order.
fn targets(analysis: &Analysis, brief: &LineBrief, notes: &mut Vec<String>) -> Vec<(u32, f64)> {
    let strongest_dbfs = analysis.harmonics.iter().map(|h| h.level_dbfs).fold(f64::NEG_INFINITY, f64::max);
    let needed_db = |harmonic: &Harmonic| match brief.target {
        ReductionTarget::ReduceByDb(db) => db,
        ReductionTarget::LeaveDbfs(dbfs) => harmonic.level_dbfs - dbfs,
        ReductionTarget::LeaveV(volt) => {
            harmonic.level_dbfs - 20.0 * (volt * std::f64::consts::SQRT_2 / brief.full_scale_v).log10()
        }
    };
    let found = |order: u32| analysis.harmonics.iter().find(|harmonic| harmonic.order == order);
    let mut targets: Vec<(u32, f64)> = match &brief.orders {
        Some(orders) => orders
            .iter()
            .filter_map(|&order| match (found(order), brief.target) {
                (Some(harmonic), _) => Some((order, needed_db(harmonic))),
                (None, ReductionTarget::ReduceByDb(db)) => {
                    notes.push(format!("order {order} was not found in the recording; reduced all the same, as the brief asks"));
                    Some((order, db))
                }
                (None, _) => {
                    notes.push(format!("order {order} was not found in the recording: nothing to reduce there"));
                    None
                }
            })
            .collect(),
        None => analysis
            .harmonics
            .iter()
            .filter(|harmonic| match brief.target {
                ReductionTarget::ReduceByDb(db) => harmonic.level_dbfs > strongest_dbfs - db,
                _ => true,
            })
            .map(|harmonic| (harmonic.order, needed_db(harmonic)))
            .collect(),
    };
    targets.retain(|&(_, db)| db > 0.0);
    targets.sort_by_key(|&(order, _)| order);
    targets.dedup_by_key(|target| target.0);
    targets
}

/// What is asked at one frequency.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Rule {
    /// Insertion loss of at least this much; index of the order.
    Reduce {
        /// Index into [`Task::orders`].
        order: usize,
        /// Decibels.
        target_db: f64,
    },
    /// Loss or gain of at most this much; index of the band.
    Keep {
        /// Index into [`Task::keep`].
        band: usize,
        /// Decibels.
        allowed_db: f64,
    },
}

impl Rule {
    /// Decibels over what is allowed, or short of what is asked.
    fn over_db(&self, loss_db: f64) -> f64 {
        match *self {
            Self::Reduce { target_db, .. } => target_db - loss_db,
            Self::Keep { allowed_db, .. } => loss_db.abs() - allowed_db,
        }
    }

    /// Units of miss: a tenth of the reduction asked for, a fifth of the loss
    /// allowed. They only balance the search where both cannot be had; what is met
    /// is met in any unit.
    fn scale_db(&self) -> f64 {
        match *self {
            Self::Reduce { target_db, .. } => (target_db / 10.0).max(1.0),
            Self::Keep { allowed_db, .. } => allowed_db / 5.0,
        }
    }

    /// Miss in units: positive where the rule is broken.
    pub fn miss(&self, loss_db: f64) -> f64 {
        self.over_db(loss_db) / self.scale_db()
    }
}

/// A range of frequencies over the whole of which one thing is asked.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Stretch {
    /// Lower edge.
    pub from_hz: f64,
    /// Upper edge.
    pub to_hz: f64,
    /// What.
    pub rule: Rule,
}

/// One frequency at which something is asked.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sample {
    /// Where.
    pub frequency_hz: f64,
    /// What.
    pub rule: Rule,
    /// Decibels that count as one unit of miss.
    pub scale_db: f64,
}

impl Sample {
    /// Miss in units of `scale_db`: positive where the rule is broken.
    pub fn miss(&self, loss_db: f64) -> f64 {
        self.rule.over_db(loss_db) / self.scale_db
    }

    /// Slope of [`Sample::miss`] against the loss.
    pub fn miss_slope(&self, loss_db: f64) -> f64 {
        match self.rule {
            Rule::Reduce { .. } => -1.0 / self.scale_db,
            Rule::Keep { .. } => loss_db.signum() / self.scale_db,
        }
    }
}

/// How densely the rules are sampled.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Density {
    /// Points over each order's spread.
    pub per_line: usize,
    /// Points an octave of keep band.
    pub per_octave: f64,
    /// Fewest points of each judged interval.
    pub least: usize,
}

/// For the search; what is told to the user is read over whole stretches.
pub const COARSE: Density = Density { per_line: 3, per_octave: 3.0, least: 3 };
/// What the search holds to first where not all can be had.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Lean {
    /// Neither: both miss alike.
    Even,
    /// The keep bands are held, and the hum goes down as far as that allows.
    Signal,
    /// The targets are met, and the loss is the least that this costs.
    Hum,
}

/// A miss of the side leant to weighs this many times as much.
const LEANING: f64 = 20.0;

/// Share of the loss allowed that may be flat, where the signal is held to first:
/// what goes down with the hum brings nobody nearer, and the rest is for the notches.
const FLAT_SHARE: f64 = 1.0 / 3.0;
/// Share of the loss allowed that is planned with (and of the target that is asked
/// for); the rest is for what more builds show.
const BUILDS_SHARE: f64 = 0.95;
/// Flat is the loss this far from every line, as a ratio of frequencies.
const FAR: f64 = 2.0;

impl Lean {
    /// The sample as this leaning has it, among lines at `lines_hz`.
    pub fn weighed(self, mut sample: Sample, lines_hz: &[f64]) -> Sample {
        let far = |line_hz: &f64| !(1.0 / FAR..=FAR).contains(&(sample.frequency_hz / line_hz));
        match &mut sample.rule {
            Rule::Reduce { target_db, .. } if self == Self::Hum => {
                *target_db /= BUILDS_SHARE;
                sample.scale_db /= LEANING;
            }
            Rule::Keep { allowed_db, .. } if self == Self::Signal => {
                *allowed_db *= if lines_hz.iter().all(far) { FLAT_SHARE } else { BUILDS_SHARE };
                sample.scale_db /= LEANING;
            }
            _ => {}
        }
        sample
    }
}

/// All rules of a task at their frequencies.
pub fn samples(task: &Task, density: Density) -> Vec<Sample> {
    let sampled = |stretch: Stretch| {
        let Stretch { from_hz, to_hz, rule } = stretch;
        let points = match rule {
            Rule::Reduce { .. } => line_points(from_hz, to_hz, density),
            Rule::Keep { .. } => interval_points(from_hz, to_hz, density),
        };
        points.into_iter().map(move |frequency_hz| Sample { frequency_hz, rule, scale_db: rule.scale_db() })
    };
    task.stretches().into_iter().flat_map(sampled).collect()
}

/// Points over a line's spread, evenly.
fn line_points(from_hz: f64, to_hz: f64, density: Density) -> Vec<f64> {
    let (middle_hz, half_hz) = (0.5 * (from_hz + to_hz), 0.5 * (to_hz - from_hz));
    let across = |point: usize| 2.0 * point as f64 / (density.per_line - 1) as f64 - 1.0;
    (0..density.per_line).map(|point| middle_hz + across(point) * half_hz).collect()
}

/// Points from edge to edge: evenly by ratio; evenly by frequency, 0 Hz itself
/// included, where the interval starts there.
fn interval_points(from_hz: f64, to_hz: f64, density: Density) -> Vec<f64> {
    let from_zero = from_hz < to_hz / 1000.0;
    let octaves = if from_zero { 3.0 } else { (to_hz / from_hz).log2() };
    let count = density.least.max((density.per_octave * octaves).ceil() as usize + 1);
    (0..count)
        .map(|point| {
            let along = point as f64 / (count - 1) as f64;
            match point {
                0 => from_hz,
                last if last == count - 1 => to_hz,
                _ if from_zero => from_hz + along * (to_hz - from_hz),
                _ => from_hz * (to_hz / from_hz).powf(along),
            }
        })
        .collect()
}
