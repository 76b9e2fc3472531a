//! The bench sheet: what to fit in which order, and what to read after each step.

use serde::Serialize;

use super::Material;
use super::partslist::{unit, value, value_with_tolerance, word};
use super::wording::{decibel, hertz, hertz_short, listing, si};
use crate::network::{Branch, Circuit, TwoPort};
use crate::parts::{Part, PartKind};
use crate::plan::BandPoint;

/// One step of the assembly.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub(super) struct Step {
    pub title: String,
    /// What to do, one line each.
    pub work: Vec<String>,
    /// What to read before going on.
    pub reading: String,
}

/// One check frequency with what a meter should show.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub(super) struct Reading {
    pub frequency: String,
    pub why: String,
    /// With nominal parts, against the line without the filter.
    pub nominal: String,
    /// Where 95 % of builds lie.
    pub builds: String,
    /// Volts at the load for one volt of generator EMF.
    pub volts: String,
}

/// Parts of the same kind and value to buy together.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub(super) struct Purchase {
    pub count: usize,
    pub what: String,
    pub number: String,
    pub references: String,
}

/// What to buy: equal parts together, in the order of first use.
pub(super) fn purchases(parts: &[Part]) -> Vec<Purchase> {
    let mut groups: Vec<(&Part, Vec<&str>)> = Vec::new();
    for part in parts {
        let same = |other: &Part| {
            (other.kind, value(other), &other.material, &other.number)
                == (part.kind, value(part), &part.material, &part.number)
        };
        match groups.iter_mut().find(|(first, _)| same(first)) {
            Some((_, references)) => references.push(&part.reference),
            None => groups.push((part, vec![&part.reference])),
        }
    }
    groups
        .into_iter()
        .map(|(part, references)| Purchase {
            count: references.len(),
            what: [
                Some(format!("{} {}", word(part.kind), value_with_tolerance(part))),
                part.material.clone(),
                part.voltage_limit_v.map(|v| format!("{} or more", si(v, "V", 2))),
            ]
            .into_iter()
            .flatten()
            .collect::<Vec<_>>()
            .join(", "),
            number: part.number.clone().unwrap_or_default(),
            references: listing(&references),
        })
        .collect()
}

/// The steps of the assembly: check the parts, fit section by section, trim.
pub(super) fn steps(material: &Material) -> Vec<Step> {
    let circuit = &material.plan.design.circuit;
    let reading = if material.plan.design.trims.is_empty() {
        "Readings with generator and load in place, for nominal parts."
    } else {
        "Readings with generator and load in place, for nominal parts and trims as planned; a notch is found only \
         after its trim."
    };
    let mut steps = vec![Step {
        title: "Check the parts before they are fitted".to_owned(),
        work: circuit.parts.iter().map(check_part).collect(),
        reading:
            "A part outside its tolerance goes back. Write the reading beside its reference: it tells later \
                  which part a wrong response comes from."
                .to_owned(),
    }];
    for (n, section) in circuit.sections.iter().enumerate() {
        steps.push(Step {
            title: format!("Fit section {}: {}", n + 1, section.kind),
            work: (0..section.stages.len()).map(|last| fit_and_read(material, n, last)).collect(),
            reading: reading.to_owned(),
        });
    }
    steps
}

/// How the stage `last` of section `n` is fitted, and what the meter shows then.
fn fit_and_read(material: &Material, n: usize, last: usize) -> String {
    let circuit = &material.plan.design.circuit;
    let mut sections = circuit.sections[..=n].to_vec();
    sections[n].stages.truncate(last + 1);
    let words = stage_words(&circuit.sections[n].stages[last], &circuit.parts);
    let built = Circuit { sections, ..circuit.clone() };
    format!("{}. Then: {}.", capitalised(&words), reading_so_far(material, &built, n))
}

/// What to measure on one part.
fn check_part(part: &Part) -> String {
    let name = format!("{}, {} {}", part.reference, word(part.kind), value(part));
    let spread = part.tolerance_pct / 100.0;
    let (low, high) = (part.value_si * (1.0 - spread), part.value_si * (1.0 + spread));
    let range = |unit: &str| {
        if spread > 0.0 { format!("{} to {}", si(low, unit, 3), si(high, unit, 3)) } else { si(low, unit, 3) }
    };
    match part.kind {
        PartKind::Coil => format!(
            "{name}: winding about {} on an ohmmeter at room temperature; inductance {} measured near the hum's \
             frequency, not at 1 kHz.",
            si(part.series_resistance_ohm, "Ω", 3),
            range("H")
        ),
        PartKind::Trimmer => format!(
            "{name}: whole track {}; set to {} before it is fitted.",
            range("Ω"),
            si(part.setting_ohm.unwrap_or(part.value_si), "Ω", 3)
        ),
        PartKind::Resistor | PartKind::Capacitor => format!("{name}: {}.", range(unit(part.kind))),
    }
}

fn capitalised(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or(String::new(), |first| first.to_uppercase().chain(letters).collect())
}

fn stage_words(stage: &TwoPort, parts: &[Part]) -> String {
    match stage {
        TwoPort::Series { series } => format!("in the line: {}", branch_words(series, parts)),
        TwoPort::Shunt { shunt } => format!("from the line to ground: {}", branch_words(shunt, parts)),
        TwoPort::Beside { beside } => {
            let paths: Vec<String> = beside
                .iter()
                .map(|path| {
                    let stages: Vec<String> = path.iter().map(|stage| stage_words(stage, parts)).collect();
                    format!("({})", stages.join("; then "))
                })
                .collect();
            format!("side by side between the same two points: {}", paths.join(" and "))
        }
    }
}

fn branch_words(branch: &Branch, parts: &[Part]) -> String {
    let inner = |branches: &[Branch]| -> Vec<String> {
        branches
            .iter()
            .map(|b| match b {
                Branch::Part(_) => branch_words(b, parts),
                _ => format!("({})", branch_words(b, parts)),
            })
            .collect()
    };
    match branch {
        Branch::Part(index) => {
            parts.get(*index).map_or(String::new(), |part| format!("{} ({})", part.reference, value(part)))
        }
        Branch::Series { series } => format!("{}, one after the other", listing(&inner(series))),
        Branch::Parallel { parallel } => format!("{}, side by side", listing(&inner(parallel))),
    }
}

/// What the meter shows with what is fitted so far: at the edge of the first
/// keep band, and at this section's notch.
fn reading_so_far(material: &Material, built: &Circuit, last: usize) -> String {
    let plan = material.plan;
    let mut points = Vec::new();
    if let Some(keep) = plan.brief.keep.first() {
        points.push(if keep.to_hz > 0.0 { keep.to_hz } else { keep.from_hz });
    }
    let notch = plan.design.sections.get(last).and_then(|section| section.notch_hz);
    points.push(notch.unwrap_or(plan.mean_hz));
    let words: Vec<String> = points
        .iter()
        .filter(|f| f.is_finite() && **f > 0.0)
        .map(|&f| format!("{} at {}", about(gain_words(gain_db(built, f))), hertz(f)))
        .collect();
    listing(&words)
}

fn gain_db(circuit: &Circuit, frequency_hz: f64) -> f64 {
    20.0 * circuit.insertion(frequency_hz).norm().log10()
}

/// A gain as the bench says it: `3.0 dB down`, `0.1 dB up`.
fn gain_words(gain_db: f64) -> String {
    match gain_db {
        g if g == f64::NEG_INFINITY => "a full null".to_owned(),
        g if g.is_nan() => decibel(g),
        g if g.abs() < 0.005 => "no change".to_owned(),
        g if g < 0.0 => format!("{} down", decibel(-g)),
        g => format!("{} up", decibel(g)),
    }
}

/// `about 3.0 dB down`; what is no figure needs no caution.
fn about(words: String) -> String {
    if words.starts_with(|c: char| c.is_ascii_digit()) { format!("about {words}") } else { words }
}

/// The check frequencies: ends and middle of each keep band, each order to be
/// reduced, and a few between where the curve is steep.
pub(super) fn readings(material: &Material) -> Vec<Reading> {
    let plan = material.plan;
    let design = &plan.design;
    let mut points: Vec<(f64, String)> = Vec::new();
    for keep in &design.keep {
        let least = design.builds.band.first().map_or(keep.to_hz / 10.0, |p| p.frequency_hz);
        let from = if keep.from_hz > 0.0 { keep.from_hz } else { (keep.to_hz / 10.0).max(least) };
        points.push((from, "keep band, low".to_owned()));
        points.push(((from * keep.to_hz).sqrt(), "keep band, middle".to_owned()));
        points.push((keep.to_hz, "keep band, upper edge".to_owned()));
    }
    for predicted in &design.predicted {
        points.push((predicted.frequency_hz, format!("order {}", predicted.order)));
    }
    points.retain(|(f, _)| f.is_finite() && *f > 0.0);
    points.sort_by(|a, b| a.0.total_cmp(&b.0));
    points.dedup_by(|a, b| (a.0 / b.0 - 1.0).abs() < 1e-6);
    points.into_iter().map(|(frequency_hz, why)| reading(material, frequency_hz, why)).collect()
}

fn reading(material: &Material, frequency_hz: f64, why: String) -> Reading {
    let design = &material.plan.design;
    let order = design.predicted.iter().find(|p| p.frequency_hz == frequency_hz);
    let builds = match order {
        Some(predicted) => format!("at least {} down", decibel(predicted.reduction_worst_db)),
        None => band_at(&design.builds.band, frequency_hz)
            .map_or("not drawn".to_owned(), |(low, high)| format!("{} to {}", signed(low), signed(high))),
    };
    Reading {
        frequency: hertz(frequency_hz),
        why,
        nominal: gain_words(gain_db(&design.circuit, frequency_hz)),
        builds,
        volts: si(design.circuit.transfer(frequency_hz).norm(), "V", 3),
    }
}

fn signed(gain_db: f64) -> String {
    let plus = if gain_db >= 0.005 { "+" } else { "" };
    format!("{plus}{}", decibel(gain_db))
}

/// Edges of the builds' band at a frequency, straight between its points on a
/// logarithmic scale; `None` outside it.
fn band_at(band: &[BandPoint], frequency_hz: f64) -> Option<(f64, f64)> {
    let right = band.partition_point(|p| p.frequency_hz < frequency_hz);
    let upper = band.get(right)?;
    if upper.frequency_hz == frequency_hz {
        return Some((upper.low_db, upper.high_db));
    }
    let lower = band.get(right.checked_sub(1)?)?;
    let share = (frequency_hz / lower.frequency_hz).ln() / (upper.frequency_hz / lower.frequency_hz).ln();
    let between = |a: f64, b: f64| a + share * (b - a);
    Some((between(lower.low_db, upper.low_db), between(lower.high_db, upper.high_db)))
}

/// How to stand in for source and load on the bench.
pub(super) fn setup(material: &Material) -> Vec<String> {
    let circuit = &material.plan.design.circuit;
    let source = si(circuit.source.resistance_ohm, "Ω", 3);
    let inductance = if circuit.source.inductance_h > 0.0 {
        format!(" and {}", si(circuit.source.inductance_h, "H", 3))
    } else {
        String::new()
    };
    let capacitance = if circuit.load.capacitance_f > 0.0 {
        format!(" beside {}", si(circuit.load.capacitance_f, "F", 3))
    } else {
        String::new()
    };
    vec![
        format!(
            "Generator: a sine whose own resistance and a resistor make up {source}{inductance} together, as the source \
             has. A generator without it shows another filter."
        ),
        format!(
            "Load: {}{capacitance}, or the real input. The meter stands beside the load and counts as part of it: \
             a meter of 10 MΩ (common practice) on a high-resistance load reads low.",
            si(circuit.load.resistance_ohm, "Ω", 3)
        ),
        "Reference: bridge the filter out (input joined straight to output), read, and call this 0 dB. All \
         readings below are against it."
            .to_owned(),
        format!(
            "Level: {}large enough for the meter in the notch; read the notch with a band-pass or an analyser, since \
             the generator's own harmonics pass beside it ({} and up).",
            if circuit.parts.iter().any(|p| p.kind == PartKind::Coil) {
                "small enough for the coils, "
            } else {
                ""
            },
            hertz_short((2.0 * material.plan.mean_hz).round())
        ),
    ]
}

/// Advice on layout, common practice all of it.
pub(super) fn layout(material: &Material) -> Vec<String> {
    let circuit = &material.plan.design.circuit;
    let coils: Vec<&str> =
        circuit.parts.iter().filter(|p| p.kind == PartKind::Coil).map(|p| p.reference.as_str()).collect();
    let mut advice = Vec::new();
    if !coils.is_empty() {
        let (names, verb) = (listing(&coils), if coils.len() == 1 { "is an aerial" } else { "are aerials" });
        advice.push(format!(
            "{names} {verb} for the very hum that is to go: 1500 turns on 1 cm² in 1 µT at 50 Hz pick up 47 µV. Keep \
             well away from transformers, motors and mains leads."
        ));
        advice.push(
            "Turn each coil in place, with the source replaced by an equal resistor, for the least hum at the \
             output; then fix it there."
                .to_owned(),
        );
        let again = if material.plan.design.trims.is_empty() { "notch" } else { "trim" };
        advice.push(format!(
            "If that is not enough: a closed box of mild steel or a high-permeability can around the coil. Check the \
             {again} again afterwards, since the can changes the inductance."
        ));
    }
    if coils.len() > 1 {
        advice.push("Set coils at right angles to each other and a few coil lengths apart.".to_owned());
    }
    advice.push(
        "Short leads, one ground point for all parts that go to ground, taken to the load's side of the line; the \
         screen earthed where local practice has it, at one end."
            .to_owned(),
    );
    advice
}

#[cfg(test)]
mod tests {
    use super::*;

    fn point(frequency_hz: f64, low_db: f64, high_db: f64) -> BandPoint {
        BandPoint { frequency_hz, nominal_db: (low_db + high_db) / 2.0, low_db, high_db }
    }

    #[test]
    fn the_band_is_read_between_its_points_and_never_outside() {
        let band = [point(1.0, -2.0, 0.0), point(100.0, -4.0, -2.0)];
        assert_eq!(band_at(&band, 1.0), Some((-2.0, 0.0)));
        let (low, high) = band_at(&band, 10.0).unwrap();
        assert!((low + 3.0).abs() < 1e-12 && (high + 1.0).abs() < 1e-12);
        assert_eq!(band_at(&band, 0.5), None);
        assert_eq!(band_at(&band, 101.0), None);
        assert_eq!(band_at(&[], 10.0), None);
    }

    #[test]
    fn a_tank_in_the_line_is_described_so_that_one_can_wire_it() {
        let mut coil = Part::ideal("L1", PartKind::Coil, 10.0);
        coil.value = "10 H".into();
        let parts = [coil, Part::ideal("C2", PartKind::Capacitor, 1e-6)];
        let stage = TwoPort::Series { series: Branch::parallel([Branch::Part(0), Branch::Part(1)]) };
        assert_eq!(stage_words(&stage, &parts), "in the line: L1 (10 H) and C2 (1.00\u{a0}µF), side by side");
    }

    #[test]
    fn equal_parts_are_bought_together() {
        let parts = ["R1", "R2", "R3"].map(|name| Part::ideal(name, PartKind::Resistor, 1e3));
        let bought = purchases(&parts);
        assert_eq!(bought.len(), 1);
        assert_eq!((bought[0].count, bought[0].references.as_str()), (3, "R1, R2 and R3"));
    }

    #[test]
    fn gains_are_said_as_on_the_bench() {
        assert_eq!(gain_words(-3.0), "3.00\u{a0}dB down");
        assert_eq!(gain_words(0.001), "no change");
        assert_eq!(gain_words(f64::NEG_INFINITY), "a full null");
        assert_eq!(about(gain_words(-3.0)), "about 3.00\u{a0}dB down");
        assert_eq!(about(gain_words(0.001)), "no change");
    }
}
