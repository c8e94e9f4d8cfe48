//! The standard normal distribution: both tails, their logarithms, both quantiles.
//!
//! Source of the tails: W. J. Cody 1969, *Rational Chebyshev approximations for the error function* (Math. Comp. 23),
//! in the form of the algorithm ANORM (Cody 1993, ACM TOMS 715): the normal integral is a rational function times
//! exp(−z²/2), and the exponent is formed from a z cut to sixteenths, so that a far tail keeps its relative accuracy.
//! Source of the quantile: M. J. Wichura 1988, algorithm AS 241 (Applied Statistics 37), PPND16.

use super::error::{Result, inside_unit};
use super::fm;

const CENTRE_LIMIT: f64 = 0.67448975;
const MIDDLE_LIMIT: f64 = 5.656_854_249_492_381; // √32, Cody's change from one rational form to the next

const CENTRE_NUM: [f64; 5] = [
    2.235_252_035_460_684,
    161.028_231_068_555_88,
    1_067.689_485_460_371,
    18_154.981_253_343_56,
    0.065_682_337_918_207_45,
];
const CENTRE_DEN: [f64; 4] =
    [47.202_581_904_688_245, 976.098_551_737_776_7, 10_260.932_208_618_979, 45_507.789_335_026_73];
const MIDDLE_NUM: [f64; 9] = [
    0.398_941_512_088_134_66,
    8.883_149_794_388_377,
    93.506_656_132_177_85,
    597.270_276_394_800_2,
    2_494.537_585_290_372_6,
    6_848.190_450_536_283,
    11_602.651_437_647_35,
    9_842.714_838_383_978,
    1.076_557_677_372_019_2e-8,
];
const MIDDLE_DEN: [f64; 8] = [
    22.266_688_044_328_117,
    235.387_901_782_625,
    1_519.377_599_407_554_7,
    6_485.558_298_266_761,
    18_615.571_640_885_097,
    34_900.952_721_145_98,
    38_912.003_286_093_27,
    19_685.429_676_859_992,
];
const FAR_NUM: [f64; 6] = [
    0.215_898_534_057_957,
    0.127_401_161_160_247_36,
    0.022_235_277_870_649_807,
    0.001_421_619_193_227_893_4,
    2.911_287_495_116_879_3e-5,
    0.023_073_441_764_940_174,
];
const FAR_DEN: [f64; 5] = [
    1.284_260_096_144_911,
    0.468_238_212_480_865_1,
    0.065_988_137_868_928_56,
    0.003_782_396_332_027_582_4,
    7.297_515_550_839_662e-5,
];

/// Φ(z) − ½ for |z| up to the quartile.
#[inline]
fn centre(z: f64) -> f64 {
    let square = z * z;
    let mut num = CENTRE_NUM[4] * square;
    let mut den = square;
    for (a, b) in CENTRE_NUM.iter().zip(&CENTRE_DEN).take(3) {
        num = (num + a) * square;
        den = (den + b) * square;
    }
    z * (num + CENTRE_NUM[3]) / (den + CENTRE_DEN[3])
}

/// exp(y²/2) · (1 − Φ(y)) for y above the quartile: the tail without its exponential.
#[inline]
fn scaled_tail(y: f64) -> f64 {
    if y <= MIDDLE_LIMIT {
        let mut num = MIDDLE_NUM[8] * y;
        let mut den = y;
        for (c, d) in MIDDLE_NUM.iter().zip(&MIDDLE_DEN).take(7) {
            num = (num + c) * y;
            den = (den + d) * y;
        }
        (num + MIDDLE_NUM[7]) / (den + MIDDLE_DEN[7])
    } else {
        let inverse_square = 1.0 / (y * y);
        let mut num = FAR_NUM[5] * inverse_square;
        let mut den = inverse_square;
        for (p, q) in FAR_NUM.iter().zip(&FAR_DEN).take(4) {
            num = (num + p) * inverse_square;
            den = (den + q) * inverse_square;
        }
        let correction = inverse_square * (num + FAR_NUM[4]) / (den + FAR_DEN[4]);
        (fm::INV_SQRT_TWO_PI - correction) / y
    }
}

/// 1 − Φ(y) for y above the quartile.
#[inline]
fn far_tail(y: f64) -> f64 {
    if y > 39.0 {
        return 0.0;
    }
    cut_bell(y) * scaled_tail(y)
}

/// exp(−y²/2) for 0 ≤ y ≤ 39, with the exponent split so that y² is not rounded.
#[inline]
fn cut_bell(y: f64) -> f64 {
    let cut = ((y * 16.0) as i64) as f64 / 16.0;
    let rest = (y - cut) * (y + cut);
    fm::exp(-0.5 * cut * cut) * fm::exp(-0.5 * rest)
}

/// Φ(z), the chance of a value at or below z. NaN gives NaN. Relative error below 2e−15 from z = −37 up.
#[inline]
pub fn cdf(z: f64) -> f64 {
    if z.is_nan() {
        z
    } else if z.abs() <= CENTRE_LIMIT {
        0.5 + centre(z)
    } else if z < 0.0 {
        far_tail(-z)
    } else {
        0.5 + (0.5 - far_tail(z))
    }
}

/// 1 − Φ(z), the chance of a value above z, with its own relative accuracy.
#[inline]
pub fn sf(z: f64) -> f64 {
    cdf(-z)
}

/// ln Φ(z), for any z (also where Φ itself is too small to be written).
#[inline]
pub fn ln_cdf(z: f64) -> f64 {
    if z < -1.0 { fm::ln(scaled_tail(-z)) - 0.5 * z * z } else { fm::ln_1p(-sf(z)) }
}

/// ln(1 − Φ(z)), for any z.
#[inline]
pub fn ln_sf(z: f64) -> f64 {
    ln_cdf(-z)
}

/// exp(z²/2) · (1 − Φ(z)) for z ≥ 0: the upper tail without its exponential.
#[inline]
pub fn scaled_sf(z: f64) -> f64 {
    if z > CENTRE_LIMIT { scaled_tail(z) } else { (0.5 - centre(z)) * fm::exp(0.5 * z * z) }
}

/// Φ(z) − ½, without loss near 0.
#[inline]
pub fn central(z: f64) -> f64 {
    if z.abs() <= CENTRE_LIMIT {
        centre(z)
    } else if z > 0.0 {
        0.5 - far_tail(z)
    } else {
        far_tail(-z) - 0.5
    }
}

/// Φ(z) and φ(z) together, for the price of one.
#[inline]
pub fn cdf_and_pdf(z: f64) -> (f64, f64) {
    let y = z.abs();
    if y > 39.0 {
        return (if z > 0.0 { 1.0 } else { 0.0 }, 0.0);
    }
    if y.is_nan() {
        return (z, z);
    }
    let bell = cut_bell(y);
    let below = if y <= CENTRE_LIMIT {
        0.5 + centre(z)
    } else if z < 0.0 {
        bell * scaled_tail(y)
    } else {
        0.5 + (0.5 - bell * scaled_tail(y))
    };
    (below, fm::INV_SQRT_TWO_PI * bell)
}

/// The density φ(z).
#[inline]
pub fn pdf(z: f64) -> f64 {
    fm::INV_SQRT_TWO_PI * fm::exp(-0.5 * z * z)
}

/// ln φ(z).
#[inline]
pub fn ln_pdf(z: f64) -> f64 {
    -0.5 * z * z - fm::HALF_LN_TWO_PI
}

/// ln(Φ(b) − Φ(a)) for a ≤ b, taken in the tail where both are small so that nothing cancels; −∞ when a = b.
pub fn ln_interval(a: f64, b: f64) -> f64 {
    if a > 0.0 {
        return ln_interval(-b, -a);
    }
    if b <= 0.0 {
        // Both in the lower tail: ln(e^hi − e^lo).
        let (low, high) = (ln_cdf(a), ln_cdf(b));
        let step = b - a;
        // For a narrow interval the difference of logarithms cancels; the midpoint density is then exact enough.
        if step * (1.0 + a.abs()) < 1e-5 {
            let middle = 0.5 * (a + b);
            return if step > 0.0 { ln_pdf(middle) + fm::ln(step) } else { f64::NEG_INFINITY };
        }
        return high + fm::ln(-fm::exp_m1(low - high));
    }
    let (below, above) = (cdf(a), sf(b));
    if below + above < 0.5 {
        fm::ln_1p(-(below + above))
    } else if b - a < 1e-5 {
        ln_pdf(0.5 * (a + b)) + fm::ln(b - a)
    } else {
        fm::ln((0.5 - below) + (0.5 - above))
    }
}

/// exp(x²) erfc(x), the scaled complementary error function.
#[inline]
pub fn erfcx(x: f64) -> f64 {
    let z = x * core::f64::consts::SQRT_2;
    if z > CENTRE_LIMIT {
        // The rounding of z is harmless here: the scaled tail varies only like 1/z.
        2.0 * scaled_tail(z)
    } else {
        fm::exp(x * x) * fm::erfc(x)
    }
}

const NEAR_NUM: [f64; 8] = [
    3.387_132_872_796_366_5,
    133.141_667_891_784_38,
    1_971.590_950_306_551_3,
    13_731.693_765_509_46,
    45_921.953_931_549_87,
    67_265.770_927_008_7,
    33_430.575_583_588_13,
    2_509.080_928_730_122_7,
];
const NEAR_DEN: [f64; 8] = [
    1.0,
    42.313_330_701_600_91,
    687.187_007_492_057_9,
    5_394.196_021_424_751,
    21_213.794_301_586_597,
    39_307.895_800_092_71,
    28_729.085_735_721_943,
    5_226.495_278_852_854,
];
const TAIL_NUM: [f64; 8] = [
    1.423_437_110_749_683_5,
    4.630_337_846_156_546,
    5.769_497_221_460_691,
    3.647_848_324_763_204_5,
    1.270_458_252_452_368_4,
    0.241_780_725_177_450_6,
    0.022_723_844_989_269_184,
    7.745_450_142_783_414e-4,
];
const TAIL_DEN: [f64; 8] = [
    1.0,
    2.053_191_626_637_759,
    1.676_384_830_183_803_8,
    0.689_767_334_985_1,
    0.148_103_976_427_480_08,
    0.015_198_666_563_616_457,
    5.475_938_084_995_345e-4,
    1.050_750_071_644_416_9e-9,
];
const DEEP_NUM: [f64; 8] = [
    6.657_904_643_501_103,
    5.463_784_911_164_114,
    1.784_826_539_917_291_3,
    0.296_560_571_828_504_87,
    0.026_532_189_526_576_124,
    0.001_242_660_947_388_078_4,
    2.711_555_568_743_487_6e-5,
    2.010_334_399_292_288_1e-7,
];
const DEEP_DEN: [f64; 8] = [
    1.0,
    0.599_832_206_555_888,
    0.136_929_880_922_735_8,
    0.014_875_361_290_850_615,
    7.868_691_311_456_133e-4,
    1.846_318_317_510_054_8e-5,
    1.421_511_758_316_446e-7,
    2.044_263_103_389_939_8e-15,
];

/// Σ cₖ xᵏ, coefficients from the constant term up.
fn polynomial(coefficients: &[f64; 8], x: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, c| sum * x + c)
}

/// The z with Φ(z) = p. `p` must lie strictly between 0 and 1. Relative error below 2e−15 down to p = 1e−300.
pub fn quantile(p: f64) -> Result<f64> {
    inside_unit("normal quantile", "p", p)?;
    let from_half = p - 0.5;
    if from_half.abs() <= 0.425 {
        let r = 0.180625 - from_half * from_half;
        return Ok(from_half * polynomial(&NEAR_NUM, r) / polynomial(&NEAR_DEN, r));
    }
    // 1 − p is exact here: p is above ½.
    let tail = if from_half < 0.0 { p } else { 1.0 - p };
    let size = deep_quantile(-fm::ln(tail));
    Ok(if from_half < 0.0 { -size } else { size })
}

/// |z| from −ln of the tail's probability (below 0.075).
fn deep_quantile(minus_ln_tail: f64) -> f64 {
    let r = minus_ln_tail.sqrt();
    if r <= 5.0 {
        let r = r - 1.6;
        polynomial(&TAIL_NUM, r) / polynomial(&TAIL_DEN, r)
    } else {
        let r = r - 5.0;
        polynomial(&DEEP_NUM, r) / polynomial(&DEEP_DEN, r)
    }
}

/// The z with 1 − Φ(z) = q: the quantile from the upper tail, for q strictly between 0 and 1.
pub fn upper_quantile(q: f64) -> Result<f64> {
    inside_unit("normal upper quantile", "q", q)?;
    Ok(-quantile(q)?)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tails_mirror_and_add_to_one() {
        for z in [-30.0, -8.3, -2.0, -0.6, 0.0, 0.3, 0.7, 1.5, 5.0, 5.7, 20.0] {
            assert_eq!(cdf(z), sf(-z));
            assert!((cdf(z) + sf(z) - 1.0).abs() < 3e-16);
        }
        assert_eq!(cdf(0.0), 0.5);
        assert!(cdf(f64::NAN).is_nan());
        assert_eq!(cdf(f64::INFINITY), 1.0);
        assert_eq!(cdf(f64::NEG_INFINITY), 0.0);
        assert_eq!(ln_cdf(f64::NEG_INFINITY), f64::NEG_INFINITY);
        assert_eq!(ln_cdf(f64::INFINITY), 0.0);
    }

    #[test]
    fn bad_probabilities_are_errors() {
        for p in [0.0, 1.0, -0.1, 1.1, f64::NAN] {
            assert!(quantile(p).is_err());
            assert!(upper_quantile(p).is_err());
        }
    }

    #[test]
    fn interval_logarithm_meets_plain_difference() {
        for (a, b) in [(-1.0, 1.5), (-3.0, -1.0), (0.5, 0.8), (-0.2, 0.3), (2.0, 9.0)] {
            let plain = if a > 0.0 { sf(a) - sf(b) } else { cdf(b) - cdf(a) };
            assert!((fm::exp(ln_interval(a, b)) / plain - 1.0).abs() < 1e-13, "{a} {b}");
        }
        // A far interval: dominated by its near end, ln sf(40) to the accuracy of sf(41)/sf(40) = 2.6e-18.
        assert!((ln_interval(40.0, 41.0) - ln_sf(40.0)).abs() < 1e-12);
    }
}
