//! # count beyond
//! "How many of the next m readings will lie above the limit?" The answer is the mean of that count and
//! the chance of each count 0, 1, … m. The readings share a level that is not known exactly, so the
//! counts spread more widely than a binomial law with one fixed chance would have it.
//!
//! Given (θ, σ) the count is binomial with π = P(reading beyond | θ, σ); P(count = k) is the
//! expectation of C(m, k) π^k κ^(m − k) over the posterior, κ the chance of not lying beyond, and the
//! mean is m times the chance of one reading.
//!
//! Assumes that the next readings come from this period's model; they are predicted as measured.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5.
//!
//! A worked number: prior N(40, 2²), σ = 1.5, six readings of mean 43.1, above 45, m = 3: the mean is
//! 3 · 0.089318 = 0.267953, and P(count = 0) = 0.765484.

use super::beyond::{self, ANY_SIDE, About, Asked};
use super::binomial::LnFactorials;
use super::figures::{Figures, Item, Meaning};
use super::reading_interval::readings_words;
use super::{Question, QuestionKind, Subject, steps, terms};
use crate::diagnostics::{Caution, Fault, Faults};
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::When;
use crate::quantity::{Absent, Figure};
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;

const KEYS: &[Key] = &[
    beyond::ABOVE,
    beyond::BELOW,
    beyond::BETWEEN,
    beyond::OUTSIDE,
    Key::required("readings", Takes::Count, "how many readings to come"),
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "count beyond", page: include_str!("count_beyond.rs"), keys: KEYS, read };

/// Every count is printed, so that more of them would not be read.
const MOST_COUNTED: u64 = 1000;

#[derive(Debug)]
struct CountBeyond {
    beyond: Asked,
    readings: u64,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let beyond = beyond::read(&mut reader, plan, ANY_SIDE, true);
    let readings = reader.count("readings");
    if let Some(many) = readings
        && many > MOST_COUNTED
    {
        let fault = Fault::wrong(
            "out-of-range",
            format!("`readings` is {many}; the chance of each count is served up to {MOST_COUNTED}"),
        )
        .expected(format!("a whole number from 1 to {MOST_COUNTED}"))
        .repair("ask about a share of readings instead (ask = \"share beyond\")");
        reader.fault_at("readings", fault);
    }
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(CountBeyond { beyond: beyond?, readings: readings.filter(|many| *many <= MOST_COUNTED)? }))
}

impl CountBeyond {
    fn mean(&self, subject: &Subject<'_>) -> Figure {
        let beyond = self.beyond.on_scale(subject.plan, subject.series)?;
        let posterior = subject.posterior.clone()?;
        let own = terms::own_uncertainty(subject, None)?;
        let one = beyond::chance(&posterior.reading(When::This, 1, own)?, beyond);
        Ok(self.readings as f64 * one)
    }

    fn chances(&self, subject: &Subject<'_>) -> Result<Vec<f64>, Absent> {
        let beyond = self.beyond.on_scale(subject.plan, subject.series)?;
        let posterior = subject.posterior.clone()?;
        let own = terms::own_uncertainty(subject, None)?.unwrap_or(0.0);
        let table = LnFactorials::up_to(self.readings);
        let beyond = beyond.from_origin(posterior.origin());
        posterior.expect_each(When::This, self.readings as usize + 1, &|theta, sigma, chances| {
            let sd = (sigma * sigma + own * own).sqrt();
            let (out, within) = beyond::normal_split(beyond, theta, sd);
            for (count, chance) in (0..).zip(chances.iter_mut()) {
                *chance = table.exactly(self.readings, count, out, within);
            }
        })
    }
}

impl Question for CountBeyond {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        let figures = Figures::default().number("estimate", self.mean(subject), Meaning::Count);
        match self.chances(subject) {
            Ok(chances) => figures.with("chances", Item::Numbers(chances, Meaning::Chance)),
            Err(absent) => figures.number("chances", Err(absent), Meaning::Chance),
        }
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let readings = readings_words(subject, When::This, self.readings);
        let beyond = self.beyond.words(subject);
        format!(
            "how many of {readings} lie {beyond}: mean and the chance of each count{}",
            terms::as_measured(subject)
        )
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let beyond = self.beyond.symbols("x_new", subject);
        format!("P(#{{{beyond}}} = k of {} | {})", self.readings, subject.known())
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let mut steps = steps::level(subject, When::This);
        if let Ok(mean) = self.mean(subject) {
            let m = self.readings as f64;
            steps.push(Step::new("chance of one reading", "P(x_new beyond)", &[], mean / m));
            steps.push(Step::new("mean count", "m P(x_new beyond)", &[("m", m), ("P", mean / m)], mean));
        }
        steps
    }

    fn gives(&self) -> Vec<&'static str> {
        vec!["estimate"]
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        vec![self.beyond.setting(), ("readings", self.readings.to_string())]
    }

    fn cautions(&self, plan: &Plan) -> Vec<Caution> {
        self.beyond.caution(About::Reading, plan).into_iter().collect()
    }
}
