//! `notchwright plan`: the filter that meets the brief, or the nearest.

use super::args::Plan as Arguments;
use super::error::CliError;
use super::table::{Table, decibels, wrapped};
use super::{Ended, job, print_answer, single_file};
use crate::analysis::Analysis;
use crate::plan::{Design, Plan, span};

/// Designs, writes plan and netlist where asked, prints the plan.
pub(super) fn run(arguments: &Arguments) -> Result<Ended, CliError> {
    for out in [&arguments.out, &arguments.netlist].into_iter().flatten() {
        single_file::check(out)?;
    }
    let (brief, stock) = job::read_brief(&arguments.line)?;
    let analysis: Analysis = job::read_yaml(&arguments.analysis)?;
    let plan = job::plan(&analysis, &arguments.line, &brief, &stock)?;
    if let Some(out) = &arguments.out {
        single_file::write(out, &job::yaml_text("plan", &plan))?;
    }
    if let Some(out) = &arguments.netlist {
        single_file::write(out, &job::netlist_text(&plan))?;
    }
    print_answer(arguments.json, &plan, || text(&plan));
    Ok(Ended::met(plan.design.met))
}

/// The plan for people: verdict, parts, predictions, trims, alternatives.
pub(super) fn text(plan: &Plan) -> String {
    let design = &plan.design;
    let builds = &design.builds;
    let mut text = wrapped(
        "",
        &if design.circuit.parts.is_empty() && design.met {
            "No filter is needed: the line meets the brief as it is.".to_owned()
        } else if design.met {
            format!(
                "Brief met by {:.1} % of {} builds: {}.",
                builds.meeting_pct, builds.count, design.summary
            )
        } else {
            format!(
                "Brief not met; the nearest is: {} (met by {:.1} % of {} builds).",
                design.summary, builds.meeting_pct, builds.count
            )
        },
    );
    for obstacle in &plan.obstacles {
        text += &wrapped("  In the way  ", obstacle);
    }
    for table in [parts(design), predictions(design), keep(design)].iter().filter(|table| !table.is_empty()) {
        text += &format!("\n{table}");
    }
    text.push('\n');
    if design.trims.is_empty() && !design.circuit.parts.is_empty() {
        text += &wrapped("  Trim        ", "none needed");
    }
    for trim in &design.trims {
        text += &wrapped(&format!("  Trim {}      ", trim.step), &trim.instruction);
    }
    for other in &plan.alternatives {
        text += &wrapped("  Otherwise   ", &in_a_line(other));
    }
    for note in &plan.notes {
        text += &wrapped("  Note        ", note);
    }
    text
}

/// A design in a line: what it is, what 95 % of its builds do, how many meet the brief.
fn in_a_line(design: &Design) -> String {
    let asked = design.predicted.iter().filter(|order| order.target_db.is_some());
    let reductions: Vec<f64> = asked.map(|order| order.reduction_worst_db).collect();
    let losses: Vec<String> =
        design.keep.iter().map(|band| format!("{:.2}", band.loss_worst_db.abs())).collect();
    format!(
        "{}: 95 % of builds take off {} dB and cost {} dB; {:.1} % meet the brief",
        design.summary,
        one_by_one_or_range(&reductions),
        losses.join(", "),
        design.builds.meeting_pct
    )
}

/// So many reductions can be told one by one.
const TOLD_ONE_BY_ONE: usize = 5;

fn one_by_one_or_range(reductions_db: &[f64]) -> String {
    if reductions_db.len() > TOLD_ONE_BY_ONE {
        return from_least_to_most(reductions_db);
    }
    reductions_db.iter().map(|db| format!("{db:.1}")).collect::<Vec<_>>().join(", ")
}

/// `46.7 to 47.4`, or the one figure where they are the same.
pub(super) fn from_least_to_most(figures: &[f64]) -> String {
    let [least, most] = [f64::min, f64::max].map(|pick| figures.iter().copied().reduce(pick).unwrap_or(0.0));
    let [least, most] = [least, most].map(|figure| format!("{figure:.1}"));
    if least == most { least } else { format!("{least} to {most}") }
}

fn parts(design: &Design) -> String {
    let mut table = Table::new(&["Part", "Value", "Tolerance", "Series R", "Price"]);
    for part in &design.circuit.parts {
        table.row([
            part.reference.clone(),
            part.value.clone(),
            format!("± {} %", part.tolerance_pct),
            if part.series_resistance_ohm >= 0.1 {
                format!("{:.1} Ω", part.series_resistance_ohm)
            } else {
                "–".to_owned()
            },
            part.price.map_or("–".to_owned(), |price| format!("{price:.2}")),
        ]);
    }
    table.lines()
}

fn predictions(design: &Design) -> String {
    let mut table = Table::new(&["Order", "Frequency", "Asked", "Nominal", "95 % of builds"]);
    for order in &design.predicted {
        table.row([
            order.order.to_string(),
            format!("{:.3} Hz", order.frequency_hz),
            order.target_db.map_or("–".to_owned(), |target| format!("{target:.1} dB")),
            format!("{:.1} dB", order.reduction_db),
            format!("{:.1} dB", order.reduction_worst_db),
        ]);
    }
    table.lines()
}

fn keep(design: &Design) -> String {
    let mut table = Table::new(&["Keep band", "Allowed", "Nominal", "95 % of builds"]);
    for band in &design.keep {
        table.row([
            span(band.from_hz, band.to_hz),
            format!("{} dB", band.allowed_db),
            decibels(band.loss_db, 2),
            decibels(band.loss_worst_db, 2),
        ]);
    }
    table.lines()
}
