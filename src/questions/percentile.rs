//! # percentile
//! "Which value is exceeded by one reading in twenty?" The p-th percentile of a period's readings is
//! q = θ + z_p σ; the answer is an estimate with credible bounds. A one-sided bound of a percentile is
//! a tolerance limit: `percentile = 95, interval = "upper bound", probability = 0.95` is the value
//! below which at least 95 % of readings lie, with 95 % probability. With `above` or `below` the chance
//! that the percentile itself lies there is given too.
//!
//! Over the pieces of the posterior: P(q ≤ t) = Σ w Φ((t − z_p σ − m)/√v). With a flat prior of the
//! level and p(σ²) ∝ 1/σ² these are the noncentral-t tolerance limits. The estimate is the mean of q
//! (its median where no mean exists, and on the log scale).
//!
//! Assumes that the readings are normal (lognormal on the log scale) far out in their tail, which few
//! readings can show; readings are meant as measured. `percentile` is written in per cent: 5 or 95.
//!
//! Source: Hahn & Meeker, Statistical Intervals, 1991, ch. 4; Aitchison & Dunsmore, Statistical
//! Prediction Analysis, 1975, ch. 6.
//!
//! A worked number: prior N(40, 2²), σ = 1.5, six readings of mean 43.1: q95 has mean 42.834286 +
//! 1.644854 · 1.5 = 45.301566 and sd 0.585540; its upper 95 % bound is 45.301566 + 1.644854 · 0.585540 = 46.2647.

use super::beyond::{self, About, Asked, Side};
use super::figures::{Figures, Meaning};
use super::terms::{self, Interval};
use super::{Linear, Question, QuestionKind, Subject, steps};
use crate::diagnostics::{Caution, Fault, Faults};
use crate::math::normal;
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::{Law, When};
use crate::quantity::Absent;
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::working::Step;

const KEYS: &[Key] = &[
    Key::required("percentile", Takes::Positive, "in per cent: 5 or 95"),
    terms::PROBABILITY,
    terms::INTERVAL,
    beyond::ABOVE,
    beyond::BELOW,
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "percentile", page: include_str!("percentile.rs"), keys: KEYS, read };

#[derive(Debug)]
struct Percentile {
    /// In per cent.
    percentile: f64,
    /// z_p.
    z: f64,
    probability: f64,
    interval: Interval,
    beyond: Option<Asked>,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let percentile = read_percentile(&mut reader);
    let probability = terms::read_probability(&mut reader);
    let interval = Interval::read(&mut reader, Interval::Central);
    let beyond = beyond::read(&mut reader, plan, &[Side::Above, Side::Below], false);
    reader.finish_beside(&[language::QUESTION]);
    let percentile = percentile?;
    Some(Box::new(Percentile { percentile, z: z_of_percent(percentile)?, probability, interval, beyond }))
}

/// `percentile`, in per cent; a share such as 0.95 is refused. 0.1 is not: it is the fractile of a design value
/// (EN 1990:2002, D7.3), and the answer's words name it.
pub fn read_percentile(reader: &mut Reader<'_>) -> Option<f64> {
    let percentile = reader.positive("percentile")?;
    let shares = [0.05, 0.25];
    if percentile >= 100.0 {
        let fault =
            Fault::wrong("out-of-range", format!("`percentile` is {percentile}, and it is in per cent"))
                .expected("a number above 0 and below 100, such as 95")
                .repair("write percentile = 95");
        reader.fault_at("percentile", fault);
        return None;
    }
    if (0.5..1.0).contains(&percentile) || shares.contains(&percentile) {
        let meant = terms::number_text((percentile * 1e14).round() / 1e12, 0);
        let fault = Fault::wrong(
            "out-of-range",
            format!("`percentile` is in per cent, and {percentile} reads like a share"),
        )
        .expected("per cent, such as 5 or 95")
        .repair(format!("write percentile = {meant}"));
        reader.fault_at("percentile", fault);
        return None;
    }
    Some(percentile)
}

/// z_p for p in per cent, from the nearer tail.
pub fn z_of_percent(percentile: f64) -> Option<f64> {
    let z = if percentile <= 50.0 {
        normal::quantile(percentile / 100.0)
    } else {
        normal::upper_quantile((100.0 - percentile) / 100.0)
    };
    z.ok()
}

/// "5th percentile", "97.5th percentile".
pub fn percentile_words(percentile: f64) -> String {
    let text = format!("{percentile}");
    let ending = match percentile {
        _ if text.contains('.') => "th",
        _ if text.ends_with("11") || text.ends_with("12") || text.ends_with("13") => "th",
        _ if text.ends_with('1') => "st",
        _ if text.ends_with('2') => "nd",
        _ if text.ends_with('3') => "rd",
        _ => "th",
    };
    format!("{text}{ending} percentile")
}

impl Percentile {
    fn law(&self, subject: &Subject<'_>) -> Result<Law, Absent> {
        let posterior = subject.posterior.clone()?;
        terms::needs_within_sd(posterior)?;
        let z = self.z;
        posterior.affine(When::This, 1.0, &|sigma| (z * sigma, 0.0))
    }

    fn name(&self, subject: &Subject<'_>) -> String {
        let period = terms::period_words(subject.plan, When::This);
        format!("the {} of the readings of {period}", percentile_words(self.percentile))
    }
}

impl Question for Percentile {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        let law = self.law(subject);
        let figures =
            terms::interval_figures(&law, self.probability, self.interval, subject.scale(), Meaning::Value);
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
        let name = self.name(subject);
        let measured = terms::as_measured(subject);
        let interval = self.interval.words(self.probability);
        match &self.beyond {
            None => format!("{interval} of {name}{measured}"),
            Some(asked) => {
                let beyond = asked.words(subject);
                format!("{interval} of {name}, and the probability that it lies {beyond}{measured}")
            }
        }
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let symbol = format!("θ + z_{} σ", terms::number_text(self.percentile / 100.0, 0));
        let known = subject.known();
        let interval = terms::interval_symbols(&symbol, self.interval, self.probability, known);
        match &self.beyond {
            None => interval,
            Some(asked) => format!("{interval}; P({} | {known})", asked.symbols(&symbol, subject)),
        }
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let Ok(posterior) = &subject.posterior else { return Vec::new() };
        let mut steps = steps::level(subject, When::This);
        steps.push(Step::new(
            "normal quantile of the percentile",
            "z_p",
            &[("p in %", self.percentile)],
            self.z,
        ));
        if let Some(piece) = posterior.one_piece()
            && self.interval != Interval::Shortest
        {
            let (mean, sd) = (piece.level_mean + self.z * piece.reading_sd, piece.level_var.sqrt());
            let put_in = [("m", piece.level_mean), ("z_p", self.z), ("σ", piece.reading_sd)];
            steps.push(Step::new("mean of the percentile", "m + z_p σ", &put_in, mean));
            steps.extend(steps::normal_ends(mean, sd, self.interval, self.probability));
            return steps::in_unit(steps, subject.scale());
        }
        let figures = self.answer(subject);
        steps.extend(steps::read_off(&figures, "Σ w Φ((t − z_p σ − m)/√v) = tail", self.probability));
        steps
    }

    fn gives(&self) -> Vec<&'static str> {
        let mut names = self.interval.gives();
        if self.beyond.is_some() {
            names.push("chance");
        }
        names
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let mut settings = vec![
            ("percentile", format!("{}", self.percentile)),
            ("probability", format!("{}", self.probability)),
            ("interval", terms::quoted(self.interval.name())),
        ];
        settings.extend(self.beyond.as_ref().map(Asked::setting));
        settings
    }

    fn cautions(&self, plan: &Plan) -> Vec<Caution> {
        self.beyond.iter().filter_map(|asked| asked.caution(About::Percentile, plan)).collect()
    }

    fn linear(&self, subject: &Subject<'_>, reading_sd: f64) -> Option<Linear> {
        let beyond = self.beyond.as_ref()?.on_scale(subject.plan, subject.series).ok()?;
        Some(Linear {
            when: When::This,
            true_level: false,
            beyond,
            shift: self.z * reading_sd,
            variance: 0.0,
        })
    }
}
