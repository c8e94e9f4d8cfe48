//! Which of several levels is the highest (or lowest), and each one's expected rank (methods §4): products of
//! marginals where the series share nothing, else given what they share.

use super::build::build;
use super::grid;
use super::joint::{Member, Parts, Sharing, known, pull, refuse_marked, shared, sharing, single_plane};
use super::legendre::Panels;
use super::shapes::{panels_of, panels_with_tails};
use super::solve::solve;
use super::told::told;
use super::weighing::weigh;
use super::{Basis, When, mixture};
use crate::math::{fm, normal};
use crate::quantity::Absent;

/// How many sds out a level is followed: a chance of 1e−12 keeps its digits.
const REACH: f64 = 12.0;
/// ln of the share of the heaviest node below which a node cannot be seen in such a chance.
const NODES: f64 = 50.0;

/// The chance that a level is the highest (or lowest) of all, and its expected rank (1 is first).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Rank {
    pub chance: f64,
    pub expected_rank: f64,
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
    let ranks = match sharing(members, basis, within_sd_is_shared)? {
        Sharing::Peers => of_peers(members, highest)?,
        Sharing::Nothing => {
            let mut levels = Vec::with_capacity(members.len());
            let mut origin = None;
            for member in members {
                let mut model = member.model.clone();
                model.bias_sd = 0.0;
                let posterior = solve(&model, member.readings, basis)?;
                let origin = *origin.get_or_insert(posterior.origin());
                levels.push(match posterior.one_piece() {
                    Some(piece) if piece.level_var > 0.0 => {
                        let mean = (posterior.origin() - origin) + piece.level_apart;
                        Level::Normal { mean, sd: piece.level_var.sqrt() }
                    }
                    _ => {
                        let law = posterior.level(When::This)?.moved(-origin);
                        // Marked readings leave a density that is known down to its top's last digits only.
                        Level::Panels(if posterior.is_marked() {
                            panels_of(&law)?
                        } else {
                            panels_with_tails(&law)?
                        })
                    }
                });
            }
            given(&levels, highest)?
        }
        Sharing::Parameters { sd, bias } => {
            let nodes = shared(members, basis, sd, bias)?;
            let top = nodes.iter().map(|g| g.ln_weight).fold(f64::NEG_INFINITY, f64::max);
            let mut sum = Sum::new(members.len());
            for node in nodes.iter().filter(|g| g.ln_weight > top - NODES) {
                let mut levels = Vec::with_capacity(members.len());
                for parts in &node.levels {
                    levels.push(Level::of_parts(parts)?);
                }
                sum.add(fm::exp(node.ln_weight - top), &given(&levels, highest)?);
            }
            sum.mean()
        }
    };
    // One of them is the highest: a check that the rules cannot pass by chance.
    let all: f64 = ranks.iter().map(|r| r.chance).sum();
    if (all - 1.0).is_nan() || (all - 1.0).abs() > 1e-8 {
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

/// Peers: over nodes of (σ, τ) and of μ, where the levels are independent normals
/// θ_j | μ, τ, σ ~ N(B_j x̄_j + (1 − B_j) μ, B_j s_j²).
fn of_peers(members: &[Member<'_>], highest: bool) -> Result<Vec<Rank>, Absent> {
    refuse_marked(members)?;
    let first = members[0];
    let built = build(first.model, first.readings, Basis::Both)?;
    let plane = single_plane(built.parts.first().map(|p| &p.plane))?;
    let mut readings = Vec::with_capacity(members.len());
    for member in members {
        readings.push(told(member.readings, &built.units, known(first.model, &built.units))?.0);
    }
    let weighed = weigh(plane)?;
    let nodes = if weighed.frame.dims == 0 {
        weighed.nodes
    } else {
        let f = plane.nodes();
        grid::sweep(&f, &weighed.frame, weighed.factor, 0.0, NODES)?
    };
    let top = nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
    let mut sum = Sum::new(members.len());
    let mut ranks = vec![Rank { chance: 0.0, expected_rank: 0.0 }; members.len()];
    let mut levels = vec![(0.0, 0.0); members.len()];
    let mut work = Work::default();
    for node in &nodes {
        let weight = fm::exp(node.ln_weight - top);
        let spread = node.long_var.sqrt();
        let pulls: Vec<(f64, f64, f64)> = readings.iter().map(|r| pull(r, node)).collect();
        for (i, rank) in ranks.iter_mut().enumerate() {
            rank.chance = 0.0;
            rank.expected_rank = 1.0;
            for (j, other) in pulls.iter().enumerate() {
                if j != i {
                    // θ_j − θ_i, μ taken out.
                    let own = pulls[i];
                    let slope = other.1 - own.1;
                    let mean = other.0 - own.0 + slope * node.long_mean;
                    let sd = (other.2 + own.2 + slope * slope * node.long_var).sqrt();
                    rank.expected_rank += normal::cdf(if highest { mean / sd } else { -mean / sd });
                }
            }
        }
        let mut whole = 0.0;
        for k in -21..=21 {
            let z = 0.5 * f64::from(k);
            let mu = node.long_mean + spread * z;
            let at_mu = fm::exp(-0.5 * z * z);
            whole += at_mu;
            for (level, (own, slope, var)) in levels.iter_mut().zip(&pulls) {
                *level = (own + slope * mu, var.sqrt());
            }
            work.chances(&levels, highest)?;
            for (rank, chance) in ranks.iter_mut().zip(&work.chances) {
                rank.chance += at_mu * chance;
            }
        }
        for rank in &mut ranks {
            rank.chance /= whole;
        }
        sum.add(weight, &ranks);
    }
    Ok(sum.mean())
}

/// Room for the chances of independent normal levels, used again for every node.
#[derive(Default)]
struct Work {
    chances: Vec<f64>,
    within: Vec<f64>,
    after: Vec<f64>,
}

impl Work {
    /// ∫ f_i Π_{j≠i} F_j for all i at once, by the trapezoid rule on one grid as fine as the narrowest level.
    fn chances(&mut self, levels: &[(f64, f64)], highest: bool) -> Result<(), Absent> {
        const POINTS_CAP: f64 = 200_000.0;
        let narrowest = levels.iter().map(|l| l.1).fold(f64::INFINITY, f64::min);
        let lo = levels.iter().map(|l| l.0 - REACH * l.1).fold(f64::INFINITY, f64::min);
        let hi = levels.iter().map(|l| l.0 + REACH * l.1).fold(f64::NEG_INFINITY, f64::max);
        let step = 0.4 * narrowest;
        let points = (hi - lo) / step;
        if points.is_nan() || points > POINTS_CAP {
            return Err(Absent::failed("the widths of the levels differ too much for a ranking"));
        }
        let n = levels.len();
        self.chances.clear();
        self.chances.resize(n, 0.0);
        self.within.resize(n, 0.0);
        self.after.resize(n + 1, 1.0);
        for i in 0..=(points as usize) + 1 {
            let t = lo + step * i as f64;
            for (within, (mean, sd)) in self.within.iter_mut().zip(levels) {
                let z = (t - mean) / sd;
                *within = if highest { normal::cdf(z) } else { normal::sf(z) };
            }
            // Products of all others, from both ends.
            self.after[n] = 1.0;
            for j in (0..n).rev() {
                self.after[j] = self.after[j + 1] * self.within[j];
            }
            let mut before = 1.0;
            for (j, (mean, sd)) in levels.iter().enumerate() {
                let others = before * self.after[j + 1];
                before *= self.within[j];
                let z = (t - mean) / sd;
                if others > 0.0 && z.abs() < REACH + 0.5 {
                    self.chances[j] += step / sd * fm::INV_SQRT_TWO_PI * fm::exp(-0.5 * z * z) * others;
                }
            }
        }
        Ok(())
    }
}

/// The level of one series, given what is shared.
enum Level {
    Normal { mean: f64, sd: f64 },
    Panels(Panels),
}

impl Level {
    fn of_parts(parts: &Parts) -> Result<Level, Absent> {
        if let [(_, mean, var)] = parts[..] {
            return Ok(Level::Normal { mean, sd: var.sqrt() });
        }
        Ok(Level::Panels(panels_with_tails(&mixture(parts.clone(), 0.0, "a level")?)?))
    }

    fn cdf(&self, t: f64) -> f64 {
        match self {
            Level::Normal { mean, sd } => normal::cdf((t - mean) / sd),
            Level::Panels(panels) => panels.cdf(t),
        }
    }

    fn sf(&self, t: f64) -> f64 {
        match self {
            Level::Normal { mean, sd } => normal::sf((t - mean) / sd),
            Level::Panels(panels) => panels.sf(t),
        }
    }

    /// E g(θ).
    fn expect(&self, g: &dyn Fn(f64) -> f64, step: f64) -> f64 {
        match self {
            Level::Panels(panels) => panels.expect(g),
            Level::Normal { mean, sd } => {
                let half = (REACH / step) as i32;
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
fn given(levels: &[Level], highest: bool) -> Result<Vec<Rank>, Absent> {
    let normals: Vec<(f64, f64)> = levels
        .iter()
        .filter_map(|l| if let Level::Normal { mean, sd } = l { Some((*mean, *sd)) } else { None })
        .collect();
    // A narrow level seen from a wide one is a step: the points must be as close as the narrow one is wide.
    let narrowest = normals.iter().map(|n| n.1).fold(f64::INFINITY, f64::min);
    if narrowest == 0.0 {
        return Err(Absent::because("a ranking of levels that are known exactly is no question of chance"));
    }
    let mut work = Work::default();
    let all_normal = normals.len() == levels.len();
    if all_normal {
        work.chances(&normals, highest)?;
    }
    let mut ranks = Vec::with_capacity(levels.len());
    for (i, level) in levels.iter().enumerate() {
        let step = match level {
            Level::Normal { sd, .. } => 0.4 * (narrowest / sd).clamp(1e-3, 1.0),
            Level::Panels(_) => 0.4,
        };
        let beyond = |j: usize, t: f64| if highest { levels[j].sf(t) } else { levels[j].cdf(t) };
        let within = |j: usize, t: f64| if highest { levels[j].cdf(t) } else { levels[j].sf(t) };
        let others = || (0..levels.len()).filter(|j| *j != i);
        let chance = if all_normal {
            work.chances[i]
        } else {
            level.expect(&|t| others().map(|j| within(j, t)).product(), step)
        };
        let ahead = |j: usize| match (level, &levels[j]) {
            (Level::Normal { mean, sd }, Level::Normal { mean: m, sd: s }) => {
                let z = (m - mean) / (sd * sd + s * s).sqrt();
                normal::cdf(if highest { z } else { -z })
            }
            _ => level.expect(&|t| beyond(j, t), step),
        };
        let expected_rank = 1.0 + others().map(ahead).sum::<f64>();
        ranks.push(Rank { chance, expected_rank });
    }
    Ok(ranks)
}
