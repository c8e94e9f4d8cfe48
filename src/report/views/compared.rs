//! This review beside another: answers then and now, and predictions held against what came.

use super::answers::question_words;
use super::numbers::{NOTHING, Numbers};
use super::series::{numbers_of, title};
use super::table::{Column, TableView, plain};
use crate::findings::compared::{Changed, Compared, FIELDS, Foretold, LimitThen, Prediction, Relation};
use crate::findings::{Answer, Findings, SeriesFindings};
use crate::questions::figures::{Figures, Item, Meaning};
use crate::report::text;
use serde::Serialize;

/// Rows of a table; what is beyond stands in answers.json.
const ROWS_PRINTED: usize = 300;

#[derive(Debug, Serialize)]
pub struct ComparedView {
    pub id: String,
    pub folder: String,
    pub stamp: String,
    pub period: String,
    pub reason: Option<String>,
    pub answers: Option<TableView>,
    pub answers_rest: Option<String>,
    pub scored: Option<String>,
    pub predictions: Option<TableView>,
    pub predictions_rest: Option<String>,
    /// Why something is not compared or not scored.
    pub not_done: Vec<String>,
    pub limits: Vec<String>,
    pub lost_actions: Vec<String>,
}

pub fn view(findings: &Findings, relation: Relation) -> Option<ComparedView> {
    let other = findings.compared.iter().find(|other| other.relation == relation)?;
    let review = &findings.plan.review;
    let link = match relation {
        Relation::Previous => review.previous.as_ref(),
        Relation::Amended => review.supersedes.as_ref(),
    };
    let (answers, answers_rest) = bounded(answers(findings, other));
    let (predictions, predictions_rest) = bounded(predictions(findings, other));
    Some(ComparedView {
        id: other.id.clone(),
        folder: other.written.clone(),
        stamp: other.stamp.clone(),
        period: other.period.to_string(),
        reason: link.and_then(|link| link.reason.clone()),
        answers,
        answers_rest,
        scored: scored(other),
        predictions,
        predictions_rest,
        not_done: not_done(other),
        limits: other.limits.iter().map(limit).collect(),
        lost_actions: other.lost_actions.clone(),
    })
}

/// The first rows, and a word on the others.
fn bounded(mut table: TableView) -> (Option<TableView>, Option<String>) {
    let more = table.rows.len().saturating_sub(ROWS_PRINTED);
    table.rows.truncate(ROWS_PRINTED);
    let rest = (more > 0).then(|| format!("{} more rows stand in answers.json.", text::count(more as u64)));
    (table.some(), rest)
}

fn answers(findings: &Findings, other: &Compared) -> TableView {
    let many = findings.series.len() > 1;
    let mut columns = vec![("question", Column::Head), ("then", Column::Text), ("now", Column::Text)];
    if many {
        columns.insert(0, ("series", Column::Head));
    }
    columns.extend([
        ("change", Column::Number),
        ("verdict then", Column::Text),
        ("verdict now", Column::Text),
    ]);
    let caption = format!("Answers of the review {} ({}) and of this one", other.id, other.period);
    let mut table = TableView::new(caption, &columns);
    for (series, then) in findings.series.iter().zip(&other.series) {
        let numbers = numbers_of(findings, series);
        for changed in &then.changes {
            let Some(now) = series.answers.iter().find(|answer| answer.id == changed.id) else { continue };
            let told = |one: usize| numbers.line(&one_side(changed, now, one), None);
            let mut cells = vec![
                plain(question_words(now.say.as_deref(), &now.words)),
                plain(told(0)),
                plain(told(1)),
                plain(moved(changed, now, &numbers)),
                plain(changed.verdict_then.as_deref().unwrap_or(NOTHING)),
                plain(changed.verdict_now.as_deref().unwrap_or(NOTHING)),
            ];
            if many {
                cells.insert(0, plain(title(series)));
            }
            table.row(cells);
        }
    }
    table
}

/// An answer then in one line, with its verdict.
pub fn said_then(changed: &Changed, now: &Answer, numbers: &Numbers<'_>) -> String {
    let said = numbers.line(&one_side(changed, now, 0), None);
    match &changed.verdict_then {
        Some(verdict) => format!("{said}: {verdict}"),
        None => said,
    }
}

/// The figures then (0) or now (1), each with the meaning that it has now.
fn one_side(changed: &Changed, now: &Answer, side: usize) -> Figures {
    let mut figures = Figures::default();
    for field in FIELDS {
        let Some((_, then, here)) = changed.figures.iter().find(|(own, ..)| *own == field) else { continue };
        let Some(number) = [*then, *here][side] else { continue };
        figures = match now.figures.get(field) {
            Some(Item::Whole(_)) => figures.with(field, Item::Whole(Some(number as u64))),
            item => figures.number(field, Ok(number), meaning(item)),
        };
    }
    figures
}

fn meaning(item: Option<&Item>) -> Meaning {
    match item {
        Some(Item::Number(_, meaning)) => *meaning,
        _ => Meaning::Value,
    }
}

/// The difference of the main figure, with its sign; a ratio's quotient.
fn moved(changed: &Changed, now: &Answer, numbers: &Numbers<'_>) -> String {
    let main = changed.figures.iter().find_map(|(field, then, here)| {
        matches!(*field, "estimate" | "chance" | "count").then_some((*field, (*then)?, (*here)?))
    });
    let Some((field, then, here)) = main else { return NOTHING.to_string() };
    let difference = here - then;
    let signed = |text: String| match text.strip_prefix('−') {
        Some(_) => text,
        None => format!("+{text}"),
    };
    match (field, meaning(now.figures.get(field))) {
        ("chance", _) | (_, Meaning::Chance) => {
            if difference.abs() < 0.0005 {
                "0.000".to_string()
            } else {
                signed(text::Places::decimals(3).value(difference))
            }
        }
        ("count", _) => signed(text::Places::decimals(0).value(difference)),
        (_, Meaning::Share) => {
            format!("{} points", signed(text::Places::decimals(2).value(100.0 * difference)))
        }
        (_, Meaning::Ratio | Meaning::Factor) => format!("× {}", text::significant(here / then, 4)),
        _ => {
            let end = |wanted: &str| {
                changed.figures.iter().find(|(own, ..)| *own == wanted).and_then(|(_, _, now)| *now)
            };
            let quarter = match (end("lower"), end("upper")) {
                (Some(lower), Some(upper)) => Some(0.25 * (upper - lower)),
                _ => None,
            };
            signed(numbers.places(quarter, here).value(difference))
        }
    }
}

fn predictions(findings: &Findings, other: &Compared) -> TableView {
    let many = findings.series.len() > 1;
    let mut columns = vec![
        ("foretold", Column::Head),
        ("interval", Column::Text),
        ("probability", Column::Number),
        ("what came", Column::Text),
        ("inside", Column::Text),
        ("cdf", Column::Number),
    ];
    if many {
        columns.insert(0, ("series", Column::Head));
    }
    let mut table = TableView::new(format!("Predictions of the review {} and what came", other.id), &columns);
    for (series, then) in findings.series.iter().zip(&other.series) {
        let numbers = numbers_of(findings, series);
        for prediction in &then.predictions {
            let mut cells = row(prediction, series, findings, &numbers);
            if many {
                cells.insert(0, plain(title(series)));
            }
            table.row(cells);
        }
    }
    table
}

fn row(
    prediction: &Prediction,
    series: &SeriesFindings,
    findings: &Findings,
    numbers: &Numbers<'_>,
) -> Vec<minijinja::Value> {
    let period = &findings.plan.review.period;
    let what = match prediction.of {
        Foretold::Mean => format!("the mean of the readings of {period}"),
        Foretold::EachReading => format!("each reading of {period}"),
        Foretold::Level => format!("the level of {period}"),
    };
    let quarter = match (prediction.lower, prediction.upper) {
        (Some(lower), Some(upper)) => Some(0.25 * (upper - lower)),
        _ => None,
    };
    let mut interval = Figures::default();
    for (field, end) in [("lower", prediction.lower), ("upper", prediction.upper)] {
        if let Some(end) = end {
            interval = interval.number(field, Ok(end), Meaning::Value);
        }
    }
    let came = match prediction.outcome {
        Some(outcome) => {
            let said = numbers.number(outcome, Meaning::Value, quarter);
            match prediction.of {
                Foretold::Level => format!("{said}, by the readings alone"),
                _ => said,
            }
        }
        None => {
            let n = findings.data.series.iter().find(|data| data.name == series.name);
            let n = n.and_then(|data| data.period(period)).map_or(prediction.outcomes, |data| data.facts.n);
            format!("{} readings", text::count(n))
        }
    };
    let inside = match (prediction.outcomes, prediction.inside) {
        (1, 1) => "yes".to_string(),
        (1, _) => "no".to_string(),
        (all, inside) => format!(
            "{} of {}, expected {}",
            text::count(inside),
            text::count(all),
            text::significant(prediction.probability * all as f64, 3)
        ),
    };
    vec![
        plain(what),
        plain(numbers.line(&interval, None)),
        plain(text::percent_as_stated(prediction.probability)),
        plain(came),
        plain(inside),
        plain(prediction.cdf.as_ref().map_or_else(|_| NOTHING.to_string(), |cdf| text::probability(*cdf))),
    ]
}

/// Over all series: how many of the intervals for the mean held it.
fn scored(other: &Compared) -> Option<String> {
    let means = || {
        let all = other.series.iter().flat_map(|series| &series.predictions);
        all.filter(|prediction| prediction.of == Foretold::Mean)
    };
    let (all, inside) = (means().count(), means().filter(|prediction| prediction.inside == 1).count());
    let expected: f64 = means().map(|prediction| prediction.probability).sum();
    (all > 0).then(|| {
        format!(
            "Of {} foretold {}, {} held the mean that came; {} would be expected.",
            text::count(all as u64),
            if all == 1 { "interval" } else { "intervals" },
            text::count(inside as u64),
            text::significant(expected, 3)
        )
    })
}

/// One line a reason, with the series that it holds for.
fn not_done(other: &Compared) -> Vec<String> {
    let mut reasons: Vec<(String, Vec<&str>)> = Vec::new();
    for series in &other.series {
        for reason in series.why.iter().chain(&series.not_scored) {
            match reasons.iter_mut().find(|(known, _)| known == reason) {
                Some((_, names)) => names.push(&series.name),
                None => reasons.push((reason.clone(), vec![&series.name])),
            }
        }
    }
    reasons.into_iter().map(|(reason, names)| format!("{}: {reason}.", names.join(", "))).collect()
}

fn limit(limit: &LimitThen) -> String {
    let said = |ends: &[f64]| ends.iter().map(|end| text::record(*end)).collect::<Vec<_>>().join(" to ");
    format!("The limit “{}” was {} then and is {} now.", limit.name, said(&limit.then), said(&limit.now))
}
