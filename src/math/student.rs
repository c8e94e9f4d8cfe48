//! Student's t distribution at any degrees of freedom above 0 (0.5 to 1e8 and beyond), both tails, quantiles, density.
//!
//! Methods: few degrees of freedom, or far out: the incomplete beta series with positive terms (DLMF 8.17.8), of the tail
//! or of the central mass, whichever is small. From 20 degrees of freedom: with s² = ln(1 + t²/ν) the tail is
//! C ∫ₛ exp(−½νr²) g(r) dr, g(r) = r/√(1 − exp(−r²)), and integrating by parts against the Taylor series of g gives a
//! normal tail plus a correction, uniform in t and converging the faster the larger ν (the method of Temme 1982, *The
//! uniform asymptotic expansion of a class of integrals*, applied to this integral; the coefficients are exact rational
//! numbers rounded once).

use super::beta;
use super::error::{MathError, Result, inside_unit, positive};
use super::fm;
use super::normal;
use super::roots::newton_positive;

/// Above ½: 1 − sf of the mirrored value. All for t ≥ 0.
#[derive(Debug, Clone, Copy)]
struct Halves {
    /// P(T > t) = factor · exp(ln_scale).
    ln_scale: f64,
    factor: f64,
    /// P(0 < T < t).
    central: f64,
}

impl Halves {
    fn tail(&self) -> f64 {
        self.factor * fm::exp(self.ln_scale)
    }

    fn ln_tail(&self) -> f64 {
        self.ln_scale + fm::ln(self.factor)
    }
}

/// P(T ≤ t) with `df` degrees of freedom, df > 0 and finite, t not NaN; else an error.
pub fn cdf(t: f64, df: f64) -> Result<f64> {
    sf(-t, df)
}

/// P(T > t).
pub fn sf(t: f64, df: f64) -> Result<f64> {
    let halves = halves(t.abs(), df)?;
    Ok(if t > 0.0 { halves.tail() } else { 0.5 + halves.central })
}

/// ln P(T ≤ t), also where the chance is too small to be written.
pub fn ln_cdf(t: f64, df: f64) -> Result<f64> {
    ln_sf(-t, df)
}

/// ln P(T > t), also where the chance is too small to be written.
pub fn ln_sf(t: f64, df: f64) -> Result<f64> {
    let halves = halves(t.abs(), df)?;
    Ok(if t > 0.0 { halves.ln_tail() } else { fm::ln_1p(-halves.tail()) })
}

/// ln of the density at t.
pub fn ln_pdf(t: f64, df: f64) -> Result<f64> {
    positive("Student density", "df", df)?;
    if t.is_nan() {
        return Err(MathError::argument("Student density", "t", t, "a number"));
    }
    Ok(ln_height(df) - 0.5 * (df + 1.0) * ln_one_plus_square(t.abs(), df))
}

/// ln of the density at 0.
fn ln_height(df: f64) -> f64 {
    -beta::ln_beta_of_positive(0.5 * df, 0.5) - 0.5 * fm::ln(df)
}

/// ln(1 + t²/ν) without overflow.
fn ln_one_plus_square(t: f64, df: f64) -> f64 {
    let square = (t / df.sqrt()) * (t / df.sqrt());
    if square < 1e300 { fm::ln_1p(t * t / df) } else { 2.0 * fm::ln(t) - fm::ln(df) }
}

fn halves(t: f64, df: f64) -> Result<Halves> {
    positive("Student", "df", df)?;
    if t.is_nan() {
        return Err(MathError::argument("Student", "t", t, "a number"));
    }
    if t == 0.0 {
        return Ok(Halves { ln_scale: 0.0, factor: 0.5, central: 0.0 });
    }
    if t == f64::INFINITY {
        return Ok(Halves { ln_scale: 0.0, factor: 0.0, central: 0.5 });
    }
    let ln_one_plus = ln_one_plus_square(t, df);
    if df >= 20.0 && ln_one_plus <= 1.0 {
        return Ok(uniform(ln_one_plus, df));
    }
    let a = 0.5 * df;
    // x = ν/(ν + t²), y = 1 − x, formed apart.
    let ratio = t / df.sqrt();
    let y =
        if ratio > 1.0 { 1.0 / (1.0 + 1.0 / (ratio * ratio)) } else { ratio * ratio / (1.0 + ratio * ratio) };
    let ln_beta = beta::ln_beta_of_positive(a, 0.5);
    if y > 0.25 {
        let x = fm::exp(-ln_one_plus);
        let sum = positive_series(a, 0.5, x)?;
        let ln_scale = -a * ln_one_plus + 0.5 * fm::ln(y) - ln_beta - fm::ln(a);
        let factor = 0.5 * sum;
        return Ok(Halves { ln_scale, factor, central: 0.5 - factor * fm::exp(ln_scale) });
    }
    // ½ I_y(½, ν/2) = yᵃ'(1 − y)ᵇ'/(a' B) · sum / 2 with a' = ½.
    let central = ratio / (1.0 + ratio * ratio).sqrt()
        * fm::exp(-a * ln_one_plus - ln_beta)
        * positive_series(0.5, a, y)?;
    Ok(Halves { ln_scale: 0.0, factor: 0.5 - central, central })
}

/// Σ (a + b)ₙ/(a + 1)ₙ xⁿ.
fn positive_series(a: f64, b: f64, x: f64) -> Result<f64> {
    let (mut sum, mut term) = (1.0, 1.0);
    for n in 0..5000 {
        let n = f64::from(n);
        term *= (a + b + n) / (a + 1.0 + n) * x;
        sum += term;
        if term <= 1e-17 * sum {
            return Ok(sum);
        }
    }
    Err(MathError::new(format!("Student: series does not converge at shapes {a}, {b}, x {x}")))
}

/// The expansion for df ≥ 20 and s² ≤ 1.
fn uniform(square: f64, df: f64) -> Halves {
    let s = square.sqrt();
    let inverse = 1.0 / df;
    // Coefficients of the j-th integration by parts: (2k + 1)(2k + 3)…(2k + 2j − 1) g_{k+j}.
    const PARTS: usize = 18;
    let column = |k: usize| {
        let (mut sum, mut factor) = (SQUEEZE[k], 1.0);
        for j in 1..PARTS {
            factor *= (2 * (k + j) - 1) as f64 * inverse;
            let term = factor * SQUEEZE[k + j];
            sum += term;
            if factor < 1e-18 {
                break;
            }
        }
        sum
    };
    let normaliser = column(0);
    let mut power = s;
    let mut correction = 0.0;
    for k in 1..24 {
        correction += power * column(k);
        power *= square;
        if power < 1e-18 * s {
            break;
        }
    }
    let u = s * df.sqrt();
    let shift = correction / (df.sqrt() * normaliser);
    // Tail: Φ(−u) + φ(u)·shift, with φ(u) = exp(−½u²)/√2π taken out.
    let ln_scale = -0.5 * df * square;
    let factor = normal::scaled_sf(u) + fm::INV_SQRT_TWO_PI * shift;
    let central = normal::central(u) - fm::INV_SQRT_TWO_PI * fm::exp(ln_scale) * shift;
    Halves { ln_scale, factor, central }
}

/// The t with P(T ≤ t) = p, 0 < p < 1. Relative error a few 1e−14 (1e−13 in the far tail).
pub fn quantile(p: f64, df: f64) -> Result<f64> {
    inside_unit("Student quantile", "p", p)?;
    positive("Student quantile", "df", df)?;
    if p == 0.5 {
        return Ok(0.0);
    }
    // 1 − p and p − ½ are exact for p from ½ up; ½ − p is exact for p from ¼ up.
    let (tail, central, sign) = if p < 0.5 { (p, 0.5 - p, -1.0) } else { (1.0 - p, p - 0.5, 1.0) };
    Ok(sign * root(tail, central, df)?)
}

/// The t with P(T > t) = q, 0 < q < 1.
pub fn upper_quantile(q: f64, df: f64) -> Result<f64> {
    inside_unit("Student upper quantile", "q", q)?;
    Ok(-quantile(q, df)?)
}

/// The t > 0 with P(T > t) = tail, that is P(0 < T < t) = central.
fn root(tail: f64, central: f64, df: f64) -> Result<f64> {
    let near = tail > 0.25;
    let ln_height = ln_height(df);
    let ln_wanted = fm::ln(if near { central } else { tail });
    // From the centre: t f(0) ≥ central. From the tail: a normal quantile stretched by the tail's power.
    let start = if near {
        central * fm::exp(-ln_height)
    } else {
        let z = -normal::quantile(tail)?;
        let power = z * z / df;
        if power < 300.0 { (df * fm::exp_m1(power)).sqrt() } else { fm::exp(0.5 * power) }
    };
    let mut failure = None;
    let root = newton_positive(
        |t| {
            let now = match halves(t, df) {
                Ok(now) => now,
                Err(e) => {
                    failure = Some(e);
                    return (f64::NAN, f64::NAN);
                }
            };
            let ln_density = ln_height - 0.5 * (df + 1.0) * ln_one_plus_square(t, df);
            if near {
                (fm::ln(now.central) - ln_wanted, t * fm::exp(ln_density) / now.central)
            } else {
                let ln_tail = now.ln_tail();
                (ln_wanted - ln_tail, t * fm::exp(ln_density - ln_tail))
            }
        },
        start.clamp(1e-300, 1e300),
        0.0,
        f64::MAX,
        1e-15,
    );
    match failure {
        Some(e) => Err(e),
        None => {
            let t = root.map_err(|e| e.within("Student quantile"))?;
            if t < 1e307 { Ok(t) } else { Err(MathError::new("Student quantile: above 1e307")) }
        }
    }
}

/// Taylor coefficients of r/√(1 − exp(−r²)) in r².
const SQUEEZE: [f64; 44] = [
    1.0,
    0.25,
    0.010416666666666666,
    -0.0026041666666666665,
    -9.765625e-05,
    5.154079861111111e-05,
    1.2756024718915344e-06,
    -1.110097087880291e-06,
    -1.9670584004181822e-08,
    2.4836319884715677e-08,
    3.3966619960386745e-10,
    -5.690071833942187e-10,
    -6.3372301556671304e-12,
    1.3251315155878903e-11,
    1.2468358960996804e-13,
    -3.1229993780631886e-13,
    -2.546988626356897e-15,
    7.426702350918158e-15,
    5.3488858900327365e-17,
    -1.778579261088922e-16,
    -1.1473989542270475e-18,
    4.283476654726128e-18,
    2.5030337435180244e-20,
    -1.0363862910759544e-19,
    -5.535498379178477e-22,
    2.517185267159961e-21,
    1.2381595956438125e-23,
    -6.133662439105411e-23,
    -2.7961370314294057e-25,
    1.498765280596104e-24,
    6.366526460482833e-27,
    -3.671087546930156e-26,
    -1.4599270865193941e-28,
    9.010976669173599e-28,
    3.368660192590825e-30,
    -2.2159341408901155e-29,
    -7.815602857789675e-32,
    5.458327666294986e-31,
    1.8221419484278716e-33,
    -1.3464936033422798e-32,
    -4.266714665748715e-35,
    3.3260325260155413e-34,
    1.00301501906604e-36,
    -8.22566449585671e-36,
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn one_two_and_four_degrees_have_closed_forms() {
        for t in [1e-8, 0.3, 1.0, 4.0, 1e5] {
            let one = fm::atan(1.0 / t) / fm::PI;
            assert!((sf(t, 1.0).unwrap() / one - 1.0).abs() < 1e-14, "{t}");
            // ν = 2: ½(1 − t/√(2 + t²)) = 1/(w(w + t)) with w² = 2 + t².
            let w = (2.0 + t * t).sqrt();
            assert!((sf(t, 2.0).unwrap() * w * (w + t) - 1.0).abs() < 1e-13, "{t}");
        }
        assert!((quantile(0.975, 1.0).unwrap() - fm::tan(0.475 * fm::PI)).abs() < 1e-11);
        assert!((quantile(0.8, 2.0).unwrap() - 0.6 / (2.0_f64 * 0.8 * 0.2).sqrt()).abs() < 1e-14);
    }

    #[test]
    fn the_methods_meet_at_their_borders() {
        for t in [0.1, 1.0, 2.5, 2.6, 3.0, 5.8, 5.9, 7.0] {
            let (below, above) = (sf(t, 20.0 - 1e-9).unwrap(), sf(t, 20.0).unwrap());
            assert!((below / above - 1.0).abs() < 3e-9, "{t}");
        }
        // At the border in t: halves of s² = 1.
        let t = (20.0 * fm::exp_m1(1.0)).sqrt();
        let (inside, outside) = (sf(t * (1.0 - 1e-13), 20.0).unwrap(), sf(t * (1.0 + 1e-13), 20.0).unwrap());
        assert!((inside / outside - 1.0).abs() < 1e-11);
        // Far beyond any df the normal distribution is left.
        assert!((sf(3.0, 1e30).unwrap() / normal::sf(3.0) - 1.0).abs() < 1e-14);
    }

    #[test]
    fn bad_arguments_are_errors() {
        for df in [0.0, -1.0, f64::NAN, f64::INFINITY] {
            assert!(cdf(1.0, df).is_err() && quantile(0.1, df).is_err() && ln_pdf(0.0, df).is_err());
        }
        assert!(cdf(f64::NAN, 3.0).is_err() && sf(f64::NAN, 30.0).is_err());
        assert!(quantile(0.0, 3.0).is_err() && upper_quantile(1.0, 3.0).is_err());
        assert_eq!(quantile(0.5, 3.0).unwrap(), 0.0);
        assert_eq!(sf(f64::INFINITY, 3.0).unwrap(), 0.0);
    }
}
