//! Planes of earlier attempts on one sample, within a budget: a doubling attempt repeats the maps of
//! all earlier epochs, and need not make them again.
//!
//! What is kept is exactly what the generator gave; whatever is not kept is made anew. Epochs near
//! time 0 come first, because every attempt repeats them.

use crate::engine::leap::Leap;
use crate::engine::word::Block;
use crate::stream::Address;

/// The planes of one epoch, from its first sweep on.
#[derive(Default)]
pub struct Epoch {
    /// Sweep after sweep.
    pub planes: Vec<Block>,
    /// The generators as they are after those sweeps, one a strip; empty before the first attempt.
    pub leaps: Vec<Leap>,
}

/// The planes of one sample.
pub struct Store {
    address: Option<Address>,
    /// Blocks, at most.
    budget: u64,
    epochs: Vec<Epoch>,
}

impl Store {
    /// A store for so many bytes.
    pub fn new(bytes: u64) -> Self {
        Self {
            address: None,
            budget: bytes / size_of::<Block>() as u64,
            epochs: Vec::new(),
        }
    }

    /// Forgets what belongs to another sample; the memory stays for the next one.
    pub fn turn_to(&mut self, address: &Address) {
        if self.address.as_ref() != Some(address) {
            self.address = Some(*address);
            for epoch in &mut self.epochs {
                epoch.planes.clear();
                epoch.leaps.clear();
            }
        }
    }

    /// Forgets everything: what was being kept is not whole.
    pub fn forget(&mut self) {
        self.address = None;
    }

    /// An epoch, and how many of its sweeps may be kept if a sweep has so many blocks: all epochs nearer to
    /// time 0 have their place before.
    pub fn epoch(&mut self, epoch: usize, blocks: usize) -> (&mut Epoch, u64) {
        while self.epochs.len() <= epoch {
            self.epochs.push(Epoch::default());
        }
        let blocks = blocks as u64;
        let sweeps_before = if epoch == 0 { 0 } else { 1u64 << (epoch - 1) };
        let taken = sweeps_before.saturating_mul(blocks);
        let allowed = self.budget.saturating_sub(taken).checked_div(blocks).unwrap_or(0);
        (&mut self.epochs[epoch], allowed)
    }
}
