//! What a posterior with marked readings answers of its levels and readings.

use super::factor::Factor;
use super::lattice::Lattices;
use super::law::Law;
use super::marginal::Weighted;
use super::marked::{self, Points, fine_enough};
use super::marked_given::given;
use super::{Posterior, When, mixture};
use crate::math::fm;
use crate::quantity::{Absent, Figure};

impl Posterior {
    /// Points of a level, in outer units from the posterior's origin.
    pub(super) fn points(&self, when: When) -> Result<&[Points], Absent> {
        let kept = match when {
            When::This => return Ok(&self.inner.nodes()?.points),
            When::Next => &self.inner.other_points[0],
            When::LongRun => &self.inner.other_points[1],
        };
        let made = kept.get_or_init(|| self.points_finer(when, 1.0));
        made.as_deref().map_err(Absent::clone)
    }

    /// With marked readings and a model of periods: (weight, next level, σ) of its points.
    pub fn next_level_points(&self) -> Option<Vec<(f64, f64, f64)>> {
        if !self.is_marked() || self.models(When::Next).is_err() {
            return None;
        }
        let points = self.points(When::Next).ok()?;
        let of = |at: &Points| {
            let sigma = self.inner.units.sd_out(at.sigma);
            at.points.iter().map(move |(x, weight)| (*weight, self.origin() + x, sigma)).collect::<Vec<_>>()
        };
        Some(points.iter().flat_map(of).collect())
    }

    /// Σ w B where earlier periods alone hold marked readings: B = s²/(v0 + s²) at every node, v0 the variance of
    /// the level before this period's readings.
    pub(super) fn prior_weight_marked(&self) -> Figure {
        let mut sum = 0.0;
        for Weighted { part, weighed, share } in self.inner.weighted()? {
            let lattices = Lattices::default();
            let top = weighed.nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
            let (mut whole, mut of_part) = (0.0, 0.0);
            for node in &weighed.nodes {
                let weight = fm::exp(node.ln_weight - top);
                whole += weight;
                let Some(at) = part.plane.readings.at(node.sigma * node.sigma) else {
                    of_part += weight;
                    continue;
                };
                let mut var = node.prior_var;
                if part.plane.by_long_run() {
                    let factor = Factor::of(&part.plane, node, false, None, &lattices);
                    let long_run = factor.expected(node.long_prior_mean, node.long_prior_var);
                    var = long_run.var + node.tau * node.tau;
                }
                of_part += weight * at.var / (var + at.var);
            }
            sum += share * of_part / whole;
        }
        Ok(sum)
    }

    fn points_finer(&self, when: When, finer: f64) -> Result<Vec<Points>, Absent> {
        let units = &self.inner.units;
        marked::points(&self.inner.weighted()?, finer, &|part, node| {
            given(units, part, node, when, (1.0, 0.0, 0.0))
        })
    }

    /// [`Posterior::affine`], less the origin.
    pub(super) fn affine_marked(
        &self,
        when: When,
        factor: f64,
        shift_and_variance: &dyn Fn(f64) -> (f64, f64),
        bound: f64,
        what: &str,
    ) -> Result<Law, Absent> {
        let units = &self.inner.units;
        let spreads = [0.3, 1.0, 7.0].map(shift_and_variance);
        let moves_with_sd = self.has_unknown_sd() && spreads.iter().any(|s| s.0 != spreads[0].0);
        if !moves_with_sd && spreads.iter().all(|s| s.1 > 0.0) {
            return self.over_points(when, factor, shift_and_variance, bound, what);
        }
        let moved = |sd: f64| shift_and_variance(sd).0;
        let moved: Option<&dyn Fn(f64) -> f64> = moves_with_sd.then_some(&moved);
        marked::law(&self.inner, bound, what, moved, &|part, node| {
            let (shift, added) = shift_and_variance(units.sd_out(node.sigma));
            given(units, part, node, when, (factor, shift, added))
        })
    }

    /// The same as a mixture over the level's points, where a scatter is added to it.
    fn over_points(
        &self,
        when: When,
        factor: f64,
        shift_and_variance: &dyn Fn(f64) -> (f64, f64),
        bound: f64,
        what: &str,
    ) -> Result<Law, Absent> {
        let units = &self.inner.units;
        let mut points = self.points(when)?;
        let finer =
            fine_enough(points, &|sigma| shift_and_variance(units.sd_out(sigma)).1 / (factor * factor));
        let fresh;
        if finer < 1.0 {
            fresh = self.points_finer(when, finer)?;
            points = &fresh;
        }
        let mut parts = Vec::new();
        for at in points {
            let (shift, added) = shift_and_variance(units.sd_out(at.sigma));
            parts.extend(at.points.iter().map(|(x, weight)| (*weight, factor * x + shift, added)));
        }
        mixture(parts, bound, what)
    }

    /// The true level with marked readings and a bias, plus a shift.
    pub(super) fn true_level_marked(&self, when: When, shift: &dyn Fn(f64) -> f64) -> Result<Law, Absent> {
        let (bound, what) = (self.bound(when), self.name(when));
        let units = &self.inner.units;
        let moves_with_sd = self.has_unknown_sd() && shift(1.0) != shift(2.0);
        let law = if self.inner.parts.iter().all(|part| part.plane.by_long_run()) {
            // A prior made of periods carries the bias: it is added.
            let bias2 = self.inner.bias_sd * self.inner.bias_sd;
            self.affine_marked(when, 1.0, &|sd| (shift(sd), bias2), bound, what)
        } else {
            let moved = moves_with_sd.then_some(shift);
            marked::law(&self.inner, bound, what, moved, &|part, node| {
                self.inner.true_given(part, node, when, shift(units.sd_out(node.sigma)))
            })
        };
        law.map(|law| law.moved(self.origin()))
    }
}
