//! p-values of the assumption checks: normal, Student, chi-square and F tails, one- and two-sided.
//!
//! The value comes from this crate's own functions, so its bits are the same everywhere. Where `statrs` is accurate (from
//! 1 to 1000 degrees of freedom, tails above 1e−10) it is asked too, as an independent second opinion: a difference
//! beyond 1e−6 is an error, never a silent choice. Arguments are checked first, so that it is never asked what it cannot
//! answer.

use statrs::distribution::{ChiSquared, ContinuousCDF, FisherSnedecor, StudentsT};

use super::error::{MathError, Result, finite};
use super::{chi_square, f_law, normal, student};

/// min(1, 2 min(lower, upper)).
pub fn two_sided(lower: f64, upper: f64) -> f64 {
    (2.0 * lower.min(upper)).min(1.0)
}

/// P(|Z| > |z|) for a standard normal Z. z must not be NaN.
pub fn normal_two_sided(z: f64) -> Result<f64> {
    if z.is_nan() {
        return Err(MathError::argument("normal p-value", "z", z, "a number"));
    }
    Ok((2.0 * normal::sf(z.abs())).min(1.0))
}

/// P(T > t) with `df` degrees of freedom.
pub fn student_upper(t: f64, df: f64) -> Result<f64> {
    let own = student::sf(t, df)?;
    // Near t = 0 the second opinion loses its digits (x = ν/(ν + t²) rounds to 1).
    let asked = (1.0..=1000.0).contains(&df) && t.abs() > 1e-3 && t.abs() < 1e6;
    confirmed("Student", own, asked, || StudentsT::new(0.0, 1.0, df).ok().map(|law| law.sf(t)))
}

/// P(|T| > |t|).
pub fn student_two_sided(t: f64, df: f64) -> Result<f64> {
    Ok((2.0 * student_upper(t.abs(), df)?).min(1.0))
}

/// P(X > x) for a chi-square variable.
pub fn chi_square_upper(x: f64, df: f64) -> Result<f64> {
    let own = chi_square::sf(x, df)?;
    confirmed("chi-square", own, askable(x, df), || ChiSquared::new(df).ok().map(|law| law.sf(x)))
}

/// P(X ≤ x) for a chi-square variable.
pub fn chi_square_lower(x: f64, df: f64) -> Result<f64> {
    let own = chi_square::cdf(x, df)?;
    confirmed("chi-square", own, askable(x, df), || ChiSquared::new(df).ok().map(|law| law.cdf(x)))
}

/// Two-sided p of a chi-square statistic.
pub fn chi_square_two_sided(x: f64, df: f64) -> Result<f64> {
    Ok(two_sided(chi_square_lower(x, df)?, chi_square_upper(x, df)?))
}

/// P(F > f).
pub fn f_upper(f: f64, df1: f64, df2: f64) -> Result<f64> {
    let own = f_law::sf(f, df1, df2)?;
    let asked = askable(f, df1) && askable(f, df2);
    confirmed("F", own, asked, || FisherSnedecor::new(df1, df2).ok().map(|law| law.sf(f)))
}

/// P(F ≤ f).
pub fn f_lower(f: f64, df1: f64, df2: f64) -> Result<f64> {
    let own = f_law::cdf(f, df1, df2)?;
    let asked = askable(f, df1) && askable(f, df2);
    confirmed("F", own, asked, || FisherSnedecor::new(df1, df2).ok().map(|law| law.cdf(f)))
}

/// Two-sided p of an F statistic.
pub fn f_two_sided(f: f64, df1: f64, df2: f64) -> Result<f64> {
    Ok(two_sided(f_lower(f, df1, df2)?, f_upper(f, df1, df2)?))
}

/// Whether the second opinion is sound at this statistic and these degrees of freedom.
fn askable(x: f64, df: f64) -> bool {
    (1.0..=1000.0).contains(&df) && x > 1e-9 && x < 1e6
}

/// `own`, after the second opinion agreed where it was asked.
fn confirmed(law: &str, own: f64, asked: bool, second: impl FnOnce() -> Option<f64>) -> Result<f64> {
    finite("p-value", "the chance", own)?;
    if !asked || own < 1e-10 {
        return Ok(own);
    }
    match second() {
        Some(other) if (other - own).abs() <= 1e-6 * own => Ok(own),
        Some(other) => Err(MathError::new(format!("{law} p-value: two methods differ, {own} and {other}"))),
        None => {
            Err(MathError::new(format!("{law} p-value: the second method does not accept the arguments")))
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn both_opinions_agree_over_a_wide_grid() {
        for df in [1.0, 1.5, 2.0, 5.0, 30.0, 99.0, 500.0, 1000.0] {
            for x in [1e-8, 1e-3, 0.1, 1.0, 2.5, 10.0, 60.0, 300.0, 1100.0] {
                chi_square_two_sided(x, df).unwrap();
                student_two_sided(x, df).unwrap();
                student_upper(-x, df).unwrap();
                for df2 in [1.0, 4.0, 77.0, 1000.0] {
                    f_two_sided(x, df, df2).unwrap();
                }
            }
        }
    }

    #[test]
    fn table_values() {
        // Upper 5 % points: chi-square(10) 18.3070, F(3, 20) 3.0984, t(8) 1.8595 (common tables).
        assert!((chi_square_upper(18.3070, 10.0).unwrap() - 0.05).abs() < 1e-6);
        assert!((f_upper(3.0984, 3.0, 20.0).unwrap() - 0.05).abs() < 1e-5);
        assert!((student_upper(1.8595, 8.0).unwrap() - 0.05).abs() < 1e-5);
        assert!((normal_two_sided(-1.959_964).unwrap() - 0.05).abs() < 1e-7);
        assert!(normal_two_sided(f64::NAN).is_err());
        assert!(chi_square_upper(-1.0, 3.0).is_err() && f_upper(1.0, 0.0, 1.0).is_err());
        assert!(student_upper(f64::NAN, 3.0).is_err());
        // Far tails beyond the second opinion's reach are still answered.
        assert!(chi_square_upper(1400.0, 2.0).unwrap() > 0.0);
    }
}
