//! The command line: one file a command; text and JSON output; progress.

mod analyse;
mod args;
mod error;
mod folder;
mod job;
mod plan;
mod progress;
mod run;
mod simulate;
mod single_file;
mod table;

pub use error::CliError;

use std::io::Write;
use std::process::ExitCode;

use clap::Parser;

use args::{Arguments, Command};

/// How a command ended that did its work.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Ended {
    /// Found, or met.
    Met,
    /// Nothing found, or the brief is missed.
    Missed,
}

impl Ended {
    fn met(met: bool) -> Self {
        if met { Self::Met } else { Self::Missed }
    }
}

/// Parses the command line, does the work, and says how it ended.
pub fn run() -> ExitCode {
    let ended = match Arguments::parse().command {
        Command::Run(arguments) => run::run(&arguments),
        Command::Analyse(arguments) => analyse::run(&arguments),
        Command::Plan(arguments) => plan::run(&arguments),
        Command::Simulate(arguments) => simulate::run(&arguments),
    };
    match ended {
        Ok(Ended::Met) => ExitCode::SUCCESS,
        Ok(Ended::Missed) => ExitCode::from(1),
        Err(error) => {
            eprintln!("error: {error}");
            ExitCode::from(2)
        }
    }
}

/// Prints an answer: `value` as one JSON object, or `text`.
fn print_answer(json: bool, value: &impl serde::Serialize, text: impl FnOnce() -> String) {
    let answer = if json {
        let mut answer =
            serde_json::to_string_pretty(value).expect("results have text keys and finite numbers");
        answer.push('\n');
        answer
    } else {
        text()
    };
    // A reader that has seen enough (`| head`) closes the pipe; that is no fault.
    let _ = std::io::stdout().write_all(answer.as_bytes());
}
