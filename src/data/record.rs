//! Text to records (RFC 4180, with a delimiter and a line end of the file's own), without copying where
//! nothing is quoted. A stray quote never swallows what follows: an unclosed quote and text after a
//! closing quote are faults.

use super::fault_list::FaultList;
use crate::diagnostics::{Fault, Place};
use memchr::{memchr, memchr_iter, memchr2, memrchr};

/// A record longer than this is taken for one whose quote was never closed.
pub const LONGEST_RECORD_BYTES: usize = 1 << 20;

/// One record: its fields as text without quotes, and where they stood.
#[derive(Debug, Clone, Copy)]
pub struct Record<'a> {
    /// Line of the file on which it starts, from 1.
    pub line: u64,
    /// The bytes of the record as they stand in the file, without the line end.
    raw: &'a [u8],
    /// What `fields` point into: the text around `raw`, or the unquoted text.
    text: &'a [u8],
    fields: &'a [(usize, usize)],
    /// Where each field starts in `raw`; `None` where nothing was unquoted.
    starts: Option<&'a [usize]>,
    /// Where `raw` starts in `text`, where nothing was unquoted.
    at: usize,
}

impl<'a> Record<'a> {
    pub fn len(&self) -> usize {
        self.fields.len()
    }

    /// Whether every field is empty: a blank line, or a spreadsheet's row of delimiters.
    #[inline]
    pub fn is_blank(&self) -> bool {
        if self.raw.first().is_some_and(u8::is_ascii_alphanumeric) {
            return false;
        }
        let is_empty = |(start, end): &(usize, usize)| self.text[*start..*end].trim_ascii().is_empty();
        self.fields.first().is_none_or(is_empty) && self.fields.iter().all(is_empty)
    }

    /// A field's bytes; empty where there is none of that number.
    #[inline]
    pub fn get(&self, field: usize) -> &'a [u8] {
        match self.fields.get(field) {
            Some((start, end)) => &self.text[*start..*end],
            None => &[],
        }
    }

    /// Where a field stands.
    pub fn place(&self, file: &str, field: usize) -> Place {
        let start = match self.starts {
            Some(starts) => starts.get(field).copied(),
            None => self.fields.get(field).map(|(start, _)| *start - self.at),
        };
        let start = start.unwrap_or(self.raw.len());
        let length = match self.starts {
            None => self.get(field).len(),
            Some(starts) => starts.get(field + 1).map_or(self.raw.len(), |next| next - 1) - start,
        };
        place_in(file, self.line, self.raw, start, start + length)
    }

    /// The record's place, with its whole first line marked.
    pub fn whole_place(&self, file: &str) -> Place {
        place_in(file, self.line, self.raw, 0, self.raw.len())
    }
}

/// The place of `start..end` in a piece of text that starts on `first_line`.
fn place_in(file: &str, first_line: u64, text: &[u8], start: usize, end: usize) -> Place {
    /// Bytes of a long line that are shown on either side.
    const SHOWN_BYTES: usize = 160;
    let start = start.min(text.len());
    let line_start = memrchr(b'\n', &text[..start]).map_or(0, |at| at + 1);
    let line_end = memchr(b'\n', &text[start..]).map_or(text.len(), |length| start + length);
    let end = end.clamp(start, line_end);
    let before = String::from_utf8_lossy(&text[line_start..start]).into_owned();
    let marked = String::from_utf8_lossy(&text[start..end]).into_owned();
    let after = String::from_utf8_lossy(&text[end..line_end]).into_owned();
    let column = before.chars().count() as u64 + 1;
    let before = if before.len() > SHOWN_BYTES { format!("…{}", last_chars(&before, 60)) } else { before };
    let marked = if marked.len() > SHOWN_BYTES { first_chars(&marked, 60) } else { marked };
    let after = if after.len() > SHOWN_BYTES { format!("{}…", first_chars(&after, 60)) } else { after };
    let mark = before.len()..before.len() + marked.len();
    Place {
        file: file.to_string(),
        line: first_line + memchr_iter(b'\n', &text[..start]).count() as u64,
        column,
        excerpt: format!("{before}{marked}{after}").trim_end_matches('\r').to_string(),
        mark,
    }
}

fn first_chars(text: &str, count: usize) -> String {
    text.chars().take(count).collect()
}

fn last_chars(text: &str, count: usize) -> String {
    let all = text.chars().count();
    text.chars().skip(all.saturating_sub(count)).collect()
}

/// How a file separates: fields by `delimiter`, records by `line_end` (LF or CR; a CR before the LF
/// belongs to it).
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Dialect {
    pub delimiter: u8,
    pub line_end: u8,
}

/// Splits text into records and counts lines.
#[derive(Debug)]
pub struct Splitter {
    pub dialect: Dialect,
    /// Line of the next record, from 1.
    pub line: u64,
    /// True after a record that is too long to be one: nothing after it is read.
    pub broken: bool,
    fields: Vec<(usize, usize)>,
    starts: Vec<usize>,
    unquoted: Vec<u8>,
}

/// How a record with quotes ended.
enum Ended {
    /// Its text ends at the first, the next record starts at the second.
    At(usize, usize),
    /// The text ended inside a quote, opened at that place, or before the record's line end.
    Early { quote: Option<usize> },
    /// Text after a closing quote, at that place.
    Trailing(usize),
}

impl Splitter {
    pub fn new(dialect: Dialect, line: u64) -> Splitter {
        Splitter {
            dialect,
            line,
            broken: false,
            fields: Vec::new(),
            starts: Vec::new(),
            unquoted: Vec::new(),
        }
    }

    /// Gives every whole record of `text` to `each` and returns how many bytes they took. With `last`,
    /// the end of the text ends its last record.
    pub fn split(
        &mut self,
        text: &[u8],
        last: bool,
        file: &str,
        faults: &mut FaultList,
        mut each: impl FnMut(&Record<'_>, &mut FaultList),
    ) -> usize {
        if self.broken {
            return text.len();
        }
        if memchr(b'"', text).is_none() {
            let whole = match memrchr(self.dialect.line_end, text) {
                _ if last => text.len(),
                Some(end) => end + 1,
                None => 0,
            };
            self.split_plain(&text[..whole], file, faults, each);
            return self.cut_short(text, whole, file, faults);
        }
        let mut at = 0;
        while at < text.len() && !self.broken {
            match self.read_quoted(text, at, last) {
                Ended::At(end, _) if end - at > LONGEST_RECORD_BYTES => break,
                Ended::At(end, next) => {
                    each(
                        &Record {
                            line: self.line,
                            raw: &text[at..end],
                            text: &self.unquoted,
                            fields: &self.fields,
                            starts: Some(&self.starts),
                            at: 0,
                        },
                        faults,
                    );
                    self.count_lines(&text[at..next]);
                    at = next;
                }
                Ended::Early { quote: Some(quote) } if last && text.len() - at <= LONGEST_RECORD_BYTES => {
                    faults
                        .note("unclosed-quote", || unclosed_quote(file, self.line, &text[at..], quote - at));
                    self.count_lines(&text[at..]);
                    return text.len();
                }
                Ended::Early { .. } => break,
                Ended::Trailing(trailing) => {
                    let end =
                        memchr(self.dialect.line_end, &text[trailing..]).map(|length| trailing + length);
                    if end.is_none() && !last {
                        break;
                    }
                    let end = end.unwrap_or(text.len());
                    faults.note("text-after-quote", || {
                        Fault::wrong("text-after-quote", "there is text after a closing quote")
                            .at(place_in(file, self.line, &text[at..end], trailing - at, end - at))
                            .expected("a delimiter or the end of the line after the quote")
                            .repair("write a quote inside a quoted cell twice: \"\"")
                    });
                    let next = (end + 1).min(text.len());
                    self.count_lines(&text[at..next]);
                    at = next;
                }
            }
        }
        self.cut_short(text, at, file, faults)
    }

    /// Gives up where what follows `at` is too long for a record; else returns `at`.
    fn cut_short(&mut self, text: &[u8], at: usize, file: &str, faults: &mut FaultList) -> usize {
        if self.broken || text.len() - at > LONGEST_RECORD_BYTES {
            if !self.broken {
                self.broken = true;
                faults.push(too_long(file, self.line, &text[at..]));
            }
            return text.len();
        }
        at
    }

    fn count_lines(&mut self, text: &[u8]) {
        self.line += memchr_iter(self.dialect.line_end, text).count() as u64;
    }

    /// Whole records without quotes, eight bytes at a time.
    fn split_plain(
        &mut self,
        text: &[u8],
        file: &str,
        faults: &mut FaultList,
        mut each: impl FnMut(&Record<'_>, &mut FaultList),
    ) {
        let Dialect { delimiter, line_end } = self.dialect;
        let (delimiters, line_ends) = (splat(delimiter), splat(line_end));
        let (fields, broken) = (&mut self.fields, &mut self.broken);
        fields.clear();
        let (mut record, mut field, mut line) = (0, 0, self.line);
        let mut separator = |at: usize, is_line_end: bool| {
            if !is_line_end {
                fields.push((field, at));
                field = at + 1;
                return;
            }
            let has_return = line_end == b'\n' && at > record && text[at - 1] == b'\r' && at > field;
            let end = at - usize::from(has_return);
            fields.push((field, end));
            if *broken || end - record > LONGEST_RECORD_BYTES {
                if !*broken {
                    *broken = true;
                    faults.push(too_long(file, line, &text[record..end]));
                }
                return;
            }
            each(&Record { line, raw: &text[record..end], text, fields, starts: None, at: record }, faults);
            fields.clear();
            line += 1;
            record = at + 1;
            field = at + 1;
        };
        let (words, rest) = text.as_chunks::<8>();
        for (i, word) in words.iter().enumerate() {
            let bytes = u64::from_le_bytes(*word);
            let ends = zero_bytes(bytes ^ line_ends);
            let mut hits = zero_bytes(bytes ^ delimiters) | ends;
            while hits != 0 {
                let bit = hits.trailing_zeros();
                separator(i * 8 + (bit / 8) as usize, ends >> bit & 1 == 1);
                hits &= hits - 1;
            }
        }
        let rest_start = text.len() - rest.len();
        for (i, byte) in rest.iter().enumerate() {
            if *byte == delimiter || *byte == line_end {
                separator(rest_start + i, *byte == line_end);
            }
        }
        if text.last().is_some_and(|byte| *byte != line_end) {
            separator(text.len(), true);
        }
        self.line = line;
    }

    /// One record that may have quotes, from `at` on.
    fn read_quoted(&mut self, text: &[u8], at: usize, last: bool) -> Ended {
        let Dialect { delimiter, line_end } = self.dialect;
        self.fields.clear();
        self.starts.clear();
        self.unquoted.clear();
        let mut position = at;
        loop {
            let field = self.unquoted.len();
            self.starts.push(position - at);
            if text.get(position) == Some(&b'"') {
                let quote = position;
                position += 1;
                loop {
                    let Some(length) = memchr(b'"', &text[position..]) else {
                        return Ended::Early { quote: Some(quote) };
                    };
                    self.unquoted.extend_from_slice(&text[position..position + length]);
                    position += length + 1;
                    if text.get(position) != Some(&b'"') {
                        break;
                    }
                    self.unquoted.push(b'"');
                    position += 1;
                }
                // A quote at the end of what is there may be the first of two.
                if position == text.len() && !last {
                    return Ended::Early { quote: None };
                }
            } else {
                let length = memchr2(delimiter, line_end, &text[position..]).unwrap_or(text.len() - position);
                let mut content = &text[position..position + length];
                let ends_record = text.get(position + length).is_none_or(|b| *b == line_end);
                if ends_record && line_end == b'\n' {
                    content = content.strip_suffix(b"\r").unwrap_or(content);
                }
                self.unquoted.extend_from_slice(content);
                position += content.len();
            }
            self.fields.push((field, self.unquoted.len()));
            let end = position;
            if line_end == b'\n' && text.get(position) == Some(&b'\r') {
                match text.get(position + 1) {
                    Some(b'\n') => position += 1,
                    None if last => return Ended::At(end, text.len()),
                    None => return Ended::Early { quote: None },
                    Some(_) => return Ended::Trailing(position),
                }
            }
            match text.get(position) {
                Some(byte) if *byte == delimiter => position += 1,
                Some(byte) if *byte == line_end => return Ended::At(end, position + 1),
                None if last => return Ended::At(end, position),
                None => return Ended::Early { quote: None },
                Some(_) => return Ended::Trailing(position),
            }
        }
    }
}

/// The fault of a quote that stays open; `quote` is its place in `text`, which starts on `line`.
pub fn unclosed_quote(file: &str, line: u64, text: &[u8], quote: usize) -> Fault {
    Fault::wrong("unclosed-quote", "a quote is opened here and never closed")
        .at(place_in(file, line, text, quote, text.len()))
        .expected("a closing quote before the end of the file")
        .repair("close the quote; write a quote inside a quoted cell twice: \"\"")
}

fn too_long(file: &str, line: u64, text: &[u8]) -> Fault {
    Fault::wrong("record-too-long", "the row that starts here does not end within a million bytes")
        .at(place_in(file, line, text, 0, text.len()))
        .expected("rows of ordinary length")
        .repair("look for a quote that is opened and never closed, and check that the file is text")
}

fn splat(byte: u8) -> u64 {
    u64::from(byte) * 0x0101_0101_0101_0101
}

/// The top bit of every byte that is 0, and no other bit.
#[inline]
fn zero_bytes(word: u64) -> u64 {
    const LOW: u64 = 0x7f7f_7f7f_7f7f_7f7f;
    !(((word & LOW) + LOW) | word | LOW)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    const COMMA: Dialect = Dialect { delimiter: b',', line_end: b'\n' };

    fn split_all(text: &[u8], dialect: Dialect) -> (Vec<(u64, Vec<String>)>, Vec<Fault>) {
        let mut faults = FaultList::default();
        let mut records = Vec::new();
        let mut splitter = Splitter::new(dialect, 1);
        let taken = splitter.split(text, true, "x.csv", &mut faults, |record, _| {
            let fields = (0..record.len()).map(|i| String::from_utf8_lossy(record.get(i)).into_owned());
            records.push((record.line, fields.collect()));
        });
        assert_eq!(taken, text.len());
        (records, faults.into_faults().0)
    }

    fn fields(text: &str) -> Vec<Vec<String>> {
        let (records, faults) = split_all(text.as_bytes(), COMMA);
        assert!(faults.is_empty());
        records.into_iter().map(|(_, fields)| fields).collect()
    }

    #[test]
    fn records_are_split_with_and_without_quotes() {
        assert_eq!(fields("a,b\r\n1,2"), [["a", "b"], ["1", "2"]]);
        assert_eq!(fields("a,\"b,\"\"c\"\"\"\r\n\"1\",2\n"), [["a", "b,\"c\""], ["1", "2"]]);
        assert_eq!(fields("a,\n"), [["a", ""]]);
        assert_eq!(fields("5\" pipe,1\n"), [["5\" pipe", "1"]]);
        let cr = Dialect { line_end: b'\r', ..COMMA };
        assert_eq!(split_all(b"a,b\r1,2\r", cr).0.len(), 2);
    }

    #[test]
    fn lines_are_counted_through_quoted_line_ends() {
        let (records, _) = split_all(b"a,\"x\ny\"\nb,1\n", COMMA);
        assert_eq!((records[0].0, records[1].0), (1, 3));
    }

    #[test]
    fn a_quote_that_stays_open_is_a_fault_at_its_place() {
        let (records, faults) = split_all(b"a,b\n1,\"2\n3,4\n", COMMA);
        assert_eq!(records.len(), 1);
        let place = faults[0].place.as_ref().unwrap();
        assert_eq!((faults[0].code, place.line, place.column), ("unclosed-quote", 2, 3));
        assert_eq!(place.excerpt, "1,\"2");
    }

    #[test]
    fn text_after_a_closing_quote_is_a_fault_and_the_next_line_is_read() {
        let (records, faults) = split_all(b"\"1\"x,2\n3,4\n", COMMA);
        assert_eq!(records, [(2, vec!["3".to_string(), "4".to_string()])]);
        assert_eq!((faults[0].code, faults[0].place.as_ref().unwrap().column), ("text-after-quote", 4));
    }

    #[test]
    fn every_eighth_of_a_word_can_separate() {
        for length in 0..20 {
            let text = format!("{},{}\n", "a".repeat(length), "b".repeat(19 - length));
            assert_eq!(fields(&text), [["a".repeat(length), "b".repeat(19 - length)]]);
        }
        assert_eq!(zero_bytes(0x0001_0080_0100_00ff), 0x8000_8000_0080_8000);
    }

    proptest! {
        /// What csv-core writes is read back as it was, quoted or not.
        #[test]
        fn what_another_writer_writes_comes_back(
            rows in prop::collection::vec(prop::collection::vec("[ab,\"\r\n é]{0,6}", 2..4), 1..6),
        ) {
            let mut writer = csv_core::Writer::new();
            let mut written = vec![0; 4096];
            let mut at = 0;
            for row in &rows {
                for (i, field) in row.iter().enumerate() {
                    if i > 0 {
                        at += writer.delimiter(&mut written[at..]).1;
                    }
                    at += writer.field(field.as_bytes(), &mut written[at..]).2;
                }
                at += writer.terminator(&mut written[at..]).1;
            }
            let (records, faults) = split_all(&written[..at], COMMA);
            prop_assert!(faults.is_empty());
            let fields: Vec<Vec<String>> = records.into_iter().map(|(_, fields)| fields).collect();
            prop_assert_eq!(fields, rows);
        }

        /// Plain text is split the same by words as byte by byte.
        #[test]
        fn words_and_bytes_agree(text in "[a-c,\n\u{e9}]{0,60}") {
            let by_bytes: Vec<Vec<String>> = text
                .split_terminator('\n')
                .map(|line| line.split(',').map(str::to_string).collect())
                .collect();
            prop_assert_eq!(fields(&text), by_bytes);
        }
    }
}
