//! The A^2 statistic of Anderson and Darling for a normal law whose mean and sd are estimated,
//! with the small-sample factor A*^2 = A^2 (1 + 0.75/n + 2.25/n^2) and the p-value of D'Agostino
//! and Stephens (1986, Goodness-of-Fit Techniques, table 4.9). Used above 5000 readings.

use crate::checks::tails;
use crate::math::fm;

/// A*^2 and its p-value of at least 8 readings in ascending order. None for fewer, for equal
/// readings, or where the squares of the readings leave the range of numbers.
pub fn of_sorted(sorted: &[f64]) -> Option<(f64, f64)> {
    let n = sorted.len();
    if n < 8 {
        return None;
    }
    let size = n as f64;
    let mean = tails::mean(sorted)?;
    let sd = (tails::sum_of_squares(sorted, mean) / (size - 1.0)).sqrt();
    if !(sd > 0.0 && sd.is_finite()) {
        return None;
    }
    let deviates: Vec<f64> = sorted.iter().map(|value| (value - mean) / sd).collect();
    let mut sum = 0.0;
    for i in 0..n {
        let below = tails::ln_normal_lower(deviates[i])?;
        let above = tails::ln_normal_lower(-deviates[n - 1 - i])?;
        sum += (2 * i + 1) as f64 * (below + above);
    }
    let squared = -size - sum / size;
    let corrected = squared * (1.0 + 0.75 / size + 2.25 / (size * size));
    Some((corrected, p_value(corrected)))
}

/// P(A*^2 >= a) by the published fit, which is a curve in four parts.
pub fn p_value(a: f64) -> f64 {
    if a >= 0.6 {
        // The published parabola turns upwards at 153.5, far beyond the values it was fitted to.
        let a = a.min(153.0);
        fm::exp(1.2937 - 5.709 * a + 0.0186 * a * a)
    } else if a >= 0.34 {
        fm::exp(0.9177 - 4.279 * a - 1.38 * a * a)
    } else if a >= 0.2 {
        -fm::exp_m1(-8.318 + 42.796 * a - 59.938 * a * a)
    } else {
        -fm::exp_m1(-13.436 + 101.14 * a - 223.73 * a * a)
    }
}
