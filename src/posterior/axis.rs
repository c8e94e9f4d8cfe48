//! The coordinates of the plane of spreads: ln σ and ln τ, mapped so that both ends of the line die out
//! fast. All in inner units.

use super::between::Tau;
use super::told::SdSums;
use crate::math::fm;

/// Below this the bent coordinate stands for a spread that is 0 to every digit.
const BOTTOM: f64 = -6.5;

/// x = centre + u − e^−u, its slope's logarithm and e^x. Where the integrand no longer depends on a spread
/// that goes to 0, the bend lets it die out doubly fast instead of once.
fn bent(u: f64, centre: f64) -> Option<(f64, f64, f64)> {
    if u < BOTTOM {
        return None;
    }
    let bend = fm::exp(-u);
    let x = centre + u - bend;
    Some((x, fm::ln_1p(bend), fm::exp(x)))
}

/// The coordinate u of a spread's logarithm x on a bent axis: u − e^−u = x − centre, by Newton's method
/// (the left side is increasing and concave, so steps from the left of the root never overshoot).
fn unbent(x: f64, centre: f64) -> f64 {
    let target = x - centre;
    let mut u = if target > 0.0 { target } else { -fm::ln(1.0 - target) };
    for _ in 0..60 {
        let bend = fm::exp(-u);
        let step = (target - (u - bend)) / (1.0 + bend);
        u += step;
        if step.abs() < 1e-15 * (1.0 + u.abs()) {
            break;
        }
    }
    u
}

/// An unknown within sd: the density of ln σ from its prior and all sums of squares that speak of it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct SdAxis {
    pub sums: SdSums,
    /// p(σ) uniform instead of p(σ²) ∝ 1/σ² (readings with uncertainties of their own).
    pub uniform: bool,
    centre: f64,
}

impl SdAxis {
    /// p(σ²) ∝ (σ²)^{−df/2 − 1} exp(−ss/2σ²): needs df and ss above 0.
    pub fn squares(sums: SdSums) -> SdAxis {
        SdAxis { sums, uniform: false, centre: 0.5 * fm::ln(sums.ss / sums.df) }
    }

    /// p(σ²) ∝ 1/σ² with no scatter of its own: the readings' bounds must rule out σ = 0.
    pub fn scale_free(sums: SdSums, typical: f64) -> SdAxis {
        SdAxis { sums: SdSums { df: sums.df, ss: 0.0 }, uniform: false, centre: fm::ln(typical) }
    }

    /// p(σ) uniform times the sums' factor; `typical` is an sd where the likelihood begins to be flat.
    pub fn uniform(sums: SdSums, typical: f64) -> SdAxis {
        SdAxis { sums, uniform: true, centre: fm::ln(typical) }
    }

    /// (σ, ln density of the coordinate).
    pub fn at(&self, u: f64) -> (f64, f64) {
        if self.uniform {
            return match bent(u, self.centre) {
                None => (0.0, f64::NEG_INFINITY),
                Some((x, ln_slope, sigma)) => {
                    let squares = if self.sums.ss > 0.0 { 0.5 * self.sums.ss / (sigma * sigma) } else { 0.0 };
                    (sigma, x + ln_slope - self.sums.df * x - squares)
                }
            };
        }
        if self.sums.ss == 0.0 {
            return (fm::exp(self.centre + u), -self.sums.df * u);
        }
        // About the place where df σ² = ss, so that a million readings leave no rounding behind.
        let ln_density = -0.5 * self.sums.df * (2.0 * u + fm::exp_m1(-2.0 * u));
        (fm::exp(self.centre + u), ln_density)
    }

    /// What `at` leaves out of ln of the density of ln σ: needed where two models are compared.
    pub fn ln_constant(&self) -> f64 {
        if self.uniform { 0.0 } else { -self.sums.df * (self.centre + 0.5) }
    }

    /// The coordinate of σ and |d ln σ/du| there.
    pub fn coordinate(&self, sigma: f64) -> f64 {
        let x = fm::ln(sigma);
        if self.uniform { unbent(x, self.centre) } else { x - self.centre }
    }

    pub fn slope(&self, u: f64) -> f64 {
        if self.uniform { 1.0 + fm::exp(-u) } else { 1.0 }
    }
}

/// An unknown between sd.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct TauAxis {
    pub law: Tau,
    centre: f64,
}

impl TauAxis {
    /// `smallest_var` is the smallest variance of a period's mean: for τ² well below it the likelihood
    /// is flat, and so is the density of τ.
    pub fn new(law: Tau, smallest_var: f64) -> TauAxis {
        let flat_below = smallest_var.sqrt();
        let flat_below = law.scale().map_or(flat_below, |s| s.min(flat_below));
        TauAxis { law, centre: fm::ln(flat_below) }
    }

    /// (τ, ln density of the coordinate under the prior of τ).
    pub fn at(&self, u: f64) -> (f64, f64) {
        match bent(u, self.centre) {
            None => (0.0, f64::NEG_INFINITY),
            Some((x, ln_slope, tau)) => (tau, x + ln_slope + self.law.ln_prior(tau)),
        }
    }

    pub fn coordinate(&self, tau: f64) -> f64 {
        unbent(fm::ln(tau), self.centre)
    }

    pub fn slope(&self, u: f64) -> f64 {
        1.0 + fm::exp(-u)
    }
}
