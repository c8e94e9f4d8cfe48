//! The chi-square distribution: a gamma variable of shape df/2 and scale 2.

use super::error::Result;
use super::gamma;

/// The chance that a chi-square variable with `df` degrees of freedom is at most x. df > 0, x ≥ 0; else an error.
pub fn cdf(x: f64, df: f64) -> Result<f64> {
    gamma::p(0.5 * df, 0.5 * x)
}

/// The chance that it is more than x.
pub fn sf(x: f64, df: f64) -> Result<f64> {
    gamma::q(0.5 * df, 0.5 * x)
}

/// The x with chance p at or below it, 0 < p < 1.
pub fn quantile(p: f64, df: f64) -> Result<f64> {
    Ok(2.0 * gamma::quantile(0.5 * df, p)?)
}

/// The x with chance q above it, 0 < q < 1.
pub fn upper_quantile(q: f64, df: f64) -> Result<f64> {
    Ok(2.0 * gamma::upper_quantile(0.5 * df, q)?)
}
