//! The whole analysis: three passes over each capture, then one account of all.
//!
//! Pass 1 surveys every channel (levels, clipping, lines that persist). Pass 2
//! takes phasors of all harmonics of the best comb and tracks their common phase.
//! Pass 3 measures the levels along that track, and other supplies.

use super::account::merged;
use super::comb::{Candidate, candidates, candidates_besides};
use super::company::usual_beside;
use super::findings::{Analysis, CaptureSummary, OtherSupply, TrackPoint};
use super::folding::{hidden_supplies, is_half_rate};
use super::likeliest::{comes_and_goes, likeliest};
use super::orders::OrderLevel;
use super::passes::{Followed, Second, second_pass, survey, third_pass, tracked_apart};
use super::passing::presence_note;
use super::reading::read_channel;
use super::reference::mean_frequency_hz;
use super::spectrum::{Spectrum, SpectrumMeter};
use super::spread::Wander;
use super::supplies::nearest_supply;
use super::survey::Surveyed;
use super::tracker::Tracked;
use super::verdict::are_a_notes;
use super::{AnalyseOptions, AnalysisError, PhaseTrack};
use crate::capture::Capture;

/// Shortest capture in which anything can be told, in seconds.
const SHORTEST_S: f64 = 0.5;
/// RMS about the mean from which a channel is more than a constant.
pub(super) const SILENT: f64 = 1e-9;

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
pub(super) struct One {
    pub summary: CaptureSummary,
    pub spectrum: Spectrum,
    /// The survey's best guess was too weak, or its verdict says no.
    pub confidence: f64,
    /// Nats that the verdict gave.
    pub evidence: f64,
    pub hum: Option<Hum>,
    /// Frequency of its hum, where that is another supply's than the account's.
    pub left_out_hz: Option<f64>,
    pub notes: Vec<String>,
}

/// Hum in one capture.
pub(super) struct Hum {
    pub frequency_hz: f64,
    pub se_hz: f64,
    pub nominal_hz: Option<f64>,
    pub wander: Option<Wander>,
    pub phase: PhaseTrack,
    pub track: Vec<TrackPoint>,
    pub levels: Vec<OrderLevel>,
    pub listed: Vec<u32>,
    pub other_supplies: Vec<OtherSupply>,
    /// Share of the time for which it is there, where it comes and goes.
    pub share_of_time: Option<f64>,
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
    let long_enough = duration_s >= SHORTEST_S;
    let mut best = if long_enough { likeliest(&survey, found, rate_hz) } else { None };
    let mut seen = match &best {
        Some(best) => Some(second_pass(capture, channel, best, &survey, &mut |p| progress((1.0 + p) / 3.0))?),
        None => None,
    };
    // What is not there all the time may be there at times.
    if long_enough
        && !seen.as_ref().is_some_and(Second::found)
        && let Some(candidate) = comes_and_goes(&survey)
    {
        let again = second_pass(capture, channel, &candidate, &survey, &mut |p| progress((1.0 + p) / 3.0))?;
        if again.found() || seen.is_none() {
            (best, seen) = (Some(candidate), Some(again));
        }
    }
    let (Some(best), Some(seen)) = (&best, seen) else {
        let mut spectrum = SpectrumMeter::new(rate_hz, duration_s);
        read_channel(capture, channel, &mut |samples| spectrum.push(samples), &mut |p| {
            progress((1.0 + 2.0 * p) / 3.0);
        })?;
        one.spectrum = spectrum.finish();
        return Ok(one);
    };
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
    let mut cells = Some(&seen.cells);
    let main_hz = mean_frequency_hz(&reference, &tracked, duration_s);
    if let Some(other) = usual_beside(&besides, main_hz).next() {
        // A first track that the other shakes is no reference: its mean is, or the survey's path.
        let first = if reference.is_constant() {
            PhaseTrack::constant(main_hz, duration_s)
        } else {
            reference.clone()
        };
        if let Some(apart) = tracked_apart(capture, channel, &first, &verdict, other.mean_hz())? {
            tracked = Tracked { orders: tracked.orders, lines: tracked.lines, ..apart };
            reference = first;
            cells = None;
        }
    }
    let followed = Followed { reference: &reference, tracked: &tracked, cells };
    let mut hum = third_pass(capture, channel, &followed, &verdict, &besides, &mut |p| {
        progress((2.0 + p) / 3.0);
    })?;
    // Where what made the find fades along the whole track: a comb of three orders may, under music.
    if verdict.lasting.len() < 3 && are_a_notes(&hum.listed, hum.frequency_hz) {
        one.confidence *= 0.1;
        progress(1.0);
        return Ok(one);
    }
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
    if let Some(stays) = &seen.stays {
        hum.share_of_time = Some(stays.share(duration_s));
        one.notes.push(presence_note(stays, duration_s));
    }
    one.hum = Some(hum);
    progress(1.0);
    Ok(one)
}

fn best_of(found: &[Candidate]) -> Option<&Candidate> {
    found.iter().max_by(|a, b| a.score.total_cmp(&b.score))
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
