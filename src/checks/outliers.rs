//! Does a reading lie too far from the others?
//!
//! One wild reading pulls the mean and widens the spread. This check names readings too far out to
//! be expected among normal readings. It never removes one: exclusion needs a cause, written in the
//! spec with person and date, and the answers are then shown with and without.
//!
//! Statistic: the generalised extreme Studentised deviate. R_i is the largest |x - mean| / sd once
//! the i - 1 most distant readings are set aside, i up to r = n/10, at least 1 and at most 10.
//! Law: with t^2 = R_i^2 (n-i-1)(n-i+1) / ((n-i)^2 - R_i^2 (n-i+1)), p_i = min(1, 2(n-i+1) P(T > t)),
//! T Student with n-i-1 degrees of freedom. The number of outliers is the largest i whose p_i is
//! below the level; so wild readings cannot hide each other.
//! Assumes: the other readings are normal and independent. Made from 10 readings on; the
//! approximation is close from 25 on.
//! Source: Rosner 1983 (Technometrics 25, 165); with r = 1 it is the test of Grubbs 1969.
//!
//! Worked: Rosner's 54 values (NIST/SEMATECH handbook 1.3.5.17.3): R_1 = 3.118, R_2 = 2.942,
//! R_3 = 3.179; at the level 0.05 neither the first nor the second is significant alone, the third
//! is: the three largest values, 6.01, 5.42 and 5.34, are named.

use crate::checks::{Check, FLAG_BELOW, REMARK_BELOW, tails, words};

/// The name of this check.
pub const ID: &str = "outliers";
/// Where the method was published.
pub const SOURCE: &str = "Rosner 1983";

const STATISTIC: &str = "largest Studentised deviate R";
/// Fewest readings for which the check is made.
pub const FEWEST: usize = 10;

/// One step of the procedure.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Step {
    /// The place of the reading in the input.
    pub place: usize,
    /// The reading set aside in this step.
    pub value: f64,
    /// Its deviate R_i from the readings not yet set aside.
    pub deviate: f64,
    /// Its p_i.
    pub p: f64,
}

/// What the check found: the finding itself and the readings it names.
#[derive(Clone, Debug, PartialEq)]
pub struct Outliers {
    /// The finding.
    pub check: Check,
    /// The readings named at the level 0.05, most distant first; their places are those of the input.
    pub named: Vec<Step>,
}

/// The first `most` steps of the procedure. Fewer are given where the rest of the readings are
/// equal or fewer than three are left.
pub fn steps(readings: &[f64], most: usize) -> Vec<Step> {
    let n = readings.len();
    let mut left: Vec<usize> = (0..n).collect();
    left.sort_by(|&a, &b| readings[a].total_cmp(&readings[b]).then(a.cmp(&b)));
    let mut steps = Vec::with_capacity(most.min(n));
    for i in 1..=most {
        if left.len() < 3 {
            break;
        }
        let values: Vec<f64> = left.iter().map(|&place| readings[place]).collect();
        let Some(mean) = tails::mean(&values) else { break };
        let sd = (tails::sum_of_squares(&values, mean) / (values.len() - 1) as f64).sqrt();
        if !(sd > 0.0 && sd.is_finite()) {
            break;
        }
        // The most distant is one of the two ends of the sorted readings.
        let (low, high) = (mean - values[0], values[values.len() - 1] - mean);
        let at = if high >= low { left.len() - 1 } else { 0 };
        let deviate = high.max(low) / sd;
        let place = left.remove(at);
        steps.push(Step { place, value: readings[place], deviate, p: p_of(n, i, deviate) });
    }
    steps
}

fn p_of(n: usize, i: usize, deviate: f64) -> f64 {
    let (left, df) = ((n - i) as f64, (n - i - 1) as f64);
    let squared = deviate * deviate;
    let room = left * left - squared * (left + 1.0);
    if room <= 0.0 {
        return 0.0;
    }
    let t = (squared * df * (left + 1.0) / room).sqrt();
    match tails::student(t, df) {
        Some(tail) => (2.0 * (left + 1.0) * tail.upper).min(1.0),
        None => 1.0,
    }
}

/// How many outliers the steps show at a level: the largest i whose p_i is below it.
pub fn number(steps: &[Step], level: f64) -> usize {
    steps.iter().rposition(|step| step.p < level).map_or(0, |last| last + 1)
}

/// Looks for outliers among the readings, in any order, on the scale on which they are normal.
pub fn check(readings: &[f64]) -> Outliers {
    let n = readings.len();
    if n < FEWEST {
        let why = format!("fewer than {FEWEST} readings show no outlier reliably");
        return Outliers { check: Check::not_made(ID, STATISTIC, why), named: Vec::new() };
    }
    let most = (n / 10).clamp(1, 10);
    let steps = steps(readings, most);
    let Some(first) = steps.first() else {
        return Outliers {
            check: Check::not_made(ID, STATISTIC, "the readings are equal"),
            named: Vec::new(),
        };
    };
    let flagged = number(&steps, FLAG_BELOW);
    let named: Vec<Step> = steps.iter().copied().take(number(&steps, REMARK_BELOW)).collect();
    let p = steps.iter().map(|step| step.p).fold(1.0, f64::min);
    let told = if named.is_empty() {
        format!(
            "The most distant of the {}, {}, lies {} sd from the mean: no reading is too far out ({}).",
            words::count(n, "reading"),
            words::number(first.value),
            words::number(first.deviate),
            words::p_is(p),
        )
    } else {
        let values: Vec<String> = named.iter().map(|step| words::number(step.value)).collect();
        format!(
            "Of the {}, {} too far out for normal readings: {} ({}).",
            words::count(n, "reading"),
            if named.len() == 1 { "1 lies".to_owned() } else { format!("{} lie", named.len()) },
            values.join(", "),
            words::p_is(p),
        )
    };
    let decisive = steps.iter().find(|step| step.p == p).unwrap_or(first);
    let check = Check::of(ID, STATISTIC, decisive.deviate)
        .reference(format!("Rosner 1983, n = {n}, up to {most}"))
        .p(p)
        .extra("readings", n as f64)
        .extra("looked for at most", most as f64)
        .extra("named at 0.01", flagged as f64)
        .extra("named at 0.05", named.len() as f64)
        .meaning(told)
        .if_concerned(
            "Look up these readings: entry, unit, sampling, instrument. None was removed. Exclude one only for a cause, \
             by an exclusion in the spec; the answers are then given with and without it.",
        );
    Outliers { check, named }
}
