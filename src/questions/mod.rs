//! Stage 6: one file a kind of question. Each reads its own keys, computes from a posterior, and
//! gives its figures with their working; this file holds what they share and the registry.

pub mod figures;
pub mod rule;

pub mod acceptance;
pub mod apart;
pub mod beyond;
pub mod binomial;
pub mod moved;
pub mod preposterior;
pub mod risks;
pub mod steps;
pub mod terms;
pub mod tipping;

pub mod change;
pub mod characteristic_value;
pub mod classes;
pub mod count_beyond;
pub mod difference;
pub mod level_chance;
pub mod level_interval;
pub mod percentile;
pub mod period_mean;
pub mod ranking;
pub mod reading_chance;
pub mod reading_interval;
pub mod readings_beyond;
pub mod readings_needed;
pub mod sd_interval;
pub mod share_beyond;

use crate::data::{PeriodData, SeriesData};
use crate::diagnostics::{Caution, Fault, Faults};
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::{Basis, Posterior, When};
use crate::quantity::{Absent, Beyond, Scale};
use crate::spec::keys::{Key, nearest, one_of};
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

/// All kinds of question, in the order of the reference page.
pub const ALL: &[QuestionKind] = &[
    level_interval::KIND,
    level_chance::KIND,
    reading_interval::KIND,
    reading_chance::KIND,
    count_beyond::KIND,
    readings_beyond::KIND,
    share_beyond::KIND,
    percentile::KIND,
    characteristic_value::KIND,
    period_mean::KIND,
    classes::KIND,
    sd_interval::KIND,
    change::KIND,
    difference::KIND,
    ranking::KIND,
    readings_needed::KIND,
];

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

    /// Whether the answer belongs into the sensitivity section: a plan for the next period does not.
    fn in_sensitivity(&self) -> bool {
        true
    }

    /// The names of the figures that a rule can compare: among `chance`, `count`, `estimate`, `lower`, `upper`.
    fn gives(&self) -> Vec<&'static str>;

    /// What the reader must know about how the question was put, whatever the series: for instance a
    /// limit that its basis sets for single readings, asked about a level.
    fn cautions(&self, _plan: &Plan) -> Vec<Caution> {
        Vec::new()
    }

    /// Where the chance is that of a normal number lying beyond limits once σ is given: that number.
    fn linear(&self, _subject: &Subject<'_>, _reading_sd: f64) -> Option<Linear> {
        None
    }
}

/// A chance of the shape P(θ + shift + N(0, variance) lies beyond), θ the level of that period, on
/// the model's scale.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Linear {
    pub when: When,
    /// Whether a stated bias is taken out of θ: levels yes, readings no.
    pub true_level: bool,
    pub beyond: Beyond,
    pub shift: f64,
    pub variance: f64,
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

impl Subject<'_> {
    pub fn scale(&self) -> Scale {
        self.plan.quantity.scale
    }

    /// " mg/L", or nothing where the quantity has no unit.
    pub fn unit(&self) -> String {
        terms::unit(self.plan)
    }

    /// What is known, as symbols have it behind the bar.
    pub fn known(&self) -> &'static str {
        match self.basis {
            Basis::PriorOnly => "prior",
            Basis::ReadingsOnly => "readings",
            Basis::Both => "prior, readings",
        }
    }
}

/// Reads every question of the plan that is well put; what is wrong with the others is noted.
///
/// The number is the question's index in [`Plan::questions`].
pub fn read_all(plan: &Plan, faults: &mut Faults) -> Vec<(usize, Box<dyn Question>)> {
    let mut questions = Vec::with_capacity(plan.questions.len());
    for (index, asked) in plan.questions.iter().enumerate() {
        match ALL.iter().find(|kind| kind.ask == asked.ask) {
            Some(kind) => {
                let read = (kind.read)(asked, plan, faults);
                rule::check(asked, read.as_deref(), plan, faults);
                questions.extend(read.map(|question| (index, question)));
            }
            None => faults.push(unknown_kind(asked)),
        }
    }
    questions
}

fn unknown_kind(asked: &QuestionPlan) -> Fault {
    let names: Vec<&str> = ALL.iter().map(|kind| kind.ask).collect();
    let span = asked.table.get("ask").map_or(&asked.table.span, |value| &value.span);
    let fault = Fault::wrong("unknown-question", format!("\"{}\" is not a kind of question", asked.ask))
        .at(span.place())
        .expected(one_of(&names));
    match nearest(&asked.ask, names.iter().copied()) {
        Some(meant) => fault.repair(format!("write ask = \"{meant}\"")),
        None => fault.repair("choose the kind that fits; the README's table tells them apart"),
    }
}

#[cfg(test)]
mod tests;
