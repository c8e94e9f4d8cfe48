//! Numbers to text: the one module that decides how many digits a reader sees.
//!
//! * An uncertainty has two significant digits, a value the same decimal place (JCGM 100:2008, GUM, 7.2.6),
//!   and at least as many decimals as the limit it is held against.
//! * Rounding is half to even on the exact decimal expansion of the `f64`: the number is expanded in full and
//!   rounded once, so that neither a binary artefact nor a second rounding can move a digit.
//! * A probability has three decimals, "< 0.001" and "> 0.999" outside, never 0 or 1.
//! * Rounding never flips a comparison: digits are added until the text shows the same order, and where three
//!   more do not suffice, the result says so.
//!
//! Text for readers has the minus sign U+2212; [`record`] alone writes the machine's own form.

use std::cmp::Ordering;

/// The minus sign of report text, U+2212.
pub const MINUS: char = '\u{2212}';
/// Stands where a number does not exist.
pub const NOT_DEFINED: &str = "not defined";
/// A space at which no line breaks.
pub const NO_BREAK_SPACE: char = '\u{a0}';

/// More decimals than this are written in scientific form, unless the number itself is of common size.
const PLAIN_DECIMALS: i32 = 6;
/// Numbers with more digits before the decimal point than this are written in scientific form.
const PLAIN_WHOLE_DIGITS: i32 = 9;
/// A decimal of so many digits survives being read as an f64; a huge number is not written out beyond them.
const DIGITS_OF_AN_F64: u8 = 15;
/// At most this many digits are added so that a printed comparison keeps its order.
const DIGITS_ADDED_AT_MOST: u8 = 3;

/// The decimal place to which numbers of one kind are rounded: 2 means hundredths, 0 units, -1 tens.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Places(i32);

/// A number as printed beside a reference, with what had to be done to keep their order visible.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Compared {
    /// The number's text.
    pub text: String,
    /// How the text and the reference stand to each other.
    pub shown: Shown,
}

/// Whether a printed number stands to its reference as the unrounded one does.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Shown {
    /// The usual digits show the order.
    AsUsual,
    /// This many more digits were needed to show the order.
    MoreDigits(u8),
    /// Even with three more digits the text equals the reference though the number is above or below it.
    NotShown(Ordering),
}

impl Compared {
    /// The remark that belongs beside the number, if any.
    pub fn remark(&self) -> Option<&'static str> {
        match self.shown {
            Shown::AsUsual => None,
            Shown::MoreDigits(_) => {
                Some("more digits are shown because the comparison used unrounded numbers")
            }
            Shown::NotShown(Ordering::Less) => {
                Some("the unrounded number is just below; the comparison used unrounded numbers")
            }
            Shown::NotShown(_) => {
                Some("the unrounded number is just above; the comparison used unrounded numbers")
            }
        }
    }
}

impl Places {
    /// A stated number of decimals (negative: tens, hundreds ...).
    pub const fn decimals(decimals: i32) -> Places {
        Places(decimals)
    }

    /// The place of the second significant digit of an uncertainty (GUM 7.2.6). None where the uncertainty is
    /// zero, negative or not finite: then it gives no place.
    pub fn of_uncertainty(uncertainty: f64) -> Option<Places> {
        if uncertainty > 0.0 { Places::of_significant(uncertainty, 2) } else { None }
    }

    /// The place of the n-th significant digit of a number after rounding to n digits. None for zero, for a
    /// number that is not finite and for n = 0.
    pub fn of_significant(number: f64, digits: u8) -> Option<Places> {
        if number == 0.0 || !number.is_finite() || digits == 0 {
            return None;
        }
        let last = i32::from(digits) - 1;
        let text = format!("{:.*e}", usize::from(digits) - 1, number);
        let exponent: i32 = text.split_once('e').and_then(|(_, exponent)| exponent.parse().ok())?;
        Some(Places(last - exponent))
    }

    /// The decimals with which a number was written by hand: "50" has none, "12.50" two, "5e-3" three.
    pub fn of_written(text: &str) -> Places {
        let (mantissa, exponent) = match text.split_once(['e', 'E']) {
            Some((mantissa, exponent)) => (mantissa, exponent.parse::<i32>().unwrap_or(0)),
            None => (text, 0),
        };
        let decimals = match mantissa.split_once('.') {
            Some((_, fraction)) => fraction.chars().filter(char::is_ascii_digit).count() as i32,
            None => 0,
        };
        Places((decimals - exponent).clamp(0, 400))
    }

    /// The finer of two places: `Places::of_uncertainty(u).at_least(Places::of_written("50.0"))`.
    pub fn at_least(self, other: Places) -> Places {
        Places(self.0.max(other.0))
    }

    /// This many digits more.
    pub fn finer(self, digits: u8) -> Places {
        Places(self.0 + i32::from(digits))
    }

    /// The number of decimals, negative for tens, hundreds ...
    pub fn count(self) -> i32 {
        self.0
    }

    /// A number rounded to this place, as report text.
    pub fn value(self, number: f64) -> String {
        if number.is_nan() {
            return NOT_DEFINED.into();
        }
        if number.is_infinite() {
            return if number > 0.0 { "∞".into() } else { format!("{MINUS}∞") };
        }
        let rounded = match Places::of_significant(number, DIGITS_OF_AN_F64) {
            Some(finest) if finest.0 < self.0 && finest.0 < 0 => Rounded::new(number, finest.0),
            _ => Rounded::new(number, self.0),
        };
        let whole_digits = rounded.whole_digits();
        let common_size = rounded.decimals <= PLAIN_DECIMALS || (whole_digits > -3 && rounded.decimals <= 15);
        if rounded.is_zero() && !common_size {
            return "0".into();
        }
        let text = if whole_digits <= PLAIN_WHOLE_DIGITS && common_size {
            rounded.plain()
        } else {
            rounded.scientific()
        };
        if rounded.negative && !rounded.is_zero() { format!("{MINUS}{text}") } else { text }
    }

    /// A number beside a reference (a limit): up to three more digits until its text stands to the reference as
    /// the number does. The reference is printed by the caller as it was written.
    pub fn against(self, number: f64, reference: f64) -> Compared {
        let order = match number.partial_cmp(&reference) {
            Some(order) if number.is_finite() => order,
            _ => return Compared { text: self.value(number), shown: Shown::AsUsual },
        };
        for added in 0..=DIGITS_ADDED_AT_MOST {
            let places = self.finer(added);
            if Rounded::new(number, places.0).as_number().partial_cmp(&reference) == Some(order) {
                let shown = if added == 0 { Shown::AsUsual } else { Shown::MoreDigits(added) };
                return Compared { text: places.value(number), shown };
            }
        }
        Compared { text: self.finer(DIGITS_ADDED_AT_MOST).value(number), shown: Shown::NotShown(order) }
    }

    /// An interval, "42.7 to 45.1"; an end that does not exist makes it "at most 45.1" or "at least 42.7".
    pub fn interval(self, lower: Option<f64>, upper: Option<f64>) -> String {
        match (lower, upper) {
            (Some(lower), Some(upper)) => format!("{} to {}", self.value(lower), self.value(upper)),
            (Some(lower), None) => format!("at least {}", self.value(lower)),
            (None, Some(upper)) => format!("at most {}", self.value(upper)),
            (None, None) => NOT_DEFINED.into(),
        }
    }
}

/// A number rounded to so many significant digits, for figures that have no uncertainty beside them.
pub fn significant(number: f64, digits: u8) -> String {
    match Places::of_significant(number, digits) {
        Some(places) => places.value(number),
        None if number == 0.0 => "0".into(),
        None => Places(0).value(number),
    }
}

/// A value and its standard uncertainty, the uncertainty with two significant digits and the value to its place.
/// An uncertainty of zero leaves the value with six significant digits.
pub fn value_with_uncertainty(value: f64, uncertainty: f64) -> (String, String) {
    match Places::of_uncertainty(uncertainty) {
        Some(places) => (places.value(value), places.value(uncertainty)),
        None => (significant(value, 6), significant(uncertainty, 2)),
    }
}

/// A probability with three decimals, "< 0.001" below and "> 0.999" above; never 0 or 1.
pub fn probability(chance: f64) -> String {
    probability_with(chance, 3)
}

/// A p-value, printed like any probability: three decimals, "< 0.001", "> 0.999".
pub fn p_value(p: f64) -> String {
    probability(p)
}

/// A correlation coefficient with three decimals.
pub fn correlation(coefficient: f64) -> String {
    Places(3).value(coefficient)
}

/// A probability beside the threshold that decides: four decimals within 0.0005 of it, and up to three more until
/// the text shows on which side it lies.
pub fn probability_against(chance: f64, threshold: f64) -> Compared {
    let order = match chance.partial_cmp(&threshold) {
        Some(order) if is_probability(chance) => order,
        _ => return Compared { text: probability(chance), shown: Shown::AsUsual },
    };
    let usual: u8 = if (chance - threshold).abs() < 0.0005 { 4 } else { 3 };
    for added in 0..=DIGITS_ADDED_AT_MOST {
        let decimals = usual + added;
        if probability_shows(chance, decimals, threshold, order) {
            let shown = if added == 0 { Shown::AsUsual } else { Shown::MoreDigits(added) };
            return Compared { text: probability_with(chance, decimals), shown };
        }
    }
    Compared { text: probability_with(chance, usual + DIGITS_ADDED_AT_MOST), shown: Shown::NotShown(order) }
}

/// A probability in words, "about 1 in 40", to two significant digits; "about 3 in 10" in the middle.
pub fn chance_in_words(chance: f64) -> String {
    if !is_probability(chance) {
        return NOT_DEFINED.into();
    }
    // The difference is exact: for 0.5 <= p <= 1 floating-point subtraction from 1 makes no rounding error.
    let rest = 1.0 - chance;
    if chance < 0.001 {
        "less than 1 in 1000".into()
    } else if chance > 0.999 {
        "more than 999 in 1000".into()
    } else if chance < 0.1 {
        format!("about 1 in {}", one_in(chance))
    } else if chance <= 0.9 {
        match Rounded::new(chance * 10.0, 0).as_number() as u32 {
            5 => "about 1 in 2".into(),
            tenths => format!("about {tenths} in 10"),
        }
    } else {
        let whole = one_in(rest);
        format!("about {} in {whole}", whole - 1)
    }
}

/// A share or probability in per cent with one decimal, "< 0.1 %" and "> 99.9 %" outside; never 0 % or 100 %.
pub fn percent(share: f64) -> String {
    if !is_probability(share) {
        return NOT_DEFINED.into();
    }
    let number = if share < 0.001 {
        "< 0.1".into()
    } else if share > 0.999 {
        "> 99.9".into()
    } else {
        shifted_by_two(share, 3)
    };
    format!("{number}{NO_BREAK_SPACE}%")
}

/// A stated coverage or a plain ratio in per cent, as many decimals as its shortest form has: 0.95 is "95 %".
pub fn percent_as_stated(ratio: f64) -> String {
    if !ratio.is_finite() {
        return NOT_DEFINED.into();
    }
    let decimals = Places::of_written(&format!("{ratio}")).0.max(2);
    format!("{}{NO_BREAK_SPACE}%", shifted_by_two(ratio, decimals))
}

/// A count, its digits in groups of three from five digits up (narrow no-break space): 12 480.
pub fn count(count: u64) -> String {
    let digits = count.to_string();
    if digits.len() < 5 {
        return digits;
    }
    let mut text = String::new();
    for (position, digit) in digits.chars().enumerate() {
        if position > 0 && (digits.len() - position).is_multiple_of(3) {
            text.push('\u{202f}');
        }
        text.push(digit);
    }
    text
}

/// The shortest decimal form that reads back as the same `f64`, for tables of record and machine files.
pub fn record(number: f64) -> String {
    if !number.is_finite() {
        return NOT_DEFINED.into();
    }
    let size = number.abs();
    if size == 0.0 || (1e-5..1e16).contains(&size) { format!("{number}") } else { format!("{number:e}") }
}

fn is_probability(chance: f64) -> bool {
    (0.0..=1.0).contains(&chance)
}

fn one_in(chance: f64) -> u32 {
    let ratio = 1.0 / chance;
    let places = Places::of_significant(ratio, 2).unwrap_or(Places(0));
    Rounded::new(ratio, places.0.min(0)).as_number() as u32
}

/// The outermost probabilities that so many decimals can show: 0.001 and 0.999 for three.
fn outermost(decimals: u8) -> (f64, f64, String, String) {
    let zeros = "0".repeat(usize::from(decimals).saturating_sub(1));
    let low = format!("0.{zeros}1");
    let high = format!("0.{}", "9".repeat(usize::from(decimals)));
    (low.parse().unwrap_or(0.0), high.parse().unwrap_or(1.0), low, high)
}

fn probability_with(chance: f64, decimals: u8) -> String {
    if !is_probability(chance) {
        return NOT_DEFINED.into();
    }
    let (low, high, low_text, high_text) = outermost(decimals);
    if chance < low {
        format!("< {low_text}")
    } else if chance > high {
        format!("> {high_text}")
    } else {
        Rounded::new(chance, i32::from(decimals)).plain()
    }
}

/// Whether the text with so many decimals tells on which side of the threshold the probability lies.
fn probability_shows(chance: f64, decimals: u8, threshold: f64, order: Ordering) -> bool {
    let (low, high, ..) = outermost(decimals);
    if chance < low {
        order == Ordering::Less && threshold >= low
    } else if chance > high {
        order == Ordering::Greater && threshold <= high
    } else {
        let printed = Rounded::new(chance, i32::from(decimals)).as_number();
        printed.partial_cmp(&threshold) == Some(order)
    }
}

/// A share times one hundred, rounded once at the given decimal of the share itself.
fn shifted_by_two(share: f64, decimals: i32) -> String {
    let mut rounded = Rounded::new(share, decimals);
    rounded.decimals -= 2;
    let text = rounded.plain();
    if rounded.negative && !rounded.is_zero() { format!("{MINUS}{text}") } else { text }
}

/// A number rounded once: its sign and the whole number of units of the last place.
struct Rounded {
    negative: bool,
    /// Decimal digits without leading zeros; empty for zero.
    digits: String,
    /// The place of the last of the digits.
    decimals: i32,
}

impl Rounded {
    /// Rounds half to even on the exact expansion. The number must be finite.
    fn new(number: f64, decimals: i32) -> Rounded {
        let negative = number.is_sign_negative();
        let size = number.abs();
        let digits = if decimals >= 0 {
            // The standard library expands exactly and rounds ties to even; the tests below hold it to that.
            format!("{size:.*}", decimals as usize).replace('.', "")
        } else {
            rounded_before_the_point(size, decimals.unsigned_abs() as usize)
        };
        Rounded { negative, digits: digits.trim_start_matches('0').to_owned(), decimals }
    }

    fn is_zero(&self) -> bool {
        self.digits.is_empty()
    }

    /// Digits before the decimal point; zero or negative for numbers below one.
    fn whole_digits(&self) -> i32 {
        self.digits.len() as i32 - self.decimals
    }

    /// Without sign.
    fn plain(&self) -> String {
        if self.decimals <= 0 {
            if self.is_zero() {
                return "0".into();
            }
            return format!("{}{}", self.digits, "0".repeat(self.decimals.unsigned_abs() as usize));
        }
        let decimals = self.decimals as usize;
        let padded = format!("{:0>width$}", self.digits, width = decimals + 1);
        let (whole, fraction) = padded.split_at(padded.len() - decimals);
        format!("{whole}.{fraction}")
    }

    /// Without sign; the number must not be zero.
    fn scientific(&self) -> String {
        let exponent = self.whole_digits() - 1;
        let (first, rest) = self.digits.split_at(self.digits.len().min(1));
        let point = if rest.is_empty() { "" } else { "." };
        format!("{first}{point}{rest} × 10^{exponent}")
    }

    fn as_number(&self) -> f64 {
        let digits = if self.is_zero() { "0" } else { self.digits.as_str() };
        let size: f64 = format!("{digits}e{}", -i64::from(self.decimals)).parse().unwrap_or(f64::NAN);
        if self.negative { -size } else { size }
    }
}

/// Rounds to tens, hundreds ... (`dropped` = 1, 2 ...) and gives the digits that remain.
fn rounded_before_the_point(size: f64, dropped: usize) -> String {
    // A finite f64 of one or more has at most 52 digits after the point, so this expansion is exact; one below
    // one is less than half of ten and rounds to nothing whatever its later digits are.
    let exact = format!("{size:.52}");
    let (whole, fraction) = exact.split_once('.').unwrap_or((exact.as_str(), ""));
    let padded = format!("{whole:0>width$}", width = dropped + 1);
    let (kept, lost) = padded.split_at(padded.len() - dropped);
    let lost = format!("{lost}{fraction}");
    let half = format!("5{}", "0".repeat(lost.len() - 1));
    let odd = kept.ends_with(['1', '3', '5', '7', '9']);
    if lost > half || (lost == half && odd) { one_more(kept) } else { kept.to_owned() }
}

fn one_more(digits: &str) -> String {
    let mut text = digits.as_bytes().to_vec();
    for digit in text.iter_mut().rev() {
        if *digit == b'9' {
            *digit = b'0';
        } else {
            *digit += 1;
            return text.into_iter().map(char::from).collect();
        }
    }
    text.insert(0, b'1');
    text.into_iter().map(char::from).collect()
}

#[cfg(test)]
#[path = "text_tests.rs"]
mod tests;
