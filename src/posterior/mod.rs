//! Stage 5: the model updated by the readings, as a mixture of normal pieces or, with marked
//! readings, as densities on nodes; one interface that answers see.

mod about_mean;
mod axis;
mod beside;
mod between;
mod build;
mod chances;
mod change;
mod closed;
mod expect;
mod factor;
mod grid;
pub mod joint;
pub mod law;
mod lattice;
mod legendre;
mod marginal;
mod marked;
mod marked_change;
mod marked_given;
mod marked_laws;
mod marks;
mod memo;
mod moments;
mod own_sd;
mod plane;
mod predictive;
mod ranking;
mod refined;
mod shapes;
mod smoothed;
mod solve;
mod table;
mod told;
mod units;
mod walk;
mod weighing;
#[cfg(test)]
mod laws_tests;
#[cfg(test)]
mod marked_tests;
#[cfg(test)]
mod published;

use crate::data::evidence::Evidence;
use crate::math::mixture::NormalMixture;
use crate::prior::Model;
use crate::quantity::{Absent, Figure};
use beside::Added;
pub use law::Law;
use moments::moment;
pub use solve::solve;
use std::sync::Arc;

/// Which knowledge goes in.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Basis {
    PriorOnly,
    ReadingsOnly,
    Both,
}

/// Which period a level or a next reading belongs to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum When {
    This,
    Next,
    LongRun,
}

/// Given (σ, τ): θ ~ N(mean, var), and what the model of periods adds.
#[derive(Debug, Clone, PartialEq)]
pub struct Piece {
    pub weight: f64,
    pub level_mean: f64,
    /// level_mean less the posterior's origin: all digits, where the level is narrow against its distance from 0.
    pub level_apart: f64,
    pub level_var: f64,
    /// σ; NaN where nothing is known of it.
    pub reading_sd: f64,
    pub periods: Option<PeriodsPart>,
}

/// The long-run mean N(mean, var); in a random walk the level itself.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PeriodsPart {
    pub long_run_mean: f64,
    /// long_run_mean less the posterior's origin.
    pub long_run_apart: f64,
    pub long_run_var: f64,
    pub between_sd: f64,
    /// σ of the history: the piece's own, unless within is from this period's readings.
    pub history_sd: f64,
}

/// What is known of one series, under one basis. All laws are on the model's scale.
#[derive(Debug, Clone)]
pub struct Posterior {
    pub model: Model,
    pub readings: Evidence,
    pub basis: Basis,
    /// Largest relative error reached by the quadratures, 0 for closed forms.
    pub quadrature_error: f64,
    inner: Arc<solve::Inner>,
}

impl Posterior {
    /// Given each node of (σ, τ), the level as measured; with marked readings also each node of the level,
    /// with variance 0.
    pub fn pieces(&self) -> Result<&[Piece], Absent> {
        Ok(&self.inner.nodes()?.pieces)
    }

    /// The level's normal where it is one, and σ is known.
    pub fn one_piece(&self) -> Option<&Piece> {
        let alone = self.inner.parts.len() == 1 && self.inner.parts.iter().all(|p| p.plane.is_one_piece());
        if alone { self.pieces().ok()?.first() } else { None }
    }

    /// A place near the level, from which pieces and laws measure.
    pub fn origin(&self) -> f64 {
        self.inner.units.shift
    }

    /// The true level (a stated bias taken out) of a period, or the long-run mean.
    pub fn level(&self, when: When) -> Result<Law, Absent> {
        self.level_shifted(when, &|_| 0.0)
    }

    /// The law of the true level + shift(σ): on the log scale σ²/2 gives the arithmetic mean's logarithm.
    pub fn level_shifted(&self, when: When, shift: &dyn Fn(f64) -> f64) -> Result<Law, Absent> {
        if self.inner.bias_sd == 0.0 {
            return self.affine(when, 1.0, &|sigma| (shift(sigma), 0.0));
        }
        self.models(when)?;
        if self.inner.is_marked() {
            return self.true_level_marked(when, shift);
        }
        let moves_with_sd = shift(1.0) != shift(2.0);
        if moves_with_sd && let Some(reason) = &self.inner.no_sd {
            return Err(reason.clone());
        }
        let bound = self.bound(when);
        let law = |pieces: &[Piece], levels: &[solve::TrueLevel]| {
            let parts = pieces.iter().zip(levels).map(|(piece, level)| {
                let (mean, var) = match when {
                    When::This => level.this,
                    When::LongRun => level.long_run,
                    When::Next => level.next,
                };
                (piece.weight, mean + if moves_with_sd { shift(piece.reading_sd) } else { shift(1.0) }, var)
            });
            mixture(parts.collect(), bound, self.name(when)).map(|law| law.moved(self.origin()))
        };
        let nodes = self.inner.nodes()?;
        let as_held = law(&nodes.pieces, &nodes.true_levels)?;
        if moves_with_sd && self.has_unknown_sd() {
            self.settled(as_held, 1.0, &|sigma| (shift(sigma), 0.0), &law)
        } else {
            Ok(as_held)
        }
    }

    /// The law of o + `factor`·(θ − o) + shift(σ) + N(0, variance(σ)), θ the level as measured in that period and
    /// o the posterior's origin: next readings, percentiles, shares and arithmetic means are all of this shape.
    pub fn affine(
        &self,
        when: When,
        factor: f64,
        shift_and_variance: &dyn Fn(f64) -> (f64, f64),
    ) -> Result<Law, Absent> {
        self.models(when)?;
        let plain =
            factor == 1.0 && [0.3, 1.0, 7.0].into_iter().all(|sigma| shift_and_variance(sigma) == (0.0, 0.0));
        if plain {
            let kept = &self.inner.levels[when as usize];
            return kept.get_or_init(|| self.affine_anew(when, factor, shift_and_variance)).clone();
        }
        self.affine_anew(when, factor, shift_and_variance)
    }

    fn affine_anew(
        &self,
        when: When,
        factor: f64,
        shift_and_variance: &dyn Fn(f64) -> (f64, f64),
    ) -> Result<Law, Absent> {
        if let (When::This, Some(own)) = (when, &self.inner.own_sd)
            && let Some((shift, added)) = Added::of(self.inner.usual_sd(own), shift_and_variance)
        {
            return self.inner.of_own_sd(own, factor, shift, added).map(|law| law.moved(self.origin()));
        }
        let uses_sd = {
            let size = self.pieces()?.iter().map(|p| p.reading_sd).find(|s| *s > 0.0).unwrap_or(1.0);
            shift_and_variance(size) != shift_and_variance(2.0 * size)
        };
        if uses_sd && let Some(reason) = &self.inner.no_sd {
            return Err(reason.clone());
        }
        if let Some(conjugate) = &self.inner.conjugate
            && let Some((shift, share)) = proportional(conjugate.sd, shift_and_variance)
        {
            let bound = if uses_sd { self.bound(when).min(self.inner.bounds.sd) } else { self.bound(when) };
            let what = if uses_sd { "a reading" } else { self.name(when) };
            return Ok(conjugate.affine(factor, shift, share, bound, what).moved(self.origin()));
        }
        let mut bound = self.bound(when);
        if uses_sd {
            bound = bound.min(self.inner.bounds.sd);
        }
        if self.inner.is_marked() {
            let what = if uses_sd { "a reading" } else { self.name(when) };
            return self
                .affine_marked(when, factor, shift_and_variance, bound, what)
                .map(|law| law.moved(self.origin()));
        }
        let law = |pieces: &[Piece]| {
            let parts = pieces.iter().map(|piece| {
                let (mean, var) = piece.level(when);
                let (shift, added) = shift_and_variance(piece.reading_sd);
                (piece.weight, factor * mean + shift, factor * factor * var + added)
            });
            let what = if uses_sd { "a reading" } else { self.name(when) };
            mixture(parts.collect(), bound, what).map(|law| law.moved(self.origin()))
        };
        let as_held = law(self.pieces()?)?;
        let moves_with_sd = shift_and_variance(1.0).0 != shift_and_variance(2.0).0;
        if moves_with_sd && self.has_unknown_sd() {
            self.settled(as_held, factor, shift_and_variance, &|pieces, _| law(pieces))
        } else {
            Ok(as_held)
        }
    }

    /// Refused where nothing is known of how readings scatter about their level.
    pub fn knows_within_sd(&self) -> Result<(), Absent> {
        self.inner.no_sd.clone().map_or(Ok(()), Err)
    }

    /// Whether σ is this period's alone, so that the level is held as a density.
    pub fn has_own_sd(&self) -> bool {
        self.inner.own_sd.is_some()
    }

    /// Whether levels are held as densities along lines (marked readings, here or in earlier periods).
    pub fn is_marked(&self) -> bool {
        self.inner.is_marked()
    }

    /// The mean of the next `mean_of` readings; `uncertainty` is each one's own, where σ is none.
    pub fn reading(&self, when: When, mean_of: u64, uncertainty: Option<f64>) -> Result<Law, Absent> {
        let own = uncertainty.unwrap_or(0.0);
        let m = mean_of as f64;
        self.affine(when, 1.0, &|sigma| (0.0, (sigma * sigma + own * own) / m))
    }

    /// The within sd σ.
    pub fn within_sd(&self) -> Result<Law, Absent> {
        self.inner.within_sd()
    }

    /// The between sd τ (random walk: of one step).
    pub fn between_sd(&self) -> Result<Law, Absent> {
        self.inner.between_sd()
    }

    /// Of a mixture prior: what each part weighs, the readings taken in where the basis has them; empty
    /// for any other prior.
    pub fn part_weights(&self) -> Vec<f64> {
        match self.inner.nodes() {
            Ok(nodes) if nodes.weighed.len() > 1 => nodes.weighed.iter().map(|(_, share)| *share).collect(),
            _ => Vec::new(),
        }
    }

    /// Share of the answer that comes from the prior, Σ w B.
    pub fn prior_weight(&self) -> Figure {
        match self.basis {
            Basis::PriorOnly => Ok(1.0),
            Basis::ReadingsOnly => Ok(0.0),
            Basis::Both if self.inner.parts.iter().any(|p| !p.plane.marks.is_empty()) => {
                Err(Absent::because("with marked readings the prior has no one weight"))
            }
            Basis::Both if self.is_marked() => self.prior_weight_marked(),
            Basis::Both => {
                if let Some(own) = &self.inner.own_sd {
                    return Ok(own.prior_weight());
                }
                let nodes = self.inner.nodes()?;
                Ok(nodes.pieces.iter().zip(&nodes.prior_shares).map(|(p, b)| p.weight * b).sum())
            }
        }
    }

    /// How many readings the prior is worth: n B/(1 − B).
    pub fn prior_readings(&self) -> Figure {
        let n = match self.readings.n() {
            None => return Err(Absent::because("this period is given by its mean, not by counted readings")),
            Some(0) => return Err(Absent::because("there is no reading to weigh the prior against")),
            Some(n) => n as f64,
        };
        let share = self.prior_weight()?;
        if share >= 1.0 {
            return Err(Absent::because("the readings have no weight"));
        }
        Ok(n * share / (1.0 - share))
    }

    /// Whether a level of that kind is part of the model.
    fn models(&self, when: When) -> Result<(), Absent> {
        match when {
            When::This => Ok(()),
            When::Next if self.inner.has_next => Ok(()),
            When::LongRun if self.inner.has_long_run => Ok(()),
            When::LongRun if self.inner.has_next => {
                Err(Absent::because("a random walk has no long-run mean"))
            }
            When::Next => Err(Absent::because(
                "the prior is about this period's level only, so nothing is known of the next period's: a history, or a stated long run with its between sd, would say it",
            )),
            When::LongRun => Err(Absent::because(
                "the prior is about this period's level only, so there is no long-run mean: a history, or a stated long run with its between sd, would give one",
            )),
        }
    }

    fn bound(&self, when: When) -> f64 {
        match when {
            When::This => self.inner.bounds.level,
            When::Next => self.inner.bounds.next,
            When::LongRun => self.inner.bounds.long_run,
        }
    }

    fn name(&self, when: When) -> &'static str {
        match when {
            When::This => "the level",
            When::Next => "the next level",
            When::LongRun => "the long-run mean",
        }
    }
}

impl Piece {
    /// The level of a period, or the long-run mean, from the posterior's origin: mean and variance.
    fn level(&self, when: When) -> (f64, f64) {
        match (when, self.periods) {
            (When::This, _) | (_, None) => (self.level_apart, self.level_var),
            (When::Next, Some(p)) => (p.long_run_apart, p.long_run_var + p.between_sd * p.between_sd),
            (When::LongRun, Some(p)) => (p.long_run_apart, p.long_run_var),
        }
    }
}

/// (shift, share) where shift does not depend on σ and the variance is share · σ²: then Student's t is exact.
fn proportional(size: f64, shift_and_variance: &dyn Fn(f64) -> (f64, f64)) -> Option<(f64, f64)> {
    let (shift, variance) = shift_and_variance(size);
    let share = variance / (size * size);
    let holds = [0.25, 0.7, 1.9, 16.0].into_iter().all(|k| {
        let sigma = k * size;
        let (s, v) = shift_and_variance(sigma);
        s == shift && (v - share * (sigma * sigma)).abs() <= 1e-14 * v
    });
    holds.then_some((shift, share))
}

/// A law from (weight, mean, variance), with the moments below `bound`.
fn mixture(parts: Vec<(f64, f64, f64)>, bound: f64, what: &str) -> Result<Law, Absent> {
    let shape = NormalMixture::new(parts.into_iter().map(|(w, m, v)| (w, m, v.sqrt())).collect())
        .map_err(grid::failed)?;
    let mean = moment(1.0, bound, what, || shape.mean());
    let sd = moment(2.0, bound, what, || shape.variance().sqrt());
    Ok(Law::new(Arc::new(shapes::Mixture(shape)), mean, sd))
}
