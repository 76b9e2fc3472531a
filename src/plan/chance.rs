//! Seeded draws: the same for a seed, however many threads share the work.

use rand::{Rng, SeedableRng};
use rand_xoshiro::Xoshiro256PlusPlus;

use super::assembly::Assembly;
use super::optimise::Variation;
use super::shelf::{Shelf, slot_kind};
use crate::network::kinds::Slot;
use crate::parts::REFERENCE_TEMPERATURE_C;

/// A stream of uniform numbers of its own for each (seed, index).
pub struct Chance(Xoshiro256PlusPlus);

impl Chance {
    /// The stream `index` of `seed`.
    pub fn new(seed: u64, index: u64) -> Self {
        // Odd multiplier of Weyl sequences (2⁶⁴ over the golden ratio) keeps
        // neighbouring streams apart before the generator mixes its seed.
        Self(Xoshiro256PlusPlus::seed_from_u64(seed ^ index.wrapping_mul(0x9E37_79B9_7F4A_7C15)))
    }

    /// Uniform in [0, 1).
    pub fn unit(&mut self) -> f64 {
        (self.0.next_u64() >> 11) as f64 / (1u64 << 53) as f64
    }

    /// Uniform in (−half, half).
    pub fn within(&mut self, half: f64) -> f64 {
        half * (2.0 * self.unit() - 1.0)
    }
}

/// Residue that a trim by reading leaves, as a fraction of the adjusted value,
/// while values are still free.
const FREE_RESIDUE: f64 = 0.004;

/// Builds for the search: the nominal one first, then `count` drawn ones over
/// tolerance and temperature. Trimmed slots move with what they make up for.
pub fn variations(
    assembly: &Assembly,
    shelf: &Shelf,
    (from_c, to_c): (f64, f64),
    trimmed: bool,
    count: usize,
    seed: u64,
) -> Vec<Variation> {
    let slots = assembly.slots.len();
    let start: Vec<f64> = assembly.start();
    let made = vec![None; slots];
    let traits: Vec<(f64, f64, f64)> = (0..slots)
        .map(|slot| match assembly.slots[slot] {
            Slot::Coil(index) => {
                let coil = &shelf.stock().coils[index];
                (coil.tolerance, coil.drift_per_k, coil.resistance_drift_per_k)
            }
            _ => {
                let kind = slot_kind(&assembly.slots[slot]);
                let value = assembly.slot_value(slot, &start, &made, shelf);
                let (tolerance, drift) = shelf.tolerance_near(kind, value);
                (tolerance, drift, 0.0)
            }
        })
        .collect();
    let nominal = Variation { value: vec![1.0; slots], series_resistance: vec![1.0; slots] };
    let mut all = vec![nominal];
    for index in 0..count {
        let mut chance = Chance::new(seed, index as u64);
        let kelvin = from_c + (to_c - from_c) * chance.unit() - REFERENCE_TEMPERATURE_C;
        let mut value: Vec<f64> = traits.iter().map(|t| 1.0 + chance.within(t.0)).collect();
        if trimmed {
            for trim in &assembly.trims {
                let made_up: f64 =
                    trim.makes_up_for.iter().map(|&(slot, exponent)| value[slot].powf(-exponent)).product();
                value[trim.slot] = made_up * (1.0 + chance.within(FREE_RESIDUE));
            }
        }
        for (factor, t) in value.iter_mut().zip(&traits) {
            *factor *= 1.0 + t.1 * kelvin;
        }
        let series_resistance = traits.iter().map(|t| 1.0 + t.2 * kelvin).collect();
        all.push(Variation { value, series_resistance });
    }
    all
}
