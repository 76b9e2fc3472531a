//! From a recording of a humming line to a passive filter one can solder.
//!
//! The rooms, in the order in which a job walks through them:
//!
//! ```text
//! capture.wav ─► capture ─► analysis ─┐
//!                                     ├─► plan ─► simulation ─► report
//! line.yaml ───► plan::brief ─────────┘     ▲
//! stock.yaml ──► parts ─► network ──────────┘
//! ```
//!
//! * [`capture`] reads and writes recordings in blocks.
//! * [`analysis`] finds what hums: frequency, harmonics, wander, likely cause.
//! * [`parts`] knows quantities, preferred values, and what real parts lose.
//! * [`network`] evaluates passive two-ports and their chain exactly.
//! * [`plan`] reads the line brief and finds the filter that meets it.
//! * [`simulation`] sends the recording through the filter and measures it.
//! * [`report`] draws and writes the page, the charts and the parts list.
//! * [`cli`] is the command line, and the only room that talks to a terminal.

#![forbid(unsafe_code)]
#![warn(missing_docs)]

pub mod analysis;
pub mod capture;
pub mod cli;
pub mod network;
pub mod parts;
pub mod plan;
pub mod report;
pub mod simulation;
