//! A recording that is held in memory: for synthetic signals and for tests.

use super::{Capture, CaptureError, Format};

/// Channels of samples with a rate, read like a file.
#[derive(Debug, Clone)]
pub struct MemoryCapture {
    format: Format,
    name: String,
    planes: Vec<Vec<f64>>,
    position: usize,
}

impl MemoryCapture {
    /// One vector of samples a channel; all must be of one length.
    ///
    /// # Panics
    /// When there is no channel, or the lengths differ.
    pub fn new(name: &str, sample_rate_hz: u32, planes: Vec<Vec<f64>>) -> Self {
        let frames = planes.first().expect("at least one channel").len();
        assert!(planes.iter().all(|plane| plane.len() == frames), "channels differ in length");
        let format = Format { sample_rate_hz, channels: planes.len(), frames: frames as u64 };
        Self { format, name: name.to_owned(), planes, position: 0 }
    }
}

impl Capture for MemoryCapture {
    fn format(&self) -> &Format {
        &self.format
    }

    fn name(&self) -> &str {
        &self.name
    }

    fn rewind(&mut self) -> Result<(), CaptureError> {
        self.position = 0;
        Ok(())
    }

    fn read_block(&mut self, planes: &mut [Vec<f64>], frames: usize) -> Result<usize, CaptureError> {
        let end = (self.position + frames).min(self.format.frames as usize);
        for (out, held) in planes.iter_mut().zip(&self.planes) {
            out.clear();
            out.extend_from_slice(&held[self.position..end]);
        }
        let read = end - self.position;
        self.position = end;
        Ok(read)
    }

    fn read_channel(
        &mut self,
        channel: usize,
        plane: &mut Vec<f64>,
        frames: usize,
    ) -> Result<usize, CaptureError> {
        let end = (self.position + frames).min(self.format.frames as usize);
        plane.clear();
        plane.extend_from_slice(&self.planes[channel][self.position..end]);
        let read = end - self.position;
        self.position = end;
        Ok(read)
    }
}
