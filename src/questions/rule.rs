//! Decision rules: the first verdict whose conditions all hold. Unrounded figures are compared.

use super::figures::{Figures, Item};
use super::{Question, beyond};
use crate::diagnostics::{Caution, Fault, Faults};
use crate::plan::{Bounds, Condition, Plan, QuestionPlan, Rule, Threshold, Verdict};
use crate::quantity::{Absent, Figure};
use crate::spec::table::{Kind, Span};

/// What a rule gave.
#[derive(Debug, Clone, PartialEq)]
pub struct Given {
    /// The verdict's words; `None` where an undefined answer gives none.
    pub say: Option<String>,
    pub fail: bool,
    /// Why it was held back, or why there is none.
    pub why: Option<String>,
}

/// A chance this near to a rule's threshold is said to be near, and is printed with four decimals.
pub const NEAR: f64 = 0.0005;

/// How the reason of a verdict that was held back begins.
const HELD_BACK: &str = "held back";

impl Given {
    /// No verdict, for that reason.
    pub fn none(why: impl Into<String>) -> Given {
        Given { say: None, fail: false, why: Some(why.into()) }
    }

    /// Whether a flagged check holds back a verdict that the rule would have given.
    pub fn is_held_back(&self) -> bool {
        self.say.is_some() && self.why.as_ref().is_some_and(|why| why.starts_with(HELD_BACK))
    }

    fn of(verdict: &Verdict, why: Option<String>) -> Given {
        Given { say: Some(verdict.say.clone()), fail: verdict.fail, why }
    }
}

/// The key of a condition, as the spec writes it.
pub fn key(condition: Condition) -> &'static str {
    match condition {
        Condition::ChanceAtLeast => "chance_at_least",
        Condition::ChanceAtMost => "chance_at_most",
        Condition::CountAtLeast => "count_at_least",
        Condition::CountAtMost => "count_at_most",
        Condition::EstimateAbove => "estimate_above",
        Condition::EstimateBelow => "estimate_below",
        Condition::LowerAbove => "lower_above",
        Condition::UpperBelow => "upper_below",
    }
}

/// The figure that a condition compares.
pub fn figure_of(condition: Condition) -> &'static str {
    match condition {
        Condition::ChanceAtLeast | Condition::ChanceAtMost => "chance",
        Condition::CountAtLeast | Condition::CountAtMost => "count",
        Condition::EstimateAbove | Condition::EstimateBelow => "estimate",
        Condition::LowerAbove => "lower",
        Condition::UpperBelow => "upper",
    }
}

/// The number that a condition compares with, as it holds for that series.
pub fn threshold(threshold: &Threshold, plan: &Plan, series: &str) -> Figure {
    match threshold {
        Threshold::Number(number) => Ok(*number),
        Threshold::Limit(name) => match plan.bounds(name, series) {
            Some(Bounds::Value(value)) => Ok(value),
            Some(Bounds::Range(..)) => Err(Absent::because(format!("the limit \"{name}\" has two sides"))),
            None => Err(Absent::because(format!("the limit \"{name}\" has no value for this series"))),
        },
    }
}

fn holds(condition: Condition, figure: f64, threshold: f64) -> bool {
    match condition {
        Condition::ChanceAtLeast | Condition::CountAtLeast => figure >= threshold,
        Condition::ChanceAtMost | Condition::CountAtMost => figure <= threshold,
        Condition::EstimateAbove | Condition::LowerAbove => figure > threshold,
        Condition::EstimateBelow | Condition::UpperBelow => figure < threshold,
    }
}

/// The figure of that name, or why it does not exist.
pub fn figure(figures: &Figures, name: &str) -> Figure {
    match figures.get(name) {
        Some(Item::Number(figure, _)) => figure.clone(),
        Some(Item::Whole(Some(count))) => Ok(*count as f64),
        _ => Err(Absent::because(format!("the answer has no {name}"))),
    }
}

/// Index of the first verdict whose conditions all hold.
pub fn first_holding(rule: &Rule, figures: &Figures, plan: &Plan, series: &str) -> Result<usize, Absent> {
    for (index, verdict) in rule.verdicts.iter().enumerate() {
        let mut all = true;
        for (condition, against) in &verdict.conditions {
            let figure = figure(figures, figure_of(*condition))?;
            let against = threshold(against, plan, series)?;
            all &= holds(*condition, figure, against);
        }
        if all {
            return Ok(index);
        }
    }
    Err(Absent::because("no verdict's conditions hold"))
}

/// The verdict on an answer.
///
/// The first verdict whose conditions all hold. An answer without the figure that a condition needs
/// gives none. Where a check of `hold_on` is flagged, the last verdict is given with that reason.
pub fn decide(rule: &Rule, figures: &Figures, plan: &Plan, series: &str, flagged_checks: &[&str]) -> Given {
    let index = match first_holding(rule, figures, plan, series) {
        Ok(index) => index,
        Err(absent) => return Given::none(absent.reason),
    };
    let held: Vec<&str> =
        rule.hold_on.iter().map(String::as_str).filter(|check| flagged_checks.contains(check)).collect();
    match (held.as_slice(), rule.verdicts.get(index), rule.verdicts.last()) {
        ([], Some(verdict), _) => Given::of(verdict, None),
        (held, Some(verdict), Some(last)) => {
            let flagged = match held {
                [one] => format!("the check \"{one}\" is flagged"),
                several => format!("the checks \"{}\" are flagged", several.join("\", \"")),
            };
            let why = if index + 1 == rule.verdicts.len() {
                format!("{flagged}; the rule would give this verdict without it too")
            } else {
                format!("{HELD_BACK}: {flagged}; without it the verdict would be \"{}\"", verdict.say)
            };
            Given::of(last, Some(why))
        }
        _ => Given::none("the rule has no verdicts"),
    }
}

/// The chance's threshold nearest to it, where one lies within [`NEAR`].
pub fn near_threshold(rule: &Rule, figures: &Figures) -> Option<f64> {
    let chance = figures.value("chance")?;
    rule.verdicts
        .iter()
        .flat_map(|verdict| &verdict.conditions)
        .filter_map(|(condition, against)| match (figure_of(*condition), against) {
            ("chance", Threshold::Number(number)) => Some(*number),
            _ => None,
        })
        .filter(|number| (chance - number).abs() < NEAR)
        .min_by(|a, b| (chance - a).abs().total_cmp(&(chance - b).abs()))
}

/// The caution where a chance lies close to a threshold of its rule.
pub fn near_caution(rule: &Rule, figures: &Figures) -> Option<Caution> {
    let threshold = near_threshold(rule, figures)?;
    let text = format!(
        "The probability lies within {NEAR} of the threshold {threshold}; the unrounded figures were compared."
    );
    Some(Caution::new("near-threshold", text))
}

/// The caution where the prior alone nearly meets what the rule asks of the chance: it reaches a
/// `chance_at_least`, or stays under a `chance_at_most`, without any reading.
pub fn prior_alone_caution(rule: &Rule, prior_only: &Figures) -> Option<Caution> {
    let chance = prior_only.value("chance")?;
    let met = rule.verdicts.iter().find(|verdict| {
        let on_chance: Vec<_> =
            verdict.conditions.iter().filter(|(condition, _)| figure_of(*condition) == "chance").collect();
        !on_chance.is_empty()
            && on_chance.iter().all(|(condition, against)| match against {
                Threshold::Number(number) => holds(*condition, chance, *number),
                Threshold::Limit(_) => false,
            })
    })?;
    let text = format!(
        "The prior alone, without any reading of this period, would already give the verdict \"{}\".",
        met.say
    );
    Some(Caution::new("prior-alone-decides", text))
}

/// Notes what is wrong with a question's rule: limits that are not there or have two sides, figures that
/// the answer does not have. `question` is `None` where its own keys are at fault.
pub fn check(asked: &QuestionPlan, question: Option<&dyn Question>, plan: &Plan, faults: &mut Faults) {
    let Some(rule) = &asked.rule else { return };
    for (index, verdict) in rule.verdicts.iter().enumerate() {
        for (condition, against) in &verdict.conditions {
            let key = key(*condition);
            let span = condition_span(asked, index, key).unwrap_or(&rule.span);
            let name = figure_of(*condition);
            if let Some(question) = question
                && !question.gives().contains(&name)
            {
                let gives = question.gives();
                let fault = Fault::wrong(
                    "condition-without-figure",
                    format!("`{key}` compares the {name}, which this question does not give"),
                )
                .at(span.place())
                .expected(if gives.is_empty() {
                    "a question with figures that a rule can compare".to_string()
                } else {
                    format!("a condition on {}", gives.join(", "))
                })
                .repair(repair_of(name));
                faults.push(fault);
            }
            if let Threshold::Limit(limit) = against {
                match plan.limit(limit).map(|limit| limit.bounds) {
                    Some(Bounds::Value(_)) => {}
                    Some(Bounds::Range(..)) => faults.push(
                        Fault::wrong(
                            "two-sided-limit",
                            format!(
                                "`{key}` compares with one number, and the limit \"{limit}\" has two sides"
                            ),
                        )
                        .at(span.place())
                        .expected("a number, or the name of a limit with one value")
                        .repair("write the number that is meant"),
                    ),
                    None => faults.push(beyond::unknown_limit(plan, key, limit).at(span.place())),
                }
            }
        }
    }
}

fn repair_of(figure: &str) -> &'static str {
    match figure {
        "chance" => "ask for a chance: another kind of question, or a key such as `above` or `more_than`",
        "count" => "ask = \"readings beyond\" gives a count",
        "lower" => "ask for an interval with a lower end",
        "upper" => "ask for an interval with an upper end",
        _ => "choose another condition",
    }
}

/// Where a condition stands in the spec.
fn condition_span<'a>(asked: &'a QuestionPlan, verdict: usize, key: &str) -> Option<&'a Span> {
    let Kind::Table(rule) = &asked.table.get("rule")?.kind else { return None };
    let Kind::List(verdicts) = &rule.get("verdicts")?.kind else { return None };
    let Kind::Table(verdict) = &verdicts.get(verdict)?.kind else { return None };
    verdict.get(key).map(|value| &value.span)
}
