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

    /// θ_last − θ_first and its variance given (σ, τ), from the smoothed path.
    ///
    /// `from` counts the periods with readings; `last` is the period under review, which may have none.
    /// `None` where there are no readings at all. West & Harrison 1997: gains g_j = C_j/R_{j+1}.
    pub fn change(&self, sigma2: f64, step2: f64, from: usize, last: &Told) -> Option<(f64, f64)> {
        let mut states: Vec<(f64, f64)> = Vec::with_capacity(self.steps.len() + 1);
        let mut aheads: Vec<f64> = Vec::with_capacity(self.steps.len() + 1);
        let ends = [(self.last_gap, last.clone())];
        for (gap, period) in self.steps.iter().chain(&ends) {
            let at = period.at(sigma2);
            let Some((mean, var)) = states.last().copied() else {
                let at = at?;
                states.push((at.mean, at.var));
                aheads.push(f64::INFINITY);
                continue;
            };
            let ahead = var + gap * step2;
            aheads.push(ahead);
            states.push(match at {
                None => (mean, ahead),
                Some(at) => {
                    let total = ahead + at.var;
                    (mean + ahead / total * (at.mean - mean), ahead * (at.var / total))
                }
            });
        }
        let (last_mean, last_var) = *states.last()?;
        // θ_j given θ_{j+1}: N(m_j + g_j (θ_{j+1} − m_j), C_j (1 − g_j)), so θ_from = pull · θ_last + … + rest.
        // 1 − g_j is formed directly: for small steps differences of variances would cancel.
        let (mut mean, mut rest, mut loose) = (last_mean, 0.0, 0.0);
        for j in (from..states.len() - 1).rev() {
            let (m, c) = states[j];
            let gap = self.steps.get(j + 1).map_or(self.last_gap, |step| step.0);
            let (g, free) = (c / aheads[j + 1], gap * step2 / aheads[j + 1]);
            mean = m + g * (mean - m);
            rest = c * free + g * g * rest;
            loose = free + g * loose;
        }
        Some((last_mean - mean, loose * loose * last_var + rest))
    }

    /// Where the j-th of all periods, readings or not, stands among those with readings.
    pub fn position(periods: &[Told], j: usize) -> Option<usize> {
        if periods.get(j).is_none_or(|p| *p == Told::Nothing) {
            return None;
        }
        Some(periods[..j].iter().filter(|p| **p != Told::Nothing).count())
    }
}
