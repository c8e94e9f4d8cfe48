//! JSON with the keys in the order in which they were put, one canonical way of writing it, and
//! reading that gives back the very numbers that were written.
//!
//! Numbers are written in their shortest form that reads back as the same number; what is infinite or
//! undefined is never written. [`Object`] turns an absent figure into null and says why in its `why`.

mod at;
mod toml;

use crate::quantity::Figure;
pub use at::At;
use serde::de::{Deserialize, Deserializer, Error, MapAccess, SeqAccess, Visitor};
use std::fmt;
pub use toml::of_toml;

/// Columns up to which a list or an object stays on one line.
const LINE_COLUMNS: usize = 110;

/// A JSON value.
#[derive(Debug, Clone, PartialEq)]
pub enum Json {
    Null,
    Flag(bool),
    Whole(u64),
    /// Finite when made by [`Json::number`] or read; anything else is written as null.
    Number(f64),
    Text(String),
    List(Vec<Json>),
    /// In the order of writing.
    Object(Vec<(String, Json)>),
}

impl Json {
    /// The number, or null where it is infinite or undefined.
    pub fn number(value: f64) -> Json {
        if value.is_finite() { Json::Number(value) } else { Json::Null }
    }

    pub fn text(text: impl Into<String>) -> Json {
        Json::Text(text.into())
    }

    /// The value of a key, where this is an object that has it.
    pub fn get(&self, key: &str) -> Option<&Json> {
        match self {
            Json::Object(fields) => fields.iter().find(|(own, _)| own == key).map(|(_, value)| value),
            _ => None,
        }
    }

    pub fn as_text(&self) -> Option<&str> {
        match self {
            Json::Text(text) => Some(text),
            _ => None,
        }
    }

    pub fn as_f64(&self) -> Option<f64> {
        match self {
            Json::Number(value) => Some(*value),
            Json::Whole(value) => Some(*value as f64),
            _ => None,
        }
    }

    pub fn as_whole(&self) -> Option<u64> {
        match self {
            Json::Whole(value) => Some(*value),
            _ => None,
        }
    }

    pub fn as_list(&self) -> Option<&[Json]> {
        match self {
            Json::List(items) => Some(items),
            _ => None,
        }
    }

    /// The whole file: short lists and objects on one line, two spaces a level, a line end at the end.
    pub fn to_file(&self) -> Vec<u8> {
        let mut text = String::new();
        self.write(&mut text, 0, 0);
        text.push('\n');
        text.into_bytes()
    }

    /// On one line.
    pub fn to_line(&self) -> String {
        let mut text = String::new();
        self.write_line(&mut text);
        text
    }

    /// Reads one JSON value; the message of a fault has line and column.
    pub fn read(bytes: &[u8]) -> Result<Json, String> {
        serde_json::from_slice(bytes).map_err(|error| error.to_string())
    }

    fn write_line(&self, out: &mut String) {
        match self {
            Json::Null => out.push_str("null"),
            Json::Flag(flag) => out.push_str(if *flag { "true" } else { "false" }),
            Json::Whole(value) => out.push_str(&value.to_string()),
            // `{:?}` is the shortest text that reads back as the same number, and valid JSON.
            Json::Number(value) if value.is_finite() => out.push_str(&format!("{value:?}")),
            Json::Number(_) => out.push_str("null"),
            Json::Text(text) => write_text(text, out),
            Json::List(items) => {
                out.push('[');
                for (place, item) in items.iter().enumerate() {
                    if place > 0 {
                        out.push_str(", ");
                    }
                    item.write_line(out);
                }
                out.push(']');
            }
            Json::Object(fields) => {
                out.push('{');
                for (place, (key, value)) in fields.iter().enumerate() {
                    if place > 0 {
                        out.push_str(", ");
                    }
                    write_text(key, out);
                    out.push_str(": ");
                    value.write_line(out);
                }
                out.push('}');
            }
        }
    }

    /// `indent` is that of the line; `before` the columns that the line already holds beyond it.
    fn write(&self, out: &mut String, indent: usize, before: usize) {
        let (open, close, empty) = match self {
            Json::List(items) => ('[', ']', items.is_empty()),
            Json::Object(fields) => ('{', '}', fields.is_empty()),
            _ => return self.write_line(out),
        };
        if empty || self.fits(LINE_COLUMNS.saturating_sub(indent + before)) {
            return self.write_line(out);
        }
        let inner = indent + 2;
        out.push(open);
        let new_line = |place: usize, out: &mut String| {
            out.push_str(if place > 0 { ",\n" } else { "\n" });
            out.extend(std::iter::repeat_n(' ', inner));
        };
        match self {
            Json::List(items) => {
                for (place, item) in items.iter().enumerate() {
                    new_line(place, out);
                    item.write(out, inner, 0);
                }
            }
            Json::Object(fields) => {
                for (place, (key, value)) in fields.iter().enumerate() {
                    new_line(place, out);
                    let start = out.len();
                    write_text(key, out);
                    out.push_str(": ");
                    value.write(out, inner, out.len() - start);
                }
            }
            _ => {}
        }
        out.push('\n');
        out.extend(std::iter::repeat_n(' ', indent));
        out.push(close);
    }

    /// Whether the one-line form has at most so many bytes; looks no further than needed.
    fn fits(&self, room: usize) -> bool {
        self.length(room).is_some()
    }

    /// The bytes of the one-line form, or `None` beyond `room`.
    fn length(&self, room: usize) -> Option<usize> {
        let mut used: usize = 2;
        match self {
            Json::List(items) => {
                for item in items {
                    used += item.length(room.checked_sub(used)?)? + 2;
                }
            }
            Json::Object(fields) => {
                for (key, value) in fields {
                    used += key.len() + 6;
                    used += value.length(room.checked_sub(used)?)?;
                }
            }
            Json::Text(text) => used += text.len(),
            other => used = other.to_line().len(),
        }
        (used <= room).then_some(used)
    }
}

fn write_text(text: &str, out: &mut String) {
    out.push('"');
    for c in text.chars() {
        match c {
            '"' => out.push_str("\\\""),
            '\\' => out.push_str("\\\\"),
            '\n' => out.push_str("\\n"),
            '\r' => out.push_str("\\r"),
            '\t' => out.push_str("\\t"),
            c if c.is_control() || matches!(c, '\u{2028}' | '\u{2029}') => {
                out.push_str(&format!("\\u{:04x}", u32::from(c)));
            }
            c => out.push(c),
        }
    }
    out.push('"');
}

/// An object under construction: absent figures become null, and their reasons come last in `why`.
#[derive(Debug, Default)]
pub struct Object {
    fields: Vec<(String, Json)>,
    why: Vec<(String, Json)>,
}

impl Object {
    pub fn new() -> Object {
        Object::default()
    }

    pub fn put(mut self, name: &str, value: Json) -> Object {
        self.fields.push((name.to_string(), value));
        self
    }

    pub fn text(self, name: &str, text: impl Into<String>) -> Object {
        self.put(name, Json::Text(text.into()))
    }

    /// The text, or nothing at all where there is none.
    pub fn text_if(self, name: &str, text: Option<&str>) -> Object {
        match text {
            Some(text) => self.text(name, text),
            None => self,
        }
    }

    pub fn whole(self, name: &str, value: u64) -> Object {
        self.put(name, Json::Whole(value))
    }

    pub fn flag(self, name: &str, value: bool) -> Object {
        self.put(name, Json::Flag(value))
    }

    /// Null, and why.
    pub fn absent(mut self, name: &str, reason: impl Into<String>) -> Object {
        self.because(name, reason);
        self.put(name, Json::Null)
    }

    pub fn number(self, name: &str, value: f64) -> Object {
        match reason_against(value) {
            Some(reason) => self.absent(name, reason),
            None => self.put(name, Json::Number(value)),
        }
    }

    pub fn figure(self, name: &str, figure: &Figure) -> Object {
        match figure {
            Ok(value) => self.number(name, *value),
            Err(absent) => self.absent(name, absent.reason.as_str()),
        }
    }

    /// A reason beside a field that stands.
    pub fn because(&mut self, name: &str, reason: impl Into<String>) {
        self.why.push((name.to_string(), Json::Text(reason.into())));
    }

    pub fn has(&self, name: &str) -> bool {
        self.fields.iter().any(|(own, _)| own == name)
    }

    pub fn done(mut self) -> Json {
        if !self.why.is_empty() {
            self.fields.push(("why".to_string(), Json::Object(self.why)));
        }
        Json::Object(self.fields)
    }
}

/// Why a number cannot be written.
pub fn reason_against(value: f64) -> Option<&'static str> {
    if value.is_nan() {
        Some("undefined")
    } else if value.is_infinite() {
        Some("infinite")
    } else {
        None
    }
}

impl<'de> Deserialize<'de> for Json {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Json, D::Error> {
        deserializer.deserialize_any(Reading)
    }
}

struct Reading;

impl<'de> Visitor<'de> for Reading {
    type Value = Json;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("a JSON value")
    }

    fn visit_unit<E>(self) -> Result<Json, E> {
        Ok(Json::Null)
    }

    fn visit_bool<E>(self, flag: bool) -> Result<Json, E> {
        Ok(Json::Flag(flag))
    }

    fn visit_u64<E>(self, value: u64) -> Result<Json, E> {
        Ok(Json::Whole(value))
    }

    fn visit_i64<E>(self, value: i64) -> Result<Json, E> {
        Ok(Json::Number(value as f64))
    }

    fn visit_f64<E>(self, value: f64) -> Result<Json, E> {
        Ok(Json::Number(value))
    }

    fn visit_str<E>(self, text: &str) -> Result<Json, E> {
        Ok(Json::Text(text.to_string()))
    }

    fn visit_string<E>(self, text: String) -> Result<Json, E> {
        Ok(Json::Text(text))
    }

    fn visit_seq<A: SeqAccess<'de>>(self, mut items: A) -> Result<Json, A::Error> {
        let mut list = Vec::new();
        while let Some(item) = items.next_element()? {
            list.push(item);
        }
        Ok(Json::List(list))
    }

    fn visit_map<A: MapAccess<'de>>(self, mut entries: A) -> Result<Json, A::Error> {
        let mut fields: Vec<(String, Json)> = Vec::new();
        while let Some((key, value)) = entries.next_entry::<String, Json>()? {
            if fields.iter().any(|(own, _)| *own == key) {
                return Err(A::Error::custom(format!("the key \"{key}\" stands twice")));
            }
            fields.push((key, value));
        }
        Ok(Json::Object(fields))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn keys_keep_their_order_and_texts_their_characters() {
        let value = Object::new().text("z", "a\"b\\c\nd\u{1}µ\u{2028}").whole("a", 3).flag("m", true).done();
        assert_eq!(value.to_line(), "{\"z\": \"a\\\"b\\\\c\\nd\\u0001µ\\u2028\", \"a\": 3, \"m\": true}");
        assert_eq!(Json::read(value.to_line().as_bytes()), Ok(value));
    }

    #[test]
    fn what_cannot_be_written_is_null_with_its_reason() {
        let value =
            Object::new().number("mean", f64::INFINITY).number("sd", f64::NAN).number("n", 1.0).done();
        assert_eq!(
            value.to_line(),
            "{\"mean\": null, \"sd\": null, \"n\": 1.0, \"why\": {\"mean\": \"infinite\", \"sd\": \"undefined\"}}"
        );
        assert_eq!(Json::Number(f64::NEG_INFINITY).to_line(), "null");
    }

    #[test]
    fn long_objects_are_broken_and_short_ones_are_not() {
        let short = Json::List(vec![Json::Whole(1), Json::Whole(2)]);
        let long = Object::new().text("text", "x".repeat(120)).put("list", short).done();
        let text = String::from_utf8(long.to_file()).unwrap();
        assert_eq!(text, format!("{{\n  \"text\": \"{}\",\n  \"list\": [1, 2]\n}}\n", "x".repeat(120)));
    }

    #[test]
    fn faults_of_reading_have_their_place() {
        assert_eq!(
            Json::read(b"{\"a\": 1,\n \"a\": 2}"),
            Err("the key \"a\" stands twice at line 2 column 8".into())
        );
        assert!(Json::read(b"[1, 2").is_err());
        assert!(Json::read(b"1 2").is_err());
        assert!(Json::read(&b"[".repeat(100_000)).is_err());
    }

    fn any_json() -> impl Strategy<Value = Json> {
        let leaf = prop_oneof![
            Just(Json::Null),
            any::<bool>().prop_map(Json::Flag),
            any::<u64>().prop_map(Json::Whole),
            any::<f64>().prop_map(Json::number),
            ".{0,12}".prop_map(Json::Text),
        ];
        leaf.prop_recursive(4, 40, 6, |inner| {
            prop_oneof![
                prop::collection::vec(inner.clone(), 0..6).prop_map(Json::List),
                prop::collection::btree_map(".{0,5}", inner, 0..6)
                    .prop_map(|fields| Json::Object(fields.into_iter().collect())),
            ]
        })
    }

    proptest! {
        #[test]
        fn what_is_written_reads_back_the_same(value in any_json()) {
            prop_assert_eq!(Json::read(&value.to_file()), Ok(value.clone()));
            prop_assert_eq!(Json::read(value.to_line().as_bytes()), Ok(value));
        }

        #[test]
        fn every_finite_number_reads_back_with_the_same_bits(bits in any::<u64>()) {
            let number = f64::from_bits(bits);
            prop_assume!(number.is_finite());
            let back = Json::read(Json::Number(number).to_line().as_bytes());
            prop_assert_eq!(back.ok().and_then(|json| json.as_f64()).map(f64::to_bits), Some(bits));
        }
    }
}
