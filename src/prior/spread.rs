//! How far the period means differ, told twice: the plain variance of the means, which overstates
//! the between variance by the mean of σ²/n_j, and what is left after that is taken off.
//!
//! Source: Vardeman & Wendelberger 2005 (the expected sample variance of uncorrelated means of
//! different precision).

use crate::data::evidence::Evidence;
use crate::quantity::{Absent, Figure, Period};

/// The between sd by the plain formula and corrected, on the model's scale.
#[derive(Debug, Clone, PartialEq)]
pub struct SpreadOfMeans {
    pub periods: usize,
    /// The sd (J − 1) of the period means.
    pub naive_sd: Figure,
    /// √(naive variance − mean of s_j²).
    pub corrected_sd: Figure,
}

/// `within_sd` is the known σ; where it is unknown, the pooled sd of these periods takes its place.
pub fn spread_of_means(periods: &[(Period, Evidence)], within_sd: Option<f64>) -> SpreadOfMeans {
    let none = |reason: &str| SpreadOfMeans {
        periods: periods.len(),
        naive_sd: Err(Absent::because(reason)),
        corrected_sd: Err(Absent::because(reason)),
    };
    let Some(variance) = within_sd.map(|sd| sd * sd).or_else(|| pooled_variance(periods)) else {
        return none("the within sd is not known from these periods");
    };
    let mut means = Vec::new();
    let mut errors = 0.0;
    for (_, evidence) in periods {
        match evidence {
            Evidence::Sums { n, mean, .. } if *n > 0 => {
                means.push(*mean);
                errors += variance / *n as f64;
            }
            Evidence::Mean { mean, uncertainty } => {
                means.push(*mean);
                errors += uncertainty * uncertainty;
            }
            _ => return none("a period has marked readings or readings with uncertainties of their own"),
        }
    }
    if means.len() < 2 {
        return none("fewer than 2 earlier periods");
    }
    let count = means.len() as f64;
    let mean = means.iter().sum::<f64>() / count;
    let naive = means.iter().map(|m| (m - mean) * (m - mean)).sum::<f64>() / (count - 1.0);
    let left = naive - errors / count;
    SpreadOfMeans {
        periods: means.len(),
        naive_sd: Ok(naive.sqrt()),
        corrected_sd: if left > 0.0 {
            Ok(left.sqrt())
        } else {
            Err(Absent::because(
                "the periods are not distinguishable: their means differ no more than readings scatter",
            ))
        },
    }
}

/// ΣSS/Σ(n − 1); `None` without degrees of freedom.
fn pooled_variance(periods: &[(Period, Evidence)]) -> Option<f64> {
    let (ss, df) = periods.iter().fold((0.0, 0u64), |(ss, df), (_, evidence)| match evidence {
        Evidence::Sums { n, ss: Some(own), .. } => (ss + own, df + n.saturating_sub(1)),
        _ => (ss, df),
    });
    (df > 0 && ss > 0.0).then(|| ss / df as f64)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn period(name: &str, n: u64, mean: f64) -> (Period, Evidence) {
        (Period::new(name), Evidence::Sums { n, mean, ss: None, rest: 0.0 })
    }

    /// By hand: means 10, 12, 14 have variance 4; σ = 2 and n = 4, 2, 4 give s² = 1, 2, 1, mean 4/3.
    #[test]
    fn the_mean_of_the_squared_errors_is_taken_off() {
        let periods = [period("1", 4, 10.0), period("2", 2, 12.0), period("3", 4, 14.0)];
        let spread = spread_of_means(&periods, Some(2.0));
        assert_eq!(spread.naive_sd, Ok(2.0));
        let corrected = spread.corrected_sd.expect("positive");
        assert!((corrected * corrected - (4.0 - 4.0 / 3.0)).abs() < 1e-14);
    }

    #[test]
    fn means_that_differ_less_than_readings_scatter_are_not_distinguishable() {
        let spread = spread_of_means(&[period("1", 1, 10.0), period("2", 1, 10.1)], Some(2.0));
        assert!(spread.corrected_sd.is_err());
    }
}
