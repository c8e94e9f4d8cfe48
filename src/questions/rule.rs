//! Decision rules: the first verdict whose conditions all hold. Unrounded figures are compared.

/// What a rule gave.
#[derive(Debug, Clone, PartialEq)]
pub struct Given {
    /// The verdict's words; `None` where an undefined answer gives none.
    pub say: Option<String>,
    pub fail: bool,
    /// Why it was held back, or why there is none.
    pub why: Option<String>,
}
