//! From settled values to a design: circuit with references, trims in words, figures.

use super::assembly::expanded;
use super::builds::{self, losses_db};
use super::design::{Builds, Design, KeepResult, Notched, Predicted, SectionSummary, Trim};
use super::extremes::Lookout;
use super::optimise::{Point, Problem};
use super::requirements::{Rule, Task};
use super::shelf::Listed;
use super::trim::Adjustable;
use crate::network::kinds::{Notch, Slot, SlotValue, kind_named};
use crate::network::{Branch, Chain, Circuit, Section, TwoPort};
use crate::parts::{Part, PartKind, Unit, quantity::print};

/// Everything about a finished network before builds are drawn.
pub struct Finished {
    /// The circuit.
    pub circuit: Circuit,
    /// Its trims.
    pub trims: Vec<Trim>,
    /// Its sections in figures.
    pub sections: Vec<SectionSummary>,
    /// Slots whose trims would not lead to the planned values.
    pub failing: Vec<usize>,
}

/// Puts the parts into the network and names them.
///
/// References count each letter from the source on: R, C, L, and P for what is
/// set by turning.
pub fn finished(problem: &Problem, point: &Point, adjustables: &[Adjustable], task: &Task) -> Finished {
    let assembly = problem.assembly;
    let mut parts: Vec<Part> = Vec::new();
    let mut slot_branch: Vec<Branch> = vec![Branch::Part(usize::MAX); assembly.slots.len()];
    let mut adjusted: Vec<(usize, &Adjustable)> = Vec::new();
    let mut counts = [0u32; 4];
    let slots_in_order: Vec<usize> = assembly
        .network
        .sections
        .iter()
        .flat_map(|section| section.stages.iter().flat_map(|stage| stage.parts().into_iter().copied()))
        .collect();
    for slot in slots_in_order {
        let mut add = |listed: &Listed, setting_si: Option<f64>| {
            let mut part = match setting_si {
                Some(ohm) if listed.kind == PartKind::Trimmer => {
                    problem.shelf.stock().trimmers[listed.line].part("", listed.value_si, ohm)
                }
                _ => problem.shelf.part(listed, problem.loss_hz),
            };
            let (letter, count) = match listed.kind {
                PartKind::Resistor => ("R", &mut counts[0]),
                PartKind::Capacitor => ("C", &mut counts[1]),
                PartKind::Coil => ("L", &mut counts[2]),
                PartKind::Trimmer => ("P", &mut counts[3]),
            };
            *count += 1;
            part.reference = format!("{letter}{count}");
            parts.push(part);
            Branch::Part(parts.len() - 1)
        };
        let adjustable = adjustables.iter().find(|adjustable| adjustable.slot == slot);
        slot_branch[slot] = match (adjustable, &point.made[slot], assembly.slots[slot]) {
            (Some(adjustable), ..) => {
                let mut branches: Vec<Branch> =
                    adjustable.fixed.iter().map(|listed| add(listed, None)).collect();
                branches.push(add(&adjustable.adjusted, Some(adjustable.planned_si)));
                adjusted.push((parts.len() - 1, adjustable));
                joined(branches, adjustable.adjusted.kind == PartKind::Trimmer)
            }
            (None, Some(made), _) => {
                joined(made.parts.iter().map(|listed| add(listed, None)).collect(), false)
            }
            (None, None, Slot::Coil(line)) => {
                let value_si = problem.shelf.stock().coils[line].inductance_h;
                add(&Listed { kind: PartKind::Coil, line, value_si }, None)
            }
            (None, None, _) => continue,
        };
    }
    let sections: Vec<Section> = assembly
        .network
        .sections
        .iter()
        .map(|section| Section {
            kind: section.kind.clone(),
            stages: section.stages.iter().map(|stage| expanded(stage, &slot_branch)).collect(),
        })
        .collect();
    let circuit = Circuit { source: assembly.network.source, load: assembly.network.load, sections, parts };
    let trims = trims(&circuit, &adjusted, task);
    let failing = failing(&circuit, &trims)
        .into_iter()
        .filter_map(|part| adjusted.iter().find(|(index, _)| *index == part).map(|(_, a)| a.slot))
        .collect();
    let sections = summaries(problem, &circuit, &slot_branch, task);
    Finished { circuit, trims, sections, failing }
}

fn joined(mut branches: Vec<Branch>, in_series: bool) -> Branch {
    match branches.len() {
        1 => branches.remove(0),
        _ if in_series => Branch::series(branches),
        _ => Branch::parallel(branches),
    }
}

/// The trims in the order of work. Two that pull on each other are gone through twice.
fn trims(circuit: &Circuit, adjusted: &[(usize, &Adjustable)], task: &Task) -> Vec<Trim> {
    let pulling =
        adjusted.iter().any(|(_, a)| adjusted.iter().any(|(_, b)| a.slot != b.slot && a.order == b.order));
    let rounds = if pulling { 2 } else { 1 };
    let mut trims = Vec::new();
    for _ in 0..rounds {
        for (part, adjustable) in adjusted {
            let Some(order) = task.orders.iter().find(|order| order.order == adjustable.order) else {
                continue;
            };
            let frequency_hz = reading_frequency(circuit, *part, adjustable, order.centre_hz);
            trims.push(trim(trims.len() as u32 + 1, &circuit.parts[*part], adjustable, frequency_hz));
        }
    }
    trims
}

fn trim(step: u32, part: &Part, adjustable: &Adjustable, frequency_hz: f64) -> Trim {
    let (unit, method, how) = match part.kind {
        PartKind::Trimmer => (Unit::Ohm, "turn", format!("turn {}", part.reference)),
        _ => (
            Unit::Farad,
            "pad",
            format!(
                "fit as {} up to three listed capacitors side by side, the largest first, each the largest that \
                 does not overshoot, the last the nearest",
                part.reference
            ),
        ),
    };
    let (from_si, to_si) = adjustable.range_si;
    let instruction = format!(
        "Feed {frequency_hz:.2} Hz through the source's own resistance and load as in use; {how} until the output at \
         {frequency_hz:.2} Hz is least; expect about {planned}, range {range}; what is left is ± {left}.",
        planned = print(rounded_to(adjustable.planned_si, 3), unit),
        range = print(rounded_to(to_si, 3), unit),
        left = print(rounded_to(adjustable.residue * adjustable.planned_si, 2), unit),
    );
    Trim {
        step,
        part: part.reference.clone(),
        method: method.to_owned(),
        from_si,
        to_si,
        frequency_hz,
        aim: "least output".to_owned(),
        residue: adjustable.residue,
        instruction,
    }
}

/// A value to so many significant digits.
fn rounded_to(value: f64, digits: i32) -> f64 {
    if value == 0.0 {
        return value;
    }
    let scale = 10f64.powi(digits - 1 - value.abs().log10().floor() as i32);
    (value * scale).round() / scale
}

/// Frequency at which the planned value is the one of least output: what to feed
/// while trimming, to 0.01 Hz as a generator is set.
///
/// It starts at the null of the nominal circuit within 5 % of the line; since the
/// rest of the circuit tilts the null, it is then moved against what the value of
/// least output is off by.
fn reading_frequency(circuit: &Circuit, part: usize, adjustable: &Adjustable, line_hz: f64) -> f64 {
    let points: Vec<f64> = (0..=400).map(|k| line_hz * (0.95 + 0.1 * f64::from(k) / 400.0)).collect();
    let mut losses = vec![0.0; points.len()];
    losses_db(circuit, &circuit.values(), &points, &mut losses);
    let deepest = (0..points.len()).max_by(|&a, &b| losses[a].total_cmp(&losses[b])).unwrap_or(0);
    let mut frequency_hz = points[deepest];
    if adjustable.adjusted.kind == PartKind::Capacitor {
        let fixed_si: f64 = adjustable.fixed.iter().map(|listed| listed.value_si).sum();
        for _ in 0..8 {
            let mut values = circuit.values();
            let best_si =
                builds::least_output_at(circuit, &mut values, part, frequency_hz, adjustable.range_si);
            // f ∝ C^(−1/2) for a trap, slower where two capacitors share the work.
            frequency_hz *= ((fixed_si + best_si) / (fixed_si + adjustable.planned_si)).powf(0.3);
        }
    }
    // Far from the line there is no null to read: 0 Hz marks it as no trim.
    let far = (frequency_hz / line_hz - 1.0).abs() > 0.05;
    if far { 0.0 } else { (100.0 * frequency_hz).round() / 100.0 }
}

/// Parts whose trims, gone through on nominal parts, end elsewhere than planned by
/// more than a tenth of their range, or whose reading lies beyond 5 % of any line.
/// There the null is no clear one, and the procedure would put the filter out of
/// tune instead of into it.
fn failing(circuit: &Circuit, trims: &[Trim]) -> Vec<usize> {
    let mut values = circuit.values();
    builds::apply_trims(circuit, trims, &mut values, |_| 0.0);
    let planned = circuit.values();
    (0..circuit.parts.len())
        .filter(|&part| {
            trims.iter().filter(|trim| trim.part == circuit.parts[part].reference).any(|trim| {
                let off_si = (values[part].value_si - planned[part].value_si).abs();
                trim.frequency_hz <= 0.0 || off_si > 0.1 * (trim.to_si - trim.from_si)
            })
        })
        .collect()
}

fn summaries(
    problem: &Problem,
    circuit: &Circuit,
    slot_branch: &[Branch],
    task: &Task,
) -> Vec<SectionSummary> {
    let assembly = problem.assembly;
    circuit
        .sections
        .iter()
        .enumerate()
        .map(|(index, section)| {
            let slots = assembly.first_slot[index]..assembly.first_slot[index + 1];
            let values: Vec<SlotValue> = slots.map(|slot| slot_value(circuit, &slot_branch[slot])).collect();
            let covered: Vec<f64> = task
                .orders
                .iter()
                .filter(|order| assembly.covers[index].contains(&order.order))
                .map(|order| order.centre_hz)
                .collect();
            let at_hz = covered.first().copied().unwrap_or(task.centre_hz);
            let (source_ohm, load_ohm) = seen_ohm(circuit, index, at_hz);
            let found = kind_named(&section.kind)
                .map_or(Vec::new(), |kind| kind.notches(&values, source_ohm, load_ohm));
            let notches: Vec<Notched> = found.iter().map(|notch| notched(notch, task)).collect();
            let first = notches.iter().min_by_key(|notch| notch.order);
            SectionSummary {
                kind: section.kind.clone(),
                order: first.map(|notch| notch.order),
                notch_hz: first.map(|notch| notch.notch_hz),
                q: first.map(|notch| notch.q),
                depth_db: first.and_then(|notch| notch.depth_db),
                parts: section
                    .stages
                    .iter()
                    .flat_map(|stage| stage.parts())
                    .map(|&part| circuit.parts[part].reference.clone())
                    .collect(),
                notches,
            }
        })
        .collect()
}

fn notched(notch: &Notch, task: &Task) -> Notched {
    let order = task
        .orders
        .iter()
        .min_by(|a, b| {
            let far = |hz: f64| (hz / notch.frequency_hz).ln().abs();
            far(a.centre_hz).total_cmp(&far(b.centre_hz))
        })
        .map_or(1, |order| order.order);
    Notched { order, notch_hz: notch.frequency_hz, q: notch.q, depth_db: notch.depth_db }
}

/// Value of a slot from the parts that stand in it.
fn slot_value(circuit: &Circuit, branch: &Branch) -> SlotValue {
    let parts: Vec<&Part> = branch.parts().into_iter().filter_map(|&part| circuit.parts.get(part)).collect();
    let kind = match parts.first().map(|part| part.kind) {
        Some(PartKind::Trimmer) | None => PartKind::Resistor,
        Some(kind) => kind,
    };
    let value_si: f64 = parts.iter().map(|part| part.setting_ohm.unwrap_or(part.value_si)).sum();
    // Side by side, each capacitor's loss counts by its share of the current squared.
    let series_resistance_ohm =
        parts.iter().map(|part| part.series_resistance_ohm * (part.value_si / value_si).powi(2)).sum::<f64>();
    SlotValue { kind, value_si, series_resistance_ohm }
}

/// Magnitudes of the impedances that section `index` sees towards source and load.
fn seen_ohm(circuit: &Circuit, index: usize, frequency_hz: f64) -> (f64, f64) {
    let omega = std::f64::consts::TAU * frequency_hz;
    let chain = |sections: &[Section]| {
        sections
            .iter()
            .flat_map(|section| &section.stages)
            .fold(Chain::THROUGH, |chain, stage: &TwoPort| chain.then(&stage.chain(&circuit.parts, omega)))
    };
    let before = chain(&circuit.sections[..index]).m;
    let after = chain(&circuit.sections[index + 1..]).m;
    let zs = circuit.source.impedance(omega);
    let yl = circuit.load.admittance(omega);
    let source = (before[0][1] + zs * before[1][1]) / (before[0][0] + zs * before[1][0]);
    let load = (after[0][0] + after[0][1] * yl) / (after[1][0] + after[1][1] * yl);
    (source.norm(), load.norm())
}

/// Share of builds that must meet the brief, percent.
const ENOUGH_PCT: f64 = 95.0;

/// The design with its predictions and its builds.
pub fn design(
    finished: Finished,
    task: &Task,
    temperature_c: (f64, f64),
    count: u32,
    seed: u64,
) -> (Design, f64) {
    let Finished { circuit, trims, sections, .. } = finished;
    let lookout = Lookout::new(&circuit, task);
    let outcome = builds::judge(&lookout, &trims, task, temperature_c, count, seed);
    let measured: Vec<f64> = task.orders.iter().map(|order| order.measured_hz).collect();
    let mut reductions = vec![0.0; measured.len()];
    losses_db(&circuit, &circuit.values(), &measured, &mut reductions);
    let predicted = task
        .orders
        .iter()
        .zip(&reductions)
        .zip(&outcome.reduction_worst_db)
        .map(|((order, &reduction_db), &reduction_worst_db)| Predicted {
            order: order.order,
            frequency_hz: order.measured_hz,
            reduction_db,
            reduction_worst_db,
            target_db: Some(order.target_db),
        })
        .collect();
    let (worst_db, least_db) = (lookout.worst_db(&circuit.values()), lookout.least_db(&circuit.values()));
    let kept = |wanted: usize, losses_db: &[f64]| -> Vec<f64> {
        let of_stretches = lookout.stretches().iter().zip(losses_db);
        let of_band = of_stretches.filter_map(|(stretch, &loss_db)| match stretch.rule {
            Rule::Keep { band, .. } if band == wanted => Some(loss_db),
            _ => None,
        });
        of_band.collect()
    };
    let lines_hz: Vec<f64> = task.orders.iter().map(|order| order.centre_hz).collect();
    let keep: Vec<KeepResult> = task
        .keep
        .iter()
        .enumerate()
        .map(|(index, band)| KeepResult {
            from_hz: band.from_hz,
            to_hz: band.to_hz,
            allowed_db: band.allowed_db,
            loss_db: kept(index, &worst_db)
                .into_iter()
                .fold(0.0, |most, loss| if loss.abs() > f64::abs(most) { loss } else { most }),
            loss_worst_db: outcome.loss_worst_db[index],
            judged_share: band.judged_share(&lines_hz, task.guard_hz),
        })
        .collect();
    let flat_loss_db =
        (0..task.keep.len()).flat_map(|band| kept(band, &least_db)).fold(f64::INFINITY, f64::min);
    let price = circuit.parts.iter().map(|part| part.price).sum::<Option<f64>>();
    let design = Design {
        met: outcome.meeting_pct >= ENOUGH_PCT,
        summary: summary(&circuit, &trims),
        sections,
        circuit,
        predicted,
        keep,
        flat_loss_db: if flat_loss_db.is_finite() { flat_loss_db } else { 0.0 },
        trims,
        builds: Builds { count, seed, meeting_pct: outcome.meeting_pct, band: Vec::new() },
        price,
    };
    (design, outcome.worst_miss)
}

/// The design with another number of builds.
pub fn rejudged(mut design: Design, task: &Task, temperature_c: (f64, f64), count: u32, seed: u64) -> Design {
    let lookout = Lookout::new(&design.circuit, task);
    let outcome = builds::judge(&lookout, &design.trims, task, temperature_c, count, seed);
    for (order, &worst_db) in design.predicted.iter_mut().zip(&outcome.reduction_worst_db) {
        order.reduction_worst_db = worst_db;
    }
    for (band, &worst_db) in design.keep.iter_mut().zip(&outcome.loss_worst_db) {
        band.loss_worst_db = worst_db;
    }
    design.met = outcome.meeting_pct >= ENOUGH_PCT;
    design.builds = Builds { count, seed, meeting_pct: outcome.meeting_pct, band: Vec::new() };
    design
}

/// `notched low-pass, 1 coil, 5 parts, no trim`.
fn summary(circuit: &Circuit, trims: &[Trim]) -> String {
    if circuit.parts.is_empty() {
        return "no filter".to_owned();
    }
    let kinds: Vec<&str> = circuit.sections.iter().map(|section| section.kind.as_str()).collect();
    let coils = circuit.parts.iter().filter(|part| part.kind == PartKind::Coil).count();
    let mut trimmed: Vec<&str> = trims.iter().map(|trim| trim.part.as_str()).collect();
    trimmed.sort_unstable();
    trimmed.dedup();
    let counted = |count: usize, one: &str, many: &str| match count {
        0 => format!("no {one}"),
        1 => format!("1 {one}"),
        _ => format!("{count} {many}"),
    };
    format!(
        "{}, {}, {}, {}",
        kinds.join(" + "),
        counted(coils, "coil", "coils"),
        counted(circuit.parts.len(), "part", "parts"),
        counted(trimmed.len(), "trim", "trims"),
    )
}
