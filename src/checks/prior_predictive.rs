//! What readings did the prior expect, and did such readings come?
//!
//! Before any reading is looked at, the prior and the within sd say where single readings and
//! their mean should lie. An expectation that reaches far beyond what can happen shows a prior
//! that was not thought through; readings outside it show a prior that was wrong. This is a
//! description to be read with the figure, not a test: the readings share one level, so they fall
//! outside together.
//!
//! Statistic: the number of readings outside the central 95 % interval of a reading under the
//! prior. None has a law of its own; the mean is tested by "prior conflict", the spread by
//! "within sd".
//! Assumes: nothing beyond the model.
//! Source: Box 1980; item 1E of the reporting guideline of Kruschke 2021 (Nature Human Behaviour
//! 5, 1282).
//!
//! Worked: prior of the level N(40, 2^2), within sd 3: a reading is expected in
//! 40 -+ 1.960 * sqrt(4 + 9) = 32.9 to 47.1. Of 12 readings 4 lie above 47.1: more than half
//! outside would be a flag, more than one in five a remark; 4 of 12 is a remark.

use crate::checks::{Check, Concern, words};

/// The name of this check.
pub const ID: &str = "prior predictive";
/// Where the method was published.
pub const SOURCE: &str = "Box 1980; Kruschke 2021 item 1E; the two levels are common practice, no source";

const STATISTIC: &str = "readings outside the prior's 95 % interval of a reading";

/// Counts the readings outside `interval`, the central 95 % interval of one reading under the
/// prior, in the unit of the readings.
pub fn check(readings: &[f64], interval: (f64, f64)) -> Check {
    let (low, high) = interval;
    if readings.is_empty() {
        return Check::not_made(ID, STATISTIC, "the period has no single readings");
    }
    if low.partial_cmp(&high) != Some(std::cmp::Ordering::Less) {
        return Check::not_made(ID, STATISTIC, "the prior gives no interval for a reading");
    }
    let below = readings.iter().filter(|&&value| value < low).count();
    let above = readings.iter().filter(|&&value| value > high).count();
    let outside = below + above;
    let share = outside as f64 / readings.len() as f64;
    let concern = if share > 0.5 {
        Concern::Flag
    } else if share > 0.2 {
        Concern::Remark
    } else {
        Concern::None
    };
    Check::of(ID, STATISTIC, outside as f64)
        .reference("description, no test")
        .concern(concern)
        .extra("readings", readings.len() as f64)
        .extra("interval from", low)
        .extra("interval to", high)
        .extra("below", below as f64)
        .extra("above", above as f64)
        .meaning(format!(
            "Before the period a reading was expected between {} and {} (95 %). Of the {}, {below} lie below and \
             {above} above.",
            words::number(low),
            words::number(high),
            words::count(readings.len(), "reading"),
        ))
        .if_concerned("The prior did not expect such readings: read it together with the check \"prior conflict\".")
}
