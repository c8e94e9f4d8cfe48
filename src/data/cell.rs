//! What one cell of a reading says: a number, a mark with its limit, nothing, or something that is
//! no reading.

use super::Mark;
use super::columns::trimmed;
use super::fault_list::FaultList;
use super::number;
use crate::diagnostics::{Fault, Place};
use crate::plan::Marks;
use crate::quantity::Scale;

/// How the cell of a reading is to be understood.
pub struct Reader<'p> {
    pub marks: &'p Marks,
    pub comma: bool,
    pub scale: Scale,
    pub coverage: f64,
}

/// A cell as understood.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Understood {
    Missing,
    Number { value: f64, decimals: usize },
    Marked { mark: Mark, limit: Option<f64>, decimals: usize },
}

impl Reader<'_> {
    /// Splits a mark off and reads the number; `mark_cell` is the trimmed cell of the marks' column.
    pub fn understand(
        &self,
        cell: &[u8],
        mark_cell: Option<&[u8]>,
        columns_missing: impl Fn(&[u8]) -> bool,
    ) -> Result<Understood, Refused> {
        let (mark, rest) = match mark_cell {
            Some(apart) if !apart.is_empty() => match self.mark_named(apart) {
                Some(mark) => (mark, cell),
                None => return Err(Refused::UnknownMark),
            },
            Some(_) => (Mark::None, cell),
            None => self.split_mark(cell),
        };
        if mark == Mark::None {
            if columns_missing(cell) {
                return Ok(Understood::Missing);
            }
            let number = number::parse(cell, self.comma).ok_or(Refused::NotANumber)?;
            return Ok(Understood::Number { value: number.value, decimals: number.decimals });
        }
        let rest = trimmed(rest);
        if rest.is_empty() || (mark_cell.is_some() && columns_missing(rest)) {
            return Ok(Understood::Marked { mark, limit: None, decimals: 0 });
        }
        let number = number::parse(rest, self.comma).ok_or(Refused::NotANumber)?;
        Ok(Understood::Marked { mark, limit: Some(number.value), decimals: number.decimals })
    }

    fn mark_named(&self, text: &[u8]) -> Option<Mark> {
        let is = |marks: &[String]| marks.iter().any(|mark| mark.trim().as_bytes() == text);
        match (is(&self.marks.below), is(&self.marks.above)) {
            (true, _) => Some(Mark::Below),
            (_, true) => Some(Mark::Above),
            _ => None,
        }
    }

    /// The longest mark that the cell starts with, and what follows.
    #[inline]
    fn split_mark<'c>(&self, cell: &'c [u8]) -> (Mark, &'c [u8]) {
        let mut found = (Mark::None, cell);
        let mut length = 0;
        for (marks, kind) in [(&self.marks.below, Mark::Below), (&self.marks.above, Mark::Above)] {
            for mark in marks {
                let mark = mark.trim().as_bytes();
                if mark.len() > length
                    && let Some(rest) = cell.strip_prefix(mark)
                {
                    length = mark.len();
                    found = (kind, rest);
                }
            }
        }
        found
    }
}

/// Why a cell was not understood.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Refused {
    NotANumber,
    UnknownMark,
}

/// Numbers that look like codes for "no reading", and the range of the others: such a number is
/// refused unless it lies where readings lie.
#[derive(Debug, Default)]
pub struct Codes {
    found: Vec<(f64, Place)>,
    smallest: Option<f64>,
    largest: Option<f64>,
}

impl Codes {
    #[inline]
    pub fn look_at(&mut self, value: f64, place: impl FnOnce() -> Place) {
        if number::looks_like_a_code(value) {
            if self.found.len() < 100 {
                self.found.push((value, place()));
            }
            return;
        }
        self.smallest = Some(self.smallest.map_or(value, |smallest| smallest.min(value)));
        self.largest = Some(self.largest.map_or(value, |largest| largest.max(value)));
    }

    /// Refuses numbers that look like codes and lie far from all other readings.
    pub fn judge(self, faults: &mut FaultList) {
        let (Some(smallest), Some(largest)) = (self.smallest, self.largest) else {
            return;
        };
        let reach = (largest - smallest).max(smallest.abs().max(largest.abs()) / 2.0);
        for (value, place) in self.found {
            if value > largest + reach || value < smallest - reach {
                faults.note("missing-code", || {
                    let message = format!(
                        "{value} looks like a code for \"no reading\": all others lie between {smallest} and {largest}"
                    );
                    Fault::wrong("missing-code", message)
                        .at(place)
                        .expected("a reading")
                        .repair("list it under `missing` if it means that there is none")
                });
            }
        }
    }
}
