//! Recordings in and out, in blocks: samples as fractions of full scale.

mod error;
mod header;
mod memory;
mod sample;
mod wav;
mod writer;

pub use error::CaptureError;
pub use memory::MemoryCapture;
pub use sample::SampleFormat;
pub use wav::{Salvage, Salvaged, WavCapture};
pub use writer::{WavWriter, Written};

/// Lowest sampling rate that is read, hertz.
pub const LOWEST_RATE_HZ: u32 = 100;
/// Highest sampling rate that is read, hertz.
pub const HIGHEST_RATE_HZ: u32 = 768_000;
/// Shortest recording that is read, seconds: less holds too few mains periods.
pub const SHORTEST_S: f64 = 1.0;

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
pub trait Capture: Send {
    /// Rate, channels and length.
    fn format(&self) -> &Format;

    /// The name to use for it in messages and results.
    fn name(&self) -> &str;

    /// How its samples were stored, so that results can be stored alike.
    fn sample_format(&self) -> SampleFormat {
        SampleFormat::F32
    }

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

    /// Reads one channel (0 first) of the next block: `plane` is cleared and filled with
    /// up to `frames` samples. Returns how many were read, 0 at the end.
    ///
    /// # Errors
    /// [`CaptureError`] when the file cannot be read or a sample of the channel is not a number.
    fn read_channel(
        &mut self,
        channel: usize,
        plane: &mut Vec<f64>,
        frames: usize,
    ) -> Result<usize, CaptureError> {
        let mut planes = vec![Vec::new(); self.format().channels];
        let read = self.read_block(&mut planes, frames)?;
        std::mem::swap(plane, &mut planes[channel]);
        Ok(read)
    }
}
