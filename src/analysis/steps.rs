//! Steps in a series: where a level jumps, told from noise, from swings and from slow change.
//!
//! Binary segmentation (Scott and Knott 1974): a stretch is parted where that takes most off
//! the squared deviations from the mean, if it takes off more than noise would; then each
//! part is looked at alike. Of the places found a jump counts that is over within a cell or
//! two; a ramp or a swing, which the same criterion parts as well, does not.

/// What parting must take off the squares, in variances of the noise.
const GAIN: f64 = 25.0;
/// Share of the difference between two stretches that lies in the jump itself.
const ABRUPT: f64 = 0.7;
/// Values to either side over which a slope is looked for: at most so many times the
/// shortest stretch, and at least so many.
const WIDEST: usize = 4;
const NARROWEST: usize = 3;
/// Most steps told.
const MOST: usize = 100;

/// A step between two values of a series.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Step {
    /// Index of the first value after it.
    pub at: usize,
    /// Median of the stretch before.
    pub from: f64,
    /// Median of the stretch after.
    pub to: f64,
}

/// The steps of a series with noise of this standard deviation (or what neighbours
/// show, if that is more), in stretches of at least `shortest` values.
pub(super) fn steps(values: &[f64], noise_sd: f64, shortest: usize) -> Vec<Step> {
    let shortest = shortest.max(NARROWEST + 1);
    if values.len() < 2 * shortest {
        return Vec::new();
    }
    let sums: Vec<f64> = std::iter::once(0.0)
        .chain(values.iter().scan(0.0, |sum, value| {
            *sum += value;
            Some(*sum)
        }))
        .collect();
    let mean = (sums[values.len()] / values.len() as f64).abs();
    let sd = noise_sd.max(typical_difference(values)).max(1e-3 * mean).max(1e-30);
    let search = Search { values, sums, sd, shortest };
    let mut found = Vec::new();
    search.part(0, values.len(), &mut found);
    found.sort_unstable();
    let ends = with_ends(&found, values.len());
    let kept =
        found.iter().zip(ends.windows(3)).filter(|(at, ends)| search.is_abrupt(**at, (ends[0], ends[2])));
    search.told(&kept.map(|(at, _)| *at).collect::<Vec<_>>())
}

/// Standard deviation of the noise from the median second difference, which a slope leaves alone.
fn typical_difference(values: &[f64]) -> f64 {
    let mut differences: Vec<f64> = values.windows(3).map(|v| (v[0] - 2.0 * v[1] + v[2]).abs()).collect();
    // Median of |difference| is 0.6745·√6 of the standard deviation of Gaussian noise.
    median(&mut differences) / 1.6522
}

/// Where the stretches end that these places part.
fn with_ends(places: &[usize], count: usize) -> Vec<usize> {
    std::iter::once(0).chain(places.iter().copied()).chain([count]).collect()
}

struct Search<'a> {
    values: &'a [f64],
    /// Sum of all values before an index.
    sums: Vec<f64>,
    sd: f64,
    shortest: usize,
}

impl Search<'_> {
    fn mean(&self, from: usize, to: usize) -> f64 {
        (self.sums[to] - self.sums[from]) / (to - from) as f64
    }

    fn part(&self, from: usize, to: usize, found: &mut Vec<usize>) {
        if to - from < 2 * self.shortest || found.len() >= MOST {
            return;
        }
        let gain = |at: usize| {
            let (before, after) = ((at - from) as f64, (to - at) as f64);
            let apart = self.mean(from, at) - self.mean(at, to);
            before * after / (before + after) * apart * apart
        };
        let places = from + self.shortest..=to - self.shortest;
        let Some(at) = places.max_by(|&a, &b| gain(a).total_cmp(&gain(b))) else { return };
        let needed = GAIN + 2.0 * ((to - from) as f64).ln();
        if gain(at) < needed * self.sd * self.sd {
            return;
        }
        found.push(at);
        self.part(from, at, found);
        self.part(at, to, found);
    }

    /// Whether most of the difference between two stretches lies in a jump: beside the jump a
    /// straight slope is fitted too, over so many values to either side and over ever fewer,
    /// so that neither a ramp nor a swing passes for one. What noise hides speaks neither way.
    fn is_abrupt(&self, at: usize, within: (usize, usize)) -> bool {
        let apart = self.mean(at, within.1) - self.mean(within.0, at);
        // The values at the jump itself may be half before and half after it.
        let room = (at - within.0).min(within.1 - at) - 1;
        let longest = room.min(WIDEST * self.shortest);
        let widths = std::iter::successors(Some(longest), |&n| (2 * n / 3 >= NARROWEST).then_some(2 * n / 3));
        let mut clear = false;
        for width in widths {
            let (jump, sd) = self.jump(at, width);
            let along = jump * apart.signum();
            if along + 2.0 * sd < ABRUPT * apart.abs() {
                return false;
            }
            clear |= along > 4.0 * sd;
        }
        clear
    }

    /// The jump beside a straight slope, and its standard deviation, by least squares.
    fn jump(&self, at: usize, width: usize) -> (f64, f64) {
        let (mut yt, mut ys, mut tt, mut ts) = (0.0, 0.0, 0.0, 0.0);
        for i in 0..width {
            let (left, right) = (self.values[at - 2 - i], self.values[at + 1 + i]);
            let t = i as f64 + 1.5;
            yt += t * (right - left);
            ys += 0.5 * (right - left);
            tt += 2.0 * t * t;
            ts += t;
        }
        let information = 0.5 * width as f64 - ts * ts / tt;
        ((ys - yt * ts / tt) / information, self.sd / information.sqrt())
    }

    /// Each step with the medians of the stretches that it parts.
    fn told(&self, found: &[usize]) -> Vec<Step> {
        let ends = with_ends(found, self.values.len());
        let medians: Vec<f64> =
            ends.windows(2).map(|pair| median(&mut self.values[pair[0]..pair[1]].to_vec())).collect();
        let steps = found.iter().zip(medians.windows(2));
        steps.map(|(&at, pair)| Step { at, from: pair[0], to: pair[1] }).collect()
    }
}

fn median(values: &mut [f64]) -> f64 {
    if values.is_empty() {
        return 0.0;
    }
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f64::total_cmp).1
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::{RngExt, SeedableRng};
    use rand_xoshiro::Xoshiro256PlusPlus;

    fn noisy(count: usize, sd: f64, seed: u64, value: impl Fn(f64) -> f64) -> Vec<f64> {
        let mut random = Xoshiro256PlusPlus::seed_from_u64(seed);
        let mut normal = || (0..12).map(|_| random.random::<f64>()).sum::<f64>() - 6.0;
        (0..count).map(|i| value(i as f64) + sd * normal()).collect()
    }

    #[test]
    fn every_switching_is_found_at_its_place() {
        let on = |i: f64| if (50.0..120.0).contains(&i) || i >= 180.0 { 3.0 } else { 1.0 };
        let found = steps(&noisy(250, 0.2, 3, on), 0.2, 8);
        let places: Vec<usize> = found.iter().map(|step| step.at).collect();
        assert_eq!(places, [50, 120, 180]);
        assert!((found[0].from - 1.0).abs() < 0.1 && (found[0].to - 3.0).abs() < 0.1, "{found:?}");
    }

    #[test]
    fn noise_ramps_and_swings_hold_no_step() {
        for seed in 0..50 {
            assert_eq!(steps(&noisy(250, 0.1, seed, |_| 1.0), 0.1, 8), []);
            assert_eq!(steps(&noisy(250, 0.02, seed, |i| 1.0 + i / 100.0), 0.02, 8), []);
            assert_eq!(steps(&noisy(250, 0.02, seed, |i| 1.0 + 0.3 * (i / 6.0).sin()), 0.02, 8), []);
        }
    }

    #[test]
    fn a_few_values_hold_no_step() {
        assert_eq!(steps(&[], 0.1, 8), []);
        assert_eq!(steps(&[1.0, 2.0, 1.0], 0.0, 8), []);
    }
}
