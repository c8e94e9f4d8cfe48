//! Would the fitted model make a largest (or smallest) reading like this one?
//!
//! Limits are broken by extremes. This check asks whether the largest and the smallest reading of
//! the period are what the fitted model makes of as many readings. One too far out points to a heavy
//! tail or a wild reading; one too near to clipping, rounding or a reporting limit.
//!
//! Statistic: the largest reading, and the smallest.
//! Law: P(largest of n <= x) = E[Phi((x - level)/sd)^n], level and sd from their posterior, taken
//! over the pieces of the posterior by quadrature, not sampled. Both tails of each; p is
//! min(1, 2 min of the two p) of largest and smallest.
//! Assumes: normal, independent readings. Readings are used twice, so p leans towards 1: a flag is
//! strong, silence is weak.
//! Source: Gelman, Meng & Stern 1996 (Statistica Sinica 6, 733).
//!
//! Worked: level known 0, sd known 1, 10 readings with largest 3.5 and smallest -1.5: P(largest >=
//! 3.5) = 1 - Phi(3.5)^10 = 0.00232, two-sided 0.0046; doubled for the two ends p = 0.0093: a flag.

use crate::checks::tails::{self, Tails};
use crate::checks::{Check, FLAG_BELOW, words};
use crate::math::fm;

/// The name of this check.
pub const ID: &str = "posterior predictive extremes";
/// Where the method was published.
pub const SOURCE: &str = "Gelman, Meng & Stern 1996";

const STATISTIC: &str = "extreme reading";
/// Half width, in sds of the level, of the range of the quadrature: what lies beyond has chance 1e-15.
const REACH: f64 = 8.0;
/// Widest step, in sds of the level, and in within sds: the power of Phi turns over within a third of one or so.
const STEP: f64 = 0.5;
const STEP_OF_READING: f64 = 0.12;
/// Lighter pieces, against all, are left out: no printed digit of a p-value shows them.
const UNSEEN: f64 = 1e-15;
/// Most steps a piece is given; the posterior of the level is never so wide against the within sd.
const MOST_STEPS: usize = 20_000;

/// A piece of the posterior: weight (need not add to one), the level N(level_mean, level_sd^2) and
/// the sd of readings about it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Piece {
    /// Share, not negative.
    pub weight: f64,
    /// Mean of the level.
    pub level_mean: f64,
    /// Standard deviation of the level, 0 where it is known.
    pub level_sd: f64,
    /// Within sd, above 0.
    pub reading_sd: f64,
}

/// P(largest of n new readings <= x) and P(>= x).
pub fn largest(pieces: &[Piece], n: usize, x: f64) -> Option<Tails> {
    let (mut weight, mut lower, mut upper) = (0.0, 0.0, 0.0);
    let whole: f64 = pieces.iter().map(|piece| piece.weight).sum();
    for piece in pieces.iter().filter(|piece| piece.weight != 0.0) {
        if !(piece.weight > 0.0 && piece.reading_sd > 0.0 && piece.level_sd >= 0.0) {
            return None;
        }
        if piece.weight < UNSEEN * whole {
            continue;
        }
        let tail = largest_of_piece(piece, n as f64, x)?;
        weight += piece.weight;
        lower += piece.weight * tail.lower;
        upper += piece.weight * tail.upper;
    }
    (weight > 0.0 && weight.is_finite()).then(|| Tails { lower: lower / weight, upper: upper / weight })
}

/// P(smallest of n new readings <= x) and P(>= x): the largest of the mirrored readings.
pub fn smallest(pieces: &[Piece], n: usize, x: f64) -> Option<Tails> {
    let mirrored: Vec<Piece> =
        pieces.iter().map(|piece| Piece { level_mean: -piece.level_mean, ..*piece }).collect();
    largest(&mirrored, n, -x).map(|tail| Tails { lower: tail.upper, upper: tail.lower })
}

/// The trapezoidal rule over the level, which converges faster than any power for this integrand.
fn largest_of_piece(piece: &Piece, n: f64, x: f64) -> Option<Tails> {
    let centre = (x - piece.level_mean) / piece.reading_sd;
    let slope = piece.level_sd / piece.reading_sd;
    if !(centre.is_finite() && slope.is_finite()) {
        return None;
    }
    if slope == 0.0 {
        return power(centre, n);
    }
    let step = STEP.min(STEP_OF_READING / slope);
    let half = fm::ceil(REACH / step) as usize;
    if half > MOST_STEPS {
        return None;
    }
    let (mut weight, mut lower, mut upper) = (0.0, 0.0, 0.0);
    for i in 0..=2 * half {
        let z = (i as f64 - half as f64) * step;
        let density = fm::exp(-0.5 * z * z);
        let tail = power(centre - slope * z, n)?;
        weight += density;
        lower += density * tail.lower;
        upper += density * tail.upper;
    }
    Some(Tails { lower: lower / weight, upper: upper / weight })
}

/// Phi(z)^n and 1 - Phi(z)^n, each without loss.
fn power(z: f64, n: f64) -> Option<Tails> {
    let ln = n * tails::ln_normal_lower(z)?;
    let upper = -fm::exp_m1(ln);
    Some(Tails { lower: if upper < 0.5 { 1.0 - upper } else { fm::exp(ln) }, upper })
}

/// Checks the largest and the smallest of `n` readings against the posterior.
pub fn check(n: usize, smallest_seen: f64, largest_seen: f64, pieces: &[Piece]) -> Check {
    if n < 2 {
        return Check::not_made(ID, STATISTIC, "fewer than two readings have no extremes");
    }
    let (Some(high), Some(low)) = (largest(pieces, n, largest_seen), smallest(pieces, n, smallest_seen))
    else {
        return Check::not_made(ID, STATISTIC, "there is no posterior of level and within sd");
    };
    let (p_high, p_low) = (high.two_sided(), low.two_sided());
    let p = (2.0 * p_high.min(p_low)).min(1.0);
    let (statistic, name, tail) = if p_high <= p_low {
        (largest_seen, "largest", high)
    } else {
        // For the smallest reading, "far out" is the lower tail.
        (smallest_seen, "smallest", Tails { lower: low.upper, upper: low.lower })
    };
    let far = tail.upper < tail.lower;
    let verdict = match (p < crate::checks::REMARK_BELOW, far) {
        (true, true) => "further out than",
        (true, false) => "nearer to the middle than",
        (false, _) => "about what",
    };
    let strength = if p < FLAG_BELOW { "strong" } else { "some" };
    Check::of(ID, STATISTIC, statistic)
        .reference(format!("posterior predictive, extremes of {n}"))
        .p(p)
        .extra("readings", n as f64)
        .extra("largest", largest_seen)
        .extra("smallest", smallest_seen)
        .extra("chance of a largest this high or higher", high.upper)
        .extra("chance of a smallest this low or lower", low.lower)
        .meaning(format!(
            "Largest reading {}, smallest {}; the {name} one is {verdict} the fitted model makes of {} ({}).",
            words::number(largest_seen),
            words::number(smallest_seen),
            words::count(n, "reading"),
            words::p_is(p)
        ))
        .if_concerned(if far {
            format!(
                "There is {strength} evidence of a heavier tail than the normal one or of a wild reading: chances of \
                 passing a limit may be too small. Look the reading up."
            )
        } else {
            format!(
                "There is {strength} evidence that readings stop short: look for a reporting limit, clipping, or readings \
                 left out."
            )
        })
}
