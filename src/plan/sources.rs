//! Where data come from: `[[readings]]`, `[[summaries]]`, and the rows that `[[exclude]]` leaves out.

use crate::diagnostics::Fault;
use crate::plan::about::is_sha256;
use crate::plan::make::Ground;
use crate::plan::rows::{self, row_of};
use crate::plan::{
    Coverage, DateOrder, Exclude, FileRef, Marks, NumberOrColumn, PeriodOf, SeriesOf, Source, SourceKind,
    SummaryColumns, Whence,
};
use crate::quantity::{Period, Scale};
use crate::spec::keys::nearest;
use crate::spec::language;
use crate::spec::reader::{Reader, not_served};
use crate::spec::table::{Kind, Table, Value};

/// What sources take from the rest of the spec.
pub struct Frame {
    pub default_period: Option<Period>,
    pub default_series: Option<String>,
    pub scale: Scale,
}

/// Keys that speak of a file's columns and cells, and mean nothing where the data stand in the spec.
const OF_A_FILE: &[&str] = &[
    "sha256",
    "where",
    "period",
    "year_starts",
    "series",
    "date",
    "date_order",
    "id",
    "missing",
    "delimiter",
    "decimal",
    "encoding",
    "skip",
    "value",
    "uncertainty",
    "replicates",
    "unit",
    "n",
    "mean",
    "sd",
    "log_mean",
    "log_sd",
    "geometric_mean",
    "geometric_sd",
];

pub fn readings(table: &Table, frame: &Frame, ground: &mut Ground) -> Option<Source> {
    let in_spec = place_of_data(table, "values", ground);
    let mut reader = ground.reader(table, language::READINGS);
    let value = match in_spec {
        Some(false) => {
            reader.required("value");
            reader.text("value")
        }
        _ => Some("value".to_string()),
    };
    let uncertainty = reader.text("uncertainty");
    let coverage = coverage(&mut reader);
    let (replicates, unit) = (reader.text("replicates"), reader.text("unit"));
    let planned = reader.count("planned");
    reader.table("marks");
    let values = if in_spec == Some(true) { values(&mut reader) } else { None };
    if in_spec == Some(false) && reader.has("uncertainties") {
        let fault = Fault::wrong("key-out-of-place", "`uncertainties` belongs to `values` in the spec")
            .expected("`uncertainty`, the column of a file")
            .repair("name the file's column with `uncertainty`");
        reader.fault_at("uncertainties", fault);
    }
    reader.finish_beside(&[language::SOURCE]);
    let marks = marks(table.table("marks"), ground);
    let from = match in_spec? {
        true => values,
        false => files(table, ground).map(Whence::Files),
    };
    let what = value.map(|value| SourceKind::Readings {
        value,
        uncertainty,
        coverage,
        replicates,
        unit,
        marks,
        planned,
    });
    source(table, what, from, frame, ground)
}

pub fn summaries(table: &Table, frame: &Frame, ground: &mut Ground) -> Option<Source> {
    let in_spec = place_of_data(table, "rows", ground);
    let mut reader = ground.reader(table, language::SUMMARIES);
    let columns = SummaryColumns {
        n: reader.text("n"),
        mean: reader.text("mean"),
        sd: reader.text("sd"),
        uncertainty: reader.text("uncertainty"),
        log_mean: reader.text("log_mean"),
        log_sd: reader.text("log_sd"),
        geometric_mean: reader.text("geometric_mean"),
        geometric_sd: reader.text("geometric_sd"),
    };
    if in_spec == Some(false) {
        rows::check_columns(&mut reader, frame.scale);
    }
    reader.tables("rows");
    let row_tables = table.tables("rows");
    if in_spec == Some(true) && row_tables.is_empty() {
        reader.fault_at(
            "rows",
            Fault::wrong("wrong-value", "`rows` holds no row").expected("at least one row"),
        );
    }
    reader.finish_beside(&[language::SOURCE]);
    let from = match in_spec? {
        true => {
            let rows = row_tables.into_iter().filter_map(|row| row_of(row, frame.scale, ground));
            Some(Whence::Rows(rows.collect()))
        }
        false => files(table, ground).map(Whence::Files),
    };
    source(table, Some(SourceKind::Summaries(columns)), from, frame, ground)
}

/// Whether the data stand in the spec (`inline`) or in files; noted where neither or both do.
fn place_of_data(table: &Table, inline: &'static str, ground: &mut Ground) -> Option<bool> {
    let has = |key: &str| table.get(key).is_some();
    if has("query") || has("database_env") {
        // Not served yet: refused with the other keys of the table.
        return None;
    }
    match (has("file"), has(inline)) {
        (true, false) => Some(false),
        (false, true) => {
            let stray: Vec<&str> = OF_A_FILE.iter().copied().filter(|key| has(key)).collect();
            for key in stray {
                let fault = Fault::wrong(
                    "key-out-of-place",
                    format!("`{key}` speaks of a file, and the data stand in the spec"),
                )
                .expected(format!("`{inline}` alone, with in_period and in_series"))
                .repair(format!("leave `{key}` out"));
                ground.reader(table, &[]).fault_at(key, fault);
            }
            Some(true)
        }
        (true, true) => {
            let fault = Fault::wrong("either-or", format!("{} has both `file` and `{inline}`", table.name))
                .expected(format!("`file` or `{inline}`"))
                .repair("make two tables of it");
            ground.reader(table, &[]).fault_at(inline, fault);
            None
        }
        (false, false) => {
            let fault = Fault::wrong("missing-key", format!("{} names no data", table.name))
                .at(table.span.place())
                .expected(format!("`file` = a path in quotes, or `{inline}`"));
            ground.faults.push(fault);
            None
        }
    }
}

/// What readings and summaries have in common.
fn source(
    table: &Table,
    what: Option<SourceKind>,
    from: Option<Whence>,
    frame: &Frame,
    ground: &mut Ground,
) -> Option<Source> {
    let mut reader = ground.reader(table, language::SOURCE);
    let rows_where = cells(&mut reader, "where");
    let period = period(&mut reader, frame);
    let series = series(&mut reader, frame);
    let date = reader.text("date");
    let date_order = match reader.choice("date_order") {
        Some("d.m.y") => DateOrder::DayMonthYear,
        Some("m/d/y") => DateOrder::MonthDayYear,
        _ => DateOrder::YearMonthDay,
    };
    if reader.has("date_order") && !reader.has("date") {
        let fault = Fault::wrong("key-out-of-place", "`date_order` stands without `date`")
            .expected("`date`, the column of the date");
        reader.fault_at("date_order", fault);
    }
    let id = reader.text("id");
    let missing = reader.text_list("missing").unwrap_or_else(|| vec![String::new()]);
    let first_file = match &from {
        Some(Whence::Files(files)) => files.first().map(|file| file.written.as_str()),
        _ => None,
    };
    let format = text_format(&mut reader, first_file);
    Some(Source {
        what: what?,
        from: from?,
        rows_where: rows_where.unwrap_or_default(),
        period: period?,
        series: series?,
        date,
        date_order,
        id,
        missing,
        delimiter: format.delimiter,
        decimal_comma: format.decimal_comma,
        encoding: format.encoding,
        skip: format.skip,
        span: table.span.clone(),
    })
}

/// How a text file is laid out.
pub struct TextFormat {
    pub delimiter: Option<u8>,
    pub decimal_comma: bool,
    pub encoding: Option<String>,
    pub skip: u64,
}

pub fn text_format(reader: &mut Reader<'_>, file: Option<&str>) -> TextFormat {
    let delimiter = match reader.text_of_delimiter() {
        Some(byte) => Some(byte),
        None => file.filter(|file| ending(file) == "tsv").map(|_| b'\t'),
    };
    let decimal_comma = reader.choice("decimal") == Some(",");
    if decimal_comma && delimiter == Some(b',') {
        let fault = Fault::wrong("either-or", "the comma cannot part cells and mark decimals at once")
            .expected("another delimiter, such as \";\"");
        reader.fault_at("decimal", fault);
    }
    let encoding = reader.text("encoding").filter(|name| {
        let known = encoding_rs::Encoding::for_label(name.as_bytes()).is_some();
        if !known {
            let names =
                ["utf-8", "utf-16le", "utf-16be", "windows-1252", "iso-8859-1", "iso-8859-15", "macintosh"];
            let mut fault = Fault::wrong("unknown-name", format!("there is no encoding \"{name}\""))
                .expected("the name of an encoding, such as \"windows-1252\"");
            if let Some(meant) = nearest(name, names) {
                fault = fault.repair(format!("write \"{meant}\""));
            }
            reader.fault_at("encoding", fault);
        }
        known
    });
    let skip = if reader.has("skip") { reader.whole("skip", 0).unwrap_or(0) } else { 0 };
    TextFormat { delimiter, decimal_comma, encoding, skip }
}

impl Reader<'_> {
    /// One ASCII character between cells, no letter, digit or quote.
    fn text_of_delimiter(&mut self) -> Option<u8> {
        let value = self.value("delimiter")?;
        if let Kind::Text(text) = &value.kind {
            match text.as_bytes() {
                b"tab" => return Some(b'\t'),
                [byte] if byte.is_ascii_punctuation() && !matches!(byte, b'"' | b'.' | b'-') => {
                    return Some(*byte);
                }
                [b'\t'] => return Some(b'\t'),
                _ => {}
            }
        }
        let fault = Fault::wrong("wrong-value", format!("`delimiter` cannot be {}", value.in_words()))
            .expected("one of \",\", \";\", \"|\" or \"tab\"");
        self.fault_at("delimiter", fault);
        None
    }
}

/// The part of a file's name after its last dot, in small letters.
fn ending(file: &str) -> String {
    let name = file.rsplit('/').next().unwrap_or(file);
    name.rsplit_once('.').map(|(_, ending)| ending.to_ascii_lowercase()).unwrap_or_default()
}

/// Refuses formats that are not served yet, and endings that say no format.
pub fn served_format(file: &FileRef, ground: &mut Ground) -> Option<()> {
    let ending = ending(&file.written);
    let fault = match ending.as_str() {
        "csv" | "tsv" => return Some(()),
        "xlsx" | "xls" | "ods" => {
            not_served("reading a workbook", &file.span).repair("save the sheet as CSV and name that file")
        }
        "parquet" | "sqlite" | "sqlite3" | "db" => {
            not_served(&format!("reading .{ending}"), &file.span).repair("export the rows to a CSV file")
        }
        _ => Fault::wrong("unknown-format", format!("the ending of \"{}\" says no format", file.written))
            .at(file.span.place())
            .expected("a file that ends in .csv or .tsv"),
    };
    ground.faults.push(fault);
    None
}

/// The files of a source, each with its pinned hash where there is one.
fn files(table: &Table, ground: &mut Ground) -> Option<Vec<FileRef>> {
    let named = table.get("file")?;
    let items: Vec<&Value> = match &named.kind {
        Kind::List(items) => items.iter().collect(),
        _ => vec![named],
    };
    let pins: Vec<&Value> = match table.get("sha256") {
        Some(Value { kind: Kind::List(items), .. }) => items.iter().collect(),
        Some(value) => vec![value],
        None => Vec::new(),
    };
    if items.is_empty() {
        let fault = Fault::wrong("wrong-value", "`file` names no file").expected("at least one path");
        ground.reader(table, &[]).fault_at("file", fault);
        return None;
    }
    if !pins.is_empty() && pins.len() != items.len() {
        let fault = Fault::wrong(
            "unequal-lengths",
            format!("{}, but {}", many(items.len(), "file"), many(pins.len(), "hash")),
        )
        .expected("one hash for each file, in the same order");
        ground.reader(table, &[]).fault_at("sha256", fault);
        return None;
    }
    let mut files = Vec::new();
    for (at, item) in items.iter().enumerate() {
        let Kind::Text(written) = &item.kind else {
            ground.faults.push(
                Fault::wrong("wrong-type", format!("a file cannot be {}", item.in_words()))
                    .at(item.span.place())
                    .expected("a path in quotes"),
            );
            continue;
        };
        let pinned = pins.get(at).copied();
        let text = pinned.map(|value| match &value.kind {
            Kind::Text(text) => text.as_str(),
            _ => "",
        });
        let sha256 = pin(text, pinned, ground);
        let Some(file) = ground.file(written, sha256, &item.span) else { continue };
        if served_format(&file, ground).is_none() {
            continue;
        }
        if files.iter().any(|other: &FileRef| other.written == file.written) {
            ground.faults.push(
                Fault::wrong("duplicate-name", format!("\"{}\" is named twice", file.written))
                    .at(item.span.place())
                    .expected("every file once; its readings would count twice"),
            );
        }
        files.push(file);
    }
    (files.len() == items.len()).then_some(files)
}

/// `1 file`, `2 files`, `2 hashes`, `2 uncertainties`.
fn many(count: usize, noun: &str) -> String {
    let plural = match noun.strip_suffix('y') {
        _ if count == 1 => return format!("1 {noun}"),
        Some(stem) => format!("{stem}ies"),
        None if noun.ends_with('h') => format!("{noun}es"),
        None => format!("{noun}s"),
    };
    format!("{count} {plural}")
}

/// A pinned hash in small letters; `value` is where it stands.
pub fn pin(text: Option<&str>, value: Option<&Value>, ground: &mut Ground) -> Option<String> {
    let text = text?;
    if is_sha256(text) {
        return Some(text.to_ascii_lowercase());
    }
    if let Some(value) = value {
        ground.faults.push(
            Fault::wrong("bad-hash", "this is not a SHA-256")
                .at(value.span.place())
                .expected("64 hexadecimal digits in quotes, as `sha256sum` prints them"),
        );
    }
    None
}

fn period(reader: &mut Reader<'_>, frame: &Frame) -> Option<PeriodOf> {
    let given: Vec<&str> =
        ["period", "in_period", "year_starts"].into_iter().filter(|key| reader.has(key)).collect();
    if let [first, second, ..] = given.as_slice() {
        let fault = Fault::wrong("either-or", format!("`{first}` and `{second}` both say the period"))
            .expected("one of period, in_period, year_starts")
            .repair(format!("leave `{second}` out, or `{first}`"));
        reader.fault_at(second, fault);
        return None;
    }
    match given.first().copied() {
        Some("period") => reader.text("period").map(PeriodOf::Column),
        Some("in_period") => reader.period("in_period").map(PeriodOf::Always),
        Some(_) => {
            if !reader.has("date") {
                let fault = Fault::wrong("missing-key", "`year_starts` needs `date`, the column of the date")
                    .expected("`date` beside `year_starts`");
                reader.fault_at("year_starts", fault);
                return None;
            }
            let text = reader.text("year_starts")?;
            let day = month_and_day(&text);
            if day.is_none() {
                let fault =
                    Fault::wrong("wrong-value", format!("\"{text}\" is not a month and day of every year"))
                        .expected("month and day, such as \"10-01\"");
                reader.fault_at("year_starts", fault);
            }
            day.map(|(month, day)| PeriodOf::YearOfDate { month, day })
        }
        None => frame.default_period.clone().map(PeriodOf::Always),
    }
}

/// "10-01": a day that every year has.
fn month_and_day(text: &str) -> Option<(i8, i8)> {
    let (month, day) = text.split_once('-')?;
    if (month.len(), day.len()) != (2, 2) {
        return None;
    }
    let (month, day) = (month.parse().ok()?, day.parse().ok()?);
    // 2025 has no 29 February.
    jiff::civil::Date::new(2025, month, day).ok().map(|_| (month, day))
}

fn series(reader: &mut Reader<'_>, frame: &Frame) -> Option<SeriesOf> {
    match (reader.has("series"), reader.has("in_series")) {
        (true, true) => {
            let fault = Fault::wrong("either-or", "`series` and `in_series` both say the series")
                .expected("one of series, in_series")
                .repair("leave one of the two out");
            reader.fault_at("in_series", fault);
            None
        }
        (true, false) => reader.text("series").map(SeriesOf::Column),
        (false, true) => reader.text("in_series").map(|name| SeriesOf::Always(name.trim().to_string())),
        (false, false) => frame.default_series.clone().map(SeriesOf::Always),
    }
}

fn coverage(reader: &mut Reader<'_>) -> Coverage {
    let Some(value) = reader.value("coverage_factor") else { return Coverage::Factor(1.0) };
    match &value.kind {
        Kind::Number { value, .. } if *value > 0.0 && value.is_finite() => return Coverage::Factor(*value),
        Kind::Text(column) if !column.trim().is_empty() => return Coverage::Column(column.clone()),
        _ => {
            reader.refuse::<()>("coverage_factor");
        }
    }
    Coverage::Factor(1.0)
}

fn marks(table: Option<&Table>, ground: &mut Ground) -> Marks {
    let usual = |mark: &str| vec![mark.to_string()];
    let mut marks = Marks { below: usual("<"), above: usual(">"), column: None, limit: None };
    let Some(table) = table else { return marks };
    let mut reader = ground.reader(table, language::MARKS);
    for key in ["below", "above"] {
        let Some(list) = reader.text_list(key) else { continue };
        if list.iter().any(|mark| mark.trim().is_empty()) {
            let fault = Fault::wrong("wrong-value", "a mark cannot be empty").expected("marks such as \"<\"");
            reader.fault_at(key, fault);
        }
        match key {
            "below" => marks.below = list,
            _ => marks.above = list,
        }
    }
    if let Some(both) = marks.below.iter().find(|mark| marks.above.contains(mark)) {
        let fault = Fault::wrong("either-or", format!("the mark \"{both}\" would mean below and above"))
            .expected("every mark with one meaning");
        reader.fault_at(if reader.has("above") { "above" } else { "below" }, fault);
    }
    marks.column = reader.text("column");
    marks.limit = reader.value("limit").and_then(|value| match &value.kind {
        Kind::Number { value, .. } if value.is_finite() => Some(NumberOrColumn::Number(*value)),
        Kind::Text(column) if !column.trim().is_empty() => Some(NumberOrColumn::Column(column.clone())),
        _ => reader.refuse("limit"),
    });
    reader.finish();
    marks
}

/// Readings in the spec: the text of each as written.
fn values(reader: &mut Reader<'_>) -> Option<Whence> {
    let Some(Kind::List(items)) = reader.value("values").map(|value| &value.kind) else {
        return reader.refuse("values");
    };
    if items.is_empty() {
        let fault = Fault::wrong("wrong-value", "`values` holds no reading").expected("at least one reading");
        reader.fault_at("values", fault);
        return None;
    }
    let mut values = Vec::with_capacity(items.len());
    for item in items {
        match &item.kind {
            Kind::Number { written, value, .. } if value.is_finite() => {
                values.push((written.clone(), item.span.clone()));
            }
            Kind::Text(text) => values.push((text.clone(), item.span.clone())),
            _ => reader.faults.push(
                Fault::wrong("wrong-type", format!("a reading cannot be {}", item.in_words()))
                    .at(item.span.place())
                    .expected("a number, or a text such as \"<0.5\""),
            ),
        }
    }
    let uncertainties = reader.number_list("uncertainties");
    if let Some(list) = &uncertainties {
        if list.len() != items.len() {
            let message = format!("{}, but {}", many(items.len(), "value"), many(list.len(), "uncertainty"));
            let fault =
                Fault::wrong("unequal-lengths", message).expected("one for each value, in the same order");
            reader.fault_at("uncertainties", fault);
        }
        if let Some(wrong) = list.iter().find(|u| **u <= 0.0) {
            let fault = Fault::wrong("out-of-range", format!("an uncertainty cannot be {wrong}"))
                .expected("numbers above 0");
            reader.fault_at("uncertainties", fault);
        }
    }
    Some(Whence::Values { values, uncertainties })
}

/// `where`: columns, each with the texts that serve.
fn cells(reader: &mut Reader<'_>, key: &str) -> Option<Vec<(String, Vec<String>)>> {
    let table = reader.table(key)?;
    let mut columns = Vec::new();
    for entry in &table.entries {
        let items: Vec<&Value> = match &entry.value.kind {
            Kind::List(items) => items.iter().collect(),
            _ => vec![&entry.value],
        };
        let texts: Vec<String> = items.iter().filter_map(|item| item.as_plain_text()).collect();
        if texts.is_empty() || texts.len() < items.len() {
            reader.faults.push(
                Fault::wrong(
                    "wrong-type",
                    format!("a cell of `{}` cannot be {}", entry.key, entry.value.in_words()),
                )
                .at(entry.value.span.place())
                .expected("a text, a number or a date, or a list of them"),
            );
        }
        columns.push((entry.key.clone(), texts));
    }
    Some(columns)
}

pub fn exclude(table: &Table, ground: &mut Ground) -> Option<Exclude> {
    let mut reader = ground.reader(table, language::EXCLUDE);
    let rows_where = cells(&mut reader, "where");
    if rows_where.as_ref().is_some_and(Vec::is_empty) {
        let fault = Fault::wrong("wrong-value", "an empty `where` would leave out every row")
            .expected("at least one column and cell");
        reader.fault_at("where", fault);
    }
    let rows = reader.count("rows").unwrap_or(1);
    let (reason, by, on) = (reader.text("reason"), reader.text("by"), reader.date("on"));
    reader.finish();
    let span = table.span.clone();
    Some(Exclude { rows_where: rows_where?, rows, reason: reason?, by: by?, on: on?, span })
}
