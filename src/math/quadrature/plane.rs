//! The trapezoid rule on the plane for an integrand given by its logarithm.

use crate::math::error::{MathError, Result};
use crate::math::fm;
use crate::math::roots;

/// One node: a place and the logarithm of its share of the whole.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PlaneNode {
    /// The first coordinate.
    pub x: f64,
    /// The second coordinate.
    pub y: f64,
    /// ln of the weight; all weights of a plane add to 1.
    pub ln_weight: f64,
}

impl PlaneNode {
    /// The weight itself.
    pub fn weight(&self) -> f64 {
        fm::exp(self.ln_weight)
    }
}

/// A function whose expectation must settle before the steps are accepted.
pub type PlaneFunctional<'a> = &'a dyn Fn(f64, f64) -> f64;

/// What is asked of `plane`.
#[derive(Clone)]
pub struct PlaneOptions<'a> {
    /// Nodes with less than this share of the whole are left out (1e−30).
    pub weight_floor: f64,
    /// Halving either step must change the integral and every expectation by less than this, relative (1e−12).
    pub tolerance: f64,
    /// More nodes than this are an error (4 000 000).
    pub node_cap: usize,
    /// The scan for highest points looks this many scales to all sides of the start (40). The integrand must be a
    /// number (−∞ allowed) there.
    pub reach: f64,
    /// Functions whose expectations must settle too.
    pub functionals: Vec<PlaneFunctional<'a>>,
}

impl Default for PlaneOptions<'_> {
    fn default() -> Self {
        Self {
            weight_floor: 1e-30,
            tolerance: 1e-12,
            node_cap: 4_000_000,
            reach: 40.0,
            functionals: Vec::new(),
        }
    }
}

/// The integrand on its nodes.
#[derive(Debug, Clone)]
pub struct Plane {
    /// The nodes, row by row, x rising and y rising within a row.
    pub nodes: Vec<PlaneNode>,
    /// ln ∬ exp(ln_f).
    pub ln_integral: f64,
    /// The largest relative change by halving either step, over the integral and all functionals.
    pub error: f64,
    /// The highest point that was found.
    pub mode: (f64, f64),
}

impl Plane {
    /// The expectation of g under the normalised integrand.
    pub fn expect(&self, mut g: impl FnMut(f64, f64) -> f64) -> f64 {
        self.nodes.iter().map(|n| n.weight() * g(n.x, n.y)).sum()
    }
}

/// Integrates exp(ln_f) over the whole plane, and hands back the nodes with their normalised weights.
///
/// Precondition: `ln_f` is smooth where it is not negligible, −∞ where the density is 0, never NaN or +∞, and falls in
/// all directions. `start` and `scale` say roughly where and how wide in each coordinate. Steps: scan a grid that widens
/// away from the start, climb from every local maximum, scale and shear the grid by the curvature at the highest point,
/// walk each row outward from its own highest point and the rows outward from the mode until the rest is below
/// `weight_floor`, then halve each step until halving changes nothing by more than `tolerance`. The nodes handed back are
/// those of the coarser of the two agreeing grids (its difference from the finer one is `error`, so the bound is
/// measured at these nodes). Errors: NaN, no mass, `node_cap` reached without agreement.
pub fn plane(
    mut ln_f: impl FnMut(f64, f64) -> f64,
    start: (f64, f64),
    scale: (f64, f64),
    opts: &PlaneOptions<'_>,
) -> Result<Plane> {
    let floor = fm::ln(opts.weight_floor);
    let tops = highest_points(&mut ln_f, start, scale, opts.reach)?;
    let Some(top) = tops.iter().copied().reduce(|a, b| if b.height > a.height { b } else { a }) else {
        return Err(MathError::new("plane integral: no mass found"));
    };
    let lattice = Lattice::around(&mut ln_f, &top)?;
    let places = tops.iter().filter(|t| t.height > top.height + floor).map(|t| (t.x, t.y)).collect();
    let mut walker =
        Walker { ln_f, reference: top.height, floor, cap: opts.node_cap, used: 0, lattice, tops: places };
    let mut rows = walker.rows()?;
    let mut now = Summary::of(&rows, &walker.lattice, &opts.functionals);
    let mut error = 0.0_f64;
    // First the step along the rows, row by row (no cancelling between rows), then the step from row to row.
    loop {
        let finer = walker.halved_along(&rows)?;
        let fine_lattice = walker.lattice.halved_along();
        let fine = Summary::of(&finer, &fine_lattice, &opts.functionals);
        let change = fine.distance(&now, true);
        if change <= opts.tolerance {
            error = error.max(change);
            break;
        }
        if change.is_nan() {
            return Err(MathError::new("plane integral: an expectation is not a number"));
        }
        (rows, now, walker.lattice) = (finer, fine, fine_lattice);
    }
    loop {
        let finer = walker.halved_across(&rows)?;
        let fine_lattice = walker.lattice.halved_across();
        let fine = Summary::of(&finer, &fine_lattice, &opts.functionals);
        let change = fine.distance(&now, false);
        if change <= opts.tolerance {
            error = error.max(change);
            break;
        }
        if change.is_nan() {
            return Err(MathError::new("plane integral: an expectation is not a number"));
        }
        (rows, now, walker.lattice) = (finer, fine, fine_lattice);
    }
    let lattice = &walker.lattice;
    let ln_total = fm::ln(now.total);
    let mut nodes = Vec::with_capacity(rows.iter().map(|r| r.heights.len()).sum());
    for row in &rows {
        for (k, height) in row.heights.iter().enumerate() {
            let ln_weight = height - ln_total;
            if ln_weight > floor {
                let (x, y) = lattice.place(row.index, row.first + k as i64);
                nodes.push(PlaneNode { x, y, ln_weight });
            }
        }
    }
    let ln_integral = top.height + ln_total + fm::ln(lattice.step_x) + fm::ln(lattice.step_y);
    Ok(Plane { nodes, ln_integral, error, mode: (top.x, top.y) })
}

#[derive(Debug, Clone, Copy)]
struct Top {
    x: f64,
    y: f64,
    height: f64,
}

/// The local maxima that a coarse scan finds, each climbed.
fn highest_points(
    ln_f: &mut impl FnMut(f64, f64) -> f64,
    start: (f64, f64),
    scale: (f64, f64),
    reach: f64,
) -> Result<Vec<Top>> {
    let good = |v: f64| v.is_finite() && v > 0.0;
    if !start.0.is_finite() || !start.1.is_finite() || !good(scale.0) || !good(scale.1) {
        return Err(MathError::new(format!(
            "plane integral: start {start:?} and scale {scale:?} must be finite, scale above 0"
        )));
    }
    const HALF: i32 = 14;
    const SIDE: usize = 2 * HALF as usize + 1;
    let widest = fm::asinh(2.0 * reach);
    let offset = |i: usize| 0.5 * fm::sinh(widest * f64::from(i as i32 - HALF) / f64::from(HALF));
    let xs: Vec<f64> = (0..SIDE).map(|i| start.0 + scale.0 * offset(i)).collect();
    let ys: Vec<f64> = (0..SIDE).map(|i| start.1 + scale.1 * offset(i)).collect();
    let mut heights = vec![f64::NEG_INFINITY; SIDE * SIDE];
    for (i, x) in xs.iter().enumerate() {
        for (j, y) in ys.iter().enumerate() {
            let value = ln_f(*x, *y);
            if value.is_nan() || value == f64::INFINITY {
                return Err(MathError::new(format!(
                    "plane integral: the log integrand is {value} at ({x}, {y})"
                )));
            }
            heights[i * SIDE + j] = value;
        }
    }
    let mut tops: Vec<Top> = Vec::new();
    for i in 0..SIDE {
        for j in 0..SIDE {
            let here = heights[i * SIDE + j];
            if here == f64::NEG_INFINITY || !is_peak(&heights, SIDE, i, j) {
                continue;
            }
            let gap = |v: &[f64], k: usize| {
                let left = if k > 0 { v[k] - v[k - 1] } else { f64::INFINITY };
                left.min(if k + 1 < SIDE { v[k + 1] - v[k] } else { f64::INFINITY })
            };
            let found = climb(ln_f, (xs[i], ys[j]), (0.25 * gap(&xs, i), 0.25 * gap(&ys, j)))?;
            let known = tops
                .iter()
                .any(|t| (t.x - found.x).abs() < 1e-3 * scale.0 && (t.y - found.y).abs() < 1e-3 * scale.1);
            if !known {
                tops.push(found);
            }
        }
    }
    if tops.is_empty() {
        return Err(MathError::new("plane integral: the density is 0 at every point of the scan"));
    }
    Ok(tops)
}

fn is_peak(heights: &[f64], side: usize, i: usize, j: usize) -> bool {
    let here = heights[i * side + j];
    for a in i.saturating_sub(1)..=(i + 1).min(side - 1) {
        for b in j.saturating_sub(1)..=(j + 1).min(side - 1) {
            let other = heights[a * side + b];
            // Of equal neighbours the first counts.
            if other > here || (other == here && (a, b) < (i, j)) {
                return false;
            }
        }
    }
    true
}

/// Uphill along both coordinates and along the way of the last round (Powell 1964), until a round gains nothing.
fn climb(ln_f: &mut impl FnMut(f64, f64) -> f64, from: (f64, f64), first: (f64, f64)) -> Result<Top> {
    let (mut x, mut y) = from;
    let (mut step_x, mut step_y) = first;
    let mut height = ln_f(x, y);
    for _ in 0..200 {
        let before = (x, y, height);
        let along = roots::mode(|t| ln_f(t, y), x, step_x)?;
        (x, step_x) = (along.x, along.width());
        let along = roots::mode(|t| ln_f(x, t), y, step_y)?;
        (y, step_y) = (along.x, along.width());
        height = along.ln_height;
        let (dx, dy) = (x - before.0, y - before.1);
        if height - before.2 < 1e-4 || (dx == 0.0 && dy == 0.0) {
            return Ok(Top { x, y, height });
        }
        let along = roots::mode(|t| ln_f(x + t * dx, y + t * dy), 0.0, 1.0)?;
        if along.ln_height > height {
            (x, y, height) = (x + along.x * dx, y + along.x * dy, along.ln_height);
        }
    }
    Err(MathError::new("plane integral: the highest point is not reached within 200 rounds"))
}

/// x = x₀ + i·step_x; y = y₀ + slope·(x − x₀) + j·step_y.
#[derive(Debug, Clone)]
struct Lattice {
    x0: f64,
    y0: f64,
    slope: f64,
    step_x: f64,
    step_y: f64,
}

impl Lattice {
    /// Steps and shear from the second differences of the log density around its top.
    fn around(ln_f: &mut impl FnMut(f64, f64) -> f64, top: &Top) -> Result<Self> {
        let along_y = roots::mode(|t| ln_f(top.x, t), top.y, 1e-3 * top.y.abs().max(1e-3))?;
        let (x, y, width_y) = (top.x, along_y.x, along_y.width());
        let width_x = roots::mode(|t| ln_f(t, y), x, 1e-3 * x.abs().max(1e-3))?.width();
        let (dx, dy) = (0.25 * width_x, 0.25 * width_y);
        let centre = ln_f(x, y);
        let bend_x = (2.0 * centre - ln_f(x + dx, y) - ln_f(x - dx, y)) / (dx * dx);
        let bend_y = (2.0 * centre - ln_f(x, y + dy) - ln_f(x, y - dy)) / (dy * dy);
        let twist =
            (ln_f(x + dx, y - dy) + ln_f(x - dx, y + dy) - ln_f(x + dx, y + dy) - ln_f(x - dx, y - dy))
                / (4.0 * dx * dy);
        // exp(−½(bend_x u² + 2 twist u v + bend_y v²)): rows follow the ridge v = −(twist/bend_y) u.
        let shared = twist * twist / (bend_x * bend_y);
        let usable = bend_x > 0.0 && bend_y > 0.0 && shared < 1.0;
        let (slope, stretch) =
            if usable { (-twist / bend_y, 1.0 / (1.0 - shared).max(1e-4).sqrt()) } else { (0.0, 1.0) };
        Ok(Self { x0: x, y0: y, slope, step_x: 0.75 * width_x * stretch, step_y: 0.75 * width_y })
    }

    fn place(&self, i: i64, j: i64) -> (f64, f64) {
        let run = i as f64 * self.step_x;
        (self.x0 + run, self.y0 + self.slope * run + j as f64 * self.step_y)
    }

    /// The column nearest to y in row i.
    fn column(&self, i: i64, y: f64) -> i64 {
        fm::round((y - self.place(i, 0).1) / self.step_y) as i64
    }

    fn halved_along(&self) -> Self {
        Self { step_y: 0.5 * self.step_y, ..self.clone() }
    }

    fn halved_across(&self) -> Self {
        Self { step_x: 0.5 * self.step_x, ..self.clone() }
    }
}

/// A row of the lattice: heights (relative to the top) of the columns `first`, `first` + 1, …
#[derive(Debug, Clone)]
struct Row {
    index: i64,
    first: i64,
    heights: Vec<f64>,
}

impl Row {
    fn sum(&self) -> f64 {
        self.heights.iter().map(|h| fm::exp(*h)).sum()
    }

    fn highest_column(&self) -> i64 {
        let mut best = 0;
        for (k, height) in self.heights.iter().enumerate() {
            if *height > self.heights[best] {
                best = k;
            }
        }
        self.first + best as i64
    }
}

struct Walker<F> {
    ln_f: F,
    reference: f64,
    floor: f64,
    cap: usize,
    used: usize,
    lattice: Lattice,
    tops: Vec<(f64, f64)>,
}

impl<F: FnMut(f64, f64) -> f64> Walker<F> {
    fn height(&mut self, lattice: &Lattice, i: i64, j: i64) -> Result<f64> {
        let (x, y) = lattice.place(i, j);
        let value = (self.ln_f)(x, y) - self.reference;
        if value.is_nan() || value == f64::INFINITY {
            return Err(MathError::new(format!(
                "plane integral: the log integrand is {value} at ({x}, {y})"
            )));
        }
        self.used += 1;
        if self.used > 4 * self.cap {
            return Err(MathError::new(format!("plane integral: no agreement within {} nodes", self.cap)));
        }
        Ok(value)
    }

    /// One row, from column `start` up to its highest point and outward until the rest is negligible; with several tops
    /// also past the columns of all of them.
    fn row(&mut self, lattice: &Lattice, index: i64, start: i64) -> Result<Row> {
        let (mut low, mut high) = (start, start);
        if self.tops.len() > 1 {
            for k in 0..self.tops.len() {
                let column = lattice.column(index, self.tops[k].1);
                (low, high) = (low.min(column), high.max(column));
            }
        }
        let mut up = Vec::new();
        for j in low..=high {
            up.push(self.height(lattice, index, j)?);
        }
        let mut down = Vec::new();
        self.extend(lattice, index, &mut up, high, 1)?;
        // The lower side starts from the first of the upper side.
        let edge = [up.get(1).copied().unwrap_or(f64::NEG_INFINITY), up[0]];
        down.extend(edge);
        self.extend(lattice, index, &mut down, low, -1)?;
        let first = low - (down.len() as i64 - 2);
        let mut heights: Vec<f64> = down.into_iter().skip(2).rev().collect();
        heights.extend(up);
        Ok(Row { index, first, heights })
    }

    /// Goes on from `edge` in one direction while the heights rise or matter.
    fn extend(
        &mut self,
        lattice: &Lattice,
        index: i64,
        heights: &mut Vec<f64>,
        edge: i64,
        direction: i64,
    ) -> Result<()> {
        let mut j = edge;
        loop {
            let last = heights.last().copied().unwrap_or(f64::NEG_INFINITY);
            j += direction;
            let next = self.height(lattice, index, j)?;
            heights.push(next);
            let ratio = if next == f64::NEG_INFINITY { 0.0 } else { fm::exp(next - last) };
            if ratio < 1.0 && next - fm::ln(1.0 - ratio) < self.floor - 2.0 {
                return Ok(());
            }
        }
    }

    /// All rows from the mode outward.
    fn rows(&mut self) -> Result<Vec<Row>> {
        let lattice = self.lattice.clone();
        let goals: Vec<i64> =
            self.tops.iter().map(|(x, _)| fm::round((x - lattice.x0) / lattice.step_x) as i64).collect();
        let (first, last) =
            (goals.iter().copied().fold(0, i64::min), goals.iter().copied().fold(0, i64::max));
        let centre = self.row(&lattice, 0, 0)?;
        let mut total = centre.sum();
        let mut rows = vec![centre];
        for (direction, goal) in [(-1, first), (1, last)] {
            let Some(nearest) = (if direction < 0 { rows.first() } else { rows.last() }) else {
                continue;
            };
            let (mut start, mut previous) = (nearest.highest_column(), nearest.sum());
            let mut index = 0;
            loop {
                index += direction;
                let row = self.row(&lattice, index, start)?;
                let sum = row.sum();
                start = row.highest_column();
                total += sum;
                rows.push(row);
                let ratio = sum / previous;
                let passed = (index - goal) * direction > 0;
                if passed
                    && (sum == 0.0
                        || (ratio < 1.0 && sum / (1.0 - ratio) < 0.1 * fm::exp(self.floor) * total))
                {
                    break;
                }
                previous = sum;
                if rows.iter().map(|r| r.heights.len()).sum::<usize>() > self.cap {
                    return Err(MathError::new(format!("plane integral: more than {} nodes", self.cap)));
                }
            }
            if direction < 0 {
                rows.reverse();
            }
        }
        Ok(rows)
    }

    /// The same rows with the columns' midpoints put in.
    fn halved_along(&mut self, rows: &[Row]) -> Result<Vec<Row>> {
        let fine = self.lattice.halved_along();
        let mut finer = Vec::with_capacity(rows.len());
        for row in rows {
            let mut heights = Vec::with_capacity(2 * row.heights.len());
            for (k, height) in row.heights.iter().enumerate() {
                if k > 0 {
                    heights.push(self.height(&fine, row.index, 2 * (row.first + k as i64) - 1)?);
                }
                heights.push(*height);
            }
            finer.push(Row { index: row.index, first: 2 * row.first, heights });
        }
        Ok(finer)
    }

    /// The same rows with rows halfway put in.
    fn halved_across(&mut self, rows: &[Row]) -> Result<Vec<Row>> {
        let fine = self.lattice.halved_across();
        let mut finer: Vec<Row> = Vec::with_capacity(2 * rows.len());
        for row in rows {
            if let Some(before) = finer.last() {
                let start = (before.highest_column() + row.highest_column()).div_euclid(2);
                finer.push(self.row(&fine, 2 * row.index - 1, start)?);
            }
            finer.push(Row { index: 2 * row.index, ..row.clone() });
        }
        Ok(finer)
    }
}

struct Summary {
    /// Sum of exp(height) over all nodes.
    total: f64,
    /// Step areas, to compare lattices.
    step_x: f64,
    step_y: f64,
    row_sums: Vec<f64>,
    expectations: Vec<(f64, f64)>,
}

impl Summary {
    fn of(rows: &[Row], lattice: &Lattice, functionals: &[PlaneFunctional<'_>]) -> Self {
        let row_sums: Vec<f64> = rows.iter().map(Row::sum).collect();
        let total: f64 = row_sums.iter().sum();
        let mut sums = vec![(0.0, 0.0); functionals.len()];
        if !functionals.is_empty() {
            for row in rows {
                for (k, height) in row.heights.iter().enumerate() {
                    let weight = fm::exp(*height);
                    if weight > 0.0 {
                        let (x, y) = lattice.place(row.index, row.first + k as i64);
                        for (sum, g) in sums.iter_mut().zip(functionals) {
                            let value = weight * g(x, y);
                            sum.0 += value;
                            sum.1 += value.abs();
                        }
                    }
                }
            }
        }
        let expectations = sums.iter().map(|(signed, size)| (signed / total, size / total)).collect();
        Self { total, step_x: lattice.step_x, step_y: lattice.step_y, row_sums, expectations }
    }

    /// The largest relative difference; row by row when both have the same rows.
    fn distance(&self, other: &Self, same_rows: bool) -> f64 {
        let mine = self.total * self.step_x * self.step_y;
        let mut largest = if same_rows {
            let apart: f64 = self
                .row_sums
                .iter()
                .zip(&other.row_sums)
                .map(|(a, b)| (a * self.step_y - b * other.step_y).abs())
                .sum();
            apart * self.step_x / mine
        } else {
            (mine - other.total * other.step_x * other.step_y).abs() / mine
        };
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

    /// A binormal log density with means, sds and correlation.
    fn ln_binormal(x: f64, y: f64, m: (f64, f64), s: (f64, f64), r: f64) -> f64 {
        let (u, v) = ((x - m.0) / s.0, (y - m.1) / s.1);
        let rest = 1.0 - r * r;
        -(u * u - 2.0 * r * u * v + v * v) / (2.0 * rest) - fm::ln(2.0 * fm::PI * s.0 * s.1 * rest.sqrt())
    }

    #[test]
    fn a_binormal_density_integrates_to_one() {
        for (m, s, r) in [
            ((0.0, 0.0), (1.0, 1.0), 0.0),
            ((3.0, -8.0), (0.01, 5.0), 0.9),
            ((-20.0, 1.0), (2.0, 1e-4), -0.99),
        ] {
            let square = |x: f64, y: f64| (x - m.0) * (y - m.1) / (s.0 * s.1);
            let opts = PlaneOptions { functionals: vec![&square], ..PlaneOptions::default() };
            let p = plane(|x, y| ln_binormal(x, y, m, s, r), (0.0, 0.0), (1.0, 1.0), &opts).unwrap();
            assert!(p.ln_integral.abs() < 2e-11, "{m:?} {s:?}: {}", p.ln_integral);
            assert!((p.expect(square) - r).abs() < 1e-10);
            assert!(p.nodes.len() < 3000, "{}", p.nodes.len());
        }
    }

    #[test]
    fn two_peaks_and_a_slow_side() {
        // Two binormal peaks: exact total 1, exact share of the second 0.25.
        let ln_f = |x: f64, y: f64| {
            let a = fm::ln(0.75) + ln_binormal(x, y, (-4.0, -3.0), (0.5, 1.0), 0.5);
            let b = fm::ln(0.25) + ln_binormal(x, y, (6.0, 9.0), (1.0, 0.4), -0.6);
            fm::ln_add_exp(a, b)
        };
        let p = plane(ln_f, (0.0, 0.0), (1.0, 1.0), &PlaneOptions::default()).unwrap();
        assert!(p.ln_integral.abs() < 1e-11, "{}", p.ln_integral);
        assert!((p.expect(|_, y| if y > 6.0 { 1.0 } else { 0.0 }) - 0.25).abs() < 1e-11);
        // exp(u − eᵘ) has integral 1 over the line and a slow left side; times a normal that bends with u.
        let bent = |u: f64, v: f64| u - fm::exp(u) + normal::ln_pdf(v - 0.2 * u * u);
        let mean_v = |_: f64, v: f64| v;
        let opts = PlaneOptions { functionals: vec![&mean_v], ..PlaneOptions::default() };
        let p = plane(bent, (0.0, 0.0), (1.0, 1.0), &opts).unwrap();
        assert!(p.ln_integral.abs() < 1e-11, "{}", p.ln_integral);
        // E v = 0.2 E u², u = ln of a standard exponential: E u² = π²/6 + γ².
        let wanted = 0.2 * (fm::PI * fm::PI / 6.0 + 0.577_215_664_901_532_9 * 0.577_215_664_901_532_9);
        assert!((p.expect(mean_v) - wanted).abs() < 1e-11);
    }

    #[test]
    fn faults_are_errors() {
        let opts = PlaneOptions::default();
        assert!(plane(|_, _| f64::NAN, (0.0, 0.0), (1.0, 1.0), &opts).is_err());
        assert!(plane(|_, _| f64::NEG_INFINITY, (0.0, 0.0), (1.0, 1.0), &opts).is_err());
        assert!(plane(|x, y| -x * x - y * y, (0.0, 0.0), (0.0, 1.0), &opts).is_err());
        let few = PlaneOptions { node_cap: 50, ..PlaneOptions::default() };
        assert!(plane(|x, y| -x * x - y * y, (0.0, 0.0), (1.0, 1.0), &few).is_err());
    }
}
