//! Finds the number of a (series, period) by the bytes of its two cells, without making a text of
//! them for every row.

/// Open addressing over the bytes seen so far. Only looked up, never walked.
#[derive(Debug)]
pub struct CellIndex {
    /// Entry number + 1, or 0 for empty; a power of two of them, at most half full.
    slots: Vec<u32>,
    entries: Vec<Entry>,
    keys: Vec<u8>,
    /// The entry found last: rows of one series and period often follow each other.
    last: usize,
}

#[derive(Debug)]
struct Entry {
    hash: u64,
    start: usize,
    series_end: usize,
    end: usize,
    cell: usize,
}

impl CellIndex {
    pub fn new() -> CellIndex {
        CellIndex { slots: vec![0; 64], entries: Vec::new(), keys: Vec::new(), last: 0 }
    }

    fn holds(&self, entry: &Entry, series: &[u8], period: &[u8]) -> bool {
        &self.keys[entry.start..entry.series_end] == series
            && &self.keys[entry.series_end..entry.end] == period
    }

    #[inline]
    pub fn find(&mut self, series: &[u8], period: &[u8]) -> Option<usize> {
        if let Some(entry) = self.entries.get(self.last)
            && self.holds(entry, series, period)
        {
            return Some(entry.cell);
        }
        let hash = hash(series, period);
        let mask = self.slots.len() - 1;
        let mut slot = hash as usize & mask;
        while let Some(number) = (self.slots[slot] as usize).checked_sub(1) {
            let entry = &self.entries[number];
            if entry.hash == hash && self.holds(entry, series, period) {
                self.last = number;
                return Some(entry.cell);
            }
            slot = (slot + 1) & mask;
        }
        None
    }

    /// Notes a pair that [`CellIndex::find`] did not find.
    pub fn insert(&mut self, series: &[u8], period: &[u8], cell: usize) {
        let start = self.keys.len();
        self.keys.extend_from_slice(series);
        let series_end = self.keys.len();
        self.keys.extend_from_slice(period);
        let entry = Entry { hash: hash(series, period), start, series_end, end: self.keys.len(), cell };
        self.entries.push(entry);
        if self.entries.len() * 2 > self.slots.len() {
            self.slots = vec![0; self.slots.len() * 2];
            for number in 0..self.entries.len() {
                self.place(number);
            }
        } else {
            self.place(self.entries.len() - 1);
        }
    }

    fn place(&mut self, number: usize) {
        let mask = self.slots.len() - 1;
        let mut slot = self.entries[number].hash as usize & mask;
        while self.slots[slot] != 0 {
            slot = (slot + 1) & mask;
        }
        self.slots[slot] = number as u32 + 1;
    }
}

/// Multiply and fold, eight bytes at a time.
#[inline]
fn hash(series: &[u8], period: &[u8]) -> u64 {
    let mut hash = 0x9e37_79b9_7f4a_7c15_u64 ^ series.len() as u64;
    for part in [series, period] {
        let (words, rest) = part.as_chunks::<8>();
        for word in words {
            hash = fold(hash, u64::from_le_bytes(*word));
        }
        let tail = rest.iter().fold(0, |tail, byte| tail << 8 | u64::from(*byte));
        hash = fold(hash, tail);
    }
    hash
}

#[inline]
fn fold(hash: u64, word: u64) -> u64 {
    let product = u128::from(hash ^ word) * 0xd6e8_feb8_6659_fd93_u128;
    (product as u64) ^ (product >> 64) as u64
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn pairs_are_found_again_and_never_mixed_up() {
        let mut index = CellIndex::new();
        let pairs: Vec<(String, String)> =
            (0..5000).map(|i| (format!("S{}", i % 71), format!("{}", i / 71))).collect();
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
