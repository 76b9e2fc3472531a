//! Phasors of many harmonics along a reference phase, block by block.
//!
//! Block b is weighted by a Blackman–Harris window v of four hops and taken
//! against e^(−j·k·φ(t)), φ the reference. Within a block φ is taken as a
//! parabola: its slope sets the frequency, its bend is taken out as the gain of
//! a chirp under the window. The transform at any frequency comes from one FFT
//! of twice the block by a short sum over bins (a non-uniform FFT with the
//! "exponential of semicircle" kernel: Barnett, Magland and af Klinteberg, SIAM
//! J. Sci. Comput. 41, 2019), exact to about 1e-8.
//!
//! The windows shifted by a hop sum to a constant, so a weighted sum of phasors
//! is the same as one long window over all samples, smooth if the weights are.

use super::PhaseTrack;
use super::decimator::Decimator;
use super::window::BLACKMAN_HARRIS;
use num_complex::Complex64;
use rayon::prelude::*;
use realfft::{RealFftPlanner, RealToComplex};
use std::array;
use std::f64::consts::{PI, TAU};
use std::sync::Arc;

/// Bins on either side that the kernel reaches.
const KERNEL_REACH: f64 = 4.0;
/// Bins that it weighs.
const NODES: usize = 8;
/// Shape of the kernel for an FFT twice as long as the block.
const KERNEL_BETA: f64 = 2.30 * 2.0 * KERNEL_REACH;
/// Blocks handed to the cores at a time.
const BATCH: usize = 32;

/// The phasors of one block.
#[derive(Debug, Clone)]
pub(super) struct BlockPhasors {
    /// Middle of the block in seconds from the start.
    pub time_s: f64,
    /// Aₖ e^(jθₖ) for each order, relative to the reference phase.
    pub values: Vec<Complex64>,
}

/// Turns samples into phasors, in memory that does not grow.
pub(super) struct PhasorBank {
    decimator: Decimator,
    plan: BlockPlan,
    reference: PhaseTrack,
    held: Vec<f64>,
    /// Index, at the decimated rate, of the first held sample.
    held_from: usize,
}

/// What all blocks have in common.
struct BlockPlan {
    rate_hz: f64,
    hop: usize,
    /// Window over the kernel's own taper.
    weights: Vec<f64>,
    window_sum: f64,
    /// ⟨t²⟩, ⟨t⁴⟩ and ⟨t⁶⟩ under the window, in seconds.
    moments: [f64; 3],
    fft: Arc<dyn RealToComplex<f64>>,
    orders: Vec<u32>,
    /// Decimator's gain at each order's mean frequency.
    gains: Vec<f64>,
    kernel: KernelTable,
}

impl PhasorBank {
    /// Phasors of `orders` of the reference, about one every `hop_s` seconds.
    pub fn new(sample_rate_hz: f64, reference: &PhaseTrack, orders: &[u32], hop_s: f64) -> Self {
        let mean_hz = reference.mean_frequency_hz();
        let top_order = f64::from(orders.iter().copied().max().unwrap_or(1));
        let top_hz = reference.frequency_hz.iter().fold(mean_hz, |a, &b| a.max(b)) * top_order;
        let decimator = Decimator::new(sample_rate_hz, 1.01 * top_hz + 5.0);
        let gains = orders.iter().map(|&k| decimator.gain_at(f64::from(k) * mean_hz)).collect();
        let plan = BlockPlan::new(decimator.output_rate_hz(), hop_s, orders, gains);
        Self { decimator, plan, reference: reference.clone(), held: Vec::new(), held_from: 0 }
    }

    /// Seconds between blocks.
    pub fn hop_s(&self) -> f64 {
        self.plan.hop as f64 / self.plan.rate_hz
    }

    /// How many whole blocks a capture of so many samples holds.
    pub fn blocks_in(&self, samples: u64) -> usize {
        let decimated = samples.div_ceil(self.decimator.factor() as u64) as usize;
        (decimated / self.plan.hop).saturating_sub(3)
    }

    /// Takes samples in; returns the blocks that are complete.
    pub fn push(&mut self, samples: &[f64]) -> Vec<BlockPhasors> {
        self.decimator.push(samples, &mut self.held);
        self.take_blocks(BATCH)
    }

    /// The blocks that remain.
    pub fn finish(&mut self) -> Vec<BlockPhasors> {
        self.decimator.finish(&mut self.held);
        self.take_blocks(1)
    }

    fn take_blocks(&mut self, at_least: usize) -> Vec<BlockPhasors> {
        let hop = self.plan.hop;
        let count = (self.held.len() / hop).saturating_sub(3);
        if count < at_least {
            return Vec::new();
        }
        let (plan, reference, held, from) = (&self.plan, &self.reference, &self.held, self.held_from);
        let blocks = (0..count)
            .into_par_iter()
            .with_min_len(4)
            .map_init(
                || (plan.fft.make_input_vec(), plan.fft.make_output_vec(), plan.fft.make_scratch_vec()),
                |(input, bins, scratch), b| {
                    let samples = &held[b * hop..(b + 4) * hop];
                    plan.transform(samples, input, bins, scratch);
                    let middle_s = (from + (b + 2) * hop) as f64 / plan.rate_hz;
                    plan.phasors(bins, reference, middle_s)
                },
            )
            .collect();
        self.held.drain(..count * hop);
        self.held_from += count * hop;
        blocks
    }
}

impl BlockPlan {
    fn new(rate_hz: f64, hop_s: f64, orders: &[u32], gains: Vec<f64>) -> Self {
        let hop = quick_size(hop_s * rate_hz);
        let length = 4 * hop;
        let window = BLACKMAN_HARRIS.samples(length);
        let window_sum = window.iter().sum();
        let time_s = |n: usize| (n as f64 - 2.0 * hop as f64) / rate_hz;
        let moment = |power: i32| {
            window.iter().enumerate().map(|(n, w)| w * time_s(n).powi(power)).sum::<f64>() / window_sum
        };
        let taper = kernel_taper(length);
        let weights = window.iter().zip(&taper).map(|(w, t)| w / t).collect();
        let fft = RealFftPlanner::new().plan_fft_forward(2 * length);
        let moments = [moment(2), moment(4), moment(6)];
        let orders = orders.to_vec();
        let kernel = KernelTable::new();
        Self { rate_hz, hop, weights, window_sum, moments, fft, orders, gains, kernel }
    }

    fn transform(
        &self,
        samples: &[f64],
        input: &mut [f64],
        bins: &mut [Complex64],
        scratch: &mut [Complex64],
    ) {
        let (front, rest) = input.split_at_mut(samples.len());
        for ((slot, x), w) in front.iter_mut().zip(samples).zip(&self.weights) {
            *slot = x * w;
        }
        rest.fill(0.0);
        self.fft.process_with_scratch(input, bins, scratch).expect("buffers made by the plan itself");
    }

    fn phasors(&self, bins: &[Complex64], reference: &PhaseTrack, middle_s: f64) -> BlockPhasors {
        let hop_s = self.hop as f64 / self.rate_hz;
        let before = reference.phase_at(middle_s - hop_s);
        let phase = reference.phase_at(middle_s);
        let after = reference.phase_at(middle_s + hop_s);
        let frequency_hz = (after - before) / (2.0 * TAU * hop_s);
        let bend = (after - 2.0 * phase + before) / (2.0 * hop_s * hop_s);
        // In turns, so that k times it loses nothing.
        let turns = (phase / TAU).rem_euclid(1.0);
        let scale = 2.0 / self.window_sum;
        let orders = self.orders.iter().zip(&self.gains);
        let values = orders.map(|(&order, gain)| {
            let k = f64::from(order);
            let raw = self.at_frequency(bins, k * frequency_hz);
            let turned = raw * Complex64::cis(-TAU * (k * turns).fract());
            turned * (scale / gain) / self.chirp_gain(k * bend)
        });
        BlockPhasors { time_s: middle_s, values: values.collect() }
    }

    /// Σ v[n] x[n] e^(−j2πfn/rate), n counted from the middle of the block.
    fn at_frequency(&self, bins: &[Complex64], frequency_hz: f64) -> Complex64 {
        let size = 8 * self.hop as i64;
        let at = frequency_hz * size as f64 / self.rate_hz;
        let below = at.floor();
        let weights = self.kernel.weights(at - below);
        let first = below as i64 - (NODES as i64 / 2 - 1);
        let inside = usize::try_from(first).ok().and_then(|from| bins.get(from..from + NODES));
        let sum = match inside {
            Some(nodes) => quarter_turned_sum(|i| nodes[i], &weights),
            None => quarter_turned_sum(|i| wrapped(bins, first + i as i64), &weights),
        };
        // The middle of the block is a quarter of the FFT from its start: j^m.
        match first.rem_euclid(4) {
            0 => sum,
            1 => Complex64::new(-sum.im, sum.re),
            2 => -sum,
            _ => Complex64::new(sum.im, -sum.re),
        }
    }

    /// Gain of e^(j·bend·t²) under the window: its average.
    fn chirp_gain(&self, bend: f64) -> Complex64 {
        let [m2, m4, m6] = self.moments;
        if (bend * m2).abs() < 0.03 {
            let (b2, b3) = (bend * bend, bend * bend * bend);
            return Complex64::new(1.0 - 0.5 * b2 * m4, bend * m2 - b3 * m6 / 6.0);
        }
        let steps = 256;
        let length_s = 4.0 * self.hop as f64 / self.rate_hz;
        let (mut sum, mut weight) = (Complex64::ZERO, 0.0);
        for i in 0..steps {
            let u = (f64::from(i) + 0.5) / f64::from(steps);
            let (w, t) = (BLACKMAN_HARRIS.at(u), (u - 0.5) * length_s);
            sum += w * Complex64::cis(bend * t * t);
            weight += w;
        }
        sum / weight
    }
}

/// A bin of the whole transform of which `bins` is the half up to half the rate.
fn wrapped(bins: &[Complex64], m: i64) -> Complex64 {
    let size = 2 * (bins.len() as i64 - 1);
    let wrapped = m.rem_euclid(size);
    if wrapped <= size / 2 { bins[wrapped as usize] } else { bins[(size - wrapped) as usize].conj() }
}

/// Σ j^i·wᵢ·zᵢ.
fn quarter_turned_sum(node: impl Fn(usize) -> Complex64, weights: &[f64; NODES]) -> Complex64 {
    let (mut even, mut odd) = (Complex64::ZERO, Complex64::ZERO);
    for i in (0..NODES).step_by(4) {
        even += node(i) * weights[i] - node(i + 2) * weights[i + 2];
        odd += node(i + 1) * weights[i + 1] - node(i + 3) * weights[i + 3];
    }
    Complex64::new(even.re - odd.im, even.im + odd.re)
}

/// The kernel at the eight bins around a frequency, as parabolas over short pieces of
/// the way from one bin to the next: within 1e-9 of it.
struct KernelTable {
    pieces: Vec<[[f64; NODES]; 3]>,
}

/// Pieces of a bin.
const PIECES: usize = 512;

impl KernelTable {
    fn new() -> Self {
        let half = 0.5 / PIECES as f64;
        let piece = |i: usize| {
            let middle = (i as f64 + 0.5) / PIECES as f64;
            let at = |offset: f64, n: usize| kernel(middle + offset + NODES as f64 / 2.0 - 1.0 - n as f64);
            let slope = |n| (at(half, n) - at(-half, n)) / (2.0 * half);
            let bend = |n| (at(half, n) - 2.0 * at(0.0, n) + at(-half, n)) / (2.0 * half * half);
            [array::from_fn(|n| at(0.0, n)), array::from_fn(slope), array::from_fn(bend)]
        };
        Self { pieces: (0..PIECES).map(piece).collect() }
    }

    /// Weights of the bins from 3 below to 4 above, `share` (0 to 1) past the bin below.
    fn weights(&self, share: f64) -> [f64; NODES] {
        let at = share * PIECES as f64;
        let i = (at as usize).min(PIECES - 1);
        let t = (at - i as f64 - 0.5) / PIECES as f64;
        let [constant, linear, square] = &self.pieces[i];
        array::from_fn(|n| constant[n] + t * (linear[n] + t * square[n]))
    }
}

/// The interpolation kernel, in bins from its middle.
fn kernel(offset: f64) -> f64 {
    let u = offset / KERNEL_REACH;
    (KERNEL_BETA * ((1.0 - u * u).max(0.0).sqrt() - 1.0)).exp()
}

/// What the kernel does to sample n of a block: its transform, by the
/// trapezoidal rule (the kernel is flat to e^−β at its ends).
fn kernel_taper(length: usize) -> Vec<f64> {
    let steps = 64 * KERNEL_REACH as i32;
    let step = KERNEL_REACH / f64::from(steps);
    let nodes: Vec<(f64, f64)> =
        (-steps..=steps).map(|i| f64::from(i) * step).map(|u| (u, kernel(u))).collect();
    (0..length)
        .map(|n| {
            let turn = TAU * (n as f64 - length as f64 / 2.0) / (2.0 * length as f64);
            nodes.iter().map(|(u, k)| k * (turn * u).cos()).sum::<f64>() * step
        })
        .collect()
}

/// A hop near `wanted` of which eight make a size the FFT likes.
fn quick_size(wanted: f64) -> usize {
    let wanted = wanted.max(2.0);
    let power = wanted.log2().floor().exp2();
    let sizes = [1.0, 1.25, 1.5, 2.0].map(|factor| power * factor);
    let whole = sizes.into_iter().filter(|size| size.fract() == 0.0);
    whole.min_by(|a, b| (a - wanted).abs().total_cmp(&(b - wanted).abs())).unwrap_or(power) as usize
}

/// Transform of the block's window at an offset in hertz, 1 in the middle.
pub(super) fn block_response(offset_hz: f64, hop_s: f64) -> f64 {
    BLACKMAN_HARRIS.response(offset_hz * 4.0 * hop_s)
}

/// Angle in radians as degrees from −180 to 180.
pub(super) fn wrapped_degrees(phase_rad: f64) -> f64 {
    let turns = phase_rad / TAU;
    (turns - turns.round()) * 2.0 * PI.to_degrees()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn bank_reading(rate: f64, track: &PhaseTrack, seconds: f64, orders: &[u32]) -> Vec<BlockPhasors> {
        let mut bank = PhasorBank::new(rate, track, orders, 0.06);
        let samples: Vec<f64> = (0..(seconds * rate) as usize)
            .map(|n| {
                let phase = track.phase_at(n as f64 / rate);
                0.5 * (phase + 0.3).cos() + 0.001 * (3.0 * phase - 1.0).cos()
            })
            .collect();
        let mut blocks = Vec::new();
        for piece in samples.chunks(5000) {
            blocks.extend(bank.push(piece));
        }
        blocks.extend(bank.finish());
        assert_eq!(blocks.len(), bank.blocks_in(samples.len() as u64));
        blocks
    }

    #[test]
    fn the_table_is_the_kernel() {
        let table = KernelTable::new();
        for i in 0..2000 {
            let share = f64::from(i) / 2000.0;
            for (n, weight) in table.weights(share).into_iter().enumerate() {
                let want = kernel(share + 3.0 - n as f64);
                assert!((weight - want).abs() < 2e-9, "{share}, bin {n}: {weight} for {want}");
            }
        }
    }

    #[test]
    fn tones_read_their_phasors_at_any_rate() {
        let track = PhaseTrack::constant(50.013, 5.0);
        for rate in [360.0, 1000.0, 8000.0, 48000.0] {
            for block in bank_reading(rate, &track, 5.0, &[1, 3]) {
                let one = block.values[0] - Complex64::from_polar(0.5, 0.3);
                let three = block.values[1] - Complex64::from_polar(0.001, -1.0);
                assert!(one.norm() < 5e-6, "{rate} Hz, {} s: {one}", block.time_s);
                assert!(three.norm() < 1e-4, "{rate} Hz, {} s: {three}", block.time_s);
            }
        }
    }

    #[test]
    fn a_ramp_of_one_hertz_a_second_reads_like_a_steady_tone() {
        let time_s: Vec<f64> = (0..=10).map(f64::from).collect();
        let track = PhaseTrack {
            phase_rad: time_s.iter().map(|t| TAU * (50.0 * t + 0.5 * t * t)).collect(),
            frequency_hz: time_s.iter().map(|t| 50.0 + t).collect(),
            time_s,
        };
        for block in bank_reading(4000.0, &track, 9.0, &[1]) {
            assert!((block.values[0] - Complex64::from_polar(0.5, 0.3)).norm() < 2e-5);
        }
    }
}
