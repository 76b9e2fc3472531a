//! The schematic, drawn from the network itself: what two-ports and branches are
//! made of decides the picture, and no section kind has a drawing of its own.

mod layout;
mod pen;

use crate::network::{Branch, Circuit, TwoPort};
use crate::parts::quantity::{self, Unit};
use crate::parts::{Part, PartKind};

use layout::{Item, sheet};

/// The circuit with source and load as one SVG picture, black on paper; symbols
/// after IEC 60617. Long circuits go on in a second row.
pub fn schematic_svg(circuit: &Circuit) -> String {
    let (parts, items) = row_of(circuit);
    sheet(&parts, &items).svg(&title(circuit))
}

/// The parts with those that stand for source and load, and what is drawn from
/// left to right.
fn row_of(circuit: &Circuit) -> (Vec<Part>, Vec<Item>) {
    let mut parts = circuit.parts.clone();
    let mut stand_in = |reference: &str, kind, value_si, unit| {
        parts.push(Part { value: quantity::print(value_si, unit), ..Part::ideal(reference, kind, value_si) });
        Branch::Part(parts.len() - 1)
    };
    let mut items = vec![Item::Emf];
    let mut source = vec![stand_in("RS", PartKind::Resistor, circuit.source.resistance_ohm, Unit::Ohm)];
    if circuit.source.inductance_h != 0.0 {
        source.push(stand_in("LS", PartKind::Coil, circuit.source.inductance_h, Unit::Henry));
    }
    items.extend(source.into_iter().map(|branch| Item::Port(TwoPort::Series { series: branch })));
    items.push(Item::End("source"));
    for section in &circuit.sections {
        items.extend(section.stages.iter().cloned().map(Item::Port));
    }
    items.push(Item::End("load"));
    let mut load = Vec::new();
    if circuit.load.resistance_ohm.is_finite() {
        load.push(stand_in("RL", PartKind::Resistor, circuit.load.resistance_ohm, Unit::Ohm));
    }
    if circuit.load.capacitance_f != 0.0 {
        load.push(stand_in("CL", PartKind::Capacitor, circuit.load.capacitance_f, Unit::Farad));
    }
    items.extend(load.into_iter().map(|branch| Item::Port(TwoPort::Shunt { shunt: branch })));
    (parts, items)
}

fn title(circuit: &Circuit) -> String {
    let kinds: Vec<&str> = circuit.sections.iter().map(|section| section.kind.as_str()).collect();
    let count = circuit.parts.len();
    format!(
        "Schematic: source, {}, load; {count} parts",
        if kinds.is_empty() { "a wire".to_owned() } else { kinds.join(", ") }
    )
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::network::{Load, Section, Source};

    fn part(reference: &str, value: &str) -> Part {
        let kind = match reference.as_bytes()[0] {
            b'L' => PartKind::Coil,
            b'C' => PartKind::Capacitor,
            b'P' => PartKind::Trimmer,
            _ => PartKind::Resistor,
        };
        Part { value: value.to_owned(), ..Part::ideal(reference, kind, 1.0) }
    }

    fn circuit(parts: &[(&str, &str)], stages: Vec<TwoPort>) -> Circuit {
        Circuit {
            source: Source { resistance_ohm: 350.0, inductance_h: 0.01 },
            load: Load { resistance_ohm: 1e6, capacitance_f: 220e-12 },
            sections: vec![Section { kind: "any".to_owned(), stages }],
            parts: parts.iter().map(|(reference, value)| part(reference, value)).collect(),
        }
    }

    fn series(branch: Branch) -> TwoPort {
        TwoPort::Series { series: branch }
    }

    fn shunt(branch: Branch) -> TwoPort {
        TwoPort::Shunt { shunt: branch }
    }

    fn all(indices: std::ops::Range<usize>) -> Vec<Branch> {
        indices.map(Branch::Part).collect()
    }

    fn cases() -> Vec<(&'static str, Circuit)> {
        let trap = circuit(
            &[("R1", "470 Ω"), ("L1", "4.7 H"), ("C1", "2.2 µF")],
            vec![series(Branch::Part(0)), shunt(Branch::series(all(1..3)))],
        );
        let bridged = circuit(
            &[("L1", "1 H"), ("C1", "22 µF"), ("C2", "22 µF"), ("R1", "499 Ω"), ("P1", "100 Ω")],
            vec![TwoPort::Beside {
                beside: vec![
                    vec![series(Branch::Part(0))],
                    vec![series(Branch::Part(1)), shunt(Branch::series(all(3..5))), series(Branch::Part(2))],
                ],
            }],
        );
        let twin = circuit(
            &[
                ("R1", "31.6 kΩ"),
                ("R2", "31.6 kΩ"),
                ("C1", "200 nF"),
                ("C2", "100 nF"),
                ("C3", "100 nF"),
                ("R3", "15.8 kΩ"),
            ],
            vec![TwoPort::Beside {
                beside: vec![
                    vec![series(Branch::Part(0)), shunt(Branch::Part(2)), series(Branch::Part(1))],
                    vec![series(Branch::Part(3)), shunt(Branch::Part(5)), series(Branch::Part(4))],
                ],
            }],
        );
        let notched = circuit(
            &[
                ("C1", "15 µF"),
                ("C2", "10 µF"),
                ("L1", "6.8 H"),
                ("C3", "1.2 µF"),
                ("C4", "68 nF"),
                ("C5", "18 µF"),
                ("C6", "470 nF"),
            ],
            vec![
                shunt(Branch::parallel(all(0..2))),
                series(Branch::parallel(all(2..5))),
                shunt(Branch::parallel(all(5..7))),
            ],
        );
        let comb = circuit(
            &[
                ("R1", "680 Ω"),
                ("L1", "4.7 H"),
                ("C1", "1.5 µF"),
                ("L2", "470 mH"),
                ("C2", "1.66 µF"),
                ("L3", "100 mH"),
                ("C3", "2.8 µF"),
            ],
            vec![
                series(Branch::Part(0)),
                shunt(Branch::parallel([1, 3, 5].map(|first| Branch::series(all(first..first + 2))))),
            ],
        );
        let mut cascade = notched.clone();
        for number in 2..=8 {
            let stages = [&trap, &bridged, &twin][number % 3].sections[0].stages.clone();
            let offset = cascade.parts.len();
            let more = [&trap, &bridged, &twin][number % 3].parts.clone();
            cascade.parts.extend(more);
            let shifted = stages.iter().map(|stage| {
                let moved: Result<TwoPort, std::convert::Infallible> =
                    stage.try_map(&mut |index| Ok(index + offset));
                let Ok(moved) = moved;
                moved
            });
            cascade.sections.push(Section { kind: "any".to_owned(), stages: shifted.collect() });
        }
        let empty = circuit(&[], Vec::new());
        vec![
            ("trap", trap),
            ("bridged-T", bridged),
            ("twin-T", twin),
            ("notched low-pass", notched),
            ("comb trap", comb),
            ("eight sections", cascade),
            ("wire", empty),
        ]
    }

    #[test]
    fn no_text_lies_on_another_text_or_on_a_symbol_and_all_are_inside() {
        for (name, circuit) in cases() {
            let (parts, items) = row_of(&circuit);
            sheet(&parts, &items).assert_clear(name);
        }
    }

    #[test]
    fn every_part_is_drawn_once_with_its_value() {
        for (name, circuit) in cases() {
            let svg = schematic_svg(&circuit);
            let drawn = |text: &str| svg.matches(&format!(">{text}</text>")).count();
            for reference in circuit.parts.iter().map(|part| &part.reference) {
                let holding = circuit.parts.iter().filter(|part| part.reference == *reference).count();
                assert_eq!(drawn(reference), holding, "{reference} of {name}");
            }
            assert_eq!(drawn("RS"), 1);
            assert_eq!(drawn("1 MΩ"), 1);
        }
    }

    #[test]
    fn the_picture_is_sound_xml_whatever_a_value_is_called() {
        let mut circuit = cases().remove(0).1;
        circuit.parts[0].value = "470 Ω <&\">".to_owned();
        let svg = schematic_svg(&circuit);
        roxmltree::Document::parse(&svg).unwrap();
        assert!(!svg.contains("NaN"));
    }

    /// Writes the cases as files to look at, where the variable names a folder.
    #[test]
    fn pictures_can_be_looked_at() {
        let pictures = cases().into_iter().map(|(name, circuit)| (name, schematic_svg(&circuit)));
        for (name, svg) in pictures {
            assert!(svg.starts_with("<svg "), "{name}");
            if let Ok(folder) = std::env::var("SCHEMATICS_TO") {
                std::fs::write(std::path::Path::new(&folder).join(format!("{name}.svg")), svg).unwrap();
            }
        }
    }
}
