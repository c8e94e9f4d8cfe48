//! The law of σ or τ: its marginal density over the plane of spreads, integrated on panels of its
//! logarithm by a rule of its own.

use super::build::Part;
use super::grid::{self, MOST, Place};
use super::legendre::{Curve, Panels};
use super::plane::{BetweenSd, Coordinate, Node, Sd};
use super::told::Told;
use super::weighing::Weighed;
use crate::math::{fm, roots};
use crate::quantity::Absent;

/// How far below its top the marginal density is followed: 1e-19.
const DEPTH: f64 = 44.0;
/// The same for a tail so heavy that moments up to `HEAVY` only exist: the second may lie far out (5e−32).
const DEPTH_OF_HEAVY: f64 = 72.0;
const HEAVY: f64 = 6.0;

/// A part with its nodes and its share of the whole.
pub(super) struct Weighted<'a> {
    pub part: &'a Part,
    pub weighed: &'a Weighed,
    pub share: f64,
}

/// ln density of x = ln spread (inner units) within one part; `None` where the part has no such axis.
fn ln_density(
    weighted: &Weighted<'_>,
    node: &impl Fn(&Place) -> Node,
    wanted: Coordinate,
    x: f64,
) -> Result<f64, Absent> {
    let plane = &weighted.part.plane;
    let frame = &weighted.weighed.frame;
    let coordinates = plane.coordinates();
    let Some(d) = coordinates.iter().position(|c| *c == wanted) else {
        return Err(Absent::failed("a part of the prior has no such spread"));
    };
    let spread = fm::exp(x);
    let (u, slope) = match (wanted, &plane.between, plane.history_sd.unwrap_or(plane.sd), plane.sd) {
        (Coordinate::Between, BetweenSd::Unknown(axis), _, _) => {
            let u = axis.coordinate(spread);
            (u, axis.slope(u))
        }
        (Coordinate::HistorySd, _, Sd::Unknown(axis), _) | (Coordinate::Sd, _, _, Sd::Unknown(axis)) => {
            let u = axis.coordinate(spread);
            (u, axis.slope(u))
        }
        _ => return Err(Absent::failed("a part of the prior has no such spread")),
    };
    let mut rest = frame.clone();
    rest.dims = frame.dims - 1;
    for i in d..rest.dims {
        rest.centre[i] = frame.centre[i + 1];
        rest.width[i] = frame.width[i + 1];
        rest.stretch[i] = frame.stretch[i + 1];
    }
    let f = |place: &Place| {
        let mut whole = [0.0; MOST];
        whole[..d].copy_from_slice(&place[..d]);
        whole[d] = u;
        whole[d + 1..frame.dims].copy_from_slice(&place[d..rest.dims]);
        node(&whole)
    };
    let ln = if rest.dims == 0 {
        f(&[0.0; MOST]).ln_weight
    } else {
        // The line's own top, not the plane's, decides what is negligible on it.
        rest.ln_top = f64::NEG_INFINITY;
        let factor = weighted.weighed.factor;
        let nodes = grid::sweep(&f, &rest, factor, 0.0, 40.0)?;
        if nodes.is_empty() { f64::NEG_INFINITY } else { grid::ln_integral(&nodes, &rest, factor) }
    };
    Ok(ln - fm::ln(slope) - weighted.weighed.ln_integral)
}

/// This period's σ where the earlier periods have another: given their (σ_h, τ) the level before the readings is
/// N(mean, var) whatever σ is, so that its density is a sum over one lattice of them.
struct Apart {
    /// (ln share of the history's lattice, mean, var).
    before: Vec<(f64, f64, f64)>,
}

impl Apart {
    /// `None` where σ is the history's own or levels are no normal pieces.
    fn of(weighted: &Weighted<'_>, wanted: Coordinate) -> Option<Apart> {
        let (plane, weighed) = (&weighted.part.plane, weighted.weighed);
        let d = plane.coordinates().iter().position(|c| *c == Coordinate::Sd)?;
        if wanted != Coordinate::Sd || plane.history_sd.is_none() || plane.is_marked() || d == 0 {
            return None;
        }
        let mut alone = plane.clone();
        alone.sd = Sd::Undefined;
        alone.readings = Told::Nothing;
        let node_at = alone.nodes();
        let mut before: Vec<(f64, f64, f64)> = Vec::new();
        let mut last: Option<Place> = None;
        // Nodes of one line follow each other.
        for node in &weighed.nodes {
            let mut place = [0.0; MOST];
            place[..d].copy_from_slice(&node.place[..d]);
            if last != Some(place) {
                last = Some(place);
                let there = node_at(&place);
                let ln_cell = node.ln_cell - weighed.frame.ln_growth(d, node.place[d]);
                before.push((there.ln_weight + ln_cell, there.prior_mean, there.prior_var));
            }
        }
        Some(Apart { before })
    }

    fn ln_density(&self, weighted: &Weighted<'_>, x: f64) -> Result<f64, Absent> {
        let (plane, weighed) = (&weighted.part.plane, weighted.weighed);
        let Sd::Unknown(axis) = plane.sd else {
            return Err(Absent::failed("a part of the prior has no such spread"));
        };
        let sigma = fm::exp(x);
        let u = axis.coordinate(sigma);
        let mut top = f64::NEG_INFINITY;
        let mut terms = Vec::with_capacity(self.before.len());
        let at = plane.readings.at(sigma * sigma);
        for (ln_share, mean, var) in &self.before {
            let ln = match at {
                None => *ln_share,
                Some(at) => {
                    let (total, error) = (var + at.var, at.mean - mean);
                    ln_share + at.ln_factor - 0.5 * (fm::ln(total) + error * error / total)
                }
            };
            top = top.max(ln);
            terms.push(ln);
        }
        let sum: f64 = terms.iter().filter(|ln| **ln > top - 50.0).map(|ln| fm::exp(ln - top)).sum();
        let outer = weighed.frame.ln_volume(weighed.factor)
            - fm::ln(weighed.factor * weighed.frame.width[weighed.frame.dims - 1]);
        let ln = top + fm::ln(sum) + outer + axis.at(u).1;
        Ok(ln - fm::ln(axis.slope(u)) - weighed.ln_integral)
    }
}

/// The density of x = ln spread over all parts, on panels. Moments of the spread exist below `bound`.
pub(super) fn panels(parts: &[Weighted<'_>], wanted: Coordinate, bound: f64) -> Result<Panels, Absent> {
    let depth = if bound <= HEAVY { DEPTH_OF_HEAVY } else { DEPTH };
    let trouble = std::cell::RefCell::new(None);
    let nodes: Vec<_> = parts.iter().map(|w| w.part.plane.nodes()).collect();
    let aparts: Vec<Option<Apart>> = parts.iter().map(|w| Apart::of(w, wanted)).collect();
    let ln_all = |x: f64| {
        let mut total = f64::NEG_INFINITY;
        for ((weighted, node), apart) in
            parts.iter().zip(&nodes).zip(&aparts).filter(|((w, _), _)| w.share > 0.0)
        {
            let here = match apart {
                Some(apart) => apart.ln_density(weighted, x),
                None => ln_density(weighted, node, wanted, x),
            };
            match here {
                Ok(ln) => total = fm::ln_add_exp(total, fm::ln(weighted.share) + ln),
                Err(e) => {
                    trouble.borrow_mut().get_or_insert(e);
                    return f64::NAN;
                }
            }
        }
        total
    };
    // Begin at the spread of the heaviest node.
    let mut start = None;
    let mut best = f64::NEG_INFINITY;
    for weighted in parts {
        for node in &weighted.weighed.nodes {
            let ln = node.ln_weight - weighted.weighed.ln_integral + fm::ln(weighted.share);
            let spread = match wanted {
                Coordinate::Between => node.tau,
                Coordinate::HistorySd => node.history_sigma,
                Coordinate::Sd => node.sigma,
            };
            if ln > best && spread > 0.0 {
                best = ln;
                start = Some(fm::ln(spread));
            }
        }
    }
    let start = start.ok_or_else(|| Absent::failed("a spread has no node"))?;
    let mode = roots::mode(ln_all, start, 0.3);
    if let Some(e) = trouble.borrow_mut().take() {
        return Err(e);
    }
    let mode = mode.map_err(grid::failed)?;
    let edge = |width: f64| {
        let mut edges = Vec::new();
        let mut step = width;
        let mut x = mode.x;
        for _ in 0..200 {
            x += step;
            edges.push(x);
            let ln = ln_all(x);
            if ln.is_nan() || ln <= mode.ln_height - depth {
                break;
            }
            step *= 1.6;
        }
        edges
    };
    let mut edges: Vec<f64> = edge(-1.5 * mode.left).into_iter().rev().collect();
    edges.push(mode.x);
    edges.extend(edge(1.5 * mode.right));
    // Logarithms are smoother than densities: a few panels of them spare many sums over the other spreads.
    let curve = Curve::on(&ln_all, &edges, 4e-12);
    if let Some(e) = trouble.borrow_mut().take() {
        return Err(e);
    }
    let density = |x: f64| fm::exp(curve.as_ref().and_then(|curve| curve.at(x)).unwrap_or_else(|| ln_all(x)));
    let made =
        if bound <= HEAVY { Panels::with_tails(&density, &edges) } else { Panels::new(&density, &edges) };
    if let Some(e) = trouble.borrow_mut().take() {
        return Err(e);
    }
    let made = made?;
    // Two roads to one number: the panels' whole mass against the grid's.
    if (made.total() - 1.0).abs() > 1e-9 {
        return Err(Absent::failed(format!(
            "the density of a spread integrates to {} by panels, not to 1",
            made.total()
        )));
    }
    Ok(made)
}
