//! What a rule means for the readings' mean: the acceptance limits and the guard band that are
//! equivalent to its conditions (ILAC-G8:09/2019, JCGM 106:2012), and the verdict in each range of that mean.
//!
//! The number of readings and their scatter stay as observed; only their mean moves. With one normal
//! piece and one limit, P(θ > L) ≤ α holds iff x̄ ≤ (σ²/n) [(L − z_{1−α} √v)/v − m0/v0]; in general the
//! chance is followed along x̄ and every crossing of a threshold is solved for: with an unknown σ it can
//! cross more than once. With a flat prior the guard band is z √v, the share z/2 of U = 2√v: 0.82 U for
//! 5 %, 0.98 U for 2.5 %.

use super::figures::{Figures, Item, Meaning};
use super::moved::{self, Movable, Move};
use super::rule::{self, figure_of, first_holding, threshold};
use super::{Question, Subject, risks, terms, tipping};
use crate::data::PeriodData;
use crate::data::evidence::Evidence;
use crate::math::{fm, roots};
use crate::plan::{Condition, Rule, Threshold};
use crate::posterior::{self, Basis};
use crate::prior::Model;
use crate::quantity::{Absent, Beyond, Figure, Scale};
use std::cell::RefCell;

/// Beyond so many errors of the readings' mean, a place that cannot be computed is passed over.
const FAR_OFF: f64 = 12.0;

/// A rule on one series' answer, with the means to ask what it would say elsewhere.
pub struct World<'a> {
    pub question: &'a dyn Question,
    pub rule: &'a Rule,
    pub subject: &'a Subject<'a>,
    /// Where every condition is on a chance that moves simply.
    pub movable: Option<Movable>,
    /// The readings' plain mean, on the model's scale.
    pub mean: f64,
    /// The usual size of its error, √(σ²/n).
    pub mean_sd: f64,
}

/// Where a condition begins or ceases to hold.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Crossing {
    /// The readings' mean there, on the model's scale.
    pub at: f64,
    pub verdict: usize,
    pub condition: usize,
}

/// A range of the readings' mean with one verdict.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Range {
    /// −∞ for the first.
    pub from: f64,
    /// +∞ for the last.
    pub to: f64,
    pub verdict: usize,
}

impl<'a> World<'a> {
    pub fn new(question: &'a dyn Question, rule: &'a Rule, subject: &'a Subject<'a>) -> Result<Self, Absent> {
        let posterior = subject.posterior.clone()?;
        if posterior.basis != Basis::Both {
            return Err(Absent::because("the rule belongs to prior and readings together"));
        }
        let mean = moved::plain_mean(&posterior.readings)?;
        if rule.verdicts.iter().flat_map(|v| &v.conditions).any(|(c, _)| figure_of(*c) == "count") {
            return Err(Absent::because("a rule on a count does not depend on the readings' mean"));
        }
        let mut mean_var = 0.0;
        for piece in posterior.pieces()? {
            let Some((_, var)) = moved::mean_given(&posterior.readings, piece.reading_sd) else {
                return Err(Absent::because("the readings say more of the level than their mean does"));
            };
            mean_var += piece.weight * var;
        }
        if !(mean_var > 0.0 && mean_var.is_finite()) {
            return Err(Absent::because("the error of the readings' mean is not known"));
        }
        let only_chances =
            rule.verdicts.iter().flat_map(|v| &v.conditions).all(|(c, _)| figure_of(*c) == "chance");
        let movable = if only_chances { Movable::of(question, subject).ok() } else { None };
        Ok(World { question, rule, subject, movable, mean, mean_sd: mean_var.sqrt() })
    }

    /// The figures that the conditions compare, had the readings' mean been this.
    pub fn figures(&self, mean: f64) -> Result<Figures, Absent> {
        let by = mean - self.mean;
        if let Some(movable) = &self.movable
            && movable.reaches(Move::readings(by))
        {
            let chance = movable.chance(Move::readings(by));
            return Ok(Figures::default().number("chance", Ok(chance), Meaning::Chance));
        }
        let own = self.subject.posterior.clone()?;
        self.solved(&own.model, moved::moved(&own.readings, by))
    }

    /// The figures under another model or other readings.
    pub fn solved(&self, model: &Model, evidence: Evidence) -> Result<Figures, Absent> {
        let posterior = posterior::solve(model, &evidence, Basis::Both)?;
        let period = self.subject.period.map(|period| PeriodData {
            period: period.period.clone(),
            evidence,
            restored: None,
            facts: period.facts.clone(),
            readings: Vec::new(),
        });
        let subject = Subject { period: period.as_ref(), posterior: Ok(&posterior), ..self.subject.clone() };
        Ok(self.question.answer(&subject))
    }

    /// The verdict, had the readings' mean been this.
    pub fn verdict(&self, mean: f64) -> Result<usize, Absent> {
        first_holding(self.rule, &self.figures(mean)?, self.subject.plan, self.subject.series)
    }

    /// All conditions: index of the verdict, index within it, which, and its threshold.
    fn conditions(&self) -> Result<Vec<(usize, usize, Condition, f64)>, Absent> {
        let mut all = Vec::new();
        for (verdict, given) in self.rule.verdicts.iter().enumerate() {
            for (index, (condition, against)) in given.conditions.iter().enumerate() {
                let against = threshold(against, self.subject.plan, self.subject.series)?;
                all.push((verdict, index, *condition, against));
            }
        }
        Ok(all)
    }

    /// The means at which the scan looks: close together around the mean itself and around every
    /// limit, wider and wider apart beyond.
    fn places(&self) -> Vec<f64> {
        const NEAR: i32 = 6;
        const FAR: [f64; 15] =
            [8.0, 10.0, 12.0, 16.0, 20.0, 24.0, 28.0, 32.0, 36.0, 40.0, 48.0, 56.0, 64.0, 96.0, 128.0];
        let mut centres = vec![self.mean];
        if let Some(movable) = &self.movable {
            let shift = movable.parts().iter().map(|part| part.weight * part.linear.shift).sum::<f64>();
            centres.extend(movable.limits().into_iter().map(|limit| limit - shift));
        } else if let Some(linear) = self.question.linear(self.subject, self.mean_sd) {
            match linear.beyond {
                Beyond::Above(limit) | Beyond::Below(limit) => centres.push(limit),
                Beyond::Between(lower, upper) | Beyond::Outside(lower, upper) => {
                    centres.extend([lower, upper])
                }
            }
        }
        for (_, _, condition, against) in self.conditions().unwrap_or_default() {
            if figure_of(condition) != "chance" {
                match self.subject.scale() {
                    Scale::Linear => centres.push(against),
                    Scale::Log if against > 0.0 => centres.push(fm::ln(against)),
                    Scale::Log => {}
                }
            }
        }
        let mut places = Vec::new();
        for centre in centres {
            places.extend((-NEAR..=NEAR).map(|step| centre + self.mean_sd * f64::from(step)));
            places.extend(
                FAR.iter().flat_map(|far| [centre - self.mean_sd * far, centre + self.mean_sd * far]),
            );
        }
        places.sort_by(f64::total_cmp);
        places.dedup_by(|a, b| (*a - *b).abs() < 0.2 * self.mean_sd);
        places
    }

    /// Every place where a condition begins or ceases to hold, rising.
    pub fn crossings(&self) -> Result<Vec<Crossing>, Absent> {
        let conditions = self.conditions()?;
        let mut places = Vec::new();
        let mut figures = Vec::new();
        for place in self.places() {
            let compared = |figures: Figures| -> Result<Figures, Absent> {
                for (_, _, condition, _) in &conditions {
                    rule::figure(&figures, figure_of(*condition))?;
                }
                Ok(figures)
            };
            match self.figures(place).and_then(compared) {
                Ok(there) => {
                    places.push(place);
                    figures.push(there);
                }
                // So far from what was read that no posterior reaches its accuracy, nothing is looked for.
                Err(absent) if absent.failed && (place - self.mean).abs() > FAR_OFF * self.mean_sd => {}
                Err(absent) => return Err(absent),
            }
        }
        let mut crossings = Vec::new();
        for (verdict, index, condition, against) in conditions {
            let name = figure_of(condition);
            let mut before: Option<(f64, f64)> = None;
            for (place, figures) in places.iter().zip(&figures) {
                let excess = rule::figure(figures, name)? - against;
                if let Some((last_place, last)) = before
                    && (last < 0.0) != (excess < 0.0)
                {
                    let at = self.cross(name, against, last_place, *place)?;
                    crossings.push(Crossing { at, verdict, condition: index });
                }
                before = Some((*place, excess));
            }
        }
        crossings.sort_by(|a, b| a.at.total_cmp(&b.at));
        Ok(crossings)
    }

    fn cross(&self, name: &str, against: f64, from: f64, to: f64) -> Figure {
        let failed = RefCell::new(None);
        let excess = |mean: f64| match self.figures(mean).and_then(|figures| rule::figure(&figures, name)) {
            Ok(figure) => figure - against,
            Err(absent) => {
                failed.borrow_mut().get_or_insert(absent);
                f64::NAN
            }
        };
        let root = roots::solve(excess, from, to, roots::Tolerance::new(1e-15, 1e-13 * self.mean_sd));
        match (root, failed.into_inner()) {
            (_, Some(absent)) => Err(absent),
            (Ok(root), None) => Ok(root),
            (Err(error), None) => Err(Absent::failed(error.to_string())),
        }
    }

    /// The verdict in each range of the readings' mean.
    pub fn ranges(&self, crossings: &[Crossing]) -> Result<Vec<Range>, Absent> {
        let mut ends: Vec<f64> = crossings.iter().map(|crossing| crossing.at).collect();
        ends.dedup_by(|a, b| (*a - *b).abs() <= 1e-12 * self.mean_sd);
        let mut ranges: Vec<Range> = Vec::new();
        for index in 0..=ends.len() {
            let from = if index == 0 { f64::NEG_INFINITY } else { ends[index - 1] };
            let to = ends.get(index).copied().unwrap_or(f64::INFINITY);
            let inside = match (from.is_finite(), to.is_finite()) {
                (true, true) => 0.5 * (from + to),
                (true, false) => from + self.mean_sd,
                (false, true) => to - self.mean_sd,
                (false, false) => self.mean,
            };
            let verdict = self.verdict(inside)?;
            match ranges.last_mut() {
                Some(last) if last.verdict == verdict => last.to = to,
                _ => ranges.push(Range { from, to, verdict }),
            }
        }
        Ok(ranges)
    }
}

/// The condition under which the rule accepts: of the first verdict with a condition on the chance that
/// is no `fail` verdict, where some verdict is one; else of the first that asks for a small chance of
/// lying above, below or outside, or for a large one of lying between.
pub fn accepting(rule: &Rule, beyond: Beyond) -> Option<(usize, usize)> {
    let chances = || {
        rule.verdicts.iter().enumerate().flat_map(|(verdict, given)| {
            given
                .conditions
                .iter()
                .enumerate()
                .filter(|(_, (condition, against))| {
                    figure_of(*condition) == "chance" && matches!(against, Threshold::Number(_))
                })
                .map(move |(index, (condition, _))| (verdict, index, *condition))
        })
    };
    if rule.verdicts.iter().any(|given| given.fail) {
        return chances()
            .find(|(verdict, _, _)| !rule.verdicts[*verdict].fail)
            .map(|(verdict, index, _)| (verdict, index));
    }
    let wanted = match beyond {
        Beyond::Between(..) => Condition::ChanceAtLeast,
        _ => Condition::ChanceAtMost,
    };
    let found = chances().find(|(_, _, condition)| *condition == wanted).or_else(|| chances().next());
    found.map(|(verdict, index, _)| (verdict, index))
}

/// All that belongs to a rule beside its verdict: `acceptance_limit`, `acceptance_limits`, `accepted`,
/// `guard_band`, `guard_band_share_of_u`, `conditions`, `specific_risk`, the two global risks, the
/// `operating_characteristic` over the true level, and the tipping prior.
pub fn rule_figures(question: &dyn Question, rule: &Rule, subject: &Subject<'_>) -> Figures {
    let world = match World::new(question, rule, subject) {
        Ok(world) => world,
        Err(absent) => return Figures::default().number("acceptance_limit", Err(absent), Meaning::Value),
    };
    let found = world.crossings().and_then(|crossings| {
        let ranges = world.ranges(&crossings)?;
        Ok((crossings, ranges))
    });
    let (crossings, ranges) = match found {
        Ok(found) => found,
        Err(absent) => return Figures::default().number("acceptance_limit", Err(absent), Meaning::Value),
    };
    let mut figures = limits(&world, &crossings, &ranges);
    figures.0.extend(risks::figures(&world, &ranges).0);
    figures.0.extend(tipping::figures(&world).0);
    figures
}

/// Acceptance limits, guard band, and where each condition begins to hold.
fn limits(world: &World<'_>, crossings: &[Crossing], ranges: &[Range]) -> Figures {
    let scale = world.subject.scale();
    let printed = |value: f64| terms::printed(value, scale);
    let mut figures = Figures::default();
    let linear = world.question.linear(world.subject, world.reading_sd());
    let accepting = linear.and_then(|linear| accepting(world.rule, linear.beyond));
    if let (Some((verdict, condition)), Some(linear)) = (accepting, linear) {
        let at: Vec<f64> = crossings
            .iter()
            .filter(|crossing| crossing.verdict == verdict && crossing.condition == condition)
            .map(|crossing| crossing.at)
            .collect();
        let one = match at.as_slice() {
            [one] => Ok(printed(*one)),
            [] if ranges.iter().any(|range| range.verdict == verdict) => {
                Err(Absent::because("the verdict holds for every mean of the readings"))
            }
            [] => Err(Absent::because("the verdict holds for no mean of the readings")),
            _ => Err(Absent::because("there are several limits: see the acceptance limits")),
        };
        figures = figures
            .number("acceptance_limit", one, Meaning::Value)
            .with(
                "acceptance_limits",
                Item::Numbers(at.iter().map(|at| printed(*at)).collect(), Meaning::Value),
            )
            .with("accepted", Item::Text(accepted_words(world, ranges, verdict)));
        figures.0.extend(guard_band(world, linear.beyond, &at).0);
    }
    let mut rows = Vec::new();
    for (verdict, given) in world.rule.verdicts.iter().enumerate() {
        for (index, (condition, against)) in given.conditions.iter().enumerate() {
            let at: Vec<f64> = crossings
                .iter()
                .filter(|crossing| crossing.verdict == verdict && crossing.condition == index)
                .map(|crossing| printed(crossing.at))
                .collect();
            let against = threshold(against, world.subject.plan, world.subject.series);
            let meaning = match figure_of(*condition) {
                "chance" => Meaning::Chance,
                _ => Meaning::Value,
            };
            rows.push(
                Figures::default()
                    .with("verdict", Item::Text(given.say.clone()))
                    .with("condition", Item::Text(rule::key(*condition).to_string()))
                    .number("threshold", against, meaning)
                    .with("limits", Item::Numbers(at, Meaning::Value)),
            );
        }
    }
    figures.with("conditions", Item::Rows(rows))
}

/// The distance of the acceptance limit from the limit itself, and its share of U = 2√v.
fn guard_band(world: &World<'_>, beyond: Beyond, at: &[f64]) -> Figures {
    let band = match (beyond, at) {
        (Beyond::Above(limit), [at]) => limit - at,
        (Beyond::Below(limit), [at]) => at - limit,
        _ => return Figures::default(),
    };
    let (shown, meaning) = match world.subject.scale() {
        Scale::Linear => (band, Meaning::Spread),
        Scale::Log => (fm::exp(band), Meaning::Ratio),
    };
    let figures = Figures::default().number("guard_band", Ok(shown), meaning);
    match world.movable.as_ref().and_then(Movable::single) {
        Some(part) if part.linear.shift == 0.0 => {
            let sd = (part.var + part.linear.variance).sqrt();
            figures.number("guard_band_share_of_u", Ok(band / (2.0 * sd)), Meaning::Share)
        }
        _ => figures,
    }
}

/// "for a mean of the readings up to 48.7 mg/L".
fn accepted_words(world: &World<'_>, ranges: &[Range], verdict: usize) -> String {
    let scale = world.subject.scale();
    let text = |value: f64| digits(terms::printed(value, scale));
    let unit = world.subject.unit();
    let parts: Vec<String> = ranges
        .iter()
        .filter(|range| range.verdict == verdict)
        .map(|range| match (range.from.is_finite(), range.to.is_finite()) {
            (false, false) => "of any size".to_string(),
            (false, true) => format!("up to {}{unit}", text(range.to)),
            (true, false) => format!("from {}{unit}", text(range.from)),
            (true, true) => format!("from {} to {}{unit}", text(range.from), text(range.to)),
        })
        .collect();
    match parts.as_slice() {
        [] => "for no mean of the readings".to_string(),
        parts => format!("for a mean of the readings {}", parts.join(", or ")),
    }
}

/// Six significant digits: enough to compare a mean with.
fn digits(value: f64) -> String {
    if value == 0.0 || !value.is_finite() {
        return format!("{value}");
    }
    let size = fm::floor(fm::log10(value.abs())) as i32;
    let decimals = usize::try_from((5 - size).clamp(0, 15)).unwrap_or(0);
    format!("{value:.decimals$}")
}

impl World<'_> {
    /// One value for σ, where one stands for it.
    pub fn reading_sd(&self) -> f64 {
        let Ok(posterior) = &self.subject.posterior else { return 0.0 };
        let pieces = posterior.pieces().unwrap_or_default();
        pieces.iter().map(|piece| piece.weight * piece.reading_sd).sum()
    }
}
