//! Frequency against time, with the design spread and the measured spread.

use plotters::style::RGBColor;

use super::axis::{Axis, Frame};
use super::canvas::{AFTER, Anchor, BEFORE, Canvas, INK, Size, TARGET, WASH, WASH_DEEP, draw, stroke};
use super::legend::{DOTS, Filled, Sign, head};
use super::{Chart, Material};
use crate::analysis::TrackPoint;
use crate::report::wording::{duration, hertz, small_hertz};

const TITLE: &str = "Frequency of the fundamental against time";

/// Standard errors shown to each side of a point: about 95 %.
const ERRORS_SHOWN: f64 = 2.0;

/// Below this share of the whole range the track is drawn a second time, close up.
const CLOSE_UP_BELOW: f64 = 0.35;

/// Points with whiskers of their own; more are drawn as a line only.
const MOST_WHISKERS: usize = 150;

pub(super) fn chart(material: &Material, size: Size) -> Chart {
    let mains = &material.analysis.mains;
    let description = match (mains.frequency_hz, mains.spread_hz) {
        (Some(frequency), Some(spread)) => format!(
            "Frequency of the fundamental over the recording: mean {}, 95 % of the time within ± {}. The filter \
             was designed for ± {} about {}.",
            hertz(frequency),
            small_hertz(spread),
            small_hertz(material.plan.design_spread_hz),
            hertz(material.plan.centre_hz),
        ),
        (Some(frequency), None) => {
            format!("Frequency of the fundamental over the recording: mean {}.", hertz(frequency))
        }
        _ => "No frequency of the mains could be followed on this recording.".to_owned(),
    };
    let caption = caption(material);
    let svg = draw(size.tall(1.2), TITLE, &description, |canvas| paint(material, canvas));
    Chart { file: "track.svg", title: TITLE, description, caption, svg }
}

/// What is to be known of the bands, the whiskers and the close-up, where they are drawn.
fn caption(material: &Material) -> String {
    let track = followed(material);
    let duration_s = material.analysis.captures.iter().map(|c| c.duration_s).fold(0.0, f64::max);
    let mut caption = "The wide band is what the filter was designed for".to_owned();
    if material.analysis.mains.spread_hz.is_some() {
        caption += ", the inner one holds the frequency for 95 % of this recording";
    }
    caption += ".";
    if needs_close_up(material, &track) {
        caption += " Below, the track close up.";
    }
    if (1..=MOST_WHISKERS).contains(&track.len()) {
        caption += " Whiskers, where long enough to be seen, are twice the standard error of each point.";
    }
    caption + &format!(" A recording of {} sees little of what a grid does in a year.", duration(duration_s))
}

/// The points of the track that have a place.
fn followed<'a>(material: &Material<'a>) -> Vec<&'a TrackPoint> {
    let track = material.analysis.track.iter();
    track.filter(|p| p.time_s.is_finite() && p.frequency_hz.is_finite()).collect()
}

/// Whether the track is so small a part of the whole range that it is drawn again.
fn needs_close_up(material: &Material, track: &[&TrackPoint]) -> bool {
    let (measured, whole) = (reach(track), whole(material, track));
    track.len() > 1 && measured.1 - measured.0 < CLOSE_UP_BELOW * (whole.1 - whole.0)
}

/// Lowest and highest frequency of track and design together.
fn whole(material: &Material, track: &[&TrackPoint]) -> (f64, f64) {
    let measured = reach(track);
    (measured.0.min(plan_low(material)), measured.1.max(plan_high(material)))
}

fn paint(material: &Material, canvas: &Canvas) {
    let mains = &material.analysis.mains;
    let track = followed(material);
    let mut series = vec![(Sign::Band, "designed for")];
    if mains.spread_hz.is_some() {
        series.push((Sign::InnerBand, "95 % of the time"));
    }
    if !track.is_empty() {
        let sign = if track.len() > MOST_WHISKERS { Sign::BeforeLine } else { Sign::BeforeDot };
        series.push((sign, "measured"));
    }
    if mains.frequency_hz.is_some() {
        series.push((Sign::Dashed(INK), "mean"));
    }
    series.push((Sign::Dotted(TARGET), "centre of the design"));
    let top = head(canvas, TITLE, &series);

    let bottom = canvas.size.height;
    let (measured, whole) = (reach(&track), whole(material, &track));
    if needs_close_up(material, &track) {
        let split = top + (bottom - top) * 0.5;
        panel(material, canvas, &track, whole, (top, split));
        panel(material, canvas, &track, measured, (split + canvas.size.type_size * 0.6, bottom));
    } else {
        panel(material, canvas, &track, whole, (top, bottom));
    }
}

/// Lower end of what the filter was designed for.
fn plan_low(material: &Material) -> f64 {
    material.plan.centre_hz - material.plan.design_spread_hz
}

/// Upper end of what the filter was designed for.
fn plan_high(material: &Material) -> f64 {
    material.plan.centre_hz + material.plan.design_spread_hz
}

/// Lowest and highest end of all whiskers.
fn reach(track: &[&TrackPoint]) -> (f64, f64) {
    let ends = track.iter().flat_map(|p| [p.frequency_hz - whisker(p), p.frequency_hz + whisker(p)]);
    ends.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), v| (low.min(v), high.max(v)))
}

/// Length of a whisker to each side, hertz.
fn whisker(point: &TrackPoint) -> f64 {
    if point.se_hz.is_finite() { ERRORS_SHOWN * point.se_hz } else { 0.0 }
}

/// The track between two frequencies, between two heights of the picture.
fn panel(
    material: &Material,
    canvas: &Canvas,
    track: &[&TrackPoint],
    (from, to): (f64, f64),
    (top, bottom): (f64, f64),
) {
    let (mains, plan) = (&material.analysis.mains, material.plan);
    let margin = 0.06 * (to - from);
    let last = track.iter().map(|p| p.time_s).fold(0.0, f64::max);
    let end_s = material.analysis.captures.iter().map(|c| c.duration_s).fold(last, f64::max);
    let frame = Frame::lay(
        canvas,
        top,
        bottom,
        Axis::exact(0.0, end_s, if canvas.size.is_narrow() { 5 } else { 8 }, "Time (s)"),
        Axis::even(from - margin, to + margin, 5, "Frequency (Hz)").with_room_for("400.000"),
    );
    let across = |y: f64| [(frame.from.0, frame.y_at(y)), (frame.to.0, frame.y_at(y))];
    let band = |low: f64, high: f64, color: RGBColor| {
        canvas.rectangle(across(high)[0], across(low)[1], color.filled_style());
    };
    band(plan_low(material), plan_high(material), WASH);
    if let (Some(mean), Some(spread)) = (mains.frequency_hz, mains.spread_hz) {
        band(mean - spread, mean + spread, WASH_DEEP);
    }
    if frame.shows_y(plan.centre_hz) {
        canvas.dashed(&across(plan.centre_hz), DOTS.0, DOTS.1, stroke(TARGET, 1.8));
    }
    draw_track(&frame, track);
    if let Some(mean) = mains.frequency_hz.filter(|mean| frame.shows_y(*mean)) {
        canvas.dashed(&across(mean), 8.0, 5.0, stroke(INK, 1.4));
    }
    if track.is_empty() {
        let middle = ((frame.from.0 + frame.to.0) / 2.0, (frame.from.1 + frame.to.1) / 2.0);
        frame.note("no track on this recording", middle, Anchor::Middle, AFTER);
    }
    frame.close();
}

fn draw_track(frame: &Frame, track: &[&TrackPoint]) {
    let canvas = frame.canvas;
    let points: Vec<_> = track.iter().map(|p| frame.at(p.time_s, p.frequency_hz)).collect();
    canvas.line(&points, stroke(BEFORE, 1.4));
    if track.len() > MOST_WHISKERS {
        return;
    }
    for (point, &(x, y)) in track.iter().zip(&points) {
        let (up, down) = (
            frame.y_at(point.frequency_hz + whisker(point)),
            frame.y_at(point.frequency_hz - whisker(point)),
        );
        if down - up > 8.0 {
            canvas.line(&[(x, up), (x, down)], stroke(BEFORE, 1.2));
        }
        canvas.dot((x, y), if track.len() > 40 { 1.8 } else { 3.0 }, BEFORE);
    }
}
