//! Is the spread the same in every period, by the summaries alone?
//!
//! Where a period is given as a count, a mean and an sd, its single readings are not at hand. This
//! check compares the sds of the periods.
//!
//! Statistic: T = [(N-J) ln s_p^2 - sum (n_j - 1) ln s_j^2] / C, with the pooled variance s_p^2 and
//! C = 1 + [sum 1/(n_j - 1) - 1/(N-J)] / (3(J-1)).
//! Law: chi-square with J - 1 degrees of freedom; large values speak against equal spread.
//! Assumes: normal, independent readings. It takes any departure from the normal shape for unequal
//! spread; where single readings are at hand "spread over periods" is better. Periods with one
//! reading are left out.
//! Source: Bartlett 1937 (Proc. R. Soc. A 160, 268).
//!
//! Worked: NIST's gear diameters, 10 batches of 10 (NIST/SEMATECH handbook 1.3.5.7): T = 20.78580 on
//! 9 df, p = 0.0136: a remark.

use crate::checks::{Check, REMARK_BELOW, tails, words};
use crate::math::fm;

/// The name of this check.
pub const ID: &str = "Bartlett";
/// Where the method was published.
pub const SOURCE: &str = "Bartlett 1937; NIST/SEMATECH handbook 1.3.5.7";

const STATISTIC: &str = "Bartlett T";

/// Checks the sds of periods, each given as (number of readings, sd).
pub fn check(periods: &[(usize, f64)]) -> Check {
    let used: Vec<(f64, f64)> = periods
        .iter()
        .filter(|(n, sd)| *n >= 2 && sd.is_finite() && *sd >= 0.0)
        .map(|&(n, sd)| ((n - 1) as f64, sd * sd))
        .collect();
    if used.len() < 2 {
        return Check::not_made(ID, STATISTIC, "fewer than two periods have an sd");
    }
    if used.iter().any(|(_, variance)| *variance == 0.0) {
        return Check::not_made(ID, STATISTIC, "a period has sd 0, which no normal readings have");
    }
    let df: f64 = used.iter().map(|(df, _)| df).sum();
    let pooled = used.iter().map(|(df, variance)| df * variance).sum::<f64>() / df;
    // As a sum of ln(s_p^2 / s_j^2), so that nearly equal sds lose no digits.
    let raw: f64 = used.iter().map(|(df, variance)| df * fm::ln(pooled / variance)).sum();
    let groups = used.len() as f64;
    let factor = 1.0 + (used.iter().map(|(df, _)| 1.0 / df).sum::<f64>() - 1.0 / df) / (3.0 * (groups - 1.0));
    let statistic = (raw / factor).max(0.0);
    let Some(tail) = tails::chi_square(statistic, groups - 1.0) else {
        return Check::not_made(ID, STATISTIC, "the statistic is not a number");
    };
    let p = tail.upper;
    let verdict = if p < REMARK_BELOW { "differ" } else { "agree" };
    Check::of(ID, STATISTIC, statistic)
        .reference(format!("chi-square, {} df", used.len() - 1))
        .p(p)
        .extra("periods", groups)
        .extra("pooled sd", pooled.sqrt())
        .extra("pooled df", df)
        .meaning(format!(
            "The sds of the {} {verdict} ({}); pooled sd {}.",
            words::count(used.len(), "period"),
            words::p_is(p),
            words::number(pooled.sqrt())
        ))
        .if_concerned(
            "One within sd does not serve all periods, or readings are not normal: see the answers with the sd from this \
             period's readings alone.",
        )
}
