//! Bad input ends with exit code 2, one message that names file and key or
//! byte, and nothing half-written; where nothing is wrong but nothing was
//! found, with exit code 1.

use std::fs;
use std::path::{Path, PathBuf};

use assert_cmd::Command;
use tempfile::TempDir;

const BRIEF: &str = "\
line: Bench line
full_scale: 1 V
source: { resistance: 350 Ω }
load: { resistance: 1 MΩ, capacitance: 220 pF }
keep:
  - { from: 0 Hz, to: 12 Hz, loss: 0.5 dB }
hum:
  reduce_by: 20 dB
  orders: [1]
";

/// A folder with a good capture and a good brief, of which a case spoils one.
struct Bench {
    home: TempDir,
}

impl Bench {
    fn new() -> Self {
        let bench = Self { home: tempfile::tempdir().unwrap() };
        bench.put("line.yaml", BRIEF.as_bytes());
        bench.put("capture.wav", &wav(&humming(1000, 4.0), 1000));
        bench
    }

    fn at(&self, name: &str) -> PathBuf {
        self.home.path().join(name)
    }

    fn put(&self, name: &str, bytes: &[u8]) {
        fs::write(self.at(name), bytes).unwrap();
    }

    fn command(&self, arguments: &[&str]) -> Command {
        let mut command = Command::cargo_bin("notchwright").unwrap();
        command.current_dir(self.home.path()).args(arguments);
        command
    }

    /// `run` on the bench's files ends with `code`; returns standard error.
    fn run_ends_with(&self, code: i32, extra: &[&str]) -> String {
        let mut arguments = vec!["run", "capture.wav", "--line", "line.yaml", "--out", "out"];
        arguments.extend(extra);
        let output = self.command(&arguments).output().unwrap();
        let message = String::from_utf8(output.stderr).unwrap();
        assert_eq!(output.status.code(), Some(code), "{message}");
        message
    }

    /// `run` is refused with one message that holds all `words`, and wrote nothing.
    fn refused(&self, words: &[&str]) {
        self.refused_with(&[], words);
    }

    fn refused_with(&self, extra: &[&str], words: &[&str]) {
        let message = self.run_ends_with(2, extra);
        assert_eq!(
            message.trim_end().lines().filter(|line| line.starts_with("error: ")).count(),
            1,
            "{message}"
        );
        for word in words {
            assert!(message.contains(word), "no `{word}` in: {message}");
        }
        assert!(!self.at("out").exists(), "something was written");
    }
}

/// 50 Hz hum over a little noise, 16 bit.
fn humming(rate: u32, seconds: f64) -> Vec<i16> {
    let mut state = 1_u32;
    (0..(f64::from(rate) * seconds) as usize)
        .map(|n| {
            state = state.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
            let noise = f64::from(state >> 16) / 65536.0 - 0.5;
            let hum = (std::f64::consts::TAU * 50.0 * n as f64 / f64::from(rate)).sin();
            (8000.0 * hum + 20.0 * noise) as i16
        })
        .collect()
}

/// A canonical WAV file: one channel of 16-bit samples.
fn wav(samples: &[i16], rate: u32) -> Vec<u8> {
    let data: Vec<u8> = samples.iter().flat_map(|sample| sample.to_le_bytes()).collect();
    wav_of(1, 16, rate, &data)
}

/// A WAV file with one channel of this format tag, width and data.
fn wav_of(format_tag: u16, bits: u16, rate: u32, data: &[u8]) -> Vec<u8> {
    let block = bits / 8;
    let mut bytes = Vec::new();
    bytes.extend(b"RIFF");
    bytes.extend((36 + data.len() as u32).to_le_bytes());
    bytes.extend(b"WAVEfmt ");
    bytes.extend(16_u32.to_le_bytes());
    bytes.extend(format_tag.to_le_bytes());
    bytes.extend(1_u16.to_le_bytes());
    bytes.extend(rate.to_le_bytes());
    bytes.extend((rate * u32::from(block)).to_le_bytes());
    bytes.extend(block.to_le_bytes());
    bytes.extend(bits.to_le_bytes());
    bytes.extend(b"data");
    bytes.extend((data.len() as u32).to_le_bytes());
    bytes.extend(data);
    bytes
}

#[test]
fn the_bench_itself_is_good() {
    let bench = Bench::new();
    bench.run_ends_with(0, &[]);
    assert!(bench.at("out/report.html").exists());
}

#[test]
fn an_empty_file() {
    let bench = Bench::new();
    bench.put("capture.wav", b"");
    bench.refused(&["capture.wav", "empty"]);
}

#[test]
fn a_file_that_is_not_there() {
    let bench = Bench::new();
    fs::remove_file(bench.at("capture.wav")).unwrap();
    bench.refused(&["capture.wav"]);
}

#[test]
fn a_folder_for_a_recording() {
    let bench = Bench::new();
    fs::remove_file(bench.at("capture.wav")).unwrap();
    fs::create_dir(bench.at("capture.wav")).unwrap();
    bench.refused(&["capture.wav"]);
}

#[test]
fn a_truncated_file_names_the_byte_and_the_way_out() {
    let bench = Bench::new();
    let whole = wav(&humming(1000, 4.0), 1000);
    bench.put("capture.wav", &whole[..5001]);
    bench.refused(&["capture.wav", "5001", "--salvage"]);
}

#[test]
fn a_truncated_file_is_read_up_to_the_cut_with_salvage_and_said_so() {
    let bench = Bench::new();
    let whole = wav(&humming(1000, 4.0), 1000);
    bench.put("capture.wav", &whole[..5001]);
    let output = bench.command(&["analyse", "capture.wav", "--salvage", "--json"]).output().unwrap();
    assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
    let answer: serde_json::Value = serde_json::from_slice(&output.stdout).unwrap();
    // 44 bytes of header, then 4957 bytes: 2478 whole samples of two bytes.
    assert_eq!(answer["captures"][0]["duration_s"], 2.478);
    assert!(answer["notes"].to_string().contains("cut"), "{}", answer["notes"]);
}

#[test]
fn a_header_cut_in_the_middle() {
    let bench = Bench::new();
    bench.put("capture.wav", &wav(&humming(1000, 4.0), 1000)[..30]);
    bench.refused(&["capture.wav"]);
}

#[test]
fn a_file_that_is_no_wav() {
    let bench = Bench::new();
    bench.put("capture.wav", b"%PDF-1.7 and so on, and so on, and so on, and so on");
    bench.refused(&["capture.wav", "byte", "RIFF"]);
}

#[test]
fn a_compressed_file() {
    let bench = Bench::new();
    bench.put("capture.wav", &wav_of(0x55, 16, 8000, &[0; 32_000]));
    bench.refused(&["capture.wav", "compressed"]);
}

#[test]
fn a_rate_below_100_hz() {
    let bench = Bench::new();
    bench.put("capture.wav", &wav(&humming(99, 4.0), 99));
    bench.refused(&["capture.wav", "99 Hz", "100 Hz"]);
}

#[test]
fn a_capture_shorter_than_a_second() {
    let bench = Bench::new();
    bench.put("capture.wav", &wav(&humming(1000, 0.9), 1000));
    bench.refused(&["capture.wav", "0.9", "1 s"]);
}

#[test]
fn a_channel_that_is_not_there() {
    let bench = Bench::new();
    bench.refused_with(&["--channel", "2"], &["capture.wav", "channel 2"]);
    bench.refused_with(&["--channel", "0"], &["--channel"]);
}

#[test]
fn samples_that_are_not_numbers() {
    let bench = Bench::new();
    let mut samples: Vec<f32> =
        humming(1000, 4.0).iter().map(|&sample| f32::from(sample) / 32768.0).collect();
    samples[1234] = f32::NAN;
    let data: Vec<u8> = samples.iter().flat_map(|sample| sample.to_le_bytes()).collect();
    bench.put("capture.wav", &wav_of(3, 32, 1000, &data));
    // 44 bytes of header, four bytes a sample.
    bench.refused(&["capture.wav", "4980"]);
}

#[test]
fn silence_is_no_mistake_but_nothing_hums() {
    let bench = Bench::new();
    bench.put("capture.wav", &wav(&[0; 4000], 1000));
    bench.run_ends_with(1, &[]);
    let output = bench.command(&["analyse", "capture.wav", "--json"]).output().unwrap();
    assert_eq!(output.status.code(), Some(1));
    let answer: serde_json::Value = serde_json::from_slice(&output.stdout).unwrap();
    assert_eq!(answer["mains"]["found"], false);
}

#[test]
fn a_misspelt_key() {
    let bench = Bench::new();
    bench.put("line.yaml", BRIEF.replace("reduce_by", "reduceby").as_bytes());
    bench.refused(&["line.yaml", "line 8", "reduceby", "reduce_by"]);
}

#[test]
fn a_missing_unit() {
    let bench = Bench::new();
    bench.put("line.yaml", BRIEF.replace("resistance: 350 Ω", "resistance: 350").as_bytes());
    bench.refused(&["line.yaml", "line 3", "resistance", "350", "Ω"]);
}

#[test]
fn a_decimal_comma() {
    let bench = Bench::new();
    bench.put("line.yaml", BRIEF.replace("0.5 dB }", "\"0,5 dB\" }").as_bytes());
    bench.refused(&["line.yaml", "0,5 dB", "0.5"]);
}

#[test]
fn a_keep_band_turned_round() {
    let bench = Bench::new();
    bench.put("line.yaml", BRIEF.replace("from: 0 Hz, to: 12 Hz", "from: 12 Hz, to: 0 Hz").as_bytes());
    bench.refused(&["line.yaml", "keep", "12 Hz", "0 Hz"]);
}

#[test]
fn a_keep_band_with_nothing_left_outside_the_guards() {
    let bench = Bench::new();
    bench.put("line.yaml", BRIEF.replace("from: 0 Hz, to: 12 Hz", "from: 48 Hz, to: 52 Hz").as_bytes());
    bench.refused(&["line.yaml", "keep", "guard"]);
}

#[test]
fn a_brief_that_is_not_there_or_is_no_yaml() {
    let bench = Bench::new();
    bench.put("line.yaml", b"line: [unclosed");
    bench.refused(&["line.yaml", "line 1"]);
    fs::remove_file(bench.at("line.yaml")).unwrap();
    bench.refused(&["line.yaml"]);
}

#[test]
fn an_empty_stock_list() {
    let bench = Bench::new();
    bench.put("line.yaml", format!("{BRIEF}stock: stock.yaml\n").as_bytes());
    bench.put("stock.yaml", b"");
    bench.refused(&["stock.yaml"]);
    bench.put("stock.yaml", b"coils: []\ncapacitors: []\nresistors: []\n");
    bench.refused(&["stock.yaml"]);
    fs::remove_file(bench.at("stock.yaml")).unwrap();
    bench.refused(&["stock.yaml"]);
}

#[test]
fn an_output_folder_that_cannot_be_made() {
    let bench = Bench::new();
    bench.put("out", b"a file");
    let message = bench.run_ends_with(2, &[]);
    assert!(message.contains("out"), "{message}");
    assert_eq!(fs::read(bench.at("out")).unwrap(), b"a file");
}

#[test]
fn a_strangers_file_by_one_of_our_names() {
    for name in ["filtered.wav", "report.html", "plan.yaml", "spectrum.svg"] {
        let bench = Bench::new();
        fs::create_dir(bench.at("out")).unwrap();
        bench.put(&format!("out/{name}"), b"mine");
        let message = bench.run_ends_with(2, &[]);
        assert!(message.contains(name), "{message}");
        let left: Vec<_> = fs::read_dir(bench.at("out")).unwrap().collect();
        assert_eq!(left.len(), 1, "{left:?}");
        assert_eq!(fs::read(bench.at(&format!("out/{name}"))).unwrap(), b"mine");
    }
}

#[test]
fn a_strangers_file_where_one_file_is_to_be_written() {
    let bench = Bench::new();
    bench.put("analysis.yaml", b"mine");
    let output = bench.command(&["analyse", "capture.wav", "--out", "analysis.yaml"]).output().unwrap();
    assert_eq!(output.status.code(), Some(2));
    assert_eq!(fs::read(bench.at("analysis.yaml")).unwrap(), b"mine");
}

#[test]
fn one_file_is_written_again_over_our_own() {
    let bench = Bench::new();
    for _ in 0..2 {
        let output = bench.command(&["analyse", "capture.wav", "--out", "analysis.yaml"]).output().unwrap();
        assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
    }
}

#[test]
fn a_plan_that_is_no_plan() {
    let bench = Bench::new();
    bench.put("plan.yaml", b"met: true\n");
    let arguments = ["simulate", "capture.wav", "--plan", "plan.yaml", "--out", "out"];
    let output = bench.command(&arguments).output().unwrap();
    let message = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(2), "{message}");
    assert!(message.contains("plan.yaml"), "{message}");
    assert!(!bench.at("out").exists());
}

#[test]
fn an_analysis_that_is_no_analysis() {
    let bench = Bench::new();
    bench.put("analysis.yaml", b"mains: soup\n");
    let arguments = ["plan", "--analysis", "analysis.yaml", "--line", "line.yaml", "--out", "plan.yaml"];
    let output = bench.command(&arguments).output().unwrap();
    let message = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(2), "{message}");
    assert!(message.contains("analysis.yaml"), "{message}");
    assert!(!Path::new(&bench.at("plan.yaml")).exists());
}

#[test]
fn usage_at_fault() {
    let bench = Bench::new();
    for arguments in [&["run"][..], &["simulate", "capture.wav"], &["hum"], &[]] {
        assert_eq!(bench.command(arguments).output().unwrap().status.code(), Some(2), "{arguments:?}");
    }
}
