//! What marked readings make of the normal law of a level, or of the long-run mean, at one node of the plane:
//! its density is multiplied by a factor for each period that has any. Inner units.

use super::chances::Chances;
use super::plane::{Node, Plane};
use super::told::Told;

/// An earlier period with marked readings.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct MarkedPeriod {
    /// Its number among all earlier periods.
    pub index: usize,
    pub plain: Told,
    pub chances: Chances,
}

/// Given y (the level or the long-run mean) the level of one period is N(constant + slope · y, var).
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Term<'a> {
    chances: &'a Chances,
    sigma2: f64,
    constant: f64,
    slope: f64,
    var: f64,
}

impl Term<'_> {
    /// ln of the chance of the period's marked readings given y.
    fn ln(&self, y: f64) -> f64 {
        self.chances.ln_expected(self.constant + self.slope * y, self.var, self.sigma2)
    }

    /// A log-concave factor blurred by a normal has at most the curvature of the two widths together.
    fn sharpness(&self) -> f64 {
        self.slope * self.slope / (self.var + 1.0 / self.chances.sharpness(self.sigma2))
    }
}

/// The product of the terms of all periods, as a function of y.
#[derive(Debug, Clone, PartialEq, Default)]
pub(super) struct Factor<'a> {
    terms: Vec<Term<'a>>,
}

impl<'a> Factor<'a> {
    /// All that marked readings say at a node of its hidden y; `now` unless this period's are left out, without
    /// those of the earlier period `left_out`.
    pub fn of(plane: &'a Plane, node: &Node, now: bool, left_out: Option<usize>) -> Factor<'a> {
        let mut terms = Vec::new();
        if !plane.by_long_run() {
            if now && !plane.marks.is_empty() {
                let sigma2 = node.sigma * node.sigma;
                terms.push(Term { chances: &plane.marks, sigma2, constant: 0.0, slope: 1.0, var: 0.0 });
            }
            return Factor { terms };
        }
        let moved = plane.moved.unwrap_or_default();
        // y is the long-run mean as moved; the earlier periods know the one before.
        let history2 = node.history_sigma * node.history_sigma;
        let tau = node.tau / moved.stretch;
        let (constant, slope) = (moved.before(0.0), 1.0 / moved.stretch);
        for (j, period) in plane.marked_periods.iter().enumerate() {
            if left_out == Some(j) {
                continue;
            }
            let (own, pull, var) = level_given_long_run(&period.plain, history2, tau * tau);
            let term = Term {
                chances: &period.chances,
                sigma2: history2,
                constant: own + pull * constant,
                slope: pull * slope,
                var,
            };
            terms.push(term);
        }
        if now && !plane.marks.is_empty() {
            let sigma2 = node.sigma * node.sigma;
            let (constant, slope, var) = level_given_long_run(&plane.readings, sigma2, node.tau * node.tau);
            terms.push(Term { chances: &plane.marks, sigma2, constant, slope, var });
        }
        Factor { terms }
    }

    pub fn ln(&self, y: f64) -> f64 {
        self.terms.iter().map(|term| term.ln(y)).sum()
    }

    pub fn sharpness(&self) -> f64 {
        self.terms.iter().map(Term::sharpness).sum()
    }

    /// Where to begin the search for its mass.
    pub fn place(&self) -> f64 {
        let places = || {
            self.terms.iter().filter_map(|t| t.chances.place().map(|place| (place - t.constant) / t.slope))
        };
        let n = places().count();
        if n == 0 { 0.0 } else { places().sum::<f64>() / n as f64 }
    }
}

/// A period's level given the long-run mean μ, by its plain readings: N(own + pull · μ, var).
pub(super) fn level_given_long_run(plain: &Told, sigma2: f64, tau2: f64) -> (f64, f64, f64) {
    match plain.at(sigma2) {
        None => (0.0, 1.0, tau2),
        Some(at) => {
            let total = tau2 + at.var;
            (tau2 / total * at.mean, at.var / total, tau2 * (at.var / total))
        }
    }
}
