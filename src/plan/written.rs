//! The plan as TOML, with every default filled in: what `plan.toml` of a review says. It is itself a
//! spec: read again beside the spec, it makes the same plan.

use crate::plan::toml_text::{TomlText, bounds, inline_table, key, list, number, period, text, value};
use crate::plan::{
    AppliesTo, Bias, Condition, Coverage, DateOrder, Detail, FileRef, Limit, Link, Marks, NumberOrColumn,
    PeriodOf, Plan, QuestionPlan, SeriesOf, Source, SourceKind, SummaryRow, TemplateChoice, Threshold,
    Whence, questions,
};
use crate::spec::language;
use crate::spec::table::Table;

/// Keys that later stages filled in: the table's path (`prior`, `within`, `question.over`,
/// `alternative.sceptical.prior`, `series.SF-07.prior`) with keys and their values as TOML.
pub type Filled = [(String, Vec<(String, String)>)];

/// The whole plan. Keys of `filled` that a table already has are left as they stand.
pub fn plan_toml(plan: &Plan, filled: &Filled) -> String {
    let mut out = TomlText::default();
    out.comment("The plan: the spec with every default filled in. Paths are relative to the spec.");
    out.line("language", language::VERSION.to_string());
    review(plan, &mut out);
    for action in &plan.actions {
        out.head("[[action]]");
        out.line("what", text(&action.what));
        out.some("owner", action.owner.as_deref().map(text));
        out.some("due", action.due.map(|date| date.to_string()));
        out.line("state", text(&action.state));
        out.some("set_by", action.set_by.as_deref().map(text));
    }
    quantity(plan, &mut out);
    for limit in &plan.limits {
        one_limit(limit, &mut out);
    }
    for one in &plan.sources {
        source(one, &mut out);
    }
    for exclude in &plan.excludes {
        out.head("[[exclude]]");
        out.line("where", cells(&exclude.rows_where));
        out.line("rows", exclude.rows.to_string());
        out.line("reason", text(&exclude.reason));
        out.line("by", text(&exclude.by));
        out.line("on", exclude.on.to_string());
    }
    for event in &plan.events {
        out.head("[[event]]");
        out.line("date", event.date.to_string());
        out.line("what", text(&event.what));
        out.some("kind", event.kind.as_deref().map(text));
        out.some("series", event.series.as_deref().map(text));
    }
    history(plan, filled, &mut out);
    out.head("[within]");
    table(&plan.within, &[], extra(filled, "within"), &mut out);
    out.head("[prior]");
    table(&plan.prior, &[], extra(filled, "prior"), &mut out);
    out.some("otherwise", plan.otherwise.as_ref().map(|table| inline_table(table, &[])));
    for alternative in &plan.alternatives {
        out.head("[[alternative]]");
        out.line("id", text(&alternative.id));
        for (name, table) in [("prior", &alternative.prior), ("within", &alternative.within)] {
            let more = extra(filled, &format!("alternative.{}.{name}", alternative.id));
            out.some(name, table.as_ref().map(|table| inline_table(table, more)));
        }
        out.some("scale", alternative.scale.map(|scale| text(scale.word())));
    }
    for name in plan.series.keys() {
        series(plan, name, filled, &mut out);
    }
    overrides(plan, &mut out);
    for one in &plan.questions {
        question(one, filled, &mut out);
    }
    report(plan, &mut out);
    out.into_text()
}

fn extra<'a>(filled: &'a Filled, path: &str) -> &'a [(String, String)] {
    filled.iter().find(|(known, _)| known == path).map_or(&[], |(_, keys)| keys.as_slice())
}

/// The entries of a table as written, but for some, and what was filled in beside them.
fn table(table: &Table, but: &[&str], filled: &[(String, String)], out: &mut TomlText) {
    for entry in table.entries.iter().filter(|entry| !but.contains(&entry.key.as_str())) {
        out.line(&entry.key, value(&entry.value));
    }
    for (name, value) in filled.iter().filter(|(name, _)| table.get(name).is_none()) {
        out.line(name, value.clone());
    }
}

fn review(plan: &Plan, out: &mut TomlText) {
    let review = &plan.review;
    out.head("[review]");
    out.line("title", text(&review.title));
    out.line("id", text(&review.id));
    out.line("period", period(&review.period));
    out.line("date", review.date.to_string());
    out.line("status", text(review.status.word()));
    out.some("until", review.until.map(|date| date.to_string()));
    out.some("purpose", review.purpose.as_deref().map(text));
    out.some("previous", review.previous.as_ref().map(link));
    out.some("supersedes", review.supersedes.as_ref().map(link));
    if !review.particulars.is_empty() {
        out.head("[review.particulars]");
        for (name, particular) in &review.particulars {
            out.line(name, text(particular));
        }
    }
    if let Some(opinion) = &review.interpretation {
        out.head("[review.interpretation]");
        out.some("by", opinion.by.as_deref().map(text));
        out.line("text", text(&opinion.text));
    }
    for signature in &review.sign_off {
        out.head("[[review.sign_off]]");
        out.line("role", text(&signature.role));
        out.some("name", signature.name.as_deref().map(text));
        out.some("meaning", signature.meaning.as_deref().map(text));
        out.some("on", signature.on.map(|date| date.to_string()));
    }
}

fn link(link: &Link) -> String {
    let mut parts = vec![format!("review = {}", text(&link.written))];
    parts.extend(link.stamp.as_deref().map(|stamp| format!("stamp = {}", text(stamp))));
    parts.extend(link.reason.as_deref().map(|reason| format!("reason = {}", text(reason))));
    format!("{{ {} }}", parts.join(", "))
}

fn quantity(plan: &Plan, out: &mut TomlText) {
    let quantity = &plan.quantity;
    out.head("[quantity]");
    out.line("name", text(&quantity.name));
    out.line("unit", text(&quantity.unit));
    out.line("scale", text(quantity.scale.word()));
    out.some("method", quantity.method.as_deref().map(text));
    out.some("step", quantity.step.map(|step| number(step.get())));
    out.some("bias", quantity.bias.as_ref().map(bias));
}

fn bias(bias: &Bias) -> String {
    format!("{{ sd = {}, basis = {} }}", number(bias.sd.get()), text(&bias.basis))
}

fn one_limit(limit: &Limit, out: &mut TomlText) {
    out.head(&format!("[limit.{}]", key(&limit.name)));
    for (name, value) in bounds(limit.bounds, limit.decimals) {
        out.line(name, value);
    }
    out.line("basis", text(&limit.basis));
    let applies_to = match limit.applies_to {
        AppliesTo::EachReading => "each reading",
        AppliesTo::Level => "level",
        AppliesTo::Percentile => "percentile",
    };
    out.line("applies_to", text(applies_to));
}

fn source(source: &Source, out: &mut TomlText) {
    let in_files = matches!(source.from, Whence::Files(_));
    out.head(match source.what {
        SourceKind::Readings { .. } => "[[readings]]",
        SourceKind::Summaries(_) => "[[summaries]]",
    });
    match &source.from {
        Whence::Files(named) => files(named, out),
        Whence::Values { values, uncertainties } => {
            out.line("values", list(values.iter().map(|(written, _)| reading(written))));
            out.some("uncertainties", uncertainties.as_ref().map(|all| list(all.iter().map(|u| number(*u)))));
        }
        Whence::Rows(rows) => out.long_list("rows", rows.iter().map(summary_row)),
    }
    if !source.rows_where.is_empty() {
        out.line("where", cells(&source.rows_where));
    }
    match &source.what {
        SourceKind::Readings { value, uncertainty, coverage, replicates, unit, marks, planned } => {
            if in_files {
                out.line("value", text(value));
            }
            out.some("uncertainty", uncertainty.as_deref().map(text));
            let coverage = match coverage {
                Coverage::Factor(factor) => number(*factor),
                Coverage::Column(column) => text(column),
            };
            out.line("coverage_factor", coverage);
            out.some("replicates", replicates.as_deref().map(text));
            out.some("unit", unit.as_deref().map(text));
            out.line("marks", marks_text(marks));
            out.some("planned", planned.map(|planned| planned.to_string()));
        }
        SourceKind::Summaries(columns) => {
            let named = [
                ("n", &columns.n),
                ("mean", &columns.mean),
                ("sd", &columns.sd),
                ("uncertainty", &columns.uncertainty),
                ("log_mean", &columns.log_mean),
                ("log_sd", &columns.log_sd),
                ("geometric_mean", &columns.geometric_mean),
                ("geometric_sd", &columns.geometric_sd),
            ];
            for (name, column) in named {
                out.some(name, column.as_deref().map(text));
            }
        }
    }
    match &source.period {
        PeriodOf::Column(column) => out.line("period", text(column)),
        PeriodOf::Always(always) => out.line("in_period", period(always)),
        PeriodOf::YearOfDate { month, day } => out.line("year_starts", text(&format!("{month:02}-{day:02}"))),
    }
    match &source.series {
        SeriesOf::Column(column) => out.line("series", text(column)),
        SeriesOf::Always(name) => out.line("in_series", text(name)),
    }
    if let Some(date) = &source.date {
        out.line("date", text(date));
        let order = match source.date_order {
            DateOrder::YearMonthDay => "y-m-d",
            DateOrder::DayMonthYear => "d.m.y",
            DateOrder::MonthDayYear => "m/d/y",
        };
        out.line("date_order", text(order));
    }
    out.some("id", source.id.as_deref().map(text));
    if in_files {
        out.line("missing", list(source.missing.iter().map(|cell| text(cell))));
        layout(source.delimiter, source.decimal_comma, source.encoding.as_deref(), source.skip, out);
    }
}

fn layout(delimiter: Option<u8>, decimal_comma: bool, encoding: Option<&str>, skip: u64, out: &mut TomlText) {
    out.some(
        "delimiter",
        delimiter.map(|byte| if byte == b'\t' { text("tab") } else { text(&char::from(byte).to_string()) }),
    );
    out.line("decimal", text(if decimal_comma { "," } else { "." }));
    out.some("encoding", encoding.map(text));
    out.line("skip", skip.to_string());
}

fn files(files: &[FileRef], out: &mut TomlText) {
    match files {
        [file] => {
            out.line("file", text(&file.written));
            out.some("sha256", file.sha256.as_deref().map(text));
        }
        files => {
            out.long_list("file", files.iter().map(|file| text(&file.written)));
            let pins: Vec<String> =
                files.iter().filter_map(|file| file.sha256.as_deref()).map(text).collect();
            if pins.len() == files.len() {
                out.long_list("sha256", pins);
            }
        }
    }
}

/// A reading in the spec: a number where it is one as TOML writes it, else a text.
fn reading(written: &str) -> String {
    let digits = |part: &str| !part.is_empty() && part.bytes().all(|b| b.is_ascii_digit());
    let unsigned = written.strip_prefix('-').unwrap_or(written);
    let (whole, fraction) = match unsigned.split_once('.') {
        Some((whole, fraction)) => (whole, Some(fraction)),
        None => (unsigned, None),
    };
    let plain = digits(whole) && (whole == "0" || !whole.starts_with('0')) && fraction.is_none_or(digits);
    if plain { written.to_string() } else { text(written) }
}

fn summary_row(row: &SummaryRow) -> String {
    let mut parts = Vec::new();
    parts.extend(row.series.as_deref().map(|name| format!("series = {}", text(name))));
    parts.extend(row.period.as_ref().map(|name| format!("period = {}", period(name))));
    parts.extend(row.n.map(|n| format!("n = {n}")));
    let figures = [
        ("mean", row.mean),
        ("sd", row.sd),
        ("uncertainty", row.uncertainty),
        ("log_mean", row.log_mean),
        ("log_sd", row.log_sd),
        ("geometric_mean", row.geometric_mean),
        ("geometric_sd", row.geometric_sd),
    ];
    parts
        .extend(figures.iter().filter_map(|(name, figure)| Some(format!("{name} = {}", number((*figure)?)))));
    format!("{{ {} }}", parts.join(", "))
}

fn marks_text(marks: &Marks) -> String {
    let texts = |marks: &[String]| list(marks.iter().map(|mark| text(mark)));
    let mut parts =
        vec![format!("below = {}", texts(&marks.below)), format!("above = {}", texts(&marks.above))];
    parts.extend(marks.column.as_deref().map(|column| format!("column = {}", text(column))));
    parts.extend(marks.limit.as_ref().map(|limit| match limit {
        NumberOrColumn::Number(limit) => format!("limit = {}", number(*limit)),
        NumberOrColumn::Column(column) => format!("limit = {}", text(column)),
    }));
    format!("{{ {} }}", parts.join(", "))
}

fn cells(columns: &[(String, Vec<String>)]) -> String {
    let columns: Vec<String> = columns
        .iter()
        .map(|(column, texts)| match texts.as_slice() {
            [one] => format!("{} = {}", key(column), text(one)),
            several => format!("{} = {}", key(column), list(several.iter().map(|one| text(one)))),
        })
        .collect();
    format!("{{ {} }}", columns.join(", "))
}

fn history(plan: &Plan, filled: &Filled, out: &mut TomlText) {
    let history = &plan.history;
    out.head("[history]");
    out.some("first", history.first.as_ref().map(period));
    out.some("last", history.last.as_ref().map(period));
    out.some("order", history.order.as_ref().map(|order| list(order.iter().map(period))));
    let left_out = history.leave_out.iter();
    let rows = left_out.map(|(left, why)| format!("{{ period = {}, reason = {} }}", period(left), text(why)));
    if !history.leave_out.is_empty() {
        out.long_list("leave_out", rows);
    }
    for (name, value) in extra(filled, "history") {
        out.line(name, value.clone());
    }
}

fn series(plan: &Plan, name: &str, filled: &Filled, out: &mut TomlText) {
    let Some(own) = plan.series.get(name) else { return };
    let head = format!("series.{}", key(name));
    out.head(&format!("[{head}]"));
    out.some("label", own.label.as_deref().map(text));
    out.some("planned", own.planned.map(|planned| planned.to_string()));
    out.some("bias", own.bias.as_ref().map(bias));
    for (part, general) in [("prior", plan.prior_table(name)), ("within", plan.within_table(name))] {
        let written = if part == "prior" { own.prior.is_some() } else { own.within.is_some() };
        if !written {
            continue;
        }
        // Whole, so that this series can be read without the general table.
        out.head(&format!("[{head}.{part}]"));
        table(&general, &[], extra(filled, &format!("series.{name}.{part}")), out);
        if part == "prior" {
            out.some("otherwise", plan.otherwise_table(name).map(|table| inline_table(table, &[])));
        }
    }
    for (limit, own) in &own.limits {
        out.head(&format!("[{head}.limit.{}]", key(limit)));
        let decimals = plan.limit(limit).map_or(0, |limit| limit.decimals);
        for (name, value) in bounds(*own, decimals) {
            out.line(name, value);
        }
    }
}

fn overrides(plan: &Plan, out: &mut TomlText) {
    let Some(overrides) = &plan.overrides else { return };
    out.head("[overrides]");
    files(std::slice::from_ref(&overrides.file), out);
    out.line("series", text(&overrides.series));
    let columns =
        overrides.columns.iter().map(|(sets, column, _)| format!("{} = {}", key(sets), text(column)));
    out.line("columns", format!("{{ {} }}", columns.collect::<Vec<_>>().join(", ")));
    let encoding = overrides.encoding.as_deref();
    layout(overrides.delimiter, overrides.decimal_comma, encoding, overrides.skip, out);
}

fn question(question: &QuestionPlan, filled: &Filled, out: &mut TomlText) {
    out.head("[[question]]");
    let common = ["id", "ask", "say", "only", "rule"];
    out.line("id", text(&question.id));
    out.line("ask", text(&question.ask));
    out.some("say", question.say.as_deref().map(text));
    out.some("only", question.only.as_ref().map(|names| list(names.iter().map(|name| text(name)))));
    table(&question.table, &common, extra(filled, &format!("question.{}", question.id)), out);
    let Some(rule) = &question.rule else { return };
    out.head("[question.rule]");
    out.some("agreed", rule.agreed.map(|date| date.to_string()));
    out.some("agreed_by", rule.agreed_by.as_deref().map(text));
    out.line("hold_on", list(rule.hold_on.iter().map(|check| text(check))));
    let verdicts = rule.verdicts.iter().map(|verdict| {
        let mut parts = vec![format!("say = {}", text(&verdict.say))];
        parts.extend(verdict.conditions.iter().map(|(condition, threshold)| {
            let threshold = match threshold {
                Threshold::Number(value) => number(*value),
                Threshold::Limit(name) => text(name),
            };
            format!("{} = {threshold}", condition_key(*condition))
        }));
        parts.push(format!("fail = {}", verdict.fail));
        format!("{{ {} }}", parts.join(", "))
    });
    out.long_list("verdicts", verdicts);
}

fn condition_key(condition: Condition) -> &'static str {
    questions::CONDITIONS.iter().find(|(_, known)| *known == condition).map_or("", |(name, _)| name)
}

fn report(plan: &Plan, out: &mut TomlText) {
    let report = &plan.report;
    out.head("[report]");
    out.line(
        "template",
        match &report.template {
            TemplateChoice::BuiltIn(name) => text(name),
            TemplateChoice::Own(file) => text(&file.written),
        },
    );
    let formats = [("md", report.markdown), ("html", report.html)];
    out.line("formats", list(formats.iter().filter(|(_, wanted)| *wanted).map(|(name, _)| text(name))));
    let detail = match report.detail {
        Detail::All => "all",
        Detail::Flagged => "flagged",
        Detail::None => "none",
    };
    out.line("detail", text(detail));
    out.line("inputs", text(if report.inputs_copied { "copied" } else { "hashed" }));
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::diagnostics::Fault;
    use crate::diagnostics::render::{Look, render};
    use crate::plan::load;
    use crate::spec::table::Kind;
    use std::path::Path;

    fn read(path: &Path) -> Result<Vec<u8>, Fault> {
        std::fs::read(path).map_err(|error| Fault::unreadable("file", format!("{}: {error}", path.display())))
    }

    /// Order of keys, and which files the spec was read from, are not what a plan means.
    fn stripped(mut plan: Plan) -> Plan {
        fn sorted(table: &mut Table) {
            table.name = String::new();
            table.entries.sort_by(|a, b| a.key.cmp(&b.key));
            for entry in &mut table.entries {
                if let Kind::Table(inner) = &mut entry.value.kind {
                    sorted(inner);
                }
            }
        }
        plan.spec_files.clear();
        let names: Vec<String> = plan.series.keys().cloned().collect();
        for name in names {
            let (prior, within) = (plan.prior_table(&name), plan.within_table(&name));
            let otherwise = plan.otherwise_table(&name).cloned();
            if let Some(own) = plan.series.get_mut(&name) {
                own.otherwise = otherwise.filter(|_| own.prior.is_some());
                own.prior = own.prior.take().map(|_| prior);
                own.within = own.within.take().map(|_| within);
                own.prior.iter_mut().chain(&mut own.within).for_each(sorted);
            }
        }
        for question in &mut plan.questions {
            // The rule is compared as a rule.
            question.table.entries.retain(|entry| entry.key != "rule");
            sorted(&mut question.table);
        }
        plan
    }

    #[test]
    fn a_written_plan_is_a_spec_that_makes_the_same_plan() {
        let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("specs");
        let mut count = 0;
        for entry in std::fs::read_dir(folder).unwrap() {
            let path = entry.unwrap().path();
            if path.extension().is_none_or(|ending| ending != "toml") {
                continue;
            }
            let name = path.file_name().unwrap().to_string_lossy().into_owned();
            let plan = load(&path, &name, &read).unwrap();
            let written = plan_toml(&plan, &[]);
            let again = match load(&path, "plan.toml", &|_| Ok(written.clone().into_bytes())) {
                Ok(again) => again,
                Err(faults) => panic!("{name}\n{written}\n{}", render(&faults, Look::default())),
            };
            assert_eq!(plan_toml(&again, &[]), written, "{name}");
            assert_eq!(stripped(again), stripped(plan), "{name}\n{written}");
            count += 1;
        }
        assert!(count > 50, "only {count} specs were found");
    }

    #[test]
    fn what_later_stages_filled_in_stands_beside_what_was_written() {
        let text = b"[review]\ntitle='t'\nperiod=1\ndate=2026-01-01\n[quantity]\nname='q'\nunit='m'\n[[readings]]\nvalues=[1]\n[within]\nfrom='none'\n[prior]\nfrom='flat'\n[[question]]\nid='a'\nask='level interval'\nprobability=0.9\n";
        let plan = load(Path::new("s.toml"), "s.toml", &|_| Ok(text.to_vec())).unwrap();
        let keys = [("probability", "0.95"), ("interval", "\"central\"")];
        let filled = keys.map(|(key, value)| (key.to_string(), value.to_string())).to_vec();
        let written = plan_toml(&plan, &[("question.a".to_string(), filled)]);
        assert!(written.contains("probability = 0.9\ninterval = \"central\"\n"), "{written}");
    }
}
