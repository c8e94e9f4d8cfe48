//! # flat
//! "Let this period's readings speak alone." The level may lie anywhere, every value as likely as
//! any other: p(θ) ∝ 1. The posterior of the level is then N(x̄, σ²/n) for known σ, and Student's t
//! about x̄ for unknown σ. There is no prior-only answer, since a flat prior is no probability law.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5 and §3.2.
//!
//! A worked number: σ = 2, four readings of mean 10 give a level of 10 ± 1 (one sd).

use super::ground::Ground;
use super::{Built, LevelPrior, Refusal, Source, SourceKind};
use crate::diagnostics::Faults;
use crate::plan::Plan;
use crate::quantity::Scale;
use crate::spec::keys::{Key, Takes};
use crate::spec::reader::Reader;
use crate::spec::table::Table;

const KEYS: &[Key] = &[Key::required("from", Takes::OneOf(&["flat"]), "the readings speak alone")];

pub const KIND: SourceKind = SourceKind { from: "flat", page: include_str!("flat.rs"), keys: KEYS, read };

#[derive(Debug)]
struct Flat;

fn read(table: &Table, _: Scale, _: &Plan, faults: &mut Faults) -> Option<Box<dyn Source>> {
    Reader::new(table, KEYS, faults).finish();
    Some(Box::new(Flat))
}

impl Source for Flat {
    fn from(&self) -> &'static str {
        "flat"
    }

    fn level(&self, _: &Ground<'_>) -> Result<Built, Refusal> {
        let notes = vec!["The prior is flat: the readings of the period speak alone.".to_string()];
        Ok(Built { level: LevelPrior::Flat, notes, cautions: Vec::new(), ledger: Vec::new() })
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        Vec::new()
    }
}
