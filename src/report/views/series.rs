//! The pages of one series.

use super::answers::{self, AnswerView};
use super::drawings::{self, Drawings, FigureView};
use super::head;
use super::numbers::{NOTHING, Numbers};
use super::sensitivity::{self, SensitivityView};
use super::table::{Column, TableView, plain};
use super::{data, model};
use crate::checks::Concern;
use crate::data::evidence::Evidence;
use crate::findings::{Findings, SeriesFindings, cautions};
use crate::posterior::When;
use crate::quantity::Scale;
use crate::report::text;
use minijinja::Value;
use serde::Serialize;

#[derive(Debug, Serialize)]
pub struct SeriesView {
    pub name: String,
    /// Name and label.
    pub title: String,
    /// Comma and title behind headings, where there are several series.
    pub suffix: String,
    pub period: String,
    pub without_readings: bool,
    pub planned: Option<String>,
    pub used: String,
    pub months: Option<String>,
    pub periods: Option<TableView>,
    pub periods_figure: Option<FigureView>,
    pub readings: Option<TableView>,
    pub readings_rest: Option<String>,
    pub prior_from: String,
    pub prior_notes: Vec<String>,
    pub spread: Option<String>,
    pub influence: Option<String>,
    pub equations: Value,
    pub parameters: TableView,
    pub level_figure: Option<FigureView>,
    pub results: TableView,
    pub results_missing: Vec<String>,
    pub answers_table: TableView,
    pub answers: Vec<AnswerView>,
    pub known_sd: Option<String>,
    pub checks: Option<TableView>,
    pub checks_words: String,
    /// Checks that could not be made, with the reason.
    pub checks_not_made: Vec<String>,
    pub readings_figure: Option<FigureView>,
    pub quantiles_figure: Option<FigureView>,
    pub sensitivity: Option<SensitivityView>,
    pub sensitivity_figure: Option<FigureView>,
    pub predictions: Option<TableView>,
    pub cautions: Option<TableView>,
    pub remarks: Vec<&'static str>,
}

/// The numbers of one series: the sd of its level decides the usual place.
pub fn numbers_of<'f>(findings: &'f Findings, series: &SeriesFindings) -> Numbers<'f> {
    let plan = &findings.plan;
    let sd = series.posterior.as_ref().ok().and_then(|both| {
        let law = both.level(When::This).ok()?;
        match plan.quantity.scale {
            Scale::Linear => law.sd().ok(),
            Scale::Log => {
                let (lower, upper) = law.central(0.95).ok()?;
                let [lower, upper] = [lower, upper].map(crate::math::fm::exp);
                Some(0.25 * (upper - lower))
            }
        }
    });
    Numbers::of_series(plan, &series.name, sd)
}

/// Whether `detail = "flagged"` prints the pages of this series.
pub fn flagged(series: &SeriesFindings) -> bool {
    let rest_undone = |answer: &crate::findings::Answer| {
        answer.verdict.as_ref().is_some_and(|given| given.fail || given.why.is_some())
    };
    series.without_readings
        || series.checks.iter().any(|check| check.concern == Concern::Flag)
        || series.answers.iter().any(rest_undone)
        || !sensitivity::changes(series).is_empty()
}

pub fn title(series: &SeriesFindings) -> String {
    match &series.label {
        Some(label) if label.starts_with(&series.name) => label.clone(),
        Some(label) => format!("{} ({label})", series.name),
        None => series.name.clone(),
    }
}

pub fn view(findings: &Findings, series: &SeriesFindings, slug: &str, drawings: &mut Drawings) -> SeriesView {
    let (plan, all) = (&findings.plan, &findings.data);
    let numbers = numbers_of(findings, series);
    let of_series = all.series.iter().find(|data| data.name == series.name);
    let period = of_series.and_then(|data| data.period(&plan.review.period));
    let facts = period.map(|period| &period.facts);
    let (readings, readings_rest) = match period {
        Some(period) => data::readings(period, all, plan),
        None => (None, None),
    };
    let model = series.posterior.as_ref().or(series.prior.as_ref()).ok().map(|posterior| &posterior.model);
    let mut answers: Vec<AnswerView> =
        series.answers.iter().map(|answer| answers::view(answer, series, &numbers)).collect();
    for (number, (view, answer)) in answers.iter_mut().zip(&series.answers).enumerate() {
        let name = format!("{slug}-rule-{}", number + 1);
        view.rule_figure = drawings::rule(drawings, series, answer, plan, &name);
    }
    let (results, results_missing) = model::results(series, &numbers);
    let evidence = series.posterior.as_ref().map_or(&Evidence::Nothing, |posterior| &posterior.readings);
    let equations = model.map(|model| model::equations(model, evidence)).unwrap_or_default();
    let view = SeriesView {
        name: series.name.clone(),
        title: title(series),
        suffix: if findings.series.len() > 1 { format!(", {}", title(series)) } else { String::new() },
        period: plan.review.period.to_string(),
        without_readings: series.without_readings,
        planned: cautions::planned(plan, &series.name).map(text::count),
        used: text::count(facts.map_or(0, |facts| facts.n)),
        months: facts.and_then(data::months),
        periods: of_series.and_then(|data| data::periods(data, plan, &numbers, &all.periods).some()),
        periods_figure: of_series
            .and_then(|data| drawings::periods(drawings, series, data, all, &numbers, slug)),
        readings,
        readings_rest,
        prior_from: series.prior_from.clone(),
        prior_notes: series.prior_notes.clone(),
        spread: spread(series, &numbers),
        influence: influence(series, facts.map_or(0, |facts| facts.n)),
        equations: Value::from_safe_string(crate::report::escape::code_block(&equations.join("\n"))),
        parameters: model::parameters(series, model),
        level_figure: drawings::level(drawings, series, &numbers, slug),
        results,
        results_missing,
        answers_table: answers::table(&answers),
        answers,
        known_sd: model.and_then(|model| data::known_sd_caution(facts?, model::known_sd(model), &numbers)),
        checks: checks(series),
        checks_words: checks_words(series),
        checks_not_made: series
            .checks
            .iter()
            .filter_map(|check| Some(format!("{}: {}", check.id, check.why.as_ref()?)))
            .collect(),
        readings_figure: period
            .and_then(|period| drawings::foretold(drawings, series, period, &numbers, slug)),
        quantiles_figure: period
            .and_then(|period| drawings::quantiles(drawings, &series.name, period, &numbers, slug)),
        sensitivity: sensitivity::view(series, &numbers),
        sensitivity_figure: drawings::sensitivity(drawings, series, &numbers, slug),
        predictions: predictions(series, &numbers),
        cautions: head::cautions_of(findings, Some(&series.name)),
        remarks: Vec::new(),
    };
    SeriesView { remarks: numbers.remarks(), ..view }
}

/// How far the means of the earlier periods differ, plainly and corrected.
fn spread(series: &SeriesFindings, numbers: &Numbers<'_>) -> Option<String> {
    let spread = series.spread_of_means.as_ref()?;
    let unit = if numbers.scale == Scale::Linear { numbers.unit.as_str() } else { " of natural logarithms" };
    let said = |sd: f64| format!("{}{unit}", text::significant(sd, 2));
    let periods = spread.periods;
    let told = match (&spread.naive_sd, &spread.corrected_sd) {
        (Err(absent), _) => {
            return Some(format!(
                "How far the means of the {periods} earlier periods differ is not told by one figure: {}.",
                absent.reason
            ));
        }
        (Ok(naive), Ok(corrected)) => format!(
            "have standard deviation {}; without the part that is scatter of readings, {} is left for the differences between periods",
            said(*naive),
            said(*corrected)
        ),
        (Ok(naive), Err(absent)) => format!("have standard deviation {}; {}", said(*naive), absent.reason),
    };
    Some(format!(
        "The means of the {periods} earlier periods {told}. This is for orientation; how the between sd enters the prior is said under “Parameters”."
    ))
}

/// How much of the level is prior, in one sentence.
pub fn influence(series: &SeriesFindings, n: u64) -> Option<String> {
    if series.without_readings {
        return Some("There are no readings: every answer rests on the prior alone.".to_string());
    }
    if series.prior_from == "flat" {
        return Some("The prior is flat: the readings speak alone.".to_string());
    }
    let weight = series.influence.prior_weight.as_ref().ok()?;
    let of_level = format!("The prior makes up {} of the level’s estimate", text::percent(*weight));
    Some(match &series.influence.prior_readings {
        Ok(worth) => format!(
            "{of_level}; it is worth {} readings beside the {} of this period.",
            text::significant(*worth, 2),
            text::count(n)
        ),
        Err(_) => format!("{of_level}."),
    })
}

fn checks(series: &SeriesFindings) -> Option<TableView> {
    let mut table = TableView::new(
        "Checks of the assumptions, those without a finding too",
        &[
            ("check", Column::Head),
            ("statistic", Column::Text),
            ("under the assumption", Column::Text),
            ("p", Column::Number),
            ("finding", Column::Text),
            ("what it means", Column::Text),
            ("what follows", Column::Text),
        ],
    );
    for check in series.checks.iter().filter(|check| check.why.is_none()) {
        let statistic = check.statistic.map_or_else(
            || NOTHING.to_string(),
            |value| format!("{} = {}", check.statistic_name, text::significant(value, 4)),
        );
        table.row(vec![
            plain(check.id),
            plain(statistic),
            plain(if check.reference.is_empty() { NOTHING } else { check.reference.as_str() }),
            plain(check.p.map_or_else(|| NOTHING.to_string(), text::p_value)),
            match check.concern {
                Concern::Flag => super::table::bold("flag"),
                Concern::Remark => plain("remark"),
                Concern::None => plain("none"),
            },
            plain(answers::with_minus(&check.meaning)),
            plain(if check.concern == Concern::None { NOTHING } else { check.consequence.as_str() }),
        ]);
    }
    table.some()
}

fn checks_words(series: &SeriesFindings) -> String {
    let made = series.checks.iter().filter(|check| check.why.is_none());
    let count = made.clone().count();
    if count == 0 {
        return "No check was made.".to_string();
    }
    let names = |concern: Concern| -> Vec<&str> {
        made.clone().filter(|check| check.concern == concern).map(|check| check.id).collect()
    };
    let (flags, remarks) = (names(Concern::Flag), names(Concern::Remark));
    let said = |list: &[&str]| if list.is_empty() { "none".to_string() } else { list.join(", ") };
    format!("{count} checks were made. Flagged: {}. Remarks: {}.", said(&flags), said(&remarks))
}

/// Answers about what is still to come.
fn predictions(series: &SeriesFindings, numbers: &Numbers<'_>) -> Option<TableView> {
    let mut table = TableView::new(
        "Predictions made now, to be held against what comes",
        &[("about", Column::Head), ("prediction", Column::Text)],
    );
    for answer in &series.answers {
        let ahead = answer.settings.iter().any(|(key, value)| *key == "of_period" && value == "\"next\"");
        let reading = matches!(answer.ask.as_str(), "reading interval" | "reading chance" | "count beyond");
        if ahead || reading {
            let rule = answers::rule_of(numbers.plan, &answer.id);
            table.row(vec![
                plain(answers::question_words(None, &answer.words)),
                plain(numbers.long_line(&answer.figures, rule)),
            ]);
        }
    }
    table.some()
}
