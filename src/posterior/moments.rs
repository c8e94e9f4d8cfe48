//! Which moments exist (methods §4): decided by how fast the joint density dies out as σ, τ or both go to
//! infinity, never from the numbers.
//!
//! With all periods given σ and τ, the restricted likelihood falls as one power for every period but the
//! one that places the long-run mean; the sums of squares and p(σ²) ∝ 1/σ² add theirs. A moment of order k
//! exists iff k is below the bound of every direction in which the quantity itself grows.

use super::between::Tau;
use super::marks::Mark;
use super::plane::{BetweenSd, Level, Plane, Sd};
use super::told::Told;
use crate::quantity::{Absent, Figure};

/// Moments of order k exist iff k is below these.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Bounds {
    pub level: f64,
    pub next: f64,
    pub long_run: f64,
    pub sd: f64,
    pub between: f64,
}

impl Bounds {
    const ALL: Bounds = Bounds {
        level: f64::INFINITY,
        next: f64::INFINITY,
        long_run: f64::INFINITY,
        sd: f64::INFINITY,
        between: f64::INFINITY,
    };

    pub fn both(self, other: Bounds) -> Bounds {
        Bounds {
            level: self.level.min(other.level),
            next: self.next.min(other.next),
            long_run: self.long_run.min(other.long_run),
            sd: self.sd.min(other.sd),
            between: self.between.min(other.between),
        }
    }
}

/// One period as the tails see it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Tail {
    /// Its mean's variance grows with σ.
    with_sd: bool,
    /// Powers of σ in its factor beside the sums of squares (readings with uncertainties of their own).
    own_powers: f64,
}

impl Tail {
    pub fn of(told: &Told) -> Option<Tail> {
        match told {
            Told::Nothing => None,
            Told::Counted { .. } => Some(Tail { with_sd: true, own_powers: 0.0 }),
            Told::Fixed { .. } => Some(Tail { with_sd: false, own_powers: 0.0 }),
            Told::Own(readings) => Some(Tail { with_sd: true, own_powers: readings.len() as f64 - 1.0 }),
        }
    }

    /// Readings with both bounds count as readings; open ones do not hold a tail.
    pub fn of_marked(told: &Told, marks: &[Mark]) -> Option<Tail> {
        let bounded = marks.iter().filter(|m| m.is_bounded()).count() as f64;
        match Tail::of(told) {
            Some(tail) => Some(Tail { own_powers: tail.own_powers + bounded, ..tail }),
            None if bounded > 0.0 => Some(Tail { with_sd: true, own_powers: bounded - 1.0 }),
            None => None,
        }
    }
}

/// The bounds of a plane; `history` are its earlier periods, in any order, `this` the one under review.
pub(super) fn bounds(plane: &Plane, history: &[Tail], this: Option<Tail>) -> Bounds {
    let mut bounds = Bounds::ALL;
    let apart = plane.history_sd.is_some();
    let of_history = plane.history_sd.unwrap_or(plane.sd);
    // Exponent a of the density of σ alone: σ^-a dσ.
    let exponent = |sd: &Sd| match sd {
        Sd::Unknown(axis) => Some(axis.sums.df + if axis.uniform { 0.0 } else { 1.0 }),
        _ => None,
    };
    let own = |tails: &mut dyn Iterator<Item = Tail>| tails.map(|t| t.own_powers).sum::<f64>();
    let own_history = own(&mut history.iter().copied());
    let own_this = own(&mut this.into_iter());
    let base_this = exponent(&plane.sd).map(|a| a + own_this + if apart { 0.0 } else { own_history });
    let base_history = exponent(&of_history).map(|a| a + own_history + if apart { 0.0 } else { own_this });
    let about_periods = matches!(plane.level, Level::AboutMean { .. } | Level::Walk(_));
    let shares_sd = about_periods && !apart;
    let pinned = history.iter().any(|t| !t.with_sd);
    let updated = this.is_some();
    let this_with_sd = this.is_some_and(|t| t.with_sd);

    // σ to infinity with τ fixed.
    if let Some(a) = base_this {
        let mut a = a;
        if shares_sd {
            let with_sd = history.iter().chain(&this).filter(|t| t.with_sd).count() as f64;
            let all_with = !pinned && (!updated || this_with_sd);
            a += with_sd - if all_with { 1.0 } else { 0.0 };
            bounds.sd = a - 1.0;
            if all_with {
                bounds.level = bounds.level.min(a - 1.0);
                bounds.next = bounds.next.min(a - 1.0);
                bounds.long_run = bounds.long_run.min(a - 1.0);
            }
        } else {
            let proper = !matches!(plane.level, Level::Flat);
            if proper && this_with_sd {
                a += 1.0;
            }
            bounds.sd = a - 1.0;
            if matches!(plane.level, Level::Flat | Level::PerReading { .. }) {
                bounds.level = bounds.level.min(a - 1.0);
                bounds.next = bounds.next.min(a - 1.0);
                bounds.long_run = bounds.long_run.min(a - 1.0);
            }
        }
    }
    if apart && let Some(a) = base_history {
        // The history's own σ: what its periods say of the long-run mean.
        let with_sd = history.iter().filter(|t| t.with_sd).count() as f64;
        if !pinned {
            let a = a + with_sd - 1.0 + if updated { 1.0 } else { 0.0 };
            bounds.next = bounds.next.min(a - 1.0);
            bounds.long_run = bounds.long_run.min(a - 1.0);
            if !updated {
                bounds.level = bounds.level.min(a - 1.0);
            }
        }
    }
    let BetweenSd::Unknown(axis) = plane.between else { return bounds };
    let prior_power = match axis.law {
        Tau::Uniform | Tau::Fixed(_) => 0.0,
        Tau::HalfCauchy(_) => 2.0,
        // Dies out faster than any power.
        Tau::HalfNormal(_) => return bounds,
    };
    let periods = history.len() as f64 + if updated { 1.0 } else { 0.0 };
    // τ alone to infinity.
    let a = periods - 1.0 + prior_power;
    bounds.next = bounds.next.min(a - 1.0);
    bounds.long_run = bounds.long_run.min(a - 1.0);
    bounds.between = bounds.between.min(a - 1.0);
    if !updated {
        bounds.level = bounds.level.min(a - 1.0);
    }
    // τ and σ together: dσ dτ grows by one power more than either.
    if let Some(base) = base_history {
        let joint = base + a - 1.0;
        bounds.next = bounds.next.min(joint - 1.0);
        bounds.long_run = bounds.long_run.min(joint - 1.0);
        bounds.between = bounds.between.min(joint - 1.0);
        if !apart {
            bounds.sd = bounds.sd.min(joint - 1.0);
            if !updated || this_with_sd {
                bounds.level = bounds.level.min(joint - 1.0);
            }
        }
    }
    if apart
        && this_with_sd
        && let Some(base) = base_this
    {
        let joint = base + a - 1.0;
        bounds.level = bounds.level.min(joint - 1.0);
        bounds.sd = bounds.sd.min(joint - 1.0);
    }
    bounds
}

/// A moment of order `order`, where it exists.
pub(super) fn moment(order: f64, bound: f64, what: &str, value: impl FnOnce() -> f64) -> Figure {
    if order < bound {
        return Ok(value());
    }
    let name = if order == 1.0 { "mean" } else { "sd" };
    Err(Absent::because(format!(
        "the {name} of {what} does not exist: with so few periods or readings its tails are too heavy (quantiles stand)"
    )))
}
