//! The whole analysis: three passes over each capture, then one account of all.
//!
//! Pass 1 surveys every channel (levels, clipping, lines that persist). Pass 2
//! takes phasors of all harmonics of the best comb and tracks their common phase.
//! Pass 3 measures the levels along that track, and other supplies.

use super::agreement::{Reading, of_one_supply};
use super::causes::likely_causes;
use super::comb::{Candidate, candidates, candidates_besides};
use super::company::{APART_HOP_S, are_shared, usual_beside};
use super::findings::{Analysis, CaptureSummary, Harmonic, Mains, OtherSupply, TrackPoint};
use super::folding::{folded_harmonics, hidden_supplies, is_half_rate};
use super::gather::{Gather, Gathered};
use super::likeliest::{likeliest, reach_hz};
use super::orders::{OrderLevel, OrderMeter, power_dbfs};
use super::reference::{mean_frequency_hz, motion, reference_frequency_hz, reference_track};
use super::spectrum::{Spectrum, SpectrumMeter};
use super::spread::{Wander, spread_about};
use super::supplies::nearest_supply;
use super::survey::{ChannelSurvey, Surveyed};
use super::tracker::{Cells, Tracked, track};
use super::verdict::{Company, Verdict};
use super::{AnalyseOptions, AnalysisError, PhaseTrack};
use crate::capture::Capture;
use rayon::prelude::*;
use std::f64::consts::TAU;

/// Frames read at a time.
const BLOCK_FRAMES: usize = 1 << 16;
/// Harmonics are measured up to this frequency.
const TOP_HZ: f64 = 5000.0;
/// and up to this share of the sample rate.
pub(super) const TOP_SHARE: f64 = 0.45;
/// A harmonic is listed from this height over the noise in 1/T.
const LISTED_DB: f64 = 10.5;
/// Most points in the track.
const TRACK_POINTS: usize = 600;
/// Shortest capture in which anything can be told, in seconds.
const SHORTEST_S: f64 = 0.5;
/// Share of the time for which another supply's line must be there.
const OTHER_PRESENT: f64 = 0.9;
/// RMS about the mean from which a channel is more than a pub(super) constant.
pub(super) const SILENT: f64 = 1e-9;
/// RMS wander, as a share of its frequency, up to which another supply's line is narrow.
const OTHER_WANDER: f64 = 0.002;

/// What an analysis gives besides the account itself.
#[derive(Debug, Clone)]
pub struct AnalysisRun {
    /// The account, as it is written to `analysis.yaml`.
    pub analysis: Analysis,
    /// Phase of the fundamental in the first capture; `None` where no hum was found.
    pub phase: Option<PhaseTrack>,
    /// Spectrum of the first capture's channel.
    pub spectrum: Spectrum,
    /// Every order measured in the first capture, also those under the floor.
    pub levels: Vec<OrderLevel>,
}

/// Analyses one capture, or several captures of one line.
///
/// Several captures of one supply are merged into one mean and spread; harmonics,
/// track and phase are those of the first in which its hum is found, levels the mean
/// power of all. A capture that hums at another supply's frequency is left out, and a
/// note says so. `progress` is called with the share done, 0 to 1.
///
/// # Errors
/// [`AnalysisError`] when there is no capture, the channel asked for is not
/// there, or reading fails. Silence and hum-free captures are no errors:
/// `mains.found` is false then.
pub fn analyse(
    captures: &mut [&mut dyn Capture],
    options: &AnalyseOptions,
    progress: &mut dyn FnMut(f64),
) -> Result<AnalysisRun, AnalysisError> {
    if captures.is_empty() {
        return Err(AnalysisError::NoCapture);
    }
    let share = 1.0 / captures.len() as f64;
    let mut done = Vec::new();
    for (i, capture) in captures.iter_mut().enumerate() {
        let mut part = |p: f64| progress(share * (i as f64 + p));
        done.push(analyse_one(&mut **capture, options, &mut part)?);
    }
    Ok(merged(done))
}

/// One capture's findings before they are merged.
struct One {
    summary: CaptureSummary,
    spectrum: Spectrum,
    /// The survey's best guess was too weak, or its verdict says no.
    confidence: f64,
    /// Nats that the verdict gave.
    evidence: f64,
    hum: Option<Hum>,
    /// Frequency of its hum, where that is another supply's than the account's.
    left_out_hz: Option<f64>,
    notes: Vec<String>,
}

/// Hum in one capture.
struct Hum {
    frequency_hz: f64,
    se_hz: f64,
    nominal_hz: Option<f64>,
    wander: Option<Wander>,
    phase: PhaseTrack,
    track: Vec<TrackPoint>,
    levels: Vec<OrderLevel>,
    listed: Vec<u32>,
    other_supplies: Vec<OtherSupply>,
}

fn analyse_one(
    capture: &mut dyn Capture,
    options: &AnalyseOptions,
    progress: &mut dyn FnMut(f64),
) -> Result<One, AnalysisError> {
    let format = capture.format().clone();
    if let Some(wanted) = options.channel
        && !(1..=format.channels).contains(&wanted)
    {
        return Err(AnalysisError::NoSuchChannel {
            name: capture.name().to_owned(),
            wanted,
            channels: format.channels,
        });
    }
    let rate_hz = f64::from(format.sample_rate_hz);
    let duration_s = format.duration_s();
    let surveys = survey(capture, options.channel, &mut |p| progress(p / 3.0))?;
    let looked: Vec<(usize, Surveyed, Vec<Candidate>)> = surveys
        .into_iter()
        .map(|(channel, survey)| {
            let found = if survey.rms > SILENT { candidates(&survey, rate_hz) } else { Vec::new() };
            (channel, survey, found)
        })
        .collect();
    let power = |found: &[Candidate]| best_of(found).map_or(0.0, |best| best.power);
    let strongest = looked.into_iter().reduce(|a, b| if power(&b.2) > power(&a.2) { b } else { a });
    let Some((channel, survey, found)) = strongest else { return Err(AnalysisError::NoCapture) };
    let mut one = One {
        summary: CaptureSummary {
            path: capture.name().to_owned(),
            sample_rate_hz: format.sample_rate_hz,
            channels: format.channels,
            channel: channel + 1,
            duration_s,
            full_scale_v: options.full_scale_v,
            clipped_samples: survey.clipped,
            peak: survey.peak,
            mean: survey.mean,
            rms: survey.rms,
        },
        spectrum: Spectrum::default(),
        confidence: 0.0,
        evidence: 0.0,
        hum: None,
        left_out_hz: None,
        notes: capture_notes(
            &survey,
            rate_hz,
            duration_s,
            options.channel.is_none() && format.channels > 1,
            channel,
        ),
    };
    let best = if duration_s >= SHORTEST_S { likeliest(&survey, found, rate_hz) } else { None };
    let Some(best) = &best else {
        let mut spectrum = SpectrumMeter::new(rate_hz, duration_s);
        read_channel(capture, channel, &mut |samples| spectrum.push(samples), &mut |p| {
            progress((1.0 + 2.0 * p) / 3.0);
        })?;
        one.spectrum = spectrum.finish();
        return Ok(one);
    };
    let seen = second_pass(capture, channel, best, &survey, &mut |p| progress((1.0 + p) / 3.0))?;
    one.spectrum = seen.spectrum;
    one.confidence = seen.verdict.as_ref().map_or(0.0, |verdict| verdict.confidence);
    one.evidence = seen.verdict.as_ref().map_or(0.0, |verdict| verdict.evidence);
    let (Some(verdict), Some(tracked)) = (seen.verdict, seen.tracked) else { return Ok(one) };
    if !verdict.found {
        progress(1.0);
        return Ok(one);
    }
    let besides = candidates_besides(&survey, rate_hz, best);
    let mut reference = seen.reference;
    let mut tracked = tracked;
    let main_hz = mean_frequency_hz(&reference, &tracked, duration_s);
    if let Some(other) = usual_beside(&besides, main_hz).next() {
        // A first track that the other shakes is no reference: its mean is, or the survey's path.
        let first = if reference.is_constant() {
            PhaseTrack::constant(main_hz, duration_s)
        } else {
            reference.clone()
        };
        if let Some(apart) = tracked_apart(capture, channel, &first, &verdict, other.mean_hz())? {
            tracked = Tracked { lines: tracked.lines, ..apart };
            reference = first;
        }
    }
    let mut hum = third_pass(capture, channel, &reference, &tracked, &verdict, &besides, &mut |p| {
        progress((2.0 + p) / 3.0);
    })?;
    if let Some(other_hz) = verdict.ambiguous {
        one.notes.push(format!(
            "ambiguous: the lines found fit a supply of {:.0} Hz and one of {other_hz:.0} Hz alike; orders are \
             counted on {:.3} Hz",
            nearest_supply(hum.frequency_hz).map_or(hum.frequency_hz, |supply| supply.nominal_hz),
            hum.frequency_hz
        ));
        hum.nominal_hz = None;
    }
    if is_half_rate(hum.frequency_hz, rate_hz) {
        one.notes.push(format!(
            "the fundamental is half the sample rate of {rate_hz} Hz: {:.3} Hz and {:.3} Hz cannot be told apart, and \
             neither frequency nor level is sure; record at another rate",
            hum.frequency_hz,
            rate_hz - hum.frequency_hz
        ));
        hum.se_hz = hum.se_hz.max((0.5 * rate_hz - hum.frequency_hz).abs()).max(1.0 / duration_s);
        hum.wander = None;
    }
    one.hum = Some(hum);
    progress(1.0);
    Ok(one)
}

fn best_of(found: &[Candidate]) -> Option<&Candidate> {
    found.iter().max_by(|a, b| a.score.total_cmp(&b.score))
}

/// Pass 1 over one channel or all.
fn survey(
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
    each_block(
        capture,
        &mut |planes| surveys.par_iter_mut().for_each(|(channel, survey)| survey.push(&planes[*channel])),
        progress,
    )?;
    Ok(surveys.into_par_iter().map(|(channel, survey)| (channel, survey.finish())).collect())
}

fn each_block(
    capture: &mut dyn Capture,
    take: &mut dyn FnMut(&[Vec<f64>]),
    progress: &mut dyn FnMut(f64),
) -> Result<(), AnalysisError> {
    let format = capture.format().clone();
    let mut planes = vec![Vec::new(); format.channels];
    capture.rewind()?;
    let mut read = 0u64;
    loop {
        let frames = capture.read_block(&mut planes, BLOCK_FRAMES)?;
        if frames == 0 {
            return Ok(());
        }
        take(&planes);
        read += frames as u64;
        progress((read as f64 / format.frames.max(1) as f64).min(1.0));
    }
}

fn read_channel(
    capture: &mut dyn Capture,
    channel: usize,
    take: &mut dyn FnMut(&[f64]),
    progress: &mut dyn FnMut(f64),
) -> Result<(), AnalysisError> {
    each_block(capture, &mut |planes| take(&planes[channel]), progress)
}

/// What pass 2 gives.
struct Second {
    reference: PhaseTrack,
    spectrum: Spectrum,
    tracked: Option<Tracked>,
    verdict: Option<Verdict>,
}

fn second_pass(
    capture: &mut dyn Capture,
    channel: usize,
    best: &Candidate,
    survey: &Surveyed,
    progress: &mut dyn FnMut(f64),
) -> Result<Second, AnalysisError> {
    let format = capture.format().clone();
    let (rate_hz, duration_s) = (f64::from(format.sample_rate_hz), format.duration_s());
    let reference = reference_track(best, &survey.times_s, duration_s);
    let orders = orders_below_top(best.mean_hz(), rate_hz);
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
    Ok(Second { reference, spectrum: spectrum.finish(), tracked, verdict })
}

/// The offset from a first reference by the orders that another supply does not have, in blocks
/// so long that its lines do not shake it.
fn tracked_apart(
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

/// Reference and offset as one track with knots at the cells and both ends.
fn refined_track(reference: &PhaseTrack, tracked: &Tracked, duration_s: f64) -> PhaseTrack {
    let cells = &tracked.phases.time_s;
    let smoothed = &tracked.smoothed;
    let last = cells.len() - 1;
    let mut track = PhaseTrack { time_s: Vec::new(), phase_rad: Vec::new(), frequency_hz: Vec::new() };
    let mut knot = |time_s: f64, cell: usize| {
        let offset = smoothed.phase_rad[cell] + smoothed.omega[cell] * (time_s - cells[cell]);
        track.time_s.push(time_s);
        track.phase_rad.push(reference.phase_at(time_s) + offset);
        track.frequency_hz.push(reference_frequency_hz(reference, time_s) + smoothed.omega[cell] / TAU);
    };
    knot(0.0, 0);
    for (i, &time_s) in cells.iter().enumerate() {
        knot(time_s, i);
    }
    if cells[last] < duration_s {
        knot(duration_s, last);
    }
    // Phase 0 at the start, as in a track of constant frequency.
    let start = track.phase_rad[0];
    track.phase_rad.iter_mut().for_each(|phase| *phase -= start);
    track
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

fn third_pass(
    capture: &mut dyn Capture,
    channel: usize,
    reference: &PhaseTrack,
    tracked: &Tracked,
    verdict: &Verdict,
    besides: &[Candidate],
    progress: &mut dyn FnMut(f64),
) -> Result<Hum, AnalysisError> {
    let format = capture.format().clone();
    let (rate_hz, duration_s) = (f64::from(format.sample_rate_hz), format.duration_s());
    let phase = refined_track(reference, tracked, duration_s);
    let frequency_hz = mean_frequency_hz(reference, tracked, duration_s);
    let orders = orders_below_top(frequency_hz, rate_hz);
    let mut meter = OrderMeter::new(rate_hz, &phase, &orders);
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
    read_channel(
        capture,
        channel,
        &mut |samples| {
            meter.push(samples);
            others.iter_mut().for_each(|(_, gather)| gather.push(samples));
        },
        progress,
    )?;
    let levels = meter.finish();
    // A line that stands out along the track and is there all the time; one
    // whose phasors the tracker never saw as steady is somebody's note.
    let steady = |order: u32| {
        let i = order as usize - 1;
        tracked.lines.get(i).is_some_and(|line| line.lasting > 2.0 && line.steadiness > 0.5)
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
    })
}

/// Another supply and the orders heard of it.
struct Claim {
    supply: OtherSupply,
    orders: Vec<u32>,
}

/// Every fourth line of a 16 Hz comb is a line of a 64 Hz comb: what the
/// supply of the higher frequency explains is not claimed again.
fn each_line_once(claims: Vec<Claim>) -> Vec<OtherSupply> {
    let explained = |claim: &Claim| {
        claims.iter().any(|higher| {
            let times = higher.supply.frequency_hz / claim.supply.frequency_hz;
            let whole = times.round() as u32;
            whole >= 2
                && (times / f64::from(whole) - 1.0).abs() < 2e-3
                && claim.orders.iter().all(|order| order.is_multiple_of(whole))
        })
    };
    claims.iter().filter(|claim| !explained(claim)).map(|claim| claim.supply.clone()).collect()
}

fn other_supply(candidate: &Candidate, gathered: Gathered, duration_s: f64) -> Option<Claim> {
    let Gathered { cells, fine } = gathered;
    let centre_hz = candidate.mean_hz();
    let tracked = track(&cells, &candidate.orders, 0.3 * centre_hz / 50.0, duration_s)?;
    let frequency_hz = centre_hz + tracked.advance.phase_rad / (TAU * duration_s);
    let steady = PhaseTrack::constant(centre_hz, duration_s);
    let verdict = Verdict::of(
        &fine,
        &tracked,
        frequency_hz,
        duration_s,
        &motion(&steady, &tracked, f64::INFINITY),
        Company::BesideAnother,
    );
    let supply = nearest_supply(frequency_hz).filter(|_| verdict.found)?;
    if !is_there_all_the_time(&cells, &tracked, &verdict, frequency_hz) {
        return None;
    }
    let strongest = verdict.lasting.iter().filter_map(|k| {
        let values = &cells.values[cells.orders.iter().position(|order| order == k)?];
        let read = values.iter().map(|z| 0.5 * z.norm_sqr()).sum::<f64>() / values.len() as f64;
        let response = cells.response(f64::from(*k) * (frequency_hz - centre_hz));
        Some(read / (response * response).max(0.1))
    });
    let level_dbfs = power_dbfs(strongest.fold(0.0, f64::max));
    let supply = OtherSupply { nominal_hz: supply.nominal_hz, frequency_hz, level_dbfs };
    Some(Claim { supply, orders: verdict.lasting })
}

/// A main supply hums in rooms where a bass plays: another supply beside it is
/// claimed only for a narrow line that is heard in nearly every cell.
fn is_there_all_the_time(cells: &Cells, tracked: &Tracked, verdict: &Verdict, frequency_hz: f64) -> bool {
    let lines = cells.orders.iter().zip(&tracked.lines);
    let present = lines
        .filter(|(order, _)| verdict.lasting.contains(order))
        .any(|(_, line)| line.presence >= OTHER_PRESENT);
    let omega = &tracked.smoothed.omega;
    let count = omega.len() as f64;
    let mean = omega.iter().sum::<f64>() / count;
    let wander_hz = (omega.iter().map(|w| (w - mean) * (w - mean)).sum::<f64>() / count).sqrt() / TAU;
    present && wander_hz <= OTHER_WANDER * frequency_hz
}

fn capture_notes(
    survey: &Surveyed,
    rate_hz: f64,
    duration_s: f64,
    chosen: bool,
    channel: usize,
) -> Vec<String> {
    let mut notes = hidden_supplies(rate_hz);
    if chosen {
        notes.push(format!("channel {} has the strongest hum and was analysed", channel + 1));
    }
    if survey.rms <= SILENT {
        notes.push("the channel is silent, or holds nothing but a constant".to_owned());
    }
    if survey.clipped > 0 {
        notes.push(format!(
            "{} samples are clipped: harmonics of a clipped capture are not the line's; record again at lower gain",
            survey.clipped
        ));
    }
    if duration_s < SHORTEST_S {
        notes.push(format!(
            "{duration_s:.3} s is too short to tell hum from anything else; record at least 10 s"
        ));
    }
    notes
}

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
fn merged(mut done: Vec<One>) -> AnalysisRun {
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
    let captures: Vec<CaptureSummary> = done.iter().map(|one| one.summary.clone()).collect();
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
    let spectrum = std::mem::take(&mut done[0].spectrum);
    let hum = done[base].hum.take().expect("the base has hum");
    AnalysisRun {
        analysis: Analysis {
            causes: likely_causes(&harmonics, clipped, rate_hz),
            folding: folded_harmonics(hum.frequency_hz, rate_hz),
            captures,
            mains,
            harmonics,
            track: hum.track,
            other_supplies: hum.other_supplies,
            notes,
        },
        phase: Some(hum.phase),
        spectrum,
        levels: hum.levels,
    }
}

fn nothing(captures: Vec<CaptureSummary>, confidence: f64, notes: Vec<String>) -> Analysis {
    let mains = Mains {
        found: false,
        nominal_hz: None,
        frequency_hz: None,
        frequency_se_hz: None,
        spread_hz: None,
        spread_floor_hz: None,
        confidence,
    };
    Analysis {
        captures,
        mains,
        harmonics: Vec::new(),
        track: Vec::new(),
        causes: Vec::new(),
        other_supplies: Vec::new(),
        folding: Vec::new(),
        notes,
    }
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
    let mut orders: Vec<u32> = hums.iter().flat_map(|(_, hum)| hum.listed.iter().copied()).collect();
    orders.sort_unstable();
    orders.dedup();
    orders.into_iter().filter_map(|order| merged_harmonic(&hums, done, base, order, mean_hz)).collect()
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
        rms_v: full_scale_v.map(|volts| volts / 2f64.sqrt() * 10f64.powf(level_dbfs / 20.0)),
        phase_deg: first.phase_deg,
        over_floor_db: power(|level| level.over_floor_db),
    })
}
