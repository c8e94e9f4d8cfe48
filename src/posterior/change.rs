//! How far the level has moved: against an earlier period, or against the long-run mean (methods §4).
//! A common bias cancels, so levels are as measured.

use super::build::Part;
use super::plane::{Level, Node};
use super::told::{Told, is_marked, told};

use super::walk::Walk;
use super::{Basis, Posterior, When, mixture};
use crate::data::evidence::Evidence;
use crate::math::fm;
use crate::prior::{LevelPrior, Within};
use crate::quantity::{Absent, Period};

use super::law::Law;

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

impl Posterior {
    /// The level of this period less that of an earlier one, both as measured.
    ///
    /// Where the prior models periods and holds that one, both levels come from their joint posterior; else
    /// the earlier level stands on its own `readings` under a flat prior, independent given σ.
    pub fn change(&self, period: &Period, readings: &Evidence) -> Result<Law, Absent> {
        if is_marked(readings) {
            return Err(Absent::because("a change against a period with marked readings is not served"));
        }
        let units = self.inner.units;
        let known = match self.model.within {
            Within::Known(sd) => Some(units.sd_in(sd)),
            Within::Worth { sd, df } if df.is_infinite() => Some(units.sd_in(sd)),
            Within::None => Some(0.0),
            _ => None,
        };
        let (own, _) = told(readings, &units, known)?;
        let mut parts = Vec::new();
        for (part, weighed, share) in &self.inner.parts {
            let top = weighed.nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
            let sum: f64 = weighed.nodes.iter().map(|n| fm::exp(n.ln_weight - top)).sum();
            let held = self.held(part, period);
            if held.is_some() && part.plane.moved.is_some() {
                return Err(Absent::because(
                    "the earlier level is part of the history, which a moved prior no longer agrees with",
                ));
            }
            for node in &weighed.nodes {
                let weight = share * fm::exp(node.ln_weight - top) / sum;
                if weight < 1e-31 {
                    continue;
                }
                let (mean, var) = difference(part, node, held, &own)?;
                parts.push((weight, units.sd_out(mean), units.square_out(var)));
            }
        }
        let bound = self.inner.bounds.level.min(self.inner.bounds.sd);
        mixture(parts, bound, "the change")
    }

    /// The level of this period less the long-run mean, both as measured.
    pub fn change_long_run(&self) -> Result<Law, Absent> {
        self.models(When::LongRun)?;
        let units = self.inner.units;
        let mut parts = Vec::new();
        for (part, weighed, share) in &self.inner.parts {
            let top = weighed.nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
            let sum: f64 = weighed.nodes.iter().map(|n| fm::exp(n.ln_weight - top)).sum();
            for node in &weighed.nodes {
                let weight = share * fm::exp(node.ln_weight - top) / sum;
                if weight < 1e-31 {
                    continue;
                }
                // θ = B x̄ + (1 − B) μ + noise: the difference is B (x̄ − μ) + noise.
                let level = pulled(&part.plane.readings, node, node.sigma);
                let rest = 1.0 - level.pull;
                let mean = node.mean - node.long_mean;
                let var = level.var + rest * rest * node.long_var;
                parts.push((weight, units.sd_out(mean), units.square_out(var)));
            }
        }
        mixture(parts, self.bound(When::LongRun).min(self.bound(When::This)), "the change")
    }

    /// Where the earlier period stands in the part's model of periods, if it does.
    fn held(&self, part: &Part, period: &Period) -> Option<usize> {
        let models = self.basis != Basis::ReadingsOnly && !matches!(self.model.level, LevelPrior::Peers(_));
        let joint = matches!(part.plane.level, Level::AboutMean { .. } | Level::Walk(_));
        let shared_level = matches!(&part.plane.level, Level::AboutMean { share, .. } if *share != 1.0)
            || matches!(part.plane.between, super::plane::BetweenSd::Fixed(0.0));
        if !models || !joint || shared_level {
            return None;
        }
        let j = part.history.iter().position(|(name, told)| name == period && *told != Told::Nothing)?;
        Some(j)
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
