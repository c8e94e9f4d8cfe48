//! # level interval
//! "Between which values does the level lie?" The level θ is the mean about which this period's
//! readings scatter; the answer is the estimate and a credible interval: given the model, the prior
//! and the readings, θ lies inside with the probability asked for.
//!
//! Given a piece of the posterior, θ ~ N(m, v). Over all pieces, with weights w, the ends solve
//! Σ w Φ((t − m)/√v) = tail. `central`: equal tails; `shortest`: the shortest single interval on the
//! printed scale; `lower bound`, `upper bound`: one end. The estimate is the mean of θ (its median
//! where no mean exists, and on the log scale, where θ is printed as the geometric mean exp θ).
//! `mean = "arithmetic"` on the log scale asks about exp(θ + σ²/2), the mean of the readings
//! themselves. `of_period = "next"` is the level of the period to come, `"long run"` the mean about
//! which the periods' levels scatter; both need a prior that models periods.
//!
//! Assumes the model of the readings and the prior named in the report. A stated bias common to all
//! readings is taken out: the interval is of the true level, and is wider by it.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5; the choice of intervals: §2.3.
//!
//! A worked number: prior N(40, 2²), σ = 1.5, six readings of mean 43.1: m = 42.834286, √v = 0.585540,
//! the central 95 % interval is 42.834286 ± 1.959964 · 0.585540 = 41.6866 to 43.9819.

use super::figures::{Figures, Meaning};
use super::terms::{self, Interval, Mean};
use super::{Question, QuestionKind, Subject, steps};
use crate::diagnostics::Faults;
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::When;
use crate::spec::keys::Key;
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;

const KEYS: &[Key] = &[terms::PROBABILITY, terms::INTERVAL, terms::OF_PERIOD_LEVEL, terms::MEAN];

pub const KIND: QuestionKind =
    QuestionKind { ask: "level interval", page: include_str!("level_interval.rs"), keys: KEYS, read };

#[derive(Debug)]
struct LevelInterval {
    probability: f64,
    interval: Interval,
    when: When,
    mean: Mean,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let probability = terms::read_probability(&mut reader);
    let interval = Interval::read(&mut reader, Interval::Central);
    let when = terms::read_when(&mut reader);
    let mean = terms::read_mean(&mut reader, plan.quantity.scale, when);
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(LevelInterval { probability, interval, when, mean }))
}

impl Question for LevelInterval {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        let law = subject.posterior.clone().and_then(|known| terms::level_law(known, self.when, self.mean));
        terms::interval_figures(&law, self.probability, self.interval, subject.scale(), Meaning::Value)
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let interval = self.interval.words(self.probability);
        format!("{interval} of {}", terms::level_words(subject.plan, self.when, self.mean))
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let symbol = terms::level_symbol(self.when, self.mean);
        terms::interval_symbols(symbol, self.interval, self.probability, subject.known())
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let Ok(posterior) = &subject.posterior else { return Vec::new() };
        let mut steps = steps::level(subject, self.when);
        if let Some(piece) = posterior.one_piece()
            && self.mean == Mean::Level
            && posterior.model.bias_sd == 0.0
            && self.interval != Interval::Shortest
            && let Some((mean, variance)) = steps::moments(piece, self.when)
        {
            let sd = variance.sqrt();
            steps.push(Step::new("standard deviation of the level", "s = √v", &[("v", variance)], sd));
            steps.extend(steps::normal_ends(mean, sd, self.interval, self.probability));
            return steps::in_unit(steps, subject.scale());
        }
        let figures = self.answer(subject);
        steps.extend(steps::read_off(&figures, "Σ w Φ((t − m)/√v) = tail", self.probability));
        steps
    }

    fn gives(&self) -> Vec<&'static str> {
        self.interval.gives()
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let mut settings = vec![
            ("probability", format!("{}", self.probability)),
            ("interval", terms::quoted(self.interval.name())),
            ("of_period", terms::quoted(terms::when_name(self.when))),
        ];
        if self.mean == Mean::Arithmetic {
            settings.push(("mean", terms::quoted("arithmetic")));
        }
        settings
    }
}
