//! The laws of a series' quantities as plain figures: what answers.json and answers.csv say of them.

use crate::findings::SeriesFindings;
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

/// The laws that a posterior has, by the names of answers.json, each or why it does not exist.
pub fn of_posterior(posterior: &Posterior) -> Vec<(&'static str, Result<LawFigures, Absent>)> {
    let scale = posterior.model.scale;
    let next_reading = match posterior.model.within {
        Within::None => {
            Err(Absent::because("every reading brings its own uncertainty: ask `reading interval` with one"))
        }
        _ => posterior.reading(When::This, 1, None),
    };
    let laws = [
        ("level", posterior.level(When::This)),
        ("next_level", posterior.level(When::Next)),
        ("long_run_mean", posterior.level(When::LongRun)),
        ("within_sd", posterior.within_sd()),
        ("between_sd", posterior.between_sd()),
        ("next_reading", next_reading),
    ];
    laws.map(|(name, law)| (name, law.map(|law| LawFigures::of(&law, scale)))).to_vec()
}

/// The prior of the level.
pub fn of_prior(series: &SeriesFindings) -> Result<LawFigures, Absent> {
    let prior = series.prior.as_ref().map_err(Absent::clone)?;
    prior.level(When::This).map(|law| LawFigures::of(&law, prior.model.scale))
}
