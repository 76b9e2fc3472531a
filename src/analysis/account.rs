//! One account of all captures of a line.

use super::agreement::{Reading, of_one_supply};
use super::analyse::{AnalysisRun, Hum, One};
use super::causes::{Signs, likely_causes};
use super::converter::{Converter, HumHeard};
use super::findings::{Analysis, CaptureHum, CaptureLevel, CaptureSummary, Harmonic, Mains};
use super::folding::folded_harmonics;
use super::orders::OrderLevel;
use super::spread::{Wander, spread_about};
use super::supplies::nearest_supply;
use super::weighted::Weighted;

/// Takes the hum out of captures of another supply than most are of.
fn leave_out_other_supplies(done: &mut [One]) {
    let humming: Vec<&mut One> = done.iter_mut().filter(|one| one.hum.is_some()).collect();
    let reading = |one: &&mut One| Reading {
        frequency_hz: one.hum.as_ref().map_or(0.0, |hum| hum.frequency_hz),
        evidence: one.evidence,
    };
    let kept = of_one_supply(&humming.iter().map(reading).collect::<Vec<_>>());
    for (one, _) in humming.into_iter().zip(kept).filter(|(_, kept)| !kept) {
        one.left_out_hz = one.hum.take().map(|hum| hum.frequency_hz);
    }
}

/// Why a capture does not count in an account of several.
fn left_out_note(one: &One) -> String {
    let path = &one.summary.path;
    match one.left_out_hz {
        Some(hertz) => format!(
            "{path}: hums at {hertz:.3} Hz, which is another supply; it was left out of this account: analyse it alone"
        ),
        None => format!("{path}: no hum found; it does not count"),
    }
}

/// One account of all captures.
pub(super) fn merged(mut done: Vec<One>) -> AnalysisRun {
    leave_out_other_supplies(&mut done);
    let base = done.iter().position(|one| one.hum.is_some());
    let several = done.len() > 1;
    let mut notes = Vec::new();
    for one in &done {
        let own = one.notes.iter();
        notes.extend(
            own.map(|note| if several { format!("{}: {note}", one.summary.path) } else { note.clone() }),
        );
        if several && one.hum.is_none() && base.is_some() {
            notes.push(left_out_note(one));
        }
    }
    let captures = summaries(&done);
    let Some(base) = base else {
        let confidence = done.iter().map(|one| one.confidence).fold(0.0, f64::max);
        return AnalysisRun {
            analysis: nothing(captures, confidence, notes),
            phase: None,
            spectrum: done.remove(0).spectrum,
            levels: Vec::new(),
        };
    };
    let rate_hz = f64::from(captures[base].sample_rate_hz);
    let mains = merged_mains(&done, base, &mut notes);
    let harmonics = merged_harmonics(&done, base, mains.frequency_hz.unwrap_or_default());
    let clipped = captures.iter().any(|capture| capture.clipped_samples > 0);
    for one in done.iter().filter(|one| one.hum.is_some()) {
        let note = one.level.note();
        notes.extend(note.map(|note| if several { format!("{}: {note}", one.summary.path) } else { note }));
    }
    notes.extend(power_note(&harmonics));
    let spectrum = std::mem::take(&mut done[0].spectrum);
    let level = std::mem::take(&mut done[base].level);
    let duration_s = captures.iter().map(|capture| capture.duration_s).fold(0.0, f64::max);
    let hum = done[base].hum.take().expect("the base has hum");
    AnalysisRun {
        analysis: Analysis {
            causes: likely_causes(&Signs {
                mains: &mains,
                harmonics: &harmonics,
                changes: &level.changes,
                other_supplies: &hum.other_supplies,
                clipped,
                rate_hz,
                duration_s,
            }),
            folding: folded_harmonics(hum.frequency_hz, rate_hz),
            captures,
            mains,
            harmonics,
            track: hum.track,
            level_track: level.points,
            level_changes: level.changes,
            other_supplies: hum.other_supplies,
            notes,
        },
        phase: Some(hum.phase),
        spectrum,
        levels: hum.levels,
    }
}

fn nothing(captures: Vec<CaptureSummary>, confidence: f64, notes: Vec<String>) -> Analysis {
    let mains = Mains { confidence, ..Mains::default() };
    Analysis { captures, mains, notes, ..Analysis::default() }
}

/// What is said of each recording, with the hum in it alone and what that does to the converter.
fn summaries(done: &[One]) -> Vec<CaptureSummary> {
    let orders = listed_orders(done);
    done.iter().map(|one| summary(one, &orders)).collect()
}

fn summary(one: &One, orders: &[u32]) -> CaptureSummary {
    let mut summary = one.summary.clone();
    if let Some(frequency_hz) = one.left_out_hz {
        summary.hum = Some(CaptureHum { frequency_hz, levels: Vec::new() });
        return summary;
    }
    let Some(hum) = &one.hum else {
        summary.converter = Some(Converter::of(&summary, None, &one.spectrum));
        return summary;
    };
    let levels: Vec<&OrderLevel> =
        hum.levels.iter().filter(|level| hum.listed.contains(&level.order)).collect();
    let lines: Vec<(f64, f64)> = levels.iter().map(|level| (level.frequency_hz, level.level_dbfs)).collect();
    let wander_hz = hum.wander.as_ref().map_or(0.0, |wander| wander.furthest_hz(hum.frequency_hz));
    let rate_hz = f64::from(summary.sample_rate_hz);
    summary.weighted = Weighted::of(&lines, hum.frequency_hz, wander_hz, &one.spectrum, rate_hz);
    let heard = HumHeard { levels, loudest_db: one.level.loudest_db };
    summary.converter = Some(Converter::of(&summary, Some(&heard), &one.spectrum));
    let here = |level: &&OrderLevel| orders.contains(&level.order);
    let level = |level: &OrderLevel| CaptureLevel {
        order: level.order,
        level_dbfs: level.level_dbfs,
        level_se_db: level.level_se_db,
        over_floor_db: level.over_floor_db,
    };
    let levels = hum.levels.iter().filter(here).map(level).collect();
    summary.hum = Some(CaptureHum { frequency_hz: hum.frequency_hz, levels });
    summary
}

/// Difference from which the mean power is told beside the mean amplitude, decibels.
const POWER_APART_DB: f64 = 0.5;

/// That the hum's power is more than its mean amplitude says, where it is.
fn power_note(harmonics: &[Harmonic]) -> Option<String> {
    let strongest = harmonics.iter().max_by(|a, b| a.level_dbfs.total_cmp(&b.level_dbfs))?;
    let power_dbfs = strongest.mean_power_dbfs?;
    (power_dbfs - strongest.level_dbfs >= POWER_APART_DB).then(|| {
        format!(
            "levels are of the mean amplitude; order {} swings, and its mean power is {power_dbfs:.1} dBFS where its mean \
             amplitude is {:.1} dBFS",
            strongest.order, strongest.level_dbfs
        )
    })
}

fn merged_mains(done: &[One], base: usize, notes: &mut Vec<String>) -> Mains {
    let hums: Vec<(&One, &Hum)> = done.iter().filter_map(|one| Some((one, one.hum.as_ref()?))).collect();
    let total_s: f64 = hums.iter().map(|(one, _)| one.summary.duration_s).sum();
    let mean_hz =
        hums.iter().map(|(one, hum)| hum.frequency_hz * one.summary.duration_s).sum::<f64>() / total_s;
    let se_hz =
        hums.iter().map(|(one, hum)| (hum.se_hz * one.summary.duration_s).powi(2)).sum::<f64>().sqrt()
            / total_s;
    let wanders: Vec<Wander> = hums.iter().filter_map(|(_, hum)| hum.wander.clone()).collect();
    let spread = spread_about(mean_hz, &wanders);
    match spread {
        Some(spread) if spread.spread_hz < spread.floor_hz => notes.push(format!(
            "the wander is below what noise alone shows in this capture ({})",
            half_width_told(spread.floor_hz)
        )),
        None => notes.push("the capture is too short to show any wander".to_owned()),
        _ => {}
    }
    if let Some(stray) = stray_note(mean_hz) {
        notes.push(stray);
    }
    if total_s < 900.0 {
        notes.push(format!(
            "{total_s:.0} s see little of a grid's wander: EN 50160 gives ± 1 % for 99.5 % of a year on interconnected \
             systems, ± 2 % for 95 % of a week on islands"
        ));
    }
    Mains {
        found: true,
        nominal_hz: hums[0].1.nominal_hz,
        frequency_hz: Some(mean_hz),
        frequency_se_hz: Some(se_hz),
        spread_hz: spread.map(|spread| spread.spread_hz),
        spread_floor_hz: spread.map(|spread| spread.floor_hz),
        share_of_time: hums[0].1.share_of_time,
        confidence: done[base].confidence,
    }
}

/// A half-width in hertz, with as many decimals as tell something.
fn half_width_told(hertz: f64) -> String {
    if hertz < 1e-5 {
        return "less than 0.00001 Hz".to_owned();
    }
    let decimals = (1.0 - hertz.log10().floor()).clamp(1.0, 6.0) as usize;
    format!("± {hertz:.decimals$} Hz")
}

/// What a frequency says that no interconnected grid keeps.
fn stray_note(frequency_hz: f64) -> Option<String> {
    let supply = nearest_supply(frequency_hz).filter(|supply| !supply.is_usual(frequency_hz))?;
    Some(format!(
        "{frequency_hz:.2} Hz is {:.1} % off {} Hz, more than the {} % that an interconnected system keeps to: an \
         island or a generator does this, and so does a sustained note; the confidence is lowered for it",
        100.0 * supply.stray(frequency_hz),
        supply.nominal_hz,
        100.0 * supply.usual,
    ))
}

fn merged_harmonics(done: &[One], base: usize, mean_hz: f64) -> Vec<Harmonic> {
    let hums: Vec<(&One, &Hum)> = done.iter().filter_map(|one| Some((one, one.hum.as_ref()?))).collect();
    let orders = listed_orders(done).into_iter();
    orders.filter_map(|order| merged_harmonic(&hums, done, base, order, mean_hz)).collect()
}

/// Every order that any of the captures has over the noise.
fn listed_orders(done: &[One]) -> Vec<u32> {
    let hums = done.iter().filter_map(|one| one.hum.as_ref());
    let mut orders: Vec<u32> = hums.flat_map(|hum| hum.listed.iter().copied()).collect();
    orders.sort_unstable();
    orders.dedup();
    orders
}

/// Mean power over the captures that reach so high, weighted by their length.
fn merged_harmonic(
    hums: &[(&One, &Hum)],
    done: &[One],
    base: usize,
    order: u32,
    mean_hz: f64,
) -> Option<Harmonic> {
    let read: Vec<(f64, &OrderLevel)> = hums
        .iter()
        .filter_map(|(one, hum)| {
            let level = hum.levels.iter().find(|level| level.order == order)?;
            Some((one.summary.duration_s, level))
        })
        .collect();
    let total_s: f64 = read.iter().map(|(s, _)| s).sum();
    let power = |db: fn(&OrderLevel) -> f64| {
        let sum: f64 = read.iter().map(|(s, level)| s * 10f64.powf(db(level) / 10.0)).sum();
        10.0 * (sum / total_s).max(1e-40).log10()
    };
    let first = read.first()?.1;
    let level_dbfs = power(|level| level.level_dbfs);
    let full_scale_v = done[base].summary.full_scale_v;
    Some(Harmonic {
        order,
        frequency_hz: f64::from(order) * mean_hz,
        level_dbfs,
        level_se_db: Some(merged_error_db(&read)),
        mean_power_dbfs: Some(power(|level| level.mean_power_dbfs)),
        rms_v: full_scale_v.map(|volts| volts / 2f64.sqrt() * 10f64.powf(level_dbfs / 20.0)),
        phase_deg: first.phase_deg,
        over_floor_db: power(|level| level.over_floor_db),
    })
}

/// Standard error of the mean power over the captures, weighted by their length, in decibels
/// of it: errors of the noise alone, each independent of the others.
fn merged_error_db(read: &[(f64, &OrderLevel)]) -> f64 {
    let power = |level: &OrderLevel| 10f64.powf(level.level_dbfs / 10.0);
    let sum: f64 = read.iter().map(|(s, level)| s * power(level)).sum();
    let squares: f64 = read.iter().map(|(s, level)| (s * power(level) * level.level_se_db).powi(2)).sum();
    (squares.sqrt() / sum.max(1e-40)).min(99.0)
}
