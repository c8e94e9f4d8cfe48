//! The report: numbers to text, figures, Markdown and HTML. It computes nothing that is an answer.

pub mod escape;
pub mod figure_axis;
pub mod figure_frame;
pub mod figure_labels;
pub mod figure_level;
pub mod figure_lines;
pub mod figure_periods;
pub mod figure_quantiles;
pub mod figure_rows;
pub mod html;
pub mod markdown;
pub mod svg;
pub mod text;
pub mod views;

use crate::diagnostics::{Fault, Outcome};
use crate::findings::Findings;
use html::PageHead;

/// A report as its files hold it.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Rendered {
    pub markdown: String,
    pub html: String,
    /// The figures by the name of their file without its ending, which the Markdown shows; each a whole SVG.
    pub figures: Vec<(String, String)>,
}

/// What the report says of the stamp: it is made before the report and printed in it.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct StampText {
    /// The whole stamp, 64 hexadecimal digits.
    pub whole: String,
    /// Its first 16 digits in groups of four: a label, no proof.
    pub label: String,
    /// What went in: names as the spec has them, and SHA-256.
    pub inputs: Vec<(String, String)>,
    /// Name and version of the program.
    pub program: String,
}

impl StampText {
    /// The label of a stamp: "3f9a 1c20 77be 04d1".
    pub fn label_of(stamp: &str) -> String {
        let digits: Vec<char> = stamp.chars().take(16).collect();
        digits.chunks(4).map(|group| group.iter().collect::<String>()).collect::<Vec<_>>().join(" ")
    }
}

/// The whole report. `own_template` is the user's template with the name that the spec gives it, where
/// the plan names one.
pub fn render(
    findings: &Findings,
    stamp: &StampText,
    own_template: Option<(&str, &[u8])>,
) -> Outcome<Rendered> {
    let (view, drawings) = views::build(findings, stamp);
    let markdown = markdown::render(&view, view.series.len(), own_template)?;
    let figures = drawings.figures;
    let shown: Vec<(&str, &str)> = figures.iter().map(|(name, svg)| (name.as_str(), svg.as_str())).collect();
    let head = PageHead {
        title: view.title.clone(),
        facts: facts(&view),
        page_label: format!("{}, {}, stamp {}", view.id, view.status, view.stamp_label),
        footer: vec![
            format!("{} {}", view.id, view.status),
            format!("Stamp {}", view.stamp),
            view.program.clone(),
        ],
    };
    let html = html::page(&markdown, &shown, &head).map_err(|error| {
        Fault::wrong("report-failed", error.to_string())
            .expected("figures that the report has, each shown once")
            .repair("look at pictures in the template, in `purpose` and in `interpretation`")
    })?;
    Ok(Rendered { markdown, html, figures })
}

fn facts(view: &views::ReportView) -> Vec<(String, String)> {
    let fact = |name: &str, value: &str| (name.to_string(), value.to_string());
    let mut facts = vec![
        fact("Review", &view.id),
        fact("Status", view.status),
        fact("Period under review", &view.period),
        fact("Date of the report", &view.date),
    ];
    let unit = if view.unit.is_empty() { String::new() } else { format!(", in {}", view.unit) };
    facts.push(fact("Quantity", &format!("{}{unit}", view.quantity)));
    facts.extend(view.particulars.iter().cloned());
    facts.push(fact("Stamp (label)", &view.stamp_label));
    facts
}

#[cfg(test)]
mod figure_tests;
#[cfg(test)]
mod report_tests;
