//! The F distribution (ratio of two variances).

use super::beta;
use super::error::{MathError, Result, positive};

/// The chance that F with `df1` and `df2` degrees of freedom is at most f. df1, df2 > 0, f ≥ 0; else an error.
pub fn cdf(f: f64, df1: f64, df2: f64) -> Result<f64> {
    let (x, y) = shares(f, df1, df2)?;
    beta::cdf(0.5 * df1, 0.5 * df2, x, y)
}

/// The chance that F is more than f.
pub fn sf(f: f64, df1: f64, df2: f64) -> Result<f64> {
    let (x, y) = shares(f, df1, df2)?;
    beta::sf(0.5 * df1, 0.5 * df2, x, y)
}

/// The f with chance p at or below it, 0 < p < 1.
pub fn quantile(p: f64, df1: f64, df2: f64) -> Result<f64> {
    let (x, y) = beta::quantile(0.5 * df1, 0.5 * df2, p)?;
    Ok(x / y * (df2 / df1))
}

/// The f with chance q above it, 0 < q < 1.
pub fn upper_quantile(q: f64, df1: f64, df2: f64) -> Result<f64> {
    let (x, y) = beta::upper_quantile(0.5 * df1, 0.5 * df2, q)?;
    Ok(x / y * (df2 / df1))
}

/// df1 f/(df1 f + df2) and its complement, formed apart.
fn shares(f: f64, df1: f64, df2: f64) -> Result<(f64, f64)> {
    positive("F law", "df1", df1)?;
    positive("F law", "df2", df2)?;
    if f.is_nan() || f < 0.0 {
        return Err(MathError::argument("F law", "f", f, "0 or more"));
    }
    let ratio = f * (df1 / df2);
    if ratio == f64::INFINITY {
        return Ok((1.0, 0.0));
    }
    Ok((ratio / (1.0 + ratio), 1.0 / (1.0 + ratio)))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::student;

    #[test]
    fn one_numerator_degree_is_the_square_of_student() {
        for (t, df) in [(0.2, 3.0), (2.0, 7.5), (9.0, 40.0), (4.0, 1e5)] {
            let two_sided = 2.0 * student::sf(t, df).unwrap();
            assert!((sf(t * t, 1.0, df).unwrap() / two_sided - 1.0).abs() < 1e-12, "{t} {df}");
        }
        // df 2, 2: sf = 1/(1 + f).
        assert!((sf(3.0, 2.0, 2.0).unwrap() - 0.25).abs() < 1e-15);
        assert!((upper_quantile(0.25, 2.0, 2.0).unwrap() - 3.0).abs() < 1e-13);
        assert!((quantile(0.75, 2.0, 2.0).unwrap() - 3.0).abs() < 1e-13);
        assert!(
            sf(-1.0, 2.0, 2.0).is_err() && cdf(f64::NAN, 2.0, 2.0).is_err() && cdf(1.0, 0.0, 2.0).is_err()
        );
        assert_eq!(sf(f64::INFINITY, 2.0, 2.0).unwrap(), 0.0);
    }
}
