//! Before the readings of the next period are taken: how wide the interval of its level will be, and
//! how likely each verdict of a rule is, for a number of readings n.
//!
//! What is known of the next level is a mixture of N(m0, v0), each with its σ. Its readings' mean x̄ and
//! sum of squares SS will arise from it, x̄ ~ N(m0, v0 + σ²/n), SS ~ σ² χ²_{n−1}; they will update the whole
//! mixture, and the rule will be applied to what comes out. Widths and chances are averaged over what may
//! come: in closed form for one piece, else by the trapezoid rule over x̄ (for widths) and ln SS.
//!
//! With a bias b common to all readings they tell of the level as measured, φ = θ + b, and of θ only through it: given
//! φ, θ has a variance that no number of readings lowers. Data-made priors: u_b². A stated long run N(M, V0), whose mean
//! as measured is now N(M', V'): K u_b² + (1 − K)² V' τ²/(V' + τ²), K = V0/(V0 + u_b²).
//! Source: O'Hagan & Stevens 2001, Medical Decision Making 21.

use super::figures::{Figures, Meaning};
use super::rule::{figure_of, first_holding, threshold};
use super::{Linear, Question, Subject, beyond, steps, terms};
use crate::math::mixture::NormalMixture;
use crate::math::{fm, normal, roots};
use crate::plan::Rule;
use crate::posterior::{Piece, When};
use crate::prior::{LevelPrior, Model};
use crate::quantity::{Absent, Beyond, Figure};

/// Parts lighter than this are left out: a plan is not asked for more digits.
const NEGLIGIBLE: f64 = 1e-9;

/// What is known of the next level and of how its readings will scatter.
#[derive(Debug, Clone)]
pub struct Outlook {
    parts: Vec<Part>,
    /// All parts have one σ, so that SS tells nothing.
    one_sd: bool,
    /// Own variance of each reading to come.
    own_var: f64,
}

#[derive(Debug, Clone, Copy)]
struct Part {
    weight: f64,
    mean: f64,
    var: f64,
    sigma: f64,
    linear: Option<Linear>,
    told: Told,
}

/// What the level as measured, N(mean, var), tells of the one that is asked about: given it, that one is
/// N(own + slope·(it − mean), rest).
#[derive(Debug, Clone, Copy)]
struct Told {
    own: f64,
    slope: f64,
    rest: f64,
}

/// One piece of the next posterior.
struct After {
    ln_weight: f64,
    mean: f64,
    var: f64,
}

impl Outlook {
    /// The next level as the posterior has it, and the linear shape of a rule's question on it.
    pub fn of(subject: &Subject<'_>, question: Option<&dyn Question>) -> Result<Outlook, Absent> {
        let posterior = subject.posterior.clone()?;
        posterior.level(When::Next)?;
        let own = terms::own_uncertainty(subject, None)?.unwrap_or(0.0);
        let mut parts = Vec::new();
        for piece in posterior.pieces()?.iter().filter(|piece| piece.weight > NEGLIGIBLE) {
            let Some((mean, var)) = steps::moments(piece, When::Next) else {
                return Err(Absent::because("nothing is known of the next period's level"));
            };
            if var == 0.0 {
                return Err(Absent::because("with marked readings no plan is computed"));
            }
            let linear = match question {
                None => None,
                Some(question) => match question.linear(subject, piece.reading_sd) {
                    Some(linear) if linear.when == When::This => Some(linear),
                    _ => {
                        return Err(Absent::because(
                            "the rule is not on a chance of the level of the period it judges",
                        ));
                    }
                },
            };
            let of_true_level = linear.is_none_or(|linear: Linear| linear.true_level);
            let told = if of_true_level && posterior.model.bias_sd > 0.0 {
                true_level(&posterior.model, piece, mean, var)?
            } else {
                Told { own: mean, slope: 1.0, rest: 0.0 }
            };
            parts.push(Part { weight: piece.weight, mean, var, sigma: piece.reading_sd, linear, told });
        }
        let whole: f64 = parts.iter().map(|part| part.weight).sum();
        for part in &mut parts {
            part.weight /= whole;
        }
        let Some(first) = parts.first().copied() else {
            return Err(Absent::because("nothing is known of the next period's level"));
        };
        if parts.iter().any(|part| part.sigma.is_nan()) {
            return Err(Absent::because("nothing is known of the within sd of the next period"));
        }
        let one_sd = parts.iter().all(|part| part.sigma == first.sigma);
        Ok(Outlook { parts, one_sd, own_var: own * own })
    }

    pub fn is_one_piece(&self) -> bool {
        self.parts.len() == 1
    }

    fn mean_var(&self, part: &Part, n: f64) -> f64 {
        (part.sigma * part.sigma + self.own_var) / n
    }

    /// Weighted sums of squares that may come: (share, SS); one entry without SS where it tells nothing.
    fn squares(&self, n: f64) -> Vec<(f64, f64)> {
        if self.one_sd || n < 2.0 {
            return vec![(1.0, 0.0)];
        }
        let df = n - 1.0;
        let (least, most) = self.parts.iter().fold((f64::INFINITY, 0.0f64), |(least, most), part| {
            (least.min(part.sigma), most.max(part.sigma))
        });
        // χ² of that many degrees of freedom, six sds to both sides on the scale of its cube root
        // (Wilson & Hilferty 1931), and far down where it has weight at 0.
        let cube = |z: f64| {
            let root = 1.0 - 2.0 / (9.0 * df) + z * (2.0 / (9.0 * df)).sqrt();
            df * root * root * root
        };
        let bottom = if df < 12.0 { df * fm::exp(-40.0 / df) } else { cube(-6.0) };
        let (low, high) = (fm::ln(least * least * bottom), fm::ln(most * most * cube(6.0)));
        let step = (0.5 * (2.0 / df).sqrt()).min(0.6);
        let count = ((high - low) / step) as i32;
        let mut all: Vec<(f64, f64)> = (0..=count)
            .map(|index| {
                let ss = fm::exp(low + step * f64::from(index));
                let density: f64 = self
                    .parts
                    .iter()
                    .map(|part| part.weight * fm::exp(ln_squares(ss, part.sigma, df) + fm::ln(ss)))
                    .sum();
                (density, ss)
            })
            .collect();
        let whole: f64 = all.iter().map(|(density, _)| density).sum();
        for (density, _) in &mut all {
            *density /= whole;
        }
        all.retain(|(density, _)| *density > NEGLIGIBLE);
        all
    }

    /// The parts' weights once SS is known.
    fn given_squares(&self, n: f64, ss: f64) -> Vec<f64> {
        if self.one_sd || n < 2.0 {
            return self.parts.iter().map(|part| part.weight).collect();
        }
        let logs: Vec<f64> =
            self.parts.iter().map(|part| fm::ln(part.weight) + ln_squares(ss, part.sigma, n - 1.0)).collect();
        let whole = fm::ln_sum_exp(&logs);
        logs.iter().map(|ln| fm::exp(ln - whole)).collect()
    }

    /// The pieces after readings of this mean.
    fn after(&self, n: f64, mean: f64, weights: &[f64]) -> Vec<After> {
        self.parts
            .iter()
            .zip(weights)
            .map(|(part, weight)| {
                let error = self.mean_var(part, n);
                let total = part.var + error;
                let apart = mean - part.mean;
                After {
                    ln_weight: fm::ln(*weight) - 0.5 * (fm::ln(total) + apart * apart / total),
                    mean: part.told.own + part.told.slope * part.var / total * apart,
                    var: part.told.rest + part.told.slope * part.told.slope * (part.var * error / total),
                }
            })
            .collect()
    }

    /// The expected half width of the central interval of the next level after n readings.
    pub fn half_width(&self, n: u64, probability: f64) -> Figure {
        let n = n as f64;
        let tail = 0.5 * (1.0 - probability);
        let failed = |error: crate::math::error::MathError| Absent::failed(error.to_string());
        if let [part] = self.parts.as_slice() {
            let error = self.mean_var(part, n);
            let left = part.var * error / (part.var + error);
            return Ok(normal::upper_quantile(tail).map_err(failed)?
                * (part.told.rest + part.told.slope * part.told.slope * left).sqrt());
        }
        let mut expected = 0.0;
        for (share, ss) in self.squares(n) {
            let weights = self.given_squares(n, ss);
            let centre: f64 = self.parts.iter().zip(&weights).map(|(part, weight)| weight * part.mean).sum();
            let narrowest = self
                .parts
                .iter()
                .zip(&weights)
                .filter(|(_, weight)| **weight > 1e-3)
                .map(|(part, _)| (part.var + self.mean_var(part, n)).sqrt())
                .fold(f64::INFINITY, f64::min);
            let density = |mean: f64| -> f64 {
                self.parts
                    .iter()
                    .zip(&weights)
                    .map(|(part, weight)| {
                        let sd = (part.var + self.mean_var(part, n)).sqrt();
                        weight * normal::pdf((mean - part.mean) / sd) / sd
                    })
                    .sum()
            };
            let (mut whole, mut sum) = (0.0, 0.0);
            let top = density(centre);
            for direction in [1.0, -1.0] {
                for index in 0..400 {
                    if direction < 0.0 && index == 0 {
                        continue;
                    }
                    let mean = centre + direction * 0.5 * narrowest * f64::from(index);
                    let weight = density(mean);
                    if weight < 1e-7 * top && index > 4 {
                        break;
                    }
                    let after = self.after(n, mean, &weights);
                    let logs: Vec<f64> = after.iter().map(|piece| piece.ln_weight).collect();
                    let all = fm::ln_sum_exp(&logs);
                    let pieces: Vec<(f64, f64, f64)> = after
                        .iter()
                        .map(|piece| (fm::exp(piece.ln_weight - all), piece.mean, piece.var.sqrt()))
                        .filter(|(weight, _, _)| *weight > NEGLIGIBLE)
                        .collect();
                    let law = NormalMixture::new(pieces).map_err(failed)?;
                    let low = law.quantile(tail).map_err(failed)?;
                    let high = law.upper_quantile(tail).map_err(failed)?;
                    whole += weight;
                    sum += weight * 0.5 * (high - low);
                }
            }
            expected += share * sum / whole;
        }
        Ok(expected)
    }

    /// The half width with ever more readings; above 0 with a bias only.
    pub fn half_width_at_last(&self, probability: f64) -> Figure {
        let z = normal::upper_quantile(0.5 * (1.0 - probability))
            .map_err(|error| Absent::failed(error.to_string()))?;
        Ok(z * self.parts.iter().map(|part| part.weight * part.told.rest.sqrt()).sum::<f64>())
    }

    /// The chance of each verdict of a rule after n readings.
    pub fn verdicts(&self, n: u64, rule: &Rule, subject: &Subject<'_>) -> Result<Vec<f64>, Absent> {
        let n = n as f64;
        let thresholds = thresholds(rule, subject)?;
        let mut chances = vec![0.0; rule.verdicts.len()];
        for (share, ss) in self.squares(n) {
            let weights = self.given_squares(n, ss);
            let size = self
                .parts
                .iter()
                .zip(&weights)
                .map(|(part, weight)| weight * self.mean_var(part, n))
                .sum::<f64>()
                .sqrt();
            let chance = |mean: f64| -> f64 {
                let after = self.after(n, mean, &weights);
                let top = after.iter().map(|piece| piece.ln_weight).fold(f64::NEG_INFINITY, f64::max);
                let (mut whole, mut sum) = (0.0, 0.0);
                for (part, piece) in self.parts.iter().zip(&after) {
                    let Some(linear) = part.linear else { continue };
                    let weight = fm::exp(piece.ln_weight - top);
                    let sd = (piece.var + linear.variance).sqrt();
                    whole += weight;
                    sum += weight * beyond::normal_split(linear.beyond, piece.mean + linear.shift, sd).0;
                }
                sum / whole
            };
            let within = |from: f64, to: f64| -> f64 {
                self.parts
                    .iter()
                    .zip(&weights)
                    .map(|(part, weight)| {
                        let sd = (part.var + self.mean_var(part, n)).sqrt();
                        weight * between((from - part.mean) / sd, (to - part.mean) / sd)
                    })
                    .sum()
            };
            let places = self.places(size);
            add_verdicts(&mut chances, share, rule, subject, &thresholds, &places, &chance, &within)?;
        }
        Ok(chances)
    }

    /// The same for ever more readings: the level itself is then known.
    pub fn verdicts_at_last(&self, rule: &Rule, subject: &Subject<'_>) -> Result<Vec<f64>, Absent> {
        let thresholds = thresholds(rule, subject)?;
        let mut chances = vec![0.0; rule.verdicts.len()];
        for part in &self.parts {
            let Some(linear) = part.linear else { continue };
            let sd = part.var.sqrt();
            let left = linear.variance + part.told.rest;
            if left == 0.0 {
                // The chance is then 1 or 0.
                let (out, inside) = beyond::normal_split(linear.beyond, part.mean + linear.shift, sd);
                chances[verdict_at(1.0, rule, subject)?] += part.weight * out;
                chances[verdict_at(0.0, rule, subject)?] += part.weight * inside;
                continue;
            }
            let scatter = left.sqrt();
            let chance = |level: f64| {
                let own = part.told.own + part.told.slope * (level - part.mean);
                beyond::normal_split(linear.beyond, own + linear.shift, scatter).0
            };
            let within = |from: f64, to: f64| between((from - part.mean) / sd, (to - part.mean) / sd);
            let places = self.places(scatter);
            add_verdicts(&mut chances, part.weight, rule, subject, &thresholds, &places, &chance, &within)?;
        }
        Ok(chances)
    }

    /// Where the scan looks: close together around the limits and the expected level, wider beyond.
    fn places(&self, size: f64) -> Vec<f64> {
        let mut centres: Vec<f64> = vec![self.parts.iter().map(|part| part.weight * part.mean).sum()];
        if let Some(linear) = self.parts.first().and_then(|part| part.linear) {
            let shift: f64 = self
                .parts
                .iter()
                .map(|part| part.weight * part.linear.map_or(0.0, |linear| linear.shift))
                .sum();
            match linear.beyond {
                Beyond::Above(limit) | Beyond::Below(limit) => centres.push(limit - shift),
                Beyond::Between(lower, upper) | Beyond::Outside(lower, upper) => {
                    centres.extend([lower - shift, upper - shift]);
                }
            }
        }
        let mut places = Vec::new();
        for centre in centres {
            places.extend((-6..=6).map(|step| centre + size * f64::from(step)));
            for far in [8.0, 12.0, 18.0, 27.0, 40.0, 60.0, 90.0] {
                places.extend([centre - size * far, centre + size * far]);
            }
        }
        places.sort_by(f64::total_cmp);
        places.dedup_by(|a, b| (*a - *b).abs() < 0.2 * size);
        places
    }
}

/// The next true level given the next level as measured, N(mean, var).
fn true_level(model: &Model, piece: &Piece, mean: f64, var: f64) -> Result<Told, Absent> {
    let u2 = model.bias_sd * model.bias_sd;
    let (m0, v0) = match &model.level {
        LevelPrior::Periods(_) | LevelPrior::Peers(_) => return Ok(Told { own: mean, slope: 1.0, rest: u2 }),
        LevelPrior::LongRun { mean, sd, .. } => (*mean, sd * sd),
        _ => {
            return Err(Absent::because(
                "with a bias and a prior of several parts, more readings are not planned",
            ));
        }
    };
    let Some(periods) = piece.periods else {
        return Err(Absent::because("nothing is known of the next period's level"));
    };
    let k = v0 / (v0 + u2);
    let tau2 = periods.between_sd * periods.between_sd;
    let long_var = periods.long_run_var;
    Ok(Told {
        own: mean - (1.0 - k) * (periods.long_run_mean - m0),
        slope: (tau2 + k * long_var) / var,
        rest: k * u2 + (1.0 - k) * (1.0 - k) * long_var * tau2 / var,
    })
}

/// ln of the density of SS ~ σ² χ²_df, without what does not depend on σ or SS.
fn ln_squares(ss: f64, sigma: f64, df: f64) -> f64 {
    (0.5 * df - 1.0) * fm::ln(ss) - 0.5 * ss / (sigma * sigma) - df * fm::ln(sigma)
}

/// Φ(b) − Φ(a), ends possibly infinite.
fn between(a: f64, b: f64) -> f64 {
    match (a == f64::NEG_INFINITY, b == f64::INFINITY) {
        (true, true) => 1.0,
        (true, false) => normal::cdf(b),
        (false, true) => normal::sf(a),
        (false, false) => fm::exp(normal::ln_interval(a, b)),
    }
}

fn thresholds(rule: &Rule, subject: &Subject<'_>) -> Result<Vec<f64>, Absent> {
    let mut all = Vec::new();
    for (condition, against) in rule.verdicts.iter().flat_map(|verdict| &verdict.conditions) {
        if figure_of(*condition) != "chance" {
            return Err(Absent::because("only rules on a chance are planned for"));
        }
        all.push(threshold(against, subject.plan, subject.series)?);
    }
    all.sort_by(f64::total_cmp);
    all.dedup();
    Ok(all)
}

fn verdict_at(chance: f64, rule: &Rule, subject: &Subject<'_>) -> Result<usize, Absent> {
    let figures = Figures::default().number("chance", Ok(chance), Meaning::Chance);
    first_holding(rule, &figures, subject.plan, subject.series)
}

/// Finds the ranges of x with one verdict and adds their weights.
#[allow(clippy::too_many_arguments, reason = "one place for two callers that hold all of these")]
fn add_verdicts(
    chances: &mut [f64],
    share: f64,
    rule: &Rule,
    subject: &Subject<'_>,
    thresholds: &[f64],
    places: &[f64],
    chance: &dyn Fn(f64) -> f64,
    within: &dyn Fn(f64, f64) -> f64,
) -> Result<(), Absent> {
    let values: Vec<f64> = places.iter().map(|place| chance(*place)).collect();
    let mut ends = Vec::new();
    for threshold in thresholds {
        for index in 1..places.len() {
            let (before, now) = (values[index - 1] - threshold, values[index] - threshold);
            if (before < 0.0) != (now < 0.0) {
                let (from, to) = (places[index - 1], places[index]);
                let tolerance = roots::Tolerance::new(1e-13, 1e-9 * (to - from));
                let root = roots::solve(|place| chance(place) - threshold, from, to, tolerance);
                ends.push(root.map_err(|error| Absent::failed(error.to_string()))?);
            }
        }
    }
    ends.sort_by(f64::total_cmp);
    let step = match places {
        [first, second, ..] => second - first,
        _ => 1.0,
    };
    for index in 0..=ends.len() {
        let from = if index == 0 { f64::NEG_INFINITY } else { ends[index - 1] };
        let to = ends.get(index).copied().unwrap_or(f64::INFINITY);
        let inside = match (from.is_finite(), to.is_finite()) {
            (true, true) => 0.5 * (from + to),
            (true, false) => from + step,
            (false, true) => to - step,
            (false, false) => places.first().copied().unwrap_or(0.0),
        };
        chances[verdict_at(chance(inside), rule, subject)?] += share * within(from, to);
    }
    Ok(())
}
