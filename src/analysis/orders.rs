//! Levels of harmonics along a known phase track, streaming.

use super::PhaseTrack;
use super::phasors::{BlockPhasors, PhasorBank, block_response, wrapped_degrees};
use super::window::BLACKMAN_HARRIS;
use num_complex::Complex64;
use rustfft::{Fft, FftPlanner};
use std::f64::consts::TAU;
use std::sync::Arc;

/// Blocks in one stretch of the noise measurement.
const STRETCH_BLOCKS: usize = 128;
/// Share of the capture that fades in, and fades out.
const FADE_SHARE: f64 = 0.12;
/// Longest fade in seconds: lines 1 Hz apart are then apart by over 90 dB.
const LONGEST_FADE_S: f64 = 4.0;
/// The even and the faded mean differ by more than noise makes them when the square of the
/// difference is so many times its mean (5 % of the time where nothing else is near).
const BY_MORE_THAN_NOISE: f64 = 3.0;

/// One harmonic as measured along the track.
#[derive(Debug, Clone, PartialEq)]
pub struct OrderLevel {
    /// Order, 1 for the fundamental.
    pub order: u32,
    /// Mean frequency in hertz: the order times the track's.
    pub frequency_hz: f64,
    /// RMS relative to the RMS of a full-scale sine (AES17).
    pub level_dbfs: f64,
    /// Mean of the line's power over time, each stretch of some seconds taken on its
    /// own and the noise taken out; same reference. It stands over the level where
    /// amplitude or phase (against the track) change from stretch to stretch, as
    /// behind a notch that a wandering line crosses.
    pub mean_power_dbfs: f64,
    /// Standard error of the level in decibels, from the noise around the line.
    pub level_se_db: f64,
    /// Phase of the cosine at the start of the capture, degrees from −180 to 180.
    pub phase_deg: f64,
    /// Line power over the noise power in a bandwidth of 1/T, in decibels.
    pub over_floor_db: f64,
    /// Noise around the line in a bandwidth of 1/T, same reference as the level.
    pub floor_dbfs: f64,
}

/// Measures harmonics coherently along a phase track, block by block; memory does not grow
/// with the recording.
pub struct OrderMeter {
    bank: PhasorBank,
    track: PhaseTrack,
    means: LineMeans,
    noise: NoiseBeside,
}

/// Two means of each line's phasors along the track.
///
/// In the even one all blocks count alike, which errs least: the blocks' own edges keep lines
/// half a fundamental apart from each other by over 90 dB. The other fades in and out over
/// seconds, so that nothing nearer leaks into a weak residual, and costs some 7 % in error. The
/// even mean is read where the two agree as far as noise lets them (Hausman, Econometrica 46,
/// 1978), the faded one elsewhere.
pub(super) struct LineMeans {
    orders: Vec<u32>,
    hop_s: f64,
    fade: Fade,
    even: BlockMean,
    faded: BlockMean,
    taken: usize,
}

/// A weighted mean of the blocks' phasors.
struct BlockMean {
    sums: Vec<Complex64>,
    weight: f64,
    weight_squared: f64,
}

impl BlockMean {
    fn new(orders: usize) -> Self {
        Self { sums: vec![Complex64::ZERO; orders], weight: 0.0, weight_squared: 0.0 }
    }

    fn take(&mut self, weight: f64, values: &[Complex64]) {
        for (sum, value) in self.sums.iter_mut().zip(values) {
            *sum += weight * value;
        }
        self.weight += weight;
        self.weight_squared += weight * weight;
    }

    fn of(&self, line: usize) -> Complex64 {
        if self.weight > 0.0 { self.sums[line] / self.weight } else { Complex64::ZERO }
    }

    /// Noise bandwidth in hertz.
    fn bandwidth_hz(&self, hop_s: f64) -> f64 {
        self.weight_squared / (self.weight * self.weight * hop_s)
    }
}

impl OrderMeter {
    /// `track` runs over the whole recording: its last knot is the end.
    pub fn new(sample_rate_hz: f64, track: &PhaseTrack, orders: &[u32]) -> Self {
        let duration_s = track.time_s[track.time_s.len() - 1];
        let hop_s = block_hop_s(track.mean_frequency_hz(), duration_s);
        let bank = PhasorBank::new(sample_rate_hz, track, orders, hop_s);
        let blocks = bank.blocks_in((duration_s * sample_rate_hz).round() as u64);
        let means = LineMeans::new(orders, bank.hop_s(), blocks);
        let noise = NoiseBeside::new(blocks, bank.hop_s(), orders.len());
        Self { bank, track: track.clone(), means, noise }
    }

    /// Takes the next samples.
    pub fn push(&mut self, samples: &[f64]) {
        let blocks = self.bank.push(samples);
        self.take(blocks);
    }

    /// The levels, in the sequence of `orders`.
    pub fn finish(mut self) -> Vec<OrderLevel> {
        let blocks = self.bank.finish();
        self.take(blocks);
        let densities = self.noise.densities();
        let powers = self.noise.line_powers(&densities);
        self.means.levels(&self.track, &densities, &powers)
    }

    fn take(&mut self, blocks: Vec<BlockPhasors>) {
        for block in blocks {
            self.means.take(&block.values);
            self.noise.take(&block.values);
        }
    }
}

impl LineMeans {
    /// For so many blocks, one every `hop_s` seconds.
    pub fn new(orders: &[u32], hop_s: f64, blocks: usize) -> Self {
        Self {
            orders: orders.to_vec(),
            hop_s,
            fade: Fade::new(blocks, hop_s),
            even: BlockMean::new(orders.len()),
            faded: BlockMean::new(orders.len()),
            taken: 0,
        }
    }

    /// Takes the next block's phasors.
    pub fn take(&mut self, values: &[Complex64]) {
        self.even.take(1.0, values);
        self.faded.take(self.fade.at(self.taken), values);
        self.taken += 1;
    }

    /// The levels, from the noise density at each line (mean square per hertz) and its mean
    /// power over time.
    pub fn levels(&self, track: &PhaseTrack, densities: &[f64], powers: &[f64]) -> Vec<OrderLevel> {
        let lines = densities.iter().zip(powers).enumerate();
        lines.map(|(line, (&density, &power))| self.level(line, track, density, power)).collect()
    }

    /// A line's phasor and the noise bandwidth it was read in.
    fn reading(&self, line: usize, density: f64) -> (Complex64, f64) {
        let (even, faded) = (self.even.of(line), self.faded.of(line));
        let (least_hz, more_hz) = (self.even.bandwidth_hz(self.hop_s), self.faded.bandwidth_hz(self.hop_s));
        // The even mean has the least variance, so that of the difference is the difference's.
        let expected = 2.0 * density * (more_hz - least_hz).max(0.0);
        if (faded - even).norm_sqr() > BY_MORE_THAN_NOISE * expected {
            (faded, more_hz)
        } else {
            (even, least_hz)
        }
    }

    fn level(&self, line: usize, track: &PhaseTrack, density: f64, mean_power: f64) -> OrderLevel {
        let order = self.orders[line];
        let k = f64::from(order);
        let (phasor, bandwidth_hz) = self.reading(line, density);
        let start = k * track.phase_at(0.0);
        let duration_s = track.time_s[track.time_s.len() - 1];
        let floor = density / duration_s;
        let power = 0.5 * phasor.norm_sqr();
        let relative = (0.5 * density * bandwidth_hz / power.max(1e-40)).sqrt();
        OrderLevel {
            order,
            frequency_hz: k * track.mean_frequency_hz(),
            level_dbfs: power_dbfs(power),
            mean_power_dbfs: power_dbfs(mean_power),
            level_se_db: if relative.is_finite() { (relative * 20.0 / 10f64.ln()).min(99.0) } else { 99.0 },
            phase_deg: wrapped_degrees(phasor.arg() + start.rem_euclid(TAU)),
            over_floor_db: power_db(power / floor.max(1e-40)).min(400.0),
            floor_dbfs: power_dbfs(floor),
        }
    }
}

/// Mean-square value as decibels under a full-scale sine (mean square ½).
pub(super) fn power_dbfs(mean_square: f64) -> f64 {
    power_db(2.0 * mean_square)
}

/// 10·log₁₀ that stays finite: nothing reads −400 dB.
pub(super) fn power_db(ratio: f64) -> f64 {
    10.0 * ratio.max(1e-40).log10()
}

/// Time between blocks: two cycles, so that the main lobe reaches half-way to the
/// next harmonic, but at least some twenty blocks.
pub(super) fn block_hop_s(fundamental_hz: f64, duration_s: f64) -> f64 {
    (2.0 / fundamental_hz).min(duration_s / 20.0)
}

/// Weights that rise and fall smoothly over the blocks of a capture.
pub(super) struct Fade {
    blocks: usize,
    length: f64,
}

impl Fade {
    pub fn new(blocks: usize, hop_s: f64) -> Self {
        let length = (FADE_SHARE * blocks as f64).min(LONGEST_FADE_S / hop_s);
        Self { blocks, length }
    }

    /// Weight of block number `index`.
    pub fn at(&self, index: usize) -> f64 {
        let from_end = (self.blocks as f64 - 1.0 - index as f64).max(0.0);
        let rise = |n: f64| BLACKMAN_HARRIS.ramp((n + 1.0) / (self.length + 1.0));
        rise(index as f64) * rise(from_end)
    }
}

/// Noise density beside each line, from spectra of the phasors themselves.
///
/// Stretches of up to 128 blocks are transformed under a Blackman–Harris
/// window; the bins from 5 away from the line outwards are averaged over the
/// stretches, and their median is the density: another line among them does
/// not count.
pub(super) struct NoiseBeside {
    stretch: usize,
    window: Vec<f64>,
    window_power: f64,
    hop_s: f64,
    /// Bins looked at, as offsets from the line.
    bins: Vec<i32>,
    gathered: Vec<Vec<Complex64>>,
    power: Vec<Vec<f64>>,
    /// Squared amplitude of each line itself, summed over the stretches.
    line_power: Vec<f64>,
    stretches: usize,
    fft: Arc<dyn Fft<f64>>,
    scratch: Vec<Complex64>,
}

impl NoiseBeside {
    pub fn new(blocks: usize, hop_s: f64, lines: usize) -> Self {
        let parts = blocks.div_ceil(STRETCH_BLOCKS).max(1);
        let stretch = (blocks / parts).max(1);
        let window = BLACKMAN_HARRIS.samples(stretch);
        let window_power = window.iter().map(|w| w * w).sum();
        let outer = (stretch as i32 / 4).clamp(8, 24).min(stretch as i32 / 2);
        let inner = 5.min(outer);
        let bins: Vec<i32> = (-outer..=outer).filter(|m| m.abs() >= inner).collect();
        let power = vec![vec![0.0; bins.len()]; lines];
        let gathered = vec![Vec::with_capacity(stretch); lines];
        let fft = FftPlanner::new().plan_fft_forward(stretch);
        Self {
            stretch,
            window,
            window_power,
            hop_s,
            bins,
            gathered,
            power,
            line_power: vec![0.0; lines],
            stretches: 0,
            scratch: vec![Complex64::ZERO; fft.get_inplace_scratch_len()],
            fft,
        }
    }

    /// Takes one block's phasors.
    pub fn take(&mut self, values: &[Complex64]) {
        for (line, value) in self.gathered.iter_mut().zip(values) {
            line.push(*value);
        }
        if self.gathered.first().is_some_and(|line| line.len() == self.stretch) {
            self.close_stretch();
        }
    }

    fn close_stretch(&mut self) {
        let weight: f64 = self.window.iter().sum();
        let lines = self.gathered.iter_mut().zip(&mut self.power).zip(&mut self.line_power);
        for ((line, power), line_power) in lines {
            line.iter_mut().zip(&self.window).for_each(|(value, w)| *value *= w);
            self.fft.process_with_scratch(line, &mut self.scratch);
            *line_power += line[0].norm_sqr() / (weight * weight);
            for (slot, &m) in power.iter_mut().zip(&self.bins) {
                *slot += line[m.rem_euclid(self.stretch as i32) as usize].norm_sqr();
            }
            line.clear();
        }
        self.stretches += 1;
    }

    /// One-sided density at each line: mean square per hertz.
    pub fn densities(&self) -> Vec<f64> {
        self.power.iter().map(|power| self.density(power)).collect()
    }

    /// Mean power of each line itself, less the noise that the stretch's window lets in.
    fn line_powers(&self, densities: &[f64]) -> Vec<f64> {
        let weight: f64 = self.window.iter().sum();
        let bandwidth_hz = self.window_power / (weight * weight * self.hop_s);
        let mean = |sum: &f64| 0.5 * sum / self.stretches.max(1) as f64;
        let lines = self.line_power.iter().zip(densities);
        lines.map(|(sum, density)| (mean(sum) - density * bandwidth_hz).max(0.0)).collect()
    }

    fn density(&self, power: &[f64]) -> f64 {
        if self.stretches == 0 || self.bins.is_empty() {
            return 0.0;
        }
        let stretches = self.stretches as f64;
        let mut levels: Vec<f64> = power
            .iter()
            .zip(&self.bins)
            .map(|(p, &m)| {
                let offset_hz = f64::from(m) / (self.stretch as f64 * self.hop_s);
                let response = block_response(offset_hz, self.hop_s);
                0.5 * p * self.hop_s / (stretches * self.window_power * response * response)
            })
            .collect();
        let middle = levels.len() / 2;
        let (_, median, _) = levels.select_nth_unstable_by(middle, f64::total_cmp);
        // Median of an average of exponentials (Wilson and Hilferty 1931).
        *median / (1.0 - 1.0 / (9.0 * stretches)).powi(3)
    }
}
