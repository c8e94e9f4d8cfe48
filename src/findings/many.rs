//! Many series looked at once: how many flags and wrong verdicts are to be expected by chance, and which
//! findings stand out even so.

use super::SeriesFindings;
use crate::checks::{Check, many_series};
use crate::plan::{Condition, Plan, Rule};

/// The name of the figure that each series' check bears beside its p.
pub const ADJUSTED: &str = "p adjusted for many series";

/// One kind of check over all series on which it was made.
#[derive(Debug, Clone, PartialEq)]
pub struct OverSeries {
    /// The check's name.
    pub kind: &'static str,
    pub check: Check,
    /// The series that stand out at q = 0.05, in their order.
    pub stand_out: Vec<String>,
}

/// The verdicts of one question over all series.
#[derive(Debug, Clone, PartialEq)]
pub struct WrongVerdicts {
    pub question: String,
    /// Verdicts that a chance decided, the last one ("not decided") left out.
    pub given: usize,
    /// The sum of their chances of being wrong.
    pub expected_wrong: f64,
}

/// Looks over each kind of check that was made of two series or more, and notes its adjusted p with each.
pub fn over_series(series: &mut [SeriesFindings]) -> Vec<OverSeries> {
    let mut kinds: Vec<&'static str> = Vec::new();
    for check in series.iter().flat_map(|series| &series.checks) {
        if check.tested().is_some() && !kinds.contains(&check.id) {
            kinds.push(check.id);
        }
    }
    let mut found = Vec::new();
    for kind in kinds {
        let mut made: Vec<(String, f64, &mut Check)> = Vec::new();
        for series in series.iter_mut() {
            for check in &mut series.checks {
                if check.id == kind
                    && let Some(p) = check.tested()
                {
                    made.push((series.name.clone(), p, check));
                }
            }
        }
        if made.len() < 2 {
            continue;
        }
        let p_values: Vec<f64> = made.iter().map(|(_, p, _)| *p).collect();
        let mut stand_out = Vec::new();
        for ((name, _, check), adjusted) in made.iter_mut().zip(many_series::adjusted(&p_values)) {
            check.extra.push((ADJUSTED, adjusted));
            if adjusted <= many_series::STANDS_OUT {
                stand_out.push(name.clone());
            }
        }
        found.push(OverSeries { kind, check: many_series::check(kind, &p_values), stand_out });
    }
    found
}

/// How many verdicts are expected to be wrong by their own chances, per question that a chance decides.
pub fn wrong_verdicts(plan: &Plan, series: &[SeriesFindings]) -> Vec<WrongVerdicts> {
    let mut found = Vec::new();
    for question in &plan.questions {
        let Some(rule) = &question.rule else { continue };
        let answers = series.iter().flat_map(|series| &series.answers);
        let chances: Vec<f64> = answers
            .filter(|answer| answer.id == question.id)
            .filter_map(|answer| {
                let given = answer.verdict.as_ref().filter(|given| !given.is_held_back())?;
                wrong(rule, given.say.as_deref()?, answer.figures.value("chance")?)
            })
            .collect();
        if !chances.is_empty() {
            found.push(WrongVerdicts {
                question: question.id.clone(),
                given: chances.len(),
                expected_wrong: many_series::expected_wrong(&chances),
            });
        }
    }
    found
}

/// The chance that a verdict is wrong: that what its only condition on the chance claims is not so.
fn wrong(rule: &Rule, say: &str, chance: f64) -> Option<f64> {
    let (last, others) = rule.verdicts.split_last()?;
    if last.say == say {
        return None;
    }
    let verdict = others.iter().find(|verdict| verdict.say == say)?;
    let conditions = verdict.conditions.iter().map(|(condition, _)| *condition);
    let of_chance: Vec<Condition> = conditions
        .filter(|condition| matches!(condition, Condition::ChanceAtLeast | Condition::ChanceAtMost))
        .collect();
    match of_chance.as_slice() {
        // The chance is at most 1, so nothing is lost that would still be printed.
        [Condition::ChanceAtLeast] => Some(1.0 - chance),
        [Condition::ChanceAtMost] => Some(chance),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::plan::{Threshold, Verdict};
    use crate::spec::table::{Span, SpecText};
    use std::sync::Arc;

    #[test]
    fn a_verdict_is_wrong_with_the_chance_that_it_leaves() {
        let verdict = |say: &str, conditions: &[(Condition, f64)]| Verdict {
            say: say.to_string(),
            fail: false,
            conditions: conditions.iter().map(|(own, at)| (*own, Threshold::Number(*at))).collect(),
        };
        let rule = Rule {
            agreed: None,
            agreed_by: None,
            hold_on: Vec::new(),
            verdicts: vec![
                verdict("above", &[(Condition::ChanceAtLeast, 0.95)]),
                verdict("not above", &[(Condition::ChanceAtMost, 0.05)]),
                verdict("not decided", &[]),
            ],
            span: Span {
                source: Arc::new(SpecText { file: String::new(), text: String::new() }),
                bytes: 0..0,
            },
        };
        assert_eq!(wrong(&rule, "above", 0.96875), Some(0.03125));
        assert_eq!(wrong(&rule, "not above", 0.01), Some(0.01));
        assert_eq!(wrong(&rule, "not decided", 0.5), None);
    }
}
