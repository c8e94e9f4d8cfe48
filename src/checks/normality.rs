//! Are the readings of the period normally distributed?
//!
//! Chances of single readings, shares beyond a limit and percentiles rest on the shape of the
//! distribution, far tails most of all; the mean of many readings much less. This check looks for
//! a shape that is not normal (on the log scale: whose logarithms are not).
//!
//! Statistic: W of Shapiro and Wilk for 3 to 5000 readings; above that A*^2 of Anderson and
//! Darling. Small W, large A*^2 speak against the normal shape; one tail counts.
//! Law: Royston's approximation for W; that of D'Agostino and Stephens for A*^2.
//! Assumes: independent readings of one level, not rounded coarsely (rounding alone lowers W), none
//! marked below or above a limit.
//! With few readings hardly any shape can be refused; with thousands a harmless departure is
//! flagged: look at the normal quantile plot.
//! Source: Shapiro & Wilk 1965 (Biometrika 52, 591); Royston 1995 (Applied Statistics 44, 547,
//! algorithm AS R94); D'Agostino & Stephens 1986, Goodness-of-Fit Techniques, table 4.9.
//!
//! Worked: the weights of 11 men in pounds, 148 154 158 160 161 162 166 170 182 195 236 (Shapiro &
//! Wilk 1965): W = 0.7888, p = 0.0067: a flag, made by the one weight of 236.

use crate::checks::{Check, anderson_darling, shapiro_wilk, words};

/// The name of this check.
pub const ID: &str = "normality";
/// Where the method was published.
pub const SOURCE: &str = "Shapiro & Wilk 1965; Royston 1995 (AS R94); D'Agostino & Stephens 1986";

const W: &str = "Shapiro-Wilk W";
const A: &str = "Anderson-Darling A*^2";

/// Checks the shape of the readings, given on the scale on which they are taken as normal, in any
/// order.
pub fn check(readings: &[f64]) -> Check {
    let n = readings.len();
    if n < 3 {
        return Check::not_made(ID, W, "the shape of fewer than three readings cannot be seen");
    }
    let mut sorted = readings.to_vec();
    sorted.sort_by(f64::total_cmp);
    if sorted[0] == sorted[n - 1] {
        return Check::not_made(ID, W, "all readings are equal");
    }
    let small = n <= shapiro_wilk::MOST;
    let made = if small { shapiro_wilk::of_sorted(&sorted) } else { anderson_darling::of_sorted(&sorted) };
    let name = if small { W } else { A };
    let Some((statistic, p)) = made else {
        return Check::not_made(ID, name, "the readings are too unequal in size for the statistic");
    };
    let law = if small { "Royston 1995" } else { "D'Agostino & Stephens 1986" };
    let verdict = if p < crate::checks::REMARK_BELOW {
        "so far from the normal shape that chance is a poor explanation"
    } else {
        "not far from the normal shape"
    };
    let mut told = format!("The {} lie {verdict} ({}).", words::count(n, "reading"), words::p_is(p));
    if n < 20 {
        told.push_str(" With so few readings only gross departures show.");
    }
    Check::of(ID, name, statistic)
        .reference(format!("{law}, n = {n}"))
        .p(p)
        .extra("readings", n as f64)
        .meaning(told)
        .if_concerned(
            "Chances of single readings, shares and percentiles depend on the shape and are doubtful; the level less so. \
             Look at the quantile plot and for a cause; consider the log scale.",
        )
}
