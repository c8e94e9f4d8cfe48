//! answers.csv: the same figures as answers.json, one a line: series, id, ask, alternative, field,
//! value, unit.
//!
//! `alternative` is empty for the answer itself, else `prior only`, `readings only`, or an
//! alternative's id. A figure that does not exist has an empty value; answers.json says why. Laws have
//! the ids `prior.level`, `posterior.level` and so on, with nothing asked.

use crate::findings::laws::LawFigures;
use crate::findings::{Findings, SeriesFindings};
use crate::quantity::{Figure, Scale};
use crate::questions::figures::{Figures, Item, Meaning};
use crate::questions::rule::Given;

const HEAD: [&str; 7] = ["series", "id", "ask", "alternative", "field", "value", "unit"];

/// The whole of answers.csv; lines end with LF, fields are quoted where RFC 4180 asks for it.
pub fn answers_csv(findings: &Findings) -> Vec<u8> {
    let mut table = Table { text: String::new(), unit: findings.plan.quantity.unit.clone() };
    table.line(&HEAD);
    for series in &findings.series {
        one_series(series, findings.plan.quantity.scale, &mut table);
    }
    for across in &findings.across {
        for (name, figures) in &across.series {
            table.figures(&Row { series: name, id: &across.id, ask: &across.ask, alternative: "" }, figures);
        }
        let row = Row { series: "", id: &across.id, ask: &across.ask, alternative: "" };
        table.verdict(&row, across.verdict.as_ref());
    }
    table.text.into_bytes()
}

/// The figures of which question, series and alternative.
struct Row<'a> {
    series: &'a str,
    id: &'a str,
    ask: &'a str,
    alternative: &'a str,
}

struct Table {
    text: String,
    unit: String,
}

fn one_series(series: &SeriesFindings, scale: Scale, table: &mut Table) {
    let row = |id, ask, alternative| Row { series: &series.name, id, ask, alternative };
    if let Ok(law) = &series.laws.prior {
        table.law(&row("prior.level", "", ""), law, true);
    }
    for (name, law) in &series.laws.posterior {
        // On the log scale a sd is a factor, and has no unit.
        let in_unit = scale == Scale::Linear || !name.ends_with("_sd");
        if let Ok(law) = law {
            let id = format!("posterior.{name}");
            table.law(&Row { series: &series.name, id: &id, ask: "", alternative: "" }, law, in_unit);
        }
    }
    let influence = row("influence", "", "");
    table.figure(&influence, "prior_weight", &series.influence.prior_weight, "1");
    table.figure(&influence, "prior_readings", &series.influence.prior_readings, "1");
    for answer in &series.answers {
        let own = row(&answer.id, &answer.ask, "");
        table.figures(&own, &answer.figures);
        table.verdict(&own, answer.verdict.as_ref());
        table.figures(&own, &answer.rule_figures);
        table.figures(&row(&answer.id, &answer.ask, "prior only"), &answer.prior_only);
        table.figures(&row(&answer.id, &answer.ask, "readings only"), &answer.readings_only);
    }
    for check in &series.checks {
        let own = row(check.id, "check", "");
        for (field, value) in [("statistic", check.statistic), ("p", check.p)] {
            table.put(&own, field, &value.map_or(String::new(), number), "1");
        }
        for (field, value) in &check.extra {
            table.put(&own, field, &number(*value), "");
        }
    }
    for under in &series.sensitivity {
        for (id, figures, verdict) in &under.answers {
            let ask = series.answers.iter().find(|answer| answer.id == *id).map_or("", |answer| &answer.ask);
            let own = row(id, ask, &under.alternative);
            table.figures(&own, figures);
            table.verdict(&own, verdict.as_ref());
        }
    }
}

/// Shortest text that reads back as the same number; empty where there is none.
fn number(value: f64) -> String {
    if value.is_finite() { format!("{value:?}") } else { String::new() }
}

impl Table {
    fn line(&mut self, cells: &[&str]) {
        for (place, cell) in cells.iter().enumerate() {
            if place > 0 {
                self.text.push(',');
            }
            push_cell(cell, &mut self.text);
        }
        self.text.push('\n');
    }

    fn put(&mut self, row: &Row<'_>, field: &str, value: &str, unit: &str) {
        self.line(&[row.series, row.id, row.ask, row.alternative, field, value, unit]);
    }

    fn figure(&mut self, row: &Row<'_>, field: &str, figure: &Figure, unit: &str) {
        let value = figure.as_ref().map_or(String::new(), |value| number(*value));
        self.put(row, field, &value, unit);
    }

    fn verdict(&mut self, row: &Row<'_>, given: Option<&Given>) {
        if let Some(given) = given {
            self.put(row, "verdict", given.say.as_deref().unwrap_or(""), "");
        }
    }

    fn law(&mut self, row: &Row<'_>, law: &LawFigures, in_unit: bool) {
        let unit = if in_unit { self.unit.clone() } else { "1".to_string() };
        match &law.logs {
            Some((mean, sd)) => {
                self.figure(row, "log_mean", mean, "1");
                self.figure(row, "log_sd", sd, "1");
            }
            None => {
                self.figure(row, "mean", &law.mean, &unit);
                self.figure(row, "sd", &law.sd, &unit);
            }
        }
        for (name, figure) in &law.quantiles {
            self.figure(row, &format!("quantile {name}"), figure, &unit);
        }
    }

    fn figures(&mut self, row: &Row<'_>, figures: &Figures) {
        self.named(row, "", figures);
    }

    /// `before` leads the field's name: `table[0].` for the first row of a table.
    fn named(&mut self, row: &Row<'_>, before: &str, figures: &Figures) {
        for (name, item) in &figures.0 {
            let field = format!("{before}{name}");
            match item {
                Item::Number(figure, meaning) => {
                    let unit = self.unit_of(*meaning);
                    self.figure(row, &field, figure, &unit);
                }
                Item::Whole(count) => {
                    self.put(row, &field, &count.map_or(String::new(), |count| count.to_string()), "1");
                }
                Item::Numbers(numbers, meaning) => {
                    let unit = self.unit_of(*meaning);
                    for (place, value) in numbers.iter().enumerate() {
                        self.put(row, &format!("{field}[{place}]"), &number(*value), &unit);
                    }
                }
                Item::Texts(texts) => {
                    for (place, text) in texts.iter().enumerate() {
                        self.put(row, &format!("{field}[{place}]"), text, "");
                    }
                }
                Item::Rows(rows) => {
                    for (place, figures) in rows.iter().enumerate() {
                        self.named(row, &format!("{field}[{place}]."), figures);
                    }
                }
                Item::Text(text) => self.put(row, &field, text, ""),
            }
        }
    }

    fn unit_of(&self, meaning: Meaning) -> String {
        match meaning {
            Meaning::Value | Meaning::Spread => self.unit.clone(),
            Meaning::Ratio
            | Meaning::Factor
            | Meaning::Chance
            | Meaning::Share
            | Meaning::Count
            | Meaning::Rank => "1".to_string(),
        }
    }
}

/// A cell, quoted where RFC 4180 asks for it.
fn push_cell(cell: &str, out: &mut String) {
    if cell.contains([',', '"', '\n', '\r']) || cell.starts_with(' ') || cell.ends_with(' ') {
        out.push('"');
        out.push_str(&cell.replace('"', "\"\""));
        out.push('"');
    } else {
        out.push_str(cell);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::quantity::Absent;

    #[test]
    fn figures_become_lines_with_their_units() {
        let mut table = Table { text: String::new(), unit: "mg/L".into() };
        let figures = Figures::default()
            .number("estimate", Ok(0.1 + 0.2), Meaning::Value)
            .number("lower", Err(Absent::because("one-sided")), Meaning::Value)
            .with("chances", Item::Numbers(vec![0.25, 0.75], Meaning::Chance))
            .with("table", Item::Rows(vec![Figures::default().with("n", Item::Whole(Some(4)))]));
        table.figures(&Row { series: "a, \"b\"", id: "q", ask: "level interval", alternative: "" }, &figures);
        assert_eq!(
            table.text,
            "\"a, \"\"b\"\"\",q,level interval,,estimate,0.30000000000000004,mg/L\n\
             \"a, \"\"b\"\"\",q,level interval,,lower,,mg/L\n\
             \"a, \"\"b\"\"\",q,level interval,,chances[0],0.25,1\n\
             \"a, \"\"b\"\"\",q,level interval,,chances[1],0.75,1\n\
             \"a, \"\"b\"\"\",q,level interval,,table[0].n,4,1\n"
        );
    }
}
