//! Do readings stay on one side of the middle for too long?
//!
//! A run is a stretch of readings all above or all below the median. Few long runs mean drift,
//! season or memory; many short ones mean that something alternates. The check needs no normal
//! shape, so it stands beside the correlation where readings are skew.
//!
//! Statistic: the number of runs about the median; readings equal to it are left out.
//! Law: normal, mean 2ab/(a+b) + 1 and variance 2ab(2ab - a - b) / ((a+b)^2 (a+b-1)), with a
//! readings above and b below. Both tails.
//! Assumes: independent readings; readings of equal date are averaged first. The approximation
//! wants at least 10 readings on each side: with fewer the check is not made.
//! Source: Wald & Wolfowitz 1940 (Annals of Mathematical Statistics 11, 147); NIST/SEMATECH
//! handbook 1.3.5.13.
//!
//! Worked: the 200 deflections of NIST's data set LEW: z = 2.6938, p = 0.0071: a flag.

use crate::checks::timed::{self, Timed};
use crate::checks::{Check, REMARK_BELOW, tails, words};

/// The name of this check.
pub const ID: &str = "runs";
/// Where the method was published.
pub const SOURCE: &str = "Wald & Wolfowitz 1940; NIST/SEMATECH handbook 1.3.5.13";

const STATISTIC: &str = "runs about the median";
/// Fewest readings on each side for which the normal approximation is used.
const FEWEST_A_SIDE: usize = 10;

/// Runs about the median.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Runs {
    /// Readings above the median.
    pub above: usize,
    /// Readings below the median.
    pub below: usize,
    /// Stretches on one side.
    pub runs: usize,
    /// The standardised number of runs.
    pub z: f64,
}

/// Counts the runs of values in order of time. None where no value lies on one of the sides, or
/// one on each.
pub fn count(values: &[f64]) -> Option<Runs> {
    let median = tails::median(&mut values.to_vec())?;
    let sides: Vec<bool> =
        values.iter().filter(|&&value| value != median).map(|&value| value > median).collect();
    let above = sides.iter().filter(|&&side| side).count();
    let below = sides.len() - above;
    if above == 0 || below == 0 || sides.len() < 3 {
        return None;
    }
    let runs = 1 + sides.windows(2).filter(|pair| pair[0] != pair[1]).count();
    let (a, b) = (above as f64, below as f64);
    let expected = 2.0 * a * b / (a + b) + 1.0;
    let variance = 2.0 * a * b * (2.0 * a * b - a - b) / ((a + b) * (a + b) * (a + b - 1.0));
    Some(Runs { above, below, runs, z: (runs as f64 - expected) / variance.sqrt() })
}

/// Checks whether readings stay on one side of their median too long or too briefly.
pub fn check(readings: &[Timed]) -> Check {
    let values = timed::values(&timed::one_for_each_time(readings));
    let Some(found) = count(&values) else {
        return Check::not_made(ID, STATISTIC, "no readings lie on both sides of their median");
    };
    if found.above < FEWEST_A_SIDE || found.below < FEWEST_A_SIDE {
        let why = format!("fewer than {FEWEST_A_SIDE} readings lie on a side of their median");
        return Check::not_made(ID, STATISTIC, why);
    }
    let Some(tail) = tails::normal(found.z) else {
        return Check::not_made(ID, STATISTIC, "the number of runs cannot be standardised");
    };
    let p = tail.two_sided();
    let verdict = match (p < REMARK_BELOW, found.z < 0.0) {
        (true, true) => "they stay on one side too long",
        (true, false) => "they change sides too often",
        (false, _) => "as independent readings would",
    };
    Check::of(ID, STATISTIC, found.runs as f64)
        .reference(format!("normal, {} above and {} below", found.above, found.below))
        .p(p)
        .extra("above", found.above as f64)
        .extra("below", found.below as f64)
        .extra("z", found.z)
        .meaning(format!(
            "The readings form {} about their median: {verdict} ({}).",
            words::count(found.runs, "run"),
            words::p_is(p)
        ))
        .if_concerned(if found.z < 0.0 {
            "The readings are not independent in time: look for drift or a season; intervals are too sure."
        } else {
            "Something alternates: look for two instruments, places or persons taking turns."
        })
}
