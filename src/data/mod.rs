//! Stage 3: from sources to readings and sums per series and period. One file a format, one screen
//! for all of them: whatever cannot be read as meant is a fault with its row.

mod cell;
mod columns;
mod dates;
mod decode;
mod delimited;
pub mod evidence;
mod fault_list;
mod finish;
mod gather;
mod index;
mod linked;
mod number;
mod order;
mod overrides;
mod read;
mod record;
mod rounded;
mod rows_csv;
mod screen;
mod summaries;

pub use linked::read_linked;
pub use overrides::read_overrides;
pub use read::read;
pub use rounded::widen_rounded;
pub use rows_csv::rows_csv;

use crate::diagnostics::Caution;
use crate::quantity::Period;
use evidence::Evidence;
use jiff::civil::Date;

/// All that was read.
#[derive(Debug, Clone, PartialEq)]
pub struct Data {
    /// Every series with data, in natural order of their names.
    pub series: Vec<SeriesData>,
    /// All periods found, in their order in time.
    pub periods: Vec<Period>,
    /// Every file read, in the order of the spec.
    pub files: Vec<InputFile>,
    /// Per exclusion of the plan, the rows that it took out.
    pub excluded_rows: Vec<Vec<ReadingRow>>,
    /// False where single readings were not kept because the data outgrew the bound; then
    /// `readings` are empty and readings.csv says so.
    pub rows_kept: bool,
    pub counts: RowCounts,
    pub cautions: Vec<Caution>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct InputFile {
    /// As the spec names it.
    pub written: String,
    pub path: std::path::PathBuf,
    /// SHA-256 of the bytes that were parsed, lower-case hex.
    pub sha256: String,
    pub bytes: u64,
    /// What was taken for granted while reading: delimiter, encoding, line ends.
    pub notes: Vec<String>,
}

/// What became of the rows, over all files.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct RowCounts {
    pub read: u64,
    /// Not taken by `where`.
    pub other: u64,
    pub missing: u64,
    pub excluded: u64,
    /// After `until`.
    pub later: u64,
    pub used: u64,
}

#[derive(Debug, Clone, PartialEq)]
pub struct SeriesData {
    pub name: String,
    /// In the order of [`Data::periods`]; only periods with rows.
    pub periods: Vec<PeriodData>,
}

impl SeriesData {
    pub fn period(&self, period: &Period) -> Option<&PeriodData> {
        self.periods.iter().find(|data| data.period == *period)
    }
}

#[derive(Debug, Clone, PartialEq)]
pub struct PeriodData {
    pub period: Period,
    pub evidence: Evidence,
    /// With all exclusions restored; `None` where none was made here.
    pub restored: Option<Evidence>,
    /// Plain facts of the used readings, in the quantity's unit.
    pub facts: Facts,
    /// Single readings as read, used or not, in order of file and row; empty where not kept.
    pub readings: Vec<ReadingRow>,
}

/// Plain facts of one period's used readings, in the quantity's unit (never logarithms).
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Facts {
    /// Readings used; replicate averages count once.
    pub n: u64,
    /// Arithmetic mean and sd (n − 1) of the readings; `None` with marks or where a summary gives none.
    pub mean: Option<f64>,
    pub sd: Option<f64>,
    pub smallest: Option<f64>,
    pub largest: Option<f64>,
    pub marked_below: u64,
    pub marked_above: u64,
    pub missing: u64,
    pub excluded: u64,
    pub later: u64,
    pub first_date: Option<Date>,
    pub last_date: Option<Date>,
    /// Readings used per month of the year, January first; all 0 without dates.
    pub by_month: [u64; 12],
    /// Most decimals seen among the printed readings.
    pub decimals: usize,
    /// True where the period was given as a summary.
    pub from_summary: bool,
}

/// One row as read.
#[derive(Debug, Clone, PartialEq)]
pub struct ReadingRow {
    pub series: String,
    pub period: Period,
    /// The user's id of the row, where a column gives one.
    pub id: Option<String>,
    /// Index into [`Data::files`]; `None` for values in the spec.
    pub file: Option<usize>,
    /// Line in that file, from 1 (in the spec: position in the list).
    pub line: u64,
    /// The cell as read.
    pub text: String,
    /// In the quantity's unit; for a mark, its limit; `None` where missing.
    pub value: Option<f64>,
    pub mark: Mark,
    pub uncertainty: Option<f64>,
    pub date: Option<Date>,
    pub replicate: Option<String>,
    pub fate: Fate,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Mark {
    None,
    Below,
    Above,
}

/// Whether a row was used, and if not, why.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Fate {
    Used,
    Missing,
    /// By the exclusion of that index in the plan.
    Excluded(usize),
    /// After the interim review's last day.
    Later,
}

#[cfg(test)]
mod tests;
