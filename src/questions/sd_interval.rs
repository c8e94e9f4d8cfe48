//! # sd interval
//! "How much do single readings scatter?" (`sd = "within"`, σ) or "How much do the periods' levels
//! differ?" (`sd = "between"`, τ; in a random walk that of one step). The answer is a credible
//! interval of that standard deviation.
//!
//! With p(σ²) ∝ 1/σ² and n readings alone, SS/σ² ~ χ²_{n−1}; with a prior worth ν' degrees of freedom,
//! (ν' s'² + SS)/σ² ~ χ²_{ν' + n − 1}; else the law of σ or τ is read off the nodes of the
//! posterior. On the log scale sds are printed as geometric sds, exp σ, which are factors.
//!
//! Assumes normal readings (levels). A sd that was stated as known has no interval. Few periods say
//! little about τ, and then its interval depends on the prior of τ named in the report.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §3.2, §5.4; Gelman 2006, Bayesian Analysis 1.
//!
//! A worked number: five readings with sd 1: the central 95 % interval of σ is √(4/11.1433) = 0.599133 to
//! √(4/0.484419) = 2.873556 (Berthouex & Brown, Statistics for Environmental Engineers, Table 21.3:
//! 0.60 and 2.87).

use super::figures::{Figures, Meaning};
use super::terms::{self, Interval};
use super::{Question, QuestionKind, Subject, steps};
use crate::diagnostics::Faults;
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::Law;
use crate::quantity::{Absent, Scale};
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;

const KEYS: &[Key] = &[
    Key::required(
        "sd",
        Takes::OneOf(&["within", "between"]),
        "of readings about their level, or of levels about the long-run mean",
    ),
    terms::PROBABILITY,
    terms::INTERVAL,
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "sd interval", page: include_str!("sd_interval.rs"), keys: KEYS, read };

#[derive(Debug)]
struct SdInterval {
    between: bool,
    probability: f64,
    interval: Interval,
}

fn read(asked: &QuestionPlan, _: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let sd = reader.choice("sd");
    let probability = terms::read_probability(&mut reader);
    let interval = Interval::read(&mut reader, Interval::Central);
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(SdInterval { between: sd? == "between", probability, interval }))
}

impl SdInterval {
    fn law(&self, subject: &Subject<'_>) -> Result<Law, Absent> {
        let posterior = subject.posterior.clone()?;
        if self.between { posterior.between_sd() } else { posterior.within_sd() }
    }

    fn symbol(&self) -> &'static str {
        if self.between { "τ" } else { "σ" }
    }
}

impl Question for SdInterval {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        let meaning = match subject.scale() {
            Scale::Linear => Meaning::Spread,
            Scale::Log => Meaning::Factor,
        };
        terms::interval_figures(&self.law(subject), self.probability, self.interval, subject.scale(), meaning)
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let geometric = match subject.scale() {
            Scale::Linear => "",
            Scale::Log => "geometric ",
        };
        let what = if self.between {
            "the periods' levels about the long-run mean (between sd)"
        } else {
            "single readings about their period's level (within sd)"
        };
        format!("{} of the {geometric}standard deviation of {what}", self.interval.words(self.probability))
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        terms::interval_symbols(self.symbol(), self.interval, self.probability, subject.known())
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let formula = format!("t with P({} ≤ t) = tail", self.symbol());
        steps::read_off(&self.answer(subject), &formula, self.probability)
    }

    fn gives(&self) -> Vec<&'static str> {
        self.interval.gives()
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        vec![
            ("sd", terms::quoted(if self.between { "between" } else { "within" })),
            ("probability", format!("{}", self.probability)),
            ("interval", terms::quoted(self.interval.name())),
        ]
    }
}
