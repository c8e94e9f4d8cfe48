//! # readings beyond
//! "How many of this period's readings were above the limit?" A count of what was read, with the
//! largest and the smallest reading: no model, no prior, no chance. Where a rule says that every
//! sample counts, this is the question to ask.
//!
//! The readings used are counted; replicates are averaged first and count once, as everywhere. Ends of
//! an interval belong to its inside. A reading known only as "<0.5" is counted where its mark settles
//! the matter; where it does not, there is no count.
//!
//! Assumes nothing beyond the readings. Excluded readings are not counted (the report lists them).
//!
//! Source: a count; no method is involved.
//!
//! A worked number: of the readings 44.1, 50.0, 50.2 and 61.9 two lie above 50; the largest is 61.9.

use super::beyond::{self, ANY_SIDE, About, Asked};
use super::figures::{Figures, Item, Meaning};
use super::{Question, QuestionKind, Subject, terms};
use crate::data::{Fate, Mark, PeriodData, ReadingRow};
use crate::diagnostics::{Caution, Faults};
use crate::math::{fm, sums::Moments};
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::{Basis, When};
use crate::quantity::{Absent, Beyond, Scale};
use crate::spec::keys::Key;
use crate::spec::language;
use crate::spec::reader::Reader;
use std::collections::BTreeMap;

const KEYS: &[Key] = &[beyond::ABOVE, beyond::BELOW, beyond::BETWEEN, beyond::OUTSIDE];

pub const KIND: QuestionKind =
    QuestionKind { ask: "readings beyond", page: include_str!("readings_beyond.rs"), keys: KEYS, read };

#[derive(Debug)]
struct ReadingsBeyond {
    beyond: Asked,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let beyond = beyond::read(&mut reader, plan, ANY_SIDE, true);
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(ReadingsBeyond { beyond: beyond? }))
}

/// Whether a reading lies beyond; `None` where its mark leaves it open.
fn lies(value: f64, mark: Mark, beyond: Beyond) -> Option<bool> {
    // A marked reading lies somewhere in an open interval from or up to its limit.
    let (least, most) = match mark {
        Mark::None => (value, value),
        Mark::Below => (f64::NEG_INFINITY, value),
        Mark::Above => (value, f64::INFINITY),
    };
    let open_end = mark != Mark::None;
    // All of it above the limit; an open interval from the limit itself is above it.
    let all_above = |limit: f64| least > limit || (open_end && mark == Mark::Above && least >= limit);
    let all_below = |limit: f64| most < limit || (open_end && mark == Mark::Below && most <= limit);
    let none_above = |limit: f64| most <= limit;
    let none_below = |limit: f64| least >= limit;
    match beyond {
        Beyond::Above(limit) => settle(all_above(limit), none_above(limit)),
        Beyond::Below(limit) => settle(all_below(limit), none_below(limit)),
        Beyond::Outside(lower, upper) => {
            settle(all_below(lower) || all_above(upper), none_below(lower) && none_above(upper))
        }
        Beyond::Between(lower, upper) => {
            settle(none_below(lower) && none_above(upper), all_below(lower) || all_above(upper))
        }
    }
}

fn settle(yes: bool, no: bool) -> Option<bool> {
    match (yes, no) {
        (true, _) => Some(true),
        (false, true) => Some(false),
        (false, false) => None,
    }
}

/// The used readings, replicates averaged: on the log scale geometrically, as the model does.
fn used(period: &PeriodData, scale: Scale) -> Result<Vec<(f64, Mark)>, Absent> {
    let mut single = Vec::new();
    let mut batches: BTreeMap<&str, Vec<&ReadingRow>> = BTreeMap::new();
    for row in period.readings.iter().filter(|row| row.fate == Fate::Used) {
        match (&row.replicate, row.value) {
            (_, None) => {}
            (Some(batch), Some(_)) => batches.entry(batch).or_default().push(row),
            (None, Some(value)) => single.push((value, row.mark)),
        }
    }
    for rows in batches.values() {
        if let [row] = rows.as_slice() {
            single.extend(row.value.map(|value| (value, row.mark)));
            continue;
        }
        if rows.iter().any(|row| row.mark != Mark::None) {
            return Err(Absent::because("some replicates are marked, and their average is not known"));
        }
        let mut moments = Moments::new();
        for value in rows.iter().filter_map(|row| row.value) {
            moments.add(if scale == Scale::Log { fm::ln(value) } else { value });
        }
        single.push((terms::printed(moments.mean(), scale), Mark::None));
    }
    Ok(single)
}

impl ReadingsBeyond {
    fn count(&self, subject: &Subject<'_>) -> Result<u64, Absent> {
        let beyond = self.beyond.resolve(subject.plan, subject.series)?;
        let Some(period) = subject.period.filter(|period| period.facts.n > 0) else {
            return Err(Absent::because("there are no readings in this period"));
        };
        if period.facts.from_summary {
            return Err(Absent::because("the period is given as a summary, without its single readings"));
        }
        if period.readings.is_empty() {
            return Err(Absent::because("single readings were not kept"));
        }
        let mut count = 0;
        for (value, mark) in used(period, subject.scale())? {
            match lies(value, mark, beyond) {
                Some(true) => count += 1,
                Some(false) => {}
                None => {
                    return Err(Absent::because(
                        "a reading known only to lie below or above its mark could lie on either side of the limit",
                    ));
                }
            }
        }
        Ok(count)
    }
}

impl Question for ReadingsBeyond {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        if subject.basis == Basis::PriorOnly {
            return Figures::default();
        }
        let facts = subject.period.map(|period| &period.facts);
        let extreme = |value: Option<f64>| match (facts, value) {
            (Some(facts), Some(value)) if !facts.from_summary => Ok(value),
            (Some(facts), _) if facts.n > 0 => Err(Absent::because("single readings are not known")),
            _ => Err(Absent::because("there are no readings in this period")),
        };
        let count = match self.count(subject) {
            Ok(count) => Item::Whole(Some(count)),
            Err(absent) => Item::Number(Err(absent), Meaning::Count),
        };
        Figures::default()
            .with("count", count)
            .number("largest", extreme(facts.and_then(|facts| facts.largest)), Meaning::Value)
            .number("smallest", extreme(facts.and_then(|facts| facts.smallest)), Meaning::Value)
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let period = terms::period_words(subject.plan, When::This);
        format!("number of readings of {period} that lie {}", self.beyond.words(subject))
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        format!("#{{i: {}}}", self.beyond.symbols("x_i", subject))
    }

    fn gives(&self) -> Vec<&'static str> {
        vec!["count"]
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        vec![self.beyond.setting()]
    }

    fn cautions(&self, plan: &Plan) -> Vec<Caution> {
        self.beyond.caution(About::Reading, plan).into_iter().collect()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ends_belong_to_the_inside() {
        assert_eq!(lies(50.0, Mark::None, Beyond::Above(50.0)), Some(false));
        assert_eq!(lies(50.0, Mark::None, Beyond::Between(40.0, 50.0)), Some(true));
        assert_eq!(lies(50.0, Mark::None, Beyond::Outside(40.0, 50.0)), Some(false));
        assert_eq!(lies(39.9, Mark::None, Beyond::Outside(40.0, 50.0)), Some(true));
    }

    #[test]
    fn a_mark_counts_only_where_it_settles_the_matter() {
        assert_eq!(lies(0.5, Mark::Below, Beyond::Above(50.0)), Some(false));
        assert_eq!(lies(60.0, Mark::Below, Beyond::Above(50.0)), None);
        assert_eq!(lies(60.0, Mark::Above, Beyond::Above(50.0)), Some(true));
        assert_eq!(lies(50.0, Mark::Above, Beyond::Above(50.0)), Some(true));
        assert_eq!(lies(0.5, Mark::Below, Beyond::Below(0.5)), Some(true));
        assert_eq!(lies(0.5, Mark::Below, Beyond::Between(0.2, 1.0)), None);
        assert_eq!(lies(0.5, Mark::Below, Beyond::Outside(0.5, 1.0)), Some(true));
    }
}
