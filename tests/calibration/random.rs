//! Seeded random numbers of our own, the same on every machine.

use reassay::math::fm;

/// PCG-XSH-RR 64/32 (O'Neill 2014).
#[derive(Debug)]
pub struct Random(u64);

impl Random {
    pub fn new(seed: u64) -> Random {
        let mut random = Random(seed.wrapping_mul(0xA076_1D64_78BD_642F).wrapping_add(0x9E37_79B9_7F4A_7C15));
        random.next();
        random
    }

    fn next(&mut self) -> u32 {
        let old = self.0;
        self.0 = old.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        let shifted = (((old >> 18) ^ old) >> 27) as u32;
        shifted.rotate_right((old >> 59) as u32)
    }

    /// In (0, 1), to 32 bits.
    pub fn uniform(&mut self) -> f64 {
        (f64::from(self.next()) + 0.5) / 4_294_967_296.0
    }

    pub fn between(&mut self, lower: f64, upper: f64) -> f64 {
        lower + (upper - lower) * self.uniform()
    }

    /// One of these.
    pub fn of<T: Copy>(&mut self, choices: &[T]) -> T {
        choices[(self.uniform() * choices.len() as f64) as usize]
    }

    /// Standard normal (Box & Muller 1958).
    fn standard(&mut self) -> f64 {
        let (a, b) = (self.uniform(), self.uniform());
        (-2.0 * fm::ln(a)).sqrt() * fm::cos(2.0 * std::f64::consts::PI * b)
    }

    pub fn normal(&mut self, mean: f64, sd: f64) -> f64 {
        mean + sd * self.standard()
    }

    pub fn half_normal(&mut self, scale: f64) -> f64 {
        self.normal(0.0, scale).abs()
    }

    /// The ratio of two normals.
    pub fn half_cauchy(&mut self, scale: f64) -> f64 {
        (scale * self.standard() / self.standard()).abs()
    }

    /// An sd whose square is scaled inverse chi-square.
    pub fn sd_worth(&mut self, sd: f64, df: u32) -> f64 {
        let chi_square: f64 = (0..df).map(|_| self.normal(0.0, 1.0)).map(|z| z * z).sum();
        sd * (f64::from(df) / chi_square).sqrt()
    }

    pub fn normals(&mut self, n: usize, mean: f64, sd: f64) -> Vec<f64> {
        (0..n).map(|_| self.normal(mean, sd)).collect()
    }
}
