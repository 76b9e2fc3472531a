//! `notchwright analyse`: what hums, in figures.

use super::args::Analyse;
use super::error::CliError;
use super::table::{Table, wrapped};
use super::{Ended, job, print_answer, single_file};
use crate::analysis::{Analysis, CaptureLevel, CaptureSummary};
use crate::plan::LineBrief;
use crate::report;

/// Harmonics shown as text; the files hold all.
const SHOWN_HARMONICS: usize = 12;

/// Captures whose levels are set side by side.
const SHOWN_CAPTURES: usize = 4;

/// Changes of the level shown as text.
const SHOWN_CHANGES: usize = 6;

/// Decibels over the noise in 1/T from which a level is the line's and not the noise's.
const CLEAR_DB: f64 = 10.0;

/// Folded orders shown as text.
const SHOWN_FOLDS: usize = 4;

/// Analyses, writes the analysis where asked, prints it.
pub(super) fn run(arguments: &Analyse) -> Result<Ended, CliError> {
    if let Some(out) = &arguments.out {
        single_file::check(out)?;
    }
    let brief = arguments.line.as_deref().map(LineBrief::read).transpose()?;
    let mut captures = arguments
        .captures
        .iter()
        .map(|path| job::open_capture(path, &arguments.reading))
        .collect::<Result<Vec<_>, _>>()?;
    let run = job::analyse(&mut captures, &arguments.reading, brief.as_ref())?;
    if let Some(out) = &arguments.out {
        single_file::write(out, &job::yaml_text("analysis", &run.analysis))?;
    }
    print_answer(arguments.json, &run.analysis, || text(&run.analysis));
    Ok(Ended::met(run.analysis.mains.found))
}

/// The analysis for people: verdict, recording, harmonics, causes, notes.
pub(super) fn text(analysis: &Analysis) -> String {
    let mut text = verdict(analysis);
    text += &filter_needed(analysis);
    text.push('\n');
    for (number, capture) in (1..).zip(&analysis.captures) {
        let several = analysis.captures.len() > 1;
        let label = if several { format!("  Recording {number} ") } else { "  Recording   ".to_owned() };
        let scale =
            capture.full_scale_v.map_or(String::new(), |volts| format!(", full scale {}", job::volts(volts)));
        text += &wrapped(
            &label,
            &format!(
                "{}: channel {} of {}, {} Hz, {:.1} s{scale}",
                capture.path, capture.channel, capture.channels, capture.sample_rate_hz, capture.duration_s
            ),
        );
        if capture.clipped_samples > 0 {
            text += &wrapped(
                "  Clipping    ",
                &format!("{} samples at the converter's limit", capture.clipped_samples),
            );
        }
        if let Some(converter) = &capture.converter {
            text += &wrapped("  Converter   ", &report::converter(converter));
        }
        if let Some(weighted) = &capture.weighted {
            text += &wrapped("  Weighted    ", &report::weighted(weighted));
        }
    }
    let mains = &analysis.mains;
    if let Some(spread) = mains.spread_hz {
        text += &wrapped("  Wander      ", &report::wander(spread, mains.spread_floor_hz));
    }
    if mains.found {
        text += &wrapped("  Confidence  ", &report::confidence(mains.confidence));
    }
    text += &harmonics(analysis);
    text += &side_by_side(analysis);
    text += &changes(analysis);
    for supply in &analysis.other_supplies {
        text += &wrapped(
            "  Also        ",
            &format!(
                "{} Hz supply at {:.3} Hz, {:.1} dBFS",
                supply.nominal_hz, supply.frequency_hz, supply.level_dbfs
            ),
        );
    }
    for folded in analysis.folding.iter().take(SHOWN_FOLDS) {
        text += &wrapped(
            "  Folded      ",
            &format!(
                "order {} ({:.2} Hz) would appear at {:.2} Hz: {}",
                folded.order, folded.frequency_hz, folded.appears_at_hz, folded.remark
            ),
        );
    }
    for cause in &analysis.causes {
        let score = if cause.confidence > 0.0 {
            format!(" (score {:.2} of 1)", cause.confidence)
        } else {
            String::new()
        };
        text += &wrapped("  Cause       ", &format!("{}{score}", cause.cause));
        text += &wrapped("    evidence  ", &cause.evidence);
        if !cause.look_first.is_empty() {
            text += &wrapped("    look at   ", &cause.look_first);
        }
        text += &wrapped("    cure      ", &cause.first_cure);
        if !cause.tell_apart.is_empty() {
            text += &wrapped("    to tell   ", &cause.tell_apart);
        }
    }
    for note in &analysis.notes {
        text += &wrapped("  Note        ", note);
    }
    text
}

fn verdict(analysis: &Analysis) -> String {
    let mains = &analysis.mains;
    let strongest = analysis.harmonics.iter().max_by(|a, b| a.level_dbfs.total_cmp(&b.level_dbfs));
    let (true, Some(frequency_hz), Some(strongest)) = (mains.found, mains.frequency_hz, strongest) else {
        return "No mains hum found.\n".to_owned();
    };
    let nominal = mains.nominal_hz.map_or(String::new(), |nominal| format!("{nominal} Hz "));
    let error = mains.frequency_se_hz.map_or(String::new(), |se| format!(" ({})", report::deviation(se)));
    let volts = strongest.rms_v.map_or(String::new(), |volts| format!(", {} rms", job::volts(volts)));
    wrapped(
        "",
        &format!(
            "Hum found: {nominal}mains at {frequency_hz:.5} Hz{error}; strongest is order {} ({:.1} dBFS{volts}).",
            strongest.order, strongest.level_dbfs
        ),
    )
}

/// Whether a filter before the converter is needed: the most pressing answer of all captures.
fn filter_needed(analysis: &Analysis) -> String {
    let converters = analysis.captures.iter().filter_map(|capture| capture.converter.as_ref());
    let heard = converters.filter(|converter| converter.hum.is_some());
    let need = heard.map(|converter| &converter.filter_needed).min_by_key(|need| need.answer);
    need.map_or(String::new(), |need| {
        wrapped("", &format!("Is a filter before the converter needed? {}.", capitalised(&need.statement)))
    })
}

fn capitalised(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or(String::new(), |first| first.to_uppercase().chain(letters).collect())
}

/// The levels of several captures in columns, with what each differs from the first.
fn side_by_side(analysis: &Analysis) -> String {
    let captures = &analysis.captures[..analysis.captures.len().min(SHOWN_CAPTURES)];
    if captures.len() < 2 || analysis.harmonics.is_empty() {
        return String::new();
    }
    let mut headings = vec!["Order".to_owned()];
    headings.extend((1..=captures.len()).map(|number| format!("Recording {number}")));
    if captures.len() == 2 {
        headings.push("2 over 1".to_owned());
    }
    let mut table = Table::new(&headings.iter().map(String::as_str).collect::<Vec<_>>());
    for harmonic in analysis.harmonics.iter().take(SHOWN_HARMONICS) {
        let of_order = |capture: &CaptureSummary| {
            let levels = &capture.hum.as_ref()?.levels;
            levels.iter().find(|level| level.order == harmonic.order).cloned()
        };
        let levels: Vec<Option<CaptureLevel>> = captures.iter().map(of_order).collect();
        let mut row = vec![harmonic.order.to_string()];
        row.extend(levels.iter().zip(captures).map(|(level, capture)| match level {
            None => missing(capture).to_owned(),
            Some(level) if level.over_floor_db < CLEAR_DB => format!("< {:.1} dBFS", level.level_dbfs),
            Some(level) => format!("{:.1} dBFS", level.level_dbfs),
        }));
        if let [first, second] = &levels[..] {
            row.push(match (first, second) {
                (Some(a), Some(b)) => format!("{:+.1} dB", b.level_dbfs - a.level_dbfs),
                _ => "–".to_owned(),
            });
        }
        table.row(row);
    }
    format!("{}\n", table.lines())
}

/// Why a capture has no level of an order.
fn missing(capture: &CaptureSummary) -> &'static str {
    match &capture.hum {
        None => "no hum",
        Some(hum) if hum.levels.is_empty() => "left out",
        Some(_) => "–",
    }
}

/// The changes of the level.
fn changes(analysis: &Analysis) -> String {
    let mut text = String::new();
    for change in analysis.level_changes.iter().take(SHOWN_CHANGES) {
        text += &wrapped(
            "  Change      ",
            &format!(
                "at {:.1} s order {} goes from {:.1} to {:.1} dBFS{}",
                change.time_s,
                change.order,
                change.from_dbfs,
                change.to_dbfs,
                if change.over_s > 0.0 { ", gradually" } else { "" }
            ),
        );
    }
    let hidden = analysis.level_changes.len().saturating_sub(SHOWN_CHANGES);
    if hidden > 0 {
        text += &format!("              and {hidden} more (--json or --out has them all)\n");
    }
    text
}

fn harmonics(analysis: &Analysis) -> String {
    if analysis.harmonics.is_empty() {
        return String::new();
    }
    let mut table = Table::new(&["Order", "Frequency", "Level", "Error", "Voltage, rms", "Over the floor"]);
    for harmonic in analysis.harmonics.iter().take(SHOWN_HARMONICS) {
        table.row([
            harmonic.order.to_string(),
            format!("{:.3} Hz", harmonic.frequency_hz),
            format!("{:.1} dBFS", harmonic.level_dbfs),
            harmonic.level_se_db.map_or("–".to_owned(), report::level_error),
            harmonic.rms_v.map_or("–".to_owned(), job::volts),
            format!("{:.1} dB", harmonic.over_floor_db),
        ]);
    }
    let mut text = format!("\n{}", table.lines());
    let hidden = analysis.harmonics.len().saturating_sub(SHOWN_HARMONICS);
    if hidden > 0 {
        text += &format!("  and {hidden} more (--json or --out has them all)\n");
    }
    text.push('\n');
    text
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::analysis::{
        CaptureHum, Cause, Converter, FilterNeed, Harmonic, HumOnConverter, LevelChange, Mains, Needed,
        WhyNeeded,
    };

    fn capture(path: &str, level_dbfs: Option<f64>) -> CaptureSummary {
        let level =
            |level_dbfs| CaptureLevel { order: 1, level_dbfs, level_se_db: 0.01, over_floor_db: 60.0 };
        let needs =
            |answer, why, statement: &str| FilterNeed { answer, why, statement: statement.to_owned() };
        let filter_needed = match level_dbfs {
            Some(_) => needs(Needed::No, WhyNeeded::HeadroomInHand, "no: headroom is not short (14.0 dB)"),
            None => needs(Needed::No, WhyNeeded::NoHum, "no: no hum was found"),
        };
        CaptureSummary {
            path: path.to_owned(),
            hum: level_dbfs.map(|db| CaptureHum { frequency_hz: 50.0, levels: vec![level(db)] }),
            converter: Some(Converter {
                peak_dbfs: -14.0,
                headroom_db: 14.0,
                crest_factor_db: 9.0,
                hum: level_dbfs.map(|_| HumOnConverter {
                    peak: 0.1,
                    share_of_peak: 0.5,
                    gain_least_db: 3.0,
                    gain_most_db: 6.0,
                    bits_least: 0.5,
                    bits_most: 1.0,
                }),
                filter_needed,
            }),
            ..CaptureSummary::default()
        }
    }

    fn analysis(second_dbfs: Option<f64>) -> Analysis {
        Analysis {
            captures: vec![capture("sensor.wav", Some(-30.0)), capture("resistor.wav", second_dbfs)],
            mains: Mains { found: true, frequency_hz: Some(50.0), confidence: 1.0, ..Mains::default() },
            harmonics: vec![Harmonic {
                order: 1,
                frequency_hz: 50.0,
                level_dbfs: -31.0,
                ..Harmonic::default()
            }],
            level_changes: vec![LevelChange {
                time_s: 12.3,
                over_s: 0.0,
                order: 1,
                from_dbfs: -52.1,
                to_dbfs: -38.0,
                orders: vec![1],
            }],
            causes: vec![Cause { tell_apart: "Turn the cable. ".repeat(20), ..Cause::default() }],
            ..Analysis::default()
        }
    }

    #[test]
    fn two_recordings_stand_side_by_side_with_their_difference() {
        let shown = text(&analysis(Some(-42.0)));
        assert!(shown.contains("-30.0 dBFS   -42.0 dBFS  -12.0 dB"), "{shown}");
        assert!(text(&analysis(None)).contains("no hum"), "{shown}");
    }

    #[test]
    fn the_answer_stands_first_and_no_line_is_longer_than_80_columns() {
        let shown = text(&analysis(Some(-42.0)));
        let mut lines = shown.lines();
        assert!(lines.next().is_some_and(|line| line.starts_with("Hum found")), "{shown}");
        assert!(
            lines.next().is_some_and(|line| line.starts_with("Is a filter before the converter needed? No"))
        );
        assert!(shown.contains("  Change      at 12.3 s order 1 goes from -52.1 to -38.0 dBFS"), "{shown}");
        assert!(shown.lines().all(|line| line.chars().count() <= 80), "{shown}");
    }
}
