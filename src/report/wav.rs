//! Samples as a 16-bit WAV inside a data URI, for the players of the page.

use base64::Engine;
use rand::{RngExt, SeedableRng};
use rand_xoshiro::Xoshiro256PlusPlus;

/// Bytes before the samples of a plain PCM file.
const HEADER_BYTES: usize = 44;

/// A mono 16-bit PCM file of `samples` (±1 is full scale) times `gain`.
///
/// Triangular dither of ± 1 step keeps what is far below a step audible as
/// itself and not as distortion (common practice); its seed is fixed, so that
/// equal input gives an equal page.
pub(super) fn encode(samples: &[f32], gain: f64, rate_hz: u32) -> Vec<u8> {
    let data_bytes = samples.len() * 2;
    let mut out = Vec::with_capacity(HEADER_BYTES + data_bytes);
    let four = |value: usize| u32::try_from(value).unwrap_or(u32::MAX).to_le_bytes();
    out.extend(b"RIFF");
    out.extend(four(HEADER_BYTES - 8 + data_bytes));
    out.extend(b"WAVEfmt ");
    out.extend(16_u32.to_le_bytes());
    out.extend(1_u16.to_le_bytes());
    out.extend(1_u16.to_le_bytes());
    out.extend(rate_hz.to_le_bytes());
    out.extend((rate_hz * 2).to_le_bytes());
    out.extend(2_u16.to_le_bytes());
    out.extend(16_u16.to_le_bytes());
    out.extend(b"data");
    out.extend(four(data_bytes));
    let mut random = Xoshiro256PlusPlus::seed_from_u64(0x50_48_75_6d);
    for &sample in samples {
        let dither = random.random::<f64>() - random.random::<f64>();
        let step = f64::from(sample) * gain * 32767.0 + dither;
        let step = step.round().clamp(-32767.0, 32767.0) as i16;
        out.extend(step.to_le_bytes());
    }
    out
}

/// The file as a URI that needs nothing from outside.
pub(super) fn data_uri(file: &[u8]) -> String {
    let mut uri = String::from("data:audio/wav;base64,");
    base64::engine::general_purpose::STANDARD.encode_string(file, &mut uri);
    uri
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn another_reader_finds_rate_length_and_level() {
        let samples: Vec<f32> = (0..8000).map(|n| (n as f32 * 0.1).sin() * 0.25).collect();
        let file = encode(&samples, 2.0, 8000);
        let mut reader = hound::WavReader::new(std::io::Cursor::new(file)).unwrap();
        let spec = reader.spec();
        assert_eq!((spec.channels, spec.sample_rate, spec.bits_per_sample), (1, 8000, 16));
        let read: Vec<f64> = reader.samples::<i16>().map(|s| f64::from(s.unwrap()) / 32767.0).collect();
        assert_eq!(read.len(), samples.len());
        let worst =
            samples.iter().zip(&read).map(|(s, r)| (f64::from(*s) * 2.0 - r).abs()).fold(0.0, f64::max);
        assert!(worst < 1.6 / 32767.0, "off by {worst}");
    }

    #[test]
    fn a_tone_below_half_a_step_survives_in_the_dither() {
        let tone = |n: usize| (n as f64 * 0.05).sin();
        let samples: Vec<f32> = (0..200_000).map(|n| (0.25 / 32767.0 * tone(n)) as f32).collect();
        let file = encode(&samples, 1.0, 8000);
        let mut reader = hound::WavReader::new(std::io::Cursor::new(file)).unwrap();
        let found: f64 =
            reader.samples::<i16>().enumerate().map(|(n, s)| f64::from(s.unwrap()) * tone(n)).sum::<f64>()
                * 2.0
                / 200_000.0;
        assert!((found - 0.25).abs() < 0.02, "amplitude {found} of a step, expected 0.25");
    }

    #[test]
    fn what_is_too_loud_is_held_at_the_limit() {
        let file = encode(&[2.0, -2.0], 1.0, 8000);
        assert_eq!(file[44..], [0xff, 0x7f, 0x01, 0x80]);
    }
}
