//! The one screen that every reading passes, whatever its format: what cannot be read as meant is a
//! fault with its row.

use super::cell::{Codes, Reader, Refused, Understood};
use super::columns::{Columns, Head, PeriodColumn, SeriesColumn, trimmed};
use super::dates::{self, Day};
use super::delimited::Rows;
use super::fault_list::FaultList;
use super::gather::{Gather, Observed, Row};
use super::index::CellIndex;
use super::number::{self, shortened};
use super::record::Record;
use super::{Fate, Mark};
use crate::diagnostics::{Fault, Place};
use crate::plan::{Coverage, Marks, NumberOrColumn, Plan, Source, SourceKind};
use crate::quantity::{Period, Scale};

/// Where the columns of readings stand.
struct Cells {
    value: usize,
    uncertainty: Option<usize>,
    coverage: Option<usize>,
    replicates: Option<usize>,
    unit: Option<usize>,
    mark: Option<usize>,
    limit: Option<usize>,
}

/// Reads the rows of one file into the gathering.
pub struct Screen<'p> {
    plan: &'p Plan,
    source: &'p Source,
    gather: &'p mut Gather,
    file: usize,
    name: String,
    columns: Columns,
    cells: Cells,
    index: CellIndex,
    reader: Reader,
    marks: &'p Marks,
    comma: bool,
    scale: Scale,
    /// Coverage factor of all uncertainties, where no column holds it.
    coverage: f64,
    review_day: Day,
    until: Option<Day>,
    check_ids: bool,
    pub codes: Codes,
    pub taken: u64,
    pub blank_rows: u64,
}

impl<'p> Screen<'p> {
    pub fn new(
        head: &Head,
        source: &'p Source,
        plan: &'p Plan,
        gather: &'p mut Gather,
        file: usize,
        faults: &mut FaultList,
    ) -> Option<Screen<'p>> {
        let SourceKind::Readings { value, uncertainty, coverage, replicates, unit, marks, .. } = &source.what
        else {
            return None;
        };
        let columns = Columns::find(head, source, plan, faults);
        let mut complete = true;
        let mut find = |name: &String, role: &str| {
            let found = head.find(name, role, &source.span, faults);
            complete &= found.is_some();
            found.unwrap_or(0)
        };
        let cells = Cells {
            value: find(value, "value"),
            uncertainty: uncertainty.as_ref().map(|name| find(name, "uncertainty")),
            coverage: match coverage {
                Coverage::Column(name) => Some(find(name, "coverage_factor")),
                Coverage::Factor(_) => None,
            },
            replicates: replicates.as_ref().map(|name| find(name, "replicates")),
            unit: unit.as_ref().map(|name| find(name, "unit")),
            mark: marks.column.as_ref().map(|name| find(name, "marks.column")),
            limit: match &marks.limit {
                Some(NumberOrColumn::Column(name)) => Some(find(name, "marks.limit")),
                _ => None,
            },
        };
        let columns = columns?;
        if !complete {
            return None;
        }
        for (number, _) in &columns.exclusions {
            gather.found[*number].applies = true;
        }
        Some(Screen {
            check_ids: columns.id.is_some() && columns.id != cells.replicates,
            reader: Reader::new(marks, source),
            marks,
            comma: source.decimal_comma,
            scale: plan.quantity.scale,
            coverage: match coverage {
                Coverage::Factor(factor) => *factor,
                Coverage::Column(_) => 1.0,
            },
            plan,
            source,
            gather,
            file,
            name: head.file.clone(),
            columns,
            cells,
            index: CellIndex::new(),
            review_day: Day::of(plan.review.date),
            until: plan.review.until.map(Day::of),
            codes: Codes::default(),
            taken: 0,
            blank_rows: 0,
        })
    }

    fn place(&self, record: &Record<'_>, column: usize) -> Place {
        record.place(&self.name, column)
    }

    /// The day of a row; `None` where the cell is empty or wrong (the latter noted).
    fn day(&self, record: &Record<'_>, faults: &mut FaultList) -> Option<Day> {
        let column = self.columns.date?;
        let cell = trimmed(record.get(column));
        let day = dates::parse(cell, self.source.date_order);
        if day.is_none() && !cell.is_empty() {
            faults.note("not-a-date", || not_a_date(cell, self.source).at(self.place(record, column)));
        }
        day.filter(|day| {
            // An interim review does not use what came later, so a later date is no slip.
            let in_time = *day <= self.review_day || self.until.is_some();
            if !in_time {
                faults.note("future-date", || {
                    let message = format!(
                        "\"{}\" is after the date of the review, {}",
                        text(cell),
                        self.plan.review.date
                    );
                    Fault::wrong("future-date", message)
                        .at(self.place(record, column))
                        .repair("mend the date in the file, or `date` in [review]")
                });
            }
            in_time
        })
    }

    /// Number of the cell that a row belongs to.
    fn find_cell(&mut self, record: &Record<'_>, day: Option<Day>, faults: &mut FaultList) -> Option<usize> {
        let series = match &self.columns.series {
            SeriesColumn::Column(column) => trimmed(record.get(*column)),
            SeriesColumn::Always(_) => b"",
        };
        let year;
        let period: &[u8] = match &self.columns.period {
            PeriodColumn::Column(column) => trimmed(record.get(*column)),
            PeriodColumn::Always(_) => b"",
            PeriodColumn::YearOfDate { month, day: first } => {
                year = day?.year_that_starts(*month, *first).to_le_bytes();
                &year
            }
        };
        if let Some(cell) = self.index.find(series, period) {
            return Some(cell);
        }
        let (series_name, period_name) = self.names(record, series, period, day, faults)?;
        let cell = self.gather.cell(&series_name, &period_name);
        self.index.insert(series, period, cell);
        Some(cell)
    }

    #[cold]
    fn names(
        &self,
        record: &Record<'_>,
        series: &[u8],
        period: &[u8],
        day: Option<Day>,
        faults: &mut FaultList,
    ) -> Option<(String, Period)> {
        let series_name = match &self.columns.series {
            SeriesColumn::Always(name) => Period::new(name).as_str().to_string(),
            SeriesColumn::Column(column) => {
                if series.is_empty() {
                    faults.note("missing-series", || {
                        Fault::wrong("missing-series", "the row does not say which series it belongs to")
                            .at(self.place(record, *column))
                            .expected("a name in this cell")
                            .repair("fill the cell, or leave the row out by `where`")
                    });
                    return None;
                }
                Period::new(&text(series)).as_str().to_string()
            }
        };
        let period_name = match &self.columns.period {
            PeriodColumn::Always(period) => period.clone(),
            PeriodColumn::YearOfDate { month, day: first } => {
                Period::new(&dates::name_of_year(day?.year_that_starts(*month, *first), *month, *first))
            }
            PeriodColumn::Column(column) => {
                if period.is_empty() {
                    faults.note("missing-period", || {
                        Fault::wrong("missing-period", "the row does not say which period it belongs to")
                            .at(self.place(record, *column))
                            .expected("a period in this cell")
                            .repair("fill the cell, or leave the row out by `where`")
                    });
                    return None;
                }
                Period::new(&text(period))
            }
        };
        Some((series_name, period_name))
    }

    /// The row's reading; `Err` where it was refused (and noted).
    fn observed(&self, record: &Record<'_>, faults: &mut FaultList) -> Result<Option<(Observed, usize)>, ()> {
        let cell = trimmed(record.get(self.cells.value));
        let mark_cell = self.cells.mark.map(|column| trimmed(record.get(column)));
        let understood = self.reader.understand(cell, mark_cell);
        let (value, mark, decimals) = match understood {
            Ok(Understood::Missing) => return Ok(None),
            Ok(Understood::Number { value, decimals }) => (value, Mark::None, decimals),
            Ok(Understood::Marked { mark, limit: Some(limit), decimals }) => (limit, mark, decimals),
            Ok(Understood::Marked { mark, limit: None, .. }) => {
                (self.limit(record, faults).ok_or(())?, mark, 0)
            }
            Err(refused) => {
                self.note_refused(refused, cell, mark_cell, record, faults);
                return Err(());
            }
        };
        if self.scale == Scale::Log && value <= 0.0 {
            faults.note("not-above-zero", || {
                not_above_zero(&text(cell)).at(self.place(record, self.cells.value))
            });
            return Err(());
        }
        let uncertainty = match self.cells.uncertainty {
            Some(column) => self.uncertainty(record, column, faults).ok_or(())?,
            None => 0.0,
        };
        Ok(Some((Observed { value, mark, uncertainty }, decimals)))
    }

    #[cold]
    fn note_refused(
        &self,
        refused: Refused,
        cell: &[u8],
        mark_cell: Option<&[u8]>,
        record: &Record<'_>,
        faults: &mut FaultList,
    ) {
        match refused {
            Refused::NotANumber => {
                let why = number::diagnose(&String::from_utf8_lossy(cell), self.comma);
                faults.note(why.code, || {
                    Fault::wrong(why.code, why.what)
                        .at(self.place(record, self.cells.value))
                        .expected(format!("a number in column `{}`", self.value_name()))
                        .repair(why.repair)
                });
            }
            Refused::UnknownMark => faults.note("unknown-mark", || {
                let column = self.cells.mark.unwrap_or(self.cells.value);
                unknown_mark(&text(mark_cell.unwrap_or_default()), self.marks).at(self.place(record, column))
            }),
        }
    }

    fn value_name(&self) -> &str {
        match &self.source.what {
            SourceKind::Readings { value, .. } => value,
            SourceKind::Summaries(_) => "",
        }
    }

    /// The limit of a mark without a number.
    fn limit(&self, record: &Record<'_>, faults: &mut FaultList) -> Option<f64> {
        match (&self.marks.limit, self.cells.limit) {
            (Some(NumberOrColumn::Number(limit)), _) => Some(*limit),
            (_, Some(column)) => {
                let cell = trimmed(record.get(column));
                let number = number::parse(cell, self.comma);
                if number.is_none() {
                    faults.note("mark-without-limit", || {
                        Fault::wrong(
                            "mark-without-limit",
                            format!("\"{}\" is no limit for the mark", text(cell)),
                        )
                        .at(self.place(record, column))
                        .expected("the number that the reading lies below or above")
                        .repair("fill in the reporting limit")
                    });
                }
                number.map(|number| number.value)
            }
            _ => {
                faults.note("mark-without-limit", || {
                    mark_without_limit().at(self.place(record, self.cells.value))
                });
                None
            }
        }
    }

    /// The standard uncertainty of a row's reading.
    fn uncertainty(&self, record: &Record<'_>, column: usize, faults: &mut FaultList) -> Option<f64> {
        let factor = match self.cells.coverage {
            None => self.coverage,
            Some(column) => self.positive(record, column, "coverage factor", faults)?,
        };
        Some(self.positive(record, column, "uncertainty", faults)? / factor)
    }

    fn positive(
        &self,
        record: &Record<'_>,
        column: usize,
        what: &str,
        faults: &mut FaultList,
    ) -> Option<f64> {
        let cell = trimmed(record.get(column));
        let number = number::parse(cell, self.comma).map(|number| number.value);
        let positive = number.filter(|number| *number > 0.0);
        if positive.is_none() {
            faults.note("not-an-uncertainty", || {
                let what = if cell.is_empty() {
                    format!("the reading has no {what}")
                } else {
                    format!("\"{}\" is no {what}", text(cell))
                };
                Fault::wrong("not-an-uncertainty", what)
                    .at(self.place(record, column))
                    .expected("a number above 0")
                    .repair("fill in the cell, or leave the row out by `where`")
            });
        }
        positive
    }

    /// What the date and the period say of each other.
    fn check_date(&self, record: &Record<'_>, cell: usize, day: Option<Day>, faults: &mut FaultList) -> bool {
        let Some(column) = self.columns.date else {
            return true;
        };
        let Some(day) = day else {
            if trimmed(record.get(column)).is_empty() {
                faults.note("missing-date", || missing_date(self.place(record, column)));
            }
            return false;
        };
        if matches!(self.columns.period, PeriodColumn::YearOfDate { .. }) {
            return true;
        }
        let cell = &self.gather.cells[cell];
        match cell.year {
            Some(year) if year != day.year() => {
                let period = &cell.period;
                faults.note("date-outside-period", || {
                    let message = format!(
                        "\"{}\" does not lie in the period {period}",
                        text(trimmed(record.get(column)))
                    );
                    Fault::wrong("date-outside-period", message)
                        .at(self.place(record, column))
                        .expected(format!("a date in {period}"))
                        .repair("mend the date or the period; where years start later, use `year_starts`")
                });
                false
            }
            _ => true,
        }
    }

    /// The first exclusion that takes the row; every one that does is counted.
    fn excluded_by(&mut self, record: &Record<'_>) -> Option<usize> {
        let mut first = None;
        for (number, conditions) in &self.columns.exclusions {
            if conditions.iter().all(|condition| condition.holds(record)) {
                let found = &mut self.gather.found[*number];
                found.count += 1;
                if found.lines.len() < 5 {
                    found.lines.push((Some(self.file), record.line));
                }
                first = first.or(Some(*number));
            }
        }
        first
    }

    fn unit_fits(&self, record: &Record<'_>, faults: &mut FaultList) -> bool {
        let Some(column) = self.cells.unit else {
            return true;
        };
        let cell = trimmed(record.get(column));
        let fits = cell == self.plan.quantity.unit.trim().as_bytes();
        if !fits {
            faults.note("other-unit", || {
                Fault::wrong("other-unit", format!("the row's unit is \"{}\"", text(cell)))
                    .at(self.place(record, column))
                    .expected(format!("\"{}\", the unit of the quantity", self.plan.quantity.unit))
                    .repair("convert the value in the file, or take the row out by `where`; nothing is converted here")
            });
        }
        fits
    }
}

impl Rows for Screen<'_> {
    fn row(&mut self, record: &Record<'_>, faults: &mut FaultList) {
        if record.is_blank() {
            self.blank_rows += 1;
            return;
        }
        if record.len() != self.columns.count {
            faults.note("ragged-row", || ragged(record, &self.name, self.columns.count));
            return;
        }
        self.gather.counts.read += 1;
        if !self.columns.takes(record) {
            self.gather.counts.other += 1;
            return;
        }
        self.taken += 1;
        let unit_fits = self.unit_fits(record, faults);
        let observed = self.observed(record, faults);
        let day = self.day(record, faults);
        let needs_date = matches!(self.columns.period, PeriodColumn::YearOfDate { .. });
        let is_missing = observed == Ok(None);
        let Some(cell) = self.find_cell(record, day, faults) else {
            if needs_date
                && let (None, Some(column)) = (day, self.columns.date)
                && trimmed(record.get(column)).is_empty()
            {
                faults.note("missing-date", || missing_date(self.place(record, column)));
            }
            return;
        };
        let dated = is_missing && day.is_none() || self.check_date(record, cell, day, faults);
        let excluded = self.excluded_by(record);
        let Ok(observed) = observed else {
            return;
        };
        if !dated || !unit_fits {
            return;
        }
        let fate = match (excluded, observed) {
            (Some(number), _) => Fate::Excluded(number),
            (None, _) if self.is_later(record, cell, day, faults) => Fate::Later,
            (None, None) => Fate::Missing,
            (None, Some(_)) => Fate::Used,
        };
        if let (Fate::Used, Some((observed, _))) = (fate, observed) {
            self.codes.look_at(observed.value, || record.place(&self.name, self.cells.value));
        }
        let row = Row {
            file: Some(self.file),
            line: record.line,
            text: trimmed(record.get(self.cells.value)),
            id: self.columns.id.map(|column| trimmed(record.get(column))).filter(|id| !id.is_empty()),
            replicate: self.cells.replicates.map(|column| trimmed(record.get(column))),
            observed: observed.map(|(observed, _)| observed),
            day,
            decimals: observed.map_or(0, |(_, decimals)| decimals),
            fate,
        };
        if row.replicate.is_some_and(<[u8]>::is_empty) && row.observed.is_some() {
            faults.note("missing-replicate", || {
                let column = self.cells.replicates.unwrap_or(0);
                Fault::wrong("missing-replicate", "the row does not say which replicates it belongs to")
                    .at(self.place(record, column))
                    .repair("fill the cell; a reading without replicates has an id of its own")
            });
            return;
        }
        if let Fate::Excluded(number) = fate {
            let as_read = self.gather.as_read(cell, &row);
            let found = &mut self.gather.found[number];
            // A wrong condition may match every row; its fault shows the first few.
            if found.rows.len() as u64 <= self.plan.excludes[number].rows {
                found.rows.push(as_read);
            }
        }
        let name = &self.name;
        let place_column = self.columns.id.unwrap_or(self.cells.value);
        self.gather.take(cell, &row, self.check_ids, faults, || record.place(name, place_column));
    }
}

impl Screen<'_> {
    fn is_later(&self, record: &Record<'_>, cell: usize, day: Option<Day>, faults: &mut FaultList) -> bool {
        let Some(until) = self.until else {
            return false;
        };
        match day {
            Some(day) => day > until,
            None => {
                if self.columns.date.is_none() && self.gather.cells[cell].period == self.plan.review.period {
                    faults.note("until-without-date", || {
                        Fault::wrong(
                            "until-without-date",
                            "an interim review with `until` needs the date of every reading of its period",
                        )
                        .at(record.whole_place(&self.name))
                        .repair("name the date's column by `date`")
                    });
                }
                false
            }
        }
    }
}

pub fn text(bytes: &[u8]) -> String {
    shortened(&String::from_utf8_lossy(bytes))
}

pub fn ragged(record: &Record<'_>, file: &str, columns: usize) -> Fault {
    let found = record.len();
    let cells = if found == 1 { "cell" } else { "cells" };
    Fault::wrong("ragged-row", format!("the row has {found} {cells}, the head has {columns}"))
        .at(record.whole_place(file))
        .expected(format!("{columns} cells"))
        .repair("look for a missing or an extra delimiter; a cell that holds the delimiter needs quotes")
}

fn not_a_date(cell: &[u8], source: &Source) -> Fault {
    let fault = Fault::wrong("not-a-date", format!("\"{}\" is no date", text(cell)))
        .expected(dates::form(source.date_order));
    let starts_well = |length: usize| {
        cell.get(..length).is_some_and(|start| dates::parse(start, source.date_order).is_some())
    };
    if starts_well(10) {
        fault.repair("keep only the date; the time of day is not read")
    } else {
        fault.repair("mend the cell, or say `date_order` if all dates are written in another order")
    }
}

fn missing_date(place: Place) -> Fault {
    Fault::wrong("missing-date", "the reading has no date")
        .at(place)
        .expected("a date in this cell")
        .repair("fill in the date, or leave `date` out if dates are not known")
}

pub fn not_above_zero(cell: &str) -> Fault {
    Fault::wrong("not-above-zero", format!("\"{cell}\" cannot enter a log scale"))
        .expected("a number above 0")
        .repair("if the reading was below a limit, give it as a mark (\"<0.5\"); do not replace it by a small number")
}

pub fn unknown_mark(cell: &str, marks: &Marks) -> Fault {
    let known: Vec<String> =
        marks.below.iter().chain(&marks.above).map(|mark| format!("\"{mark}\"")).collect();
    Fault::wrong("unknown-mark", format!("\"{cell}\" is no mark that the spec declares"))
        .expected(format!("an empty cell or one of {}", known.join(", ")))
        .repair("add it to `below` or `above` of `marks`")
}

pub fn mark_without_limit() -> Fault {
    Fault::wrong("mark-without-limit", "the mark has no number, and the spec names no limit for it")
        .expected("a number after the mark")
        .repair("say `limit` in `marks`: a number, or the column that holds the reporting limit")
}
