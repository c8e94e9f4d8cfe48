//! # stated
//! "Before the readings I put the level at such a value, give or take so much." The prior of this
//! period's level is N(mean, sd²); with `worth_readings = n0` it is N(mean, σ²/n0), worth n0 readings.
//! With `of_period = "long run"` the figures speak of the long-run mean, μ ~ N(mean, sd²), and
//! `between_sd` τ says how far the periods' levels scatter about it: θ ~ N(mean, sd² + τ²).
//! On the log scale: `geometric_mean` with `geometric_sd`, or `log_mean` with `log_sd`.
//!
//! Assumes that the figures were settled without this period's readings. A prior about this period
//! says nothing of the next level or the long run; answers about these then say what to state.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5; ISO 12491:1997 and the JCSS
//! Probabilistic Model Code for a prior worth n0 readings.
//!
//! A worked number: prior N(42, 3²), σ = 2 and four readings of mean 44: the posterior mean is
//! (42/9 + 44/1)/(1/9 + 1/1) = 43.8, its variance 1/(1/9 + 1) = 0.9.

use super::ground::Ground;
use super::{Built, LevelPrior, Refusal, Source, SourceKind, basis};
use crate::diagnostics::{Fault, Faults};
use crate::math::fm;
use crate::plan::Plan;
use crate::quantity::Scale;
use crate::spec::keys::{Key, Takes};
use crate::spec::reader::Reader;
use crate::spec::table::Table;

const KEYS: &[Key] = &[
    Key::required("from", Takes::OneOf(&["stated"]), "the figures are stated here"),
    Key::optional("mean", Takes::Number, "the prior mean of the level"),
    Key::optional("sd", Takes::Positive, "the prior sd of the level"),
    Key::optional(
        "worth_readings",
        Takes::Positive,
        "instead of sd: the number of readings the prior is worth",
    ),
    Key::optional("geometric_mean", Takes::Positive, "log scale: the prior geometric mean of the level"),
    Key::optional("geometric_sd", Takes::Positive, "log scale: its geometric sd, above 1"),
    Key::optional("log_mean", Takes::Number, "log scale: the prior mean of the level's natural logarithm"),
    Key::optional("log_sd", Takes::Positive, "log scale: its sd"),
    Key::optional(
        "of_period",
        Takes::OneOf(&["this", "long run"]),
        "what the figures speak of: this period's level (default) or the long-run mean",
    ),
    Key::optional(
        "between_sd",
        Takes::Positive,
        "with of_period = \"long run\": the known sd of the levels about the long-run mean",
    ),
    Key::optional("basis", Takes::Text, "where the figures come from"),
];

pub const KIND: SourceKind = SourceKind { from: "stated", page: include_str!("stated.rs"), keys: KEYS, read };

#[derive(Debug)]
struct Stated {
    level: LevelPrior,
    basis: String,
}

fn read(table: &Table, scale: Scale, _: &Plan, faults: &mut Faults) -> Option<Box<dyn Source>> {
    let mut reader = Reader::new(table, KEYS, faults);
    let mean = location(&mut reader, scale);
    let worth = reader.positive("worth_readings");
    let sd = if worth.is_some() && !basis::any_of(table, &["sd", "geometric_sd", "log_sd"]) {
        None
    } else {
        if table.get("worth_readings").is_some() {
            let fault = Fault::wrong("either-or", "the prior's width is given twice")
                .expected("either an sd or worth_readings")
                .repair("leave one of the two out");
            reader.fault_at("worth_readings", fault);
        }
        width(&mut reader, scale)
    };
    let long_run = reader.choice("of_period") == Some("long run");
    let between_sd = reader.positive("between_sd");
    let basis = basis::required(&mut reader, "a prior");
    if long_run && table.get("between_sd").is_none() {
        let fault =
            Fault::wrong("missing-key", "a prior of the long-run mean needs the sd of the levels about it")
                .expected("between_sd = a number above 0")
                .repair("state between_sd, or say of_period = \"this\"");
        reader.fault_at("of_period", fault);
    }
    if !long_run && table.get("between_sd").is_some() {
        let fault = Fault::wrong("key-out-of-place", "between_sd belongs to a prior of the long-run mean")
            .expected("of_period = \"long run\" beside between_sd")
            .repair("add of_period = \"long run\", or leave between_sd out");
        reader.fault_at("between_sd", fault);
    }
    if long_run && worth.is_some() {
        let fault = Fault::wrong("key-out-of-place", "worth_readings speaks of this period's level")
            .expected("an sd for a prior of the long-run mean")
            .repair("state the sd instead");
        reader.fault_at("worth_readings", fault);
    }
    reader.finish();
    let level = match (mean?, sd, worth, long_run, between_sd) {
        (mean, Some(sd), _, true, Some(between_sd)) => LevelPrior::LongRun { mean, sd, between_sd },
        (mean, Some(sd), _, false, _) => LevelPrior::Stated { mean, sd },
        (mean, None, Some(readings), false, _) => LevelPrior::Worth { mean, readings },
        _ => return None,
    };
    Some(Box::new(Stated { level, basis: basis? }))
}

/// The prior's location on the model's scale.
fn location(reader: &mut Reader<'_>, scale: Scale) -> Option<f64> {
    match scale {
        Scale::Linear => {
            only_linear(reader);
            needed(reader, "mean", Reader::number)
        }
        Scale::Log => {
            refuse_on_log(reader, &["mean", "sd"]);
            if reader.has("geometric_mean") {
                reader.positive("geometric_mean").map(fm::ln)
            } else {
                needed(reader, "log_mean", Reader::number)
            }
        }
    }
}

/// The prior's sd on the model's scale.
fn width(reader: &mut Reader<'_>, scale: Scale) -> Option<f64> {
    match scale {
        Scale::Linear => needed(reader, "sd", Reader::positive),
        Scale::Log if reader.has("geometric_sd") => geometric_sd(reader, "geometric_sd"),
        Scale::Log => needed(reader, "log_sd", Reader::positive),
    }
}

/// Notes that a key which must be there in this case is missing; gives its value by `get`.
pub fn needed<'t>(
    reader: &mut Reader<'t>,
    key: &'static str,
    get: fn(&mut Reader<'t>, &str) -> Option<f64>,
) -> Option<f64> {
    if !reader.has(key) {
        let fault = Fault::wrong("missing-key", format!("{} has no \"{key}\"", reader.table.name))
            .expected(format!("{key} = a number"))
            .repair(format!("state {key}"));
        reader.fault_at(key, fault);
    }
    get(reader, key)
}

/// ln of a geometric sd, which must lie above 1.
pub fn geometric_sd(reader: &mut Reader<'_>, key: &str) -> Option<f64> {
    let factor = reader.positive(key)?;
    if factor > 1.0 {
        return Some(fm::ln(factor));
    }
    let fault = Fault::wrong("out-of-range", format!("a geometric sd is a factor above 1, not {factor}"))
        .expected("a number above 1, such as 1.3")
        .repair("give the factor by which values scatter, or the sd of the logarithms as log_sd");
    reader.fault_at(key, fault);
    None
}

/// Refuses keys of the linear scale on the log scale.
pub fn refuse_on_log(reader: &mut Reader<'_>, keys: &[&str]) {
    for key in keys {
        if !reader.has(key) {
            continue;
        }
        let fault = Fault::wrong(
            "wrong-scale",
            format!("on the log scale \"{key}\" is not clear: of the readings or of their logarithms?"),
        )
        .expected("geometric_mean with geometric_sd, or log_mean with log_sd")
        .repair("say which is meant by these keys");
        reader.fault_at(key, fault);
    }
}

/// Refuses keys of the log scale on the linear scale.
pub fn only_linear(reader: &mut Reader<'_>) {
    for key in ["geometric_mean", "geometric_sd", "log_mean", "log_sd"] {
        if reader.has(key) {
            let fault =
                Fault::wrong("wrong-scale", format!("\"{key}\" belongs to a quantity on the log scale"))
                    .expected("mean with sd")
                    .repair("use mean and sd, or set scale = \"log\" in [quantity]");
            reader.fault_at(key, fault);
        }
    }
}

impl Source for Stated {
    fn from(&self) -> &'static str {
        "stated"
    }

    fn level(&self, _: &Ground<'_>) -> Result<Built, Refusal> {
        let notes = vec![format!("The prior is stated. Its basis: {}.", self.basis.trim_end_matches('.'))];
        Ok(Built { level: self.level.clone(), notes, cautions: Vec::new(), ledger: Vec::new() })
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let of_period = match self.level {
            LevelPrior::LongRun { .. } => "\"long run\"",
            _ => "\"this\"",
        };
        vec![("of_period", of_period.to_string())]
    }
}
