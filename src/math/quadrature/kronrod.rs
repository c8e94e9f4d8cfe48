//! The adaptive Gauss–Kronrod rule with 21 points: the second, independent rule that confirms the trapezoid.
//!
//! Source: Piessens et al. 1983, *QUADPACK* (nodes and weights of QK21); bisection of the worst interval first.

use super::Integral;
use super::line::Line;
use crate::math::error::{MathError, Result};
use crate::math::fm;

const NODES: [f64; 11] = [
    0.995_657_163_025_808_1,
    0.973_906_528_517_171_7,
    0.930_157_491_355_708_2,
    0.865_063_366_688_984_5,
    0.780_817_726_586_416_9,
    0.679_409_568_299_024_4,
    0.562_757_134_668_604_7,
    0.433_395_394_129_247_2,
    0.294_392_862_701_460_2,
    0.148_874_338_981_631_22,
    0.0,
];
const KRONROD: [f64; 11] = [
    0.011_694_638_867_371_874,
    0.032_558_162_307_964_725,
    0.054_755_896_574_351_995,
    0.075_039_674_810_919_96,
    0.093_125_454_583_697_6,
    0.109_387_158_802_297_64,
    0.123_491_976_262_065_84,
    0.134_709_217_311_473_34,
    0.142_775_938_577_060_09,
    0.147_739_104_901_338_49,
    0.149_445_554_002_916_9,
];
/// Gauss weights for the odd-numbered nodes above.
const GAUSS: [f64; 5] = [
    0.066_671_344_308_688_14,
    0.149_451_349_150_580_6,
    0.219_086_362_515_982_04,
    0.269_266_719_309_996_35,
    0.295_524_224_714_752_87,
];

/// More intervals than this are an error.
const INTERVAL_CAP: usize = 2000;

#[derive(Clone, Copy)]
struct Piece {
    lo: f64,
    hi: f64,
    value: f64,
    error: f64,
}

fn measure(f: &mut impl FnMut(f64) -> f64, lo: f64, hi: f64) -> Result<Piece> {
    let (middle, half) = (0.5 * (lo + hi), 0.5 * (hi - lo));
    let centre = f(middle);
    let mut kronrod = KRONROD[10] * centre;
    let mut gauss = 0.0;
    for (i, (node, weight)) in NODES.iter().zip(&KRONROD).take(10).enumerate() {
        let pair = f(middle - half * node) + f(middle + half * node);
        kronrod += weight * pair;
        if i % 2 == 1 {
            gauss += GAUSS[i / 2] * pair;
        }
    }
    let (value, error) = (kronrod * half, ((kronrod - gauss) * half).abs());
    if !value.is_finite() {
        return Err(MathError::new(format!("integral: the integrand is not finite between {lo} and {hi}")));
    }
    Ok(Piece { lo, hi, value, error })
}

/// ∫ f over [a, b] to the relative tolerance `tol` (of the integral of |f|'s size, at best 1e−14).
///
/// Precondition: a and b finite, f finite inside, and the mass wide enough to be seen by 21 points: find the highest
/// point first and integrate around it (a black-box rule returns 0 with a small error for a narrow peak). The error
/// reported is the sum of |Kronrod − Gauss|, which is pessimistic. 2000 intervals without reaching the tolerance: an
/// error.
pub fn gk21(mut f: impl FnMut(f64) -> f64, a: f64, b: f64, tol: f64) -> Result<Integral> {
    if !a.is_finite() || !b.is_finite() {
        return Err(MathError::new(format!("integral: the ends {a} and {b} must be finite")));
    }
    let tol = tol.max(1e-14);
    let mut pieces = vec![measure(&mut f, a, b)?];
    loop {
        let value: f64 = pieces.iter().map(|p| p.value).sum();
        let size: f64 = pieces.iter().map(|p| p.value.abs()).sum();
        let error: f64 = pieces.iter().map(|p| p.error).sum();
        // Differences at the level of rounding cannot be made smaller.
        if error <= tol * size || error <= 1e-300 || pieces.iter().all(|p| p.error <= 2e-15 * size) {
            return Ok(Integral { value, error });
        }
        if pieces.len() >= INTERVAL_CAP {
            return Err(MathError::new(format!(
                "integral: error {error} of {value} after {INTERVAL_CAP} intervals"
            )));
        }
        let mut worst = 0;
        for (i, piece) in pieces.iter().enumerate() {
            if piece.error > pieces[worst].error {
                worst = i;
            }
        }
        let Piece { lo, hi, .. } = pieces[worst];
        let middle = 0.5 * (lo + hi);
        if middle <= lo.min(hi) || middle >= lo.max(hi) {
            return Err(MathError::new(format!("integral: not resolved at {middle}")));
        }
        pieces[worst] = measure(&mut f, lo, middle)?;
        pieces.push(measure(&mut f, middle, hi)?);
    }
}

/// Integrates exp(ln_f) again by `gk21`, over the range of the line's nodes split around its highest point, and hands
/// back the relative difference.
///
/// `ln_f` must be the one that the line was made from. A difference above `tolerance`, or a rule that does not converge,
/// is an error: two independent rules that disagree mean that one of them missed something.
pub fn confirm_line(mut ln_f: impl FnMut(f64) -> f64, line: &Line, tolerance: f64) -> Result<f64> {
    let (Some(first), Some(last)) = (line.nodes.first(), line.nodes.last()) else {
        return Err(MathError::new("integral: no nodes to confirm"));
    };
    let top = line.mode;
    let mut ends = vec![first.x];
    for place in [
        top.x - 6.0 * top.left,
        top.x - 1.5 * top.left,
        top.x,
        top.x + 1.5 * top.right,
        top.x + 6.0 * top.right,
    ] {
        if place > ends[ends.len() - 1] && place < last.x {
            ends.push(place);
        }
    }
    ends.push(last.x);
    let mut total = 0.0;
    for pair in ends.windows(2) {
        total += gk21(|x| fm::exp(ln_f(x) - top.ln_height), pair[0], pair[1], 0.1 * tolerance)?.value;
    }
    let difference = fm::exp_m1(fm::ln(total) + top.ln_height - line.ln_integral).abs();
    if difference <= tolerance {
        Ok(difference)
    } else {
        Err(MathError::new(format!(
            "integral: trapezoid and Gauss–Kronrod differ by {difference:e} of the value"
        )))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::quadrature::{LineOptions, line};

    #[test]
    fn both_rules_agree_and_a_missed_peak_is_noticed() {
        let skew = |u: f64| 3.0 * u - fm::exp(u);
        let found = line(skew, 0.0, 1.0, &LineOptions::default()).unwrap();
        // ∫ exp(3u − eᵘ) du = Γ(3) = 2.
        assert!((found.ln_integral - fm::LN_2).abs() < 1e-13);
        assert!(confirm_line(skew, &found, 1e-10).unwrap() < 1e-11);
        let with_bump = |u: f64| fm::ln_add_exp(skew(u), -3.0 - 50.0 * (u + 2.0) * (u + 2.0));
        assert!(confirm_line(with_bump, &found, 1e-10).is_err());
    }

    #[test]
    fn textbook_integrals() {
        assert!((gk21(fm::exp, 0.0, 1.0, 1e-13).unwrap().value - (core::f64::consts::E - 1.0)).abs() < 1e-15);
        // ∫ 1/(1+25x²) over [−1, 1] = (2/5) atan 5.
        let runge = gk21(|x| 1.0 / (1.0 + 25.0 * x * x), -1.0, 1.0, 1e-13).unwrap();
        assert!((runge.value - 0.4 * fm::atan(5.0)).abs() < 1e-14);
        // ∫ √x over [0, 1] = 2/3: an end with infinite slope.
        let root = gk21(f64::sqrt, 0.0, 1.0, 1e-12).unwrap();
        assert!((root.value - 2.0 / 3.0).abs() < 1e-12);
        assert!(gk21(|_| f64::NAN, 0.0, 1.0, 1e-10).is_err());
        assert!(gk21(|x| 1.0 / x, 0.0, 1.0, 1e-10).is_err());
    }
}
