//! What one period's readings say of its level, given the within sd σ: x̄ ~ N(θ, var), and the factor of
//! the likelihood that holds σ alone (methods §1). All in inner units.

use super::units::Units;
use crate::data::evidence::{Evidence, Seen};
use crate::math::fm;
use crate::quantity::Absent;

/// One period's readings without marks.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Told {
    Nothing,
    /// x̄ ~ N(θ, σ²/n).
    Counted {
        n: f64,
        mean: f64,
    },
    /// x̄ ~ N(θ, var), σ or no σ.
    Fixed {
        mean: f64,
        var: f64,
    },
    /// Readings (x, u²) with uncertainties of their own beside σ.
    Own(Vec<(f64, f64)>),
}

/// A period given σ.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct AtSd {
    pub mean: f64,
    pub var: f64,
    /// ln of what depends on σ alone, the sums of squares of counted readings aside.
    pub ln_factor: f64,
}

/// Degrees of freedom and sum of squares that speak of σ.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub(super) struct SdSums {
    pub df: f64,
    pub ss: f64,
}

impl SdSums {
    pub fn add(&mut self, other: SdSums) {
        self.df += other.df;
        self.ss += other.ss;
    }
}

/// Whether any reading is known by bounds only (marked or rounded).
pub(super) fn is_marked(evidence: &Evidence) -> bool {
    match evidence {
        Evidence::Singles(singles) => singles.iter().any(|s| !matches!(s.seen, Seen::At(_))),
        _ => false,
    }
}

/// The readings at hand as sums, and what they say of σ by their squares.
///
/// `known_sd` is σ in inner units where it is known (0 where every reading brings its own).
/// Marked readings are an error here.
pub(super) fn told(
    evidence: &Evidence,
    units: &Units,
    known_sd: Option<f64>,
) -> Result<(Told, SdSums), Absent> {
    match evidence {
        Evidence::Nothing => Ok((Told::Nothing, SdSums::default())),
        Evidence::Sums { n: 0, .. } => Ok((Told::Nothing, SdSums::default())),
        Evidence::Sums { n, mean, ss, rest } => {
            if known_sd == Some(0.0) {
                return Err(Absent::because(
                    "the within sd is none, so every reading or mean must bring its own uncertainty",
                ));
            }
            let n = *n as f64;
            let sums = match ss {
                Some(ss) => SdSums { df: n - 1.0, ss: units.square_in(*ss) },
                None => SdSums::default(),
            };
            Ok((Told::Counted { n, mean: units.value_in(*mean) + units.sd_in(*rest) }, sums))
        }
        Evidence::Mean { mean, uncertainty } => {
            let u = units.sd_in(*uncertainty);
            if u.is_nan() || u <= 0.0 {
                return Err(Absent::because("a mean needs an uncertainty above 0"));
            }
            Ok((Told::Fixed { mean: units.value_in(*mean), var: u * u }, SdSums::default()))
        }
        Evidence::Singles(singles) => {
            let mut readings = Vec::with_capacity(singles.len());
            for single in singles {
                let Seen::At(x) = single.seen else {
                    return Err(Absent::failed("a marked reading reached a computation for plain readings"));
                };
                let u = units.sd_in(single.uncertainty);
                readings.push((units.value_in(x), u * u));
            }
            from_singles(readings, known_sd)
        }
    }
}

/// Single readings in inner units, as sums where their uncertainties allow it.
fn from_singles(mut readings: Vec<(f64, f64)>, known_sd: Option<f64>) -> Result<(Told, SdSums), Absent> {
    if readings.is_empty() {
        return Ok((Told::Nothing, SdSums::default()));
    }
    // A fixed order, so that the order of rows never reaches a rounding.
    readings.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.total_cmp(&b.1)));
    if known_sd == Some(0.0) && readings.iter().any(|r| r.1.is_nan() || r.1 <= 0.0) {
        return Err(Absent::because(
            "the within sd is none, so every reading must bring its own uncertainty above 0",
        ));
    }
    if readings.iter().all(|r| r.1 == 0.0) {
        let n = readings.len() as f64;
        let mean = readings.iter().map(|r| r.0).sum::<f64>() / n;
        let ss = readings.iter().map(|r| (r.0 - mean) * (r.0 - mean)).sum::<f64>();
        return Ok((Told::Counted { n, mean }, SdSums { df: n - 1.0, ss }));
    }
    let own = Told::Own(readings);
    if let Some(sd) = known_sd
        && let Some(at) = own.at(sd * sd)
    {
        return Ok((Told::Fixed { mean: at.mean, var: at.var }, SdSums::default()));
    }
    Ok((own, SdSums::default()))
}

impl Told {
    /// Given σ² (inner units); `None` where there are no readings.
    pub fn at(&self, sigma2: f64) -> Option<AtSd> {
        match self {
            Told::Nothing => None,
            Told::Counted { n, mean } => Some(AtSd { mean: *mean, var: sigma2 / n, ln_factor: 0.0 }),
            Told::Fixed { mean, var } => Some(AtSd { mean: *mean, var: *var, ln_factor: 0.0 }),
            Told::Own(readings) => {
                let (mut weight, mut weighted, mut ln_product) = (0.0, 0.0, 0.0);
                for (x, u2) in readings {
                    let w = 1.0 / (u2 + sigma2);
                    weight += w;
                    weighted += w * x;
                    ln_product -= fm::ln(u2 + sigma2);
                }
                let mean = weighted / weight;
                let mut squares = 0.0;
                for (x, u2) in readings {
                    squares += (x - mean) * (x - mean) / (u2 + sigma2);
                }
                Some(AtSd {
                    mean,
                    var: 1.0 / weight,
                    ln_factor: 0.5 * (ln_product - fm::ln(weight) - squares),
                })
            }
        }
    }

    pub fn has_own(&self) -> bool {
        matches!(self, Told::Own(_))
    }
}
