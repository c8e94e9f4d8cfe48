//! Do readings trail off to one side?
//!
//! Under the normal model both sides are alike. Skew readings make chances of passing a limit on the
//! long side too small. Readings skew to the right with a spread that grows with the level often
//! suit the log scale.
//!
//! Statistic: the sample skewness, m_3 / m_2^(3/2) with central moments over n.
//! Law: neither level nor within sd enters it, so its posterior predictive law is its law among
//! normal readings; D'Agostino's transformation to a normal deviate is used. Both tails.
//! Assumes: normal, independent readings; made from 8 readings on.
//! Source: D'Agostino 1970 (Biometrika 57, 679).
//!
//! Worked: the weights of 11 men in pounds, 148 154 158 160 161 162 166 170 182 195 236 (Shapiro &
//! Wilk 1965): skewness 1.679, z = 2.779, p = 0.0055: a flag.

use crate::checks::{Check, REMARK_BELOW, tails, words};
use crate::math::fm;

/// The name of this check.
pub const ID: &str = "posterior predictive skew";
/// Where the method was published.
pub const SOURCE: &str = "D'Agostino 1970";

const STATISTIC: &str = "sample skewness";
/// Fewest readings for which the transformation was made.
const FEWEST: usize = 8;

/// The sample skewness of readings in any order. None for fewer than three or equal readings.
pub fn skewness(readings: &[f64]) -> Option<f64> {
    if readings.len() < 3 {
        return None;
    }
    let mut sorted = readings.to_vec();
    sorted.sort_by(f64::total_cmp);
    let range = sorted[sorted.len() - 1] - sorted[0];
    if !(range > 0.0 && range.is_finite()) {
        return None;
    }
    let scaled: Vec<f64> = sorted.iter().map(|value| (value - sorted[0]) / range).collect();
    let n = scaled.len() as f64;
    let mean = tails::mean(&scaled)?;
    let second = tails::sum_of_squares(&scaled, mean) / n;
    let third = scaled.iter().map(|value| (value - mean) * (value - mean) * (value - mean)).sum::<f64>() / n;
    let skewness = third / (second * second.sqrt());
    skewness.is_finite().then_some(skewness)
}

/// D'Agostino's normal deviate of a sample skewness of n normal readings, n at least 8.
fn deviate(skewness: f64, n: f64) -> f64 {
    let y = skewness * ((n + 1.0) * (n + 3.0) / (6.0 * (n - 2.0))).sqrt();
    let beta = 3.0 * (n * n + 27.0 * n - 70.0) * (n + 1.0) * (n + 3.0)
        / ((n - 2.0) * (n + 5.0) * (n + 7.0) * (n + 9.0));
    let w_squared = (2.0 * (beta - 1.0)).sqrt() - 1.0;
    let delta = 1.0 / (0.5 * fm::ln(w_squared)).sqrt();
    let u = y / (2.0 / (w_squared - 1.0)).sqrt();
    delta * fm::asinh(u)
}

/// Checks whether the readings, on the scale on which they are taken as normal, are skew.
pub fn check(readings: &[f64]) -> Check {
    let n = readings.len();
    if n < FEWEST {
        return Check::not_made(ID, STATISTIC, format!("fewer than {FEWEST} readings are too few"));
    }
    let Some(skewness) = skewness(readings) else {
        return Check::not_made(ID, STATISTIC, "all readings are equal");
    };
    let z = deviate(skewness, n as f64);
    let Some(tail) = tails::normal(z) else {
        return Check::not_made(ID, STATISTIC, "the skewness is not a number");
    };
    let p = tail.two_sided();
    let side = if skewness > 0.0 { "upwards" } else { "downwards" };
    let verdict = if p < REMARK_BELOW {
        format!("The readings trail off {side}")
    } else {
        "The readings are not skew beyond chance".to_owned()
    };
    Check::of(ID, STATISTIC, skewness)
        .reference(format!("D'Agostino 1970, n = {n}"))
        .p(p)
        .extra("readings", n as f64)
        .extra("z", z)
        .meaning(format!("{verdict}: skewness {} ({}).", words::number(skewness), words::p_is(p)))
        .if_concerned(format!(
            "Chances of readings far {side} are likely too small: look at the quantile plot and consider the log scale.",
        ))
}
