//! Level of the hum against time, with the changes in it.

use super::axis::{Axis, Frame};
use super::canvas::{AFTER, Anchor, BEFORE, Canvas, Size, TARGET, draw, stroke};
use super::legend::{DOTS, Sign, head};
use super::{Chart, Material};
use crate::analysis::LevelPoint;
use crate::report::wording::{counted, dbfs, with_unit};

const TITLE: &str = "Level of the hum against time";

/// Least range of the axis, decibels: a level that stays is to look as if it stayed.
const LEAST_RANGE_DB: f64 = 6.0;

/// Points from which they are drawn as a line only.
const MOST_DOTS: usize = 150;

pub(super) fn chart(material: &Material, size: Size) -> Chart {
    let points = followed(material);
    let (low, high) = reach(&points);
    let changes = &material.analysis.level_changes;
    let description = if points.is_empty() {
        "No level of the hum could be followed on this recording.".to_owned()
    } else {
        format!(
            "Level of the hum over the recording: from {} to {}, with {}.",
            dbfs(low),
            dbfs(high),
            counted(changes.len(), "change", "changes")
        )
    };
    let caption = caption(material);
    let svg = draw(size.tall(0.8), TITLE, &description, |canvas| paint(material, canvas));
    Chart { file: "level.svg", title: TITLE, description, caption, svg }
}

fn caption(material: &Material) -> String {
    let mut caption =
        "The strong orders together, taken along the frequency track: a drift of the frequency is no \
                       change of level here, while what else sounds close to a line adds to it for its time."
            .to_owned();
    if let [first, ..] = &material.analysis.level_changes[..] {
        caption += &format!(
            " At {} order {} goes from {} to {}{}, as where a load is switched or runs up.",
            with_unit(first.time_s, 1, "s"),
            first.order,
            dbfs(first.from_dbfs),
            dbfs(first.to_dbfs),
            if first.over_s > 0.0 { ", gradually" } else { "" }
        );
    }
    caption
}

/// The points that have a place.
fn followed<'a>(material: &Material<'a>) -> Vec<&'a LevelPoint> {
    let points = material.analysis.level_track.iter();
    points.filter(|p| p.time_s.is_finite() && p.level_dbfs.is_finite()).collect()
}

fn reach(points: &[&LevelPoint]) -> (f64, f64) {
    let levels = points.iter().map(|p| p.level_dbfs);
    levels.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), v| (low.min(v), high.max(v)))
}

fn paint(material: &Material, canvas: &Canvas) {
    let points = followed(material);
    let changes = &material.analysis.level_changes;
    let mut series = Vec::new();
    if !points.is_empty() {
        series.push((if points.len() > MOST_DOTS { Sign::BeforeLine } else { Sign::BeforeDot }, "measured"));
    }
    if !changes.is_empty() {
        series.push((Sign::Dotted(TARGET), "change"));
    }
    let top = head(canvas, TITLE, &series);
    let (low, high) = if points.is_empty() { (-100.0, 0.0) } else { reach(&points) };
    let slack = (0.5 * (LEAST_RANGE_DB - (high - low))).max(1.0);
    let last = points.iter().map(|p| p.time_s).fold(0.0, f64::max);
    let end_s = material.analysis.captures.iter().map(|c| c.duration_s).fold(last, f64::max);
    let frame = Frame::lay(
        canvas,
        top,
        canvas.size.height,
        Axis::exact(0.0, end_s, if canvas.size.is_narrow() { 5 } else { 8 }, "Time (s)"),
        Axis::even(low - slack, high + slack, 5, "Level (dBFS)"),
    );
    for change in changes.iter().filter(|change| frame.shows_x(change.time_s)) {
        let x = frame.x_at(change.time_s);
        canvas.dashed(&[(x, frame.from.1), (x, frame.to.1)], DOTS.0, DOTS.1, stroke(TARGET, 1.8));
    }
    let places: Vec<_> = points.iter().map(|p| frame.at(p.time_s, p.level_dbfs)).collect();
    canvas.line(&places, stroke(BEFORE, 1.4));
    if places.len() <= MOST_DOTS {
        places.iter().for_each(|&place| canvas.dot(place, if places.len() > 40 { 1.8 } else { 3.0 }, BEFORE));
    }
    if points.is_empty() {
        let middle = ((frame.from.0 + frame.to.0) / 2.0, (frame.from.1 + frame.to.1) / 2.0);
        frame.note("no level track on this recording", middle, Anchor::Middle, AFTER);
    }
    frame.close();
}
