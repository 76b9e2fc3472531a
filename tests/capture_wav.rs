//! WAV files in and out: against the `hound` crate, and against headers built byte by byte.

use std::path::{Path, PathBuf};

use notchwright::capture::{Capture, CaptureError, Salvage, SampleFormat, WavCapture, WavWriter};
use proptest::prelude::*;
use tempfile::TempDir;

/// Everything a capture holds, read in blocks of `block` frames.
fn read_all(capture: &mut dyn Capture, block: usize) -> Vec<Vec<f64>> {
    let channels = capture.format().channels;
    let mut all = vec![Vec::new(); channels];
    let mut planes = vec![Vec::new(); channels];
    while capture.read_block(&mut planes, block).expect("readable") > 0 {
        for (whole, plane) in all.iter_mut().zip(&planes) {
            whole.extend_from_slice(plane);
        }
    }
    all
}

fn file(folder: &TempDir, bytes: &[u8]) -> PathBuf {
    let path = folder.path().join("made.wav");
    std::fs::write(&path, bytes).expect("written");
    path
}

/// The error of opening these bytes, and its message.
fn refused(bytes: &[u8]) -> (CaptureError, String) {
    let folder = TempDir::new().expect("folder");
    let path = file(&folder, bytes);
    let error = WavCapture::open(&path).expect_err("not to be read");
    let message = error.to_string();
    assert!(message.starts_with(&path.display().to_string()), "names its file: {message}");
    (error, message)
}

/// A `fmt ` chunk without its name and size.
fn format_body(tag: u16, channels: u16, rate_hz: u32, block_align: u16, bits: u16) -> Vec<u8> {
    let mut body = Vec::new();
    body.extend(tag.to_le_bytes());
    body.extend(channels.to_le_bytes());
    body.extend(rate_hz.to_le_bytes());
    body.extend((rate_hz * u32::from(block_align)).to_le_bytes());
    body.extend(block_align.to_le_bytes());
    body.extend(bits.to_le_bytes());
    body
}

fn chunk(name: &[u8; 4], body: &[u8]) -> Vec<u8> {
    let mut bytes = name.to_vec();
    bytes.extend((body.len() as u32).to_le_bytes());
    bytes.extend(body);
    if body.len() % 2 == 1 {
        bytes.push(0);
    }
    bytes
}

fn wave(chunks: &[Vec<u8>]) -> Vec<u8> {
    let inside = chunks.concat();
    let mut bytes = b"RIFF".to_vec();
    bytes.extend((inside.len() as u32 + 4).to_le_bytes());
    bytes.extend(b"WAVE");
    bytes.extend(inside);
    bytes
}

/// A second of 16-bit mono at 200 Hz.
fn plain() -> Vec<u8> {
    wave(&[chunk(b"fmt ", &format_body(1, 1, 200, 2, 16)), chunk(b"data", &[7; 400])])
}

/// A second with this format chunk.
fn with_format(body: &[u8]) -> Vec<u8> {
    wave(&[chunk(b"fmt ", body), chunk(b"data", &[0; 4800])])
}

fn hound_file(path: &Path, spec: hound::WavSpec, codes: &[i32]) {
    let mut writer = hound::WavWriter::create(path, spec).expect("created");
    for &code in codes {
        match spec.sample_format {
            hound::SampleFormat::Int => writer.write_sample(code).expect("written"),
            hound::SampleFormat::Float => writer.write_sample(code as f32 / 1024.0).expect("written"),
        }
    }
    writer.finalize().expect("finished");
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(64))]

    #[test]
    fn what_hound_writes_is_read_sample_by_sample(
        width in prop::sample::select(vec![8_u16, 16, 24, 32, 132]),
        channels in 1_u16..6,
        rate_hz in 100_u32..1000,
        block in 1_usize..3000,
        seed in any::<u64>(),
    ) {
        let float = width == 132;
        let bits = width % 100;
        let folder = TempDir::new().expect("folder");
        let path = folder.path().join("a.wav");
        let mut state = seed | 1;
        let codes: Vec<i32> = (0..rate_hz as usize * usize::from(channels))
            .map(|_| {
                state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
                (state >> 32) as i32 >> (32 - bits)
            })
            .collect();
        let sample_format = if float { hound::SampleFormat::Float } else { hound::SampleFormat::Int };
        let spec = hound::WavSpec { channels, sample_rate: rate_hz, bits_per_sample: bits, sample_format };
        hound_file(&path, spec, &codes);

        let mut capture = WavCapture::open(&path).expect("opened");
        prop_assert_eq!(capture.format().sample_rate_hz, rate_hz);
        prop_assert_eq!(capture.format().frames, u64::from(rate_hz));
        let planes = read_all(&mut capture, block);
        let full_scale = if float { 1024.0 } else { f64::from(bits - 1).exp2() };
        for (index, &code) in codes.iter().enumerate() {
            let expected = if float { f64::from(code as f32 / 1024.0) } else { f64::from(code) / full_scale };
            let (frame, channel) = (index / usize::from(channels), index % usize::from(channels));
            prop_assert_eq!(planes[channel][frame], expected);
        }
        capture.rewind().expect("rewound");
        prop_assert_eq!(read_all(&mut capture, 997), planes);
    }

    #[test]
    fn no_bytes_whatever_bring_the_reader_down(
        cut in 0_usize..452,
        at in 0_usize..44,
        byte in any::<u8>(),
        salvage in any::<bool>(),
    ) {
        let mut bytes = plain();
        bytes[at] = byte;
        bytes.truncate(cut);
        let folder = TempDir::new().expect("folder");
        let path = file(&folder, &bytes);
        let salvage = if salvage { Salvage::UpToTheCut } else { Salvage::No };
        if let Ok(mut capture) = WavCapture::open_with(&path, salvage) {
            let frames = capture.format().frames;
            prop_assert_eq!(read_all(&mut capture, 64)[0].len() as u64, frames);
        }
    }
}

#[test]
fn hound_reads_what_the_writer_writes() {
    let planes = [vec![0.5, -0.25, 0.0, -1.0], vec![0.125, 0.75, -0.5, 0.0], vec![0.0, 0.0, 0.25, 0.5]];
    let formats =
        [SampleFormat::U8, SampleFormat::I16, SampleFormat::I24, SampleFormat::I32, SampleFormat::F32];
    for format in formats {
        for channels in 1..=3 {
            let folder = TempDir::new().expect("folder");
            let path = folder.path().join("out.wav");
            let mut writer = WavWriter::create(&path, 44_100, channels, format).expect("created");
            for from in [0, 1] {
                let part: Vec<&[f64]> = planes[..channels].iter().map(|p| &p[from * 2..][..2]).collect();
                writer.write_block(&part).expect("written");
            }
            let written = writer.finish().expect("finished");
            assert_eq!(written.frames, 4);

            let mut reader = hound::WavReader::open(&path).expect("hound opens it");
            let spec = reader.spec();
            assert_eq!((spec.channels, spec.sample_rate), (channels as u16, 44_100));
            assert_eq!(spec.bits_per_sample, format.bits());
            assert_eq!(reader.duration(), 4);
            let full_scale = f64::from(format.bits() - 1).exp2();
            let read: Vec<f64> = if format.is_float() {
                reader.samples::<f32>().map(|s| f64::from(s.expect("sample"))).collect()
            } else {
                reader.samples::<i32>().map(|s| f64::from(s.expect("sample")) / full_scale).collect()
            };
            for (index, &got) in read.iter().enumerate() {
                let wanted = planes[index % channels][index / channels];
                // Rounding half a step, dither a whole one.
                let bound = 1.5 * format.step();
                assert!((got - wanted).abs() <= bound, "{format:?}: {got} for {wanted}");
            }
        }
    }
}

#[test]
fn dither_keeps_the_mean_of_what_is_smaller_than_a_step() {
    let folder = TempDir::new().expect("folder");
    let path = folder.path().join("quiet.wav");
    let step = SampleFormat::I16.step();
    let count = 100_000;
    let mut writer = WavWriter::create(&path, 100_000, 1, SampleFormat::I16).expect("created");
    writer.write_block(&[vec![0.3 * step; count]]).expect("written");
    writer.finish().expect("finished");
    let read = &read_all(&mut WavCapture::open(&path).expect("opened"), 4096)[0];
    let mean = read.iter().sum::<f64>() / count as f64 / step;
    let power = read.iter().map(|x| (x / step - 0.3).powi(2)).sum::<f64>() / count as f64;
    // TPDF: error power 1/12 + 1/6 = 1/4 of a step squared, whatever the signal.
    assert!((mean - 0.3).abs() < 4.0 * 0.5 / (count as f64).sqrt(), "mean {mean}");
    assert!((power - 0.25).abs() < 0.01, "power {power}");
}

#[test]
fn the_same_samples_make_the_same_file_whatever_the_blocks() {
    let folder = TempDir::new().expect("folder");
    let samples: Vec<f64> = (0..999).map(|n| (n as f64 * 0.1).sin()).collect();
    let write = |name: &str, block: usize| {
        let path = folder.path().join(name);
        let mut writer = WavWriter::create(&path, 500, 1, SampleFormat::I24).expect("created");
        for part in samples.chunks(block) {
            writer.write_block(&[part]).expect("written");
        }
        writer.finish().expect("finished");
        std::fs::read(path).expect("read")
    };
    assert_eq!(write("a.wav", 999), write("b.wav", 17));
}

#[test]
fn samples_beyond_full_scale_are_held_and_counted() {
    let folder = TempDir::new().expect("folder");
    let path = folder.path().join("loud.wav");
    let mut writer = WavWriter::create(&path, 200, 1, SampleFormat::I16).expect("created");
    writer.write_block(&[vec![1.25; 100]]).expect("written");
    writer.write_block(&[vec![-1.25; 100]]).expect("written");
    assert_eq!(writer.finish().expect("finished").saturated, 200);
    let read = &read_all(&mut WavCapture::open(&path).expect("opened"), 200)[0];
    assert_eq!((read[0], read[199]), (32_767.0 / 32_768.0, -1.0));
}

#[test]
fn floats_beyond_full_scale_are_kept() {
    let folder = TempDir::new().expect("folder");
    let path = folder.path().join("loud.wav");
    let mut writer = WavWriter::create(&path, 200, 1, SampleFormat::F32).expect("created");
    writer.write_block(&[vec![1.25; 200]]).expect("written");
    assert_eq!(writer.finish().expect("finished").saturated, 0);
    assert_eq!(read_all(&mut WavCapture::open(&path).expect("opened"), 200)[0][0], 1.25);
}

#[test]
fn other_chunks_and_their_padding_are_stepped_over() {
    let bytes = wave(&[
        chunk(b"bext", &[1; 603]),
        chunk(b"fmt ", &format_body(1, 2, 200, 4, 16)),
        chunk(b"LIST", b"INFOabc"),
        chunk(b"data", &[3; 800]),
        chunk(b"LIST", b"after"),
    ]);
    let folder = TempDir::new().expect("folder");
    let mut capture = WavCapture::open(file(&folder, &bytes)).expect("opened");
    assert_eq!((capture.format().channels, capture.format().frames), (2, 200));
    assert!(read_all(&mut capture, 60).iter().flatten().all(|&x| x == f64::from(0x0303) / 32_768.0));
}

#[test]
fn an_extensible_header_says_the_format_by_its_sub_format() {
    let mut body = format_body(0xfffe, 1, 200, 4, 32);
    body.extend(22_u16.to_le_bytes());
    body.extend(24_u16.to_le_bytes());
    body.extend(0_u32.to_le_bytes());
    body.extend([1, 0, 0, 0, 0, 0, 0x10, 0, 0x80, 0, 0, 0xaa, 0, 0x38, 0x9b, 0x71]);
    let data = 0x4000_0000_i32.to_le_bytes().repeat(200);
    let folder = TempDir::new().expect("folder");
    let path = file(&folder, &wave(&[chunk(b"fmt ", &body), chunk(b"data", &data)]));
    let mut capture = WavCapture::open(path).expect("24 valid bits in 32 are read");
    assert_eq!(read_all(&mut capture, 64)[0], vec![0.5; 200]);

    body[24] = 0x55;
    let (error, message) = refused(&with_format(&body));
    assert!(matches!(error, CaptureError::Compressed { tag: 0x55, at_byte: 44, .. }), "{message}");
    body[24] = 1;
    body[39] = 0;
    let (error, message) = refused(&with_format(&body));
    assert!(matches!(error, CaptureError::Compressed { tag: 0xfffe, .. }), "{message}");
    body[39] = 0x71;
    body[18] = 33;
    let (error, message) = refused(&with_format(&body));
    assert!(matches!(error, CaptureError::ValidBits { valid: 33, bits: 32, at_byte: 38, .. }), "{message}");
    body.truncate(20);
    let (error, message) = refused(&with_format(&body));
    assert!(matches!(error, CaptureError::FormatTooShort { size: 20, expected: 40, .. }), "{message}");
}

#[test]
fn what_is_no_wav_file_is_said_to_be_none() {
    assert!(matches!(refused(b"").0, CaptureError::Empty { .. }));
    assert!(matches!(refused(b"RI").0, CaptureError::NotWave { at_byte: 0, .. }));
    let (error, message) = refused(b"OggS\0\0\0\0\0\0\0\0\0");
    assert!(
        matches!(error, CaptureError::NotWave { at_byte: 0, .. }) && message.contains("OggS"),
        "{message}"
    );
    let (error, message) = refused(b"RIFF\x10\0\0\0AVI LIST");
    assert!(
        matches!(error, CaptureError::NotWave { at_byte: 8, .. }) && message.contains("AVI "),
        "{message}"
    );
    assert!(matches!(refused(b"RIFX\0\0\0\0WAVE").0, CaptureError::BigEndian { .. }));
    assert!(matches!(refused(b"RF64\xff\xff\xff\xffWAVEds64").0, CaptureError::SixtyFourBit { .. }));
    let folder = TempDir::new().expect("folder");
    let error = WavCapture::open(folder.path()).expect_err("a folder");
    assert!(matches!(error, CaptureError::NotAFile { .. }), "{error}");
    let error = WavCapture::open(folder.path().join("none.wav")).expect_err("nothing there");
    assert!(matches!(error, CaptureError::Io { .. }), "{error}");
}

#[test]
fn a_header_that_contradicts_itself_is_refused_by_field_and_byte() {
    let compressed = refused(&with_format(&format_body(2, 1, 200, 1, 4)));
    assert!(matches!(compressed.0, CaptureError::Compressed { tag: 2, at_byte: 20, .. }));
    assert!(compressed.1.contains("ADPCM"), "{}", compressed.1);
    let float = refused(&with_format(&format_body(3, 1, 200, 8, 64)));
    assert!(matches!(float.0, CaptureError::FloatWidth { bits: 64, at_byte: 34, .. }), "{}", float.1);
    let depth = refused(&with_format(&format_body(1, 1, 200, 2, 12)));
    assert!(matches!(depth.0, CaptureError::BitDepth { bits: 12, at_byte: 34, .. }), "{}", depth.1);
    for rate_hz in [0, 99, 768_001] {
        let rate = refused(&with_format(&format_body(1, 1, rate_hz, 2, 16)));
        assert!(matches!(rate.0, CaptureError::Rate { at_byte: 24, .. }), "{}", rate.1);
    }
    let none = refused(&with_format(&format_body(1, 0, 200, 0, 16)));
    assert!(matches!(none.0, CaptureError::NoChannel { at_byte: 22, .. }), "{}", none.1);
    let align = refused(&with_format(&format_body(1, 2, 200, 2, 16)));
    assert!(
        matches!(align.0, CaptureError::BlockAlign { found: 2, expected: 4, at_byte: 32, .. }),
        "{}",
        align.1
    );
    let short = refused(&wave(&[chunk(b"fmt ", &[1; 10]), chunk(b"data", &[0; 400])]));
    assert!(matches!(short.0, CaptureError::FormatTooShort { size: 10, at_byte: 12, .. }), "{}", short.1);
}

#[test]
fn missing_chunks_are_named() {
    let no_format = refused(&wave(&[chunk(b"data", &[0; 400])]));
    assert!(matches!(no_format.0, CaptureError::NoFormat { at_byte: 12, .. }), "{}", no_format.1);
    let neither = refused(&wave(&[chunk(b"LIST", b"INFO")]));
    assert!(matches!(neither.0, CaptureError::NoFormat { .. }), "{}", neither.1);
    let no_data = refused(&wave(&[chunk(b"fmt ", &format_body(1, 1, 200, 2, 16))]));
    assert!(matches!(no_data.0, CaptureError::NoData { at_byte: 36, .. }), "{}", no_data.1);
    let cut = refused(&plain()[..30]);
    assert!(matches!(cut.0, CaptureError::HeaderCut { at_byte: 30, .. }), "{}", cut.1);
}

#[test]
fn less_than_a_second_is_too_short() {
    let bytes = wave(&[chunk(b"fmt ", &format_body(1, 1, 200, 2, 16)), chunk(b"data", &[0; 398])]);
    let (error, message) = refused(&bytes);
    assert!(matches!(error, CaptureError::TooShort { frames: 199, .. }), "{message}");
}

#[test]
fn a_sample_that_is_no_number_is_found_to_the_byte() {
    let body = format_body(3, 2, 200, 8, 32);
    for (bad, text) in [(f32::NAN, "NaN"), (f32::INFINITY, "inf"), (f32::NEG_INFINITY, "-inf")] {
        let mut data = vec![0_u8; 1600];
        data[1204..1208].copy_from_slice(&bad.to_le_bytes());
        let folder = TempDir::new().expect("folder");
        let path = file(&folder, &wave(&[chunk(b"fmt ", &body), chunk(b"data", &data)]));
        let mut capture = WavCapture::open(path).expect("the header is sound");
        let mut planes = vec![Vec::new(); 2];
        assert_eq!(capture.read_block(&mut planes, 100).expect("the first half is sound"), 100);
        let error = capture.read_block(&mut planes, 100).expect_err("a bad sample");
        let CaptureError::NotFinite { at_byte, frame, channel, .. } = error else { panic!("{error}") };
        assert_eq!((at_byte, frame, channel), (44 + 1204, 150, 2));
        assert!(error.to_string().contains(text), "{error}");
    }
}

#[test]
fn a_cut_recording_is_refused_and_read_up_to_the_cut_when_asked() {
    let mut bytes = wave(&[chunk(b"fmt ", &format_body(1, 2, 200, 4, 16)), chunk(b"data", &[5; 2000])]);
    bytes.truncate(44 + 1203);
    let (error, message) = refused(&bytes);
    assert!(matches!(error, CaptureError::Truncated { at_byte: 1247, frames: 300, missing_bytes: 797, .. }));
    for told in ["byte 1247", "300 whole frames", "797 bytes", "--salvage"] {
        assert!(message.contains(told), "{told}: {message}");
    }
    let folder = TempDir::new().expect("folder");
    let mut capture =
        WavCapture::open_with(file(&folder, &bytes), Salvage::UpToTheCut).expect("read up to the cut");
    assert_eq!(read_all(&mut capture, 128)[1].len(), 300);
    let salvaged = capture.salvaged().expect("and said so");
    assert_eq!(
        (salvaged.frames, salvaged.missing_bytes, salvaged.missing_frames),
        (300, Some(797), Some(200))
    );
    assert_eq!(salvaged.cut_at_byte, 1247);
}

#[test]
fn sizes_a_recorder_never_filled_in_are_told_from_a_whole_file() {
    for left in [0_u32, u32::MAX] {
        let mut bytes = wave(&[chunk(b"fmt ", &format_body(1, 1, 200, 2, 16)), chunk(b"data", &[5; 601])]);
        bytes.truncate(44 + 601);
        bytes[4..8].copy_from_slice(&left.to_le_bytes());
        bytes[40..44].copy_from_slice(&left.to_le_bytes());
        let (error, message) = refused(&bytes);
        assert!(matches!(error, CaptureError::Unfinished { at_byte: 40, frames: 300, .. }), "{message}");
        assert!(message.contains("--salvage"), "{message}");
        let folder = TempDir::new().expect("folder");
        let mut capture =
            WavCapture::open_with(file(&folder, &bytes), Salvage::UpToTheCut).expect("read to the end");
        assert_eq!(read_all(&mut capture, 128)[0].len(), 300);
        assert_eq!(capture.salvaged().expect("said so").missing_bytes, None);
    }
}

#[test]
fn a_last_frame_that_is_not_whole_is_said() {
    let bytes = wave(&[chunk(b"fmt ", &format_body(1, 2, 200, 4, 16)), chunk(b"data", &[5; 1203])]);
    let (error, message) = refused(&bytes);
    assert!(matches!(error, CaptureError::PartialFrame { size: 1203, frame_bytes: 4, frames: 300, .. }));
    assert!(message.contains("--salvage"), "{message}");
    let folder = TempDir::new().expect("folder");
    let capture = WavCapture::open_with(file(&folder, &bytes), Salvage::UpToTheCut).expect("read");
    assert_eq!(capture.format().frames, 300);
    assert_eq!(capture.salvaged().expect("said so").missing_frames, Some(1));
}

#[test]
fn a_whole_recording_is_not_called_salvaged() {
    let folder = TempDir::new().expect("folder");
    let capture = WavCapture::open_with(file(&folder, &plain()), Salvage::UpToTheCut).expect("read");
    assert_eq!(capture.salvaged(), None);
}

#[test]
fn an_interrupted_writer_leaves_what_salvage_can_read() {
    let folder = TempDir::new().expect("folder");
    let path = folder.path().join("cut.wav");
    let mut writer = WavWriter::create(&path, 200, 1, SampleFormat::I16).expect("created");
    writer.write_block(&[vec![0.5; 100_000]]).expect("written");
    drop(writer);
    assert!(matches!(WavCapture::open(&path), Err(CaptureError::Unfinished { .. })));
    let capture = WavCapture::open_with(&path, Salvage::UpToTheCut).expect("read up to the end");
    assert_eq!(capture.format().frames, 100_000);
}

#[test]
fn a_real_recording_is_read_whole() {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference/ecg-lead-60hz.wav");
    let mut capture = WavCapture::open(&path).expect("opened");
    let by_hound: Vec<f64> = hound::WavReader::open(&path)
        .expect("hound opens it")
        .samples::<i16>()
        .map(|s| f64::from(s.expect("sample")) / 32_768.0)
        .collect();
    assert_eq!(capture.format().sample_rate_hz, 360);
    assert_eq!(read_all(&mut capture, 4096)[0], by_hound);
}
