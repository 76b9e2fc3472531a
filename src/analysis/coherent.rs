//! Combs that only a long look shows: weak lines, and lines under programme.
//!
//! Short spectra of the opening of a capture are limited, bin by bin, to about
//! their typical size, so that notes and clicks count no more than what is there
//! all the time; each bin's sequence of phasors is then transformed over time,
//! which resolves lines to 1/T. Noise alone reads 1 on average everywhere.

use super::comb::weight;
use super::supplies::{FAMILIES, Family, prior};
use super::survey::{SURVEY_TOP_HZ, Surveyed};
use super::window::BLACKMAN_HARRIS;
use num_complex::Complex64;
use realfft::RealFftPlanner;
use rustfft::FftPlanner;

/// Length of a short spectrum in seconds, and the part of it to the next.
const SHORT_S: f64 = 0.5;
const OVERLAP: usize = 4;
/// Phasors are limited to so many times the typical one of their bin.
const LARGEST: f64 = 1.2;
/// Longest stretch looked at as one: grids wander too much in longer ones.
const STRETCH_S: f64 = 30.0;
/// Fine steps in 1/T.
const FINE: usize = 3;
/// What noise shows, and the most that one line counts.
const QUIET: f64 = 1.5;
const CAP: f64 = 20.0;
/// Orders looked at.
const ORDERS: u32 = 16;
/// Fundamentals given for each family.
const GIVEN: usize = 4;

/// A steady fundamental and the orders that stand out, the clearest first.
pub(super) struct Faint {
    pub frequency_hz: f64,
    pub orders: Vec<u32>,
}

impl Faint {
    /// A railway's comb holds the public supply's of thrice its frequency: look at both.
    pub(super) fn and_its_third(self) -> impl Iterator<Item = Self> {
        let thrice_hz = 3.0 * self.frequency_hz;
        let orders = self.orders.iter().filter(|k| k.is_multiple_of(3)).map(|k| k / 3).collect();
        let public =
            (thrice_hz > 42.5 && thrice_hz < 69.0).then_some(Self { frequency_hz: thrice_hz, orders });
        std::iter::once(self).chain(public)
    }
}

/// The best few fundamentals of each family.
pub(super) fn faint_combs(survey: &Surveyed) -> Vec<Faint> {
    let Some(fine) = FineSpectrum::new(&survey.opening, survey.opening_rate_hz) else { return Vec::new() };
    FAMILIES.iter().flat_map(|family| fine.best(family)).collect()
}

/// Power over noise in steps of a fraction of 1/T.
struct FineSpectrum {
    step_hz: f64,
    power: Vec<f32>,
}

impl FineSpectrum {
    fn new(samples: &[f64], rate_hz: f64) -> Option<Self> {
        let segment = ((SHORT_S * rate_hz) as usize / OVERLAP) * OVERLAP;
        if segment < 16 || samples.len() < 8 * segment {
            return None;
        }
        let hop = segment / OVERLAP;
        let series = short_spectra(samples, segment, hop, rate_hz);
        let count = series[0].len();
        let hop_s = hop as f64 / rate_hz;
        let parts = ((count as f64 * hop_s) / STRETCH_S).ceil().max(1.0) as usize;
        let part = count / parts;
        // Fine steps fall evenly into the width of a bin.
        let in_bin = (FINE * part).div_ceil(OVERLAP).max(2) & !1;
        let padded = in_bin * OVERLAP;
        let fft = FftPlanner::new().plan_fft_forward(padded);
        let mut scratch = vec![Complex64::ZERO; fft.get_inplace_scratch_len()];
        let mut power = vec![0f32; series.len() * in_bin];
        let mut buffer = vec![Complex64::ZERO; padded];
        // Noise in a bin's sequence, by distance from its middle.
        let half = in_bin as i64 / 2;
        let shape: Vec<f64> = (-half..half)
            .map(|i| BLACKMAN_HARRIS.response(i as f64 / in_bin as f64).powi(2))
            .map(|r| r * OVERLAP as f64 / BLACKMAN_HARRIS.noise_bandwidth())
            .collect();
        for (m, phasors) in series.iter().enumerate() {
            for stretch in phasors.chunks_exact(part).take(parts) {
                let mean = stretch.iter().map(Complex64::norm_sqr).sum::<f64>().max(1e-40);
                buffer.fill(Complex64::ZERO);
                buffer[..part].copy_from_slice(stretch);
                fft.process_with_scratch(&mut buffer, &mut scratch);
                for i in -half..half {
                    let read = buffer[i.rem_euclid(padded as i64) as usize].norm_sqr();
                    let at = m as i64 * in_bin as i64 + i;
                    if let Some(slot) = usize::try_from(at).ok().and_then(|at| power.get_mut(at)) {
                        *slot += (read / (mean * shape[(i + half) as usize])) as f32;
                    }
                }
            }
        }
        Some(Self { step_hz: rate_hz / segment as f64 / in_bin as f64, power })
    }

    /// Log-likelihood ratio, less what noise gives, of one line.
    fn line(&self, frequency_hz: f64) -> f64 {
        let at = (frequency_hz / self.step_hz).round() as usize;
        self.power.get(at).map_or(0.0, |p| (f64::from(*p) - QUIET).clamp(0.0, CAP))
    }

    fn best(&self, family: &Family) -> Vec<Faint> {
        let step_hz = self.step_hz / 4.0;
        let count = ((family.to_hz - family.from_hz) / step_hz) as usize;
        let scored = (0..=count).map(|i| {
            let f = family.from_hz + i as f64 * step_hz;
            let sum: f64 = (1..=ORDERS).map(|k| weight(k) * self.line(f64::from(k) * f)).sum();
            (f, sum * prior(f))
        });
        let mut scored: Vec<(f64, f64)> = scored.collect();
        scored.sort_by(|a, b| b.1.total_cmp(&a.1));
        let mut taken: Vec<f64> = Vec::new();
        for (f, _) in scored {
            if taken.iter().all(|other| (f - other).abs() > 0.005 * f) {
                taken.push(f);
                if taken.len() == GIVEN {
                    break;
                }
            }
        }
        taken.into_iter().map(|frequency_hz| self.faint(frequency_hz)).collect()
    }

    fn faint(&self, frequency_hz: f64) -> Faint {
        let stand = |k: u32| self.line(f64::from(k) * frequency_hz);
        let mut orders: Vec<u32> = (1..=ORDERS).filter(|&k| stand(k) > 2.5).collect();
        orders.sort_by(|&a, &b| stand(b).total_cmp(&stand(a)));
        Faint { frequency_hz, orders }
    }
}

/// Limited phasors, by bin and then by time, turned so that a bin's middle stands still.
fn short_spectra(samples: &[f64], segment: usize, hop: usize, rate_hz: f64) -> Vec<Vec<Complex64>> {
    let fft = RealFftPlanner::new().plan_fft_forward(segment);
    let window = BLACKMAN_HARRIS.samples(segment);
    let (mut input, mut bins) = (fft.make_input_vec(), fft.make_output_vec());
    let mut scratch = fft.make_scratch_vec();
    let top = ((SURVEY_TOP_HZ * segment as f64 / rate_hz) as usize + 2).min(bins.len());
    let mut series = vec![Vec::new(); top];
    let turns = [(1.0, 0.0), (0.0, -1.0), (-1.0, 0.0), (0.0, 1.0)].map(|(re, im)| Complex64::new(re, im));
    for (n, from) in (0..=samples.len() - segment).step_by(hop).enumerate() {
        let part = &samples[from..from + segment];
        let mean = part.iter().sum::<f64>() / segment as f64;
        for ((slot, x), w) in input.iter_mut().zip(part).zip(&window) {
            *slot = (x - mean) * w;
        }
        fft.process_with_scratch(&mut input, &mut bins, &mut scratch)
            .expect("buffers made by the plan itself");
        for (m, line) in series.iter_mut().enumerate() {
            line.push(bins[m] * turns[(m * n) % OVERLAP]);
        }
    }
    for line in &mut series {
        let mut sizes: Vec<f64> = line.iter().map(|z| z.norm()).collect();
        let middle = sizes.len() / 2;
        let most = LARGEST * *sizes.select_nth_unstable_by(middle, f64::total_cmp).1;
        line.iter_mut().for_each(|z| *z *= (most / z.norm().max(1e-30)).min(1.0));
    }
    series
}
