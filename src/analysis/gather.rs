//! One reading of a comb: phasors of its orders and the noise beside them, in cells.

use super::PhaseTrack;
use super::orders::{NoiseBeside, block_hop_s};
use super::phasors::{BlockPhasors, PhasorBank};
use super::tracker::Cells;

/// Orders up to this one are looked at in short cells also.
const FINE_ORDERS: u32 = 12;
/// Length of a short cell in seconds: sidebands 6 Hz away are then still seen.
const FINE_S: f64 = 0.08;
/// Longest stretch of which short cells are kept, in seconds from the start: minutes show
/// the rhythm of notes as well as hours do.
const LONGEST_FINE_S: f64 = 900.0;
/// Most phasors kept in long cells: 16 MB, whatever the length of the capture.
const MOST_PHASORS: usize = 1 << 20;
/// Orders kept where all of them are too many: the clearest tell the phase.
const CLEAREST: usize = 16;
/// Blocks in a cell, where there are enough.
const TOGETHER: usize = 6;

/// Phasors and the noise beside them, gathered into cells.
pub(super) struct Gather {
    bank: PhasorBank,
    noise: NoiseBeside,
    cells: Cells,
    fine: Cells,
    most_fine: usize,
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
        // needs some twenty cells the more, a very long one longer cells.
        let most = (MOST_PHASORS / orders.len().max(1)).max(1);
        let together = (blocks / 20).clamp(1, TOGETHER).max(blocks.div_ceil(most));
        let noise = NoiseBeside::new(blocks, bank.hop_s(), orders.len());
        let cells = Cells::new(orders, bank.hop_s(), together);
        let low: Vec<u32> = orders.iter().copied().filter(|&k| k <= FINE_ORDERS).collect();
        // Blocks of 400 Hz are so short that notes tens of hertz away would fold onto a cell's
        // middle, as steady as a line: there each block is looked at.
        let fine_s = if reference.mean_frequency_hz() > 100.0 { 0.0 } else { FINE_S };
        let fine_blocks = ((fine_s / bank.hop_s()).round() as usize).clamp(1, together);
        let fine = Cells::new(&low, bank.hop_s(), fine_blocks);
        let most_fine = (LONGEST_FINE_S / fine.length_s) as usize;
        Self { bank, noise, cells, fine, most_fine }
    }

    pub fn push(&mut self, samples: &[f64]) {
        let blocks = self.bank.push(samples);
        self.take(&blocks);
    }

    fn take(&mut self, blocks: &[BlockPhasors]) {
        for block in blocks {
            self.noise.take(&block.values);
            self.cells.take(block);
            if self.fine.count() < self.most_fine {
                self.fine.take(block);
            }
        }
    }

    pub fn finish(mut self) -> Gathered {
        let blocks = self.bank.finish();
        self.take(&blocks);
        self.cells.finish();
        self.cells.density = self.noise.densities();
        let low = self.cells.orders.iter().zip(&self.cells.density).filter(|(k, _)| **k <= FINE_ORDERS);
        self.fine.density = low.map(|(_, density)| *density).collect();
        Gathered { cells: self.cells, fine: self.fine }
    }
}

/// Of the orders of a comb those whose phasors are kept: all, or the clearest where the
/// capture is so long that all would take too much memory.
pub(super) fn kept_orders(all: Vec<u32>, clearest: &[u32], fundamental_hz: f64, duration_s: f64) -> Vec<u32> {
    let cells = duration_s / (TOGETHER as f64 * block_hop_s(fundamental_hz, duration_s));
    if cells * all.len() as f64 <= MOST_PHASORS as f64 {
        return all;
    }
    let clearest = &clearest[..clearest.len().min(CLEAREST)];
    all.into_iter().filter(|order| *order <= 3 || clearest.contains(order)).collect()
}
