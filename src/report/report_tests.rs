//! The report of hand-made findings: an invented spec, readings without any posterior.

use super::{Rendered, StampText, render};
use crate::data::evidence::Evidence;
use crate::data::{Data, Facts, Fate, InputFile, Mark, PeriodData, ReadingRow, RowCounts, SeriesData};
use crate::diagnostics::{Caution, Faults};
use crate::findings::laws::Laws;
use crate::findings::{Answer, Findings, Influence, SeriesFindings, UnderAlternative};
use crate::plan::Plan;
use crate::quantity::{Absent, Period};
use crate::questions::figures::{Figures, Item, Meaning};
use crate::questions::rule::Given;

const SPEC: &str = r#"
[review]
title = "Iron | at the *invented* weirs <b>"
id = "FE-2025"
period = 2025
date = 2026-01-20
purpose = "An **invented** review."
interpretation = { text = "All is *well*.", by = "I. Nvented" }

[quantity]
name = "iron"
unit = "mg/L"

[limit.guide]
value = 0.20
basis = "invented"
applies_to = "each reading"

[[readings]]
values = [0.148, 0.152, "<0.1"]
marks = { below = ["<"] }

[within]
from = "stated"
sd = 0.01
basis = "invented"

[prior]
from = "stated"
mean = 0.15
sd = 0.02
basis = "invented"

[[question]]
id = "level"
ask = "level interval"
say = "What is the level | of `2025`?"

[[question]]
id = "over"
ask = "level chance"
above = "guide"
[question.rule]
agreed = 2024-11-30
verdicts = [
  { say = "above", chance_at_least = 0.95, fail = true },
  { say = "not above", chance_at_most = 0.05 },
  { say = "not decided" },
]
"#;

fn plan() -> Plan {
    let folder = std::env::temp_dir().join(format!("reassay-report-{}", std::process::id()));
    std::fs::create_dir_all(&folder).unwrap();
    let path = folder.join(format!("{:?}.toml", std::thread::current().id()));
    std::fs::write(&path, SPEC).unwrap();
    let read = |path: &std::path::Path| crate::source::whole(path, "spec.toml", "reading the spec");
    let plan = crate::plan::load(&path, "spec.toml", &read).unwrap();
    std::fs::remove_file(&path).unwrap();
    plan
}

fn absent() -> Absent {
    Absent::because("not computed in this test")
}

fn interval(estimate: f64, lower: f64, upper: f64) -> Figures {
    Figures::default()
        .number("estimate", Ok(estimate), Meaning::Value)
        .number("lower", Ok(lower), Meaning::Value)
        .number("upper", Ok(upper), Meaning::Value)
}

fn chance(chance: f64) -> Figures {
    Figures::default().number("chance", Ok(chance), Meaning::Chance)
}

fn given(say: &str) -> Option<Given> {
    Some(Given { say: Some(say.to_string()), fail: say == "above", why: None })
}

fn series(name: &str, over: f64, verdict: &str) -> SeriesFindings {
    let answer = |id: &str, ask: &str, say: Option<&str>, figures: Figures, verdict: Option<Given>| Answer {
        id: id.to_string(),
        ask: ask.to_string(),
        say: say.map(str::to_string),
        words: format!("what \"{ask}\" asks about"),
        symbols: "P(θ > 0.2 | prior, readings)".to_string(),
        settings: Vec::new(),
        prior_only: figures.clone(),
        readings_only: Figures::default(),
        figures,
        verdict,
        rule_figures: Figures::default().with("note", Item::Text("none".to_string())),
        working: Vec::new(),
    };
    SeriesFindings {
        carried_ledger: Vec::new(),
        name: name.to_string(),
        label: None,
        prior_from: "stated".to_string(),
        prior_notes: vec!["The prior is stated. Its basis: invented.".to_string()],
        within_words: "stated and taken as known: 0.01".to_string(),
        spread_of_means: None,
        prior: Err(absent()),
        readings_only: Err(absent()),
        posterior: Err(absent()),
        laws: Laws::of(&Err(absent()), &Err(absent())),
        influence: Influence { prior_weight: Ok(0.25), prior_readings: Ok(1.5) },
        answers: vec![
            answer(
                "level",
                "level interval",
                Some("What is the level | of `2025`?"),
                interval(0.1501, 0.1402, 0.1599),
                None,
            ),
            answer("over", "level chance", None, chance(over), given(verdict)),
        ],
        checks: Vec::new(),
        sensitivity: vec![UnderAlternative {
            alternative: "flat prior".to_string(),
            answers: vec![
                ("level".to_string(), interval(0.1601, 0.1402, 0.1799), None),
                ("over".to_string(), chance(0.2), given("not decided")),
            ],
            why: None,
        }],
        without_readings: false,
    }
}

fn row(series: &str, line: u64, text: &str, value: f64, mark: Mark, fate: Fate) -> ReadingRow {
    ReadingRow {
        series: series.to_string(),
        period: Period::new("2025"),
        id: None,
        file: Some(0),
        line,
        text: text.to_string(),
        value: Some(value),
        mark,
        uncertainty: None,
        date: None,
        replicate: None,
        fate,
    }
}

fn findings(names: &[&str]) -> Findings {
    let data_of = |name: &&str| SeriesData {
        name: name.to_string(),
        periods: vec![PeriodData {
            period: Period::new("2025"),
            evidence: Evidence::Sums { n: 3, mean: 0.15, ss: Some(1e-4), rest: 0.0 },
            restored: None,
            facts: Facts {
                n: 3,
                mean: Some(0.15),
                sd: Some(0.00707),
                smallest: Some(0.142),
                largest: Some(0.158),
                decimals: 3,
                ..Facts::default()
            },
            readings: vec![
                row(name, 1, "0.142", 0.142, Mark::None, Fate::Used),
                row(name, 2, "0.150", 0.150, Mark::None, Fate::Used),
                row(name, 3, "0.158|*", 0.158, Mark::None, Fate::Used),
            ],
        }],
    };
    Findings {
        compared: Vec::new(),
        checks_over_series: Vec::new(),
        wrong_verdicts: Vec::new(),
        settings: Vec::new(),
        plan: plan(),
        data: Data {
            series: names.iter().map(data_of).collect(),
            periods: vec![Period::new("2025")],
            files: vec![InputFile {
                written: "iron|x.csv".to_string(),
                path: "iron.csv".into(),
                sha256: "ab".repeat(32),
                bytes: 12480,
                notes: vec!["the delimiter is a semicolon".to_string()],
            }],
            excluded_rows: Vec::new(),
            rows_kept: true,
            counts: RowCounts { read: 3, used: 3, ..RowCounts::default() },
            cautions: Vec::new(),
        },
        series: names.iter().map(|name| series(name, 0.0004, "not above")).collect(),
        not_reviewed: vec![("W-9".to_string(), "2019".to_string())],
        across: Vec::new(),
        cautions: vec![Caution::new("no-common-bias", "No allowance for a bias was given.")],
        quadrature_error: 3e-13,
    }
}

fn stamp() -> StampText {
    let whole = "0123456789abcdef".repeat(4);
    StampText {
        label: StampText::label_of(&whole),
        whole,
        inputs: vec![("spec.toml".to_string(), "cd".repeat(32))],
        program: "reassay 0.1.0".to_string(),
    }
}

fn rendered(names: &[&str]) -> Rendered {
    render(&findings(names), &stamp(), None).unwrap()
}

/// Every table's rows have as many cells as its head: a bar in a user's text does not part a cell.
fn tables_are_whole(markdown: &str) {
    let cells = |line: &str| {
        let line = line.replace("\\\\", "").replace("\\|", "");
        line.matches('|').count()
    };
    let mut expected = None;
    let mut fenced = false;
    for line in markdown.lines() {
        fenced ^= line.starts_with("```");
        if fenced || !line.starts_with('|') {
            expected = None;
            continue;
        }
        let count = cells(line);
        assert_eq!(*expected.get_or_insert(count), count, "{line}");
    }
}

#[test]
fn one_series_is_reported_from_summary_to_end_mark() {
    let Rendered { markdown, html, figures } = rendered(&["W-1"]);
    tables_are_whole(&markdown);
    assert!(markdown.ends_with("**End of report FE-2025.**\n"));
    assert!(markdown.contains("| 0.1501 (0.1402 to 0.1599)\u{a0}mg/L |"), "{markdown}");
    assert!(
        markdown.contains("< 0.001 (less than 1 in 1000)") || markdown.contains("\\< 0.001"),
        "{markdown}"
    );
    assert!(markdown.contains("**✓ not above**"));
    assert!(markdown.contains("Iron \\| at the \\*invented\\* weirs \\<b>"));
    assert!(markdown.contains("An **invented** review."));
    assert!(markdown.contains("over: “not above” becomes “not decided” under “flat prior”."));
    assert!(markdown.contains("0123 4567 89ab cdef"));
    assert!(html.contains("<strong class=\"verdict met\">✓ not above</strong>"));
    assert!(!html.contains("<b>"));
    // Without a posterior only the readings and the alternatives can be drawn.
    let names: Vec<&str> = figures.iter().map(|(name, _)| name.as_str()).collect();
    assert_eq!(names, ["w-1-quantiles", "w-1-sensitivity"]);
}

#[test]
fn no_section_prints_an_inner_form() {
    let Rendered { markdown, .. } = rendered(&["W-1", "W-2"]);
    for inner in ["Ok(", "Err(", "Some(", "None", "Absent", "{{", "{%", "undefined"] {
        assert!(!markdown.contains(inner), "{inner}");
    }
}

#[test]
fn a_thousand_series_make_one_table_and_no_more_pages_than_asked_for() {
    let names: Vec<String> = (1..=1000).map(|number| format!("W-{number}")).collect();
    let names: Vec<&str> = names.iter().map(String::as_str).collect();
    let mut findings = findings(&names);
    findings.plan.report.detail = crate::plan::Detail::None;
    let Rendered { markdown, figures, .. } = render(&findings, &stamp(), None).unwrap();
    tables_are_whole(&markdown);
    assert!(figures.is_empty());
    assert!(!markdown.contains("## Series"));
    // In the table of data and in that of results.
    assert_eq!(markdown.matches("\n| W-777 |").count(), 2);
    let first_page = markdown.split("## 2.").next().unwrap();
    assert!(first_page.lines().count() < 90, "{}", first_page.lines().count());
}

#[test]
fn names_of_figures_are_told_apart() {
    let names = ["A 1", "a-1", "ü", "ß"];
    assert_eq!(super::views::drawings::slugs(names.into_iter()), ["a-1", "a-1-2", "series", "series-2"]);
}

#[test]
fn a_template_of_ones_own_takes_sections_and_is_escaped() {
    let own = "# Own\n\n{{ title }}\n\n{% include \"sections/sign-off.md\" %}\n";
    let Rendered { markdown, .. } =
        render(&findings(&["W-1"]), &stamp(), Some(("own.txt", own.as_bytes()))).unwrap();
    assert!(markdown.starts_with("# Own\n\nIron \\| at"), "{markdown}");
    assert!(markdown.contains("## 11. Sign-off"));
}

fn template_fault(own: &str) -> crate::diagnostics::Fault {
    let Faults(faults) = render(&findings(&["W-1"]), &stamp(), Some(("own.md", own.as_bytes()))).unwrap_err();
    assert_eq!(faults.len(), 1);
    faults.into_iter().next().unwrap()
}

#[test]
fn faults_of_a_template_have_their_place() {
    for (own, line, column, words) in [
        ("# T\n\nIt is {{ titel }}.\n", 3, 10, "undefined value"),
        ("# T\n{{ title | nofilter }}\n", 2, 12, "unknown filter"),
        ("# T\n{% if %}\n", 2, 7, "syntax error"),
        ("{% include \"sections/none.md\" %}\n", 1, 4, "template not found"),
        ("{{ debug() }}\n", 1, 4, "unknown function"),
    ] {
        let fault = template_fault(own);
        let place = fault.place.clone().unwrap();
        assert_eq!((place.file.as_str(), place.line), ("own.md", line), "{fault:?}");
        assert_eq!(place.column, column, "{fault:?}");
        assert!(fault.message.contains(words), "{fault:?}");
    }
}

#[test]
fn a_template_without_end_is_stopped() {
    let own = "{% for a in range(9999) %}{% for b in range(9999) %}{{ a * b }}{% endfor %}{% endfor %}";
    assert!(template_fault(own).message.contains("too many steps"));
}

#[test]
fn a_picture_that_is_no_figure_is_a_fault() {
    let fault = template_fault("![x](figures/none.svg)\n");
    assert_eq!(fault.code, "report-failed");
}

/// Every code of a caution in the sources has its meaning in the report.
#[test]
fn every_caution_has_a_meaning() {
    let mut folders = vec![std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("src")];
    let mut missing = Vec::new();
    while let Some(folder) = folders.pop() {
        for entry in std::fs::read_dir(folder).unwrap() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                folders.push(path);
                continue;
            }
            let text = std::fs::read_to_string(&path).unwrap_or_default();
            for part in text.split(concat!("Caution", "::new(")).skip(1) {
                let code = part.trim_start().strip_prefix('"').and_then(|rest| rest.split('"').next());
                let known = |code: &str| super::views::fixed::CODES.iter().any(|(known, _)| *known == code);
                missing.extend(code.filter(|code| !known(code)).map(str::to_string));
            }
        }
    }
    assert!(missing.is_empty(), "{missing:?}");
}

/// For looking at: the demos' reports. `LOOK_AT` names the folder that receives them.
#[test]
#[ignore = "writes files to look at"]
fn write_the_demos() {
    let out = std::path::PathBuf::from(std::env::var("LOOK_AT").unwrap());
    let specs = std::env::var("SPECS").unwrap_or_else(|_| "nitrate,concrete,weights".to_string());
    for name in specs.split(',') {
        let spec = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("specs/{name}.toml"));
        let mut findings = crate::review::run(&spec, &format!("{name}.toml"), 2).unwrap();
        let cautions = crate::findings::cautions::of(&findings);
        findings.cautions.extend(cautions);
        let Rendered { markdown, html, .. } = render(&findings, &stamp(), None).unwrap();
        tables_are_whole(&markdown);
        std::fs::write(out.join(format!("{name}.md")), markdown).unwrap();
        std::fs::write(out.join(format!("{name}.html")), html).unwrap();
    }
}
