//! Sums that do not depend on order: every number is added exactly, and only the end result is rounded.
//!
//! Method: a long fixed-point accumulator in pieces of 32 bits, each kept in a 64-bit integer so that carries are needed
//! only now and then (Kulisch 1981; Neal 2015, *Fast exact summation using small and large superaccumulators*).
//! It spans 2⁻²¹⁴⁸ to beyond 2²⁰⁴⁸, so that also the product of any two finite numbers is added exactly. Because nothing
//! is lost, the rows may come in any order, in any blocks, in any number of threads: the bits of the result are the same.

use super::fm;

/// The exponent of the lowest bit: the product of the two smallest numbers above 0.
const LOWEST_EXPONENT: i32 = -2148;
/// 32-bit pieces: 4196 bits of products, 64 bits for up to 2⁶⁴ terms, a piece for the sign.
const PIECES: usize = 135;
/// Terms between two carries: each term puts less than 2⁵³ into a piece of 63 bits, which already holds up to 2³².
const TERMS_PER_CARRY: u32 = 1000;

/// The exact sum of any number (below 2⁶²) of finite numbers and products of finite numbers.
#[derive(Debug, Clone)]
pub struct ExactSum {
    pieces: Box<[i64; PIECES]>,
    since_carry: u32,
    not_finite: NotFinite,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
struct NotFinite {
    nan: bool,
    plus: bool,
    minus: bool,
}

impl Default for ExactSum {
    fn default() -> Self {
        Self::new()
    }
}

/// Mantissa (with the hidden bit) and biased exponent, so that |x| = mantissa · 2^(exponent − 1075).
#[inline]
fn parts(x: f64) -> (u64, i32) {
    let bits = x.to_bits();
    let field = ((bits >> 52) & 0x7ff) as i32;
    let fraction = bits & ((1 << 52) - 1);
    if field == 0 { (fraction, 1) } else { (fraction | (1 << 52), field) }
}

impl ExactSum {
    /// The empty sum, 0.
    pub fn new() -> Self {
        Self { pieces: Box::new([0; PIECES]), since_carry: 0, not_finite: NotFinite::default() }
    }

    /// Adds x exactly. NaN and infinities are remembered and decide `value`.
    #[inline]
    pub fn add(&mut self, x: f64) {
        if !x.is_finite() {
            self.note_not_finite(x);
            return;
        }
        let (mantissa, exponent) = parts(x);
        // In units of 2^LOWEST_EXPONENT the lowest mantissa bit stands at exponent + 1073.
        let position = (exponent + (-1075 - LOWEST_EXPONENT)) as usize;
        let (piece, shift) = (position >> 5, (position & 31) as u32);
        let low = ((mantissa << shift) & 0xffff_ffff) as i64;
        let high = (mantissa >> (32 - shift)) as i64;
        let sign = (x.to_bits() as i64) >> 63; // 0 or −1
        if let [first, second] = &mut self.pieces[piece..piece + 2] {
            *first += (low ^ sign) - sign;
            *second += (high ^ sign) - sign;
        }
        self.count_term();
    }

    /// Adds a · b exactly (the full 106-bit product, also where it would overflow or underflow as a number).
    #[inline]
    pub fn add_product(&mut self, a: f64, b: f64) {
        if !a.is_finite() || !b.is_finite() {
            self.note_not_finite(a * b);
            return;
        }
        let (mantissa_a, exponent_a) = parts(a);
        let (mantissa_b, exponent_b) = parts(b);
        let product = u128::from(mantissa_a) * u128::from(mantissa_b);
        let position = (exponent_a + exponent_b - 2) as usize;
        let (piece, shift) = (position >> 5, (position & 31) as u32);
        let low = (((product as u64) << shift) & 0xffff_ffff) as i64;
        let rest = product >> (32 - shift);
        let second = (rest as u64 & 0xffff_ffff) as i64;
        let third = ((rest >> 32) as u64 & 0xffff_ffff) as i64;
        let fourth = (rest >> 64) as i64;
        let sign = ((a.to_bits() ^ b.to_bits()) as i64) >> 63;
        if let [p0, p1, p2, p3] = &mut self.pieces[piece..piece + 4] {
            *p0 += (low ^ sign) - sign;
            *p1 += (second ^ sign) - sign;
            *p2 += (third ^ sign) - sign;
            *p3 += (fourth ^ sign) - sign;
        }
        self.count_term();
    }

    /// Adds another sum exactly.
    pub fn merge(&mut self, other: &Self) {
        self.carry();
        let mut theirs = other.clone();
        theirs.carry();
        for (mine, their) in self.pieces.iter_mut().zip(theirs.pieces.iter()) {
            *mine += their;
        }
        self.since_carry = 1;
        self.carry();
        self.not_finite.nan |= other.not_finite.nan;
        self.not_finite.plus |= other.not_finite.plus;
        self.not_finite.minus |= other.not_finite.minus;
    }

    /// The sum, rounded once to the nearest number (ties to even). NaN if a NaN or infinities of both signs were added;
    /// ±∞ if an infinity was added or the sum is beyond the largest number. The empty sum is 0.
    pub fn value(&self) -> f64 {
        match self.special() {
            Some(value) => value,
            None => self.whole().rounded(LOWEST_EXPONENT).value(),
        }
    }

    /// NaN or ±∞ if such a value was added.
    fn special(&self) -> Option<f64> {
        match self.not_finite {
            NotFinite { nan: true, .. } | NotFinite { plus: true, minus: true, .. } => Some(f64::NAN),
            NotFinite { plus: true, .. } => Some(f64::INFINITY),
            NotFinite { minus: true, .. } => Some(f64::NEG_INFINITY),
            _ => None,
        }
    }

    #[cold]
    fn note_not_finite(&mut self, x: f64) {
        self.not_finite.nan |= x.is_nan();
        self.not_finite.plus |= x == f64::INFINITY;
        self.not_finite.minus |= x == f64::NEG_INFINITY;
    }

    #[inline]
    fn count_term(&mut self) {
        self.since_carry += 1;
        if self.since_carry >= TERMS_PER_CARRY {
            self.carry();
        }
    }

    /// Brings every piece but the last into 0 … 2³² − 1; the last keeps the sign.
    fn carry(&mut self) {
        let mut carried = 0_i64;
        for piece in &mut self.pieces[..PIECES - 1] {
            let full = *piece + carried;
            carried = full >> 32;
            *piece = full & 0xffff_ffff;
        }
        self.pieces[PIECES - 1] += carried;
        self.since_carry = 0;
    }

    /// The sum as a whole number of units 2^LOWEST_EXPONENT.
    fn whole(&self) -> Whole {
        let mut own = self.clone();
        own.carry();
        let negative = own.pieces[PIECES - 1] < 0;
        if negative {
            for piece in own.pieces.iter_mut() {
                *piece = -*piece;
            }
            own.carry();
        }
        Whole::new(negative, own.pieces.iter().map(|p| *p as u32).collect())
    }
}

/// A whole number: sign and 32-bit digits from the lowest up, without leading zeros.
#[derive(Debug, Clone)]
struct Whole {
    negative: bool,
    digits: Vec<u32>,
}

/// A number kept as fraction · 2^exponent so that it may leave the range of f64 on the way.
#[derive(Debug, Clone, Copy)]
struct Scaled {
    /// 0, or of size 2⁵² to 2⁵³, with up to 53 bits kept.
    fraction: f64,
    exponent: i32,
}

impl Scaled {
    fn value(self) -> f64 {
        fm::scale_by_power_of_two(self.fraction, self.exponent)
    }
}

impl Whole {
    fn new(negative: bool, mut digits: Vec<u32>) -> Self {
        while digits.last() == Some(&0) {
            digits.pop();
        }
        Self { negative, digits }
    }

    /// self · factor.
    fn times(&self, factor: u64) -> Self {
        let mut digits = Vec::with_capacity(self.digits.len() + 2);
        let mut carried = 0_u128;
        for digit in &self.digits {
            let full = u128::from(*digit) * u128::from(factor) + carried;
            digits.push(full as u32);
            carried = full >> 32;
        }
        while carried > 0 {
            digits.push(carried as u32);
            carried >>= 32;
        }
        Self::new(self.negative, digits)
    }

    /// self².
    fn square(&self) -> Self {
        // The lowest digits are mostly zeros: skip them.
        let low = self.digits.iter().take_while(|d| **d == 0).count();
        let own = &self.digits[low..];
        let mut digits = vec![0_u32; 2 * self.digits.len() + 1];
        for (i, a) in own.iter().enumerate() {
            let mut carried = 0_u64;
            for (j, b) in own.iter().enumerate() {
                let place = &mut digits[2 * low + i + j];
                let full = u64::from(*a) * u64::from(*b) + u64::from(*place) + carried;
                *place = full as u32;
                carried = full >> 32;
            }
            let mut k = 2 * low + i + own.len();
            while carried > 0 {
                let full = u64::from(digits[k]) + carried;
                digits[k] = full as u32;
                carried = full >> 32;
                k += 1;
            }
        }
        Self::new(false, digits)
    }

    /// self − other for two numbers that are not negative and self ≥ other; 0 otherwise.
    fn minus(&self, other: &Self) -> Self {
        let mut digits = Vec::with_capacity(self.digits.len());
        let mut borrowed = 0_i64;
        for i in 0..self.digits.len().max(other.digits.len()) {
            let mine = i64::from(self.digits.get(i).copied().unwrap_or(0));
            let theirs = i64::from(other.digits.get(i).copied().unwrap_or(0));
            let full = mine - theirs - borrowed;
            borrowed = i64::from(full < 0);
            digits.push((full & 0xffff_ffff) as u32);
        }
        if borrowed > 0 { Self::new(false, Vec::new()) } else { Self::new(false, digits) }
    }

    /// self · 2^unit to 53 bits (fewer where the result would be subnormal), to nearest, ties to even.
    fn rounded(&self, unit: i32) -> Scaled {
        let Some(top) = self.digits.last() else {
            return Scaled { fraction: 0.0, exponent: 0 };
        };
        let bits = 32 * self.digits.len() as i32 - top.leading_zeros() as i32;
        // The lowest bit that is kept: 53 bits, but nothing below the smallest number 2⁻¹⁰⁷⁴.
        let lowest = (bits - 53).max(-1074 - unit).max(0);
        let kept = self.bits_from(lowest as usize);
        let half = lowest > 0 && self.bit(lowest as usize - 1);
        let below = lowest > 1 && self.any_below(lowest as usize - 1);
        let up = half && (below || kept & 1 == 1);
        let fraction = (kept + u64::from(up)) as f64;
        Scaled { fraction: if self.negative { -fraction } else { fraction }, exponent: unit + lowest }
    }

    /// self · 2^unit to 53 bits wherever its exponent lies, for use in a further computation.
    fn scaled(&self, unit: i32) -> Scaled {
        let far = self.rounded(0);
        Scaled { fraction: far.fraction, exponent: far.exponent + unit }
    }

    fn bit(&self, at: usize) -> bool {
        self.digits.get(at >> 5).is_some_and(|d| d >> (at & 31) & 1 == 1)
    }

    fn any_below(&self, at: usize) -> bool {
        self.digits.iter().take(at >> 5).any(|d| *d != 0) || (at & !31..at).any(|i| self.bit(i))
    }

    /// Up to 64 bits from the given place up.
    fn bits_from(&self, at: usize) -> u64 {
        let digit = |i: usize| u128::from(self.digits.get(i).copied().unwrap_or(0));
        let first = at >> 5;
        let window = digit(first) | digit(first + 1) << 32 | digit(first + 2) << 64;
        (window >> (at & 31)) as u64
    }
}

/// Number, sum and sum of squares of readings, all exact.
///
/// The mean and the centred sum of squares come from the exact sums as whole numbers, n Σx² − (Σx)², so a mean of 10⁹
/// with a spread of 10⁻⁶ loses nothing, and neither order nor blocks nor threads change a bit. Range: any finite
/// readings; `centred_ss` overflows to ∞ when it exceeds 1.8e308 (deviations near 1e154) and loses digits below 1e−307
/// (deviations near 1e−154) as any number of that size; `sd` has no such limit. A reading that is NaN or infinite makes
/// every result NaN (an infinite mean stays infinite).
#[derive(Debug, Clone, Default)]
pub struct Moments {
    n: u64,
    sum: ExactSum,
    sum_of_squares: ExactSum,
}

impl Moments {
    /// No readings yet.
    pub fn new() -> Self {
        Self::default()
    }

    /// Takes one reading in.
    #[inline]
    pub fn add(&mut self, x: f64) {
        self.n += 1;
        self.sum.add(x);
        self.sum_of_squares.add_product(x, x);
    }

    /// Takes in all readings of another set.
    pub fn merge(&mut self, other: &Self) {
        self.n += other.n;
        self.sum.merge(&other.sum);
        self.sum_of_squares.merge(&other.sum_of_squares);
    }

    /// How many readings.
    pub fn n(&self) -> u64 {
        self.n
    }

    /// The sum of the readings, rounded once.
    pub fn sum(&self) -> f64 {
        self.sum.value()
    }

    /// The mean, within 1 unit in the last place; NaN without readings.
    pub fn mean(&self) -> f64 {
        if self.n == 0 {
            return f64::NAN;
        }
        if let Some(value) = self.sum.special() {
            return value;
        }
        let total = self.sum.whole().scaled(LOWEST_EXPONENT);
        Scaled { fraction: total.fraction / self.n as f64, exponent: total.exponent }.value()
    }

    /// What the exact mean has beyond [`mean`](Self::mean), within 1 unit in its own last place; 0 where there is
    /// no finite mean.
    pub fn mean_rest(&self) -> f64 {
        let mean = self.mean();
        if !mean.is_finite() {
            return 0.0;
        }
        let mut left = self.sum.clone();
        left.add_product(-mean, self.n as f64);
        left.value() / self.n as f64
    }

    /// Σ(x − mean)², never negative, within 1 unit in the last place; 0 for one reading, NaN without readings.
    pub fn centred_ss(&self) -> f64 {
        self.centred().map_or(f64::NAN, Scaled::value)
    }

    /// √(Σ(x − mean)²/(n − 1)); NaN with fewer than two readings. Holds over the whole range of numbers.
    pub fn sd(&self) -> f64 {
        match self.centred() {
            Some(ss) if self.n >= 2 => {
                // An even exponent halves exactly.
                let odd = ss.exponent & 1;
                let variance = ss.fraction * f64::from(1 + odd) / (self.n - 1) as f64;
                Scaled { fraction: variance.sqrt(), exponent: (ss.exponent - odd) / 2 }.value()
            }
            _ => f64::NAN,
        }
    }

    fn centred(&self) -> Option<Scaled> {
        if self.n == 0 || self.sum.special().is_some() || self.sum_of_squares.special().is_some() {
            return None;
        }
        // Σx in units 2⁻¹⁰⁷⁴ (its lower pieces are 0): its square is in the unit of Σx².
        let mut sum = self.sum.whole();
        sum = sum.shifted_down(-1074 - LOWEST_EXPONENT);
        let scatter = self.sum_of_squares.whole().times(self.n).minus(&sum.square());
        let total = scatter.scaled(LOWEST_EXPONENT);
        Some(Scaled { fraction: total.fraction / self.n as f64, exponent: total.exponent })
    }
}

impl Whole {
    /// self / 2^bits for a number whose lowest `bits` bits are 0.
    fn shifted_down(&self, bits: i32) -> Self {
        let (skip, shift) = ((bits >> 5) as usize, (bits & 31) as u32);
        let digit = |i: usize| u64::from(self.digits.get(i).copied().unwrap_or(0));
        let digits =
            (skip..self.digits.len()).map(|i| ((digit(i) | digit(i + 1) << 32) >> shift) as u32).collect();
        Self::new(self.negative, digits)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn sum_of(values: &[f64]) -> f64 {
        let mut sum = ExactSum::new();
        values.iter().for_each(|v| sum.add(*v));
        sum.value()
    }

    #[test]
    fn rounds_once_ties_to_even() {
        assert_eq!(sum_of(&[]), 0.0);
        assert_eq!(sum_of(&[0.1; 10]), 1.0);
        assert_eq!(sum_of(&[1e100, 1.0, -1e100]), 1.0);
        assert_eq!(sum_of(&[1.0, 1.1102230246251565e-16]), 1.0);
        assert_eq!(sum_of(&[1.0, 1.1102230246251565e-16, 5e-324]), 1.0 + f64::EPSILON);
        assert_eq!(sum_of(&[1.0 + f64::EPSILON, 1.1102230246251565e-16]), 1.0 + 2.0 * f64::EPSILON);
        assert_eq!(sum_of(&[-1.0, -1.1102230246251565e-16, -5e-324]), -1.0 - f64::EPSILON);
        assert_eq!(sum_of(&[5e-324, 5e-324, -5e-324]), 5e-324);
        assert_eq!(sum_of(&[f64::MAX, f64::MAX, -f64::MAX]), f64::MAX);
        assert_eq!(sum_of(&[f64::MAX, f64::MAX]), f64::INFINITY);
        assert_eq!(sum_of(&vec![1.0; 5000]), 5000.0);
        assert_eq!(
            sum_of(
                &vec![f64::MAX; 5000]
                    .iter()
                    .zip([1.0, -1.0].iter().cycle())
                    .map(|(a, b)| a * b)
                    .collect::<Vec<_>>()
            ),
            0.0
        );
    }

    #[test]
    fn not_finite_values_decide() {
        assert!(sum_of(&[1.0, f64::NAN]).is_nan());
        assert!(sum_of(&[f64::INFINITY, f64::NEG_INFINITY]).is_nan());
        assert_eq!(sum_of(&[f64::INFINITY, 1.0]), f64::INFINITY);
        assert_eq!(sum_of(&[f64::NEG_INFINITY, 1.0]), f64::NEG_INFINITY);
    }

    #[test]
    fn products_are_exact_over_the_whole_range() {
        let mut sum = ExactSum::new();
        sum.add_product(1e200, 1e200);
        sum.add_product(1e-200, 1e-200);
        sum.add_product(-1e200, 1e200);
        sum.add_product(1e-200, -1e-200);
        sum.add_product(3.0, 0.1);
        // 3 × the number 0.1 is 0.3000000000000000166, nearest number 0.30000000000000004 or 0.3: its correct rounding is 3.0*0.1.
        assert_eq!(sum.value(), 3.0 * 0.1);
        let mut square = ExactSum::new();
        let x = 1.0 + f64::EPSILON;
        square.add_product(x, x);
        square.add(-1.0);
        square.add(-2.0 * f64::EPSILON);
        assert_eq!(square.value(), f64::EPSILON * f64::EPSILON);
    }

    #[test]
    fn order_blocks_and_merging_do_not_matter() {
        // A fixed sequence over 600 powers of two, with signs (multiplicative congruential, invented numbers).
        let mut state = 12_345_u64;
        let values: Vec<f64> = (0..20_000)
            .map(|_| {
                state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
                let exponent = (state >> 33) % 600;
                let size = fm::scale_by_power_of_two(
                    1.0 + (state >> 12) as f64 / 4503599627370496.0,
                    exponent as i32 - 300,
                );
                if state >> 63 == 1 { -size } else { size }
            })
            .collect();
        let mut all = Moments::new();
        values.iter().for_each(|v| all.add(*v));
        for block in [1, 7, 1000, 4096] {
            let mut merged = Moments::new();
            for part in values.rchunks(block) {
                let mut one = Moments::new();
                part.iter().rev().for_each(|v| one.add(*v));
                merged.merge(&one);
            }
            assert_eq!(merged.n(), all.n());
            assert_eq!(merged.sum().to_bits(), all.sum().to_bits());
            assert_eq!(merged.mean().to_bits(), all.mean().to_bits());
            assert_eq!(merged.centred_ss().to_bits(), all.centred_ss().to_bits());
            assert_eq!(merged.sd().to_bits(), all.sd().to_bits());
        }
    }

    #[test]
    fn spread_survives_a_large_mean_and_any_scale() {
        for scale in [1.0, 1e150, 1e-150, 1e300, 1e-300] {
            let mut m = Moments::new();
            for x in [1.0, 2.0, 3.0, 4.0] {
                m.add(x * scale);
            }
            assert!((m.mean() / scale - 2.5).abs() < 1e-15);
            assert!((m.sd() / scale - (5.0_f64 / 3.0).sqrt()).abs() < 1e-15, "{scale} {}", m.sd());
        }
        let mut m = Moments::new();
        for x in [1e9 + 0.25, 1e9, 1e9 - 0.25] {
            m.add(x);
        }
        assert_eq!(m.centred_ss(), 0.125);
        assert_eq!(m.mean_rest(), 0.0);
        // The exact mean is 10⁹ + 2⁻²³/3 · k: the double nearest to it, and what that leaves.
        let mut m = Moments::new();
        let step = fm::scale_by_power_of_two(1.0, -23);
        for x in [1e9, 1e9 + step, 1e9 + 3.0 * step, 1e9 + step] {
            m.add(x);
        }
        assert_eq!((m.mean() - 1e9) + m.mean_rest(), 1.25 * step);
        assert_eq!(m.mean_rest().abs(), 0.25 * step);
        let mut one = Moments::new();
        one.add(0.1);
        assert_eq!(one.centred_ss(), 0.0);
        assert!(one.sd().is_nan());
        assert!(Moments::new().mean().is_nan());
    }
}
