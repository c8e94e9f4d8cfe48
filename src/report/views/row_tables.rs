//! Answers that are tables: readings for next period, and the operating characteristic of a rule.

use super::numbers::{NOTHING, Numbers};
use super::table::{Column, TableView, plain};
use crate::questions::figures::{Figures, Item, Meaning};
use crate::report::text;
use minijinja::Value;

/// Rows of the operating characteristic that are printed, evenly taken; all are in answers.json.
const LEVELS_PRINTED: usize = 13;

/// The table of `readings needed`.
pub fn readings_needed(figures: &Figures, numbers: &Numbers<'_>) -> Option<TableView> {
    let Some(Item::Rows(rows)) = figures.get("table") else { return None };
    let verdicts = texts(figures, "verdicts");
    let mut table = TableView::new(
        "What so many readings of the next period would give",
        &[("readings", Column::Head), ("half width", Column::Number)],
    );
    verdicts.iter().for_each(|verdict| table.column(format!("chance of “{verdict}”"), Column::Number));
    for row in rows {
        let cell = |name: &str| match row.get(name) {
            Some(Item::Number(Ok(number), meaning)) => plain(numbers.number(*number, *meaning, None)),
            Some(Item::Whole(Some(count))) => plain(text::count(*count)),
            _ => plain(NOTHING),
        };
        let mut cells = vec![cell("readings"), cell("half_width")];
        cells.extend(chances(row, verdicts.len()));
        table.row(cells);
    }
    table.some()
}

/// How probable each verdict of a rule is, for some of the true levels.
pub fn operating_characteristic(figures: &Figures, numbers: &Numbers<'_>) -> Option<TableView> {
    let Some(Item::Rows(rows)) = figures.get("operating_characteristic") else { return None };
    let verdicts = texts(figures, "verdicts");
    let mut table = TableView::new(
        "Operating characteristic: the probability of each verdict, for some true levels",
        &[("true level", Column::Head)],
    );
    verdicts.iter().for_each(|verdict| table.column(format!("“{verdict}”"), Column::Number));
    let step = (rows.len().saturating_sub(1) / (LEVELS_PRINTED - 1)).max(1);
    for row in rows.iter().step_by(step) {
        let level = match row.get("level") {
            Some(Item::Number(Ok(level), _)) => plain(numbers.number(*level, Meaning::Value, None)),
            _ => plain(NOTHING),
        };
        let mut cells = vec![level];
        cells.extend(chances(row, verdicts.len()));
        table.row(cells);
    }
    table.some()
}

fn texts<'f>(figures: &'f Figures, name: &str) -> &'f [String] {
    match figures.get(name) {
        Some(Item::Texts(texts)) => texts,
        _ => &[],
    }
}

fn chances(row: &Figures, verdicts: usize) -> Vec<Value> {
    match row.get("chances") {
        Some(Item::Numbers(chances, _)) => {
            chances.iter().map(|chance| plain(text::probability(*chance))).collect()
        }
        _ => vec![plain(NOTHING); verdicts],
    }
}
