//! Laws of factor · θ + K where K hangs on σ, and σ is this period's alone: an integral over the level of what K is
//! given the level, where σ² is scaled inverse χ². Panels are halved where the integrand asks for it.

use super::grid::failed;
use super::law::{Continuous, Law};
use super::legendre::{POINTS, last_terms, rule};
use super::moments::moment;
use super::own_sd::OwnSd;
use super::shapes::{OnPanels, panels_of};
use crate::math::{chi_square, fm, roots, student};
use crate::quantity::{Absent, Figure};
use std::sync::Arc;

/// What is added to the level, given σ.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Added {
    Nothing,
    /// z σ.
    Sd(f64),
    /// h σ².
    Variance(f64),
    /// N(0, share · σ²).
    Normal(f64),
}

impl Added {
    /// What (shift, variance) as functions of σ come to: a constant, and one of these; `size` is a usual σ.
    pub fn of(size: f64, shift_and_variance: &dyn Fn(f64) -> (f64, f64)) -> Option<(f64, Added)> {
        let (constant, own) = shift_and_variance(0.0);
        if own != 0.0 || !constant.is_finite() {
            return None;
        }
        let (shift, variance) = shift_and_variance(size);
        let (shift, square) = (shift - constant, size * size);
        let all = [0.25, 0.7, 1.9, 16.0].map(|k| {
            let (s, v) = shift_and_variance(k * size);
            (k, s - constant, v)
        });
        let near = |x: f64, y: f64, whole: f64| (x - y).abs() <= 1e-13 * whole.abs().max(y.abs());
        let no_shift = all.iter().all(|(_, s, _)| *s == 0.0) && shift == 0.0;
        let no_variance = all.iter().all(|(_, _, v)| *v == 0.0) && variance == 0.0;
        match (no_shift, no_variance) {
            (true, true) => Some((constant, Added::Nothing)),
            (true, false) if all.iter().all(|(k, _, v)| near(*v, k * k * variance, 0.0)) => {
                Some((constant, Added::Normal(variance / square)))
            }
            (false, true) if all.iter().all(|(k, s, _)| near(*s, k * shift, constant)) => {
                Some((constant, Added::Sd(shift / size)))
            }
            (false, true) if all.iter().all(|(k, s, _)| near(*s, k * k * shift, constant)) => {
                Some((constant, Added::Variance(shift / square)))
            }
            _ => None,
        }
    }

    /// P(K ≤ k), P(K > k) and the density of K at k, given S(θ) and ν.
    fn given(&self, k: f64, squares: f64, df: f64, wanted: Wanted) -> f64 {
        match *self {
            Added::Nothing => f64::NAN,
            Added::Sd(z) => of_sd(k / z, squares, df, wanted.mirrored(z < 0.0)) / wanted.slope(z),
            Added::Variance(h) => {
                let variance = k / h;
                let wanted = wanted.mirrored(h < 0.0);
                if variance <= 0.0 {
                    return of_sd(-1.0, squares, df, wanted);
                }
                let sd = variance.sqrt();
                // dσ = dσ²/(2σ).
                of_sd(sd, squares, df, wanted)
                    / if wanted == Wanted::Density { (2.0 * sd * h).abs() } else { 1.0 }
            }
            Added::Normal(share) => {
                let scale = (share * squares / df).sqrt();
                let t = k / scale;
                match wanted {
                    Wanted::Below => student::cdf(t, df).unwrap_or(f64::NAN),
                    Wanted::Above => student::sf(t, df).unwrap_or(f64::NAN),
                    Wanted::Density => student::ln_pdf(t, df).map_or(f64::NAN, fm::exp) / scale,
                }
            }
        }
    }

    /// About where K lies given σ² ~ S/χ²_df, and how widely.
    fn place(&self, squares: f64, df: f64) -> (f64, f64) {
        let sd = (squares / df).sqrt();
        let narrow = (0.5 / df).sqrt();
        match *self {
            Added::Nothing => (0.0, 0.0),
            Added::Sd(z) => (z * sd, (z * sd * narrow).abs()),
            Added::Variance(h) => (h * sd * sd, (2.0 * h * sd * sd * narrow).abs()),
            Added::Normal(share) => (0.0, share.sqrt() * sd),
        }
    }
}

#[derive(Debug, Clone, Copy, PartialEq)]
enum Wanted {
    Below,
    Above,
    Density,
}

impl Wanted {
    /// For −K in the place of K.
    fn mirrored(self, mirrored: bool) -> Wanted {
        match self {
            Wanted::Below if mirrored => Wanted::Above,
            Wanted::Above if mirrored => Wanted::Below,
            _ => self,
        }
    }

    /// What a density is divided by when its number is multiplied by `by`.
    fn slope(self, by: f64) -> f64 {
        if self == Wanted::Density { by.abs() } else { 1.0 }
    }
}

/// σ² ~ S/χ²_df.
fn of_sd(sd: f64, squares: f64, df: f64, wanted: Wanted) -> f64 {
    if sd <= 0.0 {
        return if wanted == Wanted::Above { 1.0 } else { 0.0 };
    }
    let x = squares / sd / sd;
    match wanted {
        Wanted::Below => chi_square::sf(x, df).unwrap_or(f64::NAN),
        Wanted::Above => chi_square::cdf(x, df).unwrap_or(f64::NAN),
        Wanted::Density => {
            let half = 0.5 * df;
            2.0 / sd * fm::exp(half * fm::ln(0.5 * x) - 0.5 * x - fm::ln_gamma(half))
        }
    }
}

/// (factor · θ + K) · scale + shift, θ and K in inner units.
#[derive(Debug)]
pub(super) struct Beside {
    own: Arc<OwnSd>,
    factor: f64,
    added: Added,
    scale: f64,
    shift: f64,
    /// Where it lies and how widely (inner units): where the search for a quantile begins.
    middle: f64,
    width: f64,
}

/// Panels on which the last terms of the integrand's series weigh more than this share of the integral are halved:
/// the rule is exact to twice as many terms, so that its error goes with the square.
const RESOLVED: f64 = 1e-8;
const DEPTH: u32 = 40;
/// What is left out of a chance, relative.
const UNSEEN: f64 = 1e-17;

impl Beside {
    /// The law, `scale` being the outer size of an inner unit. With `factor` 0 it is K's own. Moments exist below
    /// `bound`.
    pub fn law(
        own: &Arc<OwnSd>,
        (factor, added): (f64, Added),
        (scale, shift): (f64, f64),
        bound: f64,
        what: &str,
    ) -> Result<Law, Absent> {
        let df = own.scatter.df;
        let centre = own.level.quantile(0.5)?;
        let (place, spread) = added.place(own.scatter.squares(centre), df);
        let level = factor.abs() * (own.level.upper_quantile(0.16)? - own.level.quantile(0.16)?);
        let (middle, width) = (factor * centre + place, level + spread);
        // E σ² = S/(ν−2), Var σ² = 2 S²/((ν−2)² (ν−4)).
        let (mean_of_root, var_of_root) = chi_square::of_inverse_root(df);
        let first = |t: f64, s: f64| {
            factor * (t - centre)
                + match added {
                    Added::Nothing | Added::Normal(_) => 0.0,
                    Added::Sd(z) => z * s.sqrt() * mean_of_root,
                    Added::Variance(h) => h * s / (df - 2.0),
                }
        };
        let of_added = |s: f64| match added {
            Added::Nothing => 0.0,
            Added::Normal(share) => share * s / (df - 2.0),
            Added::Sd(z) => z * z * s * var_of_root,
            Added::Variance(h) => {
                let mean = h * s / (df - 2.0);
                2.0 * mean * mean / (df - 4.0)
            }
        };
        let mean = own.expect(&first);
        let var = || {
            own.expect(&|t, s| {
                let d = first(t, s) - mean;
                d * d + of_added(s)
            })
        };
        let mean_out = moment(1.0, bound, what, || scale * (factor * centre + mean) + shift);
        let sd = moment(2.0, bound, what, || scale * var().sqrt());
        let own = Arc::clone(own);
        Ok(Law::new(Arc::new(Beside { own, factor, added, scale, shift, middle, width }), mean_out, sd))
    }

    fn inner(&self, t: f64) -> f64 {
        (t - self.shift) / self.scale
    }

    /// ∫ p(θ) · [K's share at y − factor θ] dθ.
    fn integral(&self, y: f64, wanted: Wanted) -> f64 {
        let (own, df) = (&self.own, self.own.scatter.df);
        let given = |level: f64, squares: f64| self.added.given(y - self.factor * level, squares, df, wanted);
        let summed = |half: f64, value: &dyn Fn(usize, f64) -> f64| {
            let mut values = [0.0; POINTS];
            let mut sum = 0.0;
            for (i, (here, (x, w))) in values.iter_mut().zip(rule()).enumerate() {
                *here = value(i, *x);
                sum += w * *here;
            }
            (half * sum, half * last_terms(&values))
        };
        let panel = |lo: f64, hi: f64| {
            let (half, middle) = (0.5 * (hi - lo), 0.5 * (hi + lo));
            summed(half, &|_, x| {
                let level = middle + half * x;
                let density = own.level.density(level);
                if density == 0.0 { 0.0 } else { density * given(level, own.scatter.squares(level)) }
            })
        };
        // A step narrower than a panel may hide between its nodes.
        let hides = |lo: f64, hi: f64| {
            let middle = 0.5 * (lo + hi);
            let (place, width) = self.added.place(own.scatter.squares(middle), df);
            let length = self.factor.abs() * (hi - lo);
            length > 6.0 * width && (y - self.factor * middle - place).abs() <= length + 8.0 * width
        };
        let mut total = 0.0;
        let mut waiting = Vec::new();
        let mut first = Vec::with_capacity(own.heaviest.len());
        for stretch in &own.heaviest {
            // A chance is at most what is left of the level.
            if wanted != Wanted::Density && stretch.rest < UNSEEN * total {
                break;
            }
            let (sum, last) = summed(0.5 * (stretch.hi - stretch.lo), &|i, _| {
                let (level, density, squares) = stretch.nodes[i];
                density * given(level, squares)
            });
            total += sum.abs();
            first.push((stretch.lo, stretch.hi, sum, last));
        }
        let mut result = 0.0;
        for (lo, hi, sum, last) in first {
            waiting.push((lo, hi, sum, last, 0));
            while let Some((lo, hi, sum, last, depth)) = waiting.pop() {
                if depth >= DEPTH
                    || (last <= RESOLVED * total && !(depth < 30 && hides(lo, hi)))
                    || sum.is_nan()
                {
                    result += sum;
                    continue;
                }
                let middle = 0.5 * (lo + hi);
                for (lo, hi) in [(middle, hi), (lo, middle)] {
                    let (sum, last) = panel(lo, hi);
                    total = total.max(sum.abs());
                    waiting.push((lo, hi, sum, last, depth + 1));
                }
            }
        }
        result
    }

    fn root(&self, excess: impl Fn(f64) -> f64) -> Figure {
        let tolerance = roots::Tolerance::new(4e-15, 1e-14 * self.width);
        let (lo, hi) = (self.middle - self.width, self.middle + self.width);
        let y = roots::solve_increasing(excess, lo, hi, tolerance).map_err(failed)?;
        Ok(self.scale * y + self.shift)
    }
}

impl Continuous for Beside {
    fn cdf(&self, t: f64) -> f64 {
        self.integral(self.inner(t), Wanted::Below).clamp(0.0, 1.0)
    }

    fn sf(&self, t: f64) -> f64 {
        self.integral(self.inner(t), Wanted::Above).clamp(0.0, 1.0)
    }

    fn density(&self, t: f64) -> f64 {
        self.integral(self.inner(t), Wanted::Density) / self.scale
    }

    fn quantile(&self, p: f64) -> Figure {
        // ln makes far tails as steep as the middle.
        self.root(|y| fm::ln(self.integral(y, Wanted::Below).max(1e-300) / p))
    }

    fn upper_quantile(&self, q: f64) -> Figure {
        self.root(|y| fm::ln(q / self.integral(y, Wanted::Above).max(1e-300)))
    }

    fn lowest(&self) -> f64 {
        match self.added {
            Added::Sd(z) if self.factor == 0.0 && z > 0.0 => self.shift,
            _ => f64::NEG_INFINITY,
        }
    }

    fn shortest(&self, probability: f64, exponential: bool) -> Result<(f64, f64), Absent> {
        // It takes a hundred quantiles: from the density on panels they cost nothing.
        let made = Beside { own: Arc::clone(&self.own), ..*self };
        let law = Law::new(Arc::new(made), Ok(0.0), Ok(0.0));
        OnPanels(panels_of(&law)?).shortest(probability, exponential)
    }
}
