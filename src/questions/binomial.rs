//! How many of m readings lie beyond, given the chance of each: the binomial law from both tails.
//!
//! The chance π of lying beyond and the chance κ of not lying there come in separately, each exact in
//! its own tail, so that nothing here forms 1 − π.

use crate::math::fm;

/// The most readings that a question may ask about at once.
pub const MOST_READINGS: u64 = 10_000;

/// ln k! for 0 ≤ k ≤ m.
#[derive(Debug, Clone, PartialEq)]
pub struct LnFactorials(Vec<f64>);

impl LnFactorials {
    pub fn up_to(m: u64) -> LnFactorials {
        let values = (0..=m).map(|k| fm::ln_gamma(k as f64 + 1.0)).collect();
        LnFactorials(values)
    }

    fn ln_choose(&self, m: usize, k: usize) -> f64 {
        if k == 0 || k == m { 0.0 } else { self.0[m] - self.0[k] - self.0[m - k] }
    }

    /// P(exactly k of m).
    pub fn exactly(&self, m: u64, k: u64, beyond: f64, not_beyond: f64) -> f64 {
        if k > m {
            return 0.0;
        }
        let (m, k) = (m as usize, k as usize);
        let ln = self.ln_choose(m, k) + times_ln(k, beyond) + times_ln(m - k, not_beyond);
        fm::exp(ln)
    }

    /// P(at least k of m): the upper tail itself, summed from its own terms.
    pub fn at_least(&self, m: u64, k: u64, beyond: f64, not_beyond: f64) -> f64 {
        if k == 0 {
            return 1.0;
        }
        if k == 1 {
            // 1 − κ^m, where m ln κ says how near to 0 it is.
            return -fm::exp_m1(m as f64 * ln_of(not_beyond, beyond));
        }
        (k..=m).map(|j| self.exactly(m, j, beyond, not_beyond)).sum()
    }
}

/// ln p, from whichever of p and its complement is known better.
fn ln_of(p: f64, complement: f64) -> f64 {
    if complement < 0.5 { fm::ln_1p(-complement) } else { fm::ln(p) }
}

/// k ln p, with 0 · ln 0 = 0.
fn times_ln(k: usize, p: f64) -> f64 {
    if k == 0 { 0.0 } else { k as f64 * fm::ln(p) }
}

/// P(none of m), exact where the chance of each is tiny.
pub fn none_of(m: u64, beyond: f64, not_beyond: f64) -> f64 {
    fm::exp(m as f64 * ln_of(not_beyond, beyond))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tails_agree_with_exact_fractions() {
        let table = LnFactorials::up_to(10);
        // Bin(10, 1/4): P(X = 3) = 120 · 3^7 / 4^10; by hand from the binomial theorem.
        let exactly = 120.0 * 2187.0 / 1_048_576.0;
        assert!((table.exactly(10, 3, 0.25, 0.75) / exactly - 1.0).abs() < 1e-13);
        // P(X ≥ 9) = (10 · 3 + 1) / 4^10.
        assert!((table.at_least(10, 9, 0.25, 0.75) / (31.0 / 1_048_576.0) - 1.0).abs() < 1e-13);
        assert_eq!(table.at_least(10, 0, 0.25, 0.75), 1.0);
    }

    #[test]
    fn at_least_one_keeps_a_tiny_chance() {
        let table = LnFactorials::up_to(12);
        let tiny = 1e-40;
        assert!((table.at_least(12, 1, tiny, 1.0) / 1.2e-39 - 1.0).abs() < 1e-12);
        assert!((table.at_least(12, 2, 1e-20, 1.0) / 6.6e-39 - 1.0).abs() < 1e-12);
        assert_eq!(table.at_least(5, 1, 1.0, 0.0), 1.0);
        assert!((none_of(4, 0.5, 0.5) - 0.0625).abs() < 1e-16);
    }

    #[test]
    fn all_counts_add_to_one() {
        let table = LnFactorials::up_to(40);
        for (beyond, not_beyond) in [(0.0, 1.0), (1.0, 0.0), (0.3, 0.7), (1e-9, 1.0 - 1e-9)] {
            let sum: f64 = (0..=40).map(|k| table.exactly(40, k, beyond, not_beyond)).sum();
            assert!((sum - 1.0).abs() < 1e-12, "{beyond}: {sum}");
        }
    }
}
