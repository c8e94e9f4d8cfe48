//! The inverse gamma distribution: `scale` over a gamma variable of the given shape.
//!
//! A variance with ν degrees of freedom and estimate s² has shape ν/2 and scale νs²/2.

use super::error::{MathError, Result, positive};
use super::fm;
use super::gamma;

/// The chance of a value at or below x. shape, scale > 0, x ≥ 0; else an error.
pub fn cdf(x: f64, shape: f64, scale: f64) -> Result<f64> {
    gamma::q(shape, inverted(x, scale)?)
}

/// The chance of a value above x.
pub fn sf(x: f64, shape: f64, scale: f64) -> Result<f64> {
    gamma::p(shape, inverted(x, scale)?)
}

/// ln of the density at x > 0.
pub fn ln_pdf(x: f64, shape: f64, scale: f64) -> Result<f64> {
    positive("inverse gamma", "the shape", shape)?;
    positive("inverse gamma", "the scale", scale)?;
    positive("inverse gamma", "x", x)?;
    Ok(gamma::ln_density(shape, scale / x)? + fm::ln(scale) - 2.0 * fm::ln(x))
}

/// The x with chance p at or below it, 0 < p < 1.
pub fn quantile(p: f64, shape: f64, scale: f64) -> Result<f64> {
    positive("inverse gamma", "the scale", scale)?;
    Ok(scale / gamma::upper_quantile(shape, p)?)
}

/// The x with chance q above it, 0 < q < 1.
pub fn upper_quantile(q: f64, shape: f64, scale: f64) -> Result<f64> {
    positive("inverse gamma", "the scale", scale)?;
    Ok(scale / gamma::quantile(shape, q)?)
}

fn inverted(x: f64, scale: f64) -> Result<f64> {
    positive("inverse gamma", "the scale", scale)?;
    if x.is_nan() || x < 0.0 {
        return Err(MathError::argument("inverse gamma", "x", x, "0 or more"));
    }
    Ok(scale / x)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn density_is_the_slope_of_the_chance() {
        for (shape, scale) in [(0.7, 1.0), (3.0, 2.0), (150.0, 10.0), (400.0, 1e-3)] {
            let x = quantile(0.4, shape, scale).unwrap();
            let step = 1e-4 * x / f64::sqrt(shape);
            let slope =
                (cdf(x + step, shape, scale).unwrap() - cdf(x - step, shape, scale).unwrap()) / (2.0 * step);
            assert!((fm::exp(ln_pdf(x, shape, scale).unwrap()) / slope - 1.0).abs() < 1e-6);
        }
        assert!(
            cdf(-1.0, 1.0, 1.0).is_err() && cdf(1.0, 1.0, 0.0).is_err() && ln_pdf(0.0, 1.0, 1.0).is_err()
        );
        assert_eq!(cdf(0.0, 1.0, 1.0).unwrap(), 0.0);
    }
}
