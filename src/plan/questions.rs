//! What every question has, whatever it asks: id, words, series, and the decision rule.

use crate::diagnostics::Fault;
use crate::plan::make::{Ground, unknown_name};
use crate::plan::{Bounds, Condition, Limit, QuestionPlan, Rule, Threshold, Verdict};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::spec::table::Table;

/// The conditions of a verdict, by their keys.
pub const CONDITIONS: &[(&str, Condition)] = &[
    ("chance_at_least", Condition::ChanceAtLeast),
    ("chance_at_most", Condition::ChanceAtMost),
    ("count_at_least", Condition::CountAtLeast),
    ("count_at_most", Condition::CountAtMost),
    ("estimate_above", Condition::EstimateAbove),
    ("estimate_below", Condition::EstimateBelow),
    ("lower_above", Condition::LowerAbove),
    ("upper_below", Condition::UpperBelow),
];

pub fn all(tables: Vec<&Table>, limits: &[Limit], ground: &mut Ground) -> Vec<QuestionPlan> {
    let mut questions: Vec<QuestionPlan> = Vec::new();
    for table in tables {
        let Some(question) = question(table, limits, ground) else { continue };
        if questions.iter().any(|other| other.id == question.id) {
            let fault = Fault::wrong(
                "duplicate-name",
                format!("the question \"{}\" stands here for the second time", question.id),
            )
            .expected("every id once");
            ground.reader(table, language::QUESTION).fault_at("id", fault);
        }
        questions.push(question);
    }
    questions
}

fn question(table: &Table, limits: &[Limit], ground: &mut Ground) -> Option<QuestionPlan> {
    let mut reader = ground.reader(table, language::QUESTION);
    let id = reader.text("id");
    if let Some(id) = &id
        && id.chars().any(char::is_control)
    {
        reader.fault_at("id", Fault::wrong("bad-id", "an id is one line of visible characters"));
    }
    let (ask, say) = (reader.text("ask"), reader.text("say"));
    let only = reader.text_list("only");
    if only.as_ref().is_some_and(Vec::is_empty) {
        let fault = Fault::wrong("wrong-value", "`only` names no series, so the question is never asked")
            .expected("at least one series, or no `only`");
        reader.fault_at("only", fault);
    }
    reader.table("rule");
    // Required keys are asked for here; which others there may be, the kind of question knows.
    for key in language::QUESTION.iter().filter(|key| key.required && table.get(key.name).is_none()) {
        reader.faults.push(crate::spec::reader::missing_key(table, key));
    }
    let rule = table.table("rule").and_then(|table| rule(table, limits, ground));
    let only = only.map(|names| names.iter().map(|name| name.trim().to_string()).collect());
    Some(QuestionPlan { id: id?, ask: ask?, say, only, rule, table: table.clone() })
}

fn rule(table: &Table, limits: &[Limit], ground: &mut Ground) -> Option<Rule> {
    let mut reader = ground.reader(table, language::RULE);
    let (agreed, agreed_by) = (reader.date("agreed"), reader.text("agreed_by"));
    let hold_on = reader.text_list("hold_on").unwrap_or_default();
    let tables = table.tables("verdicts");
    reader.tables("verdicts");
    if reader.has("verdicts") && tables.len() < 2 {
        let fault = Fault::wrong("bad-rule", "a rule with fewer than two verdicts decides nothing")
            .expected("two or more verdicts; the last has no condition");
        reader.fault_at("verdicts", fault);
    }
    let span = table.span.clone();
    reader.finish();
    let mut verdicts: Vec<Verdict> = Vec::new();
    for (at, table) in tables.iter().enumerate() {
        let verdict = verdict(table, limits, ground);
        let Some(verdict) = verdict else { continue };
        if let Some(fault) = misplaced(&verdict, &verdicts, at + 1 == tables.len()) {
            ground.faults.push(fault.at(table.span.place()));
        }
        verdicts.push(verdict);
    }
    Some(Rule { agreed, agreed_by, hold_on, verdicts, span })
}

fn verdict(table: &Table, limits: &[Limit], ground: &mut Ground) -> Option<Verdict> {
    let before = ground.faults.0.len();
    let mut reader = ground.reader(table, language::VERDICT);
    let say = reader.text("say");
    let fail = reader.flag("fail").unwrap_or(false);
    let mut conditions = Vec::new();
    for (key, condition) in CONDITIONS {
        let threshold = match condition {
            Condition::ChanceAtLeast | Condition::ChanceAtMost => {
                reader.probability(key).map(|p| Threshold::Number(p.get()))
            }
            Condition::CountAtLeast | Condition::CountAtMost => {
                reader.not_negative(key).map(Threshold::Number)
            }
            _ => reader.number_or_limit(key),
        };
        if let Some(Threshold::Limit(name)) = &threshold {
            one_sided(&mut reader, key, name, limits);
        }
        conditions.extend(threshold.map(|threshold| (*condition, threshold)));
    }
    reader.finish();
    let understood = ground.faults.0.len() == before;
    Some(Verdict { say: say.filter(|_| understood)?, fail, conditions })
}

/// A limit that a condition names must exist and be one value.
fn one_sided(reader: &mut Reader<'_>, key: &str, name: &str, limits: &[Limit]) {
    match limits.iter().find(|limit| limit.name == name).map(|limit| limit.bounds) {
        Some(Bounds::Value(_)) => {}
        Some(Bounds::Range(lower, upper)) => {
            let fault = Fault::wrong(
                "bad-rule",
                format!("the limit \"{name}\" has two sides, and `{key}` needs one value"),
            )
            .expected("a number, or the name of a limit with one value")
            .repair(format!("write {lower} or {upper}"));
            reader.fault_at(key, fault);
        }
        None => {
            let known: Vec<&str> = limits.iter().map(|limit| limit.name.as_str()).collect();
            let fault = unknown_name("limit", name, &known, reader.span(key));
            reader.faults.push(fault);
        }
    }
}

/// Verdicts are tried in order: one that can never be reached, or a last one that may not hold, is a slip.
fn misplaced(verdict: &Verdict, earlier: &[Verdict], is_last: bool) -> Option<Fault> {
    let said = &verdict.say;
    if is_last && !verdict.conditions.is_empty() {
        return Some(
            Fault::wrong("bad-rule", format!("the last verdict, \"{said}\", has a condition"))
                .expected("a last verdict without condition, so that the rule always ends in words")
                .repair("add { say = \"not decided\" } at the end"),
        );
    }
    if !is_last && verdict.conditions.is_empty() {
        return Some(
            Fault::wrong(
                "bad-rule",
                format!("\"{said}\" has no condition, so no verdict after it is ever given"),
            )
            .expected("conditions on every verdict but the last")
            .repair("give it a condition, or put it last"),
        );
    }
    if let Some((low, high)) = contradiction(verdict) {
        return Some(
            Fault::wrong("bad-rule", format!("\"{said}\" can never hold: at least {low} and at most {high}"))
                .expected("conditions that can hold together"),
        );
    }
    let covered = earlier.iter().find(|before| !before.conditions.is_empty() && covers(before, verdict));
    covered.filter(|_| !is_last).map(|before| {
        Fault::wrong(
            "bad-rule",
            format!("\"{said}\" is never given: \"{}\" before it holds whenever it would", before.say),
        )
        .expected("the stricter verdict first")
        .repair("change the order of the two")
    })
}

fn contradiction(verdict: &Verdict) -> Option<(f64, f64)> {
    let number = |wanted: Condition| {
        verdict.conditions.iter().find_map(|(condition, threshold)| match threshold {
            Threshold::Number(number) if *condition == wanted => Some(*number),
            _ => None,
        })
    };
    let pairs = [
        (Condition::ChanceAtLeast, Condition::ChanceAtMost),
        (Condition::CountAtLeast, Condition::CountAtMost),
    ];
    pairs.into_iter().find_map(|(low, high)| {
        let (low, high) = (number(low)?, number(high)?);
        (low > high).then_some((low, high))
    })
}

/// Whether `before` holds in every case in which `after` does.
fn covers(before: &Verdict, after: &Verdict) -> bool {
    before.conditions.iter().all(|(condition, threshold)| {
        after.conditions.iter().any(|(other, stricter)| {
            condition == other
                && match (threshold, stricter) {
                    (Threshold::Limit(a), Threshold::Limit(b)) => a == b,
                    (Threshold::Number(a), Threshold::Number(b)) => match condition {
                        Condition::ChanceAtLeast
                        | Condition::CountAtLeast
                        | Condition::EstimateAbove
                        | Condition::LowerAbove => a <= b,
                        Condition::ChanceAtMost
                        | Condition::CountAtMost
                        | Condition::EstimateBelow
                        | Condition::UpperBelow => a >= b,
                    },
                    _ => false,
                }
        })
    })
}
