//! Several series at once: what they share, and the difference of two levels (methods §4). Series are
//! independent given what they share: σ where within is peers; (σ, τ, μ) where the prior is peers; a
//! common bias where a prior speaks of the true level. Else it cancels.

use super::build::{build, build_in, units};
use super::change::settled_about_zero;
use super::grid::{self, Place, Weighted};
use super::law::Law;
use super::plane::{Level, Node, Plane, Sd};
pub use super::ranking::{Rank, ranking};
use super::shapes::{OnPanels, panels_of};
use super::solve::solve;
use super::told::{SdSums, Told, is_marked, told};
use super::units::Units;
use super::weighing::{Weighed, floor, weigh};
use super::{Basis, Piece, When, mixture};
use crate::data::evidence::{Evidence, Seen, Single};
use crate::math::fm;
use crate::prior::{LevelPrior, Model, Within};
use crate::quantity::Absent;
use std::sync::Arc;

/// One series: its name, its model and its readings of the period under review.
#[derive(Debug, Clone, Copy)]
pub struct Member<'a> {
    pub name: &'a str,
    pub model: &'a Model,
    pub readings: &'a Evidence,
}

/// Normal parts (weight, mean, variance) of a level, all levels from one origin.
pub(super) type Parts = Vec<(f64, f64, f64)>;

/// Given what the series share: a weight, and every member's level.
pub(super) struct Given {
    pub ln_weight: f64,
    pub levels: Vec<Parts>,
}

impl Weighted for Given {
    fn ln_weight(&self) -> f64 {
        self.ln_weight
    }

    fn enlarge(&mut self, ln_cell: f64) {
        self.ln_weight += ln_cell;
    }
}

/// What the members share.
pub(super) enum Sharing {
    Nothing,
    /// σ, τ and μ.
    Peers,
    /// σ, a bias that priors of the true level see, or both.
    Parameters {
        sd: bool,
        bias: bool,
    },
}

pub(super) fn sharing(
    members: &[Member<'_>],
    basis: Basis,
    within_sd_is_shared: bool,
) -> Result<Sharing, Absent> {
    let sd = within_sd_is_shared && members.iter().any(|m| matches!(m.model.within, Within::Pooled { .. }));
    if basis == Basis::ReadingsOnly {
        return Ok(if sd { Sharing::Parameters { sd, bias: false } } else { Sharing::Nothing });
    }
    if members.iter().all(|m| matches!(m.model.level, LevelPrior::Peers(_))) {
        if basis == Basis::PriorOnly {
            return Err(Absent::because(
                "each series' prior is made of the others' readings, so there is no joint prior without readings",
            ));
        }
        return Ok(Sharing::Peers);
    }
    let bias = members.iter().any(|m| m.model.bias_sd > 0.0 && speaks_of_true_level(&m.model.level));
    Ok(if sd || bias { Sharing::Parameters { sd, bias } } else { Sharing::Nothing })
}

/// Whether a prior is a belief about the true level, not made from readings that carry the bias.
fn speaks_of_true_level(level: &LevelPrior) -> bool {
    match level {
        LevelPrior::Stated { .. } | LevelPrior::Worth { .. } | LevelPrior::LongRun { .. } => true,
        LevelPrior::Mixture(parts) => parts.iter().any(|(_, part)| speaks_of_true_level(part)),
        LevelPrior::Flat | LevelPrior::Periods(_) | LevelPrior::Peers(_) => false,
    }
}

/// The true level of `a` less that of `b`. `within_sd_is_shared` where within is peers.
pub fn difference(
    a: &Member<'_>,
    b: &Member<'_>,
    basis: Basis,
    within_sd_is_shared: bool,
) -> Result<Law, Absent> {
    const WHAT: &str = "the difference";
    let members = [*a, *b];
    match sharing(&members, basis, within_sd_is_shared)? {
        Sharing::Peers => peers_difference(a, b),
        Sharing::Nothing => {
            // A common bias cancels.
            let unbiased = |m: &Member<'_>| {
                let mut model = m.model.clone();
                model.bias_sd = 0.0;
                solve(&model, m.readings, basis)
            };
            let (a, b) = (unbiased(a)?, unbiased(b)?);
            let bound = a.inner.bounds.level.min(b.inner.bounds.level);
            // Pairs of pieces keep the far tails, which a density kept on panels does not.
            let (left, right) = (a.pieces()?, b.pieces()?);
            if left.len() * right.len() > PAIRS_CAP || a.inner.is_marked() || b.inner.is_marked() {
                return convolved(&a.level(When::This)?, &b.level(When::This)?);
            }
            let parts = |pieces: &[Piece]| -> Parts {
                pieces.iter().map(|k| (k.weight, k.level_apart, k.level_var)).collect()
            };
            let law = mixture(pairs(&parts(left), &parts(right), 1.0)?, bound, WHAT)?;
            Ok(law.moved(a.origin() - b.origin()))
        }
        Sharing::Parameters { sd, bias } => {
            let given = shared(&members, basis, sd, bias)?;
            let top = given.iter().map(|g| g.ln_weight).fold(f64::NEG_INFINITY, f64::max);
            let mut all = Vec::new();
            for node in &given {
                all.extend(pairs(&node.levels[0], &node.levels[1], fm::exp(node.ln_weight - top))?);
            }
            let bound = solve(a.model, a.readings, basis)?.inner.bounds.level;
            let bound = bound.min(solve(b.model, b.readings, basis)?.inner.bounds.level);
            mixture(all, bound, WHAT)
        }
    }
}

/// The law of A − B, independent: ∫ f_A(t + b) f_B(b) db, over the narrower of the two.
fn convolved(a: &Law, b: &Law) -> Result<Law, Absent> {
    let width = |law: &Law| -> Result<f64, Absent> { Ok(law.quantile(0.75)? - law.quantile(0.25)?) };
    let (over_b, left, right) = (width(a)? >= width(b)?, panels_of(a)?, panels_of(b)?);
    let density = |t: f64| {
        if over_b { right.expect(&|y| left.density(t + y)) } else { left.expect(&|x| right.density(x - t)) }
    };
    let mut edges = Vec::new();
    for k in (1..=14).rev() {
        let p = fm::pow(10.0, -f64::from(k));
        edges.push(a.quantile(p)? - b.upper_quantile(p)?);
    }
    for p in [0.25, 0.5, 0.75] {
        edges.push(a.quantile(p)? - b.quantile(1.0 - p)?);
    }
    for k in 1..=14 {
        let p = fm::pow(10.0, -f64::from(k));
        edges.push(a.upper_quantile(p)? - b.quantile(p)?);
    }
    let panels = super::legendre::Panels::new(&density, &edges)?;
    if (panels.total() - 1.0).abs() > 1e-9 {
        return Err(Absent::failed(format!(
            "the density of a difference integrates to {}, not to 1",
            panels.total()
        )));
    }
    let mean = a.mean().and_then(|x| Ok(x - b.mean()?));
    let sd = a.sd().and_then(|x| {
        let y = b.sd()?;
        Ok((x * x + y * y).sqrt())
    });
    Ok(Law::new(Arc::new(OnPanels(panels)), mean, sd))
}

/// As many pairs of pieces as a difference is computed from.
const PAIRS_CAP: usize = 3_000_000;

/// All pairs of parts, independent; those too light to matter are left out.
fn pairs(left: &Parts, right: &Parts, weight: f64) -> Result<Parts, Absent> {
    // All that are left out stay together below 1e−21, the promise of far tails.
    const LIGHT: f64 = 1e-28;
    let mut right: Vec<(f64, f64, f64)> = right.clone();
    right.sort_by(|a, b| b.0.total_cmp(&a.0));
    let mut all = Vec::new();
    for (w, m, v) in left {
        for (x, n, u) in &right {
            if w * x < LIGHT {
                break;
            }
            all.push((weight * w * x, m - n, v + u));
        }
        if all.len() > PAIRS_CAP {
            return Err(Absent::failed("the difference of two levels needs more pieces than allowed"));
        }
    }
    Ok(all)
}

/// Peers: given (σ, τ) N(B_A x̄_A − B_B x̄_B + (B_B − B_A) μ̂, B_A s_A² + B_B s_B² + (B_B − B_A)² V).
fn peers_difference(a: &Member<'_>, b: &Member<'_>) -> Result<Law, Absent> {
    refuse_marked(&[*a, *b])?;
    let built = build(a.model, a.readings, Basis::Both)?;
    let plane = single_plane(built.parts.first().map(|p| &p.plane))?;
    let weighed = weigh(plane)?;
    let (other, _) = told(b.readings, &built.units, known(a.model, &built.units))?;
    let bound = built.parts.first().map_or(0.0, |p| p.bounds.level);
    settled_about_zero(weighed.frame.dims == 0, &|factor, offset| {
        let fresh;
        let nodes = if factor == 1.0 {
            &weighed.nodes
        } else {
            let f = plane.nodes();
            fresh =
                grid::sweep(&f, &weighed.frame, weighed.factor * factor, offset, floor(weighed.frame.dims))?;
            &fresh
        };
        let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
        let mut parts = Vec::with_capacity(nodes.len());
        for node in nodes {
            let (left, right) = (pull(&plane.readings, node), pull(&other, node));
            let slope = left.1 - right.1;
            let mean = left.0 - right.0 + slope * node.long_mean;
            let var = left.2 + right.2 + slope * slope * node.long_var;
            let weight = fm::exp(node.ln_weight - top);
            parts.push((weight, built.units.sd_out(mean), built.units.square_out(var)));
        }
        mixture(parts, bound, "the difference")
    })
}

pub(super) fn single_plane(plane: Option<&Plane>) -> Result<&Plane, Absent> {
    match plane {
        Some(plane) if plane.moved.is_some() => {
            Err(Absent::because("a prior made from the other series cannot be moved and still hold them"))
        }
        Some(plane) if matches!(plane.level, Level::AboutMean { .. }) => Ok(plane),
        _ => Err(Absent::because("the series do not share one model of their levels")),
    }
}

pub(super) fn known(model: &Model, units: &Units) -> Option<f64> {
    match model.within {
        Within::Known(sd) => Some(units.sd_in(sd)),
        Within::Worth { sd, df } if df.is_infinite() => Some(units.sd_in(sd)),
        Within::None => Some(0.0),
        _ => None,
    }
}

/// θ | μ ~ N(own + slope μ, var) at a node.
pub(super) fn pull(readings: &Told, node: &Node) -> (f64, f64, f64) {
    let tau2 = node.tau * node.tau;
    match readings.at(node.sigma * node.sigma) {
        None => (0.0, 1.0, tau2),
        Some(at) => {
            let b = tau2 / (tau2 + at.var);
            (b * at.mean, at.var / (tau2 + at.var), b * at.var)
        }
    }
}

/// The nodes of what is shared, with every member's level given it.
pub(super) fn shared(
    members: &[Member<'_>],
    basis: Basis,
    sd: bool,
    bias: bool,
) -> Result<Vec<Given>, Absent> {
    refuse_marked(members)?;
    let bias_sd = members.iter().map(|m| m.model.bias_sd).fold(0.0, f64::max);
    let unit_of: Vec<Units> = members.iter().map(|m| units(m.model, m.readings)).collect();
    let axis = if sd { Some((shared_axis(members, &unit_of[0])?, unit_of[0])) } else { None };
    let dims = usize::from(sd) + usize::from(bias);
    let trouble = std::cell::RefCell::new(None);
    let f = |place: &Place| -> Given {
        let mut ln_weight = 0.0;
        let mut sigma = None;
        if let Some((axis, units)) = &axis
            && let Sd::Unknown(axis) = axis
        {
            let (s, ln_density) = axis.at(place[0]);
            ln_weight += ln_density;
            sigma = Some(units.sd_out(s));
        }
        let mut b = 0.0;
        if bias {
            let z = place[dims - 1];
            ln_weight -= 0.5 * z * z;
            b = bias_sd * z;
        }
        let mut levels = Vec::with_capacity(members.len());
        for (member, units) in members.iter().zip(&unit_of) {
            match given(member, basis, sigma, b, units, unit_of[0].shift) {
                Ok((ln_likelihood, parts)) => {
                    ln_weight += ln_likelihood;
                    levels.push(parts);
                }
                Err(e) => {
                    trouble.borrow_mut().get_or_insert(e);
                    return Given { ln_weight: f64::NEG_INFINITY, levels: Vec::new() };
                }
            }
        }
        Given { ln_weight, levels }
    };
    let frame = grid::frame(&f, [0.0; grid::MOST], dims);
    if let Some(e) = trouble.borrow_mut().take() {
        return Err(e);
    }
    let frame = frame?;
    let nodes = grid::sweep(&f, &frame, 0.45, 0.0, 50.0)?;
    if let Some(e) = trouble.borrow_mut().take() {
        return Err(e);
    }
    Ok(nodes)
}

/// The axis of one σ for all series: all their sums of squares, of this period and of their histories.
fn shared_axis(members: &[Member<'_>], units: &Units) -> Result<Sd, Absent> {
    let mut sums = SdSums::default();
    let mut add = |evidence: &Evidence| -> Result<(), Absent> {
        sums.add(told(evidence, units, None)?.1);
        Ok(())
    };
    for (i, member) in members.iter().enumerate() {
        if i == 0 {
            add(member.readings)?;
            if let Within::Pooled { others } = &member.model.within {
                for evidence in others {
                    add(evidence)?;
                }
            }
        }
        if let Some(periods) = super::build::periods_of(&member.model.level) {
            for (_, evidence) in &periods.periods {
                add(evidence)?;
            }
        }
    }
    if sums.df < 1.0 || sums.ss.is_nan() || sums.ss <= 0.0 {
        return Err(Absent::because(
            "the series' readings say nothing of the within sd they share: state it",
        ));
    }
    Ok(Sd::Unknown(super::axis::SdAxis::squares(sums)))
}

/// A member's level less `origin`, given σ and the bias b: ln of its marginal likelihood, and its parts.
fn given(
    member: &Member<'_>,
    basis: Basis,
    sigma: Option<f64>,
    b: f64,
    units: &Units,
    origin: f64,
) -> Result<(f64, Parts), Absent> {
    let mut model = member.model.clone();
    model.bias_sd = 0.0;
    if let Some(sigma) = sigma {
        model.within = Within::Known(sigma);
    }
    // A prior of the true level meets readings with the bias taken out; another is itself as measured.
    let of_true_level = basis != Basis::ReadingsOnly && speaks_of_true_level(&model.level);
    let readings = if of_true_level { less(member.readings, b) } else { member.readings.clone() };
    let built = build_in(*units, &model, &readings, basis)?;
    let mut all: Vec<Weighed> = Vec::with_capacity(built.parts.len());
    let mut ln_parts = Vec::with_capacity(built.parts.len());
    for part in &built.parts {
        let weighed = weigh(&part.plane)?;
        let mut ln = fm::ln(part.weight) + weighed.ln_integral + part.plane.ln_constant();
        if built.parts.len() > 1 {
            let mut before = part.plane.clone();
            before.readings = Told::Nothing;
            if matches!(before.sd, Sd::Unknown(_)) {
                return Err(Absent::because(
                    "a mixture prior of series that share a bias needs a known within sd",
                ));
            }
            ln -= weigh(&before)?.ln_integral;
        }
        ln_parts.push(ln);
        all.push(weighed);
    }
    let whole = fm::ln_sum_exp(&ln_parts);
    let shift = if of_true_level { 0.0 } else { b };
    let mut parts = Vec::new();
    for (weighed, ln) in all.iter().zip(&ln_parts) {
        for node in &weighed.nodes {
            let weight = fm::exp(
                ln - whole + node.ln_weight - weighed.ln_integral + weighed.frame.ln_volume(weighed.factor),
            );
            if weight > 1e-20 {
                parts.push((
                    weight,
                    (units.shift - origin) + units.sd_out(node.mean) - shift,
                    units.square_out(node.var),
                ));
            }
        }
    }
    Ok((whole, parts))
}

/// The readings with a bias taken out.
fn less(evidence: &Evidence, b: f64) -> Evidence {
    match evidence {
        Evidence::Nothing => Evidence::Nothing,
        Evidence::Sums { n, mean, ss, rest } => {
            Evidence::Sums { n: *n, mean: mean - b, ss: *ss, rest: *rest }
        }
        Evidence::Mean { mean, uncertainty } => Evidence::Mean { mean: mean - b, uncertainty: *uncertainty },
        Evidence::Singles(singles) => Evidence::Singles(
            singles
                .iter()
                .map(|s| {
                    let seen = match s.seen {
                        Seen::At(x) => Seen::At(x - b),
                        Seen::Below(x) => Seen::Below(x - b),
                        Seen::Above(x) => Seen::Above(x - b),
                        Seen::Rounded { lower, at, upper } => {
                            Seen::Rounded { lower: lower - b, at: at - b, upper: upper - b }
                        }
                    };
                    Single { seen, uncertainty: s.uncertainty }
                })
                .collect(),
        ),
    }
}

/// What is shared is followed over normal pieces.
pub(super) fn refuse_marked(members: &[Member<'_>]) -> Result<(), Absent> {
    let marked = |m: &Member<'_>| {
        let periods = super::build::periods_of(&m.model.level);
        let earlier = periods.is_some_and(|p| p.periods.iter().any(|(_, e)| is_marked(e)));
        is_marked(m.readings) || earlier
    };
    if members.iter().any(marked) {
        return Err(Absent::because(
            "series that share a spread, a prior or a bias are not compared where readings are marked",
        ));
    }
    Ok(())
}
