//! From a model and its readings to planes of spreads: every choice of methods §2 and §3 is made here.

use super::Basis;
use super::about_mean::AboutMean;
use super::axis::{SdAxis, TauAxis};
use super::between::{self, Tau};
use super::chances::Chances;
use super::factor::MarkedPeriod;
use super::marks;
use super::moments::{self, Bounds, Tail};
use super::plane::{BetweenSd, Level, Move, Plane, Sd};
use super::told::{AtSd, SdSums, Told, is_marked};
use super::units::Units;
use super::walk::Walk;
use crate::data::evidence::{Evidence, Seen};
use crate::prior::{Adjust, Between, LevelPrior, Model, Pattern, Periods, Within};
use crate::quantity::{Absent, Period};

/// One plane of a posterior, with what cannot be seen in it.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Part {
    pub weight: f64,
    pub plane: Plane,
    pub bounds: Bounds,
    /// Levels of other periods follow the same model.
    pub periods: bool,
    pub bias: BiasOf,
    /// The earlier periods (or peers) behind the prior, in order, with the steps before each and, last, up
    /// to this period (random walk).
    pub history: Vec<(Period, Told)>,
    pub gaps: Vec<f64>,
}

/// What the prior speaks of when readings share a bias (methods §3).
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum BiasOf {
    /// Made from data: of the level as measured.
    Measured,
    /// Of the true level N(mean, var).
    TrueLevel { mean: f64, var: f64 },
    /// Of the true level N(mean, σ²/readings).
    TrueLevelPerReading { mean: f64, readings: f64 },
    /// Of the true long-run mean N(mean, var).
    TrueLongRun { mean: f64, var: f64 },
}

#[derive(Debug, Clone, PartialEq)]
pub(super) struct Built {
    pub parts: Vec<Part>,
    pub units: Units,
    /// Standard uncertainty of the common bias, inner units.
    pub bias_sd: f64,
}

/// The planes of a model with its readings, under one basis.
pub(super) fn build(model: &Model, readings: &Evidence, basis: Basis) -> Result<Built, Absent> {
    build_in(units(model, readings), model, readings, basis)
}

/// The same in units given.
pub(super) fn build_in(
    units: Units,
    model: &Model,
    readings: &Evidence,
    basis: Basis,
) -> Result<Built, Absent> {
    let used = if basis == Basis::PriorOnly { &Evidence::Nothing } else { readings };
    let bias_sd = units.sd_in(model.bias_sd);
    let builder = Builder { model, units, used, basis, bias_sd };
    let parts = match (&model.level, basis) {
        (LevelPrior::Mixture(parts), Basis::PriorOnly | Basis::Both) => {
            if parts.is_empty() {
                return Err(Absent::because("a mixture needs at least one part"));
            }
            let mut planes = Vec::with_capacity(parts.len());
            for (weight, level) in parts {
                if matches!(level, LevelPrior::Flat | LevelPrior::Mixture(_)) {
                    return Err(Absent::because(
                        "every part of a mixture must be a proper density of the level",
                    ));
                }
                planes.push(builder.part(*weight, level)?);
            }
            planes
        }
        (_, Basis::ReadingsOnly) => vec![builder.part(1.0, &LevelPrior::Flat)?],
        (level, _) => vec![builder.part(1.0, level)?],
    };
    Ok(Built { parts, units, bias_sd })
}

struct Builder<'a> {
    model: &'a Model,
    units: Units,
    used: &'a Evidence,
    basis: Basis,
    bias_sd: f64,
}

/// The periods inside a prior of the level, and inside the first part of a mixture that has any.
pub(super) fn periods_of(level: &LevelPrior) -> Option<&Periods> {
    match level {
        LevelPrior::Periods(periods) | LevelPrior::Peers(periods) => Some(periods),
        LevelPrior::Mixture(parts) => parts.iter().find_map(|(_, part)| periods_of(part)),
        _ => None,
    }
}

impl Builder<'_> {
    fn part(&self, weight: f64, level: &LevelPrior) -> Result<Part, Absent> {
        let known = match self.model.within {
            Within::Known(sd) if sd > 0.0 && sd.is_finite() => Some(self.units.sd_in(sd)),
            Within::Known(_) => return Err(Absent::because("a known within sd must be above 0")),
            Within::Worth { sd, df } if df.is_infinite() => Some(self.units.sd_in(sd)),
            Within::None => Some(0.0),
            _ => None,
        };
        let now = marks::period(self.used, &self.units, known)?;
        let (this, this_sums) = (now.told(), now.sums);
        // The history's own periods; under a level prior without any, they may still speak of σ.
        let periods = periods_of(level);
        let for_sd = periods.or_else(|| periods_of(&self.model.level));
        let mut all_history = Vec::new();
        let mut history_sums = SdSums::default();
        if let Some(periods) = for_sd {
            for (_, evidence) in &periods.periods {
                let period = marks::period(evidence, &self.units, known)?;
                history_sums.add(period.sums);
                if periods_of(level).is_some() {
                    all_history.push(period);
                }
            }
        }
        let history: Vec<Told> = all_history.iter().map(marks::Period::told).collect();
        let history_is_marked = all_history.iter().any(|p| !p.marks.is_empty());
        let scatter = now.excludes_no_scatter() || all_history.iter().any(marks::Period::excludes_no_scatter);
        let tails: Vec<Tail> =
            all_history.iter().filter_map(|p| Tail::of_marked(&p.told(), &p.marks)).collect();
        if let Some(periods) = periods {
            enough_periods(periods, tails.len())?;
        }

        // σ of this period and, with readings alone, another one of the history.
        let mut sums = this_sums;
        let mut history_sd = None;
        let has_own = this.has_own() || history.iter().any(Told::has_own);
        let mut pooled_level = None;
        let sd = match (&self.model.within, known) {
            (_, Some(sd)) => Sd::Fixed(sd),
            (Within::Worth { sd, df }, _) => {
                if !(*sd > 0.0 && *df > 0.0) {
                    return Err(Absent::because(
                        "a stated within sd and its degrees of freedom must be above 0",
                    ));
                }
                let sd = self.units.sd_in(*sd);
                sums.add(history_sums);
                sums.add(SdSums { df: *df, ss: df * sd * sd });
                if let (Some(periods), false) = (periods, history_is_marked) {
                    pooled_level = shared_level(periods, &history, &mut sums);
                }
                Sd::Unknown(SdAxis::squares(sums))
            }
            (Within::Pooled { others }, _) => {
                sums.add(history_sums);
                for evidence in others {
                    sums.add(marks::period(evidence, &self.units, None)?.sums);
                }
                self.improper(sums, has_own, scatter, &this, &history)?;
                if let (Some(periods), false) = (periods, has_own || history_is_marked) {
                    pooled_level = shared_level(periods, &history, &mut sums);
                }
                self.improper(sums, has_own, scatter, &this, &history)?
            }
            (Within::ReadingsBeside { history_sd: known }, _) => {
                if periods.is_some() {
                    history_sd = Some(Sd::Fixed(self.units.sd_in(*known)));
                }
                if this == Told::Nothing && now.marks.is_empty() {
                    Sd::Undefined
                } else {
                    self.improper(this_sums, this.has_own(), now.excludes_no_scatter(), &this, &[])?
                }
            }
            (Within::Readings, _) => {
                if periods.is_some()
                    && history.iter().any(|p| matches!(p, Told::Counted { .. } | Told::Own(_)))
                {
                    let own = history.iter().any(Told::has_own);
                    let scatter = all_history.iter().any(marks::Period::excludes_no_scatter);
                    history_sd = Some(self.improper(history_sums, own, scatter, &Told::Nothing, &history)?);
                }
                if this == Told::Nothing && now.marks.is_empty() {
                    Sd::Undefined
                } else {
                    self.improper(this_sums, this.has_own(), now.excludes_no_scatter(), &this, &[])?
                }
            }
            _ => Sd::Undefined,
        };

        let scale = self.units.scale;
        let moved = self.model.adjust.map(|a| self.moved(a));
        let bias_var = self.bias_sd * self.bias_sd;
        let mut between = BetweenSd::Fixed(0.0);
        let mut bias = BiasOf::Measured;
        let mut move_later = None;
        let mut marked_periods = Vec::new();
        let level = match level {
            LevelPrior::Flat => {
                let open = !now.marks.iter().any(marks::Mark::is_bounded);
                if this == Told::Nothing && open && !now.marks.is_empty() {
                    return Err(Absent::because(
                        "all readings are marked and a flat prior is no bound on the other side: state a prior",
                    ));
                }
                if this == Told::Nothing && open {
                    return Err(Absent::because(if self.basis == Basis::PriorOnly {
                        "a flat prior says nothing of the level"
                    } else {
                        "there is no reading, and nothing else is known of the level"
                    }));
                }
                Level::Flat
            }
            LevelPrior::Stated { mean, sd } => {
                let sd = self.positive(*sd, "the sd of a stated prior")?;
                let (mean, var) = apply(moved, self.units.value_in(*mean), sd * sd);
                bias = BiasOf::TrueLevel { mean, var };
                Level::Normal { mean, var: var + bias_var }
            }
            LevelPrior::Worth { mean, readings } => {
                if !(*readings > 0.0 && readings.is_finite()) {
                    return Err(Absent::because("worth_readings must be above 0"));
                }
                let stretch2 = moved.map_or(1.0, |m| m.stretch * m.stretch);
                let (mean, _) = apply(moved, self.units.value_in(*mean), 1.0);
                let readings = readings / stretch2;
                match sd {
                    Sd::Undefined => {
                        return Err(Absent::because(
                            "a prior worth readings needs the within sd, which comes from this period's readings alone",
                        ));
                    }
                    Sd::Fixed(0.0) => {
                        return Err(Absent::because("a prior worth readings needs a within sd above 0"));
                    }
                    _ => {}
                }
                bias = BiasOf::TrueLevelPerReading { mean, readings };
                Level::PerReading { mean, readings, extra: bias_var, periods: false }
            }
            LevelPrior::LongRun { mean, sd, between_sd } => {
                let sd = self.positive(*sd, "the sd of a stated long-run mean")?;
                let (mean, var) = apply(moved, self.units.value_in(*mean), sd * sd);
                if !(*between_sd >= 0.0 && between_sd.is_finite()) {
                    return Err(Absent::because("the between sd must be 0 or above"));
                }
                between = BetweenSd::Fixed(between_sd / scale * moved.map_or(1.0, |m| m.stretch));
                bias = BiasOf::TrueLongRun { mean, var };
                Level::LongRun { mean, var: var + bias_var }
            }
            LevelPrior::Periods(periods) | LevelPrior::Peers(periods) => {
                if let Some(pooled) = pooled_level {
                    move_later = moved;
                    pooled
                } else {
                    let typical = typical_sigma(history_sd.unwrap_or(sd), &history);
                    let given: Vec<AtSd> = history.iter().filter_map(|p| p.at(typical * typical)).collect();
                    let is_plug_in = matches!(periods.between, Between::Reml | Between::Moments);
                    if is_plug_in && history.iter().any(Told::has_own) {
                        return Err(Absent::because(
                            "a plug-in between sd needs the uncertainty of every period's mean: state the within sd",
                        ));
                    }
                    let law = between::law(periods.between, scale, &given)?;
                    move_later = moved;
                    match &periods.pattern {
                        Pattern::AboutAMean if history_is_marked && (is_plug_in || periods.weight != 1.0) => {
                            return Err(Absent::because(
                                "marked readings in earlier periods go with neither a plug-in between sd nor a weight of history",
                            ));
                        }
                        Pattern::RandomWalk { .. } if history_is_marked => {
                            return Err(Absent::because(
                                "marked readings in the earlier periods of a random walk are not served: take the pattern about a mean",
                            ));
                        }
                        Pattern::AboutAMean => {
                            let about = AboutMean::new(&history);
                            let least = smallest_var(&about, &all_history, typical * typical);
                            between = between_sd(law, least);
                            marked_periods = marked(&all_history);
                            Level::AboutMean { periods: about, share: periods.weight }
                        }
                        Pattern::RandomWalk { gaps, last_gap } => {
                            if is_plug_in || periods.weight != 1.0 {
                                return Err(Absent::because(
                                    "a random walk takes neither a plug-in between sd nor a weight of history",
                                ));
                            }
                            let walk = Walk::new(&history, gaps, *last_gap);
                            between = between_sd(law, walk.smallest_var(typical * typical));
                            Level::Walk(walk)
                        }
                    }
                }
            }
            LevelPrior::Mixture(_) => return Err(Absent::failed("a mixture inside a mixture")),
        };
        let periods_modelled = matches!((&self.model.level, self.basis), (_, Basis::PriorOnly | Basis::Both))
            && matches!(
                &level,
                Level::LongRun { .. }
                    | Level::AboutMean { .. }
                    | Level::Walk(_)
                    | Level::PerReading { periods: true, .. }
            );
        let this_tail = Tail::of_marked(&this, &now.marks);
        let plane = Plane {
            history_sd,
            sd,
            between,
            level,
            moved: move_later,
            readings: this,
            marks: Chances::new(&now.marks),
            marked_periods,
        };
        let bounds = moments::bounds(&plane, &tails, this_tail);
        let named = periods.map_or(&[][..], |p| &p.periods);
        let history = named.iter().map(|(name, _)| name.clone()).zip(history).collect();
        let gaps = match periods.map(|p| &p.pattern) {
            Some(Pattern::RandomWalk { gaps, last_gap }) => gaps.iter().chain([last_gap]).copied().collect(),
            _ => Vec::new(),
        };
        Ok(Part { weight, plane, bounds, periods: periods_modelled, bias, history, gaps })
    }

    fn positive(&self, sd: f64, what: &str) -> Result<f64, Absent> {
        let sd = self.units.sd_in(sd);
        if sd > 0.0 && sd.is_finite() {
            Ok(sd)
        } else {
            Err(Absent::because(format!("{what} must be above 0")))
        }
    }

    fn moved(&self, adjust: Adjust) -> Move {
        Move {
            centre: self.units.value_in(adjust.centre),
            stretch: adjust.stretch,
            shift: self.units.sd_in(adjust.shift),
        }
    }

    /// σ under an improper prior: 1/σ² over sums of squares, or uniform beside uncertainties of their own.
    fn improper(
        &self,
        sums: SdSums,
        has_own: bool,
        scatter: bool,
        this: &Told,
        history: &[Told],
    ) -> Result<Sd, Absent> {
        if has_own {
            let mut distinct: Vec<f64> = Vec::new();
            let mut typical = Vec::new();
            for period in history.iter().chain([this]) {
                if let Told::Own(readings) = period {
                    distinct.extend(readings.iter().map(|r| r.0));
                    typical.extend(readings.iter().map(|r| r.1.sqrt()).filter(|u| *u > 0.0));
                }
            }
            distinct.sort_by(f64::total_cmp);
            distinct.dedup();
            if distinct.len() < 3 && sums.df < 2.0 {
                return Err(Absent::because(
                    "with uncertainties of their own, an unknown within sd needs at least 3 distinct readings: state the within sd",
                ));
            }
            let smallest = typical.into_iter().fold(f64::INFINITY, f64::min);
            return Ok(Sd::Unknown(SdAxis::uniform(sums, if smallest.is_finite() { smallest } else { 1.0 })));
        }
        let marked = is_marked(self.used);
        if scatter && (sums.df < 1.0 || sums.ss == 0.0) {
            return Ok(Sd::Unknown(SdAxis::scale_free(sums, 1.0)));
        }
        if marked && (sums.df < 1.0 || sums.ss == 0.0) {
            return Err(Absent::because(
                "with marked readings, an unknown within sd needs at least 2 distinct unmarked readings: state the within sd",
            ));
        }
        if sums.df < 1.0 {
            if *this == Told::Nothing && history.is_empty() {
                return Ok(Sd::Undefined);
            }
            return Err(Absent::because(
                "an unknown within sd needs at least 2 readings in one period: state the within sd",
            ));
        }
        if sums.ss.is_nan() || sums.ss <= 0.0 {
            return Err(Absent::because(
                "all readings of a period are equal, so the within sd cannot be learned from them: state it",
            ));
        }
        Ok(Sd::Unknown(SdAxis::squares(sums)))
    }
}

fn apply(moved: Option<Move>, mean: f64, var: f64) -> (f64, f64) {
    match moved {
        None => (mean, var),
        Some(m) => (m.mean(mean), m.var(var)),
    }
}

fn between_sd(law: Tau, smallest_var: f64) -> BetweenSd {
    match law {
        Tau::Fixed(tau) => BetweenSd::Fixed(tau),
        _ => BetweenSd::Unknown(TauAxis::new(law, smallest_var)),
    }
}

fn marked(history: &[marks::Period]) -> Vec<MarkedPeriod> {
    let marked = history.iter().enumerate().filter(|(_, period)| !period.marks.is_empty());
    let of = |(index, period): (usize, &marks::Period)| MarkedPeriod {
        index,
        plain: period.told(),
        chances: Chances::new(&period.marks),
    };
    marked.map(of).collect()
}

/// The smallest variance of what one earlier period says of its level, marked readings counted as readings.
fn smallest_var(about: &AboutMean, history: &[marks::Period], sigma2: f64) -> f64 {
    let mut least = about.smallest_var(sigma2);
    for period in history.iter().filter(|period| !period.marks.is_empty()) {
        let plain = period.told().at(sigma2).map_or(0.0, |at| 1.0 / at.var);
        least = least.min(1.0 / (plain + Chances::new(&period.marks).sharpness(sigma2)));
    }
    least
}

/// τ = 0 with counted readings alone: all periods share one level, and their means' scatter speaks of σ.
/// Leaves the squares in `sums` and gives the prior N(x̄_h, σ²/(a0 N)) (Ibrahim & Chen 2000).
fn shared_level(periods: &Periods, history: &[Told], sums: &mut SdSums) -> Option<Level> {
    let tau_is_zero = match periods.between {
        Between::None => true,
        Between::Known(tau) => tau == 0.0,
        _ => false,
    };
    if !tau_is_zero || periods.pattern != Pattern::AboutAMean {
        return None;
    }
    let mut counted = Vec::with_capacity(history.len());
    for period in history {
        match period {
            Told::Counted { n, mean } => counted.push((*n, *mean)),
            Told::Nothing => {}
            _ => return None,
        }
    }
    let all: f64 = counted.iter().map(|c| c.0).sum();
    let mean = counted.iter().map(|c| c.0 * c.1).sum::<f64>() / all;
    let ss = counted.iter().map(|c| c.0 * (c.1 - mean) * (c.1 - mean)).sum::<f64>();
    sums.add(SdSums { df: counted.len() as f64 - 1.0, ss });
    Some(Level::PerReading { mean, readings: periods.weight * all, extra: 0.0, periods: true })
}

/// A value of σ to scale the between sd by.
fn typical_sigma(sd: Sd, history: &[Told]) -> f64 {
    match sd {
        Sd::Fixed(sigma) => sigma,
        Sd::Unknown(axis) if !axis.uniform => (axis.sums.ss / axis.sums.df).sqrt(),
        _ => {
            let smallest = history
                .iter()
                .filter_map(|p| if let Told::Own(r) = p { Some(r) } else { None })
                .flatten()
                .map(|r| r.1.sqrt())
                .fold(f64::INFINITY, f64::min);
            if smallest.is_finite() && smallest > 0.0 { smallest } else { 1.0 }
        }
    }
}

fn enough_periods(periods: &Periods, with_readings: usize) -> Result<(), Absent> {
    let (needed, repair) = match periods.between {
        Between::Uniform => (3, "; state between_sd, or between = \"half-normal\" with its between_scale"),
        Between::Reml | Between::Moments => (2, "; state between_sd"),
        _ => (1, ""),
    };
    let who = "earlier periods (or peers)";
    if with_readings < needed {
        return Err(Absent::because(format!(
            "the prior needs at least {needed} {who} with readings, and has {with_readings}{repair}"
        )));
    }
    let weight = periods.weight;
    if !(weight > 0.0 && weight <= 1.0) {
        return Err(Absent::because("the weight of history must lie in (0, 1]"));
    }
    if weight != 1.0 && periods.between != Between::None {
        return Err(Absent::because("a weight of history needs between = \"none\""));
    }
    Ok(())
}

/// A shift and a scale that suit both the prior and the readings, the same for every basis.
pub(super) fn units(model: &Model, readings: &Evidence) -> Units {
    let mut places = Vec::new();
    let mut sizes = Vec::new();
    match model.within {
        Within::Known(sd) | Within::Worth { sd, .. } | Within::ReadingsBeside { history_sd: sd } => {
            sizes.push(sd)
        }
        _ => {}
    }
    place_and_size(readings, &mut places, &mut sizes);
    level_place(&model.level, &mut places, &mut sizes);
    if let Within::Pooled { others } = &model.within {
        for evidence in others {
            place_and_size(evidence, &mut Vec::new(), &mut sizes);
        }
    }
    let shift = places.first().copied().filter(|x| x.is_finite()).unwrap_or(0.0);
    let size = sizes.into_iter().find(|s| *s > 0.0 && s.is_finite()).unwrap_or(1.0);
    Units::new(shift, size)
}

fn level_place(level: &LevelPrior, places: &mut Vec<f64>, sizes: &mut Vec<f64>) {
    match level {
        LevelPrior::Flat => {}
        LevelPrior::Stated { mean, sd } | LevelPrior::LongRun { mean, sd, .. } => {
            places.push(*mean);
            sizes.push(*sd);
        }
        LevelPrior::Worth { mean, .. } => places.push(*mean),
        LevelPrior::Periods(periods) | LevelPrior::Peers(periods) => {
            for (_, evidence) in &periods.periods {
                place_and_size(evidence, places, sizes);
            }
        }
        LevelPrior::Mixture(parts) => {
            for (_, part) in parts {
                level_place(part, places, sizes);
            }
        }
    }
}

fn place_and_size(evidence: &Evidence, places: &mut Vec<f64>, sizes: &mut Vec<f64>) {
    match evidence {
        Evidence::Nothing => {}
        Evidence::Sums { n, mean, ss, .. } => {
            if *n > 0 {
                places.push(*mean);
            }
            if let (Some(ss), true) = (ss, *n > 1) {
                sizes.push((ss / (*n as f64 - 1.0)).sqrt());
            }
        }
        Evidence::Mean { mean, uncertainty } => {
            places.push(*mean);
            sizes.push(*uncertainty);
        }
        Evidence::Singles(singles) => {
            for single in singles {
                match single.seen {
                    Seen::At(x) | Seen::Rounded { at: x, .. } => places.push(x),
                    Seen::Below(_) | Seen::Above(_) => {}
                }
            }
            sizes.extend(singles.iter().map(|s| s.uncertainty));
            let xs: Vec<f64> = places.clone();
            if xs.len() > 1 {
                let (lo, hi) =
                    xs.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), x| (l.min(*x), h.max(*x)));
                sizes.push(0.3 * (hi - lo));
            }
        }
    }
}
