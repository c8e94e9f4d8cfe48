//! TOML as text: keys, strings, numbers, lists and tables, each written in one way only.

use crate::plan::Bounds;
use crate::quantity::Period;
use crate::spec::table::{Kind, Table, Value};
use crate::spec::text::is_bare;
use std::fmt::Write;

/// A TOML text in the making.
#[derive(Default)]
pub struct TomlText(String);

impl TomlText {
    pub fn comment(&mut self, words: &str) {
        self.0.push_str(&format!("# {words}\n\n"));
    }

    /// `head` with its brackets, after an empty line.
    pub fn head(&mut self, head: &str) {
        self.0.push_str(&format!("\n{head}\n"));
    }

    pub fn line(&mut self, name: &str, value: String) {
        self.0.push_str(&format!("{} = {value}\n", key(name)));
    }

    pub fn some(&mut self, name: &str, value: Option<String>) {
        if let Some(value) = value {
            self.line(name, value);
        }
    }

    /// A list with an item a line.
    pub fn long_list(&mut self, name: &str, items: impl IntoIterator<Item = String>) {
        let items: String = items.into_iter().map(|item| format!("  {item},\n")).collect();
        self.line(name, format!("[\n{items}]"));
    }

    pub fn into_text(self) -> String {
        self.0
    }
}

/// A key, in quotes where it needs them.
pub fn key(name: &str) -> String {
    if is_bare(name) { name.to_string() } else { quoted(name) }
}

/// A text: on several lines where it has several.
pub fn text(text: &str) -> String {
    if !text.contains('\n') {
        return quoted(text);
    }
    format!("\"\"\"\n{}\"\"\"", escaped(text, true))
}

fn quoted(text: &str) -> String {
    format!("\"{}\"", escaped(text, false))
}

fn escaped(text: &str, keep_lines: bool) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            '"' => out.push_str("\\\""),
            '\\' => out.push_str("\\\\"),
            '\n' if keep_lines => out.push('\n'),
            '\n' => out.push_str("\\n"),
            '\r' => out.push_str("\\r"),
            '\t' => out.push_str("\\t"),
            c if c.is_control() => {
                // Writing to a String cannot fail.
                let _ = write!(out, "\\u{:04X}", u32::from(c));
            }
            c => out.push(c),
        }
    }
    out
}

/// The shortest decimal that reads back as the same number.
pub fn number(number: f64) -> String {
    format!("{number:?}")
}

/// With the decimals in which it was written, where these hold the number.
fn with_decimals(value: f64, decimals: usize) -> String {
    let fixed = format!("{value:.decimals$}");
    if fixed.parse() == Ok(value) { fixed } else { number(value) }
}

pub fn bounds(bounds: Bounds, decimals: usize) -> Vec<(&'static str, String)> {
    match bounds {
        Bounds::Value(value) => vec![("value", with_decimals(value, decimals))],
        Bounds::Range(lower, upper) => {
            vec![("lower", with_decimals(lower, decimals)), ("upper", with_decimals(upper, decimals))]
        }
    }
}

pub fn period(period: &Period) -> String {
    match period.number() {
        Some(number) if number.to_string() == period.as_str() => number.to_string(),
        _ => text(period.as_str()),
    }
}

pub fn list(items: impl IntoIterator<Item = String>) -> String {
    format!("[{}]", items.into_iter().collect::<Vec<_>>().join(", "))
}

/// A value as it was written.
pub fn value(value: &Value) -> String {
    match &value.kind {
        Kind::Text(words) => text(words),
        Kind::Number { written, .. } => written.clone(),
        Kind::Flag(flag) => flag.to_string(),
        Kind::Date(date) => date.to_string(),
        Kind::List(items) => list(items.iter().map(self::value)),
        Kind::Table(table) => inline_table(table, &[]),
    }
}

/// A table on one line, with keys that were filled in.
pub fn inline_table(table: &Table, filled: &[(String, String)]) -> String {
    let written = table.entries.iter().map(|entry| format!("{} = {}", key(&entry.key), value(&entry.value)));
    let more = filled.iter().filter(|(name, _)| table.get(name).is_none());
    let parts: Vec<String> =
        written.chain(more.map(|(name, value)| format!("{} = {value}", key(name)))).collect();
    if parts.is_empty() { "{}".to_string() } else { format!("{{ {} }}", parts.join(", ")) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_text_reads_back_as_it_was() {
        for original in ["", "a \"b\" \\ c", "µ\tβ", "two\nlines\n", "\u{1}\u{7f}", "\r\nq\"\"\"\n", "'"] {
            let spec = crate::spec::read(format!("k = {}\n", text(original)).as_bytes(), "t").unwrap();
            assert_eq!(spec.root.get("k").map(|value| &value.kind), Some(&Kind::Text(original.to_string())));
        }
    }
}
