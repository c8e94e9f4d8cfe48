//! The noncentral t distribution: (Z + δ)/√(χ²_ν/ν).
//!
//! P(T ≤ t) = ∫ Φ(t s − δ) f(s) ds over the density of s = √(χ²_ν/ν), by the trapezoid rule in u = ln s. In u the density
//! is exp(ν(u − (e²ᵘ − 1)/2)) up to its constant, which is known in closed form with Stirling's remainder, so nothing
//! cancels; each tail is its own sum of positive terms, centred where its own integrand is highest.

use super::error::{MathError, Result, finite, positive};
use super::fm;
use super::normal;
use super::roots;
use super::special::stirling_rest;

/// P(T ≤ t) with ν = `df` > 0 and noncentrality δ = `delta`, both finite, t finite; else an error.
pub fn cdf(t: f64, df: f64, delta: f64) -> Result<f64> {
    sf(-t, df, -delta)
}

/// P(T > t), with its own relative accuracy (about 1e−12 down to 1e−300).
pub fn sf(t: f64, df: f64, delta: f64) -> Result<f64> {
    Ok(fm::exp(ln_sf(t, df, delta)?).min(1.0))
}

/// ln P(T > t), also where the chance is too small to be written.
pub fn ln_sf(t: f64, df: f64, delta: f64) -> Result<f64> {
    positive("noncentral t", "df", df)?;
    finite("noncentral t", "delta", delta)?;
    finite("noncentral t", "t", t)?;
    // ln of the density of u at 0: 2 (ν/2)^{ν/2} e^{−ν/2}/Γ(ν/2) = 2 · (ν/2)^{a} e^{−a} a/Γ(a + 1), a = ν/2.
    let a = 0.5 * df;
    let ln_constant = fm::LN_2 + 0.5 * fm::ln(a) - fm::HALF_LN_TWO_PI - stirling_rest(a);
    let ln_term = |u: f64| {
        let growth = fm::exp_m1(2.0 * u);
        if growth.is_infinite() {
            return f64::NEG_INFINITY;
        }
        // Near 0 both parts cancel to −u²: use the series there.
        let ln_density = df * minus_excess(u, growth);
        ln_density + normal::ln_sf(t * fm::exp(u) - delta)
    };
    let top = roots::mode(ln_term, 0.0, 1.0 / (2.0 * df).sqrt()).map_err(|e| e.within("noncentral t"))?;
    let mut step = 0.5 * top.width();
    let mut points = vec![(0_i64, 1.0)];
    let mut before = f64::NAN;
    for round in 0..12 {
        let mut finer = Vec::with_capacity(2 * points.len());
        if round == 0 {
            for sign in [-1_i64, 1] {
                for k in 1..100_000_i64 {
                    let term = fm::exp(ln_term(top.x + step * (sign * k) as f64) - top.ln_height);
                    points.push((sign * k, term));
                    if term < 1e-22 {
                        break;
                    }
                }
            }
            points.sort_by_key(|p| p.0);
        } else {
            step *= 0.5;
            for (k, term) in &points {
                if !finer.is_empty() {
                    finer.push((
                        2 * k - 1,
                        fm::exp(ln_term(top.x + step * (2 * k - 1) as f64) - top.ln_height),
                    ));
                }
                finer.push((2 * k, *term));
            }
            points = finer;
        }
        let now = points.iter().map(|p| p.1).sum::<f64>() * step;
        if (now - before).abs() <= 1e-13 * now {
            return Ok(ln_constant + top.ln_height + fm::ln(now));
        }
        before = now;
    }
    Err(MathError::new(format!("noncentral t: no agreement at t {t}, df {df}, delta {delta}")))
}

/// u − (e²ᵘ − 1)/2, which is −u² − 2u³/3 − … near 0.
fn minus_excess(u: f64, growth: f64) -> f64 {
    if u.abs() > 0.1 {
        return u - 0.5 * growth;
    }
    // −½ Σ_{k ≥ 2} (2u)ᵏ/k!.
    let w = 2.0 * u;
    let mut sum = 0.0;
    for k in (3..=14).rev() {
        sum = (sum + 1.0) * w / f64::from(k);
    }
    -0.25 * w * w * (1.0 + sum)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::student;

    #[test]
    fn zero_noncentrality_is_student() {
        for df in [0.5, 1.0, 7.0, 300.0, 1e8] {
            for t in [-5.0, -0.3, 0.0, 1.0, 8.0, 30.0] {
                let central = student::ln_sf(t, df).unwrap();
                let value = ln_sf(t, df, 0.0).unwrap();
                assert!(
                    (value - central).abs() < 1e-11 * (1.0 + central.abs()),
                    "{df} {t}: {value} {central}"
                );
            }
        }
        assert!(cdf(0.0, 3.0, 1.0).unwrap() - normal::cdf(-1.0) < 1e-14);
        assert!(
            cdf(f64::NAN, 3.0, 1.0).is_err() && sf(1.0, 0.0, 1.0).is_err() && sf(1.0, 1.0, f64::NAN).is_err()
        );
    }
}
