//! Whole specs against brute force: every figure of `reference/answers.json` (made by `reference/answers.py`, a second
//! implementation from the formulas alone) through the public way from spec to findings, held to the promised accuracy:
//! probabilities within 1e-9 relative down to 1e-12 and 1e-21 absolute below, ends within 1e-10 of
//! max(|end|, a quarter of the interval it belongs to, an sd where the law is normal and the interval holds 95 %).

use reassay::findings::Findings;
use reassay::findings::laws::LawFigures;
use reassay::quantity::{Absent, Scale};
use reassay::questions::figures::{Figures, Item};
use reassay::spec::table::{Kind, Table};
use serde_json::Value;
use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::path::{Path, PathBuf};

const RELATIVE_OF_CHANCE: f64 = 1e-9;
const SMALLEST_RELATIVE: f64 = 1e-12;
const ABSOLUTE_OF_CHANCE: f64 = 1e-21;
const OF_END: f64 = 1e-10;
/// Plans of readings to come are averages over what may come, no answers about what was measured: widths (of the size of
/// 1 in the specs here) and chances of verdicts.
const OF_PLAN: f64 = 1e-6;

/// Specs that take more than a few seconds without optimisation: two or three unknown spreads under a dozen
/// alternatives, or shares and percentiles over them. `cargo test --release reference_answers -- --include-ignored`
/// runs them too.
const LONG: [&str; 23] = [
    "09-history-uniform-known",
    "10-history-uniform-history",
    "11-history-half-normal",
    "12-history-half-cauchy-two",
    "13-history-half-cauchy-one",
    "14-history-between-known",
    "21-walk-half-normal-history",
    "23-nearly-equal-means",
    "24-one-wild-period",
    "25-three-periods-uniform",
    "26-fifty-periods",
    "27-large-n",
    "28-values-near-a-million",
    "38-peers-uniform-within-peers",
    "43-log-history",
    "44-two-sigmas",
    "47-stated-df-history",
    "53-narrow-far-known",
    "78-rules-history-known",
    "79-rules-stated-readings",
    "89-needed-history",
    "94-share-readings",
    "95-share-history",
];

fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference")
}

/// The number of that name: `chances.3` is the fourth of a list, `conditions.1.limits.0` the first of that list in the
/// second row, `conditions.1.limits.len` how many it has.
fn number(figures: &Figures, name: &str) -> Result<f64, String> {
    let Some((list, rest)) = name.split_once('.') else {
        return match figures.get(name) {
            Some(Item::Number(Ok(value), _)) => Ok(*value),
            Some(Item::Whole(Some(count))) => Ok(*count as f64),
            other => Err(format!("{other:?}")),
        };
    };
    let place = |text: &str| text.parse::<usize>().map_err(|_| format!("no place {text}"));
    match figures.get(list) {
        Some(Item::Numbers(numbers, _)) if rest == "len" => Ok(numbers.len() as f64),
        Some(Item::Numbers(numbers, _)) => {
            numbers.get(place(rest)?).copied().ok_or_else(|| format!("{} numbers only", numbers.len()))
        }
        Some(Item::Rows(rows)) => {
            let (row, inner) = rest.split_once('.').ok_or("a row has no value of its own")?;
            number(rows.get(place(row)?).ok_or_else(|| format!("{} rows only", rows.len()))?, inner)
        }
        other => Err(format!("{other:?}")),
    }
}

/// What the program gives for one figure; a question over several series has no series of its own.
fn given(findings: &Findings, series: &str, question: &str, name: &str) -> Result<f64, String> {
    if series.is_empty() {
        let across = findings.across.iter().find(|across| across.id == question).ok_or("not asked")?;
        let (member, name) = name.split_once(':').unwrap_or(("", name));
        let of = across.series.iter().find(|(series, _)| series == member).ok_or("no such series")?;
        return number(&of.1, name);
    }
    let found = findings.series.iter().find(|found| found.name == series).ok_or("no such series")?;
    if let Some(law) = question.strip_prefix("posterior.") {
        return of_law(&found.laws.posterior, law, name);
    }
    if question == "prior_weight" {
        return found.influence.prior_weight.clone().map_err(|absent| absent.reason);
    }
    let (id, basis) = question.split_once('.').unwrap_or((question, ""));
    let answer = found.answers.iter().find(|answer| answer.id == id).ok_or("not asked")?;
    match basis {
        "prior_only" => number(&answer.prior_only, name),
        "readings_only" => number(&answer.readings_only, name),
        "rule" => number(&answer.rule_figures, name),
        "" => number(&answer.figures, name),
        alternative => {
            let under = found.sensitivity.iter().find(|under| under.alternative == alternative);
            let under = under.ok_or("no such alternative")?;
            let of = under.answers.iter().find(|(own, ..)| own == id).ok_or("not asked under it")?;
            number(&of.1, name)
        }
    }
}

/// A law of the posterior as answers.json has it: mean, sd (of the logarithm on the log scale) and quantiles.
fn of_law(laws: &[(&'static str, Result<LawFigures, Absent>)], law: &str, name: &str) -> Result<f64, String> {
    let (_, figures) = laws.iter().find(|(own, _)| *own == law).ok_or("no such law")?;
    let figures = figures.as_ref().map_err(|absent| absent.reason.clone())?;
    let figure = match (name, &figures.logs) {
        ("mean", _) => &figures.mean,
        ("sd", _) => &figures.sd,
        ("log_mean", Some((mean, _))) => mean,
        ("log_sd", Some((_, sd))) => sd,
        _ => &figures.quantiles.iter().find(|(tail, _)| *tail == name).ok_or("no such quantile")?.1,
    };
    figure.clone().map_err(|absent| absent.reason)
}

fn asked(findings: &Findings, question: &str) -> String {
    let (id, basis) = question.split_once('.').unwrap_or((question, ""));
    let answers = findings.series.iter().flat_map(|series| &series.answers);
    let own = answers.filter(|answer| answer.id == id).map(|answer| answer.ask.clone()).next();
    let across = || findings.across.iter().find(|across| across.id == id).map(|across| across.ask.clone());
    let ask = own.or_else(across).unwrap_or_else(|| id.to_string());
    format!("{ask} {basis}").trim_end().replace('_', " ")
}

/// The error in units of what is promised.
fn error_in_promises(kind: &str, got: f64, wanted: f64, spread: f64) -> f64 {
    let error = (got - wanted).abs();
    let allowed = match kind {
        "chance" if wanted < SMALLEST_RELATIVE => ABSOLUTE_OF_CHANCE,
        "chance" | "count" => RELATIVE_OF_CHANCE * wanted,
        "sd" => OF_END * wanted,
        "plan" => OF_PLAN,
        // A count of things is right or wrong.
        "whole" => 0.1,
        _ => OF_END * wanted.abs().max(spread),
    };
    // A figure that is no number must fail.
    if error <= allowed || error.is_finite() { error / allowed } else { f64::INFINITY }
}

fn value(figure: &Value) -> f64 {
    figure["value"].as_str().expect("a text").parse().expect("a number")
}

/// Prior and within sd of a spec, in the words of its file.
fn model_of(findings: &Findings) -> (String, String) {
    let plan = &findings.plan;
    let text = |table: &Table, key: &str| match table.get(key).map(|value| &value.kind) {
        Some(Kind::Text(text)) => Some(text.clone()),
        _ => None,
    };
    let mut prior = text(&plan.prior, "from").expect("a prior");
    for key in ["pattern", "between"] {
        prior.extend(text(&plan.prior, key).map(|value| format!(", {value}")));
    }
    for key in ["between_sd", "worth_readings", "weight_of_history"] {
        prior.extend(plan.prior.get(key).map(|_| format!(", {}", key.replace('_', " "))));
    }
    let mut within = text(&plan.within, "from").expect("a within sd");
    if within == "stated" {
        within += if plan.within.get("df").is_some() { ", df" } else { ", known" };
    }
    if plan.quantity.scale == Scale::Log {
        within += ", log";
    }
    (prior, within)
}

/// What was compared for one kind of question, or one kind of model.
#[derive(Default)]
struct Seen {
    figures: usize,
    specs: BTreeSet<String>,
    worst: f64,
    place: String,
}

impl Seen {
    fn add(&mut self, spec: &str, error: f64, place: &str) {
        self.figures += 1;
        self.specs.insert(spec.to_string());
        if error > self.worst {
            self.worst = error;
            self.place = place.to_string();
        }
    }
}

/// Runs the specs that `wanted` chooses, compares all their figures and prints what was covered.
fn compare(wanted: impl Fn(&str) -> bool, at_least: usize) {
    let text = fs::read_to_string(folder().join("answers.json")).expect("answers.json");
    let table: Value = serde_json::from_str(&text).expect("JSON");
    let specs = table["specs"].as_object().expect("specs");
    let mut by_question: BTreeMap<String, Seen> = BTreeMap::new();
    let mut by_model: BTreeMap<(String, String), Seen> = BTreeMap::new();
    let mut wrong = Vec::new();
    let (mut compared, mut run) = (0, 0);
    for (spec, expected) in specs.iter().filter(|(spec, _)| wanted(spec)) {
        run += 1;
        let shown = format!("{spec}.toml");
        let began = std::time::Instant::now();
        let findings = match reassay::review::run(&folder().join("answers").join(&shown), &shown, 1) {
            Ok(findings) => findings,
            Err(faults) => {
                wrong.push(format!("{spec}: refused: {faults:?}"));
                continue;
            }
        };
        println!("{spec}: {:.1} s", began.elapsed().as_secs_f64());
        let model = model_of(&findings);
        for (series, questions) in expected["series"].as_object().expect("series") {
            for (question, figures) in questions.as_object().expect("questions") {
                let ask = asked(&findings, question);
                let figures = figures.as_object().expect("figures");
                let ends = figures.get("lower").zip(figures.get("upper"));
                // The levels of an operating characteristic span a range of their own.
                let levels =
                    ["0", "40"].map(|row| figures.get(&format!("operating_characteristic.{row}.level")));
                let ends = ends.or(levels[0].zip(levels[1]));
                let spread = match ends.or(figures.get("0.025").zip(figures.get("0.975"))) {
                    Some((lower, upper)) => (value(upper) - value(lower)) / 4.0,
                    None => 0.0,
                };
                for (name, figure) in figures {
                    compared += 1;
                    let wanted = value(figure);
                    let kind = figure["kind"].as_str().expect("a kind");
                    let place = format!("{spec} {series} {question} ({ask}) {name}");
                    match given(&findings, series, question, name) {
                        Err(why) => wrong.push(format!("{place}: expected {wanted}, there is none: {why}")),
                        Ok(got) => {
                            let error = error_in_promises(kind, got, wanted, spread);
                            if error > 1.0 {
                                wrong.push(format!(
                                    "{place}: {got:?}, expected {wanted:?}: {error:.2e} times the promise"
                                ));
                            }
                            by_question.entry(ask.clone()).or_default().add(spec, error, &place);
                            by_model.entry(model.clone()).or_default().add(spec, error, &place);
                        }
                    }
                }
            }
        }
    }
    println!("| question | figures | specs | worst error, in promises | at |");
    for (ask, seen) in &by_question {
        println!("| {ask} | {} | {} | {:.1e} | {} |", seen.figures, seen.specs.len(), seen.worst, seen.place);
    }
    println!("| prior | within | figures | specs | worst error, in promises |");
    for ((prior, within), seen) in &by_model {
        println!("| {prior} | {within} | {} | {} | {:.1e} |", seen.figures, seen.specs.len(), seen.worst);
    }
    println!("{compared} figures of {run} specs");
    assert!(wrong.is_empty(), "{} figures disagree:\n{}", wrong.len(), wrong.join("\n"));
    assert!(compared >= at_least, "only {compared} figures were compared");
}

#[test]
fn every_spec_has_its_expected_answers() {
    let text = fs::read_to_string(folder().join("answers.json")).expect("answers.json");
    let table: Value = serde_json::from_str(&text).expect("JSON");
    let expected: BTreeSet<String> = table["specs"].as_object().expect("specs").keys().cloned().collect();
    let files: BTreeSet<String> = fs::read_dir(folder().join("answers"))
        .expect("the folder of specs")
        .map(|entry| entry.expect("an entry").file_name().to_string_lossy().replace(".toml", ""))
        .collect();
    assert_eq!(expected, files);
    assert!(LONG.iter().all(|spec| expected.contains(*spec)), "LONG names specs that are there");
}

#[test]
fn answers_agree_with_brute_force() {
    compare(|spec| !LONG.contains(&spec), 900);
}

#[test]
#[ignore = "minutes even with optimisation"]
fn long_answers_agree_with_brute_force() {
    compare(|spec| LONG.contains(&spec), 700);
}
