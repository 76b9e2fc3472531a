//! The charts: what was there, what the filter does, what is left.
//!
//! Colours are picked so that they differ in lightness as well as in hue, and
//! every series differs from its neighbours in stroke or shape too.

mod axis;
mod canvas;
mod harmonics;
mod legend;
mod level;
mod response;
mod spectrum;
mod track;

pub(super) use canvas::{Size, escaped};

use super::Material;

/// One chart.
pub(super) struct Chart {
    /// Name of its file.
    pub file: &'static str,
    /// What it shows, in a few words.
    pub title: &'static str,
    /// What one sees on it, for those who cannot.
    pub description: String,
    /// How to read it.
    pub caption: String,
    /// The picture.
    pub svg: String,
}

/// All charts at this size, in the order of the page.
pub(super) fn all(material: &Material, size: Size) -> Vec<Chart> {
    [spectrum::chart, response::chart, track::chart, level::chart, harmonics::chart]
        .iter()
        .map(|draw| draw(material, size))
        .collect()
}
