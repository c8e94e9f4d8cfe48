//! The shapes a law can have: a mixture of normals, and a spread kept on panels of its logarithm.

use super::grid::failed;
use super::law::{Continuous, Law};
use super::legendre::Panels;
use crate::math::fm;
use crate::math::mixture::NormalMixture;
use crate::quantity::{Absent, Figure};

#[derive(Debug)]
pub(super) struct Mixture(pub NormalMixture);

impl Continuous for Mixture {
    fn cdf(&self, t: f64) -> f64 {
        self.0.cdf(t)
    }

    fn sf(&self, t: f64) -> f64 {
        self.0.sf(t)
    }

    fn density(&self, t: f64) -> f64 {
        self.0.pdf(t)
    }

    fn quantile(&self, p: f64) -> Figure {
        self.0.quantile(p).map_err(failed)
    }

    fn upper_quantile(&self, q: f64) -> Figure {
        self.0.upper_quantile(q).map_err(failed)
    }

    fn shortest(&self, probability: f64, exponential: bool) -> Result<(f64, f64), Absent> {
        let found = if exponential { self.0.shortest_exp(probability) } else { self.0.shortest(probability) };
        found.map_err(failed)
    }
}

/// A spread s = scale · e^x, the density of x on panels.
#[derive(Debug)]
pub(super) struct Spread {
    pub panels: Panels,
    pub scale: f64,
}

impl Spread {
    fn x(&self, t: f64) -> f64 {
        fm::ln(t / self.scale)
    }
}

impl Continuous for Spread {
    fn cdf(&self, t: f64) -> f64 {
        if t > 0.0 { self.panels.cdf(self.x(t)) } else { 0.0 }
    }

    fn sf(&self, t: f64) -> f64 {
        if t > 0.0 { self.panels.sf(self.x(t)) } else { 1.0 }
    }

    fn density(&self, t: f64) -> f64 {
        if t > 0.0 { self.panels.density(self.x(t)) / t } else { 0.0 }
    }

    fn quantile(&self, p: f64) -> Figure {
        Ok(self.scale * fm::exp(self.panels.quantile(p)?))
    }

    fn upper_quantile(&self, q: f64) -> Figure {
        Ok(self.scale * fm::exp(self.panels.upper_quantile(q)?))
    }

    fn lowest(&self) -> f64 {
        0.0
    }
}

/// A law kept as its density on panels.
#[derive(Debug)]
pub(super) struct OnPanels(pub Panels);

impl Continuous for OnPanels {
    fn cdf(&self, t: f64) -> f64 {
        self.0.cdf(t)
    }

    fn sf(&self, t: f64) -> f64 {
        self.0.sf(t)
    }

    fn density(&self, t: f64) -> f64 {
        self.0.density(t)
    }

    fn quantile(&self, p: f64) -> Figure {
        self.0.quantile(p)
    }

    fn upper_quantile(&self, q: f64) -> Figure {
        self.0.upper_quantile(q)
    }
}

/// shift + scale · x, the density of x on panels, scale above 0.
#[derive(Debug)]
pub(super) struct MovedPanels {
    pub panels: Panels,
    pub shift: f64,
    pub scale: f64,
}

impl MovedPanels {
    fn x(&self, t: f64) -> f64 {
        (t - self.shift) / self.scale
    }
}

impl Continuous for MovedPanels {
    fn cdf(&self, t: f64) -> f64 {
        self.panels.cdf(self.x(t))
    }

    fn sf(&self, t: f64) -> f64 {
        self.panels.sf(self.x(t))
    }

    fn density(&self, t: f64) -> f64 {
        self.panels.density(self.x(t)) / self.scale
    }

    fn quantile(&self, p: f64) -> Figure {
        Ok(self.shift + self.scale * self.panels.quantile(p)?)
    }

    fn upper_quantile(&self, q: f64) -> Figure {
        Ok(self.shift + self.scale * self.panels.upper_quantile(q)?)
    }
}

/// The density of a law on panels, from its 1e-16 quantile to its upper one.
pub(super) fn panels_of(law: &Law) -> Result<Panels, Absent> {
    Panels::new(&|t| law.density(t), &edges_of(law, 16)?)
}

/// The same for a law that is exact in its far tails, from its 1e-24 quantile.
pub(super) fn panels_with_tails(law: &Law) -> Result<Panels, Absent> {
    Panels::with_tails(&|t| law.density(t), &edges_of(law, 24)?)
}

/// Quantiles by decades of both tails, down to 1e-`decades`.
fn edges_of(law: &Law, decades: i32) -> Result<Vec<f64>, Absent> {
    let mut edges = Vec::new();
    for k in (1..=decades).rev() {
        edges.push(law.quantile(fm::pow(10.0, -f64::from(k)))?);
    }
    for p in [0.25, 0.5, 0.75] {
        edges.push(law.quantile(p)?);
    }
    for k in 1..=decades {
        edges.push(law.upper_quantile(fm::pow(10.0, -f64::from(k)))?);
    }
    edges.dedup();
    Ok(edges)
}
