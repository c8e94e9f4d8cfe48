//! The elementary functions, all from the pinned `libm` crate.
//!
//! The platform's own `exp`, `ln`, `pow`, `sin` differ in the last bit between systems and processors; the `libm` crate
//! is plain Rust without contraction, so the same bits come out everywhere. `+ - * /`, `sqrt` and `abs` are rounded
//! correctly by every platform and need no wrapper. Error of each function here: at most 1 unit in the last place
//! (`erfc` 3). Arguments outside the domain give NaN, as in IEEE 754.

/// π.
pub const PI: f64 = core::f64::consts::PI;
/// ln 2.
pub const LN_2: f64 = core::f64::consts::LN_2;
/// ½ ln 2π, the logarithm of the normal density's constant.
pub const HALF_LN_TWO_PI: f64 = 0.918_938_533_204_672_8;
/// 1/√2π, the normal density at 0.
pub const INV_SQRT_TWO_PI: f64 = 0.398_942_280_401_432_7;

/// eˣ.
#[inline]
pub fn exp(x: f64) -> f64 {
    libm::exp(x)
}

/// eˣ − 1 without loss near 0.
#[inline]
pub fn exp_m1(x: f64) -> f64 {
    libm::expm1(x)
}

/// The natural logarithm.
#[inline]
pub fn ln(x: f64) -> f64 {
    libm::log(x)
}

/// ln(1 + x) without loss near 0.
#[inline]
pub fn ln_1p(x: f64) -> f64 {
    libm::log1p(x)
}

/// The logarithm to base 10 (for the placing of digits and ticks).
#[inline]
pub fn log10(x: f64) -> f64 {
    libm::log10(x)
}

/// x to the power y.
#[inline]
pub fn pow(x: f64, y: f64) -> f64 {
    libm::pow(x, y)
}

/// x to a whole power, by repeated products (the standard library's `powi` has no fixed bits).
#[inline]
pub fn whole_power(x: f64, n: u32) -> f64 {
    let (mut result, mut base, mut left) = (1.0, x, n);
    while left > 0 {
        if left & 1 == 1 {
            result *= base;
        }
        base *= base;
        left >>= 1;
    }
    result
}

/// √x.
#[inline]
pub fn sqrt(x: f64) -> f64 {
    x.sqrt()
}

/// The sine of x radians.
#[inline]
pub fn sin(x: f64) -> f64 {
    libm::sin(x)
}

/// The cosine of x radians.
#[inline]
pub fn cos(x: f64) -> f64 {
    libm::cos(x)
}

/// The tangent of x radians.
#[inline]
pub fn tan(x: f64) -> f64 {
    libm::tan(x)
}

/// The arc tangent, in radians.
#[inline]
pub fn atan(x: f64) -> f64 {
    libm::atan(x)
}

/// The hyperbolic sine.
#[inline]
pub fn sinh(x: f64) -> f64 {
    libm::sinh(x)
}

/// The inverse hyperbolic sine.
#[inline]
pub fn asinh(x: f64) -> f64 {
    libm::asinh(x)
}

/// The error function.
#[inline]
pub fn erf(x: f64) -> f64 {
    libm::erf(x)
}

/// The complementary error function.
#[inline]
pub fn erfc(x: f64) -> f64 {
    libm::erfc(x)
}

/// ln |Γ(x)|.
#[inline]
pub fn ln_gamma(x: f64) -> f64 {
    libm::lgamma(x)
}

/// m · 2ᵉ, rounded once.
#[inline]
pub fn scale_by_power_of_two(m: f64, e: i32) -> f64 {
    libm::ldexp(m, e)
}

/// The largest whole number not above x.
#[inline]
pub fn floor(x: f64) -> f64 {
    libm::floor(x)
}

/// The smallest whole number not below x.
#[inline]
pub fn ceil(x: f64) -> f64 {
    libm::ceil(x)
}

/// x to the nearest whole number, halves away from 0.
#[inline]
pub fn round(x: f64) -> f64 {
    libm::round(x)
}

/// ln(eᵃ + eᵇ) without overflow; −∞ stands for the logarithm of 0.
#[inline]
pub fn ln_add_exp(a: f64, b: f64) -> f64 {
    let (high, low) = if a > b { (a, b) } else { (b, a) };
    if high == f64::NEG_INFINITY { high } else { high + ln_1p(exp(low - high)) }
}

/// ln Σ exp(vᵢ) without overflow; −∞ for an empty slice. The terms are added in the order given.
pub fn ln_sum_exp(values: &[f64]) -> f64 {
    let highest = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if !highest.is_finite() {
        return if values.iter().any(|v| v.is_nan()) { f64::NAN } else { highest };
    }
    highest + ln(values.iter().map(|v| exp(v - highest)).sum::<f64>())
}
