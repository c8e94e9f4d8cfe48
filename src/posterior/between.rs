//! The prior law of the between sd τ, and the plug-ins that estimate it (methods §3). Inner units.

use super::told::AtSd;
use crate::math::fm;
use crate::prior::Between;
use crate::quantity::Absent;

/// τ: a value, or a density over (0, ∞).
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Tau {
    Fixed(f64),
    Uniform,
    HalfNormal(f64),
    HalfCauchy(f64),
}

impl Tau {
    /// ln p(τ) up to a constant.
    pub fn ln_prior(self, tau: f64) -> f64 {
        match self {
            Tau::Fixed(_) | Tau::Uniform => 0.0,
            Tau::HalfNormal(scale) => -0.5 * (tau / scale) * (tau / scale),
            Tau::HalfCauchy(scale) => -fm::ln_1p((tau / scale) * (tau / scale)),
        }
    }

    pub fn scale(self) -> Option<f64> {
        match self {
            Tau::HalfNormal(scale) | Tau::HalfCauchy(scale) => Some(scale),
            Tau::Fixed(_) | Tau::Uniform => None,
        }
    }
}

/// The law of τ as the spec says it. `periods` are given σ, for the plug-ins.
pub(super) fn law(between: Between, scale: f64, periods: &[AtSd]) -> Result<Tau, Absent> {
    let positive = |s: f64| {
        let s = s / scale;
        if s > 0.0 && s.is_finite() {
            Ok(s)
        } else {
            Err(Absent::because("the scale of the between sd must be above 0"))
        }
    };
    Ok(match between {
        Between::Uniform => Tau::Uniform,
        Between::HalfNormal(s) => Tau::HalfNormal(positive(s)?),
        Between::HalfCauchy(s) => Tau::HalfCauchy(positive(s)?),
        Between::Known(0.0) => Tau::Fixed(0.0),
        Between::Known(tau) => Tau::Fixed(positive(tau)?),
        Between::None => Tau::Fixed(0.0),
        Between::Reml => Tau::Fixed(reml(periods)?),
        Between::Moments => Tau::Fixed(moments(periods)?),
    })
}

/// DerSimonian & Laird 1986: τ̂² = max(0, (Q − (J−1)) / (Σa − Σa²/Σa)), a_j = 1/s_j².
pub(super) fn moments(periods: &[AtSd]) -> Result<f64, Absent> {
    if periods.len() < 2 {
        return Err(Absent::because("an estimate of the between sd needs at least 2 earlier periods"));
    }
    let sum: f64 = periods.iter().map(|p| 1.0 / p.var).sum();
    let squares: f64 = periods.iter().map(|p| 1.0 / (p.var * p.var)).sum();
    let mean = periods.iter().map(|p| p.mean / p.var).sum::<f64>() / sum;
    let q: f64 = periods.iter().map(|p| (p.mean - mean) * (p.mean - mean) / p.var).sum();
    let excess = q - (periods.len() as f64 - 1.0);
    let tau2 = excess / (sum - squares / sum);
    Ok(if tau2 > 0.0 { tau2.sqrt() } else { 0.0 })
}

/// ln of V^{1/2} Π w_j^{1/2} exp(−½ Σ w_j (x̄_j − μ̂)²), and twice its slope in τ².
fn restricted(periods: &[AtSd], tau2: f64) -> (f64, f64) {
    let sum: f64 = periods.iter().map(|p| 1.0 / (tau2 + p.var)).sum();
    let mean = periods.iter().map(|p| p.mean / (tau2 + p.var)).sum::<f64>() / sum;
    let (mut ln_value, mut slope, mut squares) = (-0.5 * fm::ln(sum), -sum, 0.0);
    for p in periods {
        let w = 1.0 / (tau2 + p.var);
        let d2 = (p.mean - mean) * (p.mean - mean);
        ln_value += 0.5 * (fm::ln(w) - w * d2);
        slope += w * w * d2;
        squares += w * w;
    }
    (ln_value, slope + squares / sum)
}

/// τ̂ that maximises the restricted likelihood, the highest of all its maxima; 0 where none is inside.
pub(super) fn reml(periods: &[AtSd]) -> Result<f64, Absent> {
    if periods.len() < 2 {
        return Err(Absent::because("an estimate of the between sd needs at least 2 earlier periods"));
    }
    let low = periods.iter().map(|p| p.var).fold(f64::INFINITY, f64::min) * 1e-6;
    let mean = periods.iter().map(|p| p.mean).sum::<f64>() / periods.len() as f64;
    let spread: f64 = periods.iter().map(|p| (p.mean - mean) * (p.mean - mean)).sum();
    let high = 4.0 * (spread + low);
    const STEPS: usize = 400;
    let at = |i: usize| {
        if i == 0 { 0.0 } else { low * fm::exp(fm::ln(high / low) * (i - 1) as f64 / (STEPS - 1) as f64) }
    };
    let (mut best, mut tau2) = (restricted(periods, 0.0).0, 0.0);
    for i in 0..STEPS {
        let (mut lo, mut hi) = (at(i), at(i + 1));
        if !(restricted(periods, lo).1 > 0.0 && restricted(periods, hi).1 <= 0.0) {
            continue;
        }
        for _ in 0..200 {
            let middle = 0.5 * (lo + hi);
            if middle <= lo || middle >= hi {
                break;
            }
            if restricted(periods, middle).1 > 0.0 {
                lo = middle;
            } else {
                hi = middle;
            }
        }
        let value = restricted(periods, lo).0;
        if value > best {
            best = value;
            tau2 = lo;
        }
    }
    Ok(tau2.sqrt())
}
