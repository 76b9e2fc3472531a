//! What a line brief and its stock list may hold, and what a wrong one is told.

use std::fs;
use std::path::{Path, PathBuf};

use notchwright::parts::Stock;
use notchwright::plan::{Centre, LineBrief, ReductionTarget};
use proptest::prelude::*;
use tempfile::TempDir;

const GOOD: &str = "\
line: Gauge
full_scale: 2 V
source: { resistance: 350 Ω }
load: { resistance: 1 MΩ, capacitance: 220 pF }
keep:
  - { from: 0 Hz, to: 12 Hz, loss: 0.5 dB }
hum:
  reduce_by: 40 dB
  orders: [1, 3]
temperature: { from: 10 °C, to: 35 °C }
";

fn example(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("examples").join(name)
}

/// What is said of `GOOD` with `from` replaced by `to`; `from` must be there.
fn said(from: &str, to: &str) -> String {
    assert!(GOOD.contains(from), "{from}");
    let text = GOOD.replacen(from, to, 1);
    LineBrief::from_text(Path::new("line.yaml"), &text).expect_err("a wrong brief").to_string()
}

/// Asserts that the message names the file, the line, the key, what was read and what would do.
fn assert_said(from: &str, to: &str, line: usize, key: &str, words: &[&str]) {
    let said = said(from, to);
    let place = format!("line.yaml, line {line}, key `{key}`: ");
    assert!(said.starts_with(&place), "{said}\ndoes not begin with {place}");
    for word in words {
        assert!(said.contains(word), "{said}\nlacks {word}");
    }
}

#[test]
fn the_tide_gauge_brief_reads_as_the_design_has_it() {
    let path = example("tide-gauge.yaml");
    let brief = LineBrief::read(&path).unwrap();
    assert_eq!(brief.line, "Sluice house tide gauge, pressure cell 2");
    assert_eq!(brief.full_scale_v, 2.0);
    assert_eq!(brief.source.resistance_ohm, 350.0);
    assert_eq!((brief.load.resistance_ohm, brief.load.capacitance_f), (1e6, 220e-12));
    let band = brief.keep[0];
    assert_eq!((band.from_hz, band.to_hz, band.allowed_db), (0.0, 12.0, 0.5));
    assert_eq!(brief.target, ReductionTarget::ReduceByDb(40.0));
    assert_eq!(brief.orders, Some(vec![1, 3]));
    assert_eq!((brief.allow_hz, brief.guard_hz, brief.centre), (0.2, 5.0, Centre::Nominal));
    assert_eq!((brief.temperature_from_c, brief.temperature_to_c), (10.0, 35.0));
    let stock = brief.stock(&path).unwrap();
    let largest = stock.coils.iter().max_by(|a, b| a.inductance_h.total_cmp(&b.inductance_h)).unwrap();
    assert_eq!((largest.inductance_h, largest.resistance_ohm), (10.0, 300.0));
    assert!((10.0..11.0).contains(&largest.q(50.0)));
}

#[test]
fn the_rehearsal_room_brief_and_its_stock_read() {
    let path = example("rehearsal-room.yaml");
    let brief = LineBrief::read(&path).unwrap();
    brief.check_keep_bands(&path, 60.0, &[1, 3, 5]).unwrap();
    assert!(brief.stock(&path).unwrap().path.is_some());
}

#[test]
fn what_a_brief_leaves_out_takes_its_default() {
    let short: String = GOOD.lines().take(8).map(|line| format!("{line}\n")).collect();
    let brief = LineBrief::from_text(Path::new("line.yaml"), &short).unwrap();
    assert_eq!(brief.orders, None);
    assert_eq!((brief.allow_hz, brief.guard_hz, brief.centre), (0.2, 5.0, Centre::Nominal));
    assert_eq!((brief.temperature_from_c, brief.temperature_to_c), (10.0, 35.0));
    let stock = brief.stock(Path::new("line.yaml")).unwrap();
    assert_eq!(stock, Stock::built_in());
    assert!(stock.remark().unwrap().contains("typical values"));
}

#[test]
fn a_level_to_leave_reads_in_volts_and_in_dbfs() {
    let target = |text: &str| {
        let text = GOOD.replace("reduce_by: 40 dB", text);
        LineBrief::from_text(Path::new("line.yaml"), &text).unwrap().target
    };
    assert_eq!(target("leave: 20 µV"), ReductionTarget::LeaveV(20e-6));
    assert_eq!(target("leave: -90 dBFS"), ReductionTarget::LeaveDbfs(-90.0));
}

#[test]
fn full_scale_in_dbu_is_the_sine_that_reaches_it() {
    // +24 dBu is 12.28 V RMS, 17.36 V peak (0 dBu = √0.6 V, common practice).
    let text = GOOD.replace("full_scale: 2 V", "full_scale: +24 dBu");
    let brief = LineBrief::from_text(Path::new("line.yaml"), &text).unwrap();
    assert!((brief.full_scale_v - 17.36).abs() < 0.01, "{}", brief.full_scale_v);
}

#[test]
fn misspelt_keys_are_told_the_nearest_right_one() {
    assert_said("full_scale", "ful_scale", 2, "ful_scale", &["did you mean `full_scale`?"]);
    assert_said("loss: 0.5 dB", "los: 0.5 dB", 6, "keep[0].los", &["did you mean `loss`?"]);
    assert_said("reduce_by", "reduce-by", 8, "hum.reduce-by", &["did you mean `reduce_by`?"]);
    assert_said("orders", "colour", 9, "hum.colour", &["is not a key here", "`guard`"]);
}

#[test]
fn a_missing_unit_is_told_which_is_wanted() {
    assert_said("to: 12 Hz", "to: 12", 6, "keep[0].to", &["read `12`", "no unit", "a frequency", "`12 Hz`"]);
    assert_said("2 V", "2", 2, "full_scale", &["read `2`", "a voltage", "`2 V`"]);
    assert_said("reduce_by: 40 dB", "leave: 20", 8, "hum.leave", &["read `20`", "`20 V` or `-90 dBFS`"]);
}

#[test]
fn a_unit_of_the_wrong_kind_is_named() {
    assert_said(
        "350 Ω",
        "350 pF",
        3,
        "source.resistance",
        &["read `350 pF`", "a capacitance", "a resistance"],
    );
}

#[test]
fn a_decimal_comma_gets_a_hint() {
    assert_said("loss: 0.5 dB", "loss: 0,5 dB", 6, "keep[0].loss", &["read `0`", "decimal point: `0.5 dB`"]);
    assert_said(
        "reduce_by: 40 dB",
        "reduce_by: 39,5 dB",
        8,
        "hum.reduce_by",
        &["decimal comma", "`39.5 dB`"],
    );
}

#[test]
fn a_missing_key_is_shown_as_one_would_write_it() {
    assert_said("full_scale: 2 V\n", "", 1, "full_scale", &["is missing", "`full_scale: 2 V`"]);
    assert_said(", loss: 0.5 dB", "", 6, "keep[0].loss", &["is missing", "`loss: 0.5 dB`"]);
    assert_said("resistance: 1 MΩ, ", "", 4, "load.resistance", &["is missing", "`resistance: 1 MΩ`"]);
}

#[test]
fn a_keep_band_turned_round_is_told() {
    let words = ["read from 12 Hz to 0 Hz", "turned round", "lower frequency at `from`"];
    assert_said("from: 0 Hz, to: 12 Hz", "from: 12 Hz, to: 0 Hz", 6, "keep[0].to", &words);
    assert_said("from: 0 Hz", "from: 12 Hz", 6, "keep[0].to", &["no width"]);
}

#[test]
fn a_keep_band_within_the_guards_is_told() {
    let bands = "  - { from: 0 Hz, to: 12 Hz, loss: 0.5 dB }\n";
    let narrow = format!("{bands}  - {{ from: 45 Hz, to: 65 Hz, loss: 3 dB }}\n");
    // 45 to 65 Hz lies within ± 16 Hz of 50 Hz and of 60 Hz alike.
    let text = GOOD.replace(bands, &narrow).replace("orders: [1, 3]", "orders: [1, 3]\n  guard: 16 Hz");
    let said = LineBrief::from_text(Path::new("line.yaml"), &text).expect_err("nothing left").to_string();
    assert!(said.starts_with("line.yaml, line 7, key `keep[1]`: read from 45 Hz to 65 Hz"), "{said}");
    assert!(said.contains("± 16 Hz") && said.contains("widen the band, or lower `guard`"), "{said}");
}

#[test]
fn a_keep_band_within_the_guards_is_told_once_the_lines_are_known() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("line.yaml");
    fs::write(&path, GOOD.replace("from: 0 Hz, to: 12 Hz", "from: 46 Hz, to: 54 Hz")).unwrap();
    let brief = LineBrief::read(&path).unwrap();
    brief.check_keep_bands(&path, 60.0, &[1, 3]).expect("60 Hz leaves it alone");
    let said = brief.check_keep_bands(&path, 50.0, &[1, 3]).expect_err("all within the guard").to_string();
    assert!(said.contains("line.yaml, line 6, key `keep[0]`: read from 46 Hz to 54 Hz"), "{said}");
    assert!(said.contains("50 Hz hum") && said.contains("lower `guard`"), "{said}");
}

#[test]
fn negative_and_zero_values_are_refused() {
    assert_said("2 V", "-2 V", 2, "full_scale", &["read -2 V", "more than zero", "`2 V`"]);
    assert_said("350 Ω", "-350 Ω", 3, "source.resistance", &["read -350 Ω", "zero or more"]);
    assert_said("1 MΩ", "0 Ω", 4, "load.resistance", &["read 0 Ω", "more than zero"]);
    assert_said("220 pF", "-220 pF", 4, "load.capacitance", &["read -220 pF", "zero or more"]);
    assert_said("from: 0 Hz", "from: -1 Hz", 6, "keep[0].from", &["read -1", "zero or more"]);
    assert_said("loss: 0.5 dB", "loss: 0 dB", 6, "keep[0].loss", &["read 0 dB", "always loses something"]);
    assert_said("reduce_by: 40 dB", "reduce_by: -40 dB", 8, "hum.reduce_by", &["read -40 dB", "`40 dB`"]);
    assert_said("reduce_by: 40 dB", "leave: 0 V", 8, "hum.leave", &["read 0 V", "`20 µV`"]);
    assert_said("reduce_by: 40 dB", "leave: 3 dBFS", 8, "hum.leave", &["read 3 dBFS", "`-90 dBFS`"]);
    assert_said("orders: [1, 3]", "guard: -5 Hz", 9, "hum.guard", &["read -5 Hz", "zero or more"]);
    assert_said("orders: [1, 3]", "allow: -1 Hz", 9, "hum.allow", &["read -1", "zero or more"]);
}

#[test]
fn orders_that_cannot_be_are_refused() {
    assert_said("[1, 3]", "[0, 3]", 9, "hum.orders[0]", &["read 0", "from 1, the fundamental"]);
    assert_said("[1, 3]", "[1, 3, 1]", 9, "hum.orders[2]", &["read 1", "twice"]);
    assert_said("[1, 3]", "[]", 9, "hum.orders", &["empty", "`[1, 3]`"]);
    assert_said("[1, 3]", "[1.5]", 9, "hum.orders[0]", &["1.5"]);
}

#[test]
fn a_target_twice_or_not_at_all_is_refused() {
    assert_said("orders: [1, 3]", "leave: 20 µV", 9, "hum.leave", &["beside `reduce_by`", "write one of"]);
    assert_said("  reduce_by: 40 dB\n", "", 8, "hum.reduce_by", &["neither", "write one of"]);
}

#[test]
fn temperatures_turned_round_or_impossible_are_refused() {
    let words = ["read from 35 °C to 10 °C", "turned round", "coldest at `from`"];
    assert_said("from: 10 °C, to: 35 °C", "from: 35 °C, to: 10 °C", 10, "temperature.to", &words);
    assert_said("from: 10 °C", "from: -300 °C", 10, "temperature.from", &["below absolute zero"]);
}

#[test]
fn a_centre_of_another_name_is_refused() {
    assert_said(
        "orders: [1, 3]",
        "centre: middle",
        9,
        "hum.centre",
        &["read `middle`", "`nominal`", "`measured`"],
    );
}

#[test]
fn values_of_the_wrong_shape_are_shown_the_right_one() {
    let source = "source: { resistance: 350 Ω }";
    assert_said(
        source,
        "source: 350 Ω",
        3,
        "source",
        &["read `350 Ω`", "wanted keys", "`source: { resistance"],
    );
    assert_said("[1, 3]", "1", 9, "hum.orders", &["read `1`", "wanted a list", "`orders: [1, 3]`"]);
    assert_said("[1, 3]", "[-1]", 9, "hum.orders[0]", &["read `-1`", "a whole number"]);
}

#[test]
fn a_brief_that_is_not_utf8_is_told_how_to_be() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("line.yaml");
    fs::write(&path, b"line: Gauge\nfull_scale: 2 V\nsource: { resistance: 350 \xd9 }\n").unwrap();
    let said = LineBrief::read(&path).expect_err("not UTF-8").to_string();
    assert!(said.contains("line.yaml, line 3: byte 55 is not UTF-8") && said.contains("`ohm`"), "{said}");
}

#[test]
fn empty_lists_and_files_are_refused() {
    assert_said(
        "keep:\n  - { from: 0 Hz, to: 12 Hz, loss: 0.5 dB }",
        "keep: []",
        5,
        "keep",
        &["empty", "0.5 dB"],
    );
    let said = LineBrief::from_text(Path::new("line.yaml"), "").expect_err("an empty brief").to_string();
    assert!(said.starts_with("line.yaml: ") && said.contains("holds no keys"), "{said}");
}

#[test]
fn a_brief_that_is_not_there_is_named() {
    let said = LineBrief::read(Path::new("no-such-line.yaml")).expect_err("no file").to_string();
    assert!(said.starts_with("no-such-line.yaml: ") && said.contains("line brief"), "{said}");
}

#[test]
fn a_stock_list_that_is_not_there_is_placed_to_its_key_in_the_brief() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("line.yaml");
    fs::write(&path, format!("{GOOD}stock: gone.yaml\n")).unwrap();
    let said = LineBrief::read(&path).unwrap().stock(&path).expect_err("no stock list").to_string();
    assert!(said.contains("line.yaml, line 11, key `stock`: read `gone.yaml`"), "{said}");
    assert!(said.contains("beside the brief") && said.contains("built-in list"), "{said}");
}

#[test]
fn a_stock_list_is_looked_for_beside_the_brief() {
    let folder = TempDir::new().unwrap();
    let path = folder.path().join("line.yaml");
    fs::write(&path, format!("{GOOD}stock: mine.yaml\n")).unwrap();
    fs::copy(example("bench-stock.yaml"), folder.path().join("mine.yaml")).unwrap();
    assert!(!LineBrief::read(&path).unwrap().stock(&path).unwrap().coils.is_empty());
}

#[test]
fn a_brief_survives_being_carried_in_a_plan() {
    let brief = LineBrief::read(&example("tide-gauge.yaml")).unwrap();
    let path = Path::new("plan.yaml");
    let text = notchwright::parts::yaml::write(path, &brief).unwrap();
    assert_eq!(notchwright::parts::yaml::read::<LineBrief>(path, &text).unwrap(), brief);
}

proptest! {
    #[test]
    fn a_brief_with_a_slip_in_it_reads_or_is_told_its_line(
        at in 0usize..GOOD.chars().count(),
        slip in prop_oneof![Just(None), any::<char>().prop_map(Some)],
    ) {
        let kept = GOOD.chars().take(at).chain(slip).chain(GOOD.chars().skip(at + 1));
        let text: String = kept.collect();
        // A slip may break a line in two, and the end of the file is one past its last line.
        let last_line = GOOD.lines().count() + 2;
        if let Err(error) = LineBrief::from_text(Path::new("line.yaml"), &text) {
            prop_assert!(error.line.is_some_and(|line| line <= last_line), "{}", error);
            prop_assert!(error.to_string().starts_with("line.yaml, line "), "{}", error);
        }
    }
}
