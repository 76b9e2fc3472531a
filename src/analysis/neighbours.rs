//! Whether a line stands over what is beside it.
//!
//! Notes struck again and again put sidebands of nearly their own height a hertz or a
//! few on either side of them; a supply's line has none. The cells of a line, turned
//! along its track, are transformed under a Hann window, and the line is read against
//! the lower one of each pair of offsets: a note of another pitch is on one side alone.

use super::tracker::{Cells, Tracked, along_track};
use num_complex::Complex64;
use rustfft::{Fft, FftPlanner};
use std::f64::consts::{LN_2, TAU};
use std::sync::Arc;

/// Nearest and farthest offset in hertz at which a tempo shows: the track's own wander
/// is nearer.
const NEAREST_HZ: f64 = 0.6;
const FARTHEST_HZ: f64 = 5.0;
/// Farthest offset at which vibrato and tremolo show, as far as the cells reach; what is
/// beyond shows at the image of its offset.
const FARTHEST_VIBRATO_HZ: f64 = 8.5;
/// Half the main lobe of a Hann window in 1/T, and some more.
const LOBE: f64 = 2.5;
/// Fewest offsets that tell anything.
const FEWEST: usize = 6;
/// Phasors are limited to so many times the typical one: one loud note must not decide.
const LARGEST: f64 = 2.0;

/// The transform for lines of one length.
struct Neighbours {
    fft: Arc<dyn Fft<f64>>,
    window: Vec<f64>,
    /// Bins of the offsets above the line; those below are as far from the end.
    offsets: Vec<usize>,
    /// Those beyond, where vibrato may be.
    farther: Vec<usize>,
}

/// How a line stands over its neighbours.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub(super) struct Standing {
    /// Power over the typical one beside it.
    pub over_noise: f64,
    /// Power over what the highest pair has above noise's highest.
    pub over_highest: f64,
    /// The same where offsets at which notes have their vibrato are looked at too.
    pub over_vibrato: f64,
    /// Share of all power in the cells that is the line's.
    pub share: f64,
}

/// How each order of the fine cells stands, turned along the track of the coarser ones;
/// `None` where the cells are too few to tell.
pub(super) fn standings(fine: &Cells, tracked: &Tracked) -> Vec<Option<Standing>> {
    let neighbours = Neighbours::new(fine.count(), fine.length_s);
    (0..fine.orders.len()).map(|line| neighbours.standing(&along_track(fine, line, tracked))).collect()
}

impl Neighbours {
    /// For lines of `count` cells, each of `cell_s` seconds.
    fn new(count: usize, cell_s: f64) -> Self {
        let length = count.max(1) as f64;
        let hz = |bin: usize| bin as f64 / (length * cell_s);
        let nearest_hz = NEAREST_HZ.max(LOBE / (length * cell_s));
        let far = 1..count / 2;
        let offsets = far.clone().filter(|&bin| (nearest_hz..=FARTHEST_HZ).contains(&hz(bin))).collect();
        let farther = far.filter(|&bin| FARTHEST_HZ < hz(bin) && hz(bin) <= FARTHEST_VIBRATO_HZ).collect();
        Self {
            fft: FftPlanner::new().plan_fft_forward(count.max(1)),
            window: (0..count).map(|i| 0.5 - 0.5 * (TAU * (i as f64 + 0.5) / length).cos()).collect(),
            offsets,
            farther,
        }
    }

    /// `None` where the cells are too few to tell.
    fn standing(&self, turned: &[Complex64]) -> Option<Standing> {
        if self.offsets.len() < FEWEST {
            return None;
        }
        let mut sizes: Vec<f64> = turned.iter().map(|z| z.norm()).collect();
        let middle = sizes.len() / 2;
        let most = LARGEST * *sizes.select_nth_unstable_by(middle, f64::total_cmp).1;
        let limited = |z: &Complex64| z * (most / z.norm().max(1e-30)).min(1.0);
        let mut bins: Vec<Complex64> = turned.iter().zip(&self.window).map(|(z, w)| limited(z) * w).collect();
        self.fft.process(&mut bins);
        let lower = |bin: usize| bins[bin].norm_sqr().min(bins[bins.len() - bin].norm_sqr());
        let mut beside: Vec<f64> = self.offsets.iter().map(|&bin| lower(bin)).collect();
        beside.sort_by(f64::total_cmp);
        // The lower of two exponentials is one of half their mean.
        let typical = 2.0 * beside[beside.len() / 2] / LN_2;
        // The highest of n exponentials is about ln n of them, and seldom 3 more.
        let by_chance = 0.5 * typical * ((beside.len() as f64).ln() + 3.0);
        let highest = beside[beside.len() - 1];
        let farther = self.farther.iter().map(|&bin| lower(bin)).fold(highest, f64::max);
        let line = bins[0].norm_sqr();
        let mean = turned.iter().sum::<Complex64>() / turned.len() as f64;
        let all = turned.iter().map(Complex64::norm_sqr).sum::<f64>() / turned.len() as f64;
        let over = |beside: f64| (line / (beside - by_chance).max(1e-300)).min(1e9);
        Some(Standing {
            over_noise: line / typical.max(1e-300),
            over_highest: over(highest),
            over_vibrato: over(farther),
            share: mean.norm_sqr() / all.max(1e-300),
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const CELL_S: f64 = 0.24;

    fn standing(cells: impl Iterator<Item = Complex64>) -> Standing {
        let cells: Vec<Complex64> = cells.collect();
        Neighbours::new(cells.len(), CELL_S).standing(&cells).expect("long enough")
    }

    #[test]
    fn a_note_struck_every_second_has_neighbours_and_a_supply_has_none() {
        let supply = standing((0..100).map(|_| Complex64::new(0.1, 0.0)));
        assert!(supply.over_highest > 1e6);
        let sounding = |i: i32| f64::from(i) * CELL_S % 1.0 < 0.45;
        let note = standing((0..100).map(|i| Complex64::new(f64::from(u8::from(sounding(i))), 0.0)));
        assert!(note.over_highest < 4.0, "{note:?}");
    }

    #[test]
    fn vibrato_shows_beyond_the_tempo() {
        let vibrato = |i: i32| 0.1 * (TAU * 5.7 * 0.04 * f64::from(i)).sin();
        let cells: Vec<Complex64> = (0..400).map(|i| Complex64::cis(vibrato(i))).collect();
        let note = Neighbours::new(cells.len(), 0.04).standing(&cells).expect("long enough");
        assert!((note.over_vibrato / 400.0 - 1.0).abs() < 0.1, "{note:?}");
        assert!(note.over_highest > 1e4, "{note:?}");
    }

    #[test]
    fn a_note_of_another_pitch_does_not_hide_a_supply() {
        let turn = |i: i32| Complex64::cis(TAU * 1.3 * CELL_S * f64::from(i));
        let both = standing((0..100).map(|i| Complex64::new(0.1, 0.0) + 0.1 * turn(i)));
        assert!(both.over_highest > 100.0, "{both:?}");
    }

    #[test]
    fn a_few_cells_tell_nothing() {
        assert_eq!(Neighbours::new(5, CELL_S).standing(&[Complex64::ONE; 5]), None);
    }
}
