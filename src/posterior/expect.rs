//! Expectations of a function of the level and σ, as binomial counts and intervals for all of several
//! readings need them. Pieces with the same σ make one density of the level; it is integrated on a
//! line stretched by sinh, which follows both the narrow middle and the far tails, and whose step is
//! halved until two agree (Takahasi & Mori 1974).

use super::marked::Points;
use super::own_sd::OwnSd;
use super::{Piece, Posterior, When};
use crate::math::fm;
use crate::quantity::{Absent, Figure};
use std::borrow::Cow;

/// Two steps must agree to this, relative; below `SMALLEST` absolutely.
const AGREED: f64 = 1e-11;
const SMALLEST: f64 = 1e-23;
/// A piece ends so many sds from its mean: 5e−27 of it are left out.
const REACH: f64 = 11.0;
/// Pieces lighter than this cannot be seen in the result.
const NEGLIGIBLE: f64 = 1e-26;
const HALVINGS: u32 = 9;

/// All pieces with one σ.
struct Group {
    sigma: f64,
    /// (weight / sd, mean − centre, 1 / sd): from the centre, because a level narrow against its distance from 0 has
    /// few digits left for its distance from the mean.
    normals: Vec<(f64, f64, f64)>,
    /// Levels held as nodes: (weight, level).
    points: Vec<(f64, f64)>,
    centre: f64,
    scale: f64,
    /// The stretched line's ends.
    from: f64,
    to: f64,
}

impl Group {
    fn new(sigma: f64, pieces: &[(f64, f64, f64)]) -> Group {
        let mut normals = Vec::with_capacity(pieces.len());
        let mut points = Vec::new();
        let whole: f64 = pieces.iter().map(|(weight, _, _)| weight).sum();
        let centre = pieces.iter().map(|(weight, mean, _)| weight * mean).sum::<f64>() / whole;
        let (mut spread, mut narrowest) = (0.0, f64::INFINITY);
        let (mut low, mut high) = (0.0f64, 0.0f64);
        for (weight, mean, var) in pieces {
            if *var == 0.0 {
                points.push((*weight, *mean));
                continue;
            }
            let sd = var.sqrt();
            normals.push((weight / sd, mean - centre, 1.0 / sd));
            spread += weight / whole * (mean - centre) * (mean - centre);
            if *weight > 1e-4 * whole {
                narrowest = narrowest.min(sd);
            }
            low = low.min(mean - centre - REACH * sd);
            high = high.max(mean - centre + REACH * sd);
        }
        let scale = if narrowest.is_finite() { narrowest.max(spread.sqrt()) } else { 1.0 };
        let (from, to) = (fm::asinh(low / scale), fm::asinh(high / scale));
        Group { sigma, normals, points, centre, scale, from, to }
    }

    /// Adds the trapezoid sum with this step, its nodes `offset` steps from the multiples.
    fn add(
        &self,
        step: f64,
        offset: f64,
        g: &dyn Fn(f64, f64, &mut [f64]),
        values: &mut [f64],
        sums: &mut [f64],
    ) {
        let (first, last) = ((self.from / step) as i64 - 1, (self.to / step) as i64 + 1);
        for index in first..=last {
            let u = (index as f64 + offset) * step;
            let stretched = fm::sinh(u);
            let away = self.scale * stretched;
            let level = self.centre + away;
            let mut density = 0.0;
            for (height, mean, inverse) in &self.normals {
                let z = (away - mean) * inverse;
                if z.abs() < REACH {
                    density += height * fm::exp(-0.5 * z * z);
                }
            }
            if density == 0.0 {
                continue;
            }
            let weight =
                density * fm::INV_SQRT_TWO_PI * self.scale * (1.0 + stretched * stretched).sqrt() * step;
            g(level, self.sigma, values);
            for (sum, value) in sums.iter_mut().zip(values.iter()) {
                *sum += weight * value;
            }
        }
    }

    fn add_points(&self, g: &dyn Fn(f64, f64, &mut [f64]), values: &mut [f64], sums: &mut [f64]) {
        for (weight, level) in &self.points {
            g(*level, self.sigma, values);
            for (sum, value) in sums.iter_mut().zip(values.iter()) {
                *sum += weight * value;
            }
        }
    }
}

impl Posterior {
    /// E g(θ − o, σ), θ as measured, o the posterior's origin.
    pub fn expect(&self, when: When, g: &dyn Fn(f64, f64) -> f64) -> Figure {
        let values = self.expect_each(when, 1, &|level, sigma, values| values[0] = g(level, sigma))?;
        Ok(values[0])
    }

    /// The expectations of several functions of (θ − o, σ) at once; `g` writes their values into the slice.
    ///
    /// Two steps agree to 1e−11, relative (below 1e−23, absolute), for each of them; else an error.
    pub fn expect_each(
        &self,
        when: When,
        how_many: usize,
        g: &dyn Fn(f64, f64, &mut [f64]),
    ) -> Result<Vec<f64>, Absent> {
        self.models(when)?;
        if let Some(reason) = &self.inner.no_sd {
            return Err(reason.clone());
        }
        if let (When::This, Some(own)) = (when, &self.inner.own_sd) {
            return self.expect_beside(own, how_many, g);
        }
        let groups = self.by_sigma(when)?;
        let mut values = vec![0.0; how_many];
        let mut fixed = vec![0.0; how_many];
        for group in &groups {
            group.add_points(g, &mut values, &mut fixed);
        }
        let mut step = 0.25;
        let mut before = fixed.clone();
        for group in &groups {
            group.add(step, 0.0, g, &mut values, &mut before);
        }
        for _ in 0..HALVINGS {
            // The points between; with the old ones they make the halved rule.
            let mut between = fixed.clone();
            for group in &groups {
                group.add(step, 0.5, g, &mut values, &mut between);
            }
            let mut agreed = true;
            for (old, middle) in before.iter_mut().zip(&between) {
                let finer = 0.5 * (*old + middle);
                if !finer.is_finite() {
                    return Err(Absent::failed("an expectation over the posterior is not a number"));
                }
                agreed &= (finer - *old).abs() <= (AGREED * finer.abs()).max(SMALLEST);
                *old = finer;
            }
            if agreed {
                return Ok(before);
            }
            step *= 0.5;
        }
        Err(Absent::failed("an expectation over the posterior did not reach its promised accuracy"))
    }

    /// The same where σ is this period's alone: over the level, and given it over σ.
    fn expect_beside(
        &self,
        own: &OwnSd,
        how_many: usize,
        g: &dyn Fn(f64, f64, &mut [f64]),
    ) -> Result<Vec<f64>, Absent> {
        let units = &self.inner.units;
        let mut values = vec![0.0; how_many];
        let mut before: Option<Vec<f64>> = None;
        for round in 0..HALVINGS {
            let mut sums = vec![0.0; how_many];
            for (level, sd, weight) in own.points(round).iter() {
                g(units.sd_out(*level), units.sd_out(*sd), &mut values);
                for (sum, value) in sums.iter_mut().zip(values.iter()) {
                    *sum += weight * value;
                }
            }
            if sums.iter().any(|sum| !sum.is_finite()) {
                return Err(Absent::failed("an expectation over the posterior is not a number"));
            }
            let near = |(old, new): (&f64, &f64)| (new - old).abs() <= (AGREED * new.abs()).max(SMALLEST);
            if before.as_ref().is_some_and(|before| before.iter().zip(&sums).all(near)) {
                return Ok(sums);
            }
            before = Some(sums);
        }
        Err(Absent::failed("an expectation over the posterior did not reach its promised accuracy"))
    }

    /// Pieces whose sums are integrals over the level and σ: those held, or points where σ is this period's alone.
    pub fn summed(&self) -> Result<Cow<'_, [Piece]>, Absent> {
        let Some(own) = &self.inner.own_sd else { return Ok(Cow::Borrowed(self.pieces()?)) };
        let units = &self.inner.units;
        let points = own.points(0);
        let points = points.iter().map(|(level, sd, weight)| Piece {
            weight: *weight,
            level_mean: units.value_out(*level),
            level_apart: units.sd_out(*level),
            level_var: 0.0,
            reading_sd: units.sd_out(*sd),
            periods: None,
        });
        Ok(Cow::Owned(points.collect()))
    }

    fn by_sigma(&self, when: When) -> Result<Vec<Group>, Absent> {
        if self.is_marked() {
            let of = |at: &Points| {
                let points: Vec<(f64, f64, f64)> = at.points.iter().map(|(x, w)| (*w, *x, 0.0)).collect();
                Group::new(self.inner.units.sd_out(at.sigma), &points)
            };
            return Ok(self.points(when)?.iter().filter(|at| !at.points.is_empty()).map(of).collect());
        }
        let pieces = self.pieces()?;
        let mut order: Vec<usize> =
            (0..pieces.len()).filter(|index| pieces[*index].weight > NEGLIGIBLE).collect();
        // A stable sort: pieces with one σ stay in their order.
        order.sort_by(|a, b| pieces[*a].reading_sd.total_cmp(&pieces[*b].reading_sd));
        let mut groups = Vec::new();
        for same in order.chunk_by(|a, b| pieces[*a].reading_sd == pieces[*b].reading_sd) {
            let level: Vec<(f64, f64, f64)> = same
                .iter()
                .map(|index| {
                    let piece = &pieces[*index];
                    let (mean, var) = piece.level(when);
                    (piece.weight, mean, var)
                })
                .collect();
            groups.push(Group::new(pieces[same[0]].reading_sd, &level));
        }
        Ok(groups)
    }
}
