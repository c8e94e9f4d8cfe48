//! The answers in a few columns: question, answer, verdict.

use crate::cli::screen::Screen;
use crate::findings::Findings;
use crate::questions::figures::{Figures, Item, Meaning};
use crate::questions::rule::Given;
use crate::report::text;

/// Significant digits of a value where no uncertainty sets the place.
const DIGITS: u8 = 4;

/// All answers of a review, series by series.
pub fn say(findings: &Findings, screen: &mut Screen) {
    let review = &findings.plan.review;
    screen.say(&format!("{}  {}, {} ({})", review.id, review.title, review.period, review.status.word()));
    let unit = &findings.plan.quantity.unit;
    for series in &findings.series {
        screen.say("");
        let label = series.label.as_ref().map_or(String::new(), |label| format!("  {label}"));
        screen.say(&format!("{}{label}", series.name));
        let rows = series.answers.iter().map(|answer| {
            [
                answer.id.clone(),
                answer.ask.clone(),
                in_short(&answer.figures, unit),
                verdict(answer.verdict.as_ref()),
            ]
        });
        columns(&rows.collect::<Vec<_>>(), screen);
    }
    if !findings.across.is_empty() {
        screen.say("");
        screen.say("all series");
    }
    for across in &findings.across {
        let mut rows: Vec<[String; 4]> = Vec::new();
        for (name, figures) in &across.series {
            rows.push([across.id.clone(), name.clone(), in_short(figures, unit), String::new()]);
        }
        if let Some(last) = rows.last_mut() {
            last[3] = verdict(across.verdict.as_ref());
        }
        columns(&rows, screen);
    }
}

fn verdict(given: Option<&Given>) -> String {
    match given {
        None => String::new(),
        Some(Given { say: Some(say), fail, why }) => {
            let fail = if *fail { " (fail)" } else { "" };
            let why = why.as_ref().map_or(String::new(), |why| format!(": {why}"));
            format!("{say}{fail}{why}")
        }
        Some(Given { say: None, why, .. }) => {
            format!("no verdict{}", why.as_ref().map_or(String::new(), |why| format!(": {why}")))
        }
    }
}

/// The figures of an answer on one line.
fn in_short(figures: &Figures, unit: &str) -> String {
    let mut parts = Vec::new();
    let (lower, upper) = (figures.value("lower"), figures.value("upper"));
    let place = match (lower, upper) {
        // A quarter of a 95 % interval is about the standard uncertainty that sets the digits.
        (Some(lower), Some(upper)) => text::Places::of_uncertainty((upper - lower) / 4.0),
        _ => None,
    };
    let value = |number: f64| match place {
        Some(place) => place.value(number),
        None => text::significant(number, DIGITS),
    };
    for (name, item) in &figures.0 {
        match item {
            Item::Number(Ok(number), Meaning::Chance | Meaning::Share) => match *name {
                "chance" => parts.push(format!("chance {}", text::probability(*number))),
                "estimate" => parts.push(text::probability(*number)),
                "lower" => parts.push(format!("at least {}", text::probability(*number))),
                "upper" => parts.push(format!("at most {}", text::probability(*number))),
                other => parts.push(format!("{} {}", words(other), text::probability(*number))),
            },
            Item::Number(Ok(number), meaning) => {
                let unit = match meaning {
                    Meaning::Value | Meaning::Spread if unit != "1" => format!(" {unit}"),
                    _ => String::new(),
                };
                match (*name, lower, upper) {
                    ("estimate", ..) => parts.push(format!("{}{unit}", value(*number))),
                    ("lower", Some(lower), Some(upper)) => {
                        parts.push(format!("{} to {}{unit}", value(lower), value(upper)));
                    }
                    ("upper", Some(_), Some(_)) => {}
                    ("lower", ..) => parts.push(format!("at least {}{unit}", value(*number))),
                    ("upper", ..) => parts.push(format!("at most {}{unit}", value(*number))),
                    (other, ..) => parts.push(format!("{} {}{unit}", words(other), value(*number))),
                }
            }
            Item::Whole(Some(count)) => parts.push(format!("{} {count}", words(name))),
            Item::Text(text) => parts.push(format!("{} {text}", words(name))),
            Item::Number(Err(absent), _) if figures.0.len() == 1 => parts.push(absent.reason.clone()),
            // Long figures stand in the report.
            Item::Number(Err(_), _)
            | Item::Whole(None)
            | Item::Numbers(..)
            | Item::Texts(_)
            | Item::Rows(_) => {}
        }
    }
    if parts.is_empty() {
        let reason = figures.0.iter().find_map(|(_, item)| match item {
            Item::Number(Err(absent), _) => Some(absent.reason.clone()),
            _ => None,
        });
        return reason.unwrap_or_else(|| "see the report".to_string());
    }
    parts.join(", ")
}

fn words(name: &str) -> String {
    name.replace('_', " ")
}

/// Rows with aligned columns, indented.
fn columns(rows: &[[String; 4]], screen: &mut Screen) {
    let width = |column: usize| rows.iter().map(|row| row[column].chars().count()).max().unwrap_or(0);
    let widths = [width(0), width(1), width(2)];
    for [id, ask, answer, verdict] in rows {
        let [w0, w1, w2] = widths;
        screen.say(&format!("  {id:<w0$}  {ask:<w1$}  {answer:<w2$}  {verdict}"));
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::quantity::Absent;

    #[test]
    fn an_answer_fits_on_a_line() {
        let interval = Figures::default()
            .number("estimate", Ok(43.9123), Meaning::Value)
            .number("lower", Ok(42.7), Meaning::Value)
            .number("upper", Ok(45.1), Meaning::Value);
        assert_eq!(in_short(&interval, "mg/L"), "43.91 mg/L, 42.70 to 45.10 mg/L");
        let bound = Figures::default()
            .number("estimate", Ok(43.9123), Meaning::Value)
            .number("lower", Err(Absent::because("one-sided")), Meaning::Value)
            .number("upper", Ok(45.1), Meaning::Value);
        assert_eq!(in_short(&bound, "1"), "43.91, at most 45.10");
        let none = Figures::default().number("chance", Err(Absent::because("no readings")), Meaning::Chance);
        assert_eq!(in_short(&none, "1"), "no readings");
        let counts = Figures::default().with("count", Item::Whole(Some(3)));
        assert_eq!(in_short(&counts, "1"), "count 3");
    }
}
