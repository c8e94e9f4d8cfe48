//! The W statistic of Shapiro and Wilk and its p-value by Royston's approximation (algorithm
//! AS R94, Applied Statistics 44, 1995, 547-551), for 3 to 5000 readings.
//!
//! W compares the slope of the normal quantile plot with the sample variance. The weights are
//! those of the normal scores at (i - 3/8)/(n + 1/4), the outermost one or two replaced by
//! Royston's polynomials in 1/sqrt(n). ln(1 - W) is close to normal, with mean and sd given by
//! polynomials in n (4 to 11) or ln n (12 and more); for n = 3 the law of W is exact.

use crate::checks::tails;
use crate::math::fm;

/// The most readings for which the approximation was made.
pub const MOST: usize = 5000;

const OUTERMOST: [f64; 6] = [0.0, 0.221157, -0.147981, -2.07119, 4.434685, -2.706056];
const SECOND: [f64; 6] = [0.0, 0.042981, -0.293762, -1.752461, 5.682633, -3.582633];
const MEAN_SMALL: [f64; 4] = [0.544, -0.39978, 0.025054, -6.714e-4];
const LN_SD_SMALL: [f64; 4] = [1.3822, -0.77857, 0.062767, -0.0020322];
const MEAN_LARGE: [f64; 4] = [-1.5861, -0.31082, -0.083751, 0.0038915];
const LN_SD_LARGE: [f64; 3] = [-0.4803, -0.082676, 0.0030302];
const SHIFT_SMALL: [f64; 2] = [-2.273, 0.459];

/// W and its p-value of readings in ascending order. None outside 3 to 5000 readings, for equal
/// readings, or where the squares of the readings leave the range of numbers.
pub fn of_sorted(sorted: &[f64]) -> Option<(f64, f64)> {
    let n = sorted.len();
    if !(3..=MOST).contains(&n) {
        return None;
    }
    let range = sorted[n - 1] - sorted[0];
    if !(range > 0.0 && range.is_finite()) {
        return None;
    }
    let weights = weights(n)?;
    let centre = sorted.iter().map(|value| (value - sorted[0]) / range).sum::<f64>() / n as f64;
    let scaled: Vec<f64> = sorted.iter().map(|value| (value - sorted[0]) / range - centre).collect();
    let squares: f64 = scaled.iter().map(|value| value * value).sum();
    let half = n / 2;
    let slope: f64 = (0..half).map(|i| weights[i] * (scaled[n - 1 - i] - scaled[i])).sum();
    // 1 - W = (SS - slope^2)/SS, written as a product so that it keeps its digits when W is near 1.
    let root = squares.sqrt();
    let lack = ((root - slope) * (root + slope) / squares).max(0.0);
    let w = slope * slope / squares;
    Some((w, p_value(n, w, lack)?))
}

/// The weights of the upper half of the readings, largest first.
fn weights(n: usize) -> Option<Vec<f64>> {
    let half = n / 2;
    if n == 3 {
        return Some(vec![0.5_f64.sqrt()]);
    }
    let scores: Vec<f64> = (1..=half)
        .map(|i| tails::normal_upper_quantile((i as f64 - 0.375) / (n as f64 + 0.25)))
        .collect::<Option<_>>()?;
    let squares = 2.0 * scores.iter().map(|score| score * score).sum::<f64>();
    let root = squares.sqrt();
    let step = 1.0 / (n as f64).sqrt();
    let first = scores[0] / root + polynomial(&OUTERMOST, step);
    let mut weights = Vec::with_capacity(half);
    weights.push(first);
    let scale = if n > 5 {
        let second = scores[1] / root + polynomial(&SECOND, step);
        weights.push(second);
        ((squares - 2.0 * scores[0] * scores[0] - 2.0 * scores[1] * scores[1])
            / (1.0 - 2.0 * first * first - 2.0 * second * second))
            .sqrt()
    } else {
        ((squares - 2.0 * scores[0] * scores[0]) / (1.0 - 2.0 * first * first)).sqrt()
    };
    for score in scores.iter().skip(weights.len()) {
        weights.push(score / scale);
    }
    Some(weights)
}

fn p_value(n: usize, w: f64, lack: f64) -> Option<f64> {
    if lack == 0.0 {
        return Some(1.0);
    }
    if n == 3 {
        // Exact: P(W <= w) = (6/pi)(asin(sqrt w) - asin(sqrt 3/4)); the arc sine of sqrt w is the arc
        // tangent of sqrt(w/(1-w)), that of sqrt 3/4 is pi/3.
        return Some((6.0 / fm::PI * fm::atan((w / lack).sqrt()) - 2.0).clamp(0.0, 1.0));
    }
    let size = n as f64;
    let ln_lack = fm::ln(lack);
    let z = if n <= 11 {
        let shift = polynomial(&SHIFT_SMALL, size);
        if ln_lack >= shift {
            return Some(0.0);
        }
        let y = -fm::ln(shift - ln_lack);
        (y - polynomial(&MEAN_SMALL, size)) / fm::exp(polynomial(&LN_SD_SMALL, size))
    } else {
        let ln_size = fm::ln(size);
        (ln_lack - polynomial(&MEAN_LARGE, ln_size)) / fm::exp(polynomial(&LN_SD_LARGE, ln_size))
    };
    tails::normal(z).map(|tail| tail.upper)
}

/// c0 + c1 x + c2 x^2 + ...
fn polynomial(coefficients: &[f64], x: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, coefficient| sum * x + coefficient)
}
