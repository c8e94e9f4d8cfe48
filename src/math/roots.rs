//! Roots of one equation, and the highest point of a log density.
//!
//! Every function here has an iteration cap; reaching it is an error, never the last iterate. A NaN from the function
//! is an error too. Infinite values are allowed: they carry a sign, and the methods fall back to halving.

use super::error::{MathError, Result};
use super::fm;

/// When to stop: the bracket is at most `absolute + relative · |x|` wide; and how many evaluations are allowed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Tolerance {
    /// Width in the units of x.
    pub absolute: f64,
    /// Width as a share of |x|; at least 4.5e−16 is used.
    pub relative: f64,
    /// Evaluations of the function before it is an error.
    pub cap: usize,
}

impl Tolerance {
    /// As close as numbers of this size allow: relative 1e−15, absolute `1e−15 · scale`.
    pub fn tight(scale: f64) -> Self {
        Self { absolute: 1e-15 * scale.abs(), relative: 1e-15, cap: 400 }
    }

    /// A relative and an absolute width with the usual cap of 400 evaluations.
    pub fn new(relative: f64, absolute: f64) -> Self {
        Self { absolute, relative, cap: 400 }
    }

    fn width_at(&self, x: f64) -> f64 {
        self.absolute.max(0.0) + self.relative.max(4.5e-16) * x.abs() + f64::MIN_POSITIVE
    }
}

fn checked(what: &str, x: f64, value: f64) -> Result<f64> {
    if value.is_nan() {
        Err(MathError::new(format!("{what}: the function is not a number at {x}")))
    } else {
        Ok(value)
    }
}

fn middle(a: f64, b: f64) -> f64 {
    0.5 * a + 0.5 * b
}

/// The x in [lo, hi] where `f` changes sign.
///
/// Precondition: `f(lo)` and `f(hi)` differ in sign (a zero at an end is returned at once). Method: inverse quadratic
/// interpolation where it is safe, else halving (Chandrupatla 1997, *Advances in Engineering Software* 28). A jump
/// through zero is found like a zero. At `tolerance.cap` evaluations: an error.
pub fn solve(mut f: impl FnMut(f64) -> f64, lo: f64, hi: f64, tolerance: Tolerance) -> Result<f64> {
    let f_lo = checked("root", lo, f(lo))?;
    let f_hi = checked("root", hi, f(hi))?;
    solve_between(&mut f, (lo, f_lo), (hi, f_hi), tolerance)
}

fn solve_between(
    f: &mut impl FnMut(f64) -> f64,
    (lo, f_lo): (f64, f64),
    (hi, f_hi): (f64, f64),
    tolerance: Tolerance,
) -> Result<f64> {
    if f_lo == 0.0 {
        return Ok(lo);
    }
    if f_hi == 0.0 {
        return Ok(hi);
    }
    if (f_lo > 0.0) == (f_hi > 0.0) || !lo.is_finite() || !hi.is_finite() {
        return Err(MathError::new(format!(
            "root: no change of sign between {lo} ({f_lo}) and {hi} ({f_hi})"
        )));
    }
    let (mut a, mut fa, mut b, mut fb) = (hi, f_hi, lo, f_lo);
    let mut share = 0.5;
    for _ in 0..tolerance.cap {
        let x = if share == 0.5 { middle(a, b) } else { a + share * (b - a) };
        let fx = checked("root", x, f(x))?;
        if fx == 0.0 {
            return Ok(x);
        }
        let (c, fc);
        if (fx > 0.0) == (fa > 0.0) {
            (c, fc) = (a, fa);
        } else {
            (c, fc) = (b, fb);
            (b, fb) = (a, fa);
        }
        (a, fa) = (x, fx);
        let best = if fa.abs() < fb.abs() { a } else { b };
        let width = (b - a).abs();
        let wanted = tolerance.width_at(best);
        if width <= wanted || middle(a, b) == a || middle(a, b) == b {
            return Ok(best);
        }
        let smallest_share = (0.5 * wanted / width).min(0.5);
        let xi = (a - b) / (c - b);
        let phi = (fa - fb) / (fc - fb);
        share = if phi * phi < xi && (1.0 - phi) * (1.0 - phi) < 1.0 - xi {
            let first = fa / (fb - fa) * (fc / (fb - fc));
            let second = (c - a) / (b - a) * (fa / (fc - fa)) * (fb / (fc - fb));
            first + second
        } else {
            0.5
        };
        if !share.is_finite() {
            share = 0.5;
        }
        share = share.clamp(smallest_share, 1.0 - smallest_share);
    }
    Err(MathError::new(format!("root: not found within {} evaluations between {lo} and {hi}", tolerance.cap)))
}

/// The root of an increasing `f`, starting from the guess [lo, hi], which is widened when the root lies outside.
///
/// Precondition: `f` does not decrease. The bracket is widened by doubling, up to ±1.7e308; if no change of sign is
/// found there, that is an error.
pub fn solve_increasing(
    mut f: impl FnMut(f64) -> f64,
    lo: f64,
    hi: f64,
    tolerance: Tolerance,
) -> Result<f64> {
    let (mut lo, mut hi) = if lo <= hi { (lo, hi) } else { (hi, lo) };
    if !lo.is_finite() || !hi.is_finite() {
        return Err(MathError::new(format!("root: the bracket {lo} to {hi} is not finite")));
    }
    let mut step = (hi - lo).max(tolerance.width_at(lo.abs().max(hi.abs())) * 1e3);
    let mut f_lo = checked("root", lo, f(lo))?;
    let mut f_hi = if hi == lo { f_lo } else { checked("root", hi, f(hi))? };
    while f_lo > 0.0 {
        (hi, f_hi) = (lo, f_lo);
        lo -= step;
        step *= 2.0;
        if !lo.is_finite() {
            return Err(MathError::new("root: the function stays above 0 down to the smallest number"));
        }
        f_lo = checked("root", lo, f(lo))?;
    }
    while f_hi < 0.0 {
        (lo, f_lo) = (hi, f_hi);
        hi += step;
        step *= 2.0;
        if !hi.is_finite() {
            return Err(MathError::new("root: the function stays below 0 up to the largest number"));
        }
        f_hi = checked("root", hi, f(hi))?;
    }
    solve_between(&mut f, (lo, f_lo), (hi, f_hi), tolerance)
}

/// The root of an increasing function given with its slope, by Newton's method inside the bracket [lo, hi].
///
/// `f(x)` returns (value, slope). Precondition: the value does not decrease, and the root lies in [lo, hi] (the ends
/// are not evaluated). A step that would leave the bracket, or a zero slope, is replaced by halving. Stops when a step is
/// shorter than the tolerance at x; at the cap: an error.
pub fn newton_increasing(
    mut f: impl FnMut(f64) -> (f64, f64),
    start: f64,
    lo: f64,
    hi: f64,
    tolerance: Tolerance,
) -> Result<f64> {
    let (mut lo, mut hi) = (lo, hi);
    if lo > hi || !lo.is_finite() || !hi.is_finite() {
        return Err(MathError::new(format!("root: the bracket {lo} to {hi} is not valid")));
    }
    let mut x = if start > lo && start < hi { start } else { middle(lo, hi) };
    let mut last_step = f64::INFINITY;
    for _ in 0..tolerance.cap {
        let (value, slope) = f(x);
        checked("root", x, value)?;
        if value == 0.0 {
            return Ok(x);
        }
        if value < 0.0 {
            lo = x;
        } else {
            hi = x;
        }
        let wanted = tolerance.width_at(x);
        let newton = x - value / slope;
        let step = (newton - x).abs();
        // A Newton step that does not at least halve the one before is a sign of a kink: halve instead.
        let usable = slope > 0.0 && newton > lo && newton < hi && step < 0.75 * last_step;
        let next = if usable { newton } else { middle(lo, hi) };
        if slope > 0.0 && step <= wanted && newton >= lo && newton <= hi {
            return Ok(newton);
        }
        if hi - lo <= wanted || next == lo || next == hi {
            return Ok(next);
        }
        // After a halving, let Newton start afresh.
        last_step = if usable { step } else { f64::INFINITY };
        x = next;
    }
    Err(MathError::new(format!("root: not found within {} Newton steps", tolerance.cap)))
}

/// The root x > 0 of a function increasing in x, by Newton's method in ln x with factors instead of steps, so that a
/// root near 1e−300 keeps its relative accuracy.
///
/// `f(x)` returns (value, slope with respect to ln x). Precondition: 0 ≤ lo < hi and the root between them. Stops when
/// a factor differs from 1 by less than `relative`; at the cap: an error.
pub fn newton_positive(
    mut f: impl FnMut(f64) -> (f64, f64),
    start: f64,
    lo: f64,
    hi: f64,
    relative: f64,
) -> Result<f64> {
    const CAP: usize = 400;
    let (mut lo, mut hi) = (lo.max(f64::from_bits(1)), hi.min(f64::MAX));
    let geometric = |a: f64, b: f64| if b / a < 2.0 { middle(a, b) } else { a.sqrt() * b.sqrt() };
    let mut x = if start > lo && start < hi { start } else { geometric(lo, hi) };
    let mut last_step = f64::INFINITY;
    for _ in 0..CAP {
        let (value, slope) = f(x);
        checked("root", x, value)?;
        if value == 0.0 {
            return Ok(x);
        }
        if value < 0.0 {
            lo = x;
        } else {
            hi = x;
        }
        let change = -value / slope;
        let newton = x + x * fm::exp_m1(change);
        let step = change.abs();
        if slope > 0.0 && step <= relative && newton >= lo && newton <= hi {
            return Ok(newton);
        }
        let usable = slope > 0.0 && newton > lo && newton < hi && step < 0.75 * last_step;
        let next = if usable { newton } else { geometric(lo, hi) };
        if hi - lo <= relative * hi || next <= lo || next >= hi {
            return Ok(next);
        }
        last_step = if usable { step } else { f64::INFINITY };
        x = next;
    }
    Err(MathError::new(format!("root: not found within {CAP} Newton steps")))
}

/// The highest point of a log density, with the distances at which it has fallen by ½ (one sd for a normal density).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Mode {
    /// Where.
    pub x: f64,
    /// The log density there.
    pub ln_height: f64,
    /// Distance to the left where the log density is ½ lower.
    pub left: f64,
    /// Distance to the right where the log density is ½ lower.
    pub right: f64,
}

impl Mode {
    /// The shorter of the two half-drop distances.
    pub fn width(&self) -> f64 {
        self.left.min(self.right)
    }
}

/// The local maximum of `ln_f` reached uphill from `start` with first step `scale`.
///
/// Precondition: `ln_f` is finite somewhere within doubling distance of `start` and falls without bound (or to −∞) on
/// both sides; −∞ stands for a density of 0. x from 1e−150 to 1e150 is fine. The place is found to about 1e−8 of the
/// width (all a maximum can give), which suffices to centre and scale a grid. NaN or +∞ from `ln_f`, a density that
/// never falls, or 2000 steps: an error.
pub fn mode(mut ln_f: impl FnMut(f64) -> f64, start: f64, scale: f64) -> Result<Mode> {
    let mut value = |x: f64| -> Result<f64> {
        let v = ln_f(x);
        if v.is_nan() || v == f64::INFINITY {
            return Err(MathError::new(format!("highest point: the log density is {v} at {x}")));
        }
        Ok(v)
    };
    if !start.is_finite() || !scale.is_finite() || scale == 0.0 {
        return Err(MathError::new(format!("highest point: start {start} and scale {scale} must be finite")));
    }
    let scale = scale.abs();
    let mut best = (start, value(start)?);
    if best.1 == f64::NEG_INFINITY {
        best = first_finite(&mut value, start, scale)?;
    }
    let (mut low, mut high) = bracket(&mut value, &mut best, scale)?;
    narrow(&mut value, &mut low, &mut best, &mut high)?;
    let left = half_drop(&mut value, best, low.0 - best.0)?;
    let right = half_drop(&mut value, best, high.0 - best.0)?;
    Ok(Mode { x: best.0, ln_height: best.1, left, right })
}

fn first_finite(value: &mut impl FnMut(f64) -> Result<f64>, start: f64, scale: f64) -> Result<(f64, f64)> {
    for power in 0..1024 {
        for exponent in if power == 0 { [0, 0] } else { [power, -power] } {
            let step = fm::scale_by_power_of_two(scale, exponent);
            for x in [start + step, start - step] {
                if x.is_finite() {
                    let v = value(x)?;
                    if v > f64::NEG_INFINITY {
                        return Ok((x, v));
                    }
                }
            }
        }
    }
    Err(MathError::new(format!("highest point: the density is 0 everywhere around {start}")))
}

type Point = (f64, f64);

/// Two points around `best`, both lower; `best` moves uphill while they are sought.
fn bracket(
    value: &mut impl FnMut(f64) -> Result<f64>,
    best: &mut Point,
    scale: f64,
) -> Result<(Point, Point)> {
    let mut side = |sign: f64, best: &mut Point, behind: &mut Option<Point>| -> Result<Point> {
        let mut step = scale;
        loop {
            let x = best.0 + sign * step;
            if !x.is_finite() {
                return Err(MathError::new(
                    "highest point: the density does not fall towards the end of the line",
                ));
            }
            if x == best.0 {
                step *= 2.0;
                continue;
            }
            let v = value(x)?;
            if v > best.1 {
                *behind = Some(*best);
                *best = (x, v);
            } else if v < best.1 {
                return Ok((x, v));
            }
            step *= 2.0;
        }
    };
    let mut behind = None;
    let high = side(1.0, best, &mut behind)?;
    if let Some(low) = behind {
        return Ok((low, high));
    }
    let mut behind = None;
    let low = side(-1.0, best, &mut behind)?;
    Ok((low, behind.unwrap_or(high)))
}

/// Brent's search without derivatives (Brent 1973, chapter 5), stopped when the log density is flat to rounding.
fn narrow(
    value: &mut impl FnMut(f64) -> Result<f64>,
    low: &mut Point,
    best: &mut Point,
    high: &mut Point,
) -> Result<()> {
    const GOLDEN: f64 = 0.381_966_011_250_105;
    let mut parabola_failed = 0_u32;
    for _ in 0..2000 {
        let flat = 1e-12 * (1.0 + best.1.abs().min(1e3));
        let width = high.0 - low.0;
        if best.1 - low.1 <= flat && best.1 - high.1 <= flat {
            return Ok(());
        }
        if width <= 4.0 * f64::EPSILON * best.0.abs() + f64::MIN_POSITIVE {
            return Ok(());
        }
        let (left, right) = (best.0 - low.0, high.0 - best.0);
        let mut x = f64::NAN;
        if parabola_failed < 2 && low.1.is_finite() && high.1.is_finite() {
            // The top of the parabola through the three points.
            let (drop_low, drop_high) = (best.1 - low.1, best.1 - high.1);
            let shift = 0.5 * (left * left * drop_high - right * right * drop_low)
                / (left * drop_high + right * drop_low);
            x = best.0 - shift;
            // Landing on the best point again tells nothing: look a little to the longer side.
            if (x - best.0).abs() < 1e-3 * left.min(right) {
                x = if left > right { best.0 - 0.01 * left } else { best.0 + 0.01 * right };
            }
        }
        if !(x > low.0 && x < high.0) {
            x = if left > right { best.0 - GOLDEN * left } else { best.0 + GOLDEN * right };
            parabola_failed = 0;
        }
        if x <= low.0 || x >= high.0 || x == best.0 {
            return Ok(());
        }
        let v = value(x)?;
        if v > best.1 {
            if x < best.0 {
                *high = *best;
            } else {
                *low = *best;
            }
            *best = (x, v);
        } else if x < best.0 {
            *low = (x, v);
        } else {
            *high = (x, v);
        }
        parabola_failed = if high.0 - low.0 > 0.6 * width { parabola_failed + 1 } else { 0 };
    }
    Err(MathError::new("highest point: not found within 2000 steps"))
}

/// The distance from the top, in the direction of `first`, at which the log density is ½ lower (to about 5 %).
fn half_drop(value: &mut impl FnMut(f64) -> Result<f64>, (x, top): Point, first: f64) -> Result<f64> {
    let mut near = 0.0;
    let mut far = if first == 0.0 { f64::EPSILON * x.abs().max(f64::MIN_POSITIVE) } else { first };
    let mut drop_far = top - value(x + far)?;
    let mut steps = 0;
    while drop_far < 0.5 {
        near = far;
        far *= 2.0;
        steps += 1;
        if steps > 2100 || !(x + far).is_finite() {
            return Err(MathError::new("highest point: the density does not fall away from its top"));
        }
        drop_far = top - value(x + far)?;
    }
    for _ in 0..2100 {
        if drop_far <= 0.55 || (far - near).abs() <= 0.02 * far.abs() {
            return Ok(far.abs());
        }
        // Where the top is a parabola one guess lands; else halve.
        let guess = far * (0.52 / drop_far).sqrt();
        let mid = if drop_far.is_finite() && (guess - near) * (guess - far) < 0.0 {
            guess
        } else {
            middle(near, far)
        };
        let drop = top - value(x + mid)?;
        if drop < 0.5 {
            near = mid;
            if drop_far / drop.max(1e-300) > 1e3 {
                // A kink: approach from both sides by halving.
                let half = middle(near, far);
                let drop_half = top - value(x + half)?;
                if drop_half < 0.5 {
                    near = half;
                } else {
                    (far, drop_far) = (half, drop_half);
                }
            }
        } else {
            (far, drop_far) = (mid, drop);
        }
    }
    Ok(far.abs())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_roots_inside_and_outside_the_guess() {
        let x = solve(|x| x * x - 2.0, 0.0, 2.0, Tolerance::tight(1.0)).unwrap();
        assert!((x - 2.0_f64.sqrt()).abs() < 2e-15);
        for target in [-3e9, -1e-9, 0.25, 7e11] {
            let x = solve_increasing(|x| x - target, 0.0, 1.0, Tolerance::tight(1.0)).unwrap();
            assert!((x - target).abs() <= 2e-15 * (1.0 + target.abs()), "{target}: {x}");
        }
        assert!(solve(|x| x * x + 1.0, -1.0, 1.0, Tolerance::tight(1.0)).is_err());
        assert!(solve(|_| f64::NAN, -1.0, 1.0, Tolerance::tight(1.0)).is_err());
        assert!(solve_increasing(|_| -1.0, 0.0, 1.0, Tolerance::tight(1.0)).is_err());
    }

    #[test]
    fn a_jump_is_found_like_a_root() {
        let x =
            solve_increasing(|x| if x < 0.3 { -1.0 } else { 1.0 }, 0.0, 1.0, Tolerance::tight(1.0)).unwrap();
        assert!((x - 0.3).abs() < 1e-14);
    }

    #[test]
    fn newton_keeps_relative_accuracy_at_tiny_roots() {
        // ln-ln slope of x^0.5 against 1e-140: root 1e-280.
        let target = fm::ln(1e-140);
        let x = newton_positive(|x| (0.5 * fm::ln(x) - target, 0.5), 1.0, 0.0, f64::MAX, 1e-15).unwrap();
        assert!((x / 1e-280 - 1.0).abs() < 1e-12);
        let x = newton_increasing(|x| (x * x * x - 5.0, 3.0 * x * x), 0.1, 0.0, 10.0, Tolerance::tight(1.0))
            .unwrap();
        assert!((x * x * x - 5.0).abs() < 1e-14);
    }

    #[test]
    fn the_cap_is_an_error() {
        let few = Tolerance { absolute: 0.0, relative: 1e-15, cap: 3 };
        assert!(solve(|x| x * x * x - 2.0, 0.0, 1e9, few).is_err());
        assert!(newton_increasing(|x| (fm::exp(x) - 7.0, fm::exp(x)), 50.0, -60.0, 60.0, few).is_err());
    }

    #[test]
    fn mode_of_a_normal_density_at_any_size() {
        for (centre, sd) in [
            (0.0, 1.0),
            (3.0, 0.01),
            (1e150, 1e147),
            (1e-150, 1e-152),
            (-4e5, 1e-3),
            (0.0, 1e-150),
            (0.3, 1e-5),
        ] {
            let m = mode(|x| -0.5 * ((x - centre) / sd) * ((x - centre) / sd), 0.0, 1.0).unwrap();
            assert!((m.x - centre).abs() < 1e-4 * sd, "{centre} {sd}: {m:?}");
            assert!(
                m.left / sd > 0.9 && m.left / sd < 1.1 && m.right / sd > 0.9 && m.right / sd < 1.1,
                "{sd}: {m:?}"
            );
        }
        // Gamma density with shape 4 in x > 0 (0 below): mode at 3.
        let m = mode(|x| if x > 0.0 { 3.0 * fm::ln(x) - x } else { f64::NEG_INFINITY }, -5.0, 0.1).unwrap();
        assert!((m.x - 3.0).abs() < 1e-5);
        assert!(mode(|x| x, 0.0, 1.0).is_err());
        assert!(mode(|_| f64::NAN, 0.0, 1.0).is_err());
    }
}
