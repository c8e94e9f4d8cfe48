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
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn places(uncertainty: f64) -> Places {
        Places::of_uncertainty(uncertainty).unwrap()
    }

    /// JCGM 100:2008, 7.2.6: y = 10,057 62 Ω with u = 27 mΩ is to be given as 10,058 Ω; u = 28,05 kHz is to be
    /// rounded down to 28 kHz. (Quoted from memory of the text. Its 10,47 mΩ may be rounded up to 11 mΩ there by
    /// choice; here uncertainties are rounded to the nearest.)
    #[test]
    fn examples_of_the_gum() {
        assert_eq!(places(0.027).value(10.05762), "10.058");
        assert_eq!(places(28.05).value(28.05), "28");
        assert_eq!(places(10.47).value(10.47), "10");
    }

    /// JCGM 100:2008, 7.2.2 gives m_S = 100,021 47 g with u = 0,35 mg (from memory of the text).
    #[test]
    fn the_mass_standard_of_the_gum() {
        let (value, uncertainty) = value_with_uncertainty(100.02147, 0.00035);
        assert_eq!((value.as_str(), uncertainty.as_str()), ("100.02147", "0.00035"));
    }

    #[test]
    fn an_uncertainty_that_rounds_up_to_the_next_power_keeps_two_digits() {
        assert_eq!(places(0.0996).value(0.0996), "0.10");
        assert_eq!(places(0.996).value(0.996), "1.0");
        assert_eq!(places(99.6).value(99.6), "100");
        assert_eq!(places(99.6).value(1234.0), "1230");
    }

    #[test]
    fn no_place_without_an_uncertainty() {
        for uncertainty in [0.0, -1.0, f64::NAN, f64::INFINITY] {
            assert_eq!(Places::of_uncertainty(uncertainty), None);
        }
    }

    /// Ties by hand: 0.125, 0.375, 2.5 and 25 are exact in binary; 2.675 and 1.005 are not, and lie just below.
    #[test]
    fn ties_go_to_even_and_only_true_ties_are_ties() {
        assert_eq!(Places(2).value(0.125), "0.12");
        assert_eq!(Places(2).value(0.375), "0.38");
        assert_eq!(Places(0).value(2.5), "2");
        assert_eq!(Places(0).value(3.5), "4");
        assert_eq!(Places(2).value(2.675), "2.67");
        assert_eq!(Places(2).value(1.005), "1.00");
        assert_eq!(Places(-1).value(25.0), "20");
        assert_eq!(Places(-1).value(35.0), "40");
        assert_eq!(Places(-1).value(25.000000001), "30");
        assert_eq!(Places(-2).value(9951.0), "10000");
        assert_eq!(Places(-1).value(4.9), "0");
    }

    #[test]
    fn never_rounded_twice() {
        assert_eq!(Places(1).value(0.4496), "0.4");
        assert_eq!(Places(0).value(0.4999999999999999), "0");
    }

    #[test]
    fn signs_and_numbers_that_do_not_exist() {
        assert_eq!(Places(1).value(-4.25), "−4.2");
        assert_eq!(Places(1).value(-0.04), "0.0");
        assert_eq!(Places(1).value(f64::NAN), "not defined");
        assert_eq!(Places(1).value(f64::NEG_INFINITY), "−∞");
    }

    #[test]
    fn tiny_and_huge_numbers_take_scientific_form() {
        assert_eq!(places(1.3e-9).value(4.2e-7), "4.200 × 10^-7");
        assert_eq!(places(0.2e-6).value(-4.2e-7), "−4.2 × 10^-7");
        assert_eq!(places(3e148).value(1.234567e150), "1.235 × 10^150");
        assert_eq!(places(3e-152).value(1.234567e-150), "1.235 × 10^-150");
        assert_eq!(places(1.0).value(1e150), "1.00000000000000 × 10^150");
        assert_eq!(places(0.5e-7).value(0.0), "0");
        assert_eq!(places(1e-8).value(123.456789012), "123.456789012");
        assert_eq!(significant(123456789.0, 3), "123000000");
        assert_eq!(significant(1234567890123.0, 3), "1.23 × 10^12");
        assert_eq!(significant(0.0, 3), "0");
    }

    #[test]
    fn at_least_the_digits_of_the_limit() {
        assert_eq!(Places::of_written("50"), Places(0));
        assert_eq!(Places::of_written("12.50"), Places(2));
        assert_eq!(Places::of_written("5e-3"), Places(3));
        assert_eq!(Places::of_written("1.5e3"), Places(0));
        assert_eq!(places(14.0).at_least(Places::of_written("50.0")).value(44.123), "44.1");
    }

    #[test]
    fn rounding_never_flips_a_comparison() {
        let equal = Places(1).against(50.0, 50.0);
        assert_eq!((equal.text.as_str(), equal.shown), ("50.0", Shown::AsUsual));
        let near = Places(1).against(50.0004, 50.0);
        assert_eq!((near.text.as_str(), near.shown), ("50.0004", Shown::MoreDigits(3)));
        let nearer = Places(1).against(49.99999999, 50.0);
        assert_eq!((nearer.text.as_str(), nearer.shown), ("50.0000", Shown::NotShown(Ordering::Less)));
        assert!(nearer.remark().is_some_and(|remark| remark.contains("just below")));
        let across = Places(0).against(49.6, 49.8);
        assert_eq!((across.text.as_str(), across.shown), ("49.6", Shown::MoreDigits(1)));
    }

    #[test]
    fn probabilities_are_never_nought_or_one() {
        for (chance, text) in [
            (0.0, "< 0.001"),
            (0.00099, "< 0.001"),
            (0.001, "0.001"),
            (0.0125, "0.013"),
            (0.5, "0.500"),
            (0.999, "0.999"),
            (0.9995, "> 0.999"),
            (1.0, "> 0.999"),
        ] {
            assert_eq!(probability(chance), text, "{chance}");
        }
        assert_eq!(probability(f64::NAN), NOT_DEFINED);
        assert_eq!(probability(1.5), NOT_DEFINED);
    }

    #[test]
    fn probabilities_beside_a_threshold() {
        assert_eq!(probability_against(0.94996, 0.95).text, "0.94996");
        assert_eq!(probability_against(0.9497, 0.95).text, "0.9497");
        assert_eq!(probability_against(0.9494, 0.95).text, "0.949");
        assert_eq!(probability_against(0.95, 0.95).text, "0.9500");
        assert_eq!(
            probability_against(0.95 - 1e-9, 0.95),
            Compared { text: "0.9500000".into(), shown: Shown::NotShown(Ordering::Less) }
        );
        assert_eq!(probability_against(0.2, 0.95).text, "0.200");
        assert_eq!(probability_against(1e-9, 0.05).text, "< 0.001");
        assert_eq!(probability_against(0.9998, 0.99999).text, "0.9998");
        assert_eq!(probability_against(2e-5, 1e-5).text, "0.00002");
    }

    #[test]
    fn chances_in_words() {
        for (chance, text) in [
            (0.0004, "less than 1 in 1000"),
            (0.001, "about 1 in 1000"),
            (0.0123, "about 1 in 81"),
            (0.025, "about 1 in 40"),
            (0.0043, "about 1 in 230"),
            (0.1, "about 1 in 10"),
            (0.31, "about 3 in 10"),
            (0.52, "about 1 in 2"),
            (0.975, "about 39 in 40"),
            (0.9996, "more than 999 in 1000"),
        ] {
            assert_eq!(chance_in_words(chance), text, "{chance}");
        }
    }

    #[test]
    fn shares_in_per_cent() {
        assert_eq!(percent(0.0), "< 0.1\u{a0}%");
        assert_eq!(percent(0.0625), "6.2\u{a0}%");
        assert_eq!(percent(0.123), "12.3\u{a0}%");
        assert_eq!(percent(1.0), "> 99.9\u{a0}%");
        assert_eq!(percent_as_stated(0.95), "95\u{a0}%");
        assert_eq!(percent_as_stated(0.999), "99.9\u{a0}%");
        assert_eq!(percent_as_stated(-1.25), "−125\u{a0}%");
    }

    #[test]
    fn counts_are_grouped_from_five_digits_up() {
        assert_eq!(count(0), "0");
        assert_eq!(count(4096), "4096");
        assert_eq!(count(12480), "12\u{202f}480");
        assert_eq!(count(20_000_000), "20\u{202f}000\u{202f}000");
    }

    #[test]
    fn records_are_the_shortest_form() {
        assert_eq!(record(0.1), "0.1");
        assert_eq!(record(-4.0), "-4");
        assert_eq!(record(1e300), "1e300");
        assert_eq!(record(-2.5e-7), "-2.5e-7");
    }

    proptest! {
        #[test]
        fn record_reads_back_as_the_same_number(number in any::<f64>().prop_filter("finite", |x| x.is_finite())) {
            prop_assert_eq!(record(number).parse::<f64>().unwrap().to_bits(), number.to_bits());
        }

        #[test]
        fn a_rounded_number_is_within_half_a_unit_of_its_place(number in -1e12f64..1e12, decimals in -6i32..6) {
            let rounded = Rounded::new(number, decimals).as_number();
            let unit: f64 = format!("1e{}", -decimals).parse().unwrap();
            prop_assert!((rounded - number).abs() <= unit * 0.5000001 + number.abs() * 1e-15);
        }

        #[test]
        fn the_printed_order_is_the_true_order_or_said_not_to_be(
            number in -100f64..100.0, step in -1e-3f64..1e-3, decimals in 0i32..4,
        ) {
            let reference = number + step;
            let compared = Places(decimals).against(number, reference);
            let printed: f64 = compared.text.replace(MINUS, "-").parse().unwrap();
            if !matches!(compared.shown, Shown::NotShown(_)) {
                prop_assert_eq!(printed.partial_cmp(&reference), number.partial_cmp(&reference));
            }
        }

        #[test]
        fn a_probability_beside_a_threshold_shows_its_side(chance in 0f64..=1.0, threshold in 0.001f64..0.999) {
            let compared = probability_against(chance, threshold);
            if let Ok(printed) = compared.text.parse::<f64>() && !matches!(compared.shown, Shown::NotShown(_)) {
                prop_assert_eq!(printed.partial_cmp(&threshold), chance.partial_cmp(&threshold));
            }
        }
    }
}
