//! Earlier periods with marked readings about a long-run mean μ: given μ, σ and τ each period's likelihood is
//! ∫ N(θ; μ, τ²) · plain readings · marked readings dθ, taken by the trapezoid rule. Inner units.

use super::about_mean::AboutMean;
use super::marks::{self, Mark};
use super::told::Told;
use crate::math::fm;

#[derive(Debug, Clone, PartialEq)]
pub(super) struct MarkedPeriods {
    plain: Vec<Told>,
    marked: Vec<(Told, Vec<Mark>)>,
}

impl MarkedPeriods {
    pub fn new(periods: Vec<(Told, Vec<Mark>)>) -> MarkedPeriods {
        let (mut plain, mut marked) = (Vec::new(), Vec::new());
        for (told, marks) in periods {
            if !marks.is_empty() {
                marked.push((told, marks));
            } else if told != Told::Nothing {
                plain.push(told);
            }
        }
        MarkedPeriods { plain, marked }
    }

    /// Centre and scale for the coordinate of μ: every marked period by a normal stand-in.
    pub fn frame(&self, sigma2: f64, tau2: f64) -> (f64, f64) {
        let mut stand_ins = self.plain.clone();
        for (told, marks) in &self.marked {
            let (mean, var) = told.at(sigma2).map_or((0.0, f64::INFINITY), |at| (at.mean, at.var));
            if var < f64::INFINITY || marks.iter().any(Mark::is_bounded) {
                let (centre, scale) = marks::frame(mean, var, marks, sigma2);
                stand_ins.push(Told::Fixed { mean: centre, var: scale * scale });
            }
        }
        let long = AboutMean::new(&stand_ins).at(sigma2, tau2);
        (long.mean, long.var.sqrt())
    }

    /// The smallest variance of a period's stand-in.
    pub fn smallest_var(&self, sigma2: f64) -> f64 {
        let mut least = f64::INFINITY;
        for told in &self.plain {
            least = told.at(sigma2).map_or(least, |at| least.min(at.var));
        }
        for (told, marks) in &self.marked {
            let (mean, var) = told.at(sigma2).map_or((0.0, f64::INFINITY), |at| (at.mean, at.var));
            let (_, scale) = marks::frame(mean, var, marks, sigma2);
            least = least.min(scale * scale);
        }
        least
    }

    /// ln Π of the periods' likelihoods, up to what holds σ's sums of squares.
    pub fn ln_likelihood(&self, mu: f64, sigma2: f64, tau2: f64) -> f64 {
        let mut ln = 0.0;
        for told in &self.plain {
            if let Some(at) = told.at(sigma2) {
                let total = tau2 + at.var;
                ln += at.ln_factor - 0.5 * (fm::ln(total) + (at.mean - mu) * (at.mean - mu) / total);
            }
        }
        for (told, marks) in &self.marked {
            let (mut mean, mut var) = (mu, tau2);
            if let Some(at) = told.at(sigma2) {
                let total = tau2 + at.var;
                ln += at.ln_factor - 0.5 * (fm::ln(total) + (at.mean - mu) * (at.mean - mu) / total);
                mean = mu + tau2 / total * (at.mean - mu);
                var = tau2 * (at.var / total);
            }
            ln += ln_marks(marks, mean, var, sigma2);
        }
        ln
    }
}

/// ln ∫ N(θ; mean, var) Π P(mark | θ) dθ. The product is log-concave, so one place holds the mass.
pub(super) fn ln_marks(marks: &[Mark], mean: f64, var: f64, sigma2: f64) -> f64 {
    let ln_at = |theta: f64| marks.iter().map(|m| m.ln_chance(theta, sigma2)).sum::<f64>();
    let sd = var.sqrt();
    if sd == 0.0 {
        return ln_at(mean);
    }
    if let [mark] = marks {
        // One reading's bounds: level and scatter add to one normal law.
        return mark.ln_chance(mean, sigma2 + var);
    }
    let f = |z: f64| -0.5 * z * z + ln_at(mean + sd * z);
    // Uphill by Newton steps on differences; the curvature is at least that of the normal part.
    let (mut z, mut width) = (0.0, 1.0);
    for _ in 0..60 {
        let h = 1e-3 * width;
        let (low, here, high) = (f(z - h), f(z), f(z + h));
        let slope = (high - low) / (2.0 * h);
        let curvature = ((2.0 * here - low - high) / (h * h)).max(1.0);
        width = 1.0 / curvature.sqrt();
        let step = (slope / curvature).clamp(-8.0, 8.0);
        z += step;
        if step.abs() < 1e-3 * width {
            break;
        }
    }
    let top = f(z);
    let sum = |step: f64, offset: f64| {
        let mut total = 0.0;
        for direction in [1.0, -1.0] {
            let mut i = if direction > 0.0 { 0.0 } else { 1.0 };
            loop {
                let term = fm::exp(f(z + direction * i * step + offset * step) - top);
                total += term;
                if term < 1e-18 || i > 4000.0 {
                    break;
                }
                i += 1.0;
            }
        }
        total * step
    };
    // The integrand is entire and dies out as a normal density does: half a width leaves exp(−2π²/0.25).
    let value = sum(0.5 * width, 0.0);
    top + fm::ln(value) - fm::HALF_LN_TWO_PI
}
