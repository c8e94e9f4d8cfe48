//! Do readings that follow each other lie too close together?
//!
//! If each reading resembles the one before, the readings carry less information than their number
//! says, and the level is less sure than printed. If they jump to and fro, something alternates:
//! two instruments, two samplers, or correction after each reading.
//!
//! Statistic: the von Neumann ratio, sum (x_(i+1) - x_i)^2 / sum (x_i - mean)^2.
//! Law: for independent normal readings mean 2 and variance 4(n-2)/(n^2-1); the normal law with
//! these is used. Both tails: below 2 neighbours are alike, above 2 they alternate.
//! Assumes: normal readings, about evenly spaced; readings of equal date are averaged first. With few
//! times the normal law makes the check cautious: at 12 times 0.4 % of sound periods are flagged
//! instead of 1 %, at 50 times 0.8 % (20,000 simulated periods).
//! Source: von Neumann 1941 (Annals of Mathematical Statistics 12, 367).
//!
//! Worked: 1, 2, 3, 4, 5, 6, 7, 8: the sum of squared steps is 7, the sum of squares 42, the ratio
//! 0.1667; the sd is sqrt(4 * 6 / 63) = 0.6172, z = -2.970, p = 0.0030: a flag.

use crate::checks::timed::{self, Timed};
use crate::checks::{Check, REMARK_BELOW, tails, words};

/// The name of this check.
pub const ID: &str = "von Neumann ratio";
/// Where the method was published.
pub const SOURCE: &str = "von Neumann 1941";

const STATISTIC: &str = "von Neumann ratio";
/// Fewest times for which the check is made.
const FEWEST: usize = 6;

/// The ratio of values in order of time. None for fewer than three values or equal ones.
pub fn ratio(values: &[f64]) -> Option<f64> {
    if values.len() < 3 {
        return None;
    }
    let mean = tails::mean(values)?;
    let squares = tails::sum_of_squares(values, mean);
    let steps: f64 = values.windows(2).map(|pair| (pair[1] - pair[0]) * (pair[1] - pair[0])).sum();
    let ratio = steps / squares;
    (squares > 0.0 && ratio.is_finite()).then_some(ratio)
}

/// Checks whether neighbours in time are too alike or alternate.
pub fn check(readings: &[Timed]) -> Check {
    let values = timed::values(&timed::one_for_each_time(readings));
    let n = values.len();
    if n < FEWEST {
        return Check::not_made(ID, STATISTIC, format!("fewer than {FEWEST} different times are too few"));
    }
    let Some(ratio) = ratio(&values) else {
        return Check::not_made(ID, STATISTIC, "all readings are equal");
    };
    let size = n as f64;
    let sd = (4.0 * (size - 2.0) / (size * size - 1.0)).sqrt();
    let z = (ratio - 2.0) / sd;
    let Some(tail) = tails::normal(z) else {
        return Check::not_made(ID, STATISTIC, "the ratio is not a number");
    };
    let p = tail.two_sided();
    let found = match (p < REMARK_BELOW, ratio < 2.0) {
        (true, true) => "Readings that follow each other are more alike than independent readings would be",
        (true, false) => "Readings that follow each other alternate more than independent readings would",
        (false, _) => "Readings that follow each other differ as independent readings would",
    };
    Check::of(ID, STATISTIC, ratio)
        .reference(format!("normal, mean 2, sd {}", words::number(sd)))
        .p(p)
        .extra("times", size)
        .extra("z", z)
        .meaning(format!("{found}: ratio {}, 2 expected ({} times, {}).", words::number(ratio), n, words::p_is(p)))
        .if_concerned(if ratio < 2.0 {
            "The readings carry less information than their number: see the effective number of readings under \
             \"serial correlation\", and look for drift or a season."
        } else {
            "Something alternates: look for two instruments, places or persons taking turns, or for corrections after \
             each reading."
        })
}
