//! ∫ N(y; mean, var) e^f(y) dy for an f whose curvature lies between −sharpness and 0, as ln of the chance of
//! marked readings does: by the trapezoid rule, whose steps the narrowest that e^f can make of the normal
//! decides (Trefethen & Weideman 2014).

use crate::math::fm;

/// Steps in narrowest sds: exp(−2π²/step²) = 4e−14 is left of the normal whose sd that is.
pub(super) const STEP: f64 = 0.8;
/// Terms so much smaller than the sum are not seen.
pub(super) const UNSEEN: f64 = 1e-16;
const MOST_TERMS: usize = 100_000;

/// The integral and the first two moments of y under the integrand.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Smoothed {
    pub ln: f64,
    pub mean: f64,
    pub var: f64,
}

/// The integral; with an infinite `var` that of e^f alone, `mean` then being a place near its mass. NaN where it
/// needs more than 100,000 terms.
pub(super) fn smoothed(f: &impl Fn(f64) -> f64, mean: f64, var: f64, sharpness: f64) -> Smoothed {
    if var == 0.0 {
        return Smoothed { ln: f(mean), mean, var };
    }
    let precision = 1.0 / var;
    let step = STEP / (precision + sharpness).sqrt();
    let g = |i: f64| {
        let away = i * step;
        f(mean + away) - 0.5 * away * away * precision
    };
    let (start, top) = uphill(&g);
    // Sums of the terms, of their places and of their squares, places from the start in steps.
    let (mut whole, mut first, mut second) = (1.0, 0.0, 0.0);
    for direction in [1.0, -1.0] {
        let (mut i, mut before) = (0.0, 1.0);
        loop {
            i += direction;
            let term = fm::exp(g(start + i) - top);
            whole += term;
            first += term * i;
            second += term * i * i;
            if term <= UNSEEN * whole && term <= before {
                break;
            }
            before = term;
            if i.abs() > MOST_TERMS as f64 || !whole.is_finite() {
                return Smoothed { ln: f64::NAN, mean: f64::NAN, var: f64::NAN };
            }
        }
    }
    let centre = first / whole;
    let height = if var == f64::INFINITY { 1.0 } else { fm::INV_SQRT_TWO_PI * precision.sqrt() };
    Smoothed {
        ln: top + fm::ln(whole * step * height),
        mean: mean + (start + centre) * step,
        var: (second / whole - centre * centre).max(0.0) * step * step,
    }
}

/// A place near the highest point of a concave function, and the value there; steps of 1 or more, from 0.
fn uphill(g: &impl Fn(f64) -> f64) -> (f64, f64) {
    let (mut at, mut here) = (0.0, g(0.0));
    let mut stride = 6.0;
    let mut direction = 1.0;
    for _ in 0..400 {
        let ahead = g(at + direction * stride);
        if ahead > here {
            (at, here) = (at + direction * stride, ahead);
            stride *= 2.0;
            continue;
        }
        let behind = g(at - direction * stride);
        if behind > here {
            (at, here) = (at - direction * stride, behind);
            direction = -direction;
            stride *= 2.0;
        } else if stride <= 6.0 {
            break;
        } else {
            stride *= 0.25;
        }
    }
    (at, here)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::normal;

    #[test]
    fn one_bound_gives_the_normal_law_of_the_sum() {
        // E Φ((c − y)/s) = Φ((c − m)/√(v + s²)).
        for (c, s, m, v) in
            [(0.3, 0.7, 1.0, 2.0), (-9.0, 0.5, 1.0, 1.0), (2.0, 3.0, 0.0, 0.01), (40.0, 1.0, 0.0, 4.0)]
        {
            let f = |y: f64| normal::ln_cdf((c - y) / s);
            let got = smoothed(&f, m, v, 1.0 / (s * s)).ln;
            let wanted = normal::ln_cdf((c - m) / f64::sqrt(v + s * s));
            assert!((got - wanted).abs() < 1e-12 * wanted.abs().max(1.0), "{c}: {got} {wanted}");
        }
    }

    #[test]
    fn a_normal_factor_gives_its_product_and_moments() {
        // e^f = exp(−y²/2w): the product of two normals.
        let (w, m, v): (f64, f64, f64) = (0.3, 2.0, 1.7);
        let got = smoothed(&|y: f64| -0.5 * y * y / w, m, v, 1.0 / w);
        let wanted = 0.5 * fm::ln(w / (v + w)) - 0.5 * m * m / (v + w);
        assert!((got.ln - wanted).abs() < 1e-12);
        assert!((got.mean - m * w / (v + w)).abs() < 1e-12);
        assert!((got.var - v * w / (v + w)).abs() < 1e-12);
    }
}
