//! # change
//! "Has the level risen since last year, by how much, and does it matter?" The answer is the level of
//! this period less that of an earlier one (`against = "previous"`, or a period), or less the long-run
//! mean (`against = "long run"`): an interval, the chance of a rise (`above = 0`), and with `band` the
//! chance that the change lies within what makes no practical difference. On the log scale it is the
//! ratio of the two levels.
//!
//! Where the prior models periods, both levels come from their joint posterior, since they share the
//! long-run mean and the spreads. Given (τ, σ), with B = τ²/(τ² + s²): N(B_n x̄_n − B_a x̄_a + (B_a − B_n) μ̂,
//! B_n s_n² + B_a s_a² + (B_a − B_n)² V). Where it does not, the earlier level stands on its own
//! readings, N(x̄_a, s_a²), independent given σ.
//!
//! Assumes that method and site were the same in both periods. A common bias cancels.
//! "previous" is the latest earlier period with readings that `[history]` does not leave out.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §5.4; for the band: Kruschke 2018, Advances in
//! Methods and Practices in Psychological Science 1.
//!
//! A worked number: flat prior, σ = 1.5, six readings of mean 43.1 after five of mean 41.9: the change is
//! 1.2 with sd 1.5 √(1/6 + 1/5) = 0.908295; P(rise) = Φ(1.321156) = 0.906775.

use super::apart::{self, Apart};
use super::figures::Figures;
use super::terms::{self, Mean};
use super::{Question, QuestionKind, Subject, steps};
use crate::data::PeriodData;
use crate::data::evidence::Evidence;
use crate::diagnostics::{Fault, Faults};
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::{Law, When};
use crate::quantity::{Absent, Period, Scale};
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::{Reader, period_of};
use crate::spec::table::Kind;
use crate::working::Step;

const KEYS: &[Key] = &[
    Key::optional(
        "against",
        Takes::Other("\"previous\", \"long run\", or a period such as 2019"),
        "what the level is compared with; default previous",
    ),
    terms::PROBABILITY,
    apart::ABOVE,
    apart::BELOW,
    apart::BAND,
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "change", page: include_str!("change.rs"), keys: KEYS, read };

#[derive(Debug, Clone, PartialEq)]
enum Against {
    Previous,
    Period(Period),
    LongRun,
}

#[derive(Debug)]
struct Change {
    against: Against,
    apart: Apart,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let against = read_against(&mut reader, plan);
    let apart = Apart::read(&mut reader, plan.quantity.scale);
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(Change { against: against?, apart }))
}

fn read_against(reader: &mut Reader<'_>, plan: &Plan) -> Option<Against> {
    let Some(value) = reader.value("against") else { return Some(Against::Previous) };
    match &value.kind {
        Kind::Text(text) if text.trim() == "previous" => return Some(Against::Previous),
        Kind::Text(text) if text.trim() == "long run" => return Some(Against::LongRun),
        _ => {}
    }
    let Some(period) = period_of(value) else { return reader.refuse("against") };
    if period == plan.review.period {
        let fault = Fault::wrong("no-such-quantity", format!("{period} is the period under review itself"))
            .expected("an earlier period")
            .repair("write against = \"previous\"");
        reader.fault_at("against", fault);
        return None;
    }
    Some(Against::Period(period))
}

impl Change {
    /// The earlier period that this series is compared with, and its readings: in the data, or in the
    /// handover that the prior was carried from.
    fn earlier(&self, subject: &Subject<'_>) -> Result<(Period, Evidence), Absent> {
        let in_data = self.earlier_in_data(subject);
        let held = subject.posterior.as_ref().ok().and_then(|posterior| posterior.model.level.own_periods());
        let held = held.map_or(&[][..], |periods| &periods.periods);
        let own = |data: &PeriodData| (data.period.clone(), data.evidence.clone());
        match (&self.against, in_data) {
            (Against::Period(_), Ok(data)) => Ok(own(data)),
            (Against::Period(period), Err(reason)) => {
                held.iter().find(|(known, _)| known == period).cloned().ok_or(reason)
            }
            (_, in_data) => {
                let series = subject.data;
                let carried = held
                    .last()
                    .filter(|(period, _)| series.and_then(|series| series.period(period)).is_none());
                carried.cloned().map_or_else(|| in_data.map(own), Ok)
            }
        }
    }

    fn earlier_in_data<'a>(&self, subject: &Subject<'a>) -> Result<&'a PeriodData, Absent> {
        let none = || Absent::because("the series has no earlier readings");
        let data = subject.data.ok_or_else(none)?;
        let review = &subject.plan.review.period;
        match &self.against {
            Against::Period(period) => data
                .period(period)
                .filter(|data| !data.evidence.is_nothing())
                .ok_or_else(|| Absent::because(format!("the series has no readings in {period}"))),
            _ => {
                let left_out = |period: &Period| {
                    subject.plan.history.leave_out.iter().any(|(left_out, _)| left_out == period)
                };
                // Periods stand in their order in time; where this one is missing, numbers tell.
                let before = data.periods.iter().position(|data| data.period == *review);
                let earlier = |data: &&PeriodData| match (before, data.period.number(), review.number()) {
                    (None, Some(other), Some(own)) => other < own,
                    _ => true,
                };
                data.periods[..before.unwrap_or(data.periods.len())]
                    .iter()
                    .filter(earlier)
                    .rfind(|data| !data.evidence.is_nothing() && !left_out(&data.period))
                    .ok_or_else(none)
            }
        }
    }

    fn law(&self, subject: &Subject<'_>) -> Result<Law, Absent> {
        let posterior = subject.posterior.clone()?;
        if self.against == Against::LongRun {
            return posterior.change_long_run();
        }
        let (period, readings) = self.earlier(subject)?;
        posterior.change(&period, &readings)
    }

    fn against_words(&self, subject: &Subject<'_>) -> String {
        match &self.against {
            Against::LongRun => "the long-run mean".to_string(),
            Against::Period(period) => format!("that of {period}"),
            Against::Previous => match self.earlier(subject) {
                Ok((period, _)) => format!("that of {period}"),
                Err(_) => "that of the period before".to_string(),
            },
        }
    }
}

impl Question for Change {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        self.apart.figures(&self.law(subject), subject.scale())
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let level = terms::level_words(subject.plan, When::This, Mean::Level);
        let between = match subject.scale() {
            Scale::Linear => "less",
            Scale::Log => "over",
        };
        let against = self.against_words(subject);
        format!("{level} {between} {against}: {}", self.apart.words(&subject.unit(), subject.scale()))
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let other = if self.against == Against::LongRun { "μ" } else { "θ_earlier" };
        let symbol = match subject.scale() {
            Scale::Linear => format!("θ − {other}"),
            Scale::Log => format!("exp(θ − {other})"),
        };
        self.apart.symbols(&symbol, subject)
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let mut steps = steps::level(subject, When::This);
        let figures = self.answer(subject);
        if let Some(estimate) = figures.value("estimate") {
            steps.push(Step::new("change", "E(Δ) over the joint posterior", &[], estimate));
        }
        steps.extend(steps::read_off(&figures, "t with P(Δ ≤ t) = tail", self.apart.probability));
        if let Some(chance) = figures.value("chance") {
            steps.push(Step::new("chance", "P(Δ beyond)", &[], chance));
        }
        steps
    }

    fn gives(&self) -> Vec<&'static str> {
        self.apart.gives()
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let against = match &self.against {
            Against::Previous => terms::quoted("previous"),
            Against::LongRun => terms::quoted("long run"),
            Against::Period(period) => terms::quoted(period.as_str()),
        };
        let mut settings = vec![("against", against)];
        settings.extend(self.apart.settings());
        settings
    }
}
