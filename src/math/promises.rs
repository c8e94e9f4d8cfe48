//! What accuracy is promised, in one table. `tests/reference` walks it against high-precision values.

/// The measure of an error.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Measure {
    /// |value − reference| / |reference|.
    Relative,
    /// |value − reference| / max(1, |reference|): for functions that pass through 0.
    Mixed,
}

/// A function, where it is promised, and the largest error.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Promise {
    /// The name of the reference table, which is the function's name.
    pub function: &'static str,
    /// The function in this crate.
    pub path: &'static str,
    /// The largest size of the first parameter (df or shape; z, h or x where it is the only one) for this bound.
    pub up_to: f64,
    /// The largest error.
    pub bound: f64,
    /// How the error is measured.
    pub measure: Measure,
}

const fn promise(
    function: &'static str,
    path: &'static str,
    up_to: f64,
    bound: f64,
    measure: Measure,
) -> Promise {
    Promise { function, path, up_to, bound, measure }
}

/// Results below this size (and references) are outside all promises: numbers there have fewer digits.
pub const SMALLEST: f64 = 1e-300;

/// Every promise, functions in the order of their modules. Where a function has several rows, the first whose `up_to`
/// holds counts.
pub const PROMISES: &[Promise] = &[
    promise("exp", "fm::exp", f64::INFINITY, 2.3e-16, Measure::Relative),
    promise("normal_cdf", "normal::cdf", f64::INFINITY, 1e-15, Measure::Relative),
    promise("normal_sf", "normal::sf", f64::INFINITY, 1e-15, Measure::Relative),
    promise("normal_logcdf", "normal::ln_cdf", f64::INFINITY, 1e-15, Measure::Relative),
    promise("normal_logsf", "normal::ln_sf", f64::INFINITY, 1e-15, Measure::Relative),
    promise("normal_ppf", "normal::quantile", f64::INFINITY, 1e-15, Measure::Relative),
    promise("lognormal_cdf", "mixture::NormalMixture::cdf", f64::INFINITY, 2e-13, Measure::Relative),
    promise("lognormal_sf", "mixture::NormalMixture::sf", f64::INFINITY, 2e-13, Measure::Relative),
    promise("lognormal_ppf", "mixture::NormalMixture::quantile", f64::INFINITY, 5e-14, Measure::Relative),
    promise("t_cdf", "student::cdf", f64::INFINITY, 2e-13, Measure::Relative),
    promise("t_sf", "student::sf", f64::INFINITY, 2e-13, Measure::Relative),
    promise("t_ppf", "student::quantile", f64::INFINITY, 2e-13, Measure::Relative),
    promise("t_logpdf", "student::ln_pdf", f64::INFINITY, 1e-14, Measure::Mixed),
    promise("chi2_cdf", "chi_square::cdf", f64::INFINITY, 5e-13, Measure::Relative),
    promise("chi2_sf", "chi_square::sf", f64::INFINITY, 5e-13, Measure::Relative),
    promise("chi2_ppf", "chi_square::quantile", f64::INFINITY, 5e-14, Measure::Relative),
    promise("chi2_isf", "chi_square::upper_quantile", f64::INFINITY, 5e-14, Measure::Relative),
    promise("gamma_p", "gamma::p", f64::INFINITY, 5e-13, Measure::Relative),
    promise("gamma_q", "gamma::q", f64::INFINITY, 5e-13, Measure::Relative),
    promise("gamma_ppf", "gamma::quantile", f64::INFINITY, 2e-13, Measure::Relative),
    promise("invgamma_cdf", "inverse_gamma::cdf", f64::INFINITY, 1e-12, Measure::Relative),
    promise("invgamma_sf", "inverse_gamma::sf", f64::INFINITY, 1e-12, Measure::Relative),
    promise("invgamma_ppf", "inverse_gamma::quantile", f64::INFINITY, 5e-14, Measure::Relative),
    promise("beta_cdf", "beta::cdf", f64::INFINITY, 1e-12, Measure::Relative),
    promise("beta_sf", "beta::sf", f64::INFINITY, 1e-12, Measure::Relative),
    promise("beta_ppf", "beta::quantile", f64::INFINITY, 2e-13, Measure::Relative),
    promise("lbeta", "beta::ln_beta", f64::INFINITY, 1e-14, Measure::Mixed),
    promise("lgamma", "fm::ln_gamma", f64::INFINITY, 1e-15, Measure::Mixed),
    promise("digamma", "gamma::digamma", f64::INFINITY, 1e-15, Measure::Mixed),
    promise("trigamma", "gamma::trigamma", f64::INFINITY, 2e-15, Measure::Relative),
    promise("nct_cdf", "noncentral_t::cdf", f64::INFINITY, 2e-13, Measure::Relative),
    promise("nct_sf", "noncentral_t::sf", f64::INFINITY, 2e-13, Measure::Relative),
    promise("owens_t", "owens_t::owens_t", f64::INFINITY, 5e-15, Measure::Relative),
    promise("f_cdf", "f_law::cdf", f64::INFINITY, 5e-13, Measure::Relative),
    promise("f_sf", "f_law::sf", f64::INFINITY, 5e-13, Measure::Relative),
];
