//! What a stock list may hold, and what a wrong one is told.

use std::path::Path;

use notchwright::parts::{Series, Stock};

const GOOD: &str = "\
coils:
  - { inductance: 1 H, resistance: 45 Ω, tolerance: 5 %, resonance: 18 kHz, number: A-1, price: 6.50 }
capacitors:
  - { dielectric: film, series: E12, from: 1n, to: 4u7, tolerance: 5 %, loss: 0.0005, drift: -250 ppm/K }
resistors:
  - { kind: metal film, series: E96, from: 10R, to: 1M, tolerance: 1 %, power: 0.25 W }
trimmers:
  - { kind: cermet, values: [100 Ω, 2K], resolution: 0.5 % }
";

fn read(text: &str) -> Result<Stock, notchwright::parts::YamlError> {
    Stock::from_text(Path::new("stock.yaml"), text)
}

fn assert_said(from: &str, to: &str, line: usize, key: &str, words: &[&str]) {
    assert!(GOOD.contains(from), "{from}");
    let said = read(&GOOD.replacen(from, to, 1)).expect_err("a wrong list").to_string();
    let place = format!("stock.yaml, line {line}, key `{key}`: ");
    assert!(said.starts_with(&place), "{said}\ndoes not begin with {place}");
    for word in words {
        assert!(said.contains(word), "{said}\nlacks {word}");
    }
}

#[test]
fn a_list_reads_with_units_letter_codes_and_defaults() {
    let stock = read(GOOD).unwrap();
    let coil = &stock.coils[0];
    assert_eq!((coil.inductance_h, coil.resistance_ohm, coil.tolerance), (1.0, 45.0, 0.05));
    // Copper at 20 °C drifts +0.39 %/K (common practice) unless the list says otherwise.
    assert_eq!((coil.resistance_drift_per_k, coil.drift_per_k, coil.current_a), (0.0039, 0.0, None));
    assert_eq!((coil.number.as_deref(), coil.price), (Some("A-1"), Some(6.5)));
    let capacitor = &stock.capacitors[0];
    assert_eq!((capacitor.series, capacitor.from_f, capacitor.to_f), (Series(12), 1e-9, 4.7e-6));
    assert_eq!((capacitor.loss, capacitor.drift_per_k), (0.0005, -250e-6));
    assert_eq!((stock.resistors[0].from_ohm, stock.resistors[0].to_ohm), (10.0, 1e6));
    assert_eq!(stock.trimmers[0].values_ohm, [100.0, 2000.0]);
    assert_eq!(stock.path.as_deref(), Some("stock.yaml"));
    assert_eq!(stock.remark(), None);
}

#[test]
fn the_built_in_list_holds_typical_coils_up_to_ten_henry() {
    let stock = Stock::built_in();
    let inductances: Vec<f64> = stock.coils.iter().map(|coil| coil.inductance_h).collect();
    assert_eq!((inductances[0], inductances[inductances.len() - 1]), (10e-3, 10.0));
    for coil in stock.coils.iter().filter(|coil| coil.inductance_h >= 2.0) {
        assert!((7.0..=10.0).contains(&coil.q(50.0)), "{} H: Q {}", coil.inductance_h, coil.q(50.0));
    }
    assert!(stock.coils.iter().all(|coil| coil.price.is_none() && coil.number.is_none()));
    assert!(stock.remark().unwrap().contains("no maker's"));
}

#[test]
fn a_list_without_coils_still_serves_networks_without_coils() {
    let without: String = GOOD.lines().skip(2).map(|line| format!("{line}\n")).collect();
    assert!(read(&without).unwrap().coils.is_empty());
}

#[test]
fn an_empty_stock_list_is_told_what_is_missing() {
    let said = read("coils: []\ncapacitors: []\n").expect_err("nothing on it").to_string();
    assert!(said.starts_with("stock.yaml, line 2, key `capacitors`: "), "{said}");
    assert!(said.contains("no coils, no capacitors, no resistors"), "{said}");
    let said = read("\n").expect_err("nothing in it").to_string();
    assert!(said.contains("holds no keys"), "{said}");
    let only_capacitors: String = GOOD.lines().skip(2).take(2).map(|line| format!("{line}\n")).collect();
    let said = read(&only_capacitors).expect_err("capacitors alone").to_string();
    assert!(said.contains("no coils, no resistors") && said.contains("coils or resistors"), "{said}");
}

#[test]
fn wrong_entries_are_placed_and_told_what_would_do() {
    let cases: [(&str, &str, usize, &str, &[&str]); 12] = [
        (
            "inductance: 1 H",
            "inductance: 1",
            2,
            "coils[0].inductance",
            &["read `1`", "an inductance", "`1 H`"],
        ),
        ("inductance: 1 H", "inductance: 0 H", 2, "coils[0].inductance", &["read 0 H", "more than zero"]),
        ("resonance", "resonnance", 2, "coils[0].resonnance", &["did you mean `resonance`?"]),
        ("tolerance: 5 %", "tolerance: 120 %", 2, "coils[0].tolerance", &["read 120 %", "below 100 %"]),
        ("price: 6.50", "price: -1", 2, "coils[0].price", &["read -1", "`0.60`"]),
        ("series: E12", "series: E13", 4, "capacitors[0].series", &["read `E13`", "E12"]),
        ("loss: 0.0005", "loss: low", 4, "capacitors[0].loss", &["read `low`", "`0.0005`"]),
        (
            "from: 1n, to: 4u7",
            "from: 4u7, to: 1n",
            4,
            "capacitors[0].from",
            &["4.7 µF to 1 nF", "turned round"],
        ),
        ("to: 1M", "to: 1 mF", 6, "resistors[0].to", &["which is a capacitance", "a resistance"]),
        ("[100 Ω, 2K]", "[]", 8, "trimmers[0].values", &["empty"]),
        ("[100 Ω, 2K]", "[100 Ω, 2]", 8, "trimmers[0].values[1]", &["read `2`", "`2 Ω`"]),
        ("resolution: 0.5 %", "resolution: 0 %", 8, "trimmers[0].resolution", &["read 0 %", "`0.5 %`"]),
    ];
    for (from, to, line, key, words) in cases {
        assert_said(from, to, line, key, words);
    }
}

#[test]
fn a_stock_list_that_cannot_be_read_is_named() {
    let said = Stock::read(Path::new("no-such-stock.yaml")).expect_err("no file").to_string();
    assert!(said.starts_with("no-such-stock.yaml: "), "{said}");
}
