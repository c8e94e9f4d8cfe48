//! Laws over a plane with marked readings. Along a line of the plane (σ and τ held) the level, or the
//! long-run mean, has a density g that is no normal one; what is asked is X = a + b y + N(0, k) with y on
//! that line. Where k is wide against the line's nodes X is a mixture over them; where it is narrow, or 0,
//! g itself is followed between the nodes. The density of X is then kept on panels.

use super::When;
use super::build::{BiasOf, Part};
use super::grid::{self, MOST, Place};
use super::law::Law;
use super::legendre::{Curve, Panels};
use super::marginal::Weighted;
use super::moments::moment;
use super::plane::{Coordinate, Level, Node};
use super::shapes::OnPanels;
use super::solve::Inner;
use super::weighing::floor;
use crate::math::{fm, normal};
use crate::quantity::Absent;
use std::cell::OnceCell;
use std::collections::BTreeMap;
use std::rc::Rc;
use std::sync::Arc;

/// X | y ~ N(constant + slope · y, var), X in outer units from the posterior's origin; y in inner units.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Given {
    pub constant: f64,
    pub slope: f64,
    pub var: f64,
}

/// What X is at a node, for the line through it.
pub(super) type AtNode<'a> = dyn Fn(&Part, &Node) -> Given + 'a;

/// How smooth (relative) densities are that come from curves between the nodes.
pub(super) const OF_CURVES: f64 = 1e-10;

/// A plane's nodes by their places.
type NodeAt<'a> = dyn Fn(&Place) -> Node + 'a;

pub(super) struct Line<'a> {
    nodes_at: Rc<NodeAt<'a>>,
    /// Any node of it.
    pub(super) node: Node,
    /// Which coordinate runs along it, and how y stands to it.
    along: usize,
    line: (f64, f64),
    /// (y, share of the whole).
    nodes: Vec<(f64, f64)>,
    /// ln of what a density of the line must be multiplied by, to be a share of the whole.
    ln_scale: f64,
    step: f64,
    given: Given,
    /// ln density of the coordinate between the nodes, made when first asked for.
    curve: OnceCell<Option<Curve>>,
    /// Whether this period's marked readings are left out of the density.
    unmarked: bool,
    keeps_curve: bool,
}

impl Line<'_> {
    /// Density of y at a place between the nodes.
    fn density(&self, y: f64) -> f64 {
        let u = (y - self.line.0) / self.line.1;
        let ln_at = |u: f64| {
            let mut place = self.node.place;
            place[self.along] = u;
            let node = (self.nodes_at)(&place);
            if self.unmarked { node.ln_weight - node.ln_marks } else { node.ln_weight }
        };
        // Where marks of many periods meet in every value, it pays to keep them as a curve.
        let curve = self.curve.get_or_init(|| {
            let (lo, hi) = self.nodes.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(lo, hi), n| {
                let u = (n.0 - self.line.0) / self.line.1;
                (lo.min(u), hi.max(u))
            });
            let step = self.step / self.line.1;
            if self.keeps_curve { Curve::new(&ln_at, lo - 4.0 * step, hi + 4.0 * step, 1e-12) } else { None }
        });
        let ln = match curve {
            Some(curve) => match curve.at(u) {
                Some(ln) => ln,
                None => return 0.0,
            },
            None => ln_at(u),
        };
        fm::exp(ln + self.node.ln_cell - fm::ln(self.line.1) + self.ln_scale)
    }

    /// Density of X at t.
    pub(super) fn of_x(&self, t: f64) -> f64 {
        let Given { constant, slope, var } = self.given;
        let sd = var.sqrt();
        if sd >= 1.3 * slope.abs() * self.step || slope == 0.0 {
            let density = |(y, share): &(f64, f64)| share * normal::pdf((t - constant - slope * y) / sd) / sd;
            return self.nodes.iter().map(density).sum();
        }
        let centre = (t - constant) / slope;
        if var == 0.0 {
            return self.density(centre) / slope.abs();
        }
        // The kernel is narrow against g: trapezoid over the kernel.
        const STEP: f64 = 0.4;
        let mut total = 0.0;
        for i in -22..=22 {
            let z = STEP * f64::from(i);
            total += fm::exp(-0.5 * z * z) * self.density(centre + sd / slope * z);
        }
        total * STEP * fm::INV_SQRT_TWO_PI / slope.abs()
    }
}

/// Which coordinate X is read along: the level's own, or that of the long-run mean.
pub(super) fn along(part: &Part, of_level: bool) -> Option<(usize, Coordinate)> {
    let coordinates = part.plane.coordinates();
    let at = |wanted: Coordinate| coordinates.iter().position(|c| *c == wanted).map(|d| (d, wanted));
    let (level, long_run) = (at(Coordinate::Level), at(Coordinate::LongRun));
    if of_level { level.or(long_run) } else { long_run.or(level) }
}

/// The law of X over all parts. `of_level` where y is this period's level if that is a coordinate.
pub(super) fn law(
    inner: &Inner,
    of_level: bool,
    bound: f64,
    what: &str,
    at: &AtNode<'_>,
) -> Result<Law, Absent> {
    let mut lines = all_lines(inner, of_level, 1.0, at)?;
    let (mean, sd) = mean_and_sd(&lines);
    // A density at one place asks more of the grid over σ and τ than the sums it was chosen by.
    let places: Vec<f64> = [-6.0, -2.5, -1.0, -0.3, 0.0, 0.5, 1.5, 3.0, 7.0].map(|k| mean + k * sd).to_vec();
    let measure = |lines: &[Line<'_>]| -> Vec<f64> {
        places.iter().map(|t| lines.iter().map(|line| line.of_x(*t)).sum::<f64>()).collect()
    };
    if inner.weighted()?.iter().any(|w| w.weighed.frame.dims > 1) {
        let mut before = measure(&lines);
        let mut factor = 1.0;
        let mut settled = false;
        for _ in 0..8 {
            factor *= std::f64::consts::FRAC_1_SQRT_2;
            let finer = all_lines(inner, of_level, factor, at)?;
            let now = measure(&finer);
            let top = now.iter().copied().fold(0.0, f64::max);
            let worst = before.iter().zip(&now).map(|(a, b)| (a - b).abs() / a.max(*b).max(1e-13 * top));
            settled = worst.fold(0.0, f64::max) <= 2e-11;
            (before, lines) = (now, finer);
            if settled {
                break;
            }
        }
        if !settled {
            return Err(Absent::failed(format!("the density of {what} did not reach its promised accuracy")));
        }
    }
    let density = |t: f64| lines.iter().map(|line| line.of_x(t)).sum::<f64>();
    let smooth = if lines.iter().any(|line| line.keeps_curve) { OF_CURVES } else { 1e-12 };
    let panels = spread_out(&density, width_of(&lines), mean, smooth)?;
    if (panels.total() - 1.0).abs() > 1e-9 {
        return Err(Absent::failed(format!(
            "the density of {what} integrates to {} by panels, not to 1",
            panels.total()
        )));
    }
    let mean = moment(1.0, bound, what, || mean);
    let sd = moment(2.0, bound, what, || sd);
    Ok(Law::new(Arc::new(OnPanels(panels)), mean, sd))
}

/// The lines of all parts, on grids finer by `factor`.
fn all_lines<'a>(
    inner: &'a Inner,
    of_level: bool,
    factor: f64,
    at: &AtNode<'_>,
) -> Result<Vec<Line<'a>>, Absent> {
    let mut lines = Vec::new();
    for Weighted { part, weighed, share } in inner.weighted()? {
        let Some(along) = along(part, of_level) else {
            return Err(Absent::because(
                "a mixture of priors with and without marked readings in their periods is not served",
            ));
        };
        let step = factor * weighed.factor * weighed.frame.width[along.0];
        if factor == 1.0 {
            lines.extend(lines_of(part, &weighed.nodes, share, along, step, at, None));
        } else {
            let f = part.plane.nodes();
            let nodes =
                grid::sweep(&f, &weighed.frame, factor * weighed.factor, 0.29, floor(weighed.frame.dims))?;
            lines.extend(lines_of(part, &nodes, share, along, step, at, None));
        }
    }
    Ok(lines)
}

/// Where X lies and how widely.
fn mean_and_sd(lines: &[Line<'_>]) -> (f64, f64) {
    let (mut mean, mut second) = (0.0, 0.0);
    for line in lines {
        for (y, share) in &line.nodes {
            mean += share * (line.given.constant + line.given.slope * y);
        }
    }
    for line in lines {
        for (y, share) in &line.nodes {
            let d = line.given.constant + line.given.slope * y - mean;
            second += share * (d * d + line.given.var);
        }
    }
    (mean, second.sqrt())
}

/// Panels from the heaviest place outward until nothing is left (1e−30 of the top).
pub(super) fn spread_out(
    density: &dyn Fn(f64) -> f64,
    width: f64,
    mean: f64,
    relative: f64,
) -> Result<Panels, Absent> {
    let top = density(mean).max(f64::MIN_POSITIVE);
    let edges = |direction: f64| {
        let (mut edges, mut step, mut t, mut low) = (Vec::new(), width, mean, 0);
        let mut highest = top;
        for _ in 0..400 {
            t += direction * step;
            edges.push(t);
            let here = density(t);
            highest = highest.max(here);
            low = if here < 1e-30 * highest { low + 1 } else { 0 };
            if low >= 2 {
                break;
            }
            step *= 1.25;
        }
        edges
    };
    let mut all: Vec<f64> = edges(-1.0).into_iter().rev().collect();
    all.push(mean);
    all.extend(edges(1.0));
    Panels::to(density, &all, relative)
}

/// How far apart the first panels' ends may be.
fn width_of(lines: &[Line<'_>]) -> f64 {
    let mut width: f64 = 0.0;
    let mut whole = 0.0;
    for line in lines {
        let share: f64 = line.nodes.iter().map(|n| n.1).sum();
        let own = line.step * line.given.slope.abs() + line.given.var.sqrt();
        width += share * own;
        whole += share;
    }
    width / whole
}

pub(super) fn lines_of<'a>(
    part: &'a Part,
    nodes: &[Node],
    share: f64,
    (along, coordinate): (usize, Coordinate),
    step: f64,
    at: &AtNode<'_>,
    unmarked: Option<f64>,
) -> Vec<Line<'a>> {
    let reference = unmarked.unwrap_or(0.0);
    let unmarked = unmarked.is_some();
    let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
    let whole: f64 = nodes.iter().map(|n| fm::exp(n.ln_weight - top)).sum();
    let mut by_line: BTreeMap<[u64; MOST], Vec<&Node>> = BTreeMap::new();
    for node in nodes {
        let mut key = node.place.map(f64::to_bits);
        key[along] = 0;
        by_line.entry(key).or_default().push(node);
    }
    let nodes_at: Rc<NodeAt<'a>> = Rc::new(part.plane.nodes());
    let ln_of = |n: &Node| if unmarked { n.ln_weight - n.ln_marks + reference } else { n.ln_weight };
    let mut lines = Vec::new();
    for members in by_line.into_values() {
        let line = |n: &Node| if coordinate == Coordinate::Level { n.level_line } else { n.long_line };
        let nodes: Vec<(f64, f64)> = members
            .iter()
            .map(|n| (line(n).0 + line(n).1 * n.place[along], share * fm::exp(ln_of(n) - top) / whole))
            .filter(|n| n.1 > 1e-32)
            .collect();
        let Some(node) = members.first().filter(|_| !nodes.is_empty()) else { continue };
        // A node stands for a step of its line: its share is the density times that step.
        let ln_scale = fm::ln(share / (whole * step)) - top + reference;
        lines.push(Line {
            nodes_at: Rc::clone(&nodes_at),
            node: **node,
            along,
            line: line(node),
            nodes,
            ln_scale,
            step: step * line(node).1,
            given: at(part, node),
            curve: OnceCell::new(),
            unmarked,
            keeps_curve: matches!(part.plane.level, Level::AboutMeanMarked(_)),
        });
    }
    lines
}

impl Inner {
    /// A level as measured, given the line's y: X = factor · level + shift + N(0, added), outer units.
    pub(super) fn given(
        &self,
        part: &Part,
        node: &Node,
        when: When,
        (factor, shift, added): (f64, f64, f64),
    ) -> Given {
        let (constant, slope, var) = inner_given(part, node, when);
        let units = &self.units;
        Given {
            constant: factor * units.sd_out(constant) + shift,
            slope: factor * units.scale * slope,
            var: factor * factor * units.square_out(var) + added,
        }
    }

    /// The true level with the bias taken out, plus a shift (methods §3).
    pub(super) fn true_given(&self, part: &Part, node: &Node, when: When, shift: f64) -> Given {
        let units = &self.units;
        let (c, s, v) = inner_given(part, node, when);
        let u2 = (self.bias_sd / units.scale) * (self.bias_sd / units.scale);
        let tau2 = node.tau * node.tau;
        let pulled = |m0: f64, v0: f64| {
            let k = v0 / (v0 + u2);
            (m0 + k * (c - m0), k * s, k * k * v + k * u2)
        };
        let (constant, slope, var) = match part.bias {
            BiasOf::Measured => (c, s, v + u2),
            BiasOf::TrueLevel { mean, var } => pulled(mean, var),
            BiasOf::TrueLevelPerReading { mean, readings } => {
                pulled(mean, node.sigma * node.sigma / readings)
            }
            BiasOf::TrueLongRun { mean, var } => {
                // Given φ = μ + (level about it) + b, each share of φ − M goes to each by its variance.
                let whole = var + u2 + tau2;
                match when {
                    When::This => {
                        let k = u2 / whole;
                        (k * mean, 1.0 - k, u2 * (1.0 - k))
                    }
                    When::Next | When::LongRun => {
                        let k = var / whole;
                        let own = if when == When::Next { tau2 } else { 0.0 };
                        ((1.0 - k) * mean, k, var * (1.0 - k) + own)
                    }
                }
            }
        };
        Given {
            constant: units.sd_out(constant) + shift,
            slope: units.scale * slope,
            var: units.square_out(var),
        }
    }
}

/// A level (or the long-run mean) given y: constant + slope · y and a variance, inner units.
pub(super) fn inner_given(part: &Part, node: &Node, when: When) -> (f64, f64, f64) {
    let plane = &part.plane;
    let tau2 = node.tau * node.tau;
    let stretch = plane.moved.map_or(1.0, |m| m.stretch);
    let by_long_run = matches!(plane.level, Level::AboutMeanMarked(_));
    match when {
        When::This if plane.has_level_coordinate() => (0.0, 1.0, 0.0),
        When::This => {
            let pull = plane
                .readings
                .at(node.sigma * node.sigma)
                .map_or(1.0, |at| at.var / (node.prior_var + at.var));
            let slope = stretch * pull;
            (node.mean - slope * node.mu(), slope, node.var)
        }
        When::Next | When::LongRun => {
            let own = if when == When::Next { tau2 } else { 0.0 };
            if by_long_run {
                (node.long_mean - stretch * node.mu(), stretch, own)
            } else {
                (node.long_mean - node.link * node.mean, node.link, node.long_var + own)
            }
        }
    }
}
