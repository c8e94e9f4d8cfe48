//! The chi-square distribution: a gamma variable of shape df/2 and scale 2.

use super::error::Result;
use super::fm;
use super::gamma;

/// The chance that a chi-square variable with `df` degrees of freedom is at most x. df > 0, x ≥ 0; else an error.
pub fn cdf(x: f64, df: f64) -> Result<f64> {
    gamma::p(0.5 * df, 0.5 * x)
}

/// The chance that it is more than x.
pub fn sf(x: f64, df: f64) -> Result<f64> {
    gamma::q(0.5 * df, 0.5 * x)
}

/// The x with chance p at or below it, 0 < p < 1.
pub fn quantile(p: f64, df: f64) -> Result<f64> {
    Ok(2.0 * gamma::quantile(0.5 * df, p)?)
}

/// The x with chance q above it, 0 < q < 1.
pub fn upper_quantile(q: f64, df: f64) -> Result<f64> {
    Ok(2.0 * gamma::upper_quantile(0.5 * df, q)?)
}

/// Mean and variance of 1/√χ²: Γ((ν−1)/2)/(√2 Γ(ν/2)) and 1/(ν−2) less its square; they exist for ν > 1 and ν > 2.
/// σ² ~ S/χ²_ν has E σ = √S times the one and Var σ = S times the other.
///
/// For many degrees of freedom both would cancel: there from Γ(x + b) ~ √2π x^{x+b−½} e^{−x} exp(Σ (−1)^{k+1} B_{k+1}(b)
/// /(k(k+1) xᵏ)) (NIST DLMF 5.11.8), x = ν/2, of which the mean is √(e^y/ν) with y as below.
pub fn of_inverse_root(df: f64) -> (f64, f64) {
    if df < 80.0 {
        let mean =
            fm::exp(fm::ln_gamma(0.5 * (df - 1.0)) - fm::ln_gamma(0.5 * df)) / std::f64::consts::SQRT_2;
        return (mean, 1.0 / (df - 2.0) - mean * mean);
    }
    // 2 (B_{k+1}(−½) − B_{k+1}(0)) (−1)^{k+1} / (k (k+1)), k = 1, 2, …
    const TERMS: [f64; 7] =
        [0.75, 0.25, 3.0 / 32.0, 1.0 / 32.0, 3.0 / 320.0, 1.0 / 192.0, 2.0 * 0.128_906_25 / 56.0];
    let inverse = 2.0 / df;
    let y = inverse * TERMS.iter().rev().fold(0.0, |sum, term| sum * inverse + term);
    // ν/(ν−2) − e^y, each less 1.
    let variance = (inverse / (1.0 - inverse) - fm::exp_m1(y)) / df;
    ((fm::exp(y) / df).sqrt(), variance)
}

#[cfg(test)]
// The reference's own digits.
#[allow(clippy::excessive_precision)]
mod tests {
    use super::*;

    /// mpmath, 60 digits.
    #[test]
    fn moments_of_the_inverse_root() {
        for (df, mean, variance) in [
            (2.5, 0.95597759497224999072764, 1.086106837911072749250067),
            (3.0, 0.7978845608028653558798921, 0.3633802276324186569244649),
            (7.25, 0.4162552960847318690243432, 0.01720771895760268174057431),
            (40.0, 0.1611578002036759433682487, 0.0003439529071962765925287982),
            (79.5, 0.113226540369031745248423, 0.00008297636251163743776062047),
            (80.0, 0.1128653849810804251316068, 0.00008191769358532571557760854),
            (120.5, 0.09166944513392534405257693, 0.00003553139423909494245298644),
            (1000.0, 0.03164651841539547556406155, 0.000000501880200067102461587638),
            (250_000.0, 0.002000006000025000105000415, 8.000120001328012840114609e-12),
            (20_000_000.0, 0.0002236068061352343219971785, 1.250000234375032421878918e-15),
        ] {
            let (m, v) = of_inverse_root(df);
            assert!((m / mean - 1.0).abs() < 1e-14, "{df} {m}");
            assert!((v / variance - 1.0).abs() < 2e-11, "{df} {v}");
        }
    }
}
