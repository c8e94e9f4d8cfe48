//! Axes: a range, where its ticks lie and what they say.
//!
//! Ticks are whole multiples of 1, 2 or 5 times a power of ten, formed as decimal text and only then read as
//! numbers, so no tick reads 0.30000000000000004 and no logarithm of the platform is called.

use super::figure_frame::FigureError;
use super::text::Places;

/// A range with its ticks and title.
#[derive(Clone, Debug)]
pub struct Axis {
    pub low: f64,
    pub high: f64,
    /// Where each tick lies and what it says.
    pub ticks: Vec<(f64, String)>,
    /// The quantity and its unit.
    pub title: String,
    /// Whether a line runs across the drawing at each tick.
    pub mesh: bool,
}

impl Axis {
    /// An axis that covers all finite values with a margin of `margin` times the range on both sides and about
    /// `wanted` ticks.
    pub fn covering(
        values: impl IntoIterator<Item = f64>,
        margin: f64,
        wanted: u32,
        title: &str,
    ) -> Result<Axis, FigureError> {
        let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
        for value in values.into_iter().filter(|value| value.is_finite()) {
            low = low.min(value);
            high = high.max(value);
        }
        if low > high {
            return Err(FigureError::NothingToDraw);
        }
        let spread = high - low;
        let size = low.abs().max(high.abs());
        // Equal values, and values so close that ticks could not tell them apart, get room of their own.
        let room = if spread > size * 1e-9 {
            spread * margin
        } else if size > 0.0 {
            size * 0.05
        } else {
            1.0
        };
        Axis::between(low - room, high + room, wanted, title)
    }

    /// An axis with a stated range.
    pub fn between(low: f64, high: f64, wanted: u32, title: &str) -> Result<Axis, FigureError> {
        let spread = high - low;
        if !(spread > 0.0 && spread.is_finite()) {
            return Err(FigureError::NoRange);
        }
        let (unit, power) = step(spread / f64::from(wanted.max(1))).ok_or(FigureError::NoRange)?;
        let size = low.abs().max(high.abs());
        // A common factor keeps very large and very small numbers out of the ticks.
        let factor =
            if (1e-3..1e7).contains(&size) { 0 } else { exponent(size).ok_or(FigureError::NoRange)? };
        let step_size = decimal(i64::from(unit), power).ok_or(FigureError::NoRange)?;
        let (first, last) = ((low / step_size).ceil(), (high / step_size).floor());
        if !(first.abs() < 1e15 && last.abs() < 1e15) {
            return Err(FigureError::NoRange);
        }
        let places = Places::decimals((factor - power).max(0));
        let mut ticks = Vec::new();
        for multiple in first as i64..=last as i64 {
            let mantissa = multiple * i64::from(unit);
            let (Some(place), Some(shown)) = (decimal(mantissa, power), decimal(mantissa, power - factor))
            else {
                continue;
            };
            if place >= low && place <= high {
                ticks.push((place, places.value(shown)));
            }
        }
        let title = match factor {
            0 => title.to_owned(),
            _ => format!("{title} (× 10{})", superscript(factor)),
        };
        Ok(Axis { low, high, ticks, title, mesh: true })
    }

    /// Probabilities from 0 to 1, with room for the line at 1.
    pub fn chance(title: &str) -> Axis {
        let ticks = [(0.0, "0"), (0.25, "0.25"), (0.5, "0.5"), (0.75, "0.75"), (1.0, "1")];
        let ticks = ticks.into_iter().map(|(place, text)| (place, text.to_owned())).collect();
        Axis { low: 0.0, high: 1.04, ticks, title: title.to_owned(), mesh: true }
    }

    /// Heights from zero, without ticks: what counts is the shape.
    pub fn heights(values: impl IntoIterator<Item = f64>, title: &str) -> Result<Axis, FigureError> {
        let highest = values.into_iter().filter(|value| value.is_finite()).fold(0.0, f64::max);
        if highest > 0.0 {
            Ok(Axis {
                low: 0.0,
                high: highest * 1.14,
                ticks: Vec::new(),
                title: title.to_owned(),
                mesh: false,
            })
        } else {
            Err(FigureError::NothingToDraw)
        }
    }

    /// Places 0, 1, 2 ... with a name each.
    pub fn names(names: impl IntoIterator<Item = String>, title: &str) -> Result<Axis, FigureError> {
        let ticks: Vec<_> = names.into_iter().enumerate().map(|(place, name)| (place as f64, name)).collect();
        if ticks.is_empty() {
            return Err(FigureError::NothingToDraw);
        }
        let high = ticks.len() as f64 - 0.4;
        Ok(Axis { low: -0.6, high, ticks, title: title.to_owned(), mesh: false })
    }
}

/// The exponent of ten of the first significant digit.
fn exponent(size: f64) -> Option<i32> {
    format!("{size:e}").split_once('e').and_then(|(_, exponent)| exponent.parse().ok())
}

/// The smallest of 1, 2, 5, 10 times a power of ten that is not below the size, as (1 | 2 | 5, power).
fn step(size: f64) -> Option<(u8, i32)> {
    let text = format!("{size:e}");
    let (mantissa, power) = text.split_once('e')?;
    let (mantissa, power): (f64, i32) = (mantissa.parse().ok()?, power.parse().ok()?);
    // A quotient that should be a round number may lie a rounding error above it.
    let slack = 1e-9;
    Some(match mantissa {
        m if m <= 1.0 + slack => (1, power),
        m if m <= 2.0 + slack => (2, power),
        m if m <= 5.0 + slack => (5, power),
        _ => (1, power + 1),
    })
}

fn decimal(mantissa: i64, power: i32) -> Option<f64> {
    format!("{mantissa}e{power}").parse().ok()
}

/// A whole number in raised digits.
pub fn superscript(number: i32) -> String {
    let raised = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];
    number
        .to_string()
        .chars()
        .map(|character| match character.to_digit(10) {
            Some(digit) => raised[digit as usize],
            None => '⁻',
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn texts(axis: &Axis) -> Vec<&str> {
        axis.ticks.iter().map(|(_, text)| text.as_str()).collect()
    }

    #[test]
    fn ticks_are_round_decimals() {
        let axis = Axis::between(0.0, 1.0, 5, "x").unwrap();
        assert_eq!(texts(&axis), ["0.0", "0.2", "0.4", "0.6", "0.8", "1.0"]);
        assert_eq!(axis.ticks[3].0, 0.6);
        let axis = Axis::between(38.3, 51.2, 6, "x").unwrap();
        assert_eq!(texts(&axis), ["40", "45", "50"]);
        let axis = Axis::between(-0.3, 0.3, 4, "x").unwrap();
        assert_eq!(texts(&axis), ["−0.2", "0.0", "0.2"]);
    }

    #[test]
    fn extreme_sizes_take_a_common_factor() {
        let axis = Axis::between(1e150, 3e150, 4, "flux").unwrap();
        assert_eq!(texts(&axis), ["1.0", "1.5", "2.0", "2.5", "3.0"]);
        assert_eq!(axis.title, "flux (× 10¹⁵⁰)");
        let axis = Axis::between(0.0, 4e-7, 4, "mass").unwrap();
        assert_eq!(texts(&axis), ["0", "1", "2", "3", "4"]);
        assert_eq!(axis.title, "mass (× 10⁻⁷)");
    }

    #[test]
    fn equal_values_and_no_values() {
        let axis = Axis::covering([5.0, 5.0], 0.1, 5, "x").unwrap();
        assert!(axis.low < 5.0 && axis.high > 5.0 && axis.ticks.len() >= 2);
        assert!(Axis::covering([0.0], 0.1, 5, "x").is_ok());
        assert_eq!(Axis::covering([f64::NAN], 0.1, 5, "x").err(), Some(FigureError::NothingToDraw));
        assert_eq!(Axis::between(0.0, f64::INFINITY, 5, "x").err(), Some(FigureError::NoRange));
    }
}
