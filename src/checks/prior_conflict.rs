//! Do the prior and this period's readings agree?
//!
//! Before the readings came, the prior said where their mean should lie. This check asks how far
//! out the mean that came lies. Where they disagree, the combined answer is an average of two
//! stories of which at least one is wrong, and should not be used until the cause is known.
//!
//! Statistic: the mean of the period's readings (and z, the normal deviate of the same tail).
//! Law: the prior predictive distribution of that mean, a mixture of normal pieces
//! N(m_k, v_k + sd_k^2 / n) with the weights that the prior and the readings' own spread give.
//! Both tails count.
//! Assumes: the model of the readings holds; so look at the checks of spread, shape and order
//! first. A flat prior expects nothing, and the check is then not made.
//! Source: Box 1980 (J. R. Stat. Soc. A 143, 383); Evans & Moshonov 2006 (Bayesian Analysis 1, 893).
//!
//! Worked: prior N(370, 20^2), one measurement 421 with sd 8: z = 51 / sqrt(464) = 2.368,
//! p = 0.018: a remark.

use crate::checks::tails::{self, Tails};
use crate::checks::{Check, words};

/// The name of this check.
pub const ID: &str = "prior conflict";
/// Where the method was published.
pub const SOURCE: &str = "Box 1980; Evans & Moshonov 2006";

const STATISTIC: &str = "mean of the period's readings";

/// One normal piece of a distribution: its weight, mean and sd. Weights need not add to one.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct NormalPiece {
    /// Share of the mixture, not negative.
    pub weight: f64,
    /// Mean, in the unit of the readings.
    pub mean: f64,
    /// Standard deviation, above 0, in the unit of the readings.
    pub sd: f64,
}

/// Both tails of a mixture of normal pieces at `value`. None if there is no piece with weight or
/// a piece has no sd above 0.
pub fn tails_of(pieces: &[NormalPiece], value: f64) -> Option<Tails> {
    let (mut weight, mut lower, mut upper) = (0.0, 0.0, 0.0);
    for piece in pieces {
        if piece.weight == 0.0 {
            continue;
        }
        if !(piece.weight > 0.0 && piece.sd > 0.0) {
            return None;
        }
        let tail = tails::normal((value - piece.mean) / piece.sd)?;
        weight += piece.weight;
        lower += piece.weight * tail.lower;
        upper += piece.weight * tail.upper;
    }
    (weight > 0.0 && weight.is_finite()).then(|| Tails { lower: lower / weight, upper: upper / weight })
}

/// Checks the observed mean against its prior predictive distribution, given as pieces
/// N(m_k, v_k + sd_k^2 / n).
pub fn check(observed_mean: f64, n: usize, predictive: &[NormalPiece]) -> Check {
    match tails_of(predictive, observed_mean) {
        Some(tail) => from_tails(observed_mean, n, tail, expected(predictive)),
        None => {
            Check::not_made(ID, STATISTIC, "the prior gives no distribution for the mean of the readings")
        }
    }
}

/// The check where the caller has the two tails already (a prior that is not made of normal
/// pieces). `expected` is the prior predictive mean or median, where there is one.
pub fn from_tails(observed_mean: f64, n: usize, tail: Tails, expected: Option<f64>) -> Check {
    if n == 0 {
        return Check::not_made(ID, STATISTIC, "the period has no readings");
    }
    if !(tail.lower >= 0.0 && tail.upper >= 0.0) {
        return Check::not_made(ID, STATISTIC, "the tails of the prior's distribution are not numbers");
    }
    let p = tail.two_sided();
    let outside = if tail.upper < tail.lower { "above" } else { "below" };
    let mut check = Check::of(ID, STATISTIC, observed_mean)
        .reference("prior predictive distribution of the mean")
        .p(p)
        .extra("readings", n as f64)
        .extra("chance of a mean this low or lower", tail.lower)
        .extra("chance of a mean this high or higher", tail.upper);
    if let Some(z) = tails::normal_deviate(tail) {
        check = check.extra("z", z);
    }
    let mut told =
        format!("The mean of the {} is {}", words::count(n, "reading"), words::number(observed_mean));
    if let Some(expected) = expected {
        check = check.extra("expected mean", expected);
        told.push_str(&format!("; the prior expected about {}", words::number(expected)));
    }
    told.push_str(&format!(
        ". A mean at least as far {outside} what was expected, on either side, had chance {} ({}).",
        words::chance(p),
        words::p_is(p)
    ));
    check.meaning(told).if_concerned(
        "Prior and readings disagree. Do not use the combined value until the cause is known: look at the prior alone \
         and the readings alone, and ask what changed.",
    )
}

fn expected(pieces: &[NormalPiece]) -> Option<f64> {
    let weight: f64 = pieces.iter().map(|piece| piece.weight).sum();
    let sum: f64 =
        pieces.iter().filter(|piece| piece.weight > 0.0).map(|piece| piece.weight * piece.mean).sum();
    let mean = sum / weight;
    mean.is_finite().then_some(mean)
}
