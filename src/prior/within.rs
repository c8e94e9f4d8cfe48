//! # within
//! How single readings scatter about the level of their period: the within sd σ.
//!
//! * `stated`: `sd` (log scale: `geometric_sd` or `log_sd`) with its `basis`. `df` says how many degrees of
//!   freedom the figure is worth; `inf` (default) takes it as known. With finite df, σ² is a scaled inverse
//!   chi-square about sd², updated by all readings used.
//! * `history`: p(σ²) ∝ 1/σ², from the readings of all periods used, pooled.
//! * `readings`: p(σ²) ∝ 1/σ², from this period's readings alone.
//! * `peers`: one σ for all series of this period, pooled.
//! * `carried`: what the handover of the previous review holds of σ, with the readings of its ledger.
//! * `none`: every reading brings its own uncertainty.
//!
//! Assumes the same σ in all periods that are pooled. Source: Gelman et al., Bayesian Data Analysis,
//! 3rd ed., §2.6 and §3.2–3.3; `none`: known variances as in the GUM.
//!
//! A worked number: 4 readings with sum of squares 12 alone: σ² is 12 over a chi-square of 3 df.

use super::carried::HandedOver;
use super::ground::Ground;
use super::stated::{geometric_sd, needed, only_linear, refuse_on_log};
use super::{LevelPrior, Refusal, Within, basis};
use crate::data::evidence::Evidence;
use crate::diagnostics::{Caution, Fault, Faults, Place};
use crate::math::fm;
use crate::plan::Plan;
use crate::quantity::{Absent, Figure, Scale};
use crate::spec::keys::{Key, Takes};
use crate::spec::reader::Reader;
use crate::spec::table::Table;

pub const KEYS: &[Key] = &[
    Key::required(
        "from",
        Takes::OneOf(&["stated", "history", "readings", "peers", "carried", "none"]),
        "where the within sd comes from",
    ),
    Key::optional("sd", Takes::Positive, "stated: the within sd"),
    Key::optional("geometric_sd", Takes::Positive, "stated, log scale: the geometric sd, above 1"),
    Key::optional("log_sd", Takes::Positive, "stated, log scale: the sd of the natural logarithms"),
    Key::optional(
        "df",
        Takes::PositiveOrInfinite,
        "stated: degrees of freedom it is worth; inf (default) is known",
    ),
    Key::optional("basis", Takes::Text, "stated: where the figure comes from"),
];

/// A `[within]` table, read.
#[derive(Debug, Clone, PartialEq)]
pub struct WithinRead {
    pub from: From,
    pub basis: Option<String>,
    pub place: Place,
}

#[derive(Debug, Clone, PartialEq)]
pub enum From {
    /// On the model's scale; `df` may be infinite.
    Stated {
        sd: f64,
        df: f64,
    },
    History,
    Readings,
    Peers,
    Carried(Box<HandedOver>),
    None,
}

pub fn read(table: &Table, scale: Scale, plan: &Plan, faults: &mut Faults) -> Option<WithinRead> {
    let mut reader = Reader::new(table, KEYS, faults);
    let from = reader.choice("from");
    let stated = from == Some("stated");
    let mut basis = None;
    let read = match from {
        Some("stated") => {
            let sd = match scale {
                Scale::Linear => {
                    only_linear(&mut reader);
                    needed(&mut reader, "sd", Reader::positive)
                }
                Scale::Log => {
                    refuse_on_log(&mut reader, &["sd"]);
                    if reader.has("geometric_sd") {
                        geometric_sd(&mut reader, "geometric_sd")
                    } else {
                        needed(&mut reader, "log_sd", Reader::positive)
                    }
                }
            };
            let df = reader.positive_or_infinite("df").unwrap_or(f64::INFINITY);
            basis = basis::required(&mut reader, "a within sd");
            sd.map(|sd| From::Stated { sd, df })
        }
        Some("history") => Some(From::History),
        Some("readings") => Some(From::Readings),
        Some("peers") => Some(From::Peers),
        Some("none") => Some(From::None),
        Some("carried") => {
            let handed = HandedOver::of(plan, None, &reader.span("from").place());
            let handed = handed.map_err(|fault| reader.faults.push(fault)).ok();
            handed.map(|handed| From::Carried(Box::new(handed)))
        }
        _ => None,
    };
    if !stated {
        for key in ["sd", "geometric_sd", "log_sd", "df"] {
            if reader.has(key) {
                let fault =
                    Fault::wrong("key-out-of-place", format!("\"{key}\" belongs to a stated within sd"))
                        .expected("from = \"stated\" beside it")
                        .repair(format!("leave {key} out, or set from = \"stated\""));
                reader.fault_at(key, fault);
            }
        }
    }
    let place = reader.span("from").place();
    reader.finish();
    Some(WithinRead { from: read?, basis, place })
}

impl WithinRead {
    /// The within sd of one series, with what the reader must know of it.
    pub fn within(&self, ground: &Ground<'_>, level: &LevelPrior) -> Result<(Within, Vec<Caution>), Refusal> {
        let mut cautions = Vec::new();
        let within = match &self.from {
            From::Stated { sd, df } if df.is_infinite() => Within::Known(*sd),
            From::Stated { sd, df } => {
                cautions.push(
                    Caution::new(
                        "within-sd-counted-twice",
                        "The stated within sd is updated by the readings used here: if it was itself computed from them, they count twice.",
                    )
                    .of_series(ground.series),
                );
                Within::Worth { sd: *sd, df: *df }
            }
            From::History => Within::Pooled {
                others: if level.own_periods().is_some() { Vec::new() } else { evidence(ground.earlier()) },
            },
            From::Peers => Within::Pooled {
                others: if matches!(level, LevelPrior::Peers(_)) {
                    Vec::new()
                } else {
                    evidence(ground.beside())
                },
            },
            From::Readings => Within::Readings,
            From::Carried(handed) => handed
                .series(ground.series)?
                .next_within(level)
                .map_err(|why| handed.unfit(ground.series, why))?,
            From::None => Within::None,
        };
        Ok((within, cautions))
    }

    /// The stated sd on the model's scale, where there is one.
    pub fn stated_sd(&self) -> Figure {
        match self.from {
            From::Stated { sd, .. } => Ok(sd),
            _ => Err(Absent::because("the within sd is not stated")),
        }
    }

    pub fn name(&self) -> &'static str {
        match self.from {
            From::Stated { .. } => "stated",
            From::History => "history",
            From::Readings => "readings",
            From::Peers => "peers",
            From::Carried(_) => "carried",
            From::None => "none",
        }
    }

    pub fn settings(&self) -> Vec<(&'static str, String)> {
        match self.from {
            From::Stated { df, .. } if df.is_infinite() => vec![("df", "inf".to_string())],
            From::Stated { df, .. } => vec![("df", format!("{df:?}"))],
            _ => Vec::new(),
        }
    }

    /// In words, for the report.
    pub fn in_words(&self, scale: Scale) -> String {
        let of_log = if scale == Scale::Log { " of the natural logarithms" } else { "" };
        let text = match &self.from {
            From::Stated { sd, df } if df.is_infinite() => {
                let factor = if scale == Scale::Log {
                    format!(" (a factor of {:.4})", fm::exp(*sd))
                } else {
                    String::new()
                };
                format!("stated and taken as known: {sd}{of_log}{factor}")
            }
            From::Stated { sd, df } => format!("stated as {sd}{of_log}, worth {df} degrees of freedom"),
            From::History => "unknown, from the readings of all periods used".to_string(),
            From::Readings => "unknown, from this period's readings alone".to_string(),
            From::Peers => "unknown, one for all series of this period".to_string(),
            From::Carried(handed) => format!("carried from the review {}", handed.review()),
            From::None => "none: every reading brings its own uncertainty".to_string(),
        };
        match &self.basis {
            Some(basis) => format!("{text} (basis: {})", basis.trim_end_matches('.')),
            None => text,
        }
    }
}

fn evidence(of: Vec<(crate::quantity::Period, Evidence)>) -> Vec<Evidence> {
    of.into_iter().map(|(_, evidence)| evidence).collect()
}
