//! Finds the number of a (series, period) by the bytes of its two cells, without making a text of
//! them for every row.

use std::collections::BTreeMap;

/// Pairs of short texts lie in a table of their own, as numbers; others are rarer. Only looked up,
/// never walked.
#[derive(Debug)]
pub struct CellIndex {
    /// A power of two of slots, at most a quarter of them taken: a search nearly always ends at its first slot.
    short: Vec<Short>,
    taken: usize,
    long: BTreeMap<Vec<u8>, BTreeMap<Vec<u8>, usize>>,
}

/// A series of at most sixteen bytes, a period of at most eight, and their cell.
#[derive(Debug, Clone, Copy)]
struct Short {
    key: Key,
    cell: usize,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
struct Key {
    series: [u64; 2],
    period: u64,
    /// Of both, so that a zero byte at the end is not lost.
    lengths: usize,
}

const NO_CELL: usize = usize::MAX;
const EMPTY: Short = Short { key: Key { series: [0, 0], period: 0, lengths: 0 }, cell: NO_CELL };

impl Key {
    #[inline]
    fn of(series: &[u8], period: &[u8]) -> Option<Key> {
        let lengths = series.len() * 16 + period.len();
        let series = match series.split_at_checked(8) {
            None => [as_number(series), 0],
            Some((first, rest)) if rest.len() <= 8 => [as_number(first), as_number(rest)],
            Some(_) => return None,
        };
        (period.len() <= 8).then(|| Key { series, period: as_number(period), lengths })
    }

    /// Multiply and fold.
    #[inline]
    fn hash(&self) -> usize {
        let [first, second] = self.series;
        let left = first ^ second.rotate_left(17) ^ 0x9e37_79b9_7f4a_7c15;
        let right = self.period ^ second.rotate_left(41) ^ 0xd6e8_feb8_6659_fd93;
        let product = u128::from(left) * u128::from(right);
        (product as u64 ^ (product >> 64) as u64) as usize
    }
}

/// At most eight bytes as a number.
#[inline]
fn as_number(text: &[u8]) -> u64 {
    // Two overlapping pieces hold every byte.
    match (text.first_chunk::<4>(), text.last_chunk::<4>()) {
        (Some(first), Some(last)) => {
            let (first, last) = (u32::from_le_bytes(*first), u32::from_le_bytes(*last));
            u64::from(first) | u64::from(last) << (8 * (text.len() - 4))
        }
        _ => text.iter().rev().fold(0, |number, byte| number << 8 | u64::from(*byte)),
    }
}

impl CellIndex {
    pub fn new() -> CellIndex {
        CellIndex { short: vec![EMPTY; 64], taken: 0, long: BTreeMap::new() }
    }

    #[inline]
    pub fn find(&self, series: &[u8], period: &[u8]) -> Option<usize> {
        let Some(key) = Key::of(series, period) else {
            return self.long.get(series).and_then(|periods| periods.get(period)).copied();
        };
        let slot = &self.short[self.slot_of(&key)];
        (slot.cell != NO_CELL).then_some(slot.cell)
    }

    /// The slot that holds the key, or the empty one where it belongs.
    #[inline]
    fn slot_of(&self, key: &Key) -> usize {
        let mask = self.short.len() - 1;
        let mut slot = key.hash() & mask;
        while self.short[slot].cell != NO_CELL && self.short[slot].key != *key {
            slot = (slot + 1) & mask;
        }
        slot
    }

    /// Notes a pair that [`CellIndex::find`] did not find.
    pub fn insert(&mut self, series: &[u8], period: &[u8], cell: usize) {
        let Some(key) = Key::of(series, period) else {
            self.long.entry(series.to_vec()).or_default().insert(period.to_vec(), cell);
            return;
        };
        if (self.taken + 1) * 4 > self.short.len() {
            let wider = vec![EMPTY; self.short.len() * 4];
            for old in std::mem::replace(&mut self.short, wider) {
                if old.cell != NO_CELL {
                    let slot = self.slot_of(&old.key);
                    self.short[slot] = old;
                }
            }
        }
        self.taken += 1;
        let slot = self.slot_of(&key);
        self.short[slot] = Short { key, cell };
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn pairs_are_found_again_and_never_mixed_up() {
        let mut index = CellIndex::new();
        let mut pairs: Vec<(String, String)> =
            (0..5000).map(|i| (format!("S{}", i % 71), format!("{}", i / 71))).collect();
        pairs.extend((0..20).flat_map(|i| (0..12).map(move |j| ("x".repeat(i), "\0".repeat(j)))));
        for (cell, (series, period)) in pairs.iter().enumerate() {
            assert_eq!(index.find(series.as_bytes(), period.as_bytes()), None);
            index.insert(series.as_bytes(), period.as_bytes(), cell);
        }
        for (cell, (series, period)) in pairs.iter().enumerate() {
            assert_eq!(index.find(series.as_bytes(), period.as_bytes()), Some(cell));
        }
        // The border between the two texts counts.
        assert_eq!(index.find(b"S1", b"10"), index.find(b"S1", b"10"));
        assert_ne!(index.find(b"S1", b"10"), index.find(b"S11", b"0"));
    }
}
