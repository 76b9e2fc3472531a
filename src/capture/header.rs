//! The chunks of a RIFF/WAVE file, up to its first sample.
//!
//! Layout after the public RIFF description of 1991 and its later format tags
//! (RFC 2361). A chunk's 64-bit size is kept as such, so that a `ds64` chunk
//! (EBU Tech 3306, ITU-R BS.2088) has one place to come in: [`Header::read`].

use std::io::{self, Read, Seek, SeekFrom};
use std::path::Path;

use super::{CaptureError, HIGHEST_RATE_HZ, LOWEST_RATE_HZ, SampleFormat};

const TAG_PCM: u16 = 0x0001;
const TAG_FLOAT: u16 = 0x0003;
const TAG_EXTENSIBLE: u16 = 0xfffe;
/// Bytes 2 to 15 of the sub-format, the same for every format tag (common practice).
const SUBFORMAT_TAIL: [u8; 14] = [0, 0, 0, 0, 0x10, 0, 0x80, 0, 0, 0xaa, 0, 0x38, 0x9b, 0x71];

/// Format tags people meet, from memory of RFC 2361.
const TAG_NAMES: &[(u16, &str)] = &[
    (0x0002, "ADPCM"),
    (0x0006, "A-law"),
    (0x0007, "µ-law"),
    (0x0011, "IMA ADPCM"),
    (0x0031, "GSM 6.10"),
    (0x0040, "G.721 ADPCM"),
    (0x0050, "MPEG"),
    (0x0055, "MPEG layer 3"),
    (0x0092, "AC-3"),
    (0x00ff, "AAC"),
];

/// What the header says, checked for sense.
#[derive(Debug)]
pub(super) struct Header {
    pub channels: u16,
    pub sample_rate_hz: u32,
    pub sample_format: SampleFormat,
    /// Where the first sample stands.
    pub data_at: u64,
    /// What the data chunk's size field says.
    pub data_size: u64,
}

impl Header {
    /// Reads up to the data chunk of a file of `length` bytes.
    pub fn read(path: &Path, file: &mut (impl Read + Seek), length: u64) -> Result<Self, CaptureError> {
        let mut reader = Chunks { path, file, length, at: 0 };
        reader.expect_wave()?;
        let mut format = None;
        while let Some((id, size)) = reader.next_chunk()? {
            match &id {
                b"fmt " => format = Some(reader.format(size)?),
                b"data" => {
                    let Some((channels, sample_rate_hz, sample_format)) = format else {
                        let found = "the `data` chunk starts";
                        return Err(CaptureError::NoFormat {
                            path: path.into(),
                            at_byte: reader.at - 8,
                            found,
                        });
                    };
                    let data_at = reader.at;
                    return Ok(Self { channels, sample_rate_hz, sample_format, data_at, data_size: size });
                }
                _ => reader.skip(size)?,
            }
        }
        Err(match format {
            Some(_) => CaptureError::NoData { path: path.into(), at_byte: length },
            None => CaptureError::NoFormat { path: path.into(), at_byte: length, found: "the file ends" },
        })
    }
}

/// Walks from chunk to chunk and knows where it is.
struct Chunks<'a, F> {
    path: &'a Path,
    file: &'a mut F,
    length: u64,
    at: u64,
}

impl<F: Read + Seek> Chunks<'_, F> {
    fn bytes<const N: usize>(&mut self, inside: impl Fn() -> String) -> Result<[u8; N], CaptureError> {
        let mut bytes = [0; N];
        match self.file.read_exact(&mut bytes) {
            Ok(()) => {
                self.at += N as u64;
                Ok(bytes)
            }
            Err(source) if source.kind() == io::ErrorKind::UnexpectedEof => Err(CaptureError::HeaderCut {
                path: self.path.into(),
                at_byte: self.length,
                inside: inside(),
            }),
            Err(source) => Err(self.io(source)),
        }
    }

    fn io(&self, source: io::Error) -> CaptureError {
        CaptureError::Io { path: self.path.into(), source }
    }

    fn expect_wave(&mut self) -> Result<(), CaptureError> {
        if self.length == 0 {
            return Err(CaptureError::Empty { path: self.path.into() });
        }
        if self.length < 4 {
            let mut start = Vec::new();
            self.file.read_to_end(&mut start).map_err(|source| self.io(source))?;
            return Err(self.not_wave(0, &start, "RIFF"));
        }
        let riff: [u8; 4] = self.bytes(|| "its first four letters".into())?;
        match &riff {
            b"RIFF" => {}
            b"RIFX" => return Err(CaptureError::BigEndian { path: self.path.into() }),
            b"RF64" | b"BW64" => {
                return Err(CaptureError::SixtyFourBit { path: self.path.into(), found: printable(&riff) });
            }
            _ => return Err(self.not_wave(0, &riff, "RIFF")),
        }
        let _riff_size: [u8; 4] = self.bytes(|| "the size of the file".into())?;
        let wave: [u8; 4] = self.bytes(|| "the letters `WAVE`".into())?;
        if &wave != b"WAVE" {
            return Err(self.not_wave(8, &wave, "WAVE"));
        }
        Ok(())
    }

    fn not_wave(&self, at_byte: u64, found: &[u8], expected: &'static str) -> CaptureError {
        CaptureError::NotWave { path: self.path.into(), at_byte, found: printable(found), expected }
    }

    /// Name and size of the next chunk; `None` at the end of the file.
    fn next_chunk(&mut self) -> Result<Option<([u8; 4], u64)>, CaptureError> {
        if self.at >= self.length {
            return Ok(None);
        }
        let id: [u8; 4] = self.bytes(|| "the name of a chunk".into())?;
        let size: [u8; 4] = self.bytes(|| format!("the size of chunk `{}`", printable(&id)))?;
        Ok(Some((id, u64::from(u32::from_le_bytes(size)))))
    }

    /// Goes past `size` bytes and the padding byte of an odd size.
    fn skip(&mut self, size: u64) -> Result<(), CaptureError> {
        self.at += size + size % 2;
        self.file.seek(SeekFrom::Start(self.at)).map_err(|source| self.io(source))?;
        Ok(())
    }

    /// The `fmt ` chunk of `size` bytes: channels, rate, sample format.
    fn format(&mut self, size: u64) -> Result<(u16, u32, SampleFormat), CaptureError> {
        let start = self.at;
        let path = self.path;
        if size < 16 {
            let at_byte = start - 8;
            return Err(CaptureError::FormatTooShort { path: path.into(), at_byte, size, expected: 16 });
        }
        let field: [u8; 16] = self.bytes(|| "the `fmt ` chunk".into())?;
        let short = |at: usize| u16::from_le_bytes([field[at], field[at + 1]]);
        let (mut tag, channels, block_align, bits) = (short(0), short(2), short(12), short(14));
        let rate_hz = u32::from_le_bytes([field[4], field[5], field[6], field[7]]);
        let mut tag_at = start;
        let mut valid = bits;
        if tag == TAG_EXTENSIBLE {
            if size < 40 {
                let at_byte = start - 8;
                return Err(CaptureError::FormatTooShort { path: path.into(), at_byte, size, expected: 40 });
            }
            let more: [u8; 24] = self.bytes(|| "the `fmt ` chunk".into())?;
            valid = u16::from_le_bytes([more[2], more[3]]);
            tag_at = start + 24;
            let plain = more[10..] == SUBFORMAT_TAIL;
            tag = if plain { u16::from_le_bytes([more[8], more[9]]) } else { TAG_EXTENSIBLE };
        }
        self.at = start;
        self.skip(size)?;

        let at = |offset: u64| start + offset;
        let sample_format = match (tag, bits) {
            (TAG_PCM, 8) => SampleFormat::U8,
            (TAG_PCM, 16) => SampleFormat::I16,
            (TAG_PCM, 24) => SampleFormat::I24,
            (TAG_PCM, 32) => SampleFormat::I32,
            (TAG_FLOAT, 32) => SampleFormat::F32,
            (TAG_PCM, _) => return Err(CaptureError::BitDepth { path: path.into(), at_byte: at(14), bits }),
            (TAG_FLOAT, _) => {
                return Err(CaptureError::FloatWidth { path: path.into(), at_byte: at(14), bits });
            }
            _ => {
                return Err(CaptureError::Compressed {
                    path: path.into(),
                    at_byte: tag_at,
                    tag,
                    name: tag_name(tag),
                });
            }
        };
        // 0 is what careless writers leave in an extensible header for "all of them".
        if valid > bits {
            return Err(CaptureError::ValidBits { path: path.into(), at_byte: at(18), valid, bits });
        }
        if channels == 0 {
            return Err(CaptureError::NoChannel { path: path.into(), at_byte: at(2) });
        }
        if !(LOWEST_RATE_HZ..=HIGHEST_RATE_HZ).contains(&rate_hz) {
            return Err(CaptureError::Rate { path: path.into(), at_byte: at(4), rate_hz });
        }
        let expected = u32::from(channels) * sample_format.bytes() as u32;
        if u32::from(block_align) != expected {
            return Err(CaptureError::BlockAlign {
                path: path.into(),
                at_byte: at(12),
                found: block_align,
                channels,
                bits,
                expected,
            });
        }
        Ok((channels, rate_hz, sample_format))
    }
}

fn tag_name(tag: u16) -> &'static str {
    TAG_NAMES.iter().find(|(known, _)| *known == tag).map_or("not a known name", |(_, name)| name)
}

fn printable(bytes: &[u8]) -> String {
    bytes.iter().map(|&byte| if (0x20..0x7f).contains(&byte) { char::from(byte) } else { '.' }).collect()
}
