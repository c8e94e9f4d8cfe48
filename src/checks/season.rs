//! Are the seasons covered as they were in history?
//!
//! Where a quantity has a season, a period read mostly in summer cannot be compared with one read
//! mostly in winter: the difference of their levels is partly the difference of their calendars.
//!
//! Statistic: chi-square of the two-row table of readings by quarter of the year, this period against
//! history.
//! Law: chi-square with (quarters with readings - 1) degrees of freedom, upper tail. Made only where
//! every expected count is at least 1 and four in five are at least 5 (Cochran's rule); else not made.
//! Assumes: dated readings, taken independently of the level.
//! Source: Pearson 1900; Cochran 1954 for the rule on expected counts.
//!
//! Worked: this period 12, 3, 2, 3 in the four quarters, history 50, 50, 50, 50: expected in the period
//! 5.64, 4.82, 4.73 and 4.82: five of the eight expected counts are at least 5, fewer than four in
//! five, so the check is not made. With 24, 6, 4, 6: expected 12.33, 9.33, 9.00 and 9.33, chi-square =
//! 19.43 on 3 df, p = 0.00022: a flag.

use crate::checks::{Check, REMARK_BELOW, tails, words};

/// The name of this check.
pub const ID: &str = "season";
/// Where the method was published.
pub const SOURCE: &str = "Pearson 1900; Cochran 1954";

const STATISTIC: &str = "chi-square of quarters";

/// Checks the readings of the period against those of history by quarter of the year (January to
/// March first).
pub fn check(period: [usize; 4], history: [usize; 4]) -> Check {
    let (ours, theirs): (usize, usize) = (period.iter().sum(), history.iter().sum());
    if ours == 0 || theirs == 0 {
        return Check::not_made(ID, STATISTIC, "the period or its history has no dated readings");
    }
    let all = (ours + theirs) as f64;
    let (mut statistic, mut quarters, mut cells, mut large, mut least) =
        (0.0, 0_usize, 0_usize, 0_usize, f64::INFINITY);
    for (here, there) in period.into_iter().zip(history) {
        if here + there == 0 {
            continue;
        }
        quarters += 1;
        for (seen, total) in [(here, ours), (there, theirs)] {
            let expected = (here + there) as f64 * total as f64 / all;
            statistic += (seen as f64 - expected) * (seen as f64 - expected) / expected;
            cells += 1;
            large += usize::from(expected >= 5.0);
            least = least.min(expected);
        }
    }
    if quarters < 2 {
        return Check::not_made(ID, STATISTIC, "all readings fall in one quarter of the year");
    }
    if least < 1.0 || large * 5 < cells * 4 {
        return Check::not_made(ID, STATISTIC, "too few readings a quarter for the chi-square law");
    }
    let df = (quarters - 1) as f64;
    let Some(tail) = tails::chi_square(statistic, df) else {
        return Check::not_made(ID, STATISTIC, "the statistic is not a number");
    };
    let p = tail.upper;
    let verdict = if p < REMARK_BELOW { "otherwise than in history" } else { "much as in history" };
    Check::of(ID, STATISTIC, statistic)
        .reference(format!("chi-square, {} df", quarters - 1))
        .p(p)
        .extra("readings", ours as f64)
        .extra("readings of history", theirs as f64)
        .meaning(format!(
            "By quarter the period has {} readings, history {}: the seasons are covered {verdict} ({}).",
            period.map(|count| count.to_string()).join(", "),
            history.map(|count| count.to_string()).join(", "),
            words::p_is(p)
        ))
        .if_concerned(
            "If the quantity has a season, part of any difference from history is the calendar's: compare like months with \
             like.",
        )
}
