//! Sums over the plane of spreads for what needs σ more finely than the pieces hold it: a percentile's
//! law turns over within a fraction of σ's own width, and a share between two limits has a kink in σ.

use super::grid::{self, MOST, Place};
use super::law::Law;
use super::marginal::Weighted;
use super::plane::{Coordinate, Node, Plane, Sd};
use super::solve::TrueLevel;
use super::weighing::floor;
use super::{Piece, Posterior, solve};
use crate::math::fm;
use crate::quantity::{Absent, Figure};
use std::f64::consts::FRAC_1_SQRT_2;

/// Two grids must agree to this, relative.
const AGREED: f64 = 2e-11;
/// Differences of chances that nothing printed or promised shows (methods §7: 1e−21).
const UNSEEN: f64 = 1e-22;
const ROUNDS: usize = 14;
/// A line's step along σ is at most so many sds of what it makes of σ. Trapezoid errors go with
/// exp(−2π²/step²), 1e−6 of what a line so narrow adds.
const NARROW: f64 = 1.2;
/// The first grid's steps, in widths.
const FIRST: f64 = 0.55;
/// Lighter nodes (ln) of the many on such grids are not seen: 1e-26.
const FINER_FLOOR: f64 = 60.0;
/// Lines so much (ln) lighter than the heaviest keep their steps: they cannot be seen at 1e−17 of the whole.
const LIGHT: f64 = 38.0;

/// Pieces of a finer grid and, with a bias, their true levels.
#[derive(Debug, Default)]
pub(super) struct Finer {
    pub pieces: Vec<Piece>,
    pub levels: Vec<TrueLevel>,
}

/// Makes a law from pieces and their true levels.
type LawOf<'a> = dyn Fn(&[Piece], &[TrueLevel]) -> Result<Law, Absent> + 'a;

impl Posterior {
    /// Whether σ is unknown in some part, so that sums over it depend on the grid.
    pub(super) fn has_unknown_sd(&self) -> bool {
        self.inner.parts.iter().any(|part| matches!(part.plane.sd, Sd::Unknown(_)))
    }

    /// A law whose centre moves with σ by `shift`, its variance being `factor`² times the level's and more: on
    /// finer and finer grids until two agree to 2e−11 in the middle and in both tails; `law` makes it from
    /// pieces and, with a bias, their true levels.
    pub(super) fn settled(
        &self,
        first: Law,
        factor: f64,
        shift: &dyn Fn(f64) -> (f64, f64),
        law: &LawOf<'_>,
    ) -> Result<Law, Absent> {
        self.settled_on(first, factor, shift, law).map(|(law, _)| law)
    }

    /// The same with the grid on which the law settled.
    fn settled_on(
        &self,
        first: Law,
        factor: f64,
        shift: &dyn Fn(f64) -> (f64, f64),
        law: &LawOf<'_>,
    ) -> Result<(Law, Finer), Absent> {
        let (low, high) = first.central(1.0 - 2e-6)?;
        let (near_low, near_high) = first.central(0.9)?;
        let middle = first.median()?;
        let measure =
            |law: &Law| [law.cdf(low), law.cdf(near_low), law.cdf(middle), law.sf(near_high), law.sf(high)];
        let mut before: Option<[f64; 5]> = None;
        let mut finer = 1.0;
        for round in 0..ROUNDS {
            let grid = self.made_finer(finer, if round % 2 == 0 { 0.29 } else { 0.79 }, factor, shift)?;
            let made = law(&grid.pieces, &grid.levels)?;
            let now = measure(&made);
            if let Some(before) = before {
                let worst = before.iter().zip(now).map(|(a, b)| ((a - b) / b).abs()).fold(0.0, f64::max);
                if worst <= AGREED {
                    return Ok((made, grid));
                }
            }
            before = Some(now);
            finer *= if round == 0 { 0.9 } else { 0.75 };
        }
        Err(Absent::failed("a law that moves with the within sd did not reach its promised accuracy"))
    }

    /// What `g` makes of pieces fine enough for sums over θ + z σ with z near `z`: the pieces as held where
    /// σ is known, else those of a grid on which the law of θ + z σ has settled.
    pub fn on_pieces_for<R>(&self, z: f64, g: impl FnOnce(&[Piece]) -> R) -> Result<R, Absent> {
        if !self.has_unknown_sd() {
            return Ok(g(self.pieces()?));
        }
        let law = |pieces: &[Piece], _: &[TrueLevel]| {
            let parts =
                pieces.iter().map(|p| (p.weight, p.level_apart + z * p.reading_sd, p.level_var)).collect();
            super::mixture(parts, self.inner.bounds.level.min(self.inner.bounds.sd), "a percentile")
        };
        let first = {
            let nodes = self.inner.nodes()?;
            law(&nodes.pieces, &nodes.true_levels)?
        };
        self.settled_on(first, 1.0, &|sigma| (z * sigma, 0.0), &law).map(|(_, grid)| g(&grid.pieces))
    }

    /// The pieces (and with a bias their true levels) again, on a grid that begins elsewhere, its steps shorter
    /// by `finer`; lines on which the law's centre runs fast along σ have still shorter ones.
    fn made_finer(
        &self,
        finer: f64,
        offset: f64,
        factor: f64,
        shift: &dyn Fn(f64) -> (f64, f64),
    ) -> Result<Finer, Absent> {
        let mut made = Finer::default();
        let units = &self.inner.units;
        let bias_sd = units.sd_in(self.inner.bias_sd);
        for Weighted { part, weighed, share } in self.inner.weighted()? {
            let f = part.plane.nodes();
            let frame = &weighed.frame;
            let last = frame.dims.saturating_sub(1);
            let step = finer * FIRST;
            let parts = |node: &Node| {
                let Sd::Unknown(axis) = &part.plane.sd else { return 1 };
                let mut most = 0.0f64;
                // Far out on the line σ runs faster, and there the tails of the law are made.
                for widths in [-4.0, -2.0, 0.0, 2.0, 4.0, 6.0] {
                    let mut place = node.place;
                    place[last] += widths * frame.width[last];
                    let there = f(&place);
                    if there.ln_weight.is_nan() || there.ln_weight < frame.ln_top - LIGHT {
                        continue;
                    }
                    let moved = there.sigma * axis.slope(place[last]) * step * frame.width[last];
                    let (up, down) = (units.sd_out(there.sigma + moved), units.sd_out(there.sigma));
                    let run = (shift(up).0 - shift(down).0).abs();
                    let sd = (factor * factor * units.square_out(there.var) + shift(down).1).sqrt();
                    most = most.max(run / (NARROW * finer * sd));
                }
                if most > 1.0 { most.ceil() as usize } else { 1 }
            };
            let nodes = grid::sweep_finely(&f, frame, step, offset, FINER_FLOOR, &parts)?;
            let (sum, top) = whole(&nodes);
            for node in &nodes {
                let weight = share * fm::exp(node.ln_weight - top) / sum;
                if weight < solve::NEGLIGIBLE {
                    continue;
                }
                made.pieces.push(solve::piece(node, weight, units));
                if bias_sd > 0.0 {
                    made.levels.push(solve::true_level(node, part, bias_sd, units));
                }
            }
        }
        Ok(made)
    }

    /// E g(piece) over the plane, for a g that is smooth in σ but for a kink (of the kind of a square
    /// root) at σ = `kink`: the line of ln σ is cut there, and both halves are mapped to whole lines.
    ///
    /// An error where two grids agree neither to 2e−11 (relative to E|g|) nor to 1e−22.
    pub fn expect_with_kink(&self, kink: f64, g: &dyn Fn(&Piece) -> f64) -> Figure {
        if self.is_marked() {
            return Err(Absent::because(
                "a share between or outside two limits is not served with marked readings",
            ));
        }
        let mut before: Option<f64> = None;
        let mut factor = 1.0;
        for _ in 0..ROUNDS {
            let (mut value, mut size) = (0.0, 0.0);
            for Weighted { part, weighed, share } in self.inner.weighted()? {
                let (sum, absolute) = self.sum_of_part(&part.plane, weighed, kink, g, factor)?;
                value += share * sum;
                size += share * absolute;
            }
            if !value.is_finite() {
                return Err(Absent::failed("an expectation over the spreads is not a number"));
            }
            if let Some(before) = before
                && (value - before).abs() <= (AGREED * size).max(UNSEEN)
            {
                return Ok(value);
            }
            before = Some(value);
            factor *= FRAC_1_SQRT_2;
        }
        Err(Absent::failed("an expectation over the spreads did not reach its promised accuracy"))
    }

    /// E g and E |g| within one part.
    fn sum_of_part(
        &self,
        plane: &Plane,
        weighed: &super::weighing::Weighed,
        kink: f64,
        g: &dyn Fn(&Piece) -> f64,
        factor: f64,
    ) -> Result<(f64, f64), Absent> {
        let units = &self.inner.units;
        let kink = units.sd_in(kink);
        let at = plane.coordinates().iter().position(|c| *c == Coordinate::Sd);
        let (Sd::Unknown(axis), Some(d)) = (plane.sd, at) else {
            return Ok(summed(&weighed.nodes, 0.0, |node| g(&solve::piece(node, 1.0, units))).ratio());
        };
        let (least, most) = weighed.nodes.iter().fold((f64::INFINITY, 0.0f64), |(least, most), node| {
            (least.min(node.sigma), most.max(node.sigma))
        });
        if !(kink > least && kink < most) {
            let f = plane.nodes();
            let nodes =
                grid::sweep(&f, &weighed.frame, weighed.factor * factor, 0.19, floor(weighed.frame.dims))?;
            return Ok(summed(&nodes, 0.0, |node| g(&solve::piece(node, 1.0, units))).ratio());
        }
        let cut = axis.coordinate(kink);
        let node_at = plane.nodes();
        let mut halves = Vec::with_capacity(2);
        for sign in [-1.0, 1.0] {
            // u = cut ± ln(1 + e^w): near the cut as e^w, far from it as w.
            let f = |place: &Place| {
                let w = place[d];
                let apart = if w > 30.0 { w } else { fm::ln_1p(fm::exp(w)) };
                let mut moved = *place;
                moved[d] = cut + sign * apart;
                let mut node = node_at(&moved);
                node.ln_weight += if w > 30.0 { 0.0 } else { w - apart };
                node
            };
            let mut start: Place = [0.0; MOST];
            start[..weighed.frame.dims].copy_from_slice(&weighed.frame.centre[..weighed.frame.dims]);
            let apart = sign * (weighed.frame.centre[d] - cut);
            start[d] = if apart > 1e-3 { fm::ln(fm::exp_m1(apart.min(30.0))) } else { -1.0 };
            let frame = grid::frame(&f, start, weighed.frame.dims)?;
            let nodes =
                grid::sweep(&f, &frame, 0.7 * weighed.factor * factor, 0.37, floor(weighed.frame.dims))?;
            let volume = frame.ln_volume(0.7 * weighed.factor * factor);
            halves.push(summed(&nodes, volume, |node| g(&solve::piece(node, 1.0, units))));
        }
        let top = halves.iter().map(|half| half.ln_scale).fold(f64::NEG_INFINITY, f64::max);
        let mut all = Summed { ln_scale: top, whole: 0.0, sum: 0.0, size: 0.0 };
        for half in halves {
            let scale = fm::exp(half.ln_scale - top);
            all.whole += scale * half.whole;
            all.sum += scale * half.sum;
            all.size += scale * half.size;
        }
        Ok(all.ratio())
    }
}

/// Sums over nodes, in units of exp(ln_scale).
struct Summed {
    ln_scale: f64,
    whole: f64,
    sum: f64,
    size: f64,
}

impl Summed {
    fn ratio(&self) -> (f64, f64) {
        (self.sum / self.whole, self.size / self.whole)
    }
}

fn summed(nodes: &[Node], ln_volume: f64, g: impl Fn(&Node) -> f64) -> Summed {
    let top = nodes.iter().map(|node| node.ln_weight).fold(f64::NEG_INFINITY, f64::max);
    let mut all = Summed { ln_scale: top + ln_volume, whole: 0.0, sum: 0.0, size: 0.0 };
    for node in nodes {
        let weight = fm::exp(node.ln_weight - top);
        let value = weight * g(node);
        all.whole += weight;
        all.sum += value;
        all.size += value.abs();
    }
    all
}

fn whole(nodes: &[Node]) -> (f64, f64) {
    let top = nodes.iter().map(|node| node.ln_weight).fold(f64::NEG_INFINITY, f64::max);
    (nodes.iter().map(|node| fm::exp(node.ln_weight - top)).sum(), top)
}
