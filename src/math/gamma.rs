//! The regularised incomplete gamma functions P and Q, their quantiles, digamma and trigamma.
//!
//! P(a, x) is the chance that a gamma variable of shape a and scale 1 is at most x, Q(a, x) that it is more. Methods: the
//! power series below the shape, Legendre's continued fraction above it (Abramowitz & Stegun 6.5.29, 6.5.31), Temme's
//! uniform expansion near a large shape; the factor xᵃe⁻ˣ/Γ(a + 1) is formed with Stirling's remainder so that it does
//! not cancel (Loader 2000; DiDonato & Morris 1986, ACM TOMS 12).

use super::error::{MathError, Result, inside_unit, positive};
use super::fm;
use super::gamma_temme;
use super::normal;
use super::roots::newton_positive;
use super::special::{excess_over_ln, ln_gamma_one_plus, stirling_rest};

const TERM_CAP: usize = 10_000;

/// One tail as factor · exp(ln_scale), the other as its complement (only where that loses nothing), or both.
#[derive(Debug, Clone, Copy)]
enum Tails {
    Lower { ln_scale: f64, factor: f64 },
    Upper { ln_scale: f64, factor: f64 },
    Both { lower: f64, upper: f64 },
}

/// P(a, x) for a > 0, x ≥ 0. Errors: arguments out of range.
pub fn p(a: f64, x: f64) -> Result<f64> {
    Ok(match tails(a, x)? {
        Tails::Lower { ln_scale, factor } => (factor * fm::exp(ln_scale)).min(1.0),
        Tails::Upper { ln_scale, factor } => 1.0 - (factor * fm::exp(ln_scale)).min(1.0),
        Tails::Both { lower, .. } => lower,
    })
}

/// Q(a, x) for a > 0, x ≥ 0. Errors: arguments out of range.
pub fn q(a: f64, x: f64) -> Result<f64> {
    Ok(match tails(a, x)? {
        Tails::Upper { ln_scale, factor } => (factor * fm::exp(ln_scale)).min(1.0),
        Tails::Lower { ln_scale, factor } => 1.0 - (factor * fm::exp(ln_scale)).min(1.0),
        Tails::Both { upper, .. } => upper,
    })
}

/// ln P(a, x), also where P is too small to be written.
pub fn ln_p(a: f64, x: f64) -> Result<f64> {
    Ok(match tails(a, x)? {
        Tails::Lower { ln_scale, factor } => (ln_scale + fm::ln(factor)).min(0.0),
        Tails::Upper { ln_scale, factor } => fm::ln_1p(-(factor * fm::exp(ln_scale)).min(1.0)),
        Tails::Both { lower, upper } => {
            if lower < 0.5 {
                fm::ln(lower)
            } else {
                fm::ln_1p(-upper)
            }
        }
    })
}

/// ln Q(a, x), also where Q is too small to be written.
pub fn ln_q(a: f64, x: f64) -> Result<f64> {
    Ok(match tails(a, x)? {
        Tails::Upper { ln_scale, factor } => (ln_scale + fm::ln(factor)).min(0.0),
        Tails::Lower { ln_scale, factor } => fm::ln_1p(-(factor * fm::exp(ln_scale)).min(1.0)),
        Tails::Both { lower, upper } => {
            if upper < 0.5 {
                fm::ln(upper)
            } else {
                fm::ln_1p(-lower)
            }
        }
    })
}

/// ln of xᵃ e⁻ˣ / Γ(a + 1).
fn ln_front(a: f64, x: f64) -> f64 {
    if a < 1.0 {
        let ln_gamma = if a <= 0.5 { ln_gamma_one_plus(a) } else { fm::ln_gamma(a + 1.0) };
        a * fm::ln(x) - x - ln_gamma
    } else if a < 12.0 {
        a * fm::ln(x) - x - fm::ln_gamma(a + 1.0)
    } else {
        let mu = (x - a) / a;
        let ratio = x / a;
        let excess = if ratio < 1e-290 { mu - (fm::ln(x) - fm::ln(a)) } else { excess_over_ln(mu, ratio) };
        -a * excess - 0.5 * fm::ln(2.0 * fm::PI * a) - stirling_rest(a)
    }
}

fn tails(a: f64, x: f64) -> Result<Tails> {
    positive("incomplete gamma", "the shape", a)?;
    if x.is_nan() || x < 0.0 {
        return Err(MathError::argument("incomplete gamma", "x", x, "0 or more"));
    }
    if x == 0.0 {
        return Ok(Tails::Both { lower: 0.0, upper: 1.0 });
    }
    if x == f64::INFINITY {
        return Ok(Tails::Both { lower: 1.0, upper: 0.0 });
    }
    if gamma_temme::applies(a, x) {
        let (upper, ln_scale, factor) = gamma_temme::tail(a, x);
        return Ok(if upper { Tails::Upper { ln_scale, factor } } else { Tails::Lower { ln_scale, factor } });
    }
    if x < 1.5 || x <= a {
        let ln_scale = ln_front(a, x);
        let factor = lower_series(a, x)?;
        if a < 1.0 {
            let lower = factor * fm::exp(ln_scale);
            if lower > 0.8 {
                return Ok(Tails::Both { lower: lower.min(1.0), upper: small_upper(a, x) });
            }
        }
        return Ok(Tails::Lower { ln_scale, factor });
    }
    Ok(Tails::Upper { ln_scale: ln_front(a, x), factor: a * upper_fraction(a, x)? })
}

/// ln of the density xᵃ⁻¹e⁻ˣ/Γ(a) for x > 0.
pub fn ln_density(a: f64, x: f64) -> Result<f64> {
    positive("gamma density", "the shape", a)?;
    positive("gamma density", "x", x)?;
    Ok(ln_front(a, x) + fm::ln(a) - fm::ln(x))
}

/// Σ xⁿ/((a + 1)…(a + n)), so that P = front · sum.
fn lower_series(a: f64, x: f64) -> Result<f64> {
    let (mut sum, mut term, mut divisor) = (1.0, 1.0, a);
    for _ in 0..TERM_CAP {
        divisor += 1.0;
        term *= x / divisor;
        sum += term;
        if term <= 1e-17 * sum {
            return Ok(sum);
        }
    }
    Err(MathError::new(format!("incomplete gamma: no convergence at shape {a}, x {x}")))
}

/// Q for a shape below 1 and x below 1.5, where P is near 1:
/// Q = −(e^L − 1) − e^L Σ_{n ≥ 1} (−x)ⁿ a/((a + n) n!), L = a ln x − ln Γ(1 + a).
fn small_upper(a: f64, x: f64) -> f64 {
    let ln_gamma = if a <= 0.5 { ln_gamma_one_plus(a) } else { fm::ln_gamma(a + 1.0) };
    let exponent = a * fm::ln(x) - ln_gamma;
    let (mut sum, mut power) = (0.0, 1.0);
    for n in 1..60 {
        let n = f64::from(n);
        power *= -x / n;
        let term = power * a / (a + n);
        sum += term;
        if term.abs() <= 1e-18 * sum.abs() {
            break;
        }
    }
    -fm::exp_m1(exponent) - fm::exp(exponent) * sum
}

/// The continued fraction 1/(x + 1 − a − 1(1 − a)/(x + 3 − a − …)) by Lentz's method.
fn upper_fraction(a: f64, x: f64) -> Result<f64> {
    const TINY: f64 = 1e-300;
    let mut b = x + 1.0 - a;
    let mut c = 1.0 / TINY;
    let mut d = 1.0 / b;
    let mut h = d;
    for i in 1..TERM_CAP {
        let i = i as f64;
        let numerator = -i * (i - a);
        b += 2.0;
        d = numerator * d + b;
        if d.abs() < TINY {
            d = TINY;
        }
        c = b + numerator / c;
        if c.abs() < TINY {
            c = TINY;
        }
        d = 1.0 / d;
        let change = c * d;
        h *= change;
        if (change - 1.0).abs() < 2e-16 {
            return Ok(h);
        }
    }
    Err(MathError::new(format!("incomplete gamma: no convergence at shape {a}, x {x}")))
}

/// The x with P(a, x) = p, for p strictly between 0 and 1.
///
/// Solved on the smaller tail by Newton's method in ln x. Errors: arguments out of range; a root below 1e−307.
pub fn quantile(a: f64, p: f64) -> Result<f64> {
    inside_unit("gamma quantile", "p", p)?;
    // 1 − p is exact for p from ½ up.
    if p <= 0.5 { lower_root(a, p) } else { upper_root(a, 1.0 - p) }
}

/// The x with Q(a, x) = q, for q strictly between 0 and 1.
pub fn upper_quantile(a: f64, q: f64) -> Result<f64> {
    inside_unit("gamma upper quantile", "q", q)?;
    if q <= 0.5 { upper_root(a, q) } else { lower_root(a, 1.0 - q) }
}

/// Wilson & Hilferty's cube, for a normal quantile z.
fn cube_start(a: f64, z: f64) -> f64 {
    let root = 1.0 - 1.0 / (9.0 * a) + z / (3.0 * a.sqrt());
    a * root * root * root
}

/// (p Γ(a + 1))^(1/a): P lies below xᵃ/Γ(a + 1), so this is below the quantile.
fn power_bound(a: f64, p: f64) -> f64 {
    let ln_gamma = if a <= 0.5 { ln_gamma_one_plus(a) } else { fm::ln_gamma(a + 1.0) };
    fm::exp((fm::ln(p) + ln_gamma) / a)
}

fn lower_root(a: f64, p: f64) -> Result<f64> {
    positive("gamma quantile", "the shape", a)?;
    let bound = power_bound(a, p);
    if bound < 1e-307 {
        return Err(MathError::new(format!("gamma quantile: below 1e-307 at shape {a}, probability {p}")));
    }
    let cube = if a > 0.3 { cube_start(a, normal::quantile(p)?) } else { 0.0 };
    let lo = 0.999_999 * bound;
    let start = if cube > bound { cube } else { bound };
    let ln_wanted = fm::ln(p);
    // The median of a gamma variable is below its mean a.
    solve(start, lo, a * 1.000_001, |x| {
        let ln_tail = ln_p(a, x)?;
        Ok((ln_tail - ln_wanted, fm::exp(ln_front(a, x) - ln_tail) * a))
    })
}

fn upper_root(a: f64, q: f64) -> Result<f64> {
    positive("gamma quantile", "the shape", a)?;
    let ln_wanted = fm::ln(q);
    // Chernoff: Q(a, a + √(2aL) + L) ≤ e^−L.
    let hi = (a + (-2.0 * a * ln_wanted).sqrt() - ln_wanted) * 1.000_001;
    let lo = 0.999_999 * power_bound(a, 0.5);
    let cube = cube_start(a, -normal::quantile(q)?);
    // Below shape 0.3 the cube is poor; ln Q bends down in ln x, so Newton comes safely from the right.
    let start = if cube > lo && cube < hi && a > 0.3 { cube } else { hi };
    solve(start, lo, hi, |x| {
        let ln_tail = ln_q(a, x)?;
        Ok((ln_wanted - ln_tail, fm::exp(ln_front(a, x) - ln_tail) * a))
    })
}

fn solve(start: f64, lo: f64, hi: f64, mut f: impl FnMut(f64) -> Result<(f64, f64)>) -> Result<f64> {
    let mut failure = None;
    let root = newton_positive(
        |x| {
            f(x).unwrap_or_else(|e| {
                failure = Some(e);
                (f64::NAN, f64::NAN)
            })
        },
        start,
        lo,
        hi,
        1e-15,
    );
    match failure {
        Some(e) => Err(e),
        None => root.map_err(|e| e.within("gamma quantile")),
    }
}

/// ψ(x) = d ln Γ/dx for x > 0: Taylor series around its zero 1.4616…, else recurrence and the asymptotic series
/// (Abramowitz & Stegun 6.3.5, 6.3.18).
pub fn digamma(x: f64) -> Result<f64> {
    positive("digamma", "x", x)?;
    let mut x = x;
    let mut shift = 0.0;
    if x < 0.96 {
        shift = -1.0 / x;
        x += 1.0;
    }
    let from_root = (x - ROOT_HIGH) - ROOT_LOW;
    if from_root.abs() <= 0.55 {
        return Ok(shift + from_root * AROUND_ROOT.iter().rev().fold(0.0, |s, c| s * from_root + c));
    }
    while x < 12.0 {
        shift -= 1.0 / x;
        x += 1.0;
    }
    const TERMS: [f64; 7] =
        [-1.0 / 12.0, 1.0 / 120.0, -1.0 / 252.0, 1.0 / 240.0, -1.0 / 132.0, 691.0 / 32_760.0, -1.0 / 12.0];
    let square = 1.0 / (x * x);
    let series = TERMS.iter().rev().fold(0.0, |s, c| s * square + c) * square;
    Ok(fm::ln(x) - 0.5 / x + series + shift)
}

/// ψ'(x) for x > 0: recurrence and the asymptotic series (Abramowitz & Stegun 6.4.6, 6.4.12).
pub fn trigamma(x: f64) -> Result<f64> {
    positive("trigamma", "x", x)?;
    let mut x = x;
    let mut shift = 0.0;
    while x < 14.0 {
        shift += 1.0 / (x * x);
        x += 1.0;
    }
    const TERMS: [f64; 8] = [
        1.0 / 6.0,
        -1.0 / 30.0,
        1.0 / 42.0,
        -1.0 / 30.0,
        5.0 / 66.0,
        -691.0 / 2730.0,
        7.0 / 6.0,
        -3617.0 / 510.0,
    ];
    let inverse = 1.0 / x;
    let square = inverse * inverse;
    let series = TERMS.iter().rev().fold(0.0, |s, c| s * square + c);
    Ok(inverse + 0.5 * square + inverse * square * series + shift)
}

// The zero of digamma, in two parts.
const ROOT_HIGH: f64 = 1.4616321449683622;
const ROOT_LOW: f64 = 9.549995429965697e-17;
const AROUND_ROOT: [f64; 40] = [
    0.9676722454476212,
    -0.4427631689835921,
    0.258499760955651,
    -0.16394270544240652,
    0.10782405069126237,
    -0.07219956125645471,
    0.04880428816414311,
    -0.03316112647484736,
    0.022597648232218104,
    -0.01542476590494896,
    0.010538791616612175,
    -0.007204534386356869,
    0.004926781395729853,
    -0.003369801655439328,
    0.002305126326734928,
    -0.0015769367714301972,
    0.0010788252019162967,
    -0.0007380709389960052,
    0.000504953265834602,
    -0.0003454680251063077,
    0.00023635601564027053,
    -0.00016170622091974803,
    0.0001106337276874741,
    -7.569179582195066e-05,
    5.178575795222081e-05,
    -3.5430070947659604e-05,
    2.424006611860132e-05,
    -1.6584242271854135e-05,
    1.134638458466385e-05,
    -7.762817668462094e-06,
    5.3110609208898636e-06,
    -3.6336507898010456e-06,
    2.486022733129538e-06,
    -1.7008538854332607e-06,
    1.1636675363548843e-06,
    -7.96142543124197e-07,
    5.446941930669446e-07,
    -3.7266161283438227e-07,
    2.549626552021554e-07,
    -1.7443695117727745e-07,
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn whole_and_half_shapes_meet_their_closed_forms() {
        // Q(1, x) = e⁻ˣ; Q(3, x) = e⁻ˣ(1 + x + x²/2); Q(½, x) = erfc √x.
        for x in [1e-10, 0.1, 1.0, 3.0, 20.0, 600.0] {
            assert!((q(1.0, x).unwrap() / fm::exp(-x) - 1.0).abs() < 1e-13);
            assert!((p(1.0, x).unwrap() / -fm::exp_m1(-x) - 1.0).abs() < 1e-14);
            let three = fm::exp(-x) * (1.0 + x + 0.5 * x * x);
            assert!((q(3.0, x).unwrap() / three - 1.0).abs() < 1e-12);
            assert!((p(0.5, x).unwrap() / fm::erf(x.sqrt()) - 1.0).abs() < 1e-13, "{x}");
        }
        assert!((ln_q(1.0, 5000.0).unwrap() + 5000.0).abs() < 1e-11);
    }

    #[test]
    fn bad_arguments_are_errors() {
        for a in [0.0, -1.0, f64::NAN, f64::INFINITY] {
            assert!(p(a, 1.0).is_err() && quantile(a, 0.1).is_err() && upper_quantile(a, 0.1).is_err());
        }
        for x in [-1.0, f64::NAN] {
            assert!(p(1.0, x).is_err() && q(1.0, x).is_err());
        }
        assert!(quantile(1e-4, 1e-100).is_err());
        assert!(digamma(0.0).is_err() && trigamma(-1.0).is_err());
    }
}
