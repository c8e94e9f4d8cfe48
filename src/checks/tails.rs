//! The probabilities that checks need, both tails of each law, and sums that do not depend on
//! the order of the readings.
//!
//! A tail that the law below refuses (a statistic that is not a number) is none: the check then
//! says that it was not made.

use crate::math::sums::{ExactSum, Moments};
use crate::math::{chi_square, f_law, normal, student};

/// Both tails of a statistic under its law.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tails {
    /// P(T <= t).
    pub lower: f64,
    /// P(T >= t).
    pub upper: f64,
}

impl Tails {
    /// The two-sided p-value min(1, 2 min(lower, upper)).
    pub fn two_sided(self) -> f64 {
        (2.0 * self.lower.min(self.upper)).min(1.0)
    }
}

fn pair(lower: f64, upper: f64) -> Option<Tails> {
    (lower >= 0.0 && upper >= 0.0).then_some(Tails { lower, upper })
}

/// Both tails of the standard normal law at z.
pub fn normal(z: f64) -> Option<Tails> {
    pair(normal::cdf(z), normal::sf(z))
}

/// ln P(Z <= z) of the standard normal law.
pub fn ln_normal_lower(z: f64) -> Option<f64> {
    let ln = normal::ln_cdf(z);
    (!ln.is_nan()).then_some(ln)
}

/// The z beyond which a standard normal variable lies with the given probability.
pub fn normal_upper_quantile(upper: f64) -> Option<f64> {
    normal::upper_quantile(upper).ok()
}

/// The normal deviate with the same tails, solved on the smaller one. None where that tail is 0.
pub fn normal_deviate(tail: Tails) -> Option<f64> {
    if tail.upper < tail.lower {
        normal::upper_quantile(tail.upper).ok()
    } else {
        normal::quantile(tail.lower).ok()
    }
}

/// Both tails of chi-square with `df` degrees of freedom at x, not below 0.
pub fn chi_square(x: f64, df: f64) -> Option<Tails> {
    pair(chi_square::cdf(x, df).ok()?, chi_square::sf(x, df).ok()?)
}

/// The x below which chi-square lies with the given probability.
pub fn chi_square_quantile(lower: f64, df: f64) -> Option<f64> {
    chi_square::quantile(lower, df).ok()
}

/// The x above which chi-square lies with the given probability.
pub fn chi_square_upper_quantile(upper: f64, df: f64) -> Option<f64> {
    chi_square::upper_quantile(upper, df).ok()
}

/// Both tails of Student's law with `df` degrees of freedom at t.
pub fn student(t: f64, df: f64) -> Option<Tails> {
    pair(student::cdf(t, df).ok()?, student::sf(t, df).ok()?)
}

/// Both tails of the F law with `above` and `below` degrees of freedom at x, not below 0.
pub fn f_law(x: f64, above: f64, below: f64) -> Option<Tails> {
    pair(f_law::cdf(x, above, below).ok()?, f_law::sf(x, above, below).ok()?)
}

/// The mean, from an exact sum: the order of the readings does not matter. None without readings
/// or where it is not a finite number.
pub fn mean(values: &[f64]) -> Option<f64> {
    let mut moments = Moments::new();
    for &value in values {
        moments.add(value);
    }
    let mean = moments.mean();
    mean.is_finite().then_some(mean)
}

/// The sum of (value - centre)^2, added exactly: the order of the readings does not matter.
pub fn sum_of_squares(values: &[f64], centre: f64) -> f64 {
    let mut sum = ExactSum::new();
    for &value in values {
        let distance = value - centre;
        sum.add_product(distance, distance);
    }
    sum.value()
}

/// The median; sorts the values. None without values.
pub fn median(values: &mut [f64]) -> Option<f64> {
    values.sort_by(f64::total_cmp);
    let half = values.len() / 2;
    match values.len() {
        0 => None,
        n if n % 2 == 1 => Some(values[half]),
        _ => Some(values[half - 1] + 0.5 * (values[half] - values[half - 1])),
    }
}
