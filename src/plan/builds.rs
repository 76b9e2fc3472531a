//! Builds: the filter as many people would solder it, each trimmed as the plan says.
//!
//! Build i of a seed draws, in this order: the temperature, uniform over the
//! brief's range; then for each part of the list, in order, its deviation, uniform
//! within its tolerance; then, trim by trim, the residue. Each trim sets its part,
//! at the reference temperature, to that value of its range at which the output at
//! its frequency is least, and adds residue × (uniform in ±1) × the planned value.
//! Then the whole goes to the drawn temperature. A build meets the brief when over
//! the whole design spread every order loses at least its target, and no judged
//! frequency of a keep band loses or gains more than allowed.

use rayon::prelude::*;

use super::chance::Chance;
use super::design::{BandPoint, Trim};
use super::extremes::Lookout;
use super::optimise::loss_db;
use super::requirements::{Rule, Stretch, Task};
use crate::network::{Circuit, PartValue};
use crate::parts::REFERENCE_TEMPERATURE_C;

/// What came of all builds.
pub struct Outcome {
    /// Share that meets the brief, percent.
    pub meeting_pct: f64,
    /// By order: least loss over the spread that 95 % of builds reach, decibels.
    pub reduction_worst_db: Vec<f64>,
    /// By keep band: the loss (a gain negative) that 95 % of builds stay within, decibels.
    pub loss_worst_db: Vec<f64>,
    /// The worst miss that 95 % of builds stay below, in units of the samples' scales.
    pub worst_miss: f64,
}

/// One build in figures.
struct Build {
    meets: bool,
    worst_miss: f64,
    reduction_db: Vec<f64>,
    loss_db: Vec<f64>,
}

/// Draws and judges `count` builds.
pub fn judge(
    lookout: &Lookout,
    trims: &[Trim],
    task: &Task,
    temperature_c: (f64, f64),
    count: u32,
    seed: u64,
) -> Outcome {
    let builds: Vec<Build> = (0..count)
        .into_par_iter()
        .map(|index| {
            let values = build(lookout.circuit(), trims, temperature_c, seed, index);
            Build::judged(lookout.stretches(), &lookout.worst_db(&values), task)
        })
        .collect();
    let column = |value: &dyn Fn(&Build) -> f64| builds.iter().map(value).collect::<Vec<f64>>();
    Outcome {
        meeting_pct: 100.0 * builds.iter().filter(|build| build.meets).count() as f64
            / f64::from(count.max(1)),
        reduction_worst_db: (0..task.orders.len())
            .map(|order| quantile(column(&|build| build.reduction_db[order]), 0.05))
            .collect(),
        loss_worst_db: (0..task.keep.len())
            .map(|band| {
                let mut losses = column(&|build| build.loss_db[band]);
                losses.sort_by(|a, b| a.abs().total_cmp(&b.abs()));
                losses[share_index(losses.len(), 0.95)]
            })
            .collect(),
        worst_miss: quantile(column(&|build| build.worst_miss), 0.95),
    }
}

/// Nominal response and the band of 95 % of builds, as insertion gain.
pub fn band(
    circuit: &Circuit,
    trims: &[Trim],
    frequencies_hz: &[f64],
    temperature_c: (f64, f64),
    count: u32,
    seed: u64,
) -> Vec<BandPoint> {
    let mut nominal = vec![0.0; frequencies_hz.len()];
    losses_db(circuit, &circuit.values(), frequencies_hz, &mut nominal);
    let rows: Vec<Vec<f64>> = (0..count)
        .into_par_iter()
        .map(|index| {
            let values = build(circuit, trims, temperature_c, seed, index);
            let mut row = vec![0.0; frequencies_hz.len()];
            losses_db(circuit, &values, frequencies_hz, &mut row);
            row
        })
        .collect();
    frequencies_hz
        .iter()
        .enumerate()
        .map(|(point, &frequency_hz)| {
            let mut gains: Vec<f64> = rows.iter().map(|row| -row[point]).collect();
            gains.sort_by(f64::total_cmp);
            let at =
                |share: f64| gains.get(share_index(gains.len(), share)).copied().unwrap_or(-nominal[point]);
            BandPoint { frequency_hz, nominal_db: -nominal[point], low_db: at(0.025), high_db: at(0.975) }
        })
        .collect()
}

/// Insertion loss in decibels at each frequency, into `out`.
pub fn losses_db(circuit: &Circuit, values: &[PartValue], frequencies_hz: &[f64], out: &mut [f64]) {
    circuit.evaluator(values).insertion_power_each(frequencies_hz, out);
    out.iter_mut().for_each(|power| *power = loss_db(*power));
}

impl Build {
    /// From the loss at its worst over each stretch.
    fn judged(stretches: &[Stretch], worst_db: &[f64], task: &Task) -> Self {
        let mut build = Self {
            meets: true,
            worst_miss: f64::NEG_INFINITY,
            reduction_db: vec![f64::INFINITY; task.orders.len()],
            loss_db: vec![0.0; task.keep.len()],
        };
        for (stretch, &loss_db) in stretches.iter().zip(worst_db) {
            build.worst_miss = build.worst_miss.max(stretch.rule.miss(loss_db));
            match stretch.rule {
                Rule::Reduce { order, .. } => {
                    build.reduction_db[order] = build.reduction_db[order].min(loss_db);
                }
                Rule::Keep { band, .. } => {
                    if loss_db.abs() > build.loss_db[band].abs() {
                        build.loss_db[band] = loss_db;
                    }
                }
            }
        }
        build.meets = build.worst_miss <= 0.0;
        build
    }
}

/// Values of build `index` of `seed`, trimmed and at its temperature.
pub fn build(
    circuit: &Circuit,
    trims: &[Trim],
    (from_c, to_c): (f64, f64),
    seed: u64,
    index: u32,
) -> Vec<PartValue> {
    let mut chance = Chance::new(seed, u64::from(index));
    let temperature_c = from_c + (to_c - from_c) * chance.unit();
    let deviations: Vec<f64> =
        circuit.parts.iter().map(|part| chance.within(part.tolerance_pct / 100.0)).collect();
    let mut values: Vec<PartValue> = circuit
        .parts
        .iter()
        .zip(&deviations)
        .map(|(part, deviation)| PartValue::as_built(part, *deviation, REFERENCE_TEMPERATURE_C))
        .collect();
    apply_trims(circuit, trims, &mut values, |trim| chance.within(trim.residue));
    let kelvin = temperature_c - REFERENCE_TEMPERATURE_C;
    for (value, part) in values.iter_mut().zip(&circuit.parts) {
        value.value_si *= 1.0 + part.drift_per_k * kelvin;
        value.series_resistance_ohm *= 1.0 + part.series_resistance_drift_per_k * kelvin;
    }
    values
}

/// Goes through the trims as the bench sheet says, at the reference temperature.
///
/// `residue` says by which fraction of the planned value each trim ends beside its aim.
pub fn apply_trims(
    circuit: &Circuit,
    trims: &[Trim],
    values: &mut [PartValue],
    mut residue: impl FnMut(&Trim) -> f64,
) {
    for trim in trims {
        let Some(part) = circuit.parts.iter().position(|part| part.reference == trim.part) else { continue };
        let planned_si = PartValue::from(&circuit.parts[part]).value_si;
        let best_si = least_output_at(circuit, values, part, trim.frequency_hz, (trim.from_si, trim.to_si));
        values[part].value_si = (best_si + residue(trim) * planned_si).clamp(trim.from_si, trim.to_si);
    }
}

/// Value of one part within its range at which the output at a frequency is least.
pub fn least_output_at(
    circuit: &Circuit,
    values: &mut [PartValue],
    part: usize,
    frequency_hz: f64,
    (from_si, to_si): (f64, f64),
) -> f64 {
    let output = |value_si: f64| {
        values[part].value_si = value_si;
        circuit.evaluator(values).insertion(frequency_hz).norm_sqr()
    };
    least(output, from_si, to_si)
}

/// Where a function of one minimum is least between two ends (golden section,
/// Kiefer 1953), to 1e-4 of the range: well below any trim's residue.
fn least(mut f: impl FnMut(f64) -> f64, from: f64, to: f64) -> f64 {
    let golden = (5f64.sqrt() - 1.0) / 2.0;
    let (mut low, mut high) = (from, to);
    let (mut a, mut b) = (high - golden * (high - low), low + golden * (high - low));
    let (mut fa, mut fb) = (f(a), f(b));
    while high - low > 1e-4 * (to - from) {
        if fa < fb {
            (high, b, fb) = (b, a, fa);
            a = high - golden * (high - low);
            fa = f(a);
        } else {
            (low, a, fa) = (a, b, fb);
            b = low + golden * (high - low);
            fb = f(b);
        }
    }
    0.5 * (low + high)
}

/// Index of the value that a share of `count` sorted values does not exceed.
fn share_index(count: usize, share: f64) -> usize {
    ((count as f64 * share).ceil() as usize).clamp(1, count.max(1)) - 1
}

/// The value that a share of all does not exceed.
fn quantile(mut values: Vec<f64>, share: f64) -> f64 {
    values.sort_by(f64::total_cmp);
    values.get(share_index(values.len(), share)).copied().unwrap_or(f64::NAN)
}
