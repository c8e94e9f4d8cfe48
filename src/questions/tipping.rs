//! The tipping prior: how far the prior would have to lie elsewhere, or how narrow (or wide) it would
//! have to be, for the verdict to change. A reader who holds such a prior to be reasonable should not
//! rely on the verdict.
//!
//! The prior is moved, or stretched about its own median, until the verdict changes; the nearest such
//! prior is given. Its size is said in readings, n B/(1 − B), as in the influence of the prior.

use super::acceptance::World;
use super::figures::{Figures, Meaning};
use super::moved::{Movable, Move};
use super::rule::first_holding;
use super::terms;
use crate::data::evidence::Evidence;
use crate::math::fm;
use crate::posterior::{self, Basis, When};
use crate::prior::{Adjust, LevelPrior, Model};
use crate::quantity::{Absent, Figure};

/// `tipping_prior_mean`, `tipping_prior_readings`.
pub fn figures(world: &World<'_>) -> Figures {
    let (mean, readings) = match prior_of(world) {
        Ok((movable, median, sd)) => {
            (prior_mean(world, movable, median, sd), prior_readings(world, movable, median))
        }
        Err(absent) => (Err(absent.clone()), Err(absent)),
    };
    let scale = world.subject.scale();
    Figures::default()
        .number("tipping_prior_mean", mean.map(|mean| terms::printed(mean, scale)), Meaning::Value)
        .number("tipping_prior_readings", readings, Meaning::Count)
}

/// The prior's median and half its central 68 % range, with the pieces that can be moved.
fn prior_of<'a>(world: &'a World<'_>) -> Result<(&'a Movable, f64, f64), Absent> {
    let own = world.subject.posterior.clone()?;
    if own.model.level == LevelPrior::Flat {
        return Err(Absent::because("a flat prior has neither a mean nor a size"));
    }
    let movable = world
        .movable
        .as_ref()
        .ok_or_else(|| Absent::because("the rule is not on a chance of this period's level"))?;
    let prior = posterior::solve(&own.model, &Evidence::Nothing, Basis::PriorOnly)?.level(When::This)?;
    let (low, high) = prior.central(0.682_689_492_137_085_9)?;
    Ok((movable, prior.median()?, 0.5 * (high - low)))
}

/// The verdict after a move of the prior.
fn verdict(world: &World<'_>, movable: &Movable, by: Move) -> Result<usize, Absent> {
    let figures = if movable.reaches(by) {
        Figures::default().number("chance", Ok(movable.chance(by)), Meaning::Chance)
    } else {
        let own = world.subject.posterior.clone()?;
        let adjust = Adjust { centre: by.centre, stretch: by.stretch, shift: by.prior };
        world.solved(&Model { adjust: Some(adjust), ..own.model.clone() }, own.readings.clone())?
    };
    first_holding(world.rule, &figures, world.subject.plan, world.subject.series)
}

/// Walks outward along `by(t)`, t > 0 in growing steps, and halves to where the verdict first differs.
fn first_change(
    world: &World<'_>,
    movable: &Movable,
    steps: &[f64],
    by: &dyn Fn(f64) -> Move,
) -> Result<Option<f64>, Absent> {
    let now = verdict(world, movable, Move::NONE)?;
    let mut last = 0.0;
    for step in steps {
        if verdict(world, movable, by(*step))? != now {
            let (mut same, mut other) = (last, *step);
            for _ in 0..200 {
                let middle = 0.5 * (same + other);
                if middle <= same || middle >= other {
                    break;
                }
                if verdict(world, movable, by(middle))? == now {
                    same = middle;
                } else {
                    other = middle;
                }
            }
            return Ok(Some(other));
        }
        last = *step;
    }
    Ok(None)
}

fn prior_mean(world: &World<'_>, movable: &Movable, median: f64, sd: f64) -> Figure {
    const STEPS: [f64; 26] = [
        0.25, 0.5, 0.75, 1.0, 1.25, 1.5, 1.75, 2.0, 2.5, 3.0, 3.5, 4.0, 5.0, 6.0, 7.0, 8.0, 10.0, 12.0, 16.0,
        20.0, 24.0, 32.0, 40.0, 48.0, 56.0, 64.0,
    ];
    let up = first_change(world, movable, &STEPS, &|t| Move::prior(t * sd))?;
    let down = first_change(world, movable, &STEPS, &|t| Move::prior(-t * sd))?;
    let nearest = match (up, down) {
        (Some(up), Some(down)) if up <= down => up,
        (_, Some(down)) => -down,
        (Some(up), None) => up,
        (None, None) => {
            return Err(Absent::because("no prior mean within 64 prior sds changes the verdict"));
        }
    };
    Ok(median + nearest * sd)
}

fn prior_readings(world: &World<'_>, movable: &Movable, median: f64) -> Figure {
    let Some(n) = movable.n else {
        return Err(Absent::because("the period is given by its mean, not by counted readings"));
    };
    // ln of the factor on the prior's sd: from a thousandth to a thousandfold.
    let steps: Vec<f64> = (1..=28).map(|step| 0.25 * f64::from(step)).collect();
    let wider = first_change(world, movable, &steps, &|t| Move::stretch(fm::exp(t), median))?;
    let narrower = first_change(world, movable, &steps, &|t| Move::stretch(fm::exp(-t), median))?;
    let ln = match (wider, narrower) {
        (Some(wider), Some(narrower)) if wider <= narrower => wider,
        (_, Some(narrower)) => -narrower,
        (Some(wider), None) => wider,
        (None, None) => return Err(Absent::because("no size of the prior changes the verdict")),
    };
    let share = movable.prior_share(Move::stretch(fm::exp(ln), median));
    Ok(n as f64 * share / (1.0 - share))
}
