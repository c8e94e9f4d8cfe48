//! The level of this period where its readings and those of earlier periods are marked: μ is a coordinate of
//! the plane then, and the level's density follows from it, p(θ | σ) ∝ Π P(marks | θ, σ) ∫ N(θ; μ, τ²) p(μ) dμ,
//! the plain readings of the period in it, p(μ) that of the earlier periods alone. Inner units.

use super::When;
use super::build::Part;
use super::grid;
use super::law::Law;
use super::legendre::Panels;
use super::marked::{Given, Line, OF_CURVES, along, inner_given, lines_of, spread_out};
use super::moments::moment;
use super::plane::{Coordinate, Node, Plane, Sd};
use super::shapes::MovedPanels;
use super::solve::Inner;
use super::told::Told;
use super::weighing::{Weighed, floor, weigh};
use crate::math::fm;
use crate::quantity::Absent;
use std::collections::BTreeMap;
use std::sync::Arc;

/// The level's density and, for each σ, points whose sums are integrals.
#[derive(Debug, Clone)]
pub(super) struct MarkedLevel {
    panels: Panels,
    by_sd: Vec<LevelPoints>,
}

/// (θ, share of the whole) given σ.
#[derive(Debug, Clone)]
struct LevelPoints {
    sigma: f64,
    points: Vec<(f64, f64)>,
}

/// Two grids must agree to this at places from tail to tail.
const AGREED: f64 = 1e-10;

/// For each σ its density of the level, up to one factor.
struct OfSd<'a> {
    sigma: f64,
    lines: Vec<usize>,
    /// ln of what it is multiplied by: σ's own density, where the lines do not hold it.
    ln_weight: f64,
    plane: &'a Plane,
    /// Whether the lines hold the plain readings.
    updated: bool,
}

impl OfSd<'_> {
    /// ln of the readings' chances that the lines do not hold.
    fn ln_chance(&self, theta: f64) -> f64 {
        let sigma2 = self.sigma * self.sigma;
        let mut ln = self.ln_weight;
        for mark in &self.plane.marks {
            ln += mark.ln_chance(theta, sigma2);
        }
        if !self.updated
            && let Some(at) = self.plane.readings.at(sigma2)
        {
            let error = at.mean - theta;
            ln += at.ln_factor - 0.5 * (fm::ln(at.var) + error * error / at.var);
        }
        ln
    }
}

/// Lines of μ and what is made of them.
struct Made<'a> {
    lines: Vec<Line<'a>>,
    of_sd: Vec<OfSd<'a>>,
    reference: f64,
}

impl Made<'_> {
    fn each(&self, theta: f64) -> impl Iterator<Item = f64> + '_ {
        let values: Vec<f64> = self.lines.iter().map(|line| line.of_x(theta)).collect();
        self.of_sd.iter().map(move |of| {
            let sum: f64 = of.lines.iter().map(|k| values[*k]).sum();
            sum * fm::exp(of.ln_chance(theta) - self.reference)
        })
    }

    fn whole(&self, theta: f64) -> f64 {
        self.each(theta).sum()
    }
}

fn this_level(part: &Part, node: &Node) -> Given {
    let (constant, slope, var) = inner_given(part, node, When::This);
    Given { constant, slope, var }
}

/// With one σ for history and this period: the plane's own lines, this period's marks taken out.
fn of_plane<'a>(part: &'a Part, weighed: &Weighed, factor: f64) -> Result<Made<'a>, Absent> {
    let along = along(part, false).ok_or_else(no_line)?;
    let reference = weighed.nodes.iter().map(|n| n.ln_marks).fold(f64::NEG_INFINITY, f64::max);
    let step = factor * weighed.factor * weighed.frame.width[along.0];
    let f = part.plane.nodes();
    let nodes = grid::sweep(&f, &weighed.frame, factor * weighed.factor, 0.29, floor(weighed.frame.dims))?;
    let lines = lines_of(part, &nodes, 1.0, along, step, &this_level, Some(reference));
    let mut by_sd: BTreeMap<u64, Vec<usize>> = BTreeMap::new();
    for (k, line) in lines.iter().enumerate() {
        by_sd.entry(line.node.sigma.to_bits()).or_default().push(k);
    }
    let of = |(bits, lines)| OfSd {
        sigma: f64::from_bits(bits),
        lines,
        ln_weight: 0.0,
        plane: &part.plane,
        updated: true,
    };
    let of_sd = by_sd.into_iter().map(of).collect();
    Ok(Made { lines, of_sd, reference })
}

/// With a σ of this period alone the earlier periods say the same of the level whatever it is: the lines are
/// those of `prior`, without this period's readings, and σ has a lattice of its own.
fn of_prior<'a>(
    part: &'a Part,
    weighed: &Weighed,
    prior: &'a (Part, Weighed),
    factor: f64,
) -> Result<Made<'a>, Absent> {
    let (before, of_before) = prior;
    let along = along(before, false).ok_or_else(no_line)?;
    let step = factor * of_before.factor * of_before.frame.width[along.0];
    let f = before.plane.nodes();
    let finer = factor * of_before.factor;
    let nodes = grid::sweep(&f, &of_before.frame, finer, 0.29, floor(of_before.frame.dims))?;
    let lines = lines_of(before, &nodes, 1.0, along, step, &this_level, None);
    let at = part.plane.coordinates().iter().position(|c| *c == Coordinate::Sd);
    let mut of_sd = Vec::new();
    let mut reference = f64::NEG_INFINITY;
    if let (Some(d), Sd::Unknown(axis)) = (at, part.plane.sd) {
        let (low, high) = weighed.nodes.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), n| {
            (low.min(n.place[d]), high.max(n.place[d]))
        });
        for i in -400..=400 {
            let t = (f64::from(i) + 0.29) * factor * weighed.factor;
            let (u, ln_growth) = weighed.frame.coordinate(d, t);
            if u < low - weighed.frame.width[d] || u > high + weighed.frame.width[d] {
                continue;
            }
            let (sigma, ln_density) = axis.at(u);
            let ln_weight = ln_density + ln_growth;
            of_sd.push(OfSd {
                sigma,
                lines: (0..lines.len()).collect(),
                ln_weight,
                plane: &part.plane,
                updated: false,
            });
        }
    }
    // In units of the heaviest node's.
    if let Some(top) = weighed.nodes.iter().max_by(|a, b| a.ln_weight.total_cmp(&b.ln_weight)) {
        for of in &of_sd {
            reference = reference.max(of.ln_chance(top.mean));
        }
    }
    Ok(Made { lines, of_sd, reference })
}

fn no_line() -> Absent {
    Absent::failed("there is no line of the long-run mean")
}

/// The level of a part with marked readings now and then.
pub(super) fn level(part: &Part, weighed: &Weighed) -> Result<MarkedLevel, Absent> {
    let prior = if part.plane.history_sd.is_some() {
        let mut before = part.clone();
        before.plane.readings = Told::Nothing;
        before.plane.marks = Vec::new();
        before.plane.sd = Sd::Undefined;
        let of_before = weigh(&before.plane)?;
        Some((before, of_before))
    } else {
        None
    };
    let made = |factor: f64| match &prior {
        Some(prior) => of_prior(part, weighed, prior, factor),
        None => of_plane(part, weighed, factor),
    };
    let mut held = made(1.0)?;
    // A first idea of where the level lies: the nodes before the marks.
    let top = weighed.nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
    let (mut whole, mut first, mut second) = (0.0, 0.0, 0.0);
    for node in &weighed.nodes {
        let weight = fm::exp(node.ln_weight - top);
        whole += weight;
        first += weight * node.mean;
        second += weight * (node.var + node.mean * node.mean);
    }
    let place = first / whole;
    let spread = (second / whole - place * place).max(f64::MIN_POSITIVE).sqrt();
    let rough: Vec<(f64, f64)> = (-60..=60)
        .map(|i| place + 0.25 * spread * f64::from(i))
        .map(|theta| (theta, held.whole(theta)))
        .collect();
    let total: f64 = rough.iter().map(|r| r.1).sum();
    let mean = rough.iter().map(|r| r.0 * r.1).sum::<f64>() / total;
    let sd = (rough.iter().map(|r| (r.0 - mean) * (r.0 - mean) * r.1).sum::<f64>() / total).sqrt();
    let places: Vec<f64> = [-6.0, -2.5, -1.0, 0.0, 1.0, 2.5, 6.0].map(|k| mean + k * sd).to_vec();
    // Up to a factor: grids differ in their steps.
    let measure = |made: &Made<'_>| -> Vec<f64> {
        let values: Vec<f64> = places.iter().map(|t| made.whole(*t)).collect();
        let most = values.iter().copied().fold(0.0, f64::max);
        values.iter().map(|value| value / most).collect()
    };
    let mut before = measure(&held);
    let mut factor = 1.0;
    let mut settled = false;
    for _ in 0..6 {
        factor *= 0.8;
        let finer = made(factor)?;
        let now = measure(&finer);
        let apart = |(a, b): (&f64, &f64)| (a - b).abs() / a.max(*b).max(1e-12);
        settled = before.iter().zip(&now).map(apart).fold(0.0, f64::max) <= AGREED;
        (before, held) = (now, finer);
        if settled {
            break;
        }
    }
    if !settled {
        return Err(Absent::failed("the density of the level did not reach its promised accuracy"));
    }
    let panels = spread_out(&|t| held.whole(t), 0.5 * sd, mean, OF_CURVES)?;
    if prior.is_none() && (panels.total() - 1.0).abs() > 1e-9 {
        return Err(Absent::failed(format!(
            "the density of the level integrates to {} by panels, not to 1",
            panels.total()
        )));
    }
    // The same places for every σ: where the whole is resolved, so is each part of it.
    let mut by_sd: Vec<LevelPoints> =
        held.of_sd.iter().map(|of| LevelPoints { sigma: of.sigma, points: Vec::new() }).collect();
    for (theta, weight) in panels.places() {
        for (of, density) in by_sd.iter_mut().zip(held.each(theta)) {
            of.points.push((theta, weight * density));
        }
    }
    Ok(MarkedLevel { panels, by_sd })
}

impl MarkedLevel {
    /// (θ, share, σ) of all points.
    pub fn points(&self) -> impl Iterator<Item = (f64, f64, f64)> + '_ {
        self.by_sd.iter().flat_map(|at| at.points.iter().map(|p| (p.0, p.1, at.sigma)))
    }
}

impl Inner {
    /// The law of factor · level + shift + N(0, added) where the level is kept as its density and points.
    pub(super) fn of_marked_level(
        &self,
        MarkedLevel { panels, by_sd }: &MarkedLevel,
        factor: f64,
        shift_and_added: &dyn Fn(f64) -> (f64, f64),
        bound: f64,
        what: &str,
    ) -> Result<Law, Absent> {
        let units = &self.units;
        let given: Vec<(f64, f64)> = by_sd.iter().map(|at| shift_and_added(units.sd_out(at.sigma))).collect();
        if given.iter().all(|(_, added)| *added > 0.0) {
            let mut parts = Vec::new();
            for (at, (shift, added)) in by_sd.iter().zip(&given) {
                parts.extend(
                    at.points.iter().map(|(theta, weight)| {
                        (weight.max(0.0), factor * units.sd_out(*theta) + shift, *added)
                    }),
                );
            }
            return super::mixture(parts, bound, what);
        }
        let shift = given.first().map_or(0.0, |g| g.0);
        if given.iter().any(|g| g.0 != shift) || factor <= 0.0 {
            return Err(Absent::because(
                "with marked readings in this period and in earlier ones, what moves with an unknown within sd is not served",
            ));
        }
        let (place, scale) = (shift, factor * units.scale);
        let first = panels.expect(&|x| x);
        let second = panels.expect(&|x| (x - first) * (x - first));
        let mean = moment(1.0, bound, what, || place + scale * first);
        let sd = moment(2.0, bound, what, || scale * second.sqrt());
        Ok(Law::new(Arc::new(MovedPanels { panels: panels.clone(), shift: place, scale }), mean, sd))
    }
}
