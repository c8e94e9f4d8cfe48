//! The elementary functions, all but `exp` from the pinned `libm` crate.
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

/// eˣ. Most of the time of a review goes here, and half of it is saved by a form without division and without a call:
/// x = k ln 2 + r with |r| ≤ ½ ln 2 (Cody & Waite 1980), eʳ by its series to r¹³ (what is left out is below 1e−17),
/// and 2ᵏ by its exponent. Only + and ×: the same bits everywhere.
#[inline]
pub fn exp(x: f64) -> f64 {
    // The upper part of ln 2 has trailing zeros, so that k times it is exact.
    const LN_2_UPPER: f64 = 0.693_147_180_369_123_8;
    const LN_2_LOWER: f64 = 1.908_214_929_270_587_7e-10;
    // 1.5 · 2⁵²: added, it rounds to a whole number and leaves that in the lowest bits.
    const ROUNDS: f64 = 6_755_399_441_055_744.0;
    if x.is_nan() || x.abs() >= 708.0 {
        return libm::exp(x);
    }
    let shifted = x * core::f64::consts::LOG2_E + ROUNDS;
    let k = shifted - ROUNDS;
    let r = (x - k * LN_2_UPPER) - k * LN_2_LOWER;
    let r2 = r * r;
    let r4 = r2 * r2;
    let low = (1.0 / 2.0 + r * (1.0 / 6.0)) + r2 * (1.0 / 24.0 + r * (1.0 / 120.0));
    let middle = (1.0 / 720.0 + r * (1.0 / 5040.0)) + r2 * (1.0 / 40_320.0 + r * (1.0 / 362_880.0));
    let high = (1.0 / 3_628_800.0 + r * (1.0 / 39_916_800.0))
        + r2 * (1.0 / 479_001_600.0 + r * (1.0 / 6_227_020_800.0));
    let series = 1.0 + (r + r2 * (low + r4 * (middle + r4 * high)));
    series * f64::from_bits(shifted.to_bits().wrapping_add(1023) << 52)
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
