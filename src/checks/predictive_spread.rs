//! Would the fitted model make readings spread like these?
//!
//! After the update the within sd has a distribution. If the model is right, new periods of as many
//! readings should show a spread like the one seen. Where the within sd is known this is the check
//! "within sd" again; where it was learned from these readings alone the check cannot fail, and it
//! says so; it tells most where earlier readings or a statement hold the sd.
//!
//! Statistic: SS, the sum of squares about the mean.
//! Law: SS_new = sd^2 times chi-square with n - 1 degrees of freedom, sd from its posterior; p is
//! the posterior mean of the tail, a sum over the nodes of sd, not sampled. Both tails.
//! Assumes: normal, independent readings. Readings are used twice, so p leans towards 1/2: a
//! flag is strong, silence is weak.
//! Source: Rubin 1984; Gelman, Meng & Stern 1996 (Statistica Sinica 6, 733).
//!
//! Worked: 8 readings with sd 1.9; the sd after the update is 1.0 or 1.2 with chance 1/2 each:
//! SS = 25.27, tails P(chi-square_7 > 25.27) = 0.00068 and P(> 17.55) = 0.01418, mean 0.0074,
//! p = 0.015: a remark.

use crate::checks::tails::{self, Tails};
use crate::checks::{Check, words};

/// The name of this check.
pub const ID: &str = "posterior predictive spread";
/// Where the method was published.
pub const SOURCE: &str = "Rubin 1984; Gelman, Meng & Stern 1996";

const STATISTIC: &str = "sum of squares SS";

/// A node of the posterior of the within sd: its weight (need not add to one) and the sd, above 0.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SdNode {
    /// Share, not negative.
    pub weight: f64,
    /// Within sd, in the unit of the readings.
    pub sd: f64,
}

/// Checks the spread of `n` readings with sum of squares `sum_of_squares` against the posterior of
/// the within sd. `from_these_readings_alone` says that nothing else informed the sd.
pub fn check(n: usize, sum_of_squares: f64, nodes: &[SdNode], from_these_readings_alone: bool) -> Check {
    if n < 2 {
        return Check::not_made(ID, STATISTIC, "the spread of fewer than two readings cannot be seen");
    }
    if from_these_readings_alone {
        let why = "the within sd was learned from these readings alone, so they cannot disagree with it";
        return Check::not_made(ID, STATISTIC, why);
    }
    let Some(tail) = mixed(n, sum_of_squares, nodes) else {
        return Check::not_made(ID, STATISTIC, "there is no distribution of the within sd");
    };
    let p = tail.two_sided();
    let seen = (sum_of_squares / (n - 1) as f64).sqrt();
    let side = if tail.upper < tail.lower { "wider" } else { "narrower" };
    Check::of(ID, STATISTIC, sum_of_squares)
        .reference(format!("posterior mixture of chi-square, {} df", n - 1))
        .p(p)
        .extra("readings", n as f64)
        .extra("sd of the period", seen)
        .extra("chance of a spread this large or larger", tail.upper)
        .meaning(format!(
            "Under the fitted model {} spread like these (sd {}) or {side} have chance {} ({}).",
            words::count(n, "reading"),
            words::number(seen),
            words::chance(tail.upper.min(tail.lower)),
            words::p_is(p)
        ))
        .if_concerned(
            "The fitted spread does not suit these readings: chances of single readings and shares are doubtful; see the \
             answers with the sd from this period's readings alone.",
        )
}

fn mixed(n: usize, sum_of_squares: f64, nodes: &[SdNode]) -> Option<Tails> {
    let df = (n - 1) as f64;
    let (mut weight, mut lower, mut upper) = (0.0, 0.0, 0.0);
    for node in nodes.iter().filter(|node| node.weight != 0.0) {
        if !(node.weight > 0.0 && node.sd > 0.0) {
            return None;
        }
        let tail = tails::chi_square(sum_of_squares / (node.sd * node.sd), df)?;
        weight += node.weight;
        lower += node.weight * tail.lower;
        upper += node.weight * tail.upper;
    }
    (weight > 0.0 && weight.is_finite()).then(|| Tails { lower: lower / weight, upper: upper / weight })
}
