//! What marked readings make of the normal law of a level, or of the long-run mean, at one node of the plane:
//! its density is multiplied by a factor for each period that has any. Inner units.

use super::chances::Chances;
use super::lattice::{Lattice, Lattices};
use super::plane::{Node, Plane};
use super::smoothed::{Smoothed, smoothed};
use super::table::Table;
use super::told::Told;
use std::rc::Rc;

/// An earlier period with marked readings.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct MarkedPeriod {
    /// Its number among all earlier periods.
    pub index: usize,
    pub plain: Told,
    pub chances: Chances,
}

/// Panels of tables, in widths of what one mark says: 12 terms leave 1e−14 of its logarithm there.
const PANEL: f64 = 0.8;

/// Given y (the level or the long-run mean) the level of one period is N(constant + slope · y, var).
struct Term<'a> {
    chances: &'a Chances,
    sigma2: f64,
    constant: f64,
    slope: f64,
    var: f64,
    lattice: Rc<Lattice>,
}

impl Term<'_> {
    /// ln of the chance of the period's marked readings given y.
    fn ln(&self, y: f64) -> f64 {
        self.chances.ln_expected(self.constant + self.slope * y, self.var, self.sigma2, &self.lattice)
    }

    /// How wide along y what one mark says is, blurred as it is.
    fn width(&self) -> f64 {
        let narrowest = self.chances.each().map(|mark| mark.u2).fold(f64::INFINITY, f64::min);
        (self.var + self.sigma2 + narrowest).sqrt() / self.slope.abs()
    }

    /// A log-concave factor blurred by a normal has at most the curvature of the two widths together.
    fn sharpness(&self) -> f64 {
        self.slope * self.slope / (self.var + 1.0 / self.chances.sharpness(self.sigma2))
    }
}

/// The product of the terms of all periods, as a function of y.
pub(super) struct Factor<'a> {
    terms: Vec<Term<'a>>,
    sharpness: f64,
    lattice: Rc<Lattice>,
    /// Where each term is an integral: their sum, as it is asked for over and over.
    table: Option<Table>,
}

impl<'a> Factor<'a> {
    /// All that marked readings say at a node of its hidden y; `now` unless this period's are left out, without
    /// those of the earlier period `left_out`.
    pub fn of(
        plane: &'a Plane,
        node: &Node,
        now: bool,
        left_out: Option<usize>,
        lattices: &Lattices,
    ) -> Factor<'a> {
        let mut terms = Vec::new();
        let now = now && !plane.marks.is_empty();
        let mut add = |number: usize, chances: &'a Chances, sigma2: f64, given: (f64, f64, f64)| {
            let (constant, slope, var) = given;
            let lattice = lattices.of(number, sigma2, || {
                let centre = if node.hidden.1 < f64::INFINITY {
                    constant + slope * node.hidden.0
                } else {
                    chances.place().unwrap_or(0.0)
                };
                Lattice::new(centre, chances.sharpness(sigma2))
            });
            terms.push(Term { chances, sigma2, constant, slope, var, lattice });
        };
        let sigma2 = node.sigma * node.sigma;
        if plane.by_long_run() {
            // y is the long-run mean as moved; the earlier periods know the one before.
            let moved = plane.moved.unwrap_or_default();
            let history2 = node.history_sigma * node.history_sigma;
            let tau = node.tau / moved.stretch;
            let before = moved.before(0.0);
            let kept = plane.marked_periods.iter().enumerate().filter(|(j, _)| left_out != Some(*j));
            for (j, period) in kept {
                let (own, pull, var) = level_given_long_run(&period.plain, history2, tau * tau);
                let given = (own + pull * before, pull / moved.stretch, var);
                add(j + 1, &period.chances, history2, given);
            }
            if now {
                let given = level_given_long_run(&plane.readings, sigma2, node.tau * node.tau);
                add(0, &plane.marks, sigma2, given);
            }
        } else if now {
            add(0, &plane.marks, sigma2, (0.0, 1.0, 0.0));
        }
        let sharpness = terms.iter().map(Term::sharpness).sum();
        let lattice = match &terms[..] {
            [term] if !plane.by_long_run() => Rc::clone(&term.lattice),
            _ => Rc::new(Lattice::new(centre_of(&terms, node.hidden), sharpness)),
        };
        let table = plane.by_long_run().then(|| {
            let width = terms.iter().map(Term::width).fold(f64::INFINITY, f64::min);
            Table::new(centre_of(&terms, node.hidden), PANEL * width)
        });
        Factor { terms, sharpness, lattice, table }
    }

    /// ln of it by the table of a factor that is asked often.
    fn ln_kept(&self, y: f64) -> f64 {
        match &self.table {
            Some(table) => table.at(&|y| self.ln(y), y),
            None => self.ln(y),
        }
    }

    pub fn ln(&self, y: f64) -> f64 {
        self.terms.iter().map(|term| term.ln(y)).sum()
    }

    /// The most that −d²/dy² of its logarithm can be.
    pub fn sharpness(&self) -> f64 {
        self.sharpness
    }

    /// E of it over y ~ N(mean, var), and the moments of y under both; with an infinite `var` its integral.
    pub fn expected(&self, mean: f64, var: f64) -> Smoothed {
        let mean = if var < f64::INFINITY { mean } else { centre_of(&self.terms, (mean, var)) };
        if self.terms.is_empty() {
            return Smoothed { ln: 0.0, mean, var };
        }
        self.lattice.integral(&|y| self.ln(y), mean, var)
    }

    /// The same for factors that are asked again and again.
    pub fn expected_often(&self, mean: f64, var: f64) -> Smoothed {
        if self.terms.is_empty() {
            return Smoothed { ln: 0.0, mean, var };
        }
        self.lattice.integral(&|y| self.ln_kept(y), mean, var)
    }

    /// The same with another factor e^g, of sharpness `more`.
    pub fn expected_with(&self, mean: f64, var: f64, more: f64, g: &dyn Fn(f64) -> f64) -> Smoothed {
        if self.terms.is_empty() {
            return smoothed(&|y| g(y), mean, var, more);
        }
        self.lattice.integral_with(&|y| self.ln_kept(y), mean, var, more, Some(g))
    }
}

/// Where to begin the search for a factor's mass under N(mean, var).
fn centre_of(terms: &[Term<'_>], (mean, var): (f64, f64)) -> f64 {
    if var < f64::INFINITY {
        return mean;
    }
    let places = || terms.iter().filter_map(|t| t.chances.place().map(|p| (p - t.constant) / t.slope));
    let n = places().count();
    if n == 0 { 0.0 } else { places().sum::<f64>() / n as f64 }
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
