//! WAV files, read in blocks.

use std::fs::File;
use std::io::{BufReader, Read, Seek, SeekFrom};
use std::path::{Path, PathBuf};

use super::header::Header;
use super::{Capture, CaptureError, Format, SHORTEST_S, SampleFormat};

/// Bytes read from the file at a time; larger requests go straight through.
const BUFFER_BYTES: usize = 256 * 1024;

/// What to do with a recording that was cut short.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Salvage {
    /// Refuse it and say where it ends.
    #[default]
    No,
    /// Read whole frames up to the cut.
    UpToTheCut,
}

/// What is missing of a recording that was read up to its cut.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Salvaged {
    /// Byte at which the file ends (or its last whole frame does not).
    pub cut_at_byte: u64,
    /// Whole frames that were there.
    pub frames: u64,
    /// Bytes that the header claims and the file lacks; `None` where the header never said.
    pub missing_bytes: Option<u64>,
    /// The same in frames, begun ones counted.
    pub missing_frames: Option<u64>,
}

/// A WAV file as a [`Capture`]: 8-bit unsigned, 16, 24 and 32-bit signed integers and
/// 32-bit float, any number of channels, 100 Hz to 768 kHz.
#[derive(Debug)]
pub struct WavCapture {
    path: PathBuf,
    name: String,
    format: Format,
    sample_format: SampleFormat,
    file: BufReader<File>,
    data_at: u64,
    /// Frames read so far.
    position: u64,
    salvaged: Option<Salvaged>,
    raw: Vec<u8>,
}

impl WavCapture {
    /// Opens a recording; one that was cut short is refused.
    ///
    /// # Errors
    /// [`CaptureError`], which names the file and the byte or field.
    pub fn open(path: impl AsRef<Path>) -> Result<Self, CaptureError> {
        Self::open_with(path, Salvage::No)
    }

    /// Opens a recording; one that was cut short is read up to the cut if `salvage` says so.
    ///
    /// # Errors
    /// [`CaptureError`], which names the file and the byte or field.
    pub fn open_with(path: impl AsRef<Path>, salvage: Salvage) -> Result<Self, CaptureError> {
        let path = path.as_ref().to_path_buf();
        let io = |source| CaptureError::Io { path: path.clone(), source };
        let file = File::open(&path).map_err(io)?;
        let metadata = file.metadata().map_err(io)?;
        if !metadata.is_file() {
            return Err(CaptureError::NotAFile { path });
        }
        let length = metadata.len();
        let mut file = BufReader::with_capacity(BUFFER_BYTES, file);
        let header = Header::read(&path, &mut file, length)?;
        let (frames, salvaged) = frames_there(&path, &header, length, salvage)?;
        let format =
            Format { sample_rate_hz: header.sample_rate_hz, channels: usize::from(header.channels), frames };
        if format.duration_s() < SHORTEST_S {
            let (rate_hz, duration_s) = (format.sample_rate_hz, format.duration_s());
            return Err(CaptureError::TooShort { path, frames, rate_hz, duration_s });
        }
        let name = path.display().to_string();
        let mut capture = Self {
            path,
            name,
            format,
            sample_format: header.sample_format,
            file,
            data_at: header.data_at,
            position: 0,
            salvaged,
            raw: Vec::new(),
        };
        capture.rewind()?;
        Ok(capture)
    }

    /// What is missing, where the recording was read up to a cut; `None` where it is whole.
    pub fn salvaged(&self) -> Option<Salvaged> {
        self.salvaged
    }

    /// The file.
    pub fn path(&self) -> &Path {
        &self.path
    }

    fn frame_bytes(&self) -> usize {
        self.format.channels * self.sample_format.bytes()
    }

    /// Fills `raw` with the next block; returns its frames.
    fn read_raw(&mut self, frames: usize) -> Result<usize, CaptureError> {
        let left = self.format.frames - self.position;
        let frames = usize::try_from(left).map_or(frames, |left| frames.min(left));
        self.raw.resize(frames * self.frame_bytes(), 0);
        let read = self.file.read_exact(&mut self.raw);
        read.map_err(|source| CaptureError::Io { path: self.path.clone(), source })?;
        Ok(frames)
    }

    /// One channel of the block just read.
    fn decode(&self, channel: usize, plane: &mut Vec<f64>) {
        self.sample_format.decode(&self.raw, self.format.channels, channel, plane);
    }

    /// The first sample of the block just read that is not a number, as an error. Planes
    /// come with the channel that each holds.
    fn refuse_not_finite(&self, planes: &[(usize, &Vec<f64>)]) -> Result<(), CaptureError> {
        if !self.sample_format.is_float() {
            return Ok(());
        }
        // No way out of the loop before its end, so that it runs several samples at a time.
        let samples = planes.iter().flat_map(|(_, plane)| plane.iter());
        if samples.fold(true, |all, sample| all & sample.is_finite()) {
            return Ok(());
        }
        let bad = |plane: &Vec<f64>| plane.iter().position(|sample| !sample.is_finite());
        let first = planes.iter().filter_map(|(channel, plane)| {
            let frame = bad(plane)?;
            Some((frame, *channel, plane[frame] as f32))
        });
        let first = first.min_by_key(|(frame, channel, _)| (*frame, *channel));
        let Some((frame, channel, found)) = first else { return Ok(()) };
        let frame = self.position + frame as u64;
        let at_byte =
            self.data_at + frame * self.frame_bytes() as u64 + (channel * self.sample_format.bytes()) as u64;
        let path = self.path.clone();
        Err(CaptureError::NotFinite { path, at_byte, frame, channel: channel + 1, found })
    }
}

impl Capture for WavCapture {
    fn format(&self) -> &Format {
        &self.format
    }

    fn name(&self) -> &str {
        &self.name
    }

    fn sample_format(&self) -> SampleFormat {
        self.sample_format
    }

    fn rewind(&mut self) -> Result<(), CaptureError> {
        let sought = self.file.seek(SeekFrom::Start(self.data_at));
        sought.map_err(|source| CaptureError::Io { path: self.path.clone(), source })?;
        self.position = 0;
        Ok(())
    }

    fn read_block(&mut self, planes: &mut [Vec<f64>], frames: usize) -> Result<usize, CaptureError> {
        debug_assert_eq!(planes.len(), self.format.channels, "one plane a channel");
        let frames = self.read_raw(frames)?;
        for (channel, plane) in planes.iter_mut().enumerate() {
            self.decode(channel, plane);
        }
        self.refuse_not_finite(&planes.iter().enumerate().collect::<Vec<_>>())?;
        self.position += frames as u64;
        Ok(frames)
    }

    fn read_channel(
        &mut self,
        channel: usize,
        plane: &mut Vec<f64>,
        frames: usize,
    ) -> Result<usize, CaptureError> {
        let frames = self.read_raw(frames)?;
        self.decode(channel, plane);
        self.refuse_not_finite(&[(channel, plane)])?;
        self.position += frames as u64;
        Ok(frames)
    }
}

/// Whole frames that the file holds, and what is missing where it was cut.
fn frames_there(
    path: &Path,
    header: &Header,
    length: u64,
    salvage: Salvage,
) -> Result<(u64, Option<Salvaged>), CaptureError> {
    let frame_bytes = u64::from(header.channels) * header.sample_format.bytes() as u64;
    let there = length - header.data_at;
    let unfinished = header.data_size == u64::from(u32::MAX) || (header.data_size == 0 && there > 0);
    let held = if unfinished { there } else { there.min(header.data_size) };
    let frames = held / frame_bytes;
    let missing_bytes = header.data_size.saturating_sub(there);
    let whole = !unfinished && missing_bytes == 0 && held % frame_bytes == 0;
    if whole {
        return Ok((frames, None));
    }
    if salvage == Salvage::UpToTheCut {
        let missing = (!unfinished).then_some(missing_bytes);
        let claimed_frames = header.data_size.div_ceil(frame_bytes);
        let missing_frames = missing.map(|_| claimed_frames - frames);
        let cut_at_byte = header.data_at + held;
        return Ok((frames, Some(Salvaged { cut_at_byte, frames, missing_bytes: missing, missing_frames })));
    }
    let duration_s = frames as f64 / f64::from(header.sample_rate_hz);
    let path = path.to_path_buf();
    let size_at = header.data_at - 4;
    Err(if unfinished {
        let found = header.data_size as u32;
        CaptureError::Unfinished { path, at_byte: size_at, found, ends_at: length, frames, duration_s }
    } else if missing_bytes > 0 {
        let claimed_to = header.data_at + header.data_size;
        CaptureError::Truncated { path, at_byte: length, claimed_to, missing_bytes, frames, duration_s }
    } else {
        CaptureError::PartialFrame { path, at_byte: size_at, size: header.data_size, frame_bytes, frames }
    })
}
