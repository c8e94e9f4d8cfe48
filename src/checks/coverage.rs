//! Were the planned readings made, and do they cover the period?
//!
//! Missing readings are seldom missing by chance: samples are not taken in frost, in holidays, when
//! the plant stands still. A level for the period rests on readings spread over it.
//!
//! Statistic: readings used over readings planned (where a number was planned).
//! Rule, no law: fewer than planned, or a month of the period without a reading where there were
//! readings enough for every month, is a remark; fewer than half of those planned, or half of the
//! months without a reading where there were readings enough for every month, is a flag.
//! Beside it: the readings by month and the longest time without one, the ends of the period
//! included.
//! Source: common practice, no source; that missing samples are reported is asked of drinking-water
//! and surface-water reviews.
//!
//! Worked: 12 planned, 10 made, none in January and February: 10/12 = 0.83, 2 readings missing: a
//! remark.

use crate::checks::{Check, Concern, words};

/// The name of this check.
pub const ID: &str = "coverage";
/// Where the method was published.
pub const SOURCE: &str = "common practice, no source";

const STATISTIC: &str = "readings made / planned";

/// The readings of one month of the period.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Month {
    /// The month as printed, such as "2025-01".
    pub name: String,
    /// Its readings.
    pub readings: usize,
}

/// What is known of the readings of a period.
#[derive(Clone, Copy, Debug, Default)]
pub struct Made<'a> {
    /// The number planned, if one was.
    pub planned: Option<usize>,
    /// The number used.
    pub used: usize,
    /// Every month that the period touches, in order, with its dated readings; empty without dates.
    pub months: &'a [Month],
    /// First and last day of the period as day numbers, if it has dates.
    pub period: Option<(i64, i64)>,
    /// Day numbers of the readings, in any order.
    pub days: &'a [i64],
}

/// Checks readings made against readings planned, and the months covered.
pub fn check(made: &Made) -> Check {
    let dated: usize = made.months.iter().map(|month| month.readings).sum();
    let months_known = !made.months.is_empty() && dated > 0;
    if made.planned.is_none() && !months_known {
        return Check::not_made(ID, STATISTIC, "no number was planned and the readings have no dates");
    }
    let mut concern = Concern::None;
    let mut told = String::new();
    let mut extra: Vec<(&'static str, f64)> = vec![("used", made.used as f64)];
    let mut statistic = None;
    if let Some(planned) = made.planned {
        extra.push(("planned", planned as f64));
        if planned > 0 {
            statistic = Some(made.used as f64 / planned as f64);
        }
        if made.used * 2 < planned {
            concern = Concern::Flag;
        } else if made.used < planned {
            concern = Concern::Remark;
        }
        told.push_str(&format!("{} planned, {} used.", words::count(planned, "reading"), made.used));
    } else {
        told.push_str(&format!("{} used; no number was planned.", words::count(made.used, "reading")));
    }
    if months_known {
        let empty: Vec<&str> =
            made.months.iter().filter(|month| month.readings == 0).map(|month| month.name.as_str()).collect();
        extra.push(("months", made.months.len() as f64));
        extra.push(("months without a reading", empty.len() as f64));
        if empty.is_empty() {
            told.push_str(" Every month has a reading.");
        } else {
            told.push_str(&format!(" No reading in {}.", empty.join(", ")));
            if dated >= made.months.len() {
                let found =
                    if empty.len() * 2 >= made.months.len() { Concern::Flag } else { Concern::Remark };
                concern = concern.max(found);
            }
        }
    }
    if let Some(gap) = longest_gap(made) {
        extra.push(("longest time without a reading, days", gap as f64));
        told.push_str(&format!(" The longest time without a reading is {gap} days."));
    }
    let mut check = Check::of(ID, STATISTIC, statistic.unwrap_or(0.0))
        .reference("rule, no law")
        .concern(concern)
        .meaning(told)
        .if_concerned(
            "The level may rest on the easier part of the period. Say why readings are missing, and whether the missing times \
             are unlike the others.",
        );
    check.statistic = statistic;
    check.extra = extra;
    check
}

/// The longest stretch of days of the period without a reading, from reading to reading and to the
/// ends of the period.
fn longest_gap(made: &Made) -> Option<i64> {
    let (from, to) = made.period?;
    let mut days: Vec<i64> = made.days.iter().copied().filter(|day| (from..=to).contains(day)).collect();
    if days.is_empty() {
        return None;
    }
    days.sort_unstable();
    // The day before the first and the day after the last bound the period as a reading would.
    let mut last = from - 1;
    let mut longest = 0;
    for day in days.into_iter().chain([to + 1]) {
        longest = longest.max(day - last - 1);
        last = day;
    }
    Some(longest)
}
