//! Are the readings printed coarsely against their spread?
//!
//! A reading printed to a step of h stands for anything within h/2. Small steps do no harm; a step
//! like the spread makes the sd of few readings erratic, the normal shape impossible, and the mean a
//! little too sure. The remedy is the key that takes readings as rounded.
//!
//! Statistic: h / sd: the common step of the printed readings over the within sd.
//! Law: none; above 1/2 a remark, above 1 a flag (common practice, no source). Rounding adds about
//! h^2/12 to the variance of a reading.
//! Assumes: readings in the file as they were noted; a file that dropped trailing zeros can make the
//! step look coarser. A step of 2, 5, 10, 20, 25, 50 or 100 last places is believed when all readings,
//! at least five, keep to it and chance would do so less than once in a thousand times.
//! Source: Sheppard 1898 for h^2/12.
//!
//! Worked: readings 12.5, 13.0, 11.5, 12.0, 14.5, 13.5 and within sd 0.8: the last place is 0.1, all
//! six are multiples of 0.5, which chance does in 1 of 15,625; h / sd = 0.625, a remark; rounding
//! makes the sd 1.6 % larger.

use crate::checks::{Check, Concern, printed, words};

/// The name of this check.
pub const ID: &str = "rounding";
/// Where the method was published.
pub const SOURCE: &str = "Sheppard 1898; levels common practice, no source";

const STATISTIC: &str = "step / within sd";

/// Where the step is stated and each reading counts as all that rounds to it, there is nothing to warn of.
pub fn counted() -> Check {
    Check::not_made(ID, STATISTIC, "the step is stated, and each reading counts as all that rounds to it")
}

/// Checks the step of readings as printed in the source against the within sd, in the unit of the
/// readings. On the log scale give the sd of readings in their own unit (about level times log sd).
pub fn check(texts: &[&str], within_sd: f64) -> Check {
    if texts.is_empty() {
        return Check::not_made(ID, STATISTIC, "no single readings are at hand as printed");
    }
    if !(within_sd > 0.0 && within_sd.is_finite()) {
        return Check::not_made(ID, STATISTIC, "there is no within sd above 0 to hold the step against");
    }
    let Some(step) = printed::common_step(texts) else {
        return Check::not_made(ID, STATISTIC, "the readings are not printed as plain decimal numbers");
    };
    let ratio = step.size / within_sd;
    let concern = if ratio > 1.0 {
        Concern::Flag
    } else if ratio > 0.5 {
        Concern::Remark
    } else {
        Concern::None
    };
    let inflation = (1.0 + ratio * ratio / 12.0).sqrt();
    Check::of(ID, STATISTIC, ratio)
        .reference("remark above 1/2, flag above 1")
        .concern(concern)
        .extra("readings", step.readings as f64)
        .extra("step", step.size)
        .extra("within sd", within_sd)
        .extra("sd larger by rounding, times", inflation)
        .meaning(format!(
            "The {} are printed in steps of {}, {} times the within sd; rounding makes their sd about {} times as large.",
            words::count(step.readings, "reading"),
            words::number(step.size),
            words::number(ratio),
            words::number(inflation)
        ))
        .if_concerned(
            "The step is coarse against the spread: state it with the key `step`, so that each reading counts as lying \
             somewhere within it, and ask for readings with one more digit.",
        )
}
