//! The line brief, the Q window, the search, builds, trim.

mod assembly;
mod brief;
mod builds;
mod chance;
mod design;
mod extremes;
mod finish;
mod nearest;
mod optimise;
mod requirements;
mod round;
mod search;
mod shelf;
mod trim;
mod window;

pub use brief::{BriefError, Centre, KeepBand, LineBrief, ReductionTarget, span};
pub use builds::build;
pub use design::*;
pub use requirements::{OrderTask, Task};

pub use window::{largest_q_for_detuning, largest_q_of_bridged_t, largest_q_of_trap, least_q_for_loss};

use requirements::Lean;
use search::{Made, Search};
use shelf::Shelf;

use crate::analysis::Analysis;
use crate::network::Circuit;
use crate::parts::Stock;

/// What the user asks of the planner.
#[derive(Debug, Clone, PartialEq)]
pub struct PlanOptions {
    /// Builds drawn for each design that is told of.
    pub builds: u32,
    /// Seed of all draws; the same seed gives the same plan.
    pub seed: u64,
    /// Most alternatives told of.
    pub alternatives: usize,
}

impl Default for PlanOptions {
    fn default() -> Self {
        Self { builds: 1000, seed: 1, alternatives: 3 }
    }
}

/// Why there can be no plan.
#[derive(Debug, thiserror::Error)]
pub enum PlanError {
    /// The analysis found no hum.
    #[error(
        "the analysis found no hum, so there is nothing to plan against; record longer, or with the hum present"
    )]
    NoHum,
    /// A keep band lies wholly inside the guards.
    #[error(
        "`keep`: of {from_hz} to {to_hz} Hz nothing is left outside ± {guard_hz} Hz of the notched lines; \
         widen the band or make `guard` smaller"
    )]
    NothingToJudge {
        /// Lower edge of the band.
        from_hz: f64,
        /// Upper edge of the band.
        to_hz: f64,
        /// The guard.
        guard_hz: f64,
    },
    /// The list cannot make any network.
    #[error("the stock list holds {held}; list at least one line of capacitors and one of resistors")]
    NothingInStock {
        /// What the list does hold.
        held: String,
    },
    /// No kind suits the lines and bands.
    #[error(
        "no kind of section can be made for these lines and keep bands from the stock list; \
         list more capacitors (from nanofarads to tens of microfarads) and coils"
    )]
    NoNetwork,
}

/// Designs the filter that meets the brief, or the nearest to it.
///
/// `progress` is told the share done, 0 to 1. Where no order needs reducing the
/// plan is met by an empty network, and says so in its notes.
///
/// # Errors
/// [`PlanError`]: no hum found, a keep band wholly inside the guards, or a stock
/// list from which nothing can be made.
pub fn plan(
    analysis: &Analysis,
    brief: &LineBrief,
    stock: &Stock,
    options: &PlanOptions,
    progress: &mut dyn FnMut(f64),
) -> Result<Plan, PlanError> {
    let task = Task::new(analysis, brief)?;
    progress(0.0);
    let shelf = Shelf::new(stock);
    if shelf.capacitance_f().is_none() || shelf.resistance_ohm().is_none() {
        return Err(PlanError::NothingInStock { held: held(stock) });
    }
    let search = Search {
        task: &task,
        shelf: &shelf,
        ends: (brief.source, brief.load),
        temperature_c: (brief.temperature_from_c, brief.temperature_to_c),
        builds: options.builds,
        seed: options.seed,
        lean: Lean::Even,
    };
    if task.orders.is_empty() {
        return Ok(nothing_to_do(&search, brief));
    }
    let mut made = search.run(progress);
    if made.first().is_some_and(|made| !made.design.met) {
        made = search.run_leaning(made, progress);
    }
    let plan = assembled(&search, brief, made, options).ok_or(PlanError::NoNetwork)?;
    progress(1.0);
    Ok(plan)
}

fn held(stock: &Stock) -> String {
    format!("{} lines of capacitors and {} of resistors", stock.capacitors.len(), stock.resistors.len())
}

/// The plan where no order needs reducing: a wire.
fn nothing_to_do(search: &Search, brief: &LineBrief) -> Plan {
    let task = search.task;
    let circuit = Circuit { source: brief.source, load: brief.load, sections: Vec::new(), parts: Vec::new() };
    let mut notes = task.notes.clone();
    notes.push("no harmonic found needs reducing for this brief: buy nothing".to_owned());
    Plan {
        design: search.of_nothing(circuit),
        brief: brief.clone(),
        nominal_hz: task.nominal_hz,
        mean_hz: task.mean_hz,
        design_spread_hz: task.spread_hz,
        centre_hz: task.centre_hz,
        q_windows: Vec::new(),
        obstacles: Vec::new(),
        alternatives: Vec::new(),
        notes,
    }
}

/// The winner with its alternatives, windows and band.
fn assembled(search: &Search, brief: &LineBrief, made: Vec<Made>, options: &PlanOptions) -> Option<Plan> {
    let task = search.task;
    let mut made = told(made, options.alternatives + 1);
    for made in &mut made {
        made.design = search.with_all_builds(made.design.clone());
    }
    // Of a few builds some designs seem to meet the brief, or to miss it.
    made.sort_by_key(|made| !made.design.met);
    let obstacles = match made.first()?.design.met {
        true => Vec::new(),
        false => nearest::obstacles(&made, task, search.shelf.stock(), search.temperature_c),
    };
    let mut told = made.into_iter().map(|made| made.design);
    let mut design = told.next()?;
    let q_windows = window::windows(task, search.shelf.stock(), &design, search.temperature_c);
    let alternatives = told.collect();
    design.builds.band = builds::band(
        &design.circuit,
        &design.trims,
        &band_frequencies(task),
        search.temperature_c,
        options.builds.min(500),
        options.seed,
    );
    Some(Plan {
        design,
        brief: brief.clone(),
        nominal_hz: task.nominal_hz,
        mean_hz: task.mean_hz,
        design_spread_hz: task.spread_hz,
        centre_hz: task.centre_hz,
        q_windows,
        obstacles,
        alternatives,
        notes: task.notes.clone(),
    })
}

/// The first `most` that differ in kinds or in number of parts, in order; where those
/// are fewer, others that differ in values only.
fn told(made: Vec<Made>, most: usize) -> Vec<Made> {
    let key = |made: &Made| -> (Vec<String>, usize) {
        let kinds = made.design.sections.iter().map(|section| section.kind.clone()).collect();
        (kinds, made.design.circuit.parts.len())
    };
    let mut told: Vec<Made> = Vec::new();
    let mut others: Vec<Made> = Vec::new();
    for made in made {
        let differs = told.iter().all(|other| key(other) != key(&made));
        if differs && told.len() < most { told.push(made) } else { others.push(made) }
    }
    for made in others {
        if told.len() < most && told.iter().all(|other| other.design.circuit != made.design.circuit) {
            told.push(made);
        }
    }
    told
}

/// Frequencies at which the band of builds is told: 48 an octave near the lines,
/// 12 an octave elsewhere, from below all that is kept, or a fiftieth of the
/// fundamental, to beyond all that is kept or reduced.
fn band_frequencies(task: &Task) -> Vec<f64> {
    let highest_line = task.orders.iter().map(|order| order.centre_hz).fold(task.centre_hz, f64::max);
    let highest_kept = task.keep.iter().map(|band| band.to_hz).fold(0.0, f64::max);
    let to_hz = (2.0 * highest_line).max(1.2 * highest_kept);
    let lowest = |band: &KeepBand| if band.from_hz > 0.0 { band.from_hz / 1.5 } else { band.to_hz / 20.0 };
    let from_hz = task.keep.iter().map(lowest).fold(task.centre_hz / 50.0, f64::min);
    let count = (12.0 * (to_hz / from_hz).log2()).ceil() as usize;
    let mut points: Vec<f64> =
        (0..=count).map(|k| from_hz * (to_hz / from_hz).powf(k as f64 / count as f64)).collect();
    for order in &task.orders {
        points.extend((-6..=6).map(|k| order.centre_hz * 2f64.powf(f64::from(k) / 48.0)));
        points.extend([order.centre_hz - order.spread_hz, order.centre_hz + order.spread_hz]);
    }
    points.sort_by(f64::total_cmp);
    points.dedup();
    points
}
