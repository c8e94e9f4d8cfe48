//! What a review is about and how it is printed: `[review]`, `[quantity]`, `[[action]]`, `[[event]]`,
//! `[history]`, `[report]`.

use crate::diagnostics::Fault;
use crate::plan::make::Ground;
use crate::plan::{
    Action, Bias, Detail, Event, History, Link, Opinion, Quantity, ReportPlan, ReviewPlan, SignOff, Status,
    TemplateChoice,
};
use crate::quantity::{Period, Scale};
use crate::spec::language;
use crate::spec::reader::{Reader, not_served};
use crate::spec::table::{Kind, Table};
use std::collections::BTreeSet;

pub const BUILT_IN_TEMPLATES: &[&str] = &["review"];

pub fn review(table: &Table, ground: &mut Ground) -> Option<ReviewPlan> {
    let stem = ground.spec_stem.clone();
    let mut reader = ground.reader(table, language::REVIEW);
    let title = reader.text("title");
    let id = review_id(&mut reader, stem);
    let period = reader.period("period");
    let date = reader.date("date");
    let status = match reader.choice("status") {
        Some("final") => Status::Final,
        Some("interim") => Status::Interim,
        _ => Status::Draft,
    };
    let until = reader.date("until");
    if until.is_some() && status != Status::Interim {
        let fault = Fault::wrong("key-out-of-place", "`until` belongs to an interim review")
            .expected("status = \"interim\" beside `until`")
            .repair("add status = \"interim\", or leave `until` out");
        reader.fault_at("until", fault);
    }
    let purpose = reader.text("purpose");
    let particulars = particulars(&mut reader);
    for key in ["interpretation", "previous", "supersedes"] {
        reader.table(key);
    }
    reader.tables("sign_off");
    reader.finish();

    let interpretation = table.table("interpretation").and_then(|table| {
        let mut reader = ground.reader(table, language::INTERPRETATION);
        let (text, by) = (reader.text("text"), reader.text("by"));
        reader.finish();
        Some(Opinion { text: text?, by })
    });
    let previous = table.table("previous").and_then(|table| link(table, false, ground));
    let supersedes = table.table("supersedes").and_then(|table| link(table, true, ground));
    let sign_off = table.tables("sign_off").into_iter().filter_map(|table| sign_off(table, ground)).collect();
    Some(ReviewPlan {
        title: title?,
        id: id?,
        period: period?,
        date: date?,
        status,
        until,
        purpose,
        interpretation,
        particulars,
        previous,
        supersedes,
        sign_off,
    })
}

/// The id names a folder: only characters that are safe on every system.
fn review_id(reader: &mut Reader<'_>, stem: String) -> Option<String> {
    let written = reader.has("id");
    let id = if written { reader.text("id")? } else { stem };
    if is_folder_name(&id) {
        return Some(id);
    }
    let message = match written {
        true => format!("\"{id}\" cannot name a review"),
        false => format!("the spec's file name \"{id}\" cannot name the review"),
    };
    let parts: Vec<&str> = id.split(|c| !is_id_char(c)).filter(|part| !part.is_empty()).collect();
    let repair = parts.join("-");
    let mut fault = Fault::wrong("bad-id", message)
        .expected("letters a to z, digits, `.`, `_` and `-`, at most 100 of them");
    if is_folder_name(&repair) {
        fault = fault.repair(format!("write id = \"{repair}\" in [review]"));
    }
    reader.fault_at("id", fault);
    None
}

fn is_id_char(c: char) -> bool {
    c.is_ascii_alphanumeric() || matches!(c, '.' | '_' | '-')
}

/// Whether a review may have this id: it names a folder, and no other than its own.
pub fn is_folder_name(id: &str) -> bool {
    !id.is_empty() && id.len() <= 100 && id.chars().all(is_id_char) && !id.chars().all(|c| c == '.')
}

fn particulars(reader: &mut Reader<'_>) -> Vec<(String, String)> {
    let mut texts = Vec::new();
    for entry in reader.table("particulars").iter().flat_map(|table| &table.entries) {
        match entry.value.as_plain_text() {
            Some(text) => texts.push((entry.key.clone(), text)),
            None => reader.faults.push(
                Fault::wrong("wrong-type", format!("a particular cannot be {}", entry.value.in_words()))
                    .at(entry.value.span.place())
                    .expected("a text in quotes"),
            ),
        }
    }
    texts
}

fn link(table: &Table, needs_reason: bool, ground: &mut Ground) -> Option<Link> {
    let keys = if needs_reason { language::SUPERSEDES } else { language::PREVIOUS };
    let mut reader = ground.reader(table, keys);
    let written = reader.text("review");
    let stamp = reader.text("stamp");
    let stamp_is_wrong = stamp.as_deref().is_some_and(|stamp| !is_sha256(stamp));
    if stamp_is_wrong {
        let fault = Fault::wrong("bad-hash", "this is not a stamp")
            .expected("64 hexadecimal digits, as the report prints them whole")
            .repair("copy it from that review's report, or leave it out");
        reader.fault_at("stamp", fault);
    }
    let reason = if needs_reason { reader.text("reason") } else { None };
    let span = reader.span("review").clone();
    reader.finish();
    let written = written?;
    // A folder is named like a file; an ending slash is no fault there.
    let file = ground.file(written.trim_end_matches('/'), None, &span)?;
    if needs_reason && reason.is_none() {
        return None;
    }
    let stamp = stamp.map(|stamp| stamp.to_ascii_lowercase());
    Some(Link { folder: file.path, written: file.written, stamp, reason, span })
}

/// 64 hexadecimal digits.
pub fn is_sha256(text: &str) -> bool {
    text.len() == 64 && text.bytes().all(|b| b.is_ascii_hexdigit())
}

fn sign_off(table: &Table, ground: &mut Ground) -> Option<SignOff> {
    let mut reader = ground.reader(table, language::SIGN_OFF);
    let role = reader.text("role");
    let (name, meaning, on) = (reader.text("name"), reader.text("meaning"), reader.date("on"));
    reader.finish();
    Some(SignOff { role: role?, name, meaning, on })
}

pub fn action(table: &Table, ground: &mut Ground) -> Option<Action> {
    let mut reader = ground.reader(table, language::ACTION);
    let what = reader.text("what");
    let (owner, due) = (reader.text("owner"), reader.date("due"));
    let state = reader.choice("state").unwrap_or("open").to_string();
    let set_by = reader.text("set_by");
    reader.finish();
    Some(Action { what: what?, owner, due, state, set_by })
}

pub fn quantity(table: &Table, ground: &mut Ground) -> Option<Quantity> {
    let mut reader = ground.reader(table, language::QUANTITY);
    let name = reader.text("name");
    let unit = reader.text("unit");
    let scale = scale_of(reader.choice("scale")).unwrap_or_default();
    let method = reader.text("method");
    let step = reader.sd("step");
    reader.table("bias");
    reader.finish();
    let bias = table.table("bias").and_then(|table| bias(table, None, ground));
    Some(Quantity { name: name?, unit: unit?, scale, method, step, bias })
}

pub fn scale_of(choice: Option<&str>) -> Option<Scale> {
    match choice {
        Some("log") => Some(Scale::Log),
        Some("linear") => Some(Scale::Linear),
        _ => None,
    }
}

/// A bias; what it leaves out is taken from the general one, where there is one.
pub fn bias(table: &Table, general: Option<&Bias>, ground: &mut Ground) -> Option<Bias> {
    let mut reader = ground.reader(table, language::BIAS);
    let (sd, basis) = (reader.sd("sd"), reader.text("basis"));
    match general {
        None => reader.finish(),
        Some(_) => Reader { keys: &[], ..reader }.finish_beside(&[language::BIAS]),
    }
    let written = |key: &str| table.get(key).is_some();
    let sd = if written("sd") { sd } else { general.map(|general| general.sd) };
    let basis = if written("basis") { basis } else { general.map(|general| general.basis.clone()) };
    Some(Bias { sd: sd?, basis: basis? })
}

pub fn event(table: &Table, ground: &mut Ground) -> Option<Event> {
    let mut reader = ground.reader(table, language::EVENT);
    let (date, what) = (reader.date("date"), reader.text("what"));
    let kind = reader.choice("kind").map(str::to_string);
    let series = reader.text("series");
    reader.finish();
    Some(Event { date: date?, what: what?, kind, series })
}

pub fn history(table: &Table, under_review: Option<&Period>, ground: &mut Ground) -> History {
    let mut reader = ground.reader(table, language::HISTORY);
    let (first, last) = (reader.period("first"), reader.period("last"));
    let order = reader.periods("order");
    reader.tables("leave_out");
    let number = |period: &Option<Period>| period.as_ref().and_then(Period::number);
    let review = under_review.and_then(Period::number);
    if let (Some(first), Some(review)) = (number(&first), review)
        && first >= review
    {
        let fault = Fault::wrong(
            "out-of-range",
            format!("the history begins in {first}, not before the period under review"),
        )
        .expected(format!("a period before {review}"));
        reader.fault_at("first", fault);
    }
    if let (Some(first), Some(last)) = (number(&first), number(&last))
        && last < first
    {
        let fault =
            Fault::wrong("out-of-range", format!("the history ends in {last}, before it begins in {first}"))
                .expected(format!("{first} or later"));
        reader.fault_at("last", fault);
    }
    if let Some(order) = &order {
        let distinct: BTreeSet<&Period> = order.iter().collect();
        if distinct.len() < order.len() {
            reader.fault_at(
                "order",
                Fault::wrong("duplicate-name", "a period stands twice in `order`")
                    .expected("every period once"),
            );
        }
    }
    reader.finish();
    let mut leave_out = Vec::new();
    for table in table.tables("leave_out") {
        let mut reader = ground.reader(table, language::LEAVE_OUT);
        let (period, reason) = (reader.period("period"), reader.text("reason"));
        reader.finish();
        leave_out.extend(period.zip(reason));
    }
    History { first, last, order, leave_out }
}

pub fn report(table: Option<&Table>, ground: &mut Ground) -> Option<ReportPlan> {
    let mut plan = ReportPlan {
        template: TemplateChoice::BuiltIn("review".to_string()),
        markdown: true,
        html: true,
        detail: Detail::All,
        inputs_copied: true,
    };
    let Some(table) = table else { return Some(plan) };
    let mut reader = ground.reader(table, language::REPORT);
    let template = reader.text("template");
    if let Some(formats) = formats(&mut reader) {
        (plan.markdown, plan.html) = formats;
    }
    plan.detail = match reader.choice("detail") {
        Some("flagged") => Detail::Flagged,
        Some("none") => Detail::None,
        _ => Detail::All,
    };
    plan.inputs_copied = reader.choice("inputs") != Some("hashed");
    let span = reader.span("template").clone();
    // A name without folder or ending is a built-in one.
    let own = template.as_deref().is_some_and(|name| name.contains(['/', '.', '\\']));
    if let Some(name) = &template
        && !own
        && !BUILT_IN_TEMPLATES.contains(&name.as_str())
    {
        let fault = Fault::wrong("unknown-name", format!("there is no built-in template \"{name}\""))
            .expected(format!(
                "\"{}\", or the path of your own, such as \"./{name}.md\"",
                BUILT_IN_TEMPLATES.join("\", \"")
            ));
        reader.fault_at("template", fault);
    }
    reader.finish();
    if let Some(name) = template {
        plan.template = match own {
            true => TemplateChoice::Own(ground.file(&name, None, &span)?),
            false => TemplateChoice::BuiltIn(name),
        };
    }
    Some(plan)
}

/// Whether Markdown, whether HTML.
fn formats(reader: &mut Reader<'_>) -> Option<(bool, bool)> {
    let formats = reader.text_list("formats")?;
    let items = match reader.value("formats").map(|value| &value.kind) {
        Some(Kind::List(items)) => items.as_slice(),
        _ => &[],
    };
    for (at, format) in formats.iter().enumerate() {
        let span = items.get(at).map_or(reader.span("formats"), |item| &item.span);
        match format.as_str() {
            "md" | "html" => {}
            "pdf" => reader.faults.push(
                not_served("the format \"pdf\"", span)
                    .repair("leave it out; the HTML report has a style for print"),
            ),
            other => reader.faults.push(
                Fault::wrong("wrong-value", format!("\"{other}\" is not a format"))
                    .at(span.place())
                    .expected("\"md\" or \"html\""),
            ),
        }
    }
    if formats.is_empty() {
        reader.fault_at(
            "formats",
            Fault::wrong("wrong-value", "a report needs a format").expected("\"md\" or \"html\""),
        );
    }
    Some((formats.iter().any(|format| format == "md"), formats.iter().any(|format| format == "html")))
}
