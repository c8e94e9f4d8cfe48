//! # difference
//! "By how much is the level of one series above that of another?" The answer is the level of the first
//! series less that of the second, in the period under review: an interval, the chance that it is above
//! 0 (or what is asked), and with `band` the chance of no practical difference. On the log scale it is
//! their ratio.
//!
//! The two are independent given what they share: the within sd where it is that of all series, spreads
//! and mean where the prior is made of peers, a bias where the prior speaks of true levels. Only where
//! nothing is shared is it the plain convolution of the two laws.
//!
//! Assumes the model of the readings and the priors named in the report; a common bias cancels.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §5.4–5.5.
//!
//! A worked number: flat priors, σ = 0.25, five readings of mean 12.12 and four of 11.65: the difference is
//! 0.47 with sd 0.25 √(1/5 + 1/4) = 0.167705, P(above 0) = Φ(2.802538) = 0.997465.

use super::apart::{self, Apart};
use super::figures::Figures;
use super::{Question, QuestionKind, Subject, terms};
use crate::diagnostics::{Fault, Faults};
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::joint::{self, Member};
use crate::posterior::{Law, When};
use crate::quantity::{Absent, Scale};
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::spec::table::Kind;

const KEYS: &[Key] = &[
    Key::required("series", Takes::TextList, "the two series: the first less the second"),
    terms::PROBABILITY,
    apart::ABOVE,
    apart::BELOW,
    apart::BAND,
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "difference", page: include_str!("difference.rs"), keys: KEYS, read };

#[derive(Debug)]
struct Difference {
    first: String,
    second: String,
    apart: Apart,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let series = reader.text_list("series");
    let apart = Apart::read(&mut reader, plan.quantity.scale);
    let pair = match series.as_deref() {
        Some([first, second]) if first.trim() != second.trim() => {
            Some((first.trim().to_string(), second.trim().to_string()))
        }
        Some(_) => {
            let fault = Fault::wrong("wrong-number", "a difference needs two series")
                .expected("two different names, such as series = [\"A\", \"B\"]")
                .repair("name the two series that are compared");
            reader.fault_at("series", fault);
            None
        }
        None => None,
    };
    reader.finish_beside(&[language::QUESTION]);
    let (first, second) = pair?;
    Some(Box::new(Difference { first, second, apart }))
}

/// Whether one within sd is meant for all series (`[within] from = "peers"`).
pub fn shares_within_sd(plan: &Plan) -> bool {
    matches!(plan.within.get("from").map(|value| &value.kind), Some(Kind::Text(text)) if text == "peers")
}

/// A series as a joint question sees it.
pub fn member<'a>(subject: &Subject<'a>) -> Result<Member<'a>, Absent> {
    let posterior = subject.posterior.clone()?;
    Ok(Member { name: subject.series, model: &posterior.model, readings: &posterior.readings })
}

impl Difference {
    fn law(&self, subjects: &[Subject<'_>]) -> Result<Law, Absent> {
        let find = |name: &str| {
            let subject = subjects
                .iter()
                .find(|subject| subject.series == name)
                .ok_or_else(|| Absent::because(format!("\"{name}\" is not among the series asked about")))?;
            Ok::<_, Absent>((member(subject)?, subject.basis))
        };
        let (first, basis) = find(&self.first)?;
        let (second, _) = find(&self.second)?;
        let shared = subjects.first().is_some_and(|subject| shares_within_sd(subject.plan));
        joint::difference(&first, &second, basis, shared)
    }
}

impl Question for Difference {
    fn answer(&self, _: &Subject<'_>) -> Figures {
        Figures::default()
    }

    fn across(&self, subjects: &[Subject<'_>]) -> Option<Vec<(String, Figures)>> {
        let scale = subjects.first().map_or(Scale::Linear, Subject::scale);
        Some(vec![(String::new(), self.apart.figures(&self.law(subjects), scale))])
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let period = terms::period_words(subject.plan, When::This);
        let between = match subject.scale() {
            Scale::Linear => "less",
            Scale::Log => "over",
        };
        let words = self.apart.words(&subject.unit(), subject.scale());
        format!("the level of {} {between} that of {} in {period}: {words}", self.first, self.second)
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let symbol = match subject.scale() {
            Scale::Linear => "θ_A − θ_B",
            Scale::Log => "exp(θ_A − θ_B)",
        };
        self.apart.symbols(symbol, subject)
    }

    fn gives(&self) -> Vec<&'static str> {
        self.apart.gives()
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let series = format!("[{}, {}]", terms::quoted(&self.first), terms::quoted(&self.second));
        let mut settings = vec![("series", series)];
        settings.extend(self.apart.settings());
        settings
    }
}
