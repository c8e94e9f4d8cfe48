//! How often a rule is wrong: the specific risk of this verdict, the global risks of the rule over the
//! prior, and its operating characteristic over the true level.
//!
//! Specific risk: the chance, given prior and readings, that what was accepted does not conform.
//! Global risks (JCGM 106:2012, clause 9): before the readings, the chance that the level does not
//! conform and is accepted, ∫ over the levels that do not conform of φ((θ − m0)/√v0)/√v0 · P(accepted | θ) dθ,
//! and that it conforms and is not accepted. P(accepted | θ) is the chance of x̄ ~ N(θ, σ²/n) in the
//! ranges where the rule accepts. Operating characteristic: P(verdict | θ) for a row of levels θ.

use super::acceptance::{self, Range, World};
use super::figures::{Figures, Item, Meaning};
use super::moved;
use super::{Linear, beyond, terms};
use crate::data::evidence::Evidence;
use crate::math::{fm, normal, quadrature};
use crate::plan::Condition;
use crate::posterior::{self, Basis, When};
use crate::prior::LevelPrior;
use crate::quantity::{Absent, Beyond, Figure};

/// Points of the operating characteristic.
const LEVELS: i32 = 41;

/// `specific_risk`, `global_risk_accepted`, `global_risk_rejected`, `verdicts`, `operating_characteristic`.
pub fn figures(world: &World<'_>, ranges: &[Range]) -> Figures {
    let mut figures = Figures::default();
    let linear = world.question.linear(world.subject, world.reading_sd());
    let accepting = linear.and_then(|linear| acceptance::accepting(world.rule, linear.beyond));
    if let (Some(linear), Some((verdict, condition))) = (linear, accepting) {
        let small_is_good = world.rule.verdicts[verdict].conditions[condition].0 == Condition::ChanceAtMost;
        let bad = if small_is_good { linear.beyond } else { complement(linear.beyond) };
        figures = figures.number("specific_risk", specific(world, linear, bad), Meaning::Chance);
        let accepted: Vec<(f64, f64)> = ranges
            .iter()
            .filter(|range| range.verdict == verdict)
            .map(|range| (range.from, range.to))
            .collect();
        let simple = linear.when == When::This && linear.variance == 0.0;
        let global = if simple {
            of_prior(world, bad, &accepted)
        } else {
            Err(Absent::because("a global risk is given for rules on this period's level"))
        };
        let (accepted_badly, rejected_wrongly) = match global {
            Ok((first, second)) => (Ok(first), Ok(second)),
            Err(absent) => (Err(absent.clone()), Err(absent)),
        };
        figures = figures.number("global_risk_accepted", accepted_badly, Meaning::Chance).number(
            "global_risk_rejected",
            rejected_wrongly,
            Meaning::Chance,
        );
    }
    let says = world.rule.verdicts.iter().map(|verdict| verdict.say.clone()).collect();
    figures
        .with("verdicts", Item::Texts(says))
        .with("operating_characteristic", Item::Rows(characteristic(world, ranges)))
}

/// The chance, given prior and readings, of lying where the claim fails.
fn specific(world: &World<'_>, linear: Linear, bad: Beyond) -> Figure {
    let posterior = world.subject.posterior.clone()?;
    let of = |sigma: f64| world.question.linear(world.subject, sigma);
    let law = if linear.true_level && linear.variance == 0.0 {
        posterior.level_shifted(linear.when, &|sigma| of(sigma).map_or(f64::NAN, |own| own.shift))?
    } else {
        let given = |sigma| of(sigma).map_or((f64::NAN, f64::NAN), |own| (own.shift, own.variance));
        posterior.affine(linear.when, 1.0, &given)?
    };
    Ok(beyond::chance(&law, bad))
}

/// What lies beyond, seen from the other side (ends aside).
fn complement(beyond: Beyond) -> Beyond {
    match beyond {
        Beyond::Above(limit) => Beyond::Below(limit),
        Beyond::Below(limit) => Beyond::Above(limit),
        Beyond::Between(lower, upper) => Beyond::Outside(lower, upper),
        Beyond::Outside(lower, upper) => Beyond::Between(lower, upper),
    }
}

/// θ + shift beyond the limits is θ beyond the limits less shift.
fn shifted(beyond: Beyond, shift: f64) -> Beyond {
    match beyond {
        Beyond::Above(limit) => Beyond::Above(limit - shift),
        Beyond::Below(limit) => Beyond::Below(limit - shift),
        Beyond::Between(lower, upper) => Beyond::Between(lower - shift, upper - shift),
        Beyond::Outside(lower, upper) => Beyond::Outside(lower - shift, upper - shift),
    }
}

/// Both global risks over the prior's pieces; what is asked about may lie further from the level where σ is larger.
fn of_prior(world: &World<'_>, bad: Beyond, accepted: &[(f64, f64)]) -> Result<(f64, f64), Absent> {
    let own = world.subject.posterior.clone()?;
    if own.model.level == LevelPrior::Flat {
        return Err(Absent::because("a flat prior says nothing of how often levels do not conform"));
    }
    if own.model.bias_sd > 0.0 {
        return Err(Absent::because("with a bias common to all readings no global risk is given"));
    }
    let prior = posterior::solve(&own.model, &Evidence::Nothing, Basis::PriorOnly)?;
    let (mut consumer, mut producer) = (0.0, 0.0);
    for piece in prior.pieces()?.iter().filter(|piece| piece.weight > 1e-17) {
        let Some((_, mean_var)) = moved::mean_given(&own.readings, piece.reading_sd) else {
            return Err(Absent::because("the readings say more of the level than their mean does"));
        };
        // The within sd may come from this period's readings alone: then it is unknown before them.
        if !mean_var.is_finite() {
            return Err(Absent::because(
                "before the readings nothing is known of the within sd, and so not how they would fall",
            ));
        }
        let level = (piece.level_mean, piece.level_var.sqrt());
        let shift = world.question.linear(world.subject, piece.reading_sd).map_or(0.0, |own| own.shift);
        let bad = shifted(bad, shift);
        let (accepted_badly, rejected_wrongly) = global_risks(level, mean_var.sqrt(), bad, accepted)?;
        consumer += piece.weight * accepted_badly;
        producer += piece.weight * rejected_wrongly;
    }
    Ok((consumer, producer))
}

/// For a level N(mean, sd²) and a measured mean x̄ ~ N(level, error²) accepted in the given ranges: the chance
/// that the level does not conform and is accepted, and that it conforms and is not accepted.
///
/// Quadrature by an adaptive 21-point rule on pieces that no edge crosses, to 1e−11.
pub fn global_risks(
    (mean, sd): (f64, f64),
    error: f64,
    bad: Beyond,
    accepted: &[(f64, f64)],
) -> Result<(f64, f64), Absent> {
    let accept =
        |level: f64| -> f64 { accepted.iter().map(|(from, to)| inside(level, error, *from, *to)).sum() };
    let reject = |level: f64| -> f64 { outside(level, error, accepted) };
    const REACH: f64 = 38.0;
    let (lowest, highest) = (mean - REACH * sd, mean + REACH * sd);
    let bad_ranges = match bad {
        Beyond::Above(limit) => vec![(limit, highest)],
        Beyond::Below(limit) => vec![(lowest, limit)],
        Beyond::Between(lower, upper) => vec![(lower, upper)],
        Beyond::Outside(lower, upper) => vec![(lowest, lower), (upper, highest)],
    };
    let good_ranges = match bad {
        Beyond::Above(limit) => vec![(lowest, limit)],
        Beyond::Below(limit) => vec![(limit, highest)],
        Beyond::Between(lower, upper) => vec![(lowest, lower), (upper, highest)],
        Beyond::Outside(lower, upper) => vec![(lower, upper)],
    };
    let mut edges: Vec<f64> = (-19..=19).map(|step| mean + 2.0 * sd * f64::from(step)).collect();
    for end in accepted.iter().flat_map(|(from, to)| [*from, *to]).filter(|end| end.is_finite()) {
        edges.extend((-4..=4).map(|step| end + 2.0 * error * f64::from(step)));
    }
    edges.sort_by(f64::total_cmp);
    let density = |level: f64| normal::pdf((level - mean) / sd) / sd;
    let over = |ranges: &[(f64, f64)], chance: &dyn Fn(f64) -> f64| -> Figure {
        let mut sum = 0.0;
        for (from, to) in ranges {
            let (from, to) = (from.max(lowest), to.min(highest));
            if from >= to {
                continue;
            }
            let inner = edges.iter().copied().filter(|edge| *edge > from && *edge < to);
            let mut last = from;
            for edge in inner.chain([to]) {
                let part = quadrature::gk21(|level| density(level) * chance(level), last, edge, 1e-11);
                sum += part.map_err(|error| Absent::failed(error.to_string()))?.value;
                last = edge;
            }
        }
        Ok(sum)
    };
    Ok((over(&bad_ranges, &accept)?, over(&good_ranges, &reject)?))
}

/// P(from ≤ N(level, error²) ≤ to), ends possibly infinite.
fn inside(level: f64, error: f64, from: f64, to: f64) -> f64 {
    let z = |end: f64| (end - level) / error;
    match (from.is_finite(), to.is_finite()) {
        (false, false) => 1.0,
        (false, true) => normal::cdf(z(to)),
        (true, false) => normal::sf(z(from)),
        (true, true) => fm::exp(normal::ln_interval(z(from), z(to))),
    }
}

/// The chance of none of the ranges: the sum over the gaps between them.
fn outside(level: f64, error: f64, ranges: &[(f64, f64)]) -> f64 {
    let mut sum = 0.0;
    let mut last = f64::NEG_INFINITY;
    for (from, to) in ranges {
        if *from > last {
            sum += inside(level, error, last, *from);
        }
        last = *to;
    }
    if last < f64::INFINITY { sum + inside(level, error, last, f64::INFINITY) } else { sum }
}

/// The chance of each verdict for a row of true levels.
fn characteristic(world: &World<'_>, ranges: &[Range]) -> Vec<Figures> {
    let Ok(posterior) = &world.subject.posterior else { return Vec::new() };
    let Ok(pieces) = posterior.pieces() else { return Vec::new() };
    // σ as the posterior has it: pieces with the same σ count as one.
    let mut errors: Vec<(f64, f64)> = Vec::new();
    for piece in pieces {
        let Some((_, var)) = moved::mean_given(&posterior.readings, piece.reading_sd) else {
            return Vec::new();
        };
        let bias = posterior.model.bias_sd;
        let error = (var + bias * bias).sqrt();
        match errors.iter_mut().find(|(_, known)| *known == error) {
            Some((weight, _)) => *weight += piece.weight,
            None => errors.push((piece.weight, error)),
        }
    }
    let ends: Vec<f64> =
        ranges.iter().flat_map(|range| [range.from, range.to]).filter(|end| end.is_finite()).collect();
    let first = ends.iter().copied().fold(world.mean, f64::min) - 4.0 * world.mean_sd;
    let last = ends.iter().copied().fold(world.mean, f64::max) + 4.0 * world.mean_sd;
    let scale = world.subject.scale();
    (0..LEVELS)
        .map(|index| {
            let level = first + (last - first) * f64::from(index) / f64::from(LEVELS - 1);
            let mut chances = vec![0.0; world.rule.verdicts.len()];
            for range in ranges {
                for (weight, error) in &errors {
                    chances[range.verdict] += weight * inside(level, *error, range.from, range.to);
                }
            }
            Figures::default()
                .number("level", Ok(terms::printed(level, scale)), Meaning::Value)
                .with("chances", Item::Numbers(chances, Meaning::Chance))
        })
        .collect()
}
