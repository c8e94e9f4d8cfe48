//! # level chance
//! "How likely is it that the level lies above the limit?" (or below it, between two, outside two).
//! The answer is P(θ beyond | prior, readings), a probability about the level θ, the mean about which
//! this period's readings scatter. Single readings may lie above a limit while the level lies below.
//!
//! Over the pieces of the posterior, θ ~ N(m, v) given each: P(θ > L) = Σ w (1 − Φ((L − m)/√v)).
//! Ends of an interval belong to its inside. `of_period` and `mean` as for `level interval`.
//!
//! Assumes the model of the readings and the prior named in the report; a stated bias is taken out.
//! The probability does not cover mistakes that leave no trace in the numbers.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5; JCGM 106:2012, clause 7.
//!
//! A worked number: prior N(40, 2²), σ = 1.5, six readings of mean 43.1: m = 42.834286, √v = 0.585540,
//! P(θ > 45) = 1 − Φ((45 − 42.834286)/0.585540) = 1 − Φ(3.698661) = 0.00010837.

use super::beyond::{self, ANY_SIDE, About, Asked};
use super::figures::{Figures, Meaning};
use super::terms::{self, Mean};
use super::{Linear, Question, QuestionKind, Subject, steps};
use crate::diagnostics::{Caution, Faults};
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::When;
use crate::spec::keys::Key;
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;

const KEYS: &[Key] =
    &[beyond::ABOVE, beyond::BELOW, beyond::BETWEEN, beyond::OUTSIDE, terms::OF_PERIOD_LEVEL, terms::MEAN];

pub const KIND: QuestionKind =
    QuestionKind { ask: "level chance", page: include_str!("level_chance.rs"), keys: KEYS, read };

#[derive(Debug)]
struct LevelChance {
    beyond: Asked,
    when: When,
    mean: Mean,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let beyond = beyond::read(&mut reader, plan, ANY_SIDE, true);
    let when = terms::read_when(&mut reader);
    let mean = terms::read_mean(&mut reader, plan.quantity.scale, when);
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(LevelChance { beyond: beyond?, when, mean }))
}

impl Question for LevelChance {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        let chance = self.beyond.on_scale(subject.plan, subject.series).and_then(|beyond| {
            let posterior = subject.posterior.clone()?;
            Ok(beyond::chance(&terms::level_law(posterior, self.when, self.mean)?, beyond))
        });
        Figures::default().number("chance", chance, Meaning::Chance)
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let level = terms::level_words(subject.plan, self.when, self.mean);
        format!("probability that {level} lies {}", self.beyond.words(subject))
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let symbol = terms::level_symbol(self.when, self.mean);
        format!("P({} | {})", self.beyond.symbols(symbol, subject), subject.known())
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let sigma = steps::reading_sd(subject);
        match (self.linear(subject, sigma), self.answer(subject).value("chance")) {
            (Some(linear), Some(result)) => steps::chance(subject, linear, result),
            _ => Vec::new(),
        }
    }

    fn gives(&self) -> Vec<&'static str> {
        vec!["chance"]
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let mut settings =
            vec![self.beyond.setting(), ("of_period", terms::quoted(terms::when_name(self.when)))];
        if self.mean == Mean::Arithmetic {
            settings.push(("mean", terms::quoted("arithmetic")));
        }
        settings
    }

    fn cautions(&self, plan: &Plan) -> Vec<Caution> {
        self.beyond.caution(About::Level, plan).into_iter().collect()
    }

    fn linear(&self, subject: &Subject<'_>, reading_sd: f64) -> Option<Linear> {
        let shift = match self.mean {
            Mean::Level => 0.0,
            Mean::Arithmetic => 0.5 * reading_sd * reading_sd,
        };
        let beyond = self.beyond.on_scale(subject.plan, subject.series).ok()?;
        Some(Linear { when: self.when, true_level: true, beyond, shift, variance: 0.0 })
    }
}
