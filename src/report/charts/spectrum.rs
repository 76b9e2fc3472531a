//! Spectrum before and after, with the harmonics marked.

use super::axis::{Axis, Frame};
use super::canvas::{AFTER, Anchor, BEFORE, BEFORE_WASH, Canvas, INK, Point, Size, draw, stroke, text_width};
use super::legend::{Sign, head};
use super::{Chart, Material};
use crate::analysis::{Harmonic, Spectrum};
use crate::report::wording::{counted, hertz, hertz_short};

const TITLE: &str = "Spectrum of the recording, before and after the filter";

/// Decades shown below the lowest line or edge of interest.
const DECADES: f64 = 3.5;

pub(super) fn chart(material: &Material, size: Size) -> Chart {
    let description = describe(material);
    let resolution = hertz_short(material.spectrum_before.resolution_hz);
    let caption = format!(
        "Lines of one frequency read their level; noise reads its power in a bandwidth of {resolution}, so that the \
         dot of a weak harmonic can lie below the curve. 0 dBFS is the RMS of a sine that just reaches full \
         scale. The numbers over the dots are the orders of the harmonics."
    );
    let svg = draw(size, TITLE, &description, |canvas| paint(material, canvas));
    Chart { file: "spectrum.svg", title: TITLE, description, caption, svg }
}

fn describe(material: &Material) -> String {
    let harmonics = &material.analysis.harmonics;
    match material.analysis.mains.frequency_hz {
        Some(frequency) if !harmonics.is_empty() => format!(
            "Level against frequency on a logarithmic axis, before the filter and after it. {} of {} are marked, \
             with a dot before the filter and a lozenge after it.",
            counted(harmonics.len(), "harmonic", "harmonics"),
            hertz(frequency),
        ),
        _ => {
            "Level against frequency on a logarithmic axis; no harmonics of the mains were found.".to_owned()
        }
    }
}

fn paint(material: &Material, canvas: &Canvas) {
    let series = [
        (Sign::BeforeCurve, "before"),
        (Sign::AfterCurve, "after"),
        (Sign::BeforeDot, "harmonic before"),
        (Sign::AfterLozenge, "harmonic after"),
    ];
    let shown = if material.analysis.harmonics.is_empty() { &series[..2] } else { &series[..] };
    let top = head(canvas, "Spectrum before and after", shown);
    let (x, y) = axes(material, canvas.size);
    let frame = Frame::lay(canvas, top, canvas.size.height, x, y);
    let before = envelope(&frame, material.spectrum_before);
    for stretch in frame.stretches(before) {
        let ground = |point: Option<&Point>| point.map(|&(x, _)| (x, frame.to.1));
        let filled: Vec<Point> = ground(stretch.first())
            .into_iter()
            .chain(stretch.iter().copied())
            .chain(ground(stretch.last()))
            .collect();
        canvas.outline(&filled, BEFORE_WASH);
        canvas.line(&stretch, stroke(BEFORE, 1.2));
    }
    let after = envelope(&frame, material.spectrum_after);
    for stretch in frame.stretches(after) {
        canvas.line(&stretch, stroke(AFTER, 1.7));
    }
    mark_harmonics(material, &frame);
    frame.close();
}

/// Axes that hold everything of interest, and not the floor far below it.
fn axes(material: &Material, size: Size) -> (Axis, Axis) {
    let spectrum = material.spectrum_before;
    let top_hz = spectrum.frequency_hz.last().copied().unwrap_or(1000.0);
    let highest_order = material.analysis.harmonics.iter().map(|h| h.frequency_hz).fold(0.0, f64::max);
    let keep_top = material.plan.brief.keep.iter().map(|band| band.to_hz).fold(0.0, f64::max);
    let to_hz = top_hz.min((2.0 * highest_order.max(keep_top)).max(200.0));
    let least = spectrum.frequency_hz.iter().copied().find(|&f| f > 0.0).unwrap_or(1.0);
    let from_hz = least.max(to_hz * 10_f64.powf(-DECADES)).min(to_hz / 2.0);
    let levels = [spectrum, material.spectrum_after].into_iter().flat_map(|spectrum| {
        let within = spectrum.frequency_hz.iter().zip(&spectrum.level_dbfs);
        within
            .filter(|(f, level)| (from_hz..=to_hz).contains(*f) && level.is_finite())
            .map(|(_, &level)| level)
    });
    let harmonics = material.simulation.residual.iter().flat_map(|r| [r.before_dbfs, r.after_dbfs]);
    let harmonics: Vec<f64> = harmonics.filter(|level| level.is_finite()).collect();
    let mut sorted: Vec<f64> = levels.collect();
    sorted.sort_by(f64::total_cmp);
    let highest =
        sorted.last().copied().into_iter().chain(harmonics.iter().copied()).fold(f64::NEG_INFINITY, f64::max);
    // A few very low lines would squeeze the rest; they run along the lower edge.
    let floor = sorted.get(sorted.len() / 50).copied().unwrap_or(-100.0);
    let lowest = harmonics.iter().copied().fold(floor, f64::min).max(highest - 140.0);
    (
        Axis::frequency(from_hz, to_hz, size.is_narrow()),
        Axis::exact(lowest - 3.0, highest + 8.0, if size.is_narrow() { 8 } else { 10 }, "Level (dBFS)"),
    )
}

/// Highest and lowest level in each column of the picture: all that can be
/// seen of a long spectrum.
fn envelope(frame: &Frame, spectrum: &Spectrum) -> Vec<(f64, f64)> {
    let mut out: Vec<(f64, f64)> = Vec::new();
    let mut column: Vec<(f64, f64)> = Vec::new();
    let mut held = f64::NEG_INFINITY;
    let points = spectrum.frequency_hz.iter().copied().zip(spectrum.level_dbfs.iter().copied());
    for (frequency, level) in points.filter(|(f, level)| frame.shows_x(*f) && !level.is_nan()) {
        let place = frame.x_at(frequency).floor();
        if place > held {
            flush(&mut column, &mut out);
            held = place;
        }
        column.push((frequency, level));
    }
    flush(&mut column, &mut out);
    out
}

/// Keeps of a column its highest and its lowest point, in the order they came.
fn flush(column: &mut Vec<(f64, f64)>, out: &mut Vec<(f64, f64)>) {
    let by_level = |a: &&(f64, f64), b: &&(f64, f64)| a.1.total_cmp(&b.1);
    let low = column.iter().min_by(by_level).copied();
    let high = column.iter().max_by(by_level).copied();
    if let (Some(low), Some(high)) = (low, high) {
        let (first, second) = if low.0 <= high.0 { (low, high) } else { (high, low) };
        out.push(first);
        if first != second {
            out.push(second);
        }
    }
    column.clear();
}

fn mark_harmonics(material: &Material, frame: &Frame) {
    let shown = || material.analysis.harmonics.iter().filter(|h| frame.shows_x(h.frequency_hz));
    let mut marks = Vec::new();
    for harmonic in shown() {
        let residual = material.simulation.residual.iter().find(|r| r.order == harmonic.order);
        let before = frame.at(harmonic.frequency_hz, harmonic.level_dbfs);
        if let Some(residual) = residual.filter(|r| r.after_dbfs.is_finite()) {
            let after = frame.at(harmonic.frequency_hz, residual.after_dbfs);
            frame.canvas.dashed(&[before, after], 2.0, 2.5, stroke(INK, 0.8));
            frame.canvas.lozenge(after, 4.6, AFTER);
            marks.push(square(after, 5.0, 5.0));
        }
        frame.canvas.dot(before, 3.4, BEFORE);
        marks.push(square(before, 4.0, 4.0));
    }
    let mut by_level: Vec<_> = shown().collect();
    by_level.sort_by(|a, b| b.level_dbfs.total_cmp(&a.level_dbfs));
    for harmonic in by_level {
        number_harmonic(frame, harmonic, &mut marks);
    }
}

/// Writes the order over its dot, unless it would cover another mark: harmonics
/// that crowd each other keep their dots and lose their numbers, the weak ones first.
fn number_harmonic(frame: &Frame, harmonic: &Harmonic, marks: &mut Vec<[f64; 4]>) {
    let size = frame.canvas.size.type_size;
    let label = harmonic.order.to_string();
    let (x, y) = frame.at(harmonic.frequency_hz, harmonic.level_dbfs);
    let at = (x, (y - size).max(frame.from.1 + size * 0.7));
    let place = square(at, text_width(&label, size) / 2.0, size * 0.45);
    if marks.iter().all(|mark| apart(mark, &place)) {
        frame.note(&label, at, Anchor::Middle, INK);
        marks.push(place);
    }
}

/// Left, top, right and bottom of a box about its middle.
fn square((x, y): Point, half_width: f64, half_height: f64) -> [f64; 4] {
    [x - half_width, y - half_height, x + half_width, y + half_height]
}

/// Whether two boxes have no point in common.
fn apart(a: &[f64; 4], b: &[f64; 4]) -> bool {
    a[2] < b[0] || b[2] < a[0] || a[3] < b[1] || b[3] < a[1]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn marks_that_touch_are_not_apart() {
        let mark = square((10.0, 10.0), 4.0, 4.0);
        assert!(!apart(&mark, &square((15.0, 10.0), 2.0, 2.0)));
        assert!(apart(&mark, &square((17.0, 10.0), 2.0, 2.0)));
        assert!(apart(&mark, &square((10.0, 2.0), 2.0, 3.0)));
    }
}
