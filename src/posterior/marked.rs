//! Laws where readings are marked. At a node of the plane (σ, τ) a number y, this period's level or the long-run
//! mean, is normal but for the factor the marked readings multiply its density by, and what is asked is
//! X = constant + slope · y + N(0, var): without the factor X and y are jointly normal, so that
//! p(x | node) = N(x; …) E[factor(y) | x] / E[factor(y)], E[· | x] over a normal again.

use super::build::Part;
use super::chances::Chances;
use super::factor::Factor;
use super::grid::{self, Frame};
use super::lattice::{Lattice, Lattices};
use super::law::Law;
use super::legendre::{Curve, Panels};
use super::marginal::Weighted;
use super::moments::moment;
use super::plane::{Coordinate, Node};
use super::shapes::OnPanels;
use super::solve::Inner;
use super::units::Units;
use super::weighing::floor;
use crate::math::fm;
use crate::quantity::Absent;
use std::cell::RefCell;
use std::collections::BTreeMap;
use std::rc::Rc;
use std::sync::Arc;

/// X | y ~ N(constant + slope · y, var), X in outer units from the posterior's origin; y in inner units.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Given {
    pub constant: f64,
    pub slope: f64,
    pub var: f64,
    /// Where y is the long-run mean and X tells more of this period's level than y does.
    pub tied: Option<Tied>,
}

/// This period's level given X and y: N(a + b x + c y, var), inner units.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Tied {
    pub level: [f64; 3],
    pub var: f64,
    /// An earlier marked period whose level is this one's less `1/scale` of x: its number, and the scale.
    pub earlier: Option<(usize, f64)>,
}

/// What X is at a node.
pub(super) type AtNode<'a> = dyn Fn(&Part, &Node) -> Given + 'a;

/// How smooth (relative) densities are that come from curves.
const OF_CURVES: f64 = 1e-10;
/// ln of a density is kept on curves to this.
const OF_LN: f64 = 1e-11;
/// Nodes so much (ln) lighter than the heaviest are not seen at a place: 5e−15.
const UNSEEN: f64 = 33.0;
/// Steps of the stretched coordinate: half a panel of the curve, two of the density's.
const EDGE: f64 = 0.5;
/// Two grids must agree to this at places from tail to tail.
const AGREED: f64 = 2e-11;

/// The density of X as a sum over nodes.
pub(super) struct Density<'a> {
    pub nodes: Vec<OfNode<'a>>,
    pub mean: f64,
    pub sd: f64,
    /// Whether `mean` and `sd` are those of X, not only near them.
    exact: bool,
}

/// One node's share of the density of X.
pub(super) struct OfNode<'a> {
    pub part: usize,
    pub sigma: f64,
    /// The node's share of the whole.
    pub share: f64,
    /// ln of the share without the marked readings, and of what the normal density of X does not depend on x by.
    ln_scale: f64,
    given: Given,
    hidden: (f64, f64),
    /// Variance of X without marked readings.
    total: f64,
    factor: Factor<'a>,
    sharpness: f64,
    apart: Option<Apart<'a>>,
}

/// Marked readings that the factor leaves out, X and y together telling of their levels.
struct Apart<'a> {
    tied: Tied,
    now: (&'a Chances, f64),
    earlier: Option<(&'a Chances, f64, f64)>,
    lattice: Rc<OfPlace>,
}

/// The lattice of the marks' chances given X = x as a function of the level, of the x last asked for; nodes with
/// the same spreads share it.
#[derive(Default)]
struct OfPlace {
    kept: RefCell<Option<(u64, Rc<Lattice>)>>,
}

impl OfPlace {
    fn at(&self, x: f64, make: impl FnOnce() -> Lattice) -> Rc<Lattice> {
        let mut kept = self.kept.borrow_mut();
        match &*kept {
            Some((bits, lattice)) if *bits == x.to_bits() => Rc::clone(lattice),
            _ => Rc::clone(&kept.insert((x.to_bits(), Rc::new(make()))).1),
        }
    }
}

impl<'a> Apart<'a> {
    fn of(part: &'a Part, node: &Node, tied: Tied, lattice: Rc<OfPlace>) -> Apart<'a> {
        let history2 = node.history_sigma * node.history_sigma;
        let periods = &part.plane.marked_periods;
        let earlier = tied.earlier.and_then(|(j, scale)| Some((&periods.get(j)?.chances, history2, scale)));
        Apart { tied, now: (&part.plane.marks, node.sigma * node.sigma), earlier, lattice }
    }

    /// Whether x alone fixes the level.
    fn is_fixed(&self) -> bool {
        self.tied.var == 0.0 && self.tied.level[2] == 0.0
    }

    /// ln of the chance of the marked readings as a function of y, given x; y is expected near `place`.
    fn given(&self, x: f64, place: f64) -> impl Fn(f64) -> f64 {
        let [a, b, c] = self.tied.level;
        let of_level = move |theta: f64| {
            let (now, sigma2) = self.now;
            let mut ln = now.ln_at(theta, sigma2);
            if let Some((then, history2, scale)) = self.earlier {
                ln += then.ln_at(theta - x / scale, history2);
            }
            ln
        };
        let lattice = self.lattice.at(x, || Lattice::new(a + b * x + c * place, self.of_level()));
        move |y| lattice.integral(&of_level, a + b * x + c * y, self.tied.var).ln
    }

    /// The most curvature of ln of it along the level.
    fn of_level(&self) -> f64 {
        let (now, sigma2) = self.now;
        now.sharpness(sigma2) + self.earlier.map_or(0.0, |(then, history2, _)| then.sharpness(history2))
    }

    /// And along a line on which the level moves by `slope`.
    fn sharpness(&self, slope: f64) -> f64 {
        slope * slope / (self.tied.var + 1.0 / self.of_level())
    }
}

impl<'a> OfNode<'a> {
    fn new(
        (index, part): (usize, &'a Part),
        node: &Node,
        ln_share: f64,
        given: Given,
        lattices: &Lattices,
        places: &mut BTreeMap<[u64; 2], Rc<OfPlace>>,
    ) -> OfNode<'a> {
        let plane = &part.plane;
        let apart = given.tied.map(|tied| {
            let place = places.entry([node.sigma.to_bits(), node.history_sigma.to_bits()]).or_default();
            Apart::of(part, node, tied, Rc::clone(place))
        });
        let apart = apart.filter(|apart| apart.of_level() > 0.0);
        let left_out = apart.as_ref().and_then(|apart| apart.tied.earlier).map(|(j, _)| j);
        let factor = Factor::of(plane, node, apart.is_none(), left_out, lattices);
        let of_apart = apart.as_ref().map_or(0.0, |apart| apart.sharpness(apart.tied.level[2]));
        let sharpness = factor.sharpness() + of_apart;
        let (_, v) = node.hidden;
        let flat = v == f64::INFINITY;
        let total = if flat { given.var } else { given.slope * given.slope * v + given.var };
        let ln_density =
            if flat { -fm::ln(given.slope.abs()) } else { -0.5 * fm::ln(total) - fm::HALF_LN_TWO_PI };
        OfNode {
            part: index,
            sigma: node.sigma,
            share: fm::exp(ln_share),
            ln_scale: ln_share - node.ln_marks + ln_density,
            given,
            hidden: node.hidden,
            total,
            factor,
            sharpness,
            apart,
        }
    }

    /// ln of the normal density of X, the factor being 1.
    fn ln_normal(&self, x: f64) -> f64 {
        let (m, v) = self.hidden;
        if v == f64::INFINITY {
            return self.ln_scale;
        }
        let error = x - self.given.constant - self.given.slope * m;
        self.ln_scale - 0.5 * error * error / self.total
    }

    /// Mean and variance of y given X = x.
    fn hidden_given(&self, x: f64) -> (f64, f64) {
        let (m, v) = self.hidden;
        let Given { constant, slope, var, .. } = self.given;
        if v == f64::INFINITY {
            return ((x - constant) / slope, var / (slope * slope));
        }
        let error = x - constant - slope * m;
        (m + slope * v / self.total * error, v * (var / self.total))
    }

    fn ln_factor(&self, x: f64) -> f64 {
        let (mean, var) = self.hidden_given(x);
        match &self.apart {
            None => self.factor.expected_often(mean, var).ln,
            Some(apart) if apart.is_fixed() => {
                apart.given(x, mean)(mean) + self.factor.expected_often(mean, var).ln
            }
            Some(apart) => {
                let more = apart.sharpness(apart.tied.level[2]);
                self.factor.expected_with(mean, var, more, &apart.given(x, mean)).ln
            }
        }
    }

    /// The density of X is nowhere narrower than a normal of this sd.
    fn narrowest(&self) -> f64 {
        let (at_0, var) = self.hidden_given(0.0);
        let slope = self.hidden_given(1.0).0 - at_0;
        let mut precision = slope * slope / (var + 1.0 / self.sharpness);
        if self.hidden.1 < f64::INFINITY {
            precision += 1.0 / self.total;
        }
        if let Some(apart) = &self.apart {
            let [_, b, c] = apart.tied.level;
            precision += apart.sharpness(b + c * slope);
        }
        1.0 / precision.sqrt()
    }
}

/// ln Σ of the nodes' densities at x. Marked readings' chances are at most 1, so the normal densities bound them.
pub(super) fn ln_sum<'n, 'a: 'n>(nodes: impl Iterator<Item = &'n OfNode<'a>> + Clone, x: f64) -> f64 {
    let bounds: Vec<f64> = nodes.clone().map(|node| node.ln_normal(x)).collect();
    let top = bounds.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if top == f64::NEG_INFINITY {
        return top;
    }
    let mut terms: Vec<f64> = Vec::with_capacity(bounds.len());
    let mut ln_whole = f64::NEG_INFINITY;
    for (node, bound) in nodes.clone().zip(&bounds).filter(|(_, bound)| **bound > top - 3.0) {
        let ln = bound + node.ln_factor(x);
        ln_whole = ln_whole.max(ln);
        terms.push(ln);
    }
    for (node, bound) in nodes.zip(&bounds).filter(|(_, bound)| **bound <= top - 3.0) {
        if *bound > ln_whole - UNSEEN {
            let ln = bound + node.ln_factor(x);
            ln_whole = ln_whole.max(ln);
            terms.push(ln);
        }
    }
    fm::ln_sum_exp(&terms)
}

impl<'a> Density<'a> {
    /// From nodes on grids with steps shorter by `finer`, those of σ by `finer_sd` once more.
    fn new(
        weighted: &[Weighted<'a>],
        finer: f64,
        finer_sd: f64,
        at: &AtNode<'_>,
    ) -> Result<Density<'a>, Absent> {
        let mut all = Density { nodes: Vec::new(), mean: 0.0, sd: 0.0, exact: true };
        let mut moments: Vec<(f64, f64, f64)> = Vec::new();
        for (index, Weighted { part, weighed, share }) in weighted.iter().enumerate() {
            let fresh;
            let nodes = if (finer == 1.0 && finer_sd == 1.0) || weighed.frame.dims == 0 {
                &weighed.nodes
            } else {
                let mut frame: Frame = weighed.frame.clone();
                for (d, coordinate) in part.plane.coordinates().into_iter().enumerate() {
                    if coordinate == Coordinate::Sd {
                        frame.width[d] *= finer_sd;
                        frame.stretch[d] *= finer_sd;
                    }
                }
                let f = part.plane.nodes();
                fresh = grid::sweep(&f, &frame, weighed.factor * finer, 0.29, floor(frame.dims))?;
                &fresh
            };
            let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
            let whole: f64 = nodes.iter().map(|n| fm::exp(n.ln_weight - top)).sum();
            let ln_whole = top + fm::ln(whole) - fm::ln(*share);
            let by_long_run = part.plane.by_long_run();
            let lattices = Lattices::default();
            let mut places = BTreeMap::new();
            for node in nodes {
                let given = at(part, node);
                all.exact &= given.tied.is_none();
                let (y, var) =
                    if by_long_run { (node.long_mean, node.long_var) } else { (node.mean, node.var) };
                let of = OfNode::new(
                    (index, part),
                    node,
                    node.ln_weight - ln_whole,
                    given,
                    &lattices,
                    &mut places,
                );
                let spread = given.slope * given.slope * var + given.var;
                moments.push((of.share, given.constant + given.slope * y, spread));
                all.nodes.push(of);
            }
        }
        let whole: f64 = moments.iter().map(|m| m.0).sum();
        all.mean = moments.iter().map(|m| m.0 * m.1).sum::<f64>() / whole;
        let second: f64 = moments.iter().map(|m| m.0 * ((m.1 - all.mean) * (m.1 - all.mean) + m.2)).sum();
        all.sd = (second / whole).sqrt();
        Ok(all)
    }

    /// By how much steps of σ must be shorter where X moves with σ: along σ the density is then as narrow as σ's
    /// own and that of X at one σ together.
    fn steps_of_sd(&self, weighted: &[Weighted<'_>], units: &Units, moved: &dyn Fn(f64) -> f64) -> f64 {
        let mut least = 1.0f64;
        for (index, Weighted { part, weighed, .. }) in weighted.iter().enumerate() {
            let at = part.plane.coordinates().iter().position(|c| *c == Coordinate::Sd);
            let of_part = self.nodes.iter().filter(|node| node.part == index);
            let heaviest = of_part.max_by(|a, b| a.share.total_cmp(&b.share));
            if let (Some(d), Some(node)) = (at, heaviest) {
                let wider = node.sigma * fm::exp(weighed.frame.width[d]);
                let moves = moved(units.sd_out(wider)) - moved(units.sd_out(node.sigma));
                let along = moves / node.narrowest();
                least = least.min(1.0 / (1.0 + along * along).sqrt());
            }
        }
        least
    }

    pub fn ln_at(&self, x: f64) -> f64 {
        ln_sum(self.nodes.iter(), x)
    }

    /// x at u on a line stretched by sinh about the mean, which follows both the middle and heavy tails.
    fn stretched(&self, u: f64) -> f64 {
        self.mean + self.sd * fm::sinh(u)
    }

    /// The stretched coordinates between which anything is left (1e−30 of the top).
    fn ends(&self) -> (f64, f64) {
        let (mut least, mut most) = (self.mean, self.mean);
        for node in self.nodes.iter().filter(|node| node.share > 1e-24 && node.hidden.1 < f64::INFINITY) {
            let place = node.given.constant + node.given.slope * node.hidden.0;
            (least, most) = (least.min(place), most.max(place));
        }
        let mut highest = self.ln_at(self.mean);
        let mut outward = |direction: f64| {
            let (mut u, mut low) = (0.0, 0);
            while low < 2 && u < 700.0 {
                u += EDGE;
                let x = self.stretched(direction * u);
                let here = self.ln_at(x);
                highest = highest.max(here);
                low = if here < highest - 69.0 && !(x > least && x < most) { low + 1 } else { 0 };
            }
            direction * u
        };
        (outward(-1.0), outward(1.0))
    }

    /// The density on panels.
    fn on_panels(&self, what: &str) -> Result<Panels, Absent> {
        let (from, to) = self.ends();
        let count = ((to - from) / EDGE).round().max(1.0) as usize;
        let edge = |i: usize, parts: usize| from + (to - from) * i as f64 / parts as f64;
        let coarse = (count / 2).max(1);
        let edges: Vec<f64> = (0..=coarse).map(|i| edge(i, coarse)).collect();
        let curve = Curve::on(&|u| self.ln_at(self.stretched(u)), &edges, OF_LN)
            .ok_or_else(|| Absent::failed(format!("the density of {what} is not resolved")))?;
        let density = |x: f64| curve.at(fm::asinh((x - self.mean) / self.sd)).map_or(0.0, fm::exp);
        let edges: Vec<f64> = (0..=2 * count).map(|i| self.stretched(edge(i, 2 * count))).collect();
        let panels = Panels::to(&density, &edges, OF_CURVES)?;
        if (panels.total() - 1.0).abs() > 1e-9 {
            return Err(Absent::failed(format!(
                "the density of {what} integrates to {} by panels, not to 1",
                panels.total()
            )));
        }
        Ok(panels)
    }
}

/// The law of X over all parts; `moved` says by how much X moves with σ itself (outer units), if it does.
pub(super) fn law(
    inner: &Inner,
    bound: f64,
    what: &str,
    moved: Option<&dyn Fn(f64) -> f64>,
    at: &AtNode<'_>,
) -> Result<Law, Absent> {
    let weighted = inner.weighted()?;
    let density = settled(&weighted, &inner.units, what, moved, at)?;
    let panels = density.on_panels(what)?;
    let (mut mean, mut sd) = (density.mean, density.sd);
    if !density.exact {
        mean = panels.expect(&|x| x);
        sd = panels.expect(&|x| (x - mean) * (x - mean)).sqrt();
    }
    let mean = moment(1.0, bound, what, || mean);
    let sd = moment(2.0, bound, what, || sd);
    Ok(Law::new(Arc::new(OnPanels(panels)), mean, sd))
}

/// On finer and finer grids until two agree at places from tail to tail: a density at one place asks more of the
/// grid over σ and τ than the sums it was chosen by.
fn settled<'a>(
    weighted: &[Weighted<'a>],
    units: &Units,
    what: &str,
    moved: Option<&dyn Fn(f64) -> f64>,
    at: &AtNode<'_>,
) -> Result<Density<'a>, Absent> {
    let mut held = Density::new(weighted, 1.0, 1.0, at)?;
    if weighted.iter().all(|w| w.weighed.frame.dims == 0) {
        return Ok(held);
    }
    let (mut finer, mut finer_sd) = (1.0, 1.0);
    if let Some(moved) = moved {
        finer_sd = held.steps_of_sd(weighted, units, moved);
        held = Density::new(weighted, finer, finer_sd, at)?;
    }
    let places = [-6.0, -2.0, -0.3, 1.2, 3.0, 7.0].map(|k| held.mean + k * held.sd);
    let measure = |density: &Density<'_>| places.map(|t| fm::exp(density.ln_at(t)));
    let mut before = measure(&held);
    for _ in 0..10 {
        if moved.is_some() {
            finer_sd *= 0.75;
            finer *= 0.97;
        } else {
            finer *= 0.8;
        }
        let again = Density::new(weighted, finer, finer_sd, at)?;
        let now = measure(&again);
        let top = now.iter().copied().fold(0.0, f64::max);
        let apart = |(a, b): (&f64, &f64)| (a - b).abs() / a.max(*b).max(1e-13 * top);
        let worst = before.iter().zip(&now).map(apart).fold(0.0, f64::max);
        if worst <= AGREED {
            return Ok(held);
        }
        (before, held) = (now, again);
    }
    Err(Absent::failed(format!("the density of {what} did not reach its promised accuracy")))
}

/// Points of X whose sums are integrals, σ given: (x, share of the whole).
#[derive(Debug, Clone)]
pub(super) struct Points {
    pub sigma: f64,
    pub points: Vec<(f64, f64)>,
    /// No density is narrower than this among them.
    narrowest: f64,
}

/// Steps of points in narrowest sds.
const STEP: f64 = 0.5;
/// How fast steps grow outward.
const STRETCH: f64 = 0.05;

/// X on lattices of its own for every σ, their steps shorter by `finer`.
pub(super) fn points(weighted: &[Weighted<'_>], finer: f64, at: &AtNode<'_>) -> Result<Vec<Points>, Absent> {
    let density = Density::new(weighted, 1.0, 1.0, at)?;
    let mut order: Vec<&OfNode<'_>> = density.nodes.iter().collect();
    // A stable sort: nodes of one σ stay in their order.
    order.sort_by(|a, b| a.part.cmp(&b.part).then(a.sigma.total_cmp(&b.sigma)));
    let mut all = Vec::new();
    for group in order.chunk_by(|a, b| a.part == b.part && a.sigma.to_bits() == b.sigma.to_bits()) {
        let share: f64 = group.iter().map(|node| node.share).sum();
        let narrowest = group
            .iter()
            .filter(|node| node.share > 1e-14 * share)
            .map(|node| node.narrowest())
            .fold(f64::INFINITY, f64::min);
        let heaviest = group.iter().max_by(|a, b| a.share.total_cmp(&b.share));
        let Some(heaviest) = heaviest else { continue };
        let ln_at = |x: f64| ln_sum(group.iter().copied(), x);
        let start = if heaviest.hidden.1 < f64::INFINITY {
            heaviest.given.constant + heaviest.given.slope * heaviest.hidden.0
        } else {
            density.mean
        };
        let mode = crate::math::roots::mode(ln_at, start, narrowest).map_err(grid::failed)?;
        let mut points = Vec::new();
        for direction in [1.0, -1.0] {
            let (mut i, mut low) = (if direction > 0.0 { 0.0 } else { 1.0 }, 0);
            while low < 2 && i < 1e5 {
                let t = STRETCH * STEP * finer * i;
                let (up, down) = (fm::exp(t), fm::exp(-t));
                let x = mode.x + direction * narrowest / STRETCH * 0.5 * (up - down);
                let weight = narrowest * STEP * finer * 0.5 * (up + down) * fm::exp(ln_at(x));
                if weight < 1e-32 {
                    low += 1;
                } else {
                    low = 0;
                    points.push((x, weight));
                }
                i += 1.0;
            }
        }
        all.push(Points { sigma: heaviest.sigma, points, narrowest });
    }
    Ok(all)
}

/// How much finer points must be so that sums over them with a normal kernel of variance `var(σ)` are integrals.
pub(super) fn fine_enough(points: &[Points], var: &dyn Fn(f64) -> f64) -> f64 {
    let mut finer = 1.0f64;
    for at in points {
        // The product of a normal tail and a density is as narrow as both together.
        let (e2, s2) = (at.narrowest * at.narrowest, var(at.sigma));
        finer = finer.min(0.7 / STEP * (s2 / (s2 + e2)).sqrt());
    }
    finer
}
