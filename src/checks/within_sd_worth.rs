//! Does the within sd, worth a number of readings, agree with this period?
//!
//! The within sd was stated or estimated from earlier readings and is worth a number of degrees
//! of freedom: it is itself uncertain. This check asks whether the spread of this period's
//! readings agrees with it, both uncertainties counted.
//!
//! Statistic: (SS / (n - 1)) / s'^2, the variance of the period over the variance held before it.
//! Law: F with n - 1 and nu' degrees of freedom. Both tails count.
//! Assumes: normal, independent readings; s' and nu' from before this period.
//! Source: Fisher's variance ratio, the F test of two variances; Box 1980 (J. R. Stat. Soc. A
//! 143, 383) for its place as a check of the model before the update.
//!
//! Worked: s' = 2.0 worth 20 degrees of freedom; 6 readings with sd 3.4: F = 11.56 / 4 = 2.89 on
//! 5 and 20 df, upper tail 0.0402, p = 0.080: no concern, though the sd is 1.7 times as large.

use crate::checks::{Check, tails, words};

/// The name of this check.
pub const ID: &str = "within sd worth";
/// Where the method was published.
pub const SOURCE: &str = "F test of two variances; Box 1980";

const STATISTIC: &str = "(SS / (n - 1)) / s'^2";

/// Checks the sum of squares of `n` readings against a within sd `held_sd` worth `held_df` degrees
/// of freedom, both from before this period.
///
/// Not made for n < 2, or where `held_sd` or `held_df` is not above 0. An infinite `held_df` is the
/// known sd; use [`crate::checks::within_sd`].
pub fn check(n: usize, sum_of_squares: f64, held_sd: f64, held_df: f64) -> Check {
    if n < 2 {
        return Check::not_made(ID, STATISTIC, "the spread of fewer than two readings cannot be seen");
    }
    if !(held_sd > 0.0 && held_sd.is_finite()) {
        return Check::not_made(ID, STATISTIC, "no within sd above 0 was held before this period");
    }
    if !(held_df > 0.0 && held_df.is_finite()) {
        return Check::not_made(ID, STATISTIC, "the within sd held before has no finite degrees of freedom");
    }
    let df = (n - 1) as f64;
    let statistic = sum_of_squares / df / (held_sd * held_sd);
    let Some(tail) = tails::f_law(statistic, df, held_df) else {
        return Check::not_made(ID, STATISTIC, "the sum of squares is not a number");
    };
    let seen_sd = (sum_of_squares / df).sqrt();
    let p = tail.two_sided();
    let follows = if tail.upper < tail.lower {
        "The readings of this period are spread more than before: the sd that joins both may suit neither. Look for \
         an unsteady cause; see the answers with the sd from this period's readings alone."
    } else {
        "The readings of this period are spread less than before: look for copied, smoothed, clipped or coarsely \
         rounded readings before the smaller spread is taken as good news."
    };
    Check::of(ID, STATISTIC, statistic)
        .reference(format!("F, {} and {} df", n - 1, words::number(held_df)))
        .p(p)
        .extra("readings", n as f64)
        .extra("held sd", held_sd)
        .extra("held df", held_df)
        .extra("sd of the period", seen_sd)
        .extra("ratio", seen_sd / held_sd)
        .meaning(format!(
            "The {} have sd {}, {} times the {} held before, which is worth {} degrees of freedom ({}).",
            words::count(n, "reading"),
            words::number(seen_sd),
            words::number(seen_sd / held_sd),
            words::number(held_sd),
            words::number(held_df),
            words::p_is(p),
        ))
        .if_concerned(follows)
}
