//! # period mean
//! "What will the mean of the period be, with the readings in hand and the m still to come?" Where a
//! limit is set for the mean of a period's readings, this is the number that will be held against it:
//! the readings in hand are fixed, only those to come are uncertain.
//!
//! With n readings of mean x̄ in hand and m to come, it is (n x̄ + m Ȳ)/(n + m), Ȳ the mean of the readings
//! to come, N(m_k, v_k + σ_k²/m) given a piece: they share the level θ. On the log scale it is the
//! geometric mean. With one of the keys `above`, `below`, `between`, `outside` the chance is given too.
//!
//! Assumes that the readings to come arise like those in hand; they are meant as measured. Readings
//! marked as below or above something have no plain mean, so there is no answer with them.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5.
//!
//! A worked number: prior N(40, 2²), σ = 1.5, six readings of mean 43.1 in hand, six to come: mean
//! (43.1 + 42.834286)/2 = 42.967143, sd ½ √(0.342857 + 2.25/6) = 0.423632; the central 95 % interval is
//! 42.1368 to 43.7974.

use super::beyond::{self, ANY_SIDE, About, Asked};
use super::figures::{Figures, Meaning};
use super::terms::{self, Interval};
use super::{Question, QuestionKind, Subject, steps};
use crate::data::evidence::{Evidence, Seen};
use crate::diagnostics::{Caution, Faults};
use crate::math::sums::Moments;
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::{Basis, Law, When};
use crate::quantity::Absent;
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;

const KEYS: &[Key] = &[
    Key::required("readings", Takes::Count, "how many readings are still to come"),
    terms::PROBABILITY,
    beyond::ABOVE,
    beyond::BELOW,
    beyond::BETWEEN,
    beyond::OUTSIDE,
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "period mean", page: include_str!("period_mean.rs"), keys: KEYS, read };

#[derive(Debug)]
struct PeriodMean {
    readings: u64,
    probability: f64,
    beyond: Option<Asked>,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let readings = reader.count("readings");
    let probability = terms::read_probability(&mut reader);
    let beyond = beyond::read(&mut reader, plan, ANY_SIDE, false);
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(PeriodMean { readings: readings?, probability, beyond }))
}

/// Number and mean of the readings in hand, on the model's scale, and what the exact mean has beyond that one.
fn in_hand(subject: &Subject<'_>) -> Result<(f64, f64, f64), Absent> {
    if subject.basis == Basis::PriorOnly {
        return Err(Absent::because(
            "the readings in hand are part of the answer, so the prior alone has none",
        ));
    }
    match subject.period.map(|period| &period.evidence) {
        None | Some(Evidence::Nothing) => Ok((0.0, 0.0, 0.0)),
        Some(Evidence::Sums { n, mean, rest, .. }) => Ok((*n as f64, *mean, *rest)),
        Some(Evidence::Mean { .. }) => {
            Err(Absent::because("the period is given by its mean, not by counted readings"))
        }
        Some(Evidence::Singles(singles)) => {
            let mut moments = Moments::new();
            for single in singles {
                match single.seen {
                    Seen::At(value) | Seen::Rounded { at: value, .. } => moments.add(value),
                    Seen::Below(_) | Seen::Above(_) => {
                        return Err(Absent::because(
                            "some readings are marked, so the readings in hand have no plain mean",
                        ));
                    }
                }
            }
            Ok((singles.len() as f64, moments.mean(), moments.mean_rest()))
        }
    }
}

impl PeriodMean {
    fn law(&self, subject: &Subject<'_>) -> Result<Law, Absent> {
        let posterior = subject.posterior.clone()?;
        let own = terms::own_uncertainty(subject, None)?.unwrap_or(0.0);
        let (n, mean, rest) = in_hand(subject)?;
        let m = self.readings as f64;
        let share = m / (n + m);
        // From the posterior's origin; without readings in hand there is no mean to hold against it.
        let fixed = if n > 0.0 { n / (n + m) * ((mean - posterior.origin()) + rest) } else { 0.0 };
        posterior.affine(When::This, share, &|sigma| (fixed, share * share * (sigma * sigma + own * own) / m))
    }
}

impl Question for PeriodMean {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        let law = self.law(subject);
        let figures = terms::interval_figures(
            &law,
            self.probability,
            Interval::Central,
            subject.scale(),
            Meaning::Value,
        );
        match &self.beyond {
            None => figures,
            Some(asked) => {
                let chance = asked
                    .on_scale(subject.plan, subject.series)
                    .and_then(|beyond| Ok(beyond::chance(&law?, beyond)));
                figures.number("chance", chance, Meaning::Chance)
            }
        }
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let interval = Interval::Central.words(self.probability);
        let mean = terms::mean_words(subject);
        let period = terms::period_words(subject.plan, When::This);
        let chance = match &self.beyond {
            Some(asked) => format!(", and the probability that it lies {}", asked.words(subject)),
            None => String::new(),
        };
        let measured = terms::as_measured(subject);
        format!(
            "{interval} of {mean} of all readings of {period}, those in hand and {} to come{chance}{measured}",
            self.readings
        )
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let known = subject.known();
        let mean = format!("(n x̄ + {} Ȳ)/(n + {})", self.readings, self.readings);
        match &self.beyond {
            None => terms::interval_symbols(&mean, Interval::Central, self.probability, known),
            Some(asked) => format!("M = {mean}; P({} | {known})", asked.symbols("M", subject)),
        }
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let (Ok(posterior), Ok((n, mean, _)), Ok(own)) =
            (&subject.posterior, in_hand(subject), terms::own_uncertainty(subject, None))
        else {
            return Vec::new();
        };
        let mut steps = steps::level(subject, When::This);
        let m = self.readings as f64;
        if let Some(piece) = posterior.one_piece() {
            let own = own.unwrap_or(0.0);
            let centre = (n * mean + m * piece.level_mean) / (n + m);
            let put_in = [("n", n), ("x̄", mean), ("m", m), ("θ", piece.level_mean)];
            steps.push(Step::new(
                "mean of all readings of the period",
                "(n x̄ + m θ)/(n + m)",
                &put_in,
                centre,
            ));
            let added = (piece.reading_sd * piece.reading_sd + own * own) / m;
            let sd = m / (n + m) * (piece.level_var + added).sqrt();
            let put_in = [("m", m), ("n", n), ("v", piece.level_var), ("σ²/m", added)];
            steps.push(Step::new("its standard deviation", "s = m/(n + m) √(v + σ²/m)", &put_in, sd));
            steps.extend(steps::normal_ends(centre, sd, Interval::Central, self.probability));
            return steps::in_unit(steps, subject.scale());
        }
        let figures = self.answer(subject);
        steps.extend(steps::read_off(&figures, "Σ w Φ((t − centre)/s) = tail", self.probability));
        steps
    }

    fn gives(&self) -> Vec<&'static str> {
        let mut names = Interval::Central.gives();
        if self.beyond.is_some() {
            names.push("chance");
        }
        names
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let mut settings =
            vec![("readings", self.readings.to_string()), ("probability", format!("{}", self.probability))];
        settings.extend(self.beyond.as_ref().map(Asked::setting));
        settings
    }

    fn cautions(&self, plan: &Plan) -> Vec<Caution> {
        self.beyond.iter().filter_map(|asked| asked.caution(About::Level, plan)).collect()
    }
}
