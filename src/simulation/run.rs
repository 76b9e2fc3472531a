//! One recording through one network, from its first sample to the verdict.

use std::path::Path;

use rayon::prelude::*;

use super::bands::third_octaves;
use super::character::{group_delay_range_s, group_delay_s, insertion_loss_db, largest_loss_db, settling_s};
use super::extension::{Extension, FIT_S};
use super::meters::{Meters, Readings};
use super::verdict::{Judged, is_asked_for, misses, target_db};
use super::{
    BeforeAfter, Convolver, EXACT_UP_TO, KeepMeasured, Kernel, Residual, Simulation, SimulationError,
    ThirdOctave,
};
use crate::analysis::{
    Analysis, OrderLevel, PhaseTrack, Spectrum, a_weighting_db, bs468_weighting_db, weighted_level_dbfs,
};
use crate::capture::{Capture, CaptureError, SampleFormat, WavWriter, Written};
use crate::plan::{Design, LineBrief, span};

/// Samples of all channels read at a time.
const BLOCK_SAMPLES: usize = 1 << 16;

/// Samples of all channels that the fit at the start may hold.
const FIT_SAMPLES: usize = 1 << 21;

/// Below this height over the noise in 1/T a residual is an upper bound, decibels.
const NOISE_FLOOR_DB: f64 = 10.0;

/// Noise in the stretches' bandwidth, some seconds' worth, over that in 1/T: a mean
/// power above it is not noise, decibels.
const STRETCH_FLOOR_DB: f64 = 18.0;

/// From this difference on, a note says what wander does to the prediction, decibels.
const WANDER_TOLD_DB: f64 = 0.5;

/// Most points of the track that this is worked out on.
const WANDER_POINTS: usize = 2000;

/// Weakest band power that counts as a signal, mean square of full scale: −200 dBFS.
const SILENCE: f64 = 1e-20;

/// What was on the line before the recording starts.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Start {
    /// The hum and the level of the start, for ever: no switching-on is heard.
    #[default]
    Settled,
    /// Nothing: the network is heard settling.
    AtRest,
}

/// What the user asks of the simulation.
#[derive(Debug, Clone, Default)]
pub struct SimulateOptions {
    /// How the line starts.
    pub start: Start,
    /// How samples are written; `None`: as the recording's are.
    pub sample_format: Option<SampleFormat>,
}

/// The figures, and the spectra for the charts.
#[derive(Debug, Clone, PartialEq)]
pub struct SimulationRun {
    /// What `simulation.yaml` carries.
    pub simulation: Simulation,
    /// Spectrum of the measured channel before.
    pub before: Spectrum,
    /// Spectrum after.
    pub after: Spectrum,
}

/// A recording, the network it is to go through, and what is asked of it.
pub(super) struct Job<'a> {
    pub design: &'a Design,
    pub brief: &'a LineBrief,
    pub analysis: &'a Analysis,
    pub track: Option<&'a PhaseTrack>,
    pub options: &'a SimulateOptions,
}

/// One channel on its way.
struct Strip<'a> {
    convolver: Convolver,
    extension: Extension<'a>,
    /// Input that has gone in and not come out yet.
    waiting: Vec<f64>,
    last: f64,
}

/// A block as it comes out: input and filtered, one plane a channel.
#[derive(Default)]
struct Delivery {
    input: Vec<Vec<f64>>,
    filtered: Vec<Vec<f64>>,
}

/// Where blocks go.
struct Outlets {
    channel: usize,
    flat_gain: f64,
    before: Meters,
    after: Meters,
    filtered: WavWriter,
    removed: WavWriter,
}

impl Job<'_> {
    pub fn run(
        &self,
        capture: &mut dyn Capture,
        filtered_path: &Path,
        removed_path: &Path,
        progress: &mut dyn FnMut(f64),
    ) -> Result<SimulationRun, SimulationError> {
        let format = capture.format().clone();
        let rate_hz = f64::from(format.sample_rate_hz);
        let channel = self.channel(capture)?;
        let circuit = &self.design.circuit;
        let kernel = Kernel::of_circuit(circuit, rate_hz)?;
        let orders = self.orders(rate_hz);
        let stored_as = self.options.sample_format.unwrap_or_else(|| capture.sample_format());
        let writer = |path: &Path| WavWriter::create(path, format.sample_rate_hz, format.channels, stored_as);
        let meters = || Meters::new(rate_hz, format.frames, self.track, &orders);
        let mut outlets = Outlets {
            channel,
            flat_gain: 10_f64.powf(-self.design.flat_loss_db / 20.0),
            before: meters(),
            after: meters(),
            filtered: writer(filtered_path)?,
            removed: writer(removed_path)?,
        };

        capture.rewind()?;
        let mut input = vec![Vec::new(); format.channels];
        let fit_frames = (FIT_S * rate_hz) as usize;
        let first = fit_frames.min(FIT_SAMPLES / format.channels).max(1);
        capture.read_block(&mut input, first)?;
        let mut strips = self.strips(&input, &kernel, rate_hz);
        let block = (BLOCK_SAMPLES / format.channels).max(1);
        let mut ready = Delivery::default();
        let mut done = 0_u64;
        while !input[0].is_empty() {
            // The next block is convolved while the last one is measured and written.
            let (next, delivered) = rayon::join(|| convolve(&mut strips, &input), || outlets.take(&ready));
            delivered?;
            ready = next;
            done += input[0].len() as u64;
            progress(done as f64 / format.frames.max(1) as f64);
            capture.read_block(&mut input, block)?;
        }
        outlets.take(&ready)?;
        outlets.take(&finish(strips, format.frames))?;
        let (before, after) = rayon::join(|| outlets.before.finish(), || outlets.after.finish());
        let written = [outlets.filtered.finish()?, outlets.removed.finish()?];
        let simulation = self.account(capture.name(), channel, &kernel, &before, &after, written);
        Ok(SimulationRun { simulation, before: before.spectrum, after: after.spectrum })
    }

    /// The channel to measure, 0 first.
    fn channel(&self, capture: &dyn Capture) -> Result<usize, SimulationError> {
        let channels = capture.format().channels;
        let channel = self.analysis.captures.first().map_or(1, |summary| summary.channel);
        if channel == 0 || channel > channels {
            return Err(SimulationError::NoSuchChannel {
                capture: capture.name().to_owned(),
                channel,
                channels,
            });
        }
        Ok(channel - 1)
    }

    /// Orders to measure: those found, those planned for, those asked for, up to
    /// where the response is exact.
    fn orders(&self, rate_hz: f64) -> Vec<u32> {
        let Some(track) = self.track else { return Vec::new() };
        let found = self.analysis.harmonics.iter().map(|harmonic| harmonic.order);
        let planned = self.design.predicted.iter().map(|predicted| predicted.order);
        let asked = self.brief.orders.iter().flatten().copied();
        let highest = EXACT_UP_TO * rate_hz / track.mean_frequency_hz();
        let mut orders: Vec<u32> = found
            .chain(planned)
            .chain(asked)
            .filter(|&order| order > 0 && f64::from(order) <= highest)
            .collect();
        orders.sort_unstable();
        orders.dedup();
        orders
    }

    fn strips(&self, start: &[Vec<f64>], kernel: &Kernel, rate_hz: f64) -> Vec<Strip<'_>> {
        let found: Vec<u32> = self.analysis.harmonics.iter().map(|harmonic| harmonic.order).collect();
        start
            .par_iter()
            .map(|plane| {
                let extension = Extension::fit(plane, rate_hz, self.track, &found);
                let at_rest = Convolver::new(kernel);
                let convolver = match self.options.start {
                    Start::AtRest => at_rest,
                    Start::Settled => at_rest.after_a_past(&extension.past()),
                };
                Strip { convolver, extension, waiting: Vec::new(), last: 0.0 }
            })
            .collect()
    }

    fn account(
        &self,
        name: &str,
        channel: usize,
        kernel: &Kernel,
        before: &Readings,
        after: &Readings,
        written: [Written; 2],
    ) -> Simulation {
        let circuit = &self.design.circuit;
        let residual = self.residuals(before, after);
        let guards = self.guards(&residual);
        let keep = self.keep(&guards, before, after, kernel.sample_rate_hz());
        let judged: Vec<Judged> = residual
            .iter()
            .zip(&after.orders)
            .map(|(residual, level)| Judged { residual, after_se_db: level.level_se_db })
            .collect();
        let mut misses = misses(&judged, &keep);
        if self.track.is_none() {
            misses.push(
                "no mains hum was found in this recording: what the filter leaves cannot be told".to_owned(),
            );
        }
        let delays: Vec<(f64, f64)> = self
            .brief
            .keep
            .iter()
            .filter_map(|band| group_delay_range_s(circuit, band.from_hz, band.to_hz, &guards))
            .collect();
        let least = delays.iter().map(|range| range.0).fold(f64::INFINITY, f64::min);
        let most = delays.iter().map(|range| range.1).fold(f64::NEG_INFINITY, f64::max);
        let middle_hz = self.brief.keep.first().map_or(0.0, |band| (band.from_hz + band.to_hz) / 2.0);
        let peak_before_dbfs = peak_dbfs(before.peak);
        let peak_after_dbfs = peak_dbfs(after.peak);
        Simulation {
            met: misses.is_empty(),
            misses,
            capture: name.to_owned(),
            channel: channel + 1,
            hum_a_weighted_dbfs: weighted(&residual, a_weighting_db),
            hum_468_weighted_dbfs: weighted(&residual, bs468_weighting_db),
            third_octaves: self.third_octaves(&guards, before, after, kernel.sample_rate_hz()),
            settling_s: settling_s(circuit, kernel),
            group_delay_spread_s: (most - least).max(0.0),
            group_delay_s: group_delay_s(circuit, middle_hz).unwrap_or(0.0),
            headroom_gained_db: peak_before_dbfs - peak_after_dbfs,
            peak_before_dbfs,
            peak_after_dbfs,
            notes: self.notes(&residual, &keep, kernel, written),
            residual,
            keep,
        }
    }

    fn residuals(&self, before: &Readings, after: &Readings) -> Vec<Residual> {
        let pairs = before.orders.iter().zip(&after.orders);
        let strongest_dbfs =
            before.orders.iter().map(|order| order.level_dbfs).fold(f64::NEG_INFINITY, f64::max);
        pairs.map(|(before, after)| self.residual(before, after, strongest_dbfs)).collect()
    }

    fn residual(&self, before: &OrderLevel, after: &OrderLevel, strongest_dbfs: f64) -> Residual {
        let by_power = changes_more(after, before);
        let reading = |level: &OrderLevel| if by_power { level.mean_power_dbfs } else { level.level_dbfs };
        let at_noise_floor = after.over_floor_db < NOISE_FLOOR_DB && !by_power;
        let after_dbfs = if at_noise_floor { upper_bound_dbfs(after) } else { reading(after) };
        let before_dbfs = reading(before);
        let asked = is_asked_for(before.order, before_dbfs, strongest_dbfs, self.brief, self.design);
        Residual {
            order: before.order,
            frequency_hz: before.frequency_hz,
            before_dbfs,
            after_dbfs,
            reduction_db: before_dbfs - after_dbfs,
            predicted_db: insertion_loss_db(&self.design.circuit, before.frequency_hz),
            target_db: asked.then(|| target_db(self.brief, before_dbfs)).flatten(),
            at_noise_floor,
        }
    }

    /// Stretches round the notched lines in which loss is not judged: lines as
    /// planned, and as this recording has them.
    fn guards(&self, residuals: &[Residual]) -> Vec<(f64, f64)> {
        let guard_hz = self.brief.guard_hz;
        let planned = self.design.predicted.iter().filter(|predicted| predicted.target_db.is_some());
        let here = residuals.iter().filter(|residual| residual.target_db.is_some());
        planned
            .map(|predicted| predicted.frequency_hz)
            .chain(here.map(|residual| residual.frequency_hz))
            .map(|hz| (hz - guard_hz, hz + guard_hz))
            .collect()
    }

    fn keep(
        &self,
        guards: &[(f64, f64)],
        before: &Readings,
        after: &Readings,
        rate_hz: f64,
    ) -> Vec<KeepMeasured> {
        self.brief
            .keep
            .iter()
            .map(|band| KeepMeasured {
                from_hz: band.from_hz,
                to_hz: band.to_hz,
                allowed_db: band.allowed_db,
                loss_db: largest_loss_db(&self.design.circuit, band.from_hz, band.to_hz, guards)
                    .unwrap_or(0.0),
                measured_db: powers(
                    band.from_hz,
                    band.to_hz.min(EXACT_UP_TO * rate_hz),
                    guards,
                    before,
                    after,
                )
                .map(|(before, after)| 10.0 * (before / after).log10()),
            })
            .collect()
    }

    fn third_octaves(
        &self,
        guards: &[(f64, f64)],
        before: &Readings,
        after: &Readings,
        rate_hz: f64,
    ) -> Vec<ThirdOctave> {
        let bands = self.brief.keep.iter().flat_map(|band| third_octaves(band.from_hz, band.to_hz));
        bands
            .filter(|(low, _, high)| *high <= EXACT_UP_TO * rate_hz && before.bands.resolves(high - low))
            .filter_map(|(low, mid_hz, high)| {
                let (before, after) = powers(low, high, guards, before, after)?;
                Some(ThirdOctave { mid_hz, before_dbfs: power_dbfs(before), after_dbfs: power_dbfs(after) })
            })
            .collect()
    }

    /// Reduction of an order's power over all the frequencies that the track went through.
    fn reduction_over_time_db(&self, order: u32) -> f64 {
        let Some(track) = self.track else { return 0.0 };
        let stride = track.frequency_hz.len().div_ceil(WANDER_POINTS);
        let looks = track.frequency_hz.iter().step_by(stride);
        let gain = |hz: &f64| self.design.circuit.insertion(f64::from(order) * hz).norm_sqr();
        let power = looks.clone().map(gain).sum::<f64>() / looks.count() as f64;
        -10.0 * power.max(1e-40).log10()
    }

    fn notes(
        &self,
        residuals: &[Residual],
        keep: &[KeepMeasured],
        kernel: &Kernel,
        written: [Written; 2],
    ) -> Vec<String> {
        let mut notes = vec![match self.options.start {
            Start::Settled => {
                "the line is taken as settled: hum and level of the start, extended backwards".to_owned()
            }
            Start::AtRest => {
                "the line is taken as at rest before the recording: the start is the network settling"
                    .to_owned()
            }
        }];
        let rate_hz = kernel.sample_rate_hz();
        notes.push(format!(
            "the samples are true to the network over {} (to 0.45 of the sample rate), and near it above",
            span(0.0, EXACT_UP_TO * rate_hz)
        ));
        for residual in residuals.iter().filter(|residual| residual.at_noise_floor) {
            let Residual { order, after_dbfs, .. } = residual;
            notes.push(format!(
                "order {order}: what is left is in the noise of this recording; {after_dbfs:.1} dBFS is an upper bound"
            ));
        }
        for residual in residuals.iter().filter(|residual| !residual.at_noise_floor) {
            let Residual { order, reduction_db, predicted_db, .. } = residual;
            let over_time_db = self.reduction_over_time_db(*order);
            if (reduction_db - predicted_db).abs() > WANDER_TOLD_DB
                && (over_time_db - predicted_db).abs() > WANDER_TOLD_DB
            {
                notes.push(format!(
                    "order {order}: {reduction_db:.1} dB measured, {predicted_db:.1} dB predicted at the mean frequency; over the frequencies that the hum went through the response comes to {over_time_db:.1} dB"
                ));
            }
        }
        for band in keep {
            let KeepMeasured { from_hz, to_hz, allowed_db, measured_db, loss_db } = band;
            if measured_db.is_some_and(|db| db > *allowed_db) && loss_db.abs() <= *allowed_db {
                notes.push(format!(
                    "keep band {}: the samples lose more than the response does; hum or other lines in the band went with it",
                    span(*from_hz, *to_hz)
                ));
            }
        }
        for (name, written) in ["filtered.wav", "removed.wav"].iter().zip(written) {
            if written.saturated > 0 {
                notes.push(format!("{name}: {} samples over full scale were held at it", written.saturated));
            }
        }
        notes
    }
}

impl Outlets {
    fn take(&mut self, block: &Delivery) -> Result<(), CaptureError> {
        if block.input.is_empty() || block.input[0].is_empty() {
            return Ok(());
        }
        let Self { channel, flat_gain, before, after, filtered, removed } = self;
        let mut write_removed = || {
            let planes: Vec<Vec<f64>> = block
                .input
                .iter()
                .zip(&block.filtered)
                .map(|(input, filtered)| {
                    input.iter().zip(filtered).map(|(x, y)| *flat_gain * x - y).collect()
                })
                .collect();
            removed.write_block(&planes)
        };
        let (first, second) = rayon::join(
            || {
                before.push(&block.input[*channel]);
                filtered.write_block(&block.filtered)
            },
            || {
                after.push(&block.filtered[*channel]);
                write_removed()
            },
        );
        first.and(second)
    }
}

/// One block of all channels through the network.
fn convolve(strips: &mut [Strip], input: &[Vec<f64>]) -> Delivery {
    let pairs = strips.par_iter_mut().zip(input).map(|(strip, plane)| strip.push(plane));
    let (input, filtered) = pairs.unzip();
    Delivery { input, filtered }
}

/// What is still to come after the last sample.
fn finish(strips: Vec<Strip>, frames: u64) -> Delivery {
    let pairs = strips.into_par_iter().map(|strip| strip.finish(frames));
    let (input, filtered) = pairs.unzip();
    Delivery { input, filtered }
}

impl Strip<'_> {
    /// Input and output samples that belong together, as they become ready.
    fn push(&mut self, samples: &[f64]) -> (Vec<f64>, Vec<f64>) {
        self.last = samples.last().copied().unwrap_or(self.last);
        self.waiting.extend_from_slice(samples);
        let mut filtered = Vec::new();
        self.convolver.push(samples, &mut filtered);
        let later = self.waiting.split_off(filtered.len());
        (std::mem::replace(&mut self.waiting, later), filtered)
    }

    /// After the last sample the hum goes on, and the rest stays where it was.
    fn finish(self, frames: u64) -> (Vec<f64>, Vec<f64>) {
        let Self { convolver, extension, waiting, last } = self;
        let end = frames as f64 - 1.0;
        let rest = last - extension.hum_at(end);
        let mut filtered = Vec::new();
        convolver.finish(|ahead| rest + extension.hum_at(end + ahead as f64), &mut filtered);
        (waiting, filtered)
    }
}

/// Whether a line is to be read by its mean power, before and after alike.
///
/// Along the track its phasors are summed before they are squared: behind a notch,
/// which turns the phase where the line crosses it, that would hide what is left.
/// There the mean power of shorter stretches is the reading. What stood over the
/// mean phasor before already (a note beside the line, a pump switched on) is no
/// reason: the sum along the track leaves it out of both.
fn changes_more(after: &OrderLevel, before: &OrderLevel) -> bool {
    let excess_db = |level: &OrderLevel| level.mean_power_dbfs - level.level_dbfs;
    let noise_db = 0.1 + 6.0 * after.level_se_db;
    changes(after) && excess_db(after) > excess_db(before) + noise_db
}

/// Whether the line's power stands over its mean phasor's by more than noise explains.
fn changes(level: &OrderLevel) -> bool {
    let noise_db = 0.1 + 6.0 * level.level_se_db;
    let in_noise = level.over_floor_db < NOISE_FLOOR_DB;
    if in_noise {
        return level.mean_power_dbfs > level.floor_dbfs + STRETCH_FLOOR_DB;
    }
    level.mean_power_dbfs > level.level_dbfs + noise_db
}

/// What a line in the noise may be at most: its reading and three times the noise
/// power in 1/T, which noise alone exceeds once in twenty (a power of exponential
/// distribution).
fn upper_bound_dbfs(level: &OrderLevel) -> f64 {
    let power = |dbfs: f64| 10_f64.powf(dbfs / 10.0);
    10.0 * (power(level.level_dbfs) + 3.0 * power(level.floor_dbfs)).log10()
}

/// Power of a band before and after, where it holds signal.
fn powers(
    from_hz: f64,
    to_hz: f64,
    guards: &[(f64, f64)],
    before: &Readings,
    after: &Readings,
) -> Option<(f64, f64)> {
    let one = before.bands.mean_square(from_hz, to_hz, guards);
    let other = after.bands.mean_square(from_hz, to_hz, guards);
    (one > SILENCE && other > SILENCE).then_some((one, other))
}

fn weighted(residuals: &[Residual], weighting_db: fn(f64) -> f64) -> Option<BeforeAfter> {
    let level = |pick: fn(&Residual) -> f64| {
        let lines: Vec<(f64, f64)> = residuals.iter().map(|r| (r.frequency_hz, pick(r))).collect();
        weighted_level_dbfs(&lines, weighting_db)
    };
    (!residuals.is_empty())
        .then(|| BeforeAfter { before: level(|r| r.before_dbfs), after: level(|r| r.after_dbfs) })
}

/// Mean square as decibels under that of a full-scale sine (AES17).
fn power_dbfs(mean_square: f64) -> f64 {
    10.0 * (2.0 * mean_square).max(1e-40).log10()
}

fn peak_dbfs(peak: f64) -> f64 {
    20.0 * peak.max(1e-20).log10()
}
