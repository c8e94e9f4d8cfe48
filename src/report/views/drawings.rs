//! The figures of one series: what each shows, made from the findings.

use super::numbers::{Around, Numbers};
use crate::data::evidence::Evidence;
use crate::data::{Data, Fate, Mark as Marked, PeriodData, SeriesData};
use crate::findings::{Answer, SeriesFindings};
use crate::math::{fm, normal};
use crate::plan::{Bounds, Event, Plan};
use crate::posterior::{Law, Posterior, When};
use crate::quantity::{Absent, Period, Scale};
use crate::questions::figures::{Figures, Item};
use crate::questions::rule::Given;
use crate::report::escape;
use crate::report::figure_frame::{FigureError, Mark};
use crate::report::figure_level::{self, Curve, Interval, LevelFigure};
use crate::report::figure_lines::{self, Line, LinesFigure, Upright};
use crate::report::figure_periods::{self, Estimate, PeriodsFigure, Single};
use crate::report::figure_quantiles::{self, QuantilePoint, QuantilesFigure};
use crate::report::figure_rows::{self, Row, RowsFigure};
use crate::report::svg::About;
use crate::report::text;
use minijinja::Value;
use serde::Serialize;
use std::collections::BTreeMap;

/// Points along each density.
const POINTS: u32 = 160;
/// More single readings than this are left out of the figure of the periods.
const DOTS_AT_MOST: usize = 400;
/// More points than this are thinned out in the quantile plot.
const QUANTILES_AT_MOST: usize = 600;
/// How far a prior may widen the figure of the level, in widths of what readings and posterior cover.
const PRIOR_REACHES: f64 = 1.5;

/// A figure as a template shows it.
#[derive(Debug, Clone, Serialize)]
pub struct FigureView {
    /// The line of Markdown.
    pub shown: Value,
    pub name: String,
}

/// All drawings of a report, by name.
#[derive(Debug, Default)]
pub struct Drawings {
    pub figures: Vec<(String, String)>,
}

impl Drawings {
    /// Takes a drawing in; `None` where there is nothing to draw.
    fn add(
        &mut self,
        name: &str,
        alt: &str,
        caption: &str,
        drawn: Result<String, FigureError>,
    ) -> Option<FigureView> {
        let svg = drawn.ok()?;
        self.figures.push((name.to_string(), svg));
        let caption = escape::markdown(caption).replace('"', "\\\"");
        let shown = format!("![{}](figures/{name}.svg \"{caption}\")", escape::markdown(alt));
        Some(FigureView { shown: Value::from_safe_string(shown), name: name.to_string() })
    }
}

/// Names for the figures of each series: letters, digits and hyphens, each once.
pub fn slugs<'a>(names: impl Iterator<Item = &'a str>) -> Vec<String> {
    let mut taken = std::collections::BTreeSet::new();
    names
        .map(|name| {
            let mut slug = String::new();
            for letter in name.chars() {
                if letter.is_ascii_alphanumeric() {
                    slug.push(letter.to_ascii_lowercase());
                } else if !slug.is_empty() && !slug.ends_with('-') {
                    slug.push('-');
                }
            }
            let base = match slug.trim_end_matches('-') {
                "" => "series".to_string(),
                slug => slug.to_string(),
            };
            let mut slug = base.clone();
            let mut counter = 2;
            while !taken.insert(slug.clone()) {
                slug = format!("{base}-{counter}");
                counter += 1;
            }
            slug
        })
        .collect()
}

fn value_title(plan: &Plan) -> String {
    match plan.quantity.unit.as_str() {
        "1" => plan.quantity.name.clone(),
        unit => format!("{}, {unit}", plan.quantity.name),
    }
}

/// The limits as they hold for a series.
fn limits(plan: &Plan, series: &str) -> Vec<Mark> {
    let mut marks = Vec::new();
    for limit in &plan.limits {
        match plan.bounds(&limit.name, series) {
            Some(Bounds::Value(value)) => {
                marks.push(Mark { value, label: format!("{} {}", limit.name, text::record(value)) });
            }
            Some(Bounds::Range(lower, upper)) => {
                for value in [lower, upper] {
                    marks.push(Mark { value, label: format!("{} {}", limit.name, text::record(value)) });
                }
            }
            None => {}
        }
    }
    marks
}

/// A density is per unit of the quantity.
fn density_title(plan: &Plan) -> String {
    match plan.quantity.unit.as_str() {
        "1" => "probability density".to_string(),
        unit => format!("probability density, per {unit}"),
    }
}

fn to_unit(scale: Scale, value: f64) -> f64 {
    match scale {
        Scale::Linear => value,
        Scale::Log => fm::exp(value),
    }
}

/// The level: prior, readings alone, both.
pub fn level(
    drawings: &mut Drawings,
    series: &SeriesFindings,
    numbers: &Numbers<'_>,
    slug: &str,
) -> Option<FigureView> {
    let plan = numbers.plan;
    let law = |posterior: &Result<Posterior, Absent>| posterior.as_ref().ok()?.level(When::This).ok();
    let (prior, readings, both) = (law(&series.prior), law(&series.readings_only), law(&series.posterior));
    let both = both?;
    let core = reach(&both, 0.001)?;
    let core = match readings.as_ref().and_then(|law| reach(law, 0.001)) {
        Some(other) => (core.0.min(other.0), core.1.max(other.1)),
        None => core,
    };
    let room = PRIOR_REACHES * (core.1 - core.0);
    let window = match prior.as_ref().and_then(|law| reach(law, 0.01)) {
        Some(wide) => (core.0.min(wide.0.max(core.0 - room)), core.1.max(wide.1.min(core.1 + room))),
        None => core,
    };
    let curve = |law: &Law, label: &str| Curve {
        label: label.to_string(),
        points: points(law, window, numbers.scale),
    };
    let (lower, upper) = both.central(0.95).ok()?;
    let [lower, upper] = [lower, upper].map(|end| to_unit(numbers.scale, end));
    let spread = 0.25 * (upper - lower);
    let ends = format!(
        "{} to {}{}",
        numbers.value(lower, Some(spread)),
        numbers.value(upper, Some(spread)),
        numbers.unit
    );
    let period = &plan.review.period;
    let title = format!("Level of {} of {period}, {}", plan.quantity.name, series.name);
    let without = series.without_readings;
    let name = format!("{slug}-level");
    let figure = LevelFigure {
        ticks: None,
        about: About {
            name: name.clone(),
            title: title.clone(),
            description: format!("Probability densities; central 95 % interval {ends}."),
        },
        value_title: value_title(plan),
        height_title: density_title(plan),
        prior: if without { None } else { prior.as_ref().map(|law| curve(law, "prior")) },
        readings: readings.as_ref().map(|law| curve(law, "readings alone")),
        posterior: curve(&both, if without { "prior (no readings)" } else { "prior and readings" }),
        interval: Some(Interval {
            lower: Some(lower),
            upper: Some(upper),
            label: format!("95 % interval, {ends}"),
        }),
        limits: limits(plan, &series.name),
    };
    let caption = if without {
        format!(
            "{title}. There are no readings of {period}: the curve is the prior alone, with its central 95 % interval ({ends})."
        )
    } else {
        let prior = if prior.is_some() { "prior (dashed), " } else { "" };
        let limits = if plan.limits.is_empty() { "" } else { ", and the limits" };
        format!(
            "{title}: {prior}readings alone (dotted), both together (solid) with its central 95 % interval ({ends}){limits}."
        )
    };
    drawings.add(&name, &title, &caption, figure_level::level(&figure))
}

fn reach(law: &Law, tail: f64) -> Option<(f64, f64)> {
    let ends = (law.quantile(tail).ok()?, law.upper_quantile(tail).ok()?);
    (ends.0.is_finite() && ends.1.is_finite() && ends.0 < ends.1).then_some(ends)
}

/// The density over the part of the window where it is not negligible.
fn points(law: &Law, window: (f64, f64), scale: Scale) -> Vec<(f64, f64)> {
    let own = reach(law, 1e-5).unwrap_or(window);
    let (low, high) = (own.0.max(window.0), own.1.min(window.1));
    (0..=POINTS)
        .map(|step| {
            let at = low + (high - low) * f64::from(step) / f64::from(POINTS);
            let x = to_unit(scale, at);
            // A density of ln x becomes one of x.
            let height = match scale {
                Scale::Linear => law.density(at),
                Scale::Log => law.density(at) / x,
            };
            (x, height)
        })
        .filter(|(x, height)| x.is_finite() && height.is_finite())
        .collect()
}

/// A reading as foretold before and after the readings came, and the readings.
pub fn foretold(
    drawings: &mut Drawings,
    series: &SeriesFindings,
    period: &PeriodData,
    numbers: &Numbers<'_>,
    slug: &str,
) -> Option<FigureView> {
    let plan = numbers.plan;
    let law =
        |posterior: &Result<Posterior, Absent>| posterior.as_ref().ok()?.reading(When::This, 1, None).ok();
    let (prior, both) = (law(&series.prior), law(&series.posterior)?);
    let averaged = period.readings.iter().any(|row| row.replicate.is_some());
    let used = period.readings.iter().filter(|row| row.fate == Fate::Used && row.mark == Marked::None);
    let values: Vec<f64> = used.filter_map(|row| row.value).collect();
    if values.is_empty() || averaged || values.len() > DOTS_AT_MOST {
        return None;
    }
    let core = reach(&both, 0.0005)?;
    let room = PRIOR_REACHES * (core.1 - core.0);
    let window = match prior.as_ref().and_then(|law| reach(law, 0.005)) {
        Some(wide) => (core.0.min(wide.0.max(core.0 - room)), core.1.max(wide.1.min(core.1 + room))),
        None => core,
    };
    let curve = |law: &Law, label: &str| Curve {
        label: label.to_string(),
        points: points(law, window, numbers.scale),
    };
    let title = format!("Readings of {} of {}, {}", plan.quantity.name, plan.review.period, series.name);
    let name = format!("{slug}-readings");
    let figure = LevelFigure {
        about: About {
            name: name.clone(),
            title: title.clone(),
            description: "Probability densities of a single reading, and the readings.".to_string(),
        },
        value_title: value_title(plan),
        height_title: density_title(plan),
        prior: prior.as_ref().map(|law| curve(law, "before the readings")),
        readings: None,
        posterior: curve(&both, "after the readings"),
        interval: None,
        limits: limits(plan, &series.name),
        ticks: Some((values, format!("readings of {}", plan.review.period))),
    };
    let before = if prior.is_some() { "as expected before the readings (dashed) and " } else { "" };
    let against_prior = if prior.is_some() {
        "Readings far outside the dashed curve speak against the prior; a"
    } else {
        "A"
    };
    let caption = format!(
        "{title}: a single reading {before}as the fitted model makes it (solid); every reading is an upright on the axis. {against_prior} pattern unlike the solid curve speaks against the model."
    );
    drawings.add(&name, &title, &caption, figure_level::level(&figure))
}

/// The periods in time.
pub fn periods(
    drawings: &mut Drawings,
    series: &SeriesFindings,
    of_series: &SeriesData,
    data: &Data,
    numbers: &Numbers<'_>,
    slug: &str,
) -> Option<FigureView> {
    let plan = numbers.plan;
    let names: Vec<&Period> = data
        .periods
        .iter()
        .filter(|period| of_series.period(period).is_some() || **period == plan.review.period)
        .collect();
    let now = names.iter().position(|period| **period == plan.review.period)?;
    let names = &names[..=now];
    if names.len() < 2 {
        return None;
    }
    let sigma = series.posterior.as_ref().ok().and_then(|both| both.within_sd().ok()?.median().ok());
    let level = level_estimate(series, numbers.scale);
    let mut shown = Vec::new();
    let (mut readings, mut excluded) = (Vec::new(), Vec::new());
    for (place, name) in names.iter().enumerate() {
        let period = of_series.period(name);
        shown.push(figure_periods::Period {
            name: name.to_string(),
            mean: period.and_then(|period| mean_of(period, sigma, numbers.scale)),
            level: if place == now { level } else { None },
        });
        for row in period.map_or(&[][..], |period| &period.readings) {
            let Some(value) = row.value.filter(|_| row.mark == Marked::None) else { continue };
            match row.fate {
                Fate::Used => readings.push(Single { period: place, value }),
                Fate::Excluded(_) => excluded.push(Single { period: place, value }),
                Fate::Missing | Fate::Later => {}
            }
        }
    }
    if readings.len() > DOTS_AT_MOST {
        readings.clear();
    }
    let title = format!("{} by period, {}", super::answers::capital(&plan.quantity.name), series.name);
    let events: Vec<(&Event, f64)> = plan
        .events
        .iter()
        .filter(|event| event.series.as_ref().is_none_or(|of| *of == series.name))
        .filter_map(|event| Some((event, place_in_time(event, names, of_series)?)))
        .collect();
    let name = format!("{slug}-periods");
    let first = names.first().map_or_else(String::new, |first| first.to_string());
    let figure = PeriodsFigure {
        about: About {
            name: name.clone(),
            title: title.clone(),
            description: format!(
                "Period means from {first} to {}; the table of periods holds the numbers.",
                plan.review.period
            ),
        },
        value_title: value_title(plan),
        period_title: "period".to_string(),
        periods: shown,
        means_label: "mean of the readings, ± 2 standard errors".to_string(),
        level_label: format!("level of {}, 95 % interval", plan.review.period),
        long_run: None,
        limits: limits(plan, &series.name),
        events: events
            .iter()
            .map(|(event, value)| Mark {
                value: *value,
                label: format!("{} {}", event.date, event.kind.as_deref().unwrap_or("event")),
            })
            .collect(),
        readings,
        readings_label: "single readings".to_string(),
        excluded,
        excluded_label: "excluded readings".to_string(),
    };
    let caption = format!(
        "{title}: each period’s mean with two standard errors on either side, the level of {} with its central 95 % interval, limits, events and excluded readings (hollow).",
        plan.review.period
    );
    drawings.add(&name, &title, &caption, figure_periods::periods(&figure))
}

fn level_estimate(series: &SeriesFindings, scale: Scale) -> Option<Estimate> {
    let law = series.posterior.as_ref().ok()?.level(When::This).ok()?;
    let (lower, upper) = law.central(0.95).ok()?;
    let middle = match (scale, law.mean()) {
        (Scale::Linear, Ok(mean)) => mean,
        _ => law.median().ok()?,
    };
    let [value, lower, upper] = [middle, lower, upper].map(|value| to_unit(scale, value));
    Some(Estimate { value, lower: Some(lower), upper: Some(upper) })
}

/// A period's mean with two standard errors on either side.
fn mean_of(period: &PeriodData, sigma: Option<f64>, scale: Scale) -> Option<Estimate> {
    let (mean, error) = match &period.evidence {
        Evidence::Sums { n, mean, .. } if *n > 0 => (*mean, sigma.map(|sigma| sigma / (*n as f64).sqrt())),
        Evidence::Mean { mean, uncertainty } => (*mean, Some(*uncertainty)),
        _ => {
            let facts = &period.facts;
            let mean = facts.mean?;
            let value = Estimate { value: mean, lower: None, upper: None };
            let Some(sd) = facts.sd.filter(|_| scale == Scale::Linear && facts.n > 1) else {
                return Some(value);
            };
            let error = sd / (facts.n as f64).sqrt();
            return Some(Estimate {
                lower: Some(mean - 2.0 * error),
                upper: Some(mean + 2.0 * error),
                ..value
            });
        }
    };
    let ends = error.map(|error| (mean - 2.0 * error, mean + 2.0 * error));
    Some(Estimate {
        value: to_unit(scale, mean),
        lower: ends.map(|(lower, _)| to_unit(scale, lower)),
        upper: ends.map(|(_, upper)| to_unit(scale, upper)),
    })
}

/// Where an event lies among the periods: by the year where periods are years, else by the dates read.
fn place_in_time(event: &Event, names: &[&Period], data: &SeriesData) -> Option<f64> {
    let year = i64::from(event.date.year());
    if let Some(place) = names.iter().position(|name| name.number() == Some(year)) {
        let day = f64::from(event.date.day_of_year()) - 1.0;
        return Some(place as f64 - 0.5 + day / 366.0);
    }
    names.iter().enumerate().find_map(|(place, name)| {
        let facts = &data.period(name)?.facts;
        let (first, last) = (facts.first_date?, facts.last_date?);
        if event.date < first && place > 0 {
            Some(place as f64 - 0.5)
        } else if event.date >= first && event.date <= last {
            Some(place as f64)
        } else {
            None
        }
    })
}

/// The readings of the period against normal quantiles (Blom's ranks: (i − 3/8)/(n + 1/4)).
pub fn quantiles(
    drawings: &mut Drawings,
    series: &str,
    period: &PeriodData,
    numbers: &Numbers<'_>,
    slug: &str,
) -> Option<FigureView> {
    let plan = numbers.plan;
    let log = numbers.scale == Scale::Log;
    let mut values = used_values(period, log)?;
    if values.len() < 3 {
        return None;
    }
    values.sort_by(f64::total_cmp);
    let n = values.len();
    let mean = values.iter().sum::<f64>() / n as f64;
    let sd =
        (values.iter().map(|value| (value - mean) * (value - mean)).sum::<f64>() / (n as f64 - 1.0)).sqrt();
    let every = n.div_ceil(QUANTILES_AT_MOST);
    let points = values
        .iter()
        .enumerate()
        .filter(|(place, _)| place % every == 0 || *place + 1 == n)
        .filter_map(|(place, value)| {
            let rank = (place as f64 + 0.625) / (n as f64 + 0.25);
            let quantile = normal::quantile(rank).ok()?;
            Some(QuantilePoint { quantile, value: *value, hollow: false })
        })
        .collect();
    let title = format!("Normal quantile plot of the readings of {}, {series}", plan.review.period);
    let name = format!("{slug}-quantiles");
    let figure = QuantilesFigure {
        about: About {
            name: name.clone(),
            title: title.clone(),
            description: format!("{n} readings in order against the normal quantiles of their ranks."),
        },
        quantile_title: "normal quantile of the rank".to_string(),
        value_title: if log { format!("ln of {}", value_title(plan)) } else { value_title(plan) },
        points,
        points_label: "readings".to_string(),
        hollow_label: String::new(),
        line: Some((mean, sd)),
        line_label: "where normal readings with this mean and sd would lie on average".to_string(),
        band: Vec::new(),
        band_label: String::new(),
    };
    let thinned =
        if every > 1 { format!(" Every {every}th of {n} readings is drawn.") } else { String::new() };
    let caption = format!(
        "{title}. If readings scatter normally, the points lie near the line; the check “normality” says how far they do.{thinned}"
    );
    drawings.add(&name, &title, &caption, figure_quantiles::quantiles(&figure))
}

/// Used readings, replicates averaged; none where a mark leaves a value open.
fn used_values(period: &PeriodData, log: bool) -> Option<Vec<f64>> {
    let mut values = Vec::new();
    let mut batches: BTreeMap<&str, (f64, u32)> = BTreeMap::new();
    for row in period.readings.iter().filter(|row| row.fate == Fate::Used) {
        if row.mark != Marked::None {
            return None;
        }
        let Some(value) = row.value else { continue };
        let value = if log { fm::ln(value) } else { value };
        match &row.replicate {
            Some(batch) => {
                let sum = batches.entry(batch).or_default();
                *sum = (sum.0 + value, sum.1 + 1);
            }
            None => values.push(value),
        }
    }
    values.extend(batches.values().map(|(sum, count)| sum / f64::from(*count)));
    Some(values)
}

/// One answer under each alternative: the first with an estimate, else the first with a chance.
pub fn sensitivity(
    drawings: &mut Drawings,
    series: &SeriesFindings,
    numbers: &Numbers<'_>,
    slug: &str,
) -> Option<FigureView> {
    let plan = numbers.plan;
    let shown = |answer: &&Answer| answer.figures.value("estimate").is_some();
    let answer = series.answers.iter().find(shown)?;
    let rule = super::answers::rule_of(plan, &answer.id);
    let row = |name: &str, figures: &Figures, given: Option<&Given>, main: bool| {
        let around = Around::of(figures);
        Row {
            name: name.to_string(),
            value: around.middle,
            lower: around.lower,
            upper: around.upper,
            remark: given.map_or_else(String::new, |given| super::numbers::verdict(given, rule).words),
            main,
        }
    };
    let mut rows = vec![row("as reviewed", &answer.figures, answer.verdict.as_ref(), true)];
    for under in &series.sensitivity {
        let found = under.answers.iter().find(|(id, ..)| *id == answer.id);
        if let Some((_, figures, given)) = found {
            rows.push(row(&under.alternative, figures, given.as_ref(), false));
        }
    }
    if rows.len() < 2 {
        return None;
    }
    let title =
        format!("{} under other assumptions, {}", super::answers::capital(&answer.words), series.name);
    let name = format!("{slug}-sensitivity");
    let about = About {
        name: name.clone(),
        title: title.clone(),
        description: "Estimate and interval under each alternative; the tables hold the numbers.".to_string(),
    };
    let figure = RowsFigure {
        about,
        value_title: value_title(plan),
        rows,
        rows_label: String::new(),
        limits: near_limits(plan, series),
    };
    let caption = format!("{title}: estimate and interval as reviewed (bold) and under each alternative.");
    drawings.add(&name, &title, &caption, figure_rows::rows(&figure))
}

/// The chance of each verdict of a rule against the true level.
pub fn rule(
    drawings: &mut Drawings,
    series: &SeriesFindings,
    answer: &Answer,
    plan: &Plan,
    name: &str,
) -> Option<FigureView> {
    let Some(Item::Texts(says)) = answer.rule_figures.get("verdicts") else { return None };
    let Some(Item::Rows(rows)) = answer.rule_figures.get("operating_characteristic") else { return None };
    let mut lines: Vec<Line> =
        says.iter().map(|say| Line { label: say.clone(), points: Vec::with_capacity(rows.len()) }).collect();
    for row in rows {
        let (Some(level), Some(Item::Numbers(chances, _))) = (row.value("level"), row.get("chances")) else {
            continue;
        };
        for (line, chance) in lines.iter_mut().zip(chances) {
            line.points.push((level, *chance));
        }
    }
    let (low, high) = (rows.first()?.value("level")?, rows.last()?.value("level")?);
    let title = format!("The rule of “{}”, {}", answer.id, series.name);
    let within = |mark: &Mark| mark.value >= low && mark.value <= high;
    let figure = LinesFigure {
        about: About {
            name: name.to_string(),
            title: title.clone(),
            description: "Probability of each verdict against the true level.".to_string(),
        },
        x_title: format!("true level of {}", value_title(plan)),
        y_title: "probability of the verdict".to_string(),
        upright: Upright::Chance,
        lines,
        x_marks: limits(plan, &series.name).into_iter().filter(within).collect(),
        y_marks: Vec::new(),
    };
    let caption = format!(
        "{title}: how probable each verdict is, for each true level, with as many readings as were made and this prior."
    );
    drawings.add(name, &title, &caption, figure_lines::lines(&figure))
}

/// Limits that do not lie so far off that the rows would shrink to dots.
fn near_limits(plan: &Plan, series: &SeriesFindings) -> Vec<Mark> {
    let Some(reach) =
        series.posterior.as_ref().ok().and_then(|both| reach(&both.level(When::This).ok()?, 0.001))
    else {
        return Vec::new();
    };
    let (low, high) = (to_unit(plan.quantity.scale, reach.0), to_unit(plan.quantity.scale, reach.1));
    let room = 2.0 * (high - low);
    limits(plan, &series.name)
        .into_iter()
        .filter(|mark| mark.value > low - room && mark.value < high + room)
        .collect()
}

/// The levels of all series below each other.
pub fn levels(drawings: &mut Drawings, series: &[SeriesFindings], plan: &Plan) -> Option<FigureView> {
    const SERIES_AT_MOST: usize = 60;
    if series.len() < 2 || series.len() > SERIES_AT_MOST {
        return None;
    }
    let rows: Vec<Row> = series
        .iter()
        .map(|series| {
            let level = level_estimate(series, plan.quantity.scale);
            Row {
                name: series.name.clone(),
                value: level.map(|level| level.value),
                lower: level.and_then(|level| level.lower),
                upper: level.and_then(|level| level.upper),
                remark: if series.without_readings { "prior only".to_string() } else { String::new() },
                main: false,
            }
        })
        .collect();
    let title = format!("Level of {} of {}, all series", plan.quantity.name, plan.review.period);
    let own_limits =
        |limit: &crate::plan::Limit| plan.series.values().any(|own| own.limits.contains_key(&limit.name));
    let general: Vec<Mark> = plan
        .limits
        .iter()
        .filter(|limit| !own_limits(limit))
        .flat_map(|limit| match limit.bounds {
            Bounds::Value(value) => {
                vec![Mark { value, label: format!("{} {}", limit.name, text::record(value)) }]
            }
            Bounds::Range(lower, upper) => [lower, upper]
                .map(|value| Mark { value, label: format!("{} {}", limit.name, text::record(value)) })
                .to_vec(),
        })
        .collect();
    let figure = RowsFigure {
        about: About {
            name: "all-levels".to_string(),
            title: title.clone(),
            description: "Level and central 95 % interval of each series; the table holds the numbers."
                .to_string(),
        },
        value_title: value_title(plan),
        rows,
        rows_label: "level, central 95 % interval".to_string(),
        limits: general,
    };
    let caption =
        format!("{title}: prior and readings together, with central 95 % intervals and the limits.");
    drawings.add("all-levels", &title, &caption, figure_rows::rows(&figure))
}
