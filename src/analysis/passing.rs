//! Hum that comes and goes: judged where it is there, tracked through all its stays.

use super::PhaseTrack;
use super::gather::Gathered;
use super::orders::power_dbfs;
use super::reference::{mean_frequency_hz, motion};
use super::stays::{Stays, passing, with_sharp_ends};
use super::survey::Surveyed;
use super::tracker::{Tracked, track};
use super::verdict::Verdict;

/// Farthest that the end of a stay may be from where the survey sees it, in seconds: a segment.
const REACH_S: f64 = 4.0;
/// Share of the time from which it is the level that changes.
const ALL_THE_TIME: f64 = 0.97;

/// Share of the time from which a dropout is no coming and going.
const MOST_OF_THE_TIME: f64 = 0.9;
/// Share of the frequency by which it may be off a reference.
const REACH: f64 = 0.006;
/// Two accounts of one supply agree in frequency to this share.
const SAME: f64 = 0.001;

/// A comb that comes and goes, followed.
pub(super) struct Passing {
    pub stays: Stays,
    /// Through the whole capture; the lines are as they stand in the even stay.
    pub tracked: Tracked,
    pub verdict: Verdict,
}

/// `reference` is constant, `clear` the orders to begin with.
pub(super) fn followed(
    gathered: &Gathered,
    stays: &Stays,
    clear: &[u32],
    reach_hz: f64,
    reference: &PhaseTrack,
    (rate_hz, duration_s): (f64, f64),
) -> Option<Passing> {
    let stays = with_sharp_ends(stays, &gathered.fine, clear, REACH_S);
    let stay_s = stays.even.length_s();
    let fine = gathered.fine.during(&stays.even);
    let there = track(&gathered.cells.during(&stays.even), clear, reach_hz, stay_s)?;
    let frequency_hz = mean_frequency_hz(reference, &there, stay_s);
    let whole = track(&gathered.cells.clone().only_during(&stays.all), clear, reach_hz, duration_s)?;
    // Where only the level changes, the frequency must hold all the time; where it goes, its level
    // must hold while it is there.
    let goes = stays.share(duration_s) < ALL_THE_TIME;
    let moves = motion(reference, if goes { &there } else { &whole }, rate_hz);
    let verdict = Verdict::of_a_stay(&fine, &there, frequency_hz, stay_s, &moves, goes);
    Some(Passing { stays, tracked: Tracked { lines: there.lines, ..whole }, verdict })
}

/// Hum that was found without regard to its gaps, where it has some: what is there for less than
/// most of the time is judged anew.
pub(super) fn with_gaps(
    survey: &Surveyed,
    gathered: &Gathered,
    found: &Verdict,
    reference: &PhaseTrack,
    (frequency_hz, rate_hz, duration_s): (f64, f64, f64),
) -> Option<(Option<Stays>, Verdict)> {
    let passing =
        passing(survey).filter(|passing| (passing.frequency_hz / frequency_hz - 1.0).abs() < SAME)?;
    // Louder programme may stand clear on another order: what was found tells where it is.
    let stays = with_sharp_ends(&passing.stays, &gathered.fine, &found.lasting, REACH_S);
    let share = stays.share(duration_s);
    if stays.all.is_empty() || share >= ALL_THE_TIME || !reference.is_constant() {
        return None;
    }
    let reach_hz = REACH * frequency_hz;
    let judged =
        followed(gathered, &passing.stays, &passing.orders, reach_hz, reference, (rate_hz, duration_s))?;
    if judged.verdict.found {
        return Some((Some(stays), found.clone()));
    }
    // Programme that stands clear for a moment tells nothing of the hum; a comb that stands clear
    // where it is, goes, and fades or shakes like a note, does.
    let is_a_notes =
        share < MOST_OF_THE_TIME && judged.verdict.lasting.len() >= 2 && judged.verdict.stands_clear();
    is_a_notes.then_some((None, judged.verdict))
}

/// When it is there, and how loud then.
pub(super) fn presence_note(stays: &Stays, duration_s: f64) -> String {
    let share = stays.share(duration_s);
    let first_s = stays.all.first().map_or(0.0, |stay| stay.from_s);
    let even = &stays.even;
    let level = stays.loudest.map_or_else(String::new, |(order, power)| {
        format!(
            "order {order} reads {:.1} dBFS from {:.1} to {:.1} s; ",
            power_dbfs(power),
            even.from_s,
            even.to_s
        )
    });
    let level = format!("{level}the levels listed are means over the whole recording");
    if share >= ALL_THE_TIME {
        return format!("the hum is there all the time, but its level changes: {level}");
    }
    let parts = match stays.all.len() {
        1 => format!("from {first_s:.1} s on"),
        count => format!("in {count} stretches, the first from {first_s:.1} s on"),
    };
    format!("the hum is there for {:.0} % of the time, {parts}: {level}", 100.0 * share)
}
