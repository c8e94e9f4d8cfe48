//! A mixture of normal distributions: the shape of every posterior and prediction.

use super::error::{MathError, Result, inside_unit};
use super::fm;
use super::normal;
use super::roots::{Tolerance, newton_increasing, solve};
use std::collections::BTreeMap;

#[derive(Debug, Clone, Copy, PartialEq)]
struct Part {
    weight: f64,
    mean: f64,
    sd: f64,
}

/// Σ wₖ N(mₖ, sₖ²), with sₖ = 0 a point mass.
///
/// Parts are sorted by weight, heaviest first, then mean, then sd, so the order in which they are given changes no bit,
/// and a sum ends where the parts that are left cannot change its last digit. Tails are sums of positive terms and keep
/// their relative accuracy (about 1e−14 down to 1e−300); quantiles are solved on the logarithm of the smaller tail to
/// 1e−13 of their size or of the mixture's spread.
#[derive(Debug, Clone, PartialEq)]
pub struct NormalMixture {
    parts: Vec<Part>,
    /// Weight of every [`BLOCK`] parts and all after them.
    rest: Vec<f64>,
    /// Parts of like sd put together, with their weight, mean and variance: enough to begin a search with.
    rough: Vec<Part>,
    /// The highest density that any part has at its own mean.
    peak: f64,
    mean: f64,
    /// Average sd of the parts and average distance of their means: a width that exists for any weights.
    width: f64,
}

/// Closeness of a quantile, in widths: as good as the numbers allow, and enough to compare lengths in a scan.
const EXACT: f64 = 1e-14;
const ROUGH: f64 = 1e-5;
/// What may be left out of a sum, relative: nothing that shows, and enough for a rough quantile.
const UNSEEN: f64 = 1e-17;
const COARSE: f64 = 1e-7;
/// So many parts are added between two looks at what is left.
const BLOCK: usize = 16;

/// Parts whose sds share an eighth of an octave, as one with their weight, mean and variance.
fn put_together(parts: &[Part]) -> Vec<Part> {
    let mut groups: BTreeMap<u64, (f64, f64, f64)> = BTreeMap::new();
    let centre = parts.first().map_or(0.0, |p| p.mean);
    for p in parts.iter().filter(|p| p.weight > UNSEEN && p.sd > 0.0) {
        let (weight, first, second) = groups.entry(p.sd.to_bits() >> 49).or_default();
        let away = p.mean - centre;
        *weight += p.weight;
        *first += p.weight * away;
        *second += p.weight * (away * away + p.sd * p.sd);
    }
    let made = groups.into_values().map(|(weight, first, second)| {
        let away = first / weight;
        Part { weight, mean: centre + away, sd: (second / weight - away * away).max(0.0).sqrt() }
    });
    made.filter(|p| p.sd > 0.0).collect()
}

/// One tail and the density at one place.
struct Shape {
    tail: f64,
    density: f64,
}

impl NormalMixture {
    /// From (weight, mean, sd) triples.
    ///
    /// Weights must be finite and not negative with a sum above 0 (they are divided by it), means finite, sds finite and
    /// not negative; otherwise an error. Parts of weight 0 are dropped.
    pub fn new(parts: Vec<(f64, f64, f64)>) -> Result<Self> {
        let mut kept = Vec::with_capacity(parts.len());
        for (weight, mean, sd) in parts {
            let fine = weight.is_finite() && weight >= 0.0 && mean.is_finite() && sd.is_finite() && sd >= 0.0;
            if !fine {
                return Err(MathError::new(format!(
                    "mixture: a part has weight {weight}, mean {mean}, sd {sd}; \
                     all must be finite, weight and sd not negative"
                )));
            }
            if weight > 0.0 {
                kept.push(Part { weight, mean, sd });
            }
        }
        kept.sort_unstable_by(|a, b| {
            b.weight.total_cmp(&a.weight).then(a.mean.total_cmp(&b.mean)).then(a.sd.total_cmp(&b.sd))
        });
        let total = add_up(kept.iter().map(|p| p.weight));
        if !(total > 0.0 && total.is_finite()) {
            return Err(MathError::new(format!(
                "mixture: the weights add to {total}, not to a number above 0"
            )));
        }
        for part in &mut kept {
            part.weight /= total;
        }
        let mean = add_up(kept.iter().map(|p| p.weight * p.mean));
        let width = add_up(kept.iter().map(|p| p.weight * (p.sd + (p.mean - mean).abs())));
        if !mean.is_finite() || !width.is_finite() {
            return Err(MathError::new("mixture: means or sds too large"));
        }
        let mut rest: Vec<f64> = Vec::with_capacity(kept.len().div_ceil(BLOCK));
        for block in kept.chunks(BLOCK).rev() {
            let after = rest.last().copied().unwrap_or(0.0);
            rest.push(block.iter().rev().fold(after, |sum, part| sum + part.weight));
        }
        rest.reverse();
        let narrowest = kept.iter().map(|p| p.sd).filter(|sd| *sd > 0.0).fold(f64::INFINITY, f64::min);
        let rough = put_together(&kept);
        Ok(Self { parts: kept, rest, rough, peak: 0.4 / narrowest, mean, width })
    }

    /// One normal distribution.
    pub fn single(mean: f64, sd: f64) -> Result<Self> {
        Self::new(vec![(1.0, mean, sd)])
    }

    /// The parts as (weight, mean, sd), heaviest first, weights adding to 1.
    pub fn parts(&self) -> impl ExactSizeIterator<Item = (f64, f64, f64)> + '_ {
        self.parts.iter().map(|p| (p.weight, p.mean, p.sd))
    }

    /// The chance of a value at or below t.
    pub fn cdf(&self, t: f64) -> f64 {
        self.sum(1.0, |part| part.lower(t)).min(1.0)
    }

    /// The chance of a value above t.
    pub fn sf(&self, t: f64) -> f64 {
        self.sum(1.0, |part| part.upper(t)).min(1.0)
    }

    /// ln of the chance at or below t, also where the chance itself is too small to be written.
    pub fn ln_cdf(&self, t: f64) -> f64 {
        let plain = self.cdf(t);
        if plain > 0.5 {
            fm::ln_1p(-self.sf(t))
        } else if plain > 1e-290 {
            fm::ln(plain)
        } else {
            self.ln_tail(|part| {
                if part.sd > 0.0 { normal::ln_cdf((t - part.mean) / part.sd) } else { fm::ln(part.lower(t)) }
            })
        }
    }

    /// ln of the chance above t, also where the chance itself is too small to be written.
    pub fn ln_sf(&self, t: f64) -> f64 {
        let plain = self.sf(t);
        if plain > 0.5 {
            fm::ln_1p(-self.cdf(t))
        } else if plain > 1e-290 {
            fm::ln(plain)
        } else {
            self.ln_tail(|part| {
                if part.sd > 0.0 { normal::ln_sf((t - part.mean) / part.sd) } else { fm::ln(part.upper(t)) }
            })
        }
    }

    /// The density at t. Point masses have none and are left out.
    pub fn pdf(&self, t: f64) -> f64 {
        self.sum(self.peak, |part| {
            if part.sd > 0.0 { normal::pdf((t - part.mean) / part.sd) / part.sd } else { 0.0 }
        })
    }

    /// ln of the density at t.
    pub fn ln_pdf(&self, t: f64) -> f64 {
        let plain = self.pdf(t);
        if plain > 1e-290 {
            return fm::ln(plain);
        }
        self.ln_tail(|part| {
            if part.sd > 0.0 {
                normal::ln_pdf((t - part.mean) / part.sd) - fm::ln(part.sd)
            } else {
                f64::NEG_INFINITY
            }
        })
    }

    /// The mean Σ wₖ mₖ. (Whether the distribution behind the nodes has a mean is for the caller to know.)
    pub fn mean(&self) -> f64 {
        self.mean
    }

    /// The variance Σ wₖ (sₖ² + (mₖ − mean)²).
    pub fn variance(&self) -> f64 {
        add_up(
            self.parts.iter().map(|p| p.weight * (p.sd * p.sd + (p.mean - self.mean) * (p.mean - self.mean))),
        )
    }

    /// The t with chance p at or below it, p strictly between 0 and 1. At a point mass: its place.
    pub fn quantile(&self, p: f64) -> Result<f64> {
        inside_unit("mixture quantile", "p", p)?;
        // 1 − p is exact for p from ½ up.
        if p <= 0.5 {
            self.solve_tail(p, true, None, EXACT)
        } else {
            self.solve_tail(1.0 - p, false, None, EXACT)
        }
    }

    /// The t with chance q above it, q strictly between 0 and 1.
    pub fn upper_quantile(&self, q: f64) -> Result<f64> {
        inside_unit("mixture upper quantile", "q", q)?;
        if q <= 0.5 {
            self.solve_tail(q, false, None, EXACT)
        } else {
            self.solve_tail(1.0 - q, true, None, EXACT)
        }
    }

    /// The shortest single interval that holds `prob`, 0 < prob < 1.
    ///
    /// All divisions of the two tails are scanned, so with several peaks the shortest is found, not the nearest; then the
    /// ends are solved from equal densities, to 1e−11 of the spread. Error: a solver's cap.
    pub fn shortest(&self, prob: f64) -> Result<(f64, f64)> {
        self.shortest_by(prob, false)
    }

    /// For a mixture of logarithms: the interval of ln x whose ends make the shortest interval of x itself.
    ///
    /// The ends are handed back as logarithms; the interval on the printed scale is (exp(lo), exp(hi)).
    pub fn shortest_exp(&self, prob: f64) -> Result<(f64, f64)> {
        self.shortest_by(prob, true)
    }

    /// Σ weight · term, every term in 0..=`most`.
    fn sum(&self, most: f64, mut term: impl FnMut(&Part) -> f64) -> f64 {
        let mut total = 0.0;
        let mut lost = 0.0;
        for (block, rest) in self.parts.chunks(BLOCK).zip(&self.rest) {
            if rest * most < UNSEEN * total {
                break;
            }
            for part in block {
                // Positive terms: the part lost in rounding is known exactly (Neumaier 1974).
                let value = part.weight * term(part);
                let next = total + value;
                lost += if total >= value { (total - next) + value } else { (value - next) + total };
                total = next;
            }
        }
        total + lost
    }

    fn ln_tail(&self, mut ln_term: impl FnMut(&Part) -> f64) -> f64 {
        let terms: Vec<f64> = self.parts.iter().map(|p| fm::ln(p.weight) + ln_term(p)).collect();
        fm::ln_sum_exp(&terms)
    }

    /// Without the parts that make less than `left_out` of the tail.
    fn shape(&self, t: f64, lower: bool, left_out: f64) -> Shape {
        let (mut tail, mut density) = (0.0, 0.0);
        for (block, rest) in self.parts.chunks(BLOCK).zip(&self.rest) {
            if *rest < left_out * tail {
                break;
            }
            for part in block {
                if part.sd > 0.0 {
                    let z = (t - part.mean) / part.sd;
                    let (below, slope) = normal::cdf_and_pdf(if lower { z } else { -z });
                    tail += part.weight * below;
                    density += part.weight * slope / part.sd;
                } else {
                    tail += part.weight * if lower { part.lower(t) } else { part.upper(t) };
                }
            }
        }
        Shape { tail, density }
    }

    /// How far the logarithm of the tail lies from the one wanted, rising with t, and its slope.
    fn gap(&self, t: f64, lower: bool, ln_wanted: f64, left_out: f64) -> (f64, f64) {
        let shape = self.shape(t, lower, left_out);
        if shape.tail <= 1e-290 {
            let ln = if lower { self.ln_cdf(t) } else { self.ln_sf(t) };
            let slope = fm::exp(self.ln_pdf(t) - ln);
            return if lower { (ln - ln_wanted, slope) } else { (ln_wanted - ln, slope) };
        }
        let ln = fm::ln(shape.tail);
        (if lower { ln - ln_wanted } else { ln_wanted - ln }, shape.density / shape.tail)
    }

    /// The t whose lower (or upper) tail is `wanted`.
    fn solve_tail(&self, wanted: f64, lower: bool, start: Option<f64>, closeness: f64) -> Result<f64> {
        let z = normal::quantile(wanted)?;
        let side = if lower { z } else { -z };
        // The quantile of a mixture lies between the least and the greatest quantile of its parts.
        let (mut lo, mut hi) = (f64::INFINITY, f64::NEG_INFINITY);
        for part in &self.parts {
            let own = part.mean + part.sd * side;
            (lo, hi) = (lo.min(own), hi.max(own));
        }
        if hi - lo <= 1e-15 * lo.abs().max(hi.abs()) {
            return Ok(0.5 * (lo + hi));
        }
        // The ends may be off by their own rounding.
        let margin = 1e-12 * (hi - lo);
        let ln_wanted = fm::ln(wanted);
        let guess = start.unwrap_or(self.mean + self.width * side);
        let (lo, hi) = (lo - margin, hi + margin);
        let newton = |guess: f64, closeness: f64, left_out: f64| {
            let tolerance = Tolerance { relative: 1e-15, absolute: closeness * self.width, cap: 500 };
            newton_increasing(|t| self.gap(t, lower, ln_wanted, left_out), guess, lo, hi, tolerance)
                .map_err(|e| e.within("mixture quantile"))
        };
        if closeness > EXACT {
            return newton(guess, closeness, COARSE);
        }
        if self.parts.len() <= BLOCK {
            return newton(guess, closeness, UNSEEN);
        }
        // Parts put together lead near; from there every step over all of them doubles the digits.
        let near = match &self.rough[..] {
            [] => guess,
            rough => {
                let rough = Self {
                    parts: rough.to_vec(),
                    rest: vec![1.0; rough.len().div_ceil(BLOCK)],
                    rough: Vec::new(),
                    ..*self
                };
                let tolerance = Tolerance { relative: 1e-15, absolute: ROUGH * self.width, cap: 500 };
                newton_increasing(|t| rough.gap(t, lower, ln_wanted, 0.0), guess, lo, hi, tolerance)
                    .unwrap_or(guess)
            }
        };
        let (mut t, mut last) = (near, 0.1 * self.width);
        for _ in 0..6 {
            let (gap, slope) = self.gap(t, lower, ln_wanted, UNSEEN);
            let next = t - gap / slope;
            let moved = (next - t).abs();
            if moved <= 1e-8 * self.width {
                return Ok(next);
            }
            if moved.is_nan() || moved > 0.1 * last || next < lo || next > hi {
                break;
            }
            (t, last) = (next, moved);
        }
        newton(near, closeness, UNSEEN)
    }

    fn shortest_by(&self, prob: f64, exp_scale: bool) -> Result<(f64, f64)> {
        inside_unit("shortest interval", "prob", prob)?;
        let outside = 1.0 - prob;
        // The length (or its logarithm) that is to be least.
        let length =
            |(lo, hi): (f64, f64)| if exp_scale { hi + fm::ln(-fm::exp_m1(lo - hi)) } else { hi - lo };
        let mut scanned: Vec<(f64, (f64, f64))> = Vec::with_capacity(48);
        let inner = (1..24).map(|i| f64::from(i) / 24.0);
        for share in [0.003, 0.01, 0.02].into_iter().chain(inner).chain([0.98, 0.99, 0.997]) {
            let ends = self.ends(outside, share, scanned.last().map(|s| s.1), ROUGH)?;
            scanned.push((share, ends));
        }
        // A least length at an edge of the scan: look closer to that edge.
        if length(scanned[0].1) < length(scanned[1].1) {
            for share in [1e-3, 1e-4, 1e-5, 1e-6, 1e-7, 1e-9, 1e-12] {
                let ends = self.ends(outside, share, Some(scanned[0].1), ROUGH)?;
                scanned.insert(0, (share, ends));
            }
        }
        let last = scanned.len() - 1;
        if length(scanned[last].1) < length(scanned[last - 1].1) {
            for rest in [1e-3, 1e-4, 1e-5, 1e-6, 1e-7, 1e-9, 1e-12] {
                let ends = self.ends(outside, 1.0 - rest, scanned.last().map(|s| s.1), ROUGH)?;
                scanned.push((1.0 - rest, ends));
            }
        }
        let mut best: Option<(f64, (f64, f64))> = None;
        for (i, (share, found)) in scanned.iter().enumerate() {
            let here = length(*found);
            let left = if i > 0 { length(scanned[i - 1].1) } else { f64::INFINITY };
            let right = scanned.get(i + 1).map_or(f64::INFINITY, |s| length(s.1));
            if here <= left && here <= right {
                let from = scanned[i.saturating_sub(1)];
                let to = scanned[(i + 1).min(scanned.len() - 1)];
                let refined = match self.refine_shortest(outside, exp_scale, from.1, to.1, *found)? {
                    Some(refined) => refined,
                    // Point masses or an edge: the scanned division stands.
                    None => self.ends(outside, *share, Some(*found), EXACT)?,
                };
                let size = length(refined);
                if best.is_none_or(|(least, _)| size < least) {
                    best = Some((size, refined));
                }
            }
        }
        best.map(|b| b.1).ok_or_else(|| MathError::new("shortest interval: not found"))
    }

    /// The ends that leave `share` of the outside mass below and the rest above.
    fn ends(
        &self,
        outside: f64,
        share: f64,
        guess: Option<(f64, f64)>,
        closeness: f64,
    ) -> Result<(f64, f64)> {
        let (below, above) = (outside * share, outside * (1.0 - share));
        let lo = if below <= 0.5 {
            self.solve_tail(below, true, guess.map(|g| g.0), closeness)?
        } else {
            self.quantile(below)?
        };
        let hi = if above <= 0.5 {
            self.solve_tail(above, false, guess.map(|g| g.1), closeness)?
        } else {
            self.upper_quantile(above)?
        };
        Ok((lo, hi))
    }

    /// The ends with equal (transformed) densities between two scanned divisions of the tails.
    fn refine_shortest(
        &self,
        outside: f64,
        exp_scale: bool,
        from: (f64, f64),
        to: (f64, f64),
        scanned: (f64, f64),
    ) -> Result<Option<(f64, f64)>> {
        let upper_end = |lo: f64, guess: f64| -> Result<f64> {
            let above = outside - self.cdf(lo);
            if above <= 0.0 {
                return Err(MathError::new("shortest interval: no upper end"));
            }
            if above <= 0.5 {
                self.solve_tail(above, false, Some(guess), EXACT)
            } else {
                self.upper_quantile(above)
            }
        };
        let slant = |t: f64| self.ln_pdf(t) - if exp_scale { t } else { 0.0 };
        let mut failure = None;
        let mut guess = scanned.1;
        let mut balance = |lo: f64| match upper_end(lo, guess) {
            Ok(hi) => {
                guess = hi;
                slant(lo) - slant(hi)
            }
            Err(e) => {
                failure = Some(e);
                f64::NAN
            }
        };
        let (lo, hi) = (from.0, to.0);
        let (first, last) = (balance(lo), balance(hi));
        let spread_tolerance = Tolerance { relative: 1e-15, absolute: 1e-13 * self.width, cap: 300 };
        // Too short on the left (density lower there): length falls with lo; at the other end it rises.
        if first.is_finite() && last.is_finite() && first < 0.0 && last > 0.0 {
            let found = solve(&mut balance, lo, hi, spread_tolerance);
            if let Some(e) = failure {
                return Err(e);
            }
            let lo = found?;
            return Ok(Some((lo, upper_end(lo, scanned.1)?)));
        }
        Ok(None)
    }
}

impl Part {
    #[inline]
    fn lower(&self, t: f64) -> f64 {
        if self.sd > 0.0 {
            normal::cdf((t - self.mean) / self.sd)
        } else if t >= self.mean {
            1.0
        } else {
            0.0
        }
    }

    #[inline]
    fn upper(&self, t: f64) -> f64 {
        if self.sd > 0.0 {
            normal::sf((t - self.mean) / self.sd)
        } else if t < self.mean {
            1.0
        } else {
            0.0
        }
    }
}

/// A compensated sum (Neumaier 1974) in the order given.
fn add_up(values: impl Iterator<Item = f64>) -> f64 {
    let (mut total, mut lost) = (0.0_f64, 0.0);
    for value in values {
        let next = total + value;
        lost += if total.abs() >= value.abs() { (total - next) + value } else { (value - next) + total };
        total = next;
    }
    total + lost
}

#[cfg(test)]
mod tests {
    use super::*;

    fn three() -> NormalMixture {
        NormalMixture::new(vec![(0.5, 1.0, 2.0), (1.0, -3.0, 0.5), (0.5, 10.0, 1.0)]).unwrap()
    }

    #[test]
    fn one_part_is_the_normal_distribution() {
        let m = NormalMixture::single(5.0, 2.0).unwrap();
        for p in [1e-300, 1e-12, 0.025, 0.5, 0.8] {
            let q = m.quantile(p).unwrap();
            assert!((q - (5.0 + 2.0 * normal::quantile(p).unwrap())).abs() < 1e-13 * q.abs().max(2.0));
            let q = m.upper_quantile(p).unwrap();
            assert!((q - (5.0 - 2.0 * normal::quantile(p).unwrap())).abs() < 1e-13 * q.abs().max(2.0));
        }
        assert_eq!((m.mean(), m.variance()), (5.0, 4.0));
        let (lo, hi) = m.shortest(0.95).unwrap();
        let half = 2.0 * normal::upper_quantile(0.025).unwrap();
        assert!((lo - (5.0 - half)).abs() < 1e-11 && (hi - (5.0 + half)).abs() < 1e-11, "{lo} {hi}");
    }

    #[test]
    fn tails_quantiles_and_moments_of_three_parts() {
        let m = three();
        // Mean ¼·1 + ½·(−3) + ¼·10 = 1.25; E x² = ¼·5 + ½·9.25 + ¼·101 = 31.125.
        assert!((m.mean() - 1.25).abs() < 1e-15);
        assert!((m.variance() - (31.125 - 1.5625)).abs() < 1e-13);
        for t in [-30.0, -4.0, -3.0, 0.0, 5.0, 12.0, 40.0] {
            assert!((m.cdf(t) + m.sf(t) - 1.0).abs() < 1e-15);
            let ln = fm::ln(m.cdf(t));
            assert!((m.ln_cdf(t) - ln).abs() < 1e-13 * (1.0 + ln.abs()));
        }
        for p in [1e-300, 1e-100, 1e-12, 1e-4, 0.3, 0.49, 0.5, 0.62, 0.75, 0.9, 1.0 - 1e-10] {
            let q = m.quantile(p).unwrap();
            if p < 0.5 {
                assert!((m.cdf(q) / p - 1.0).abs() < 1e-11, "{p}: {q} {}", m.cdf(q));
            } else {
                assert!((m.sf(q) / (1.0 - p) - 1.0).abs() < 1e-12, "{p}");
            }
            let u = m.upper_quantile(p).unwrap();
            assert!((m.sf(u) - p).abs() <= 1e-11 * p, "{p}: {u}");
        }
        assert!(m.ln_cdf(-1e6) < -1e10 && m.ln_sf(1e6) < -1e10 && m.ln_pdf(1e6).is_finite());
    }

    #[test]
    fn nodes_of_the_sd_give_student() {
        // x | σ ~ N(0, σ²), p(σ²) scaled inverse chi-square with ν: x ~ t_ν. The nodes against the closed form.
        use crate::math::quadrature::{LineOptions, line};
        use crate::math::student;
        for df in [2.0, 5.0, 9.0, 40.0] {
            // In u = ln σ: σ^{−ν} exp(−ν/2σ²).
            let ln_f = |u: f64| -df * u - 0.5 * df * fm::exp(-2.0 * u);
            let far = student::upper_quantile(1e-12, df).unwrap();
            let tail = |u: f64| normal::sf(far * fm::exp(-u));
            let opts = LineOptions { functionals: vec![&tail], ..LineOptions::default() };
            let nodes = line(ln_f, 0.0, 0.5, &opts).unwrap().nodes;
            let m =
                NormalMixture::new(nodes.iter().map(|n| (n.weight(), 0.0, fm::exp(n.x))).collect()).unwrap();
            for p in [1e-12, 1e-9, 1e-6, 1e-3, 0.025, 0.3] {
                let t = student::upper_quantile(p, df).unwrap();
                assert!((m.sf(t) / p - 1.0).abs() < 1e-9, "{df} {p}: {}", m.sf(t) / p - 1.0);
                assert!((m.upper_quantile(p).unwrap() / t - 1.0).abs() < 1e-10, "{df} {p}");
            }
        }
    }

    #[test]
    fn order_of_parts_changes_no_bit() {
        let parts = vec![(0.2, 1.0, 2.0), (0.3, -3.0, 0.5), (0.1, 10.0, 1.0), (0.4, 1.0, 0.3)];
        let mut turned = parts.clone();
        turned.reverse();
        assert_eq!(NormalMixture::new(parts).unwrap(), NormalMixture::new(turned).unwrap());
    }

    #[test]
    fn point_masses() {
        let m = NormalMixture::new(vec![(0.5, 2.0, 0.0), (0.5, 0.0, 1.0)]).unwrap();
        assert!((m.cdf(2.0) - (0.5 + 0.5 * normal::cdf(2.0))).abs() < 1e-15);
        assert!((m.sf(1.999_999) - (0.5 + 0.5 * normal::sf(1.999_999))).abs() < 1e-15);
        assert!((m.quantile(0.7).unwrap() - 2.0).abs() < 1e-12);
        let point = NormalMixture::single(7.0, 0.0).unwrap();
        assert_eq!(point.quantile(0.3).unwrap(), 7.0);
        assert_eq!((point.cdf(7.0), point.cdf(6.9), point.sf(7.0)), (1.0, 0.0, 0.0));
    }

    #[test]
    fn shortest_interval_takes_the_best_of_several_peaks() {
        // A narrow peak far out holds 0.6: the shortest half lies inside it, symmetric about 20 in the limit of separation.
        let m = NormalMixture::new(vec![(0.4, 0.0, 1.0), (0.6, 20.0, 0.1)]).unwrap();
        let (lo, hi) = m.shortest(0.5).unwrap();
        let half = 0.1 * normal::upper_quantile(0.5 * (1.0 - 0.5 / 0.6)).unwrap();
        assert!((lo - (20.0 - half)).abs() < 1e-10 && (hi - (20.0 + half)).abs() < 1e-10, "{lo} {hi}");
        assert!((m.cdf(hi) - m.cdf(lo) - 0.5).abs() < 1e-12);
        // Any other interval is longer.
        let three = three();
        let (lo, hi) = three.shortest(0.9).unwrap();
        for share in 1..100 {
            let below = 0.1 * f64::from(share) / 100.0;
            let other = three.upper_quantile(0.1 - below).unwrap() - three.quantile(below).unwrap();
            assert!(other >= (hi - lo) * (1.0 - 1e-12));
        }
    }

    #[test]
    fn shortest_interval_of_a_log_normal() {
        // Equal log-normal densities at the ends: ln f(lo) − lo = ln f(hi) − hi, with the wanted mass between.
        let m = NormalMixture::single(1.0, 0.8).unwrap();
        let (lo, hi) = m.shortest_exp(0.9).unwrap();
        assert!((m.ln_pdf(lo) - lo - m.ln_pdf(hi) + hi).abs() < 1e-10);
        assert!((m.cdf(hi) - m.cdf(lo) - 0.9).abs() < 1e-12);
        // Symmetric about the mode 1 − 0.64 of the density that is equal at the ends.
        assert!(((lo + hi) / 2.0 - 0.36).abs() < 1e-10);
    }

    #[test]
    fn bad_parts_are_errors() {
        for part in [
            (-1.0, 0.0, 1.0),
            (1.0, f64::NAN, 1.0),
            (1.0, 0.0, -1.0),
            (f64::INFINITY, 0.0, 1.0),
            (0.0, 0.0, 1.0),
        ] {
            assert!(NormalMixture::new(vec![part]).is_err());
        }
        assert!(NormalMixture::new(vec![]).is_err());
        for p in [0.0, 1.0, f64::NAN] {
            assert!(
                three().quantile(p).is_err()
                    && three().shortest(p).is_err()
                    && three().upper_quantile(p).is_err()
            );
        }
    }
}
