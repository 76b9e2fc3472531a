//! Response with the band of the builds, keep bands and targets drawn in.

use super::axis::{Axis, Frame};
use super::canvas::{AFTER, Anchor, Canvas, KEEP, Point, Size, TARGET, WASH, draw, stroke, text_width};
use super::legend::{Sign, asked, head, rail};
use super::{Chart, Material};
use crate::plan::Predicted;
use crate::report::wording::{self, short};

const TITLE: &str = "Response of the filter, and what 95 % of builds do";

/// Nothing is drawn below this gain: no build reaches it on a bench.
const DEEPEST_DB: f64 = -100.0;

/// Half-width of a target's bar in picture units where the spread is narrower.
const LEAST_BAR: f64 = 7.0;

pub(super) fn chart(material: &Material, size: Size) -> Chart {
    let design = &material.plan.design;
    let asked = design.predicted.iter().filter(|p| p.target_db.is_some()).count();
    let description = format!(
        "Insertion gain in decibels against frequency: the line with the filter relative to the line without. \
         Above, the whole range with {asked} targets; below, the same curve close up around the keep bands. \
         The pale band holds 95 % of {} builds.",
        design.builds.count
    );
    let caption =
        "0 dB is the line without the filter. The lower panel is the upper one close up, so that the \
                   loss allowed in the keep band can be seen. The orders asked for are named along the lower edge."
            .to_owned();
    let svg = draw(size.tall(1.4), TITLE, &description, |canvas| paint(material, canvas));
    Chart { file: "response.svg", title: TITLE, description, caption, svg }
}

fn paint(material: &Material, canvas: &Canvas) {
    let design = &material.plan.design;
    let mut series = vec![(Sign::AfterCurve, "nominal parts"), (Sign::Band, "95 % of builds")];
    if !design.keep.is_empty() {
        series.push((Sign::KeepRail, "keep: stay between"));
    }
    if design.predicted.iter().any(|p| p.target_db.is_some()) {
        series.push((Sign::Asked, "asked: pass below"));
    }
    let top = head(canvas, "Response, and what 95 % of builds do", &series);
    let bottom = canvas.size.height;
    if design.keep.is_empty() {
        whole(material, canvas, top, bottom);
        return;
    }
    let split = top + (bottom - top) * 0.62;
    whole(material, canvas, top, split);
    close_up(material, canvas, split + canvas.size.type_size * 0.6, bottom);
}

/// Range of frequencies: as far as the builds were drawn.
fn range(material: &Material) -> (f64, f64) {
    let band = &material.plan.design.builds.band;
    let positive = || band.iter().map(|p| p.frequency_hz).filter(|f| *f > 0.0);
    let from = positive().fold(f64::INFINITY, f64::min);
    let to = positive().fold(0.0, f64::max);
    if from < to { (from, to) } else { (1.0, 1000.0) }
}

/// Nominal gain: at the points of the band, and finely around each notch,
/// from the circuit itself.
fn nominal(material: &Material, from_hz: f64, to_hz: f64) -> Vec<(f64, f64)> {
    const STEPS: usize = 700;
    let circuit = &material.plan.design.circuit;
    let step = (to_hz / from_hz).ln() / STEPS as f64;
    let mut at: Vec<f64> = (0..=STEPS).map(|n| from_hz * (n as f64 * step).exp()).collect();
    at.extend(material.plan.design.sections.iter().filter_map(|section| section.notch_hz));
    at.extend(material.plan.design.predicted.iter().map(|p| p.frequency_hz));
    at.retain(|f| f.is_finite() && *f > 0.0);
    at.sort_by(f64::total_cmp);
    at.into_iter().map(|f| (f, 20.0 * circuit.insertion(f).norm().log10())).collect()
}

fn draw_curves(material: &Material, frame: &Frame) {
    let band = &material.plan.design.builds.band;
    let low = frame.stretches(band.iter().map(|p| (p.frequency_hz, p.low_db)));
    let high = frame.stretches(band.iter().map(|p| (p.frequency_hz, p.high_db)));
    for (lower, upper) in low.into_iter().zip(high) {
        let around: Vec<Point> = upper.into_iter().chain(lower.into_iter().rev()).collect();
        frame.canvas.outline(&around, WASH);
    }
    let (from, to) = frame.x.ends();
    for stretch in frame.clipped(nominal(material, from, to)) {
        frame.canvas.line(&stretch, stroke(AFTER, 2.0));
    }
}

fn whole(material: &Material, canvas: &Canvas, top: f64, bottom: f64) {
    let design = &material.plan.design;
    let (from_hz, to_hz) = range(material);
    let targets = design.predicted.iter().filter_map(|p| p.target_db).map(|db| -db);
    let band = design.builds.band.iter().flat_map(|p| [p.low_db, p.nominal_db, p.high_db]);
    let values: Vec<f64> = band.chain(targets).filter(|v| v.is_finite()).collect();
    let lowest = values.iter().copied().fold(-10.0, f64::min).max(DEEPEST_DB);
    let highest = values.iter().copied().fold(0.0, f64::max);
    let x = Axis::frequency(from_hz, to_hz, canvas.size.is_narrow());
    // Below the deepest curve there is room for the names of the targets.
    let names = 0.1 * (highest - lowest);
    let y = Axis::exact(lowest - 3.0 - names, highest + 4.0, 6, "Gain (dB)");
    let frame = Frame::lay(canvas, top, bottom, x, y);
    draw_curves(material, &frame);
    for keep in &design.keep {
        let (left, right) = (frame.x_at(keep.from_hz), frame.x_at(keep.to_hz));
        rail(canvas, left, right, frame.y_at(keep.allowed_db) - 2.0, frame.y_at(-keep.allowed_db) + 2.0);
    }
    mark_targets(material, &frame);
    frame.close();
}

fn mark_targets(material: &Material, frame: &Frame) {
    let size = frame.canvas.size.type_size;
    let (mut free_from, mut named) = (f64::NEG_INFINITY, 0);
    let wanted: Vec<(&Predicted, f64)> =
        material.plan.design.predicted.iter().filter_map(|p| Some((p, p.target_db?))).collect();
    for (predicted, target_db) in wanted.into_iter().filter(|(p, _)| frame.shows_x(p.frequency_hz)) {
        let order = f64::from(predicted.order);
        let centre = frame.x_at(material.plan.centre_hz * order);
        let reach = material.plan.design_spread_hz * order;
        let left = frame.x_at(material.plan.centre_hz * order - reach).min(centre - LEAST_BAR);
        let right = frame.x_at(material.plan.centre_hz * order + reach).max(centre + LEAST_BAR);
        let y = frame.y_at(-target_db);
        asked(frame.canvas, left, right, y);
        let text = match named {
            0 => format!("order {}", predicted.order),
            _ => predicted.order.to_string(),
        };
        let half = text_width(&text, size) / 2.0;
        if centre - half >= free_from {
            frame.note(&text, (centre, frame.to.1 - size), Anchor::Middle, TARGET);
            free_from = centre + half + size * 0.4;
            named += 1;
        }
    }
}

/// The keep bands close up.
fn close_up(material: &Material, canvas: &Canvas, top: f64, bottom: f64) {
    let design = &material.plan.design;
    let (from_hz, to_hz) = range(material);
    let allowed = design.keep.iter().map(|keep| keep.allowed_db).fold(0.0, f64::max).max(0.05);
    let worst = design.keep.iter().map(|keep| keep.loss_worst_db.abs()).filter(|v| v.is_finite());
    let reach = worst.fold(allowed, f64::max).min(6.0 * allowed);
    let edge = design.keep.iter().map(|keep| keep.to_hz).fold(0.0, f64::max);
    let first = design.keep.iter().map(|keep| keep.from_hz).fold(f64::INFINITY, f64::min);
    let left = if first > from_hz { (first / 1.6).max(from_hz) } else { from_hz };
    let x =
        Axis::frequency(left, (edge * 1.6).clamp(left * 2.0, to_hz.max(left * 2.0)), canvas.size.is_narrow());
    // Above the upper rail there is room for what it says.
    let y = Axis::exact(-1.6 * reach, allowed + 0.3 * (allowed + reach), 5, "Gain (dB)");
    let frame = Frame::lay(canvas, top, bottom, x, y);
    draw_curves(material, &frame);
    for keep in &design.keep {
        let (left, right) = (frame.x_at(keep.from_hz), frame.x_at(keep.to_hz));
        rail(canvas, left, right, frame.y_at(keep.allowed_db), frame.y_at(-keep.allowed_db));
        let text =
            format!("keep {} within {} dB", wording::band(keep.from_hz, keep.to_hz), short(keep.allowed_db));
        frame.note(
            &text,
            ((left + right) / 2.0, frame.y_at(keep.allowed_db) - canvas.size.type_size * 0.9),
            Anchor::Middle,
            KEEP,
        );
    }
    frame.close();
}
