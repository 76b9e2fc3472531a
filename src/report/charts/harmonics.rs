//! Level of each harmonic before and after.

use super::axis::{Axis, Frame};
use super::canvas::{AFTER, Anchor, BEFORE, Canvas, INK, Size, draw, stroke};
use super::legend::{Sign, asked, head};
use super::{Chart, Material};
use crate::report::wording::{counted, hertz_short};
use crate::simulation::Residual;

const TITLE: &str = "Level of each harmonic, before and after the filter";

pub(super) fn chart(material: &Material, size: Size) -> Chart {
    let residual = &material.simulation.residual;
    let description = if residual.is_empty() {
        "No harmonics were measured.".to_owned()
    } else {
        format!(
            "For each of {} its level before the filter as a dot and after it as a lozenge, joined by a line whose \
             length is the reduction. The same figures stand in the table of what was measured.",
            counted(residual.len(), "harmonic", "harmonics")
        )
    };
    let drowned = if residual.iter().any(|r| r.at_noise_floor) {
        " An open arrow under a lozenge: what is left is in the noise, and its true level is at most this."
    } else {
        ""
    };
    let caption =
        format!("The longer the line between dot and lozenge, the more the filter took away.{drowned}");
    let svg = draw(size, TITLE, &description, |canvas| paint(residual, canvas));
    Chart { file: "harmonics.svg", title: TITLE, description, caption, svg }
}

fn paint(residual: &[Residual], canvas: &Canvas) {
    let mut series = vec![(Sign::BeforeDot, "before"), (Sign::AfterLozenge, "after")];
    if residual.iter().any(|r| r.target_db.is_some()) {
        series.push((Sign::Asked, "asked: at or below"));
    }
    let top = head(canvas, "Each harmonic before and after", &series);
    let levels = residual
        .iter()
        .flat_map(|r| [r.before_dbfs, r.after_dbfs, r.before_dbfs - r.target_db.unwrap_or(0.0)]);
    let levels: Vec<f64> = levels.filter(|level| level.is_finite()).collect();
    let (low, high) = if levels.is_empty() {
        (-100.0, 0.0)
    } else {
        (
            levels.iter().copied().fold(f64::INFINITY, f64::min),
            levels.iter().copied().fold(f64::NEG_INFINITY, f64::max),
        )
    };
    let title = if names_frequencies(residual, canvas.size) { "Order and frequency" } else { "Order" };
    let x = Axis::places(labels(residual, canvas.size), title);
    let frame =
        Frame::lay(canvas, top, canvas.size.height, x, Axis::even(low - 4.0, high + 4.0, 7, "Level (dBFS)"));
    for (place, harmonic) in residual.iter().enumerate() {
        pair(&frame, place as f64, harmonic, residual.len());
    }
    if residual.is_empty() {
        let middle = ((frame.from.0 + frame.to.0) / 2.0, (frame.from.1 + frame.to.1) / 2.0);
        frame.note("no harmonics on this recording", middle, Anchor::Middle, AFTER);
    }
    frame.close();
}

/// Whether there is room for the frequencies too.
fn names_frequencies(residual: &[Residual], size: Size) -> bool {
    (size.width - 90.0) / residual.len().max(1) as f64 > size.type_size * 7.5
}

/// Order and frequency where there is room, the order alone where there is not.
fn labels(residual: &[Residual], size: Size) -> Vec<String> {
    let frequencies = names_frequencies(residual, size);
    residual
        .iter()
        .map(|r| {
            if frequencies {
                format!("{} · {}", r.order, hertz_short(r.frequency_hz.round()).replace('\u{a0}', " "))
            } else {
                r.order.to_string()
            }
        })
        .collect()
}

fn pair(frame: &Frame, place: f64, harmonic: &Residual, count: usize) {
    if !harmonic.before_dbfs.is_finite() {
        return;
    }
    let canvas = frame.canvas;
    let scale = if count > 25 { 0.7 } else { 1.0 };
    let before = frame.at(place, harmonic.before_dbfs);
    let half = ((frame.x_at(1.0) - frame.x_at(0.0)) * 0.3).min(22.0);
    if let Some(target_db) = harmonic.target_db {
        let y = frame.y_at(harmonic.before_dbfs - target_db);
        asked(canvas, before.0 - half, before.0 + half, y);
    }
    if harmonic.after_dbfs.is_finite() {
        let after = frame.at(place, harmonic.after_dbfs);
        canvas.line(&[before, after], stroke(INK, 1.2));
        if harmonic.at_noise_floor {
            let (x, y) = (after.0, (after.1 + 14.0).min(frame.to.1));
            canvas.line(&[(after.0, after.1), (x, y)], stroke(AFTER, 1.4));
            canvas.line(&[(x - 4.0, y - 5.0), (x, y), (x + 4.0, y - 5.0)], stroke(AFTER, 1.4));
        }
        canvas.lozenge(after, 5.6 * scale, AFTER);
    }
    canvas.dot(before, 4.4 * scale, BEFORE);
}
