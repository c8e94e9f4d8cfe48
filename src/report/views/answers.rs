//! The answers: per question its words, symbols, figures on three bases, rule and verdict.

use super::numbers::{NOTHING, Numbers, VerdictView, reasons, rule_words, verdict};
use super::row_tables;
use super::table::{Column, TableView, plain};
use crate::findings::{AcrossFindings, Answer, SeriesFindings};
use crate::plan::{Plan, QuestionPlan, Rule};
use crate::quantity::Scale;
use crate::questions::figures::{Figures, Item, Meaning};
use crate::report::text::{self, Places};
use crate::working::Step;
use minijinja::Value;
use serde::Serialize;

/// One answer of one series.
#[derive(Debug, Serialize)]
pub struct AnswerView {
    pub id: String,
    /// The reader's words, or the quantity's.
    pub question: String,
    /// Whether the spec puts the question in words of its own.
    pub has_words: bool,
    pub words: String,
    pub symbols: String,
    pub both: String,
    pub prior_only: String,
    pub readings_only: String,
    /// Why figures are missing.
    pub why: Vec<String>,
    pub rule: Option<String>,
    pub agreed: Option<String>,
    pub verdict: Option<VerdictView>,
    /// Acceptance limits, guard band, risks.
    pub rule_figures: Vec<String>,
    /// The chance of each verdict against the true level.
    pub rule_figure: Option<super::drawings::FigureView>,
    /// The same as a table.
    pub characteristic: Option<TableView>,
    /// Of an answer that is itself a table.
    pub table: Option<TableView>,
    pub not_decided: bool,
    pub working: Option<TableView>,
}

pub fn asked<'p>(plan: &'p Plan, id: &str) -> Option<&'p QuestionPlan> {
    plan.questions.iter().find(|question| question.id == id)
}

pub fn rule_of<'p>(plan: &'p Plan, id: &str) -> Option<&'p Rule> {
    asked(plan, id)?.rule.as_ref()
}

/// The question in the reader's words; without such, what is asked about, with a capital letter.
pub fn question_words(say: Option<&str>, words: &str) -> String {
    match say {
        Some(say) => say.to_string(),
        None => capital(&with_minus(words)),
    }
}

pub fn capital(words: &str) -> String {
    let mut letters = words.chars();
    letters.next().map_or_else(String::new, |first| first.to_uppercase().chain(letters).collect())
}

pub fn view(answer: &Answer, series: &SeriesFindings, numbers: &Numbers<'_>) -> AnswerView {
    let plan = numbers.plan;
    let rule = rule_of(plan, &answer.id);
    let held_back = |figures: &Figures| {
        if figures.is_empty() { NOTHING.to_string() } else { numbers.line(figures, None) }
    };
    let given = answer.verdict.as_ref().map(|given| verdict(given, rule));
    let last = rule.and_then(|rule| rule.verdicts.last()).map(|last| last.say.as_str());
    let open = |given: &VerdictView| {
        last == Some(given.words.as_str()) && rule.is_some_and(|rule| rule.verdicts.len() > 2)
    };
    AnswerView {
        id: answer.id.clone(),
        question: question_words(answer.say.as_deref(), &answer.words),
        has_words: answer.say.is_some(),
        words: capital(&with_minus(&answer.words)),
        symbols: with_minus(&answer.symbols),
        both: numbers.long_line(&answer.figures, rule),
        prior_only: held_back(&answer.prior_only),
        readings_only: held_back(&answer.readings_only),
        why: if one_sided(&answer.figures) { Vec::new() } else { reasons(&answer.figures) },
        rule: rule.map(|rule| rule_words(rule, plan, Some(&series.name))),
        agreed: rule.map(agreed),
        not_decided: given.as_ref().is_some_and(open),
        verdict: given,
        rule_figures: rule_figures(&answer.rule_figures, rule, numbers),
        rule_figure: None,
        characteristic: row_tables::operating_characteristic(&answer.rule_figures, numbers),
        table: row_tables::readings_needed(&answer.figures, numbers),
        working: working(&answer.working, unit_of_working(plan)),
    }
}

fn exists(item: &Item) -> bool {
    !matches!(item, Item::Number(Err(_), _) | Item::Whole(None))
}

/// A bound on one side lacks the other end by its nature.
fn one_sided(figures: &Figures) -> bool {
    let missing: Vec<&str> =
        figures.0.iter().filter(|(_, item)| !exists(item)).map(|(name, _)| *name).collect();
    matches!(missing.as_slice(), ["lower"] | ["upper"])
}

pub fn agreed(rule: &Rule) -> String {
    match (rule.agreed, &rule.agreed_by) {
        (Some(on), Some(by)) => format!("agreed on {on} ({by})"),
        (Some(on), None) => format!("agreed on {on}"),
        (None, Some(by)) => format!("agreed by {by}, without a date"),
        (None, None) => "without a date of agreement".to_string(),
    }
}

/// What each figure of a rule is called; those without a name here are drawn, or are said otherwise.
const RULE_FIGURES: &[(&str, &str)] = &[
    ("acceptance_limit", "Acceptance limit for the mean of the readings"),
    ("guard_band", "Guard band, the distance of the acceptance limit from the limit"),
    ("guard_band_share_of_u", "The guard band in units of U, twice the standard deviation of the level"),
    ("specific_risk", "Probability, given prior and readings, that the level does not conform"),
    (
        "global_risk_accepted",
        "Risk of the rule: probability, before any reading, that the level does not conform and is accepted",
    ),
    (
        "global_risk_rejected",
        "Risk of the rule: probability, before any reading, that the level conforms and is not accepted",
    ),
    ("tipping_prior_mean", "The verdict would change with a prior whose mean is"),
    ("tipping_prior_readings", "The verdict would change with a prior worth this many readings"),
];

/// Why these do not exist is worth a line; of the others, only what exists is printed.
const SAID_WHERE_MISSING: [&str; 2] = ["tipping_prior_mean", "tipping_prior_readings"];

fn rule_figures(figures: &Figures, rule: Option<&Rule>, numbers: &Numbers<'_>) -> Vec<String> {
    let mut lines = conditions(figures, rule, numbers);
    for (name, item) in &figures.0 {
        let words = RULE_FIGURES.iter().find(|(known, _)| known == name).map(|(_, words)| *words);
        match (words, item) {
            (Some(words), Item::Number(Ok(number), Meaning::Share)) => {
                lines.push(format!("{words}: {}", text::significant(*number, 2)));
            }
            (Some(words), Item::Number(Ok(number), meaning)) => {
                lines.push(format!("{words}: {}", numbers.number(*number, *meaning, None)));
            }
            (Some(words), Item::Number(Err(absent), _)) if SAID_WHERE_MISSING.contains(name) => {
                lines.push(format!("{words}: none ({})", with_minus(&absent.reason)));
            }
            _ => {}
        }
    }
    lines
}

/// At which means of the readings each condition of the rule begins or ceases to hold.
fn conditions(figures: &Figures, rule: Option<&Rule>, numbers: &Numbers<'_>) -> Vec<String> {
    let Some(Item::Rows(rows)) = figures.get("conditions") else { return Vec::new() };
    let verdicts = rule.map_or(&[][..], |rule| &rule.verdicts);
    let conditions = verdicts
        .iter()
        .flat_map(|verdict| verdict.conditions.iter().map(move |condition| (verdict, condition)));
    let mut lines = Vec::new();
    for (row, (verdict, (condition, threshold))) in rows.iter().zip(conditions) {
        let Some(Item::Numbers(at, meaning)) = row.get("limits") else { continue };
        let words = super::numbers::one_condition(*condition, threshold, numbers.plan);
        let at: Vec<String> = at.iter().map(|at| numbers.number(*at, *meaning, None)).collect();
        lines.push(match at.len() {
            0 => format!("“{}”, {words}: the same for every mean of the readings", verdict.say),
            _ => format!(
                "“{}”, {words}: begins or ceases to hold at a mean of the readings of {}",
                verdict.say,
                at.join(" and ")
            ),
        });
    }
    lines
}

/// Numbers that words bring along have the hyphen of the keyboard; a report has the minus sign.
pub fn with_minus(words: &str) -> String {
    let mut out = String::with_capacity(words.len());
    let mut before = ' ';
    let mut letters = words.chars().peekable();
    while let Some(letter) = letters.next() {
        let is_minus = letter == '-'
            && matches!(before, ' ' | '(' | '\u{a0}' | '<' | '>')
            && letters.peek().is_some_and(char::is_ascii_digit);
        out.push(if is_minus { text::MINUS } else { letter });
        before = letter;
    }
    out
}

/// The steps of a derivation; values with six digits, enough to follow with a pocket calculator.
fn working(steps: &[Step], unit: &str) -> Option<TableView> {
    let caption = match unit {
        "1" => "How the figure comes about".to_string(),
        unit => format!("How the figure comes about; levels, readings and sds in {unit}"),
    };
    let mut table = TableView::new(
        caption,
        &[
            ("step", Column::Head),
            ("formula", Column::Text),
            ("values put in", Column::Text),
            ("result", Column::Number),
        ],
    );
    for step in steps {
        let put_in: Vec<String> = step
            .put_in
            .iter()
            .map(|(symbol, value)| format!("{symbol} = {}", working_number(*value)))
            .collect();
        table.row(vec![
            plain(&step.label),
            plain(&step.formula),
            plain(put_in.join(", ")),
            plain(working_number(step.result)),
        ]);
    }
    table.some()
}

/// On the log scale the steps are of natural logarithms, which have no unit.
fn unit_of_working(plan: &Plan) -> &str {
    if plan.quantity.scale == Scale::Log { "1" } else { &plan.quantity.unit }
}

/// Seven digits; a whole number as such. What is not quite 1 is not printed as 1.
fn working_number(value: f64) -> String {
    if value < 1.0 && value > 0.999_999_95 {
        return format!("1 − {}", text::significant(1.0 - value, 2));
    }
    let whole = value.abs() < 1e7 && value as i64 as f64 == value;
    if whole { Places::decimals(0).value(value) } else { text::significant(value, 7) }
}

/// All answers of one series beside each other.
pub fn table(views: &[AnswerView]) -> TableView {
    let ruled = views.iter().any(|view| view.verdict.is_some());
    let mut columns = vec![
        ("question", Column::Head),
        ("prior only", Column::Text),
        ("readings only", Column::Text),
        ("both", Column::Text),
    ];
    if ruled {
        columns.push(("verdict", Column::Text));
    }
    let mut table = TableView::new("Answers, each on three bases", &columns);
    for view in views {
        let mut cells = vec![
            plain(&view.question),
            plain(&view.prior_only),
            plain(&view.readings_only),
            plain(&view.both),
        ];
        if ruled {
            cells.push(view.verdict.as_ref().map_or_else(|| plain(NOTHING), |given| given.shown.clone()));
        }
        table.row(cells);
    }
    table
}

/// A question that compares series.
#[derive(Debug, Serialize)]
pub struct AcrossView {
    pub id: String,
    pub question: String,
    pub words: String,
    pub table: TableView,
    pub verdict: Option<Value>,
    pub why: Option<String>,
}

pub fn across(found: &AcrossFindings, plan: &Plan) -> AcrossView {
    let rule = rule_of(plan, &found.id);
    let mut table =
        TableView::new(capital(&found.words), &[("series", Column::Head), ("answer", Column::Text)]);
    for (name, figures) in &found.series {
        let numbers = Numbers::of_series(plan, name, None);
        let mut said = numbers.long_line(figures, rule);
        if said == NOTHING {
            said = reasons(figures).join("; ");
        }
        table.row(vec![plain(if name.is_empty() { "all" } else { name.as_str() }), plain(said)]);
    }
    AcrossView {
        id: found.id.clone(),
        question: question_words(found.say.as_deref(), &found.words),
        words: capital(&found.words),
        table,
        verdict: found.verdict.as_ref().map(|given| verdict(given, rule).shown),
        why: found.verdict.as_ref().and_then(|given| given.why.clone()),
    }
}
