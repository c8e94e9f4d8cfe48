//! The regularised incomplete beta function, both tails, quantiles, and ln B.
//!
//! Every function takes x and y = 1 − x apart, because near 1 the difference from 1 is what carries the digits. Methods:
//! the continued fraction of DiDonato & Morris 1992 (ACM TOMS 708, BFRAC) on the side of the mean where it converges; with
//! a shape of 1 or less also the series with positive terms (DLMF 8.17.8). The factor
//! xᵃyᵇ/B(a, b) is formed from deviations around the mean with Stirling's remainders, so that it does not cancel
//! (Loader 2000, *Fast and accurate computation of binomial probabilities*).

use super::error::{MathError, Result, inside_unit, positive};
use super::fm;
use super::normal;
use super::roots::newton_positive;
use super::special::{excess_over_ln, stirling_rest};

/// Iterations grow like the root of the larger shape; shapes to 1e10 stay below this.
const TERM_CAP: usize = 400_000;

/// ln B(a, b) = ln Γ(a) + ln Γ(b) − ln Γ(a + b), without the cancellation of that difference. a, b > 0; else an error.
pub fn ln_beta(a: f64, b: f64) -> Result<f64> {
    positive("ln beta", "a", a)?;
    positive("ln beta", "b", b)?;
    Ok(ln_beta_of_positive(a, b))
}

/// As `ln_beta`, for arguments known to be above 0.
pub(super) fn ln_beta_of_positive(a: f64, b: f64) -> f64 {
    let (small, large) = if a < b { (a, b) } else { (b, a) };
    let total = small + large;
    let ln_rest_share = fm::ln_1p(-small / total);
    if small >= 12.0 {
        let rests = stirling_rest(small) + stirling_rest(large) - stirling_rest(total);
        fm::HALF_LN_TWO_PI - 0.5 * fm::ln(large)
            + rests
            + (small - 0.5) * fm::ln(small / total)
            + large * ln_rest_share
    } else if large >= 12.0 {
        let rests = stirling_rest(large) - stirling_rest(total);
        fm::ln_gamma(small) + rests + small - small * fm::ln(total) + (large - 0.5) * ln_rest_share
    } else {
        fm::ln_gamma(small) + (fm::ln_gamma(large) - fm::ln_gamma(total))
    }
}

/// ln of xᵃ yᵇ / B(a, b).
fn ln_front(a: f64, b: f64, x: f64, y: f64) -> f64 {
    if a >= 12.0 && b >= 12.0 {
        let total = a + b;
        let gap = b * x - a * y;
        let from_a = deviation(a, gap / a, total * (x / a));
        let from_b = deviation(b, -gap / b, total * (y / b));
        let rests = stirling_rest(a) + stirling_rest(b) - stirling_rest(total);
        return 0.5 * fm::ln(a / total * b / (2.0 * fm::PI)) - rests - from_a - from_b;
    }
    let ln_x = if x > 0.5 { fm::ln_1p(-y) } else { fm::ln(x) };
    let ln_y = if y > 0.5 { fm::ln_1p(-x) } else { fm::ln(y) };
    a * ln_x + b * ln_y - ln_beta_of_positive(a, b)
}

fn deviation(shape: f64, relative: f64, ratio: f64) -> f64 {
    if ratio > 0.0 { shape * excess_over_ln(relative, ratio) } else { f64::INFINITY }
}

/// One tail: (is it the upper one, ln of its scale, its factor).
fn tail(a: f64, b: f64, x: f64, y: f64) -> Result<(bool, f64, f64)> {
    let total = a + b;
    if a > 1.0 && b > 1.0 {
        let upper = b * x > a * y;
        let (own, other, at, complement) = if upper { (b, a, y, x) } else { (a, b, x, y) };
        let factor = fraction(own, other, at, complement)?;
        return Ok((upper, ln_front(a, b, x, y), factor));
    }
    // With a shape of 1 or less: which side's series or fraction is short.
    let upper = if a <= 1.0 && b <= 1.0 { x > 0.5 } else { x > (a + 1.0) / (total + 2.0) };
    let (own, other, at, complement) = if upper { (b, a, y, x) } else { (a, b, x, y) };
    let factor = if at <= 0.7 && (own + other) * at < 50.0 {
        series(own, other, at)? / own
    } else {
        fraction(own, other, at, complement)?
    };
    Ok((upper, ln_front(a, b, x, y), factor))
}

/// DiDonato & Morris's fraction: I_x(a, b) = front · result, for x at or below the mean (or not far above).
fn fraction(a: f64, b: f64, x: f64, y: f64) -> Result<f64> {
    let lambda = a * y - b * x;
    let c = 1.0 + lambda;
    let c0 = b / a;
    let c1 = 1.0 + 1.0 / a;
    let y_plus_one = y + 1.0;
    let (mut p, mut s) = (1.0, a + 1.0);
    let (mut an, mut bn, mut an_next, mut bn_next) = (0.0, 1.0, 1.0, c / c1);
    let mut r = c1 / c;
    for n in 1..TERM_CAP {
        let n = n as f64;
        let t = n / a;
        let w = n * (b - n) * x;
        let e = a / s;
        let alpha = p * (p + c0) * e * e * (w * x);
        let e = (1.0 + t) / (c1 + t + t);
        let beta = n + w / s + e * (c + n * y_plus_one);
        p = 1.0 + t;
        s += 2.0;
        let next = alpha * an + beta * an_next;
        an = an_next;
        an_next = next;
        let next = alpha * bn + beta * bn_next;
        bn = bn_next;
        bn_next = next;
        let before = r;
        r = an_next / bn_next;
        if (r - before).abs() <= 1e-16 * r {
            return Ok(r);
        }
        an /= bn_next;
        bn /= bn_next;
        an_next = r;
        bn_next = 1.0;
    }
    Err(MathError::new(format!("incomplete beta: no convergence at shapes {a}, {b}, x {x}")))
}

/// Σ (a + b)ₙ/(a + 1)ₙ xⁿ: I_x(a, b) = front/a · sum.
fn series(a: f64, b: f64, x: f64) -> Result<f64> {
    let (mut sum, mut term) = (1.0, 1.0);
    for n in 0..TERM_CAP {
        let n = n as f64;
        term *= (a + b + n) / (a + 1.0 + n) * x;
        sum += term;
        if term <= 1e-17 * sum {
            return Ok(sum);
        }
    }
    Err(MathError::new(format!("incomplete beta: no convergence at shapes {a}, {b}, x {x}")))
}

fn checked(a: f64, b: f64, x: f64, y: f64) -> Result<()> {
    positive("incomplete beta", "a", a)?;
    positive("incomplete beta", "b", b)?;
    let inside = (0.0..=1.0).contains(&x) && (0.0..=1.0).contains(&y) && ((x + y) - 1.0).abs() < 1e-14;
    if inside {
        Ok(())
    } else {
        Err(MathError::new(format!("incomplete beta: x {x} and 1 − x {y} must lie in 0 … 1 and add to 1")))
    }
}

/// I_x(a, b), the chance that a beta variable is at most x; `y` is 1 − x with its own accuracy. a, b > 0; else an error.
pub fn cdf(a: f64, b: f64, x: f64, y: f64) -> Result<f64> {
    checked(a, b, x, y)?;
    if x == 0.0 || y == 0.0 {
        return Ok(if x == 0.0 { 0.0 } else { 1.0 });
    }
    let (upper, ln_scale, factor) = tail(a, b, x, y)?;
    let value = (factor * fm::exp(ln_scale)).min(1.0);
    Ok(if upper { 1.0 - value } else { value })
}

/// 1 − I_x(a, b), the chance that a beta variable is more than x, with its own relative accuracy.
pub fn sf(a: f64, b: f64, x: f64, y: f64) -> Result<f64> {
    cdf(b, a, y, x)
}

/// ln I_x(a, b), also where it is too small to be written.
pub fn ln_cdf(a: f64, b: f64, x: f64, y: f64) -> Result<f64> {
    checked(a, b, x, y)?;
    if x == 0.0 || y == 0.0 {
        return Ok(if x == 0.0 { f64::NEG_INFINITY } else { 0.0 });
    }
    let (upper, ln_scale, factor) = tail(a, b, x, y)?;
    Ok(if upper {
        fm::ln_1p(-(factor * fm::exp(ln_scale)).min(1.0))
    } else {
        (ln_scale + fm::ln(factor)).min(0.0)
    })
}

/// ln(1 − I_x(a, b)).
pub fn ln_sf(a: f64, b: f64, x: f64, y: f64) -> Result<f64> {
    ln_cdf(b, a, y, x)
}

/// The x with I_x(a, b) = p, and 1 − x with its own accuracy. 0 < p < 1.
pub fn quantile(a: f64, b: f64, p: f64) -> Result<(f64, f64)> {
    inside_unit("beta quantile", "p", p)?;
    positive("beta quantile", "a", a)?;
    positive("beta quantile", "b", b)?;
    // 1 − p is exact for p from ½ up.
    if p <= 0.5 {
        lower_root(a, b, p)
    } else {
        let (y, x) = lower_root(b, a, 1.0 - p)?;
        Ok((x, y))
    }
}

/// The x with chance q above it, and 1 − x. 0 < q < 1.
pub fn upper_quantile(a: f64, b: f64, q: f64) -> Result<(f64, f64)> {
    let (y, x) = quantile(b, a, q)?;
    Ok((x, y))
}

/// (x, 1 − x) with I_x(a, b) = p ≤ ½: Newton on ln I in ln x, or in ln(1 − x) when the root is above ½.
fn lower_root(a: f64, b: f64, p: f64) -> Result<(f64, f64)> {
    let ln_wanted = fm::ln(p);
    let in_x = ln_cdf(a, b, 0.5, 0.5)? >= ln_wanted;
    let (mean, sd) = (a / (a + b), (a / (a + b) * (b / (a + b)) / (a + b + 1.0)).sqrt());
    let guess = mean + normal::quantile(p)? * sd;
    let start = if in_x {
        // The lower tail rises like a power of x: for small shapes start from that power.
        let power = fm::exp((ln_wanted + fm::ln(a) + ln_beta_of_positive(a, b)) / a);
        if a > 2.0 && guess > 0.1 * mean { guess } else { power.min(0.4) }
    } else {
        let rest = 1.0 - guess;
        if rest > 0.0 && rest < 0.5 { rest } else { 0.25 }
    };
    let mut failure = None;
    let root = newton_positive(
        |near| {
            let (x, y) = if in_x { (near, 1.0 - near) } else { (1.0 - near, near) };
            let ln_tail = match ln_cdf(a, b, x, y) {
                Ok(value) => value,
                Err(e) => {
                    failure = Some(e);
                    return (f64::NAN, f64::NAN);
                }
            };
            // d ln I/d ln x = front/(y I); with respect to ln y: −front/(x I).
            let slope = fm::exp(ln_front(a, b, x, y) - ln_tail);
            if in_x { (ln_tail - ln_wanted, slope / y) } else { (ln_wanted - ln_tail, slope / x) }
        },
        start,
        0.0,
        0.5,
        1e-15,
    );
    if let Some(e) = failure {
        return Err(e);
    }
    let near = root.map_err(|e| e.within("beta quantile"))?;
    if near < 1e-307 {
        return Err(MathError::new(format!(
            "beta quantile: nearer than 1e-307 to an end at shapes {a}, {b}"
        )));
    }
    Ok(if in_x { (near, 1.0 - near) } else { (1.0 - near, near) })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn closed_forms() {
        for x in [1e-12, 0.01, 0.3, 0.6, 0.999] {
            let y = 1.0 - x;
            assert!((cdf(1.0, 1.0, x, y).unwrap() / x - 1.0).abs() < 1e-14);
            // I_x(2, 3) = 6x² − 8x³ + 3x⁴; I_x(½, ½) = (2/π) arcsin √x.
            let poly = x * x * (6.0 - 8.0 * x + 3.0 * x * x);
            assert!((cdf(2.0, 3.0, x, y).unwrap() / poly - 1.0).abs() < 1e-14);
            let arcsine = 2.0 / fm::PI * fm::atan((x / y).sqrt());
            assert!((cdf(0.5, 0.5, x, y).unwrap() / arcsine - 1.0).abs() < 1e-14);
            assert!((cdf(7.0, 1.0, x, y).unwrap() / fm::whole_power(x, 7) - 1.0).abs() < 1e-13);
        }
        assert!((ln_beta(2.0, 3.0).unwrap() + fm::ln(12.0)).abs() < 1e-15);
    }

    #[test]
    fn bad_arguments_are_errors() {
        assert!(cdf(0.0, 1.0, 0.5, 0.5).is_err());
        assert!(cdf(1.0, f64::NAN, 0.5, 0.5).is_err());
        assert!(cdf(1.0, 1.0, 0.5, 0.4).is_err());
        assert!(cdf(1.0, 1.0, f64::NAN, 0.5).is_err());
        assert!(quantile(1.0, 1.0, 0.0).is_err());
        assert_eq!(cdf(2.0, 2.0, 0.0, 1.0).unwrap(), 0.0);
    }
}
