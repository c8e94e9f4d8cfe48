//! # reading interval
//! "Between which values will the next reading lie?" The answer is a predictive interval: the next
//! reading scatters about a level that is itself not known exactly.
//!
//! Given a piece of the posterior, the next reading is N(m, v + σ²), the mean of the next m readings
//! N(m, v + σ²/m) (`of = "mean"`; on the log scale their geometric mean). `of = "all"` asks for an
//! interval that holds all of the next m readings with the probability asked for: they share one
//! level, so it is the central (or one-sided) interval of one reading, whose own probability is raised
//! until E[(F(b) − F(a))^m] is as wanted. `of_period = "next"` asks about the next period's readings.
//! Where every reading brings its own uncertainty u, the next one's is stated as `uncertainty` (or
//! taken from the readings where all have the same) and σ² + u² stands for σ².
//!
//! Assumes that the next readings come from the same model. Readings are predicted as measured: a
//! bias common to all readings is in them.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5; Hahn & Meeker, Statistical Intervals,
//! 1991, ch. 4 (all of m).
//!
//! A worked number: prior N(40, 2²), σ = 1.5, six readings of mean 43.1: m = 42.834286, v = 0.342857;
//! the next reading has sd √(0.342857 + 2.25) = 1.610235, so its central 95 % interval is
//! 42.834286 ± 1.959964 · 1.610235 = 39.6783 to 45.9903.

use super::figures::{Figures, Meaning};
use super::terms::{self, Interval};
use super::{Question, QuestionKind, Subject, beyond, binomial, steps};
use crate::diagnostics::{Fault, Faults};
use crate::math::{fm, roots};
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::{Law, Posterior, When};
use crate::quantity::{Absent, Beyond, Figure};
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;

pub const READINGS: Key = Key::optional("readings", Takes::Count, "how many readings to come; default 1");

const KEYS: &[Key] = &[
    terms::PROBABILITY,
    terms::INTERVAL,
    READINGS,
    Key::optional(
        "of",
        Takes::OneOf(&["each", "mean", "all"]),
        "of each of them (default), of their mean, or holding all",
    ),
    terms::OF_PERIOD,
    terms::UNCERTAINTY,
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "reading interval", page: include_str!("reading_interval.rs"), keys: KEYS, read };

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Of {
    Each,
    Mean,
    All,
}

#[derive(Debug)]
struct ReadingInterval {
    probability: f64,
    interval: Interval,
    readings: u64,
    of: Of,
    when: When,
    uncertainty: Option<f64>,
}

fn read(asked: &QuestionPlan, _: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let probability = terms::read_probability(&mut reader);
    let interval = Interval::read(&mut reader, Interval::Central);
    let readings = read_readings(&mut reader);
    let of = match reader.choice("of") {
        Some("mean") => Of::Mean,
        Some("all") => Of::All,
        _ => Of::Each,
    };
    if readings > 1 && !reader.has("of") {
        let fault = Fault::wrong(
            "not-clear",
            format!("`readings` is {readings}, and `of` does not say what is asked of them"),
        )
        .expected("of = \"each\", \"mean\" or \"all\"")
        .repair("add of = \"all\" for an interval that holds all of them");
        reader.fault_at("readings", fault);
    }
    if of != Of::Each && !reader.has("readings") {
        let fault = Fault::wrong(
            "missing-key",
            "`of` speaks of several readings, and `readings` does not say how many",
        )
        .expected("readings = a whole number")
        .repair("add readings = 12, or leave `of` out");
        reader.fault_at("of", fault);
    }
    if of == Of::All && interval == Interval::Shortest {
        let fault = Fault::wrong(
            "no-such-quantity",
            "an interval that holds all of several readings is not offered as the shortest",
        )
        .expected("interval = \"central\", \"lower bound\" or \"upper bound\"")
        .repair("write interval = \"central\"");
        reader.fault_at("interval", fault);
    }
    let when = terms::read_when_of_readings(&mut reader);
    let uncertainty = reader.positive("uncertainty");
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(ReadingInterval { probability, interval, readings, of, when, uncertainty }))
}

/// `readings`, 1 where it is left out.
pub fn read_readings(reader: &mut Reader<'_>) -> u64 {
    let readings = reader.count("readings").unwrap_or(1);
    if readings > binomial::MOST_READINGS {
        let most = binomial::MOST_READINGS;
        let fault =
            Fault::wrong("out-of-range", format!("`readings` is {readings}; at most {most} are served"))
                .expected(format!("a whole number from 1 to {most}"))
                .repair("ask about a share of readings instead (ask = \"share beyond\")");
        reader.fault_at("readings", fault);
        return 1;
    }
    readings
}

impl ReadingInterval {
    fn law(&self, subject: &Subject<'_>) -> Result<Law, Absent> {
        let posterior = subject.posterior.clone()?;
        let own = terms::own_uncertainty(subject, self.uncertainty)?;
        let mean_of = if self.of == Of::Mean { self.readings } else { 1 };
        posterior.reading(self.when, mean_of, own)
    }

    /// The ends between which all of the next m readings lie with the probability asked for.
    fn all(&self, posterior: &Posterior, law: &Law, own: f64) -> Result<(Figure, Figure), Absent> {
        let m = self.readings as f64;
        let allowed = 1.0 - self.probability;
        // All is measured from the posterior's origin, where no digit of the ends is lost.
        let origin = posterior.origin();
        let law = law.clone().moved(-origin);
        let interval_at = |outside: f64| -> Result<(f64, f64), Absent> {
            let ends = match self.interval {
                Interval::LowerBound => (law.quantile(outside)?, f64::INFINITY),
                Interval::UpperBound => (f64::NEG_INFINITY, law.upper_quantile(outside)?),
                _ => (law.quantile(0.5 * outside)?, law.upper_quantile(0.5 * outside)?),
            };
            Ok(ends)
        };
        let failed = std::cell::RefCell::new(None);
        // The chance that at least one lies outside, less what is allowed, against ln of one reading's own.
        let excess = |ln_outside: f64| -> f64 {
            let missed = interval_at(fm::exp(ln_outside)).and_then(|(lower, upper)| {
                posterior.expect(self.when, &|theta, sigma| {
                    let sd = (sigma * sigma + own * own).sqrt();
                    let (out, within) = outside_split(theta, sd, lower, upper);
                    -fm::exp_m1(m * ln_within(out, within))
                })
            });
            match missed {
                Ok(missed) => missed - allowed,
                Err(absent) => {
                    failed.borrow_mut().get_or_insert(absent);
                    f64::NAN
                }
            }
        };
        // With m times the allowed chance shared out, at most that much is missed; with all of it for
        // one reading, at least that much.
        let (low, high) = (fm::ln(allowed / m), fm::ln(allowed));
        let root = if self.readings == 1 {
            Ok(high)
        } else {
            roots::solve(excess, low - 1e-9, high + 1e-9, roots::Tolerance::new(1e-14, 1e-14))
        };
        let found = match (root, failed.into_inner()) {
            (_, Some(absent)) => return Err(absent),
            (Err(error), None) => return Err(Absent::failed(error.to_string())),
            (Ok(found), None) => found,
        };
        let (lower, upper) = interval_at(fm::exp(found))?;
        let end = |value: f64| {
            if value.is_finite() { Ok(origin + value) } else { terms::no_other_end(self.interval) }
        };
        Ok((end(lower), end(upper)))
    }
}

/// For one reading N(θ, sd²): the chance of lying outside the interval (whose ends may be infinite),
/// and inside it.
fn outside_split(theta: f64, sd: f64, lower: f64, upper: f64) -> (f64, f64) {
    if lower == f64::NEG_INFINITY {
        beyond::normal_split(Beyond::Above(upper), theta, sd)
    } else if upper == f64::INFINITY {
        beyond::normal_split(Beyond::Below(lower), theta, sd)
    } else {
        beyond::normal_split(Beyond::Outside(lower, upper), theta, sd)
    }
}

/// ln of the chance inside, from whichever is known better.
fn ln_within(outside: f64, within: f64) -> f64 {
    if outside < 0.5 { fm::ln_1p(-outside) } else { fm::ln(within) }
}

impl Question for ReadingInterval {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        let law = self.law(subject);
        let scale = subject.scale();
        if self.of != Of::All {
            return terms::interval_figures(&law, self.probability, self.interval, scale, Meaning::Value);
        }
        let ends = law.clone().and_then(|law| {
            let own = terms::own_uncertainty(subject, self.uncertainty)?.unwrap_or(0.0);
            self.all(subject.posterior.clone()?, &law, own)
        });
        let (lower, upper) = match ends {
            Ok(ends) => ends,
            Err(absent) => (Err(absent.clone()), Err(absent)),
        };
        let in_unit = |end: Figure| end.map(|value| terms::printed(value, scale));
        Figures::default()
            .number("estimate", law.and_then(|law| terms::estimate(&law, scale)), Meaning::Value)
            .number("lower", in_unit(lower), Meaning::Value)
            .number("upper", in_unit(upper), Meaning::Value)
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let interval = self.interval.words(self.probability);
        let readings = readings_words(subject, self.when, self.readings);
        let measured = terms::as_measured(subject);
        match self.of {
            Of::Each if self.readings == 1 => format!("predictive {interval} of {readings}{measured}"),
            Of::Each => format!("predictive {interval} of each of {readings}{measured}"),
            Of::Mean => {
                format!("predictive {interval} of {} of {readings}{measured}", terms::mean_words(subject))
            }
            Of::All => format!("predictive {interval} holding all of {readings} at once{measured}"),
        }
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let known = subject.known();
        let p = self.probability;
        match (self.of, self.interval) {
            (Of::All, Interval::LowerBound) => format!("P(all x_new ≥ a | {known}) = {p}"),
            (Of::All, Interval::UpperBound) => format!("P(all x_new ≤ b | {known}) = {p}"),
            (Of::All, _) => format!("P(a ≤ all x_new ≤ b | {known}) = {p}"),
            (Of::Mean, _) => terms::interval_symbols("x̄_new", self.interval, p, known),
            (Of::Each, _) => terms::interval_symbols("x_new", self.interval, p, known),
        }
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let (Ok(posterior), Ok(own)) =
            (&subject.posterior, terms::own_uncertainty(subject, self.uncertainty))
        else {
            return Vec::new();
        };
        let mut steps = steps::level(subject, self.when);
        let own = own.unwrap_or(0.0);
        let m = if self.of == Of::Mean { self.readings as f64 } else { 1.0 };
        if let Some(piece) = posterior.one_piece()
            && let Some((mean, variance)) = steps::moments(piece, self.when)
        {
            let sigma = piece.reading_sd;
            let sd = (variance + (sigma * sigma + own * own) / m).sqrt();
            steps.push(Step::new(
                "standard deviation of what is predicted",
                "s = √(v + (σ² + u²)/m)",
                &[("v", variance), ("σ", sigma), ("u", own), ("m", m)],
                sd,
            ));
            if matches!(self.of, Of::Each | Of::Mean) && self.interval != Interval::Shortest {
                steps.extend(steps::normal_ends(mean, sd, self.interval, self.probability));
                return steps::in_unit(steps, subject.scale());
            }
        }
        let figures = self.answer(subject);
        let formula = if self.of == Of::All {
            "E[(F(b) − F(a))^m] = probability"
        } else {
            "Σ w Φ((t − m)/s) = tail"
        };
        steps.extend(steps::read_off(&figures, formula, self.probability));
        steps
    }

    fn gives(&self) -> Vec<&'static str> {
        self.interval.gives()
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let of = match self.of {
            Of::Each => "each",
            Of::Mean => "mean",
            Of::All => "all",
        };
        let mut settings = vec![
            ("probability", format!("{}", self.probability)),
            ("interval", terms::quoted(self.interval.name())),
            ("readings", self.readings.to_string()),
            ("of", terms::quoted(of)),
            ("of_period", terms::quoted(terms::when_name(self.when))),
        ];
        settings.extend(self.uncertainty.map(|u| ("uncertainty", format!("{u}"))));
        settings
    }
}

/// "the next reading of 2025", "the next 12 readings of 2026".
pub fn readings_words(subject: &Subject<'_>, when: When, readings: u64) -> String {
    let period = terms::period_words(subject.plan, when);
    match (when, readings) {
        (When::Next, 1) => format!("a reading of {period}"),
        (When::Next, m) => format!("{m} readings of {period}"),
        (_, 1) => format!("the next reading of {period}"),
        (_, m) => format!("the next {m} readings of {period}"),
    }
}
