//! Periods that are given by their number, mean and sd, or by a mean and its uncertainty, put onto
//! the model's scale.

use super::columns::{Columns, Head, PeriodColumn, SeriesColumn, trimmed};
use super::dates;
use super::delimited::Rows;
use super::evidence::Evidence;
use super::fault_list::FaultList;
use super::gather::{Gather, Summary};
use super::number;
use super::record::Record;
use super::screen::{ragged, text};
use crate::diagnostics::{Fault, Place};
use crate::math::fm;
use crate::plan::{PeriodOf, Plan, SeriesOf, Source, SourceKind, SummaryColumns, SummaryRow};
use crate::quantity::{Period, Scale};

/// The figures of one row, as given.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
struct Figures {
    n: Option<f64>,
    mean: Option<f64>,
    sd: Option<f64>,
    uncertainty: Option<f64>,
    log_mean: Option<f64>,
    log_sd: Option<f64>,
    geometric_mean: Option<f64>,
    geometric_sd: Option<f64>,
}

impl Figures {
    fn is_empty(&self) -> bool {
        *self == Figures::default()
    }

    fn of_row(row: &SummaryRow) -> Figures {
        Figures {
            n: row.n.map(|n| n as f64),
            mean: row.mean,
            sd: row.sd,
            uncertainty: row.uncertainty,
            log_mean: row.log_mean,
            log_sd: row.log_sd,
            geometric_mean: row.geometric_mean,
            geometric_sd: row.geometric_sd,
        }
    }

    /// The centre and the sd on the model's scale, and the uncertainty of the centre there.
    fn on_scale(&self, scale: Scale) -> Result<(f64, Option<f64>, Option<f64>), Fault> {
        match scale {
            Scale::Linear => {
                if self.log_mean.or(self.log_sd).or(self.geometric_mean).or(self.geometric_sd).is_some() {
                    return Err(wrong("a summary on the log scale, but the quantity's scale is linear")
                        .expected("mean with n and sd, or mean with uncertainty")
                        .repair("give arithmetic figures, or say scale = \"log\" in [quantity]"));
                }
                let mean = self.mean.ok_or_else(|| wrong("a summary without its mean"))?;
                Ok((mean, self.sd, self.uncertainty))
            }
            Scale::Log => {
                if self.mean.or(self.sd).is_some() {
                    return Err(wrong("an arithmetic mean or sd cannot be used on the log scale")
                        .expected("log_mean and log_sd, or geometric_mean and geometric_sd")
                        .repair("compute them from the logarithms of the readings, or give the readings"));
                }
                let (centre, uncertainty) = match (self.log_mean, self.geometric_mean) {
                    (Some(_), Some(_)) => return Err(wrong("both log_mean and geometric_mean are given")),
                    (Some(log_mean), None) => (log_mean, self.uncertainty),
                    (None, Some(mean)) if mean > 0.0 => {
                        // To first order, as for readings (JCGM 100:2008, 5.1.2).
                        (fm::ln(mean), self.uncertainty.map(|u| u / mean))
                    }
                    (None, Some(_)) => return Err(wrong("a geometric mean that is not above 0")),
                    (None, None) => return Err(wrong("a summary without log_mean or geometric_mean")),
                };
                let sd = match (self.log_sd, self.geometric_sd) {
                    (Some(_), Some(_)) => return Err(wrong("both log_sd and geometric_sd are given")),
                    (Some(sd), None) => Some(sd),
                    (None, Some(sd)) if sd >= 1.0 => Some(fm::ln(sd)),
                    (None, Some(_)) => return Err(wrong("a geometric sd below 1")),
                    (None, None) => None,
                };
                Ok((centre, sd, uncertainty))
            }
        }
    }

    /// What the likelihood sees.
    fn summary(&self, scale: Scale, place: Place) -> Result<Summary, Fault> {
        let (centre, sd, uncertainty) = self.on_scale(scale)?;
        let n = match self.n {
            Some(n) if (1.0..1e15).contains(&n) && fm::floor(n) == n => Some(n as u64),
            Some(n) if n >= 1e15 => return Err(wrong("n is larger than any number of readings")),
            Some(_) => return Err(wrong("n is no whole number of at least 1")),
            None => None,
        };
        let evidence = match (uncertainty, n, sd) {
            (Some(_), Some(_), _) | (Some(_), _, Some(_)) => {
                return Err(wrong("an uncertainty beside n or sd")
                    .expected("either n and sd, or the whole standard uncertainty of the mean")
                    .repair("leave one of the two out"));
            }
            (Some(u), None, None) if u > 0.0 => Evidence::Mean { mean: centre, uncertainty: u },
            (Some(_), None, None) => return Err(wrong("an uncertainty that is not above 0")),
            (None, None, _) => {
                return Err(wrong("a summary without n and without uncertainty")
                    .expected("n (with sd), or uncertainty")
                    .repair("say how many readings the mean is of, or how uncertain it is"));
            }
            (None, Some(_), Some(sd)) if sd < 0.0 => return Err(wrong("an sd below 0")),
            (None, Some(1), _) => Evidence::Sums { n: 1, mean: centre, ss: Some(0.0), rest: 0.0 },
            (None, Some(n), sd) => {
                Evidence::Sums { n, mean: centre, ss: sd.map(|sd| sd * sd * (n - 1) as f64), rest: 0.0 }
            }
        };
        Ok(Summary { evidence, mean: self.mean, sd: self.sd, n, place })
    }
}

fn wrong(what: &str) -> Fault {
    Fault::wrong("wrong-summary", what).expected("n, mean and sd; or a mean and its uncertainty")
}

/// Notes a summary, or why it cannot be one.
fn enter(
    gather: &mut Gather,
    series: &str,
    period: &Period,
    figures: &Figures,
    place: Place,
    faults: &mut FaultList,
) {
    let number = gather.cell(series, period);
    let summary = match figures.summary(gather.scale, place.clone()) {
        Ok(summary) => summary,
        Err(fault) => return faults.push(fault.at(place)),
    };
    let cell = &mut gather.cells[number];
    if let Some(first) = &cell.summary {
        let message = format!(
            "{series}, {period} is summarised twice: first at {}:{}, and again here",
            first.place.file, first.place.line
        );
        faults.note("summary-twice", || {
            Fault::wrong("summary-twice", message)
                .at(place)
                .expected("one summary for each series and period")
                .repair("take one of the two out")
        });
        return;
    }
    cell.summary = Some(summary);
}

/// Summaries written in the spec.
pub fn inline(rows: &[SummaryRow], source: &Source, gather: &mut Gather, faults: &mut FaultList) {
    for row in rows {
        let always = match &source.period {
            PeriodOf::Always(period) => Some(period.clone()),
            _ => None,
        };
        let series = match (&row.series, &source.series) {
            (Some(series), _) => Some(series.clone()),
            (None, SeriesOf::Always(series)) => Some(series.clone()),
            (None, SeriesOf::Column(_)) => None,
        };
        let place = row.span.place();
        let (Some(period), Some(series)) = (row.period.clone().or(always), series) else {
            faults.push(wrong("a summary that does not say its series and period").at(place));
            continue;
        };
        let series = Period::new(&series).as_str().to_string();
        gather.counts.read += 1;
        gather.counts.used += 1;
        enter(gather, &series, &period, &Figures::of_row(row), place, faults);
    }
}

/// Reads the rows of a file of summaries.
pub struct SummaryScreen<'p> {
    source: &'p Source,
    gather: &'p mut Gather,
    name: String,
    columns: Columns,
    cells: [Option<usize>; 8],
    pub taken: u64,
    pub blank_rows: u64,
}

impl<'p> SummaryScreen<'p> {
    pub fn new(
        head: &Head,
        source: &'p Source,
        plan: &'p Plan,
        gather: &'p mut Gather,
        faults: &mut FaultList,
    ) -> Option<SummaryScreen<'p>> {
        let SourceKind::Summaries(names) = &source.what else {
            return None;
        };
        let columns = Columns::find(head, source, plan, faults);
        let SummaryColumns { n, mean, sd, uncertainty, log_mean, log_sd, geometric_mean, geometric_sd } =
            names;
        let named = [
            (n, "n"),
            (mean, "mean"),
            (sd, "sd"),
            (uncertainty, "uncertainty"),
            (log_mean, "log_mean"),
            (log_sd, "log_sd"),
            (geometric_mean, "geometric_mean"),
            (geometric_sd, "geometric_sd"),
        ];
        let mut complete = true;
        let cells = named.map(|(name, role)| {
            let found = name.as_ref().map(|name| head.find(name, role, &source.span, faults));
            complete &= found != Some(None);
            found.flatten()
        });
        let columns = columns?;
        complete.then_some(SummaryScreen {
            source,
            gather,
            name: head.file.clone(),
            columns,
            cells,
            taken: 0,
            blank_rows: 0,
        })
    }

    fn key(&self, record: &Record<'_>, faults: &mut FaultList) -> Option<(String, Period)> {
        let mut filled = |column: usize, code: &'static str, what: &str| {
            let cell = trimmed(record.get(column));
            if cell.is_empty() {
                faults.note(code, || {
                    Fault::wrong(code, format!("the row does not say which {what} it belongs to"))
                        .at(record.place(&self.name, column))
                        .repair("fill the cell, or leave the row out by `where`")
                });
                return None;
            }
            Some(Period::new(&text(cell)))
        };
        let series = match &self.columns.series {
            SeriesColumn::Always(name) => Some(Period::new(name)),
            SeriesColumn::Column(column) => filled(*column, "missing-series", "series"),
        };
        let period = match &self.columns.period {
            PeriodColumn::Always(period) => Some(period.clone()),
            PeriodColumn::Column(column) => filled(*column, "missing-period", "period"),
            PeriodColumn::YearOfDate { month, day } => {
                let cell = self.columns.date.map(|column| trimmed(record.get(column))).unwrap_or_default();
                let found = dates::parse(cell, self.source.date_order);
                if found.is_none() {
                    faults.note("not-a-date", || {
                        Fault::wrong("not-a-date", format!("\"{}\" is no date", text(cell)))
                            .at(record.place(&self.name, self.columns.date.unwrap_or(0)))
                            .expected(dates::form(self.source.date_order))
                    });
                }
                found.map(|found| {
                    Period::new(&dates::name_of_year(found.year_that_starts(*month, *day), *month, *day))
                })
            }
        };
        Some((series?.as_str().to_string(), period?))
    }
}

impl Rows for SummaryScreen<'_> {
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
        let mut readable = true;
        let mut first_cell = None;
        let figures = self.cells.map(|column| {
            let column = column?;
            first_cell = first_cell.or(Some(column));
            let cell = trimmed(record.get(column));
            if self.columns.is_missing(cell) {
                return None;
            }
            let number = number::parse(cell, self.source.decimal_comma);
            if number.is_none() {
                readable = false;
                let why = number::diagnose(&String::from_utf8_lossy(cell), self.source.decimal_comma);
                faults.note(why.code, || {
                    Fault::wrong(why.code, why.what)
                        .at(record.place(&self.name, column))
                        .expected("a number in this column")
                        .repair(why.repair)
                });
            }
            number.map(|number| number.value)
        });
        let key = self.key(record, faults);
        let (true, Some((series, period))) = (readable, key) else {
            return;
        };
        let [n, mean, sd, uncertainty, log_mean, log_sd, geometric_mean, geometric_sd] = figures;
        let figures = Figures { n, mean, sd, uncertainty, log_mean, log_sd, geometric_mean, geometric_sd };
        if figures.is_empty() {
            self.gather.counts.missing += 1;
            return;
        }
        self.gather.counts.used += 1;
        let place = record.place(&self.name, first_cell.unwrap_or(0));
        enter(self.gather, &series, &period, &figures, place, faults);
    }
}
