//! CSV and TSV files: one pass that hashes and parses the same bytes, block by block. The head decides
//! encoding, line ends, delimiter and columns; what was taken for granted goes into the file's notes.

use super::columns::Head;
use super::decode::{self, Reading};
use super::fault_list::FaultList;
use super::record::{Dialect, Record, Splitter};
use crate::diagnostics::{Fault, Place};
use crate::plan::{FileRef, OverridesFile, Source};
use crate::source::{self, Hashed};
use crate::spec::table::Span;
use memchr::{memchr, memrchr};

/// What takes the rows of a file.
pub trait Rows {
    fn row(&mut self, record: &Record<'_>, faults: &mut FaultList);
}

/// What the spec says of a text file's form.
#[derive(Clone, Copy)]
pub struct Layout<'a> {
    pub delimiter: Option<u8>,
    pub encoding: Option<&'a str>,
    pub skip: u64,
    /// Where the spec speaks of the file.
    pub span: &'a Span,
}

impl<'a> From<&'a Source> for Layout<'a> {
    fn from(source: &'a Source) -> Layout<'a> {
        let Source { delimiter, encoding, skip, span, .. } = source;
        Layout { delimiter: *delimiter, encoding: encoding.as_deref(), skip: *skip, span }
    }
}

impl<'a> From<&'a OverridesFile> for Layout<'a> {
    fn from(overrides: &'a OverridesFile) -> Layout<'a> {
        let OverridesFile { delimiter, encoding, skip, file, .. } = overrides;
        Layout { delimiter: *delimiter, encoding: encoding.as_deref(), skip: *skip, span: &file.span }
    }
}

/// The start of a file in which its delimiter must show.
const HEAD_BYTES: usize = 64 * 1024;

/// A file that was read to its end.
pub struct ReadFile<R> {
    pub hashed: Hashed,
    pub notes: Vec<String>,
    /// What took the rows; `None` where the head was refused.
    pub rows: Option<R>,
}

/// Reads one file. `start` makes, from the head, what takes the rows.
pub fn read<R: Rows>(
    layout: Layout<'_>,
    file: &FileRef,
    faults: &mut FaultList,
    start: impl FnOnce(&Head, &mut FaultList) -> Option<R>,
) -> Result<ReadFile<R>, Fault> {
    let mut parser = Parser::new(layout, &file.written, faults, start);
    let hashed = source::stream(&file.path, &file.written, "reading the file", |block| parser.feed(block))?;
    let (notes, rows) = parser.end();
    Ok(ReadFile { hashed, notes, rows })
}

/// Takes a file's bytes in blocks of any size.
pub struct Parser<'a, R, S> {
    layout: Layout<'a>,
    file: &'a str,
    faults: &'a mut FaultList,
    start: Option<S>,
    notes: Vec<String>,
    stage: Stage<R>,
    /// Bytes seen before the head could be read.
    raw: Vec<u8>,
    reading: Option<Reading>,
    decoded: String,
    /// Text of the record that has not ended yet.
    carry: Vec<u8>,
}

enum Stage<R> {
    Head,
    Body {
        splitter: Splitter,
        rows: R,
    },
    /// The file was refused; its bytes are only hashed.
    Refused,
}

impl<'a, R: Rows, S: FnOnce(&Head, &mut FaultList) -> Option<R>> Parser<'a, R, S> {
    pub fn new(layout: Layout<'a>, file: &'a str, faults: &'a mut FaultList, start: S) -> Self {
        Parser {
            layout,
            file,
            faults,
            start: Some(start),
            notes: Vec::new(),
            stage: Stage::Head,
            raw: Vec::new(),
            reading: None,
            decoded: String::new(),
            carry: Vec::new(),
        }
    }

    pub fn feed(&mut self, block: &[u8]) {
        if self.reading.is_none() && !matches!(self.stage, Stage::Refused) {
            self.raw.extend_from_slice(block);
            // UTF-16 needs twice the bytes for the same text.
            if self.raw.len() >= 2 * HEAD_BYTES {
                self.begin(false);
            }
        } else {
            self.text(block, false);
        }
    }

    /// The end of the file: what was taken for granted, and what took the rows.
    pub fn end(mut self) -> (Vec<String>, Option<R>) {
        if self.reading.is_none() && !matches!(self.stage, Stage::Refused) {
            self.begin(true);
        } else {
            self.text(&[], true);
        }
        match self.stage {
            Stage::Body { rows, .. } => (self.notes, Some(rows)),
            _ => (self.notes, None),
        }
    }

    fn refuse(&mut self, fault: Fault) {
        self.faults.push(fault);
        self.stage = Stage::Refused;
    }

    /// Chooses the encoding from the first bytes, then takes them as text.
    fn begin(&mut self, last: bool) {
        let raw = std::mem::take(&mut self.raw);
        if raw.is_empty() {
            let fault = Fault::wrong("empty-file", format!("{} is empty", self.file))
                .at(self.layout.span.place())
                .expected("a head of column names and rows below");
            return self.refuse(fault);
        }
        let probe = &raw[..raw.len().min(2 * HEAD_BYTES)];
        match decode::choose(probe, self.layout.encoding, self.file) {
            Ok(reading) => {
                if !reading.is_utf_8() {
                    self.notes.push(format!("encoding {}", reading.name));
                } else if reading.mark_bytes > 0 {
                    self.notes.push("byte order mark left out".to_string());
                }
                let mark_bytes = reading.mark_bytes;
                self.reading = Some(reading);
                self.text(&raw[mark_bytes..], last);
            }
            Err(fault) => self.refuse(fault.at(self.layout.span.place())),
        }
    }

    /// The next bytes of the file, without the mark.
    fn text(&mut self, bytes: &[u8], last: bool) {
        let Some(reading) = &mut self.reading else {
            return;
        };
        if reading.is_utf_8() {
            return self.utf_8(bytes, last);
        }
        let mut decoded = std::mem::take(&mut self.decoded);
        decoded.clear();
        let result = reading.decode(bytes, last, &mut decoded);
        let name = reading.name;
        self.utf_8(decoded.as_bytes(), last && result.is_ok());
        self.decoded = decoded;
        if result.is_err() && !matches!(self.stage, Stage::Refused) {
            let line = match &self.stage {
                Stage::Body { splitter, .. } => splitter.line,
                _ => 1,
            };
            let message =
                format!("{} holds bytes that are no {name} text, on or after line {line}", self.file);
            let fault = Fault::wrong("wrong-encoding", message)
                .at(self.layout.span.place())
                .repair("name the encoding that the file was written in, or save it as UTF-8");
            self.refuse(fault);
        }
    }

    fn utf_8(&mut self, text: &[u8], last: bool) {
        match self.stage {
            Stage::Refused => {}
            Stage::Head => {
                self.carry.extend_from_slice(text);
                if last || self.carry.len() >= HEAD_BYTES {
                    let text = std::mem::take(&mut self.carry);
                    if let Some(body) = self.head(&text, last) {
                        self.body(&text[body..], last);
                    }
                }
            }
            Stage::Body { .. } => self.body(text, last),
        }
    }

    /// Reads the head and returns where the body starts.
    fn head(&mut self, text: &[u8], last: bool) -> Option<usize> {
        let start = &text[..text.len().min(HEAD_BYTES)];
        let line_end = if memchr(b'\n', start).is_none() && memchr(b'\r', start).is_some() {
            self.notes.push("lines end with CR".to_string());
            b'\r'
        } else {
            b'\n'
        };
        let mut at = 0;
        for _ in 0..self.layout.skip {
            match memchr(line_end, &text[at..]) {
                Some(length) => at += length + 1,
                None => {
                    let message =
                        format!("{} has no more than the {} lines to skip", self.file, self.layout.skip);
                    let fault = Fault::wrong("nothing-after-skip", message)
                        .at(self.layout.span.place())
                        .expected("the head of column names after them");
                    self.refuse(fault);
                    return None;
                }
            }
        }
        if let Err(wrong) = std::str::from_utf8(&text[at..]) {
            // Only the lines of the head must be text here; the body is looked at as it comes.
            let until = at + wrong.valid_up_to();
            if memchr(line_end, &text[at..until]).is_none() && (wrong.error_len().is_some() || last) {
                let line = self.layout.skip + 1;
                let fault = not_utf_8(self.file, line, &text[at..], wrong.valid_up_to());
                self.refuse(fault);
                return None;
            }
        }
        let delimiter = match self.layout.delimiter {
            Some(stated) => stated,
            None => match sniff(&text[at..], line_end, last, self.file) {
                Ok(Some(found)) => {
                    self.notes.push(format!("delimiter {}", name_of(found)));
                    found
                }
                Ok(None) => {
                    self.notes.push("one column, no delimiter".to_string());
                    b','
                }
                Err(fault) => {
                    let place = first_line_place(self.file, self.layout.skip + 1, &text[at..], line_end);
                    self.refuse(fault.at(place));
                    return None;
                }
            },
        };
        let mut splitter = Splitter::new(Dialect { delimiter, line_end }, self.layout.skip + 1);
        let mut head: Option<Head> = None;
        // The head is one record: it is given whole, with nothing of the body.
        let mut end = at;
        loop {
            match memchr(line_end, &text[end..]) {
                Some(length) => end += length + 1,
                None => end = text.len(),
            }
            let whole = end == text.len();
            let line = splitter.line;
            let file = self.file;
            let taken = splitter.split(&text[at..end], whole && last, file, self.faults, |record, _| {
                head.get_or_insert_with(|| Head {
                    file: file.to_string(),
                    names: (0..record.len())
                        .map(|i| String::from_utf8_lossy(record.get(i)).into_owned())
                        .collect(),
                    place: record.whole_place(file),
                });
            });
            if head.as_ref().is_some_and(|head| head.names.iter().all(|name| name.trim().is_empty())) {
                head = None;
                at = end;
                if !whole {
                    continue;
                }
            }
            if head.is_some() || whole || splitter.broken {
                at += if head.is_some() { taken } else { 0 };
                break;
            }
            splitter.line = line;
        }
        let Some(head) = head else {
            if self.faults.is_empty() {
                let fault = Fault::wrong("no-head", format!("{} has no head of column names", self.file))
                    .at(self.layout.span.place())
                    .expected("a first line of column names, after the lines of `skip`");
                self.refuse(fault);
            }
            self.stage = Stage::Refused;
            return None;
        };
        let rows = self.start.take().and_then(|start| start(&head, self.faults));
        let Some(rows) = rows else {
            self.stage = Stage::Refused;
            return None;
        };
        self.stage = Stage::Body { splitter, rows };
        Some(at)
    }

    /// Rows: whole records are parsed where they stand, only one cut by a block's end is copied.
    fn body(&mut self, mut text: &[u8], last: bool) {
        if !self.carry.is_empty() {
            let line_end = match &self.stage {
                Stage::Body { splitter, .. } => splitter.dialect.line_end,
                _ => return,
            };
            let mut carry = std::mem::take(&mut self.carry);
            let first_end = memchr(line_end, text).map_or(text.len(), |at| at + 1);
            carry.extend_from_slice(&text[..first_end]);
            text = &text[first_end..];
            let mut taken = self.records(&carry, last && text.is_empty());
            if taken < carry.len() && !text.is_empty() {
                // A quoted line end: this record goes on beyond its line.
                carry.drain(..taken);
                carry.extend_from_slice(text);
                text = &[];
                taken = self.records(&carry, last);
            }
            carry.drain(..taken);
            self.carry = carry;
            if text.is_empty() {
                return;
            }
        }
        let taken = self.records(text, last);
        self.carry.extend_from_slice(&text[taken..]);
    }

    /// Parses the whole records of a text and returns how many bytes they took.
    fn records(&mut self, text: &[u8], last: bool) -> usize {
        let Stage::Body { splitter, rows } = &mut self.stage else {
            return text.len();
        };
        let line_end = splitter.dialect.line_end;
        let whole = if last { text.len() } else { memrchr(line_end, text).map_or(0, |at| at + 1) };
        let mut valid = whole;
        let mut wrong = None;
        if let Err(error) = std::str::from_utf8(&text[..whole]) {
            wrong = Some(error.valid_up_to());
            valid = memrchr(line_end, &text[..error.valid_up_to()]).map_or(0, |at| at + 1);
        }
        let mut taken = 0;
        if valid > 0 || wrong.is_none() {
            // Without whole lines the splitter only looks whether the record has grown too long.
            let ready = if whole == 0 { text } else { &text[..valid] };
            let ends = last && wrong.is_none();
            taken = splitter
                .split(ready, ends, self.file, self.faults, |record, faults| rows.row(record, faults));
        }
        if let Some(wrong) = wrong {
            let line = splitter.line;
            let fault = not_utf_8(self.file, line, &text[taken..], wrong - taken);
            self.refuse(fault);
            return text.len();
        }
        taken
    }
}

/// A byte that is no UTF-8; `text` starts on `line`.
fn not_utf_8(file: &str, line: u64, text: &[u8], at: usize) -> Fault {
    let start = memrchr(b'\n', &text[..at]).map_or(0, |before| before + 1);
    let end = memchr(b'\n', &text[at..]).map_or(text.len(), |length| at + length).min(start + 400).max(at);
    let before = String::from_utf8_lossy(&text[start..at]).into_owned();
    let mark = before.len()..before.len() + char::REPLACEMENT_CHARACTER.len_utf8();
    let place = Place {
        file: file.to_string(),
        line: line + text[..start].iter().filter(|b| **b == b'\n').count() as u64,
        column: before.chars().count() as u64 + 1,
        excerpt: format!("{before}{}", String::from_utf8_lossy(&text[at..end])).trim_end().to_string(),
        mark,
    };
    let byte = text.get(at).copied().unwrap_or(0);
    Fault::wrong("not-utf-8", format!("the byte {byte:02X} here is no UTF-8 text"))
        .at(place)
        .expected("UTF-8, or UTF-16 with its byte order mark")
        .repair("save the file as UTF-8, or name its encoding, such as encoding = \"windows-1252\"")
}

fn first_line_place(file: &str, line: u64, text: &[u8], line_end: u8) -> Place {
    let end = memchr(line_end, text).unwrap_or(text.len()).min(400);
    let excerpt = String::from_utf8_lossy(&text[..end]).trim_end().to_string();
    Place { file: file.to_string(), line, column: 1, mark: 0..excerpt.len(), excerpt }
}

fn name_of(delimiter: u8) -> String {
    match delimiter {
        b'\t' => "tab".to_string(),
        other => format!("\"{}\"", char::from(other)),
    }
}

const DELIMITERS: [u8; 4] = [b',', b';', b'\t', b'|'];

/// The one delimiter that fits: it stands in the head, and every line has as many columns by it.
/// `None` where no delimiter stands in the head: one column.
fn sniff(text: &[u8], line_end: u8, last: bool, file: &str) -> Result<Option<u8>, Fault> {
    let start = &text[..text.len().min(HEAD_BYTES)];
    let whole = if last && start.len() == text.len() {
        start.len()
    } else {
        memrchr(line_end, start).map_or(start.len(), |at| at + 1)
    };
    // Columns of each record by each delimiter, the head first.
    let counts = |delimiter: u8| -> Vec<usize> {
        let mut counts = Vec::new();
        let mut unheeded = FaultList::default();
        let mut splitter = Splitter::new(Dialect { delimiter, line_end }, 1);
        splitter.split(&start[..whole], true, file, &mut unheeded, |record, _| {
            if !record.is_blank() {
                counts.push(record.len());
            }
        });
        counts
    };
    let in_head: Vec<(u8, Vec<usize>)> = DELIMITERS
        .into_iter()
        .map(|delimiter| (delimiter, counts(delimiter)))
        .filter(|(_, counts)| counts.first().is_some_and(|columns| *columns > 1))
        .collect();
    let fitting: Vec<u8> = in_head
        .iter()
        .filter(|(_, counts)| counts.iter().all(|columns| Some(columns) == counts.first()))
        .map(|(delimiter, _)| *delimiter)
        .collect();
    match (fitting.as_slice(), in_head.as_slice()) {
        ([only], _) => Ok(Some(*only)),
        (_, []) => Ok(None),
        // With only one in the head, rows that do not fit it are faults of their own.
        ([], [(only, _)]) => Ok(Some(*only)),
        (several, candidates) => {
            let several: Vec<String> = match several {
                [] => candidates.iter().map(|(delimiter, _)| name_of(*delimiter)).collect(),
                fit => fit.iter().map(|delimiter| name_of(*delimiter)).collect(),
            };
            let message = format!("the delimiter of {file} could be {}", several.join(" or "));
            Err(Fault::wrong("unclear-delimiter", message)
                .expected("one delimiter that gives every line the same number of columns")
                .repair("say which it is: delimiter = \";\""))
        }
    }
}
