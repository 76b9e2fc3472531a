//! Axes with sensible marks, and the frame they make.

use plotters::style::RGBColor;

use super::canvas::{Anchor, Canvas, FAINT_INK, GRID, INK, PAPER, Point, Type, stroke, text_width};
use crate::report::wording::{number, short};

/// How values are laid out along an axis.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Layout {
    Linear,
    Logarithmic,
}

/// One axis: its ends, its marks, what it shows.
#[derive(Debug, Clone)]
pub(super) struct Axis {
    from: f64,
    to: f64,
    layout: Layout,
    /// Marks with their labels; an empty label is a line only.
    marks: Vec<(f64, String)>,
    title: String,
    /// Labels have at least the room of this one, so that panels over each other line up.
    widest: &'static str,
}

/// Four digits and a sign.
const WIDEST: &str = "−100";

impl Axis {
    /// A logarithmic frequency axis in hertz.
    ///
    /// Both ends must be positive; they are moved apart when they are not in order.
    pub fn frequency(from_hz: f64, to_hz: f64, crowded: bool) -> Self {
        let from = if from_hz.is_finite() && from_hz > 0.0 { from_hz } else { 1.0 };
        let to = if to_hz.is_finite() && to_hz > from * 1.01 { to_hz } else { from * 10.0 };
        let decades = (to / from).log10();
        let labelled: &[u32] = match (decades, crowded) {
            (d, false) if d < 0.5 => &[1, 2, 3, 4, 5, 6, 7, 8, 9],
            (d, true) if d < 0.8 => &[1, 2, 3, 5, 7],
            (d, false) if d < 4.3 => &[1, 2, 5],
            (d, true) if d < 2.1 => &[1, 2, 5],
            _ => &[1],
        };
        let mut marks = Vec::new();
        for decade in (from.log10().floor() as i32)..=(to.log10().ceil() as i32) {
            for step in 1..=9 {
                let value = f64::from(step) * 10_f64.powi(decade);
                if value < from * 0.999 || value > to * 1.001 {
                    continue;
                }
                let label = if labelled.contains(&step) { frequency_mark(value) } else { String::new() };
                marks.push((value, label));
            }
        }
        Self {
            from,
            to,
            layout: Layout::Logarithmic,
            marks,
            title: "Frequency (Hz)".to_owned(),
            widest: WIDEST,
        }
    }

    /// An even axis over at least this range, its ends moved out to whole steps.
    pub fn even(from: f64, to: f64, most_marks: usize, title: &str) -> Self {
        let (from, to) = ordered(from, to);
        let step = step_for((to - from) / most_marks.max(1) as f64);
        let (low, high) = ((from / step - 1e-9).floor() as i64, (to / step + 1e-9).ceil() as i64);
        let decimals = (-(step.log10() + 1e-9).floor()).clamp(0.0, 9.0) as usize;
        let marks = (low..=high).map(|n| (n as f64 * step, number(n as f64 * step, decimals))).collect();
        Self {
            from: low as f64 * step,
            to: high as f64 * step,
            layout: Layout::Linear,
            marks,
            title: title.to_owned(),
            widest: WIDEST,
        }
    }

    /// The same axis with room for labels as wide as this one.
    pub fn with_room_for(self, widest: &'static str) -> Self {
        Self { widest, ..self }
    }

    /// An even axis that ends exactly where told, with marks on whole steps between.
    pub fn exact(from: f64, to: f64, most_marks: usize, title: &str) -> Self {
        let (from, to) = ordered(from, to);
        let mut axis = Self::even(from, to, most_marks, title);
        let slack = (to - from) * 1e-6;
        axis.marks.retain(|(value, _)| (from - slack..=to + slack).contains(value));
        Self { from, to, ..axis }
    }

    /// An axis of named places, one after the other.
    pub fn places(labels: Vec<String>, title: &str) -> Self {
        let count = labels.len().max(1);
        let marks = labels.into_iter().enumerate().map(|(n, label)| (n as f64, label)).collect();
        Self {
            from: -0.5,
            to: count as f64 - 0.5,
            layout: Layout::Linear,
            marks,
            title: title.to_owned(),
            widest: WIDEST,
        }
    }

    /// Lower and upper end.
    pub fn ends(&self) -> (f64, f64) {
        (self.from, self.to)
    }

    /// Where a value lies, 0 at the lower end and 1 at the upper; beyond the
    /// ends it is brought back to them.
    fn share(&self, value: f64) -> f64 {
        let raw = match self.layout {
            Layout::Linear => (value - self.from) / (self.to - self.from),
            Layout::Logarithmic => {
                (value.max(f64::MIN_POSITIVE) / self.from).ln() / (self.to / self.from).ln()
            }
        };
        raw.clamp(0.0, 1.0)
    }

    fn holds(&self, value: f64) -> bool {
        (self.from..=self.to).contains(&value)
    }

    /// Width of its widest label.
    fn label_width(&self, size: f64) -> f64 {
        self.marks.iter().map(|(_, label)| text_width(label, size)).fold(0.0, f64::max)
    }
}

/// The ends in order, finite and apart.
fn ordered(from: f64, to: f64) -> (f64, f64) {
    let from = if from.is_finite() { from } else { 0.0 };
    let to = if to.is_finite() { to } else { from + 1.0 };
    let (low, high) = (from.min(to), from.max(to));
    if high - low > 1e-9 * high.abs().max(1e-9) { (low, high) } else { (low - 0.5, high + 0.5) }
}

/// The least of 1, 2, 5 times a power of ten that is not below `least`.
fn step_for(least: f64) -> f64 {
    let decade = 10_f64.powf(least.log10().floor());
    [1.0, 2.0, 5.0, 10.0]
        .into_iter()
        .map(|n| n * decade)
        .find(|step| *step >= least * 0.999_999)
        .unwrap_or(least)
}

fn frequency_mark(value: f64) -> String {
    if value >= 1000.0 { format!("{}k", short(value / 1000.0)) } else { short(value) }
}

/// A rectangle of the picture with an axis below and one at its left.
pub(super) struct Frame<'c, 'a> {
    /// The picture.
    pub canvas: &'c Canvas<'a>,
    /// Upper left corner of the plotting ground.
    pub from: Point,
    /// Lower right corner.
    pub to: Point,
    /// The axis below.
    pub x: Axis,
    /// The axis at the left.
    pub y: Axis,
}

impl<'c, 'a> Frame<'c, 'a> {
    /// Lays a frame between `top` and `bottom` of the picture, leaves room for
    /// labels and titles, and draws grid and labels.
    pub fn lay(canvas: &'c Canvas<'a>, top: f64, bottom: f64, x: Axis, y: Axis) -> Self {
        let size = canvas.size.type_size;
        let title_room = if y.title.is_empty() { 0.0 } else { size * 1.5 };
        let left = title_room + y.label_width(size).max(text_width(y.widest, size)) + size * 1.1;
        let label_half = x.marks.last().map_or(0.0, |(_, label)| text_width(label, size) / 2.0);
        let right = canvas.size.width - label_half.max(size * 1.2);
        let below = size * 1.6 + if x.title.is_empty() { 0.0 } else { size * 1.5 };
        let frame = Self { canvas, from: (left, top), to: (right, bottom - below), x, y };
        frame.draw_ground();
        frame
    }

    fn draw_ground(&self) {
        let canvas = self.canvas;
        let size = canvas.size.type_size;
        for (value, label) in &self.y.marks {
            let y = self.y_at(*value);
            canvas.line(&[(self.from.0, y), (self.to.0, y)], stroke(GRID, 1.0));
            canvas.label(label, (self.from.0 - size * 0.5, y), Anchor::End, FAINT_INK);
        }
        let mut free_from = f64::NEG_INFINITY;
        for (value, label) in &self.x.marks {
            let x = self.x_at(*value);
            let weight = if label.is_empty() { 0.5 } else { 1.0 };
            canvas.line(&[(x, self.from.1), (x, self.to.1)], stroke(GRID, weight));
            let half = text_width(label, size) / 2.0;
            // A label that would run into the one before it is left out.
            if !label.is_empty() && x - half >= free_from {
                canvas.label(label, (x, self.to.1 + size * 0.95), Anchor::Middle, FAINT_INK);
                free_from = x + half + size * 0.4;
            }
        }
        let middle = (self.from.0 + self.to.0) / 2.0;
        if !self.x.title.is_empty() {
            canvas.label(&self.x.title, (middle, self.to.1 + size * 2.35), Anchor::Middle, INK);
        }
        if !self.y.title.is_empty() {
            let look = Type { upright: true, ..canvas.plain(Anchor::Middle, INK) };
            canvas.text(&self.y.title, (size * 0.85, (self.from.1 + self.to.1) / 2.0), look);
        }
    }

    /// Draws the frame's edge; last, so that it lies over what touches it.
    pub fn close(&self) {
        self.canvas.rectangle(self.from, self.to, stroke(FAINT_INK, 1.0));
    }

    /// Place of a value along x, held inside the frame.
    pub fn x_at(&self, value: f64) -> f64 {
        self.from.0 + self.x.share(value) * (self.to.0 - self.from.0)
    }

    /// Place of a value along y, held inside the frame.
    pub fn y_at(&self, value: f64) -> f64 {
        self.to.1 - self.y.share(value) * (self.to.1 - self.from.1)
    }

    /// Place of a point, held inside the frame.
    pub fn at(&self, x: f64, y: f64) -> Point {
        (self.x_at(x), self.y_at(y))
    }

    /// Whether a value lies on the x axis.
    pub fn shows_x(&self, value: f64) -> bool {
        self.x.holds(value)
    }

    /// Whether a value lies on the y axis.
    pub fn shows_y(&self, value: f64) -> bool {
        self.y.holds(value)
    }

    /// The curve's stretches inside the x range, broken where a value is missing.
    pub fn stretches(&self, points: impl IntoIterator<Item = (f64, f64)>) -> Vec<Vec<Point>> {
        let mut stretches = vec![Vec::new()];
        for (x, y) in points {
            let there = x.is_finite() && !y.is_nan() && self.shows_x(x);
            match (there, stretches.last_mut()) {
                (true, Some(stretch)) => stretch.push(self.at(x, y)),
                (false, Some(stretch)) if !stretch.is_empty() => stretches.push(Vec::new()),
                _ => {}
            }
        }
        stretches.retain(|stretch| !stretch.is_empty());
        stretches
    }

    /// The curve's stretches inside the whole frame, cut off where it leaves.
    pub fn clipped(&self, points: impl IntoIterator<Item = (f64, f64)>) -> Vec<Vec<Point>> {
        let (low, high) = self.y.ends();
        let side = |y: f64| if y < low { -1 } else { i32::from(y > high) };
        let mut stretches: Vec<Vec<Point>> = vec![Vec::new()];
        let mut last: Option<(f64, f64)> = None;
        for (x, y) in points {
            if !x.is_finite() || y.is_nan() || !self.shows_x(x) {
                last = None;
                stretches.push(Vec::new());
                continue;
            }
            if let Some((x0, y0)) = last.filter(|(_, y0)| side(*y0) != side(y)) {
                for edge in if y > y0 { [low, high] } else { [high, low] } {
                    let share = (edge - y0) / (y - y0);
                    if (0.0..=1.0).contains(&share) {
                        // Straight between neighbours as they are seen.
                        let between = self.x_at(x0) + share * (self.x_at(x) - self.x_at(x0));
                        stretches.last_mut().expect("begun").push((between, self.y_at(edge)));
                        if side(y) == if edge == high { 1 } else { -1 } {
                            stretches.push(Vec::new());
                        }
                    }
                }
            }
            if side(y) == 0 {
                stretches.last_mut().expect("begun").push(self.at(x, y));
            }
            last = Some((x, y));
        }
        stretches.retain(|stretch| stretch.len() > 1);
        stretches
    }

    /// Text on a scrap of paper, moved so that it stays inside the frame.
    pub fn note(&self, text: &str, at: Point, anchor: Anchor, color: RGBColor) {
        let size = self.canvas.size.type_size * 0.92;
        let width = text_width(text, size);
        let wanted = match anchor {
            Anchor::Start => at.0,
            Anchor::Middle => at.0 - width / 2.0,
            Anchor::End => at.0 - width,
        };
        let left = wanted.min(self.to.0 - width - 3.0).max(self.from.0 + 3.0);
        let y = at.1.clamp(self.from.1 + size * 0.7, self.to.1 - size * 0.7);
        self.canvas.rectangle(
            (left - 2.0, y - size * 0.62),
            (left + width + 2.0, y + size * 0.62),
            stroke(PAPER, 0.0).filled(),
        );
        // The width is an estimate: text keeps to the side it was placed by.
        let x = match anchor {
            Anchor::Start => left,
            Anchor::Middle => left + width / 2.0,
            Anchor::End => left + width,
        };
        self.canvas.text(text, (x, y), Type { size, ..self.canvas.plain(anchor, color) });
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn a_frequency_axis_is_marked_at_ones_twos_and_fives() {
        let axis = Axis::frequency(0.5, 500.0, false);
        let labels: Vec<&str> =
            axis.marks.iter().map(|(_, label)| label.as_str()).filter(|l| !l.is_empty()).collect();
        assert_eq!(labels, ["0.5", "1", "2", "5", "10", "20", "50", "100", "200", "500"]);
    }

    #[test]
    fn nothing_to_show_still_makes_an_axis() {
        for axis in [
            Axis::even(0.0, 0.0, 5, ""),
            Axis::even(f64::NAN, f64::INFINITY, 5, ""),
            Axis::exact(3.0, 3.0, 4, ""),
        ] {
            assert!(axis.to > axis.from);
            assert!(!axis.marks.is_empty());
        }
    }

    #[test]
    fn a_curve_is_cut_where_it_leaves_the_frame_and_taken_up_where_it_returns() {
        let size = crate::report::charts::Size::WIDE;
        let mut found = Vec::new();
        crate::report::charts::canvas::draw(size, "", "", |canvas| {
            let axes = || (Axis::exact(0.0, 4.0, 4, ""), Axis::exact(-1.0, 1.0, 4, ""));
            let frame = Frame::lay(canvas, 0.0, 300.0, axes().0, axes().1);
            let cut = frame.clipped([(0.0, 0.0), (1.0, -2.0), (2.0, -3.0), (3.0, 0.0), (4.0, 0.0)]);
            found = cut.iter().map(|stretch| stretch.len()).collect();
            assert_eq!(cut[0][1], frame.at(0.5, -1.0));
            assert!((cut[1][0].0 - frame.x_at(2.0 + 2.0 / 3.0)).abs() < 1e-9);
            let through = frame.clipped([(1.0, -5.0), (2.0, 5.0)]);
            assert_eq!(through.len(), 1);
            assert_eq!(frame.clipped([(0.0, f64::NEG_INFINITY), (1.0, f64::NAN)]).len(), 0);
        });
        assert_eq!(found, [2, 3]);
    }

    proptest! {
        #[test]
        fn an_even_axis_covers_its_range_with_marks_on_round_steps(low in -1e4..1e4_f64, span in 1e-4..1e5_f64) {
            let axis = Axis::even(low, low + span, 6, "");
            prop_assert!(axis.from <= low + 1e-9 * span && axis.to >= low + span - 1e-9 * span);
            prop_assert!((2..=9).contains(&axis.marks.len()), "{} marks", axis.marks.len());
        }

        #[test]
        fn every_place_lies_within_the_axis(value in proptest::num::f64::ANY) {
            let share = Axis::frequency(1.0, 1000.0, false).share(value);
            prop_assert!(value.is_nan() || (0.0..=1.0).contains(&share));
        }
    }
}
