//! What templates see: the findings as strings that are ready to print, tables, and figures by name.
//! Nothing here is a raw number, so a template cannot print a doubtful digit.

pub mod answers;
pub mod compared;
pub mod data;
pub mod drawings;
pub mod fixed;
pub mod head;
pub mod model;
pub mod numbers;
pub mod row_tables;
pub mod sensitivity;
pub mod series;
pub mod table;

use super::{StampText, escape, text};
use crate::checks::FLAG_BELOW;
use crate::findings::Findings;
use crate::findings::compared::Relation;
use crate::plan::{AppliesTo, Detail, Status};
use crate::quantity::Scale;
use answers::AcrossView;
use compared::ComparedView;
use data::DataView;
use drawings::{Drawings, FigureView};
use head::SummaryView;
use minijinja::Value;
use serde::Serialize;
use series::SeriesView;
use table::{Column, TableView, code, plain};

/// A longer spec is in spec.toml only.
const SPEC_LINES_PRINTED: usize = 400;
/// More names than this are counted.
const NAMES_LISTED: usize = 8;
/// From this many question-and-series pairs on, wrong flags by chance alone are to be expected.
const MANY_EXAMINED: usize = 20;

/// The whole report.
#[derive(Debug, Serialize)]
pub struct ReportView {
    pub title: String,
    pub id: String,
    pub period: String,
    pub date: String,
    pub status: &'static str,
    pub is_final: bool,
    pub until: Option<String>,
    pub quantity: String,
    /// Empty where there is none.
    pub unit: String,
    pub log_scale: bool,
    pub particulars: Vec<(String, String)>,
    pub supersedes: Option<LinkView>,
    /// The previous review beside this one.
    pub before: Option<ComparedView>,
    /// The review that this one amends, beside it.
    pub superseded: Option<ComparedView>,
    pub stamp: String,
    pub stamp_label: String,
    pub program: String,
    pub summary: SummaryView,
    /// The user's own Markdown.
    pub purpose: Option<Value>,
    pub limits: Option<TableView>,
    pub limit_of_each_reading: bool,
    pub questions: Option<TableView>,
    pub data: DataView,
    pub quadrature: Option<String>,
    pub all_series: Option<TableView>,
    pub levels_figure: Option<FigureView>,
    /// The series whose pages are printed.
    pub series: Vec<SeriesView>,
    pub series_count: String,
    pub detail: &'static str,
    pub pages_left_out: Option<String>,
    pub across: Vec<AcrossView>,
    pub many_examined: Option<String>,
    pub wrong_verdicts: Vec<String>,
    pub checks_over_series: Option<TableView>,
    pub cautions: Option<TableView>,
    pub cautions_rest: Option<String>,
    pub opinion: Option<OpinionView>,
    pub actions: Option<TableView>,
    pub inputs: TableView,
    pub inputs_copied: bool,
    pub dependencies: TableView,
    pub sign_off: TableView,
    pub glossary: TableView,
    pub barg: TableView,
    pub codes: Option<TableView>,
    pub specs: Vec<SpecView>,
}

#[derive(Debug, Serialize)]
pub struct LinkView {
    pub folder: String,
    pub stamp: Option<String>,
    pub reason: Option<String>,
}

#[derive(Debug, Serialize)]
pub struct OpinionView {
    pub text: Value,
    pub by: Option<String>,
}

#[derive(Debug, Serialize)]
pub struct SpecView {
    pub name: String,
    pub text: Value,
    pub whole: bool,
}

/// The view and the drawings that it shows.
pub fn build(findings: &Findings, stamp: &StampText) -> (ReportView, Drawings) {
    let plan = &findings.plan;
    let review = &plan.review;
    let mut drawings = Drawings::default();
    let levels_figure = drawings::levels(&mut drawings, &findings.series, plan);
    let slugs = drawings::slugs(findings.series.iter().map(|series| series.name.as_str()));
    let mut pages = Vec::new();
    for (series, slug) in findings.series.iter().zip(&slugs) {
        let shown = match plan.report.detail {
            Detail::All => true,
            Detail::Flagged => series::flagged(series),
            Detail::None => false,
        };
        if shown {
            pages.push(series::view(findings, series, slug, &mut drawings));
        }
    }
    let mut used: Vec<&str> = findings.cautions.iter().map(|caution| caution.code).collect();
    used.sort_unstable();
    used.dedup();
    let view = ReportView {
        title: review.title.clone(),
        id: review.id.clone(),
        period: review.period.to_string(),
        date: review.date.to_string(),
        status: review.status.word(),
        is_final: review.status == Status::Final,
        until: review.until.map(|until| until.to_string()),
        quantity: plan.quantity.name.clone(),
        unit: if plan.quantity.unit == "1" { String::new() } else { plan.quantity.unit.clone() },
        log_scale: plan.quantity.scale == Scale::Log,
        particulars: review.particulars.clone(),
        supersedes: review.supersedes.as_ref().map(link),
        before: compared::view(findings, Relation::Previous),
        superseded: compared::view(findings, Relation::Amended),
        stamp: stamp.whole.clone(),
        stamp_label: stamp.label.clone(),
        program: stamp.program.clone(),
        summary: head::summary(findings),
        purpose: review.purpose.as_deref().map(own_markdown),
        limits: head::limits(plan),
        limit_of_each_reading: plan.limits.iter().any(|limit| limit.applies_to == AppliesTo::EachReading),
        questions: head::questions(findings),
        data: data::view(findings),
        quadrature: (findings.quadrature_error > 0.0)
            .then(|| text::significant(findings.quadrature_error, 1)),
        all_series: (findings.series.len() > 1).then(|| head::all_series(findings)).flatten(),
        levels_figure,
        pages_left_out: left_out(findings.series.len(), pages.len()),
        series: pages,
        series_count: text::count(findings.series.len() as u64),
        detail: match plan.report.detail {
            Detail::All => "all",
            Detail::Flagged => "flagged",
            Detail::None => "none",
        },
        across: findings.across.iter().map(|across| answers::across(across, plan)).collect(),
        many_examined: many_examined(findings),
        wrong_verdicts: wrong_verdicts(findings),
        checks_over_series: checks_over_series(findings),
        cautions: head::cautions_of(findings, None),
        cautions_rest: head::cautions_rest(findings),
        opinion: review
            .interpretation
            .as_ref()
            .map(|opinion| OpinionView { text: own_markdown(&opinion.text), by: opinion.by.clone() }),
        actions: head::actions(plan),
        inputs: inputs(stamp),
        inputs_copied: plan.report.inputs_copied,
        dependencies: dependencies(),
        sign_off: head::sign_off(plan),
        glossary: fixed::glossary(),
        barg: fixed::barg(),
        codes: fixed::codes(used.into_iter()),
        specs: plan.spec_files.iter().map(spec).collect(),
    };
    (view, drawings)
}

fn link(link: &crate::plan::Link) -> LinkView {
    LinkView { folder: link.written.clone(), stamp: link.stamp.clone(), reason: link.reason.clone() }
}

/// Markdown that the user wrote as such: kept, but for what would hide or steer letters.
fn own_markdown(text: &str) -> Value {
    let lines: Vec<String> = text.lines().map(|line| escape::visible(line).trim_end().to_string()).collect();
    Value::from_safe_string(lines.join("\n").trim_matches('\n').to_string())
}

fn left_out(all: usize, shown: usize) -> Option<String> {
    (shown < all)
        .then(|| format!("{} of {} series", text::count((all - shown) as u64), text::count(all as u64)))
}

fn many_examined(findings: &Findings) -> Option<String> {
    let examined: usize = findings.series.iter().map(|series| series.answers.len()).sum();
    let checks: usize = findings
        .series
        .iter()
        .flat_map(|series| &series.checks)
        .filter(|check| check.tested().is_some())
        .count();
    (examined > MANY_EXAMINED).then(|| {
        format!(
            "{} answers on {} series and {} tests of assumptions were examined at once. A test flags below p = 0.01: about {} flags among so many tests are expected where every assumption holds.",
            text::count(examined as u64),
            text::count(findings.series.len() as u64),
            text::count(checks as u64),
            text::significant(checks as f64 * FLAG_BELOW, 2)
        )
    })
}

/// One line a question whose verdicts a chance decides, over several series.
fn wrong_verdicts(findings: &Findings) -> Vec<String> {
    if findings.series.len() < 2 {
        return Vec::new();
    }
    findings
        .wrong_verdicts
        .iter()
        .map(|wrong| {
            format!(
                "{}: of {} {}, {} expected to be wrong by the probabilities printed.",
                wrong.question,
                text::count(wrong.given as u64),
                if wrong.given == 1 { "verdict" } else { "verdicts" },
                match wrong.expected_wrong {
                    few if few < 0.001 => "fewer than 0.001".to_string(),
                    expected => text::significant(expected, 2),
                }
            )
        })
        .collect()
}

fn checks_over_series(findings: &Findings) -> Option<TableView> {
    let mut table = TableView::new(
        "Each kind of test of an assumption over all series, with what chance alone makes",
        &[
            ("check", Column::Head),
            ("series", Column::Number),
            ("flags", Column::Number),
            ("flags by chance", Column::Number),
            ("p below 0.05", Column::Number),
            ("of these by chance", Column::Number),
            ("stand out at q = 0.05", Column::Text),
        ],
    );
    for over in &findings.checks_over_series {
        let figure = |wanted: &str| {
            over.check.extra.iter().find(|(name, _)| *name == wanted).map_or(f64::NAN, |(_, value)| *value)
        };
        let number = |value: f64| plain(text::significant(value, 3));
        let whole = |value: f64| plain(text::count(value as u64));
        table.row(vec![
            plain(over.kind),
            whole(figure("series")),
            whole(over.check.statistic.unwrap_or(f64::NAN)),
            number(figure("expected flags")),
            whole(figure("findings below 0.05")),
            number(figure("expected findings below 0.05")),
            plain(match over.stand_out.as_slice() {
                [] => "none".to_string(),
                few if few.len() <= NAMES_LISTED => few.join(", "),
                many => format!("{} series", text::count(many.len() as u64)),
            }),
        ]);
    }
    table.some()
}

fn inputs(stamp: &StampText) -> TableView {
    let mut table =
        TableView::new("What went into the stamp", &[("file", Column::Head), ("SHA-256", Column::Text)]);
    for (file, sha256) in &stamp.inputs {
        table.row(vec![code(file), code(sha256)]);
    }
    table
}

/// The libraries that the program is built on, with their pinned versions.
fn dependencies() -> TableView {
    const MANIFEST: &str = include_str!("../../../Cargo.toml");
    const LOCK: &str = include_str!("../../../Cargo.lock");
    let mut table = TableView::new(
        "Libraries and their pinned versions",
        &[("library", Column::Head), ("version", Column::Text)],
    );
    let section = MANIFEST.split("[dependencies]").nth(1).unwrap_or_default();
    let section = section.split("\n[").next().unwrap_or_default();
    for line in section.lines() {
        let Some(name) = line.split('=').next().map(str::trim).filter(|name| !name.is_empty()) else {
            continue;
        };
        let entry = format!("name = \"{name}\"\nversion = \"");
        let version = LOCK.split(&entry).nth(1).and_then(|rest| rest.split('"').next());
        if let Some(version) = version {
            table.row(vec![plain(name), plain(version)]);
        }
    }
    table
}

fn spec(file: &crate::plan::SpecFile) -> SpecView {
    let text = String::from_utf8_lossy(&file.bytes);
    let lines: Vec<&str> = text.lines().collect();
    let printed = lines.iter().take(SPEC_LINES_PRINTED).copied().collect::<Vec<_>>().join("\n");
    SpecView {
        name: file.name.clone(),
        text: Value::from_safe_string(escape::code_block(&printed)),
        whole: lines.len() <= SPEC_LINES_PRINTED,
    }
}
