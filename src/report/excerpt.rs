//! What the players play: the same stretch of the recording before the filter,
//! after it, and what was removed.

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::ReportError;
use crate::capture::Capture;

/// Longest stretch to listen to, in seconds of listening.
const LONGEST_S: f64 = 20.0;

/// Samples of one player at most: three of them in 16 bits, as text, stay below 8 MB.
const MOST_SAMPLES: u64 = 930_000;

/// Slower recordings are played faster: below this rate hum is hardly heard,
/// and browsers refuse files below 3 kHz.
const LEAST_RATE_HZ: u32 = 8000;

/// Faster recordings are thinned out: nobody hears what lies above 20 kHz.
const MOST_RATE_HZ: u32 = 48_000;

/// Peak that the loudest of the three is brought to: half of full scale.
const PEAK: f64 = 0.5;

/// Corner of the high-pass, hertz as played: what lies well below cannot be
/// heard, but would use up the loudness (a tide is thousands of times its hum).
const CORNER_HZ: f64 = 10.0;

/// Columns of the outline of each recording.
pub(super) const OUTLINE_COLUMNS: usize = 800;

/// Lines looked at to find where the hum is worst.
const LINES_WATCHED: usize = 3;

const BLOCK: usize = 8192;

/// The three recordings to take an excerpt from; they must run in step.
pub struct Recordings<'a> {
    /// Before the filter.
    pub before: &'a mut dyn Capture,
    /// After it.
    pub after: &'a mut dyn Capture,
    /// What it removed.
    pub removed: &'a mut dyn Capture,
}

/// The same stretch of three recordings, ready for the players.
#[derive(Debug, Clone, PartialEq)]
pub struct Excerpt {
    /// Where the stretch begins, seconds into the recording.
    pub start_s: f64,
    /// How much of the recording it holds, seconds.
    pub length_s: f64,
    /// Whether it is the whole recording.
    pub whole: bool,
    /// Channel, 1 first.
    pub channel: usize,
    /// How many times faster than it was recorded it is played.
    pub speed: u32,
    /// Sample rate at which it is played, hertz.
    pub rate_hz: u32,
    /// Gain applied to all three alike.
    pub gain: f64,
    /// Before, after, removed: what can be heard of them, without `gain`.
    pub(super) tracks: [Vec<f32>; 3],
    /// Lowest and highest sample in each column of time, nothing taken out but the mean.
    pub(super) outlines: [Vec<(f32, f32)>; 3],
}

impl Excerpt {
    /// Reads the stretch where the lines at `hum_hz` (strongest first) are
    /// worst, or the whole where it is short.
    ///
    /// `channel` counts from 1. What lies below about 20 Hz as played is taken
    /// out of all three alike.
    ///
    /// # Errors
    /// [`ReportError::Channel`], [`ReportError::Rate`] when the recordings do not
    /// fit each other, [`ReportError::Capture`] when one cannot be read.
    pub fn take(recordings: Recordings, channel: usize, hum_hz: &[f64]) -> Result<Self, ReportError> {
        let Recordings { before, after, removed } = recordings;
        let rate_hz = before.format().sample_rate_hz;
        for capture in [&*before, &*after, &*removed] {
            check(capture, channel, rate_hz)?;
        }
        let speed = if rate_hz < LEAST_RATE_HZ { LEAST_RATE_HZ.div_ceil(rate_hz.max(1)) } else { 1 };
        let thinning = rate_hz.div_ceil(MOST_RATE_HZ).max(1);
        let by_time = (LONGEST_S * f64::from(rate_hz) * f64::from(speed)) as u64;
        let frames = by_time.min(MOST_SAMPLES * u64::from(thinning));
        let total = before.format().frames;
        let start = if total > frames { worst_stretch(before, channel, hum_hz, frames)? } else { 0 };
        let played_hz = rate_hz * speed / thinning;
        let read = |capture: &mut dyn Capture| -> Result<_, ReportError> {
            let samples = thin_out(stretch(capture, channel, start, frames)?, thinning as usize);
            let outline = outline(&samples);
            Ok((audible(samples, played_hz), outline))
        };
        let ((before, a), (after, b), (removed, c)) = (read(before)?, read(after)?, read(removed)?);
        let (tracks, outlines) = ([before, after, removed], [a, b, c]);
        let peak = tracks.iter().flatten().map(|s| f64::from(s.abs())).fold(0.0, f64::max);
        Ok(Self {
            start_s: start as f64 / f64::from(rate_hz),
            length_s: frames.min(total) as f64 / f64::from(rate_hz),
            whole: total <= frames,
            channel,
            speed,
            rate_hz: played_hz,
            gain: if peak > 0.0 { PEAK / peak } else { 1.0 },
            tracks,
            outlines,
        })
    }

    /// What it takes to hear all three equally loud: a factor for each on top of
    /// `gain`, such that their RMS agree and none is brought above the peak.
    pub(super) fn matching(&self) -> [f64; 3] {
        let rms: Vec<f64> = self.tracks.iter().map(|track| rms(track) * self.gain).collect();
        let peak: Vec<f64> = self.tracks.iter().map(|track| peak(track) * self.gain).collect();
        let sounding = || rms.iter().zip(&peak).filter(|(rms, _)| **rms > 0.0);
        let loudness = sounding().map(|(rms, peak)| rms * PEAK / peak).fold(f64::INFINITY, f64::min);
        std::array::from_fn(|n| if rms[n] > 0.0 { loudness / rms[n] } else { 1.0 })
    }
}

fn rms(track: &[f32]) -> f64 {
    let power: f64 = track.iter().map(|s| f64::from(*s).powi(2)).sum();
    (power / track.len().max(1) as f64).sqrt()
}

fn peak(track: &[f32]) -> f64 {
    track.iter().map(|s| f64::from(s.abs())).fold(0.0, f64::max)
}

fn check(capture: &dyn Capture, channel: usize, expected_hz: u32) -> Result<(), ReportError> {
    let format = capture.format();
    let name = capture.name().to_owned();
    if channel == 0 || channel > format.channels {
        return Err(ReportError::Channel { name, channel, channels: format.channels });
    }
    if format.sample_rate_hz != expected_hz {
        return Err(ReportError::Rate { name, rate_hz: format.sample_rate_hz, expected_hz });
    }
    Ok(())
}

/// Gives every sample of the channel to `take`, until it says stop.
fn each_sample(
    capture: &mut dyn Capture,
    channel: usize,
    mut take: impl FnMut(u64, f64) -> bool,
) -> Result<(), ReportError> {
    capture.rewind()?;
    let mut planes = vec![Vec::new(); capture.format().channels];
    let mut at = 0;
    loop {
        let read = capture.read_block(&mut planes, BLOCK)?;
        if read == 0 {
            return Ok(());
        }
        for &sample in &planes[channel - 1] {
            if !take(at, sample) {
                return Ok(());
            }
            at += 1;
        }
    }
}

/// First frame of the stretch of `frames` in which the lines hold most power,
/// to a second: the correlation with each line, squared, summed over seconds.
fn worst_stretch(
    capture: &mut dyn Capture,
    channel: usize,
    hum_hz: &[f64],
    frames: u64,
) -> Result<u64, ReportError> {
    let rate = u64::from(capture.format().sample_rate_hz);
    let total = capture.format().frames;
    let lines: Vec<Complex64> = hum_hz
        .iter()
        .take(LINES_WATCHED)
        .map(|hz| Complex64::from_polar(1.0, -TAU * hz / rate as f64))
        .collect();
    let mut turning = vec![Complex64::new(1.0, 0.0); lines.len()];
    let mut sums = vec![Complex64::new(0.0, 0.0); lines.len()];
    let mut seconds = Vec::new();
    each_sample(capture, channel, |at, sample| {
        for ((sum, turn), line) in sums.iter_mut().zip(&mut turning).zip(&lines) {
            *sum += sample * *turn;
            *turn *= line;
        }
        if (at + 1) % rate == 0 {
            seconds.push(sums.iter().map(Complex64::norm_sqr).sum::<f64>());
            sums.fill(Complex64::new(0.0, 0.0));
            turning.fill(Complex64::new(1.0, 0.0));
        }
        true
    })?;
    let window = (frames / rate).max(1) as usize;
    let power = |start: usize| seconds[start..start + window].iter().sum::<f64>();
    let last = seconds.len().saturating_sub(window);
    // The earliest of equals, so that a steady hum is heard from the start.
    let worst = (0..=last).filter(|start| start + window <= seconds.len()).fold(None, |best, start| {
        let here = power(start);
        match best {
            Some((_, most)) if here <= most * (1.0 + 1e-6) => best,
            _ => Some((start, here)),
        }
    });
    Ok(worst.map_or(0, |(start, _)| start as u64 * rate).min(total - frames))
}

/// Up to `frames` samples from `start` on, their mean taken out.
fn stretch(
    capture: &mut dyn Capture,
    channel: usize,
    start: u64,
    frames: u64,
) -> Result<Vec<f32>, ReportError> {
    let mut samples = Vec::new();
    let mut sum = 0.0;
    each_sample(capture, channel, |at, sample| {
        if at >= start {
            sum += sample;
            samples.push(sample as f32);
        }
        at + 1 < start + frames
    })?;
    let mean = sum / samples.len().max(1) as f64;
    for sample in &mut samples {
        *sample = (f64::from(*sample) - mean) as f32;
    }
    Ok(samples)
}

/// Two high-passes of first order one after the other:
/// y[n] = a·(y[n−1] + x[n] − x[n−1]), a = exp(−2πf/rate).
///
/// They run in on the first quarter second reflected through the first sample
/// (2x[0] − x[n], backwards), so that neither a step nor a slope thumps.
fn audible(samples: Vec<f32>, rate_hz: u32) -> Vec<f32> {
    let a = (-TAU * CORNER_HZ / f64::from(rate_hz)).exp();
    let lead = (rate_hz as usize / 4).min(samples.len().saturating_sub(1));
    let first = samples.first().copied().unwrap_or(0.0);
    let reflected = samples[..(lead + 1).min(samples.len())].iter().skip(1).rev().map(|s| 2.0 * first - s);
    let mut out: Vec<f32> = reflected.chain(samples.iter().copied()).collect();
    for _ in 0..2 {
        let mut last = out.first().copied().map_or(0.0, f64::from);
        let mut passed = 0.0;
        for sample in &mut out {
            let here = f64::from(*sample);
            passed = a * (passed + here - last);
            last = here;
            *sample = passed as f32;
        }
    }
    out.split_off(lead)
}

/// Lowest and highest sample in each column of time.
fn outline(samples: &[f32]) -> Vec<(f32, f32)> {
    let columns = OUTLINE_COLUMNS.min(samples.len());
    (0..columns)
        .map(|column| {
            let (from, to) = (column * samples.len() / columns, (column + 1) * samples.len() / columns);
            let within = &samples[from..to];
            within
                .iter()
                .fold((f32::INFINITY, f32::NEG_INFINITY), |(low, high), &s| (low.min(s), high.max(s)))
        })
        .collect()
}

/// Every `by`-th sample of the low-passed signal.
///
/// The low-pass is a sinc cut off at 0.45 of the new rate under a Blackman
/// window (its textbook coefficients, from memory) of 24 periods.
fn thin_out(samples: Vec<f32>, by: usize) -> Vec<f32> {
    if by <= 1 {
        return samples;
    }
    let half = 12 * by;
    let cutoff = 0.45 / by as f64;
    let tap = |n: i64| {
        let x = n as f64;
        let sinc = if n == 0 { 2.0 * cutoff } else { (TAU * cutoff * x).sin() / (std::f64::consts::PI * x) };
        let u = (x / half as f64 + 1.0) / 2.0;
        sinc * (0.42 - 0.5 * (TAU * u).cos() + 0.08 * (2.0 * TAU * u).cos())
    };
    let taps: Vec<f64> = (-(half as i64)..=half as i64).map(tap).collect();
    let sum: f64 = taps.iter().sum();
    (0..samples.len())
        .step_by(by)
        .map(|centre| {
            let inside = taps.iter().enumerate().filter_map(|(n, tap)| {
                let at = (centre + n).checked_sub(half)?;
                Some(tap * f64::from(*samples.get(at)?))
            });
            (inside.sum::<f64>() / sum) as f32
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::capture::MemoryCapture;

    fn tone(rate_hz: u32, seconds: f64, hz: f64, level: impl Fn(f64) -> f64) -> MemoryCapture {
        let frames = (seconds * f64::from(rate_hz)) as usize;
        let at = |n: usize| n as f64 / f64::from(rate_hz);
        let samples = (0..frames).map(|n| level(at(n)) * (TAU * hz * at(n)).sin() + 0.3).collect();
        MemoryCapture::new("tone", rate_hz, vec![samples])
    }

    fn taken(before: &MemoryCapture, gain: f64) -> Excerpt {
        let mut before = before.clone();
        let mut after = before.clone();
        let mut removed = before.clone();
        let mut excerpt = Excerpt::take(
            Recordings { before: &mut before, after: &mut after, removed: &mut removed },
            1,
            &[50.0],
        )
        .unwrap();
        for sample in &mut excerpt.tracks[1] {
            *sample *= gain as f32;
        }
        excerpt
    }

    #[test]
    fn a_slow_line_is_played_faster_by_a_whole_factor() {
        let excerpt = taken(&tone(1000, 30.0, 50.0, |_| 0.1), 1.0);
        assert_eq!((excerpt.speed, excerpt.rate_hz), (8, 8000));
        assert!(excerpt.whole);
        assert_eq!(taken(&tone(100, 30.0, 3.0, |_| 0.1), 1.0).rate_hz, 8000);
        assert_eq!(taken(&tone(4410, 2.0, 50.0, |_| 0.1), 1.0).rate_hz, 8820);
    }

    #[test]
    fn a_long_recording_is_heard_where_the_hum_is_worst() {
        let excerpt =
            taken(&tone(8000, 90.0, 50.0, |t| if (40.0..60.0).contains(&t) { 0.2 } else { 0.05 }), 1.0);
        assert!(!excerpt.whole);
        assert!((excerpt.start_s - 40.0).abs() <= 1.0, "begins at {} s", excerpt.start_s);
        assert!((excerpt.length_s - 20.0).abs() < 1e-9);
    }

    #[test]
    fn a_steady_hum_is_heard_from_the_start() {
        assert!(taken(&tone(8000, 45.0, 50.0, |_| 0.1), 1.0).start_s < 1.0);
    }

    #[test]
    fn three_players_of_the_fastest_recording_stay_below_eight_megabytes() {
        for rate_hz in [44_100, 48_000, 96_000, 192_000] {
            let excerpt = taken(&tone(rate_hz, 25.0, 50.0, |_| 0.1), 1.0);
            assert!(excerpt.rate_hz <= 48_000 && excerpt.rate_hz >= 40_000);
            let bytes: usize = excerpt.tracks.iter().map(|t| t.len() * 2 * 4 / 3).sum();
            assert!(bytes < 7_600_000, "{bytes} bytes at {rate_hz} Hz");
        }
    }

    #[test]
    fn thinning_keeps_what_is_heard_and_drops_what_would_fold() {
        let at = |hz: f64, n: usize| (TAU * hz * n as f64 / 192_000.0).sin() as f32;
        let kept = thin_out((0..96_000).map(|n| at(1000.0, n)).collect(), 4);
        let gone = thin_out((0..96_000).map(|n| at(30_000.0, n)).collect(), 4);
        let inner = |track: &[f32]| rms(&track[100..track.len() - 100]);
        assert!((inner(&kept) / std::f64::consts::FRAC_1_SQRT_2 - 1.0).abs() < 1e-3);
        assert!(inner(&gone) < 1e-3, "{}", inner(&gone));
    }

    #[test]
    fn a_tide_is_seen_in_the_outline_but_leaves_the_loudness_to_the_hum() {
        let rate_hz = 1000;
        // Two whole tides, so that their mean is zero.
        let samples = (0..40_000).map(|n| f64::from(n) / f64::from(rate_hz));
        let samples = samples.map(|t| 0.5 * (TAU * 0.05 * t).sin() + 0.01 * (TAU * 50.0 * t).sin()).collect();
        let excerpt = taken(&MemoryCapture::new("tide", rate_hz, vec![samples]), 1.0);
        let heard = peak(&excerpt.tracks[0]);
        assert!((0.0099..0.012).contains(&heard), "{heard} is heard, the hum is 0.01");
        let seen = excerpt.outlines[0].iter().map(|(_, high)| *high).fold(0.0, f32::max);
        assert!(seen > 0.45);
    }

    #[test]
    fn the_mean_is_taken_out_and_the_loudest_comes_to_half_scale() {
        let excerpt = taken(&tone(8000, 5.0, 50.0, |_| 0.1), 1.0);
        assert!((peak(&excerpt.tracks[0]) * excerpt.gain - PEAK).abs() < 1e-6);
        let mean: f64 = excerpt.tracks[0].iter().map(|s| f64::from(*s)).sum::<f64>() / 40_000.0;
        assert!(mean.abs() < 1e-4, "mean {mean} of what came in with 0.3");
    }

    #[test]
    fn matched_players_are_equally_loud_and_none_too_loud() {
        let excerpt = taken(&tone(8000, 5.0, 50.0, |_| 0.1), 0.01);
        let factors = excerpt.matching();
        let loudness: Vec<f64> =
            excerpt.tracks.iter().zip(factors).map(|(track, f)| rms(track) * f * excerpt.gain).collect();
        assert!((loudness[1] / loudness[0] - 1.0).abs() < 1e-6);
        for (track, factor) in excerpt.tracks.iter().zip(factors) {
            assert!(peak(track) * factor * excerpt.gain <= PEAK * 1.000_001);
        }
    }

    #[test]
    fn silence_is_played_as_silence() {
        let excerpt = taken(&tone(8000, 2.0, 50.0, |_| 0.0), 1.0);
        assert!(excerpt.gain.is_finite());
        assert!(excerpt.matching().iter().all(|f| f.is_finite()));
    }

    #[test]
    fn a_channel_that_is_not_there_is_named() {
        let capture = tone(8000, 1.0, 50.0, |_| 0.1);
        let (mut a, mut b, mut c) = (capture.clone(), capture.clone(), capture);
        let result = Excerpt::take(Recordings { before: &mut a, after: &mut b, removed: &mut c }, 2, &[50.0]);
        assert!(matches!(result, Err(ReportError::Channel { channel: 2, channels: 1, .. })));
    }
}
