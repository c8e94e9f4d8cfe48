//! Has the unit changed?
//!
//! A period far from its history by just the factor between two units is more likely a change of unit
//! than a change of level. The check names the factor that would bring the period back; it never
//! converts anything.
//!
//! Statistic: the ratio of the period's mean to the mean expected from history.
//! Rule, no law: the mean lies more than 3 sds of its prior predictive distribution from what was
//! expected, and divided by one of the factors (below) it lies within 2, and the
//! ratio is within a quarter of the factor. Then a flag.
//! Factors, and their inverses: 10, 100 and 1000 (decimal units, a shifted point); 4.4268 (nitrate as
//! ion and as nitrogen, 62.0049 / 14.0067), 3.2845 (nitrite as ion and as nitrogen, 46.0055 /
//! 14.0067), 1.2878 (ammonium as ion and as nitrogen, 18.0385 / 14.0067), 9.80665 (kilogram-force and
//! newton), 145.038 (megapascal and pound-force per square inch).
//! Assumes: means above 0.
//! Source: common practice, no source; the factors from the IUPAC atomic masses and the SI brochure.
//!
//! Worked: expected 10.1, sd of the mean 0.9, seen 44.0: 37.7 sds off; 44.0 / 4.4268 = 9.94 is
//! 0.2 sds off: nitrate given as ion where history was given as nitrogen?

use crate::checks::{Check, Concern, words};

/// The name of this check.
pub const ID: &str = "unit jump";
/// Where the method was published.
pub const SOURCE: &str = "common practice, no source; factors from IUPAC atomic masses and the SI brochure";

const STATISTIC: &str = "mean / expected mean";
/// The mean must lie further than this many sds from what was expected...
const FAR: f64 = 3.0;
/// ...and, divided by a factor, nearer than this many.
const NEAR: f64 = 2.0;

/// A factor between two units and what it stands for.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Factor {
    /// How many times larger the figures become.
    pub times: f64,
    /// What it may mean.
    pub what: &'static str,
}

/// The factors that the check knows; each is also tried the other way round.
pub const FACTORS: &[Factor] = &[
    Factor { times: 10.0, what: "a shifted decimal point" },
    Factor { times: 100.0, what: "a unit 100 times smaller" },
    Factor { times: 1000.0, what: "a unit 1000 times smaller, such as micrograms for milligrams" },
    Factor { times: 62.0049 / 14.0067, what: "nitrate as ion against nitrate as nitrogen" },
    Factor { times: 46.0055 / 14.0067, what: "nitrite as ion against nitrite as nitrogen" },
    Factor { times: 18.0385 / 14.0067, what: "ammonium as ion against ammonium as nitrogen" },
    Factor { times: 9.80665, what: "newton against kilogram-force" },
    Factor { times: 145.038, what: "pound-force per square inch against megapascal" },
];

/// Checks the mean of a period against the mean that history leads to expect and the sd of such a
/// mean (between periods and from the readings, both).
pub fn check(period_mean: f64, expected_mean: f64, expected_sd: f64) -> Check {
    if !(period_mean > 0.0 && expected_mean > 0.0 && period_mean.is_finite() && expected_mean.is_finite()) {
        return Check::not_made(ID, STATISTIC, "a mean is not above 0, so no factor can be formed");
    }
    if !(expected_sd > 0.0 && expected_sd.is_finite()) {
        return Check::not_made(ID, STATISTIC, "history gives no sd for the mean of a period");
    }
    let ratio = period_mean / expected_mean;
    let off = (period_mean - expected_mean).abs() / expected_sd;
    let mut nearest: Option<(f64, f64, &'static str)> = None;
    if off > FAR {
        for factor in FACTORS {
            for times in [factor.times, 1.0 / factor.times] {
                let left = (period_mean / times - expected_mean).abs() / expected_sd;
                // A factor must explain the ratio itself, not merely shrink a far value below a wide sd.
                let explains = (ratio / times - 1.0).abs() < 0.25;
                if left < NEAR && explains && nearest.is_none_or(|(best, _, _)| left < best) {
                    nearest = Some((left, times, factor.what));
                }
            }
        }
    }
    let mut check = Check::of(ID, STATISTIC, ratio)
        .reference("rule, no law")
        .extra("sds off", off)
        .extra("expected mean", expected_mean)
        .extra("expected sd", expected_sd);
    let told = match nearest {
        Some((left, times, what)) => {
            check =
                check.concern(Concern::Flag).extra("possible factor", times).extra("sds off after it", left);
            format!(
                "The mean {} lies {} sds from the expected {}; divided by {} it would lie {} sds from it. Possible cause: \
                 {what}.",
                words::number(period_mean),
                words::number(off),
                words::number(expected_mean),
                words::number(times),
                words::number(left)
            )
        }
        None => format!(
            "The mean {} is {} times the expected {}; no known factor between units explains a jump.",
            words::number(period_mean),
            words::number(ratio),
            words::number(expected_mean)
        ),
    };
    check.meaning(told).if_concerned(
        "Find out in which unit, and as which substance, these readings were reported. Nothing was converted; until it is \
         known no answer of this period should be used.",
    )
}
