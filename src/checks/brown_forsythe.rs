//! Is the spread of readings the same in every period?
//!
//! One within sd is taken to serve all periods, history and present. This check asks whether the
//! periods are spread alike. It is made where single readings of the periods are at hand; from
//! summaries alone see the check "Bartlett".
//!
//! Statistic: F of a one-way analysis of variance of |x - median of its period|.
//! Law: F with J - 1 and N - J degrees of freedom; large values speak against equal spread.
//! Assumes: independent readings; no normal shape (this is why medians are used). Periods with
//! fewer than 3 readings say too little about their spread and are left out.
//! Source: Brown & Forsythe 1974 (J. Am. Stat. Assoc. 69, 364), after Levene 1960.
//!
//! Worked: NIST's gear diameters, 10 batches of 10 (NIST/SEMATECH handbook 1.3.5.10): F = 1.705910
//! on 9 and 90 df, p = 0.099: no concern.

use crate::checks::{Check, REMARK_BELOW, tails, words};

/// The name of this check.
pub const ID: &str = "spread over periods";
/// Where the method was published.
pub const SOURCE: &str = "Brown & Forsythe 1974; NIST/SEMATECH handbook 1.3.5.10";

const STATISTIC: &str = "Brown-Forsythe F";
/// Fewest readings of a period that enters.
const FEWEST: usize = 3;

/// Checks the spread of readings over periods, one slice a period, in any order of readings.
pub fn check(periods: &[&[f64]]) -> Check {
    let mut distances: Vec<Vec<f64>> = Vec::with_capacity(periods.len());
    for period in periods.iter().filter(|period| period.len() >= FEWEST) {
        let mut sorted = period.to_vec();
        let Some(median) = tails::median(&mut sorted) else { continue };
        // Sorted, so that the order of rows cannot touch the sums.
        distances.push(sorted.iter().map(|value| (value - median).abs()).collect());
    }
    let left_out = periods.len() - distances.len();
    if distances.len() < 2 {
        return Check::not_made(
            ID,
            STATISTIC,
            format!("fewer than two periods have {FEWEST} readings or more"),
        );
    }
    let (Some(between), Some(within)) = spread(&distances) else {
        return Check::not_made(
            ID,
            STATISTIC,
            "the readings of the periods are not numbers of a usable size",
        );
    };
    let total: usize = distances.iter().map(Vec::len).sum();
    let (df_between, df_within) = ((distances.len() - 1) as f64, (total - distances.len()) as f64);
    if within <= 0.0 {
        return Check::not_made(ID, STATISTIC, "the readings lie at equal distance from their medians");
    }
    let statistic = (between / df_between) / (within / df_within);
    let Some(tail) = tails::f_law(statistic, df_between, df_within) else {
        return Check::not_made(ID, STATISTIC, "the statistic is not a number");
    };
    let p = tail.upper;
    let verdict = if p < REMARK_BELOW { "differs from period to period" } else { "is alike in all periods" };
    let mut told = format!(
        "The spread of readings {verdict} ({}, {}).",
        words::count(distances.len(), "period"),
        words::p_is(p)
    );
    if left_out > 0 {
        told.push_str(&format!(
            " {} with fewer than {FEWEST} readings left out.",
            words::count(left_out, "period")
        ));
    }
    Check::of(ID, STATISTIC, statistic)
        .reference(format!("F, {} and {} df", distances.len() - 1, total - distances.len()))
        .p(p)
        .extra("periods", distances.len() as f64)
        .extra("periods left out", left_out as f64)
        .extra("readings", total as f64)
        .meaning(told)
        .if_concerned(
            "One within sd does not serve all periods: see the answers with the sd from this period's readings alone, and \
             ask what changed in method or sampling.",
        )
}

/// Sums of squares between and within the groups.
fn spread(groups: &[Vec<f64>]) -> (Option<f64>, Option<f64>) {
    let all: Vec<f64> = groups.concat();
    let Some(grand) = tails::mean(&all) else { return (None, None) };
    let (mut between, mut within) = (0.0, 0.0);
    for group in groups {
        let Some(mean) = tails::mean(group) else { return (None, None) };
        between += group.len() as f64 * (mean - grand) * (mean - grand);
        within += tails::sum_of_squares(group, mean);
    }
    (between.is_finite().then_some(between), within.is_finite().then_some(within))
}
