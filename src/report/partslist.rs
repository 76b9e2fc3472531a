//! The parts list: what to buy, one line a part, with totals.

use super::wording::{number, short, si};
use crate::parts::{Part, PartKind};
use crate::plan::Plan;

/// Unit of a part's value.
pub(super) fn unit(kind: PartKind) -> &'static str {
    match kind {
        PartKind::Resistor | PartKind::Trimmer => "Ω",
        PartKind::Capacitor => "F",
        PartKind::Coil => "H",
    }
}

/// What a part is, in a word.
pub(super) fn word(kind: PartKind) -> &'static str {
    match kind {
        PartKind::Resistor => "resistor",
        PartKind::Capacitor => "capacitor",
        PartKind::Coil => "coil",
        PartKind::Trimmer => "trimmer",
    }
}

/// The value as one would order it.
pub(super) fn value(part: &Part) -> String {
    if part.value.is_empty() { si(part.value_si, unit(part.kind), 3) } else { part.value.clone() }
}

/// `27.4 kΩ ± 1 %`, or the value alone where no tolerance is known.
pub(super) fn value_with_tolerance(part: &Part) -> String {
    if part.tolerance_pct > 0.0 {
        format!("{} ± {}\u{a0}%", value(part), short(part.tolerance_pct))
    } else {
        value(part)
    }
}

/// What else one needs to know to order it: winding, limits, setting.
pub(super) fn remarks(part: &Part) -> Vec<String> {
    let mut remarks = Vec::new();
    if part.kind == PartKind::Coil {
        // The material of a listed coil is its winding already.
        if !part.material.as_ref().is_some_and(|material| material.contains("winding")) {
            remarks.push(format!("winding {}", si(part.series_resistance_ohm, "Ω", 3)));
        }
    }
    if let Some(ohm) = part.setting_ohm {
        remarks.push(format!("planned setting {}", si(ohm, "Ω", 3)));
    }
    let limits = [(part.current_limit_a, "A"), (part.voltage_limit_v, "V"), (part.power_limit_w, "W")];
    remarks.extend(limits.iter().filter_map(|(limit, unit)| Some(format!("to {}", si((*limit)?, unit, 2)))));
    remarks
}

/// The sum of the prices, where all are known.
pub(super) fn total(parts: &[Part]) -> Option<f64> {
    parts.iter().map(|part| part.price).sum()
}

/// The parts list as comma-separated values (RFC 4180) with a heading and a
/// line of totals; prices in the stock list's currency.
pub fn parts_csv(plan: &Plan) -> String {
    let parts = &plan.design.circuit.parts;
    let mut lines = vec![
        "ref,kind,value,value_si,unit,tolerance_pct,setting_ohm,material,number,remarks,price".to_owned(),
    ];
    for part in parts {
        let cells = [
            part.reference.clone(),
            word(part.kind).to_owned(),
            value(part),
            format!("{:e}", part.value_si),
            unit(part.kind).to_owned(),
            format!("{}", part.tolerance_pct),
            part.setting_ohm.map_or(String::new(), |ohm| format!("{ohm:.1}")),
            part.material.clone().unwrap_or_default(),
            part.number.clone().unwrap_or_default(),
            remarks(part).join("; "),
            part.price.map_or(String::new(), |price| number(price, 2)),
        ];
        lines.push(cells.iter().map(|cell| quoted(cell)).collect::<Vec<_>>().join(","));
    }
    let sum = total(parts).map_or("not known".to_owned(), |sum| number(sum, 2));
    lines.push(format!("total,{} parts,,,,,,,,,{sum}", parts.len()));
    lines.iter().map(|line| format!("{line}\r\n")).collect()
}

/// A cell, in quotes where it needs them, on one line with plain spaces.
fn quoted(cell: &str) -> String {
    let cell = cell.replace('\u{a0}', " ");
    if cell.contains([',', '"', '\n', '\r']) { format!("\"{}\"", cell.replace('"', "\"\"")) } else { cell }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn cells_with_commas_and_quotes_are_quoted() {
        assert_eq!(quoted("film, 63 V"), "\"film, 63 V\"");
        assert_eq!(quoted("the \"good\" one"), "\"the \"\"good\"\" one\"");
        assert_eq!(quoted("39\u{a0}µF"), "39 µF");
    }

    #[test]
    fn one_price_missing_leaves_the_total_unknown() {
        let mut parts =
            vec![Part::ideal("R1", PartKind::Resistor, 1e3), Part::ideal("R2", PartKind::Resistor, 1e3)];
        parts[0].price = Some(1.0);
        assert_eq!(total(&parts), None);
        parts[1].price = Some(0.5);
        assert_eq!(total(&parts), Some(1.5));
    }
}
