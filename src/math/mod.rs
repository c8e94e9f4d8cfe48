//! Ground: the numerical functions everything else stands on, and the only place that names `libm` or `statrs`.
//!
//! Both tails of a distribution have their own function, and neither is formed as 1 minus the other. Quantiles are
//! solved on the smaller tail. What cannot be computed to its promised accuracy is a `MathError`.

pub mod error;
pub mod fm;
pub mod sums;
pub mod roots;
pub mod normal;
pub mod quadrature;
pub mod mixture;
pub mod gamma;
pub mod chi_square;
pub mod inverse_gamma;
pub mod beta;
pub mod student;
pub mod f_law;
pub mod noncentral_t;
pub mod owens_t;
pub mod pvalues;
pub mod promises;

mod gamma_temme;
mod special;
