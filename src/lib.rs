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
//!
//! A made recording, analysed and planned for:
//!
//! ```
//! use notchwright::analysis::{AnalyseOptions, analyse};
//! use notchwright::capture::MemoryCapture;
//! use notchwright::parts::Stock;
//! use notchwright::plan::{LineBrief, PlanOptions, plan};
//! use std::path::Path;
//!
//! // Ten seconds of 50 Hz at a tenth of full scale over a slow wanted signal.
//! let hum = |n: usize| 0.1 * (std::f64::consts::TAU * 50.0 * n as f64 / 1000.0).cos();
//! let slow = |n: usize| 0.2 * (std::f64::consts::TAU * 0.3 * n as f64 / 1000.0).sin();
//! let samples = (0..10_000).map(|n| hum(n) + slow(n)).collect();
//! let mut capture = MemoryCapture::new("made", 1000, vec![samples]);
//!
//! let found = analyse(&mut [&mut capture], &AnalyseOptions::default(), &mut |_| {})?;
//! assert!((found.analysis.mains.frequency_hz.unwrap() - 50.0).abs() < 0.001);
//!
//! let brief = LineBrief::from_text(
//!     Path::new("line.yaml"),
//!     "
//! line: Bench line
//! full_scale: 1 V
//! source: { resistance: 350 Ω }
//! load: { resistance: 1 MΩ }
//! keep: [ { from: 0 Hz, to: 8 Hz, loss: 1 dB } ]
//! hum: { reduce_by: 30 dB, orders: [1] }
//! ",
//! )?;
//! let options = PlanOptions { builds: 200, ..PlanOptions::default() };
//! let filter = plan(&found.analysis, &brief, &Stock::built_in(), &options, &mut |_| {})?;
//! assert!(filter.design.met, "{:?}", filter.obstacles);
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```

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
