//! From the view to Markdown, by templates. The built-in `review.md` is made of sections, one file
//! each; a user's own template takes the place of `review.md` and may include the same sections.
//!
//! Names that a template misspells are errors, printing is escaped, and a template that never ends runs
//! out of fuel.

use super::escape;
use super::views::ReportView;
use crate::diagnostics::{Fault, Faults, Outcome, Place};
use minijinja::syntax::SyntaxConfig;
use minijinja::value::Serde;
use minijinja::{Environment, Error, ErrorKind, UndefinedBehavior};

/// The template of the whole report.
const REVIEW: &str = "review.md";

macro_rules! sections {
    ($($name:literal),* $(,)?) => {
        &[$((concat!("sections/", $name), include_str!(concat!("../../templates/sections/", $name)))),*]
    };
}

/// The built-in templates by name.
pub const TEMPLATES: &[(&str, &str)] = &[(REVIEW, include_str!("../../templates/review.md"))];

/// What `review.md` is made of.
pub const SECTIONS: &[(&str, &str)] = sections![
    "table.md",
    "summary.md",
    "purpose.md",
    "reading.md",
    "data.md",
    "model.md",
    "series.md",
    "one-series.md",
    "cautions.md",
    "compared.md",
    "opinion.md",
    "reproduction.md",
    "sign-off.md",
    "appendices.md",
];

/// Steps that a template may take: for the report itself, and for each series.
const FUEL: u64 = 4_000_000;
const FUEL_FOR_EACH_SERIES: u64 = 400_000;

/// Renders the report; `own` is the user's template, by the name that the spec gives it.
pub fn render(view: &ReportView, series: usize, own: Option<(&str, &[u8])>) -> Outcome<String> {
    let own_text = match own {
        Some((name, bytes)) => Some((name, crate::source::text(bytes, name)?)),
        None => None,
    };
    let mut environment = Environment::new();
    escape::escape_in_templates(&mut environment);
    environment.set_undefined_behavior(UndefinedBehavior::Strict);
    // A line that holds a block tag alone leaves no line behind.
    let syntax = SyntaxConfig::builder().trim_blocks(true).lstrip_blocks(true).build();
    environment.set_syntax(syntax.map_err(|error| fault(&error, own_text))?);
    environment.set_fuel(Some(FUEL + FUEL_FOR_EACH_SERIES * series as u64));
    // It would print the program's inner form.
    environment.remove_global("debug");
    for (name, text) in TEMPLATES.iter().chain(SECTIONS) {
        let text = match (own_text, *name) {
            (Some((_, own)), REVIEW) => own,
            _ => text,
        };
        let added = environment.add_template(name, text);
        added.map_err(|error| fault(&error, own_text))?;
    }
    let template = environment.get_template(REVIEW).map_err(|error| fault(&error, own_text))?;
    let markdown = template.render(Serde(view)).map_err(|error| fault(&error, own_text))?;
    Ok(tidied(&markdown))
}

/// No blanks at the ends of lines, one empty line at a time, one line break at the end; code blocks stay.
fn tidied(markdown: &str) -> String {
    let mut out = String::with_capacity(markdown.len());
    let mut fence: Option<&str> = None;
    let mut empty = true;
    for line in markdown.lines() {
        let trimmed = line.trim_end();
        let ticks = &trimmed[..trimmed.len() - trimmed.trim_start_matches('`').len()];
        match fence {
            Some(open) if ticks.len() >= open.len() && ticks.len() == trimmed.len() => fence = None,
            None if ticks.len() >= 3 => fence = Some(ticks),
            _ => {}
        }
        if fence.is_none() && trimmed.is_empty() {
            if !empty {
                out.push('\n');
            }
            empty = true;
            continue;
        }
        if !empty && fence.is_none() && trimmed.starts_with('#') {
            out.push('\n');
        }
        out.push_str(if fence.is_some() { line } else { trimmed });
        out.push('\n');
        empty = false;
    }
    let end = out.trim_end().len();
    out.truncate(end);
    out.push('\n');
    out
}

/// A template's error with its place. The user's template is named as the spec names it.
fn fault(error: &Error, own: Option<(&str, &str)>) -> Faults {
    let own_place = error.name().filter(|name| *name == REVIEW).and(own);
    let message = match (error.kind(), error.detail()) {
        (ErrorKind::OutOfFuel, _) => "the template takes too many steps".to_string(),
        (kind, Some(detail)) => format!("the template failed: {kind}: {detail}"),
        (kind, None) => format!("the template failed: {kind}"),
    };
    let fault = Fault::wrong("template-failed", message);
    let fault = match own_place {
        Some((name, text)) => fault
            .at(place(error, name, text))
            .expected("a template in the language of the built-in one")
            .repair("mend the template; the built-in sections in templates/ show what it can print"),
        None => {
            let name = error.name().unwrap_or(REVIEW);
            let text = SECTIONS.iter().chain(TEMPLATES).find(|(known, _)| *known == name);
            let place = text.and_then(|(name, text)| place(error, &format!("built-in {name}"), text));
            fault.at(place)
        }
    };
    fault.into()
}

fn place(error: &Error, file: &str, text: &str) -> Option<Place> {
    let line = error.line()?;
    let excerpt = text.lines().nth(line.checked_sub(1)?)?;
    let start: usize = text.split_inclusive('\n').take(line - 1).map(str::len).sum();
    let clamp = |at: usize| {
        let mut at = at.saturating_sub(start).min(excerpt.len());
        while !excerpt.is_char_boundary(at) {
            at -= 1;
        }
        at
    };
    let mark = match error.range() {
        Some(range) if range.start >= start && range.start <= start + excerpt.len() => {
            clamp(range.start)..clamp(range.end)
        }
        _ => excerpt.len() - excerpt.trim_start().len()..excerpt.len(),
    };
    Some(Place {
        file: file.to_string(),
        line: line as u64,
        column: excerpt[..mark.start].chars().count() as u64 + 1,
        excerpt: excerpt.to_string(),
        mark,
    })
}
