//! The nodes of a plane of spreads, on a grid made finer until two agree on what will be asked of them,
//! and confirmed by a second rule (methods §7).

use super::grid::{self, Frame, MOST, Place};
use super::legendre;
use super::plane::{Node, Plane};
use crate::math::{fm, normal};
use crate::quantity::Absent;

/// Two grids must agree to this.
const AGREED: f64 = 2e-11;
/// And the second rule to this.
const CONFIRMED: f64 = 1e-9;
/// ln of 1e-31: lighter nodes are left out.
pub(super) const FLOOR: f64 = 72.0;

/// The nodes of a plane, with ln of the whole weight.
#[derive(Debug, Clone)]
pub(super) struct Weighed {
    pub nodes: Vec<Node>,
    pub ln_integral: f64,
    pub error: f64,
    pub frame: Frame,
    pub factor: f64,
}

/// Points where two rules are compared: seven sds out in the lower tail of the level and in the upper tail
/// of the widest prediction (the next level's reading), and near the middle of the level.
struct Gauge {
    low: f64,
    high: f64,
    middle: f64,
}

/// What is compared, relative to the whole weight.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Measured {
    ln_integral: f64,
    low: f64,
    high: f64,
    middle: f64,
}

/// Lighter nodes, relative to the heaviest, are not seen in the middle.
const UNSEEN: f64 = 1e-16;

impl Gauge {
    fn new(nodes: &[Node]) -> Gauge {
        let mut top = nodes[0];
        for node in nodes {
            if node.ln_weight > top.ln_weight {
                top = *node;
            }
        }
        let (mean, var) = widest(&top);
        let sd = (top.var + softness(&top)).sqrt();
        Gauge { low: top.mean - 7.0 * sd, high: mean + 7.0 * var.sqrt(), middle: top.mean - 0.7 * sd }
    }

    fn measure(&self, nodes: &[Node], ln_volume: f64) -> Measured {
        let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
        let (mut whole, mut low, mut high, mut middle) = (0.0, 0.0, 0.0, 0.0);
        for node in nodes {
            let w = fm::exp(node.ln_weight - top);
            whole += w;
            let sd = (node.var + softness(node)).sqrt();
            low += w * normal::cdf((self.low - node.mean) / sd);
            let (mean, var) = widest(node);
            high += w * normal::sf((self.high - mean) / var.sqrt());
            if w > UNSEEN {
                middle += w * normal::cdf((self.middle - node.mean) / sd);
            }
        }
        Measured {
            ln_integral: top + fm::ln(whole) + ln_volume,
            low: low / whole,
            high: high / whole,
            middle: middle / whole,
        }
    }
}

impl Measured {
    fn difference(&self, other: &Measured) -> f64 {
        let mut worst = (self.ln_integral - other.ln_integral).abs();
        for (x, y) in [(self.low, other.low), (self.high, other.high), (self.middle, other.middle)] {
            if x > 1e-25 || y > 1e-25 {
                worst = worst.max((x - y).abs() / x.max(y));
            }
        }
        if worst.is_nan() { f64::INFINITY } else { worst }
    }
}

/// Mean and variance of the next level's reading, or of this one's, or of the level itself.
fn widest(node: &Node) -> (f64, f64) {
    let reading = if node.sigma.is_nan() { 0.0 } else { node.sigma * node.sigma };
    let next = node.long_var + node.tau * node.tau;
    if next.is_finite() {
        (node.long_mean, next + reading + softness(node))
    } else {
        (node.mean, node.var + reading + softness(node))
    }
}

/// Added to variances where levels are points on a line, so that the sums compared are smooth.
fn softness(node: &Node) -> f64 {
    let (level, long) = (node.level_line.1, node.long_line.1);
    let square = |s: f64| if s.is_finite() { s * s } else { 0.0 };
    square(level) + square(long)
}

/// Weighs a plane.
pub(super) fn weigh(plane: &Plane) -> Result<Weighed, Absent> {
    let dims = plane.coordinates().len();
    let f = |place: &Place| plane.node(place);
    if dims == 0 {
        let node = plane.node(&[0.0; MOST]);
        if node.ln_weight.is_nan() {
            return Err(Absent::failed("the posterior weight is not a number"));
        }
        let frame = Frame { centre: [0.0; MOST], width: [1.0; MOST], dims, ln_top: node.ln_weight };
        return Ok(Weighed {
            nodes: vec![node],
            ln_integral: node.ln_weight,
            error: 0.0,
            frame,
            factor: 1.0,
        });
    }
    let frame = grid::frame(&f, plane.start(), dims)?;
    let mut factor = 0.75;
    let mut coarse = grid::sweep(&f, &frame, factor, 0.0, FLOOR)?;
    if coarse.is_empty() {
        return Err(Absent::failed("the posterior weight is 0 everywhere"));
    }
    let gauge = Gauge::new(&coarse);
    let volume = |factor: f64| (0..dims).map(|d| fm::ln(factor * frame.width[d])).sum::<f64>();
    let mut measured = gauge.measure(&coarse, volume(factor));
    for _ in 0..12 {
        let finer = factor * std::f64::consts::FRAC_1_SQRT_2;
        let fine = grid::sweep(&f, &frame, finer, 0.37, FLOOR)?;
        let again = gauge.measure(&fine, volume(finer));
        let error = measured.difference(&again);
        if error <= AGREED {
            // Where they agree that well the coarser grid is as good, and cheaper to ask.
            let keep_coarse = error <= 0.1 * AGREED;
            let (nodes, factor, result) =
                if keep_coarse { (coarse, factor, measured) } else { (fine, finer, again) };
            let confirmed = confirm(plane, &frame, &nodes, &gauge, &result)?;
            return Ok(Weighed {
                nodes,
                ln_integral: result.ln_integral,
                error: error.max(confirmed),
                frame,
                factor,
            });
        }
        coarse = fine;
        measured = again;
        factor = finer;
    }
    Err(Absent::failed("the quadrature over the within and between sd did not reach its promised accuracy"))
}

/// The same integrals by Gauss–Legendre panels over the box that holds the mass; an error where they
/// disagree with the trapezoid's. Over three coordinates and more the two offset grids stand alone.
fn confirm(
    plane: &Plane,
    frame: &Frame,
    nodes: &[Node],
    gauge: &Gauge,
    measured: &Measured,
) -> Result<f64, Absent> {
    if frame.dims > 2 {
        return Ok(0.0);
    }
    // Ends of the box: nodes above 1e-15 of the highest.
    let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
    let heavy = || nodes.iter().filter(|n| n.ln_weight > top - 35.0);
    let panels = |d: usize, lo: f64, hi: f64| {
        let width = (4.0 * frame.width[d]).min(2.0);
        let count = ((hi - lo) / width).ceil().max(1.0);
        (count as usize, (hi - lo) / count)
    };
    let ends = |d: usize, near: Option<(f64, f64)>| {
        let close = |n: &&Node| near.is_none_or(|(u, step)| (n.place[0] - u).abs() <= step);
        heavy()
            .filter(close)
            .fold((f64::INFINITY, f64::NEG_INFINITY), |(lo, hi), n| (lo.min(n.place[d]), hi.max(n.place[d])))
    };
    let mut found: Vec<Node> = Vec::new();
    let mut along_last = |place: &mut Place, ln_outer: f64, (lo, hi): (f64, f64)| {
        let d = frame.dims - 1;
        let (lo, hi) = (lo - frame.width[d], hi + frame.width[d]);
        let (count, size) = panels(d, lo, hi);
        for panel in 0..count {
            let middle = lo + (panel as f64 + 0.5) * size;
            for (x, w) in legendre::rule() {
                place[d] = middle + 0.5 * size * x;
                let mut node = plane.node(place);
                node.ln_weight += ln_outer + fm::ln(0.5 * size * w);
                if node.ln_weight > f64::NEG_INFINITY {
                    found.push(node);
                }
            }
        }
    };
    let (lo, hi) = ends(0, None);
    let mut place = [0.0; MOST];
    if frame.dims == 1 {
        along_last(&mut place, 0.0, (lo, hi));
    } else {
        let step = 2.0 * frame.width[0];
        let (lo, hi) = (lo - frame.width[0], hi + frame.width[0]);
        let (count, size) = panels(0, lo, hi);
        for panel in 0..count {
            let middle = lo + (panel as f64 + 0.5) * size;
            for (x, w) in legendre::rule() {
                place[0] = middle + 0.5 * size * x;
                let inner = ends(1, Some((place[0], step)));
                if inner.0 <= inner.1 {
                    along_last(&mut place, fm::ln(0.5 * size * w), inner);
                }
            }
        }
    }
    if found.is_empty() {
        return Err(Absent::failed("the second quadrature rule found no mass"));
    }
    let again = gauge.measure(&found, 0.0);
    let error = (again.ln_integral - measured.ln_integral).abs().max((again.middle - measured.middle).abs());
    if error.is_nan() || error > CONFIRMED {
        return Err(Absent::failed(format!(
            "two quadrature rules disagree by {error:e} over the within and between sd"
        )));
    }
    Ok(error)
}
