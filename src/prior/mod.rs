//! Stage 4: what was known before this period's readings. One file a source; each reads its own keys
//! of `[prior]` and turns them, with the data of earlier periods or other series, into a [`Model`].

mod basis;
pub mod carried;
pub mod flat;
pub mod ground;
pub mod handover;
pub mod history;
pub mod mixture;
pub mod peers;
pub mod quantiles;
pub mod spread;
pub mod stated;
pub mod within;

use crate::data::evidence::Evidence;
use crate::diagnostics::{Caution, Fault, Faults};
use crate::plan::Plan;
use crate::quantity::{Period, Scale};
use crate::spec::keys::{Key, nearest};
use crate::spec::table::{Kind, Table};
use ground::Ground;
use std::fmt::Debug;

/// A source of a prior: a row of the registry.
pub struct SourceKind {
    /// As the spec says it: `from = "history"`.
    pub from: &'static str,
    /// The user's page: the head comment of the source's file.
    pub page: &'static str,
    /// Its keys of `[prior]` beside `from`.
    pub keys: &'static [Key],
    pub read: ReadSource,
}

/// Reads the keys of a source; what is wrong with them is noted.
pub type ReadSource = fn(&Table, Scale, &Plan, &mut Faults) -> Option<Box<dyn Source>>;

/// All sources of a prior, in the order of the reference page.
pub const ALL: &[SourceKind] =
    &[stated::KIND, quantiles::KIND, history::KIND, peers::KIND, carried::KIND, flat::KIND, mixture::KIND];

/// A source with its keys read, ready to give the prior of any series.
pub trait Source: Debug + Send + Sync {
    /// The name of the source, as the spec says it.
    fn from(&self) -> &'static str;

    /// The prior of one series.
    fn level(&self, ground: &Ground<'_>) -> Result<Built, Refusal>;

    /// Every key with the value used, defaults filled in, as TOML values.
    fn settings(&self) -> Vec<(&'static str, String)>;
}

/// A prior, and what the reader must know of how it came about.
#[derive(Debug, Clone, PartialEq)]
pub struct Built {
    pub level: LevelPrior,
    /// Sentences for the report: which source, which periods, which figures.
    pub notes: Vec<String>,
    pub cautions: Vec<Caution>,
    /// Of a carried prior: the periods that its handover holds.
    pub ledger: Vec<handover::LedgerLine>,
}

/// Why a source gives no prior for a series.
#[derive(Debug, Clone, PartialEq)]
pub enum Refusal {
    /// The history is too short: `otherwise` may serve.
    TooShort(Fault),
    Wrong(Fault),
}

impl Refusal {
    pub fn into_fault(self) -> Fault {
        match self {
            Refusal::TooShort(fault) | Refusal::Wrong(fault) => fault,
        }
    }
}

/// Reads a `[prior]` table by the source that it names.
pub fn read(table: &Table, scale: Scale, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Source>> {
    let kind = named(table, "the source of the prior", ALL.iter().map(|kind| kind.from), faults)?;
    ALL.iter().find(|known| known.from == kind).and_then(|kind| (kind.read)(table, scale, plan, faults))
}

/// The value of `from`, which must be one of `known`.
fn named<'t>(
    table: &'t Table,
    what: &str,
    known: impl Iterator<Item = &'static str> + Clone,
    faults: &mut Faults,
) -> Option<&'t str> {
    let choices: Vec<&str> = known.clone().collect();
    let expected = crate::spec::keys::one_of(&choices);
    let Some(value) = table.get("from") else {
        let fault =
            Fault::wrong("missing-key", format!("{} does not say where {what} comes from", table.name))
                .at(table.span.place())
                .expected(format!("from = {expected}"))
                .repair("add the key \"from\"");
        faults.push(fault);
        return None;
    };
    let text = match &value.kind {
        Kind::Text(text) => text.as_str(),
        _ => "",
    };
    if choices.contains(&text) {
        return Some(text);
    }
    let repair = nearest(text, known)
        .map_or_else(|| "choose one of these".to_string(), |near| format!("write from = \"{near}\""));
    faults.push(
        Fault::wrong("unknown-source", format!("{what} cannot come from this"))
            .at(value.span.place())
            .expected(expected)
            .repair(repair),
    );
    None
}

/// How one series' readings of the period under review arise: everything that the posterior needs
/// beside these readings themselves. On the model's scale (logarithms where the scale is log).
#[derive(Debug, Clone, PartialEq)]
pub struct Model {
    pub scale: Scale,
    pub within: Within,
    pub level: LevelPrior,
    /// Standard uncertainty of a bias common to all readings; 0 where none.
    pub bias_sd: f64,
    /// Stretch and shift of the prior about its own median, for the sensitivity section.
    pub adjust: Option<Adjust>,
}

/// The prior's normal pieces N(m, v) become N(centre + stretch (m − centre) + shift, stretch² v);
/// long-run mean and between sd move alike.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Adjust {
    pub centre: f64,
    pub stretch: f64,
    pub shift: f64,
}

/// The within sd σ.
#[derive(Debug, Clone, PartialEq)]
pub enum Within {
    Known(f64),
    /// σ² ~ scaled inverse chi-square(df, sd²), updated by all readings used.
    Worth {
        sd: f64,
        df: f64,
    },
    /// p(σ²) ∝ 1/σ², from the history's readings and this period's, pooled. Where the prior of the
    /// level holds no periods, `others` brings the earlier periods' evidence for σ alone.
    Pooled {
        others: Vec<Evidence>,
    },
    /// p(σ²) ∝ 1/σ², from this period's readings alone; a history prior has a σ of its own.
    Readings,
    /// The same, where the σ of the earlier periods (or peers) is known: for the sensitivity section.
    ReadingsBeside {
        history_sd: f64,
    },
    /// σ = 0: every reading brings its own uncertainty.
    None,
}

/// The prior of the level of the period under review.
#[derive(Debug, Clone, PartialEq)]
pub enum LevelPrior {
    Flat,
    Stated {
        mean: f64,
        sd: f64,
    },
    /// N(mean, σ²/readings).
    Worth {
        mean: f64,
        readings: f64,
    },
    /// Long-run mean N(mean, sd²), levels about it with a known between sd.
    LongRun {
        mean: f64,
        sd: f64,
        between_sd: f64,
    },
    /// Earlier periods of the series.
    Periods(Periods),
    /// Other series of the same period, exchangeable with this one; no model of periods.
    Peers(Periods),
    /// Proper densities, each with its weight before the readings.
    Mixture(Vec<(f64, LevelPrior)>),
}

impl LevelPrior {
    /// The earlier periods of the series that it holds; of a mixture, those of the first part that has any.
    pub fn own_periods(&self) -> Option<&Periods> {
        match self {
            LevelPrior::Periods(periods) => Some(periods),
            LevelPrior::Mixture(parts) => parts.iter().find_map(|(_, part)| part.own_periods()),
            _ => None,
        }
    }
}

/// Earlier periods (or peers) and how their levels hang together.
#[derive(Debug, Clone, PartialEq)]
pub struct Periods {
    /// In order of time; only those that count.
    pub periods: Vec<(Period, Evidence)>,
    pub pattern: Pattern,
    pub between: Between,
    /// Weight of the history in (0, 1]; other than 1 only with [`Between::None`].
    pub weight: f64,
}

#[derive(Debug, Clone, PartialEq)]
pub enum Pattern {
    AboutAMean,
    /// Steps elapsed before each period (the first is not used), and up to the period under review.
    RandomWalk {
        gaps: Vec<f64>,
        last_gap: f64,
    },
}

/// The law of the between sd τ.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Between {
    Uniform,
    HalfNormal(f64),
    HalfCauchy(f64),
    Known(f64),
    /// τ = 0.
    None,
    /// Plug-ins: τ estimated from the history and taken as known.
    Reml,
    Moments,
}
