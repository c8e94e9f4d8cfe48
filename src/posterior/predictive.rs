//! What the prior foretells of this period's mean, σ weighted by what its own sum of squares says: the
//! ground of the prior conflict check (Box 1980; Evans & Moshonov 2006).

use super::build::build;
use super::law::Law;
use super::told::{is_marked, told};
use super::weighing::weigh;
use super::{Basis, Posterior, mixture};
use crate::math::fm;
use crate::prior::{LevelPrior, Within};
use crate::quantity::Absent;

impl Posterior {
    /// The law of x̄ under Σ w_k N(m_k, v_k + s_k²), w ∝ p(σ, τ) p(SS | σ): readings and prior of this
    /// posterior's model, whatever its basis.
    pub fn predictive_mean(&self) -> Result<Law, Absent> {
        if matches!(self.model.level, LevelPrior::Flat) {
            return Err(Absent::because("a flat prior foretells nothing"));
        }
        if is_marked(&self.readings) {
            return Err(Absent::because("marked readings have no arithmetic mean"));
        }
        let built = build(&self.model, &self.readings, Basis::Both)?;
        if built.parts.iter().any(|p| p.plane.is_marked()) {
            return Err(Absent::because(
                "what the prior foretells of a mean is not served with marked readings in earlier periods",
            ));
        }
        let units = built.units;
        let known = match self.model.within {
            Within::Known(sd) => Some(units.sd_in(sd)),
            Within::Worth { sd, df } if df.is_infinite() => Some(units.sd_in(sd)),
            Within::None => Some(0.0),
            _ => None,
        };
        let (readings, _) = told(&self.readings, &units, known)?;
        let mut parts = Vec::new();
        for part in &built.parts {
            let mut plane = part.plane.clone();
            plane.readings = super::told::Told::Nothing;
            let weighed = weigh(&plane)?;
            let top = weighed.nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
            let sum: f64 = weighed.nodes.iter().map(|n| fm::exp(n.ln_weight - top)).sum();
            for node in &weighed.nodes {
                let Some(at) = readings.at(node.sigma * node.sigma) else {
                    return Err(Absent::because("there is no reading to hold against the prior"));
                };
                let weight = part.weight * fm::exp(node.ln_weight - top) / sum;
                if weight > 1e-31 {
                    parts.push((weight, units.value_out(node.mean), units.square_out(node.var + at.var)));
                }
            }
        }
        mixture(parts, 0.0, "this period's mean")
    }

    /// Chances of a mean at or below, and above, the one observed.
    pub fn predictive_mean_tails(&self) -> Result<(f64, f64), Absent> {
        let law = self.predictive_mean()?;
        let built_mean = self.observed_mean()?;
        Ok((law.cdf(built_mean), law.sf(built_mean)))
    }

    /// x̄, weighted where readings bring uncertainties of their own and σ is known.
    pub fn observed_mean(&self) -> Result<f64, Absent> {
        let built = build(&self.model, &self.readings, Basis::Both)?;
        let place = built.parts.first().and_then(|part| part.plane.readings.at(1.0));
        match (place, built.parts.first().map(|p| p.plane.readings.has_own())) {
            (Some(at), Some(false)) => Ok(built.units.value_out(at.mean)),
            (Some(_), _) => Err(Absent::because(
                "with uncertainties of their own and an unknown within sd the readings have no one mean",
            )),
            (None, _) => Err(Absent::because("there is no reading to hold against the prior")),
        }
    }
}
