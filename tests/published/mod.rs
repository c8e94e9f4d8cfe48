//! Published check values, through the program as a user runs it: a spec goes in, answers.json comes out.
//!
//! `cases.json` holds the cases: what the source prints and an independent recomputation to 12 and more
//! digits. README.md lists them all, with the test that covers each, or why none can.

mod asked;
mod censored;
mod certified;
mod checks;
mod combined;
mod fractiles;
mod listed;
mod planned;
mod predicted;
mod textbook;
mod updated;

use reassay::json::Json;
use std::path::Path;
use std::sync::OnceLock;

/// One published case.
#[derive(Debug, Clone)]
pub struct Case {
    pub id: String,
    json: Json,
}

/// All cases, in the order of the file.
pub fn cases() -> &'static [Case] {
    static CASES: OnceLock<Vec<Case>> = OnceLock::new();
    CASES.get_or_init(|| {
        let Ok(Json::List(items)) = Json::read(include_bytes!("cases.json")) else {
            panic!("cases.json is no list")
        };
        let case =
            |json: Json| Case { id: json.get("id").and_then(Json::as_text).expect("an id").to_owned(), json };
        items.into_iter().map(case).collect()
    })
}

pub fn case(id: &str) -> &'static Case {
    cases().iter().find(|case| case.id == id).unwrap_or_else(|| panic!("no case {id}"))
}

/// The cases whose id begins so, at least one.
pub fn cases_of(start: &str) -> Vec<&'static Case> {
    let found: Vec<&Case> = cases().iter().filter(|case| case.id.starts_with(start)).collect();
    assert!(!found.is_empty(), "no case {start}...");
    found
}

/// A number, or a number as text.
fn number(json: &Json) -> Option<f64> {
    json.as_f64().or_else(|| json.as_text()?.parse().ok())
}

impl Case {
    /// A value inside the inputs, by a path such as "prior/mean".
    fn find(&self, path: &str) -> Option<&Json> {
        path.split('/').try_fold(&self.json, |json, key| json.get(key))
    }

    pub fn input(&self, path: &str) -> f64 {
        let found = self.find(&format!("inputs/{path}")).and_then(number);
        found.unwrap_or_else(|| panic!("{}: no input {path}", self.id))
    }

    /// A list of numbers as it stands in a spec.
    pub fn inputs(&self, path: &str) -> Vec<String> {
        let found = self.find(&format!("inputs/{path}")).and_then(Json::as_list).unwrap_or_default();
        found.iter().filter_map(Json::as_text).map(str::to_owned).collect()
    }

    pub fn computed(&self, key: &str) -> f64 {
        let found = self.find("computed").and_then(|computed| computed.get(key)).and_then(number);
        found.unwrap_or_else(|| panic!("{}: no computed {key}", self.id))
    }

    /// Holds a figure against the recomputed one, relative to its size; and, where the case says that the
    /// printed value agrees, against its digits, or against the tolerance that the case states.
    pub fn hold(&self, key: &str, got: f64, relative: f64) {
        self.hold_within(key, got, relative * self.computed(key).abs());
    }

    /// The same with an absolute bound, for figures that are differences of larger ones.
    pub fn hold_within(&self, key: &str, got: f64, absolute: f64) {
        let wanted = self.computed(key);
        assert!((got - wanted).abs() <= absolute, "{} {key}: {got} is not {wanted} ± {absolute:e}", self.id);
        let Some(printed) = self.find("published").and_then(|published| published.get(key)) else { return };
        let text = match printed {
            Json::Text(text) => text.clone(),
            other => other.to_line(),
        };
        let value: f64 = text.parse().unwrap_or_else(|_| panic!("{}: {text} is no number", self.id));
        let bound = match self.json.get("printed").and_then(Json::as_text) {
            Some("agrees") => 0.5 * last_place(&text) * (1.0 + 1e-9) + 1e-15 * value.abs(),
            Some("within tolerance") => {
                match self.find("tolerance").and_then(|all| all.get(key)).and_then(number) {
                    Some(tolerance) => tolerance,
                    None => return,
                }
            }
            _ => return,
        };
        assert!((got - value).abs() <= bound, "{} {key}: {got} is not the printed {text}", self.id);
    }

    /// Against the recomputed figure alone: for certified values, whose printed digits are that figure's own.
    pub fn hold_recomputed(&self, key: &str, got: f64, relative: f64) {
        let wanted = self.computed(key);
        let bound = relative * wanted.abs();
        assert!((got - wanted).abs() <= bound, "{} {key}: {got} is not {wanted} ± {bound:e}", self.id);
    }

    /// Holds a figure against the printed one alone, for those that agree only loosely.
    pub fn printed_within(&self, key: &str, got: f64, absolute: f64) {
        let printed = self.find("published").and_then(|published| published.get(key)).and_then(number);
        let printed = printed.unwrap_or_else(|| panic!("{}: no printed {key}", self.id));
        assert!(
            (got - printed).abs() <= absolute,
            "{} {key}: {got} is not the printed {printed} ± {absolute}",
            self.id
        );
    }
}

/// One unit of the last place that a number is printed to.
fn last_place(text: &str) -> f64 {
    let (digits, exponent) = text.split_once(['e', 'E']).unwrap_or((text, "0"));
    let decimals = digits.split_once('.').map_or(0, |(_, decimals)| decimals.len());
    format!("1e{}", exponent.parse::<i64>().expect("an exponent") - decimals as i64)
        .parse()
        .expect("a power of ten")
}

/// The cells of a small data file of this folder, column by column, as text.
pub fn columns(file: &str) -> Vec<Vec<String>> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/published/data").join(file);
    let text = std::fs::read_to_string(&path).unwrap_or_else(|error| panic!("{file}: {error}"));
    let mut columns: Vec<Vec<String>> = Vec::new();
    for line in text.lines().skip(1) {
        for (place, cell) in line.split(',').enumerate() {
            if columns.len() <= place {
                columns.push(Vec::new());
            }
            columns[place].push(cell.trim().to_owned());
        }
    }
    columns
}

pub fn numbers(cells: &[String]) -> Vec<f64> {
    cells.iter().map(|cell| cell.parse().unwrap_or_else(|_| panic!("{cell} is no number"))).collect()
}

#[test]
fn printed_digits_are_counted() {
    assert_eq!(last_place("2.31"), 0.01);
    assert_eq!(last_place("413"), 1.0);
    assert_eq!(last_place("5.11462616000000E-02"), 1e-16);
}
