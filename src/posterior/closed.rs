//! Closed forms of an unknown σ under a flat prior or one worth readings: normal–inverse-χ² (BDA3 §3.2–3.3;
//! the updating rule of ISO 12491 and the JCSS Probabilistic Model Code). Student's t and χ².

use super::build::Part;
use super::grid::failed;
use super::law::{Continuous, Law};
use super::moments::moment;
use super::plane::{Level, Sd};
use super::told::Told;
use super::units::Units;
use crate::math::{chi_square, fm, student};
use crate::quantity::Figure;
use std::sync::Arc;

/// θ | σ ~ N(mean, σ²/readings), σ² ~ df s²/χ²_df, in outer units, from the posterior's origin.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Conjugate {
    pub mean: f64,
    pub readings: f64,
    pub df: f64,
    pub sd: f64,
}

impl Conjugate {
    /// n1 = n0 + n, m1 = (n0 m0 + n x̄)/n1, ν1 = ν0 + n (less 1 under a flat prior),
    /// ν1 s1² = ν0 s0² + SS + (n0 n/n1)(x̄ − m0)².
    pub fn of(part: &Part, units: &Units) -> Option<Conjugate> {
        let plane = &part.plane;
        let Sd::Unknown(axis) = plane.sd else { return None };
        if axis.uniform || plane.history_sd.is_some() || plane.is_marked() {
            return None;
        }
        let (prior_mean, prior_readings) = match plane.level {
            Level::Flat => (0.0, 0.0),
            Level::PerReading { mean, readings, extra: 0.0, .. } => match plane.moved {
                None => (mean, readings),
                Some(m) => (m.mean(mean), readings / (m.stretch * m.stretch)),
            },
            _ => return None,
        };
        let (n, mean) = match plane.readings {
            Told::Nothing if prior_readings > 0.0 => (0.0, prior_mean),
            Told::Counted { n, mean } => (n, mean),
            _ => return None,
        };
        let all = prior_readings + n;
        let gap = mean - prior_mean;
        let (mut df, mut ss) = (axis.sums.df, axis.sums.ss);
        if prior_readings > 0.0 && n > 0.0 {
            df += 1.0;
            ss += prior_readings * n / all * (gap * gap);
        }
        Some(Conjugate {
            mean: units.sd_out(prior_mean + n / all * gap),
            readings: all,
            df,
            sd: units.sd_out((ss / df).sqrt()),
        })
    }

    /// factor·θ + shift + N(0, share·σ²).
    pub fn affine(&self, factor: f64, shift: f64, share: f64, bound: f64, what: &str) -> Law {
        let scale = self.sd * (factor * factor / self.readings + share).sqrt();
        let place = factor * self.mean + shift;
        let df = self.df;
        let mean = moment(1.0, bound, what, || place);
        let sd = moment(2.0, bound, what, || scale * (df / (df - 2.0)).sqrt());
        Law::new(Arc::new(Student { place, scale, df }), mean, sd)
    }

    pub fn within_sd(&self, bound: f64) -> Law {
        let (df, s) = (self.df, self.sd);
        let size = s * df.sqrt();
        let (mean_of_root, var_of_root) = chi_square::of_inverse_root(df);
        let mean = moment(1.0, bound, "the within sd", || size * mean_of_root);
        let sd = moment(2.0, bound, "the within sd", || size * var_of_root.sqrt());
        Law::new(Arc::new(RootInverseChi { df, s }), mean, sd)
    }
}

/// Student's t with a place and a scale.
#[derive(Debug)]
struct Student {
    place: f64,
    scale: f64,
    df: f64,
}

impl Student {
    fn t(&self, x: f64) -> f64 {
        (x - self.place) / self.scale
    }
}

impl Continuous for Student {
    fn cdf(&self, t: f64) -> f64 {
        student::cdf(self.t(t), self.df).unwrap_or(f64::NAN)
    }

    fn sf(&self, t: f64) -> f64 {
        student::sf(self.t(t), self.df).unwrap_or(f64::NAN)
    }

    fn density(&self, t: f64) -> f64 {
        student::ln_pdf(self.t(t), self.df).map_or(f64::NAN, fm::exp) / self.scale
    }

    fn quantile(&self, p: f64) -> Figure {
        Ok(self.place + self.scale * student::quantile(p, self.df).map_err(failed)?)
    }

    fn upper_quantile(&self, q: f64) -> Figure {
        Ok(self.place + self.scale * student::upper_quantile(q, self.df).map_err(failed)?)
    }
}

/// σ = s √(ν/χ²_ν).
#[derive(Debug)]
struct RootInverseChi {
    df: f64,
    s: f64,
}

impl RootInverseChi {
    fn chi_square(&self, sigma: f64) -> f64 {
        let ratio = self.s / sigma;
        self.df * (ratio * ratio)
    }
}

impl Continuous for RootInverseChi {
    fn cdf(&self, t: f64) -> f64 {
        if t > 0.0 { chi_square::sf(self.chi_square(t), self.df).unwrap_or(f64::NAN) } else { 0.0 }
    }

    fn sf(&self, t: f64) -> f64 {
        if t > 0.0 { chi_square::cdf(self.chi_square(t), self.df).unwrap_or(f64::NAN) } else { 1.0 }
    }

    fn density(&self, t: f64) -> f64 {
        if t <= 0.0 {
            return 0.0;
        }
        let (half, x) = (0.5 * self.df, 0.5 * self.chi_square(t));
        2.0 / t * fm::exp(half * fm::ln(x) - x - fm::ln_gamma(half))
    }

    fn quantile(&self, p: f64) -> Figure {
        Ok(self.s * (self.df / chi_square::upper_quantile(p, self.df).map_err(failed)?).sqrt())
    }

    fn upper_quantile(&self, q: f64) -> Figure {
        Ok(self.s * (self.df / chi_square::quantile(q, self.df).map_err(failed)?).sqrt())
    }

    fn lowest(&self) -> f64 {
        0.0
    }
}
