//! TOML tables that own what they hold and remember where it stood.

use crate::diagnostics::Place;
pub use crate::spec::reader::Reader;
use std::ops::Range;
use std::sync::Arc;

/// A spec's text and the name under which messages speak of it.
#[derive(Debug, PartialEq)]
pub struct SpecText {
    pub file: String,
    pub text: String,
}

/// A piece of a spec's text.
#[derive(Debug, Clone)]
pub struct Span {
    pub source: Arc<SpecText>,
    pub bytes: Range<usize>,
}

/// All spans are equal: where a thing stands does not change what it says, so that two plans read
/// from differently laid out texts compare as equal when they mean the same.
impl PartialEq for Span {
    fn eq(&self, _: &Span) -> bool {
        true
    }
}

impl Span {
    /// The line, column and excerpt of the span's start.
    pub fn place(&self) -> Place {
        let text = &self.source.text;
        let start = floor_boundary(text, self.bytes.start);
        let line_start = text[..start].rfind('\n').map_or(0, |at| at + 1);
        let line_end = text[start..].find('\n').map_or(text.len(), |at| start + at);
        let end = floor_boundary(text, self.bytes.end).clamp(start, line_end);
        Place {
            file: self.source.file.clone(),
            line: text[..start].bytes().filter(|b| *b == b'\n').count() as u64 + 1,
            column: text[line_start..start].chars().count() as u64 + 1,
            excerpt: text[line_start..line_end].trim_end_matches('\r').to_string(),
            mark: start - line_start..end - line_start,
        }
    }
}

fn floor_boundary(text: &str, at: usize) -> usize {
    let mut at = at.min(text.len());
    while !text.is_char_boundary(at) {
        at -= 1;
    }
    at
}

#[derive(Debug, Clone, PartialEq)]
pub enum Kind {
    Text(String),
    /// `written` keeps the digits: "12.50" says that two decimals were meant.
    Number {
        value: f64,
        whole: Option<i64>,
        written: String,
    },
    Flag(bool),
    Date(jiff::civil::Date),
    List(Vec<Value>),
    Table(Table),
}

#[derive(Debug, Clone, PartialEq)]
pub struct Value {
    pub kind: Kind,
    pub span: Span,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Entry {
    pub key: String,
    pub key_span: Span,
    pub value: Value,
}

/// A table as written; entries in the order of the text.
#[derive(Debug, Clone, PartialEq)]
pub struct Table {
    /// How messages name it: `[prior]`, `[[question]] "over"`.
    pub name: String,
    pub span: Span,
    pub entries: Vec<Entry>,
}

impl Table {
    /// The table at a key, where there is one; a [`Reader`] notes what is there instead.
    pub fn table(&self, key: &str) -> Option<&Table> {
        match &self.get(key)?.kind {
            Kind::Table(table) => Some(table),
            _ => None,
        }
    }

    /// The tables of the list at a key, as [`Table::table`].
    pub fn tables(&self, key: &str) -> Vec<&Table> {
        let Some(Kind::List(items)) = self.get(key).map(|value| &value.kind) else { return Vec::new() };
        let tables = items.iter().filter_map(|item| match &item.kind {
            Kind::Table(table) => Some(table),
            _ => None,
        });
        tables.collect()
    }

    pub fn get(&self, key: &str) -> Option<&Value> {
        self.entries.iter().find(|entry| entry.key == key).map(|entry| &entry.value)
    }
}

impl Value {
    /// What was found, in words that follow "found": `the text "abc"`, `the number 95`, `a list`.
    pub fn in_words(&self) -> String {
        match &self.kind {
            Kind::Text(text) if text.is_empty() => "an empty text".into(),
            Kind::Text(text) => format!("the text \"{}\"", shortened(text)),
            Kind::Number { written, .. } => format!("the number {}", shortened(written)),
            Kind::Flag(flag) => format!("{flag}"),
            Kind::Date(date) => format!("the date {date}"),
            Kind::List(_) => "a list".into(),
            Kind::Table(_) => "a table".into(),
        }
    }

    /// The value as one text, where it is a single one: a number with the digits as written.
    pub fn as_plain_text(&self) -> Option<String> {
        match &self.kind {
            Kind::Text(text) => Some(text.clone()),
            Kind::Number { written, .. } => Some(written.clone()),
            Kind::Flag(flag) => Some(flag.to_string()),
            Kind::Date(date) => Some(date.to_string()),
            Kind::List(_) | Kind::Table(_) => None,
        }
    }
}

/// At most 40 characters, for a message.
fn shortened(text: &str) -> String {
    match text.char_indices().nth(40) {
        Some((at, _)) => format!("{}…", &text[..at]),
        None => text.to_string(),
    }
}
