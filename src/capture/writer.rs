//! WAV files, written in blocks.

use std::fs::File;
use std::io::{BufWriter, Seek, SeekFrom, Write};
use std::path::{Path, PathBuf};

use rand::Rng;
use rand_xoshiro::Xoshiro256PlusPlus;
use rand_xoshiro::rand_core::SeedableRng;

use super::{CaptureError, SampleFormat};

/// Seed of the dither: fixed, so that the same work gives the same file.
const DITHER_SEED: u64 = 0x6e6f_7463_6877_7267;

/// Bytes before the first sample.
const HEADER_BYTES: u32 = 68;

/// What was written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Written {
    /// Frames.
    pub frames: u64,
    /// Samples beyond the range of the integers, held at the limit.
    pub saturated: u64,
}

/// Writes a WAV file block by block. The sizes in the header stand once
/// [`WavWriter::finish`] has returned; the caller stages temporary names.
///
/// Integers get triangular dither of ± 1 step (TPDF: the error then depends on
/// the signal neither in mean nor in power; Lipshitz, Wannamaker and Vanderkooy,
/// J. Audio Eng. Soc. 40, 1992) and are held at the limits, which is counted.
/// Floats are written as they are.
#[derive(Debug)]
pub struct WavWriter {
    path: PathBuf,
    file: BufWriter<File>,
    channels: usize,
    sample_format: SampleFormat,
    dither: Xoshiro256PlusPlus,
    encoded: Vec<u8>,
    written: Written,
    data_bytes: u64,
}

impl WavWriter {
    /// Creates the file and writes its header.
    ///
    /// # Errors
    /// [`CaptureError::Io`] when the file cannot be made or written.
    ///
    /// # Panics
    /// When `channels` is 0 or more than a WAV file can say.
    pub fn create(
        path: impl AsRef<Path>,
        sample_rate_hz: u32,
        channels: usize,
        sample_format: SampleFormat,
    ) -> Result<Self, CaptureError> {
        let path = path.as_ref().to_path_buf();
        let frame_bytes = u16::try_from(channels * sample_format.bytes()).expect("frame fits a WAV header");
        assert!(channels > 0, "at least one channel");
        let io = |source| CaptureError::Io { path: path.clone(), source };
        let mut file = BufWriter::with_capacity(64 * 1024, File::create(&path).map_err(io)?);
        file.write_all(&header(sample_rate_hz, channels as u16, frame_bytes, sample_format)).map_err(io)?;
        Ok(Self {
            path,
            file,
            channels,
            sample_format,
            dither: Xoshiro256PlusPlus::seed_from_u64(DITHER_SEED),
            encoded: Vec::new(),
            written: Written { frames: 0, saturated: 0 },
            data_bytes: 0,
        })
    }

    /// Appends a block: one plane a channel, all of one length.
    ///
    /// # Errors
    /// [`CaptureError::Io`], or [`CaptureError::TooLong`] beyond what a WAV file can hold.
    ///
    /// # Panics
    /// When the number of planes is not that of the file.
    pub fn write_block(&mut self, planes: &[impl AsRef<[f64]>]) -> Result<(), CaptureError> {
        assert_eq!(planes.len(), self.channels, "one plane a channel");
        let frames = planes[0].as_ref().len();
        let bytes = self.data_bytes + (frames * self.channels * self.sample_format.bytes()) as u64;
        if bytes > u64::from(u32::MAX - HEADER_BYTES) {
            return Err(CaptureError::TooLong { path: self.path.clone(), bytes });
        }
        self.encoded.clear();
        match self.sample_format {
            SampleFormat::F32 => self.encode(planes, |sample| (sample as f32).to_le_bytes()),
            SampleFormat::U8 => self.encode_integer(planes, |code| [(code + 128) as u8]),
            SampleFormat::I16 => self.encode_integer(planes, |code| (code as i16).to_le_bytes()),
            SampleFormat::I24 => self.encode_integer(planes, |code| {
                let [low, middle, high, _] = code.to_le_bytes();
                [low, middle, high]
            }),
            SampleFormat::I32 => self.encode_integer(planes, i32::to_le_bytes),
        }
        self.file.write_all(&self.encoded).map_err(|source| self.io(source))?;
        self.written.frames += frames as u64;
        self.data_bytes = bytes;
        Ok(())
    }

    /// Fills in the sizes and closes the file.
    ///
    /// # Errors
    /// [`CaptureError::Io`] when the file cannot be written.
    pub fn finish(mut self) -> Result<Written, CaptureError> {
        self.write_sizes().map_err(|source| self.io(source))?;
        Ok(self.written)
    }

    fn write_sizes(&mut self) -> std::io::Result<()> {
        let data = self.data_bytes as u32;
        let padding = data % 2;
        if padding == 1 {
            self.file.write_all(&[0])?;
        }
        self.file.seek(SeekFrom::Start(4))?;
        self.file.write_all(&(HEADER_BYTES - 8 + data + padding).to_le_bytes())?;
        self.file.seek(SeekFrom::Start(u64::from(HEADER_BYTES) - 4))?;
        self.file.write_all(&data.to_le_bytes())?;
        self.file.flush()
    }

    fn io(&self, source: std::io::Error) -> CaptureError {
        CaptureError::Io { path: self.path.clone(), source }
    }

    fn encode_integer<const W: usize>(
        &mut self,
        planes: &[impl AsRef<[f64]>],
        bytes: impl Fn(i32) -> [u8; W],
    ) {
        let scale = f64::from(self.sample_format.bits() - 1).exp2();
        let mut saturated = 0;
        let mut dither = self.dither.clone();
        self.encode(planes, |sample| {
            let steps = sample * scale + triangular(&mut dither);
            let held = steps.clamp(-scale, scale - 1.0);
            saturated += u64::from((held - steps).abs() > 0.5);
            // Rounded by cutting off a positive number: `round` is a call on older processors.
            bytes(((held + scale + 0.5) as i64 - scale as i64) as i32)
        });
        self.dither = dither;
        self.written.saturated += saturated;
    }

    fn encode<const W: usize>(
        &mut self,
        planes: &[impl AsRef<[f64]>],
        mut bytes: impl FnMut(f64) -> [u8; W],
    ) {
        let frames = planes[0].as_ref().len();
        self.encoded.resize(frames * self.channels * W, 0);
        let frames = self.encoded.chunks_exact_mut(self.channels * W);
        for (index, frame) in frames.enumerate() {
            for (place, plane) in frame.chunks_exact_mut(W).zip(planes) {
                place.copy_from_slice(&bytes(plane.as_ref()[index]));
            }
        }
    }
}

/// Difference of two uniform variables: triangular over (−1, 1).
fn triangular(random: &mut Xoshiro256PlusPlus) -> f64 {
    let both = random.next_u64();
    let (one, other) = ((both >> 32) as i64, (both & 0xffff_ffff) as i64);
    (one - other) as f64 / 4_294_967_296.0
}

/// An extensible header with sizes of 0: what is found when the work is interrupted.
///
/// The extensible form says for any width and number of channels what is meant.
fn header(rate_hz: u32, channels: u16, frame_bytes: u16, format: SampleFormat) -> Vec<u8> {
    let tag: u16 = if format.is_float() { 3 } else { 1 };
    let mut bytes = Vec::with_capacity(HEADER_BYTES as usize);
    bytes.extend_from_slice(b"RIFF\0\0\0\0WAVEfmt ");
    bytes.extend_from_slice(&40_u32.to_le_bytes());
    bytes.extend_from_slice(&0xfffe_u16.to_le_bytes());
    bytes.extend_from_slice(&channels.to_le_bytes());
    bytes.extend_from_slice(&rate_hz.to_le_bytes());
    bytes.extend_from_slice(&rate_hz.saturating_mul(u32::from(frame_bytes)).to_le_bytes());
    bytes.extend_from_slice(&frame_bytes.to_le_bytes());
    bytes.extend_from_slice(&format.bits().to_le_bytes());
    bytes.extend_from_slice(&22_u16.to_le_bytes());
    bytes.extend_from_slice(&format.bits().to_le_bytes());
    bytes.extend_from_slice(&0_u32.to_le_bytes());
    bytes.extend_from_slice(&tag.to_le_bytes());
    bytes.extend_from_slice(&[0, 0, 0, 0, 0x10, 0, 0x80, 0, 0, 0xaa, 0, 0x38, 0x9b, 0x71]);
    bytes.extend_from_slice(b"data\0\0\0\0");
    bytes
}
