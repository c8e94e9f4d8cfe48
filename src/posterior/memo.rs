//! What a sweep over a grid asks for again and again: a spread and its density at a coordinate, and what the
//! history says at one (σ, τ). Kept by the bits of the coordinate, so no figure depends on it.

use super::about_mean::LongRun;
use super::lattice::Lattices;
use std::cell::Cell;

const SLOTS: usize = 512;

#[derive(Clone, Copy)]
struct Slot {
    key: u64,
    spread: f64,
    ln_density: f64,
}

pub(super) struct Memo {
    /// A table for each coordinate that can be a spread.
    spreads: [Box<[Cell<Option<Slot>>]>; 3],
    long_run: Cell<Option<((u64, u64), LongRun)>>,
    pub lattices: Lattices,
}

impl Memo {
    pub fn new() -> Memo {
        let table = || vec![Cell::new(None); SLOTS].into_boxed_slice();
        Memo {
            spreads: [table(), table(), table()],
            long_run: Cell::new(None),
            lattices: Lattices::default(),
        }
    }

    /// The spread at coordinate `u` of dimension `dim`, and ln of its density.
    pub fn spread(&self, dim: usize, u: f64, make: impl FnOnce(f64) -> (f64, f64)) -> (f64, f64) {
        let key = u.to_bits();
        // Fibonacci hashing: the upper bits of the product are well mixed.
        let slot = (key.wrapping_mul(0x9E37_79B9_7F4A_7C15) >> 55) as usize % SLOTS;
        let Some(cell) = self.spreads.get(dim).and_then(|table| table.get(slot)) else { return make(u) };
        if let Some(kept) = cell.get()
            && kept.key == key
        {
            return (kept.spread, kept.ln_density);
        }
        let (spread, ln_density) = make(u);
        cell.set(Some(Slot { key, spread, ln_density }));
        (spread, ln_density)
    }

    /// What the history says of the long-run mean at (σ, τ), the last one asked for being kept.
    pub fn long_run(&self, sigma2: f64, tau2: f64, make: impl FnOnce() -> LongRun) -> LongRun {
        let key = (sigma2.to_bits(), tau2.to_bits());
        if let Some((kept, long_run)) = self.long_run.get()
            && kept == key
        {
            return long_run;
        }
        let long_run = make();
        self.long_run.set(Some((key, long_run)));
        long_run
    }
}
