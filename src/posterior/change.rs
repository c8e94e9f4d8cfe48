//! How far the level has moved: against an earlier period, or against the long-run mean (methods §4).
//! A common bias cancels, so levels are as measured.

use super::build::Part;
use super::grid;
use super::law::Law;
use super::marginal::Weighted;
use super::plane::{BetweenSd, Level, Node};
use super::solve::NEGLIGIBLE;
use super::told::{Told, is_marked, told};
use super::walk::Walk;
use super::weighing::floor;
use super::{Basis, Posterior, When, mixture};
use crate::data::evidence::Evidence;
use crate::math::fm;
use crate::prior::{LevelPrior, Within};
use crate::quantity::{Absent, Period};

/// Mean and variance of a difference at one node.
type AtNode<'a> = dyn Fn(&Part, &Node) -> Result<(f64, f64), Absent> + 'a;

/// A level given the long-run mean μ, σ and τ: N(own + pull μ, var).
struct Pulled {
    own: f64,
    pull: f64,
    var: f64,
}

/// Readings pull a level to their mean with B = τ²/(τ² + s²).
fn pulled(period: &Told, node: &Node, sigma: f64) -> Pulled {
    let tau2 = node.tau * node.tau;
    match period.at(sigma * sigma) {
        None => Pulled { own: 0.0, pull: 1.0, var: tau2 },
        Some(at) => {
            let b = tau2 / (tau2 + at.var);
            Pulled { own: b * at.mean, pull: at.var / (tau2 + at.var), var: b * at.var }
        }
    }
}

/// The law of a difference of levels, made on a grid whose step is the given part of the plane's own and which begins
/// at the given part of a step: on finer and finer grids until two laws agree to 2e−11 from tail to tail and at 0,
/// about which such a law is steep. Chances below 1e−11 agree to 2e−22: 0 may lie so far out that a chance there is beyond
/// all promises. `is_exact` where there is nothing to integrate over.
pub(super) fn settled_about_zero(
    is_exact: bool,
    law: &dyn Fn(f64, f64) -> Result<Law, Absent>,
) -> Result<Law, Absent> {
    const SMALLEST: f64 = 1e-11;
    let first = law(1.0, 0.0)?;
    if is_exact {
        return Ok(first);
    }
    let mut places = vec![0.0];
    for p in [1e-6, 0.025, 0.2, 0.4] {
        places.extend([first.quantile(p)?, first.upper_quantile(p)?]);
    }
    let measure = |law: &Law| -> Vec<f64> { places.iter().map(|t| law.cdf(*t).min(law.sf(*t))).collect() };
    let mut before = measure(&first);
    let mut factor = 1.0;
    for _ in 0..10 {
        factor *= std::f64::consts::FRAC_1_SQRT_2;
        let finer = law(factor, 0.29)?;
        let now = measure(&finer);
        let worst = before.iter().zip(&now).map(|(a, b)| (a - b).abs() / a.max(*b).max(SMALLEST));
        if worst.fold(0.0, f64::max) <= 2e-11 {
            return Ok(finer);
        }
        before = now;
    }
    Err(Absent::failed("the law of a change did not reach its promised accuracy"))
}

impl Posterior {
    /// The level of this period less that of an earlier one, both as measured.
    ///
    /// Where the prior models periods and holds that one, both levels come from their joint posterior; else
    /// the earlier level stands on its own `readings` under a flat prior, independent given σ.
    pub fn change(&self, period: &Period, readings: &Evidence) -> Result<Law, Absent> {
        let units = self.inner.units;
        let known = match self.model.within {
            Within::Known(sd) => Some(units.sd_in(sd)),
            Within::Worth { sd, df } if df.is_infinite() => Some(units.sd_in(sd)),
            Within::None => Some(0.0),
            _ => None,
        };
        let stands_alone = self.inner.parts.iter().any(|part| self.held(part, period).is_none());
        let own = match (is_marked(readings), stands_alone) {
            (true, true) => {
                return Err(Absent::because(
                    "a change against a period with marked readings is served where that period is part of the history the prior is made of",
                ));
            }
            // The part holds its readings.
            (true, false) => Told::Nothing,
            (false, _) => told(readings, &units, known)?.0,
        };
        for part in &self.inner.parts {
            if self.held(part, period).is_some() && part.plane.moved.is_some() {
                return Err(Absent::because(
                    "the earlier level is part of the history, which a moved prior no longer agrees with",
                ));
            }
        }
        let bound = self.inner.bounds.level.min(self.inner.bounds.sd);
        if self.inner.is_marked() {
            return self.change_marked(period, &own, bound);
        }
        // Outside the history the earlier readings stand on this model's σ, which may be unknown altogether.
        if let (Some(reason), Told::Counted { .. } | Told::Own(_), true) =
            (&self.inner.no_sd, &own, stands_alone)
        {
            return Err(reason.clone());
        }
        self.over_nodes(bound, &|part, node| difference(part, node, self.held(part, period), &own))
    }

    /// The level of this period less the long-run mean, both as measured.
    pub fn change_long_run(&self) -> Result<Law, Absent> {
        self.models(When::LongRun)?;
        let bound = self.bound(When::LongRun).min(self.bound(When::This));
        if self.inner.is_marked() {
            return self.change_long_run_marked(bound);
        }
        self.over_nodes(bound, &|part, node| {
            // θ = B x̄ + (1 − B) μ + noise: the difference is B (x̄ − μ) + noise.
            let level = pulled(&part.plane.readings, node, node.sigma);
            let rest = 1.0 - level.pull;
            Ok((node.mean - node.long_mean, level.var + rest * rest * node.long_var))
        })
    }

    /// The law of a difference given by its mean and variance at every node (inner units, no shift).
    ///
    /// A difference shrinks to 0 with τ, so that its law is steep about 0, and finer there than the grid
    /// that suits the level: grids are made finer until two laws agree to 2e−11 from tail to tail.
    fn over_nodes(&self, bound: f64, at: &AtNode<'_>) -> Result<Law, Absent> {
        const WHAT: &str = "the change";
        let units = self.inner.units;
        let weighted = self.inner.weighted()?;
        let law = |factor: f64, offset: f64| -> Result<Law, Absent> {
            let mut parts = Vec::new();
            for Weighted { part, weighed, share } in &weighted {
                let fresh;
                let nodes = if factor == 1.0 || weighed.frame.dims == 0 {
                    &weighed.nodes
                } else {
                    let f = part.plane.nodes();
                    fresh = grid::sweep(
                        &f,
                        &weighed.frame,
                        weighed.factor * factor,
                        offset,
                        floor(weighed.frame.dims),
                    )?;
                    &fresh
                };
                let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
                let sum: f64 = nodes.iter().map(|n| fm::exp(n.ln_weight - top)).sum();
                for node in nodes {
                    let weight = share * fm::exp(node.ln_weight - top) / sum;
                    if weight >= NEGLIGIBLE {
                        let (mean, var) = at(part, node)?;
                        parts.push((weight, units.sd_out(mean), units.square_out(var)));
                    }
                }
            }
            mixture(parts, bound, WHAT)
        };
        settled_about_zero(weighted.iter().all(|w| w.weighed.frame.dims == 0), &law)
    }

    /// Where the earlier period stands in the part's model of periods, if it does.
    pub(super) fn held(&self, part: &Part, period: &Period) -> Option<usize> {
        let models = self.basis != Basis::ReadingsOnly && !matches!(self.model.level, LevelPrior::Peers(_));
        let joint = matches!(part.plane.level, Level::AboutMean { .. } | Level::Walk(_));
        let shared_level = matches!(&part.plane.level, Level::AboutMean { share, .. } if *share != 1.0)
            || matches!(part.plane.between, BetweenSd::Fixed(0.0));
        if !models || !joint || shared_level {
            return None;
        }
        let is_marked = |j: usize| part.plane.marked_periods.iter().any(|marked| marked.index == j);
        let mut named = part.history.iter().enumerate().filter(|(_, (name, _))| name == period);
        named.find(|(j, (_, told))| *told != Told::Nothing || is_marked(*j)).map(|(j, _)| j)
    }
}

/// Mean and variance of this level less the earlier one at one node, inner units.
fn difference(part: &Part, node: &Node, held: Option<usize>, own: &Told) -> Result<(f64, f64), Absent> {
    let nothing = || Absent::because("the earlier period has no readings to compare with");
    let tau2 = node.tau * node.tau;
    match (&part.plane.level, held) {
        (Level::AboutMean { .. }, Some(j)) => {
            let now = pulled(&part.plane.readings, node, node.sigma);
            let then = pulled(&part.history[j].1, node, node.history_sigma);
            let pull = now.pull - then.pull;
            let mean = now.own - then.own + pull * node.long_mean;
            Ok((mean, now.var + then.var + pull * pull * node.long_var))
        }
        (Level::Walk(walk), Some(j)) => {
            let all: Vec<Told> = part.history.iter().map(|(_, told)| told.clone()).collect();
            let from = Walk::position(&all, j).ok_or_else(nothing)?;
            let history2 = node.history_sigma * node.history_sigma;
            if part.plane.history_sd.is_some() {
                return Err(Absent::because(
                    "a change in a random walk needs one within sd for all periods: state it, or take it from the history",
                ));
            }
            walk.change(history2, tau2, from, &part.plane.readings).ok_or_else(nothing)
        }
        (Level::LongRun { .. }, _) => {
            // The earlier period's readings speak of the long-run mean too.
            let at = own.at(node.sigma * node.sigma).ok_or_else(nothing)?;
            let total = node.long_var + (tau2 + at.var);
            let mean = node.long_mean + node.long_var / total * (at.mean - node.long_mean);
            let var = node.long_var * ((tau2 + at.var) / total);
            let now = pulled(&part.plane.readings, node, node.sigma);
            let then = pulled(own, node, node.sigma);
            let pull = now.pull - then.pull;
            Ok((now.own - then.own + pull * mean, now.var + then.var + pull * pull * var))
        }
        _ => {
            let sigma = if node.history_sigma.is_nan() { node.sigma } else { node.history_sigma };
            let at = own.at(sigma * sigma).ok_or_else(nothing)?;
            if !at.var.is_finite() {
                return Err(Absent::because("nothing is known of the within sd of the earlier period"));
            }
            Ok((node.mean - at.mean, node.var + at.var))
        }
    }
}
