//! The law of one number: what every answer is read from.

use crate::math::fm;
use crate::math::roots::{Tolerance, solve};
use crate::quantity::{Absent, Figure};
use std::fmt::Debug;
use std::sync::Arc;

/// A continuous law on the line, or on the part of it above [`Continuous::lowest`].
pub trait Continuous: Debug + Send + Sync {
    fn cdf(&self, t: f64) -> f64;
    fn sf(&self, t: f64) -> f64;
    fn density(&self, t: f64) -> f64;
    fn quantile(&self, p: f64) -> Figure;
    fn upper_quantile(&self, q: f64) -> Figure;

    /// The lower end of all values: 0 for a spread.
    fn lowest(&self) -> f64 {
        f64::NEG_INFINITY
    }

    /// The shortest single interval; see [`Law::shortest`].
    fn shortest(&self, probability: f64, exponential: bool) -> Result<(f64, f64), Absent> {
        shortest_scanned(self, probability, exponential)
    }
}

/// The law of one number, with the moments that exist.
#[derive(Debug, Clone)]
pub struct Law {
    /// Of X − origin: a narrow law far from 0 keeps its digits.
    shape: Arc<dyn Continuous>,
    origin: f64,
    mean: Figure,
    sd: Figure,
}

impl Law {
    pub fn new(shape: Arc<dyn Continuous>, mean: Figure, sd: Figure) -> Law {
        Law { shape, origin: 0.0, mean, sd }
    }

    /// The law of X + `by`.
    pub fn moved(self, by: f64) -> Law {
        Law { origin: self.origin + by, mean: self.mean.map(|mean| mean + by), ..self }
    }

    /// P(X ≤ t).
    pub fn cdf(&self, t: f64) -> f64 {
        self.shape.cdf(t - self.origin)
    }

    /// P(X > t), exact in its own tail.
    pub fn sf(&self, t: f64) -> f64 {
        self.shape.sf(t - self.origin)
    }

    pub fn density(&self, t: f64) -> f64 {
        self.shape.density(t - self.origin)
    }

    pub fn quantile(&self, p: f64) -> Figure {
        Ok(self.origin + self.shape.quantile(p)?)
    }

    /// The point with P(X > t) = q.
    pub fn upper_quantile(&self, q: f64) -> Figure {
        Ok(self.origin + self.shape.upper_quantile(q)?)
    }

    pub fn median(&self) -> Figure {
        self.quantile(0.5)
    }

    /// The mean, where it exists (methods §4, table of moments).
    pub fn mean(&self) -> Figure {
        self.mean.clone()
    }

    pub fn sd(&self) -> Figure {
        self.sd.clone()
    }

    /// Central interval of this probability: equal tails.
    pub fn central(&self, probability: f64) -> Result<(f64, f64), Absent> {
        let tail = 0.5 * (1.0 - probability);
        Ok((self.quantile(tail)?, self.upper_quantile(tail)?))
    }

    /// The shortest single interval of this probability. With `exponential`, X is a logarithm and the
    /// interval of e^X is the shortest; its ends are handed back as logarithms.
    pub fn shortest(&self, probability: f64, exponential: bool) -> Result<(f64, f64), Absent> {
        let (lower, upper) = self.shape.shortest(probability, exponential)?;
        Ok((self.origin + lower, self.origin + upper))
    }
}

/// Every division of the two tails is scanned, so that of several peaks the best is found; then the ends
/// are solved from equal densities. Where the density falls from its lower end on, the interval begins there.
fn shortest_scanned<C: Continuous + ?Sized>(
    shape: &C,
    probability: f64,
    exponential: bool,
) -> Result<(f64, f64), Absent> {
    if !(probability > 0.0 && probability < 1.0) {
        return Err(Absent::failed("the probability of an interval must lie between 0 and 1"));
    }
    let outside = 1.0 - probability;
    let ends = |share: f64| -> Result<(f64, f64), Absent> {
        Ok((shape.quantile(outside * share)?, shape.upper_quantile(outside * (1.0 - share))?))
    };
    let length = |(lo, hi): (f64, f64)| {
        if exponential { hi + fm::ln(-fm::exp_m1(lo - hi)) } else { hi - lo }
    };
    const STEPS: usize = 48;
    // Closer together towards both tails.
    let share = |i: usize| {
        let x = i as f64 / STEPS as f64;
        if i == 0 {
            1e-9
        } else if i == STEPS {
            1.0 - 1e-9
        } else {
            x * x * (3.0 - 2.0 * x)
        }
    };
    let mut scanned = Vec::with_capacity(STEPS + 1);
    for i in 0..=STEPS {
        scanned.push(ends(share(i))?);
    }
    let mut best = 0;
    for i in 1..=STEPS {
        if length(scanned[i]) < length(scanned[best]) {
            best = i;
        }
    }
    let slant = |t: f64| fm::ln(shape.density(t)) - if exponential { t } else { 0.0 };
    let mut trouble = None;
    let mut balance = |share: f64| match ends(share) {
        Ok((lo, hi)) => slant(lo) - slant(hi),
        Err(e) => {
            trouble = Some(e);
            f64::NAN
        }
    };
    let (from, to) = (share(best.saturating_sub(1)), share((best + 1).min(STEPS)));
    let (first, last) = (balance(from), balance(to));
    if first < 0.0 && last > 0.0 {
        let found = solve(&mut balance, from, to, Tolerance::new(1e-15, 1e-16));
        if let Some(e) = trouble {
            return Err(e);
        }
        return ends(found.map_err(|e| Absent::failed(e.to_string()))?);
    }
    if best == 0 && shape.lowest().is_finite() && !exponential {
        return Ok((shape.lowest(), shape.upper_quantile(outside)?));
    }
    Ok(scanned[best])
}
