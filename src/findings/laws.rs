//! The laws of a series' quantities as plain figures: what a review's answers say of them.

use crate::math::fm;
use crate::posterior::{Law, Posterior, When};
use crate::prior::Within;
use crate::quantity::{Absent, Figure, Scale};

/// Tail probabilities and names of the quantiles that are written; the first three are lower tails,
/// the last three upper ones, so that no tail is ever formed by subtraction.
const LOWER_TAILS: [(f64, &str); 3] = [(0.025, "0.025"), (0.05, "0.05"), (0.25, "0.25")];
const UPPER_TAILS: [(f64, &str); 3] = [(0.25, "0.75"), (0.05, "0.95"), (0.025, "0.975")];

/// One law in the quantity's unit.
#[derive(Debug, Clone, PartialEq)]
pub struct LawFigures {
    pub mean: Figure,
    pub sd: Figure,
    /// By name of the probability, ascending.
    pub quantiles: Vec<(&'static str, Figure)>,
    /// Mean and sd of the logarithm, on the log scale.
    pub logs: Option<(Figure, Figure)>,
}

impl LawFigures {
    pub fn of(law: &Law, scale: Scale) -> LawFigures {
        let lower = LOWER_TAILS.map(|(tail, name)| (name, law.quantile(tail)));
        let upper = UPPER_TAILS.map(|(tail, name)| (name, law.upper_quantile(tail)));
        let quantiles = lower.into_iter().chain([("0.5", law.median())]).chain(upper);
        match scale {
            Scale::Linear => {
                LawFigures { mean: law.mean(), sd: law.sd(), quantiles: quantiles.collect(), logs: None }
            }
            Scale::Log => {
                let reason = "log scale: the quantiles describe it in the quantity's unit, log_mean and log_sd the logarithm";
                LawFigures {
                    mean: Err(Absent::because(reason)),
                    sd: Err(Absent::because(reason)),
                    quantiles: quantiles.map(|(name, at)| (name, at.map(fm::exp))).collect(),
                    logs: Some((law.mean(), law.sd())),
                }
            }
        }
    }
}

/// The laws of one series, made once, for they take their time.
#[derive(Debug, Clone, PartialEq)]
pub struct Laws {
    /// The prior of the level.
    pub prior: Result<LawFigures, Absent>,
    /// By the names of answers.json, each or why it does not exist.
    pub posterior: Vec<(&'static str, Result<LawFigures, Absent>)>,
}

impl Laws {
    pub fn of(prior: &Result<Posterior, Absent>, posterior: &Result<Posterior, Absent>) -> Laws {
        let prior = prior
            .as_ref()
            .map_err(Absent::clone)
            .and_then(|prior| prior.level(When::This).map(|law| LawFigures::of(&law, prior.model.scale)));
        Laws { prior, posterior: of_posterior(posterior) }
    }
}

/// The laws that a posterior has.
fn of_posterior(posterior: &Result<Posterior, Absent>) -> Vec<(&'static str, Result<LawFigures, Absent>)> {
    const NAMES: [&str; 6] =
        ["level", "next_level", "long_run_mean", "within_sd", "between_sd", "next_reading"];
    let posterior = match posterior {
        Ok(posterior) => posterior,
        Err(absent) => return NAMES.map(|name| (name, Err(absent.clone()))).to_vec(),
    };
    let next_reading = match posterior.model.within {
        Within::None => {
            Err(Absent::because("every reading brings its own uncertainty: ask `reading interval` with one"))
        }
        _ => posterior.reading(When::This, 1, None),
    };
    let laws = [
        posterior.level(When::This),
        posterior.level(When::Next),
        posterior.level(When::LongRun),
        posterior.within_sd(),
        posterior.between_sd(),
        next_reading,
    ];
    let figures = laws.map(|law| law.map(|law| LawFigures::of(&law, posterior.model.scale)));
    NAMES.into_iter().zip(figures).collect()
}
