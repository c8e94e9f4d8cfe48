//! Do the periods differ by more than their readings' spread explains?
//!
//! Means of periods scatter even if the level never moves, because each rests on few readings. This
//! check asks whether they scatter more. Where the model already lets levels differ between periods
//! (a between sd) a difference is expected and is no concern; where the periods are pooled as one
//! level it is.
//!
//! Statistic: Q = sum (mean_j - weighted mean)^2 / s_j^2, weights 1/s_j^2; s_j is the standard
//! uncertainty of the mean of period j.
//! Law: with known s_j chi-square with J - 1 degrees of freedom; with s_j from one pooled sd worth
//! nu degrees of freedom Q/(J-1) ~ F with J - 1 and nu. The upper tail counts.
//! Assumes: normal means, independent between periods.
//! Beside it: the share of the scatter of means beyond that from readings, max(0, 1 - (J-1)/Q).
//! Source: Cochran 1954 (Biometrics 10, 101); the F form is the one-way analysis of variance.
//!
//! Worked: means 10.0, 12.0, 11.0, 15.0, each with s = 1.0: weighted mean 12.0, Q = 4 + 0 + 1 + 9 =
//! 14 on 3 df, p = 0.0029: the periods differ.

use crate::checks::{Check, REMARK_BELOW, tails, words};

/// The name of this check.
pub const ID: &str = "difference of periods";
/// Where the method was published.
pub const SOURCE: &str = "Cochran 1954; one-way analysis of variance";

const STATISTIC: &str = "Cochran Q";
const STATISTIC_F: &str = "Q / (J - 1)";

/// The mean of a period and its standard uncertainty from the readings of the period alone.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PeriodMean {
    /// Mean, in the unit of the readings.
    pub mean: f64,
    /// sd / sqrt(n) or the stated uncertainty, above 0.
    pub uncertainty: f64,
}

/// Checks whether the means of periods differ. `pooled_df` is none where the uncertainties are
/// known, else the degrees of freedom of the one sd that they all come from. `levels_may_differ`
/// says that the model has a between sd, so that a difference raises no concern.
pub fn check(periods: &[PeriodMean], pooled_df: Option<f64>, levels_may_differ: bool) -> Check {
    let name = if pooled_df.is_some() { STATISTIC_F } else { STATISTIC };
    if periods.len() < 2 {
        return Check::not_made(ID, name, "there are fewer than two periods");
    }
    if periods.iter().any(|period| !(period.uncertainty > 0.0 && period.uncertainty.is_finite())) {
        return Check::not_made(ID, name, "a period's mean has no uncertainty above 0");
    }
    let weights: Vec<f64> =
        periods.iter().map(|period| 1.0 / (period.uncertainty * period.uncertainty)).collect();
    let weight: f64 = weights.iter().sum();
    let centre = periods.iter().zip(&weights).map(|(period, w)| w * period.mean).sum::<f64>() / weight;
    let q: f64 = periods
        .iter()
        .zip(&weights)
        .map(|(period, w)| w * (period.mean - centre) * (period.mean - centre))
        .sum();
    let df = (periods.len() - 1) as f64;
    let (statistic, tail, law) = match pooled_df {
        None => (q, tails::chi_square(q, df), format!("chi-square, {} df", periods.len() - 1)),
        Some(nu) => (
            q / df,
            tails::f_law(q / df, df, nu),
            format!("F, {} and {} df", periods.len() - 1, words::number(nu)),
        ),
    };
    let Some(tail) = tail else {
        return Check::not_made(ID, name, "the means or the degrees of freedom are not usable numbers");
    };
    let p = tail.upper;
    let share = if q > df { 1.0 - df / q } else { 0.0 };
    let verdict = if p < REMARK_BELOW { "differ by more than" } else { "differ by no more than" };
    let mut check = Check::of(ID, name, statistic)
        .reference(law)
        .p(p)
        .extra("periods", periods.len() as f64)
        .extra("Q", q)
        .extra("weighted mean", centre)
        .extra("share of scatter beyond readings", share)
        .meaning(format!(
            "The means of the {} {verdict} the spread of their readings explains ({}).",
            words::count(periods.len(), "period"),
            words::p_is(p)
        ));
    if levels_may_differ {
        check = check.describing();
    }
    check.if_concerned(
        "The periods do not share one level: pooling them as one is too sure. Let levels differ by a between sd.",
    )
}
