//! Earlier periods about a long-run mean: the weight of (σ, τ) that they leave, and the prior of the
//! next level (BDA3 §5.4, equation 5.21, jointly with σ where it is unknown). Inner units.

use super::told::{AtSd, Told};
use crate::math::fm;

/// Periods of equal variance, gathered: their number, mean, and squares of their means about it.
#[derive(Debug, Clone, PartialEq)]
struct Cluster {
    /// var = σ² / readings, or the fixed variance where `readings` is 0.
    readings: f64,
    fixed: f64,
    count: f64,
    mean: f64,
    squares: f64,
}

/// All earlier periods, so held that a weight costs one logarithm per distinct number of readings.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct AboutMean {
    clusters: Vec<Cluster>,
    own: Vec<Told>,
    pub count: usize,
}

/// ln weight of (σ, τ), and the long-run mean N(mean, var) given them.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct LongRun {
    pub ln_weight: f64,
    pub mean: f64,
    pub var: f64,
}

impl AboutMean {
    pub fn new(periods: &[Told]) -> AboutMean {
        let mut plain: Vec<(f64, f64, f64)> = Vec::new();
        let mut own = Vec::new();
        let mut count = 0;
        for period in periods {
            match period {
                Told::Nothing => continue,
                Told::Counted { n, mean } => plain.push((*n, 0.0, *mean)),
                Told::Fixed { mean, var } => plain.push((0.0, *var, *mean)),
                Told::Own(_) => own.push(period.clone()),
            }
            count += 1;
        }
        plain.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.total_cmp(&b.1)).then(a.2.total_cmp(&b.2)));
        let mut clusters = Vec::new();
        let mut from = 0;
        while from < plain.len() {
            let (readings, fixed, _) = plain[from];
            let to = from + plain[from..].iter().take_while(|p| p.0 == readings && p.1 == fixed).count();
            let members = &plain[from..to];
            let count = members.len() as f64;
            let mean = members.iter().map(|m| m.2).sum::<f64>() / count;
            let squares = members.iter().map(|m| (m.2 - mean) * (m.2 - mean)).sum::<f64>();
            clusters.push(Cluster { readings, fixed, count, mean, squares });
            from = to;
        }
        AboutMean { clusters, own, count }
    }

    /// ln of V^{1/2} Π w_j^{1/2} exp(−½ Σ w_j (x̄_j − μ̂)²), and μ̂, V.
    pub fn at(&self, sigma2: f64, tau2: f64) -> LongRun {
        if self.count == 0 {
            // Nothing is known of the long-run mean.
            return LongRun { ln_weight: 0.0, mean: 0.0, var: f64::INFINITY };
        }
        // Two passes: squares are taken about μ̂ itself, since they cancel otherwise.
        let (mut sum, mut weighted, mut ln_product, mut ln_factor) = (0.0, 0.0, 0.0, 0.0);
        for c in &self.clusters {
            let total = tau2 + c.var(sigma2);
            sum += c.count / total;
            weighted += c.count / total * c.mean;
            ln_product += c.count * fm::ln(total);
        }
        for p in &self.own {
            if let Some(at) = p.at(sigma2) {
                sum += 1.0 / (tau2 + at.var);
                weighted += at.mean / (tau2 + at.var);
                ln_product += fm::ln(tau2 + at.var);
                ln_factor += at.ln_factor;
            }
        }
        let mean = weighted / sum;
        let mut squares = 0.0;
        for c in &self.clusters {
            let d = c.mean - mean;
            squares += (c.squares + c.count * (d * d)) / (tau2 + c.var(sigma2));
        }
        for p in &self.own {
            if let Some(at) = p.at(sigma2) {
                squares += (at.mean - mean) * (at.mean - mean) / (tau2 + at.var);
            }
        }
        let ln_weight = ln_factor - 0.5 * (ln_product + fm::ln(sum) + squares);
        LongRun { ln_weight, mean, var: 1.0 / sum }
    }

    /// The smallest variance of a period's mean, where the plane begins to look flat in τ.
    pub fn smallest_var(&self, sigma2: f64) -> f64 {
        let plain = self.clusters.iter().map(|c| c.var(sigma2));
        let own = self.own.iter().filter_map(|p| p.at(sigma2)).map(|at: AtSd| at.var);
        plain.chain(own).fold(f64::INFINITY, f64::min)
    }
}

impl Cluster {
    fn var(&self, sigma2: f64) -> f64 {
        if self.readings > 0.0 { sigma2 / self.readings } else { self.fixed }
    }
}
