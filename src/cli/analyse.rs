//! `notchwright analyse`: what hums, in figures.

use super::args::Analyse;
use super::error::CliError;
use super::table::{Table, wrapped};
use super::{Ended, job, print_answer, single_file};
use crate::analysis::Analysis;
use crate::plan::LineBrief;
use crate::report;

/// Harmonics shown as text; the files hold all.
const SHOWN_HARMONICS: usize = 12;

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
    text.push('\n');
    for capture in &analysis.captures {
        let scale =
            capture.full_scale_v.map_or(String::new(), |volts| format!(", full scale {}", job::volts(volts)));
        text += &wrapped(
            "  Recording   ",
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
    }
    let mains = &analysis.mains;
    if let Some(spread) = mains.spread_hz {
        text += &wrapped("  Wander      ", &report::wander(spread, mains.spread_floor_hz));
    }
    if mains.found {
        text += &wrapped("  Confidence  ", &report::confidence(mains.confidence));
    }
    text += &harmonics(analysis);
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
        text += &wrapped("  Cause       ", &cause.cause);
        text += &wrapped("    evidence  ", &cause.evidence);
        text += &wrapped("    cure      ", &cause.first_cure);
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

fn harmonics(analysis: &Analysis) -> String {
    if analysis.harmonics.is_empty() {
        return String::new();
    }
    let mut table = Table::new(&["Order", "Frequency", "Level", "Voltage, rms", "Over the floor"]);
    for harmonic in analysis.harmonics.iter().take(SHOWN_HARMONICS) {
        table.row([
            harmonic.order.to_string(),
            format!("{:.3} Hz", harmonic.frequency_hz),
            format!("{:.1} dBFS", harmonic.level_dbfs),
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
