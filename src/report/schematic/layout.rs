//! Where everything stands: each thing says what room it needs, then is drawn into it.

use super::pen::{Anchor, HALF, Lie, Pen, REACH, TYPE, label_width, text_width};
use crate::network::{Branch, TwoPort};
use crate::parts::Part;

/// What stands in the row from left to right.
#[derive(Debug, Clone)]
pub enum Item {
    /// The source's EMF, from the line to the common line.
    Emf,
    /// A two-port.
    Port(TwoPort),
    /// Where the source ends, or the load begins.
    End(&'static str),
}

/// Longest row before it goes on below.
const LONGEST_ROW: f64 = 1000.0;
/// Margin around the picture, and the gap between things.
const MARGIN: f64 = 24.0;
/// Room above a part that lies along, for its labels.
const LABELS_ABOVE: f64 = HALF + 11.0 + 2.15 * TYPE;
/// Between things that stand beside each other.
const GAP: f64 = 12.0;
/// Wire before and after branches side by side.
const LEAD: f64 = 14.0;
/// Room that the sign of the common line takes up below a column.
const COMMON_SIGN: f64 = 24.0;

/// Room along a line: length, above it, below it.
#[derive(Debug, Clone, Copy)]
struct Along {
    length: f64,
    above: f64,
    below: f64,
}

/// Room down a column: to the left and right of its axis, and its height.
#[derive(Debug, Clone, Copy)]
struct Down {
    left: f64,
    right: f64,
    height: f64,
}

/// Draws the items in rows.
pub fn sheet(parts: &[Part], items: &[Item]) -> Pen {
    let mut sheet = Sheet { parts, pen: Pen::default() };
    let rows = sheet.rows(items);
    let last = rows.len() - 1;
    let mut top = MARGIN;
    for (index, row) in rows.iter().enumerate() {
        let ports = [index.checked_sub(1), (index < last).then_some(index)];
        top = sheet.row(row, top, ports.map(|port| port.map(port_name))) + 2.0 * MARGIN;
    }
    sheet.pen
}

/// Name of the node between one row and the next: a, b, c.
fn port_name(row: usize) -> String {
    char::from_u32('a' as u32 + row as u32).unwrap_or('z').to_string()
}

struct Sheet<'a> {
    parts: &'a [Part],
    pen: Pen,
}

impl Sheet<'_> {
    /// Items that fit into one row each.
    fn rows<'b>(&self, items: &'b [Item]) -> Vec<Vec<&'b Item>> {
        let mut rows = vec![Vec::new()];
        let mut length = 0.0;
        for item in items {
            let more = self.item_length(item);
            if length + more > LONGEST_ROW && length > 0.0 {
                rows.push(Vec::new());
                length = 0.0;
            }
            length += more;
            rows.last_mut().expect("a row").push(item);
        }
        rows
    }

    fn item_length(&self, item: &Item) -> f64 {
        match item {
            Item::Emf => 2.0 * HALF + GAP,
            Item::End(name) => text_width(name) / 2.0 + GAP,
            Item::Port(port) => self.port_room(port).length,
        }
    }

    /// One row below `top`, with the names of the nodes at which it goes on from the
    /// row above and in the row below; returns its bottom.
    fn row(&mut self, items: &[&Item], top: f64, [from, to]: [Option<String>; 2]) -> f64 {
        let ports =
            items.iter().filter_map(|item| if let Item::Port(port) = item { Some(port) } else { None });
        let above = ports.clone().map(|port| self.port_room(port).above).fold(LABELS_ABOVE, f64::max);
        let depth = ports.map(|port| self.depth(port)).fold(2.0 * REACH, f64::max);
        let line =
            top + above + if items.iter().any(|item| matches!(item, Item::End(_))) { TYPE } else { 0.0 };
        let common = line + depth;
        let mut x = MARGIN;
        let start = if from.is_some() { x + GAP } else { x + 17.0 };
        if let Some(name) = from {
            self.pen.wire((start, line), (start + GAP, line));
            self.pen.port(&name, (start, line));
            x = start + GAP;
        }
        for item in items {
            x = self.item(item, x, top, line, common);
        }
        if let Some(name) = to {
            self.pen.wire((x, line), (x + GAP, line));
            self.pen.port(&name, (x + GAP, line));
        }
        self.pen.wire((start, common), (x, common));
        self.pen.common((start + GAP, common));
        common + COMMON_SIGN
    }

    /// One item from `x` on; returns where it ends.
    fn item(&mut self, item: &Item, x: f64, top: f64, line: f64, common: f64) -> f64 {
        match item {
            Item::Emf => {
                let (axis, end) = (x + 17.0, x + self.item_length(item) + 4.0);
                let middle = (line + common) / 2.0;
                self.pen.wire((axis, line), (axis, middle - 17.0));
                self.pen.wire((axis, middle + 17.0), (axis, common));
                self.pen.emf((axis, middle));
                self.pen.wire((axis, line), (end, line));
                end
            }
            Item::End(name) => {
                let end = x + self.item_length(item);
                let border = (x + end) / 2.0;
                self.pen.wire((x, line), (end, line));
                self.pen.border(border, top + TYPE, common);
                // The source's name stands before the border, the load's behind it.
                let shift = text_width(name) / 2.0 + 4.0;
                let at = if *name == "source" { border - shift } else { border + shift };
                self.pen.label(name, (at, top + 0.4 * TYPE), Anchor::Middle);
                end
            }
            Item::Port(port) => self.port(port, x, line, Some(common)),
        }
    }

    fn port_room(&self, port: &TwoPort) -> Along {
        match port {
            TwoPort::Series { series } => self.along_room(series),
            TwoPort::Shunt { shunt } => {
                let room = self.down_room(shunt);
                Along { length: room.left + room.right + GAP, above: 6.0, below: room.height + COMMON_SIGN }
            }
            TwoPort::Beside { beside } => {
                let rooms: Vec<Along> = beside.iter().map(|chain| self.chain_room(chain)).collect();
                let longest = rooms.iter().map(|room| room.length).fold(0.0, f64::max);
                let lowest = self.lowest(beside);
                let others = rooms.iter().enumerate().filter(|(index, _)| *index != lowest);
                let stacked: f64 = others.map(|(_, room)| room.above + room.below + GAP).sum();
                Along {
                    length: longest + 2.0 * LEAD,
                    above: rooms[lowest].above + stacked,
                    below: rooms[lowest].below,
                }
            }
        }
    }

    fn chain_room(&self, chain: &[TwoPort]) -> Along {
        chain.iter().map(|port| self.port_room(port)).fold(
            Along { length: 0.0, above: 0.0, below: 0.0 },
            |all, room| Along {
                length: all.length + room.length,
                above: all.above.max(room.above),
                below: all.below.max(room.below),
            },
        )
    }

    /// Of chains side by side, the one drawn on the line itself: the last that has
    /// a way down to the common line, so that its way crosses nothing.
    fn lowest(&self, chains: &[Vec<TwoPort>]) -> usize {
        let goes_down =
            |chain: &Vec<TwoPort>| chain.iter().any(|port| !matches!(port, TwoPort::Series { .. }));
        chains.iter().rposition(goes_down).unwrap_or(chains.len() - 1)
    }

    /// Height between line and common line that a port needs.
    fn depth(&self, port: &TwoPort) -> f64 {
        match port {
            TwoPort::Series { series } => self.along_room(series).below + GAP,
            TwoPort::Shunt { shunt } => self.down_room(shunt).height,
            TwoPort::Beside { beside } => {
                beside[self.lowest(beside)].iter().map(|port| self.depth(port)).fold(0.0, f64::max)
            }
        }
    }

    /// A two-port from `x` on; ways down end at `common`, or at a sign of their own
    /// where that lies behind other wires. Returns where it ends.
    fn port(&mut self, port: &TwoPort, x: f64, line: f64, common: Option<f64>) -> f64 {
        match port {
            TwoPort::Series { series } => self.along(series, x, line),
            TwoPort::Shunt { shunt } => {
                let room = self.down_room(shunt);
                let (axis, end) = (x + room.left, x + room.left + room.right + GAP);
                self.pen.wire((x, line), (end, line));
                self.pen.dot(axis, line);
                self.down(shunt, axis, line);
                match common {
                    Some(common) => {
                        self.pen.wire((axis, line + room.height), (axis, common));
                        self.pen.dot(axis, common);
                    }
                    None => self.pen.common((axis, line + room.height)),
                }
                end
            }
            TwoPort::Beside { beside } => self.beside(beside, x, line, common),
        }
    }

    fn beside(&mut self, chains: &[Vec<TwoPort>], x: f64, line: f64, common: Option<f64>) -> f64 {
        let lowest = self.lowest(chains);
        let rooms: Vec<Along> = chains.iter().map(|chain| self.chain_room(chain)).collect();
        let longest = rooms.iter().map(|room| room.length).fold(0.0, f64::max);
        let (from, to) = (x + LEAD, x + LEAD + longest);
        self.pen.wire((x, line), (from, line));
        self.pen.wire((to, line), (to + LEAD, line));
        self.chain(&chains[lowest], from, to, line, common);
        let mut level = line - rooms[lowest].above;
        for (index, chain) in chains.iter().enumerate().filter(|(index, _)| *index != lowest) {
            let at = level - GAP - rooms[index].below;
            self.chain(chain, from, to, at, None);
            for node in [from, to] {
                self.pen.wire((node, at), (node, line));
                self.pen.dot(node, line);
            }
            level = at - rooms[index].above;
        }
        to + LEAD
    }

    /// A chain in the middle between two nodes.
    fn chain(&mut self, chain: &[TwoPort], from: f64, to: f64, line: f64, common: Option<f64>) {
        let slack = (to - from - self.chain_room(chain).length) / 2.0;
        self.pen.wire((from, line), (from + slack, line));
        let end = chain.iter().fold(from + slack, |x, port| self.port(port, x, line, common));
        self.pen.wire((end, line), (to, line));
    }

    fn along_room(&self, branch: &Branch) -> Along {
        match branch {
            Branch::Part(index) => {
                let length = (2.0 * REACH).max(label_width(&self.parts[*index]) + GAP);
                Along { length, above: LABELS_ABOVE, below: HALF + 2.0 }
            }
            Branch::Series { series } => {
                let rooms = series.iter().map(|inner| self.along_room(inner));
                rooms.fold(Along { length: 0.0, above: 0.0, below: 0.0 }, |all, room| Along {
                    length: all.length + room.length,
                    above: all.above.max(room.above),
                    below: all.below.max(room.below),
                })
            }
            Branch::Parallel { parallel } => {
                let rooms: Vec<Along> = parallel.iter().map(|inner| self.along_room(inner)).collect();
                let stacked: f64 = rooms[1..].iter().map(|room| room.above + room.below).sum();
                Along {
                    length: rooms.iter().map(|room| room.length).fold(0.0, f64::max) + 2.0 * LEAD,
                    above: rooms[0].above + stacked,
                    below: rooms[0].below,
                }
            }
        }
    }

    /// A branch in the line from `x` on; returns where it ends.
    fn along(&mut self, branch: &Branch, x: f64, line: f64) -> f64 {
        let end = x + self.along_room(branch).length;
        match branch {
            Branch::Part(index) => {
                let middle = (x + end) / 2.0;
                self.pen.wire((x, line), (middle - REACH, line));
                self.pen.wire((middle + REACH, line), (end, line));
                self.pen.part(&self.parts[*index], (middle, line), Lie::Along);
            }
            Branch::Series { series } => {
                series.iter().fold(x, |x, inner| self.along(inner, x, line));
            }
            Branch::Parallel { parallel } => {
                let (from, to) = (x + LEAD, end - LEAD);
                self.pen.wire((x, line), (from, line));
                self.pen.wire((to, line), (end, line));
                let mut at = line;
                let mut above = 0.0;
                for (number, inner) in parallel.iter().enumerate() {
                    let room = self.along_room(inner);
                    if number > 0 {
                        at -= above + room.below;
                        for node in [from, to] {
                            self.pen.wire((node, at), (node, line));
                            self.pen.dot(node, line);
                        }
                    }
                    above = room.above;
                    let slack = (to - from - room.length) / 2.0;
                    self.pen.wire((from, at), (from + slack, at));
                    let right = self.along(inner, from + slack, at);
                    self.pen.wire((right, at), (to, at));
                }
            }
        }
        end
    }

    fn down_room(&self, branch: &Branch) -> Down {
        match branch {
            Branch::Part(index) => Down {
                left: HALF + 4.0,
                right: HALF + 11.0 + label_width(&self.parts[*index]),
                height: 2.0 * REACH + GAP,
            },
            Branch::Series { series } => {
                let rooms = series.iter().map(|inner| self.down_room(inner));
                rooms.fold(Down { left: 0.0, right: 0.0, height: 0.0 }, |all, room| Down {
                    left: all.left.max(room.left),
                    right: all.right.max(room.right),
                    height: all.height + room.height,
                })
            }
            Branch::Parallel { parallel } => {
                let rooms: Vec<Down> = parallel.iter().map(|inner| self.down_room(inner)).collect();
                let width: f64 = rooms.iter().map(|room| room.left + room.right).sum();
                Down {
                    left: rooms[0].left,
                    right: width - rooms[0].left + GAP * (rooms.len() - 1) as f64,
                    height: rooms.iter().map(|room| room.height).fold(0.0, f64::max) + 2.0 * LEAD,
                }
            }
        }
    }

    /// A branch down from (`axis`, `top`).
    fn down(&mut self, branch: &Branch, axis: f64, top: f64) {
        match branch {
            Branch::Part(index) => {
                let bottom = top + self.down_room(branch).height;
                let middle = (top + bottom) / 2.0;
                self.pen.wire((axis, top), (axis, middle - REACH));
                self.pen.wire((axis, middle + REACH), (axis, bottom));
                self.pen.part(&self.parts[*index], (axis, middle), Lie::Down);
            }
            Branch::Series { series } => {
                let mut at = top;
                for inner in series {
                    self.down(inner, axis, at);
                    at += self.down_room(inner).height;
                }
            }
            Branch::Parallel { parallel } => {
                let bottom = top + self.down_room(branch).height;
                let (upper, lower) = (top + LEAD, bottom - LEAD);
                self.pen.wire((axis, top), (axis, upper));
                self.pen.wire((axis, lower), (axis, bottom));
                let mut at = axis;
                for (number, inner) in parallel.iter().enumerate() {
                    let room = self.down_room(inner);
                    if number > 0 {
                        at += room.left;
                        for level in [upper, lower] {
                            self.pen.wire((axis, level), (at, level));
                            self.pen.dot(axis, level);
                        }
                    }
                    self.down(inner, at, upper);
                    self.pen.wire((at, upper + room.height), (at, lower));
                    at += room.right + GAP;
                }
            }
        }
    }
}
