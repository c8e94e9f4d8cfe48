//! All faults of the data in one pass, without a page per row: the first of each kind are shown, the
//! others counted.

use crate::diagnostics::{Fault, Faults};

/// Faults of one kind that are shown; the others are counted.
const SHOWN_PER_CODE: u64 = 20;

#[derive(Debug, Default)]
pub struct FaultList {
    shown: Faults,
    /// In order of first appearance: code, how many in all.
    kinds: Vec<(&'static str, u64)>,
}

impl FaultList {
    /// Notes a fault of that code; it is only put together where it will be shown.
    pub fn note(&mut self, code: &'static str, fault: impl FnOnce() -> Fault) {
        let count = match self.kinds.iter_mut().find(|(known, _)| *known == code) {
            Some((_, count)) => count,
            None => {
                self.kinds.push((code, 0));
                match self.kinds.last_mut() {
                    Some((_, count)) => count,
                    None => return,
                }
            }
        };
        *count += 1;
        if *count <= SHOWN_PER_CODE {
            self.shown.push(fault());
        }
    }

    pub fn push(&mut self, fault: Fault) {
        self.note(fault.code, || fault);
    }

    pub fn is_empty(&self) -> bool {
        self.shown.is_empty()
    }

    /// How many were noted, shown or not.
    pub fn count(&self) -> u64 {
        self.kinds.iter().map(|(_, count)| count).sum()
    }

    /// What is shown, and one fault for each kind that was cut short.
    pub fn into_faults(self) -> Faults {
        let mut faults = self.shown;
        for (code, count) in self.kinds {
            if count > SHOWN_PER_CODE {
                faults.push(Fault::wrong(code, format!("and {} more like these", count - SHOWN_PER_CODE)));
            }
        }
        faults
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_kind_is_cut_short_and_the_rest_counted() {
        let mut list = FaultList::default();
        for i in 0..25 {
            list.note("not-a-number", || Fault::wrong("not-a-number", format!("row {i}")));
        }
        list.push(Fault::wrong("missing-date", "one"));
        let faults = list.into_faults().0;
        assert_eq!(faults.len(), 22);
        assert_eq!(faults[21].message, "and 5 more like these");
    }
}
