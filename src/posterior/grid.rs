//! The trapezoid rule over a few coordinates, each on the whole line: lines are swept outward from
//! the highest point until the weight is negligible, and the grid is made finer until two agree
//! (Takahasi & Mori 1974; Trefethen & Weideman 2014). Coordinates are stretched by sinh, so that steps
//! grow where the weight has all but died out. The order of evaluation is fixed.

use crate::math::{fm, roots};
use crate::quantity::Absent;

/// How many coordinates a grid can have.
pub(super) const MOST: usize = 5;
pub(super) type Place = [f64; MOST];

/// Nodes of one grid before it is an error.
const NODE_CAP: usize = 4_000_000;

/// Where the integrand is highest and how wide it is there, coordinate by coordinate.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Frame {
    pub centre: Place,
    pub width: Place,
    /// How fast a coordinate's steps grow with the distance from its centre (per width); 0: even steps.
    pub stretch: Place,
    pub dims: usize,
    pub ln_top: f64,
}

/// How fast steps grow with the distance: what the tails of laws, made far from the centre, still bear.
pub(super) const STRETCH: f64 = 0.12;

/// What a node carries beside its place.
pub(super) trait Weighted {
    fn ln_weight(&self) -> f64;

    /// Counts the node for a larger cell of the grid, by ln of how much larger.
    fn enlarge(&mut self, ln_cell: f64);
}

impl Frame {
    /// The coordinate at `t` even steps (in widths) from the centre, and ln of the growth of steps there.
    pub fn coordinate(&self, dim: usize, t: f64) -> (f64, f64) {
        let k = self.stretch[dim];
        if k == 0.0 {
            return (self.centre[dim] + t * self.width[dim], 0.0);
        }
        let up = fm::exp(k * t);
        let down = 1.0 / up;
        let (sinh, cosh) = (0.5 * (up - down), 0.5 * (up + down));
        (self.centre[dim] + self.width[dim] / k * sinh, fm::ln(cosh))
    }

    /// ln of the growth of steps at a coordinate.
    pub fn ln_growth(&self, dim: usize, coordinate: f64) -> f64 {
        let along = self.stretch[dim] * (coordinate - self.centre[dim]) / self.width[dim];
        0.5 * fm::ln_1p(along * along)
    }

    /// ln of the volume of a cell at the centre.
    pub fn ln_volume(&self, factor: f64) -> f64 {
        (0..self.dims).map(|d| fm::ln(factor * self.width[d])).sum()
    }
}

/// Finds the highest point by searches along one coordinate after another.
pub(super) fn frame<N: Weighted>(
    f: &impl Fn(&Place) -> N,
    start: Place,
    dims: usize,
) -> Result<Frame, Absent> {
    let mut at = start;
    let mut width = [1.0; MOST];
    let mut ln_top = f(&at).ln_weight();
    for round in 0..12 {
        let before = ln_top;
        for d in 0..dims {
            let base = at;
            let along = |u: f64| {
                let mut place = base;
                place[d] = u;
                f(&place).ln_weight()
            };
            let mode = roots::mode(along, at[d], width[d]).map_err(failed)?;
            at[d] = mode.x;
            width[d] = mode.width();
            ln_top = mode.ln_height;
        }
        if round > 0 && (ln_top - before).abs() < 0.05 || dims < 2 {
            break;
        }
    }
    if !ln_top.is_finite() || width.iter().any(|w| !(w.is_finite() && *w > 0.0)) {
        return Err(Absent::failed("the highest point of the posterior weight was not found"));
    }
    Ok(Frame { centre: at, width, stretch: [STRETCH; MOST], dims, ln_top })
}

pub(super) fn failed(error: crate::math::error::MathError) -> Absent {
    Absent::failed(error.to_string())
}

/// All nodes of a grid with steps `factor · width`, the first node `offset` steps from the centre.
pub(super) fn sweep<N: Weighted>(
    f: &impl Fn(&Place) -> N,
    frame: &Frame,
    factor: f64,
    offset: f64,
    floor: f64,
) -> Result<Vec<N>, Absent> {
    sweep_finely(f, frame, factor, offset, floor, &|_| 1)
}

/// The same where a step along the last coordinate is made `parts(node)` steps, at most [`PARTS`], for a line near
/// whose highest point that node is: each line's sum stands for itself.
pub(super) fn sweep_finely<N: Weighted>(
    f: &impl Fn(&Place) -> N,
    frame: &Frame,
    factor: f64,
    offset: f64,
    floor: f64,
    parts: &dyn Fn(&N) -> usize,
) -> Result<Vec<N>, Absent> {
    let mut sweep = Sweep {
        f,
        frame,
        factor,
        offset,
        floor,
        parts,
        top: frame.ln_top,
        nodes: Vec::new(),
        steps: [const { Vec::new() }; MOST],
        parted: vec![Vec::new(); PARTS + 1],
    };
    let mut index = [0; MOST];
    let mut place = frame.centre;
    if frame.dims == 0 {
        sweep.nodes.push(f(&place));
    } else {
        sweep.visit(0, 0.0, &mut place, &mut index)?;
    }
    Ok(sweep.nodes)
}

/// Most parts of a step.
pub(super) const PARTS: usize = 64;

/// Coordinates and ln of the growth of steps there, by index 0, −1, 1, −2, …
type Steps = Vec<Option<(f64, f64)>>;

struct Sweep<'a, N, F: Fn(&Place) -> N> {
    f: &'a F,
    frame: &'a Frame,
    factor: f64,
    offset: f64,
    floor: f64,
    parts: &'a dyn Fn(&N) -> usize,
    top: f64,
    nodes: Vec<N>,
    /// Coordinates already computed, and those of the last dimension by the parts of its steps.
    steps: [Steps; MOST],
    parted: Vec<Steps>,
}

impl<N: Weighted, F: Fn(&Place) -> N> Sweep<'_, N, F> {
    /// The coordinate at an index, and ln of the growth of steps there.
    fn coordinate(&mut self, dim: usize, parts: usize, index: i64) -> (f64, f64) {
        let folded = if index >= 0 { 2 * index as usize } else { (-2 * index - 1) as usize };
        let known = if parts == 1 { &mut self.steps[dim] } else { &mut self.parted[parts] };
        if folded >= known.len() {
            known.resize(folded + 1, None);
        }
        let frame = self.frame;
        let t = (index as f64 + self.offset) * self.factor / parts as f64;
        *known[folded].get_or_insert_with(|| frame.coordinate(dim, t))
    }

    /// Sweeps coordinate `dim` (and those after it); hands back the line's highest weight and leaves the
    /// index of its place in `index`, where the neighbouring line begins.
    fn visit(
        &mut self,
        dim: usize,
        ln_cell: f64,
        place: &mut Place,
        index: &mut [i64; MOST],
    ) -> Result<f64, Absent> {
        if dim + 1 == self.frame.dims {
            return self.line(dim, ln_cell, place, index);
        }
        let first = index[dim];
        let (mut best, mut best_index) = (f64::NEG_INFINITY, *index);
        let mut beside_first = *index;
        for direction in [1, -1] {
            let mut here = if direction == 1 { *index } else { beside_first };
            let mut i = if direction == 1 { first } else { first - 1 };
            let mut low = 0;
            while low < 2 {
                here[dim] = i;
                let (at, ln_growth) = self.coordinate(dim, 1, i);
                place[dim] = at;
                let high = self.visit(dim + 1, ln_cell + ln_growth, place, &mut here)?;
                if i == first {
                    beside_first = here;
                }
                if high > best {
                    best = high;
                    best_index = here;
                }
                low = if high < self.top - self.floor { low + 1 } else { 0 };
                i += direction;
            }
        }
        *index = best_index;
        Ok(best)
    }

    fn node(&mut self, dim: usize, parts: usize, ln_cell: f64, place: &mut Place, i: i64) -> N {
        let (at, ln_growth) = self.coordinate(dim, parts, i);
        place[dim] = at;
        let mut node = (self.f)(place);
        node.enlarge(ln_cell + ln_growth);
        node
    }

    fn line(
        &mut self,
        dim: usize,
        ln_cell: f64,
        place: &mut Place,
        index: &mut [i64; MOST],
    ) -> Result<f64, Absent> {
        let mut first = index[dim];
        // Where the line begins inside the mass it is swept from there.
        let mut start = self.node(dim, 1, ln_cell, place, first);
        if start.ln_weight().is_nan() || start.ln_weight() < self.top - self.floor {
            first = self.climb(dim, ln_cell, place, first);
            start = self.node(dim, 1, ln_cell, place, first);
        }
        let parts = (self.parts)(&start).clamp(1, PARTS);
        let mut start = Some(start).filter(|_| parts == 1);
        let ln_parts = if parts == 1 { 0.0 } else { fm::ln(parts as f64) };
        let ln_cell = ln_cell - ln_parts;
        first *= parts as i64;
        let mut best_index = first;
        let mut best = f64::NEG_INFINITY;
        for direction in [1, -1] {
            let mut i = if direction == 1 { first } else { first - 1 };
            let mut low = 0;
            while low < 2 {
                let node = match start.take() {
                    Some(node) => node,
                    None => self.node(dim, parts, ln_cell, place, i),
                };
                let ln_weight = node.ln_weight();
                if ln_weight.is_nan() || ln_weight == f64::INFINITY {
                    return Err(Absent::failed("a posterior weight is not a number"));
                }
                if ln_weight > best {
                    best = ln_weight;
                    best_index = i;
                }
                self.top = self.top.max(ln_weight);
                if ln_weight < self.top - self.floor {
                    low += 1;
                } else {
                    low = 0;
                    self.nodes.push(node);
                }
                i += direction;
            }
            if self.nodes.len() > NODE_CAP {
                return Err(Absent::failed("the posterior needs more quadrature nodes than allowed"));
            }
        }
        index[dim] = best_index.div_euclid(parts as i64);
        Ok(best + ln_parts)
    }

    /// The index uphill from `from`, at most 10,000 steps away.
    fn climb(&mut self, dim: usize, ln_cell: f64, place: &mut Place, from: i64) -> i64 {
        let mut at = |i: i64| self.node(dim, 1, ln_cell, place, i).ln_weight();
        let (mut i, mut here) = (from, at(from));
        let (up, down) = (at(from + 1), at(from - 1));
        let direction = if up >= down { 1 } else { -1 };
        let mut next = up.max(down);
        let mut steps = 0;
        while next > here && steps < 10_000 {
            i += direction;
            here = next;
            next = at(i + direction);
            steps += 1;
        }
        i
    }
}

/// ln Σ exp(ln weight) of nodes, times the step volume.
pub(super) fn ln_integral<N: Weighted>(nodes: &[N], frame: &Frame, factor: f64) -> f64 {
    let top = nodes.iter().map(Weighted::ln_weight).fold(f64::NEG_INFINITY, f64::max);
    let sum: f64 = nodes.iter().map(|n| fm::exp(n.ln_weight() - top)).sum();
    top + fm::ln(sum) + frame.ln_volume(factor)
}
