//! The passes over a capture's samples: survey, phasors of the best comb, levels along its track.

use super::analyse::Hum;
use super::besides::{each_line_once, other_supply};
use super::comb::Candidate;
use super::company::{APART_HOP_S, are_shared, usual_beside};
use super::findings::TrackPoint;
use super::gather::{Gather, Gathered, kept_orders};
use super::level_track::LevelOverTime;
use super::likeliest::reach_hz;
use super::orders::OrderMeter;
use super::passing::{followed, with_gaps};
use super::reading::{read_all, read_channel};
use super::reference::{mean_frequency_hz, motion, reference_frequency_hz, reference_track, refined_track};
use super::reread::levels_of;
use super::spectrum::{Spectrum, SpectrumMeter};
use super::spread::Wander;
use super::stays::Stays;
use super::supplies::nearest_supply;
use super::survey::{ChannelSurvey, Surveyed};
use super::tracker::{Cells, Tracked, track};
use super::verdict::{Company, Verdict};
use super::{AnalysisError, PhaseTrack};
use crate::capture::Capture;
use rayon::prelude::*;
use std::f64::consts::TAU;

/// Harmonics are measured up to this frequency.
const TOP_HZ: f64 = 5000.0;
/// and up to this share of the sample rate.
pub(super) const TOP_SHARE: f64 = 0.45;
/// A harmonic is listed from this height over the noise in 1/T.
const LISTED_DB: f64 = 10.5;
/// Most points in the track.
const TRACK_POINTS: usize = 600;

/// Pass 1 over one channel or all.
pub(super) fn survey(
    capture: &mut dyn Capture,
    only: Option<usize>,
    progress: &mut dyn FnMut(f64),
) -> Result<Vec<(usize, Surveyed)>, AnalysisError> {
    let format = capture.format().clone();
    let rate_hz = f64::from(format.sample_rate_hz);
    let mut surveys: Vec<(usize, ChannelSurvey)> = (0..format.channels)
        .filter(|&channel| only.is_none_or(|wanted| wanted == channel + 1))
        .map(|channel| (channel, ChannelSurvey::new(rate_hz, format.duration_s())))
        .collect();
    if let [(channel, survey)] = &mut surveys[..] {
        read_channel(capture, *channel, &mut |samples| survey.push(samples), progress)?;
    } else {
        let mut take = |planes: &[Vec<f64>]| {
            surveys.par_iter_mut().for_each(|(channel, survey)| survey.push(&planes[*channel]));
        };
        read_all(capture, &mut take, progress)?;
    }
    Ok(surveys.into_par_iter().map(|(channel, survey)| (channel, survey.finish())).collect())
}

/// What pass 2 gives.
pub(super) struct Second {
    pub reference: PhaseTrack,
    pub spectrum: Spectrum,
    pub tracked: Option<Tracked>,
    pub verdict: Option<Verdict>,
    /// Where the hum is there, if it comes and goes.
    pub stays: Option<Stays>,
    /// The cells that it was tracked in.
    pub cells: Cells,
    pub level: LevelOverTime,
}

impl Second {
    pub fn found(&self) -> bool {
        self.tracked.is_some() && self.verdict.as_ref().is_some_and(|verdict| verdict.found)
    }
}

pub(super) fn second_pass(
    capture: &mut dyn Capture,
    channel: usize,
    best: &Candidate,
    survey: &Surveyed,
    progress: &mut dyn FnMut(f64),
) -> Result<Second, AnalysisError> {
    let format = capture.format().clone();
    let (rate_hz, duration_s) = (f64::from(format.sample_rate_hz), format.duration_s());
    let reference = reference_track(best, &survey.times_s, duration_s);
    let all = orders_below_top(best.mean_hz(), rate_hz);
    let orders = kept_orders(all, &best.orders, best.mean_hz(), duration_s);
    let mut gather = Gather::new(rate_hz, &reference, &orders, format.frames);
    let mut spectrum = SpectrumMeter::new(rate_hz, duration_s);
    read_channel(
        capture,
        channel,
        &mut |samples| {
            rayon::join(|| gather.push(samples), || spectrum.push(samples));
        },
        progress,
    )?;
    let Gathered { cells, fine } = gather.finish();
    let spectrum = spectrum.finish();
    if let Some(stays) = &best.stays {
        let gathered = Gathered { cells, fine };
        let passing = followed(
            &gathered,
            stays,
            &best.orders,
            reach_hz(survey, best),
            &reference,
            (rate_hz, duration_s),
        );
        let stays = passing.as_ref().map(|passing| passing.stays.clone());
        let (tracked, verdict) = passing.map(|passing| (passing.tracked, passing.verdict)).unzip();
        let cells = gathered.cells;
        let level = level_over_time(&cells, tracked.as_ref());
        return Ok(Second { reference, spectrum, tracked, verdict, cells, stays, level });
    }
    let tracked = track(&cells, &best.orders, reach_hz(survey, best), duration_s);
    let verdict = tracked.as_ref().map(|tracked| {
        let frequency_hz = mean_frequency_hz(&reference, tracked, duration_s);
        Verdict::of(
            &fine,
            tracked,
            frequency_hz,
            duration_s,
            &motion(&reference, tracked, rate_hz),
            Company::Alone,
        )
    });
    let found = verdict.as_ref().zip(tracked.as_ref()).filter(|(verdict, _)| verdict.found);
    let gathered = Gathered { cells, fine };
    let gaps = found.and_then(|(verdict, tracked)| {
        let found_hz = mean_frequency_hz(&reference, tracked, duration_s);
        with_gaps(survey, &gathered, verdict, &reference, (found_hz, rate_hz, duration_s))
    });
    let (stays, judged) = gaps.unzip();
    let stays = stays.flatten();
    let cells = gathered.cells;
    let level = level_over_time(&cells, tracked.as_ref());
    Ok(Second { reference, spectrum, tracked, verdict: judged.or(verdict), cells, stays, level })
}

fn level_over_time(cells: &Cells, tracked: Option<&Tracked>) -> LevelOverTime {
    tracked.map_or_else(LevelOverTime::default, |tracked| LevelOverTime::measure(cells, tracked))
}

/// The offset from a first reference by the orders that another supply does not have, in blocks
/// so long that its lines do not shake it.
pub(super) fn tracked_apart(
    capture: &mut dyn Capture,
    channel: usize,
    first: &PhaseTrack,
    verdict: &Verdict,
    other_hz: f64,
) -> Result<Option<Tracked>, AnalysisError> {
    let format = capture.format().clone();
    let (rate_hz, duration_s) = (f64::from(format.sample_rate_hz), format.duration_s());
    let main_hz = first.mean_frequency_hz();
    let own: Vec<u32> = orders_below_top(main_hz, rate_hz)
        .into_iter()
        .filter(|&k| !are_shared(f64::from(k) * main_hz, other_hz))
        .collect();
    let mut clear: Vec<u32> = verdict.lasting.iter().copied().filter(|k| own.contains(k)).collect();
    // Longer cells reach less far: by the lowest orders farthest.
    if clear.iter().any(|&k| k <= 3) {
        clear.retain(|&k| k <= 3);
    }
    if clear.is_empty() || duration_s < 40.0 * APART_HOP_S {
        return Ok(None);
    }
    let mut gather = Gather::in_blocks(APART_HOP_S, rate_hz, first, &own, format.frames);
    read_channel(capture, channel, &mut |samples| gather.push(samples), &mut |_| {})?;
    Ok(track(&gather.finish().cells, &clear, 1.0 / APART_HOP_S, duration_s))
}

/// Up to where harmonics are looked for at a sample rate.
pub(super) fn top_hz(rate_hz: f64) -> f64 {
    TOP_HZ.min(TOP_SHARE * rate_hz)
}

fn orders_below_top(fundamental_hz: f64, rate_hz: f64) -> Vec<u32> {
    let top_hz = top_hz(rate_hz);
    // The fundamental itself is looked at up to half the rate.
    (1..=((top_hz / fundamental_hz) as u32).max(1)).collect()
}

fn track_points(reference: &PhaseTrack, tracked: &Tracked) -> Vec<TrackPoint> {
    let cells = &tracked.phases.time_s;
    let together = cells.len().div_ceil(TRACK_POINTS);
    (0..cells.len() / together)
        .map(|i| {
            let part = i * together..(i + 1) * together;
            let share = 1.0 / together as f64;
            let mean = |f: &dyn Fn(usize) -> f64| part.clone().map(f).sum::<f64>() * share;
            let offset = mean(&|b| tracked.smoothed.omega[b]) / TAU;
            TrackPoint {
                time_s: mean(&|b| cells[b]),
                frequency_hz: mean(&|b| reference_frequency_hz(reference, cells[b])) + offset,
                se_hz: mean(&|b| tracked.smoothed.omega_variance[b]).sqrt() / TAU,
            }
        })
        .collect()
}

/// A comb as it was followed.
pub(super) struct Followed<'a> {
    pub reference: &'a PhaseTrack,
    pub tracked: &'a Tracked,
    /// The cells of all its orders, where it was followed in them.
    pub cells: Option<&'a Cells>,
}

/// Levels along the track, and other supplies.
pub(super) fn third_pass(
    capture: &mut dyn Capture,
    channel: usize,
    followed: &Followed,
    verdict: &Verdict,
    besides: &[Candidate],
    progress: &mut dyn FnMut(f64),
) -> Result<Hum, AnalysisError> {
    let Followed { reference, tracked, .. } = *followed;
    let format = capture.format().clone();
    let (rate_hz, duration_s) = (f64::from(format.sample_rate_hz), format.duration_s());
    let phase = refined_track(reference, tracked, duration_s);
    let frequency_hz = mean_frequency_hz(reference, tracked, duration_s);
    let orders = orders_below_top(frequency_hz, rate_hz);
    let whole = followed.cells.filter(|cells| cells.orders == orders);
    let read = whole.and_then(|cells| levels_of(cells, tracked, reference, &phase));
    let mut meter = read.is_none().then(|| OrderMeter::new(rate_hz, &phase, &orders));
    let mut others: Vec<(&Candidate, Gather)> = besides
        .iter()
        .map(|candidate| {
            let steady = PhaseTrack::constant(candidate.mean_hz(), duration_s);
            let mut orders = candidate.orders.clone();
            orders.truncate(4);
            let apart = usual_beside(std::slice::from_ref(candidate), frequency_hz).next().is_some();
            let gather = if apart && duration_s >= 40.0 * APART_HOP_S {
                Gather::in_blocks(APART_HOP_S, rate_hz, &steady, &orders, format.frames)
            } else {
                Gather::new(rate_hz, &steady, &orders, format.frames)
            };
            (candidate, gather)
        })
        .collect();
    // Where the cells of the second pass tell the levels, and nothing else hums, that is all.
    if meter.is_some() || !others.is_empty() {
        let mut take = |samples: &[f64]| {
            meter.iter_mut().for_each(|meter| meter.push(samples));
            others.iter_mut().for_each(|(_, gather)| gather.push(samples));
        };
        read_channel(capture, channel, &mut take, progress)?;
    }
    let levels = read.or_else(|| meter.map(OrderMeter::finish)).unwrap_or_default();
    // A line that stands out along the track and is there all the time; one
    // whose phasors the tracker never saw as steady is somebody's note.
    let steady = |order: u32| {
        let followed = tracked.line_of(order);
        followed.is_none_or(|line| line.lasting > 2.0 && line.steadiness > 0.5)
    };
    let listed = levels
        .iter()
        .filter(|level| level.over_floor_db >= LISTED_DB && steady(level.order))
        .map(|level| level.order)
        .collect::<Vec<_>>();
    let listed = if listed.is_empty() { verdict.lasting.clone() } else { listed };
    let claims = others
        .into_iter()
        .filter_map(|(candidate, gather)| other_supply(candidate, gather.finish(), duration_s))
        .collect();
    Ok(Hum {
        frequency_hz,
        se_hz: tracked.advance.variance.sqrt() / (TAU * duration_s),
        nominal_hz: nearest_supply(frequency_hz).map(|supply| supply.nominal_hz),
        wander: Wander::measure(&tracked.phases, tracked.wander, |t| reference.phase_at(t)),
        track: track_points(reference, tracked),
        phase,
        levels,
        listed,
        other_supplies: each_line_once(claims),
        share_of_time: None,
    })
}
