//! Several series at once: the difference of two levels, and which is highest (methods §4). Series are
//! independent given what they share: σ where within is peers; (σ, τ, μ) where the prior is peers; a
//! common bias where a prior speaks of the true level. Else it cancels.

use super::build::{build, build_in, units};
use super::grid::{self, Place, Weighted};
use super::law::Law;
use super::legendre::Panels;
use super::plane::{Level, Node, Plane, Sd};
use super::solve::solve;
use super::told::{SdSums, Told, told};
use super::units::Units;
use super::weighing::{Weighed, weigh};
use super::{Basis, When, mixture};
use crate::data::evidence::{Evidence, Seen, Single};
use crate::math::{fm, normal};
use crate::prior::{LevelPrior, Model, Within};
use crate::quantity::Absent;

/// One series: its name, its model and its readings of the period under review.
#[derive(Debug, Clone, Copy)]
pub struct Member<'a> {
    pub name: &'a str,
    pub model: &'a Model,
    pub readings: &'a Evidence,
}

/// The chance that a level is the highest (or lowest) of all, and its expected rank (1 is first).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Rank {
    pub chance: f64,
    pub expected_rank: f64,
}

/// Normal parts (weight, mean, variance) of a level.
type Parts = Vec<(f64, f64, f64)>;

/// Given what the series share: a weight, and every member's level.
struct Given {
    ln_weight: f64,
    levels: Vec<Parts>,
}

impl Weighted for Given {
    fn ln_weight(&self) -> f64 {
        self.ln_weight
    }
}

/// What the members share.
enum Sharing {
    Nothing,
    /// σ, τ and μ.
    Peers,
    /// σ, a bias that priors of the true level see, or both.
    Parameters {
        sd: bool,
        bias: bool,
    },
}

fn sharing(members: &[Member<'_>], within_sd_is_shared: bool) -> Sharing {
    let is_peers = |m: &Member<'_>| matches!(m.model.level, LevelPrior::Peers(_));
    if !members.is_empty() && members.iter().all(is_peers) {
        return Sharing::Peers;
    }
    let sd = within_sd_is_shared && members.iter().any(|m| matches!(m.model.within, Within::Pooled { .. }));
    let bias = members.iter().any(|m| m.model.bias_sd > 0.0 && speaks_of_true_level(&m.model.level));
    if sd || bias { Sharing::Parameters { sd, bias } } else { Sharing::Nothing }
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
    let what = "the difference";
    let members = [*a, *b];
    let sharing = if basis == Basis::ReadingsOnly && !within_sd_is_shared {
        Sharing::Nothing
    } else {
        sharing(&members, within_sd_is_shared)
    };
    match sharing {
        Sharing::Peers if basis == Basis::Both => peers_difference(a, b),
        Sharing::Nothing | Sharing::Peers => {
            let cancel = |m: &Member<'_>| {
                let mut model = m.model.clone();
                model.bias_sd = 0.0;
                solve(&model, m.readings, basis)
            };
            let (a, b) = (cancel(a)?, cancel(b)?);
            let parts = |p: &super::Posterior| -> Parts {
                p.pieces.iter().map(|k| (k.weight, k.level_mean, k.level_var)).collect()
            };
            let (left, right) = (parts(&a), parts(&b));
            let bound = a.inner.bounds.level.min(b.inner.bounds.level);
            mixture(pairs(&left, &right, 1.0)?, bound, what)
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
            mixture(all, bound, what)
        }
    }
}

/// All pairs of parts, independent; those too light to matter are left out.
fn pairs(left: &Parts, right: &Parts, weight: f64) -> Result<Parts, Absent> {
    const LIGHT: f64 = 1e-17;
    const CAP: usize = 3_000_000;
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
        if all.len() > CAP {
            return Err(Absent::failed("the difference of two levels needs more pieces than allowed"));
        }
    }
    Ok(all)
}

/// Peers: given (σ, τ) N(B_A x̄_A − B_B x̄_B + (B_B − B_A) μ̂, B_A s_A² + B_B s_B² + (B_B − B_A)² V).
fn peers_difference(a: &Member<'_>, b: &Member<'_>) -> Result<Law, Absent> {
    let built = build(a.model, a.readings, Basis::Both)?;
    let plane = single_plane(&built.parts.first().map(|p| &p.plane))?;
    let weighed = weigh(plane)?;
    let (other, _) = told(b.readings, &built.units, known(a.model, &built.units))?;
    let top = weighed.nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
    let mut parts = Vec::with_capacity(weighed.nodes.len());
    for node in &weighed.nodes {
        let (left, right) = (pull(&plane.readings, node), pull(&other, node));
        let slope = left.1 - right.1;
        let mean = left.0 - right.0 + slope * node.long_mean;
        let var = left.2 + right.2 + slope * slope * node.long_var;
        let weight = fm::exp(node.ln_weight - top);
        parts.push((weight, built.units.sd_out(mean), built.units.square_out(var)));
    }
    let bound = built.parts.first().map_or(0.0, |p| p.bounds.level);
    mixture(parts, bound, "the difference")
}

fn single_plane<'a>(plane: &Option<&'a Plane>) -> Result<&'a Plane, Absent> {
    match plane {
        Some(plane) if plane.moved.is_some() => {
            Err(Absent::because("a prior made from the other series cannot be moved and still hold them"))
        }
        Some(plane) if matches!(plane.level, Level::AboutMean { .. }) => Ok(plane),
        _ => Err(Absent::because("the series do not share one model of their levels")),
    }
}

fn known(model: &Model, units: &Units) -> Option<f64> {
    match model.within {
        Within::Known(sd) => Some(units.sd_in(sd)),
        Within::Worth { sd, df } if df.is_infinite() => Some(units.sd_in(sd)),
        Within::None => Some(0.0),
        _ => None,
    }
}

/// θ | μ ~ N(own + slope μ, var) at a node.
fn pull(readings: &Told, node: &Node) -> (f64, f64, f64) {
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
fn shared(members: &[Member<'_>], basis: Basis, sd: bool, bias: bool) -> Result<Vec<Given>, Absent> {
    let first = members.first().ok_or_else(|| Absent::failed("a comparison of no series"))?;
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
            match given(member, basis, sigma, b, units) {
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
    let _ = first;
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

/// A member's level given σ and the bias b: ln of its marginal likelihood, and its parts.
fn given(
    member: &Member<'_>,
    basis: Basis,
    sigma: Option<f64>,
    b: f64,
    units: &Units,
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
            let weight = fm::exp(ln - whole + node.ln_weight - weighed.ln_integral + ln_volume(weighed));
            if weight > 1e-20 {
                parts.push((weight, units.value_out(node.mean) - shift, units.square_out(node.var)));
            }
        }
    }
    Ok((whole, parts))
}

fn ln_volume(weighed: &Weighed) -> f64 {
    (0..weighed.frame.dims).map(|d| fm::ln(weighed.factor * weighed.frame.width[d])).sum()
}

/// The readings with a bias taken out.
fn less(evidence: &Evidence, b: f64) -> Evidence {
    match evidence {
        Evidence::Nothing => Evidence::Nothing,
        Evidence::Sums { n, mean, ss } => Evidence::Sums { n: *n, mean: mean - b, ss: *ss },
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

/// For each member, the chance that its level is the highest (or lowest) and its expected rank.
pub fn ranking(
    members: &[Member<'_>],
    highest: bool,
    basis: Basis,
    within_sd_is_shared: bool,
) -> Result<Vec<Rank>, Absent> {
    if members.len() < 2 {
        return Err(Absent::because("a ranking needs at least two series"));
    }
    let sharing = if basis == Basis::ReadingsOnly && !within_sd_is_shared {
        Sharing::Nothing
    } else {
        sharing(members, within_sd_is_shared)
    };
    let ranks = match sharing {
        Sharing::Peers if basis == Basis::Both => peers_ranking(members, highest)?,
        Sharing::Peers | Sharing::Nothing => {
            let mut levels = Vec::with_capacity(members.len());
            for member in members {
                let mut model = member.model.clone();
                model.bias_sd = 0.0;
                let posterior = solve(&model, member.readings, basis)?;
                let law = posterior.level(When::This)?;
                levels.push(LevelShape::of_law(&law)?);
            }
            rank_given(&levels, highest)?
        }
        Sharing::Parameters { sd, bias } => {
            let given = shared(members, basis, sd, bias)?;
            let top = given.iter().map(|g| g.ln_weight).fold(f64::NEG_INFINITY, f64::max);
            let mut sum = Sum::new(members.len());
            for node in given.iter().filter(|g| g.ln_weight > top - 30.0) {
                let mut levels = Vec::with_capacity(members.len());
                for parts in &node.levels {
                    levels.push(LevelShape::of_parts(parts)?);
                }
                sum.add(fm::exp(node.ln_weight - top), &rank_given(&levels, highest)?);
            }
            sum.mean()
        }
    };
    let all: f64 = ranks.iter().map(|r| r.chance).sum();
    if (all - 1.0).abs() > 1e-8 {
        return Err(Absent::failed(format!("the chances of a ranking add to {all}, not to 1")));
    }
    Ok(ranks)
}

/// A weighted mean of rankings.
struct Sum {
    weight: f64,
    ranks: Vec<Rank>,
}

impl Sum {
    fn new(n: usize) -> Sum {
        Sum { weight: 0.0, ranks: vec![Rank { chance: 0.0, expected_rank: 0.0 }; n] }
    }

    fn add(&mut self, weight: f64, ranks: &[Rank]) {
        self.weight += weight;
        for (sum, rank) in self.ranks.iter_mut().zip(ranks) {
            sum.chance += weight * rank.chance;
            sum.expected_rank += weight * rank.expected_rank;
        }
    }

    fn mean(self) -> Vec<Rank> {
        let whole = self.weight;
        let mean = |r: Rank| Rank { chance: r.chance / whole, expected_rank: r.expected_rank / whole };
        self.ranks.into_iter().map(mean).collect()
    }
}

/// Peers: over nodes of (σ, τ) and of μ, where the levels are independent.
fn peers_ranking(members: &[Member<'_>], highest: bool) -> Result<Vec<Rank>, Absent> {
    let first = members[0];
    let built = build(first.model, first.readings, Basis::Both)?;
    let plane = single_plane(&built.parts.first().map(|p| &p.plane))?;
    let mut readings = Vec::with_capacity(members.len());
    for member in members {
        readings.push(told(member.readings, &built.units, known(first.model, &built.units))?.0);
    }
    let weighed = weigh(plane)?;
    let top = weighed.nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
    let mut sum = Sum::new(members.len());
    for node in weighed.nodes.iter().filter(|n| n.ln_weight > top - 26.0) {
        let weight = fm::exp(node.ln_weight - top);
        let spread = node.long_var.sqrt();
        for i in -14..=14 {
            let z = 0.5 * f64::from(i);
            let mu = node.long_mean + spread * z;
            let levels: Vec<LevelShape> = readings
                .iter()
                .map(|r| {
                    let (own, slope, var) = pull(r, node);
                    LevelShape::Normal { mean: own + slope * mu, sd: var.sqrt() }
                })
                .collect();
            sum.add(weight * fm::exp(-0.5 * z * z), &rank_given(&levels, highest)?);
        }
    }
    Ok(sum.mean())
}

/// The level of one series, given what is shared.
enum LevelShape {
    Normal { mean: f64, sd: f64 },
    Panels(Panels),
}

impl LevelShape {
    fn of_parts(parts: &Parts) -> Result<LevelShape, Absent> {
        if let [(_, mean, var)] = parts[..] {
            return Ok(LevelShape::Normal { mean, sd: var.sqrt() });
        }
        LevelShape::of_law(&mixture(parts.clone(), 0.0, "a level")?)
    }

    fn of_law(law: &Law) -> Result<LevelShape, Absent> {
        let mut edges = Vec::new();
        for k in (1..=16).rev() {
            edges.push(law.quantile(fm::pow(10.0, -f64::from(k)))?);
        }
        for p in [0.25, 0.5, 0.75] {
            edges.push(law.quantile(p)?);
        }
        for k in 1..=16 {
            edges.push(law.upper_quantile(fm::pow(10.0, -f64::from(k)))?);
        }
        edges.dedup();
        Ok(LevelShape::Panels(Panels::new(&|t| law.density(t), &edges)?))
    }

    fn cdf(&self, t: f64) -> f64 {
        match self {
            LevelShape::Normal { mean, sd } => normal::cdf((t - mean) / sd),
            LevelShape::Panels(panels) => panels.cdf(t),
        }
    }

    fn sf(&self, t: f64) -> f64 {
        match self {
            LevelShape::Normal { mean, sd } => normal::sf((t - mean) / sd),
            LevelShape::Panels(panels) => panels.sf(t),
        }
    }

    /// E g(θ).
    fn expect(&self, g: &dyn Fn(f64) -> f64, step: f64) -> f64 {
        match self {
            LevelShape::Panels(panels) => panels.expect(g),
            LevelShape::Normal { mean, sd } => {
                let half = (8.0 / step) as i32;
                let mut total = 0.0;
                for i in -half..=half {
                    let z = step * f64::from(i);
                    total += fm::exp(-0.5 * z * z) * g(mean + sd * z);
                }
                total * step * fm::INV_SQRT_TWO_PI
            }
        }
    }
}

/// ∫ f_i Π_{j≠i} F_j, and 1 + Σ_j P(θ_j beyond θ_i), of independent levels.
fn rank_given(levels: &[LevelShape], highest: bool) -> Result<Vec<Rank>, Absent> {
    // A narrow level seen from a wide one is a step: the points must be as close as the narrow one is wide.
    let sds: Vec<f64> = levels
        .iter()
        .filter_map(|l| if let LevelShape::Normal { sd, .. } = l { Some(*sd) } else { None })
        .collect();
    let narrowest = sds.iter().copied().fold(f64::INFINITY, f64::min);
    if narrowest == 0.0 {
        return Err(Absent::because("a ranking of levels that are known exactly is no question of chance"));
    }
    let mut ranks = Vec::with_capacity(levels.len());
    for (i, level) in levels.iter().enumerate() {
        let step = match level {
            LevelShape::Normal { sd, .. } => 0.4 * (narrowest / sd).clamp(1e-3, 1.0),
            LevelShape::Panels(_) => 0.4,
        };
        let beyond = |j: usize, t: f64| if highest { levels[j].sf(t) } else { levels[j].cdf(t) };
        let within = |j: usize, t: f64| if highest { levels[j].cdf(t) } else { levels[j].sf(t) };
        let others = || (0..levels.len()).filter(|j| *j != i);
        let chance = level.expect(&|t| others().map(|j| within(j, t)).product(), step);
        let expected_rank = 1.0 + level.expect(&|t| others().map(|j| beyond(j, t)).sum(), step);
        ranks.push(Rank { chance, expected_rank });
    }
    Ok(ranks)
}
