//! The page and its charts, as a reader would look them over.

mod report_fixture;

use notchwright::report::{CAUTIONS, charts, page, parts_csv};
use report_fixture::{Findings, hostile, nothing_found, quiet_enough, tide_gauge};

/// Letters are about this wide for their height in common sans-serif faces.
const LETTER_WIDTH: f64 = 0.56;

fn written(name: &str, findings: &Findings) -> String {
    let html = page(&findings.material()).unwrap();
    let dir = std::path::Path::new(env!("CARGO_TARGET_TMPDIR")).join(name);
    std::fs::create_dir_all(&dir).unwrap();
    std::fs::write(dir.join("report.html"), &html).unwrap();
    for (file, svg) in charts(&findings.material()) {
        std::fs::write(dir.join(file), svg).unwrap();
    }
    std::fs::write(dir.join("parts.csv"), parts_csv(&findings.plan)).unwrap();
    html
}

/// What a reader sees: the page without its script, its players and its tags.
fn visible(html: &str) -> String {
    let mut text = String::new();
    let mut rest = html;
    while let Some(open) = rest.find('<') {
        text.push_str(&rest[..open]);
        rest = &rest[open..];
        let skipped = ["<script>", "<style>"].iter().find(|tag| rest.starts_with(**tag));
        let end = match skipped {
            Some(tag) => rest.find(&tag.replace('<', "</")).map(|at| at + tag.len() + 1),
            None => rest.find('>').map(|at| at + 1),
        };
        rest = &rest[end.expect("every tag ends")..];
    }
    text + rest
}

/// Value of an attribute as a number.
fn number(node: roxmltree::Node, name: &str) -> f64 {
    node.attribute(name).and_then(|v| v.parse().ok()).unwrap_or_else(|| panic!("{name} of {node:?}"))
}

/// Box that a text takes: left, top, right, bottom.
fn text_box(node: roxmltree::Node) -> [f64; 4] {
    let size = number(node, "font-size");
    let width = node.text().unwrap_or("").trim().chars().count() as f64 * size * LETTER_WIDTH;
    let (x, y) = (number(node, "x"), number(node, "y"));
    let before = match node.attribute("text-anchor") {
        Some("middle") => width / 2.0,
        Some("end") => width,
        _ => 0.0,
    };
    if node.attribute("transform").is_some_and(|t| t.starts_with("rotate(270")) {
        [x - size / 2.0, y - width + before, x + size / 2.0, y + before]
    } else {
        [x - before, y - size / 2.0, x - before + width, y + size / 2.0]
    }
}

fn assert_texts_lie_inside(file: &str, svg: &str) {
    let document = roxmltree::Document::parse(svg).unwrap_or_else(|e| panic!("{file}: {e}"));
    let root = document.root_element();
    let view: Vec<f64> = root.attribute("viewBox").unwrap().split(' ').map(|v| v.parse().unwrap()).collect();
    let texts: Vec<_> = root.descendants().filter(|n| n.has_tag_name("text")).collect();
    assert!(texts.len() > 5, "{file} has {} texts", texts.len());
    for text in texts {
        let [left, top, right, bottom] = text_box(text);
        assert!(
            left >= 0.0 && top >= 0.0 && right <= view[2] && bottom <= view[3],
            "{file}: {:?} lies at {left:.0},{top:.0} to {right:.0},{bottom:.0} of {view:?}",
            text.text()
        );
    }
}

fn own_charts(findings: &Findings) -> Vec<(&'static str, String)> {
    charts(&findings.material()).into_iter().filter(|(file, _)| *file != "schematic.svg").collect()
}

#[test]
fn the_page_answers_in_the_order_in_which_one_asks() {
    let html = written("tide-gauge", &tide_gauge());
    let order = [
        "The line hums at",
        "Verdict against the brief",
        "Before soldering",
        "What hums",
        "The filter proposed",
        "Listen",
        "What it will do",
        "What was measured on this recording",
        "Alternatives",
        "Bench sheet",
        "Cautions",
        "How it was computed",
    ];
    let body = &html[html.find("<body>").unwrap()..];
    let mut from = 0;
    assert!(
        body.find("class=\"headline").unwrap() < body.find("<nav").unwrap(),
        "the verdict comes before all links"
    );
    for heading in order.iter().skip(1) {
        let at = body[from..]
            .find(&format!(">{heading}"))
            .unwrap_or_else(|| panic!("{heading} is missing or late"));
        from += at;
    }
    assert!(body.find(order[0]).unwrap() < body.find(">Verdict against the brief").unwrap());
}

#[test]
fn every_figure_that_decides_stands_on_the_page() {
    let findings = tide_gauge();
    let text = visible(&page(&findings.material()).unwrap());
    for wanted in
        ["50.013\u{a0}Hz", "seed 7", "200 builds", "10 H", "OWN-COIL-10H", "✓ met", "36 µF", "29.30"]
    {
        assert!(text.contains(wanted), "{wanted} is missing");
    }
    let worst = findings.plan.design.predicted[0].reduction_worst_db;
    assert!(text.contains(&format!("at least {worst:.1}\u{a0}dB")));
}

#[test]
fn all_cautions_stand_on_the_page() {
    for findings in [tide_gauge(), nothing_found(), quiet_enough()] {
        let text = page(&findings.material()).unwrap();
        for caution in CAUTIONS {
            assert!(text.contains(caution.text), "{} is missing", caution.topic);
        }
    }
}

/// The page from one heading to the next, as a reader sees it.
fn part_of(html: &str, id: &str) -> String {
    let from = html.find(&format!("<section id=\"{id}\"")).unwrap_or_else(|| panic!("no part {id}"));
    visible(&html[from..from + html[from..].find("</section>").unwrap()])
}

#[test]
fn the_bench_sheet_carries_the_cautions_by_itself() {
    let sheet = part_of(&page(&tide_gauge().material()).unwrap(), "bench");
    for caution in CAUTIONS {
        assert!(sheet.contains(caution.text), "{} is missing", caution.topic);
    }
}

#[test]
fn trims_are_spoken_of_only_where_there_are_some() {
    let mut findings = tide_gauge();
    assert!(visible(&page(&findings.material()).unwrap()).contains("each trimmed as the bench sheet says"));
    findings.plan.design.trims.clear();
    let text = visible(&page(&findings.material()).unwrap());
    for wrong in ["each trimmed", "after the trims", "trims as planned", "Check the trim"] {
        assert!(!text.contains(wrong), "{wrong}");
    }
    assert!(text.contains("untrimmed") && text.contains("Check the notch again"));
}

#[test]
fn no_deviation_is_told_finer_than_a_clock_can_hold() {
    let mut findings = tide_gauge();
    let mains = &mut findings.analysis.mains;
    (mains.frequency_se_hz, mains.spread_floor_hz) = (Some(61e-9), Some(6.8e-6));
    let found = part_of(&page(&findings.material()).unwrap(), "hum");
    assert!(found.contains("(within\u{a0}0.00001\u{a0}Hz, one standard error)"), "{found}");
    assert!(found.contains("noise alone would show less than 0.00001 Hz"));
    assert!(!found.contains("nHz") && !found.contains("µHz"));
}

#[test]
fn a_line_quiet_enough_is_told_to_buy_nothing_and_gets_no_bench_sheet() {
    let html = page(&quiet_enough().material()).unwrap();
    assert!(html.contains("no filter is proposed: buy nothing"));
    assert!(html.contains("The brief is met without a filter."));
    for part in ["bench", "alternatives", "listen"] {
        assert!(!html.contains(&format!("<section id=\"{part}\"")), "{part}");
        assert!(!html.contains(&format!("href=\"#{part}\"")), "{part}");
    }
    assert!(html.contains("<section id=\"cautions\""));
}

#[test]
fn confidence_is_a_score_and_never_a_share() {
    let found = part_of(&page(&tide_gauge().material()).unwrap(), "hum");
    assert!(found.contains("1.00 of 1, and 0.5 counts as found (a score, not a probability)"));
    assert!(!found.contains("99.9"));
}

#[test]
fn an_order_without_a_notch_of_its_own_is_not_held_against_the_window_of_one() {
    let mut findings = tide_gauge();
    findings.plan.q_windows.iter_mut().for_each(|window| window.q_chosen = None);
    let other = part_of(&page(&findings.material()).unwrap(), "proposed");
    assert!(other.contains("it is judged by the whole chain, not by this window"));

    findings.plan.q_windows.truncate(1);
    findings.plan.q_windows[0].q_chosen = Some(11.64);
    let single = part_of(&page(&findings.material()).unwrap(), "proposed");
    assert!(single.contains("11.64") && !single.contains("judged by the whole chain"));
}

#[test]
fn the_spectrum_says_in_what_bandwidth_noise_reads() {
    let findings = tide_gauge();
    let text = part_of(&page(&findings.material()).unwrap(), "will-do");
    assert!(text.contains("noise reads its power in a bandwidth of"));
    assert!(!text.contains("Each line of the spectrum is"));
}

#[test]
fn a_gain_is_called_a_gain_and_a_band_names_both_its_units() {
    let mut findings = tide_gauge();
    findings.plan.design.flat_loss_db = -1.94;
    (findings.plan.design.keep[0].from_hz, findings.plan.design.keep[0].to_hz) = (80.0, 15_000.0);
    let text = visible(&page(&findings.material()).unwrap());
    assert!(text.contains("1.94\u{a0}dB gained") && !text.contains("\u{2212}1.94"));
    assert!(text.contains("80\u{a0}Hz to 15\u{a0}kHz") && !text.contains("80 to 15"));
}

#[test]
fn nothing_on_the_page_comes_from_outside() {
    let html = written("tide-gauge-alone", &tide_gauge());
    for outside in ["http://", "https://", "src=\"//", "@import", "url("] {
        assert!(!html.contains(outside), "{outside} on the page");
    }
    assert_eq!(html.matches("data:audio/wav;base64,").count(), 3);
    assert!(html.len() < 8_000_000, "{} bytes", html.len());
}

#[test]
fn a_missed_brief_is_said_first_and_in_words() {
    let mut findings = tide_gauge();
    findings.plan.design.met = false;
    findings.plan.design.predicted[0].reduction_worst_db = 37.2;
    findings.plan.obstacles =
        vec!["The coil's Q of 10 holds order 1 to 37.2 dB; it would have to be 14.".to_owned()];
    findings.simulation.met = false;
    let text = visible(&written("missed", &findings));
    assert!(text.contains("The brief is missed"));
    assert!(text.contains("✗ missed"));
    assert!(text.contains("it would have to be 14"));
    assert!(!text.contains("The brief is met"));
}

#[test]
fn what_users_wrote_is_shown_and_never_run() {
    let html = written("hostile", &hostile());
    assert!(!html.contains("<script>alert"));
    assert!(!html.contains("<b>'x'"));
    assert!(html.contains("&lt;script&gt;alert"));
}

#[test]
fn no_figure_reads_as_computer_speech() {
    for (name, findings) in [
        ("hostile", hostile()),
        ("tide-gauge", tide_gauge()),
        ("nothing", nothing_found()),
        ("quiet", quiet_enough()),
    ] {
        let html = page(&findings.material()).unwrap();
        let text = visible(&html);
        for word in text.split(|c: char| !c.is_ascii_alphanumeric()) {
            assert!(
                !["nan", "inf", "none", "undefined", "null"].contains(&word.to_lowercase().as_str())
                    || word == "null",
                "{name}: {word}"
            );
        }
        for (file, svg) in own_charts(&findings) {
            assert!(!svg.contains("NaN") && !svg.contains("inf,") && !svg.contains(",inf"), "{name}: {file}");
        }
    }
}

#[test]
fn every_chart_is_sound_xml_with_its_texts_inside_the_picture() {
    let mut crowded = tide_gauge();
    let model = crowded.simulation.residual[1].clone();
    let harmonic = crowded.analysis.harmonics[1].clone();
    for order in 10..=100 {
        let frequency_hz = 50.013 * f64::from(order);
        crowded.simulation.residual.push(notchwright::simulation::Residual {
            order,
            frequency_hz,
            ..model.clone()
        });
        crowded.analysis.harmonics.push(notchwright::analysis::Harmonic {
            order,
            frequency_hz,
            ..harmonic.clone()
        });
    }
    let mut one_point = tide_gauge();
    one_point.analysis.track.truncate(1);
    one_point.plan.design.keep.clear();
    one_point.plan.design.builds.band.clear();
    for predicted in &mut one_point.plan.design.predicted {
        predicted.target_db = None;
    }
    let cases = [
        ("tide-gauge", tide_gauge()),
        ("nothing", nothing_found()),
        ("quiet", quiet_enough()),
        ("hostile", hostile()),
        ("crowded", crowded),
        ("one-point", one_point),
    ];
    for (name, findings) in cases {
        written(name, &findings);
        let charts = own_charts(&findings);
        let files: Vec<&str> = charts.iter().map(|(file, _)| *file).collect();
        assert_eq!(files, ["spectrum.svg", "response.svg", "track.svg", "level.svg", "harmonics.svg"]);
        for (file, svg) in charts {
            assert_texts_lie_inside(&format!("{name}/{file}"), &svg);
        }
    }
}

#[test]
fn charts_inside_the_page_are_named_for_those_who_cannot_see_them() {
    let html = page(&tide_gauge().material()).unwrap();
    // Once for wide pages and once for narrow ones; only one is shown.
    assert!(html.matches("role=\"img\" aria-label=\"Response of the filter").count() == 2);
    let body = &html[html.find("<body>").unwrap()..html.find("<script>").unwrap()];
    for table in body.split("<table>").skip(1) {
        let table = &table[..table.find("</table>").unwrap()];
        assert!(table.contains("<th scope=\"col\"") && table.contains("<th scope=\"row\""));
    }
}

#[test]
fn every_link_on_the_page_leads_somewhere_on_it() {
    for findings in [tide_gauge(), nothing_found(), quiet_enough()] {
        let html = page(&findings.material()).unwrap();
        for link in html.split("href=\"#").skip(1) {
            let target = link.split('"').next().unwrap();
            assert!(html.contains(&format!("id=\"{target}\"")), "#{target}");
        }
    }
}

#[test]
fn the_parts_list_adds_up() {
    let findings = tide_gauge();
    let csv = parts_csv(&findings.plan);
    let lines: Vec<&str> = csv.split("\r\n").filter(|line| !line.is_empty()).collect();
    assert_eq!(lines.len(), 1 + findings.plan.design.circuit.parts.len() + 1);
    let columns = lines[0].split(',').count();
    for line in &lines {
        assert_eq!(line.split(',').count(), columns, "{line}");
    }
    let sum: f64 =
        lines[1..lines.len() - 1].iter().map(|l| l.rsplit(',').next().unwrap().parse::<f64>().unwrap()).sum();
    assert!((sum - lines.last().unwrap().rsplit(',').next().unwrap().parse::<f64>().unwrap()).abs() < 1e-9);
    let values: Vec<f64> =
        lines[1..lines.len() - 1].iter().map(|l| l.split(',').nth(3).unwrap().parse().unwrap()).collect();
    for (value, part) in values.iter().zip(&findings.plan.design.circuit.parts) {
        assert!((value / part.value_si - 1.0).abs() < 1e-12);
    }
}
