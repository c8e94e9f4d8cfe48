//! The plan of a whole spec: each section by its own module, then what concerns several of them.

use crate::diagnostics::{Fault, Faults, Outcome};
use crate::plan::{
    FileRef, OverridesFile, Plan, SpecFile, about, compared, linked, questions, series, sources,
};
use crate::spec::keys::{Key, Takes, nearest};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::spec::table::{Kind, Span, SpecText, Table, Value};
use std::path::PathBuf;
use std::sync::Arc;

/// What the making of a plan stands on: where the spec lies, and all faults found so far.
pub struct Ground {
    pub folder: PathBuf,
    pub spec_text: Arc<SpecText>,
    /// The base's folder as seen from the spec, with its `/`.
    pub base_folder: String,
    pub spec_stem: String,
    pub faults: Faults,
}

impl Ground {
    pub fn reader<'a>(&'a mut self, table: &'a Table, keys: &'static [Key]) -> Reader<'a> {
        Reader::new(table, keys, &mut self.faults)
    }

    /// A file that the spec names. Paths are relative to the file in which they stand; what is
    /// remembered is relative to the spec.
    pub fn file(&mut self, written: &str, sha256: Option<String>, span: &Span) -> Option<FileRef> {
        if let Err(fault) = usable_name(written) {
            self.faults.push(fault.at(span.place()));
            return None;
        }
        let of_base = !Arc::ptr_eq(&span.source, &self.spec_text) && !written.starts_with('/');
        let written = if of_base {
            straightened(&format!("{}{written}", self.base_folder))
        } else {
            written.to_string()
        };
        let path = self.folder.join(&written);
        Some(FileRef { written, path, sha256, span: span.clone() })
    }
}

/// Refuses names that would break a line of SHA256SUMS, or that name nothing.
pub fn usable_name(written: &str) -> Result<(), Fault> {
    let name = written.trim();
    if name.is_empty() || name.ends_with('/') || name != written {
        return Err(Fault::wrong("bad-file-name", format!("\"{}\" names no file", written.escape_debug()))
            .expected("the path of a file, relative to the spec, without spaces about it"));
    }
    if written.contains('\\') {
        return Err(Fault::wrong("bad-file-name", format!("\"{written}\" holds a backslash"))
            .expected("folders parted by /, on every system")
            .repair(format!("write \"{}\"", written.replace('\\', "/"))));
    }
    if written.chars().any(char::is_control) {
        let message = format!("\"{}\" holds a control character", written.escape_debug());
        return Err(
            Fault::wrong("bad-file-name", message).expected("a name of one line of visible characters")
        );
    }
    Ok(())
}

/// A path without `./`, and without `folder/..` where that can be told from the text.
fn straightened(path: &str) -> String {
    let mut parts: Vec<&str> = Vec::new();
    for part in path.split('/') {
        match (part, parts.last()) {
            (".", _) | ("", _) => {}
            ("..", Some(last)) if *last != ".." => {
                parts.pop();
            }
            _ => parts.push(part),
        }
    }
    parts.join("/")
}

/// The plan of a spec's tables, or everything that is wrong with them.
pub fn plan(root: &Table, mut ground: Ground, files: Vec<SpecFile>) -> Outcome<Plan> {
    check_top(root, &mut ground);
    let section = |name: &str| root.table(name);

    let review = section("review").and_then(|table| about::review(table, &mut ground));
    let quantity = section("quantity").and_then(|table| about::quantity(table, &mut ground));
    let actions = root.tables("action").into_iter().filter_map(|t| about::action(t, &mut ground)).collect();
    let limits = compared::limits(root, &mut ground);
    let scale = quantity.as_ref().map(|quantity| quantity.scale).unwrap_or_default();
    let frame = sources::Frame {
        default_period: review.as_ref().map(|review| review.period.clone()),
        default_series: quantity.as_ref().map(|quantity| quantity.name.clone()),
        scale,
    };
    let mut found = Vec::new();
    for table in root.tables("readings") {
        found.extend(sources::readings(table, &frame, &mut ground));
    }
    for table in root.tables("summaries") {
        found.extend(sources::summaries(table, &frame, &mut ground));
    }
    let excludes =
        root.tables("exclude").into_iter().filter_map(|t| sources::exclude(t, &mut ground)).collect();
    let events = root.tables("event").into_iter().filter_map(|t| about::event(t, &mut ground)).collect();
    let period = review.as_ref().map(|review| &review.period);
    let history =
        section("history").map(|table| about::history(table, period, &mut ground)).unwrap_or_default();
    let (prior, otherwise) = match section("prior") {
        Some(table) => {
            let (prior, otherwise) = series::without_otherwise(table, &mut ground);
            (Some(prior), otherwise)
        }
        None => (None, None),
    };
    let general_bias = quantity.as_ref().and_then(|quantity| quantity.bias.clone());
    let alternatives = series::alternatives(root.tables("alternative"), &mut ground);
    let series = series::all(root, &limits, general_bias.as_ref(), &mut ground);
    let overrides = section("overrides").and_then(|table| overrides(table, &mut ground));
    let questions = questions::all(root.tables("question"), &limits, &mut ground);
    let report = about::report(section("report"), &mut ground);

    let links = review.iter().flat_map(|review| review.previous.iter().chain(&review.supersedes));
    let priors = prior.iter().chain(&otherwise);
    let priors = priors.chain(alternatives.iter().filter_map(|alternative| alternative.prior.as_ref()));
    let own_priors = series.values().flat_map(|series| series.prior.iter().chain(&series.otherwise));
    let linked = linked::all(links, priors.chain(own_priors), &mut ground);

    let mut faults = ground.faults;
    in_order_of_text(&mut faults, &files);
    let within = section("within").cloned();
    let (Some(review), Some(quantity), Some(within), Some(prior), Some(report)) =
        (review, quantity, within, prior, report)
    else {
        return Err(faults);
    };
    faults.or(Plan {
        review,
        quantity,
        limits,
        sources: found,
        excludes,
        events,
        history,
        within,
        prior,
        otherwise,
        alternatives,
        series,
        overrides,
        questions,
        report,
        spec_files: files,
        actions,
        linked,
    })
}

/// The spec's faults before the base's, each from the top down. Of several at one place the first
/// found is kept: the others follow from it.
pub fn in_order_of_text(faults: &mut Faults, files: &[SpecFile]) {
    let rank = |fault: &Fault| {
        let place = fault.place.as_ref();
        let file = place.and_then(|place| files.iter().position(|file| file.name == place.file));
        (file.unwrap_or(files.len()), place.map_or((0, 0), |place| (place.line, place.column)))
    };
    faults.0.sort_by_key(rank);
    let unread = |code: &str| matches!(code, "not-decimal" | "not-a-day" | "too-large");
    faults
        .0
        .dedup_by(|later, first| unread(first.code) && first.place.is_some() && later.place == first.place);
}

/// Known sections, the language's version, and sections that must be tables.
fn check_top(root: &Table, ground: &mut Ground) {
    let mut reader = ground.reader(root, language::TOP);
    if let Some(version) = reader.count("language")
        && i64::try_from(version) != Ok(language::VERSION)
    {
        let known = language::VERSION;
        let fault =
            Fault::wrong("unknown-language", format!("this program does not read language {version}"))
                .expected(format!("language = {known}"))
                .repair("use a newer program, or leave the key out and mend what is refused then");
        reader.fault_at("language", fault);
    }
    for key in language::TOP {
        match key.takes {
            Takes::Table => drop(reader.table(key.name)),
            Takes::Tables => drop(reader.tables(key.name)),
            _ => {}
        }
    }
    let mut meant = Vec::new();
    for entry in root.entries.iter().filter(|entry| !language::TOP.iter().any(|key| key.name == entry.key)) {
        meant.extend(nearest(&entry.key, language::TOP.iter().map(|key| key.name)));
        reader.faults.push(stray(entry));
    }
    let missing = |key: &&Key| key.required && root.get(key.name).is_none() && !meant.contains(&key.name);
    for key in language::TOP.iter().filter(missing) {
        let example = match key.name {
            "prior" => "add [prior]; from = \"flat\" lets the readings speak alone",
            "within" => "add [within]; from = \"readings\" takes it from this period's readings",
            _ => "add it",
        };
        reader.faults.push(
            Fault::wrong("missing-table", format!("the spec lacks [{}]: {}", key.name, key.help))
                .at(crate::diagnostics::Place {
                    file: root.span.source.file.clone(),
                    line: 1,
                    column: 1,
                    excerpt: String::new(),
                    mark: 0..0,
                })
                .repair(example),
        );
    }
}

/// An unknown key at the top: perhaps a section's name with a slip, perhaps a key that belongs into
/// a section.
fn stray(entry: &crate::spec::table::Entry) -> Fault {
    let is_section = matches!(&entry.value.kind, Kind::Table(_) | Kind::List(_));
    let names: Vec<&str> = language::TOP.iter().map(|key| key.name).collect();
    let home = language::SECTIONS
        .iter()
        .find(|(_, keys)| keys.iter().copied().flatten().any(|key| key.name == entry.key))
        .map(|(section, _)| section);
    let what = if is_section { format!("[{}]", entry.key) } else { format!("`{}`", entry.key) };
    let fault =
        Fault::wrong("unknown-key", format!("{what} is not a part of a spec")).at(entry.key_span.place());
    match (nearest(&entry.key, names.iter().copied()), home) {
        (Some(meant), _) => fault.repair(format!("write `{meant}`")),
        (None, Some(home)) => fault.repair(format!("`{}` is a key of {home}; move it there", entry.key)),
        (None, None) => fault.expected(format!("one of {}", names.join(", "))),
    }
}

/// `[overrides]`.
fn overrides(table: &Table, ground: &mut Ground) -> Option<OverridesFile> {
    let mut reader = ground.reader(table, language::OVERRIDES);
    let written = reader.text("file");
    let pin = reader.text("sha256");
    let series = reader.text("series");
    reader.table("columns");
    let format = sources::text_format(&mut reader, written.as_deref());
    reader.finish();
    let mut columns = Vec::new();
    for entry in table.table("columns").iter().flat_map(|table| &table.entries) {
        let target_known = series::is_target(&entry.key);
        match &entry.value.kind {
            Kind::Text(column) if target_known => {
                columns.push((entry.key.clone(), column.clone(), entry.value.span.clone()));
            }
            Kind::Text(_) => ground.faults.push(
                Fault::wrong("unknown-key", format!("`{}` is nothing that a series can override", entry.key))
                    .at(entry.key_span.place())
                    .expected("label, planned, limit.NAME.value (lower, upper), prior.KEY, within.KEY, bias.sd or bias.basis"),
            ),
            Kind::Table(_) => ground.faults.push(
                Fault::wrong("wrong-type", format!("`{}` is a table here", entry.key))
                    .at(entry.key_span.place())
                    .expected("one column for one key")
                    .repair("put the whole key in quotes, as in \"limit.tolerance.upper\" = \"mpe\""),
            ),
            _ => ground.faults.push(
                Fault::wrong("wrong-type", format!("a column's name cannot be {}", entry.value.in_words()))
                    .at(entry.value.span.place())
                    .expected("a column's name in quotes"),
            ),
        }
    }
    let sha256 = sources::pin(pin.as_deref(), table.get("sha256"), ground);
    let span = table.get("file").map_or(&table.span, |value| &value.span).clone();
    let file = ground.file(&written?, sha256, &span)?;
    sources::served_format(&file, ground)?;
    Some(OverridesFile {
        file,
        series: series?,
        columns,
        delimiter: format.delimiter,
        decimal_comma: format.decimal_comma,
        encoding: format.encoding,
        skip: format.skip,
    })
}

/// A name that must be known: refuses it with the nearest that is.
pub fn unknown_name(what: &str, written: &str, known: &[&str], span: &Span) -> Fault {
    let fault = Fault::wrong("unknown-name", format!("there is no {what} \"{written}\"")).at(span.place());
    match (nearest(written, known.iter().copied()), known) {
        (Some(meant), _) => fault.repair(format!("write \"{meant}\"")),
        (None, []) => fault.expected(format!("a {what} that the spec holds; it holds none")),
        (None, known) => fault.expected(format!("one of {}", known.join(", "))),
    }
}

/// Tables by name, such as `[limit.guideline]`; a key that is no table is noted.
pub fn named_tables<'a>(root: &'a Table, key: &str, ground: &mut Ground) -> Vec<(&'a str, &'a Table)> {
    let Some(value) = root.get(key) else { return Vec::new() };
    let mut named = Vec::new();
    let refusal = |value: &Value| {
        Fault::wrong(
            "wrong-type",
            format!("`{key}` holds tables by their name, and this is {}", value.in_words()),
        )
        .at(value.span.place())
        .expected(if key == "limit" {
            "a table such as [limit.guideline], with value = 50 in it"
        } else {
            "a table such as [series.\"A-1\"]"
        })
    };
    match &value.kind {
        Kind::Table(table) => {
            for entry in &table.entries {
                match &entry.value.kind {
                    Kind::Table(table) => named.push((entry.key.as_str(), table)),
                    _ => ground.faults.push(refusal(&entry.value)),
                }
            }
        }
        _ => ground.faults.push(refusal(value)),
    }
    named
}
