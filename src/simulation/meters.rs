//! What is read off the samples as they pass, before and after the network.

use super::bands::{BandMeter, BandPowers};
use crate::analysis::{OrderLevel, OrderMeter, PhaseTrack, Spectrum, SpectrumMeter};

/// All meters on one side of the network.
pub(super) struct Meters {
    orders: Option<OrderMeter>,
    spectrum: SpectrumMeter,
    bands: BandMeter,
    peak: f64,
}

/// What they read.
pub(super) struct Readings {
    pub orders: Vec<OrderLevel>,
    pub spectrum: Spectrum,
    pub bands: BandPowers,
    pub peak: f64,
}

impl Meters {
    pub fn new(rate_hz: f64, frames: u64, track: Option<&PhaseTrack>, orders: &[u32]) -> Self {
        let track = track.filter(|_| !orders.is_empty());
        Self {
            orders: track.map(|track| OrderMeter::new(rate_hz, track, orders)),
            spectrum: SpectrumMeter::new(rate_hz, frames as f64 / rate_hz),
            bands: BandMeter::new(rate_hz, frames),
            peak: 0.0,
        }
    }

    pub fn push(&mut self, samples: &[f64]) {
        let Self { orders, spectrum, bands, peak } = self;
        *peak = samples.iter().fold(*peak, |peak, sample| peak.max(sample.abs()));
        rayon::join(
            || orders.iter_mut().for_each(|meter| meter.push(samples)),
            || {
                spectrum.push(samples);
                bands.push(samples);
            },
        );
    }

    pub fn finish(self) -> Readings {
        Readings {
            orders: self.orders.map_or_else(Vec::new, OrderMeter::finish),
            spectrum: self.spectrum.finish(),
            bands: self.bands.finish(),
            peak: self.peak,
        }
    }
}
