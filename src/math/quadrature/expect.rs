//! Expectations under one normal distribution.

use super::Integral;
use crate::math::error::{MathError, Result, finite};
use crate::math::fm;

/// E g(X) for X ~ N(mean, sd²), sd ≥ 0.
///
/// Trapezoid in z = (x − mean)/sd out to |z| = 13 (weight 8e−38 of the centre), halved until two results agree to 1e−13
/// of E|g|. Precondition: g is finite, smooth on the scale of sd/64, and does not grow as fast as exp(z²/2) falls. An
/// error when the step sd/4096 is reached without agreement, or when g is not finite. `error` is the last difference.
pub fn expect_normal(mut g: impl FnMut(f64) -> f64, mean: f64, sd: f64) -> Result<Integral> {
    finite("normal expectation", "mean", mean)?;
    if !sd.is_finite() || sd < 0.0 {
        return Err(MathError::argument("normal expectation", "sd", sd, "finite and not below 0"));
    }
    if sd == 0.0 {
        let value = g(mean);
        return Ok(Integral { value: finite("normal expectation", "g", value)?, error: 0.0 });
    }
    const REACH: f64 = 13.0;
    let (mut sum, mut size, mut weights) = (0.0, 0.0, 0.0);
    let mut step = 0.5;
    let mut before = f64::INFINITY;
    loop {
        // The first round takes every point, later rounds the midpoints.
        let first_round = before == f64::INFINITY && step == 0.5;
        let count = (REACH / step) as i64;
        for i in -count..=count {
            if first_round || i & 1 == 1 {
                let z = step * i as f64;
                let weight = fm::exp(-0.5 * z * z);
                let value = weight * g(mean + sd * z);
                if !value.is_finite() {
                    return Err(MathError::new(format!(
                        "normal expectation: not finite at {}",
                        mean + sd * z
                    )));
                }
                sum += value;
                size += value.abs();
                weights += weight;
            }
        }
        let now = sum / weights;
        let error = (now - before).abs();
        if error <= 1e-13 * (size / weights) {
            return Ok(Integral { value: now, error });
        }
        if step < 1.0 / 4096.0 {
            return Err(MathError::new(format!("normal expectation: two steps differ by {error} of {now}")));
        }
        before = now;
        step *= 0.5;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::normal;

    #[test]
    fn closed_forms() {
        assert!((expect_normal(|x| x * x, 3.0, 2.0).unwrap().value - 13.0).abs() < 1e-12);
        assert!((expect_normal(fm::exp, 0.3, 0.7).unwrap().value / fm::exp(0.3 + 0.245) - 1.0).abs() < 1e-13);
        // E Φ(a + bZ) = Φ(a/√(1+b²)).
        for (a, b) in [(-1.0, 0.5), (-6.0, 2.0), (0.3, 8.0)] {
            let value = expect_normal(|z| normal::cdf(a + b * z), 0.0, 1.0).unwrap().value;
            assert!((value / normal::cdf(a / (1.0 + b * b).sqrt()) - 1.0).abs() < 1e-12);
        }
        assert_eq!(expect_normal(|x| x, 4.0, 0.0).unwrap().value, 4.0);
        assert!(expect_normal(|x| 1.0 / (x - 1.0), 1.0, 1.0).is_err());
        assert!(expect_normal(|x| x, f64::NAN, 1.0).is_err());
    }
}
