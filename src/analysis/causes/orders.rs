//! The levels by order, as the patterns ask for them.

use super::Harmonic;

/// What stands for a level under the noise, well below all that is found.
const NOTHING: f64 = -400.0;

pub(super) struct Orders {
    /// Order, level in dBFS, decibels over the noise in 1/T.
    found: Vec<(u32, f64, f64)>,
}

impl Orders {
    pub fn new(harmonics: &[Harmonic]) -> Self {
        Self { found: harmonics.iter().map(|h| (h.order, h.level_dbfs, h.over_floor_db)).collect() }
    }

    pub fn count(&self) -> usize {
        self.found.len()
    }

    pub fn each(&self) -> impl Iterator<Item = u32> + '_ {
        self.found.iter().map(|&(order, ..)| order)
    }

    pub fn at(&self, order: u32) -> Option<f64> {
        self.found.iter().find(|(k, ..)| *k == order).map(|&(_, level, _)| level)
    }

    /// The level, or one that is well below all that was found.
    pub fn at_or_low(&self, order: u32) -> f64 {
        self.at(order).unwrap_or(NOTHING)
    }

    /// The highest of several, likewise.
    pub fn highest(&self, orders: &[u32]) -> f64 {
        orders.iter().map(|&k| self.at_or_low(k)).fold(NOTHING, f64::max)
    }

    pub fn power(&self, which: fn(u32) -> bool) -> f64 {
        self.found.iter().filter(|(k, ..)| which(*k)).map(|(_, level, _)| 10f64.powf(level / 10.0)).sum()
    }

    pub fn strongest(&self) -> (u32, f64) {
        let best = self.found.iter().max_by(|a, b| a.1.total_cmp(&b.1));
        best.map_or((1, NOTHING), |&(order, level, _)| (order, level))
    }

    /// How far an order stands over the noise.
    pub fn over_floor(&self, order: u32) -> f64 {
        self.found.iter().find(|(k, ..)| *k == order).map_or(0.0, |&(.., over)| over)
    }
}

pub(super) fn db(power: f64) -> f64 {
    10.0 * power.max(1e-40).log10()
}

/// `-30.0 dBFS`, or that it is under the noise.
pub(super) fn shown(level: f64) -> String {
    if level <= NOTHING { "under the noise".to_owned() } else { format!("{level:.1} dBFS") }
}

/// From `low` at `from` to `high` at `to`, level outside.
pub(super) fn ramp(x: f64, (from, low): (f64, f64), (to, high): (f64, f64)) -> f64 {
    low + (high - low) * ((x - from) / (to - from)).clamp(0.0, 1.0)
}
