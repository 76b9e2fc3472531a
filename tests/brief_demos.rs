//! The demo captures: there, small, whole, not clipped.

use std::path::{Path, PathBuf};

const DEMOS: [(&str, u32, u16, f64); 2] =
    [("tide-gauge.wav", 800, 24, 480.0), ("rehearsal-room.wav", 32_000, 16, 26.0)];

/// What both together may weigh.
const MOST_BYTES: u64 = 3_000_000;

fn demo(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-audio").join(name)
}

#[test]
fn the_demos_weigh_at_most_three_megabytes() {
    let bytes: u64 = DEMOS.iter().map(|(name, ..)| std::fs::metadata(demo(name)).unwrap().len()).sum();
    assert!(bytes <= MOST_BYTES, "{bytes} bytes");
}

#[test]
fn the_demos_have_their_rate_depth_and_length_and_do_not_clip() {
    for (name, rate_hz, bits, seconds) in DEMOS {
        let mut reader = hound::WavReader::open(demo(name)).unwrap();
        let spec = reader.spec();
        assert_eq!((spec.channels, spec.sample_rate, spec.bits_per_sample), (1, rate_hz, bits), "{name}");
        assert_eq!(f64::from(reader.duration()) / f64::from(rate_hz), seconds, "{name}");
        let peak = reader.samples::<i32>().map(|sample| sample.unwrap().abs()).max().unwrap();
        let full_scale = f64::from(1u32 << (bits - 1));
        assert!((0.3..0.9).contains(&(f64::from(peak) / full_scale)), "{name}: peak {peak}");
    }
}
