//! A capture in blocks, the next one read while the last is worked on.

use super::AnalysisError;
use crate::capture::{Capture, CaptureError};

/// Most frames read at a time, and most samples of all channels.
const BLOCK_FRAMES: usize = 1 << 16;
const BLOCK_SAMPLES: usize = 1 << 18;

/// Hands every block of all channels to `take`, one plane a channel; `progress` is told the share done.
///
/// # Errors
/// [`AnalysisError`] when reading fails.
pub(super) fn read_all(
    capture: &mut dyn Capture,
    take: &mut (dyn FnMut(&[Vec<f64>]) + Send),
    progress: &mut dyn FnMut(f64),
) -> Result<(), AnalysisError> {
    let channels = capture.format().channels;
    let frames = (BLOCK_SAMPLES / channels).clamp(1 << 10, BLOCK_FRAMES);
    let total = begin(capture)?;
    let mut fill = |planes: &mut Vec<Vec<f64>>| {
        planes.resize(channels, Vec::new());
        capture.read_block(planes, frames)
    };
    each(&mut fill, &mut |planes| take(planes), &mut |done| progress(done as f64 / total))
}

/// As [`read_all`], of one channel, 0 first.
///
/// # Errors
/// [`AnalysisError`] when reading fails.
pub(super) fn read_channel(
    capture: &mut dyn Capture,
    channel: usize,
    take: &mut (dyn FnMut(&[f64]) + Send),
    progress: &mut dyn FnMut(f64),
) -> Result<(), AnalysisError> {
    let total = begin(capture)?;
    let mut fill = |plane: &mut Vec<f64>| capture.read_channel(channel, plane, BLOCK_FRAMES);
    each(&mut fill, &mut |plane| take(plane), &mut |done| progress(done as f64 / total))
}

/// Goes to the start; gives the number of frames.
fn begin(capture: &mut dyn Capture) -> Result<f64, AnalysisError> {
    capture.rewind()?;
    Ok(capture.format().frames.max(1) as f64)
}

/// Works on each block while the next is read into another buffer.
fn each<B: Default + Send + Sync>(
    fill: &mut (dyn FnMut(&mut B) -> Result<usize, CaptureError> + Send),
    take: &mut (dyn FnMut(&B) + Send),
    progress: &mut dyn FnMut(usize),
) -> Result<(), AnalysisError> {
    let (mut now, mut next) = (B::default(), B::default());
    let mut frames = fill(&mut now)?;
    let mut done = 0;
    while frames > 0 {
        let ((), read) = rayon::join(|| take(&now), || fill(&mut next));
        done += frames;
        progress(done);
        frames = read?;
        std::mem::swap(&mut now, &mut next);
    }
    Ok(())
}
