//! ∫ N(y; mean, var) e^f(y) dy again and again for one f (see [`super::smoothed`]): e^f is kept on a lattice of
//! places, and on ones twice, four times … as fine where the normal is narrow; the normal is stepped along them by
//! two multiplications. Values are made when first asked for, so that no figure depends on what was asked before.

use super::smoothed::{STEP, Smoothed, UNSEEN, smoothed};
use crate::math::fm;
use std::cell::{Cell, RefCell};
use std::collections::BTreeMap;
use std::rc::Rc;
use std::sync::OnceLock;

/// Half the places of the coarsest lattice; beyond them integrals are made without it.
const HALF: usize = 48;
/// The finest lattice is 2^FINEST times as fine as the coarsest.
const FINEST: usize = 3;
/// Below this share of e^f's own narrowest variance four Gauss–Hermite points are exact to 1e−13; ten of them are
/// below the share that the finest lattice bears.
const NARROW: f64 = 1e-4;

#[derive(Debug)]
pub(super) struct Lattice {
    centre: f64,
    sharpness: f64,
    /// The place f itself was last asked for, and the answer.
    last: Cell<(f64, f64)>,
    kept: RefCell<Kept>,
}

#[derive(Debug)]
struct Kept {
    /// f at the centre, the unit of all values.
    ln_unit: Option<f64>,
    levels: [Vec<f64>; FINEST + 1],
}

impl Lattice {
    /// For an f whose curvature lies between −sharpness and 0, most asked for near `centre`.
    pub fn new(centre: f64, sharpness: f64) -> Lattice {
        let levels = [const { Vec::new() }; FINEST + 1];
        Lattice {
            centre,
            sharpness,
            last: Cell::new((f64::NAN, f64::NAN)),
            kept: RefCell::new(Kept { ln_unit: None, levels }),
        }
    }

    /// The integral and moments of y; an infinite `var` stands for e^f alone.
    pub fn integral(&self, f: &impl Fn(f64) -> f64, mean: f64, var: f64) -> Smoothed {
        self.integral_with(f, mean, var, 0.0, None)
    }

    /// The same with another factor e^g, of that sharpness.
    pub fn integral_with(
        &self,
        f: &impl Fn(f64) -> f64,
        mean: f64,
        var: f64,
        more: f64,
        g: Option<&dyn Fn(f64) -> f64>,
    ) -> Smoothed {
        let both = |y: f64| f(y) + g.map_or(0.0, |g| g(y));
        let sharpness = self.sharpness + more;
        if var == 0.0 {
            return Smoothed { ln: self.exactly(f, mean) + g.map_or(0.0, |g| g(mean)), mean, var };
        }
        if var * sharpness < NARROW {
            return by_points(four_points(), &both, mean, var);
        }
        let share = 1.0 / (1.0 + 1.0 / (var * sharpness));
        if share * sharpness < self.sharpness / f64::from(1u32 << (2 * FINEST)) {
            return by_points(ten_points(), &both, mean, var);
        }
        let made = self.on_lattice(f, (mean, var), sharpness, g);
        made.unwrap_or_else(|| smoothed(&both, mean, var, sharpness))
    }

    /// f itself: nodes of one σ ask for the same places one after another.
    fn exactly(&self, f: &impl Fn(f64) -> f64, y: f64) -> f64 {
        let last = self.last.get();
        if last.0 == y {
            return last.1;
        }
        let value = f(y);
        self.last.set((y, value));
        value
    }

    /// `None` where the places leave the lattice or the sum leaves the range of numbers.
    fn on_lattice(
        &self,
        f: &impl Fn(f64) -> f64,
        (mean, var): (f64, f64),
        sharpness: f64,
        g: Option<&dyn Fn(f64) -> f64>,
    ) -> Option<Smoothed> {
        let precision = 1.0 / var;
        let wanted = STEP / (precision + sharpness).sqrt();
        let (mut level, mut step) = (0, STEP / self.sharpness.sqrt());
        while step > wanted {
            level += 1;
            step *= 0.5;
        }
        if level > FINEST {
            return None;
        }
        let half = (HALF << level) as i64;
        let kept = &mut *self.kept.borrow_mut();
        let unit = *kept.ln_unit.get_or_insert_with(|| f(self.centre));
        let values = &mut kept.levels[level];
        if values.is_empty() {
            values.resize(2 * half as usize + 1, f64::NAN);
        }
        let start = if var == f64::INFINITY { 0.0 } else { ((mean - self.centre) / step).round() };
        if start.is_nan() || start.abs() >= half as f64 {
            return None;
        }
        let start = start as i64;
        let mut term_at = |index: i64, normal: f64| -> Option<f64> {
            let slot = values.get_mut(usize::try_from(index + half).ok()?)?;
            let y = self.centre + index as f64 * step;
            if slot.is_nan() {
                *slot = fm::exp(f(y) - unit);
            }
            Some(normal * *slot * g.map_or(1.0, |g| fm::exp(g(y))))
        };
        // N at places start + i relative to N at its mean, by ratios of neighbours.
        let away = if var == f64::INFINITY { 0.0 } else { self.centre + start as f64 * step - mean };
        let first_normal = fm::exp(-0.5 * away * away * precision);
        let shrink = fm::exp(-step * step * precision);
        let middle = term_at(start, first_normal)?;
        let (mut whole, mut first, mut second) = (middle, 0.0, 0.0);
        for direction in [1, -1] {
            let sign = f64::from(direction);
            let mut ratio = fm::exp(-step * (sign * away + 0.5 * step) * precision);
            let (mut normal, mut before, mut i) = (first_normal, middle, 0i32);
            loop {
                normal *= ratio;
                ratio *= shrink;
                i += direction;
                let term = term_at(start + i64::from(i), normal)?;
                let place = f64::from(i);
                whole += term;
                first += term * place;
                second += term * place * place;
                if term <= UNSEEN * whole && term <= before {
                    break;
                }
                before = term;
            }
        }
        if !(whole > 1e-250 && whole < 1e250) {
            return None;
        }
        let centre = first / whole;
        let height = if var == f64::INFINITY { 1.0 } else { fm::INV_SQRT_TWO_PI * precision.sqrt() };
        Some(Smoothed {
            ln: unit + fm::ln(whole * step * height),
            mean: self.centre + (start as f64 + centre) * step,
            var: (second / whole - centre * centre).max(0.0) * step * step,
        })
    }
}

/// Gauss–Hermite: places in sds and weights.
fn by_points(points: &[(f64, f64)], f: &impl Fn(f64) -> f64, mean: f64, var: f64) -> Smoothed {
    let sd = var.sqrt();
    let (mut top, mut whole, mut first, mut second) = (f64::NEG_INFINITY, 0.0, 0.0, 0.0);
    for (z, weight) in points {
        let ln = f(mean + sd * z);
        if ln > top {
            let scale = fm::exp(top - ln);
            (whole, first, second) = (whole * scale, first * scale, second * scale);
            top = ln;
        }
        let term = weight * fm::exp(ln - top);
        whole += term;
        first += term * z;
        second += term * z * z;
    }
    let centre = first / whole;
    Smoothed {
        ln: top + fm::ln(whole),
        mean: mean + sd * centre,
        var: (second / whole - centre * centre).max(0.0) * var,
    }
}

fn four_points() -> &'static [(f64, f64); 4] {
    static POINTS: OnceLock<[(f64, f64); 4]> = OnceLock::new();
    POINTS.get_or_init(hermite)
}

fn ten_points() -> &'static [(f64, f64); 10] {
    static POINTS: OnceLock<[(f64, f64); 10]> = OnceLock::new();
    POINTS.get_or_init(hermite)
}

/// Zeros of the Hermite polynomial He_N, N even, and weights N!/(N² He_{N−1}²) (Abramowitz & Stegun 25.4.46).
fn hermite<const N: usize>() -> [(f64, f64); N] {
    // (He_N, He_{N−1})
    let polynomials = |z: f64| {
        let (mut before, mut here) = (1.0, z);
        for k in 1..N {
            (before, here) = (here, z * here - k as f64 * before);
        }
        (here, before)
    };
    let n = N as f64;
    let factorial: f64 = (1..=N).map(|k| k as f64).product();
    let mut points = [(0.0, 0.0); N];
    // Positive zeros, from the first sign change outward; He_N' = N He_{N−1}.
    let (mut z, mut found) = (0.0, 0);
    while found < N / 2 {
        let next = z + 0.05;
        if (polynomials(z).0 > 0.0) != (polynomials(next).0 > 0.0) {
            let mut root = z + 0.025;
            for _ in 0..30 {
                let (value, before) = polynomials(root);
                root -= value / (n * before);
            }
            let before = polynomials(root).1;
            let weight = factorial / (n * n * before * before);
            points[N / 2 + found] = (root, weight);
            points[N / 2 - 1 - found] = (-root, weight);
            found += 1;
        }
        z = next;
    }
    points
}

/// The lattices of what periods' marked readings say of their levels, one for each period and within sd.
#[derive(Debug, Default)]
pub(super) struct Lattices {
    kept: RefCell<BTreeMap<(usize, u64), Rc<Lattice>>>,
}

impl Lattices {
    /// So many are kept; what is asked for again and again are a few hundred.
    const MOST: usize = 4000;

    pub fn of(&self, period: usize, sigma2: f64, make: impl FnOnce() -> Lattice) -> Rc<Lattice> {
        let mut kept = self.kept.borrow_mut();
        if kept.len() >= Self::MOST {
            kept.clear();
        }
        Rc::clone(kept.entry((period, sigma2.to_bits())).or_insert_with(|| Rc::new(make())))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::normal;

    #[test]
    fn on_the_lattice_as_by_itself() {
        // Five marks below 0.3 with sd 0.7, under normals narrow and wide, near and far.
        let f = |y: f64| 5.0 * normal::ln_cdf((0.3 - y) / 0.7);
        let sharpness = 5.0 / 0.49;
        let lattice = Lattice::new(0.0, sharpness);
        for (mean, var) in [
            (0.1, 1e-6),
            (0.1, 1e-3),
            (2.0, 0.01),
            (-1.0, 0.3),
            (3.0, 0.3),
            (0.5, 40.0),
            (9.0, 0.1),
            (90.0, 2.0),
        ] {
            let (got, wanted) = (lattice.integral(&f, mean, var), smoothed(&f, mean, var, sharpness));
            let size = wanted.ln.abs().max(1.0);
            assert!((got.ln - wanted.ln).abs() < 1e-12 * size, "{mean} {var}: {got:?} {wanted:?}");
            assert!((got.mean - wanted.mean).abs() < 1e-11, "{mean} {var}: {got:?} {wanted:?}");
            assert!((got.var / wanted.var - 1.0).abs() < 1e-8, "{mean} {var}: {got:?} {wanted:?}");
        }
    }
}
