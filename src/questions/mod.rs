//! Stage 6: one file a kind of question. Each reads its own keys, computes from a posterior, and
//! gives its figures with their working; this file holds what they share and the registry.

pub mod figures;
pub mod rule;

use crate::data::{PeriodData, SeriesData};
use crate::diagnostics::Faults;
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::{Basis, Posterior};
use crate::quantity::Absent;
use crate::spec::keys::Key;
use crate::working::Step;
use figures::Figures;
use std::fmt::Debug;

/// A kind of question: a row of the registry.
pub struct QuestionKind {
    /// As the spec says it: "level chance".
    pub ask: &'static str,
    /// The user's page: the head comment of the kind's file.
    pub page: &'static str,
    /// The keys of this kind beside `id`, `ask`, `say`, `only`, `rule`.
    pub keys: &'static [Key],
    pub read: fn(&QuestionPlan, &Plan, &mut Faults) -> Option<Box<dyn Question>>,
}

/// A question, read and ready to be asked of any series.
pub trait Question: Debug + Send + Sync {
    /// The figures for one series under one basis; kinds that compare series leave this empty.
    fn answer(&self, subject: &Subject<'_>) -> Figures;

    /// Kinds that compare series answer here, once for all: per series name its figures (`ranking`),
    /// or one entry with an empty name (`difference`).
    fn across(&self, _subjects: &[Subject<'_>]) -> Option<Vec<(String, Figures)>> {
        None
    }

    /// The quantity asked about, in words: "probability that the level of 2025 lies above 50 mg/L".
    fn words(&self, subject: &Subject<'_>) -> String;

    /// The same in symbols: "P(θ > 50 | prior, readings)".
    fn symbols(&self, subject: &Subject<'_>) -> String;

    /// How the main figure comes about, step by step.
    fn working(&self, _subject: &Subject<'_>) -> Vec<Step> {
        Vec::new()
    }

    /// Every key of the kind with the value used, defaults filled in, as TOML values.
    fn settings(&self) -> Vec<(&'static str, String)>;
}

/// One series as a question sees it.
#[derive(Debug, Clone)]
pub struct Subject<'a> {
    pub plan: &'a Plan,
    pub series: &'a str,
    pub data: Option<&'a SeriesData>,
    /// The period under review.
    pub period: Option<&'a PeriodData>,
    pub basis: Basis,
    pub posterior: Result<&'a Posterior, Absent>,
}
