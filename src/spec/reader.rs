//! Takes typed values out of a table by its table of keys, and notes everything that is wrong.
//!
//! Every getter returns `None` where the key is absent or its value is wrong; the latter is noted.
//! [`Reader::finish`] then notes unknown keys and missing ones, so that one run finds all faults.

use crate::diagnostics::{Fault, Faults};
use crate::quantity::{Period, Probability, Sd};
use crate::spec::keys::{Key, Takes, nearest, one_of};
use crate::spec::table::{Entry, Kind, Span, Table, Value};
use jiff::civil::Date;

/// Reads one table.
///
/// ```
/// use reassay::{diagnostics::Faults, spec::{self, keys::{Key, Takes}, reader::Reader}};
///
/// const KEYS: &[Key] = &[
///     Key::required("sd", Takes::Positive, "the within sd"),
///     Key::optional("basis", Takes::Text, "where it comes from"),
/// ];
/// let spec = spec::read(b"sd = 2.2\nbassi = \"duplicates\"\n", "a.toml").unwrap();
/// let mut faults = Faults::default();
/// let mut reader = Reader::new(&spec.root, KEYS, &mut faults);
/// assert_eq!(reader.positive("sd"), Some(2.2));
/// assert_eq!(reader.text("basis"), None);
/// reader.finish();
/// assert_eq!(faults.0[0].code, "unknown-key");
/// ```
pub struct Reader<'a> {
    pub table: &'a Table,
    pub keys: &'static [Key],
    pub faults: &'a mut Faults,
}

/// A number, or the name of a limit (resolved per series).
#[derive(Debug, Clone, PartialEq)]
pub enum Threshold {
    Number(f64),
    Limit(String),
}

impl<'a> Reader<'a> {
    pub fn new(table: &'a Table, keys: &'static [Key], faults: &'a mut Faults) -> Reader<'a> {
        Reader { table, keys, faults }
    }

    pub fn has(&self, key: &str) -> bool {
        self.table.get(key).is_some()
    }

    /// The value as written, whatever it is.
    pub fn value(&self, key: &str) -> Option<&'a Value> {
        self.table.get(key)
    }

    /// Where the key's value stands; the table's head where the key is absent.
    pub fn span(&self, key: &str) -> &'a Span {
        self.table.get(key).map_or(&self.table.span, |value| &value.span)
    }

    /// Notes a fault at a value of this table (or at the table's head where the key is missing).
    pub fn fault_at(&mut self, key: &str, fault: Fault) {
        let place = self.span(key).place();
        self.faults.push(fault.at(place));
    }

    /// The value as written; its absence is noted, for keys that only some tables require.
    pub fn required(&mut self, key: &str) -> Option<&'a Value> {
        let value = self.value(key);
        if value.is_none()
            && let Some(known) = self.keys.iter().find(|known| known.name == key && !known.required)
        {
            self.faults.push(missing_key(self.table, known));
        }
        value
    }

    /// [`Reader::number`] of a key that this table requires.
    pub fn number_or_fault(&mut self, key: &str) -> Option<f64> {
        self.required(key)?;
        self.number(key)
    }

    /// [`Reader::positive`] of a key that this table requires.
    pub fn positive_or_fault(&mut self, key: &str) -> Option<f64> {
        self.required(key)?;
        self.positive(key)
    }

    pub fn text(&mut self, key: &str) -> Option<String> {
        let value = self.value(key)?;
        match &value.kind {
            Kind::Text(text) if !text.trim().is_empty() => Some(text.clone()),
            _ => self.refuse(key),
        }
    }

    /// Any finite number.
    pub fn number(&mut self, key: &str) -> Option<f64> {
        self.bounded(key, |number| number.is_finite())
    }

    /// A finite number above 0.
    pub fn positive(&mut self, key: &str) -> Option<f64> {
        self.bounded(key, |number| number > 0.0 && number.is_finite())
    }

    /// A finite number above 0, as a standard deviation.
    pub fn sd(&mut self, key: &str) -> Option<Sd> {
        self.positive(key).and_then(Sd::new)
    }

    /// A finite number, 0 or above.
    pub fn not_negative(&mut self, key: &str) -> Option<f64> {
        self.bounded(key, |number| number >= 0.0 && number.is_finite())
    }

    /// A number above 0, or infinity.
    pub fn positive_or_infinite(&mut self, key: &str) -> Option<f64> {
        self.bounded(key, |number| number > 0.0)
    }

    /// A number above 0, up to and including 1.
    pub fn share(&mut self, key: &str) -> Option<f64> {
        self.bounded(key, |number| number > 0.0 && number <= 1.0)
    }

    pub fn probability(&mut self, key: &str) -> Option<Probability> {
        let number = self.bounded(key, |number| number > 0.0 && number < 1.0)?;
        Probability::new(number)
    }

    /// A whole number, 1 or above.
    pub fn count(&mut self, key: &str) -> Option<u64> {
        self.whole(key, 1)
    }

    /// A whole number, `least` or above.
    pub fn whole(&mut self, key: &str, least: u64) -> Option<u64> {
        match self.value(key)?.kind {
            Kind::Number { whole: Some(whole), .. } if u64::try_from(whole).is_ok_and(|n| n >= least) => {
                u64::try_from(whole).ok()
            }
            _ => self.refuse(key),
        }
    }

    pub fn flag(&mut self, key: &str) -> Option<bool> {
        match self.value(key)?.kind {
            Kind::Flag(flag) => Some(flag),
            _ => self.refuse(key),
        }
    }

    pub fn date(&mut self, key: &str) -> Option<Date> {
        match self.value(key)?.kind {
            Kind::Date(date) => Some(date),
            _ => self.refuse(key),
        }
    }

    pub fn period(&mut self, key: &str) -> Option<Period> {
        match period_of(self.value(key)?) {
            Some(period) => Some(period),
            None => self.refuse(key),
        }
    }

    pub fn periods(&mut self, key: &str) -> Option<Vec<Period>> {
        self.list(key, period_of)
    }

    /// One of the choices of the key's [`Takes::OneOf`].
    pub fn choice(&mut self, key: &str) -> Option<&'static str> {
        let value = self.value(key)?;
        let choices = match self.takes(key) {
            Takes::OneOf(choices) => choices,
            _ => &[],
        };
        if let Kind::Text(text) = &value.kind
            && let Some(choice) = choices.iter().copied().find(|choice| choice == text)
        {
            return Some(choice);
        }
        let mut fault = Fault::wrong("wrong-value", format!("`{key}` cannot be {}", value.in_words()))
            .expected(one_of(choices));
        if let Kind::Text(text) = &value.kind
            && let Some(meant) = nearest(text, choices.iter().copied())
        {
            fault = fault.repair(format!("write \"{meant}\""));
        }
        self.fault_at(key, fault);
        None
    }

    /// A number, or the name of a limit; whether that limit exists is for the caller to ask.
    pub fn number_or_limit(&mut self, key: &str) -> Option<Threshold> {
        match &self.value(key)?.kind {
            Kind::Number { value, .. } if value.is_finite() => Some(Threshold::Number(*value)),
            Kind::Text(name) if !name.trim().is_empty() => Some(Threshold::Limit(name.clone())),
            _ => self.refuse(key),
        }
    }

    /// A list of texts; a single text serves as a list of one.
    pub fn text_list(&mut self, key: &str) -> Option<Vec<String>> {
        if let Kind::Text(text) = &self.value(key)?.kind {
            return Some(vec![text.clone()]);
        }
        self.list(key, |value| match &value.kind {
            Kind::Text(text) => Some(text.clone()),
            _ => None,
        })
    }

    /// A list of finite numbers.
    pub fn number_list(&mut self, key: &str) -> Option<Vec<f64>> {
        self.list(key, |value| match value.kind {
            Kind::Number { value, .. } if value.is_finite() => Some(value),
            _ => None,
        })
    }

    /// A list of pairs of finite numbers, such as quantiles.
    pub fn pairs(&mut self, key: &str) -> Option<Vec<(f64, f64)>> {
        self.list(key, |value| match &value.kind {
            Kind::List(items) => match items.as_slice() {
                [
                    Value { kind: Kind::Number { value: a, .. }, .. },
                    Value { kind: Kind::Number { value: b, .. }, .. },
                ] if a.is_finite() && b.is_finite() => Some((*a, *b)),
                _ => None,
            },
            _ => None,
        })
    }

    pub fn table(&mut self, key: &str) -> Option<&'a Table> {
        match &self.value(key)?.kind {
            Kind::Table(table) => Some(table),
            _ => self.refuse(key),
        }
    }

    /// A list of tables; absent is an empty list.
    pub fn tables(&mut self, key: &str) -> Vec<&'a Table> {
        let Some(value) = self.value(key) else { return Vec::new() };
        let items = match &value.kind {
            Kind::List(items) => items,
            Kind::Table(table) => {
                let name = table.name.trim_matches(['[', ']']).to_string();
                self.fault_at(
                    key,
                    Fault::wrong(
                        "wrong-type",
                        format!("`{key}` is a list of tables, and this is a single one"),
                    )
                    .expected("a list of tables")
                    .repair(format!("write [[{name}]] with two brackets")),
                );
                return Vec::new();
            }
            _ => {
                self.refuse::<()>(key);
                return Vec::new();
            }
        };
        let mut tables = Vec::new();
        for item in items {
            match &item.kind {
                Kind::Table(table) => tables.push(table),
                _ => self.refuse_item(key, item),
            }
        }
        tables
    }

    /// Notes every key that the table has and the language has not, every required key that is
    /// missing, and every key that this version does not serve yet.
    pub fn finish(self) {
        self.finish_beside(&[]);
    }

    /// As [`Reader::finish`], where other keys of the same table are read elsewhere: they are known
    /// here, and whether they are required is asked there.
    pub fn finish_beside(self, elsewhere: &[&'static [Key]]) {
        let known = || self.keys.iter().chain(elsewhere.iter().copied().flatten());
        let mut meant = Vec::new();
        for entry in &self.table.entries {
            match known().find(|key| key.name == entry.key) {
                Some(key) if !key.served => self
                    .faults
                    .push(not_served(&format!("`{}` of {}", key.name, self.table.name), &entry.key_span)),
                Some(_) => {}
                None => {
                    let names: Vec<&str> = known().filter(|key| key.served).map(|key| key.name).collect();
                    meant.extend(nearest(&entry.key, names.iter().copied()));
                    self.faults.push(unknown_key(self.table, entry, &names));
                }
            }
        }
        // A key that is there with a slip is not missing as well.
        let missing =
            |key: &&Key| key.required && self.table.get(key.name).is_none() && !meant.contains(&key.name);
        for key in self.keys.iter().filter(missing) {
            self.faults.push(missing_key(self.table, key));
        }
    }

    fn takes(&self, key: &str) -> Takes {
        let known = self.keys.iter().find(|known| known.name == key);
        debug_assert!(known.is_some(), "`{key}` is read but stands in no table of keys");
        known.map_or(Takes::Other("another value"), |known| known.takes)
    }

    fn bounded(&mut self, key: &str, fits: impl Fn(f64) -> bool) -> Option<f64> {
        match self.value(key)?.kind {
            Kind::Number { value, .. } if fits(value) => Some(value),
            _ => self.refuse(key),
        }
    }

    fn list<T>(&mut self, key: &str, item: impl Fn(&'a Value) -> Option<T>) -> Option<Vec<T>> {
        let Kind::List(values) = &self.value(key)?.kind else { return self.refuse(key) };
        let mut items = Vec::with_capacity(values.len());
        for value in values {
            match item(value) {
                Some(item) => items.push(item),
                None => self.refuse_item(key, value),
            }
        }
        (items.len() == values.len()).then_some(items)
    }

    fn refuse_item(&mut self, key: &str, value: &Value) {
        let fault = Fault::wrong("wrong-type", format!("`{key}` cannot hold {}", value.in_words()))
            .expected(self.takes(key).in_words())
            .at(value.span.place());
        self.faults.push(fault);
    }

    /// Notes that the key's value is not what the key takes, and says what was found.
    pub fn refuse<T>(&mut self, key: &str) -> Option<T> {
        let takes = self.takes(key);
        if let Some(value) = self.value(key) {
            let fault = mistaken(key, value, takes);
            self.fault_at(key, fault);
        }
        None
    }
}

/// A value that its key does not take, with the repair that the value suggests.
fn mistaken(key: &str, value: &Value, takes: Takes) -> Fault {
    let numeric = matches!(
        takes,
        Takes::Number
            | Takes::Positive
            | Takes::NotNegative
            | Takes::PositiveOrInfinite
            | Takes::Probability
            | Takes::Share
            | Takes::Count
    );
    let code = match &value.kind {
        Kind::Number { .. } if numeric => "out-of-range",
        _ => "wrong-type",
    };
    let fault =
        Fault::wrong(code, format!("`{key}` cannot be {}", value.in_words())).expected(takes.in_words());
    match (&value.kind, takes) {
        (Kind::Number { value, .. }, Takes::Probability) if *value > 1.0 && *value < 100.0 => {
            fault.repair(format!("write {} where {value} per cent is meant", value / 100.0))
        }
        (Kind::Text(text), _) if numeric => match text.trim().replace(',', ".").parse::<f64>() {
            Ok(number) if number.is_finite() => {
                fault.repair(format!("write {} without quotes", text.trim().replace(',', ".")))
            }
            _ => fault,
        },
        (Kind::Text(text), Takes::Date) => match text.trim().parse::<Date>() {
            Ok(date) if text.trim().len() == 10 => fault.repair(format!("write {date} without quotes")),
            _ => fault.repair("write year, month, day with hyphens and without quotes"),
        },
        (Kind::Text(text), Takes::Flag) if matches!(text.trim(), "true" | "false") => {
            fault.repair(format!("write {} without quotes", text.trim()))
        }
        (Kind::Number { written, .. }, Takes::Text | Takes::Markdown) => {
            fault.repair(format!("write \"{written}\" with quotes"))
        }
        (Kind::Text(text), Takes::Text | Takes::Markdown) if text.trim().is_empty() => {
            fault.repair(format!("say what it is, or leave `{key}` out"))
        }
        (Kind::Number { written, whole: None, .. }, Takes::Period) => {
            fault.repair(format!("write \"{written}\" with quotes where it is a name"))
        }
        _ => fault,
    }
}

/// A period is a whole number or a text.
pub fn period_of(value: &Value) -> Option<Period> {
    match &value.kind {
        Kind::Number { whole: Some(whole), .. } => Some(Period::new(&whole.to_string())),
        Kind::Text(text) if !text.trim().is_empty() => Some(Period::new(text)),
        _ => None,
    }
}

/// The refusal of what the language has and this version does not serve yet.
pub fn not_served(what: &str, span: &Span) -> Fault {
    Fault::wrong("not-served-yet", format!("{what} is not served yet by this version"))
        .at(span.place())
        .repair("leave it out; it is refused so that nothing is ignored in silence")
}

/// A key that is not of the language, with the nearest that is.
pub fn unknown_key(table: &Table, entry: &Entry, known: &[&str]) -> Fault {
    let fault = Fault::wrong("unknown-key", format!("`{}` is not a key of {}", entry.key, table.name))
        .at(entry.key_span.place());
    match nearest(&entry.key, known.iter().copied()) {
        Some(meant) => fault.repair(format!("write `{meant}`")),
        None => fault.expected(format!("one of {}", known.join(", "))),
    }
}

/// A required key that is missing, noted at the head of its table.
pub fn missing_key(table: &Table, key: &Key) -> Fault {
    Fault::wrong("missing-key", format!("{} lacks `{}`: {}", table.name, key.name, key.help))
        .at(table.span.place())
        .expected(format!("`{}` = {}", key.name, key.takes.in_words()))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::spec::read;

    const KEYS: &[Key] = &[
        Key::required("title", Takes::Text, "the title"),
        Key::required("date", Takes::Date, "the date of the report"),
        Key::optional("probability", Takes::Probability, "of the interval"),
        Key::optional("sd", Takes::Positive, "standard deviation"),
        Key::optional("n", Takes::Count, "how many"),
        Key::optional("status", Takes::OneOf(&["draft", "final"]), "status"),
        Key::optional("bounds", Takes::NumberList, "bounds of the classes"),
        Key::optional("period", Takes::Period, "the period"),
        Key::later("pdf", Takes::Flag, "a PDF beside"),
    ];

    fn faults_of(text: &str, ask: impl Fn(&mut Reader<'_>)) -> Vec<(String, String, String)> {
        let spec = read(text.as_bytes(), "s.toml").unwrap();
        let mut faults = Faults::default();
        let mut reader = Reader::new(&spec.root, KEYS, &mut faults);
        ask(&mut reader);
        reader.finish();
        let part = |text: Option<String>| text.unwrap_or_default();
        faults
            .0
            .into_iter()
            .map(|fault| (fault.code.to_string(), fault.message, part(fault.repair)))
            .collect()
    }

    #[test]
    fn a_percentage_for_a_probability_is_recognised() {
        let found = faults_of("title = \"a\"\ndate = 2026-01-31\nprobability = 95\n", |reader| {
            assert_eq!(reader.probability("probability"), None);
        });
        assert_eq!(found.len(), 1);
        assert_eq!(found[0].0, "out-of-range");
        assert!(found[0].2.contains("0.95"), "{found:?}");
    }

    #[test]
    fn every_fault_is_found_in_one_run() {
        let text = "titel = \"a\"\ndate = \"2026-01-31\"\nsd = -1\nn = 2.5\nstatus = \"finel\"\npdf = true\n";
        let found = faults_of(text, |reader| {
            reader.text("title");
            reader.date("date");
            reader.positive("sd");
            reader.count("n");
            reader.choice("status");
        });
        let codes: Vec<&str> = found.iter().map(|fault| fault.0.as_str()).collect();
        let expected =
            ["wrong-type", "out-of-range", "out-of-range", "wrong-value", "unknown-key", "not-served-yet"];
        assert_eq!(codes, expected);
        assert!(found[0].2.contains("without quotes"));
        assert!(found[3].2.contains("final"));
        assert!(found[4].2.contains("title"));
    }

    #[test]
    fn a_missing_key_is_noted_unless_it_is_there_with_a_slip() {
        let found = faults_of("titel = \"a\"\n", |_| ());
        let codes: Vec<&str> = found.iter().map(|fault| fault.0.as_str()).collect();
        assert_eq!(codes, ["unknown-key", "missing-key"]);
        assert!(found[1].1.contains("`date`"), "{found:?}");
    }

    #[test]
    fn infinity_and_nan_are_no_numbers_of_a_spec() {
        let found = faults_of("title=\"a\"\ndate=2026-01-31\nsd = inf\nbounds = [1, nan]\n", |reader| {
            assert_eq!(reader.positive_or_infinite("sd"), Some(f64::INFINITY));
            assert_eq!(reader.positive("sd"), None);
            assert_eq!(reader.number_list("bounds"), None);
        });
        assert_eq!(found.len(), 2);
    }

    #[test]
    fn a_period_is_a_whole_number_or_a_text() {
        for (written, name) in [("2025", "2025"), ("\"2025.0\"", "2025"), ("\"lot 7\"", "lot 7")] {
            let text = format!("title = \"a\"\ndate = 2026-01-31\nperiod = {written}\n");
            let found = faults_of(&text, |reader| {
                assert_eq!(reader.period("period"), Some(Period::new(name)));
            });
            assert!(found.is_empty());
        }
    }
}
