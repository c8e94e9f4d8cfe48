//! Gauss–Legendre with 16 points on panels: the second rule that confirms the trapezoid's, and densities
//! kept as Legendre series, which give their own integral to any point.

use super::grid::failed;
use crate::math::{fm, roots};
use crate::quantity::{Absent, Figure};
use std::sync::OnceLock;

pub(super) const POINTS: usize = 16;

/// Nodes and weights on [−1, 1], from Newton's method on the Legendre polynomial.
pub(super) fn rule() -> &'static [(f64, f64); POINTS] {
    static RULE: OnceLock<[(f64, f64); POINTS]> = OnceLock::new();
    RULE.get_or_init(|| {
        let mut rule = [(0.0, 0.0); POINTS];
        for (i, slot) in rule.iter_mut().enumerate() {
            let mut x = -fm::cos(fm::PI * (i as f64 + 0.75) / (POINTS as f64 + 0.5));
            let mut slope = 1.0;
            for _ in 0..20 {
                let p = polynomials(x);
                let n = POINTS as f64;
                slope = n * (x * p[POINTS] - p[POINTS - 1]) / (x * x - 1.0);
                x -= p[POINTS] / slope;
            }
            *slot = (x, 2.0 / ((1.0 - x * x) * slope * slope));
        }
        rule
    })
}

/// P_0 … P_16 at x.
fn polynomials(x: f64) -> [f64; POINTS + 1] {
    let mut p = [1.0; POINTS + 1];
    p[1] = x;
    for k in 1..POINTS {
        let n = k as f64;
        p[k + 1] = ((2.0 * n + 1.0) * x * p[k] - n * p[k - 1]) / (n + 1.0);
    }
    p
}

/// Of a function's values at the rule's nodes: the size of the last two terms of its Legendre series.
pub(super) fn last_terms(values: &[f64; POINTS]) -> f64 {
    static TERMS: OnceLock<[[f64; POINTS]; 2]> = OnceLock::new();
    let terms = TERMS.get_or_init(|| {
        let mut terms = [[0.0; POINTS]; 2];
        for (i, (x, w)) in rule().iter().enumerate() {
            let p = polynomials(*x);
            for (term, k) in terms.iter_mut().zip([POINTS - 2, POINTS - 1]) {
                term[i] = 0.5 * (2.0 * k as f64 + 1.0) * w * p[k];
            }
        }
        terms
    });
    terms.iter().map(|term| term.iter().zip(values).map(|(t, v)| t * v).sum::<f64>().abs()).sum()
}

/// A positive density over panels, as Legendre series of the density itself.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Panels {
    panels: Vec<Panel>,
    total: f64,
}

#[derive(Debug, Clone, PartialEq)]
struct Panel {
    lo: f64,
    hi: f64,
    series: [f64; POINTS],
    mass: f64,
    /// Mass of all panels to the left, added from the left; and to the right, added from the right.
    below: f64,
    above: f64,
}

/// A smooth function between two ends, as Legendre series on panels.
#[derive(Debug)]
pub(super) struct Curve {
    panels: Vec<Panel>,
}

impl Curve {
    /// `None` where it is not resolved to `tolerance` (absolute) by a few hundred panels, or not finite.
    pub fn on(f: &dyn Fn(f64) -> f64, edges: &[f64], tolerance: f64) -> Option<Curve> {
        let mut waiting: Vec<(f64, f64)> = edges.windows(2).rev().map(|pair| (pair[0], pair[1])).collect();
        let mut panels: Vec<Panel> = Vec::new();
        let mut made = 0;
        while let Some((lo, hi)) = waiting.pop() {
            let panel = Panel::new(f, lo, hi).ok()?;
            made += 1;
            if panel.series[POINTS - 1].abs() + panel.series[POINTS - 2].abs() <= tolerance {
                panels.push(panel);
            } else if made < 400 {
                let middle = 0.5 * (lo + hi);
                waiting.push((middle, hi));
                waiting.push((lo, middle));
            } else {
                return None;
            }
        }
        Some(Curve { panels })
    }

    /// The value, `None` beyond the ends.
    pub fn at(&self, x: f64) -> Option<f64> {
        let i = self.panels.partition_point(|p| p.hi < x);
        self.panels.get(i).filter(|p| p.lo <= x).map(|p| p.density(x))
    }
}

/// Relative size of the last terms of a panel's series, against the largest of the whole density.
const RESOLVED: f64 = 1e-22;
const PANEL_CAP: usize = 2000;

impl Panels {
    /// `density` on `edges` (increasing), each panel halved until its series has died out.
    pub fn new(density: &dyn Fn(f64) -> f64, edges: &[f64]) -> Result<Panels, Absent> {
        // The tails keep their own relative accuracy as far as rounding allows.
        Panels::to(density, edges, 1e-12)
    }

    /// The same where the density is smooth to `relative` only.
    pub fn to(density: &dyn Fn(f64) -> f64, edges: &[f64], relative: f64) -> Result<Panels, Absent> {
        Panels::until(density, edges, &|last, size, highest| {
            last <= (relative * size).max(RESOLVED * highest)
        })
    }

    /// The same for a density that is exact in its far tails, which moments and small chances need: they are
    /// resolved to 1e−8 of themselves however low they are.
    pub fn with_tails(density: &dyn Fn(f64) -> f64, edges: &[f64]) -> Result<Panels, Absent> {
        Panels::until(density, edges, &|last, size, highest| {
            last <= (1e-12 * size).max((1e-17 * highest).min(1e-8 * size))
        })
    }

    /// `resolved` says of the last terms of a panel's series, its largest term and the largest of all whether
    /// the series has died out.
    fn until(
        density: &dyn Fn(f64) -> f64,
        edges: &[f64],
        resolved: &dyn Fn(f64, f64, f64) -> bool,
    ) -> Result<Panels, Absent> {
        let mut panels = Vec::new();
        let mut waiting: Vec<(f64, f64, u32)> =
            edges.windows(2).rev().map(|pair| (pair[0], pair[1], 0)).collect();
        // Panels are made from the left: without a first look the tail would be held to its own size.
        let look = edges.iter().map(|t| density(*t)).filter(|d| d.is_finite());
        let mut highest: f64 = 0.5 * look.fold(0.0, f64::max);
        let mut made = 0;
        while let Some((lo, hi, depth)) = waiting.pop() {
            let panel = Panel::new(density, lo, hi)?;
            highest = highest.max(panel.series[0].abs());
            made += 1;
            if made > PANEL_CAP {
                return Err(Absent::failed("a density is not resolved by its panels"));
            }
            let size = panel.series.iter().fold(0.0_f64, |m, c| m.max(c.abs()));
            let last = panel.series[POINTS - 1].abs() + panel.series[POINTS - 2].abs();
            if resolved(last, size, highest) || last <= 1e-40 * highest {
                panels.push(panel);
            } else if depth < 30 {
                let middle = 0.5 * (lo + hi);
                waiting.push((middle, hi, depth + 1));
                waiting.push((lo, middle, depth + 1));
            } else {
                return Err(Absent::failed("a density is not resolved by its panels"));
            }
        }
        let mut below = 0.0;
        for panel in &mut panels {
            panel.below = below;
            below += panel.mass;
        }
        let mut above = 0.0;
        for panel in panels.iter_mut().rev() {
            panel.above = above;
            above += panel.mass;
        }
        if !(below > 0.0 && below.is_finite()) {
            return Err(Absent::failed("a density has no mass on its panels"));
        }
        Ok(Panels { panels, total: below })
    }

    /// ∫ density.
    pub fn total(&self) -> f64 {
        self.total
    }

    fn panel(&self, t: f64) -> Option<&Panel> {
        let i = self.panels.partition_point(|p| p.hi < t);
        self.panels.get(i).filter(|p| p.lo <= t)
    }

    pub fn density(&self, t: f64) -> f64 {
        self.panel(t).map_or(0.0, |p| p.density(t).max(0.0) / self.total)
    }

    pub fn cdf(&self, t: f64) -> f64 {
        match self.panel(t) {
            Some(p) => ((p.below + p.to(t)) / self.total).clamp(0.0, 1.0),
            None if self.panels.first().is_some_and(|p| t < p.lo) => 0.0,
            None => 1.0,
        }
    }

    pub fn sf(&self, t: f64) -> f64 {
        match self.panel(t) {
            Some(p) => ((p.above + (p.mass - p.to(t))) / self.total).clamp(0.0, 1.0),
            None if self.panels.first().is_some_and(|p| t < p.lo) => 1.0,
            None => 0.0,
        }
    }

    /// The panels' ends and their shares of the whole.
    pub fn shares(&self) -> impl Iterator<Item = (f64, f64, f64)> {
        self.panels.iter().map(|panel| (panel.lo, panel.hi, panel.mass / self.total))
    }

    /// Gauss points t with w, every panel in `parts`: Σ w g(t) is ∫ g · density / ∫ density.
    pub fn weights(&self, parts: usize) -> Vec<(f64, f64)> {
        let mut weights = Vec::with_capacity(POINTS * parts * self.panels.len());
        for panel in &self.panels {
            let half = 0.5 * (panel.hi - panel.lo) / parts as f64;
            for part in 0..parts {
                let middle = panel.lo + (2 * part + 1) as f64 * half;
                weights.extend(rule().iter().map(|(x, w)| {
                    let t = middle + half * x;
                    (t, w * half * panel.density(t).max(0.0) / self.total)
                }));
            }
        }
        weights
    }

    /// Σ over Gauss points: ∫ g · density / ∫ density.
    pub fn expect(&self, g: &dyn Fn(f64) -> f64) -> f64 {
        let mut sum = 0.0;
        for panel in &self.panels {
            let half = 0.5 * (panel.hi - panel.lo);
            let middle = 0.5 * (panel.hi + panel.lo);
            for (x, w) in rule() {
                let t = middle + half * x;
                sum += w * half * panel.density(t) * g(t);
            }
        }
        sum / self.total
    }

    pub fn quantile(&self, p: f64) -> Figure {
        let wanted = p * self.total;
        let i = self.panels.partition_point(|panel| panel.below + panel.mass < wanted);
        let panel = self.panels.get(i).ok_or_else(|| Absent::failed("a quantile lies off the panels"))?;
        let f = |t: f64| (panel.below + panel.to(t)) - wanted;
        self.root(panel, &f)
    }

    pub fn upper_quantile(&self, q: f64) -> Figure {
        let wanted = q * self.total;
        let i = self.panels.partition_point(|panel| panel.above >= wanted);
        let panel = self.panels.get(i).ok_or_else(|| Absent::failed("a quantile lies off the panels"))?;
        let f = |t: f64| wanted - (panel.above + (panel.mass - panel.to(t)));
        self.root(panel, &f)
    }

    fn root(&self, panel: &Panel, f: &dyn Fn(f64) -> f64) -> Figure {
        if f(panel.lo) >= 0.0 {
            return Ok(panel.lo);
        }
        if f(panel.hi) <= 0.0 {
            return Ok(panel.hi);
        }
        let tolerance = roots::Tolerance::tight(panel.hi - panel.lo);
        roots::solve(f, panel.lo, panel.hi, tolerance).map_err(failed)
    }
}

impl Panel {
    fn new(density: &dyn Fn(f64) -> f64, lo: f64, hi: f64) -> Result<Panel, Absent> {
        let (half, middle) = (0.5 * (hi - lo), 0.5 * (hi + lo));
        let mut series = [0.0; POINTS];
        for (x, w) in rule() {
            let value = density(middle + half * x);
            if !value.is_finite() {
                return Err(Absent::failed("a density is not a number"));
            }
            let p = polynomials(*x);
            for (k, c) in series.iter_mut().enumerate() {
                *c += 0.5 * (2.0 * k as f64 + 1.0) * w * value * p[k];
            }
        }
        Ok(Panel { lo, hi, series, mass: 2.0 * half * series[0], below: 0.0, above: 0.0 })
    }

    fn place(&self, t: f64) -> f64 {
        ((t - self.lo) - (self.hi - t)) / (self.hi - self.lo)
    }

    fn density(&self, t: f64) -> f64 {
        let p = polynomials(self.place(t));
        self.series.iter().zip(&p).map(|(c, p)| c * p).sum()
    }

    /// ∫ from the panel's left end to t: ∫P_k = (P_{k+1} − P_{k−1})/(2k+1).
    fn to(&self, t: f64) -> f64 {
        let x = self.place(t);
        let p = polynomials(x);
        let mut sum = self.series[0] * (x + 1.0);
        for k in 1..POINTS {
            sum += self.series[k] * (p[k + 1] - p[k - 1]) / (2.0 * k as f64 + 1.0);
        }
        sum * 0.5 * (self.hi - self.lo)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_rule_integrates_powers_exactly() {
        for power in [0u32, 2, 10, 30] {
            let sum: f64 = rule().iter().map(|(x, w)| w * fm::whole_power(*x, power)).sum();
            assert!((sum - 2.0 / (f64::from(power) + 1.0)).abs() < 1e-14, "{power}: {sum}");
        }
    }

    #[test]
    fn a_normal_density_on_panels_gives_its_probabilities_and_quantiles() {
        let edges: Vec<f64> = (-12..=12).map(f64::from).collect();
        let panels = Panels::new(&crate::math::normal::pdf, &edges).unwrap();
        for z in [-8.0, -3.3, -0.2, 1.0, 2.5, 6.0] {
            let (cdf, sf) = (crate::math::normal::cdf(z), crate::math::normal::sf(z));
            assert!((panels.cdf(z) / cdf - 1.0).abs() < 1e-11, "{z}");
            assert!((panels.sf(z) / sf - 1.0).abs() < 1e-11, "{z}");
            let back = if z < 0.0 { panels.quantile(cdf) } else { panels.upper_quantile(sf) };
            assert!((back.unwrap() - z).abs() < 1e-11, "{z}");
        }
    }
}
