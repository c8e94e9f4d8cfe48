//! # mixture
//! "Most likely as in earlier years, but I keep a part for a surprise." The prior is Σ w_i p_i(θ) with
//! stated weights; every part is a proper density of the level. Readings move the weights by each
//! part's marginal likelihood, so that a part which did not expect them loses its say.
//!
//! The report shows the weights before and after. Next level and long run exist only where every part
//! is a model of periods. `[within]` serves all parts.
//!
//! Source: Schmidli et al. 2014 (robust mixture priors); Gelman et al., Bayesian Data Analysis, 3rd ed., ch. 22.
//!
//! A worked number: equal parts N(0, 1) and N(10, 1), one reading 0 with σ = 1: the weights move to
//! 1 − 1.4e-11 and 1.4e-11, since exp(−(10² − 0²)/(2 × 2)) = 1.4e-11.

use super::ground::Ground;
use super::handover::LedgerLine;
use super::{ALL, Built, LevelPrior, Refusal, Source, SourceKind};
use crate::diagnostics::{Fault, Faults};
use crate::plan::Plan;
use crate::quantity::Scale;
use crate::spec::keys::{Key, Takes};
use crate::spec::reader::Reader;
use crate::spec::table::{Kind, Table};

const KEYS: &[Key] = &[
    Key::required("from", Takes::OneOf(&["mixture"]), "several priors, each with a weight"),
    Key::required("parts", Takes::Tables, "the parts: each a prior with weight = a number above 0"),
];

pub const KIND: SourceKind =
    SourceKind { from: "mixture", page: include_str!("mixture.rs"), keys: KEYS, read };

/// How far the weights may miss a sum of 1 (written decimals such as 0.333 + 0.667).
const SUM_TOLERANCE: f64 = 1e-6;

#[derive(Debug)]
struct Mixture {
    parts: Vec<(f64, Box<dyn Source>)>,
}

fn read(table: &Table, scale: Scale, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Source>> {
    let mut reader = Reader::new(table, KEYS, faults);
    let tables: Vec<Table> = reader.tables("parts").into_iter().cloned().collect();
    reader.finish();
    let mut parts = Vec::new();
    for part in tables {
        let weight = match part.get("weight").map(|value| (&value.kind, &value.span)) {
            Some((Kind::Number { value, .. }, _)) if *value > 0.0 && value.is_finite() => Some(*value),
            found => {
                let span = found.map_or(&part.span, |(_, span)| span);
                faults.push(
                    Fault::wrong("wrong-weight", "a part of a mixture needs its weight")
                        .at(span.place())
                        .expected("weight = a number above 0")
                        .repair("give each part a weight; together they make 1"),
                );
                None
            }
        };
        let own = Table {
            name: format!("a part of {}", table.name),
            span: part.span.clone(),
            entries: part.entries.iter().filter(|entry| entry.key != "weight").cloned().collect(),
        };
        if let Some(Kind::Text(from)) = own.get("from").map(|value| &value.kind)
            && (from == "flat" || from == "mixture")
        {
            faults.push(
                Fault::wrong("wrong-part", format!("a part of a mixture cannot be \"{from}\""))
                    .at(own.span.place())
                    .expected("a proper density: stated, quantiles, history, peers or carried")
                    .repair("state a wide prior in the place of a flat one"),
            );
            continue;
        }
        let source = super::read(&own, scale, plan, faults);
        if let (Some(weight), Some(source)) = (weight, source) {
            parts.push((weight, source));
        }
    }
    let sum: f64 = parts.iter().map(|(weight, _)| weight).sum();
    if !parts.is_empty() && faults.is_empty() && (sum - 1.0).abs() > SUM_TOLERANCE {
        faults.push(
            Fault::wrong("wrong-weight", format!("the weights of a mixture make {sum}, not 1"))
                .at(table.get("parts").map_or(&table.span, |value| &value.span).place())
                .expected("weights that make 1 together")
                .repair("change one of the weights"),
        );
    }
    (parts.len() >= 2 || faults.is_empty()).then(|| Box::new(Mixture { parts }) as Box<dyn Source>)
}

impl Source for Mixture {
    fn from(&self) -> &'static str {
        "mixture"
    }

    fn level(&self, ground: &Ground<'_>) -> Result<Built, Refusal> {
        let total: f64 = self.parts.iter().map(|(weight, _)| weight).sum();
        let mut built = Built {
            level: LevelPrior::Flat,
            notes: vec![format!("The prior is a mixture of {} parts.", self.parts.len())],
            cautions: Vec::new(),
            ledger: Vec::new(),
        };
        let mut levels = Vec::new();
        for (weight, source) in &self.parts {
            let part = source.level(ground)?;
            levels.push((weight / total, part.level));
            built.notes.extend(part.notes.into_iter().map(|note| format!("Part of weight {weight}: {note}")));
            built.cautions.extend(part.cautions);
            let known = |line: &LedgerLine| built.ledger.iter().any(|own| own.period == line.period);
            let new: Vec<LedgerLine> = part.ledger.into_iter().filter(|line| !known(line)).collect();
            built.ledger.extend(new);
        }
        built.level = LevelPrior::Mixture(levels);
        Ok(built)
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let part = |(weight, source): &(f64, Box<dyn Source>)| {
            let keys: Vec<String> =
                source.settings().into_iter().map(|(key, value)| format!(", {key} = {value}")).collect();
            format!("{{ weight = {weight:?}, from = \"{}\"{} }}", source.from(), keys.concat())
        };
        vec![("parts", format!("[{}]", self.parts.iter().map(part).collect::<Vec<_>>().join(", ")))]
    }
}

/// The names of the sources that may be a part.
pub fn may_be_part() -> impl Iterator<Item = &'static str> {
    ALL.iter().map(|kind| kind.from).filter(|from| !matches!(*from, "flat" | "mixture"))
}
