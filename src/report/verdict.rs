//! The answer in one sentence, and the verdict against the brief line by line.

use serde::Serialize;

use super::Material;
use super::wording::{
    band, counted, dbfs, decibel, hertz, hertz_short, listing, number, sentence, short, si, volts_rms,
};
use crate::analysis::SHORT_OF_HEADROOM_DB;
use crate::simulation::Residual;

/// Where a line of the brief stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub(super) enum Standing {
    /// Held.
    Met,
    /// Not held.
    Missed,
    /// This recording cannot tell.
    Open,
}

impl Standing {
    fn of(held: bool) -> Self {
        if held { Self::Met } else { Self::Missed }
    }
}

/// A figure with where it stands.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub(super) struct Judged {
    pub figure: String,
    pub standing: Standing,
}

/// One line of the brief, judged.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub(super) struct Line {
    /// What the brief asks.
    pub asked: String,
    /// What 95 % of builds will do.
    pub predicted: Option<Judged>,
    /// What was measured on the recording.
    pub measured: Option<Judged>,
}

/// Share of builds that must meet the brief, percent.
const BUILDS_WANTED_PCT: f64 = 95.0;

/// The verdict, one line for each demand of the brief.
pub(super) fn lines(material: &Material) -> Vec<Line> {
    let design = &material.plan.design;
    let mut lines = Vec::new();
    for predicted in &design.predicted {
        let Some(target_db) = predicted.target_db else { continue };
        let residual = material.simulation.residual.iter().find(|r| r.order == predicted.order);
        lines.push(Line {
            asked: format!(
                "order {} ({}) down by {}",
                predicted.order,
                hertz_short(predicted.frequency_hz.round()),
                decibel(target_db)
            ),
            predicted: Some(Judged {
                figure: format!("at least {}", decibel(predicted.reduction_worst_db)),
                standing: Standing::of(predicted.reduction_worst_db >= target_db),
            }),
            measured: residual.map(|r| measured_reduction(r, r.target_db.unwrap_or(target_db))),
        });
    }
    for keep in &design.keep {
        let measured =
            material.simulation.keep.iter().find(|k| k.from_hz == keep.from_hz && k.to_hz == keep.to_hz);
        lines.push(Line {
            asked: format!("{} within {}", band(keep.from_hz, keep.to_hz), decibel(keep.allowed_db)),
            predicted: Some(loss(keep.loss_worst_db, keep.allowed_db)),
            measured: measured.map(|k| loss(k.loss_db, keep.allowed_db)),
        });
    }
    let meeting = design.builds.meeting_pct;
    let builds = has_filter(material).then(|| Line {
        asked: format!("all of it in at least {} % of builds", short(BUILDS_WANTED_PCT)),
        predicted: Some(Judged {
            figure: format!("{} % of {}", number(meeting, 1), design.builds.count),
            standing: Standing::of(meeting >= BUILDS_WANTED_PCT),
        }),
        measured: None,
    });
    lines.extend(builds);
    lines
}

/// Whether the plan is a filter at all, and not the line as it is.
pub(super) fn has_filter(material: &Material) -> bool {
    !material.plan.design.circuit.parts.is_empty()
}

fn measured_reduction(residual: &Residual, target_db: f64) -> Judged {
    let reached = residual.reduction_db >= target_db;
    if residual.at_noise_floor {
        return Judged {
            figure: format!("at least {}, what is left is in the noise", decibel(residual.reduction_db)),
            standing: match (reached, residual.predicted_db >= target_db) {
                (true, _) => Standing::Met,
                (false, true) => Standing::Open,
                // The recording cannot tell, but the response can.
                (false, false) => Standing::Missed,
            },
        };
    }
    Judged { figure: decibel(residual.reduction_db), standing: Standing::of(reached) }
}

/// A loss or a gain against what is allowed; a gain counts like a loss.
fn loss(loss_db: f64, allowed_db: f64) -> Judged {
    Judged { figure: loss_words(loss_db), standing: Standing::of(loss_db.abs() <= allowed_db) }
}

/// `0.42 dB lost`, `0.10 dB gained`.
pub(super) fn loss_words(loss_db: f64) -> String {
    // What rounds to nothing is no gain.
    if loss_db < -0.005 {
        format!("{} gained", decibel(-loss_db))
    } else {
        format!("{} lost", decibel(loss_db.abs()))
    }
}

/// RMS of several levels together, dBFS: powers add.
fn together(levels_dbfs: impl Iterator<Item = f64>) -> f64 {
    10.0 * levels_dbfs.map(|level| 10_f64.powf(level / 10.0)).sum::<f64>().log10()
}

/// Volts RMS of a level, where the brief says what full scale is.
fn volts(level_dbfs: f64, full_scale_v: f64) -> Option<String> {
    (full_scale_v > 0.0 && level_dbfs.is_finite()).then(|| si(volts_rms(level_dbfs, full_scale_v), "V", 3))
}

/// A level with its volts, for sentences.
pub(super) fn level_and_volts(level_dbfs: f64, full_scale_v: f64) -> String {
    match volts(level_dbfs, full_scale_v) {
        Some(volts) => format!("{} ({volts} RMS)", dbfs(level_dbfs)),
        None => dbfs(level_dbfs),
    }
}

/// The same for tables that say that volts are RMS.
pub(super) fn level_with_volts(level_dbfs: f64, full_scale_v: f64) -> String {
    match volts(level_dbfs, full_scale_v) {
        Some(volts) => format!("{}, {volts}", dbfs(level_dbfs)),
        None => dbfs(level_dbfs),
    }
}

/// The answer: what hums, what the filter leaves, what it costs.
pub(super) fn answer(material: &Material) -> String {
    let mains = &material.analysis.mains;
    let full_scale_v = material.plan.brief.full_scale_v;
    let residual = &material.simulation.residual;
    let Some(frequency) = mains.frequency_hz.filter(|_| mains.found && !residual.is_empty()) else {
        return "No mains hum was found on this recording, so there is nothing for a filter to take away."
            .to_owned();
    };
    let before = together(residual.iter().map(|r| r.before_dbfs));
    let after = together(residual.iter().map(|r| r.after_dbfs));
    let at_most = if residual.iter().any(|r| r.at_noise_floor) { "at most " } else { "" };
    let orders: Vec<u32> = residual.iter().map(|r| r.order).collect();
    let which = if orders.len() <= 6 {
        format!("{} {}", if orders.len() == 1 { "order" } else { "orders" }, listing(&orders))
    } else {
        counted(orders.len(), "harmonic", "harmonics")
    };
    if !has_filter(material) {
        return format!(
            "The line hums at {} ({which}) with {}; no harmonic of it needs reducing for this brief, so no filter is \
             proposed: buy nothing.",
            hertz(frequency),
            level_and_volts(before, full_scale_v),
        );
    }
    format!(
        "The line hums at {} ({which}) with {}; the filter proposed leaves {at_most}{} of it, and costs {}.",
        hertz(frequency),
        level_and_volts(before, full_scale_v),
        level_and_volts(after, full_scale_v),
        cost(material),
    )
}

/// What the filter costs: loss in the keep bands, parts, money.
fn cost(material: &Material) -> String {
    let design = &material.plan.design;
    let worst = design.keep.iter().max_by(|a, b| a.loss_worst_db.abs().total_cmp(&b.loss_worst_db.abs()));
    let mut costs = Vec::new();
    if let Some(keep) = worst {
        let what = if keep.loss_worst_db < 0.0 { "gain" } else { "loss" };
        costs.push(format!(
            "up to {} of {what} from {}",
            decibel(keep.loss_worst_db.abs()),
            band(keep.from_hz, keep.to_hz)
        ));
    }
    let price = design
        .price
        .map_or(String::new(), |price| format!(" for {} in the stock list's currency", number(price, 2)));
    costs.push(format!("{}{price}", counted(design.circuit.parts.len(), "part", "parts")));
    listing(&costs)
}

/// The verdict in a word or two.
pub(super) fn headline(material: &Material) -> (Standing, String) {
    let (planned, measured) = (material.plan.design.met, material.simulation.met);
    if planned && measured && !has_filter(material) {
        return (Standing::Met, "The brief is met without a filter.".to_owned());
    }
    match (planned, measured) {
        (true, true) => (Standing::Met, "The brief is met: by the plan, and on this recording.".to_owned()),
        (true, false) => (
            Standing::Missed,
            "The plan meets the brief, but this recording through the filter misses it.".to_owned(),
        ),
        (false, true) => (
            Standing::Missed,
            "The brief is missed: this recording through nominal parts meets it, but too few builds will."
                .to_owned(),
        ),
        (false, false) => (
            Standing::Missed,
            "The brief is missed; this is the nearest filter found with the parts listed.".to_owned(),
        ),
    }
}

/// Whether a filter before the converter is needed at all.
pub(super) fn need(material: &Material) -> String {
    let gained = material.simulation.headroom_gained_db;
    let converters = material.analysis.captures.iter().filter_map(|capture| capture.converter.as_ref());
    let Some(need) = converters.map(|converter| &converter.filter_needed).min_by_key(|need| need.answer)
    else {
        return need_by_peak(material);
    };
    format!(
        "Is a filter before the converter needed at all? {} On this recording the filter proposed gains {} of headroom.",
        sentence(&need.statement),
        decibel(gained)
    )
}

/// The same for an analysis that does not say: by the peak alone.
fn need_by_peak(material: &Material) -> String {
    let peak = material.simulation.peak_before_dbfs;
    let gained = decibel(material.simulation.headroom_gained_db);
    let clipped: u64 = material.analysis.captures.iter().map(|c| c.clipped_samples).sum();
    if clipped > 0 {
        return format!(
            "{} of this recording reach the converter's limit: it is short of headroom, and what is lost there no \
             software brings back. The filter gains {gained}.",
            counted(clipped as usize, "sample", "samples"),
        );
    }
    if peak > -SHORT_OF_HEADROOM_DB {
        return format!(
            "The largest sample stands {} below full scale, so headroom is short. The filter gains {gained}.",
            decibel(-peak),
        );
    }
    format!(
        "Is a filter needed at all? The largest sample stands {} below full scale, so the converter is not short of \
         headroom (the filter would gain {gained}). Where nothing else asks for a filter in the line, averaging over \
         whole mains periods or a notch in software does the same and costs no parts.",
        decibel(-peak),
    )
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn powers_add() {
        assert!((together([-20.0, -20.0].into_iter()) - (-20.0 + 10.0 * 2_f64.log10())).abs() < 1e-12);
    }

    #[test]
    fn a_gain_counts_as_a_miss_like_a_loss() {
        assert_eq!(loss(-0.6, 0.5).standing, Standing::Missed);
        assert_eq!(loss(0.4, 0.5).standing, Standing::Met);
        assert_eq!(loss(-0.6, 0.5).figure, "0.60\u{a0}dB gained");
    }

    #[test]
    fn what_drowns_in_noise_is_not_called_missed() {
        let residual = Residual {
            order: 1,
            frequency_hz: 50.0,
            before_dbfs: -40.0,
            after_dbfs: -70.0,
            reduction_db: 30.0,
            predicted_db: 45.0,
            target_db: Some(40.0),
            at_noise_floor: true,
        };
        assert_eq!(measured_reduction(&residual, 40.0).standing, Standing::Open);
        assert_eq!(measured_reduction(&residual, 25.0).standing, Standing::Met);
        let hopeless = Residual { predicted_db: 35.0, ..residual.clone() };
        assert_eq!(measured_reduction(&hopeless, 40.0).standing, Standing::Missed);
        let clear = Residual { at_noise_floor: false, ..residual };
        assert_eq!(measured_reduction(&clear, 40.0).standing, Standing::Missed);
    }
}
