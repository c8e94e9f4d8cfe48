//! Is a row there twice?
//!
//! A reading copied twice counts twice: the level moves towards it and all chances become too sure.
//! Rows that agree in series, date, id and value are the same row; rows without an id that agree in
//! series, date and value may be two honest replicates, so they are a remark.
//!
//! Statistic: the number of rows that repeat an earlier row. It is a count, not a test.
//! Assumes: nothing. Values are compared as numbers, dates and ids as text.
//! Source: common practice, no source.
//!
//! Worked: rows (B3, 2025-04-02, id 117, 41.2) twice: one row repeats, a flag.

use std::collections::BTreeMap;

use crate::checks::{Check, Concern, words};

/// The name of this check.
pub const ID: &str = "duplicate rows";
/// Where the method was published.
pub const SOURCE: &str = "common practice, no source";

const STATISTIC: &str = "rows that repeat an earlier row";

/// A row as the check sees it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Row<'a> {
    /// Series, or empty.
    pub series: &'a str,
    /// Date as written, or empty.
    pub date: &'a str,
    /// Identity of the reading, or empty.
    pub id: &'a str,
    /// The reading.
    pub value: f64,
    /// Where the row stands, such as "readings.csv:14".
    pub place: &'a str,
}

/// What the check found: the finding and the pairs (place of the first row, place of the repeat).
#[derive(Clone, Debug, PartialEq)]
pub struct Duplicates {
    /// The finding.
    pub check: Check,
    /// Repeats of a row with an id or with every field equal.
    pub repeats: Vec<(String, String)>,
    /// Rows without id that agree in series, date and value.
    pub alike: Vec<(String, String)>,
}

/// Looks for rows that are there twice. Rows with neither date nor id are not compared: equal
/// values alone say nothing.
pub fn check(rows: &[Row]) -> Duplicates {
    let mut first: BTreeMap<(&str, &str, &str, u64), &str> = BTreeMap::new();
    let (mut repeats, mut alike) = (Vec::new(), Vec::new());
    let mut compared = 0_usize;
    for row in rows.iter().filter(|row| !row.date.is_empty() || !row.id.is_empty()) {
        compared += 1;
        // Adding 0 makes -0 and 0 the same number.
        let key = (row.series, row.date, row.id, (row.value + 0.0).to_bits());
        match first.get(&key) {
            Some(&earlier) => {
                let pair = (earlier.to_owned(), row.place.to_owned());
                if row.id.is_empty() { alike.push(pair) } else { repeats.push(pair) }
            }
            None => {
                first.insert(key, row.place);
            }
        }
    }
    if compared == 0 {
        let why = "the rows have neither date nor id by which a row could be known again";
        return Duplicates { check: Check::not_made(ID, STATISTIC, why), repeats, alike };
    }
    let concern = match (repeats.is_empty(), alike.is_empty()) {
        (false, _) => Concern::Flag,
        (true, false) => Concern::Remark,
        (true, true) => Concern::None,
    };
    let told = if concern == Concern::None {
        format!("No row of {} repeats another.", words::count(compared, "row"))
    } else {
        let shown: Vec<String> =
            repeats.iter().chain(&alike).take(3).map(|(one, two)| format!("{one} and {two}")).collect();
        format!(
            "Of {}, {} an earlier one with the same id, and {} one without id in series, date and value: {}{}.",
            words::count(compared, "row"),
            if repeats.len() == 1 { "1 repeats".to_owned() } else { format!("{} repeat", repeats.len()) },
            if alike.len() == 1 { "1 equals".to_owned() } else { format!("{} equal", alike.len()) },
            shown.join("; "),
            if repeats.len() + alike.len() > 3 { "; and more" } else { "" }
        )
    };
    let check = Check::of(ID, STATISTIC, (repeats.len() + alike.len()) as f64)
        .reference("count, no test")
        .concern(concern)
        .extra("rows compared", compared as f64)
        .extra("same id", repeats.len() as f64)
        .extra("alike without id", alike.len() as f64)
        .meaning(told)
        .if_concerned(
            "A row that is there twice counts twice. Look the rows up; exclude the copy with its reason, or give replicates \
             an id each.",
        );
    Duplicates { check, repeats, alike }
}
