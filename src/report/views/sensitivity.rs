//! The answers again under other assumptions: what changes, and whether any verdict does.

use super::answers::{question_words, rule_of};
use super::numbers::{Around, NOTHING, Numbers, verdict};
use super::table::{Column, TableView, bold, plain};
use crate::findings::{Answer, SeriesFindings};
use crate::questions::figures::{Figures, Meaning};
use crate::report::text;
use serde::Serialize;

/// Questions beside each other in one table; more go into a further table.
const QUESTIONS_ABREAST: usize = 4;

#[derive(Debug, Serialize)]
pub struct SensitivityView {
    /// Whether any verdict changes, in one sentence.
    pub verdicts: String,
    pub any_change: bool,
    /// Each verdict that changes.
    pub changes: Vec<String>,
    /// The largest change of each question's main figure.
    pub largest: Option<TableView>,
    pub tables: Vec<TableView>,
    /// Alternatives that were not possible.
    pub not_possible: Vec<String>,
}

/// Verdicts that change: alternative, question's id, words as they become.
pub fn changes(series: &SeriesFindings) -> Vec<(String, String, String)> {
    let mut changes = Vec::new();
    for under in &series.sensitivity {
        for (id, _, given) in &under.answers {
            let before = series.answers.iter().find(|answer| answer.id == *id);
            let Some(before) = before.and_then(|answer| answer.verdict.as_ref()) else { continue };
            let after = given.as_ref().and_then(|given| given.say.clone());
            if before.say.is_some() && after != before.say {
                let after = after.unwrap_or_else(|| "no verdict".to_string());
                changes.push((under.alternative.clone(), id.clone(), after));
            }
        }
    }
    changes
}

pub fn view(series: &SeriesFindings, numbers: &Numbers<'_>) -> Option<SensitivityView> {
    if series.sensitivity.is_empty() {
        return None;
    }
    let changed = changes(series);
    let ruled = series.answers.iter().any(|answer| answer.verdict.is_some());
    let verdicts = match (ruled, changed.is_empty()) {
        (false, _) => "No question has a rule, so there is no verdict to change.",
        (true, _) if series.without_readings => "No verdict is given without readings, so none can change.",
        (true, true) => "Does any verdict change? No: every verdict stays as it is under every alternative.",
        (true, false) => "Does any verdict change? Yes:",
    };
    let was = |id: &str| {
        let answer = series.answers.iter().find(|answer| answer.id == id);
        answer.and_then(|answer| answer.verdict.as_ref()?.say.clone()).unwrap_or_default()
    };
    let mut tables = Vec::new();
    for answers in series.answers.chunks(QUESTIONS_ABREAST) {
        tables.push(table(series, answers, numbers));
    }
    Some(SensitivityView {
        verdicts: verdicts.to_string(),
        any_change: !changed.is_empty(),
        changes: changed
            .iter()
            .map(|(alternative, id, after)| {
                format!("{id}: “{}” becomes “{after}” under “{alternative}”.", was(id))
            })
            .collect(),
        largest: largest(series, numbers),
        tables,
        not_possible: series
            .sensitivity
            .iter()
            .filter_map(|under| Some(format!("{}: {}", under.alternative, under.why.as_ref()?)))
            .collect(),
    })
}

fn table(series: &SeriesFindings, answers: &[Answer], numbers: &Numbers<'_>) -> TableView {
    let names: Vec<&str> = answers.iter().map(|answer| answer.id.as_str()).collect();
    let mut columns = vec![("assumption", Column::Head)];
    columns.extend(names.iter().map(|name| (*name, Column::Text)));
    let mut table = TableView::new(format!("Under other assumptions: {}", names.join(", ")), &columns);
    let cell = |id: &str, figures: &Figures, given: Option<&crate::questions::rule::Given>, base: bool| {
        let rule = rule_of(numbers.plan, id);
        let said = numbers.line(figures, rule);
        let Some(given) = given else { return plain(said) };
        let words = verdict(given, rule).words;
        let was = answers.iter().find(|answer| answer.id == id).and_then(|answer| answer.verdict.as_ref());
        let changed = !base && was.is_some_and(|was| was.say.is_some() && was.say != given.say);
        if changed {
            bold(&format!("{said}: changed to “{words}”"))
        } else {
            plain(format!("{said}: {words}"))
        }
    };
    let mut cells = vec![bold("as reviewed")];
    cells.extend(
        answers.iter().map(|answer| cell(&answer.id, &answer.figures, answer.verdict.as_ref(), true)),
    );
    table.row(cells);
    for under in &series.sensitivity {
        let mut cells = vec![plain(&under.alternative)];
        for answer in answers {
            let found = under.answers.iter().find(|(id, ..)| *id == answer.id);
            cells.push(match found {
                Some((id, figures, given)) => cell(id, figures, given.as_ref(), false),
                None => plain(NOTHING),
            });
        }
        table.row(cells);
    }
    table
}

/// The figure by which changes are measured: the estimate, else the chance, else the count.
pub fn main_figure(figures: &Figures) -> Option<(f64, Meaning)> {
    let around = Around::of(figures);
    None.or(around.middle.map(|middle| (middle, around.meaning)))
        .or(figures.value("chance").map(|chance| (chance, Meaning::Chance)))
        .or(figures.value("count").map(|count| (count, Meaning::Count)))
        .or(around.lower.or(around.upper).map(|end| (end, around.meaning)))
}

fn largest(series: &SeriesFindings, numbers: &Numbers<'_>) -> Option<TableView> {
    let mut table = TableView::new(
        "The largest change of each answer",
        &[
            ("question", Column::Head),
            ("as reviewed", Column::Number),
            ("farthest from it", Column::Number),
            ("under", Column::Text),
        ],
    );
    for answer in &series.answers {
        let Some((base, meaning)) = main_figure(&answer.figures) else { continue };
        let uncertainty = Around::of(&answer.figures).uncertainty();
        let farthest = series
            .sensitivity
            .iter()
            .filter_map(|under| {
                let (_, figures, _) = under.answers.iter().find(|(id, ..)| *id == answer.id)?;
                let (figure, _) = main_figure(figures)?;
                Some((figure, &under.alternative))
            })
            .filter(|(figure, _)| *figure != base)
            // The first of equal ones.
            .reduce(|a, b| if (b.0 - base).abs() > (a.0 - base).abs() { b } else { a });
        let said = |number: f64| match meaning {
            Meaning::Chance => text::probability(number),
            meaning => numbers.number(number, meaning, uncertainty),
        };
        let question = question_words(answer.say.as_deref(), &answer.words);
        let (figure, under) = match farthest {
            Some((figure, under)) => (said(figure), under.clone()),
            None => (NOTHING.to_string(), "no alternative changes it".to_string()),
        };
        table.row(vec![plain(question), plain(said(base)), plain(figure), plain(under)]);
    }
    table.some()
}
