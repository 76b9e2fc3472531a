//! Noise that comes and goes, as programme does: Student's t in the plane of phasors.
//!
//! A phasor's distance d from its line has the density (1 + d²/(νs))^−(ν+2)/2 / (2πs), s a
//! component's variance where it is quiet. Under music few cells are quiet, others are louder
//! by tens of decibels: ν and s are those that make the cells likeliest (Lange, Little and
//! Taylor, J. Am. Stat. Assoc. 84, 1989), and each cell counts by its weight under them.

use std::f64::consts::LN_2;

/// Degrees of freedom tried.
const TAILS: [f64; 7] = [0.3, 0.5, 0.7, 1.0, 1.5, 2.5, 4.0];
/// Variances tried, in decades from the typical one. A lower one would let the cells that a
/// wandering phase happens to run through outweigh all others.
const DECADES: std::ops::RangeInclusive<i32> = -8..=2;
const STEPS_A_DECADE: f64 = 4.0;
/// Cells that are enough to tell the distribution.
const ENOUGH: usize = 500;

/// A distribution of squared distances.
#[derive(Debug, Clone, Copy)]
pub(super) struct HeavyTail {
    /// Variance of a component where it is quiet.
    pub variance: f64,
    degrees: f64,
}

impl HeavyTail {
    /// The one under which these squared distances are likeliest.
    pub fn likeliest(squares: &[f64]) -> Self {
        let typical = typical_variance(squares);
        let few: Vec<f64> = squares.iter().copied().step_by(squares.len().div_ceil(ENOUGH).max(1)).collect();
        let all = DECADES.flat_map(|step| {
            let variance = typical * 10f64.powf(f64::from(step) / STEPS_A_DECADE);
            TAILS.map(|degrees| Self { variance, degrees })
        });
        let scored = all.map(|tail| (tail, tail.log_likelihood(&few)));
        let best = scored.max_by(|a, b| a.1.total_cmp(&b.1));
        best.map_or(Self { variance: typical, degrees: 4.0 }, |(tail, _)| tail)
    }

    fn log_likelihood(&self, squares: &[f64]) -> f64 {
        let scale = 1.0 / (self.degrees * self.variance);
        let tails: f64 = squares.iter().map(|square| (square * scale).ln_1p()).sum();
        -(squares.len() as f64) * self.variance.ln() - 0.5 * (self.degrees + 2.0) * tails
    }

    /// What a cell at this squared distance counts, against one of `variance`.
    pub fn weight(&self, square: f64) -> f64 {
        (self.degrees + 2.0) / (self.degrees + square / self.variance)
    }

    /// Fisher's information on the position over the mean weight (which is 1) by the variance:
    /// the weights were chosen by the very distances that they weigh.
    pub fn efficiency(&self) -> f64 {
        (self.degrees + 2.0) / (self.degrees + 4.0)
    }
}

/// Variance of a component from the median of squared distances, 2·ln 2 of it where the
/// noise is Gaussian.
pub(super) fn typical_variance(squares: &[f64]) -> f64 {
    (median(&mut squares.to_vec()) / (2.0 * LN_2)).max(1e-34)
}

pub(super) fn median(values: &mut [f64]) -> f64 {
    if values.is_empty() {
        return 0.0;
    }
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f64::total_cmp).1
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn quiet_cells_among_loud_ones_count_by_what_they_are() {
        // One cell in four is quiet, the others are louder by 30 dB.
        let exponential = |i: usize| -(1.0 - (i as f64 + 0.5) / 400.0).ln() * 2.0;
        let squares: Vec<f64> =
            (0..400).map(|i| exponential(i) * if i % 4 == 0 { 1.0 } else { 1000.0 }).collect();
        let tail = HeavyTail::likeliest(&squares);
        assert!(tail.variance < 30.0, "{tail:?}");
        assert!(tail.weight(1.0) > 50.0 * tail.weight(1000.0), "{tail:?}");
    }

    #[test]
    fn gaussian_noise_is_taken_for_what_it_is() {
        let squares: Vec<f64> = (0..400).map(|i| -2.0 * (1.0 - (f64::from(i) + 0.5) / 400.0).ln()).collect();
        let tail = HeavyTail::likeliest(&squares);
        assert!(tail.degrees > 2.0 && (0.4..1.3).contains(&tail.variance), "{tail:?}");
        assert!((typical_variance(&squares) - 1.0).abs() < 0.02);
    }
}
