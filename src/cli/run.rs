//! `notchwright run`: the whole job, from recording to report.

use serde::Serialize;

use super::args::Run;
use super::error::CliError;
use super::folder::OutFolder;
use super::table::wrapped;
use super::{Ended, analyse, job, plan, print_answer, simulate};
use crate::analysis::Analysis;
use crate::plan::{KeepResult, Plan};
use crate::report;
use crate::simulation::{Simulation, Start};

/// What a run found, planned and measured; the later ones are missing where nothing hums.
#[derive(Debug, Serialize)]
struct Answer<'a> {
    analysis: &'a Analysis,
    plan: Option<&'a Plan>,
    simulation: Option<&'a Simulation>,
}

/// The files that this command writes into its folder.
const FILES: [&str; 8] = [
    "analysis.yaml",
    "plan.yaml",
    "netlist.txt",
    "parts.csv",
    "simulation.yaml",
    "filtered.wav",
    "removed.wav",
    "report.html",
];

/// Analyses, plans, simulates and reports; fills the folder.
pub(super) fn run(arguments: &Run) -> Result<Ended, CliError> {
    let names: Vec<&str> = FILES.into_iter().chain(report::CHART_NAMES).collect();
    let mut folder = OutFolder::check(&arguments.out, &names)?;
    let (brief, stock) = job::read_brief(&arguments.line)?;
    let mut capture = job::open_capture(&arguments.capture, &arguments.reading)?;
    folder.open()?;

    let analysed = job::analyse(std::slice::from_mut(&mut capture), &arguments.reading, Some(&brief))?;
    if !analysed.analysis.mains.found {
        folder.write("analysis.yaml", &job::yaml_text("analysis", &analysed.analysis))?;
        folder.finish(true)?;
        let answer = Answer { analysis: &analysed.analysis, plan: None, simulation: None };
        print_answer(arguments.json, &answer, || {
            format!("{}\nNothing to plan or simulate.\n", analyse::text(&analysed.analysis))
        });
        return Ok(Ended::Missed);
    }
    let planned = job::plan(&analysed.analysis, &arguments.line, &brief, &stock)?;
    let heard = job::simulate(&mut capture, &planned, &analysed, Start::Settled, &mut folder)?;
    folder.write("analysis.yaml", &job::yaml_text("analysis", &analysed.analysis))?;
    folder.write("plan.yaml", &job::yaml_text("plan", &planned))?;
    folder.write("netlist.txt", &job::netlist_text(&planned))?;
    folder.write("simulation.yaml", &job::yaml_text("simulation", &heard.simulation))?;
    job::report(&mut capture, &analysed, &planned, &heard, &mut folder)?;
    folder.finish(true)?;

    let answer =
        Answer { analysis: &analysed.analysis, plan: Some(&planned), simulation: Some(&heard.simulation) };
    print_answer(arguments.json, &answer, || {
        format!(
            "{}\n{}\n{}\n{}\nThe report: {}\n",
            verdict(&planned, &heard.simulation),
            analyse::text(&analysed.analysis),
            plan::text(&planned),
            simulate::text(&planned, &heard.simulation),
            arguments.out.join("report.html").display()
        )
    });
    Ok(Ended::met(planned.design.met && heard.simulation.met))
}

/// One sentence: whether the brief is met, what the filter takes and what it costs.
fn verdict(plan: &Plan, heard: &Simulation) -> String {
    if plan.design.circuit.parts.is_empty() && plan.design.met && heard.met {
        return wrapped(
            "",
            "Met without a filter: no hum found here needs reducing for this brief. Buy nothing.",
        );
    }
    let design = &plan.design;
    let met = if design.met && heard.met { "Met" } else { "Not met" };
    let asked: Vec<_> = design.predicted.iter().filter(|order| order.target_db.is_some()).collect();
    let nominal: Vec<f64> = asked.iter().map(|order| order.reduction_db).collect();
    let least_db = asked.iter().map(|order| order.reduction_worst_db).fold(f64::INFINITY, f64::min);
    let most = |losses: fn(&KeepResult) -> f64| design.keep.iter().map(losses).fold(0.0, f64::max);
    wrapped(
        "",
        &format!(
            "{met}: {}; it takes {} dB off the hum asked for and costs the wanted signal {:.2} dB at most. 95 % of \
             builds take off {least_db:.1} dB or more and cost {:.2} dB or less.",
            design.summary,
            plan::from_least_to_most(&nominal),
            most(|band| band.loss_db.abs()),
            most(|band| band.loss_worst_db.abs()),
        ),
    )
}
