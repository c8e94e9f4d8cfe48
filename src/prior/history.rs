//! # history
//! "Earlier years say where this year's level should lie." The levels of the periods scatter about a
//! long-run mean (`pattern = "about a mean"`): θ_j ~ N(μ, τ²), with μ flat and the readings of each
//! period scattering about its level with the within sd. The prior of this level is N(μ̂, τ² + V) for
//! each between sd τ, with w_j = 1/(τ² + s_j²), μ̂ = Σw_j x̄_j/Σw_j and V = 1/Σw_j, averaged over
//! what the history says of τ. With `pattern = "random walk"` each level is the one before plus a step
//! of sd τ a period.
//!
//! `between` says what is held of τ before the data: `uniform` on (0, ∞), which needs three earlier
//! periods; `half-normal` or `half-cauchy` with `between_scale`, which need one; `none` (τ = 0: all
//! years share one level, discounted by `weight_of_history`); `reml` and `moments` estimate τ and
//! take it as known, which makes the prior too sure; or `between_sd` states it.
//!
//! Assumes that the years are exchangeable: no change of source, method or process between them.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §5.4–5.5 (formula 5.21); Ibrahim & Chen
//! 2000 for the weight; DerSimonian & Laird 1986 for moments; West & Harrison 1997 for the random walk.
//!
//! A worked number: σ/√n = 1, τ = 2 known, period means 10, 12 and 14: μ̂ = 12, V = 5/3, and the prior
//! of the next level is N(12, 4 + 5/3).

use super::ground::Ground;
use super::{Between, Built, LevelPrior, Pattern, Periods, Refusal, Source, SourceKind, basis};
use crate::data::evidence::Evidence;
use crate::diagnostics::{Caution, Fault, Faults, Place};
use crate::plan::Plan;
use crate::quantity::{Period, Scale};
use crate::spec::keys::{Key, Takes};
use crate::spec::reader::Reader;
use crate::spec::table::Table;

pub const BETWEEN: Takes =
    Takes::OneOf(&["uniform", "half-normal", "half-cauchy", "none", "reml", "moments"]);

const KEYS: &[Key] = &[
    Key::required("from", Takes::OneOf(&["history"]), "earlier periods of the series"),
    Key::optional(
        "pattern",
        Takes::OneOf(&["about a mean", "random walk"]),
        "how levels move: about a long-run mean (default) or step by step",
    ),
    Key::optional("between", BETWEEN, "what is held of the between sd before the data; uniform by default"),
    Key::optional(
        "between_scale",
        Takes::Positive,
        "the scale of half-normal or half-cauchy, on the model's scale",
    ),
    Key::optional("between_sd", Takes::Positive, "instead of between: the between sd, known"),
    Key::optional(
        "weight_of_history",
        Takes::Share,
        "with between = \"none\": what an earlier reading counts against one of this period",
    ),
    Key::optional("basis", Takes::Text, "where a stated between_scale or between_sd comes from"),
];

pub const KIND: SourceKind =
    SourceKind { from: "history", page: include_str!("history.rs"), keys: KEYS, read };

/// Fewer earlier periods than this leave the prior's sd without a value under `uniform`.
const PERIODS_FOR_UNIFORM_SD: usize = 5;
/// Fewer make a plug-in estimate of the between sd unreliable (practice note, trap 2).
const PERIODS_FOR_PLUG_IN: usize = 5;

/// What `between` and its companions say, for history and peers alike.
#[derive(Debug, Clone, PartialEq)]
pub struct BetweenRead {
    pub between: Between,
    pub weight: f64,
    pub basis: Option<String>,
    /// Where a message about it points.
    pub place: Place,
}

#[derive(Debug)]
struct History {
    random_walk: bool,
    read: BetweenRead,
}

fn read(table: &Table, _: Scale, _: &Plan, faults: &mut Faults) -> Option<Box<dyn Source>> {
    let mut reader = Reader::new(table, KEYS, faults);
    let random_walk = reader.choice("pattern") == Some("random walk");
    let read = read_between(&mut reader);
    if let Some(read) = &read
        && random_walk
        && matches!(read.between, Between::Reml | Between::Moments | Between::None)
    {
        let fault = Fault::wrong(
            "key-out-of-place",
            "a random walk needs steps whose sd is known or has a prior law",
        )
        .expected("between = \"uniform\", \"half-normal\" or \"half-cauchy\", or between_sd")
        .repair("choose one of these");
        reader.fault_at("between", fault);
    }
    reader.finish();
    Some(Box::new(History { random_walk, read: read? }))
}

/// Reads `between`, `between_scale`, `between_sd`, `weight_of_history` and `basis`.
pub fn read_between(reader: &mut Reader<'_>) -> Option<BetweenRead> {
    let written = reader.choice("between");
    let name = written.unwrap_or("uniform");
    let scale = reader.positive("between_scale");
    let known = reader.positive("between_sd");
    let weight = reader.share("weight_of_history");
    let has = |reader: &Reader<'_>, key: &str| reader.has(key);
    let needs_scale = matches!(name, "half-normal" | "half-cauchy");
    if has(reader, "between_sd") && has(reader, "between") {
        let fault = Fault::wrong("either-or", "the between sd is stated, and has a prior law as well")
            .expected("either between or between_sd")
            .repair("leave one of the two out");
        reader.fault_at("between_sd", fault);
    }
    if needs_scale && !has(reader, "between_scale") {
        let fault = Fault::wrong("missing-key", format!("between = \"{name}\" needs its scale"))
            .expected("between_scale = a number above 0")
            .repair("state between_scale: for half-normal, about the largest between sd that would not surprise, halved");
        reader.fault_at("between", fault);
    }
    if !needs_scale && has(reader, "between_scale") {
        let fault = Fault::wrong("key-out-of-place", "between_scale belongs to half-normal and half-cauchy")
            .expected("between = \"half-normal\" or \"half-cauchy\" beside it")
            .repair("leave between_scale out, or choose one of these");
        reader.fault_at("between_scale", fault);
    }
    if has(reader, "weight_of_history") && name != "none" {
        let fault = Fault::wrong(
            "key-out-of-place",
            "weight_of_history serves only where all periods share one level",
        )
        .expected("between = \"none\" beside it")
        .repair("leave weight_of_history out, or set between = \"none\"");
        reader.fault_at("weight_of_history", fault);
    }
    let states = has(reader, "between_scale") || has(reader, "between_sd");
    let basis = if states { basis::required(reader, "a between sd") } else { reader.text("basis") };
    let between = match (known, name, scale) {
        (Some(sd), ..) => Between::Known(sd),
        (_, "half-normal", scale) => Between::HalfNormal(scale?),
        (_, "half-cauchy", scale) => Between::HalfCauchy(scale?),
        (_, "none", _) => Between::None,
        (_, "reml", _) => Between::Reml,
        (_, "moments", _) => Between::Moments,
        _ => Between::Uniform,
    };
    let span = reader.table.get("between").map_or(&reader.table.span, |value| &value.span);
    Some(BetweenRead { between, weight: weight.unwrap_or(1.0), basis, place: span.place() })
}

impl BetweenRead {
    /// Refuses a history too short for this law of τ, and says what else the reader must know.
    pub fn enough(&self, found: usize, what: &str, series: &str) -> Result<Vec<Caution>, Refusal> {
        let needed = match self.between {
            Between::Uniform => 3,
            Between::Reml | Between::Moments => 2,
            _ => 1,
        };
        if found < needed {
            let number = if found == 0 { "none".to_string() } else { format!("only {found}") };
            return Err(Refusal::TooShort(
                Fault::wrong(
                    "history-too-short",
                    format!("{series}: this prior needs at least {needed} {what}, and the data hold {number}"),
                )
                .at(self.place.clone())
                .expected(format!("{needed} or more {what} with readings"))
                .repair(if matches!(self.between, Between::Uniform) && found > 0 {
                    "state between_sd, or choose between = \"half-normal\" with between_scale, or give [prior] otherwise"
                } else {
                    "give this series a prior of its own in [series], or add otherwise = { from = … }"
                }),
            ));
        }
        let mut cautions = Vec::new();
        if self.between == Between::Uniform && found < PERIODS_FOR_UNIFORM_SD {
            cautions.push(Caution::new(
                "few-periods",
                format!(
                    "Only {found} {what} show how far levels move: the prior has very long tails and no sd; its quantiles stand."
                ),
            ));
        }
        if matches!(self.between, Between::Reml | Between::Moments) {
            let few = if found < PERIODS_FOR_PLUG_IN {
                format!(" With {found} {what} the estimate itself is very uncertain.")
            } else {
                String::new()
            };
            cautions.push(Caution::new(
                "plug-in",
                format!("The between sd is an estimate taken as known, which makes the prior too sure.{few}"),
            ));
        }
        Ok(cautions)
    }

    /// The law of τ in words.
    pub fn in_words(&self) -> String {
        match self.between {
            Between::Uniform => "uniform on (0, ∞)".into(),
            Between::HalfNormal(scale) => format!("half-normal with scale {scale}"),
            Between::HalfCauchy(scale) => format!("half-Cauchy with scale {scale}"),
            Between::Known(sd) => format!("known, {sd}"),
            Between::None => "0: all periods share one level".into(),
            Between::Reml => "estimated by restricted maximum likelihood and taken as known".into(),
            Between::Moments => "estimated by moments (DerSimonian–Laird) and taken as known".into(),
        }
    }

    pub fn settings(&self) -> Vec<(&'static str, String)> {
        let name = match self.between {
            Between::Known(sd) => return vec![("between_sd", format!("{sd:?}"))],
            Between::Uniform => "uniform",
            Between::HalfNormal(_) => "half-normal",
            Between::HalfCauchy(_) => "half-cauchy",
            Between::None => "none",
            Between::Reml => "reml",
            Between::Moments => "moments",
        };
        let mut settings = vec![("between", format!("\"{name}\""))];
        if self.between == Between::None {
            settings.push(("weight_of_history", format!("{:?}", self.weight)));
        }
        settings
    }
}

/// Whole-number periods that are missing between the first and the last, the first few of them.
fn without_readings(periods: &[(Period, Evidence)]) -> Vec<String> {
    const LISTED: usize = 12;
    let numbers: Option<Vec<i64>> = periods.iter().map(|(period, _)| period.number()).collect();
    let Some((first, last)) = numbers.as_ref().and_then(|all| Some((*all.first()?, *all.last()?))) else {
        return Vec::new();
    };
    let known = |number: &i64| numbers.as_ref().is_some_and(|all| all.contains(number));
    (first..last).filter(|number| !known(number)).take(LISTED).map(|number| number.to_string()).collect()
}

impl Source for History {
    fn from(&self) -> &'static str {
        "history"
    }

    fn level(&self, ground: &Ground<'_>) -> Result<Built, Refusal> {
        let periods = ground.earlier();
        let cautions = self.read.enough(periods.len(), "earlier periods", ground.series)?;
        let names: Vec<&str> = periods.iter().map(|(period, _)| period.as_str()).collect();
        let pattern = if self.random_walk {
            let gaps = std::iter::once(1.0)
                .chain(periods.windows(2).map(|two| ground.gap(&two[0].0, &two[1].0)))
                .collect();
            let last_gap =
                periods.last().map_or(1.0, |(last, _)| ground.gap(last, &ground.plan.review.period));
            Pattern::RandomWalk { gaps, last_gap }
        } else {
            Pattern::AboutAMean
        };
        let mut notes = vec![format!(
            "The prior comes from {} earlier {}: {}. {} Between sd: {}.",
            names.len(),
            if names.len() == 1 { "period" } else { "periods" },
            names.join(", "),
            if self.random_walk {
                "Each level is the one before plus a step."
            } else {
                "Their levels scatter about a long-run mean."
            },
            self.read.in_words()
        )];
        let absent = without_readings(&periods);
        if !absent.is_empty() {
            notes.push(format!(
                "Between them, nothing counts of {}{}.",
                absent.join(", "),
                if self.random_walk { ": the walk takes these steps unseen" } else { "" }
            ));
        }
        if let Some(basis) = &self.read.basis {
            notes.push(format!("Basis: {}.", basis.trim_end_matches('.')));
        }
        let level = LevelPrior::Periods(Periods {
            periods,
            pattern,
            between: self.read.between,
            weight: self.read.weight,
        });
        Ok(Built { level, notes, cautions, ledger: Vec::new() })
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let pattern = if self.random_walk { "\"random walk\"" } else { "\"about a mean\"" };
        let mut settings = vec![("pattern", pattern.to_string())];
        settings.extend(self.read.settings());
        settings
    }
}
