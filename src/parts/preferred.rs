//! Preferred values of IEC 60063, and the nearest of them alone or in pairs.

use std::sync::LazyLock;

use super::Series;

/// E24 by IEC 60063, in hundredths; E12, E6 and E3 take every second, fourth, eighth.
/// (They are older than the rounded geometric series and differ from it from 2.7 to 4.7 and at 8.2.)
const E24: [u32; 24] = [
    100, 110, 120, 130, 150, 160, 180, 200, 220, 240, 270, 300, 330, 360, 390, 430, 470, 510, 560, 620, 680,
    750, 820, 910,
];

/// E192: 10^(i/192) rounded to three digits, but for 9.20 (i = 185, where
/// rounding would give 9.19), by IEC 60063; E96 and E48 take every second, fourth.
static E192: LazyLock<Vec<u32>> = LazyLock::new(|| {
    let rounded = |i: u32| (100.0 * 10f64.powf(f64::from(i) / 192.0)).round() as u32;
    (0..192).map(|i| if i == 185 { 920 } else { rounded(i) }).collect()
});

impl Series {
    /// Numbers of steps a decade for which IEC 60063 has a series.
    pub const STEPS: [u16; 7] = [3, 6, 12, 24, 48, 96, 192];

    /// The values of one decade in hundredths, 100 to 999; empty where there is no such series.
    pub fn hundredths(self) -> Vec<u32> {
        let steps = usize::from(self.0);
        match self.0 {
            3 | 6 | 12 | 24 => E24.iter().step_by(24 / steps).copied().collect(),
            48 | 96 | 192 => E192.iter().step_by(192 / steps).copied().collect(),
            _ => Vec::new(),
        }
    }

    /// All values from `from` to `to` (both included, to 1e-9), rising.
    ///
    /// Each is the double nearest to its decimal value.
    ///
    /// # Panics
    /// When a bound is not a positive number.
    pub fn between(self, from: f64, to: f64) -> Vec<f64> {
        assert!(from > 0.0 && to.is_finite(), "bounds of preferred values must be positive numbers");
        let decades = from.log10().floor() as i32..=to.log10().floor() as i32;
        let decade = self.hundredths();
        decades
            .flat_map(|exponent| decade.iter().map(move |&hundredths| decimal(hundredths, exponent - 2)))
            .filter(|&value| value >= from * (1.0 - 1e-9) && value <= to * (1.0 + 1e-9))
            .collect()
    }

    /// The value nearest to `target` by ratio, in any decade; `None` where
    /// there is no such series or the target is not a positive number.
    pub fn nearest(self, target: f64) -> Option<f64> {
        if !(target > 0.0 && target.is_finite()) {
            return None;
        }
        nearest(&self.between(target / 11.0, target * 11.0), target)
    }
}

impl std::fmt::Display for Series {
    fn fmt(&self, out: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(out, "E{}", self.0)
    }
}

/// `mantissa`·10^`exponent`, rounded once (both factors are exact up to 10^22).
fn decimal(mantissa: u32, exponent: i32) -> f64 {
    match exponent {
        0.. => f64::from(mantissa) * 10f64.powi(exponent),
        _ => f64::from(mantissa) / 10f64.powi(-exponent),
    }
}

/// Of rising positive `values`, the one nearest to `target` by ratio.
pub fn nearest(values: &[f64], target: f64) -> Option<f64> {
    let above = values.partition_point(|&value| value < target);
    let below = above.checked_sub(1).map(|index| values[index]);
    match (below, values.get(above).copied()) {
        (Some(low), Some(high)) => Some(if target / low <= high / target { low } else { high }),
        (low, high) => low.or(high),
    }
}

/// Of rising positive `values`, those within `target`/`ratio` to `target`·`ratio`.
pub fn around(values: &[f64], target: f64, ratio: f64) -> &[f64] {
    let start = values.partition_point(|&value| value < target / ratio * (1.0 - 1e-9));
    let end = values.partition_point(|&value| value <= target * ratio * (1.0 + 1e-9));
    &values[start..end.max(start)]
}

/// How two parts are joined.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Joined {
    /// One after the other.
    InSeries,
    /// Side by side.
    InParallel,
}

/// Two values that reach a third together.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Pair {
    /// The larger.
    pub larger: f64,
    /// The smaller.
    pub smaller: f64,
    /// What they make together.
    pub together: f64,
}

/// Of rising positive `values`, the two (or one twice) whose sum is nearest to
/// `target` by ratio: resistors and coils in series, capacitors in parallel.
/// Takes one pass.
pub fn nearest_sum(values: &[f64], target: f64) -> Option<Pair> {
    let (low, high) = nearest_pair(values.len(), |index| values[index], target)?;
    let (smaller, larger) = (values[low], values[high]);
    Some(Pair { larger, smaller, together: smaller + larger })
}

/// Of rising positive `values`, the two (or one twice) whose reciprocals add
/// to the reciprocal of a value nearest to `target` by ratio: resistors in
/// parallel, capacitors in series. Takes one pass.
pub fn nearest_reciprocal_sum(values: &[f64], target: f64) -> Option<Pair> {
    let last = values.len().checked_sub(1)?;
    let (low, high) = nearest_pair(values.len(), |index| values[last - index].recip(), target.recip())?;
    let (larger, smaller) = (values[last - low], values[last - high]);
    Some(Pair { larger, smaller, together: larger * smaller / (larger + smaller) })
}

/// Indices of the two rising terms whose sum is nearest to the target by
/// ratio: one walks up while the sum is too small, one down while it is too large.
fn nearest_pair(count: usize, term: impl Fn(usize) -> f64, target_sum: f64) -> Option<(usize, usize)> {
    if count == 0 || !(target_sum > 0.0 && target_sum.is_finite()) {
        return None;
    }
    let (mut low, mut high) = (0, count - 1);
    let (mut least, mut best) = (f64::INFINITY, None);
    loop {
        let sum = term(low) + term(high);
        let miss = (sum / target_sum).max(target_sum / sum);
        if miss < least {
            (least, best) = (miss, Some((low, high)));
        }
        match low == high {
            true => return best,
            false if sum < target_sum => low += 1,
            false => high -= 1,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn e24_and_below_are_the_tabulated_ones() {
        // IEC 60063, E12 and E6 as the colour-code tables print them (common practice).
        assert_eq!(Series(12).hundredths(), [100, 120, 150, 180, 220, 270, 330, 390, 470, 560, 680, 820]);
        assert_eq!(Series(6).hundredths(), [100, 150, 220, 330, 470, 680]);
        assert_eq!(Series(3).hundredths(), [100, 220, 470]);
    }

    #[test]
    fn e48_to_e192_are_the_rounded_series_with_its_one_exception() {
        // IEC 60063; the sample of E96 is the start of its table (from memory).
        let e96 = Series(96).hundredths();
        assert_eq!(e96[..12], [100, 102, 105, 107, 110, 113, 115, 118, 121, 124, 127, 130]);
        assert_eq!(e96.last(), Some(&976));
        assert_eq!(Series(48).hundredths()[..4], [100, 105, 110, 115]);
        let e192 = Series(192).hundredths();
        assert!(e192.contains(&920) && !e192.contains(&919));
        assert_eq!(e192.last(), Some(&988));
    }

    #[test]
    fn every_series_has_its_number_of_rising_values() {
        for steps in Series::STEPS {
            let values = Series(steps).hundredths();
            assert_eq!(values.len(), usize::from(steps));
            assert!(values.windows(2).all(|pair| pair[0] < pair[1]), "E{steps}");
        }
    }

    #[test]
    fn a_coarser_series_is_part_of_the_finer() {
        for (coarse, fine) in [(3, 6), (6, 12), (12, 24), (48, 96), (96, 192)] {
            let fine = Series(fine).hundredths();
            assert!(Series(coarse).hundredths().iter().all(|value| fine.contains(value)), "E{coarse}");
        }
    }

    #[test]
    fn a_range_holds_both_its_ends_and_exact_doubles() {
        let values = Series(12).between(1e-9, 4.7e-6);
        assert_eq!(values.len(), 3 * 12 + 9);
        assert_eq!((values[0], values[8]), (1e-9, 4.7e-9));
        assert_eq!(values.last(), Some(&4.7e-6));
    }

    #[test]
    fn the_nearest_is_by_ratio() {
        assert_eq!(Series(12).nearest(2.45e3), Some(2.7e3));
        assert_eq!(Series(12).nearest(9.5), Some(10.0));
        assert_eq!(Series(24).nearest(970e-9), Some(1e-6));
        assert_eq!(Series(12).nearest(-1.0), None);
        assert_eq!(nearest(&[1.0, 2.0], 100.0), Some(2.0));
    }

    #[test]
    fn values_around_a_target_keep_to_the_range() {
        let values = Series(12).between(1.0, 4.7);
        assert_eq!(around(&values, 4.0, 1.25), [3.3, 3.9, 4.7]);
        assert!(around(&values, 40.0, 1.25).is_empty());
    }

    #[test]
    fn pairs_of_e12_miss_a_value_by_a_few_tenths_of_a_percent() {
        // NumPy over all pairs of six decades, both ways of joining: 0.14 % on average, 0.75 % at worst.
        let values = Series(12).between(1e-9, 1e-3);
        let misses: Vec<f64> = (0..500)
            .map(|i| {
                let target = 1e-6 * 10f64.powf(f64::from(i) / 500.0);
                let sum = nearest_sum(&values, target).unwrap().together;
                let reciprocal = nearest_reciprocal_sum(&values, target).unwrap().together;
                (sum / target - 1.0).abs().min((reciprocal / target - 1.0).abs())
            })
            .collect();
        let mean = misses.iter().sum::<f64>() / misses.len() as f64;
        let worst = misses.iter().fold(0.0, |a: f64, &b| a.max(b));
        assert!((0.0013..0.0016).contains(&mean), "mean miss {mean}");
        assert!(worst < 0.0075, "worst miss {worst}");
    }

    proptest! {
        #[test]
        fn no_pair_is_nearer_than_the_one_found(target in 1.5f64..900.0, steps in prop::sample::select(vec![3u16, 6, 12])) {
            let values = Series(steps).between(1.0, 1000.0);
            let miss = |value: f64| (value / target).ln().abs();
            let sum = nearest_sum(&values, target).unwrap();
            let reciprocal = nearest_reciprocal_sum(&values, target).unwrap();
            prop_assert!((sum.larger + sum.smaller - sum.together).abs() < 1e-9 * sum.together);
            prop_assert!(reciprocal.larger >= reciprocal.smaller);
            for &a in &values {
                for &b in &values {
                    prop_assert!(miss(sum.together) <= miss(a + b) + 1e-12);
                    prop_assert!(miss(reciprocal.together) <= miss(a * b / (a + b)) + 1e-9);
                }
            }
        }
    }
}
