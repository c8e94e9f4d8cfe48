//! The trapezoid rule over a few coordinates, each on the whole line: lines are swept outward from
//! the highest point until the weight is negligible, and the grid is made finer until two agree
//! (Takahasi & Mori 1974; Trefethen & Weideman 2014). The order of evaluation is fixed.

use crate::math::{fm, roots};
use crate::quantity::Absent;

/// How many coordinates a grid can have.
pub(super) const MOST: usize = 6;
pub(super) type Place = [f64; MOST];

/// Nodes of one grid before it is an error.
const NODE_CAP: usize = 4_000_000;

/// Where the integrand is highest and how wide it is there, coordinate by coordinate.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Frame {
    pub centre: Place,
    pub width: Place,
    pub dims: usize,
    pub ln_top: f64,
}

/// What a node carries beside its place.
pub(super) trait Weighted {
    fn ln_weight(&self) -> f64;
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
    Ok(Frame { centre: at, width, dims, ln_top })
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
    let mut sweep = Sweep { f, frame, factor, offset, floor, top: frame.ln_top, nodes: Vec::new() };
    let mut index = [0; MOST];
    let mut place = frame.centre;
    if frame.dims == 0 {
        sweep.nodes.push(f(&place));
    } else {
        sweep.visit(0, &mut place, &mut index)?;
    }
    Ok(sweep.nodes)
}

struct Sweep<'a, N, F: Fn(&Place) -> N> {
    f: &'a F,
    frame: &'a Frame,
    factor: f64,
    offset: f64,
    floor: f64,
    top: f64,
    nodes: Vec<N>,
}

impl<N: Weighted, F: Fn(&Place) -> N> Sweep<'_, N, F> {
    fn coordinate(&self, dim: usize, index: i64) -> f64 {
        self.frame.centre[dim] + (index as f64 + self.offset) * self.factor * self.frame.width[dim]
    }

    /// Sweeps coordinate `dim` (and those after it); hands back the line's highest weight and leaves the
    /// index of its place in `index`, where the neighbouring line begins.
    fn visit(&mut self, dim: usize, place: &mut Place, index: &mut [i64; MOST]) -> Result<f64, Absent> {
        if dim + 1 == self.frame.dims {
            return self.line(dim, place, index);
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
                place[dim] = self.coordinate(dim, i);
                let high = self.visit(dim + 1, place, &mut here)?;
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

    fn line(&mut self, dim: usize, place: &mut Place, index: &mut [i64; MOST]) -> Result<f64, Absent> {
        let mut best_index = self.climb(dim, place, index[dim]);
        let first = best_index;
        let mut best = f64::NEG_INFINITY;
        for direction in [1, -1] {
            let mut i = if direction == 1 { first } else { first - 1 };
            let mut low = 0;
            while low < 2 {
                place[dim] = self.coordinate(dim, i);
                let node = (self.f)(place);
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
        index[dim] = best_index;
        Ok(best)
    }

    /// The index uphill from `from`, at most 10,000 steps away.
    fn climb(&self, dim: usize, place: &mut Place, from: i64) -> i64 {
        let mut at = |i: i64| {
            place[dim] = self.coordinate(dim, i);
            (self.f)(place).ln_weight()
        };
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
    let volume: f64 = (0..frame.dims).map(|d| fm::ln(factor * frame.width[d])).sum();
    top + fm::ln(sum) + volume
}
