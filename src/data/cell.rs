//! What one cell of a reading says: a number, a mark with its limit, nothing, or something that is
//! no reading.

use super::Mark;
use super::columns::trimmed;
use super::fault_list::FaultList;
use super::number;
use crate::diagnostics::{Fault, Place};
use crate::plan::{Marks, Source};

/// How the cell of a reading is to be understood.
pub struct Reader {
    /// Each mark and what it means, the longest first.
    marks: Vec<(Vec<u8>, Mark)>,
    /// Texts that mean that there is no reading.
    missing: Vec<Vec<u8>>,
    comma: bool,
    /// Whether a cell that starts like a number can be nothing else.
    numbers_are_plain: bool,
}

/// A cell as understood.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Understood {
    Missing,
    Number { value: f64, decimals: usize },
    Marked { mark: Mark, limit: Option<f64>, decimals: usize },
}

impl Reader {
    pub fn new(marks: &Marks, source: &Source) -> Reader {
        let bytes = |text: &String| text.trim().as_bytes().to_vec();
        let below = marks.below.iter().map(|mark| (bytes(mark), Mark::Below));
        let above = marks.above.iter().map(|mark| (bytes(mark), Mark::Above));
        let mut marks: Vec<(Vec<u8>, Mark)> = below.chain(above).collect();
        marks.sort_by_key(|(mark, _)| std::cmp::Reverse(mark.len()));
        let missing: Vec<Vec<u8>> = source.missing.iter().map(bytes).collect();
        let like_a_number = |text: &Vec<u8>| text.first().is_some_and(starts_a_number);
        let numbers_are_plain =
            !missing.iter().any(like_a_number) && !marks.iter().any(|(mark, _)| like_a_number(mark));
        Reader { marks, missing, comma: source.decimal_comma, numbers_are_plain }
    }

    fn is_missing(&self, cell: &[u8]) -> bool {
        cell.is_empty() || self.missing.iter().any(|text| text == cell)
    }

    /// Splits a mark off and reads the number; `mark_cell` is the trimmed cell of the marks' column.
    #[inline]
    pub fn understand(&self, cell: &[u8], mark_cell: Option<&[u8]>) -> Result<Understood, Refused> {
        if self.numbers_are_plain
            && mark_cell.is_none()
            && cell.first().is_some_and(starts_a_number)
            && let Some(number) = number::parse(cell, self.comma)
        {
            return Ok(Understood::Number { value: number.value, decimals: number.decimals });
        }
        self.understand_slowly(cell, mark_cell)
    }

    fn understand_slowly(&self, cell: &[u8], mark_cell: Option<&[u8]>) -> Result<Understood, Refused> {
        let (mark, rest) = match mark_cell {
            Some(apart) if !apart.is_empty() => match self.mark_named(apart) {
                Some(mark) => (mark, cell),
                None => return Err(Refused::UnknownMark),
            },
            Some(_) => (Mark::None, cell),
            None if self.is_missing(cell) => (Mark::None, cell),
            None => self.split_mark(cell),
        };
        if mark == Mark::None {
            if self.is_missing(cell) {
                return Ok(Understood::Missing);
            }
            let number = number::parse(cell, self.comma).ok_or(Refused::NotANumber)?;
            return Ok(Understood::Number { value: number.value, decimals: number.decimals });
        }
        let rest = trimmed(rest);
        if rest.is_empty() || (mark_cell.is_some() && self.is_missing(rest)) {
            return Ok(Understood::Marked { mark, limit: None, decimals: 0 });
        }
        let number = number::parse(rest, self.comma).ok_or(Refused::NotANumber)?;
        Ok(Understood::Marked { mark, limit: Some(number.value), decimals: number.decimals })
    }

    fn mark_named(&self, text: &[u8]) -> Option<Mark> {
        self.marks.iter().find(|(mark, _)| mark == text).map(|(_, kind)| *kind)
    }

    /// The longest mark that the cell starts with, and what follows.
    fn split_mark<'c>(&self, cell: &'c [u8]) -> (Mark, &'c [u8]) {
        let found =
            self.marks.iter().find_map(|(mark, kind)| Some((*kind, cell.strip_prefix(mark.as_slice())?)));
        found.unwrap_or((Mark::None, cell))
    }
}

#[inline]
fn starts_a_number(byte: &u8) -> bool {
    byte.is_ascii_digit() || matches!(byte, b'-' | b'+' | b'.' | b',')
}

/// Why a cell was not understood.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Refused {
    NotANumber,
    UnknownMark,
}

/// Numbers that look like codes for "no reading", and the range of the others: such a number is
/// refused unless it lies where readings lie.
#[derive(Debug)]
pub struct Codes {
    found: Vec<(f64, Place)>,
    /// Of the other readings; +∞ and −∞ before the first.
    smallest: f64,
    largest: f64,
}

impl Default for Codes {
    fn default() -> Codes {
        Codes { found: Vec::new(), smallest: f64::INFINITY, largest: f64::NEG_INFINITY }
    }
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
        self.smallest = self.smallest.min(value);
        self.largest = self.largest.max(value);
    }

    /// Refuses numbers that look like codes and lie far from all other readings.
    pub fn judge(self, faults: &mut FaultList) {
        let Codes { smallest, largest, .. } = self;
        if smallest > largest {
            return;
        }
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
