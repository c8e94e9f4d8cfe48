//! What the marked readings of one period say of its level: ln of the product of their chances. Equal marks
//! are counted, not repeated. Inner units.

use super::lattice::Lattice;
use super::marks::Mark;

/// A period's marked readings.
#[derive(Debug, Clone, PartialEq, Default)]
pub(super) struct Chances {
    /// Distinct marks and how many there are of each.
    marks: Vec<(Mark, f64)>,
}

impl Chances {
    /// `marks` sorted, as [`super::marks::period`] leaves them.
    pub fn new(marks: &[Mark]) -> Chances {
        let counted = marks.chunk_by(|a, b| a == b).map(|same| (same[0], same.len() as f64));
        Chances { marks: counted.collect() }
    }

    pub fn is_empty(&self) -> bool {
        self.marks.is_empty()
    }

    pub fn each(&self) -> impl Iterator<Item = &Mark> {
        self.marks.iter().map(|(mark, _)| mark)
    }

    /// Σ ln P(mark | θ, σ²).
    pub fn ln_at(&self, theta: f64, sigma2: f64) -> f64 {
        self.marks.iter().map(|(mark, count)| count * mark.ln_chance(theta, sigma2)).sum()
    }

    /// The most that −d²/dθ² of it can be: each mark says no more of the level than a reading would.
    pub fn sharpness(&self, sigma2: f64) -> f64 {
        self.marks.iter().map(|(mark, count)| count / (sigma2 + mark.u2)).sum()
    }

    /// ln E exp(Σ ln P(mark | θ, σ²)) over θ ~ N(mean, var); the lattice is this σ²'s.
    pub fn ln_expected(&self, mean: f64, var: f64, sigma2: f64, lattice: &Lattice) -> f64 {
        if let [(mark, 1.0)] = self.marks[..] {
            // One reading's bounds: level and scatter add to one normal law.
            return mark.ln_chance(mean, sigma2 + var);
        }
        lattice.integral(&|theta| self.ln_at(theta, sigma2), mean, var).ln
    }

    /// A place to begin the search for where they would have the level, with nothing else known.
    pub fn place(&self) -> Option<f64> {
        let ends = || self.each().flat_map(|m| [m.lower, m.upper]).filter(|x| x.is_finite());
        let n = ends().count();
        (n > 0).then(|| ends().sum::<f64>() / n as f64)
    }
}
