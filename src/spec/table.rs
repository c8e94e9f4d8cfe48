//! TOML tables that own what they hold and remember where it stood, and the reader that takes
//! typed values out of them while it notes everything that is wrong.

use crate::diagnostics::{Fault, Faults, Place};
use crate::spec::keys::Key;
use std::ops::Range;
use std::sync::Arc;

/// A spec's text and the name under which messages speak of it.
#[derive(Debug, PartialEq)]
pub struct SpecText {
    pub file: String,
    pub text: String,
}

/// A piece of a spec's text.
#[derive(Debug, Clone, PartialEq)]
pub struct Span {
    pub source: Arc<SpecText>,
    pub bytes: Range<usize>,
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
    pub fn get(&self, key: &str) -> Option<&Value> {
        self.entries.iter().find(|entry| entry.key == key).map(|entry| &entry.value)
    }
}

/// Takes typed values out of a table by its table of keys. Every getter notes what is wrong and
/// returns `None` then, so that all faults are found in one run.
pub struct Reader<'a> {
    pub table: &'a Table,
    pub keys: &'static [Key],
    pub faults: &'a mut Faults,
}

impl<'a> Reader<'a> {
    /// A fault at a value of this table (or at the table's head where the key is missing).
    pub fn fault_at(&mut self, key: &str, fault: Fault) {
        let span = self.table.get(key).map_or(&self.table.span, |value| &value.span);
        let place = span.place();
        self.faults.push(fault.at(place));
    }
}
