//! Earlier periods as a random walk: the Kalman filter of the local level model, θ_1 flat, and the gains
//! that carry an earlier level forward (West & Harrison 1997). Inner units.

use super::told::Told;
use crate::math::fm;

#[derive(Debug, Clone, PartialEq)]
pub(super) struct Walk {
    /// Periods with readings, in order of time, each with the steps since the one before.
    steps: Vec<(f64, Told)>,
    /// Steps from the last of them to the period under review.
    pub last_gap: f64,
}

/// The filter's end.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Filtered {
    pub ln_weight: f64,
    pub mean: f64,
    pub var: f64,
}

impl Walk {
    /// `gaps[j]`: steps elapsed before period j; the first is not used. A period without readings is
    /// skipped and its steps are added to the next one's.
    pub fn new(periods: &[Told], gaps: &[f64], last_gap: f64) -> Walk {
        let mut steps: Vec<(f64, Told)> = Vec::new();
        let mut waiting = 0.0;
        for (j, period) in periods.iter().enumerate() {
            waiting += gaps.get(j).copied().unwrap_or(1.0);
            if *period != Told::Nothing {
                steps.push((waiting, period.clone()));
                waiting = 0.0;
            }
        }
        Walk { steps, last_gap: last_gap + waiting }
    }

    pub fn smallest_var(&self, sigma2: f64) -> f64 {
        let vars = self.steps.iter().filter_map(|s| s.1.at(sigma2)).map(|at| at.var);
        vars.fold(f64::INFINITY, f64::min)
    }

    /// The level of the last period given its and all earlier readings, and ln of their likelihood.
    pub fn at(&self, sigma2: f64, step2: f64) -> Filtered {
        let mut state: Option<(f64, f64)> = None;
        let mut ln_weight = 0.0;
        for (gap, period) in &self.steps {
            let Some(at) = period.at(sigma2) else { continue };
            ln_weight += at.ln_factor;
            state = Some(match state {
                None => (at.mean, at.var),
                Some((mean, var)) => {
                    let ahead = var + gap * step2;
                    let total = ahead + at.var;
                    let error = at.mean - mean;
                    ln_weight -= 0.5 * (fm::ln(total) + error * error / total);
                    (mean + ahead / total * error, ahead * (at.var / total))
                }
            });
        }
        let (mean, var) = state.unwrap_or((0.0, f64::INFINITY));
        Filtered { ln_weight, mean, var }
    }
}
