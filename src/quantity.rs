//! Small types that carry a meaning and are checked when made.

use std::fmt;

/// Why a figure does not exist. Printed in the report and written as `why` in answers.json.
///
/// A figure that should exist but could not be computed to the promised accuracy is `failed`: the
/// review turns any such into an error, so that a doubtful digit is never printed.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Absent {
    pub reason: String,
    pub failed: bool,
}

impl Absent {
    pub fn because(reason: impl Into<String>) -> Absent {
        Absent { reason: reason.into(), failed: false }
    }

    pub fn failed(reason: impl Into<String>) -> Absent {
        Absent { reason: reason.into(), failed: true }
    }
}

impl fmt::Display for Absent {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.reason)
    }
}

/// A figure that may not exist.
pub type Figure = Result<f64, Absent>;

/// A probability strictly inside (0, 1).
#[derive(Debug, Clone, Copy, PartialEq, PartialOrd)]
pub struct Probability(f64);

impl Probability {
    pub fn new(p: f64) -> Option<Probability> {
        (p > 0.0 && p < 1.0).then_some(Probability(p))
    }

    pub fn get(self) -> f64 {
        self.0
    }
}

/// A standard deviation or standard uncertainty: finite and above 0.
#[derive(Debug, Clone, Copy, PartialEq, PartialOrd)]
pub struct Sd(f64);

impl Sd {
    pub fn new(sd: f64) -> Option<Sd> {
        (sd > 0.0 && sd.is_finite()).then_some(Sd(sd))
    }

    pub fn get(self) -> f64 {
        self.0
    }
}

/// Whether the model holds for the readings or for their natural logarithms.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Scale {
    #[default]
    Linear,
    Log,
}

impl Scale {
    /// "linear" or "log", as the spec says it.
    pub fn word(self) -> &'static str {
        match self {
            Scale::Linear => "linear",
            Scale::Log => "log",
        }
    }
}

/// The name of a period: trimmed text; a spreadsheet's `2025.0` is `2025`.
#[derive(Debug, Clone, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Period(String);

impl Period {
    pub fn new(text: &str) -> Period {
        let text = text.trim();
        if let Some(whole) = text.strip_suffix(".0")
            && !whole.is_empty()
            && whole.bytes().all(|b| b.is_ascii_digit())
        {
            return Period(whole.to_string());
        }
        Period(text.to_string())
    }

    pub fn as_str(&self) -> &str {
        &self.0
    }

    /// The period as a whole number, where it is one: such periods are ordered by value.
    pub fn number(&self) -> Option<i64> {
        self.0.parse().ok()
    }
}

impl fmt::Display for Period {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0)
    }
}

/// Which side of a limit, or of a pair of them, a question asks about.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Beyond {
    Above(f64),
    Below(f64),
    /// Inside, the ends included.
    Between(f64, f64),
    /// Outside, the ends excluded.
    Outside(f64, f64),
}

impl Beyond {
    /// The same limits measured from `origin`.
    pub fn from_origin(self, origin: f64) -> Beyond {
        match self {
            Beyond::Above(limit) => Beyond::Above(limit - origin),
            Beyond::Below(limit) => Beyond::Below(limit - origin),
            Beyond::Between(lower, upper) => Beyond::Between(lower - origin, upper - origin),
            Beyond::Outside(lower, upper) => Beyond::Outside(lower - origin, upper - origin),
        }
    }
}

/// Orders names as a person would: digits by value ("B-2" before "B-10"), then as text.
pub fn natural_order(a: &str, b: &str) -> std::cmp::Ordering {
    let (mut left, mut right) = (a.chars().peekable(), b.chars().peekable());
    loop {
        match (left.peek().copied(), right.peek().copied()) {
            (None, None) => return a.cmp(b),
            (Some(x), Some(y)) if x.is_ascii_digit() && y.is_ascii_digit() => {
                let (m, n) = (take_digits(&mut left), take_digits(&mut right));
                let order = m.len().cmp(&n.len()).then_with(|| m.cmp(&n));
                if order.is_ne() {
                    return order;
                }
            }
            (x, y) if x == y => {
                left.next();
                right.next();
            }
            (x, y) => return x.cmp(&y),
        }
    }
}

/// A run of digits without its leading zeros.
fn take_digits(chars: &mut std::iter::Peekable<std::str::Chars<'_>>) -> String {
    let mut digits = String::new();
    while let Some(c) = chars.next_if(char::is_ascii_digit) {
        if c != '0' || !digits.is_empty() {
            digits.push(c);
        }
    }
    digits
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_ordered_by_the_value_of_their_digits() {
        let mut names = vec!["B-10", "B-2", "A-3", "B-02", "B"];
        names.sort_by(|a, b| natural_order(a, b));
        assert_eq!(names, ["A-3", "B", "B-02", "B-2", "B-10"]);
    }

    #[test]
    fn a_period_read_from_a_spreadsheet_is_the_same_period() {
        assert_eq!(Period::new(" 2025.0 "), Period::new("2025"));
        assert_ne!(Period::new("2025/26"), Period::new("2025"));
    }
}
