//! Symbols, wires and labels of a schematic, with the room each takes up.

use std::fmt::Write as _;

use crate::parts::{Part, PartKind};
use crate::report::charts::escaped;

/// Type size of references and values.
pub const TYPE: f64 = 14.0;
/// Width of a letter over the type size, on the wide side.
const LETTER: f64 = 0.6;
/// Half the length of a symbol with its leads.
pub const REACH: f64 = 34.0;
/// Half the breadth of a symbol.
pub const HALF: f64 = 13.0;

const INK: &str = "#2b2a27";
const PAPER: &str = "#fbf8f1";

/// A rectangle: left, top, right, bottom.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Room {
    left: f64,
    top: f64,
    right: f64,
    bottom: f64,
}

impl Room {
    fn around(x: f64, y: f64, half_width: f64, half_height: f64) -> Self {
        Self { left: x - half_width, top: y - half_height, right: x + half_width, bottom: y + half_height }
    }

    #[cfg(test)]
    fn overlaps(&self, other: &Self) -> bool {
        self.left < other.right
            && other.left < self.right
            && self.top < other.bottom
            && other.top < self.bottom
    }
}

/// Where a label stands to its point.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Anchor {
    /// To the right of it.
    Start,
    /// On it.
    Middle,
}

/// Which way a part lies.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Lie {
    /// In the line.
    Along,
    /// From the line down.
    Down,
}

/// What has been drawn.
#[derive(Debug, Default)]
pub struct Pen {
    wires: String,
    symbols: String,
    labels: String,
    texts: Vec<(Room, String)>,
    rooms: Vec<(Room, String)>,
    right: f64,
    bottom: f64,
}

/// Width of a text.
pub fn text_width(text: &str) -> f64 {
    text.chars().count() as f64 * TYPE * LETTER
}

/// Width of a part's longer label.
pub fn label_width(part: &Part) -> f64 {
    text_width(&part.reference).max(text_width(&part.value))
}

impl Pen {
    /// A straight wire.
    pub fn wire(&mut self, from: (f64, f64), to: (f64, f64)) {
        if from != to {
            let _ = write!(self.wires, "M{} {}L{} {}", from.0, from.1, to.0, to.1);
        }
        self.reach(from.0.max(to.0), from.1.max(to.1));
    }

    /// A dot where wires meet.
    pub fn dot(&mut self, x: f64, y: f64) {
        let _ = write!(self.symbols, "<circle cx=\"{x}\" cy=\"{y}\" r=\"3\" fill=\"{INK}\"/>");
    }

    /// A text that stands alone.
    pub fn label(&mut self, text: &str, (x, y): (f64, f64), anchor: Anchor) {
        let (name, left) = match anchor {
            Anchor::Start => ("start", x),
            Anchor::Middle => ("middle", x - text_width(text) / 2.0),
        };
        let _ =
            write!(self.labels, "<text x=\"{x}\" y=\"{y}\" text-anchor=\"{name}\">{}</text>", escaped(text));
        let room =
            Room { left, top: y - 0.75 * TYPE, right: left + text_width(text), bottom: y + 0.2 * TYPE };
        self.reach(room.right, room.bottom);
        self.texts.push((room, text.to_owned()));
    }

    /// A part about its middle, with leads to `REACH` on both sides and its labels:
    /// above it where it lies along the line, to its right where it hangs down.
    pub fn part(&mut self, part: &Part, (x, y): (f64, f64), lie: Lie) {
        let turn = match lie {
            Lie::Along => String::new(),
            Lie::Down => " rotate(90)".to_owned(),
        };
        let symbol = symbol(part.kind);
        let _ = write!(self.symbols, "<g transform=\"translate({x} {y}){turn}\">{symbol}</g>");
        match lie {
            Lie::Along => {
                self.label(&part.reference, (x, y - HALF - 8.0 - 1.15 * TYPE), Anchor::Middle);
                self.label(&part.value, (x, y - HALF - 8.0), Anchor::Middle);
                self.rooms.push((Room::around(x, y, REACH, HALF), part.reference.clone()));
            }
            Lie::Down => {
                self.label(&part.reference, (x + HALF + 9.0, y - 3.0), Anchor::Start);
                self.label(&part.value, (x + HALF + 9.0, y + 1.1 * TYPE), Anchor::Start);
                self.rooms.push((Room::around(x, y, HALF, REACH), part.reference.clone()));
            }
        }
    }

    /// The source's EMF: a circle with a sine, standing about its middle.
    pub fn emf(&mut self, (x, y): (f64, f64)) {
        let _ = write!(
            self.symbols,
            "<circle cx=\"{x}\" cy=\"{y}\" r=\"17\"/><path d=\"M{} {y}q5 -12 10 0t10 0\"/>",
            x - 10.0
        );
        self.rooms.push((Room::around(x, y, 17.0, 17.0), "EMF".to_owned()));
    }

    /// The sign of the common line, hanging at a point.
    pub fn common(&mut self, (x, y): (f64, f64)) {
        let _ = write!(
            self.symbols,
            "<path d=\"M{x} {y}v8M{} {}h22M{} {}h14M{} {}h6\"/>",
            x - 11.0,
            y + 8.0,
            x - 7.0,
            y + 12.0,
            x - 3.0,
            y + 16.0
        );
        self.rooms
            .push((Room { left: x - 11.0, top: y, right: x + 11.0, bottom: y + 17.0 }, "common".to_owned()));
        self.reach(x + 11.0, y + 17.0);
    }

    /// A small open circle: where a row ends and goes on.
    pub fn port(&mut self, name: &str, (x, y): (f64, f64)) {
        let _ = write!(self.symbols, "<circle cx=\"{x}\" cy=\"{y}\" r=\"4\" fill=\"{PAPER}\"/>");
        self.label(name, (x, y - 10.0), Anchor::Middle);
    }

    /// A dashed line across, where source ends or load begins.
    pub fn border(&mut self, x: f64, from: f64, to: f64) {
        let _ = write!(
            self.symbols,
            "<path d=\"M{x} {from}V{to}\" stroke-dasharray=\"3 5\" stroke-width=\"1\"/>"
        );
    }

    fn reach(&mut self, x: f64, y: f64) {
        self.right = self.right.max(x);
        self.bottom = self.bottom.max(y);
    }

    /// The picture.
    pub fn svg(&self, title: &str) -> String {
        let (width, height) = (self.right.ceil() + 16.0, self.bottom.ceil() + 16.0);
        let mut names: Vec<&str> = self.texts.iter().map(|(_, text)| text.as_str()).collect();
        names.retain(|name| !name.is_empty());
        format!(
            "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{width}\" height=\"{height}\" \
             viewBox=\"0 0 {width} {height}\" role=\"img\">\n<title>{}</title>\n<desc>{}</desc>\n\
             <rect width=\"{width}\" height=\"{height}\" fill=\"{PAPER}\"/>\n\
             <g fill=\"none\" stroke=\"{INK}\" stroke-width=\"1.6\" stroke-linecap=\"round\" stroke-linejoin=\"round\">\n\
             <path d=\"{}\"/>\n{}\n</g>\n\
             <g fill=\"{INK}\" font-family=\"sans-serif\" font-size=\"{TYPE}\">\n{}\n</g>\n</svg>\n",
            escaped(title),
            escaped(&format!("From left to right: {}", names.join(", "))),
            self.wires,
            self.symbols,
            self.labels
        )
    }

    /// Fails where a text lies on another, on a symbol, or outside the picture.
    #[cfg(test)]
    pub fn assert_clear(&self, case: &str) {
        for (index, (room, text)) in self.texts.iter().enumerate() {
            assert!(room.left >= 0.0 && room.top >= 0.0, "{case}: `{text}` sticks out: {room:?}");
            assert!(room.right <= self.right && room.bottom <= self.bottom, "{case}: `{text}` sticks out");
            for (other, what) in self.texts[index + 1..].iter().chain(&self.rooms) {
                assert!(!room.overlaps(other), "{case}: `{text}` lies on `{what}`: {room:?} {other:?}");
            }
        }
        for (index, (room, what)) in self.rooms.iter().enumerate() {
            for (other, that) in &self.rooms[index + 1..] {
                assert!(!room.overlaps(other), "{case}: `{what}` lies on `{that}`");
            }
        }
    }
}

/// The symbol of IEC 60617 about the origin, lying along, with its leads.
fn symbol(kind: PartKind) -> &'static str {
    match kind {
        PartKind::Resistor => {
            "<path d=\"M-34 0h12M22 0h12\"/><rect x=\"-22\" y=\"-8\" width=\"44\" height=\"16\"/>"
        }
        PartKind::Trimmer => {
            "<path d=\"M-34 0h12M22 0h12M-14 13L14 -13M9 -16L18 -9\"/>\
             <rect x=\"-22\" y=\"-8\" width=\"44\" height=\"16\"/>"
        }
        PartKind::Capacitor => "<path d=\"M-34 0h30M4 0h30M-4 -13v26M4 -13v26\"/>",
        PartKind::Coil => {
            "<path d=\"M-34 0h10a6 6 0 0 1 12 0a6 6 0 0 1 12 0a6 6 0 0 1 12 0a6 6 0 0 1 12 0h10\"/>"
        }
    }
}
