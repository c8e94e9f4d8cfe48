//! What the review found: the one value that the report and the stamp see.

pub mod cautions;
pub mod compared;
pub mod laws;
pub mod many;

use crate::checks::Check;
use crate::data::Data;
use crate::diagnostics::Caution;
use crate::plan::Plan;
use crate::posterior::Posterior;
use crate::prior::handover::LedgerLine;
use crate::prior::spread::SpreadOfMeans;
use crate::quantity::{Absent, Figure};
use crate::questions::figures::Figures;
use crate::questions::rule::Given;
use crate::working::Step;
use laws::Laws;

#[derive(Debug)]
pub struct Findings {
    pub plan: Plan,
    pub data: Data,
    /// Reviewed series in natural order.
    pub series: Vec<SeriesFindings>,
    /// Series with data, but none in the period under review, and their last period.
    pub not_reviewed: Vec<(String, String)>,
    pub across: Vec<AcrossFindings>,
    pub cautions: Vec<Caution>,
    /// Each kind of check over all series.
    pub checks_over_series: Vec<many::OverSeries>,
    /// Verdicts expected to be wrong, per question that a chance decides.
    pub wrong_verdicts: Vec<many::WrongVerdicts>,
    /// The reviews that the spec names, held against this one.
    pub compared: Vec<compared::Compared>,
    /// Keys of `prior` and `within` with their defaults, by the table's path, as TOML values.
    pub settings: Vec<(String, Vec<(&'static str, String)>)>,
    /// Largest error reached by any quadrature.
    pub quadrature_error: f64,
}

#[derive(Debug)]
pub struct SeriesFindings {
    pub name: String,
    pub label: Option<String>,
    /// Which source gave the prior, in the spec's words ("history"; "peers" where `otherwise` served).
    pub prior_from: String,
    /// How the prior was built, in words and figures, for the report.
    pub prior_notes: Vec<String>,
    /// What is held of the within sd, in words.
    pub within_words: String,
    /// How far the earlier periods' means differ, where the prior is their history.
    pub spread_of_means: Option<SpreadOfMeans>,
    pub prior: Result<Posterior, Absent>,
    pub readings_only: Result<Posterior, Absent>,
    pub posterior: Result<Posterior, Absent>,
    pub laws: Laws,
    pub influence: Influence,
    pub answers: Vec<Answer>,
    pub checks: Vec<Check>,
    pub sensitivity: Vec<UnderAlternative>,
    /// Of a carried prior: the periods that its handover holds.
    pub carried_ledger: Vec<LedgerLine>,
    /// True where no verdict on the period can be given (no readings).
    pub without_readings: bool,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Influence {
    /// Share of the level that comes from the prior.
    pub prior_weight: Figure,
    /// The number of readings that the prior is worth.
    pub prior_readings: Figure,
}

#[derive(Debug, Clone)]
pub struct Answer {
    pub id: String,
    pub ask: String,
    pub say: Option<String>,
    pub words: String,
    pub symbols: String,
    pub settings: Vec<(&'static str, String)>,
    pub figures: Figures,
    pub prior_only: Figures,
    pub readings_only: Figures,
    /// `None`: the question has no rule.
    pub verdict: Option<Given>,
    /// What belongs to the rule: acceptance limits, guard band, risks.
    pub rule_figures: Figures,
    pub working: Vec<Step>,
}

#[derive(Debug, Clone)]
pub struct AcrossFindings {
    pub id: String,
    pub ask: String,
    pub say: Option<String>,
    pub words: String,
    /// Per series (empty name where the answer is one for all).
    pub series: Vec<(String, Figures)>,
    pub verdict: Option<Given>,
}

/// All answers of one series again under one alternative.
#[derive(Debug, Clone)]
pub struct UnderAlternative {
    /// A standing alternative's id, or the spec's.
    pub alternative: String,
    /// Per question id.
    pub answers: Vec<(String, Figures, Option<Given>)>,
    /// Why it was not possible.
    pub why: Option<String>,
}
