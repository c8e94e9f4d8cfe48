//! # characteristic value
//! "Which characteristic strength can be declared?" The answer is the predictive quantile of one
//! reading: the value below which the next reading lies with p per cent probability (5 by default),
//! everything unknown averaged over. This is the characteristic value by the Bayesian procedure of
//! EN 1990 Annex D and ISO 12491.
//!
//! It solves Σ w Φ((t − m)/√(v + σ²)) = p. With a flat prior and σ known it is x̄ − k_n σ with
//! k_n = 1.645 √(1 + 1/n); with σ unknown, x̄ − t_{0.95, n−1} s √(1 + 1/n).
//!
//! Assumes that readings are normal (lognormal on the log scale) in their tail. It is not a bound of
//! the percentile: about half of all declared values would lie above the true percentile.
//!
//! Source: EN 1990:2002, Annex D, clause D7.2; ISO 12491:1997; JCSS Probabilistic Model Code.
//!
//! A worked number: flat prior, σ = 2.75, 10 readings of mean 55: t = 55 − 1.644854 · 2.75 · √1.1 = 50.2559.

use super::figures::{Figures, Meaning};
use super::percentile::{percentile_words, read_percentile, z_of_percent};
use super::{Question, QuestionKind, Subject, steps, terms};
use crate::diagnostics::Faults;
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::When;
use crate::quantity::Figure;
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;

const KEYS: &[Key] = &[Key::optional("percentile", Takes::Positive, "in per cent; default 5")];

pub const KIND: QuestionKind = QuestionKind {
    ask: "characteristic value",
    page: include_str!("characteristic_value.rs"),
    keys: KEYS,
    read,
};

#[derive(Debug)]
struct CharacteristicValue {
    /// In per cent.
    percentile: f64,
}

fn read(asked: &QuestionPlan, _: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let percentile = if reader.has("percentile") { read_percentile(&mut reader) } else { Some(5.0) };
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(CharacteristicValue { percentile: percentile? }))
}

impl CharacteristicValue {
    fn value(&self, subject: &Subject<'_>) -> Figure {
        let posterior = subject.posterior.clone()?;
        let own = terms::own_uncertainty(subject, None)?;
        let law = posterior.reading(When::This, 1, own)?;
        let value = if self.percentile <= 50.0 {
            law.quantile(self.percentile / 100.0)?
        } else {
            law.upper_quantile((100.0 - self.percentile) / 100.0)?
        };
        Ok(terms::printed(value, subject.scale()))
    }
}

impl Question for CharacteristicValue {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        Figures::default().number("estimate", self.value(subject), Meaning::Value)
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let period = terms::period_words(subject.plan, When::This);
        format!(
            "characteristic value: predictive {} of one reading of {period}{}",
            percentile_words(self.percentile),
            terms::as_measured(subject)
        )
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let share = terms::number_text(self.percentile / 100.0, 0);
        format!("P(x_new ≤ t | {}) = {share}", subject.known())
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let (Ok(posterior), Ok(own)) = (&subject.posterior, terms::own_uncertainty(subject, None)) else {
            return Vec::new();
        };
        let mut steps = steps::level(subject, When::This);
        let own = own.unwrap_or(0.0);
        if let (Some(piece), Some(z)) = (posterior.one_piece(), z_of_percent(self.percentile)) {
            let sd = (piece.level_var + piece.reading_sd * piece.reading_sd + own * own).sqrt();
            let put_in = [("v", piece.level_var), ("σ", piece.reading_sd), ("u", own)];
            steps.push(Step::new(
                "standard deviation of the next reading",
                "s = √(v + σ² + u²)",
                &put_in,
                sd,
            ));
            let put_in = [("m", piece.level_mean), ("z_p", z), ("s", sd)];
            steps.push(Step::new("end", "m + z_p s", &put_in, piece.level_mean + z * sd));
            return steps::in_unit(steps, subject.scale());
        }
        if let Ok(value) = self.value(subject) {
            let put_in = [("p in %", self.percentile)];
            steps.push(Step::new("characteristic value", "Σ w Φ((t − m)/√(v + σ²)) = p", &put_in, value));
        }
        steps
    }

    fn gives(&self) -> Vec<&'static str> {
        vec!["estimate"]
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        vec![("percentile", format!("{}", self.percentile))]
    }
}
