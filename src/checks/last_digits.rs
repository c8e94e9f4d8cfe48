//! Do the last digits show that people rounded to favourite figures?
//!
//! Where readings are spread over many steps, every last digit should come equally often. Too many
//! noughts and fives mean that readings were taken by eye in halves; other patterns that figures were
//! copied or made up.
//!
//! Statistic: chi-square of the counts of the ten last digits against equal counts, for 50 readings
//! and more; for 10 to 49 the number of noughts and fives.
//! Law: chi-square with 9 degrees of freedom, upper tail; binomial(n, 1/5), upper tail.
//! Assumes: a within sd of at least 6 last places: then the ten digits have equal chances to better
//! than 0.2 % of each (the ripple is 2 exp(-2 pi^2 (sd/10)^2), sd in last places). Else not made.
//! Source: Pearson 1900 for chi-square; use on last digits common practice, no source.
//!
//! Worked: 30 readings of which 14 end in 0 or 5, 6 expected: P(14 or more) = 0.0009: a flag.

use crate::checks::{Check, REMARK_BELOW, printed, tails, words};

/// The name of this check.
pub const ID: &str = "last digits";
/// Where the method was published.
pub const SOURCE: &str = "Pearson 1900; use on last digits common practice, no source";

const CHI_SQUARE: &str = "chi-square of last digits";
const NOUGHTS_AND_FIVES: &str = "noughts and fives";
const FEWEST: usize = 10;
const FEWEST_FOR_CHI_SQUARE: usize = 50;
/// Least within sd, in units of the last place.
const LEAST_SD: f64 = 6.0;

/// How often each last digit, 0 to 9, comes at the finest decimal place printed.
pub fn counts(texts: &[&str]) -> Option<[usize; 10]> {
    let (whole, _) = printed::in_last_places(texts)?;
    let mut counts = [0; 10];
    for value in whole {
        if let Ok(digit) = usize::try_from(value.unsigned_abs() % 10) {
            counts[digit] += 1;
        }
    }
    Some(counts)
}

/// Checks the last digits of readings as printed. `within_sd` is in the unit of the readings.
pub fn check(texts: &[&str], within_sd: f64) -> Check {
    let Some((whole, decimals)) = printed::in_last_places(texts) else {
        return Check::not_made(ID, CHI_SQUARE, "no single readings are at hand as plain decimal numbers");
    };
    let n = whole.len();
    if n < FEWEST {
        return Check::not_made(ID, CHI_SQUARE, format!("fewer than {FEWEST} readings are too few"));
    }
    let place: Option<f64> = format!("1e{}", -i64::from(decimals)).parse().ok();
    if !place.is_some_and(|place| within_sd >= LEAST_SD * place) {
        let why = format!(
            "the within sd is not above {LEAST_SD} units of the last place, so digits need not be equally frequent"
        );
        return Check::not_made(ID, CHI_SQUARE, why);
    }
    let Some(counts) = counts(texts) else {
        return Check::not_made(ID, CHI_SQUARE, "no single readings are at hand as plain decimal numbers");
    };
    let favourites = counts[0] + counts[5];
    let size = n as f64;
    let made = if n >= FEWEST_FOR_CHI_SQUARE {
        let expected = size / 10.0;
        let chi = counts.iter().map(|&seen| (seen as f64 - expected) * (seen as f64 - expected)).sum::<f64>()
            / expected;
        tails::chi_square(chi, 9.0)
            .map(|tail| Check::of(ID, CHI_SQUARE, chi).reference("chi-square, 9 df").p(tail.upper))
    } else {
        let upper = binomial_upper(n, favourites, 0.2);
        Some(
            Check::of(ID, NOUGHTS_AND_FIVES, favourites as f64)
                .reference(format!("binomial, n = {n}, 1/5"))
                .p(upper),
        )
    };
    let Some(check) = made else {
        return Check::not_made(ID, CHI_SQUARE, "the statistic is not a number");
    };
    let p = check.p.unwrap_or(1.0);
    let shown: Vec<String> = counts.iter().map(usize::to_string).collect();
    let verdict = if p < REMARK_BELOW { "not equally frequent" } else { "about equally frequent" };
    check
        .extra("readings", size)
        .extra("noughts and fives", favourites as f64)
        .meaning(format!(
            "Last digits 0 to 9 come {} times: {verdict}; {} end in 0 or 5, {} expected ({}).",
            shown.join(", "),
            favourites,
            words::number(size / 5.0),
            words::p_is(p)
        ))
        .if_concerned(
            "Readings seem rounded to favourite figures, copied or made up: ask how they were read and noted; a coarser \
             `step` may be the true one.",
        )
}

/// P(X >= k) for a binomial of small n, summed upwards from k.
fn binomial_upper(n: usize, k: usize, chance: f64) -> f64 {
    let other = 1.0 - chance;
    let mut term = 1.0;
    for _ in 0..n {
        term *= other;
    }
    let mut sum = if k == 0 { term } else { 0.0 };
    for i in 1..=n {
        term *= (n - i + 1) as f64 / i as f64 * (chance / other);
        if i >= k {
            sum += term;
        }
    }
    sum.min(1.0)
}
