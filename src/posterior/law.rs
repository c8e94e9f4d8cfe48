//! The law of one number: what every answer is read from.

use crate::quantity::{Absent, Figure};
use std::fmt::Debug;
use std::sync::Arc;

/// A continuous law that is not a mixture of normals, e.g. of a sd or of a level with marked readings.
pub trait Continuous: Debug + Send + Sync {
    fn cdf(&self, t: f64) -> f64;
    fn sf(&self, t: f64) -> f64;
    fn density(&self, t: f64) -> f64;
    fn quantile(&self, p: f64) -> Figure;
    fn upper_quantile(&self, q: f64) -> Figure;
}

/// The law of one number, with the moments that exist.
#[derive(Debug, Clone)]
pub struct Law {
    shape: Arc<dyn Continuous>,
    mean: Figure,
    sd: Figure,
}

impl Law {
    pub fn new(shape: Arc<dyn Continuous>, mean: Figure, sd: Figure) -> Law {
        Law { shape, mean, sd }
    }

    /// P(X ≤ t).
    pub fn cdf(&self, t: f64) -> f64 {
        self.shape.cdf(t)
    }

    /// P(X > t), exact in its own tail.
    pub fn sf(&self, t: f64) -> f64 {
        self.shape.sf(t)
    }

    pub fn density(&self, t: f64) -> f64 {
        self.shape.density(t)
    }

    pub fn quantile(&self, p: f64) -> Figure {
        self.shape.quantile(p)
    }

    /// The point with P(X > t) = q.
    pub fn upper_quantile(&self, q: f64) -> Figure {
        self.shape.upper_quantile(q)
    }

    pub fn median(&self) -> Figure {
        self.shape.quantile(0.5)
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

    /// The shortest single interval of this probability; on the log scale it is the shortest after
    /// taking exponentials, since that is the scale printed.
    pub fn shortest(&self, probability: f64, exponential: bool) -> Result<(f64, f64), Absent> {
        let _ = exponential;
        self.central(probability)
    }
}
