//! How far the level has moved where readings are marked: in this period, in that compared with, or in others
//! of the history (methods §4). A common bias cancels, so levels are as measured.

use super::Posterior;
use super::build::Part;
use super::factor::level_given_long_run;
use super::law::Law;
use super::marked::{self, Given, Tied};
use super::plane::{Level, Node};
use super::told::Told;
use super::units::Units;
use crate::quantity::{Absent, Period};

impl Posterior {
    /// The level less the long-run mean.
    pub(super) fn change_long_run_marked(&self, bound: f64) -> Result<Law, Absent> {
        let units = &self.inner.units;
        marked::law(&self.inner, bound, "the change", None, &|part, node| {
            if part.plane.by_long_run() {
                let (constant, slope, var) = part.plane.level_given_hidden(node);
                let tied = Tied { level: [0.0, 1.0 / units.scale, 1.0], var: 0.0, earlier: None };
                return outer(units, (constant, slope - 1.0, var), Some(tied));
            }
            let (constant, slope, var) = part.plane.long_run_given_hidden(node);
            outer(units, (-constant, 1.0 - slope, var), None)
        })
    }

    /// The level less that of an earlier period; `own` are that period's plain readings where the history does not
    /// hold it.
    pub(super) fn change_marked(&self, period: &Period, own: &Told, bound: f64) -> Result<Law, Absent> {
        let units = &self.inner.units;
        for part in &self.inner.parts {
            let served = !matches!(part.plane.level, Level::LongRun { .. } | Level::Walk(_));
            if !served || (self.held(part, period).is_none() && own.at(1.0).is_none()) {
                return Err(Absent::because(
                    "a change is not served with marked readings beside a stated long run or a random walk",
                ));
            }
        }
        marked::law(&self.inner, bound, "the change", None, &|part, node| {
            let earlier = self.earlier(part, node, period, own);
            if part.plane.by_long_run() {
                by_long_run(part, node, earlier, units)
            } else {
                // μ given the level, then the earlier level given μ.
                let (constant, slope, var) = part.plane.long_run_given_hidden(node);
                let (constant, slope, var) = if earlier.pull == 0.0 {
                    (earlier.own, 0.0, earlier.var)
                } else {
                    let pull = earlier.pull;
                    (earlier.own + pull * constant, pull * slope, earlier.var + pull * pull * var)
                };
                outer(units, (-constant, 1.0 - slope, var), None)
            }
        })
    }

    fn earlier(&self, part: &Part, node: &Node, period: &Period, own: &Told) -> Earlier {
        match self.held(part, period) {
            Some(j) => {
                let history2 = node.history_sigma * node.history_sigma;
                let (own, pull, var) =
                    level_given_long_run(&part.history[j].1, history2, node.tau * node.tau);
                let marked = part.plane.marked_periods.iter().position(|marked| marked.index == j);
                Earlier { own, pull, var, marked }
            }
            None => {
                let sigma = if node.history_sigma.is_nan() { node.sigma } else { node.history_sigma };
                let (own, var) = own.at(sigma * sigma).map_or((0.0, 0.0), |at| (at.mean, at.var));
                Earlier { own, pull: 0.0, var, marked: None }
            }
        }
    }
}

/// An earlier level given the long-run mean μ, but for its marked readings: N(own + pull · μ, var).
struct Earlier {
    own: f64,
    pull: f64,
    var: f64,
    marked: Option<usize>,
}

/// With y = μ: both levels are normal and independent given it, and their difference tells of this one.
fn by_long_run(part: &Part, node: &Node, earlier: Earlier, units: &Units) -> Given {
    let (constant, slope, var) = part.plane.level_given_hidden(node);
    let (gap, slope_of_gap) = (constant - earlier.own, slope - earlier.pull);
    let total = var + earlier.var;
    let pull = var / total;
    // θ = constant + slope y + pull (x − gap − slope_of_gap y) + N(0, var (1 − pull)).
    let tied = Tied {
        level: [constant - pull * gap, pull / units.scale, slope - pull * slope_of_gap],
        var: var * (earlier.var / total),
        earlier: earlier.marked.map(|j| (j, units.scale)),
    };
    outer(units, (gap, slope_of_gap, total), Some(tied))
}

/// In outer units; differences know no origin.
fn outer(units: &Units, (constant, slope, var): (f64, f64, f64), tied: Option<Tied>) -> Given {
    Given { constant: units.sd_out(constant), slope: units.scale * slope, var: units.square_out(var), tied }
}
