//! The inner units: one shift and one power of two for all values of a model, so that readings near
//! 1e±150 or far from 0 lose no digit in squares and differences.

use crate::math::fm;

/// inner = (outer − shift) / scale.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Units {
    pub shift: f64,
    pub scale: f64,
}

impl Units {
    /// Scale: the power of two next to `size`, so that dividing rounds nothing.
    pub fn new(shift: f64, size: f64) -> Units {
        let scale = if size.is_finite() && size > 0.0 {
            let exponent = fm::round(fm::ln(size) / fm::LN_2).clamp(-500.0, 500.0);
            fm::scale_by_power_of_two(1.0, exponent as i32)
        } else {
            1.0
        };
        Units { shift, scale }
    }

    pub fn value_in(&self, x: f64) -> f64 {
        (x - self.shift) / self.scale
    }

    pub fn sd_in(&self, s: f64) -> f64 {
        s / self.scale
    }

    /// A variance or a sum of squares.
    pub fn square_in(&self, v: f64) -> f64 {
        v / self.scale / self.scale
    }

    pub fn value_out(&self, x: f64) -> f64 {
        self.shift + self.scale * x
    }

    pub fn sd_out(&self, s: f64) -> f64 {
        self.scale * s
    }

    pub fn square_out(&self, v: f64) -> f64 {
        self.scale * (self.scale * v)
    }
}
