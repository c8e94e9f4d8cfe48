//! What the reader must be told beside the figures: every caution that follows from the findings
//! themselves. The wording adapts common practice in reports on probabilities and limits; each code is
//! stable and listed in the report.

use super::{Answer, Findings, SeriesFindings};
use crate::checks::Concern;
use crate::data::{Fate, Mark};
use crate::diagnostics::Caution;
use crate::plan::{Limit, Plan};
use crate::questions::rule;
use jiff::civil::Date;

/// Shares of rows that call for a word (common practice, no source).
const MANY_EXCLUDED: f64 = 0.10;
const MANY_MARKED: f64 = 0.50;
const MOST_MARKED: f64 = 0.80;
/// A limit farther from all readings than so many of their sds is named.
const FAR_IN_SDS: f64 = 8.0;

/// All cautions of the findings, in a fixed order: the plan's, then series by series.
pub fn of(findings: &Findings) -> Vec<Caution> {
    let plan = &findings.plan;
    let mut all = of_rules(findings);
    all.extend(of_events(findings));
    if plan.quantity.bias.is_none() && plan.series.values().all(|own| own.bias.is_none()) {
        all.push(Caution::new(
            "no-common-bias",
            "No allowance for a bias common to all readings was given: the intervals cover random variation only.",
        ));
    }
    all.extend(of_other_reviews(findings));
    for series in &findings.series {
        all.extend(of_series(findings, series));
    }
    all
}

/// Open actions that fell out of sight, limits that moved, and a period that was not the one before.
fn of_other_reviews(findings: &Findings) -> Vec<Caution> {
    let mut cautions = Vec::new();
    for other in &findings.compared {
        for action in &other.lost_actions {
            cautions.push(Caution::new(
                "open-action-missing",
                format!("The action \"{action}\" was open in the review {} and is not named here.", other.id),
            ));
        }
        for limit in &other.limits {
            cautions.push(Caution::new(
                "limit-differs",
                format!("The limit \"{}\" was another in the review {}: probabilities against it cannot be compared.", limit.name, other.id),
            ));
        }
        let differently: Vec<&str> = findings
            .plan
            .questions
            .iter()
            .map(|question| question.id.as_str())
            .filter(|id| {
                let changes = other.series.iter().flat_map(|series| &series.changes);
                changes.into_iter().any(|change| change.id == *id && !change.asked_differently.is_empty())
            })
            .collect();
        for id in differently {
            let text = format!("This question was asked differently in the review {}.", other.id);
            cautions.push(Caution::new("asked-differently", text).of_question(id));
        }
    }
    cautions
}

fn of_rules(findings: &Findings) -> Vec<Caution> {
    let first = first_reading(findings);
    let mut cautions = Vec::new();
    for question in &findings.plan.questions {
        let Some(rule) = &question.rule else { continue };
        let caution = match (rule.agreed, first) {
            (None, _) => Some(Caution::new(
                "rule-without-date",
                "The rule states no date on which it was agreed: it is not shown to be older than the readings.",
            )),
            (Some(agreed), Some(first)) if agreed >= first => Some(Caution::new(
                "rule-after-readings",
                format!(
                    "The rule was agreed on {agreed}, but the first reading of the period is of {first}."
                ),
            )),
            _ => None,
        };
        cautions.extend(caution.map(|caution| caution.of_question(&question.id)));
    }
    cautions
}

fn first_reading(findings: &Findings) -> Option<Date> {
    let period = &findings.plan.review.period;
    findings.data.series.iter().filter_map(|series| series.period(period)?.facts.first_date).min()
}

/// A change of method or instrument since the earlier periods that make the prior.
fn of_events(findings: &Findings) -> Vec<Caution> {
    let plan = &findings.plan;
    let from_history =
        findings.series.iter().any(|series| series.prior_from != "stated" && series.prior_from != "flat");
    plan.events
        .iter()
        .filter(|event| from_history && matches!(event.kind.as_deref(), Some("method" | "instrument")))
        .map(|event| {
            let text = format!(
                "On {}: {}. Readings before and after may not be comparable; the column of the readings alone does not rest on earlier periods.",
                event.date, event.what
            );
            let caution = Caution::new("method-changed", text);
            match &event.series {
                Some(series) => caution.of_series(series),
                None => caution,
            }
        })
        .collect()
}

fn of_series(findings: &Findings, series: &SeriesFindings) -> Vec<Caution> {
    let mut cautions = of_data(findings, series);
    cautions.extend(of_influence(findings, series));
    cautions.extend(of_checks(series));
    cautions.extend(marks_beyond_limits(findings, series));
    cautions.extend(limits_far_off(findings, series));
    for answer in &series.answers {
        cautions.extend(of_answer(findings, answer));
    }
    cautions.into_iter().map(|caution| caution.of_series(&series.name)).collect()
}

fn of_data(findings: &Findings, series: &SeriesFindings) -> Vec<Caution> {
    let plan = &findings.plan;
    let mut cautions = Vec::new();
    if series.without_readings {
        cautions.push(Caution::new(
            "no-readings",
            format!(
                "There is no reading of {}: all answers rest on the prior alone, and no verdict on the period is given.",
                plan.review.period
            ),
        ));
        return cautions;
    }
    let data = findings.data.series.iter().find(|data| data.name == series.name);
    let Some(facts) = data.and_then(|data| data.period(&plan.review.period)).map(|period| &period.facts)
    else {
        return cautions;
    };
    let planned = planned(plan, &series.name);
    if let Some(planned) = planned
        && facts.n < planned
    {
        cautions.push(Caution::new(
            "fewer-than-planned",
            format!(
                "{} of {planned} planned readings were used; missing ones are seldom missing by chance.",
                facts.n
            ),
        ));
    }
    let marked = facts.marked_below + facts.marked_above;
    let share = |part: u64, whole: u64| part as f64 / whole.max(1) as f64;
    if share(facts.excluded, facts.n + facts.excluded) > MANY_EXCLUDED {
        cautions.push(Caution::new(
            "many-excluded",
            format!(
                "{} of {} readings are excluded: see the answers with the exclusions restored.",
                facts.excluded,
                facts.n + facts.excluded
            ),
        ));
    }
    if share(marked, facts.n) > MOST_MARKED {
        cautions.push(Caution::new(
            "most-readings-marked",
            format!("{marked} of {} readings are known only to lie below or above a limit: the level rests on the assumed shape beyond it and should not be quoted without it.", facts.n),
        ));
    } else if share(marked, facts.n) > MANY_MARKED {
        cautions.push(Caution::new(
            "many-readings-marked",
            format!("{marked} of {} readings are known only to lie below or above a limit; the level depends on the assumed shape beyond it.", facts.n),
        ));
    }
    cautions
}

/// The readings planned for one series of the period under review.
pub fn planned(plan: &Plan, series: &str) -> Option<u64> {
    plan.series.get(series).and_then(|own| own.planned).or_else(|| {
        plan.sources.iter().find_map(|source| match &source.what {
            crate::plan::SourceKind::Readings { planned, .. } => *planned,
            crate::plan::SourceKind::Summaries(_) => None,
        })
    })
}

fn of_influence(findings: &Findings, series: &SeriesFindings) -> Option<Caution> {
    let data = findings.data.series.iter().find(|data| data.name == series.name)?;
    let n = data.period(&findings.plan.review.period)?.facts.n;
    let worth = series.influence.prior_readings.as_ref().ok()?;
    (*worth > n as f64).then(|| {
        Caution::new(
            "prior-outweighs-readings",
            format!(
                "The prior carries the weight of {worth:.1} readings against {n} of this period. If conditions changed, use the column of the readings alone."
            ),
        )
    })
}

/// Readings known only to lie below a value that is itself beyond a limit cannot tell on which side they lie.
fn marks_beyond_limits(findings: &Findings, series: &SeriesFindings) -> Vec<Caution> {
    let plan = &findings.plan;
    let data = findings.data.series.iter().find(|data| data.name == series.name);
    let Some(period) = data.and_then(|data| data.period(&plan.review.period)) else { return Vec::new() };
    let marked: Vec<f64> = period
        .readings
        .iter()
        .filter(|row| row.fate == Fate::Used && row.mark == Mark::Below)
        .filter_map(|row| row.value)
        .collect();
    let of_limit = |limit: &Limit| {
        let upper = plan.bounds(&limit.name, &series.name)?.ends().into_iter().next_back()?;
        let beyond = marked.iter().filter(|value| **value > upper).count();
        (beyond > 0).then(|| {
            Caution::new(
                "mark-beyond-limit",
                format!(
                    "{beyond} of the readings are known only to lie below a value that is itself above the limit \"{}\": they cannot show that it was kept.",
                    limit.name
                ),
            )
        })
    };
    plan.limits.iter().filter_map(of_limit).collect()
}

/// A limit more than 8 standard deviations of a reading away from all readings: the answer is trivial, or a unit
/// is wrong.
fn limits_far_off(findings: &Findings, series: &SeriesFindings) -> Vec<Caution> {
    let plan = &findings.plan;
    let data = findings.data.series.iter().find(|data| data.name == series.name);
    let facts = data.and_then(|data| data.period(&plan.review.period)).map(|period| &period.facts);
    let Some((smallest, largest, sd)) =
        facts.and_then(|facts| Some((facts.smallest?, facts.largest?, facts.sd?)))
    else {
        return Vec::new();
    };
    let reach = FAR_IN_SDS * sd;
    let far = |end: f64| end < smallest - reach || end > largest + reach;
    let caution = |limit: &&Limit| {
        let text = format!(
            "The limit \"{}\" lies more than {FAR_IN_SDS} standard deviations of a reading from all readings: what is asked of it is as good as certain, if its unit is that of the readings.",
            limit.name
        );
        Caution::new("limit-far-off", text)
    };
    let ends =
        |limit: &&Limit| plan.bounds(&limit.name, &series.name).map_or(Vec::new(), |bounds| bounds.ends());
    let is_far = |limit: &&Limit| sd > 0.0 && !ends(limit).is_empty() && ends(limit).into_iter().all(far);
    plan.limits.iter().filter(is_far).map(|limit| caution(&limit)).collect()
}

fn of_checks(series: &SeriesFindings) -> Vec<Caution> {
    series
        .checks
        .iter()
        .filter(|check| check.concern == Concern::Flag)
        .map(|check| {
            let text =
                format!("The check \"{}\" is flagged. {} {}", check.id, check.meaning, check.consequence);
            Caution::new("check-flagged", text.trim().to_string())
        })
        .collect()
}

fn of_answer(findings: &Findings, answer: &Answer) -> Vec<Caution> {
    let question = findings.plan.questions.iter().find(|question| question.id == answer.id);
    let Some(rule) = question.and_then(|question| question.rule.as_ref()) else { return Vec::new() };
    [rule::near_caution(rule, &answer.figures), rule::prior_alone_caution(rule, &answer.prior_only)]
        .into_iter()
        .flatten()
        .map(|caution| caution.of_question(&answer.id))
        .collect()
}
