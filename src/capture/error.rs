//! Why a recording could not be read or written, one variant a case.

use std::path::PathBuf;

use super::{HIGHEST_RATE_HZ, LOWEST_RATE_HZ, SHORTEST_S};

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
    /// A folder, a pipe or a device: it cannot be read twice.
    #[error("{path}: not a plain file, but a WAV file is expected; record to a file first", path = path.display())]
    NotAFile {
        /// The file.
        path: PathBuf,
    },
    /// Nothing in the file.
    #[error("{path}: the file is empty (0 bytes), a WAV file is expected; record again or copy it again", path = path.display())]
    Empty {
        /// The file.
        path: PathBuf,
    },
    /// Something else than RIFF/WAVE.
    #[error(
        "{path}: byte {at_byte} reads `{found}` where a WAV file has `{expected}`; give a WAV file",
        path = path.display()
    )]
    NotWave {
        /// The file.
        path: PathBuf,
        /// Where.
        at_byte: u64,
        /// The bytes read, those that cannot be printed as dots.
        found: String,
        /// What a WAV file has there.
        expected: &'static str,
    },
    /// Big-endian RIFF.
    #[error(
        "{path}: byte 0 reads `RIFX`, a WAV file with its bytes turned round (big-endian), `RIFF` is expected; convert it to little-endian WAV",
        path = path.display()
    )]
    BigEndian {
        /// The file.
        path: PathBuf,
    },
    /// RF64 or BW64.
    #[error(
        "{path}: byte 0 reads `{found}`, a 64-bit WAV file, which is not read yet, `RIFF` is expected; split it into WAV files under 4 GiB",
        path = path.display()
    )]
    SixtyFourBit {
        /// The file.
        path: PathBuf,
        /// The four letters read.
        found: String,
    },
    /// The file ends inside its header.
    #[error(
        "{path}: the file ends at byte {at_byte}, inside {inside}, before any sample; copy it again from the recorder",
        path = path.display()
    )]
    HeaderCut {
        /// The file.
        path: PathBuf,
        /// Length of the file.
        at_byte: u64,
        /// What was being read.
        inside: String,
    },
    /// No format chunk before the samples.
    #[error(
        "{path}: no `fmt ` chunk before byte {at_byte}, where {found}; without it rate and sample width are unknown: export the recording again",
        path = path.display()
    )]
    NoFormat {
        /// The file.
        path: PathBuf,
        /// How far was read.
        at_byte: u64,
        /// What stands there.
        found: &'static str,
    },
    /// No samples.
    #[error("{path}: no `data` chunk up to the end at byte {at_byte}, so no samples; export the recording again", path = path.display())]
    NoData {
        /// The file.
        path: PathBuf,
        /// Length of the file.
        at_byte: u64,
    },
    /// A format chunk too short to say what it must.
    #[error(
        "{path}: the `fmt ` chunk at byte {at_byte} holds {size} bytes, at least {expected} are expected; export the recording again",
        path = path.display()
    )]
    FormatTooShort {
        /// The file.
        path: PathBuf,
        /// Where the chunk starts.
        at_byte: u64,
        /// Its size.
        size: u64,
        /// What it needs.
        expected: u64,
    },
    /// Not plain samples.
    #[error(
        "{path}: format tag {tag:#06x} ({name}) at byte {at_byte}: compressed or coded samples are not read, plain PCM (0x0001) or float (0x0003) is expected; convert it to PCM from the original, lossy coding moves the hum",
        path = path.display()
    )]
    Compressed {
        /// The file.
        path: PathBuf,
        /// Where the tag stands.
        at_byte: u64,
        /// The tag.
        tag: u16,
        /// Its name, as far as known.
        name: &'static str,
    },
    /// A width of integers that is not read.
    #[error(
        "{path}: {bits} bits a sample (byte {at_byte}), integers of 8, 16, 24 or 32 bits are expected; convert it to one of these",
        path = path.display()
    )]
    BitDepth {
        /// The file.
        path: PathBuf,
        /// Where the width stands.
        at_byte: u64,
        /// The width read.
        bits: u16,
    },
    /// A width of floats that is not read.
    #[error(
        "{path}: floating-point samples of {bits} bits (byte {at_byte}), 32 bits are expected; convert it to 32-bit float",
        path = path.display()
    )]
    FloatWidth {
        /// The file.
        path: PathBuf,
        /// Where the width stands.
        at_byte: u64,
        /// The width read.
        bits: u16,
    },
    /// More significant bits than the sample has.
    #[error(
        "{path}: {valid} valid bits (byte {at_byte}) in samples of {bits} bits, 1 to {bits} are expected; export the recording again",
        path = path.display()
    )]
    ValidBits {
        /// The file.
        path: PathBuf,
        /// Where the field stands.
        at_byte: u64,
        /// What it says.
        valid: u16,
        /// Width of a sample.
        bits: u16,
    },
    /// A rate out of range.
    #[error(
        "{path}: sample rate {rate_hz} Hz (byte {at_byte}), {LOWEST_RATE_HZ} Hz to {HIGHEST_RATE_HZ} Hz is expected; record at a rate in that range",
        path = path.display()
    )]
    Rate {
        /// The file.
        path: PathBuf,
        /// Where the rate stands.
        at_byte: u64,
        /// The rate read.
        rate_hz: u32,
    },
    /// No channel.
    #[error("{path}: 0 channels (byte {at_byte}), at least 1 is expected; export the recording again", path = path.display())]
    NoChannel {
        /// The file.
        path: PathBuf,
        /// Where the count stands.
        at_byte: u64,
    },
    /// A frame size at odds with channels and width.
    #[error(
        "{path}: block align {found} (byte {at_byte}), but {channels} channels of {bits} bits make {expected} bytes a frame; the header contradicts itself: export the recording again",
        path = path.display()
    )]
    BlockAlign {
        /// The file.
        path: PathBuf,
        /// Where the field stands.
        at_byte: u64,
        /// What it says.
        found: u16,
        /// Channels.
        channels: u16,
        /// Width of a sample.
        bits: u16,
        /// What it should say.
        expected: u32,
    },
    /// The file ends before its samples do.
    #[error(
        "{path}: cut short: the file ends at byte {at_byte}, its data chunk claims samples up to byte {claimed_to}; {frames} whole frames ({duration_s:.3} s) are there and {missing_bytes} bytes are missing; `--salvage` reads up to the cut",
        path = path.display()
    )]
    Truncated {
        /// The file.
        path: PathBuf,
        /// Length of the file.
        at_byte: u64,
        /// Where the data chunk should end.
        claimed_to: u64,
        /// Bytes missing.
        missing_bytes: u64,
        /// Whole frames there.
        frames: u64,
        /// Their length in seconds.
        duration_s: f64,
    },
    /// The recorder never filled in the size.
    #[error(
        "{path}: not finished by the recorder: the size of the data chunk (byte {at_byte}) reads {found:#x}, as a power failure leaves it; the file ends at byte {ends_at} and holds {frames} whole frames ({duration_s:.3} s) after it; `--salvage` reads up to the end",
        path = path.display()
    )]
    Unfinished {
        /// The file.
        path: PathBuf,
        /// Where the size stands.
        at_byte: u64,
        /// What it says.
        found: u32,
        /// Length of the file.
        ends_at: u64,
        /// Whole frames there.
        frames: u64,
        /// Their length in seconds.
        duration_s: f64,
    },
    /// The last frame is not whole.
    #[error(
        "{path}: the data chunk (size at byte {at_byte}) holds {size} bytes, not whole frames of {frame_bytes} bytes; `--salvage` reads the {frames} whole ones",
        path = path.display()
    )]
    PartialFrame {
        /// The file.
        path: PathBuf,
        /// Where the size stands.
        at_byte: u64,
        /// What it says.
        size: u64,
        /// Bytes a frame.
        frame_bytes: u64,
        /// Whole frames there.
        frames: u64,
    },
    /// Too short to tell a frequency from.
    #[error(
        "{path}: {frames} frames at {rate_hz} Hz are {duration_s:.3} s, at least {SHORTEST_S} s is expected; record for a minute or more",
        path = path.display()
    )]
    TooShort {
        /// The file.
        path: PathBuf,
        /// Frames there.
        frames: u64,
        /// Sampling rate.
        rate_hz: u32,
        /// Length in seconds.
        duration_s: f64,
    },
    /// A sample that is not a number.
    #[error(
        "{path}: byte {at_byte} (frame {frame}, channel {channel}) reads {found}, a finite number is expected; the recording is damaged there: cut that part out",
        path = path.display()
    )]
    NotFinite {
        /// The file.
        path: PathBuf,
        /// Where the sample stands.
        at_byte: u64,
        /// Its frame, 0 first.
        frame: u64,
        /// Its channel, 1 first.
        channel: usize,
        /// `NaN`, `inf` or `-inf`.
        found: f32,
    },
    /// More than the sizes of a WAV file can say.
    #[error(
        "{path}: {bytes} bytes of samples are more than a WAV file can hold (4 GiB); cut the recording into shorter ones",
        path = path.display()
    )]
    TooLong {
        /// The file.
        path: PathBuf,
        /// Bytes that were to be written.
        bytes: u64,
    },
}
