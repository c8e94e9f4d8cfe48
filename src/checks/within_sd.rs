//! Is the known within sd still right?
//!
//! The answers take the spread of single readings within a period, sd, as known. This check asks
//! whether the readings of the period are spread as that sd says. Too much spread means that the
//! sd is too small, or that something unsteady happened; too little is suspicious too: readings
//! copied, smoothed, clipped, or rounded to equal values.
//!
//! Statistic: SS / sd^2, SS the sum of squares of the readings about their mean.
//! Law: chi-square with n - 1 degrees of freedom. Both tails count.
//! Assumes: normal, independent readings about one level; sd stated without looking at them.
//! Beside it: the band within which the period's own sd lies in 95 % and in 99 % of periods, as a
//! multiple of the known sd, and the smallest rise (and fall) of the true sd, as a ratio, that the
//! check would call at least a remark in 80 % of periods. With few readings that ratio is large: a
//! quiet check is then weak evidence.
//! Source: the chi-square test of a variance; used as the check of an adopted sd in EN 206.
//!
//! Worked: n = 15. The central 95 % band of the period's sd is 0.634 to 1.366 times the known sd,
//! the band 0.63 to 1.37 that EN 206 prints. A known sd of 5.0 and a period's sd of 7.0 give
//! 14 * 49 / 25 = 27.44 on 14 df, p = 0.034: a remark.

use crate::checks::tails::{self, Tails};
use crate::checks::{Check, words};

/// The name of this check.
pub const ID: &str = "within sd";
/// Where the method was published.
pub const SOURCE: &str = "chi-square test of a variance; EN 206 (check of an adopted sd)";

const STATISTIC: &str = "SS / sd^2";

/// The band, as multiples of the known sd, beyond each end of which the sd of `n` normal readings
/// lies with probability `each_tail`. None for fewer than two readings or a tail outside (0, 1/2).
pub fn band(n: usize, each_tail: f64) -> Option<(f64, f64)> {
    if n < 2 || !(each_tail > 0.0 && each_tail < 0.5) {
        return None;
    }
    let df = (n - 1) as f64;
    let low = tails::chi_square_quantile(each_tail, df)?;
    let high = tails::chi_square_upper_quantile(each_tail, df)?;
    Some(((low / df).sqrt(), (high / df).sqrt()))
}

/// The ratios (fall, rise) of the true sd to the known one at which the check makes at least a
/// remark in 80 % of periods of `n` readings.
pub fn detectable(n: usize) -> Option<(f64, f64)> {
    if n < 2 {
        return None;
    }
    let df = (n - 1) as f64;
    let low = tails::chi_square_quantile(0.025, df)?;
    let high = tails::chi_square_upper_quantile(0.025, df)?;
    let falls = tails::chi_square_quantile(0.8, df)?;
    let rises = tails::chi_square_quantile(0.2, df)?;
    Some(((low / falls).sqrt(), (high / rises).sqrt()))
}

/// Checks the sum of squares of `n` readings against a known sd.
///
/// `sum_of_squares` is about the mean, in the unit of the readings squared (or of their logarithms
/// on the log scale); `known_sd` in the same unit. Not made for n < 2 or an sd that is not above 0.
pub fn check(n: usize, sum_of_squares: f64, known_sd: f64) -> Check {
    if n < 2 {
        return Check::not_made(ID, STATISTIC, "the spread of fewer than two readings cannot be seen");
    }
    if !(known_sd > 0.0 && known_sd.is_finite()) {
        return Check::not_made(ID, STATISTIC, "no within sd above 0 is taken as known");
    }
    let df = (n - 1) as f64;
    let statistic = sum_of_squares / (known_sd * known_sd);
    let Some(tail) = tails::chi_square(statistic, df) else {
        return Check::not_made(ID, STATISTIC, "the sum of squares is not a number");
    };
    let seen_sd = (sum_of_squares / df).sqrt();
    let ratio = seen_sd / known_sd;
    let p = tail.two_sided();
    let mut check = Check::of(ID, STATISTIC, statistic)
        .reference(format!("chi-square, {} df", n - 1))
        .p(p)
        .extra("readings", n as f64)
        .extra("known sd", known_sd)
        .extra("sd of the period", seen_sd)
        .extra("ratio", ratio);
    let mut told = format!(
        "The {} have sd {}, {} times the known {} ({})",
        words::count(n, "reading"),
        words::number(seen_sd),
        words::number(ratio),
        words::number(known_sd),
        words::p_is(p),
    );
    if let Some((low, high)) = band(n, 0.025) {
        check = check.extra("band 95 % from", low).extra("band 95 % to", high);
        told.push_str(&format!(
            "; 95 % of periods lie between {} and {} times it",
            words::number(low),
            words::number(high)
        ));
    }
    if let Some((low, high)) = band(n, 0.005) {
        check = check.extra("band 99 % from", low).extra("band 99 % to", high);
    }
    told.push('.');
    if let Some((fall, rise)) = detectable(n) {
        check = check.extra("detectable fall", fall).extra("detectable rise", rise);
        told.push_str(&format!(
            " A true sd {} times the known one would be noticed in 80 % of periods; a smaller rise often not.",
            words::number(rise)
        ));
    }
    check.meaning(told).if_concerned(consequence(tail))
}

fn consequence(tail: Tails) -> &'static str {
    if tail.upper < tail.lower {
        "The readings are spread more than the known sd says: intervals and chances that rest on it are too \
         sure. Look for an unsteady cause; see the answers with the larger within sd."
    } else {
        "The readings are spread less than the known sd says: look for copied, smoothed, clipped or coarsely \
         rounded readings before the smaller spread is taken as good news."
    }
}
