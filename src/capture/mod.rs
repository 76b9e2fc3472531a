//! Recordings in and out, in blocks: samples as fractions of full scale.

mod memory;

pub use memory::MemoryCapture;

use std::path::PathBuf;

/// What a recording says of itself before any sample is read.
#[derive(Debug, Clone, PartialEq)]
pub struct Format {
    /// Sampling rate in hertz.
    pub sample_rate_hz: u32,
    /// Number of channels, at least one.
    pub channels: usize,
    /// Number of frames (samples per channel).
    pub frames: u64,
}

impl Format {
    /// Length in seconds.
    pub fn duration_s(&self) -> f64 {
        self.frames as f64 / f64::from(self.sample_rate_hz)
    }
}

/// A recording that can be read in blocks, and read again from its start.
///
/// Samples are fractions of full scale: ±1.0 is the converter's limit.
pub trait Capture {
    /// Rate, channels and length.
    fn format(&self) -> &Format;

    /// The name to use for it in messages and results.
    fn name(&self) -> &str;

    /// Goes back to the first frame.
    ///
    /// # Errors
    /// [`CaptureError`] when the file cannot be read again.
    fn rewind(&mut self) -> Result<(), CaptureError>;

    /// Reads the next block: `planes` must hold one vector per channel; each is
    /// cleared and filled with up to `frames` samples. Returns how many frames
    /// were read, 0 at the end.
    ///
    /// # Errors
    /// [`CaptureError`] when the file cannot be read or a sample is not a number.
    fn read_block(&mut self, planes: &mut [Vec<f64>], frames: usize) -> Result<usize, CaptureError>;
}

/// Why a recording could not be read or written.
#[derive(Debug, thiserror::Error)]
pub enum CaptureError {
    /// The file system refused.
    #[error("{path}: {source}", path = path.display())]
    Io {
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
}
