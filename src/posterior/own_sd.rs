//! σ of this period alone: nothing but its own readings, or a law stated for them, speaks of it. Given the level
//! σ² is scaled inverse χ² then, whatever the prior of the level, and goes out of every integral in closed form
//! (BDA3 §3.2–3.3):
//!
//! p(θ) ∝ prior(θ) · S(θ)^{−ν/2},   σ² | θ ~ S(θ)/χ²_ν,   S(θ) = ss + n (θ − x̄)².
//!
//! prior(θ) is the mixture that the earlier periods leave over their own (σ, τ). Inner units.

use super::grid::{self, MOST, Place, Weighted, failed};
use super::legendre::{Curve, POINTS, Panels, rule};
use super::moments::Bounds;
use super::plane::{Coordinate, Level, Plane, Sd};
use super::told::Told;
use super::weighing::{self, floor};
use crate::math::{fm, roots};
use crate::quantity::Absent;
use std::borrow::Cow;
use std::cell::RefCell;
use std::sync::OnceLock;

/// Two grids must agree to this about the middle, and in the tails.
const AGREED: f64 = 2e-11;
const AGREED_IN_TAILS: f64 = 4e-10;
const FIRST: f64 = 0.46;
const RATIO: f64 = 0.85;
const ROUNDS: usize = 14;
/// And the level's whole mass, by panels, with the sum over σ's own lattice to this.
const CONFIRMED: f64 = 1e-9;
/// Terms so much (ln) lower than the highest of a sum are left out: all of them are below 1e−14 of it.
const UNSEEN: f64 = 41.0;
/// Points lighter than this cannot be seen in a sum over them.
const LIGHTEST: f64 = 1e-26;
/// A level with moments up to this only is followed further out.
const HEAVY: f64 = 6.0;

/// The level with a σ of its own.
#[derive(Debug)]
pub(super) struct OwnSd {
    /// p(θ).
    pub level: Panels,
    pub scatter: Scatter,
    /// The prior of the level: normals with their weight after the readings.
    before: Vec<Before>,
    /// σ² with its weights before the mean is taken in.
    of_sd: Vec<(f64, f64)>,
    pub error: f64,
    /// The panels of the level, the heaviest first.
    pub heaviest: Vec<Stretch>,
    prior_weight: OnceLock<f64>,
    points: [OnceLock<Vec<(f64, f64, f64)>>; 2],
}

/// One panel of the level.
#[derive(Debug, Clone, Copy)]
pub(super) struct Stretch {
    pub lo: f64,
    pub hi: f64,
    /// The share of the whole of this one and of all lighter ones.
    pub rest: f64,
    /// At the nodes of the rule: the level, its density and S there.
    pub nodes: [(f64, f64, f64); POINTS],
}

/// What the readings say of σ given the level: σ² ~ S(θ)/χ²_df.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Scatter {
    pub df: f64,
    ss: f64,
    /// 0 without readings: σ and the level are independent then.
    readings: f64,
    mean: f64,
}

impl Scatter {
    /// S(θ).
    pub fn squares(&self, level: f64) -> f64 {
        let d = level - self.mean;
        self.ss + self.readings * (d * d)
    }

    /// A usual σ: that of the readings about their own mean.
    pub fn usual_sd(&self) -> f64 {
        (self.ss / self.df).sqrt()
    }

    /// ln of what the readings say of the level, σ integrated out; 0 at x̄.
    fn ln_likelihood(&self, level: f64) -> f64 {
        if self.readings == 0.0 {
            return 0.0;
        }
        let d = level - self.mean;
        -0.5 * self.df * fm::ln_1p(self.readings * (d * d) / self.ss)
    }
}

/// A normal of the level's prior at one node of the earlier periods' (σ, τ).
#[derive(Debug, Clone, Copy)]
struct Before {
    /// ln of its weight with the readings taken in, and without.
    ln_weight: f64,
    ln_prior: f64,
    mean: f64,
    var: f64,
}

impl Weighted for Before {
    fn ln_weight(&self) -> f64 {
        self.ln_weight
    }

    fn enlarge(&mut self, ln_cell: f64) {
        self.ln_weight += ln_cell;
        self.ln_prior += ln_cell;
    }
}

/// A stretch of panels' ends, and places where densities are compared: about the middle, and in the tails.
struct Reach {
    edges: Vec<f64>,
    middle: Vec<f64>,
    tails: Vec<f64>,
}

impl OwnSd {
    /// `None` where the level's prior knows σ too, or the readings are no plain sums.
    pub fn of(plane: &Plane, bounds: &Bounds) -> Option<Result<OwnSd, Absent>> {
        let Sd::Unknown(axis) = plane.sd else { return None };
        let apart = match plane.level {
            Level::Normal { .. } | Level::LongRun { .. } => true,
            Level::AboutMean { .. } | Level::Walk(_) => plane.history_sd.is_some(),
            Level::Flat | Level::PerReading { .. } => false,
        };
        if !apart || plane.is_marked() || axis.uniform || axis.sums.ss <= 0.0 {
            return None;
        }
        let (df, ss) = (axis.sums.df, axis.sums.ss);
        let scatter = match plane.readings {
            Told::Nothing => Scatter { df, ss, readings: 0.0, mean: 0.0 },
            Told::Counted { n, mean } => Scatter { df: df + 1.0, ss, readings: n, mean },
            Told::Fixed { .. } | Told::Own(_) => return None,
        };
        Some(OwnSd::new(plane, df, scatter, bounds))
    }

    fn new(plane: &Plane, df: f64, scatter: Scatter, bounds: &Bounds) -> Result<OwnSd, Absent> {
        let mut alone = plane.clone();
        alone.sd = Sd::Undefined;
        alone.readings = Told::Nothing;
        let dims = alone.coordinates().len();
        let node_at = alone.nodes();
        // σ's lattice must reach where a mean so far from the prior would put it.
        let start = node_at(&alone.start());
        let reach = if scatter.readings > 0.0 && start.prior_var.is_finite() {
            let far = (scatter.mean - start.prior_mean).abs() + 10.0 * start.prior_var.sqrt();
            0.5 * fm::ln_1p(scatter.readings * df / scatter.ss * (far * far))
        } else {
            0.0
        };
        let of_sd: Vec<(f64, f64)> = lattice(df, (step_of(df + 1.0, 1e-12), 0.0), reach, 1e-14)
            .into_iter()
            .map(|(x, weight)| (scatter.ss * fm::exp(2.0 * x), weight))
            .collect();
        let f = |place: &Place| {
            let node = node_at(place);
            let mut before = Before {
                ln_weight: node.ln_weight,
                ln_prior: node.ln_weight,
                mean: node.prior_mean,
                var: node.prior_var,
            };
            if scatter.readings > 0.0 && before.ln_weight > f64::NEG_INFINITY {
                before.ln_weight += over_sd(&of_sd, &scatter, before.mean, before.var).0;
            }
            before
        };
        let mut error = 0.0;
        let (before, reach) = if dims == 0 {
            let before = vec![f(&[0.0; MOST])];
            let reach = Reach::of(&before, &of_sd, &scatter, bounds)?;
            (before, reach)
        } else {
            let mut frame = grid::frame(&f, alone.start(), dims)?;
            for (d, coordinate) in alone.coordinates().into_iter().enumerate() {
                if coordinate == Coordinate::HistorySd {
                    frame.stretch[d] = weighing::STRETCH_OF_SD;
                    if alone.sd_is_well_known(coordinate) {
                        frame.width[d] *= 1.4;
                    }
                }
            }
            let mut factor = FIRST;
            let mut before = grid::sweep(&f, &frame, factor, 0.37, floor(dims))?;
            let reach = Reach::of(&before, &of_sd, &scatter, bounds)?;
            let mut measured = reach.measure(&Density::new(&before, &of_sd, &scatter));
            let mut ratio = 0.93;
            let mut settled = false;
            for _ in 0..ROUNDS {
                factor *= ratio;
                ratio = RATIO;
                before = grid::sweep(&f, &frame, factor, 0.0, floor(dims))?;
                let again = reach.measure(&Density::new(&before, &of_sd, &scatter));
                let apart = |from: usize, to: usize| {
                    let pairs = measured[from..to].iter().zip(&again[from..to]);
                    pairs.map(|(a, b)| ((a - b) / b).abs()).fold(0.0, f64::max)
                };
                let (middle, tails) = (apart(0, reach.middle.len()), apart(reach.middle.len(), again.len()));
                measured = again;
                error = middle;
                settled = middle <= AGREED && tails <= AGREED_IN_TAILS;
                if settled {
                    break;
                }
            }
            if !settled {
                return Err(Absent::failed(
                    "the level's prior over the spreads of the earlier periods did not reach its promised accuracy",
                ));
            }
            (before, reach)
        };
        let density = Density::new(&before, &of_sd, &scatter);
        // The logarithm is smoother than the density: a few panels of it spare many sums over the prior's normals.
        let curve =
            if dims == 0 { None } else { Curve::on(&|level| density.ln_at(level), &reach.edges, 1e-11) };
        let at = |level: f64| match curve.as_ref().and_then(|curve| curve.at(level)) {
            Some(ln) => fm::exp(ln),
            None => density.at(level),
        };
        let level = if bounds.level <= HEAVY {
            Panels::with_tails(&at, &reach.edges)?
        } else {
            Panels::new(&at, &reach.edges)?
        };
        let confirmed = (level.total() - 1.0).abs();
        if confirmed.is_nan() || confirmed > CONFIRMED {
            return Err(Absent::failed(format!(
                "the level's density integrates to {} by panels, not to 1",
                level.total()
            )));
        }
        let error = confirmed.max(error);
        let heaviest = stretches(&level, &scatter);
        let (prior_weight, points) = (OnceLock::new(), Default::default());
        Ok(OwnSd { level, scatter, before, of_sd, error, heaviest, prior_weight, points })
    }

    /// ∫ p(θ) g(θ, S(θ)) dθ over the panels' nodes, for a g as smooth as p.
    pub fn expect(&self, g: &dyn Fn(f64, f64) -> f64) -> f64 {
        let mut sum = 0.0;
        for stretch in &self.heaviest {
            let half = 0.5 * (stretch.hi - stretch.lo);
            for ((level, density, squares), (_, w)) in stretch.nodes.iter().zip(rule()) {
                sum += half * w * density * g(*level, *squares);
            }
        }
        sum
    }

    /// Σ w B, the prior's weight in the level's mean.
    pub fn prior_weight(&self) -> f64 {
        *self.prior_weight.get_or_init(|| {
            if self.scatter.readings == 0.0 {
                return 1.0;
            }
            let top = self.before.iter().map(|b| b.ln_weight).fold(f64::NEG_INFINITY, f64::max);
            let (mut whole, mut sum) = (0.0, 0.0);
            for before in self.before.iter().filter(|before| before.ln_weight > top - UNSEEN) {
                let weight = fm::exp(before.ln_weight - top);
                whole += weight;
                sum += weight * over_sd(&self.of_sd, &self.scatter, before.mean, before.var).1;
            }
            sum / whole
        })
    }

    /// (level, σ, weight) whose sums are integrals over both; every `round` has other and more of them.
    pub fn points(&self, round: u32) -> Cow<'_, [(f64, f64, f64)]> {
        match self.points.get(round as usize) {
            Some(kept) => Cow::Borrowed(kept.get_or_init(|| self.points_anew(round))),
            None => Cow::Owned(self.points_anew(round)),
        }
    }

    fn points_anew(&self, round: u32) -> Vec<(f64, f64, f64)> {
        // The second rule differs by its panels and by where σ's lattice begins; the steps of further ones are shorter.
        let (parts, offset) = if round == 0 { (1, 0.0) } else { (1 << round, 0.5) };
        let mut finer = 1.0;
        for _ in 1..round {
            finer *= std::f64::consts::FRAC_1_SQRT_2;
        }
        let df = self.scatter.df;
        let of_sd = lattice(df, (finer * step_of(df, 1e-13), offset), 0.0, 1e-27);
        let of_sd: Vec<(f64, f64)> = of_sd.into_iter().map(|(x, share)| (fm::exp(x), share)).collect();
        let mut points = Vec::new();
        for (level, weight) in self.level.weights(parts) {
            let size = self.scatter.squares(level).sqrt();
            let of_sd = of_sd.iter().map(|(ratio, share)| (level, size * ratio, weight * share));
            points.extend(of_sd.filter(|point| point.2 > LIGHTEST));
        }
        points
    }
}

fn stretches(level: &Panels, scatter: &Scatter) -> Vec<Stretch> {
    let mut all: Vec<(f64, f64, f64)> = level.shares().collect();
    // A stable sort: panels of one weight stay in their order.
    all.sort_by(|a, b| b.2.total_cmp(&a.2));
    let mut rest = 0.0;
    let mut made = Vec::with_capacity(all.len());
    for (lo, hi, share) in all.into_iter().rev() {
        rest += share;
        let mut nodes = [(0.0, 0.0, 0.0); POINTS];
        for (node, (x, _)) in nodes.iter_mut().zip(rule()) {
            let at = 0.5 * (hi + lo) + 0.5 * (hi - lo) * x;
            *node = (at, level.density(at), scatter.squares(at));
        }
        made.push(Stretch { lo, hi, rest, nodes });
    }
    made.reverse();
    made
}

/// Over σ's lattice: ln of the chance of x̄ under N(mean, var + σ²/n), and the share of σ²/n in that variance,
/// weighed by that chance: the weight of the prior N(mean, var).
fn over_sd(of_sd: &[(f64, f64)], scatter: &Scatter, mean: f64, var: f64) -> (f64, f64) {
    let error = scatter.mean - mean;
    let per_reading = 1.0 / scatter.readings;
    let exponent = |total: f64| 0.5 * error * error / total;
    let of_mean = || of_sd.iter().map(|(sd2, weight)| (sd2 * per_reading, *weight));
    let least = of_mean().map(|(mean_var, _)| exponent(var + mean_var)).fold(f64::INFINITY, f64::min);
    let (mut sum, mut share) = (0.0, 0.0);
    for (mean_var, weight) in of_mean() {
        let total = var + mean_var;
        let away = least - exponent(total);
        if away > -UNSEEN {
            let here = weight * fm::exp(away) / total.sqrt();
            sum += here;
            share += here * (mean_var / total);
        }
    }
    (fm::ln(sum) - least - fm::HALF_LN_TWO_PI, share / sum)
}

/// x = ln σ − ½ ln S for σ² ~ S/χ²_df, with weights that add up to 1: the trapezoid rule in ln σ, its points `offset`
/// steps from the top. It goes `further`
/// up than its weights, lighter than `smallest` of the heaviest, would.
fn lattice(df: f64, (step, offset): (f64, f64), further: f64, smallest: f64) -> Vec<(f64, f64)> {
    let centre = -0.5 * fm::ln(df);
    // −½ df (2u + e^−2u − 1), u = x − centre: 0 at its top.
    let ln_weight = |u: f64| -0.5 * df * (2.0 * u + fm::exp_m1(-2.0 * u));
    let depth = fm::ln(smallest);
    let mut all = Vec::new();
    let mut index = 0;
    while ln_weight((f64::from(index) + offset) * step) > depth {
        index -= 1;
    }
    let mut whole = 0.0;
    loop {
        let u = (f64::from(index) + offset) * step;
        let ln = ln_weight(u);
        if u > further && ln < depth {
            break;
        }
        let weight = fm::exp(ln);
        whole += weight;
        all.push((centre + u, weight));
        index += 1;
    }
    for (_, weight) in &mut all {
        *weight /= whole;
    }
    all
}

/// A step of ln σ with which the trapezoid rule is as exact as wanted: its error is the Fourier transform of the density,
/// |Γ(df/2 + iy)|/Γ(df/2) at y = π/step, here by Stirling's formula.
fn step_of(df: f64, wanted: f64) -> f64 {
    let (a, ln_wanted) = (0.5 * df, fm::ln(wanted));
    let mut y = std::f64::consts::PI / 0.25;
    loop {
        let ln_size = 0.5 * (a - 0.5) * fm::ln(a * a + y * y) - y * fm::atan(y / a) - a + fm::HALF_LN_TWO_PI;
        if ln_size - fm::ln_gamma(a) < ln_wanted {
            return std::f64::consts::PI / y;
        }
        y *= 1.04;
    }
}

/// p(θ), normalised by the sum over σ's lattice.
struct Density<'a> {
    scatter: &'a Scatter,
    /// What `Scatter::ln_likelihood` leaves out: the readings' say at x̄.
    ln_top: f64,
    /// (ln of weight over sd, mean, 1/(2 var)).
    normals: Vec<(f64, f64, f64)>,
    exponents: RefCell<Vec<f64>>,
}

impl<'a> Density<'a> {
    fn new(before: &[Before], of_sd: &[(f64, f64)], scatter: &'a Scatter) -> Density<'a> {
        let weights: Vec<f64> = before.iter().map(|b| b.ln_weight).collect();
        let whole = fm::ln_sum_exp(&weights);
        let normals = before
            .iter()
            .map(|b| (b.ln_prior - whole - 0.5 * fm::ln(b.var) - fm::HALF_LN_TWO_PI, b.mean, 0.5 / b.var))
            .collect();
        let ln_top = if scatter.readings > 0.0 { over_sd(of_sd, scatter, scatter.mean, 0.0).0 } else { 0.0 };
        Density { scatter, ln_top, normals, exponents: RefCell::default() }
    }

    fn at(&self, level: f64) -> f64 {
        fm::exp(self.ln_at(level))
    }

    fn ln_at(&self, level: f64) -> f64 {
        // Exponents first: most of them cannot be seen beside the largest.
        let mut exponents = self.exponents.borrow_mut();
        exponents.clear();
        exponents.extend(self.normals.iter().map(|(height, mean, half)| {
            let d = level - mean;
            height - half * (d * d)
        }));
        let top = exponents.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let sum: f64 = exponents.iter().filter(|ln| **ln > top - UNSEEN).map(|ln| fm::exp(ln - top)).sum();
        fm::ln(sum) + (top + self.scatter.ln_likelihood(level) + self.ln_top)
    }
}

impl Reach {
    fn of(
        before: &[Before],
        of_sd: &[(f64, f64)],
        scatter: &Scatter,
        bounds: &Bounds,
    ) -> Result<Reach, Absent> {
        let heaviest = before.iter().max_by(|a, b| a.ln_weight.total_cmp(&b.ln_weight));
        let heaviest = heaviest.ok_or_else(|| Absent::failed("the posterior weight is 0 everywhere"))?;
        let density = Density::new(before, of_sd, scatter);
        // The level lies between the prior's mean and the readings', or has a hill at each.
        let (mut low, mut high) = (heaviest.mean, heaviest.mean);
        let mut size = heaviest.var.sqrt();
        if scatter.readings > 0.0 {
            (low, high) = (low.min(scatter.mean), high.max(scatter.mean));
            size = size.min((scatter.ss / scatter.df / scatter.readings).sqrt());
        }
        let start = (0..=8).map(|i| low + (high - low) * f64::from(i) / 8.0);
        let start = start.max_by(|a, b| density.at(*a).total_cmp(&density.at(*b))).unwrap_or(low);
        let mode = roots::mode(|t| density.ln_at(t), start, size).map_err(failed)?;
        let width = mode.width();
        let heavy = bounds.level <= HEAVY;
        let mut highest = fm::exp(mode.ln_height);
        let mut walk = |direction: f64, beyond: f64| {
            let (mut edges, mut step, mut t, mut low) = (Vec::new(), 1.8 * width, mode.x, 0);
            for _ in 0..400 {
                t += direction * step;
                let here = density.at(t);
                highest = highest.max(here);
                edges.push((t, here));
                // Where second moments hang on it, what is left is weighed by the distance.
                let far = if heavy { ((t - mode.x) / width).abs() } else { 1.0 };
                low = if here * (far * far * far) < 1e-30 * highest { low + 1 } else { 0 };
                if low >= 2 && direction * (t - beyond) > 0.0 {
                    break;
                }
                step *= 1.6;
            }
            edges
        };
        let (down, up) = (walk(-1.0, low - 3.0 * size), walk(1.0, high + 3.0 * size));
        let top = highest;
        let mut reach = Reach { edges: Vec::new(), middle: vec![mode.x], tails: Vec::new() };
        for side in [&down, &up] {
            reach.middle.extend(side.iter().find(|(_, d)| *d < 0.4 * top).map(|(t, _)| *t));
            reach.tails.extend(side.iter().find(|(_, d)| *d < 1e-5 * top).map(|(t, _)| *t));
            reach.tails.extend(side.iter().rfind(|(_, d)| *d > 1e-13 * top).map(|(t, _)| *t));
        }
        reach.edges.extend(down.iter().rev().map(|(t, _)| *t));
        reach.edges.push(mode.x);
        reach.edges.extend(up.iter().map(|(t, _)| *t));
        Ok(reach)
    }

    fn measure(&self, density: &Density<'_>) -> Vec<f64> {
        self.middle.iter().chain(&self.tails).map(|t| density.at(*t)).collect()
    }
}
