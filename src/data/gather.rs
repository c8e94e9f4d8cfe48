//! What is kept of the rows: exact sums per series and period, and single readings only where
//! something needs them. Nothing here depends on the order of the rows or on how they came in blocks.

use super::dates::Day;
use super::evidence::Evidence;
use super::fault_list::FaultList;
use super::{Fate, InputFile, Mark, ReadingRow, RowCounts};
use crate::diagnostics::{Caution, Fault, Place};
use crate::math::fm;
use crate::math::sums::Moments;
use crate::plan::{Detail, Plan};
use crate::quantity::{Period, Scale};
use std::collections::{BTreeMap, HashMap};

/// Single rows kept in all where the report shows no single series and inputs stay where they are;
/// beyond, only sums are kept, so that memory does not grow with the rows.
pub const ROWS_KEPT_AT_MOST: usize = 100_000;
/// Plain readings whose single values are kept in all, for the periods in which marks or uncertainties
/// of single readings turn up; beyond, they go into sums. Also the most of these special readings.
pub const SINGLES_AT_MOST: usize = 1_000_000;
/// Rows of replicates kept until their averages are formed.
pub const REPLICATES_AT_MOST: usize = 2_000_000;
/// Row ids compared with each other.
pub const IDS_COMPARED_AT_MOST: usize = 500_000;

/// One reading, in the quantity's unit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Observed {
    /// The value; for a mark, its limit.
    pub value: f64,
    pub mark: Mark,
    /// Standard uncertainty; 0 where none was given.
    pub uncertainty: f64,
}

/// File, where the row stands in one, and line.
type Whereabouts = (Option<usize>, u64);

/// One row on its way in.
pub struct Row<'a> {
    pub file: Option<usize>,
    pub line: u64,
    pub text: &'a [u8],
    pub id: Option<&'a [u8]>,
    pub replicate: Option<&'a [u8]>,
    /// `None` where the cell means that there is no reading.
    pub observed: Option<Observed>,
    pub day: Option<Day>,
    pub decimals: usize,
    pub fate: Fate,
}

/// Plain readings: their values as long as memory allows, then exact sums. Some values always wait,
/// because adding them in one go is faster.
#[derive(Debug, Clone, Default)]
pub struct Tally {
    waiting: Vec<f64>,
    sums: Option<Box<Sums>>,
}

/// Moments in the quantity's unit, and of the natural logarithms on the log scale.
#[derive(Debug, Clone, Default)]
pub struct Sums {
    pub unit: Moments,
    pub logs: Option<Moments>,
}

const READINGS_WAITING: usize = 64;

impl Tally {
    #[inline]
    fn add(&mut self, value: f64, scale: Scale, keep: bool) {
        self.waiting.push(value);
        if !keep && self.waiting.len() >= READINGS_WAITING {
            self.settle(scale);
        }
    }

    /// All values, unless some went into sums.
    pub fn values(&self) -> Option<&[f64]> {
        self.sums.is_none().then_some(self.waiting.as_slice())
    }

    fn settle(&mut self, scale: Scale) {
        let sums = self.sums.get_or_insert_default();
        for value in &self.waiting {
            sums.unit.add(*value);
        }
        if scale == Scale::Log {
            let logs = sums.logs.get_or_insert_default();
            for value in &self.waiting {
                logs.add(fm::ln(*value));
            }
        }
        self.waiting.clear();
    }

    /// The sums of everything added so far.
    pub fn total(&self, scale: Scale) -> Sums {
        let mut copy = self.clone();
        copy.settle(scale);
        copy.sums.map(|sums| *sums).unwrap_or_default()
    }
}

/// Rows of one replicate id.
#[derive(Debug, Clone, Default)]
pub struct Group {
    pub members: Vec<Member>,
    /// One of them has a mark.
    pub marked: bool,
}

#[derive(Debug, Clone, Copy)]
pub struct Member {
    pub observed: Observed,
    pub excluded: bool,
    pub day: Option<Day>,
}

/// Everything known of one series and period.
#[derive(Debug)]
pub struct Cell {
    pub series: String,
    pub period: Period,
    /// The calendar year that the period's name is, if it is one.
    pub year: Option<i32>,
    pub plain: Tally,
    /// Marked readings and those with an uncertainty of their own.
    pub special: Vec<Observed>,
    pub groups: BTreeMap<Box<[u8]>, Group>,
    pub excluded: Vec<Observed>,
    pub smallest: f64,
    pub largest: f64,
    pub first_day: Option<Day>,
    pub last_day: Option<Day>,
    pub by_month: [u64; 12],
    pub decimals: usize,
    pub missing_rows: u64,
    pub excluded_rows: u64,
    pub later_rows: u64,
    /// Whether any row of readings belongs here.
    pub has_readings: bool,
    pub summary: Option<Summary>,
    pub rows: Vec<ReadingRow>,
}

/// A period given as a summary.
#[derive(Debug, Clone, PartialEq)]
pub struct Summary {
    pub evidence: Evidence,
    /// In the quantity's unit, where the summary says so.
    pub mean: Option<f64>,
    pub sd: Option<f64>,
    pub n: Option<u64>,
    pub place: Place,
}

/// What an exclusion found.
#[derive(Debug, Clone, Default)]
pub struct Found {
    pub count: u64,
    /// The first few: file and line.
    pub lines: Vec<(Option<usize>, u64)>,
    pub rows: Vec<ReadingRow>,
    /// Whether its columns exist in any file.
    pub applies: bool,
}

#[derive(Debug)]
pub struct Gather {
    pub scale: Scale,
    pub cells: Vec<Cell>,
    by_name: BTreeMap<(String, Period), usize>,
    pub files: Vec<InputFile>,
    pub counts: RowCounts,
    pub cautions: Vec<Caution>,
    /// One for each exclusion of the plan.
    pub found: Vec<Found>,
    pub rows_kept: bool,
    rows_at_most: usize,
    rows: usize,
    keep_values: bool,
    values: usize,
    special: usize,
    group_rows: usize,
    /// Per cell and id, where it was read. Only looked up.
    ids: HashMap<(usize, Box<[u8]>), Whereabouts>,
    pub ids_beyond: bool,
}

impl Gather {
    pub fn new(plan: &Plan) -> Gather {
        let bounded = plan.report.detail == Detail::None && !plan.report.inputs_copied;
        Gather {
            scale: plan.quantity.scale,
            cells: Vec::new(),
            by_name: BTreeMap::new(),
            files: Vec::new(),
            counts: RowCounts::default(),
            cautions: Vec::new(),
            found: vec![Found::default(); plan.excludes.len()],
            rows_kept: true,
            rows_at_most: if bounded { ROWS_KEPT_AT_MOST } else { usize::MAX },
            rows: 0,
            keep_values: true,
            values: 0,
            special: 0,
            group_rows: 0,
            ids: HashMap::new(),
            ids_beyond: false,
        }
    }

    /// The number of a series and period, made where it is new.
    pub fn cell(&mut self, series: &str, period: &Period) -> usize {
        let key = (series.to_string(), period.clone());
        if let Some(known) = self.by_name.get(&key) {
            return *known;
        }
        self.cells.push(Cell {
            series: key.0.clone(),
            period: key.1.clone(),
            year: period.number().filter(|year| (1900..2200).contains(year)).map(|year| year as i32),
            plain: Tally::default(),
            special: Vec::new(),
            groups: BTreeMap::new(),
            excluded: Vec::new(),
            smallest: f64::INFINITY,
            largest: f64::NEG_INFINITY,
            first_day: None,
            last_day: None,
            by_month: [0; 12],
            decimals: 0,
            missing_rows: 0,
            excluded_rows: 0,
            later_rows: 0,
            has_readings: false,
            summary: None,
            rows: Vec::new(),
        });
        self.by_name.insert(key, self.cells.len() - 1);
        self.cells.len() - 1
    }

    /// How messages name a row.
    pub fn name_of_row(&self, file: Option<usize>, line: u64) -> String {
        match file.and_then(|file| self.files.get(file)) {
            Some(file) => format!("{}:{line}", file.written),
            None => format!("value {line} in the spec"),
        }
    }

    /// Takes one row in. `place` is asked only where something is wrong with it.
    #[inline]
    pub fn take(
        &mut self,
        number: usize,
        row: &Row<'_>,
        compare_ids: bool,
        faults: &mut FaultList,
        place: impl Fn() -> Place,
    ) {
        let cell = &mut self.cells[number];
        cell.has_readings = true;
        match (row.fate, row.observed) {
            (Fate::Used, Some(observed)) => {
                self.counts.used += 1;
                cell.decimals = cell.decimals.max(row.decimals);
                if let Some(day) = row.day {
                    cell.first_day = Some(cell.first_day.map_or(day, |first| first.min(day)));
                    cell.last_day = cell.last_day.max(Some(day));
                }
                if let Some(replicate) = row.replicate {
                    self.take_replicate(number, replicate, observed, row, faults, &place);
                } else {
                    if let Some(day) = row.day {
                        cell.by_month[day.month() as usize - 1] += 1;
                    }
                    if observed.mark == Mark::None {
                        cell.smallest = cell.smallest.min(observed.value);
                        cell.largest = cell.largest.max(observed.value);
                    }
                    if observed.mark != Mark::None || observed.uncertainty > 0.0 {
                        cell.special.push(observed);
                        self.special += 1;
                        if self.special > SINGLES_AT_MOST {
                            faults.note("too-many-singles", || too_many_singles().at(place()));
                        }
                    } else {
                        cell.plain.add(observed.value, self.scale, self.keep_values);
                        if self.keep_values {
                            self.values += 1;
                            if self.values > SINGLES_AT_MOST {
                                self.settle();
                            }
                        }
                    }
                }
                if compare_ids && let Some(id) = row.id {
                    self.compare_id(number, id, row, faults, &place);
                }
            }
            (Fate::Excluded(_), observed) => {
                self.counts.excluded += 1;
                cell.excluded_rows += 1;
                if let Some(observed) = observed {
                    match row.replicate {
                        Some(replicate) => {
                            self.take_replicate(number, replicate, observed, row, faults, &place);
                        }
                        None => cell.excluded.push(observed),
                    }
                }
            }
            (Fate::Later, _) => {
                self.counts.later += 1;
                cell.later_rows += 1;
            }
            (Fate::Missing, _) | (Fate::Used, None) => {
                self.counts.missing += 1;
                cell.missing_rows += 1;
            }
        }
        if self.rows_kept {
            self.keep(number, row);
        }
    }

    /// There are too many single values: from now on only sums are kept.
    #[cold]
    fn settle(&mut self) {
        self.keep_values = false;
        for cell in &mut self.cells {
            cell.plain.settle(self.scale);
            cell.plain.waiting = Vec::with_capacity(READINGS_WAITING);
        }
    }

    fn take_replicate(
        &mut self,
        number: usize,
        replicate: &[u8],
        observed: Observed,
        row: &Row<'_>,
        faults: &mut FaultList,
        place: &impl Fn() -> Place,
    ) {
        self.group_rows += 1;
        if self.group_rows > REPLICATES_AT_MOST {
            faults.note("too-many-replicates", || {
                Fault::wrong(
                    "too-many-replicates",
                    format!("more than {REPLICATES_AT_MOST} rows of replicates"),
                )
                .at(place())
                .repair("average the replicates before, or give summaries")
            });
            return;
        }
        let member = Member { observed, excluded: row.fate != Fate::Used, day: row.day };
        let groups = &mut self.cells[number].groups;
        match groups.get_mut(replicate) {
            Some(group) => {
                group.marked |= member.observed.mark != Mark::None;
                if group.marked {
                    faults.note("marked-replicate", || {
                        let message = format!(
                            "the replicates \"{}\" are several rows, one of them with a mark: their average is not known",
                            String::from_utf8_lossy(replicate)
                        );
                        Fault::wrong("marked-replicate", message)
                            .at(place())
                            .expected("numbers in all rows of the replicates")
                            .repair("give them as one row with one mark, or leave `replicates` out")
                    });
                }
                group.members.push(member);
            }
            None => {
                let marked = member.observed.mark != Mark::None;
                groups.insert(replicate.into(), Group { members: vec![member], marked });
            }
        }
    }

    fn compare_id(
        &mut self,
        number: usize,
        id: &[u8],
        row: &Row<'_>,
        faults: &mut FaultList,
        place: &impl Fn() -> Place,
    ) {
        if self.ids.len() >= IDS_COMPARED_AT_MOST {
            self.ids_beyond = true;
            return;
        }
        let earlier = self.ids.insert((number, id.into()), (row.file, row.line));
        if let Some((file, line)) = earlier {
            let first = self.name_of_row(file, line);
            let cell = &self.cells[number];
            faults.note("row-twice", || {
                let id = String::from_utf8_lossy(id);
                let message = format!(
                    "\"{id}\" is read twice for {}, {}: first at {first}, and again here",
                    cell.series, cell.period
                );
                Fault::wrong("row-twice", message)
                    .at(place())
                    .expected("each reading once")
                    .repair("take one of the rows out of the file, or exclude it with its reason")
            });
        }
    }

    fn keep(&mut self, number: usize, row: &Row<'_>) {
        if self.rows >= self.rows_at_most {
            self.rows_kept = false;
            for cell in &mut self.cells {
                cell.rows = Vec::new();
            }
            return;
        }
        self.rows += 1;
        let kept = self.as_read(number, row);
        self.cells[number].rows.push(kept);
    }

    /// A row as it goes into readings.csv.
    pub fn as_read(&self, number: usize, row: &Row<'_>) -> ReadingRow {
        let text = |bytes: &[u8]| String::from_utf8_lossy(bytes).into_owned();
        let cell = &self.cells[number];
        ReadingRow {
            series: cell.series.clone(),
            period: cell.period.clone(),
            id: row.id.map(text),
            file: row.file,
            line: row.line,
            text: text(row.text),
            value: row.observed.map(|observed| observed.value),
            mark: row.observed.map_or(Mark::None, |observed| observed.mark),
            uncertainty: row.observed.map(|observed| observed.uncertainty).filter(|u| *u > 0.0),
            date: row.day.and_then(Day::date),
            replicate: row.replicate.map(text),
            fate: row.fate,
        }
    }
}

pub fn too_many_singles() -> Fault {
    let message =
        format!("more than {SINGLES_AT_MOST} readings beside marks or uncertainties of single readings");
    Fault::wrong("too-many-singles", message)
        .repair("give the earlier periods as summaries, or leave marks and uncertainties out")
}
