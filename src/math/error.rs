//! The one error of the numerical ground.

use core::fmt;

/// Why a number could not be computed to its promised accuracy.
///
/// A function of this module either keeps its promise or returns this: an iteration cap that was reached, a bracket
/// that could not be found, an argument that is NaN or out of range. It never hands back the last iterate.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct MathError {
    what: String,
}

/// A number (or several), or the reason why there is none.
pub type Result<T> = core::result::Result<T, MathError>;

impl MathError {
    /// An error that says in plain words what could not be done.
    pub fn new(what: impl Into<String>) -> Self {
        Self { what: what.into() }
    }

    /// An argument outside the range where the function is defined: `function: argument is value, needs range`.
    pub fn argument(function: &str, argument: &str, value: f64, needs: &str) -> Self {
        Self::new(format!("{function}: {argument} is {value}, but must be {needs}"))
    }

    /// The same error with the outer computation named in front.
    #[must_use]
    pub fn within(self, outer: &str) -> Self {
        Self { what: format!("{outer}: {}", self.what) }
    }

    /// What could not be done.
    pub fn what(&self) -> &str {
        &self.what
    }
}

impl fmt::Display for MathError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.what)
    }
}

impl core::error::Error for MathError {}

/// `value` when it is finite, else the error for `argument` of `function`.
pub fn finite(function: &str, argument: &str, value: f64) -> Result<f64> {
    if value.is_finite() { Ok(value) } else { Err(MathError::argument(function, argument, value, "finite")) }
}

/// `value` when it is finite and above zero, else the error for `argument` of `function`.
pub fn positive(function: &str, argument: &str, value: f64) -> Result<f64> {
    if value.is_finite() && value > 0.0 {
        Ok(value)
    } else {
        Err(MathError::argument(function, argument, value, "finite and above 0"))
    }
}

/// `value` when it lies strictly between 0 and 1, else the error for `argument` of `function`.
pub fn inside_unit(function: &str, argument: &str, value: f64) -> Result<f64> {
    if value > 0.0 && value < 1.0 {
        Ok(value)
    } else {
        Err(MathError::argument(function, argument, value, "between 0 and 1, both excluded"))
    }
}
