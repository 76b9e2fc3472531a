//! Title and key above a chart.

use plotters::style::RGBColor;

use super::canvas::{
    AFTER, Anchor, BEFORE, BEFORE_WASH, Canvas, INK, KEEP, TARGET, Type, WASH, WASH_DEEP, stroke, text_width,
};

/// How a series looks in the key.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Sign {
    /// A filled ground under a thin line: before.
    BeforeCurve,
    /// A thick line: after, or nominal.
    AfterCurve,
    /// A thin line: before.
    BeforeLine,
    /// A round dot: before.
    BeforeDot,
    /// A lozenge: after.
    AfterLozenge,
    /// A pale band.
    Band,
    /// A deeper band inside another.
    InnerBand,
    /// A rail with end marks: what must be kept.
    KeepRail,
    /// A wedge on a bar: what is asked.
    Asked,
    /// A dashed line of this colour.
    Dashed(RGBColor),
    /// A dotted line of this colour.
    Dotted(RGBColor),
}

/// Length of a dot of a dotted line, and of the gap after it.
pub(super) const DOTS: (f64, f64) = (2.0, 4.0);

/// Writes title and key from the top of the picture; gives the height they took.
pub(super) fn head(canvas: &Canvas, title: &str, series: &[(Sign, &str)]) -> f64 {
    let size = canvas.size.type_size;
    let margin = size * 0.8;
    let look = Type { size: size * 1.12, bold: true, ..canvas.plain(Anchor::Start, INK) };
    canvas.text(title, (margin, size * 1.3), look);
    let (mut x, mut y) = (margin, size * 3.1);
    let sign_width = size * 1.9;
    for (sign, label) in series {
        let width = sign_width + size * 0.5 + text_width(label, size) + size * 1.2;
        if x > margin && x + width > canvas.size.width {
            x = margin;
            y += size * 1.5;
        }
        draw_sign(canvas, *sign, x, y, sign_width);
        canvas.label(label, (x + sign_width + size * 0.5, y), Anchor::Start, INK);
        x += width;
    }
    if series.is_empty() { size * 2.4 } else { y + size * 1.3 }
}

fn draw_sign(canvas: &Canvas, sign: Sign, x: f64, y: f64, width: f64) {
    let half = canvas.size.type_size * 0.45;
    let across = [(x, y), (x + width, y)];
    let middle = (x + width / 2.0, y);
    match sign {
        Sign::BeforeCurve => {
            canvas.rectangle((x, y - half * 0.6), (x + width, y + half), BEFORE_WASH.filled_style());
            canvas.line(&[(x, y - half * 0.6), (x + width, y - half * 0.6)], stroke(BEFORE, 1.3));
        }
        Sign::AfterCurve => canvas.line(&across, stroke(AFTER, 2.4)),
        Sign::BeforeLine => canvas.line(&across, stroke(BEFORE, 1.6)),
        Sign::BeforeDot => canvas.dot(middle, 4.5, BEFORE),
        Sign::AfterLozenge => canvas.lozenge(middle, 6.0, AFTER),
        Sign::Band => canvas.rectangle((x, y - half), (x + width, y + half), WASH.filled_style()),
        Sign::InnerBand => canvas.rectangle((x, y - half), (x + width, y + half), WASH_DEEP.filled_style()),
        Sign::KeepRail => rail(canvas, x, x + width, y - half, y + half),
        Sign::Asked => asked(canvas, x + 2.0, x + width - 2.0, y + half * 0.8),
        Sign::Dashed(color) => canvas.dashed(&across, 6.0, 4.0, stroke(color, 1.8)),
        Sign::Dotted(color) => canvas.dashed(&across, DOTS.0, DOTS.1, stroke(color, 1.8)),
    }
}

/// The passage a keep band leaves: two rails with short cross ticks inwards.
pub(super) fn rail(canvas: &Canvas, from: f64, to: f64, top: f64, bottom: f64) {
    for (y, inward) in [(top, 1.0), (bottom, -1.0)] {
        canvas.line(&[(from, y), (to, y)], stroke(KEEP, 2.2));
        for x in [from, to] {
            canvas
                .line(&[(x, y), (x, y + inward * ((bottom - top) / 3.0).clamp(2.0, 6.0))], stroke(KEEP, 2.2));
        }
    }
}

/// A bar that the curve must pass below, with a wedge pointing down on it.
pub(super) fn asked(canvas: &Canvas, from: f64, to: f64, y: f64) {
    canvas.wedge(((from + to) / 2.0, y - 2.6), 7.0, TARGET);
    canvas.line(&[(from, y), (to, y)], stroke(TARGET, 2.4));
}

/// A colour as a fill.
pub(super) trait Filled {
    /// The colour as a fill.
    fn filled_style(self) -> plotters::style::ShapeStyle;
}

impl Filled for RGBColor {
    fn filled_style(self) -> plotters::style::ShapeStyle {
        plotters::style::Color::filled(&self)
    }
}
