//! Stage 5: the model updated by the readings, as a mixture of normal pieces or, with marked
//! readings, as densities on nodes; one interface that answers see.

pub mod law;

use crate::data::evidence::Evidence;
use crate::prior::Model;
use crate::quantity::{Absent, Figure};
pub use law::Law;

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
    pub level_var: f64,
    /// σ.
    pub reading_sd: f64,
    pub periods: Option<PeriodsPart>,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PeriodsPart {
    pub long_run_mean: f64,
    pub long_run_var: f64,
    pub between_sd: f64,
}

/// What is known of one series, under one basis. All laws are on the model's scale.
#[derive(Debug, Clone)]
pub struct Posterior {
    pub model: Model,
    pub readings: Evidence,
    pub basis: Basis,
    /// Empty where the level is held as a density (marked readings).
    pub pieces: Vec<Piece>,
    /// Largest relative error reached by the quadratures, 0 for closed forms.
    pub quadrature_error: f64,
}

/// Updates the model by the readings.
///
/// `Basis::PriorOnly` leaves the readings out, `Basis::ReadingsOnly` puts a flat prior in the place
/// of the level's prior (the within sd stays as the model has it).
pub fn solve(model: &Model, readings: &Evidence, basis: Basis) -> Result<Posterior, Absent> {
    let _ = (model, readings, basis);
    Err(Absent::because("not computed"))
}

impl Posterior {
    /// The true level (a stated bias taken out) of a period, or the long-run mean.
    pub fn level(&self, when: When) -> Result<Law, Absent> {
        self.affine(when, 1.0, &|_| (0.0, 0.0))
    }

    /// The law of `factor`·θ + shift(σ) + N(0, variance(σ)), θ the level as measured in that period:
    /// next readings, percentiles, shares and arithmetic means are all of this shape.
    pub fn affine(
        &self,
        when: When,
        factor: f64,
        shift_and_variance: &dyn Fn(f64) -> (f64, f64),
    ) -> Result<Law, Absent> {
        let _ = (when, factor, shift_and_variance);
        Err(Absent::because("not computed"))
    }

    /// The mean of the next `mean_of` readings; `uncertainty` is each one's own, where σ is none.
    pub fn reading(&self, when: When, mean_of: u64, uncertainty: Option<f64>) -> Result<Law, Absent> {
        let own = uncertainty.unwrap_or(0.0);
        let m = mean_of as f64;
        self.affine(when, 1.0, &|sigma| (0.0, (sigma * sigma + own * own) / m))
    }

    /// E g(θ, σ), θ as measured.
    pub fn expect(&self, when: When, g: &dyn Fn(f64, f64) -> f64) -> Figure {
        let _ = (when, g);
        Err(Absent::because("not computed"))
    }

    pub fn within_sd(&self) -> Result<Law, Absent> {
        Err(Absent::because("not computed"))
    }

    pub fn between_sd(&self) -> Result<Law, Absent> {
        Err(Absent::because("not computed"))
    }

    /// Share of the answer that comes from the prior, Σ w B.
    pub fn prior_weight(&self) -> Figure {
        Err(Absent::because("not computed"))
    }
}
