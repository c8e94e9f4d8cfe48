//! The nodes of a plane of spreads, on a grid made finer until two agree on what will be asked of them,
//! and confirmed by a second rule (methods §7).

use super::grid::{self, Frame, MOST, Place};
use super::legendre;
use super::plane::{Coordinate, Node, Plane};
use crate::math::{fm, normal};
use crate::quantity::Absent;

/// Two grids must agree to this in the middle, and in the tails.
const AGREED: f64 = 2e-11;
const AGREED_IN_TAILS: f64 = 4e-10;
/// The first grid's steps, in widths; each further one has shorter ones.
const FIRST: f64 = 0.46;
/// How fast the steps of σ grow.
pub(super) const STRETCH_OF_SD: f64 = 0.08;
const RATIO: f64 = 0.85;
const ROUNDS: usize = 14;
/// And the second rule to this.
const CONFIRMED: f64 = 1e-9;
/// How much lighter (ln) than the heaviest a node is whose share of the whole is 1e-30: these are left out. The
/// whole is that of some 5 heaviest nodes for each coordinate.
pub(super) fn floor(dims: usize) -> f64 {
    69.1 - 1.6 * dims as f64
}

/// The nodes of a plane, with ln of the whole weight.
#[derive(Debug, Clone)]
pub(super) struct Weighed {
    pub nodes: Vec<Node>,
    pub ln_integral: f64,
    pub error: f64,
    pub frame: Frame,
    pub factor: f64,
}

/// Points where two rules are compared: near the middle of the level; seven sds out in the lower tail of the level
/// and in the upper tail of the widest prediction (the next level's reading); and in both where 1e-12 or so is left.
struct Gauge {
    low: [f64; 2],
    high: [f64; 2],
    middle: f64,
}

/// What is compared, relative to the whole weight.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Measured {
    ln_integral: f64,
    low: [f64; 2],
    high: [f64; 2],
    middle: f64,
}

/// The chance at which the far tails are compared.
const FAR: f64 = 1e-12;

/// Lighter nodes, relative to the heaviest, are not seen in the middle.
const UNSEEN: f64 = 1e-16;
/// And ln of how much lighter they are where the tails, of 1e-12 or so, do not see them either.
const UNSEEN_IN_TAILS: f64 = 60.0;

impl Gauge {
    fn new(nodes: &[Node]) -> Gauge {
        let mut top = nodes[0];
        for node in nodes {
            if node.ln_weight > top.ln_weight {
                top = *node;
            }
        }
        let (mean, var) = widest(&top);
        let (sd, widest_sd) = (top.var.sqrt(), var.sqrt());
        let mut gauge = Gauge {
            low: [top.mean - 7.0 * sd; 2],
            high: [mean + 7.0 * widest_sd; 2],
            middle: top.mean - 0.7 * sd,
        };
        // Outward until no more is left than wanted, and not so far that there is nothing: some nodes tell where.
        let some: Vec<Node> = nodes.iter().step_by(1 + nodes.len() / 400).copied().collect();
        let (mut down, mut up) = (7.0, 7.0);
        for _ in 0..24 {
            let now = gauge.measure(&some, 0.0);
            let (low, high) = (now.low[1] > 2.0 * FAR, now.high[1] > 2.0 * FAR);
            if !low && !high {
                break;
            }
            if low {
                down *= 1.0 + 0.03 * fm::ln(now.low[1] / FAR).clamp(1.0, 20.0);
                gauge.low[1] = top.mean - down * sd;
            }
            if high {
                up *= 1.0 + 0.03 * fm::ln(now.high[1] / FAR).clamp(1.0, 20.0);
                gauge.high[1] = mean + up * widest_sd;
            }
        }
        gauge
    }

    /// ln of the integral, and the chance in the middle.
    fn of_middle(&self, nodes: &[Node], ln_volume: f64) -> (f64, f64) {
        let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
        let (mut whole, mut middle) = (0.0, 0.0);
        for node in nodes.iter().filter(|n| n.ln_weight > top - 37.0) {
            let w = fm::exp(node.ln_weight - top);
            whole += w;
            middle += w * normal::cdf((self.middle - node.mean) / node.var.sqrt());
        }
        (top + fm::ln(whole) + ln_volume, middle / whole)
    }

    fn measure(&self, nodes: &[Node], ln_volume: f64) -> Measured {
        let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
        let (mut whole, mut low, mut high, mut middle) = (0.0, [0.0; 2], [0.0; 2], 0.0);
        for node in nodes {
            if node.ln_weight < top - UNSEEN_IN_TAILS {
                continue;
            }
            let w = fm::exp(node.ln_weight - top);
            whole += w;
            let sd = node.var.sqrt();
            let (mean, var) = widest(node);
            let widest_sd = var.sqrt();
            for k in 0..2 {
                low[k] += w * bell((self.low[k] - node.mean) / sd);
                high[k] += w * bell((self.high[k] - mean) / widest_sd);
            }
            if w > UNSEEN {
                middle += w * normal::cdf((self.middle - node.mean) / sd);
            }
        }
        Measured {
            ln_integral: top + fm::ln(whole) + ln_volume,
            low: low.map(|x| x / whole),
            high: high.map(|x| x / whole),
            middle: middle / whole,
        }
    }
}

/// Falls as a normal tail does, at less cost than the tail itself: what matters is where grids differ.
fn bell(z: f64) -> f64 {
    fm::exp(-0.5 * z * z)
}

impl Measured {
    /// The largest difference in the middle, and in the tails.
    fn difference(&self, other: &Measured) -> (f64, f64) {
        // Down to 1e-12 tails are compared relatively, below absolutely.
        let apart = |x: f64, y: f64| (x - y).abs() / x.max(y).max(1e-12);
        let middle = (self.ln_integral - other.ln_integral)
            .abs()
            .max((self.middle - other.middle).abs() / self.middle);
        let mut tails = 0.0f64;
        for k in 0..2 {
            tails = tails.max(apart(self.low[k], other.low[k])).max(apart(self.high[k], other.high[k]));
        }
        if middle.is_nan() || tails.is_nan() { (f64::INFINITY, f64::INFINITY) } else { (middle, tails) }
    }
}

/// Mean and variance of the next level's reading, or of this one's, or of the level itself.
fn widest(node: &Node) -> (f64, f64) {
    let reading = if node.sigma.is_nan() { 0.0 } else { node.sigma * node.sigma };
    let next = node.long_var + node.tau * node.tau;
    if next.is_finite() { (node.long_mean, next + reading) } else { (node.mean, node.var + reading) }
}

/// Weighs a plane.
pub(super) fn weigh(plane: &Plane) -> Result<Weighed, Absent> {
    let dims = plane.coordinates().len();
    let f = plane.nodes();
    if dims == 0 {
        let node = plane.node_alone(&[0.0; MOST]);
        if node.ln_weight.is_nan() {
            return Err(Absent::failed("the posterior weight is not a number"));
        }
        let frame = Frame {
            centre: [0.0; MOST],
            width: [1.0; MOST],
            stretch: [0.0; MOST],
            dims,
            ln_top: node.ln_weight,
        };
        let error = error_of_marks(plane, &node)?;
        return Ok(Weighed { nodes: vec![node], ln_integral: node.ln_weight, error, frame, factor: 1.0 });
    }
    let mut frame = grid::frame(&f, plane.start(), dims)?;
    for (d, coordinate) in plane.coordinates().into_iter().enumerate() {
        match coordinate {
            // The tails of readings follow σ far out, where steps must not have grown too much.
            Coordinate::Sd | Coordinate::HistorySd => {
                frame.stretch[d] = STRETCH_OF_SD;
                if plane.sd_is_well_known(coordinate) {
                    frame.width[d] *= 1.4;
                }
            }
            Coordinate::Between => {}
        }
    }
    let mut factor = FIRST;
    let coarse = grid::sweep(&f, &frame, factor, 0.37, floor(dims))?;
    if coarse.is_empty() {
        return Err(Absent::failed("the posterior weight is 0 everywhere"));
    }
    let gauge = Gauge::new(&coarse);
    let mut measured = gauge.measure(&coarse, frame.ln_volume(factor));
    drop(coarse);
    let mut ratio = 0.93;
    for _ in 0..ROUNDS {
        factor *= ratio;
        ratio = RATIO;
        let nodes = grid::sweep(&f, &frame, factor, 0.0, floor(dims))?;
        let again = gauge.measure(&nodes, frame.ln_volume(factor));
        let (error, in_tails) = measured.difference(&again);
        measured = again;
        if error <= AGREED && in_tails <= AGREED_IN_TAILS {
            let confirmed = confirm(plane, &frame, &nodes, &gauge, &measured)?;
            let heaviest = nodes.iter().max_by(|a, b| a.ln_weight.total_cmp(&b.ln_weight));
            let of_marks = heaviest.map_or(Ok(0.0), |node| error_of_marks(plane, node))?;
            return Ok(Weighed {
                nodes,
                ln_integral: measured.ln_integral,
                error: error.max(confirmed).max(of_marks),
                frame,
                factor,
            });
        }
    }
    Err(Absent::failed("the quadrature over the within and between sd did not reach its promised accuracy"))
}

/// With marked readings: how far two rules for the integral over the level, or the long-run mean, at a node are
/// apart, a rounding at least; an error where they disagree.
fn error_of_marks(plane: &Plane, node: &Node) -> Result<f64, Absent> {
    if !plane.is_marked() {
        return Ok(0.0);
    }
    let error = (plane.marks_by_panels(node) - node.ln_marks).abs().max(f64::EPSILON);
    if error.is_nan() || error > CONFIRMED {
        return Err(Absent::failed(format!(
            "two quadrature rules disagree by {error:e} over marked readings"
        )));
    }
    Ok(error)
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
    let error = difference_by_panels(plane, frame, nodes, gauge, measured, 5.0)?;
    if error <= CONFIRMED {
        return Ok(error);
    }
    // Narrower panels, before the rules are said to disagree.
    let error = difference_by_panels(plane, frame, nodes, gauge, measured, 2.5)?;
    if error.is_nan() || error > CONFIRMED {
        return Err(Absent::failed(format!(
            "two quadrature rules disagree by {error:e} over the within and between sd"
        )));
    }
    Ok(error)
}

/// The largest difference, with panels `coarse` widths wide.
fn difference_by_panels(
    plane: &Plane,
    frame: &Frame,
    nodes: &[Node],
    gauge: &Gauge,
    measured: &Measured,
    coarse: f64,
) -> Result<f64, Absent> {
    // Ends of the box: nodes above 2e-12 of the highest; beyond them, a width more.
    let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
    let heavy = || nodes.iter().filter(|n| n.ln_weight - n.ln_cell > top - 27.0);
    // Of every line of the last coordinate: where it lies and its ends.
    let mut lines: Vec<(f64, f64, f64)> = Vec::new();
    for node in heavy() {
        let (first, last) = (node.place[0], node.place[frame.dims - 1]);
        match lines.last_mut() {
            Some((at, lo, hi)) if *at == first => (*lo, *hi) = (lo.min(last), hi.max(last)),
            _ => lines.push((first, last, last)),
        }
    }
    let panels = |d: usize, lo: f64, hi: f64| {
        let width = (coarse * frame.width[d]).min(0.5 * coarse);
        let count = ((hi - lo) / width).ceil().max(1.0);
        (count as usize, (hi - lo) / count)
    };
    let ends = |near: Option<(f64, f64)>| {
        let close = lines.iter().filter(|(at, ..)| near.is_none_or(|(u, step)| (at - u).abs() <= step));
        close.fold((f64::INFINITY, f64::NEG_INFINITY), |(lo, hi), line| (lo.min(line.1), hi.max(line.2)))
    };
    let node_at = plane.nodes();
    let mut found: Vec<Node> = Vec::new();
    let mut along_last = |place: &mut Place, ln_outer: f64, (lo, hi): (f64, f64)| {
        let d = frame.dims - 1;
        let (lo, hi) = (lo - frame.width[d], hi + frame.width[d]);
        let (count, size) = panels(d, lo, hi);
        for panel in 0..count {
            let middle = lo + (panel as f64 + 0.5) * size;
            for (x, w) in legendre::rule() {
                place[d] = middle + 0.5 * size * x;
                let mut node = node_at(place);
                node.ln_weight += ln_outer + fm::ln(0.5 * size * w);
                if node.ln_weight > f64::NEG_INFINITY {
                    found.push(node);
                }
            }
        }
    };
    let mut place = [0.0; MOST];
    if frame.dims == 1 {
        along_last(&mut place, 0.0, ends(None));
    } else {
        let at = |(lo, hi): (f64, f64), line: &(f64, f64, f64)| (lo.min(line.0), hi.max(line.0));
        let (lo, hi) = lines.iter().fold((f64::INFINITY, f64::NEG_INFINITY), at);
        let step = 2.0 * frame.width[0];
        let (lo, hi) = (lo - frame.width[0], hi + frame.width[0]);
        let (count, size) = panels(0, lo, hi);
        for panel in 0..count {
            let middle = lo + (panel as f64 + 0.5) * size;
            for (x, w) in legendre::rule() {
                place[0] = middle + 0.5 * size * x;
                let inner = ends(Some((place[0], step)));
                if inner.0 <= inner.1 {
                    along_last(&mut place, fm::ln(0.5 * size * w), inner);
                }
            }
        }
    }
    if found.is_empty() {
        return Err(Absent::failed("the second quadrature rule found no mass"));
    }
    let again = gauge.of_middle(&found, 0.0);
    Ok((again.0 - measured.ln_integral).abs().max((again.1 - measured.middle).abs()))
}
