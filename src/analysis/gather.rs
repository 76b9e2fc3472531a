//! One reading of a comb: phasors of its orders and the noise beside them, in cells.

use super::PhaseTrack;
use super::orders::{NoiseBeside, block_hop_s};
use super::phasors::PhasorBank;
use super::tracker::Cells;

/// Orders up to this one are looked at in short cells also.
const FINE_ORDERS: u32 = 12;
/// Length of a short cell in seconds: sidebands 6 Hz away are then still seen.
const FINE_S: f64 = 0.08;

/// Phasors and the noise beside them, gathered into cells.
pub(super) struct Gather {
    bank: PhasorBank,
    noise: NoiseBeside,
    cells: Cells,
    fine: Cells,
}

/// What was gathered: cells nearly independent of each other, and short ones of
/// the low orders, which show the rhythm of notes.
pub(super) struct Gathered {
    pub cells: Cells,
    pub fine: Cells,
}

impl Gather {
    pub fn new(rate_hz: f64, reference: &PhaseTrack, orders: &[u32], frames: u64) -> Self {
        let duration_s = frames as f64 / rate_hz;
        let hop_s = block_hop_s(reference.mean_frequency_hz(), duration_s);
        Self::in_blocks(hop_s, rate_hz, reference, orders, frames)
    }

    /// As [`Gather::new`], with so many seconds from block to block.
    pub fn in_blocks(hop_s: f64, rate_hz: f64, reference: &PhaseTrack, orders: &[u32], frames: u64) -> Self {
        let bank = PhasorBank::new(rate_hz, reference, orders, hop_s);
        let blocks = bank.blocks_in(frames);
        // Six blocks are nearly independent of the next six; a short capture
        // needs some twenty cells the more.
        let together = (blocks / 20).clamp(1, 6);
        let noise = NoiseBeside::new(blocks, bank.hop_s(), orders.len());
        let cells = Cells::new(orders, bank.hop_s(), together);
        let low: Vec<u32> = orders.iter().copied().filter(|&k| k <= FINE_ORDERS).collect();
        // Blocks of 400 Hz are so short that notes tens of hertz away would fold onto a cell's
        // middle, as steady as a line: there each block is looked at.
        let fine_s = if reference.mean_frequency_hz() > 100.0 { 0.0 } else { FINE_S };
        let fine_blocks = ((fine_s / bank.hop_s()).round() as usize).clamp(1, together);
        let fine = Cells::new(&low, bank.hop_s(), fine_blocks);
        Self { bank, noise, cells, fine }
    }

    pub fn push(&mut self, samples: &[f64]) {
        for block in self.bank.push(samples) {
            self.noise.take(&block.values);
            self.cells.take(&block);
            self.fine.take(&block);
        }
    }

    pub fn finish(mut self) -> Gathered {
        for block in self.bank.finish() {
            self.noise.take(&block.values);
            self.cells.take(&block);
            self.fine.take(&block);
        }
        self.cells.finish();
        self.cells.density = self.noise.densities();
        let low = self.cells.orders.iter().zip(&self.cells.density).filter(|(k, _)| **k <= FINE_ORDERS);
        self.fine.density = low.map(|(_, density)| *density).collect();
        Gathered { cells: self.cells, fine: self.fine }
    }
}
