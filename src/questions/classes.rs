//! # classes
//! "Into which class does the level fall, and how sure is that?" The answer is the chance of each class
//! that the bounds make: up to the first, between each two, above the last. A level on a bound belongs
//! to the class below it.
//!
//! P(c_{i−1} < θ ≤ c_i) is a difference of Σ w Φ((c − m)/√v), taken in the tail where less cancels.
//!
//! Assumes the model of the readings and the prior named in the report; a stated bias is taken out.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5; giving the confidence of a class is
//! asked for by Directive 2000/60/EC, Annex V.
//!
//! A worked number: prior N(40, 2²), σ = 1.5, six readings of mean 43.1, bounds 42 and 44: the chances
//! are Φ(−1.424814) = 0.077105, 0.899645 and 1 − Φ(1.990836) = 0.023249 (they add to 1 but for rounding).

use super::beyond;
use super::figures::{Figures, Item, Meaning};
use super::terms::{self, Mean};
use super::{Question, QuestionKind, Subject, steps};
use crate::diagnostics::{Fault, Faults};
use crate::math::fm;
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::{Law, When};
use crate::quantity::{Absent, Beyond, Scale};
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;

const KEYS: &[Key] = &[
    Key::required("bounds", Takes::NumberList, "where one class ends and the next begins, rising"),
    Key::optional("names", Takes::TextList, "the classes' names: one more than there are bounds"),
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "classes", page: include_str!("classes.rs"), keys: KEYS, read };

#[derive(Debug)]
struct Classes {
    bounds: Vec<f64>,
    names: Vec<String>,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let bounds = reader.number_list("bounds");
    let names = reader.text_list("names");
    if let Some(bounds) = &bounds {
        let fault = if bounds.is_empty() {
            Some(("missing-value", "`bounds` is empty, so that there is but one class".to_string()))
        } else if let Some(pair) = bounds.windows(2).find(|pair| pair[0] >= pair[1]) {
            Some((
                "out-of-order",
                format!("`bounds` goes from {} to {}, which is not upwards", pair[0], pair[1]),
            ))
        } else if plan.quantity.scale == Scale::Log && bounds.iter().any(|bound| *bound <= 0.0) {
            Some(("out-of-range", "on the log scale nothing lies at or below 0".to_string()))
        } else {
            None
        };
        if let Some((code, message)) = fault {
            let fault = Fault::wrong(code, message)
                .expected("rising numbers, such as [25, 50]")
                .repair("order the bounds from the lowest to the highest");
            reader.fault_at("bounds", fault);
        }
        if let Some(names) = &names
            && names.len() != bounds.len() + 1
        {
            let fault = Fault::wrong(
                "wrong-number",
                format!(
                    "{} bounds make {} classes, and there are {} names",
                    bounds.len(),
                    bounds.len() + 1,
                    names.len()
                ),
            )
            .expected(format!("{} names", bounds.len() + 1))
            .repair("give one name more than there are bounds");
            reader.fault_at("names", fault);
        }
    }
    reader.finish_beside(&[language::QUESTION]);
    let bounds = bounds?;
    let unit = terms::unit(plan);
    let names = names.unwrap_or_else(|| names_of(&bounds, &unit));
    Some(Box::new(Classes { bounds, names }))
}

/// "up to 25 mg/L", "25 to 50 mg/L", "above 50 mg/L".
fn names_of(bounds: &[f64], unit: &str) -> Vec<String> {
    let (Some(first), Some(last)) = (bounds.first(), bounds.last()) else { return Vec::new() };
    let mut names = vec![format!("up to {first}{unit}")];
    names.extend(bounds.windows(2).map(|pair| format!("above {} up to {}{unit}", pair[0], pair[1])));
    names.push(format!("above {last}{unit}"));
    names
}

impl Classes {
    fn chances(&self, subject: &Subject<'_>) -> Result<Vec<f64>, Absent> {
        let law: Law = terms::level_law(subject.posterior.clone()?, When::This, Mean::Level)?;
        let bounds: Vec<f64> = match subject.scale() {
            Scale::Linear => self.bounds.clone(),
            Scale::Log => self.bounds.iter().map(|bound| fm::ln(*bound)).collect(),
        };
        let (Some(first), Some(last)) = (bounds.first(), bounds.last()) else {
            return Err(Absent::because("there are no bounds"));
        };
        let mut chances = vec![law.cdf(*first)];
        chances.extend(bounds.windows(2).map(|pair| beyond::chance(&law, Beyond::Between(pair[0], pair[1]))));
        chances.push(law.sf(*last));
        Ok(chances)
    }
}

impl Question for Classes {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        let figures = Figures::default().with("names", Item::Texts(self.names.clone()));
        match self.chances(subject) {
            Ok(chances) => figures.with("chances", Item::Numbers(chances, Meaning::Chance)),
            Err(absent) => figures.number("chances", Err(absent), Meaning::Chance),
        }
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let level = terms::level_words(subject.plan, When::This, Mean::Level);
        format!("probability that {level} lies in each of the classes {}", self.names.join("; "))
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        format!("P(c_(i−1) < θ ≤ c_i | {})", subject.known())
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let mut steps = steps::level(subject, When::This);
        if let Ok(chances) = self.chances(subject) {
            for (name, chance) in self.names.iter().zip(chances) {
                steps.push(Step::new(&format!("chance of \"{name}\""), "P(c_(i−1) < θ ≤ c_i)", &[], chance));
            }
        }
        steps
    }

    fn gives(&self) -> Vec<&'static str> {
        Vec::new()
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let bounds: Vec<String> = self.bounds.iter().map(|bound| format!("{bound}")).collect();
        let names: Vec<String> = self.names.iter().map(|name| terms::quoted(name)).collect();
        vec![("bounds", format!("[{}]", bounds.join(", "))), ("names", format!("[{}]", names.join(", ")))]
    }
}
