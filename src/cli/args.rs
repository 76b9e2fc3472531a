//! The command line: commands and options.

use std::path::PathBuf;

use clap::{Args, Parser, Subcommand};

/// From a recording of a humming line to a passive filter one can solder.
///
/// Exit code 0: done, and met. 1: done, but no hum was found, or the brief is
/// missed (the nearest is written all the same). 2: input or usage at fault.
#[derive(Debug, Parser)]
#[command(name = "notchwright", version, max_term_width = 80, after_help = CAUTION)]
pub struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

const CAUTION: &str =
    "Signal lines only: never on or across the mains. Read the cautions in README or report.";

/// The commands.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// The whole job: analyse, plan, simulate, report
    Run(Run),
    /// Measure what hums in a recording
    #[command(alias = "analyze")]
    Analyse(Analyse),
    /// Design the filter for an analysed line
    Plan(Plan),
    /// Send a recording through a planned filter
    Simulate(Simulate),
}

/// How to read a recording.
#[derive(Debug, Args)]
pub struct Reading {
    /// Channel to measure, 1 first [default: the one with the strongest hum]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..))]
    pub channel: Option<u16>,
    /// Read a recording that was cut short (a power failure) up to the cut
    #[arg(long)]
    pub salvage: bool,
}

/// `notchwright run`.
#[derive(Debug, Args)]
pub struct Run {
    /// The recording, a WAV file
    pub capture: PathBuf,
    /// The line brief, a YAML file
    #[arg(long, value_name = "LINE.yaml")]
    pub line: PathBuf,
    /// The folder to fill
    #[arg(long, value_name = "DIR")]
    pub out: PathBuf,
    /// How to read the recording.
    #[command(flatten)]
    pub reading: Reading,
    /// Print one JSON object instead of text
    #[arg(long)]
    pub json: bool,
}

/// `notchwright analyse`.
#[derive(Debug, Args)]
pub struct Analyse {
    /// Recordings of one line, WAV files
    #[arg(required = true, value_name = "CAPTURE")]
    pub captures: Vec<PathBuf>,
    /// The line brief, for levels in volts
    #[arg(long, value_name = "LINE.yaml")]
    pub line: Option<PathBuf>,
    /// Where to write the analysis
    #[arg(long, value_name = "ANALYSIS.yaml")]
    pub out: Option<PathBuf>,
    /// How to read the recordings.
    #[command(flatten)]
    pub reading: Reading,
    /// Print one JSON object instead of text
    #[arg(long)]
    pub json: bool,
}

/// `notchwright plan`.
#[derive(Debug, Args)]
pub struct Plan {
    /// The analysis, as `analyse` wrote it
    #[arg(long, value_name = "ANALYSIS.yaml")]
    pub analysis: PathBuf,
    /// The line brief, a YAML file
    #[arg(long, value_name = "LINE.yaml")]
    pub line: PathBuf,
    /// Where to write the plan
    #[arg(long, value_name = "PLAN.yaml")]
    pub out: Option<PathBuf>,
    /// Where to write the netlist
    #[arg(long, value_name = "FILE")]
    pub netlist: Option<PathBuf>,
    /// Print one JSON object instead of text
    #[arg(long)]
    pub json: bool,
}

/// `notchwright simulate`.
#[derive(Debug, Args)]
pub struct Simulate {
    /// The recording, a WAV file
    pub capture: PathBuf,
    /// The plan, as `plan` or `run` wrote it
    #[arg(long, value_name = "PLAN.yaml")]
    pub plan: PathBuf,
    /// The folder to fill
    #[arg(long, value_name = "DIR")]
    pub out: PathBuf,
    /// Start at rest instead of settled
    #[arg(long)]
    pub from_rest: bool,
    /// How to read the recording.
    #[command(flatten)]
    pub reading: Reading,
    /// Print one JSON object instead of text
    #[arg(long)]
    pub json: bool,
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    #[test]
    fn the_command_line_is_consistent() {
        Arguments::command().debug_assert();
    }
}
