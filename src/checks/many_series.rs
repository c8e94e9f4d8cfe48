//! Many checks at once: how many flags would come by chance alone?
//!
//! One check in twenty makes a remark, and one in a hundred a flag, where nothing is wrong. Over many
//! series some flags are therefore expected. This says how many, and which stand out even so.
//!
//! Statistic: the number of flags. Law: with m checks of sound series m * 0.01 flags are expected, and
//! the chance of at least one is 1 - 0.99^m (checks of different series independent).
//! Which stand out: by Benjamini and Hochberg, per kind of check. Sort p_(1) <= ... <= p_(m); the
//! adjusted p of the i-th is the least of m p_(k) / k over k >= i, at most 1. Taking those whose
//! adjusted p is at most q, at most the share q of those taken is expected to be wrong.
//! Assumes: checks independent, or positively dependent.
//! Source: Benjamini & Hochberg 1995 (J. R. Stat. Soc. B 57, 289).
//!
//! Worked: 50 sound series, remarks at 0.05: 2.5 remarks expected, chance of at least one 0.923. The
//! 15 p-values of Benjamini & Hochberg's example: at q = 0.05 the 4 smallest stand out.

use crate::checks::{Check, Concern, FLAG_BELOW, REMARK_BELOW, words};
use crate::math::fm;

/// The name of this check.
pub const ID: &str = "many series";
/// Where the method was published.
pub const SOURCE: &str = "Benjamini & Hochberg 1995";

/// The share of wrong ones among those that stand out is at most this.
pub const STANDS_OUT: f64 = 0.05;

const STATISTIC: &str = "flags";

/// Adjusted p-values, in the order of the input: the least q at which each stands out.
pub fn adjusted(p_values: &[f64]) -> Vec<f64> {
    let m = p_values.len() as f64;
    let mut order: Vec<usize> = (0..p_values.len()).collect();
    order.sort_by(|&a, &b| p_values[a].total_cmp(&p_values[b]).then(a.cmp(&b)));
    let mut adjusted = vec![1.0; p_values.len()];
    let mut least = 1.0_f64;
    for (rank, &place) in order.iter().enumerate().rev() {
        least = least.min(m * p_values[place] / (rank + 1) as f64);
        adjusted[place] = least;
    }
    adjusted
}

/// Findings expected by chance when `m` sound series are checked at `level`.
pub fn expected_by_chance(m: usize, level: f64) -> f64 {
    m as f64 * level
}

/// The chance of at least one finding when `m` sound series are checked at `level`, independently.
pub fn chance_of_any(m: usize, level: f64) -> f64 {
    -fm::exp_m1(m as f64 * fm::ln_1p(-level))
}

/// How many verdicts of those given are expected to be wrong: the sum of their chances of being
/// wrong.
pub fn expected_wrong(chances_wrong: &[f64]) -> f64 {
    let mut sorted = chances_wrong.to_vec();
    sorted.sort_by(f64::total_cmp);
    sorted.iter().sum()
}

/// Looks over one kind of check made of many series.
pub fn check(kind: &str, p_values: &[f64]) -> Check {
    let m = p_values.len();
    if m < 2 {
        return Check::not_made(ID, STATISTIC, "the check was made of fewer than two series");
    }
    let flags = p_values.iter().filter(|&&p| p < FLAG_BELOW).count();
    let findings = p_values.iter().filter(|&&p| p < REMARK_BELOW).count();
    let adjusted = adjusted(p_values);
    let standing = adjusted.iter().filter(|&&p| p <= STANDS_OUT).count();
    let strong = adjusted.iter().filter(|&&p| p <= FLAG_BELOW).count();
    let expected_flags = expected_by_chance(m, FLAG_BELOW);
    let expected_findings = expected_by_chance(m, REMARK_BELOW);
    let concern = if strong > 0 {
        Concern::Flag
    } else if standing > 0 {
        Concern::Remark
    } else {
        Concern::None
    };
    Check::of(ID, STATISTIC, flags as f64)
        .reference("Benjamini & Hochberg 1995, q = 0.05")
        .concern(concern)
        .extra("series", m as f64)
        .extra("expected flags", expected_flags)
        .extra("findings below 0.05", findings as f64)
        .extra("expected findings below 0.05", expected_findings)
        .extra("chance of any flag", chance_of_any(m, FLAG_BELOW))
        .extra("stand out at q 0.05", standing as f64)
        .meaning(format!(
            "The check \"{kind}\" was made of {m} series: {} below 0.01 where chance alone makes {}, {findings} below 0.05 \
             where chance alone makes {}. Counting all of them, {} out at q = 0.05.",
            words::count(flags, "flag"),
            words::number(expected_flags),
            words::number(expected_findings),
            if standing == 1 { "1 stands".to_owned() } else { format!("{standing} stand") }
        ))
        .if_concerned("Look first at the series that stand out; of the other flags some are chance.")
}
