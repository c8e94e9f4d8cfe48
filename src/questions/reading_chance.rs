//! # reading chance
//! "How likely is the next reading above the limit?", "... the mean of the next m readings?", "... at
//! least k of the next m?" The answers are predictive: the readings scatter about a level that is not
//! known exactly, and all of them share it.
//!
//! Given a piece of the posterior, the next reading is N(m, v + σ²) and P(x > L) = Σ w (1 − Φ((L − m)/√(v + σ²)));
//! for `of = "mean"` σ²/m stands for σ² (on the log scale the geometric mean). `at_least = k` of m:
//! E[Σ_{j ≥ k} C(m, j) π^j κ^(m − j)], π the chance of one reading lying beyond given (θ, σ) and κ that
//! of not lying there; it is not 1 − (1 − p)^m, since the readings share their level.
//! `of_period = "next"` asks about the next period's readings. `uncertainty`: as for `reading interval`.
//!
//! Assumes that the next readings come from the same model; they are predicted as measured.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5.
//!
//! A worked number: prior N(40, 2²), σ = 1.5, six readings of mean 43.1: m = 42.834286, v = 0.342857;
//! P(next > 45) = 1 − Φ(2.165714/1.610235) = 0.089318; mean of the next three: sd √(0.342857 + 0.75),
//! P = 0.019148; at least one of the next three above: 0.234516, not 1 − (1 − 0.089318)³ = 0.244730.

use super::beyond::{self, ANY_SIDE, About, Asked};
use super::binomial::LnFactorials;
use super::figures::{Figures, Meaning};
use super::reading_interval::{READINGS, read_readings, readings_words};
use super::terms;
use super::{Linear, Question, QuestionKind, Subject, steps};
use crate::diagnostics::{Caution, Fault, Faults};
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::When;
use crate::quantity::Figure;
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;

const KEYS: &[Key] = &[
    beyond::ABOVE,
    beyond::BELOW,
    beyond::BETWEEN,
    beyond::OUTSIDE,
    READINGS,
    Key::optional("of", Takes::OneOf(&["each", "mean"]), "of each of them (default) or of their mean"),
    Key::optional("at_least", Takes::Count, "so many of them at least"),
    terms::OF_PERIOD,
    terms::UNCERTAINTY,
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "reading chance", page: include_str!("reading_chance.rs"), keys: KEYS, read };

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Of {
    Each,
    Mean,
    AtLeast(u64),
}

#[derive(Debug)]
struct ReadingChance {
    beyond: Asked,
    readings: u64,
    of: Of,
    when: When,
    uncertainty: Option<f64>,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let beyond = beyond::read(&mut reader, plan, ANY_SIDE, true);
    let readings = read_readings(&mut reader);
    let of = match (reader.choice("of"), reader.count("at_least")) {
        (_, Some(least)) => Of::AtLeast(least),
        (Some("mean"), None) => Of::Mean,
        _ => Of::Each,
    };
    if reader.has("of") && reader.has("at_least") {
        let fault =
            Fault::wrong("either-or", "`at_least` counts readings, and `of` asks about each or their mean")
                .expected("either `of` or `at_least`")
                .repair("leave one of them out");
        reader.fault_at("at_least", fault);
    }
    if let Of::AtLeast(least) = of
        && least > readings
    {
        let fault =
            Fault::wrong("out-of-range", format!("`at_least` is {least}, and there are {readings} readings"))
                .expected(format!("a whole number from 1 to {readings}"))
                .repair(format!("write readings = {least} or more beside it"));
        reader.fault_at("at_least", fault);
    }
    if of == Of::Mean && !reader.has("readings") {
        let fault = Fault::wrong(
            "missing-key",
            "`of` speaks of several readings, and `readings` does not say how many",
        )
        .expected("readings = a whole number")
        .repair("add readings = 12, or leave `of` out");
        reader.fault_at("of", fault);
    }
    if readings > 1 && !reader.has("of") && !reader.has("at_least") {
        let fault = Fault::wrong(
            "not-clear",
            format!("`readings` is {readings}, and nothing says what is asked of them"),
        )
        .expected("at_least = a whole number, or of = \"each\" or \"mean\"")
        .repair("add at_least = 1 for the chance that any of them lies beyond");
        reader.fault_at("readings", fault);
    }
    let when = terms::read_when_of_readings(&mut reader);
    let uncertainty = reader.positive("uncertainty");
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(ReadingChance { beyond: beyond?, readings, of, when, uncertainty }))
}

impl ReadingChance {
    fn chance(&self, subject: &Subject<'_>) -> Figure {
        let beyond = self.beyond.on_scale(subject.plan, subject.series)?;
        let posterior = subject.posterior.clone()?;
        let own = terms::own_uncertainty(subject, self.uncertainty)?;
        match self.of {
            Of::Each => Ok(beyond::chance(&posterior.reading(self.when, 1, own)?, beyond)),
            Of::Mean => Ok(beyond::chance(&posterior.reading(self.when, self.readings, own)?, beyond)),
            Of::AtLeast(1) if self.readings == 1 => {
                Ok(beyond::chance(&posterior.reading(self.when, 1, own)?, beyond))
            }
            Of::AtLeast(least) => {
                let table = LnFactorials::up_to(self.readings);
                let own = own.unwrap_or(0.0);
                let beyond = beyond.from_origin(posterior.origin());
                posterior.expect(self.when, &|theta, sigma| {
                    let sd = (sigma * sigma + own * own).sqrt();
                    let (out, within) = beyond::normal_split(beyond, theta, sd);
                    table.at_least(self.readings, least, out, within)
                })
            }
        }
    }
}

impl Question for ReadingChance {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        Figures::default().number("chance", self.chance(subject), Meaning::Chance)
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let readings = readings_words(subject, self.when, self.readings);
        let beyond = self.beyond.words(subject);
        let measured = terms::as_measured(subject);
        match self.of {
            Of::Each if self.readings == 1 => format!("probability that {readings} lies {beyond}{measured}"),
            Of::Each => format!("probability that each single one of {readings} lies {beyond}{measured}"),
            Of::Mean => {
                format!(
                    "probability that {} of {readings} lies {beyond}{measured}",
                    terms::mean_words(subject)
                )
            }
            Of::AtLeast(1) => format!("probability that at least one of {readings} lies {beyond}{measured}"),
            Of::AtLeast(least) => {
                format!("probability that at least {least} of {readings} lie {beyond}{measured}")
            }
        }
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let known = subject.known();
        match self.of {
            Of::Each => format!("P({} | {known})", self.beyond.symbols("x_new", subject)),
            Of::Mean => format!("P({} | {known})", self.beyond.symbols("x̄_new", subject)),
            Of::AtLeast(least) => {
                format!(
                    "P(#{{{}}} ≥ {least} of {} | {known})",
                    self.beyond.symbols("x_new", subject),
                    self.readings
                )
            }
        }
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let Ok(result) = self.chance(subject) else { return Vec::new() };
        if let Some(linear) = self.linear(subject, steps::reading_sd(subject)) {
            return steps::chance(subject, linear, result);
        }
        let mut steps = steps::level(subject, self.when);
        if let Of::AtLeast(least) = self.of {
            let put_in = [("k", least as f64), ("m", self.readings as f64)];
            let formula = "E[Σ_{j ≥ k} C(m, j) π^j (1 − π)^(m − j)]";
            steps.push(Step::new("expectation over the level and σ", formula, &put_in, result));
        }
        steps
    }

    fn gives(&self) -> Vec<&'static str> {
        vec!["chance"]
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let mut settings = vec![self.beyond.setting(), ("readings", self.readings.to_string())];
        settings.push(match self.of {
            Of::Each => ("of", terms::quoted("each")),
            Of::Mean => ("of", terms::quoted("mean")),
            Of::AtLeast(least) => ("at_least", least.to_string()),
        });
        settings.push(("of_period", terms::quoted(terms::when_name(self.when))));
        settings.extend(self.uncertainty.map(|u| ("uncertainty", format!("{u}"))));
        settings
    }

    fn cautions(&self, plan: &Plan) -> Vec<Caution> {
        self.beyond.caution(About::Reading, plan).into_iter().collect()
    }

    fn linear(&self, subject: &Subject<'_>, reading_sd: f64) -> Option<Linear> {
        let m = match self.of {
            Of::Each => 1.0,
            Of::Mean => self.readings as f64,
            Of::AtLeast(1) if self.readings == 1 => 1.0,
            Of::AtLeast(_) => return None,
        };
        let own = terms::own_uncertainty(subject, self.uncertainty).ok()?.unwrap_or(0.0);
        let beyond = self.beyond.on_scale(subject.plan, subject.series).ok()?;
        let variance = (reading_sd * reading_sd + own * own) / m;
        Some(Linear { when: self.when, true_level: false, beyond, shift: 0.0, variance })
    }
}
