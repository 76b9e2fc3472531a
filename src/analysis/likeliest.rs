//! Which comb to follow: each candidate is followed through the opening of the
//! capture, and the one is taken whose lines say most and are most likely a supply's.

use super::analyse::SILENT;
use super::coherent::{Faint, faint_combs};
use super::comb::{Candidate, candidates_besides};
use super::company::{are_shared, usual_beside};
use super::gather::{Gather, Gathered};
use super::passes::TOP_SHARE;
use super::reference::{mean_frequency_hz, motion, reference_track};
use super::stays::passing;
use super::supplies::is_usual;
use super::survey::{SURVEY_TOP_HZ, Surveyed};
use super::tracker::track;
use super::verdict::{Company, Verdict};
use rayon::prelude::*;
use std::f64::consts::TAU;

/// Score of a comb in the survey below which no second look is taken.
const WORTH_A_LOOK: f64 = 3.0;
/// Evidence in nats from which a public supply in its usual range needs no longer look.
const CERTAIN: f64 = 25.0;
/// A steady line's reference that is so far off is mended before the next look.
const FAR_OFF_HZ: f64 = 0.05;
/// A track ends within the reach of its search, but for what smoothing adds.
const CAUGHT: f64 = 1.5;
/// Nats that being picked for its evidence may have given a comb.
const PICKED: f64 = 4.0;

/// The candidate whose lines, followed through the opening, say most.
pub(super) fn likeliest(survey: &Surveyed, found: Vec<Candidate>, rate_hz: f64) -> Option<Candidate> {
    if survey.rms <= SILENT {
        return None;
    }
    let segments = survey.ratios.len();
    let mut tried = followed(survey, found.into_iter().filter(|found| found.score >= WORTH_A_LOOK).collect());
    let certain = |trial: &Trial| is_usual(trial.frequency_hz) && trial.verdict.evidence >= CERTAIN;
    if segments > 0 && !tried.iter().any(|trial| is_public(trial) && certain(trial)) {
        let faint = faint_combs(survey).into_iter().flat_map(Faint::and_its_third);
        let faint = faint.map(|faint| Candidate {
            path_hz: vec![faint.frequency_hz; segments],
            score: 0.0,
            power: 0.0,
            orders: faint.orders,
            stays: None,
        });
        tried.extend(followed(survey, faint.collect()));
    }
    // The survey gives one comb of all public supplies; there may be two.
    let usual = |trial: &Trial| is_public(trial) && is_usual(trial.frequency_hz);
    if let Some(first) = tried.iter().find(|trial| usual(trial)) {
        let besides = candidates_besides(survey, rate_hz, &first.candidate);
        tried.extend(followed(survey, usual_beside(&besides, first.frequency_hz).cloned().collect()));
    }
    tried.sort_by(|a, b| b.verdict.evidence.total_cmp(&a.verdict.evidence));
    let own_power = |trial: &Trial| -> f64 {
        // Every third line of a railway's comb may be a public supply's.
        let railway = trial.frequency_hz < 20.0;
        trial.lines.iter().filter(|(k, _)| !railway || !k.is_multiple_of(3)).map(|(_, p)| p).sum()
    };
    let found = |trial: &Trial| trial.verdict.found;
    let first = tried.iter().position(found).unwrap_or(0);
    // A supply in its usual range before one that strays as far as a note may lie.
    let chosen = match tried.iter().position(usual).or_else(|| tried.iter().position(is_public)) {
        Some(i) if is_public(&tried[first]) => i,
        // One line at 420 Hz may be a public supply's seventh.
        Some(i) if tried[first].frequency_hz > 70.0 => i,
        Some(i) if tried[first].frequency_hz < 20.0 && own_power(&tried[i]) > own_power(&tried[first]) => i,
        _ => first,
    };
    // Of two supplies in their usual range, the stronger.
    let stronger = |trial: &Trial| usual(trial) && trial.is_stronger_than(&tried[chosen]);
    let two = tried.get(chosen).is_some_and(usual);
    let chosen = if two { tried.iter().position(stronger).unwrap_or(chosen) } else { chosen };
    // Of two accounts of one comb, the survey's own, unless it says less: the other was picked
    // for its evidence.
    let surveyed = |trial: &Trial| {
        let apart = trial.frequency_hz / tried[chosen].frequency_hz - 1.0;
        let says_less = trial.verdict.evidence < tried[chosen].verdict.evidence - PICKED;
        found(trial) && trial.candidate.score > 0.0 && apart.abs() < 0.005 && !says_less
    };
    let chosen = tried.iter().position(surveyed).unwrap_or(chosen);
    (chosen < tried.len()).then(|| tried.swap_remove(chosen).candidate)
}

/// The comb that stands clear for a part of the time, if there is one.
pub(super) fn comes_and_goes(survey: &Surveyed) -> Option<Candidate> {
    let passing = passing(survey).filter(|_| survey.rms > SILENT)?;
    Some(Candidate {
        path_hz: vec![passing.frequency_hz; survey.ratios.len()],
        score: 0.0,
        power: 0.0,
        orders: passing.orders,
        stays: Some(passing.stays),
    })
}

fn followed(survey: &Surveyed, candidates: Vec<Candidate>) -> Vec<Trial> {
    candidates.into_par_iter().filter_map(|candidate| Trial::of(survey, candidate)).collect()
}

/// Found, and a public supply's.
fn is_public(trial: &Trial) -> bool {
    trial.verdict.found && (40.0..70.0).contains(&trial.frequency_hz)
}

/// A candidate followed through the opening of the capture.
struct Trial {
    candidate: Candidate,
    frequency_hz: f64,
    verdict: Verdict,
    /// Lasting orders and their mean squares.
    lines: Vec<(u32, f64)>,
}

impl Trial {
    fn of(survey: &Surveyed, mut candidate: Candidate) -> Option<Self> {
        let rate_hz = survey.opening_rate_hz;
        let frames = survey.opening.len() as u64;
        let duration_s = frames as f64 / rate_hz;
        let reference = reference_track(&candidate, &survey.times_s, duration_s);
        let top_hz = SURVEY_TOP_HZ.min(TOP_SHARE * rate_hz);
        let most = ((top_hz / candidate.mean_hz()) as u32).clamp(1, 24);
        let orders: Vec<u32> = (1..=most).collect();
        let mut gather = Gather::new(rate_hz, &reference, &orders, frames);
        gather.push(&survey.opening);
        let Gathered { cells, fine } = gather.finish();
        let reach_hz = reach_hz(survey, &candidate);
        let tracked = track(&cells, &candidate.orders, reach_hz, duration_s)?;
        let frequency_hz = mean_frequency_hz(&reference, &tracked, duration_s);
        // What was caught so far off is another comb's line, seen over its gaps.
        if (frequency_hz - candidate.mean_hz()).abs() > CAUGHT * reach_hz {
            return None;
        }
        let verdict = Verdict::of(
            &fine,
            &tracked,
            frequency_hz,
            duration_s,
            &motion(&reference, &tracked, survey.opening_rate_hz),
            Company::Alone,
        );
        let lines = verdict.lasting.iter().map(|&k| (k, tracked.lines[k as usize - 1].power)).collect();
        // The survey of a short capture is coarse, and from a reference far off high orders are out
        // of sight: the next look begins where this one ended.
        let off_hz = tracked.advance.phase_rad / (TAU * duration_s);
        if verdict.found && tracked.wander == 0.0 && off_hz.abs() > FAR_OFF_HZ {
            candidate.path_hz.iter_mut().for_each(|f| *f += off_hz);
        }
        Some(Self { candidate, frequency_hz, verdict, lines })
    }

    /// Whether another supply's own lines carry more power than this one's.
    fn is_stronger_than(&self, other: &Self) -> bool {
        let apart = (self.frequency_hz / other.frequency_hz - 1.0).abs();
        apart > 0.1 && self.power_without(other.frequency_hz) > other.power_without(self.frequency_hz)
    }

    /// Power of the lines that are on no line of another comb.
    fn power_without(&self, other_hz: f64) -> f64 {
        let own = self.lines.iter().filter(|(k, _)| !are_shared(f64::from(*k) * self.frequency_hz, other_hz));
        own.map(|(_, power)| power).sum()
    }
}

/// How far off the fundamental may be from a candidate's.
pub(super) fn reach_hz(survey: &Surveyed, candidate: &Candidate) -> f64 {
    (0.6 * survey.bin_hz).max(0.3 * candidate.mean_hz() / 50.0)
}
