//! The steps that several commands share: read inputs, do a room's work with progress.

use std::path::Path;

use super::args::Reading;
use super::error::CliError;
use super::folder::OutFolder;
use super::progress;
use crate::analysis::{self, AnalyseOptions, Analysis, AnalysisRun};
use crate::capture::{Capture, Salvage, WavCapture};
use crate::parts::quantity::{self, Unit};
use crate::parts::{Stock, yaml};
use crate::plan::{self, LineBrief, Plan, PlanOptions};
use crate::report::{self, Excerpt, Material, Recordings};
use crate::simulation::{self, SimulateOptions, SimulationRun, Start};

/// The recordings that a simulation writes.
const RECORDINGS: [&str; 2] = ["filtered.wav", "removed.wav"];

/// Opens a recording and checks that it has the channel asked for.
pub(super) fn open_capture(path: &Path, reading: &Reading) -> Result<WavCapture, CliError> {
    let salvage = if reading.salvage { Salvage::UpToTheCut } else { Salvage::No };
    let capture = WavCapture::open_with(path, salvage)?;
    let channels = capture.format().channels;
    match reading.channel {
        Some(channel) if usize::from(channel) > channels => {
            Err(CliError::NoSuchChannel { path: path.to_owned(), channel, channels })
        }
        _ => Ok(capture),
    }
}

/// Measures the hum of one line's recordings.
pub(super) fn analyse(
    captures: &mut [WavCapture],
    reading: &Reading,
    brief: Option<&LineBrief>,
) -> Result<AnalysisRun, CliError> {
    let options = AnalyseOptions {
        channel: reading.channel.map(usize::from),
        full_scale_v: brief.map(|brief| brief.full_scale_v),
    };
    let mut run = progress::during("analysing", |progress| {
        let mut captures: Vec<&mut dyn Capture> = captures.iter_mut().map(|capture| capture as _).collect();
        analysis::analyse(&mut captures, &options, progress)
    })?;
    for capture in captures.iter() {
        if let Some(salvaged) = capture.salvaged() {
            let missing =
                salvaged.missing_bytes.map_or(String::new(), |bytes| format!("; {bytes} bytes are missing"));
            let (name, byte, frames) = (capture.name(), salvaged.cut_at_byte, salvaged.frames);
            run.analysis
                .notes
                .insert(0, format!("{name} was cut short at byte {byte}: {frames} frames read{missing}"));
        }
    }
    Ok(run)
}

/// Reads the brief and the stock list that it names.
pub(super) fn read_brief(path: &Path) -> Result<(LineBrief, Stock), CliError> {
    let brief = LineBrief::read(path)?;
    let stock = brief.stock(path)?;
    Ok((brief, stock))
}

/// Designs the filter.
pub(super) fn plan(
    analysis: &Analysis,
    brief_path: &Path,
    brief: &LineBrief,
    stock: &Stock,
) -> Result<Plan, CliError> {
    let options = PlanOptions::default();
    let planned =
        progress::during("planning", |progress| plan::plan(analysis, brief, stock, &options, progress));
    planned.map_err(|source| CliError::Plan { brief: brief_path.to_owned(), source })
}

/// Sends the recording through the plan's filter into the folder.
pub(super) fn simulate(
    capture: &mut WavCapture,
    plan: &Plan,
    analysed: &AnalysisRun,
    start: Start,
    folder: &mut OutFolder,
) -> Result<SimulationRun, CliError> {
    let options = SimulateOptions { start, ..SimulateOptions::default() };
    let [filtered, removed] = RECORDINGS.map(|name| folder.stage(name));
    Ok(progress::during("simulating", |progress| {
        let (analysis, phase) = (&analysed.analysis, analysed.phase.as_ref());
        simulation::simulate(
            capture,
            &plan.design,
            &plan.brief,
            analysis,
            phase,
            &options,
            &filtered,
            &removed,
            progress,
        )
    })?)
}

/// Writes parts list, charts and page into the folder.
pub(super) fn report(
    capture: &mut WavCapture,
    analysed: &AnalysisRun,
    plan: &Plan,
    heard: &SimulationRun,
    folder: &mut OutFolder,
) -> Result<(), CliError> {
    let [filtered, removed] = RECORDINGS.map(|name| folder.stage(name));
    let (mut after, mut removed) = (WavCapture::open(&filtered)?, WavCapture::open(&removed)?);
    let recordings = Recordings { before: capture, after: &mut after, removed: &mut removed };
    let mut by_level: Vec<_> = heard.simulation.residual.iter().collect();
    by_level.sort_by(|a, b| b.before_dbfs.total_cmp(&a.before_dbfs));
    let hum_hz: Vec<f64> = by_level.iter().map(|order| order.frequency_hz).collect();
    let excerpt = Excerpt::take(recordings, heard.simulation.channel, &hum_hz)?;
    let material = Material {
        analysis: &analysed.analysis,
        plan,
        simulation: &heard.simulation,
        spectrum_before: &heard.before,
        spectrum_after: &heard.after,
        excerpt: Some(&excerpt),
    };
    for (name, svg) in report::charts(&material) {
        folder.write(name, &svg)?;
    }
    folder.write("parts.csv", &report::parts_csv(plan))?;
    folder.write("report.html", &report::page(&material)?)
}

/// Reads a YAML file that notchwright wrote.
pub(super) fn read_yaml<T: serde::de::DeserializeOwned>(path: &Path) -> Result<T, CliError> {
    let text = std::fs::read_to_string(path).map_err(|source| CliError::read(path, source))?;
    Ok(yaml::read(path, &text)?)
}

/// A YAML file's text under a first line that says what it is.
pub(super) fn yaml_text(what: &str, value: &impl serde::Serialize) -> String {
    let mark = super::single_file::MARK;
    let yaml = yaml::write(Path::new(what), value).expect("results have text keys");
    format!("{mark} {what}, SI units\n{yaml}")
}

/// The netlist's text under a first line that says what it is.
pub(super) fn netlist_text(plan: &Plan) -> String {
    let title = format!("{} netlist: {}", super::single_file::MARK.trim_start_matches("# "), plan.brief.line);
    plan.design.circuit.netlist(&title)
}

/// Volts as one would write them: `137 mV`.
pub(super) fn volts(volts: f64) -> String {
    // Three digits: more would promise what full scale is rarely known to.
    let rounded = format!("{volts:.2e}").parse().unwrap_or(volts);
    quantity::print(rounded, Unit::Volt)
}
