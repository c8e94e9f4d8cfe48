//! Do the readings rise or fall in the course of the period?
//!
//! One level stands for the whole period. If the readings drift, that level is an average over a
//! moving thing, their spread is partly drift, and the next reading is likelier to lie where the
//! drift leads. The same check is made of the means of the periods, over the years.
//!
//! Statistic: S of Mann and Kendall, the pairs that rise in time less the pairs that fall.
//! Law: for 10 readings or fewer without ties, the exact law of S over all orders; else normal with
//! variance [n(n-1)(2n+5) - sum t(t-1)(2t+5)]/18 over groups of t equal values, and S moved by 1
//! towards 0. Two-sided.
//! Assumes: independent readings; no distribution. Readings of equal date are averaged first. A
//! season looks like a trend where the dates cover it unevenly, and serial correlation makes small
//! p too small. S goes in steps of 2, which makes the check cautious with few times: at 12 times
//! 0.5 % of sound periods are flagged instead of 1 % (20,000 simulated periods).
//! Beside it: Kendall's tau = S / (n(n-1)/2), and the median of the slopes between all pairs of
//! readings (Theil 1950, Sen 1968), for up to 1000 times.
//! Source: Mann 1945 (Econometrica 13, 245); Kendall 1975, Rank Correlation Methods.
//!
//! Worked: 10.1, 10.4, 10.3, 10.9, 11.2, 11.0 in time order: of 15 pairs 13 rise and 2 fall, S = 11;
//! of the 720 orders 1 + 5 + 14 = 20 have 2 falling pairs or fewer, so p = 2 * 20 / 720 = 0.056: no
//! concern.

use crate::checks::timed::{self, Timed};
use crate::checks::{Check, REMARK_BELOW, tails, words};

/// The name of this check.
pub const ID: &str = "trend";
/// Where the method was published.
pub const SOURCE: &str = "Mann 1945; Kendall 1975";

const STATISTIC: &str = "Mann-Kendall S";
/// Most times for which the exact law is used.
const EXACT_UP_TO: usize = 10;
/// Most times for which the slopes of all pairs are formed.
const SLOPE_UP_TO: usize = 1000;

/// S and its p-value of values in order of time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct MannKendall {
    /// Rising pairs less falling pairs.
    pub s: f64,
    /// The two-sided p-value.
    pub p: f64,
    /// Whether the exact law was used.
    pub exact: bool,
}

/// S and p of values in order of time. None for fewer than three values or when all are equal.
pub fn mann_kendall(values: &[f64]) -> Option<MannKendall> {
    let n = values.len();
    if n < 3 {
        return None;
    }
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    let groups: Vec<f64> =
        sorted.chunk_by(|a, b| a == b).map(|group| group.len() as f64).filter(|&size| size > 1.0).collect();
    let size = n as f64;
    let pairs = size * (size - 1.0) / 2.0;
    let tied: f64 = groups.iter().map(|t| t * (t - 1.0) / 2.0).sum();
    if tied == pairs {
        return None;
    }
    let s = pairs - tied - 2.0 * falling_pairs(values) as f64;
    if groups.is_empty() && n <= EXACT_UP_TO {
        return Some(MannKendall { s, p: exact_p(n, s), exact: true });
    }
    let ties: f64 = groups.iter().map(|t| t * (t - 1.0) * (2.0 * t + 5.0)).sum();
    let variance = (size * (size - 1.0) * (2.0 * size + 5.0) - ties) / 18.0;
    let z = (s.abs() - 1.0).max(0.0) / variance.sqrt();
    let p = tails::normal(z)?.two_sided();
    Some(MannKendall { s, p, exact: false })
}

/// Pairs in which the later value is smaller, counted by merging sorted halves.
fn falling_pairs(values: &[f64]) -> u64 {
    let mut sorted = values.to_vec();
    let mut spare = values.to_vec();
    let mut falling = 0_u64;
    let mut width = 1;
    while width < sorted.len() {
        for (part, out) in sorted.chunks(2 * width).zip(spare.chunks_mut(2 * width)) {
            let (left, right) = part.split_at(width.min(part.len()));
            let (mut i, mut j) = (0, 0);
            for slot in out.iter_mut() {
                if j == right.len() || (i < left.len() && left[i] <= right[j]) {
                    *slot = left[i];
                    i += 1;
                } else {
                    *slot = right[j];
                    j += 1;
                    falling += (left.len() - i) as u64;
                }
            }
        }
        std::mem::swap(&mut sorted, &mut spare);
        width *= 2;
    }
    falling
}

/// The two-sided exact p: the number of orders of n values by their falling pairs is the product
/// of (1 + q + ... + q^(k-1)), k to n.
fn exact_p(n: usize, s: f64) -> f64 {
    let mut orders = vec![1_u64];
    for k in 2..=n {
        let mut next = vec![0_u64; orders.len() + k - 1];
        for (at, &count) in orders.iter().enumerate() {
            for slot in &mut next[at..at + k] {
                *slot += count;
            }
        }
        orders = next;
    }
    let all: u64 = orders.iter().sum();
    let most = (orders.len() - 1) as f64;
    let beyond: u64 = orders
        .iter()
        .enumerate()
        .filter(|(falling, _)| most - 2.0 * *falling as f64 >= s.abs())
        .map(|(_, count)| count)
        .sum();
    (2.0 * beyond as f64 / all as f64).min(1.0)
}

/// The median of the slopes between all pairs of different times.
pub fn median_slope(series: &[Timed]) -> Option<f64> {
    let mut slopes = Vec::with_capacity(series.len() * series.len() / 2);
    for (place, early) in series.iter().enumerate() {
        for late in &series[place + 1..] {
            if late.at > early.at {
                slopes.push((late.value - early.value) / (late.at - early.at));
            }
        }
    }
    tails::median(&mut slopes)
}

/// Checks readings for a trend. `time_unit` names the unit of the times, such as "day" or "period".
pub fn check(readings: &[Timed], time_unit: &str) -> Check {
    let series = timed::one_for_each_time(readings);
    let n = series.len();
    if n < 4 {
        return Check::not_made(ID, STATISTIC, "fewer than four different times show no trend");
    }
    let Some(found) = mann_kendall(&timed::values(&series)) else {
        return Check::not_made(ID, STATISTIC, "all readings are equal");
    };
    let size = n as f64;
    let tau = found.s / (size * (size - 1.0) / 2.0);
    let direction = if found.s > 0.0 { "rising" } else { "falling" };
    let mut told = if found.p < REMARK_BELOW {
        format!("The values are {direction} in time ({} times, {}).", n, words::p_is(found.p))
    } else {
        format!("No trend in time shows ({} times, {}).", n, words::p_is(found.p))
    };
    let mut check = Check::of(ID, STATISTIC, found.s)
        .reference(if found.exact {
            format!("exact, n = {n}")
        } else {
            format!("normal approximation, n = {n}")
        })
        .p(found.p)
        .extra("times", size)
        .extra("Kendall tau", tau);
    if n <= SLOPE_UP_TO
        && let Some(slope) = median_slope(&series)
    {
        check = check.extra("median slope", slope);
        told.push_str(&format!(" The median slope is {} per {time_unit}.", words::number(slope)));
    }
    if n <= 4 {
        told.push_str(" With four times not even a steady rise could raise a remark.");
    }
    check.meaning(told).if_concerned(
        "One level does not describe the whole period: look for a drift or a season, and take chances for the next \
         reading with care.",
    )
}
