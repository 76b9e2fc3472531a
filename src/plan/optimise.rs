//! Values that make the worst miss as small as can be: minimax over samples and builds.
//!
//! The worst of all misses mᵢ(x) is smoothed to (1/p)·ln Σ exp(p·mᵢ), with p
//! rising (the exponential penalty of Kort and Bertsekas 1972; "log-sum-exp"),
//! and minimised over the logarithms of the values by damped Gauss–Newton steps
//! (Levenberg 1944, Marquardt 1963): with weights wᵢ ∝ exp(p·mᵢ) of sum 1 and
//! slopes gᵢ, gradient Σwᵢgᵢ and curvature p(Σwᵢgᵢgᵢᵀ − (Σwᵢgᵢ)(Σwᵢgᵢ)ᵀ).

use super::assembly::Assembly;
use super::requirements::Sample;
use super::shelf::{Made, Shelf};
use crate::network::PartValue;

/// How one build differs from the nominal one: factors on each slot's value and
/// on its series resistance.
#[derive(Debug, Clone, PartialEq)]
pub struct Variation {
    /// Factor on the value, by slot.
    pub value: Vec<f64>,
    /// Factor on the series resistance, by slot.
    pub series_resistance: Vec<f64>,
}

/// What is to be met, by what network, in which builds.
pub struct Problem<'a> {
    /// The network.
    pub assembly: &'a Assembly,
    /// The list its parts come from.
    pub shelf: &'a Shelf<'a>,
    /// What is asked where.
    pub samples: &'a [Sample],
    /// Builds that must all meet it; the nominal one is among them or not, as given.
    pub variations: &'a [Variation],
    /// Frequency at which capacitors' losses are taken.
    pub loss_hz: f64,
}

/// Values chosen so far.
#[derive(Debug, Clone, PartialEq)]
pub struct Point {
    /// Logarithms of the freedoms.
    pub x: Vec<f64>,
    /// Slots whose parts are settled.
    pub made: Vec<Option<Made>>,
    /// The worst miss, in units of the samples' scales; negative: all is met.
    pub worst: f64,
}

/// How hard to try.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Effort {
    /// Values of p, rising.
    pub sharpness: &'static [f64],
    /// Most steps at each.
    pub steps: usize,
}

/// For sifting many starts.
pub const QUICK: Effort = Effort { sharpness: &[2.0, 10.0], steps: 8 };
/// For those that are left.
pub const THOROUGH: Effort = Effort { sharpness: &[2.0, 8.0, 30.0], steps: 14 };
/// After one value was settled.
pub const TOUCH_UP: Effort = Effort { sharpness: &[8.0, 30.0], steps: 5 };

/// Between roundings where there are many values.
pub const NUDGE: Effort = Effort { sharpness: &[10.0], steps: 3 };

/// Weights below this share are left out of the slopes.
const LEAST_WEIGHT: f64 = 1e-3;
/// Largest step in a logarithm.
const LARGEST_STEP: f64 = 0.7;
/// Difference step in a logarithm.
const DIFFERENCE: f64 = 1e-6;

impl Problem<'_> {
    /// The start as a point.
    pub fn start(&self) -> Point {
        let mut point = Point {
            x: self.assembly.start(),
            made: vec![None; self.assembly.slots.len()],
            worst: f64::INFINITY,
        };
        point.worst = self.worst(&point);
        point
    }

    /// Losses of one build at some frequencies, decibels.
    fn losses_of(
        &self,
        nominal: &[PartValue],
        variation: &Variation,
        frequencies_hz: &[f64],
        out: &mut [f64],
    ) {
        let values = Self::varied(nominal, variation);
        self.assembly.network.evaluator(&values).insertion_power_each(frequencies_hz, out);
        out.iter_mut().for_each(|power| *power = loss_db(*power));
    }

    fn varied(nominal: &[PartValue], variation: &Variation) -> Vec<PartValue> {
        nominal
            .iter()
            .enumerate()
            .map(|(slot, value)| PartValue {
                value_si: value.value_si * variation.value[slot],
                series_resistance_ohm: value.series_resistance_ohm * variation.series_resistance[slot],
                ..*value
            })
            .collect()
    }

    /// Losses in decibels, by variation and then by sample.
    pub fn losses(&self, point: &Point) -> Vec<f64> {
        let frequencies: Vec<f64> = self.samples.iter().map(|sample| sample.frequency_hz).collect();
        let nominal = self.assembly.values(&point.x, &point.made, self.shelf, self.loss_hz);
        let mut losses = vec![0.0; self.variations.len() * frequencies.len()];
        for (variation, out) in self.variations.iter().zip(losses.chunks_mut(frequencies.len())) {
            self.losses_of(&nominal, variation, &frequencies, out);
        }
        losses
    }

    /// The worst miss of all samples in all variations.
    pub fn worst(&self, point: &Point) -> f64 {
        self.misses(&self.losses(point)).into_iter().fold(f64::NEG_INFINITY, f64::max)
    }

    /// Misses for these losses.
    pub fn misses(&self, losses: &[f64]) -> Vec<f64> {
        let count = self.samples.len();
        losses.iter().enumerate().map(|(index, &loss)| self.samples[index % count].miss(loss)).collect()
    }

    /// The point moved to where the worst miss is least, as far as the effort reaches.
    pub fn improve(&self, from: &Point, effort: Effort) -> Point {
        let free: Vec<usize> = (0..self.assembly.freedoms.len())
            .filter(|&freedom| self.assembly.slots_of(freedom).iter().any(|&slot| from.made[slot].is_none()))
            .collect();
        let mut best = from.clone();
        best.worst = self.worst(&best);
        if free.is_empty() {
            return best;
        }
        let mut at = best.clone();
        for &p in effort.sharpness {
            self.descend(&mut at, &free, p, effort.steps);
            at.worst = self.worst(&at);
            if at.worst < best.worst {
                best = at.clone();
            }
        }
        best
    }

    fn descend(&self, at: &mut Point, free: &[usize], p: f64, steps: usize) {
        let mut damping = 0.03;
        let mut losses = self.losses(at);
        let mut smooth = smooth_worst(&self.misses(&losses), p).0;
        for _ in 0..steps {
            let (_, weights) = smooth_worst(&self.misses(&losses), p);
            let (gradient, curvature) = self.slopes(at, free, &losses, &weights, p);
            let mut moved = false;
            for _ in 0..6 {
                let step = damped_step(&gradient, &curvature, damping);
                let mut trial = at.clone();
                for (&freedom, step) in free.iter().zip(step) {
                    let bounds = &self.assembly.freedoms[freedom];
                    let to = trial.x[freedom] + step.clamp(-LARGEST_STEP, LARGEST_STEP);
                    trial.x[freedom] = to.clamp(bounds.lowest.ln(), bounds.highest.ln());
                }
                let trial_losses = self.losses(&trial);
                let trial_smooth = smooth_worst(&self.misses(&trial_losses), p).0;
                if trial_smooth < smooth {
                    let gain = smooth - trial_smooth;
                    (*at, losses, smooth) = (trial, trial_losses, trial_smooth);
                    damping = (damping * 0.25).max(1e-6);
                    moved = gain > 2e-3;
                    break;
                }
                damping *= 5.0;
            }
            if !moved {
                break;
            }
        }
    }

    /// Gradient and curvature of the smoothed worst miss.
    fn slopes(
        &self,
        at: &Point,
        free: &[usize],
        losses: &[f64],
        weights: &[f64],
        p: f64,
    ) -> (Vec<f64>, Vec<Vec<f64>>) {
        let (n, count) = (free.len(), self.samples.len());
        let mut gradient = vec![0.0; n];
        let mut curvature = vec![vec![0.0; n]; n];
        let shifted: Vec<Vec<PartValue>> = free
            .iter()
            .map(|&freedom| {
                let mut x = at.x.clone();
                x[freedom] += DIFFERENCE;
                self.assembly.values(&x, &at.made, self.shelf, self.loss_hz)
            })
            .collect();
        for (index, variation) in self.variations.iter().enumerate() {
            let of_variation = index * count..(index + 1) * count;
            let active: Vec<usize> = of_variation.filter(|&i| weights[i] > LEAST_WEIGHT).collect();
            if active.is_empty() {
                continue;
            }
            let frequencies: Vec<f64> =
                active.iter().map(|&i| self.samples[i % count].frequency_hz).collect();
            let mut rows = vec![vec![0.0; n]; active.len()];
            let mut out = vec![0.0; active.len()];
            for (column, nominal) in shifted.iter().enumerate() {
                self.losses_of(nominal, variation, &frequencies, &mut out);
                for (row, &i) in active.iter().enumerate() {
                    let slope = self.samples[i % count].miss_slope(losses[i]);
                    rows[row][column] = slope * (out[row] - losses[i]) / DIFFERENCE;
                }
            }
            for (row, &i) in rows.iter().zip(&active) {
                for a in 0..n {
                    gradient[a] += weights[i] * row[a];
                    for b in 0..=a {
                        curvature[a][b] += p * weights[i] * row[a] * row[b];
                    }
                }
            }
        }
        for a in 0..n {
            for b in 0..=a {
                curvature[a][b] -= p * gradient[a] * gradient[b];
                curvature[b][a] = curvature[a][b];
            }
        }
        (gradient, curvature)
    }
}

/// Loss from |insertion|², in decibels; 400 dB stands for a perfect null.
pub fn loss_db(insertion_power: f64) -> f64 {
    -10.0 * insertion_power.max(1e-40).log10()
}

/// (1/p)·ln Σ exp(p·mᵢ), and the weights exp(p·mᵢ)/Σ.
fn smooth_worst(misses: &[f64], p: f64) -> (f64, Vec<f64>) {
    let worst = misses.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let mut weights: Vec<f64> = misses.iter().map(|miss| (p * (miss - worst)).exp()).collect();
    let sum: f64 = weights.iter().sum();
    weights.iter_mut().for_each(|weight| *weight /= sum);
    (worst + sum.ln() / p, weights)
}

/// −(H + λ(diag H + mean diag H))⁻¹·g by Cholesky's method.
fn damped_step(gradient: &[f64], curvature: &[Vec<f64>], damping: f64) -> Vec<f64> {
    let n = gradient.len();
    let mean = (0..n).map(|a| curvature[a][a].max(0.0)).sum::<f64>() / n as f64;
    let slope = gradient.iter().map(|g| g * g).sum::<f64>().sqrt();
    let mut h = curvature.to_vec();
    for (a, row) in h.iter_mut().enumerate() {
        row[a] += damping * (curvature[a][a].max(0.0) + mean + slope) + 1e-12;
    }
    // Cholesky; a pivot that rounding made negative is lifted.
    for a in 0..n {
        for b in 0..=a {
            let sum: f64 = (0..b).map(|k| h[a][k] * h[b][k]).sum();
            h[a][b] = if a == b { (h[a][a] - sum).max(1e-12).sqrt() } else { (h[a][b] - sum) / h[b][b] };
        }
    }
    let mut y = vec![0.0; n];
    for a in 0..n {
        let sum: f64 = (0..a).map(|k| h[a][k] * y[k]).sum();
        y[a] = (-gradient[a] - sum) / h[a][a];
    }
    let mut step = vec![0.0; n];
    for a in (0..n).rev() {
        let sum: f64 = (a + 1..n).map(|k| h[k][a] * step[k]).sum();
        step[a] = (y[a] - sum) / h[a][a];
    }
    step
}
