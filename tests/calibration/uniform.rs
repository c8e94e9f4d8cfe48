//! Whether numbers are uniform on (0, 1): chi-square over 20 bins, Kolmogorov's test, and the shares that lie in
//! the central intervals of 50, 90 and 95 %.

use reassay::math::{beta, chi_square, fm};

const BINS: usize = 20;
pub const INTERVALS: [f64; 3] = [0.50, 0.90, 0.95];

#[derive(Debug)]
pub struct Uniformity {
    pub draws: usize,
    pub chi_square_p: f64,
    pub kolmogorov_p: f64,
    /// Share in each central interval, and the two-sided binomial tail of that share.
    pub coverage: [(f64, f64); 3],
}

impl Uniformity {
    pub fn of(values: &[f64]) -> Uniformity {
        assert!(values.iter().all(|u| (0.0..=1.0).contains(u)), "a probability");
        let coverage = INTERVALS.map(|wanted| {
            let tail = 0.5 * (1.0 - wanted);
            let inside = values.iter().filter(|u| (tail..=1.0 - tail).contains(*u)).count();
            (inside as f64 / values.len() as f64, binomial_p(inside, values.len(), wanted))
        });
        Uniformity {
            draws: values.len(),
            chi_square_p: chi_square_p(values),
            kolmogorov_p: kolmogorov_p(values),
            coverage,
        }
    }

    /// The smallest of the five p-values.
    pub fn smallest_p(&self) -> f64 {
        let coverage = self.coverage.iter().map(|(_, p)| *p).fold(1.0, f64::min);
        coverage.min(self.chi_square_p).min(self.kolmogorov_p)
    }
}

fn chi_square_p(values: &[f64]) -> f64 {
    let mut counts = [0_usize; BINS];
    for u in values {
        counts[((u * BINS as f64) as usize).min(BINS - 1)] += 1;
    }
    let expected = values.len() as f64 / BINS as f64;
    assert!(expected >= 5.0, "too few draws for {BINS} bins");
    let statistic = counts.iter().map(|n| (*n as f64 - expected) * (*n as f64 - expected) / expected).sum();
    chi_square::sf(statistic, (BINS - 1) as f64).expect("a tail")
}

/// The largest distance from the diagonal, by the limiting law with Stephens' (1970) factor for finite n.
fn kolmogorov_p(values: &[f64]) -> f64 {
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    let n = sorted.len() as f64;
    let distance = sorted.iter().enumerate().map(|(i, u)| ((i + 1) as f64 / n - u).max(u - i as f64 / n));
    let lambda = distance.fold(0.0, f64::max) * (n.sqrt() + 0.12 + 0.11 / n.sqrt());
    let term = |k: i32| {
        let k = f64::from(k);
        fm::exp(-2.0 * k * k * lambda * lambda) * if k % 2.0 == 1.0 { 2.0 } else { -2.0 }
    };
    // Below 0.2 the law is 1 to 12 digits, and the series would need ever more terms.
    if lambda < 0.2 { 1.0 } else { (1..=100).map(term).sum::<f64>().clamp(0.0, 1.0) }
}

/// Twice the smaller tail, each with the count itself in it.
fn binomial_p(inside: usize, n: usize, chance: f64) -> f64 {
    let (k, n) = (inside as f64, n as f64);
    // P(X ≥ k) = I_p(k, n − k + 1).
    let at_least = |k: f64| match k {
        0.0 => 1.0,
        k if k > n => 0.0,
        k => beta::cdf(k, n - k + 1.0, chance, 1.0 - chance).expect("a tail"),
    };
    let at_most = |k: f64| match k {
        k if k == n => 1.0,
        k => beta::sf(k + 1.0, n - k, chance, 1.0 - chance).expect("a tail"),
    };
    (2.0 * at_least(k).min(at_most(k))).min(1.0)
}

#[test]
fn even_numbers_pass_and_others_do_not() {
    let even: Vec<f64> = (0..1000).map(|i| (f64::from(i) + 0.5) / 1000.0).collect();
    let found = Uniformity::of(&even);
    assert_eq!((found.chi_square_p, found.coverage[0].0), (1.0, 0.5));
    assert!(found.kolmogorov_p > 0.999);
    // Kolmogorov's law: P(λ > 1.358) = 0.05 and P(λ > 1.628) = 0.01 (any table).
    for (shift, wanted) in [(1.358_102, 0.05), (1.627_624, 0.01)] {
        let n = 1e6_f64;
        let by = shift / (n.sqrt() + 0.12 + 0.11 / n.sqrt());
        let moved: Vec<f64> = (0..1_000_000).map(|i| ((f64::from(i) + 1.0) / n - by).max(0.0)).collect();
        assert!((kolmogorov_p(&moved) / wanted - 1.0).abs() < 1e-4, "{}", kolmogorov_p(&moved));
    }
    // Binomial(4, 1/2): P(X ≥ 4) = 1/16, twice that; P(X ≤ 2) = 11/16 as P(X ≥ 2), so 1.
    assert!((binomial_p(4, 4, 0.5) - 0.125).abs() < 1e-14 && binomial_p(2, 4, 0.5) == 1.0);
    assert!((binomial_p(0, 4, 0.5) - 0.125).abs() < 1e-14);
    let narrow: Vec<f64> = even.iter().map(|u| 0.5 + 0.9 * (u - 0.5)).collect();
    assert!(Uniformity::of(&narrow).smallest_p() < 1e-6);
}
