//! Parse, run, exit code; nothing else.

use std::process::ExitCode;

fn main() -> ExitCode {
    notchwright::cli::run()
}
