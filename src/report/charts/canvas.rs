//! The drawing ground of all charts: paper, ink, and strokes in picture units.

use plotters::coord::Shift;
use plotters::prelude::*;
use plotters::style::text_anchor::{HPos, Pos, VPos};

/// Drawing units per picture unit: plotters draws on whole units, and a curve
/// drawn on whole picture units shows steps.
const FINE: f64 = 4.0;

/// Plotters divides the size it is given by this when it writes SVG.
const FONT_FACTOR: f64 = 1.24;

/// Width of a letter over its height, on the wide side for common sans-serif faces.
pub(in crate::report) const LETTER_WIDTH: f64 = 0.58;

// Colours: dark and light enough on paper to be told apart without hue too;
// every series also has a stroke, a shape or a place of its own.

/// Ground of every picture, in dark mode too.
pub(super) const PAPER: RGBColor = RGBColor(0xfb, 0xf8, 0xf1);
/// Text and frames.
pub(super) const INK: RGBColor = RGBColor(0x2b, 0x2a, 0x27);
/// Second-rank text.
pub(super) const FAINT_INK: RGBColor = RGBColor(0x5f, 0x5b, 0x53);
/// Grid lines.
pub(super) const GRID: RGBColor = RGBColor(0xde, 0xd8, 0xca);
/// Before the filter: burnt orange.
pub(super) const BEFORE: RGBColor = RGBColor(0xc0, 0x5a, 0x12);
/// Ground under the curve before the filter.
pub(super) const BEFORE_WASH: RGBColor = RGBColor(0xf3, 0xd3, 0xb3);
/// After the filter: deep blue.
pub(super) const AFTER: RGBColor = RGBColor(0x12, 0x4f, 0x8a);
/// Bands around a curve: pale blue.
pub(super) const WASH: RGBColor = RGBColor(0xbf, 0xd6, 0xea);
/// A second band inside the first.
pub(super) const WASH_DEEP: RGBColor = RGBColor(0x8f, 0xb6, 0xd8);
/// What must be kept: green.
pub(super) const KEEP: RGBColor = RGBColor(0x2f, 0x70, 0x4a);
/// What is asked: plum.
pub(super) const TARGET: RGBColor = RGBColor(0x7a, 0x1f, 0x5c);

/// Size of a picture in picture units, and its type sizes.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(in crate::report) struct Size {
    /// Width.
    pub width: f64,
    /// Height of an ordinary chart.
    pub height: f64,
    /// Type size of labels.
    pub type_size: f64,
}

impl Size {
    /// For a page of ordinary width, and for files.
    pub const WIDE: Self = Self { width: 880.0, height: 430.0, type_size: 14.0 };
    /// For a telephone.
    pub const NARROW: Self = Self { width: 400.0, height: 380.0, type_size: 12.5 };

    /// The same width with another height.
    pub fn tall(self, factor: f64) -> Self {
        Self { height: (self.height * factor).round(), ..self }
    }

    /// Whether space is short.
    pub fn is_narrow(self) -> bool {
        self.width < 600.0
    }
}

/// How text stands about its point.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Anchor {
    /// Begins there.
    Start,
    /// Centred on it.
    Middle,
    /// Ends there.
    End,
}

/// The look of a run of text.
#[derive(Debug, Clone, Copy)]
pub(super) struct Type {
    pub size: f64,
    pub color: RGBColor,
    pub anchor: Anchor,
    pub bold: bool,
    pub upright: bool,
}

/// A point in picture units, from the upper left corner.
pub(super) type Point = (f64, f64);

/// A picture being drawn.
pub(super) struct Canvas<'a> {
    area: DrawingArea<SVGBackend<'a>, Shift>,
    /// Its size.
    pub size: Size,
}

/// Width that `text` takes at `size`, estimated on the wide side.
pub(in crate::report) fn text_width(text: &str, size: f64) -> f64 {
    text.chars().count() as f64 * size * LETTER_WIDTH
}

/// Draws a picture of this size with a title and a description for those who
/// cannot see it, and hands back its SVG.
pub(super) fn draw(size: Size, title: &str, description: &str, paint: impl FnOnce(&Canvas)) -> String {
    let mut svg = String::new();
    {
        let fine = ((size.width * FINE) as u32, (size.height * FINE) as u32);
        let area = SVGBackend::with_string(&mut svg, fine).into_drawing_area();
        let canvas = Canvas { area, size };
        canvas.rectangle((0.0, 0.0), (size.width, size.height), PAPER.filled());
        paint(&canvas);
        drawn(canvas.area.present());
    }
    let body = svg.find('>').map_or("", |end| &svg[end + 1..]);
    format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{}\" height=\"{}\" viewBox=\"0 0 {} {}\" \
         role=\"img\">\n<title>{}</title>\n<desc>{}</desc>{body}",
        size.width,
        size.height,
        size.width * FINE,
        size.height * FINE,
        escaped(title),
        escaped(description),
    )
}

/// Text as XML wants it.
pub(in crate::report) fn escaped(text: &str) -> String {
    text.chars().fold(String::with_capacity(text.len()), |mut out, letter| {
        match letter {
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '&' => out.push_str("&amp;"),
            '"' => out.push_str("&quot;"),
            other => out.push(other),
        }
        out
    })
}

/// Writing into a string has nothing that could fail.
fn drawn<T, E: std::fmt::Debug>(result: Result<T, E>) {
    result.map(drop).expect("drawing into memory does not fail");
}

fn fine((x, y): Point) -> (i32, i32) {
    ((x * FINE).round() as i32, (y * FINE).round() as i32)
}

/// A stroke of this colour and width in picture units.
pub(super) fn stroke(color: RGBColor, width: f64) -> ShapeStyle {
    color.stroke_width((width * FINE).round() as u32)
}

impl Canvas<'_> {
    /// A rectangle between two corners.
    pub fn rectangle(&self, from: Point, to: Point, style: impl Into<ShapeStyle>) {
        drawn(self.area.draw(&Rectangle::new([fine(from), fine(to)], style)));
    }

    /// A line through all points.
    pub fn line(&self, points: &[Point], style: ShapeStyle) {
        if points.len() > 1 {
            drawn(
                self.area
                    .draw(&PathElement::new(points.iter().copied().map(fine).collect::<Vec<_>>(), style)),
            );
        }
    }

    /// A line in dashes of `on` with gaps of `off`.
    pub fn dashed(&self, points: &[Point], on: f64, off: f64, style: ShapeStyle) {
        let mut left = on;
        let mut inked = true;
        let mut dash = points.first().map_or(Vec::new(), |&first| vec![first]);
        for pair in points.windows(2) {
            let ((x0, y0), (x1, y1)) = (pair[0], pair[1]);
            let length = (x1 - x0).hypot(y1 - y0);
            let mut walked = 0.0;
            while length - walked > left {
                walked += left;
                let share = walked / length;
                let here = (x0 + share * (x1 - x0), y0 + share * (y1 - y0));
                if inked {
                    dash.push(here);
                    self.line(&dash, style);
                }
                dash = vec![here];
                inked = !inked;
                left = if inked { on } else { off };
            }
            left -= length - walked;
            dash.push((x1, y1));
        }
        if inked {
            self.line(&dash, style);
        }
    }

    /// A filled outline.
    pub fn outline(&self, points: &[Point], color: RGBColor) {
        if points.len() > 2 {
            let points = points.iter().copied().map(fine).collect::<Vec<_>>();
            drawn(self.area.draw(&Polygon::new(points, color.filled())));
        }
    }

    /// A dot, ringed with paper so that it stands off what lies under it.
    pub fn dot(&self, at: Point, radius: f64, color: RGBColor) {
        let ring = ((radius + 1.2) * FINE) as i32;
        drawn(self.area.draw(&Circle::new(fine(at), ring, PAPER.filled())));
        drawn(self.area.draw(&Circle::new(fine(at), (radius * FINE) as i32, color.filled())));
    }

    /// A triangle on its point, with its point at `at`.
    pub fn wedge(&self, at: Point, size: f64, color: RGBColor) {
        let corner = |grow: f64| {
            let (half, height) = (size * 0.62 + grow, size + 1.5 * grow);
            [
                (at.0, at.1 + grow),
                (at.0 - half, at.1 + grow - height - grow),
                (at.0 + half, at.1 + grow - height - grow),
            ]
        };
        self.outline(&corner(1.2), PAPER);
        self.outline(&[at, (at.0 - size * 0.62, at.1 - size), (at.0 + size * 0.62, at.1 - size)], color);
    }

    /// A square standing on a corner, centred.
    pub fn lozenge(&self, at: Point, half: f64, color: RGBColor) {
        let corners = |h: f64| [(at.0, at.1 - h), (at.0 + h, at.1), (at.0, at.1 + h), (at.0 - h, at.1)];
        self.outline(&corners(half + 1.6), PAPER);
        self.outline(&corners(half), color);
    }

    /// A run of text, centred in height on its point.
    pub fn text(&self, text: &str, at: Point, look: Type) {
        let anchor = match look.anchor {
            Anchor::Start => HPos::Left,
            Anchor::Middle => HPos::Center,
            Anchor::End => HPos::Right,
        };
        let style = if look.bold { FontStyle::Bold } else { FontStyle::Normal };
        let mut font = FontDesc::new(FontFamily::SansSerif, look.size * FONT_FACTOR * FINE, style);
        if look.upright {
            font = font.transform(FontTransform::Rotate270);
        }
        let style = TextStyle::from(font).color(&look.color).pos(Pos::new(anchor, VPos::Center));
        drawn(self.area.draw_text(text, &style, fine(at)));
    }

    /// Text of the size of labels.
    pub fn label(&self, text: &str, at: Point, anchor: Anchor, color: RGBColor) {
        self.text(text, at, self.plain(anchor, color));
    }

    /// The look of labels.
    pub fn plain(&self, anchor: Anchor, color: RGBColor) -> Type {
        Type { size: self.size.type_size, color, anchor, bold: false, upright: false }
    }
}
