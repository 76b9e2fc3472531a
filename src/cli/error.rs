//! What ends a command with exit code 2: input or usage at fault.

use std::path::{Path, PathBuf};

/// Why a command could not do its work.
#[derive(Debug, thiserror::Error)]
pub enum CliError {
    /// Reading a file failed.
    #[error("{path}: cannot be read: {source}", path = path.display())]
    Read {
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// Writing a file failed.
    #[error("{path}: cannot be written: {source}; choose another place with `--out`", path = path.display())]
    Write {
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// A file stands where the output folder should be.
    #[error("{path}: is a file, and a folder is wanted here; choose another `--out`", path = path.display())]
    NotAFolder {
        /// The file.
        path: PathBuf,
    },
    /// A file by one of our names that notchwright did not write, or that was edited since.
    #[error(
        "{path}: is in the way, and notchwright did not write it as it stands; \
         move it away or choose another `--out`",
        path = path.display()
    )]
    StrangersFile {
        /// The file.
        path: PathBuf,
    },
    /// A recording could not be read.
    #[error(transparent)]
    Capture(#[from] crate::capture::CaptureError),
    /// A channel was asked for that the recording does not have.
    #[error(
        "{path}: has {channels} channel{}, and `--channel {channel}` asks for channel {channel}; choose 1 to {channels}",
        if *channels == 1 { "" } else { "s" },
        path = path.display()
    )]
    NoSuchChannel {
        /// The recording.
        path: PathBuf,
        /// The channel asked for.
        channel: u16,
        /// The channels there are.
        channels: usize,
    },
    /// A brief, or its stock list, could not be read.
    #[error(transparent)]
    Brief(#[from] crate::plan::BriefError),
    /// A file of figures is not what it should be.
    #[error(transparent)]
    Yaml(#[from] crate::parts::yaml::YamlError),
    /// No filter could be planned for a brief.
    #[error("{brief}: {source}", brief = brief.display())]
    Plan {
        /// The brief.
        brief: PathBuf,
        /// What stands in the way.
        source: crate::plan::PlanError,
    },
    /// The recording could not be simulated.
    #[error(transparent)]
    Simulation(#[from] crate::simulation::SimulationError),
    /// The report could not be made.
    #[error(transparent)]
    Report(#[from] crate::report::ReportError),
    /// A recording could not be analysed.
    #[error(transparent)]
    Analysis(#[from] crate::analysis::AnalysisError),
}

impl CliError {
    /// Reading `path` failed with `source`.
    pub(super) fn read(path: &Path, source: std::io::Error) -> Self {
        Self::Read { path: path.to_owned(), source }
    }

    /// Writing `path` failed with `source`.
    pub(super) fn write(path: &Path, source: std::io::Error) -> Self {
        Self::Write { path: path.to_owned(), source }
    }
}
