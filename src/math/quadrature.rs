//!
//! The trapezoid rule on an analytic integrand that dies out at both ends converges exponentially in the step (Takahasi
//! & Mori 1974; Trefethen & Weideman 2014, SIAM Review 56), gives its own error by halving, and adds in a fixed order.
//! What it needs is to be put where the mass is: the integrand is given as a logarithm, its highest points are found
//! first, and the step starts from their widths. A half line or an interval is mapped to the whole line first (`maps`).

pub mod expect;
pub mod kronrod;
pub mod line;
pub mod maps;
pub mod plane;

pub use expect::expect_normal;
pub use kronrod::{confirm_line, gk21};
pub use line::{Line, LineOptions, Node, Tails, line};
pub use plane::{Plane, PlaneNode, PlaneOptions, plane};

/// The value of an integral and a bound on its error, from the rule's own comparison of two results.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Integral {
    /// The finer of the two results.
    pub value: f64,
    /// The difference that was accepted, absolute.
    pub error: f64,
}
