//! A smooth function as Chebyshev series on panels of one width, each made when first asked for.

use crate::math::fm;
use std::cell::OnceCell;
use std::sync::OnceLock;

/// Terms of a panel's series.
const TERMS: usize = 12;
/// Panels on either side of the centre; beyond them the function itself is asked.
const HALF: usize = 40;
/// The last two terms (relative, or absolute below 1) where a panel is resolved.
const RESOLVED: f64 = 1e-12;

type Series = [f64; TERMS];

#[derive(Debug)]
pub(super) struct Table {
    from: f64,
    width: f64,
    panels: Vec<OnceCell<Option<Series>>>,
}

/// Places on [−1, 1] and the matrix from values there to the series.
fn rule() -> &'static ([f64; TERMS], [[f64; TERMS]; TERMS]) {
    static RULE: OnceLock<([f64; TERMS], [[f64; TERMS]; TERMS])> = OnceLock::new();
    RULE.get_or_init(|| {
        let n = TERMS as f64;
        let angle = |i: usize| fm::PI * (i as f64 + 0.5) / n;
        let mut to_series = [[0.0; TERMS]; TERMS];
        for (k, row) in to_series.iter_mut().enumerate() {
            for (i, entry) in row.iter_mut().enumerate() {
                *entry = (if k == 0 { 1.0 } else { 2.0 }) / n * fm::cos(k as f64 * angle(i));
            }
        }
        (std::array::from_fn(|i| fm::cos(angle(i))), to_series)
    })
}

impl Table {
    /// For arguments near `centre`, panels `width` wide.
    pub fn new(centre: f64, width: f64) -> Table {
        let panels = std::iter::repeat_with(OnceCell::new).take(2 * HALF).collect();
        Table { from: centre - HALF as f64 * width, width, panels }
    }

    /// f(x), always of the same f; from f itself where a panel does not resolve it.
    pub fn at(&self, f: &impl Fn(f64) -> f64, x: f64) -> f64 {
        let place = (x - self.from) / self.width;
        if !(place >= 0.0 && place < self.panels.len() as f64) {
            return f(x);
        }
        let index = place as usize;
        let Some(panel) = self.panels.get(index) else { return f(x) };
        match panel.get_or_init(|| self.panel(f, index)) {
            Some(series) => sum(series, 2.0 * (place - index as f64) - 1.0),
            None => f(x),
        }
    }

    fn panel(&self, f: &impl Fn(f64) -> f64, index: usize) -> Option<Series> {
        let (places, to_series) = rule();
        let middle = self.from + (index as f64 + 0.5) * self.width;
        let values = places.map(|t| f(middle + 0.5 * self.width * t));
        let series = to_series.map(|row| row.iter().zip(&values).map(|(m, v)| m * v).sum::<f64>());
        let size = series.iter().fold(1.0f64, |size, c| size.max(c.abs()));
        let last = series[TERMS - 1].abs() + series[TERMS - 2].abs();
        (last <= RESOLVED * size).then_some(series)
    }
}

/// Clenshaw's sum.
fn sum(series: &Series, t: f64) -> f64 {
    let (mut one, mut two) = (0.0, 0.0);
    for c in series[1..].iter().rev() {
        let next = 2.0 * t * one - two + c;
        two = one;
        one = next;
    }
    series[0] + t * one - two
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::normal;

    #[test]
    fn as_the_function_itself() {
        let f = |x: f64| 3.0 * normal::ln_cdf(x) + normal::ln_cdf(0.4 - 0.7 * x);
        let table = Table::new(0.3, 0.8);
        for i in -200..=200 {
            let x = 0.113 * f64::from(i);
            assert!((table.at(&f, x) - f(x)).abs() < 3e-13 * f(x).abs().max(1.0), "{x}");
        }
        let resolved = table.panels.iter().filter(|p| matches!(p.get(), Some(Some(_)))).count();
        assert!(resolved > 50, "{resolved}");
    }
}
