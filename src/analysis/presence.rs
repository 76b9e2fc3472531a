//! Whether a line is there all the time: what tells a supply from a struck note.

use num_complex::Complex64;

/// Share of the mean from which a line counts as there.
const THERE: f64 = 0.5;

/// Share of the cells in which a line, turned along its track, has at least half
/// of its mean amplitude in the mean's direction. A steady line well over the
/// noise gives 1; a note with rests between gives the share it sounds for; a
/// note struck anew in another phase points elsewhere, and does not count.
pub(super) fn share_present(turned: &[Complex64]) -> f64 {
    let count = turned.len().max(1) as f64;
    let mean = turned.iter().sum::<Complex64>() / count;
    let least = THERE * mean.norm_sqr();
    let present = turned.iter().filter(|z| (mean.conj() * **z).re > least).count();
    present as f64 / count
}

/// Whether a line is there in nearly every cell. Along the mean phasor a struck
/// note has nothing in the quieter cells; a line has its amplitude less noise, and
/// how much noise, the component across the mean phasor tells.
pub(super) fn is_there_throughout(turned: &[Complex64], mean: Complex64) -> bool {
    let along = mean.conj() / mean.norm().max(1e-30);
    let mut parts: Vec<f64> = turned.iter().map(|z| (z * along).re).collect();
    let mut across: Vec<f64> = turned.iter().map(|z| (z * along).im.abs()).collect();
    let last = parts.len() - 1;
    parts.sort_by(f64::total_cmp);
    across.sort_by(f64::total_cmp);
    let (low, upper) = (parts[last / 5], parts[last * 3 / 5]);
    low >= 0.3 * upper - 1.5 * across[across.len() / 2]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_steady_line_is_there_and_a_struck_note_half_of_the_time() {
        let line = vec![Complex64::new(0.0, 0.2); 40];
        let note: Vec<Complex64> =
            (0..40).map(|i| if i % 4 < 2 { Complex64::new(0.3, 0.1) } else { Complex64::ZERO }).collect();
        assert_eq!(share_present(&line), 1.0);
        assert_eq!(share_present(&note), 0.5);
        assert_eq!(share_present(&[]), 0.0);
    }
}
