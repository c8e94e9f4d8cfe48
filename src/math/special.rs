//! Small pieces shared by the gamma, beta and Student functions, in forms that do not cancel.

use super::fm;

/// x − ln(1 + x) for x > −1, without loss near 0. `one_plus` is 1 + x with its own accuracy (it matters near 0).
pub(super) fn excess_over_ln(x: f64, one_plus: f64) -> f64 {
    if x.abs() > 0.3 {
        return x - fm::ln(one_plus);
    }
    // ln(1 + x) = 2 artanh r with r = x/(2 + x), and x − 2r = x r.
    let r = x / (2.0 + x);
    let square = r * r;
    let mut sum = 0.0;
    for k in (1..=11).rev() {
        sum = sum * square + 1.0 / f64::from(2 * k + 1);
    }
    x * r - 2.0 * r * square * sum
}

/// The remainder of Stirling's formula: ln Γ(a + 1) − (a ln a − a + ½ ln 2πa), for a > 0.
pub(super) fn stirling_rest(a: f64) -> f64 {
    if a < 12.0 {
        return fm::ln_gamma(a + 1.0) - (a * fm::ln(a) - a + 0.5 * fm::ln(a) + fm::HALF_LN_TWO_PI);
    }
    // Bernoulli numbers B₂ₖ/(2k(2k − 1)).
    const TERMS: [f64; 7] = [
        1.0 / 12.0,
        -1.0 / 360.0,
        1.0 / 1260.0,
        -1.0 / 1680.0,
        1.0 / 1188.0,
        -691.0 / 360_360.0,
        1.0 / 156.0,
    ];
    let inverse = 1.0 / a;
    let square = inverse * inverse;
    TERMS.iter().rev().fold(0.0, |sum, term| sum * square + term) * inverse
}

/// ln Γ(1 + a) for −½ ≤ a ≤ ½, without loss near 0.
///
/// ln Γ(1 + a) = −ln(1 + a) + a(1 − γ) + Σ_{k ≥ 2} (−a)ᵏ (ζ(k) − 1)/k (Abramowitz & Stegun 6.1.33).
pub(super) fn ln_gamma_one_plus(a: f64) -> f64 {
    if a.abs() > 0.5 {
        return fm::ln_gamma(1.0 + a);
    }
    const ONE_MINUS_EULER: f64 = 0.422_784_335_098_467_1;
    let series = ZETA_TERMS.iter().rev().fold(0.0, |sum, term| sum * a + term);
    a * a * series + a * ONE_MINUS_EULER - fm::ln_1p(a)
}

/// (−1)ᵏ (ζ(k) − 1)/k for k from 2 up.
const ZETA_TERMS: [f64; 30] = [
    0.3224670334241132,
    -0.0673523010531981,
    0.020580808427784546,
    -0.007385551028673986,
    0.0028905103307415234,
    -0.001192753911703261,
    0.0005096695247430425,
    -0.00022315475845357939,
    9.945751278180853e-05,
    -4.492623673813314e-05,
    2.050721277567069e-05,
    -9.439488275268397e-06,
    4.374866789907488e-06,
    -2.039215753801366e-06,
    9.55141213040742e-07,
    -4.492469198764566e-07,
    2.1207184805554665e-07,
    -1.0043224823968099e-07,
    4.7698101693639804e-08,
    -2.2711094608943164e-08,
    1.0838659214896955e-08,
    -5.183475041970047e-09,
    2.4836745438024785e-09,
    -1.1921401405860912e-09,
    5.731367241678862e-10,
    -2.7595228851242334e-10,
    1.330476437424449e-10,
    -6.4229645638381e-11,
    3.1044247747322276e-11,
    -1.5021384080754142e-11,
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn stirling_forms_meet_at_their_border() {
        for a in [12.0, 15.0, 40.0] {
            let plain = fm::ln_gamma(a + 1.0) - (a * fm::ln(a) - a + 0.5 * fm::ln(a) + fm::HALF_LN_TWO_PI);
            assert!((stirling_rest(a) - plain).abs() < 1e-13, "{a}");
        }
        // Γ(2) = 1.
        assert!((stirling_rest(1.0) - (1.0 - fm::HALF_LN_TWO_PI)).abs() < 1e-16);
    }

    #[test]
    fn excess_over_ln_near_and_far() {
        for x in [-0.9, -0.3, -0.29, 0.1, 0.29, 0.31, 5.0] {
            assert!((excess_over_ln(x, 1.0 + x) - (x - fm::ln_1p(x))).abs() < 4e-16 * (1.0 + x.abs()), "{x}");
        }
        // x²/2 − x³/3 + …
        let x = 1e-8;
        assert!((excess_over_ln(x, 1.0 + x) / (0.5 * x * x - x * x * x / 3.0) - 1.0).abs() < 1e-15);
    }

    #[test]
    fn ln_gamma_one_plus_meets_ln_gamma() {
        for a in [-0.5, -0.3, 0.2, 0.5] {
            assert!((ln_gamma_one_plus(a) - fm::ln_gamma(1.0 + a)).abs() < 4e-16, "{a}");
        }
    }
}
