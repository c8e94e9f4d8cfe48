//! The plane of spreads: for every σ and τ the weight that prior, history and readings leave it, and the
//! normal piece of the level there. Everything a posterior answers is a sum over its nodes. Inner units.

use super::about_mean::AboutMean;
use super::axis::{SdAxis, TauAxis};
use super::chances::Chances;
use super::factor::{Factor, MarkedPeriod, level_given_long_run};
use super::grid::{MOST, Place, Weighted};
use super::lattice::Lattices;
use super::legendre;
use super::memo::Memo;
use super::told::Told;
use super::walk::Walk;
use crate::math::fm;

/// A within sd: known, unknown with its axis, or not spoken of at all.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Sd {
    Fixed(f64),
    Unknown(SdAxis),
    Undefined,
}

/// The between sd.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum BetweenSd {
    Fixed(f64),
    Unknown(TauAxis),
}

/// The prior of the level as measured, given σ and τ.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Level {
    Flat,
    Normal {
        mean: f64,
        var: f64,
    },
    /// N(mean, σ²/readings + extra); `periods`: it stands for periods that share one level (τ = 0).
    PerReading {
        mean: f64,
        readings: f64,
        extra: f64,
        periods: bool,
    },
    /// Long-run mean N(mean, var).
    LongRun {
        mean: f64,
        var: f64,
    },
    /// The long-run mean's variance is divided by `share` (weight of history).
    AboutMean {
        periods: AboutMean,
        share: f64,
    },
    Walk(Walk),
}

/// Pieces N(m, v) become N(centre + stretch (m − centre) + shift, stretch² v).
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Move {
    pub centre: f64,
    pub stretch: f64,
    pub shift: f64,
}

impl Default for Move {
    fn default() -> Move {
        Move { centre: 0.0, stretch: 1.0, shift: 0.0 }
    }
}

impl Move {
    /// The mean that is moved to `m`.
    pub fn before(&self, m: f64) -> f64 {
        self.centre + (m - self.shift - self.centre) / self.stretch
    }

    pub fn mean(&self, m: f64) -> f64 {
        self.centre + self.stretch * (m - self.centre) + self.shift
    }

    pub fn var(&self, v: f64) -> f64 {
        self.stretch * self.stretch * v
    }
}

#[derive(Debug, Clone, PartialEq)]
pub(super) struct Plane {
    /// σ of the history where it is another than this period's; its axis comes first.
    pub history_sd: Option<Sd>,
    pub sd: Sd,
    pub between: BetweenSd,
    pub level: Level,
    pub moved: Option<Move>,
    pub readings: Told,
    /// Readings of this period known by their bounds.
    pub marks: Chances,
    /// Earlier periods with such readings; `level` holds their plain readings.
    pub marked_periods: Vec<MarkedPeriod>,
}

/// One node: its weight and the level's piece N(mean, var) there.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Node {
    pub ln_weight: f64,
    /// What of it is the size of the node's cell in the grid.
    pub ln_cell: f64,
    pub sigma: f64,
    pub history_sigma: f64,
    pub tau: f64,
    pub mean: f64,
    pub var: f64,
    /// Long-run mean N(long_mean, long_var); for a walk the level itself. NaN where there is none.
    pub long_mean: f64,
    pub long_var: f64,
    /// The level's prior before this period's readings; var is infinite where flat.
    pub prior_mean: f64,
    pub prior_var: f64,
    /// The long-run mean before this period's readings.
    pub long_prior_mean: f64,
    pub long_prior_var: f64,
    /// Where the node lies.
    pub place: Place,
    /// With marked readings: the number they speak of is N(mean, var) but for them.
    pub hidden: (f64, f64),
    /// ln of what the marked readings multiply the weight by.
    pub ln_marks: f64,
}

impl Weighted for Node {
    fn ln_weight(&self) -> f64 {
        self.ln_weight
    }

    fn enlarge(&mut self, ln_cell: f64) {
        self.ln_weight += ln_cell;
        self.ln_cell += ln_cell;
    }
}

/// What a coordinate of the plane is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Coordinate {
    HistorySd,
    Between,
    Sd,
}

impl Plane {
    /// The coordinates in use, in order.
    pub fn coordinates(&self) -> Vec<Coordinate> {
        let mut all = Vec::with_capacity(MOST);
        if let Some(Sd::Unknown(_)) = self.history_sd {
            all.push(Coordinate::HistorySd);
        }
        if matches!(self.between, BetweenSd::Unknown(_)) {
            all.push(Coordinate::Between);
        }
        if matches!(self.sd, Sd::Unknown(_)) {
            all.push(Coordinate::Sd);
        }
        all
    }

    /// Whether σ (of this period or of the history) has 30 degrees of freedom or more.
    pub fn sd_is_well_known(&self, which: Coordinate) -> bool {
        let sd = if which == Coordinate::HistorySd { self.history_sd } else { Some(self.sd) };
        matches!(sd, Some(Sd::Unknown(axis)) if !axis.uniform && axis.sums.ss > 0.0 && axis.sums.df >= 30.0)
    }

    /// Whether levels are held as densities rather than as normal pieces.
    pub fn is_marked(&self) -> bool {
        !self.marks.is_empty() || self.by_long_run()
    }

    /// Whether the factors of marked readings are functions of the long-run mean, those of earlier periods being
    /// among them; else they are functions of this period's level.
    pub fn by_long_run(&self) -> bool {
        !self.marked_periods.is_empty()
    }

    /// Whether it is one node, with the level's normal piece there.
    pub fn is_one_piece(&self) -> bool {
        self.coordinates().is_empty() && !self.is_marked()
    }

    /// A place to begin the search for the highest weight.
    pub fn start(&self) -> Place {
        let mut place = [0.0; MOST];
        for (d, coordinate) in self.coordinates().into_iter().enumerate() {
            place[d] = match coordinate {
                Coordinate::Between => 1.0,
                _ => 0.0,
            };
        }
        place
    }

    /// What the axes' weights leave out, for comparing models.
    pub fn ln_constant(&self) -> f64 {
        let of = |sd: &Sd| if let Sd::Unknown(axis) = sd { axis.ln_constant() } else { 0.0 };
        of(&self.sd) + self.history_sd.as_ref().map_or(0.0, of)
    }

    /// The nodes of a sweep: what neighbours share is computed once.
    pub fn nodes(&self) -> impl Fn(&Place) -> Node + '_ {
        let memo = Memo::new();
        move |place| self.node(place, &memo)
    }

    /// One node by itself.
    pub fn node_alone(&self, place: &Place) -> Node {
        self.node(place, &Memo::new())
    }

    /// The node at these coordinates.
    fn node(&self, place: &Place, memo: &Memo) -> Node {
        let mut next = 0;
        let mut ln_weight = 0.0;
        let sigma_at = |sd: Sd, next: &mut usize, ln_weight: &mut f64| match sd {
            Sd::Fixed(sigma) => sigma,
            Sd::Undefined => f64::NAN,
            Sd::Unknown(axis) => {
                let (sigma, ln_density) = memo.spread(*next, place[*next], |u| axis.at(u));
                *next += 1;
                *ln_weight += ln_density;
                sigma
            }
        };
        let of_history = self.history_sd.map(|sd| sigma_at(sd, &mut next, &mut ln_weight));
        let tau = match self.between {
            BetweenSd::Fixed(tau) => tau,
            BetweenSd::Unknown(axis) => {
                let (tau, ln_density) = memo.spread(next, place[next], |u| axis.at(u));
                next += 1;
                ln_weight += ln_density;
                tau
            }
        };
        let sigma = sigma_at(self.sd, &mut next, &mut ln_weight);
        let history_sigma = of_history.unwrap_or(sigma);
        let mut node = Node {
            ln_weight,
            ln_cell: 0.0,
            sigma,
            history_sigma,
            tau,
            mean: f64::NAN,
            var: f64::INFINITY,
            long_mean: f64::NAN,
            long_var: f64::NAN,
            prior_mean: f64::NAN,
            prior_var: f64::INFINITY,
            long_prior_mean: f64::NAN,
            long_prior_var: f64::NAN,
            place: *place,
            hidden: (f64::NAN, f64::INFINITY),
            ln_marks: 0.0,
        };
        if ln_weight > f64::NEG_INFINITY {
            self.prior(&mut node, memo);
            self.update(&mut node);
            node.hidden = (node.mean, node.var);
            if self.is_marked() {
                self.mark(&mut node, &memo.lattices);
            }
            if node.ln_weight.is_nan() && (sigma == 0.0 || history_sigma == 0.0) {
                node.ln_weight = f64::NEG_INFINITY;
            }
        }
        node
    }

    /// The level before this period's readings.
    fn prior(&self, node: &mut Node, memo: &Memo) {
        let (sigma2, history2, tau2) =
            (node.sigma * node.sigma, node.history_sigma * node.history_sigma, node.tau * node.tau);
        match &self.level {
            Level::Flat => {}
            Level::Normal { mean, var } => {
                node.mean = *mean;
                node.var = *var;
            }
            Level::PerReading { mean, readings, extra, periods } => {
                node.mean = *mean;
                node.var = sigma2 / readings + extra;
                if *periods {
                    node.long_mean = node.mean;
                    node.long_var = node.var;
                }
            }
            Level::LongRun { mean, var } => {
                node.long_mean = *mean;
                node.long_var = *var;
                node.mean = *mean;
                node.var = var + tau2;
            }
            Level::AboutMean { periods, share } => {
                let long = memo.long_run(history2, tau2, || periods.at(history2, tau2));
                node.ln_weight += long.ln_weight;
                node.long_mean = long.mean;
                node.long_var = long.var / share;
                node.mean = long.mean;
                node.var = node.long_var + tau2;
            }
            Level::Walk(walk) => {
                let last = walk.at(history2, tau2);
                node.ln_weight += last.ln_weight;
                node.mean = last.mean;
                node.var = last.var + walk.last_gap * tau2;
                node.long_mean = node.mean;
                node.long_var = node.var;
            }
        }
        if let Some(moved) = &self.moved {
            node.mean = moved.mean(node.mean);
            node.var = moved.var(node.var);
            node.long_mean = moved.mean(node.long_mean);
            node.long_var = moved.var(node.long_var);
            node.tau *= moved.stretch;
        }
        node.prior_mean = node.mean;
        node.prior_var = node.var;
        node.long_prior_mean = node.long_mean;
        node.long_prior_var = node.long_var;
    }

    /// Methods §1: the level, the long-run mean and the weight, updated by the readings.
    fn update(&self, node: &mut Node) {
        let Some(at) = self.readings.at(node.sigma * node.sigma) else { return };
        node.ln_weight += at.ln_factor;
        if node.prior_var == f64::INFINITY {
            node.mean = at.mean;
            node.var = at.var;
            if node.long_var == f64::INFINITY {
                node.long_mean = at.mean;
                node.long_var = node.tau * node.tau + at.var;
            }
            return;
        }
        let total = node.prior_var + at.var;
        let error = at.mean - node.prior_mean;
        node.ln_weight -= 0.5 * (fm::ln(total) + error * error / total);
        node.mean = node.prior_mean + node.prior_var / total * error;
        node.var = node.prior_var * (at.var / total);
        if self.is_walk() {
            node.long_mean = node.mean;
            node.long_var = node.var;
        } else {
            // The readings speak of the long-run mean with variance τ² + s².
            let long_total = node.long_var + (node.tau * node.tau + at.var);
            if node.long_var > 0.0 {
                node.long_mean += node.long_var / long_total * (at.mean - node.long_mean);
                node.long_var *= (node.tau * node.tau + at.var) / long_total;
            }
        }
    }

    /// What the marked readings make of the node: its weight, and mean and variance of both levels.
    fn mark(&self, node: &mut Node, lattices: &Lattices) {
        let by_long_run = self.by_long_run();
        if by_long_run {
            node.hidden = (node.long_mean, node.long_var);
        }
        let (mean, var) = node.hidden;
        let y = Factor::of(self, node, true, None, lattices).expected(mean, var);
        node.ln_marks = y.ln;
        node.ln_weight += y.ln;
        if by_long_run {
            (node.long_mean, node.long_var) = (y.mean, y.var);
            let (constant, slope, var) = self.level_given_hidden(node);
            (node.mean, node.var) = (constant + slope * y.mean, var + slope * slope * y.var);
        } else {
            (node.mean, node.var) = (y.mean, y.var);
            if !node.long_mean.is_nan() {
                let (constant, slope, var) = self.long_run_given_hidden(node);
                (node.long_mean, node.long_var) = (constant + slope * y.mean, var + slope * slope * y.var);
            }
        }
    }

    /// ln of what the marked readings multiply a node's weight by, by Gauss–Legendre panels: a rule of its own
    /// to hold against the trapezoid's.
    pub fn marks_by_panels(&self, node: &Node) -> f64 {
        let factor = Factor::of(self, node, true, None, &Lattices::default());
        let (m, v) = node.hidden;
        let (centre, spread) =
            if self.by_long_run() { (node.long_mean, node.long_var) } else { (node.mean, node.var) };
        let half = 13.0 * spread.sqrt();
        let width = 3.0 / (1.0 / v + factor.sharpness()).sqrt();
        let count = (2.0 * half / width).ceil().max(1.0);
        let size = 2.0 * half / count;
        let mut sum = 0.0;
        for panel in 0..count as usize {
            let middle = centre - half + (panel as f64 + 0.5) * size;
            for (x, w) in legendre::rule() {
                let y = middle + 0.5 * size * x;
                let normal = if v == f64::INFINITY {
                    0.0
                } else {
                    -0.5 * (y - m) * (y - m) / v - 0.5 * fm::ln(v) - fm::HALF_LN_TWO_PI
                };
                sum += 0.5 * size * w * fm::exp(normal + factor.ln(y) - node.ln_marks);
            }
        }
        node.ln_marks + fm::ln(sum)
    }

    /// This level given y, this period's marked readings left out: N(constant + slope · y, var).
    pub fn level_given_hidden(&self, node: &Node) -> (f64, f64, f64) {
        if !self.by_long_run() {
            return (0.0, 1.0, 0.0);
        }
        level_given_long_run(&self.readings, node.sigma * node.sigma, node.tau * node.tau)
    }

    /// The long-run mean (of a walk: the level) given y.
    pub fn long_run_given_hidden(&self, node: &Node) -> (f64, f64, f64) {
        if self.by_long_run() || self.is_walk() {
            return (0.0, 1.0, 0.0);
        }
        // Before the readings: μ ~ N(M, V) and θ | μ ~ N(μ, τ²); given θ the readings say no more of μ.
        let (m, v) = (node.long_prior_mean, node.long_prior_var);
        let tau2 = node.tau * node.tau;
        let slope = if v > 0.0 { v / (v + tau2) } else { 0.0 };
        (m - slope * m, slope, if v > 0.0 { tau2 * slope } else { 0.0 })
    }

    pub fn is_walk(&self) -> bool {
        matches!(self.level, Level::Walk(_))
    }
}
