//! How samples are stored, and how they become fractions of full scale.

/// How a sample is stored, little-endian.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum SampleFormat {
    /// 8-bit integer, 128 is zero.
    U8,
    /// 16-bit integer.
    I16,
    /// 24-bit integer.
    I24,
    /// 32-bit integer.
    I32,
    /// 32-bit float, ±1 is full scale.
    F32,
}

impl SampleFormat {
    /// Bytes a sample.
    pub const fn bytes(self) -> usize {
        match self {
            Self::U8 => 1,
            Self::I16 => 2,
            Self::I24 => 3,
            Self::I32 | Self::F32 => 4,
        }
    }

    /// Bits a sample.
    pub const fn bits(self) -> u16 {
        self.bytes() as u16 * 8
    }

    /// Whether samples are floating-point.
    pub const fn is_float(self) -> bool {
        matches!(self, Self::F32)
    }

    /// One step of an integer format as a fraction of full scale; 0 for float.
    pub fn step(self) -> f64 {
        if self.is_float() { 0.0 } else { (1.0 - f64::from(self.bits())).exp2() }
    }

    /// Interleaved bytes (whole frames of `channels`) to one channel, 0 first.
    ///
    /// Integer code / 2^(bits − 1), so that the lowest code is −1 exactly.
    pub(super) fn decode(self, raw: &[u8], channels: usize, channel: usize, plane: &mut Vec<f64>) {
        match self {
            Self::U8 => {
                pick(raw, channels, channel, plane, |[byte]: [u8; 1]| (f64::from(byte) - 128.0) / 128.0);
            }
            Self::I16 => {
                pick(raw, channels, channel, plane, |bytes| f64::from(i16::from_le_bytes(bytes)) / 32_768.0);
            }
            Self::I24 => pick(raw, channels, channel, plane, |[low, middle, high]: [u8; 3]| {
                // In the upper three bytes of an i32 the sign takes care of itself.
                f64::from(i32::from_le_bytes([0, low, middle, high])) / 2_147_483_648.0
            }),
            Self::I32 => pick(raw, channels, channel, plane, |bytes| {
                f64::from(i32::from_le_bytes(bytes)) / 2_147_483_648.0
            }),
            Self::F32 => pick(raw, channels, channel, plane, |bytes| f64::from(f32::from_le_bytes(bytes))),
        }
    }
}

/// Every `channels`-th sample of `W` bytes. One and two channels, which are nearly
/// all recordings, have loops of their own with strides the compiler knows.
fn pick<const W: usize>(
    raw: &[u8],
    channels: usize,
    channel: usize,
    plane: &mut Vec<f64>,
    value: impl Fn([u8; W]) -> f64 + Copy,
) {
    let samples = raw.as_chunks::<W>().0;
    plane.clear();
    match (channels, channel) {
        (1, _) => plane.extend(samples.iter().map(|&bytes| value(bytes))),
        (2, 0) => plane.extend(samples.as_chunks::<2>().0.iter().map(|&[first, _]| value(first))),
        (2, _) => plane.extend(samples.as_chunks::<2>().0.iter().map(|&[_, second]| value(second))),
        _ => plane.extend(samples.chunks_exact(channels).map(|frame| value(frame[channel]))),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn one(format: SampleFormat, raw: &[u8]) -> Vec<f64> {
        let mut plane = Vec::new();
        format.decode(raw, 1, 0, &mut plane);
        plane
    }

    #[test]
    fn the_lowest_code_is_minus_one_and_the_highest_one_step_short_of_one() {
        assert_eq!(one(SampleFormat::U8, &[0, 128, 255]), [-1.0, 0.0, 127.0 / 128.0]);
        assert_eq!(one(SampleFormat::I16, &[0, 0x80, 0xff, 0x7f]), [-1.0, 32_767.0 / 32_768.0]);
        assert_eq!(one(SampleFormat::I24, &[0, 0, 0x80, 0xff, 0xff, 0xff]), [-1.0, -1.0 / 8_388_608.0]);
        assert_eq!(one(SampleFormat::I32, &[0, 0, 0, 0x80, 1, 0, 0, 0]), [-1.0, 1.0 / 2_147_483_648.0]);
        assert_eq!(one(SampleFormat::F32, &1.5_f32.to_le_bytes()), [1.5]);
    }

    #[test]
    fn channels_are_told_apart_whatever_their_number() {
        for channels in 1..=5_usize {
            let raw: Vec<u8> = (0..channels * 7).flat_map(|n| (n as i16).to_le_bytes()).collect();
            for channel in 0..channels {
                let mut plane = Vec::new();
                SampleFormat::I16.decode(&raw, channels, channel, &mut plane);
                let expected: Vec<f64> = (0..7).map(|f| (f * channels + channel) as f64 / 32_768.0).collect();
                assert_eq!(plane, expected);
            }
        }
    }
}
