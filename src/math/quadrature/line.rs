//! The trapezoid rule on the whole line for an integrand given by its logarithm.

use super::maps;
use crate::math::error::{MathError, Result};
use crate::math::fm;
use crate::math::roots::{self, Mode};

/// One node: a place and the logarithm of its share of the whole.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Node {
    /// The place.
    pub x: f64,
    /// ln of the weight; all weights of a line add to 1.
    pub ln_weight: f64,
}

impl Node {
    /// The weight itself.
    pub fn weight(&self) -> f64 {
        fm::exp(self.ln_weight)
    }
}

/// A function whose expectation must settle before the step is accepted.
pub type Functional<'a> = &'a dyn Fn(f64) -> f64;

/// How the integrand falls far out.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Tails {
    /// Exponentially or faster.
    Light,
    /// Like a power of x: the line is stretched by sinh first.
    Heavy,
}

/// What is asked of `line`.
#[derive(Clone)]
pub struct LineOptions<'a> {
    /// Nodes with less than this share of the whole are left out (1e−30).
    pub weight_floor: f64,
    /// Two steps must agree to this, relative: the integral, and the expectation of every functional (1e−12).
    pub tolerance: f64,
    /// More nodes than this are an error (400 000).
    pub node_cap: usize,
    /// The scan for highest points looks this many `scale_hint`s to both sides of the start (60). The integrand must
    /// be a number (−∞ allowed) there.
    pub reach: f64,
    /// How the integrand falls far out.
    pub tails: Tails,
    /// Functions whose expectations must settle too.
    pub functionals: Vec<Functional<'a>>,
}

impl Default for LineOptions<'_> {
    fn default() -> Self {
        Self {
            weight_floor: 1e-30,
            tolerance: 1e-12,
            node_cap: 400_000,
            reach: 60.0,
            tails: Tails::Light,
            functionals: Vec::new(),
        }
    }
}

/// The integrand on its nodes.
#[derive(Debug, Clone)]
pub struct Line {
    /// The nodes, x rising.
    pub nodes: Vec<Node>,
    /// ln ∫ exp(ln_f).
    pub ln_integral: f64,
    /// The largest relative difference between the last two steps, over the integral and all functionals.
    pub error: f64,
    /// The highest point that was found.
    pub mode: Mode,
}

impl Line {
    /// The expectation of g under the normalised integrand.
    pub fn expect(&self, mut g: impl FnMut(f64) -> f64) -> f64 {
        self.nodes.iter().map(|n| n.weight() * g(n.x)).sum()
    }
}

/// Integrates exp(ln_f) over the whole line, and hands back the nodes with their normalised weights.
///
/// Precondition: `ln_f` is smooth where it is not negligible, −∞ where the density is 0, never NaN or +∞, and falls at
/// both ends. `start_hint` and `scale_hint` say roughly where and how wide; a wrong hint costs time, and only a peak
/// that is narrower than the scan's spacing *and* has no slope leading to it can be missed. Steps: scan a grid that
/// widens away from the start (`opts.reach`), climb from every local maximum, take the narrowest width of all that
/// matter, walk outward until the rest is below `weight_floor` of the sum, halve until two results agree to
/// `opts.tolerance`. Errors: NaN, no mass found, `node_cap` reached without agreement.
pub fn line(
    mut ln_f: impl FnMut(f64) -> f64,
    start_hint: f64,
    scale_hint: f64,
    opts: &LineOptions<'_>,
) -> Result<Line> {
    let modes = highest_points(&mut ln_f, start_hint, scale_hint, opts.reach)?;
    let top = modes.iter().copied().reduce(|a, b| if b.ln_height > a.ln_height { b } else { a });
    let Some(top) = top else {
        return Err(MathError::new("integral: no mass found"));
    };
    let floor = fm::ln(opts.weight_floor);
    let relevant: Vec<Mode> = modes.into_iter().filter(|m| m.ln_height > top.ln_height + floor).collect();
    let heavy = opts.tails == Tails::Heavy;
    let place = |u: f64| {
        if heavy { maps::stretched(u, top.x, top.width()) } else { maps::Mapped { x: u, ln_slope: 0.0 } }
    };
    let to_line = |x: f64| if heavy { fm::asinh((x - top.x) / top.width()) } else { x };
    let centre = to_line(top.x);
    // Widths in the walking variable: dx = slope du.
    let narrowest = relevant
        .iter()
        .map(|m| m.width() / fm::exp(place(to_line(m.x)).ln_slope))
        .fold(f64::INFINITY, f64::min);
    let first = relevant.iter().map(|m| to_line(m.x)).fold(centre, f64::min);
    let last = relevant.iter().map(|m| to_line(m.x)).fold(centre, f64::max);
    let mut grid = Grid {
        ln_f: |u: f64| {
            let at = place(u);
            let value = ln_f(at.x) + at.ln_slope;
            if value.is_nan() || value == f64::INFINITY {
                return Err(MathError::new(format!("integral: the log integrand is {value} at {}", at.x)));
            }
            Ok(value)
        },
        reference: top.ln_height + place(centre).ln_slope,
        cap: opts.node_cap,
    };
    // A step that is a power of two, from a centre that is a multiple of it: every place is exact, and a narrow peak
    // far from 0 is not blurred by the rounding of its places.
    let mut step = power_of_two_below(0.75 * narrowest);
    let mut points = grid.walk(step * fm::round(centre / step), step, first, last, floor)?;
    let mut before = Summary::of(&points, step, &place, &opts.functionals);
    loop {
        points = grid.halved(points, step)?;
        step *= 0.5;
        let now = Summary::of(&points, step, &place, &opts.functionals);
        let error = now.distance(&before);
        if error.is_nan() {
            return Err(MathError::new("integral: an expectation is not a number"));
        }
        if error <= opts.tolerance && points.len() >= 24 {
            let ln_integral = grid.reference + now.ln_sum;
            let ln_share = fm::ln(step) - now.ln_sum;
            let nodes = points
                .iter()
                .map(|(u, ln_height)| Node { x: place(*u).x, ln_weight: ln_height + ln_share })
                .filter(|n| n.ln_weight > floor)
                .collect();
            return Ok(Line { nodes, ln_integral, error, mode: top });
        }
        before = now;
    }
}

/// The largest power of two not above x > 0.
fn power_of_two_below(x: f64) -> f64 {
    f64::from_bits(x.max(f64::MIN_POSITIVE).to_bits() & (0x7ff << 52))
}

/// The local maxima of `ln_f` that a scan around `start` finds, each refined.
fn highest_points(
    ln_f: &mut impl FnMut(f64) -> f64,
    start: f64,
    scale: f64,
    reach: f64,
) -> Result<Vec<Mode>> {
    if !start.is_finite() || !scale.is_finite() || scale <= 0.0 {
        return Err(MathError::new(format!(
            "integral: start {start} and scale {scale} must be finite, scale above 0"
        )));
    }
    const HALF: i32 = 48;
    let widest = fm::asinh(2.0 * reach);
    let points: Vec<(f64, f64)> = (-HALF..=HALF)
        .map(|i| {
            let x = start + 0.5 * scale * fm::sinh(widest * f64::from(i) / f64::from(HALF));
            (x, ln_f(x))
        })
        .collect();
    if let Some((x, value)) = points.iter().find(|(_, v)| v.is_nan() || *v == f64::INFINITY) {
        return Err(MathError::new(format!("integral: the log integrand is {value} at {x}")));
    }
    let mut modes: Vec<Mode> = Vec::new();
    for (i, (x, value)) in points.iter().enumerate() {
        let left = if i == 0 { None } else { points.get(i - 1) };
        let right = points.get(i + 1);
        let peak = *value > f64::NEG_INFINITY
            && left.is_none_or(|(_, v)| value >= v)
            && right.is_none_or(|(_, v)| value > v);
        if peak {
            let gap = |p: Option<&(f64, f64)>| p.map_or(f64::INFINITY, |(other, _)| (other - x).abs());
            let spacing = gap(left).min(gap(right));
            let mode = roots::mode(&mut *ln_f, *x, 0.25 * spacing)?;
            if !modes.iter().any(|m| (m.x - mode.x).abs() < 0.1 * m.width()) {
                modes.push(mode);
            }
        }
    }
    if modes.is_empty() {
        modes.push(roots::mode(ln_f, start, scale)?);
    }
    Ok(modes)
}

/// The integrand in the walking variable.
struct Grid<F> {
    ln_f: F,
    /// Heights are kept relative to this, so that they neither overflow nor underflow.
    reference: f64,
    cap: usize,
}

type Points = Vec<(f64, f64)>;

impl<F: FnMut(f64) -> Result<f64>> Grid<F> {
    fn at(&mut self, u: f64) -> Result<(f64, f64)> {
        Ok((u, (self.ln_f)(u)? - self.reference))
    }

    /// Points from `centre` outward, past all of `first` … `last`, until the rest is negligible.
    fn walk(&mut self, centre: f64, step: f64, first: f64, last: f64, floor: f64) -> Result<Points> {
        let mut points = vec![self.at(centre)?];
        let mut sum = 1.0;
        for (sign, goal) in [(-1.0, first), (1.0, last)] {
            let mut previous = 0.0;
            let mut count = 0_usize;
            loop {
                count += 1;
                let point = self.at(centre + sign * step * count as f64)?;
                points.push(point);
                sum += fm::exp(point.1);
                let passed = (point.0 - goal) * sign > step;
                // The rest of a tail that falls by `ratio` a step is at most the term over (1 − ratio).
                let ratio = if point.1 == f64::NEG_INFINITY { 0.0 } else { fm::exp(point.1 - previous) };
                if passed && ratio < 1.0 && point.1 - fm::ln(1.0 - ratio) < floor + fm::ln(sum) - 2.0 {
                    break;
                }
                previous = point.1;
                if points.len() > self.cap {
                    return Err(MathError::new(format!(
                        "integral: more than {} nodes; the tail falls too slowly or the peak is too narrow",
                        self.cap
                    )));
                }
            }
            if sign < 0.0 {
                points.reverse();
            }
        }
        Ok(points)
    }

    /// The same range with the midpoints put in.
    fn halved(&mut self, points: Points, step: f64) -> Result<Points> {
        if 2 * points.len() > self.cap {
            return Err(MathError::new(format!(
                "integral: two steps do not agree with {} nodes",
                points.len()
            )));
        }
        let mut finer = Vec::with_capacity(2 * points.len());
        for (u, value) in points {
            if !finer.is_empty() {
                finer.push(self.at(u - 0.5 * step)?);
            }
            finer.push((u, value));
        }
        Ok(finer)
    }
}

/// The integral and the expectations for one step.
struct Summary {
    ln_sum: f64,
    expectations: Vec<(f64, f64)>,
}

impl Summary {
    fn of(
        points: &Points,
        step: f64,
        place: &impl Fn(f64) -> maps::Mapped,
        functionals: &[Functional<'_>],
    ) -> Self {
        let weights: Vec<f64> = points.iter().map(|(_, height)| fm::exp(*height)).collect();
        let total: f64 = weights.iter().sum();
        let expectations = functionals
            .iter()
            .map(|g| {
                let (mut signed, mut size) = (0.0, 0.0);
                for ((u, _), weight) in points.iter().zip(&weights) {
                    if *weight > 0.0 {
                        let value = weight * g(place(*u).x);
                        signed += value;
                        size += value.abs();
                    }
                }
                (signed / total, size / total)
            })
            .collect();
        Self { ln_sum: fm::ln(total * step), expectations }
    }

    /// The largest relative difference.
    fn distance(&self, other: &Self) -> f64 {
        let mut largest = (self.ln_sum - other.ln_sum).abs();
        for ((now, size), (before, _)) in self.expectations.iter().zip(&other.expectations) {
            let difference = if *size > 0.0 { (now - before).abs() / size } else { before.abs() };
            if difference.is_nan() {
                return f64::NAN;
            }
            largest = largest.max(difference);
        }
        largest
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::normal;

    fn ln_normal(x: f64, mean: f64, sd: f64) -> f64 {
        normal::ln_pdf((x - mean) / sd) - fm::ln(sd)
    }

    #[test]
    fn a_normal_density_integrates_to_one_at_any_place_and_scale() {
        for (mean, sd, start, scale) in [
            (0.0, 1.0, 0.0, 1.0),
            (3.0, 1e-5, 0.0, 1.0),
            (-700.0, 0.3, 5.0, 20.0),
            (1e6, 1e6, 0.0, 1.0),
            (0.3, 1e-9, 0.0, 1.0),
        ] {
            let square = |x: f64| ((x - mean) / sd) * ((x - mean) / sd);
            let opts = LineOptions { functionals: vec![&square], ..LineOptions::default() };
            let line = line(|x| ln_normal(x, mean, sd), start, scale, &opts).unwrap();
            assert!(line.ln_integral.abs() < 1e-13, "{mean} {sd}: {}", line.ln_integral);
            assert!((line.expect(square) - 1.0).abs() < 1e-12);
            assert!((line.expect(|_| 1.0) - 1.0).abs() < 1e-13);
            assert!(line.nodes.len() < 200, "{}", line.nodes.len());
        }
    }

    #[test]
    fn peaks_far_apart_and_of_unlike_width_are_all_found() {
        let parts = [(0.3, -20.0, 0.5), (0.3, 0.0, 0.01), (0.4, 35.0, 3.0)];
        let ln_f = |x: f64| {
            let terms: Vec<f64> = parts.iter().map(|(w, m, s)| fm::ln(*w) + ln_normal(x, *m, *s)).collect();
            fm::ln_sum_exp(&terms)
        };
        let line = line(ln_f, 1.0, 2.0, &LineOptions::default()).unwrap();
        assert!(line.ln_integral.abs() < 1e-12, "{}", line.ln_integral);
        assert!((line.expect(|x| if x > 10.0 { 1.0 } else { 0.0 }) - 0.4).abs() < 1e-12);
    }

    #[test]
    fn a_plateau_with_soft_edges() {
        // Φ((x+10)/0.1) Φ((10−x)/0.1): integral 20 (exact, by symmetry of the edges).
        let ln_f = |x: f64| normal::ln_cdf((x + 10.0) / 0.1) + normal::ln_cdf((10.0 - x) / 0.1);
        let line = line(ln_f, 0.0, 1.0, &LineOptions::default()).unwrap();
        assert!((fm::exp(line.ln_integral) / 20.0 - 1.0).abs() < 1e-12);
    }

    #[test]
    fn power_tails_with_the_stretched_line() {
        // Cauchy: integral π; P(|x| < 1) needs an indicator, so use E 1/(1+x²) = ½ instead.
        let g = |x: f64| 1.0 / (1.0 + x * x);
        let opts = LineOptions { tails: Tails::Heavy, functionals: vec![&g], ..LineOptions::default() };
        let ln_f = |x: f64| if x.abs() > 1e100 { -2.0 * fm::ln(x.abs()) } else { -fm::ln_1p(x * x) };
        let line = line(ln_f, 0.7, 1.0, &opts).unwrap();
        assert!((fm::exp(line.ln_integral) / fm::PI - 1.0).abs() < 1e-12);
        assert!((line.expect(g) - 0.5).abs() < 1e-12);
    }

    #[test]
    fn a_tail_that_never_falls_is_an_error() {
        assert!(line(|x| -fm::ln_1p(x * x), 0.0, 1.0, &LineOptions::default()).is_err());
        assert!(line(|_| f64::NAN, 0.0, 1.0, &LineOptions::default()).is_err());
        assert!(line(|_| f64::NEG_INFINITY, 0.0, 1.0, &LineOptions::default()).is_err());
    }
}
