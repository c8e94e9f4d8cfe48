//! Readings known by their bounds: marked ("<0.5"), or rounded to a wide step (methods §1). Inner units.

use super::told::{SdSums, Told, told};
use super::units::Units;
use crate::data::evidence::{Evidence, Seen};
use crate::math::{fm, normal};
use crate::quantity::Absent;

/// A reading somewhere in lower..upper, one of them perhaps infinite.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Mark {
    pub lower: f64,
    pub upper: f64,
    /// The reading's own variance beside σ².
    pub u2: f64,
}

/// Below this width (in sds, times 1 + distance) three terms of the series are exact to 2e-15.
const NARROW: f64 = 0.03;

impl Mark {
    /// ln P(lower < x < upper | θ, σ²).
    pub fn ln_chance(&self, theta: f64, sigma2: f64) -> f64 {
        let sd = (sigma2 + self.u2).sqrt();
        let (low, high) = ((self.lower - theta) / sd, (self.upper - theta) / sd);
        if self.lower == f64::NEG_INFINITY {
            normal::ln_cdf(high)
        } else if self.upper == f64::INFINITY {
            normal::ln_sf(low)
        } else {
            // From the bounds themselves: the difference of the two scores would keep few digits of it.
            let width = (self.upper - self.lower) / sd;
            let middle = (0.5 * (self.lower + self.upper) - theta) / sd;
            if width * (1.0 + middle.abs()) < NARROW {
                // Φ(b) − Φ(a) about the middle: differences would cancel.
                let (w2, m2) = (width * width, middle * middle);
                let series = w2 * ((m2 - 1.0) / 24.0 + w2 * (m2 * m2 - 6.0 * m2 + 3.0) / 1920.0);
                normal::ln_pdf(middle) + fm::ln(width) + fm::ln_1p(series)
            } else {
                normal::ln_interval(low, high)
            }
        }
    }

    /// Both ends known: it places the level as a reading does.
    pub fn is_bounded(&self) -> bool {
        self.lower.is_finite() && self.upper.is_finite()
    }
}

/// A period: its plain readings, what their squares say of σ, and its marked ones.
#[derive(Debug, Clone, PartialEq, Default)]
pub(super) struct Period {
    pub plain: Option<Told>,
    pub sums: SdSums,
    pub marks: Vec<Mark>,
}

impl Period {
    pub fn told(&self) -> Told {
        self.plain.clone().unwrap_or(Told::Nothing)
    }

    /// Whether two of the readings cannot be one value: then σ = 0 is ruled out.
    pub fn excludes_no_scatter(&self) -> bool {
        let highest_lower = self.marks.iter().map(|m| m.lower).fold(f64::NEG_INFINITY, f64::max);
        let lowest_upper = self.marks.iter().map(|m| m.upper).fold(f64::INFINITY, f64::min);
        let place = self.told().at(1.0).map(|at| at.mean);
        highest_lower.max(place.unwrap_or(f64::NEG_INFINITY))
            > lowest_upper.min(place.unwrap_or(f64::INFINITY))
    }
}

/// A period's evidence, its plain readings as sums and its marked ones singly.
pub(super) fn period(evidence: &Evidence, units: &Units, known_sd: Option<f64>) -> Result<Period, Absent> {
    let Evidence::Singles(singles) = evidence else {
        let (plain, sums) = told(evidence, units, known_sd)?;
        return Ok(Period { plain: Some(plain), sums, marks: Vec::new() });
    };
    let plain: Vec<_> = singles.iter().filter(|s| matches!(s.seen, Seen::At(_))).copied().collect();
    let mut marks = Vec::new();
    for single in singles {
        let (lower, upper) = match single.seen {
            Seen::At(_) => continue,
            Seen::Below(x) => (f64::NEG_INFINITY, units.value_in(x)),
            Seen::Above(x) => (units.value_in(x), f64::INFINITY),
            Seen::Rounded { lower, upper, .. } => (units.value_in(lower), units.value_in(upper)),
        };
        if lower.is_nan() || upper.is_nan() || lower >= upper {
            return Err(Absent::because("a marked or rounded reading has no room between its bounds"));
        }
        let u = units.sd_in(single.uncertainty);
        if known_sd == Some(0.0) && u <= 0.0 {
            return Err(Absent::because(
                "the within sd is none, so every marked reading must bring its own uncertainty above 0",
            ));
        }
        marks.push(Mark { lower, upper, u2: u * u });
    }
    marks.sort_by(|a, b| {
        a.lower.total_cmp(&b.lower).then(a.upper.total_cmp(&b.upper)).then(a.u2.total_cmp(&b.u2))
    });
    let (plain, sums) = told(&Evidence::Singles(plain), units, known_sd)?;
    Ok(Period { plain: Some(plain), sums, marks })
}
