//! # peers
//! "This one is like the others." The other series of the same period serve as the history does: their
//! levels and this one's scatter about a common mean, θ_i ~ N(μ, τ²). The keys of the between sd are
//! those of `history`; uniform needs three other series with readings.
//!
//! This is no model of periods: it says nothing of the next level beyond this period's, or of a long
//! run. A within sd that differs by series is an error, since the series are pooled.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §5.4–5.5.
//!
//! A worked number: three peers of means 10, 12 and 14, each of standard error 1, τ = 2 known: the
//! prior of this level is N(12, 4 + 5/3).

use super::ground::Ground;
use super::history::{BETWEEN, BetweenRead, read_between};
use super::{Built, LevelPrior, Pattern, Periods, Refusal, Source, SourceKind};
use crate::diagnostics::Faults;
use crate::plan::Plan;
use crate::quantity::Scale;
use crate::spec::keys::{Key, Takes};
use crate::spec::reader::Reader;
use crate::spec::table::Table;

const KEYS: &[Key] = &[
    Key::required("from", Takes::OneOf(&["peers"]), "the other series of the same period"),
    Key::optional(
        "between",
        BETWEEN,
        "what is held of the sd between series before the data; uniform by default",
    ),
    Key::optional(
        "between_scale",
        Takes::Positive,
        "the scale of half-normal or half-cauchy, on the model's scale",
    ),
    Key::optional("between_sd", Takes::Positive, "instead of between: the sd between series, known"),
    Key::optional(
        "weight_of_history",
        Takes::Share,
        "with between = \"none\": what a peer's reading counts against one of this series",
    ),
    Key::optional("basis", Takes::Text, "where a stated between_scale or between_sd comes from"),
];

pub const KIND: SourceKind = SourceKind { from: "peers", page: include_str!("peers.rs"), keys: KEYS, read };

#[derive(Debug)]
struct Peers {
    read: BetweenRead,
}

fn read(table: &Table, _: Scale, _: &Plan, faults: &mut Faults) -> Option<Box<dyn Source>> {
    let mut reader = Reader::new(table, KEYS, faults);
    let read = read_between(&mut reader);
    reader.finish();
    Some(Box::new(Peers { read: read? }))
}

impl Source for Peers {
    fn from(&self) -> &'static str {
        "peers"
    }

    fn level(&self, ground: &Ground<'_>) -> Result<Built, Refusal> {
        let peers = ground.beside();
        let mut cautions = self.read.enough(peers.len(), "other series", ground.series)?;
        cautions.iter_mut().for_each(|caution| caution.series = Some(ground.series.to_string()));
        let names: Vec<&str> = peers.iter().map(|(name, _)| name.as_str()).collect();
        let mut notes = vec![format!(
            "The prior comes from {} other series of the same period: {}. Sd between series: {}.",
            names.len(),
            names.join(", "),
            self.read.in_words()
        )];
        if let Some(basis) = &self.read.basis {
            notes.push(format!("Basis: {}.", basis.trim_end_matches('.')));
        }
        let level = LevelPrior::Peers(Periods {
            periods: peers,
            pattern: Pattern::AboutAMean,
            between: self.read.between,
            weight: self.read.weight,
        });
        Ok(Built { level, notes, cautions, ledger: Vec::new() })
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        self.read.settings()
    }
}
