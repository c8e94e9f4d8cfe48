//! Model and readings in, pieces out.

use super::beside::{Added, Beside};
use super::build::{BiasOf, Built, Part, build};

use super::closed::Conjugate;
use super::law::Law;
use super::marginal::{self, Weighted};
use super::marked::{self, Points};
use super::marked_given::given;
use super::moments::{Bounds, moment};
use super::own_sd::OwnSd;
use super::plane::{BetweenSd, Coordinate, Node, Plane, Sd};
use super::shapes::{MovedPanels, Spread};
use super::units::Units;
use super::weighing::{Weighed, weigh};
use super::{Basis, PeriodsPart, Piece, Posterior, When};
use crate::data::evidence::Evidence;
use crate::math::fm;
use crate::prior::{LevelPrior, Model};
use crate::quantity::Absent;
use std::sync::{Arc, OnceLock};

/// Pieces lighter than this share of the whole are left out.
pub(super) const NEGLIGIBLE: f64 = 1e-31;

/// What a posterior is made of, and what has been made of it so far.
#[derive(Debug)]
pub(super) struct Inner {
    pub parts: Vec<Part>,
    pub units: Units,
    pub bounds: Bounds,
    pub bias_sd: f64,
    /// The closed form, where there is one.
    pub conjugate: Option<Conjugate>,
    /// The level, where σ is this period's alone.
    pub own_sd: Option<Arc<OwnSd>>,
    /// The laws of the levels themselves, made when first asked for.
    pub levels: [OnceLock<Result<Law, Absent>>; 3],
    /// With marked readings, points of the next level and of the long-run mean.
    pub other_points: [OnceLock<Result<Vec<Points>, Absent>>; 2],
    /// The laws of the within and the between sd.
    pub spreads: [OnceLock<Result<Law, Absent>>; 2],
    pub has_next: bool,
    pub has_long_run: bool,
    /// Why readings cannot be foretold.
    pub no_sd: Option<Absent>,
    nodes: OnceLock<Result<Nodes, Absent>>,
}

/// The planes of all parts on their grids.
#[derive(Debug)]
pub(super) struct Nodes {
    /// Of every part its nodes and its share of the whole.
    pub weighed: Vec<(Weighed, f64)>,
    pub pieces: Vec<Piece>,
    /// With marked readings: the level's points, outer units.
    pub points: Vec<Points>,
    /// B of every piece.
    pub prior_shares: Vec<f64>,
    /// With a bias: the true levels of every piece.
    pub true_levels: Vec<TrueLevel>,
    pub error: f64,
}

/// (mean less the origin, variance) of the true levels and of the true long-run mean.
#[derive(Debug, Clone, Copy)]
pub(super) struct TrueLevel {
    pub this: (f64, f64),
    pub next: (f64, f64),
    pub long_run: (f64, f64),
}

/// Updates the model by the readings.
///
/// `Basis::PriorOnly` leaves the readings out, `Basis::ReadingsOnly` puts a flat prior in the place
/// of the level's prior (the within sd stays as the model has it).
pub fn solve(model: &Model, readings: &Evidence, basis: Basis) -> Result<Posterior, Absent> {
    solved(model, readings, basis, true)
}

/// The same by sums over nodes alone: the second road.
#[cfg(test)]
pub(super) fn solve_on_nodes(model: &Model, readings: &Evidence, basis: Basis) -> Result<Posterior, Absent> {
    solved(model, readings, basis, false)
}

fn solved(
    model: &Model,
    readings: &Evidence,
    basis: Basis,
    by_level_alone: bool,
) -> Result<Posterior, Absent> {
    let built = build(model, readings, basis)?;
    let bounds = built.parts.iter().map(|p| p.bounds).reduce(Bounds::both);
    let bounds = bounds.ok_or_else(|| Absent::failed("a posterior without parts"))?;
    let models_periods =
        built.parts.iter().all(|p| p.periods) && !matches!(model.level, LevelPrior::Peers(_));
    let conjugate = match &built.parts[..] {
        [part] => Conjugate::of(part, &built.units),
        _ => None,
    };
    let own_sd = match &built.parts[..] {
        [part] if by_level_alone && conjugate.is_none() && built.bias_sd == 0.0 => {
            OwnSd::of(&part.plane, &part.bounds)
        }
        _ => None,
    };
    // What the level alone cannot answer is summed over nodes, when first asked for.
    let own_sd = own_sd.and_then(Result::ok).map(Arc::new);
    let (quadrature_error, nodes) = match &own_sd {
        Some(own) => (own.error, OnceLock::new()),
        None => {
            let weighed = weigh_parts(model, readings, &built, basis)?;
            let nodes = Nodes::new(&built.parts, &built.units, built.bias_sd, weighed)?;
            (nodes.error, OnceLock::from(Ok(nodes)))
        }
    };
    let inner = Inner {
        conjugate,
        own_sd,
        levels: Default::default(),
        other_points: Default::default(),
        spreads: Default::default(),
        has_next: models_periods,
        has_long_run: models_periods && !built.parts.iter().any(|p| p.plane.is_walk()),
        no_sd: no_sd(&built),
        bounds,
        units: built.units,
        bias_sd: built.units.sd_out(built.bias_sd),
        parts: built.parts,
        nodes,
    };
    Ok(Posterior {
        model: model.clone(),
        readings: readings.clone(),
        basis,
        quadrature_error,
        inner: Arc::new(inner),
    })
}

impl Nodes {
    /// All pieces of the parts, from their nodes and their shares of the whole; levels in outer units.
    fn new(
        parts: &[Part],
        units: &Units,
        bias_sd: f64,
        weighed: Vec<(Weighed, f64)>,
    ) -> Result<Nodes, Absent> {
        let mut nodes = Nodes {
            weighed: Vec::new(),
            pieces: Vec::new(),
            points: Vec::new(),
            prior_shares: Vec::new(),
            true_levels: Vec::new(),
            error: 0.0,
        };
        let is_marked = parts.iter().any(|part| part.plane.is_marked());
        for (part, (weighed, share)) in parts.iter().zip(&weighed) {
            nodes.error = nodes.error.max(weighed.error);
            if is_marked {
                continue;
            }
            let top = weighed.nodes.iter().map(|n| n.ln_weight).fold(f64::NEG_INFINITY, f64::max);
            let sum: f64 = weighed.nodes.iter().map(|n| fm::exp(n.ln_weight - top)).sum();
            for node in &weighed.nodes {
                let weight = share * fm::exp(node.ln_weight - top) / sum;
                if weight < NEGLIGIBLE {
                    continue;
                }
                nodes.pieces.push(piece(node, weight, units));
                nodes.prior_shares.push(prior_share(node, &part.plane));
                if bias_sd > 0.0 {
                    nodes.true_levels.push(true_level(node, part, bias_sd, units));
                }
            }
        }
        if is_marked {
            let weighted: Vec<Weighted<'_>> = weighted(parts, &weighed);
            let level = |part: &Part, node: &Node| given(units, part, node, When::This, (1.0, 0.0, 0.0));
            nodes.add_points(marked::points(&weighted, 1.0, &level)?, units);
        }
        if nodes.pieces.is_empty() {
            return Err(Absent::failed("the posterior has no piece of any weight"));
        }
        nodes.weighed = weighed;
        Ok(nodes)
    }

    fn add_points(&mut self, points: Vec<Points>, units: &Units) {
        for at in &points {
            let reading_sd = units.sd_out(at.sigma);
            self.pieces.extend(at.points.iter().filter(|p| p.1 >= NEGLIGIBLE).map(|(level, weight)| Piece {
                weight: *weight,
                level_mean: units.shift + level,
                level_apart: *level,
                level_var: 0.0,
                reading_sd,
                periods: None,
            }));
        }
        self.points = points;
    }
}

/// Parts with their nodes and shares.
fn weighted<'a>(parts: &'a [Part], weighed: &'a [(Weighed, f64)]) -> Vec<Weighted<'a>> {
    let of = parts.iter().zip(weighed);
    of.map(|(part, (weighed, share))| Weighted { part, weighed, share: *share }).collect()
}

/// Every part's nodes, and the parts' shares: weight before the readings times marginal likelihood.
fn weigh_parts(
    model: &Model,
    readings: &Evidence,
    built: &Built,
    basis: Basis,
) -> Result<Vec<(Weighed, f64)>, Absent> {
    let mut all = Vec::with_capacity(built.parts.len());
    for part in &built.parts {
        all.push(weigh(&part.plane)?);
    }
    if built.parts.len() == 1 {
        return Ok(all.into_iter().map(|weighed| (weighed, 1.0)).collect());
    }
    let mut ln_shares = Vec::with_capacity(all.len());
    let before = if basis == Basis::Both { Some(build(model, readings, Basis::PriorOnly)?) } else { None };
    for (i, (part, weighed)) in built.parts.iter().zip(&all).enumerate() {
        let mut ln_share = fm::ln(part.weight);
        if let Some(before) = &before {
            let plane = &before.parts[i].plane;
            let prior = weigh(plane)?;
            ln_share +=
                weighed.ln_integral + part.plane.ln_constant() - prior.ln_integral - plane.ln_constant();
        }
        ln_shares.push(ln_share);
    }
    let whole = fm::ln_sum_exp(&ln_shares);
    Ok(all.into_iter().zip(ln_shares.iter().map(|s| fm::exp(s - whole))).collect())
}

pub(super) fn piece(node: &Node, weight: f64, units: &Units) -> Piece {
    let periods = (!node.long_mean.is_nan()).then(|| PeriodsPart {
        long_run_mean: units.value_out(node.long_mean),
        long_run_apart: units.sd_out(node.long_mean),
        long_run_var: units.square_out(node.long_var),
        between_sd: units.sd_out(node.tau),
        history_sd: units.sd_out(node.history_sigma),
    });
    Piece {
        weight,
        level_mean: units.value_out(node.mean),
        level_apart: units.sd_out(node.mean),
        level_var: units.square_out(node.var),
        reading_sd: units.sd_out(node.sigma),
        periods,
    }
}

/// B = s²/(v0 + s²), the prior's weight in the level's mean.
fn prior_share(node: &Node, plane: &Plane) -> f64 {
    if node.prior_var == f64::INFINITY {
        return 0.0;
    }
    plane.readings.at(node.sigma * node.sigma).map_or(1.0, |at| at.var / (node.prior_var + at.var))
}

/// Methods §3, bias: the level as measured is φ = θ + b; what is known of θ.
pub(super) fn true_level(node: &Node, part: &Part, bias_sd: f64, units: &Units) -> TrueLevel {
    let u2 = bias_sd * bias_sd;
    let tau2 = node.tau * node.tau;
    let pulled = |m0: f64, v0: f64| {
        let k = v0 / (v0 + u2);
        (m0 + k * (node.mean - m0), k * u2 + k * k * node.var)
    };
    let (this, long_run) = match part.bias {
        BiasOf::Measured => ((node.mean, node.var + u2), (node.long_mean, node.long_var + u2)),
        BiasOf::TrueLevel { mean, var } => (pulled(mean, var), (f64::NAN, f64::NAN)),
        BiasOf::TrueLevelPerReading { mean, readings } => {
            (pulled(mean, node.sigma * node.sigma / readings), (f64::NAN, f64::NAN))
        }
        BiasOf::TrueLongRun { mean, var } => {
            let k = var / (var + u2);
            let moved = node.long_mean - mean;
            let long = (mean + k * moved, k * u2 + k * k * node.long_var);
            let b = part.plane.readings.at(node.sigma * node.sigma).map_or(0.0, |at| tau2 / (tau2 + at.var));
            let rest = 1.0 - k;
            let var =
                node.var + rest * rest * node.long_var - 2.0 * rest * (1.0 - b) * node.long_var + k * u2;
            ((node.mean - rest * moved, var), long)
        }
    };
    let out = |(m, v): (f64, f64)| (units.sd_out(m), units.square_out(v));
    TrueLevel { this: out(this), next: out((long_run.0, long_run.1 + tau2)), long_run: out(long_run) }
}

fn no_sd(built: &Built) -> Option<Absent> {
    let undefined = built.parts.iter().any(|p| matches!(p.plane.sd, Sd::Undefined));
    undefined.then(|| {
        Absent::because("nothing is known of the within sd here: it comes from this period's readings alone")
    })
}

impl Inner {
    /// Whether levels are held as densities: readings are marked, here or in earlier periods.
    pub fn is_marked(&self) -> bool {
        self.parts.iter().any(|p| p.plane.is_marked())
    }

    /// The nodes of all planes, made when first asked for.
    pub fn nodes(&self) -> Result<&Nodes, Absent> {
        let made = self.nodes.get_or_init(|| {
            let [part] = &self.parts[..] else {
                return Err(Absent::failed("a mixture of priors without its nodes"));
            };
            let bias_sd = self.units.sd_in(self.bias_sd);
            Nodes::new(&self.parts, &self.units, bias_sd, vec![(weigh(&part.plane)?, 1.0)])
        });
        made.as_ref().map_err(Absent::clone)
    }

    pub fn weighted(&self) -> Result<Vec<Weighted<'_>>, Absent> {
        Ok(weighted(&self.parts, &self.nodes()?.weighed))
    }

    /// A usual σ, outer units.
    pub fn usual_sd(&self, own: &OwnSd) -> f64 {
        self.units.sd_out(own.scatter.usual_sd())
    }

    /// The law of factor · level + shift + what is added, from the origin.
    pub fn of_own_sd(&self, own: &Arc<OwnSd>, factor: f64, shift: f64, added: Added) -> Result<Law, Absent> {
        let scale = self.units.scale;
        match added {
            Added::Nothing if factor > 0.0 => {
                let first = own.level.expect(&|t| t);
                let var = || own.level.expect(&|t| (t - first) * (t - first));
                let scale = factor * scale;
                let mean = moment(1.0, self.bounds.level, "the level", || scale * first + shift);
                let sd = moment(2.0, self.bounds.level, "the level", || scale * var().sqrt());
                let panels = own.level.clone();
                Ok(Law::new(Arc::new(MovedPanels { panels, shift, scale }), mean, sd))
            }
            _ => {
                let inner = match added {
                    Added::Variance(h) => Added::Variance(h * scale),
                    other => other,
                };
                let bound = self.bounds.level.min(self.bounds.sd);
                Beside::law(own, (factor, inner), (scale, shift), bound, "a reading")
            }
        }
    }

    pub fn within_sd(&self) -> Result<Law, Absent> {
        self.spreads[0].get_or_init(|| self.within_sd_anew()).clone()
    }

    pub fn between_sd(&self) -> Result<Law, Absent> {
        self.spreads[1].get_or_init(|| self.between_sd_anew()).clone()
    }

    fn within_sd_anew(&self) -> Result<Law, Absent> {
        if let Some(reason) = &self.no_sd {
            return Err(reason.clone());
        }
        if self.parts.iter().any(|p| matches!(p.plane.sd, Sd::Fixed(_))) {
            return Err(Absent::because("the within sd is taken as known"));
        }
        if let Some(conjugate) = &self.conjugate {
            return Ok(conjugate.within_sd(self.bounds.sd));
        }
        if let Some(own) = &self.own_sd {
            let of_sd = (0.0, Added::Sd(1.0));
            return Beside::law(own, of_sd, (self.units.scale, 0.0), self.bounds.sd, "the within sd");
        }
        let panels = marginal::panels(&self.weighted()?, Coordinate::Sd, self.bounds.sd)?;
        self.spread(panels, self.bounds.sd, "the within sd")
    }

    fn between_sd_anew(&self) -> Result<Law, Absent> {
        if self.parts.iter().all(|p| matches!(p.plane.between, BetweenSd::Fixed(_))) {
            return Err(Absent::because("the between sd is taken as known, or is no part of the prior"));
        }
        if self.parts.iter().any(|p| matches!(p.plane.between, BetweenSd::Fixed(_))) {
            return Err(Absent::because("not every part of the prior has an unknown between sd"));
        }
        let panels = marginal::panels(&self.weighted()?, Coordinate::Between, self.bounds.between)?;
        self.spread(panels, self.bounds.between, "the between sd")
    }

    fn spread(&self, panels: super::legendre::Panels, bound: f64, what: &str) -> Result<Law, Absent> {
        let scale = self.units.scale;
        let first = panels.expect(&fm::exp);
        let second = panels.expect(&|x| {
            let s = fm::exp(x) - first;
            s * s
        });
        let mean = moment(1.0, bound, what, || scale * first);
        let sd = moment(2.0, bound, what, || scale * second.sqrt());
        Ok(Law::new(Arc::new(Spread { panels, scale }), mean, sd))
    }
}
