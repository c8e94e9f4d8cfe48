//! Maps from the whole line to a half line or an interval, with the logarithm of their slope.
//!
//! ∫ f(x) dx = ∫ f(x(u)) x'(u) du: a log integrand in u is `ln f(x) + ln_slope`.

use crate::math::fm;

/// A point of the domain and ln |dx/du| there.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Mapped {
    /// The point in the domain.
    pub x: f64,
    /// The logarithm of the map's slope.
    pub ln_slope: f64,
}

/// (0, ∞) by x = eᵘ.
pub fn positive(u: f64) -> Mapped {
    Mapped { x: fm::exp(u), ln_slope: u }
}

/// (0, 1) by the logistic function; also returns 1 − x with its own accuracy.
pub fn unit(u: f64) -> (Mapped, f64) {
    let small = fm::exp(-u.abs());
    let near_one = 1.0 / (1.0 + small);
    let near_zero = small * near_one;
    let (x, complement) = if u >= 0.0 { (near_one, near_zero) } else { (near_zero, near_one) };
    (Mapped { x, ln_slope: -u.abs() - 2.0 * fm::ln_1p(small) }, complement)
}

/// (lo, hi), both finite, by the logistic function.
pub fn interval(u: f64, lo: f64, hi: f64) -> Mapped {
    let (inner, complement) = unit(u);
    let width = hi - lo;
    let x = if u < 0.0 { lo + width * inner.x } else { hi - width * complement };
    Mapped { x, ln_slope: inner.ln_slope + fm::ln(width) }
}

/// (lo, ∞) by x = lo + eᵘ.
pub fn above(u: f64, lo: f64) -> Mapped {
    Mapped { x: lo + fm::exp(u), ln_slope: u }
}

/// (−∞, hi) by x = hi − eᵘ (x falls as u rises).
pub fn below(u: f64, hi: f64) -> Mapped {
    Mapped { x: hi - fm::exp(u), ln_slope: u }
}

/// The whole line by x = centre + scale · sinh u: tails that fall like a power of x fall exponentially in u.
pub fn stretched(u: f64, centre: f64, scale: f64) -> Mapped {
    let size = u.abs();
    // ln cosh u without overflow.
    let ln_cosh = size + fm::ln_1p(fm::exp(-2.0 * size)) - fm::LN_2;
    Mapped { x: centre + scale * fm::sinh(u), ln_slope: fm::ln(scale) + ln_cosh }
}
