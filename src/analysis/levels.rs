//! Peak, mean, RMS and clipping of a channel, sample by sample.

/// Peak, mean, RMS and flat runs at the extremes.
#[derive(Default)]
pub(super) struct Levels {
    count: f64,
    /// The first sample. Sums are taken of what differs from it, so that a
    /// constant leaves nothing, not even rounding.
    first: Option<f64>,
    sum: f64,
    squares: f64,
    high: FlatTop,
    low: FlatTop,
}

impl Levels {
    pub fn push(&mut self, samples: &[f64]) {
        let Some(&start) = samples.first() else { return };
        let first = *self.first.get_or_insert(start);
        for &x in samples {
            let apart = x - first;
            self.sum += apart;
            self.squares += apart * apart;
            self.high.push(x);
            self.low.push(-x);
        }
        self.count += samples.len() as f64;
    }

    pub fn peak(&self) -> f64 {
        self.high.extreme().max(self.low.extreme())
    }

    pub fn mean_and_rms(&self) -> (f64, f64) {
        let count = self.count.max(1.0);
        let apart = self.sum / count;
        (self.first.unwrap_or(0.0) + apart, (self.squares / count - apart * apart).max(0.0).sqrt())
    }

    pub fn clipped(&self) -> u64 {
        self.high.clipped() + self.low.clipped()
    }
}

/// Runs of equal samples at the largest value so far.
#[derive(Default)]
struct FlatTop {
    largest: Option<f64>,
    run: u64,
    runs_of_two: u64,
    runs_of_four: u64,
    in_twos: u64,
    in_fours: u64,
}

/// From here on a sample is at the limit of the converter: one step under full
/// scale in the coarsest format, 8 bits.
const CONVERTER_LIMIT: f64 = 1.0 - 1.0 / 127.9;

impl FlatTop {
    fn push(&mut self, x: f64) {
        let largest = self.largest.unwrap_or(f64::NEG_INFINITY);
        if x > largest {
            *self = Self { largest: Some(x), run: 1, ..Self::default() };
        } else if x == largest {
            self.run += 1;
        } else if self.run > 0 {
            self.close();
        }
    }

    fn close(&mut self) {
        if self.run >= 2 {
            self.runs_of_two += 1;
            self.in_twos += self.run;
        }
        if self.run >= 4 {
            self.runs_of_four += 1;
            self.in_fours += self.run;
        }
        self.run = 0;
    }

    fn extreme(&self) -> f64 {
        self.largest.unwrap_or(0.0)
    }

    /// At the converter's limit two equal samples count; below it only where
    /// at least three tops of four or more equal samples are cut at one height,
    /// since a slow signal rests on its one largest value without being clipped.
    fn clipped(&self) -> u64 {
        let mut closed = Self { ..*self };
        closed.close();
        if closed.extreme() >= CONVERTER_LIMIT {
            closed.in_twos
        } else if closed.extreme() > 0.05 && closed.runs_of_four >= 3 {
            closed.in_fours
        } else {
            0
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::TAU;

    fn clipped_at(limit: f64, gain: f64) -> u64 {
        let mut levels = Levels::default();
        let tone =
            (0..8000).map(|n| (gain * (TAU * 50.0 * f64::from(n) / 8000.0).sin()).clamp(-limit, limit));
        levels.push(&tone.collect::<Vec<_>>());
        levels.clipped()
    }

    #[test]
    fn samples_cut_at_the_limit_or_below_it_are_counted() {
        // A sine of twice the limit is above it for two thirds of the time.
        for limit in [1.0, 0.6] {
            let share = clipped_at(limit, 2.0 * limit) as f64 / 8000.0;
            assert!((share - 2.0 / 3.0).abs() < 0.02, "limit {limit}: {share}");
        }
        assert_eq!(clipped_at(1.0, 0.9), 0);
    }

    #[test]
    fn a_constant_leaves_no_rms_at_all() {
        let mut levels = Levels::default();
        levels.push(&[0.3; 5000]);
        assert_eq!(levels.mean_and_rms(), (0.3, 0.0));
    }
}
