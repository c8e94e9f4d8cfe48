//! Readings as they were printed: their decimals and the step they have in common.

/// A printed number as a whole number of its last decimal place: 12.50 is 1250 with 2 decimals.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Printed {
    /// The digits as a whole number, with sign.
    pub digits: i128,
    /// How many of them stand after the point; negative for 1.2e5 and the like.
    pub decimals: i32,
}

/// Reads a printed number: sign, digits, one decimal point, an exponent. None for anything else or
/// more digits than fit.
pub fn read(text: &str) -> Option<Printed> {
    let text = text.trim();
    let (mantissa, exponent) = match text.split_once(['e', 'E']) {
        Some((mantissa, exponent)) => (mantissa, exponent.parse::<i32>().ok()?),
        None => (text, 0),
    };
    let (negative, unsigned) = match mantissa.strip_prefix('-') {
        Some(rest) => (true, rest),
        None => (false, mantissa.strip_prefix('+').unwrap_or(mantissa)),
    };
    let (whole, fraction) = unsigned.split_once('.').unwrap_or((unsigned, ""));
    if whole.is_empty() && fraction.is_empty() {
        return None;
    }
    let mut digits: i128 = 0;
    for byte in whole.bytes().chain(fraction.bytes()) {
        if !byte.is_ascii_digit() {
            return None;
        }
        digits = digits.checked_mul(10)?.checked_add(i128::from(byte - b'0'))?;
    }
    let decimals = i32::try_from(fraction.len()).ok()?.checked_sub(exponent)?;
    Some(Printed { digits: if negative { -digits } else { digits }, decimals })
}

/// The step that printed readings have in common.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Step {
    /// The step, in the unit of the readings.
    pub size: f64,
    /// The most decimals printed.
    pub decimals: i32,
    /// How many units of the last decimal the step is: 1, 2, 5, 10, 20, 25, 50 or 100.
    pub last_places: i128,
    /// How many readings could be read as printed numbers.
    pub readings: usize,
}

/// The readings as whole numbers of the finest decimal place among them, and that place.
pub fn in_last_places(texts: &[&str]) -> Option<(Vec<i128>, i32)> {
    let printed: Vec<Printed> = texts.iter().filter_map(|text| read(text)).collect();
    let decimals = printed.iter().map(|number| number.decimals).max()?;
    let mut whole = Vec::with_capacity(printed.len());
    for number in &printed {
        let shift = u32::try_from(decimals - number.decimals).ok()?;
        whole.push(number.digits.checked_mul(10_i128.checked_pow(shift)?)?);
    }
    Some((whole, decimals))
}

/// The common step: one unit of the last decimal place, or a coarser usual step (2, 5, 10, 20, 25,
/// 50, 100 units) if all readings, at least five, are multiples of it and chance would make so many
/// readings multiples of it less than once in a thousand times.
pub fn common_step(texts: &[&str]) -> Option<Step> {
    let (whole, decimals) = in_last_places(texts)?;
    let mut last_places = 1;
    for (coarse, fewest) in [(2_i128, 10), (5, 5), (10, 5), (20, 5), (25, 5), (50, 5), (100, 5)] {
        // 2^-10 and 5^-5 are the first powers below 1/1000.
        if whole.len() >= fewest && whole.iter().all(|value| value % coarse == 0) {
            last_places = coarse;
        }
    }
    let size = format!("{last_places}e{}", -i64::from(decimals)).parse().ok()?;
    Some(Step { size, decimals, last_places, readings: whole.len() })
}
