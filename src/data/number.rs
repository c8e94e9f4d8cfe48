//! One cell to one number, or the reason why not. Nothing is guessed: a comma is not a point, a
//! missing-value code is not a reading, and what a spreadsheet could not compute is no number.

/// A number as printed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Number {
    pub value: f64,
    /// Digits after the point.
    pub decimals: usize,
}

/// Powers of ten that a double holds exactly.
const POWERS_OF_TEN: [f64; 23] = [
    1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18,
    1e19, 1e20, 1e21, 1e22,
];

/// Whole numbers up to here are doubles.
const EXACT_WHOLE: u64 = 1 << 53;

/// The number that a trimmed cell holds, correctly rounded; `None` for anything else.
///
/// Form: sign, digits with one decimal sign, exponent. `comma` says that the decimal sign is a comma.
#[inline]
pub fn parse(text: &[u8], comma: bool) -> Option<Number> {
    let sign_of_decimals = if comma { b',' } else { b'.' };
    let (negative, digits) = match text {
        [b'-', rest @ ..] => (true, rest),
        [b'+', rest @ ..] => (false, rest),
        all => (false, all),
    };
    // Up to 18 digits cannot overflow; a whole number below 2⁵³ divided by an exact power of ten is
    // rounded once, so it is the nearest double (Clinger 1990).
    if digits.len() <= 19 {
        let mut whole: u64 = 0;
        let mut count = 0;
        let mut point = None;
        for byte in digits {
            let digit = byte.wrapping_sub(b'0');
            if digit < 10 {
                whole = whole.wrapping_mul(10).wrapping_add(u64::from(digit));
                count += 1;
            } else if *byte == sign_of_decimals && point.is_none() {
                point = Some(count);
            } else {
                return parse_slowly(text, digits, sign_of_decimals);
            }
        }
        if count > 0 && count <= 18 && whole <= EXACT_WHOLE {
            let decimals = point.map_or(0, |point| count - point);
            let size = whole as f64 / POWERS_OF_TEN[decimals];
            let value = if negative && whole > 0 { -size } else { size };
            return Some(Number { value, decimals });
        }
    }
    parse_slowly(text, digits, sign_of_decimals)
}

#[cold]
fn parse_slowly(text: &[u8], unsigned: &[u8], sign_of_decimals: u8) -> Option<Number> {
    let (mantissa, exponent) = match unsigned.iter().position(|b| matches!(b, b'e' | b'E')) {
        Some(at) => (&unsigned[..at], Some(&unsigned[at + 1..])),
        None => (unsigned, None),
    };
    let (whole, part) = match mantissa.iter().position(|b| *b == sign_of_decimals) {
        Some(at) => (&mantissa[..at], &mantissa[at + 1..]),
        None => (mantissa, &mantissa[..0]),
    };
    let all_digits = |text: &[u8]| text.iter().all(u8::is_ascii_digit);
    if whole.is_empty() && part.is_empty() || !all_digits(whole) || !all_digits(part) {
        return None;
    }
    if let Some(exponent) = exponent {
        let digits = exponent.strip_prefix(b"-").or_else(|| exponent.strip_prefix(b"+")).unwrap_or(exponent);
        if digits.is_empty() || !all_digits(digits) {
            return None;
        }
    }
    let pointed: Vec<u8> = text
        .iter()
        .map(|b| if *b == sign_of_decimals { b'.' } else { *b })
        .skip_while(|b| *b == b'+')
        .collect();
    let value: f64 = fast_float2::parse(&pointed).ok()?;
    let nothing = whole.iter().chain(part).all(|digit| *digit == b'0');
    // 1e400 is no number of ours, and 1e-400 is not nothing.
    if !value.is_finite() || (value == 0.0 && !nothing) {
        return None;
    }
    let value = if value == 0.0 { 0.0 } else { value };
    Some(Number { value, decimals: part.len() })
}

/// Why a cell is no number: a stable code, a sentence about the cell, what was expected, a repair.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct NotANumber {
    pub code: &'static str,
    pub what: String,
    pub repair: String,
}

/// Says what is wrong with a cell that [`parse`] refused.
pub fn diagnose(text: &str, comma: bool) -> NotANumber {
    let reason = |code, what: &str, repair: &str| NotANumber {
        code,
        what: format!("\"{}\" {what}", shortened(text)),
        repair: repair.to_string(),
    };
    let lower = text.to_lowercase();
    let bare = lower.trim_start_matches(['+', '-']);
    if matches!(bare, "nan" | "inf" | "infinity" | "infinite" | "∞" | "1.#qnan" | "1.#inf" | "1.#ind") {
        let repair = "list it under `missing` if it means that there is no reading";
        return reason("not-finite", "is no finite number", repair);
    }
    if text.starts_with('#') || matches!(bare, "err:502" | "err:503" | "err:508") {
        return reason("spreadsheet-error", "is a spreadsheet's error", "mend the formula and export again");
    }
    if text.contains(['\n', '\r']) {
        let repair = "look for a quote that is not closed on this line";
        return reason("line-end-in-number", "holds the end of a line where a number should be", repair);
    }
    if text.starts_with(['<', '>', '≤', '≥']) {
        let repair = "declare it: marks = { below = [\"<\"], above = [\">\"] }";
        return reason("undeclared-mark", "carries a mark that the spec does not declare", repair);
    }
    let is_number = |text: &str, comma| parse(text.trim().as_bytes(), comma).is_some();
    let without = |separators: &[char]| text.replace(separators, "");
    let digits_only = |text: &str| text.bytes().all(|b| b.is_ascii_digit() || b"+-.,eE".contains(&b));
    if digits_only(text) && text.contains([',', '.']) {
        if is_number(text, !comma) {
            return if comma {
                let repair = "leave `decimal = \",\"` out if the file writes points";
                reason("decimal-point", "has a decimal point, but the spec says `decimal = \",\"`", repair)
            } else {
                let repair =
                    "state `decimal = \",\"` if the comma is the decimal sign; write no thousands marks";
                reason("decimal-comma", "has a comma: a decimal sign or a thousands mark?", repair)
            };
        }
        if is_grouped(text, ',', '.') || is_grouped(text, '.', ',') {
            return reason("thousands-mark", "has thousands marks", "write the number without them");
        }
    }
    let gaps = [' ', '\'', '’', '_', '\u{a0}', '\u{202f}', '\u{2009}'];
    if text.contains(gaps) && is_number(&without(&gaps), comma) {
        return reason("thousands-mark", "has thousands marks", "write the number without them");
    }
    if let Some(rest) = text.strip_prefix('−')
        && is_number(rest, comma)
    {
        return reason("not-a-number", "has a typographic minus", "write the minus as a hyphen, -");
    }
    let end_of_number =
        text.find(|c: char| !(c.is_ascii_digit() || "+-.,".contains(c))).unwrap_or(text.len());
    if end_of_number > 0 && is_number(&text[..end_of_number], comma) {
        let rest = text[end_of_number..].trim_start();
        if rest.starts_with(['e', 'E']) && is_exponent(&rest[1..]) {
            return reason("number-out-of-range", "is beyond the range of numbers", "check the exponent");
        }
        let repair = "keep the unit in the column's name, or in a column of its own named by `unit`";
        return reason("unit-in-cell", "has text after the number", repair);
    }
    reason(
        "not-a-number",
        "is not a number",
        "mend the cell, or list its text under `missing` if it means no reading",
    )
}

/// Whether the digits before the decimal sign stand in groups of three.
fn is_grouped(text: &str, mark: char, sign_of_decimals: char) -> bool {
    let unsigned = text.trim_start_matches(['+', '-']);
    let (whole, part) = unsigned.split_once(sign_of_decimals).unwrap_or((unsigned, ""));
    let mut groups = whole.split(mark);
    let all_digits = |group: &str| group.bytes().all(|b| b.is_ascii_digit());
    let first = groups.next().unwrap_or("");
    let is_marked = whole.contains(mark) && all_digits(part);
    is_marked
        && (1..=3).contains(&first.len())
        && all_digits(first)
        && groups.all(|group| group.len() == 3 && all_digits(group))
}

fn is_exponent(text: &str) -> bool {
    let digits = text.trim_start_matches(['+', '-']);
    !digits.is_empty() && digits.bytes().all(|b| b.is_ascii_digit())
}

/// A cell's text, cut where it would fill the page.
pub fn shortened(text: &str) -> String {
    const SHOWN: usize = 60;
    if text.chars().count() <= SHOWN {
        return text.escape_debug().to_string().replace("\\'", "'");
    }
    let start: String = text.chars().take(SHOWN).collect();
    format!("{}…", start.escape_debug().to_string().replace("\\'", "'"))
}

/// Whether a number looks like a code for "no reading": a row of nines.
#[inline]
pub fn looks_like_a_code(value: f64) -> bool {
    let size = value.abs();
    size >= 999.0
        && (size == 999.0
            || size == 9999.0
            || size == 99_999.0
            || size == 999_999.0
            || size == 9_999_999.0
            || size == 999.9
            || size == 9999.9
            || size == 999.99)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn value(text: &str) -> Option<f64> {
        parse(text.as_bytes(), false).map(|number| number.value)
    }

    #[test]
    fn numbers_are_read_as_printed() {
        for (text, expected, decimals) in [
            ("44.10", 44.1, 2),
            ("-0.5", -0.5, 1),
            ("+7", 7.0, 0),
            (".5", 0.5, 1),
            ("5.", 5.0, 0),
            ("1.25e-3", 0.00125, 2),
            ("0", 0.0, 0),
            ("123456789012345678901234567890", 123456789012345678901234567890.0, 0),
        ] {
            assert_eq!(parse(text.as_bytes(), false), Some(Number { value: expected, decimals }), "{text}");
        }
        assert_eq!(parse(b"1,50", true), Some(Number { value: 1.5, decimals: 2 }));
        assert!(value("-0").unwrap().is_sign_positive());
    }

    #[test]
    fn what_is_no_number_is_named() {
        for (text, comma, code) in [
            ("nan", false, "not-finite"),
            ("-inf", false, "not-finite"),
            ("Infinity", false, "not-finite"),
            ("1e400", false, "number-out-of-range"),
            ("1e-400", false, "number-out-of-range"),
            ("#DIV/0!", false, "spreadsheet-error"),
            ("#N/A", false, "spreadsheet-error"),
            ("1,5", false, "decimal-comma"),
            ("1.5", true, "decimal-point"),
            ("1,234.5", false, "thousands-mark"),
            ("1.234,5", true, "thousands-mark"),
            ("1 234", false, "thousands-mark"),
            ("1'234.5", false, "thousands-mark"),
            ("44.1 mg/L", false, "unit-in-cell"),
            ("44.1mg", false, "unit-in-cell"),
            ("<0.5", false, "undeclared-mark"),
            ("4\n5", false, "line-end-in-number"),
            ("broken", false, "not-a-number"),
            ("−1.5", false, "not-a-number"),
            ("e5", false, "not-a-number"),
            ("1.2.3", false, "not-a-number"),
            ("--1", false, "not-a-number"),
            ("0x10", false, "unit-in-cell"),
            ("5e", false, "unit-in-cell"),
        ] {
            assert_eq!(parse(text.as_bytes(), comma), None, "{text}");
            assert_eq!(diagnose(text, comma).code, code, "{text}");
        }
    }

    proptest! {
        /// Printed and read again, every number is itself; the reader of the standard library agrees.
        #[test]
        fn numbers_come_back(x in any::<f64>().prop_filter("finite", |x| x.is_finite())) {
            for text in [format!("{x}"), format!("{x:e}"), format!("{x:.3}")] {
                prop_assert_eq!(value(&text), text.parse::<f64>().ok(), "{}", text);
            }
        }

        #[test]
        fn short_decimals_are_correctly_rounded(whole in 0u64..1_000_000_000_000, places in 0usize..12) {
            let digits = format!("{whole:013}");
            let (left, right) = digits.split_at(digits.len() - places);
            let text = format!("{left}.{right}");
            prop_assert_eq!(value(&text), text.parse::<f64>().ok());
        }

        #[test]
        fn any_text_is_read_or_explained(text in "\\PC{0,12}", comma in any::<bool>()) {
            if parse(text.as_bytes(), comma).is_none() {
                prop_assert!(!diagnose(&text, comma).code.is_empty());
            }
        }
    }
}
