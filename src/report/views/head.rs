//! The first page: what was asked, what was found, how far the prior drives it, and the cautions.

use super::answers::{agreed, question_words, rule_of, with_minus};
use super::compared::said_then;
use super::numbers::{self, NOTHING, Numbers, bounds_words, rule_words, verdict_cell};
use super::sensitivity::{changes, main_figure};
use super::series::{flagged, influence, numbers_of};
use super::table::{Column, TableView, bold, code, plain};
use crate::checks::Concern;
use crate::data::Facts;
use crate::findings::compared::Relation;
use crate::findings::{Answer, Findings, SeriesFindings};
use crate::plan::{AppliesTo, Plan, QuestionPlan};
use crate::questions::figures::Meaning;
use crate::questions::rule::Given;
use crate::report::text;
use minijinja::Value;
use serde::Serialize;
use std::collections::BTreeMap;

/// More series than this stand in the table of all series only.
const SERIES_ON_THE_FIRST_PAGE: usize = 16;
/// More names than this are counted instead.
const NAMES_LISTED: usize = 6;
/// Cautions printed in full; beyond, those of single series are counted by code.
const CAUTIONS_PRINTED: usize = 200;

#[derive(Debug, Serialize)]
pub struct SummaryView {
    pub lead: String,
    /// One series: questions with answers and verdicts.
    pub single: Option<TableView>,
    /// Several: questions, and what came out over the series.
    pub questions: Option<TableView>,
    /// Several: series down, ruled questions across.
    pub series: Option<TableView>,
    pub series_rest: Option<String>,
    pub influence: Vec<String>,
    pub sensitivity: String,
    pub cautions: Option<TableView>,
    pub not_decided: bool,
}

pub fn summary(findings: &Findings) -> SummaryView {
    let one = match findings.series.as_slice() {
        [only] => Some(only),
        _ => None,
    };
    let (series, series_rest) = if one.is_some() { (None, None) } else { first_page_series(findings) };
    SummaryView {
        lead: lead(findings),
        single: one.map(|series| single(findings, series)),
        questions: if one.is_some() { None } else { questions_over_series(findings) },
        series,
        series_rest,
        influence: influences(findings),
        sensitivity: sensitivity_words(findings),
        cautions: cautions_by_code(findings),
        not_decided: findings
            .series
            .iter()
            .any(|series| series.answers.iter().any(|answer| undecided(answer, &findings.plan))),
    }
}

fn undecided(answer: &Answer, plan: &Plan) -> bool {
    let Some(rule) = rule_of(plan, &answer.id) else { return false };
    let last = rule.verdicts.last().map(|last| last.say.as_str());
    rule.verdicts.len() > 2 && answer.verdict.as_ref().is_some_and(|given| given.say.as_deref() == last)
}

fn lead(findings: &Findings) -> String {
    let plan = &findings.plan;
    let name = &plan.quantity.name;
    let period = &plan.review.period;
    let without: Vec<&str> = findings
        .series
        .iter()
        .filter(|series| series.without_readings)
        .map(|series| series.name.as_str())
        .collect();
    let what = match findings.series.as_slice() {
        [only] if super::series::title(only) == *name => {
            format!("This is the review of {name} for {period}.")
        }
        [only] => format!("This is the review of {name}, {}, for {period}.", super::series::title(only)),
        all => {
            format!("This is the review of {name} for {period}, {} series.", text::count(all.len() as u64))
        }
    };
    let rest = match without.as_slice() {
        [] => String::new(),
        [one] => format!(" {one} has no readings of {period}; its answers rest on what was known before."),
        many if many.len() <= NAMES_LISTED => {
            format!(
                " {} have no readings of {period}; their answers rest on what was known before.",
                many.join(", ")
            )
        }
        many => format!(
            " {} series have no readings of {period}; their answers rest on what was known before.",
            many.len()
        ),
    };
    format!("{what}{rest}")
}

fn single(findings: &Findings, series: &SeriesFindings) -> TableView {
    let plan = &findings.plan;
    let numbers = numbers_of(findings, series);
    let ruled = series.answers.iter().any(|answer| answer.verdict.is_some());
    let mut columns = vec![("question", Column::Head), ("answer", Column::Text)];
    let before = findings.compared.iter().find(|other| other.relation == Relation::Previous);
    let then = before.and_then(|other| other.series.first()).filter(|then| !then.changes.is_empty());
    let heading = before.map_or_else(String::new, |other| format!("in the review of {}", other.period));
    if then.is_some() {
        columns.push((heading.as_str(), Column::Text));
    }
    if ruled {
        columns.extend([("verdict", Column::Text), ("by the rule", Column::Text)]);
    }
    let mut table = TableView::new("The questions and their answers", &columns);
    for answer in &series.answers {
        let rule = rule_of(plan, &answer.id);
        let mut cells =
            vec![plain(question_words(answer.say.as_deref(), &answer.words)), plain(said(answer, &numbers))];
        if let Some(then) = then {
            let changed = then.changes.iter().find(|changed| changed.id == answer.id);
            cells.push(plain(
                changed.map_or_else(|| NOTHING.to_string(), |changed| said_then(changed, answer, &numbers)),
            ));
        }
        if ruled {
            cells.push(verdict_cell(answer.verdict.as_ref(), rule));
            cells.push(plain(
                rule.map_or_else(|| NOTHING.to_string(), |rule| rule_words(rule, plan, Some(&series.name))),
            ));
        }
        table.row(cells);
    }
    for across in &findings.across {
        let found = super::answers::across(across, plan);
        let mut cells = vec![plain(&found.question), plain("see “Answers across series”")];
        if then.is_some() {
            cells.push(plain(NOTHING));
        }
        if ruled {
            cells.push(found.verdict.clone().unwrap_or_else(|| plain(NOTHING)));
            cells.push(plain(NOTHING));
        }
        table.row(cells);
    }
    table
}

/// What a question asks about, in words that hold for all series: where they differ (limits of a series' own),
/// those of the first and a word on the others.
fn words_over_series(findings: &Findings, question: &QuestionPlan) -> Option<String> {
    let mut own = findings
        .series
        .iter()
        .filter_map(|series| series.answers.iter().find(|answer| answer.id == question.id))
        .map(|answer| answer.words.as_str());
    let Some(first) = own.next() else {
        return findings
            .across
            .iter()
            .find(|across| across.id == question.id)
            .map(|across| across.words.clone());
    };
    let others =
        if own.any(|words| words != first) { "; for the other series as on their pages" } else { "" };
    Some(format!("{first}{others}"))
}

/// The answer in words, or why there is none.
fn said(answer: &Answer, numbers: &Numbers<'_>) -> String {
    let line = numbers.long_line(&answer.figures, rule_of(numbers.plan, &answer.id));
    if line == NOTHING { format!("none: {}", numbers::reasons(&answer.figures).join("; ")) } else { line }
}

/// Questions down: the reader's words, the rule, and what came out over the series.
fn questions_over_series(findings: &Findings) -> Option<TableView> {
    let plan = &findings.plan;
    let mut table = TableView::new(
        "The questions, and what came out over all series",
        &[
            ("question", Column::Head),
            ("name", Column::Text),
            ("in short", Column::Text),
            ("rule", Column::Text),
        ],
    );
    for question in &plan.questions {
        let across = findings.across.iter().find(|across| across.id == question.id);
        let words = words_over_series(findings, question).unwrap_or_else(|| question.ask.clone());
        let short = match across {
            Some(_) => "see “Answers across series”".to_string(),
            None if question.rule.is_some() => verdicts_in_short(findings, question),
            None => range_in_short(findings, question),
        };
        table.row(vec![
            plain(question_words(question.say.as_deref(), &words)),
            plain(&question.id),
            plain(short),
            plain(
                question
                    .rule
                    .as_ref()
                    .map_or_else(|| NOTHING.to_string(), |rule| rule_words(rule, plan, None)),
            ),
        ]);
    }
    table.some()
}

fn answers_to<'f>(findings: &'f Findings, question: &QuestionPlan) -> Vec<(&'f SeriesFindings, &'f Answer)> {
    let of = |series: &'f SeriesFindings| {
        let answer = series.answers.iter().find(|answer| answer.id == question.id)?;
        Some((series, answer))
    };
    findings.series.iter().filter_map(of).collect()
}

/// "above: QM-04; not above: 4 of 7; …" in the order of the rule.
fn verdicts_in_short(findings: &Findings, question: &QuestionPlan) -> String {
    let answers = answers_to(findings, question);
    let mut order: Vec<String> = Vec::new();
    for verdict in question.rule.iter().flat_map(|rule| &rule.verdicts) {
        if !order.contains(&verdict.say) {
            order.push(verdict.say.clone());
        }
    }
    let say = |answer: &Answer| answer.verdict.as_ref().and_then(|given| given.say.clone());
    let mut parts = Vec::new();
    for verdict in order.iter().map(Some).chain([None]) {
        let names: Vec<&str> = answers
            .iter()
            .filter(|(_, answer)| say(answer).as_ref() == verdict)
            .map(|(series, _)| series.name.as_str())
            .collect();
        let words = verdict.map_or("no verdict", String::as_str);
        match names.len() {
            0 => {}
            few if few <= NAMES_LISTED => parts.push(format!("{words}: {}", names.join(", "))),
            many => parts.push(format!(
                "{words}: {} of {}",
                text::count(many as u64),
                text::count(answers.len() as u64)
            )),
        }
    }
    if parts.is_empty() { NOTHING.to_string() } else { parts.join("; ") }
}

/// "from 0.003 (QM-03) to 0.970 (QM-04)".
fn range_in_short(findings: &Findings, question: &QuestionPlan) -> String {
    let mut figures: Vec<(&SeriesFindings, f64, Meaning, Option<f64>)> = Vec::new();
    for (series, answer) in answers_to(findings, question) {
        if let Some((figure, meaning)) = main_figure(&answer.figures).filter(|(figure, _)| figure.is_finite())
        {
            let uncertainty = numbers::Around::of(&answer.figures).uncertainty();
            figures.push((series, figure, meaning, uncertainty));
        }
    }
    let smallest = figures.iter().copied_by(|a, b| b.1 < a.1);
    let largest = figures.iter().copied_by(|a, b| b.1 > a.1);
    let said = |(series, figure, meaning, uncertainty): (&SeriesFindings, f64, Meaning, Option<f64>)| {
        let numbers = Numbers::of_series(&findings.plan, &series.name, None);
        format!("{} ({})", numbers.number(figure, meaning, uncertainty), series.name)
    };
    match (smallest, largest) {
        (Some(smallest), Some(largest)) if smallest.1 < largest.1 => {
            format!("{}from {} to {}", label(smallest.2), said(smallest), said(largest))
        }
        (Some(all), _) => {
            let numbers = Numbers::of_series(&findings.plan, &all.0.name, None);
            format!("{}{} for every series", label(all.2), numbers.number(all.1, all.2, all.3))
        }
        _ => NOTHING.to_string(),
    }
}

/// What a number without a unit is.
fn label(meaning: Meaning) -> &'static str {
    if meaning == Meaning::Chance { "probability " } else { "" }
}

/// The first item that none other beats.
trait CopiedBy<T: Copy> {
    fn copied_by(self, beats: impl Fn(T, T) -> bool) -> Option<T>;
}

impl<'a, T: Copy + 'a, I: Iterator<Item = &'a T>> CopiedBy<T> for I {
    fn copied_by(self, beats: impl Fn(T, T) -> bool) -> Option<T> {
        self.copied().reduce(|best, next| if beats(best, next) { next } else { best })
    }
}

/// The columns of a table of series: the level, then each question with a rule.
fn series_table<'f>(
    findings: &'f Findings,
    shown: impl Iterator<Item = &'f SeriesFindings>,
    caption: &str,
    whole: bool,
) -> TableView {
    let plan = &findings.plan;
    let unit = super::data::in_brackets(&numbers::unit(plan));
    let level = format!("level of {}, 95 % interval{unit}", plan.review.period);
    let ruled: Vec<&QuestionPlan> = plan
        .questions
        .iter()
        .filter(|question| question.rule.is_some() && !answers_to(findings, question).is_empty())
        .collect();
    let mut columns =
        vec![("series", Column::Head), ("readings", Column::Number), (level.as_str(), Column::Number)];
    columns.extend(ruled.iter().map(|question| (question.id.as_str(), Column::Text)));
    columns.push(("flagged checks", Column::Text));
    if whole {
        columns.extend([("verdicts that change", Column::Text), ("prior’s share", Column::Number)]);
    }
    let mut table = TableView::new(caption, &columns);
    for series in shown {
        let numbers = numbers_of(findings, series);
        let facts = super::data::period_of(&findings.data, &series.name, plan).map(|period| &period.facts);
        let mut cells = vec![
            plain(super::series::title(series)),
            plain(text::count(facts.map_or(0, |facts: &Facts| facts.n))),
        ];
        cells.push(plain(level_in_short(series, &numbers)));
        for question in &ruled {
            let answer = series.answers.iter().find(|answer| answer.id == question.id);
            cells.push(
                answer
                    .map_or_else(|| plain(NOTHING), |answer| verdict_and_figure(answer, question, &numbers)),
            );
        }
        let flags: Vec<&str> = series
            .checks
            .iter()
            .filter(|check| check.concern == Concern::Flag)
            .map(|check| check.id)
            .collect();
        cells.push(plain(if flags.is_empty() { "none".to_string() } else { flags.join(", ") }));
        if whole {
            let mut changed: Vec<String> = changes(series).into_iter().map(|(_, id, _)| id).collect();
            changed.sort();
            changed.dedup();
            cells.push(plain(if changed.is_empty() { "none".to_string() } else { changed.join(", ") }));
            let weight = series.influence.prior_weight.as_ref();
            cells.push(plain(weight.map_or_else(|_| NOTHING.to_string(), |weight| share_text(*weight))));
        }
        table.row(cells);
    }
    table
}

/// A share between 0 and 1 in per cent; the ends themselves are words.
fn share_text(weight: f64) -> String {
    if weight >= 1.0 {
        "all".to_string()
    } else if weight <= 0.0 {
        "none".to_string()
    } else {
        text::percent(weight)
    }
}

fn level_in_short(series: &SeriesFindings, numbers: &Numbers<'_>) -> String {
    let law = series.posterior.as_ref().ok().and_then(|both| both.level(crate::posterior::When::This).ok());
    law.and_then(|law| numbers.estimate_and_ends(&law).ok()).unwrap_or_else(|| NOTHING.to_string())
}

fn verdict_and_figure(answer: &Answer, question: &QuestionPlan, numbers: &Numbers<'_>) -> Value {
    let rule = question.rule.as_ref();
    let verdict = verdict_cell(answer.verdict.as_ref(), rule);
    let line = numbers.line(&answer.figures, rule);
    let held = if answer.verdict.as_ref().is_some_and(Given::is_held_back) { ", held back" } else { "" };
    Value::from_safe_string(format!("{verdict}{held} ({})", crate::report::escape::markdown(&line)))
}

fn first_page_series(findings: &Findings) -> (Option<TableView>, Option<String>) {
    let all = findings.series.len();
    let caption = "The series, with the verdict of each question that has a rule and in brackets its figure";
    if all <= SERIES_ON_THE_FIRST_PAGE {
        return (series_table(findings, findings.series.iter(), caption, false).some(), None);
    }
    let marked: Vec<&SeriesFindings> = findings.series.iter().filter(|series| flagged(series)).collect();
    let shown = marked.iter().take(SERIES_ON_THE_FIRST_PAGE).copied();
    let table = series_table(findings, shown, "Series that call for attention", false);
    let rest = format!(
        "{} of {} series call for attention: a verdict that fails or is held back, a flagged check, a verdict that changes under another assumption, or no readings. {}All series are in section 6.",
        text::count(marked.len() as u64),
        text::count(all as u64),
        if marked.len() > SERIES_ON_THE_FIRST_PAGE {
            format!("The first {SERIES_ON_THE_FIRST_PAGE} of them are shown here. ")
        } else {
            String::new()
        }
    );
    (table.some(), Some(rest))
}

/// All series, one row each.
pub fn all_series(findings: &Findings) -> Option<TableView> {
    series_table(findings, findings.series.iter(), "All series under review", true).some()
}

fn influences(findings: &Findings) -> Vec<String> {
    if let [only] = findings.series.as_slice() {
        let facts = super::data::period_of(&findings.data, &only.name, &findings.plan);
        return influence(only, facts.map_or(0, |period| period.facts.n)).into_iter().collect();
    }
    let weights: Vec<(&str, f64)> = findings
        .series
        .iter()
        .filter(|series| !series.without_readings)
        .filter_map(|series| Some((series.name.as_str(), *series.influence.prior_weight.as_ref().ok()?)))
        .collect();
    let least = weights.iter().copied_by(|a, b| b.1 < a.1);
    let most = weights.iter().copied_by(|a, b| b.1 > a.1);
    match (least, most) {
        (Some(least), Some(most)) if least.1 < most.1 => vec![format!(
            "The prior makes up between {} ({}) and {} ({}) of a level’s estimate; the rest comes from the readings of {}.",
            share_text(least.1),
            least.0,
            share_text(most.1),
            most.0,
            findings.plan.review.period
        )],
        (Some(all), _) => {
            vec![format!("The prior makes up {} of every level’s estimate.", share_text(all.1))]
        }
        _ => Vec::new(),
    }
}

fn sensitivity_words(findings: &Findings) -> String {
    if !findings.series.iter().any(|series| series.answers.iter().any(|answer| answer.verdict.is_some())) {
        return "No question has a rule, so no verdict is given.".to_string();
    }
    if findings.series.iter().all(|series| series.sensitivity.is_empty()) {
        return "No alternative assumption applies.".to_string();
    }
    let changed: Vec<String> = findings
        .series
        .iter()
        .filter_map(|series| {
            let mut ids: Vec<String> = changes(series).into_iter().map(|(_, id, _)| id).collect();
            ids.sort();
            ids.dedup();
            (!ids.is_empty()).then(|| format!("{} ({})", series.name, ids.join(", ")))
        })
        .collect();
    match changed.len() {
        0 => "No verdict changes under any of the other assumptions that were tried.".to_string(),
        few if few <= 2 * NAMES_LISTED => format!(
            "Some verdicts change under at least one of the other assumptions that were tried: {}.",
            changed.join(", ")
        ),
        many => format!(
            "Verdicts of {} series change under at least one of the other assumptions that were tried; section 6 names them.",
            text::count(many as u64)
        ),
    }
}

/// One row a code: what it is about, and of what.
fn cautions_by_code(findings: &Findings) -> Option<TableView> {
    let mut by_code: BTreeMap<&str, Vec<String>> = BTreeMap::new();
    for caution in &findings.cautions {
        let of = by_code.entry(caution.code).or_default();
        let name = match (&caution.series, &caution.question) {
            (Some(series), _) if findings.series.len() > 1 => series.clone(),
            (_, Some(question)) => question.clone(),
            _ => continue,
        };
        if !of.contains(&name) {
            of.push(name);
        }
    }
    let mut table = TableView::new(
        "Cautions; their words are in section 7",
        &[("code", Column::Head), ("what it is about", Column::Text), ("concerns", Column::Text)],
    );
    for (known, names) in by_code {
        let concerns = match names.len() {
            0 => "the review".to_string(),
            few if few <= NAMES_LISTED => names.join(", "),
            many => format!("{} of them", text::count(many as u64)),
        };
        table.row(vec![code(known), plain(super::fixed::meaning(known)), plain(concerns)]);
    }
    table.some()
}

/// The cautions in full: of one series, or of the whole review.
pub fn cautions_of(findings: &Findings, series: Option<&str>) -> Option<TableView> {
    let caption = match series {
        Some(series) => format!("Cautions that concern {series}"),
        None => "All cautions".to_string(),
    };
    let mut columns = vec![("code", Column::Head)];
    if series.is_none() && findings.series.len() > 1 {
        columns.push(("series", Column::Text));
    }
    columns.extend([("question", Column::Text), ("caution", Column::Text)]);
    let mut table = TableView::new(caption, &columns);
    let all =
        findings.cautions.iter().filter(|caution| series.is_none() || caution.series.as_deref() == series);
    for caution in all.take(if series.is_none() { CAUTIONS_PRINTED } else { usize::MAX }) {
        let mut cells = vec![code(caution.code)];
        if series.is_none() && findings.series.len() > 1 {
            cells.push(plain(caution.series.as_deref().unwrap_or("all")));
        }
        cells.push(plain(caution.question.as_deref().unwrap_or(NOTHING)));
        cells.push(plain(&caution.text));
        table.row(cells);
    }
    table.some()
}

/// How many cautions are beyond those printed.
pub fn cautions_rest(findings: &Findings) -> Option<String> {
    let rest = findings.cautions.len().saturating_sub(CAUTIONS_PRINTED);
    (rest > 0).then(|| format!("{} more are in answers.json.", text::count(rest as u64)))
}

/// The limits with their basis.
pub fn limits(plan: &Plan) -> Option<TableView> {
    let mut table = TableView::new(
        "Limits",
        &[
            ("limit", Column::Head),
            ("value", Column::Number),
            ("applies to", Column::Text),
            ("basis", Column::Text),
        ],
    );
    for limit in &plan.limits {
        let applies = match limit.applies_to {
            AppliesTo::EachReading => "each reading",
            AppliesTo::Level => "the level",
            AppliesTo::Percentile => "a percentile of the readings",
        };
        let own = plan.series.values().filter(|own| own.limits.contains_key(&limit.name)).count();
        let mut value = bounds_words(limit.bounds, plan, &limit.name);
        if own > 0 {
            value.push_str(&format!("; {own} series have their own"));
        }
        table.row(vec![plain(&limit.name), plain(value), plain(applies), plain(&limit.basis)]);
    }
    table.some()
}

/// The fixed questions with what they ask about and by which rule.
pub fn questions(findings: &Findings) -> Option<TableView> {
    let plan = &findings.plan;
    let mut table = TableView::new(
        "Questions, what exactly each asks about, and its rule",
        &[
            ("name", Column::Head),
            ("question", Column::Text),
            ("asked about", Column::Text),
            ("rule", Column::Text),
            ("agreed", Column::Text),
            ("asked of", Column::Text),
        ],
    );
    for question in &plan.questions {
        let words = words_over_series(findings, question).unwrap_or_else(|| question.ask.clone());
        let rule = question.rule.as_ref();
        let mut rule_text = rule.map_or_else(|| NOTHING.to_string(), |rule| rule_words(rule, plan, None));
        if let Some(rule) = rule.filter(|rule| !rule.hold_on.is_empty()) {
            rule_text.push_str(&format!(
                "; the last verdict is given instead while a check is flagged: {}",
                rule.hold_on.join(", ")
            ));
        }
        table.row(vec![
            plain(&question.id),
            plain(question.say.as_deref().unwrap_or(NOTHING)),
            plain(with_minus(&words)),
            plain(rule_text),
            plain(rule.map_or_else(|| NOTHING.to_string(), agreed)),
            plain(question.only.as_ref().map_or_else(|| "all series".to_string(), |only| only.join(", "))),
        ]);
    }
    table.some()
}

/// Who signs for what.
pub fn sign_off(plan: &Plan) -> TableView {
    let mut table = TableView::new(
        "Sign-off",
        &[
            ("role", Column::Head),
            ("name", Column::Text),
            ("meaning of the signature", Column::Text),
            ("date", Column::Text),
            ("signature", Column::Text),
        ],
    );
    for line in &plan.review.sign_off {
        table.row(vec![
            plain(&line.role),
            plain(line.name.as_deref().unwrap_or(" ")),
            plain(line.meaning.as_deref().unwrap_or(" ")),
            plain(line.on.map_or_else(String::new, |on| on.to_string())),
            plain(""),
        ]);
    }
    if plan.review.sign_off.is_empty() {
        for (role, meaning) in [
            ("Prepared by", "has put the data and the spec together"),
            ("Checked by", "has checked data, limits and rules against the records"),
            ("Approved by", "releases the report"),
        ] {
            table.row(vec![plain(role), plain(""), plain(meaning), plain(""), plain("")]);
        }
    }
    table
}

/// Actions, open and closed.
pub fn actions(plan: &Plan) -> Option<TableView> {
    let mut table = TableView::new(
        "Actions",
        &[
            ("action", Column::Head),
            ("owner", Column::Text),
            ("due", Column::Text),
            ("state", Column::Text),
            ("set by", Column::Text),
        ],
    );
    for action in &plan.actions {
        table.row(vec![
            plain(&action.what),
            plain(action.owner.as_deref().unwrap_or(NOTHING)),
            plain(action.due.map_or_else(|| NOTHING.to_string(), |due| due.to_string())),
            if action.state == "open" { bold("open") } else { plain(&action.state) },
            plain(action.set_by.as_deref().unwrap_or("this review")),
        ]);
    }
    table.some()
}
