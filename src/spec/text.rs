//! From bytes to tables: encoding, TOML syntax, dates, and the place of every key and value.

use crate::diagnostics::{Fault, Faults, Place};
use crate::source;
use crate::spec::table::{Entry, Kind, Span, SpecText, Table, Value};
use std::collections::BTreeSet;
use std::ops::Range;
use std::sync::Arc;
use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// The parser goes on after a syntax error and then finds many that follow from the first; only so
/// many are shown, one a line.
const SYNTAX_FAULTS_SHOWN: usize = 5;

/// The bytes as UTF-8 text, without a byte order mark.
pub fn decode(bytes: &[u8], file: &str) -> Result<String, Fault> {
    if bytes.starts_with(&[0xff, 0xfe]) || bytes.starts_with(&[0xfe, 0xff]) {
        return Err(Fault::wrong("not-utf-8", format!("{file} is UTF-16, not UTF-8"))
            .at(Place { file: file.into(), line: 1, column: 1, excerpt: String::new(), mark: 0..0 })
            .expected("UTF-8 text")
            .repair("save the file as UTF-8"));
    }
    source::text(bytes, file).map(str::to_string)
}

/// The tables of a TOML text, entries in the order of the text; `None` where it is not TOML. Values
/// that no key of a spec can take are noted too, and the rest goes on.
pub fn parse(source: &Arc<SpecText>, faults: &mut Faults) -> Option<Table> {
    let (root, errors) = DeTable::parse_recoverable(&source.text);
    if !errors.is_empty() {
        note_syntax(source, errors, faults);
        return None;
    }
    let mut builder = Builder { source, faults, depth: 0, too_deep: false };
    let table = builder.table(root.get_ref(), "the spec".to_string(), &Path::default(), 0..0);
    (!builder.too_deep).then_some(table)
}

fn note_syntax(source: &Arc<SpecText>, errors: Vec<toml::de::Error>, faults: &mut Faults) {
    let mut errors: Vec<(Range<usize>, String)> =
        errors.into_iter().map(|error| (error.span().unwrap_or(0..0), error.message().to_string())).collect();
    errors.sort_by_key(|(bytes, _)| bytes.start);
    let mut lines = BTreeSet::new();
    let mut left_off = 0;
    for (bytes, message) in errors {
        let place = span(source, bytes.clone()).place();
        if !lines.insert(place.line) {
            continue;
        }
        if lines.len() > SYNTAX_FAULTS_SHOWN {
            left_off += 1;
            continue;
        }
        faults.push(syntax_fault(source, &bytes, &message).at(place));
    }
    if left_off > 0
        && let Some(last) = faults.0.last_mut()
    {
        let lines = if left_off == 1 { "line is" } else { "lines are" };
        last.repair = Some(format!(
            "mend these first: {left_off} further {lines} not understood, perhaps because of them"
        ));
    }
}

/// The parser's message, in the words of this program where a person is likely to meet it.
fn syntax_fault(source: &Arc<SpecText>, bytes: &Range<usize>, message: &str) -> Fault {
    if message.starts_with("duplicate key") {
        let key = source.text.get(bytes.clone()).unwrap_or_default();
        return Fault::wrong("duplicate-key", format!("`{key}` stands here for the second time"))
            .expected("every key once in its table, every table once")
            .repair("remove one of the two, or bring both together");
    }
    let (what, expected) = match message.split_once(", expected ") {
        Some((what, expected)) => (what, expected),
        None => (message, "nothing"),
    };
    let not_toml = |what: &str| Fault::wrong("syntax", format!("this is not TOML: {what}"));
    match (what, expected) {
        ("invalid basic string", "`\"`") => {
            not_toml("a text begins with \" and does not end on its line").repair("add the closing \"")
        }
        ("invalid literal string", "`'`") => {
            not_toml("a text begins with ' and does not end on its line").repair("add the closing '")
        }
        (what, "newline, `#`") if is_decimal_comma(&source.text, bytes.start) => {
            not_toml(what).expected("a decimal point").repair("write the number with a point")
        }
        (what, "newline, `#`") => {
            not_toml(what).expected("the end of the line, or a comment that begins with #")
        }
        ("string values must be quoted", _) => {
            not_toml("this is no number, date or true or false").expected("a text in quotes")
        }
        ("unclosed table", _) => not_toml("a table's head does not end").repair("add the closing ]"),
        (what, "nothing") => not_toml(what),
        (what, expected) => not_toml(what).expected(expected.replace('`', "")),
    }
}

/// Whether a comma with digits on both sides stands here.
fn is_decimal_comma(text: &str, at: usize) -> bool {
    let bytes = text.as_bytes();
    let digit = |at: Option<usize>| at.and_then(|at| bytes.get(at)).is_some_and(u8::is_ascii_digit);
    bytes.get(at) == Some(&b',') && digit(at.checked_sub(1)) && digit(at.checked_add(1))
}

fn span(source: &Arc<SpecText>, bytes: Range<usize>) -> Span {
    Span { source: source.clone(), bytes }
}

/// The way from the root to a table, for its name in messages.
#[derive(Clone, Default)]
struct Path(Vec<String>);

impl Path {
    fn to(&self, key: &str) -> Path {
        let mut keys = self.0.clone();
        keys.push(if is_bare(key) { key.to_string() } else { format!("\"{key}\"") });
        Path(keys)
    }

    fn text(&self) -> String {
        self.0.join(".")
    }
}

/// Whether a key needs no quotes in TOML.
pub fn is_bare(key: &str) -> bool {
    !key.is_empty() && key.bytes().all(|b| b.is_ascii_alphanumeric() || b == b'_' || b == b'-')
}

struct Builder<'a> {
    source: &'a Arc<SpecText>,
    faults: &'a mut Faults,
    depth: usize,
    too_deep: bool,
}

/// Deeper than any spec goes; the parser's own bound lets dotted keys and brackets multiply.
const DEPTH: usize = 30;

impl Builder<'_> {
    fn table(&mut self, table: &DeTable<'_>, name: String, path: &Path, bytes: Range<usize>) -> Table {
        let mut entries: Vec<Entry> = table
            .iter()
            .map(|(key, value)| {
                let path = path.to(key.get_ref());
                Entry {
                    key: key.get_ref().to_string(),
                    key_span: span(self.source, key.span()),
                    value: self.value(value, &path),
                }
            })
            .collect();
        // The parser keeps keys in alphabetical order; the order of the text is the user's.
        entries.sort_by_key(|entry| entry.key_span.bytes.start);
        Table { name, span: span(self.source, bytes), entries }
    }

    fn value(&mut self, value: &Spanned<DeValue<'_>>, path: &Path) -> Value {
        let bytes = value.span();
        if self.depth >= DEPTH {
            self.too_deep = true;
            self.faults.push(
                Fault::wrong("syntax", "tables and lists are nested too deeply here")
                    .at(span(self.source, bytes.clone()).place())
                    .expected(format!("at most {DEPTH} levels")),
            );
            return Value { kind: Kind::Flag(false), span: span(self.source, bytes) };
        }
        self.depth += 1;
        let kind = match value.get_ref() {
            DeValue::String(text) => Kind::Text(text.to_string()),
            DeValue::Integer(_) | DeValue::Float(_) => self.number(bytes.clone()),
            DeValue::Boolean(flag) => Kind::Flag(*flag),
            DeValue::Datetime(moment) => {
                let day = moment.date.filter(|_| moment.time.is_none() && moment.offset.is_none());
                self.date(day.map(|day| (day.year, day.month, day.day)), bytes.clone())
            }
            DeValue::Array(items) => {
                let tables = items.iter().all(|item| matches!(item.get_ref(), DeValue::Table(_)));
                let values = items.iter().enumerate().map(|(at, item)| match item.get_ref() {
                    DeValue::Table(table) if tables => {
                        let name = name_in_list(table, path, at, items.len());
                        let table = self.table(table, name, path, item.span());
                        Value { kind: Kind::Table(table), span: span(self.source, item.span()) }
                    }
                    _ => self.value(item, path),
                });
                Kind::List(values.collect())
            }
            DeValue::Table(table) => {
                let name = format!("[{}]", path.text());
                Kind::Table(self.table(table, name, path, bytes.clone()))
            }
        };
        self.depth -= 1;
        Value { kind, span: span(self.source, bytes) }
    }

    /// A number keeps its digits as written; `_` between digits means nothing.
    fn number(&mut self, bytes: Range<usize>) -> Kind {
        let raw = self.source.text.get(bytes.clone()).unwrap_or_default();
        let written: String = raw.chars().filter(|c| *c != '_').collect();
        let written = written.strip_prefix('+').unwrap_or(&written).to_string();
        let based = [("0x", 16), ("0o", 8), ("0b", 2)]
            .into_iter()
            .find_map(|(prefix, radix)| Some((written.strip_prefix(prefix)?, radix)));
        if let Some((digits, radix)) = based {
            // A number in another base is a slip in a spec (0b1 for 0.1): say what it would be.
            let whole = i64::from_str_radix(digits, radix).ok();
            self.faults.push(
                Fault::wrong("not-decimal", format!("`{written}` is a number in base {radix}"))
                    .at(span(self.source, bytes).place())
                    .expected("a decimal number")
                    .repair(whole.map_or("write it in decimal".into(), |whole| format!("write {whole}"))),
            );
            return Kind::Number { value: 0.0, whole: Some(0), written };
        }
        let whole = written.parse().ok();
        let value: f64 = written.parse().unwrap_or(f64::NAN);
        if value.is_infinite() && !written.ends_with("inf") {
            self.faults.push(
                Fault::wrong("too-large", format!("{} is too large a number", shortened(&written)))
                    .at(span(self.source, bytes).place())
                    .expected("a number below 1.7e308"),
            );
        }
        Kind::Number { value, whole, written }
    }

    /// `day` is year, month, day; absent where a time of day was written.
    fn date(&mut self, day: Option<(u16, u8, u8)>, bytes: Range<usize>) -> Kind {
        let written = self.source.text.get(bytes.clone()).unwrap_or_default().to_string();
        let place = span(self.source, bytes).place();
        let Some((year, month, day)) = day else {
            self.faults.push(
                Fault::wrong("not-a-day", "a time of day is never wanted in a spec")
                    .at(place)
                    .expected("a date alone, such as 2026-01-31")
                    .repair("take the time away, or put the whole in quotes where a text is meant"),
            );
            return Kind::Text(written);
        };
        let civil = match (i16::try_from(year), i8::try_from(month), i8::try_from(day)) {
            (Ok(year), Ok(month), Ok(day)) => jiff::civil::Date::new(year, month, day).ok(),
            _ => None,
        };
        match civil {
            Some(civil) => Kind::Date(civil),
            None => {
                let message = format!("{written} is not a day of the calendar");
                self.faults.push(Fault::wrong("not-a-day", message).at(place));
                Kind::Text(written)
            }
        }
    }
}

fn shortened(digits: &str) -> String {
    let start: String = digits.chars().take(20).collect();
    if digits.len() > 20 { format!("{start}…") } else { start }
}

/// `[[question]] "over"` where the table says its id, else `[[readings]] 2` or `[[readings]]`.
fn name_in_list(table: &DeTable<'_>, path: &Path, at: usize, length: usize) -> String {
    let own = table.iter().find(|(key, _)| key.get_ref() == "id").map(|(_, value)| value.get_ref());
    let is_section = path.0.len() == 1;
    match own {
        Some(DeValue::String(id)) if is_section => format!("[[{}]] \"{id}\"", path.text()),
        _ if length == 1 => format!("[[{}]]", path.text()),
        _ => format!("[[{}]] number {}", path.text(), at + 1),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn parsed(text: &str) -> (Option<Table>, Faults) {
        let source = Arc::new(SpecText { file: "s.toml".into(), text: text.into() });
        let mut faults = Faults::default();
        let table = parse(&source, &mut faults);
        (table, faults)
    }

    #[test]
    fn entries_keep_the_order_of_the_text_and_numbers_their_digits() {
        let (root, faults) = parsed("z = 12.50\na = 1_000\n[m.k]\nd = 2026-01-31\n");
        assert!(faults.is_empty(), "{faults:?}");
        let root = root.unwrap();
        let keys: Vec<&str> = root.entries.iter().map(|entry| entry.key.as_str()).collect();
        assert_eq!(keys, ["z", "a", "m"]);
        assert_eq!(
            root.get("z").map(|value| &value.kind),
            Some(&Kind::Number { value: 12.5, whole: None, written: "12.50".into() })
        );
        assert_eq!(
            root.get("a").map(|value| &value.kind),
            Some(&Kind::Number { value: 1000.0, whole: Some(1000), written: "1000".into() })
        );
    }

    #[test]
    fn the_place_of_a_value_counts_characters_and_marks_bytes() {
        let (root, _) = parsed("# µ\r\nunit = \"µg/L\" # µ\r\n");
        let place = root.unwrap().get("unit").map(|value| value.span.place());
        let expected = Place {
            file: "s.toml".into(),
            line: 2,
            column: 8,
            excerpt: "unit = \"µg/L\" # µ".into(),
            mark: 7..14,
        };
        assert_eq!(place, Some(expected));
    }

    #[test]
    fn syntax_faults_are_the_first_of_each_line_in_order_and_at_most_five() {
        let (_, faults) = parsed("a = \nb = = 2\nc = [1\nd = \"x\ne = 'y\nf = @\ng = !\n[h\n");
        let lines: Vec<u64> = faults.0.iter().filter_map(|fault| Some(fault.place.as_ref()?.line)).collect();
        assert!(lines.len() <= SYNTAX_FAULTS_SHOWN && lines.len() > 1, "{faults:?}");
        assert!(lines.windows(2).all(|pair| pair[0] < pair[1]), "{lines:?}");
    }

    #[test]
    fn bytes_that_are_not_utf8_are_shown_with_their_place() {
        let fault = decode(b"a = 1\nb = \"caf\xe9\"\n", "s.toml").unwrap_err();
        let place = fault.place.unwrap();
        assert_eq!((place.line, place.column), (2, 9));
        assert_eq!(&place.excerpt[place.mark], "\u{fffd}");
        assert_eq!(decode(b"\xef\xbb\xbfa = 1", "s.toml").unwrap(), "a = 1");
        assert!(decode(b"\xff\xfea\0", "s.toml").unwrap_err().message.contains("UTF-16"));
    }

    #[test]
    fn very_deep_nesting_is_a_fault_not_a_crash() {
        for text in [
            format!("a = {}", "[".repeat(100_000)),
            format!("a = {}", "{a=".repeat(100_000)),
            format!("{}a = 1", "a.".repeat(100_000)),
            format!("[{}a]", "a.".repeat(100_000)),
            format!("a = {}1{}", "[{a.b.c = ".repeat(39), "}]".repeat(39)),
        ] {
            let (_, faults) = parsed(&text);
            assert!(!faults.is_empty(), "{}", &text[..20]);
        }
    }
}
