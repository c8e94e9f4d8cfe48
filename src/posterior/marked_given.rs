//! What levels, readings and true levels are, given a node of the plane and the number y that marked readings
//! speak of there.

use super::When;
use super::build::{BiasOf, Part};
use super::marked::{Given, Tied};
use super::plane::Node;
use super::solve::Inner;
use super::units::Units;

/// X = factor · level + shift + N(0, added), the level as measured.
pub(super) fn given(
    units: &Units,
    part: &Part,
    node: &Node,
    when: When,
    (factor, shift, added): (f64, f64, f64),
) -> Given {
    let (constant, slope, var) = level_given_hidden(part, node, when);
    let fixes = when == When::This && part.plane.by_long_run() && added == 0.0;
    Given {
        constant: factor * units.sd_out(constant) + shift,
        slope: factor * units.scale * slope,
        var: factor * factor * units.square_out(var) + added,
        tied: fixes.then(|| {
            let per = factor * units.scale;
            Tied { level: [-shift / per, 1.0 / per, 0.0], var: 0.0, earlier: None }
        }),
    }
}

impl Inner {
    /// X = the true level with the bias taken out, plus a shift (methods §3).
    pub(super) fn true_given(&self, part: &Part, node: &Node, when: When, shift: f64) -> Given {
        let units = &self.units;
        let (c, s, v) = level_given_hidden(part, node, when);
        let u2 = (self.bias_sd / units.scale) * (self.bias_sd / units.scale);
        let tau2 = node.tau * node.tau;
        let pulled = |m0: f64, v0: f64| {
            let k = v0 / (v0 + u2);
            (m0 + k * (c - m0), k * s, k * k * v + k * u2)
        };
        let (constant, slope, var) = match part.bias {
            BiasOf::Measured => (c, s, v + u2),
            BiasOf::TrueLevel { mean, var } => pulled(mean, var),
            BiasOf::TrueLevelPerReading { mean, readings } => {
                pulled(mean, node.sigma * node.sigma / readings)
            }
            BiasOf::TrueLongRun { mean, var } => {
                // Given φ = μ + (level about it) + b, each share of φ − M goes to each by its variance.
                let whole = var + u2 + tau2;
                match when {
                    When::This => {
                        let k = u2 / whole;
                        (k * mean, 1.0 - k, u2 * (1.0 - k))
                    }
                    When::Next | When::LongRun => {
                        let k = var / whole;
                        let own = if when == When::Next { tau2 } else { 0.0 };
                        ((1.0 - k) * mean, k, var * (1.0 - k) + own)
                    }
                }
            }
        };
        Given {
            constant: units.sd_out(constant) + shift,
            slope: units.scale * slope,
            var: units.square_out(var),
            tied: None,
        }
    }
}

/// A level (or the long-run mean) given y: constant + slope · y and a variance, inner units.
fn level_given_hidden(part: &Part, node: &Node, when: When) -> (f64, f64, f64) {
    let plane = &part.plane;
    match when {
        When::This => plane.level_given_hidden(node),
        When::LongRun => plane.long_run_given_hidden(node),
        When::Next => {
            let (constant, slope, var) = plane.long_run_given_hidden(node);
            (constant, slope, var + node.tau * node.tau)
        }
    }
}
