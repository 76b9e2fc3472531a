//! `notchwright simulate`: a recording through a planned filter.

use super::args::Simulate;
use super::error::CliError;
use super::folder::OutFolder;
use super::table::{Table, decibels, wrapped};
use super::{Ended, job, print_answer};
use crate::plan::{Plan, span};
use crate::simulation::{Simulation, Start};

/// The files that this command writes into its folder.
const FILES: [&str; 3] = ["filtered.wav", "removed.wav", "simulation.yaml"];

/// Orders shown as text, those that the brief asks for always; the files hold all.
const SHOWN_ORDERS: usize = 12;

/// Analyses the recording, sends it through the plan's filter, prints what is left.
pub(super) fn run(arguments: &Simulate) -> Result<Ended, CliError> {
    let mut folder = OutFolder::check(&arguments.out, &FILES)?;
    let plan: Plan = job::read_yaml(&arguments.plan)?;
    let mut capture = job::open_capture(&arguments.capture, &arguments.reading)?;
    folder.open()?;
    let analysed = job::analyse(std::slice::from_mut(&mut capture), &arguments.reading, Some(&plan.brief))?;
    let start = if arguments.from_rest { Start::AtRest } else { Start::Settled };
    let heard = job::simulate(&mut capture, &plan, &analysed, start, &mut folder)?;
    folder.write("simulation.yaml", &job::yaml_text("simulation", &heard.simulation))?;
    folder.finish(false)?;
    print_answer(arguments.json, &heard.simulation, || text(&plan, &heard.simulation));
    Ok(Ended::met(heard.simulation.met))
}

/// The simulation for people: verdict, residual, bands, settling.
pub(super) fn text(plan: &Plan, simulation: &Simulation) -> String {
    let heard = if plan.design.circuit.parts.is_empty() { "As it is" } else { "Heard through the filter" };
    let does = if simulation.met { "meets" } else { "misses" };
    let mut text = wrapped("", &format!("{heard}, the recording {does} the brief."));
    for miss in &simulation.misses {
        text += &wrapped("  Missed      ", miss);
    }
    let mut table = Table::new(&["Order", "Before", "After", "Reduction", "Predicted"]);
    let (asked, others): (Vec<_>, Vec<_>) =
        simulation.residual.iter().partition(|order| order.target_db.is_some());
    let shown = SHOWN_ORDERS.saturating_sub(asked.len());
    let hidden = others.len().saturating_sub(shown);
    let mut rows: Vec<_> = asked.into_iter().chain(others.into_iter().take(shown)).collect();
    rows.sort_by_key(|order| order.order);
    for order in rows {
        table.row([
            order.order.to_string(),
            format!("{:.1} dBFS", order.before_dbfs),
            format!("{}{:.1} dBFS", if order.at_noise_floor { "< " } else { "" }, order.after_dbfs),
            match (order.at_noise_floor, order.reduction_db) {
                (true, ..=0.0) => "in the noise".to_owned(),
                (true, least_db) => format!("> {}", decibels(least_db, 1)),
                (false, db) => decibels(db, 1),
            },
            decibels(order.predicted_db, 1),
        ]);
    }
    text += &format!("\n{}", table.lines());
    if hidden > 0 {
        text += &format!("  and {hidden} more (--json and simulation.yaml have them all)\n");
    }
    text.push('\n');
    for band in &simulation.keep {
        let measured = band.measured_db.map_or(String::new(), |loss| format!("; {}", of_its_power(loss)));
        text += &wrapped(
            "  Kept        ",
            &format!(
                "{} {} {} at most, {} dB allowed{measured}",
                span(band.from_hz, band.to_hz),
                if band.loss_db < -0.005 { "gains" } else { "loses" },
                decibels(band.loss_db.abs(), 2),
                band.allowed_db
            ),
        );
    }
    if simulation.settling_s > 0.0 {
        text += &wrapped("  Settling    ", &format!("{:.3} s to 1 % after a step", simulation.settling_s));
    }
    text += &wrapped(
        "  Headroom    ",
        &format!(
            "{:.1} dB gained (peak {:.1} dBFS before, {:.1} dBFS after)",
            simulation.headroom_gained_db, simulation.peak_before_dbfs, simulation.peak_after_dbfs
        ),
    );
    for note in &simulation.notes {
        text += &wrapped("  Note        ", note);
    }
    text
}

/// What became of a keep band's power on the samples.
fn of_its_power(loss_db: f64) -> String {
    let word = if loss_db < -0.005 { "more" } else { "less" };
    format!("on the samples, its power is {} {word}", decibels(loss_db.abs(), 2))
}
