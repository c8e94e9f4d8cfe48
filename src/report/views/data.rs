//! The data as tables: files, rows, exclusions, events, periods and the readings word for word.

use super::numbers::{NOTHING, Numbers};
use super::table::{Column, TableView, code, plain};
use crate::data::{Data, Facts, Fate, Mark, PeriodData, ReadingRow, SeriesData};
use crate::findings::{Findings, cautions};
use crate::plan::Plan;
use crate::quantity::Scale;
use crate::report::text::{self, Places};
use minijinja::Value;
use serde::Serialize;

/// More readings than this are in readings.csv only.
const READINGS_PRINTED: usize = 60;
/// More rows taken out than this are in readings.csv only.
const EXCLUDED_PRINTED: usize = 40;

/// What the section on the data shows.
#[derive(Debug, Serialize)]
pub struct DataView {
    pub files: Option<TableView>,
    /// Notes of the reader of the files.
    pub file_notes: Vec<String>,
    pub rows: TableView,
    pub rows_kept: bool,
    pub series: TableView,
    pub exclusions: Option<TableView>,
    pub events: Option<TableView>,
    pub left_out: Vec<String>,
    pub history: Option<String>,
    pub not_reviewed: Vec<String>,
    pub method: Option<String>,
    pub step: Option<String>,
    pub bias: Option<String>,
}

pub fn view(findings: &Findings) -> DataView {
    let (plan, data) = (&findings.plan, &findings.data);
    let unit = super::numbers::unit(plan);
    DataView {
        files: files(data),
        file_notes: data
            .files
            .iter()
            .flat_map(|file| file.notes.iter().map(move |note| format!("{}: {note}", file.written)))
            .collect(),
        rows: rows(data),
        rows_kept: data.rows_kept,
        series: series(findings),
        exclusions: exclusions(plan, data),
        events: events(plan),
        left_out: plan
            .history
            .leave_out
            .iter()
            .map(|(period, reason)| format!("{period}: {reason}"))
            .collect(),
        history: history(plan),
        not_reviewed: findings
            .not_reviewed
            .iter()
            .map(|(name, last)| format!("{name} (last period {last})"))
            .collect(),
        method: plan.quantity.method.clone(),
        step: plan.quantity.step.map(|step| format!("{}{unit}", text::record(step.get()))),
        bias: plan
            .quantity
            .bias
            .as_ref()
            .map(|bias| format!("{}{unit} (basis: {})", text::record(bias.sd.get()), bias.basis)),
    }
}

fn history(plan: &Plan) -> Option<String> {
    match (&plan.history.first, &plan.history.last) {
        (Some(first), Some(last)) => Some(format!("Earlier periods that count: {first} to {last}.")),
        (Some(first), None) => Some(format!("Earlier periods that count: from {first} on.")),
        (None, Some(last)) => Some(format!("Earlier periods that count: up to {last}.")),
        (None, None) => None,
    }
}

fn files(data: &Data) -> Option<TableView> {
    let mut table = TableView::new(
        "Files read, each with the SHA-256 of the bytes that were read",
        &[("file", Column::Head), ("SHA-256", Column::Text), ("bytes", Column::Number)],
    );
    for file in &data.files {
        table.row(vec![code(&file.written), code(&file.sha256), plain(text::count(file.bytes))]);
    }
    table.some()
}

fn rows(data: &Data) -> TableView {
    let mut table = TableView::new(
        "What became of the rows, over all files",
        &[("rows", Column::Head), ("number", Column::Number)],
    );
    let counts = &data.counts;
    for (name, count, always) in [
        ("read", counts.read, true),
        ("not asked for (other parameter, place or kind)", counts.other, false),
        ("without a reading (missing)", counts.missing, true),
        ("excluded, with reason", counts.excluded, true),
        ("after the last day of this interim review", counts.later, false),
        ("used, for the period under review or as history", counts.used, true),
    ] {
        if always || count > 0 {
            table.row(vec![plain(name), plain(text::count(count))]);
        }
    }
    table
}

/// The period under review, series by series.
fn series(findings: &Findings) -> TableView {
    let (plan, data) = (&findings.plan, &findings.data);
    let mut columns = vec![("series", Column::Head)];
    let planned: Vec<Option<u64>> =
        findings.series.iter().map(|series| cautions::planned(plan, &series.name)).collect();
    if planned.iter().any(Option::is_some) {
        columns.push(("planned", Column::Number));
    }
    columns.extend([("used", Column::Number), ("missing", Column::Number), ("excluded", Column::Number)]);
    let facts: Vec<Option<&Facts>> =
        findings.series.iter().map(|series| Some(&period_of(data, &series.name, plan)?.facts)).collect();
    let any = |of: fn(&Facts) -> u64| facts.iter().flatten().any(|facts| of(facts) > 0);
    let (below, above, later) = (any(|f| f.marked_below), any(|f| f.marked_above), any(|f| f.later));
    for (shown, name) in [(below, "marked below"), (above, "marked above"), (later, "later")] {
        if shown {
            columns.push((name, Column::Number));
        }
    }
    let unit = super::numbers::unit(plan);
    let heads = ["mean", "sd", "smallest", "largest"].map(|name| format!("{name}{}", in_brackets(&unit)));
    columns.extend(heads.iter().map(|head| (head.as_str(), Column::Number)));
    let mut table =
        TableView::new(format!("Readings of {} of each series under review", plan.review.period), &columns);
    for ((series, facts), planned_here) in findings.series.iter().zip(&facts).zip(&planned) {
        let empty = Facts::default();
        let facts = facts.unwrap_or(&empty);
        let mut cells = vec![plain(&series.name)];
        if planned.iter().any(Option::is_some) {
            cells.push(plain(planned_here.map_or_else(|| NOTHING.to_string(), text::count)));
        }
        let mut counts = vec![facts.n, facts.missing, facts.excluded];
        for (shown, count) in [(below, facts.marked_below), (above, facts.marked_above), (later, facts.later)]
        {
            if shown {
                counts.push(count);
            }
        }
        cells.extend(counts.into_iter().map(|count| plain(text::count(count))));
        cells.extend(facts_cells(facts));
        table.row(cells);
    }
    table
}

/// ", mg/L" without its leading space, for heads of columns.
pub fn in_brackets(unit: &str) -> String {
    let unit = unit.trim_start_matches(text::NO_BREAK_SPACE);
    if unit.is_empty() { String::new() } else { format!(", {unit}") }
}

/// The period under review of one series.
pub fn period_of<'a>(data: &'a Data, series: &str, plan: &Plan) -> Option<&'a PeriodData> {
    data.series.iter().find(|data| data.name == series)?.period(&plan.review.period)
}

/// Mean, sd, smallest and largest; the mean and the sd with one decimal more than the readings.
fn facts_cells(facts: &Facts) -> [Value; 4] {
    let decimals = facts.decimals.min(12) as i32;
    let read = Places::decimals(decimals);
    let finer = if facts.from_summary { read } else { read.finer(1) };
    let sd_places = |sd: f64| Places::of_uncertainty(sd).map_or(finer, |places| finer.at_least(places));
    let cell = |value: Option<f64>, places: Places| {
        plain(value.map_or_else(|| NOTHING.to_string(), |value| places.value(value)))
    };
    [
        cell(facts.mean, if facts.from_summary && decimals == 0 { read.finer(2) } else { finer }),
        plain(facts.sd.map_or_else(|| NOTHING.to_string(), |sd| sd_places(sd).value(sd))),
        cell(facts.smallest, read),
        cell(facts.largest, read),
    ]
}

fn exclusions(plan: &Plan, data: &Data) -> Option<TableView> {
    let heading = match plan.quantity.unit.as_str() {
        "1" => "as read".to_string(),
        unit => format!("as read, {unit}"),
    };
    let mut table = TableView::new(
        "Readings taken out; every answer is also given with them restored, under “Sensitivity”",
        &[
            ("series", Column::Head),
            ("period", Column::Text),
            ("row", Column::Text),
            (heading.as_str(), Column::Number),
            ("reason", Column::Text),
            ("by", Column::Text),
            ("on", Column::Text),
        ],
    );
    for (index, exclude) in plan.excludes.iter().enumerate() {
        let about = || [plain(&exclude.reason), plain(&exclude.by), plain(exclude.on.to_string())];
        let rows = data.excluded_rows.get(index).map_or(&[][..], Vec::as_slice);
        for row in rows.iter().take(EXCLUDED_PRINTED) {
            let mut cells = vec![
                plain(&row.series),
                plain(row.period.to_string()),
                plain(row_name(row, data)),
                plain(&row.text),
            ];
            cells.extend(about());
            table.row(cells);
        }
        if rows.is_empty() || rows.len() > EXCLUDED_PRINTED {
            let rest = match rows.len() {
                0 => text::count(exclude.rows),
                all => text::count((all - EXCLUDED_PRINTED) as u64),
            };
            let mut cells =
                vec![plain(""), plain(""), plain(format!("{rest} more, in readings.csv")), plain("")];
            cells.extend(about());
            table.row(cells);
        }
    }
    table.some()
}

/// The user's id of a row, or its file and line.
pub fn row_name(row: &ReadingRow, data: &Data) -> String {
    if let Some(id) = &row.id {
        return id.clone();
    }
    match row.file.and_then(|file| data.files.get(file)) {
        Some(file) if data.files.len() > 1 => format!("{}, line {}", file.written, row.line),
        Some(_) => format!("line {}", row.line),
        None => format!("value {}", row.line),
    }
}

fn events(plan: &Plan) -> Option<TableView> {
    let mut table = TableView::new(
        "What happened meanwhile",
        &[("date", Column::Head), ("what", Column::Text), ("kind", Column::Text), ("series", Column::Text)],
    );
    for event in &plan.events {
        table.row(vec![
            plain(event.date.to_string()),
            plain(&event.what),
            plain(event.kind.as_deref().unwrap_or(NOTHING)),
            plain(event.series.as_deref().unwrap_or("all")),
        ]);
    }
    table.some()
}

/// Per period of one series: n, mean, sd, smallest, largest, and what part it plays.
pub fn periods(
    series: &SeriesData,
    plan: &Plan,
    numbers: &Numbers<'_>,
    all: &[crate::quantity::Period],
) -> TableView {
    let heads =
        ["mean", "sd", "smallest", "largest"].map(|name| format!("{name}{}", in_brackets(&numbers.unit)));
    let mut columns = vec![("period", Column::Head), ("n", Column::Number)];
    columns.extend(heads.iter().map(|head| (head.as_str(), Column::Number)));
    columns.push(("remark", Column::Text));
    let mut table = TableView::new(format!("{} period by period", series.name), &columns);
    let now = all.iter().position(|period| *period == plan.review.period);
    for period in &series.periods {
        let facts = &period.facts;
        let mut cells = vec![plain(period.period.to_string()), plain(text::count(facts.n))];
        cells.extend(facts_cells(facts));
        let mut remarks = Vec::new();
        let place = all.iter().position(|known| *known == period.period);
        if period.period == plan.review.period {
            remarks.push("under review".to_string());
        } else if place > now {
            remarks.push("later, not used".to_string());
        } else if plan.history.leave_out.iter().any(|(left, _)| *left == period.period) {
            remarks.push("left out of the history".to_string());
        }
        for (count, what) in [
            (facts.excluded, "excluded"),
            (facts.missing, "missing"),
            (facts.marked_below, "marked below"),
            (facts.marked_above, "marked above"),
        ] {
            if count > 0 {
                remarks.push(format!("{} {what}", text::count(count)));
            }
        }
        if facts.from_summary {
            remarks.push("summary".to_string());
        }
        cells.push(plain(remarks.join("; ")));
        table.row(cells);
    }
    table
}

/// The readings of the period word for word, and how many there are beyond those printed.
pub fn readings(period: &PeriodData, data: &Data, plan: &Plan) -> (Option<TableView>, Option<String>) {
    let rows = &period.readings;
    let with = |of: fn(&ReadingRow) -> bool| rows.iter().any(of);
    let mut columns = vec![("row", Column::Head)];
    let (dates, replicates) = (with(|row| row.date.is_some()), with(|row| row.replicate.is_some()));
    let uncertainties = with(|row| row.uncertainty.is_some());
    let unit = in_brackets(&super::numbers::unit(plan));
    let (read, taken, own) =
        ("as read".to_string(), format!("taken as{unit}"), format!("its own uncertainty{unit}"));
    if dates {
        columns.push(("date", Column::Text));
    }
    if replicates {
        columns.push(("repeats", Column::Text));
    }
    columns.extend([(read.as_str(), Column::Number), (taken.as_str(), Column::Number)]);
    if uncertainties {
        columns.push((own.as_str(), Column::Number));
    }
    columns.push(("used", Column::Text));
    let mut table = TableView::new(format!("Every reading of {}, word for word", period.period), &columns);
    for row in rows.iter().take(READINGS_PRINTED) {
        let mut cells = vec![plain(row_name(row, data))];
        if dates {
            cells.push(plain(row.date.map_or_else(|| NOTHING.to_string(), |date| date.to_string())));
        }
        if replicates {
            cells.push(plain(row.replicate.as_deref().unwrap_or(NOTHING)));
        }
        cells.push(plain(&row.text));
        cells.push(plain(taken_as(row)));
        if uncertainties {
            cells.push(plain(row.uncertainty.map_or_else(|| NOTHING.to_string(), text::record)));
        }
        cells.push(plain(fate(row, plan)));
        table.row(cells);
    }
    let left = rows.len().saturating_sub(READINGS_PRINTED);
    let rest = (left > 0).then(|| {
        format!(
            "{} of {} readings are printed; all of them are in readings.csv.",
            READINGS_PRINTED,
            text::count(rows.len() as u64)
        )
    });
    (table.some(), rest)
}

fn taken_as(row: &ReadingRow) -> String {
    let Some(value) = row.value else { return NOTHING.to_string() };
    let value = text::record(value);
    match row.mark {
        Mark::None => value,
        Mark::Below => format!("below {value}"),
        Mark::Above => format!("above {value}"),
    }
}

fn fate(row: &ReadingRow, plan: &Plan) -> String {
    match row.fate {
        Fate::Used => "yes".to_string(),
        Fate::Missing => "no: no reading".to_string(),
        Fate::Later => "no: after the last day of this interim review".to_string(),
        Fate::Excluded(index) => match plan.excludes.get(index) {
            Some(exclude) => format!("no: {}", exclude.reason),
            None => "no: excluded".to_string(),
        },
    }
}

/// "Readings by month, January to December: 1, 1, …", where dates are known.
pub fn months(facts: &Facts) -> Option<String> {
    if facts.by_month.iter().all(|count| *count == 0) {
        return None;
    }
    let counts: Vec<String> = facts.by_month.iter().map(|count| text::count(*count)).collect();
    Some(counts.join(", "))
}

/// This period's sd beside the sd that was taken as known.
pub fn known_sd_caution(facts: &Facts, known: Option<f64>, numbers: &Numbers<'_>) -> Option<String> {
    let (known, sd) = (known?, facts.sd?);
    if numbers.scale == Scale::Log || facts.n < 2 {
        return None;
    }
    let unit = &numbers.unit;
    Some(format!(
        "The within sd was taken as known, {}{unit}. The {} readings of the period have sd {}{unit}. If the scatter \
         differs, the row “within sd from readings” under “Sensitivity” shows the answers without that assumption.",
        text::record(known),
        text::count(facts.n),
        text::significant(sd, 3),
    ))
}
