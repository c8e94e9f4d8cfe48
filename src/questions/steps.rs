//! The steps of a derivation that kinds of question share: how the level's law comes about, and how
//! a chance or an end is read from it. One piece: every figure by formula. A mixture: the number of
//! pieces and the weighted sum.

use super::figures::Figures;
use super::terms::Interval;
use super::{Linear, Subject};
use crate::data::evidence::Evidence;
use crate::math::{fm, normal};
use crate::posterior::{Basis, Piece, Posterior, When};
use crate::prior::LevelPrior;
use crate::quantity::{Beyond, Scale};
use crate::working::Step;

/// Mean and variance of the level of that period under one piece; `None` where the piece has none.
pub fn moments(piece: &Piece, when: When) -> Option<(f64, f64)> {
    match (when, piece.periods) {
        (When::This, _) => Some((piece.level_mean, piece.level_var)),
        (When::Next, Some(periods)) => {
            Some((periods.long_run_mean, periods.between_sd * periods.between_sd + periods.long_run_var))
        }
        (When::LongRun, Some(periods)) => Some((periods.long_run_mean, periods.long_run_var)),
        (_, None) => None,
    }
}

/// σ where one value stands for it, else 0: only for a derivation with one piece.
pub fn reading_sd(subject: &Subject<'_>) -> f64 {
    match &subject.posterior {
        Ok(posterior) => posterior.one_piece().map_or(0.0, |piece| piece.reading_sd),
        Err(_) => 0.0,
    }
}

/// How the level of this period was found: from prior and readings, or as a mixture.
pub fn level(subject: &Subject<'_>, when: When) -> Vec<Step> {
    let Ok(posterior) = &subject.posterior else { return Vec::new() };
    match (posterior.one_piece(), posterior.pieces()) {
        (Some(piece), _) => one_piece(posterior, piece, when),
        (None, Ok(pieces)) => mixture(posterior, pieces, when),
        (None, Err(_)) => Vec::new(),
    }
}

fn one_piece(posterior: &Posterior, piece: &Piece, when: When) -> Vec<Step> {
    let mut steps = Vec::new();
    let sigma = piece.reading_sd;
    let from_readings = match &posterior.readings {
        Evidence::Sums { n, mean, .. } if *n > 0 && posterior.basis != Basis::PriorOnly => {
            let (n, mean) = (*n as f64, *mean);
            let variance = sigma * sigma / n;
            steps.push(Step::new(
                "variance of the readings' mean",
                "σ²/n",
                &[("σ", sigma), ("n", n)],
                variance,
            ));
            Some((mean, variance))
        }
        Evidence::Mean { mean, uncertainty } if posterior.basis != Basis::PriorOnly => {
            let variance = uncertainty * uncertainty;
            steps.push(Step::new("variance of the mean", "u²", &[("u", *uncertainty)], variance));
            Some((*mean, variance))
        }
        _ => None,
    };
    let stated = match (&posterior.model.level, posterior.basis) {
        (LevelPrior::Stated { mean, sd }, Basis::PriorOnly | Basis::Both)
            if posterior.model.bias_sd == 0.0 =>
        {
            Some((*mean, sd * sd))
        }
        (LevelPrior::Worth { mean, readings }, Basis::PriorOnly | Basis::Both) => {
            Some((*mean, sigma * sigma / readings))
        }
        _ => None,
    };
    if let (Some((prior_mean, prior_var)), Some((mean, variance)), When::This) = (stated, from_readings, when)
    {
        let weight = variance / (prior_var + variance);
        steps.push(Step::new(
            "weight of the prior",
            "B = (σ²/n) / (v0 + σ²/n)",
            &[("σ²/n", variance), ("v0", prior_var)],
            weight,
        ));
        steps.push(Step::new(
            "variance of the level",
            "v = 1 / (1/v0 + n/σ²)",
            &[("v0", prior_var), ("σ²/n", variance)],
            piece.level_var,
        ));
        steps.push(Step::new(
            "mean of the level",
            "m = v (m0/v0 + n x̄/σ²)",
            &[("m0", prior_mean), ("x̄", mean), ("v", piece.level_var), ("v0", prior_var), ("σ²/n", variance)],
            piece.level_mean,
        ));
    } else if let Some((mean, variance)) = moments(piece, when) {
        steps.push(Step::new("mean of the level", "m", &[], mean));
        steps.push(Step::new("variance of the level", "v", &[], variance));
    }
    steps
}

fn mixture(posterior: &Posterior, pieces: &[Piece], when: When) -> Vec<Step> {
    let mut steps = vec![Step::new(
        "normal pieces (one for each node of the unknown spreads)",
        "K",
        &[],
        pieces.len() as f64,
    )];
    if posterior.model.bias_sd > 0.0 {
        return steps;
    }
    let known: Vec<(f64, f64, f64)> = pieces
        .iter()
        .filter_map(|piece| moments(piece, when).map(|(mean, variance)| (piece.weight, mean, variance)))
        .collect();
    if known.len() == pieces.len() {
        let mean: f64 = known.iter().map(|(weight, mean, _)| weight * mean).sum();
        steps.push(Step::new(
            "weighted mean of the pieces' means",
            "Σ w m",
            &[("K", pieces.len() as f64)],
            mean,
        ));
    }
    steps
}

/// How a chance of the linear shape was found.
pub fn chance(subject: &Subject<'_>, linear: Linear, result: f64) -> Vec<Step> {
    let Ok(posterior) = &subject.posterior else { return Vec::new() };
    let mut steps = level(subject, linear.when);
    if let Some(piece) = posterior.one_piece()
        && (posterior.model.bias_sd == 0.0 || !linear.true_level)
        && let Some((mean, variance)) = moments(piece, linear.when)
    {
        let (mean, whole) = (mean + linear.shift, variance + linear.variance);
        let sd = whole.sqrt();
        if linear.variance > 0.0 || linear.shift != 0.0 {
            let put_in = [("m", mean - linear.shift), ("shift", linear.shift)];
            steps.push(Step::new("its mean", "m + shift", &put_in, mean));
            let put_in = [("v", variance), ("added", linear.variance)];
            steps.push(Step::new("its standard deviation", "s = √(v + added)", &put_in, sd));
        } else {
            steps.push(Step::new("its standard deviation", "s = √v", &[("v", variance)], sd));
        }
        let z = |limit: f64| (limit - mean) / sd;
        let mut one = |label: &str, formula: &str, limit: f64, tail: f64| {
            steps.push(Step::new(label, "z = (L − m)/s", &[("L", limit), ("m", mean), ("s", sd)], z(limit)));
            steps.push(Step::new(label, formula, &[("z", z(limit))], tail));
        };
        match linear.beyond {
            Beyond::Above(limit) => one("above the limit", "1 − Φ(z)", limit, normal::sf(z(limit))),
            Beyond::Below(limit) => one("below the limit", "Φ(z)", limit, normal::cdf(z(limit))),
            Beyond::Between(lower, upper) | Beyond::Outside(lower, upper) => {
                one("below the lower limit", "Φ(z)", lower, normal::cdf(z(lower)));
                one("above the upper limit", "1 − Φ(z)", upper, normal::sf(z(upper)));
                steps.push(Step::new("the chance asked for", "from both tails", &[], result));
            }
        }
        return steps;
    }
    let pieces = posterior.pieces().map_or(0, <[Piece]>::len);
    let put_in = [("K", pieces as f64)];
    steps.push(Step::new("weighted sum over the pieces", "Σ w Φ(±(L − m)/√v)", &put_in, result));
    steps
}

/// The ends of an interval of N(mean, sd²), central or one-sided.
pub fn normal_ends(mean: f64, sd: f64, interval: Interval, probability: f64) -> Vec<Step> {
    let tail = match interval {
        Interval::Central => 0.5 * (1.0 - probability),
        Interval::LowerBound | Interval::UpperBound => 1.0 - probability,
        Interval::Shortest => return Vec::new(),
    };
    let Ok(z) = normal::upper_quantile(tail) else { return Vec::new() };
    let put_in = [("m", mean), ("z", z), ("s", sd)];
    let mut steps = vec![Step::new("normal quantile", "z with 1 − Φ(z) = tail", &[("tail", tail)], z)];
    if interval != Interval::UpperBound {
        steps.push(Step::new("lower end", "m − z s", &put_in, mean - z * sd));
    }
    if interval != Interval::LowerBound {
        steps.push(Step::new("upper end", "m + z s", &put_in, mean + z * sd));
    }
    steps
}

/// Ends that were found by solving for them.
pub fn read_off(figures: &Figures, formula: &str, probability: f64) -> Vec<Step> {
    [("lower", "lower end"), ("upper", "upper end")]
        .into_iter()
        .filter_map(|(name, label)| {
            let end = figures.value(name)?;
            Some(Step::new(label, formula, &[("probability", probability)], end))
        })
        .collect()
}

/// On the log scale the ends found so far are logarithms: adds their values in the unit.
pub fn in_unit(mut steps: Vec<Step>, scale: Scale) -> Vec<Step> {
    if scale == Scale::Log {
        let ends: Vec<Step> = steps
            .iter()
            .filter(|step| matches!(step.label.as_str(), "lower end" | "upper end" | "end"))
            .map(|step| {
                Step::new(
                    &format!("{} in the unit", step.label),
                    "exp t",
                    &[("t", step.result)],
                    fm::exp(step.result),
                )
            })
            .collect();
        steps.extend(ends);
    }
    steps
}
