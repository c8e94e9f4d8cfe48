//! The terms that several kinds of question share: which period, which interval, how sure; and how
//! such terms are said in words.

use super::Subject;
use super::figures::{Figures, Meaning};
use crate::data::evidence::Evidence;
use crate::diagnostics::Fault;
use crate::math::fm;
use crate::plan::Plan;
use crate::posterior::{Law, Posterior, When};
use crate::prior::Within;
use crate::quantity::{Absent, Figure, Period, Scale};
use crate::spec::keys::{Key, Takes};
use crate::spec::reader::Reader;

pub const INTERVALS: &[&str] = &["central", "shortest", "lower bound", "upper bound"];

pub const PROBABILITY: Key =
    Key::optional("probability", Takes::Probability, "of the interval; default 0.95");
pub const INTERVAL: Key = Key::optional("interval", Takes::OneOf(INTERVALS), "default central");
pub const OF_PERIOD_LEVEL: Key =
    Key::optional("of_period", Takes::OneOf(&["this", "next", "long run"]), "which period; default this");
pub const OF_PERIOD: Key =
    Key::optional("of_period", Takes::OneOf(&["this", "next", "long run"]), "this (default) or next");
pub const MEAN: Key = Key::optional(
    "mean",
    Takes::OneOf(&["geometric", "arithmetic"]),
    "log scale: which mean the level is; default geometric",
);
pub const UNCERTAINTY: Key = Key::optional(
    "uncertainty",
    Takes::Positive,
    "standard uncertainty of the next reading itself, where readings bring their own (log scale: relative)",
);

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Interval {
    Central,
    Shortest,
    LowerBound,
    UpperBound,
}

impl Interval {
    pub fn read(reader: &mut Reader<'_>, default: Interval) -> Interval {
        match reader.choice("interval") {
            Some("central") => Interval::Central,
            Some("shortest") => Interval::Shortest,
            Some("lower bound") => Interval::LowerBound,
            Some("upper bound") => Interval::UpperBound,
            _ => default,
        }
    }

    pub fn name(self) -> &'static str {
        match self {
            Interval::Central => "central",
            Interval::Shortest => "shortest",
            Interval::LowerBound => "lower bound",
            Interval::UpperBound => "upper bound",
        }
    }

    /// The names of the figures that such an interval has.
    pub fn gives(self) -> Vec<&'static str> {
        match self {
            Interval::Central | Interval::Shortest => vec!["estimate", "lower", "upper"],
            Interval::LowerBound => vec!["estimate", "lower"],
            Interval::UpperBound => vec!["estimate", "upper"],
        }
    }

    /// "central 95 % interval", "lower 95 % bound".
    pub fn words(self, probability: f64) -> String {
        let percent = percent(probability);
        match self {
            Interval::Central => format!("central {percent} interval"),
            Interval::Shortest => format!("shortest {percent} interval"),
            Interval::LowerBound => format!("lower {percent} bound"),
            Interval::UpperBound => format!("upper {percent} bound"),
        }
    }
}

pub fn read_probability(reader: &mut Reader<'_>) -> f64 {
    reader.probability("probability").map_or(0.95, |probability| probability.get())
}

/// `of_period` of a question about levels.
pub fn read_when(reader: &mut Reader<'_>) -> When {
    match reader.choice("of_period") {
        Some("next") => When::Next,
        Some("long run") => When::LongRun,
        _ => When::This,
    }
}

/// `of_period` of a question about readings, which belong to a period.
pub fn read_when_of_readings(reader: &mut Reader<'_>) -> When {
    let when = read_when(reader);
    if when == When::LongRun {
        let fault = Fault::wrong("no-such-quantity", "a reading belongs to a period; the long run has none")
            .expected("of_period = \"this\" or \"next\"")
            .repair("write of_period = \"next\" for a period that is not known yet");
        reader.fault_at("of_period", fault);
    }
    when
}

pub fn when_name(when: When) -> &'static str {
    match when {
        When::This => "this",
        When::Next => "next",
        When::LongRun => "long run",
    }
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Mean {
    /// The level itself: on the log scale its exponential, the geometric mean of the readings.
    Level,
    /// Log scale: exp(θ + σ²/2), the mean of the readings themselves.
    Arithmetic,
}

/// `mean`, which only the log scale has.
pub fn read_mean(reader: &mut Reader<'_>, scale: Scale, when: When) -> Mean {
    let choice = reader.choice("mean");
    let (code, message, repair) = match (choice, scale, when) {
        (Some("arithmetic"), Scale::Log, When::LongRun) => (
            "no-such-quantity",
            "an arithmetic mean is that of one period's readings; the long-run mean is geometric",
            "write mean = \"geometric\", or of_period = \"next\"",
        ),
        (Some("arithmetic"), Scale::Log, _) => return Mean::Arithmetic,
        (Some(_), Scale::Linear, _) => (
            "wrong-scale",
            "`mean` tells two means apart that only the log scale has",
            "leave `mean` out, or set scale = \"log\" in [quantity]",
        ),
        _ => return Mean::Level,
    };
    reader.fault_at("mean", Fault::wrong(code, message).repair(repair));
    Mean::Level
}

/// The law of the true level, or of the arithmetic mean's logarithm on the log scale.
pub fn level_law(posterior: &Posterior, when: When, mean: Mean) -> Result<Law, Absent> {
    match mean {
        Mean::Level => posterior.level(when),
        Mean::Arithmetic => posterior.level_shifted(when, &|sigma| 0.5 * sigma * sigma),
    }
}

/// "the level of 2025", "the level of 2026", "the long-run mean".
pub fn level_words(plan: &Plan, when: When, mean: Mean) -> String {
    let name = match mean {
        Mean::Level => "level",
        Mean::Arithmetic => "arithmetic mean level",
    };
    match when {
        When::LongRun => "the long-run mean".to_string(),
        _ => format!("the {name} of {}", period_words(plan, when)),
    }
}

pub fn level_symbol(when: When, mean: Mean) -> &'static str {
    match (when, mean) {
        (When::This, Mean::Level) => "θ",
        (When::Next, Mean::Level) => "θ_next",
        (When::LongRun, _) => "μ",
        (When::This, Mean::Arithmetic) => "exp(θ + σ²/2)",
        (When::Next, Mean::Arithmetic) => "exp(θ_next + σ²/2)",
    }
}

/// "P(a ≤ θ ≤ b | prior, readings) = 0.95".
pub fn interval_symbols(symbol: &str, interval: Interval, probability: f64, known: &str) -> String {
    match interval {
        Interval::Central | Interval::Shortest => format!("P(a ≤ {symbol} ≤ b | {known}) = {probability}"),
        Interval::LowerBound => format!("P({symbol} ≥ a | {known}) = {probability}"),
        Interval::UpperBound => format!("P({symbol} ≤ b | {known}) = {probability}"),
    }
}

/// "2025", "2026", "the period after 2025/26".
pub fn period_words(plan: &Plan, when: When) -> String {
    let period = &plan.review.period;
    match (when, period.number()) {
        (When::Next, Some(number)) => Period::new(&number.saturating_add(1).to_string()).to_string(),
        (When::Next, None) => format!("the period after {period}"),
        _ => period.to_string(),
    }
}

/// Words added where a bias common to all readings is stated: such figures leave it in.
pub fn as_measured(subject: &Subject<'_>) -> &'static str {
    let own = subject.plan.series.get(subject.series).is_some_and(|own| own.bias.is_some());
    if own || subject.plan.quantity.bias.is_some() { ", as measured" } else { "" }
}

/// "the mean", on the log scale "the geometric mean".
pub fn mean_words(subject: &Subject<'_>) -> &'static str {
    match subject.scale() {
        Scale::Linear => "the mean",
        Scale::Log => "the geometric mean",
    }
}

/// " mg/L", or nothing where the quantity has no unit.
pub fn unit(plan: &Plan) -> String {
    match plan.quantity.unit.as_str() {
        "1" => String::new(),
        unit => format!(" {unit}"),
    }
}

/// A number with as many decimals as it needs, and at least so many.
pub fn number_text(value: f64, least_decimals: usize) -> String {
    let shortest = format!("{value}");
    let own = shortest.split_once('.').map_or(0, |(_, decimals)| decimals.len());
    format!("{value:.*}", own.max(least_decimals))
}

/// "95 %", "99.5 %".
pub fn percent(probability: f64) -> String {
    format!("{} %", (probability * 1e12).round() / 1e10)
}

/// A text as a TOML value.
pub fn quoted(text: &str) -> String {
    let mut out = String::with_capacity(text.len() + 2);
    out.push('"');
    for c in text.chars() {
        match c {
            '"' => out.push_str("\\\""),
            '\\' => out.push_str("\\\\"),
            '\n' => out.push_str("\\n"),
            c if c.is_control() => out.push_str(&format!("\\u{:04X}", u32::from(c))),
            c => out.push(c),
        }
    }
    out.push('"');
    out
}

/// A value of the model's scale, in the unit.
pub fn printed(value: f64, scale: Scale) -> f64 {
    match scale {
        Scale::Linear => value,
        Scale::Log => fm::exp(value),
    }
}

/// The estimate: the mean, the median where no mean exists; on the log scale the median in the unit.
pub fn estimate(law: &Law, scale: Scale) -> Figure {
    match (scale, law.mean()) {
        (Scale::Log, _) => Ok(fm::exp(law.median()?)),
        (Scale::Linear, Ok(mean)) => Ok(mean),
        (Scale::Linear, Err(absent)) if absent.failed => Err(absent),
        (Scale::Linear, Err(_)) => law.median(),
    }
}

/// Both ends of the interval asked for, on the model's scale; a one-sided one has no other end.
pub fn ends(law: &Law, probability: f64, interval: Interval, scale: Scale) -> (Figure, Figure) {
    let both = |pair: Result<(f64, f64), Absent>| match pair {
        Ok((lower, upper)) => (Ok(lower), Ok(upper)),
        Err(absent) => (Err(absent.clone()), Err(absent)),
    };
    match interval {
        Interval::Central => both(law.central(probability)),
        Interval::Shortest => both(law.shortest(probability, scale == Scale::Log)),
        Interval::LowerBound => (law.upper_quantile(probability), no_other_end(interval)),
        Interval::UpperBound => (no_other_end(interval), law.quantile(probability)),
    }
}

/// Why the other end of a one-sided interval is missing.
pub fn no_other_end(interval: Interval) -> Figure {
    Err(Absent::because(format!("one-sided: the {} was asked for", interval.name())))
}

/// `estimate`, `lower`, `upper` of a law on the model's scale, in the unit.
pub fn interval_figures(
    law: &Result<Law, Absent>,
    probability: f64,
    interval: Interval,
    scale: Scale,
    meaning: Meaning,
) -> Figures {
    let (middle, (lower, upper)) = match law {
        Ok(law) => (estimate(law, scale), ends(law, probability, interval, scale)),
        Err(absent) => (Err(absent.clone()), (Err(absent.clone()), Err(absent.clone()))),
    };
    let in_unit = |end: Figure| end.map(|value| printed(value, scale));
    Figures::default().number("estimate", middle, meaning).number("lower", in_unit(lower), meaning).number(
        "upper",
        in_unit(upper),
        meaning,
    )
}

/// The own standard uncertainty of a reading to come: as stated in the question, else what all
/// readings have alike; `None` where readings have none beside the within sd.
pub fn own_uncertainty(subject: &Subject<'_>, stated: Option<f64>) -> Result<Option<f64>, Absent> {
    if stated.is_some() {
        return Ok(stated);
    }
    let posterior = subject.posterior.clone()?;
    let evidence = match subject.period {
        Some(period) => &period.evidence,
        None => &posterior.readings,
    };
    let unknown = || {
        Err(Absent::because(
            "readings bring uncertainties of their own, and that of the next one is not stated (key `uncertainty`)",
        ))
    };
    match evidence {
        Evidence::Singles(singles) => match singles.first() {
            Some(first) if singles.iter().all(|single| single.uncertainty == first.uncertainty) => {
                if first.uncertainty > 0.0 {
                    Ok(Some(first.uncertainty))
                } else if posterior.model.within == Within::None {
                    unknown()
                } else {
                    Ok(None)
                }
            }
            _ => unknown(),
        },
        _ if posterior.model.within == Within::None => unknown(),
        _ => Ok(None),
    }
}

/// Refuses shares and percentiles of readings where no within sd says how they scatter.
pub fn needs_within_sd(posterior: &Posterior) -> Result<(), Absent> {
    match posterior.model.within {
        Within::None => Err(Absent::because(
            "there is no within sd (every reading brings its own uncertainty), so readings have no common law",
        )),
        _ => posterior.knows_within_sd(),
    }
}
