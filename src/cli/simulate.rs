//! `notchwright simulate`: a recording through a planned filter.

use super::args::Simulate;
use super::error::CliError;
use super::folder::OutFolder;
use super::table::{Table, wrapped};
use super::{Ended, job, print_answer};
use crate::plan::Plan;
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
    print_answer(arguments.json, &heard.simulation, || text(&heard.simulation));
    Ok(Ended::met(heard.simulation.met))
}

/// The simulation for people: verdict, residual, bands, settling.
pub(super) fn text(simulation: &Simulation) -> String {
    let mut text = wrapped(
        "",
        if simulation.met {
            "Heard through the filter, the recording meets the brief."
        } else {
            "Heard through the filter, the recording misses the brief."
        },
    );
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
            format!("{}{:.1} dB", if order.at_noise_floor { "> " } else { "" }, order.reduction_db),
            format!("{:.1} dB", order.predicted_db),
        ]);
    }
    text += &format!("\n{}", table.lines());
    if hidden > 0 {
        text += &format!("  and {hidden} more (--json and simulation.yaml have them all)\n");
    }
    text.push('\n');
    for band in &simulation.keep {
        let measured = band
            .measured_db
            .map_or(String::new(), |loss| format!("; {loss:.2} dB of the power in it, on the samples"));
        text += &wrapped(
            "  Kept        ",
            &format!(
                "{} to {} Hz loses {:.2} dB at most, {} dB allowed{measured}",
                band.from_hz, band.to_hz, band.loss_db, band.allowed_db
            ),
        );
    }
    text += &wrapped("  Settling    ", &format!("{:.3} s to 1 % after a step", simulation.settling_s));
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
