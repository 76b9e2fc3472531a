//! The whole job on the demo of the sluice house, as a user runs it.

mod nodal;

use std::fs;
use std::path::Path;
use std::process::Output;

use assert_cmd::Command;
use serde_json::Value;

const FILES: [&str; 14] = [
    "analysis.yaml",
    "plan.yaml",
    "netlist.txt",
    "parts.csv",
    "simulation.yaml",
    "filtered.wav",
    "removed.wav",
    "report.html",
    "spectrum.svg",
    "response.svg",
    "track.svg",
    "level.svg",
    "harmonics.svg",
    "schematic.svg",
];

fn notchwright(arguments: &[&str]) -> Output {
    Command::cargo_bin("notchwright").unwrap().args(arguments).output().unwrap()
}

fn in_home(home: &Path, name: &str) -> String {
    home.join(name).to_str().unwrap().to_owned()
}

fn json(output: &Output) -> Value {
    serde_json::from_slice(&output.stdout).expect("one JSON object on standard output")
}

fn run_tide_gauge(out: &str) -> Output {
    notchwright(&[
        "run",
        "demo-audio/tide-gauge.wav",
        "--line",
        "examples/tide-gauge.yaml",
        "--out",
        out,
        "--json",
    ])
}

#[test]
fn the_sluice_house_line_is_cured_and_the_netlist_alone_proves_it() {
    let home = tempfile::tempdir().unwrap();
    let out = in_home(home.path(), "out");
    let output = run_tide_gauge(&out);
    assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
    let answer = json(&output);

    for name in FILES {
        assert!(home.path().join("out").join(name).metadata().unwrap().len() > 0, "{name} is empty");
    }
    assert_eq!(answer["plan"]["met"], true);
    assert_eq!(answer["simulation"]["met"], true);

    let netlist = fs::read_to_string(home.path().join("out/netlist.txt")).unwrap();
    let line = nodal::Nodal::read(&netlist);
    let predicted = answer["plan"]["predicted"].as_array().unwrap();
    assert!(!predicted.is_empty());
    for order in predicted {
        let frequency_hz = order["frequency_hz"].as_f64().unwrap();
        let reduction_db = -20.0 * line.insertion(&netlist, frequency_hz).norm().log10();
        let said_db = order["reduction_db"].as_f64().unwrap();
        assert!(
            (reduction_db - said_db).abs() < 1e-6,
            "order {}: {reduction_db} dB, said {said_db} dB",
            order["order"]
        );
    }
    for order in answer["simulation"]["residual"].as_array().unwrap() {
        let frequency_hz = order["frequency_hz"].as_f64().unwrap();
        let reduction_db = -20.0 * line.insertion(&netlist, frequency_hz).norm().log10();
        assert!((reduction_db - order["predicted_db"].as_f64().unwrap()).abs() < 1e-3, "{order}");
    }
    // The keep band of the brief: 0 to 12 Hz within 0.5 dB, at DC too.
    for tenth in 0..=120 {
        let loss_db = -20.0 * line.insertion(&netlist, f64::from(tenth) / 10.0).norm().log10();
        assert!(loss_db.abs() <= 0.5, "{loss_db} dB at {} Hz", f64::from(tenth) / 10.0);
    }
}

#[test]
fn a_second_run_refills_the_folder_with_the_same_answer() {
    let home = tempfile::tempdir().unwrap();
    let out = in_home(home.path(), "out");
    let first = run_tide_gauge(&out);
    let files: Vec<_> = FILES.map(|name| fs::read(home.path().join("out").join(name)).unwrap()).into();
    let second = run_tide_gauge(&out);
    assert_eq!(json(&first), json(&second));
    for (name, before) in FILES.iter().zip(files) {
        assert!(fs::read(home.path().join("out").join(name)).unwrap() == before, "{name} differs");
    }
}

#[test]
fn a_line_quiet_enough_for_its_brief_is_told_to_buy_nothing() {
    let home = tempfile::tempdir().unwrap();
    let [out, brief] = ["out", "brief.yaml"].map(|name| in_home(home.path(), name));
    let text = fs::read_to_string("examples/tide-gauge.yaml").unwrap();
    let [from, to] = ["reduce_by: 40 dB", "leave: 1 V"];
    assert!(text.contains(from));
    let stock = fs::canonicalize("examples/bench-stock.yaml").unwrap();
    let text = text.replace(from, to).replace("bench-stock.yaml", stock.to_str().unwrap());
    fs::write(&brief, text).unwrap();
    let arguments = ["run", "demo-audio/tide-gauge.wav", "--line", &brief, "--out", &out];

    let output = notchwright(&arguments);
    let printed = String::from_utf8(output.stdout).unwrap();
    assert_eq!(output.status.code(), Some(0), "{printed}");
    assert!(printed.starts_with("Met without a filter"), "{printed}");
    assert!(!printed.contains("Heard through"), "{printed}");

    let answer = json(&notchwright(&[&arguments[..], &["--json"]].concat()));
    assert_eq!(answer["plan"]["parts"], Value::Array(Vec::new()));
    for order in answer["simulation"]["residual"].as_array().unwrap() {
        assert!(order["predicted_db"].as_f64().unwrap().abs() < 1e-9, "{order}");
    }
    let before = fs::read("demo-audio/tide-gauge.wav").unwrap();
    let after = fs::read(home.path().join("out/filtered.wav")).unwrap();
    assert_eq!(before.len(), after.len());
    for name in FILES {
        assert!(home.path().join("out").join(name).metadata().unwrap().len() > 0, "{name} is empty");
    }
}

#[test]
fn the_commands_one_by_one_give_what_run_gives() {
    let home = tempfile::tempdir().unwrap();
    let [out, analysis, plan, netlist, heard] =
        ["out", "analysis.yaml", "plan.yaml", "netlist.txt", "heard"].map(|name| in_home(home.path(), name));
    let whole = json(&run_tide_gauge(&out));
    let brief = "examples/tide-gauge.yaml";
    let capture = "demo-audio/tide-gauge.wav";

    let analysed = notchwright(&["analyse", capture, "--line", brief, "--out", &analysis, "--json"]);
    assert_eq!(analysed.status.code(), Some(0));
    assert_eq!(json(&analysed), whole["analysis"]);

    let planned = notchwright(&[
        "plan",
        "--analysis",
        &analysis,
        "--line",
        brief,
        "--out",
        &plan,
        "--netlist",
        &netlist,
        "--json",
    ]);
    assert_eq!(planned.status.code(), Some(0), "{}", String::from_utf8_lossy(&planned.stderr));
    assert_eq!(json(&planned)["parts"], whole["plan"]["parts"]);
    assert_eq!(fs::read(&netlist).unwrap(), fs::read(home.path().join("out/netlist.txt")).unwrap());

    let simulated = notchwright(&["simulate", capture, "--plan", &plan, "--out", &heard, "--json"]);
    assert_eq!(simulated.status.code(), Some(0), "{}", String::from_utf8_lossy(&simulated.stderr));
    assert_eq!(json(&simulated)["residual"], whole["simulation"]["residual"]);
    assert!(home.path().join("heard/filtered.wav").exists());
}

#[test]
fn the_json_holds_every_key_of_the_contract() {
    let home = tempfile::tempdir().unwrap();
    let answer = json(&run_tide_gauge(&in_home(home.path(), "out")));
    let contract: [(&str, &[&str]); 15] = [
        (
            "/analysis/captures/0",
            &[
                "path",
                "sample_rate_hz",
                "channels",
                "channel",
                "duration_s",
                "full_scale_v",
                "clipped_samples",
            ],
        ),
        (
            "/analysis/mains",
            &[
                "found",
                "nominal_hz",
                "frequency_hz",
                "frequency_se_hz",
                "spread_hz",
                "spread_floor_hz",
                "confidence",
            ],
        ),
        (
            "/analysis/harmonics/0",
            &["order", "frequency_hz", "level_dbfs", "rms_v", "phase_deg", "over_floor_db"],
        ),
        ("/analysis/track/0", &["time_s", "frequency_hz", "se_hz"]),
        (
            "/analysis/causes/0",
            &["cause", "evidence", "first_cure", "confidence", "look_first", "tell_apart"],
        ),
        ("/analysis", &["other_supplies"]),
        (
            "/plan",
            &[
                "met",
                "sections",
                "parts",
                "q_windows",
                "predicted",
                "keep",
                "flat_loss_db",
                "trims",
                "builds",
                "alternatives",
            ],
        ),
        ("/plan/sections/0", &["kind", "order", "notch_hz", "q", "depth_db", "parts"]),
        ("/plan/parts/0", &["ref", "kind", "value", "value_si", "tolerance_pct"]),
        ("/plan/q_windows/0", &["order", "q_min", "q_max", "q_chosen", "closed_by"]),
        ("/plan/predicted/0", &["order", "frequency_hz", "reduction_db", "reduction_worst_db"]),
        ("/plan/keep/0", &["from_hz", "to_hz", "allowed_db", "loss_db", "loss_worst_db"]),
        ("/plan/builds", &["count", "seed", "meeting_pct"]),
        ("/simulation", &["residual", "keep", "settling_s", "headroom_gained_db"]),
        ("/simulation/residual/0", &["order", "before_dbfs", "after_dbfs", "reduction_db", "predicted_db"]),
    ];
    for (place, keys) in contract {
        let object = answer.pointer(place).unwrap_or_else(|| panic!("no {place}"));
        for key in keys {
            assert!(object.get(key).is_some(), "no `{key}` at {place}");
        }
    }
    assert!(answer["plan"]["alternatives"].as_array().unwrap().len() >= 2);
}

#[test]
fn a_recording_without_hum_is_not_said_to_meet_the_brief() {
    let home = tempfile::tempdir().unwrap();
    let [out, heard, quiet] = ["out", "heard", "quiet.wav"].map(|name| in_home(home.path(), name));
    run_tide_gauge(&out);
    let spec = hound::WavSpec {
        channels: 1,
        sample_rate: 1000,
        bits_per_sample: 16,
        sample_format: hound::SampleFormat::Int,
    };
    let mut writer = hound::WavWriter::create(&quiet, spec).unwrap();
    let mut state = 1_u32;
    for _ in 0..10_000 {
        state = state.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
        writer.write_sample((state >> 20) as i16 - 2048).unwrap();
    }
    writer.finalize().unwrap();
    let plan = format!("{out}/plan.yaml");
    let output = notchwright(&["simulate", &quiet, "--plan", &plan, "--out", &heard]);
    let printed = String::from_utf8(output.stdout).unwrap();
    assert_eq!(output.status.code(), Some(1), "{printed}");
    assert!(printed.contains("no mains hum was found"), "{printed}");
    assert!(!printed.contains("meets the brief"), "{printed}");
}
