//! A step of a derivation: what is computed, by which formula, from which values, with which result.
//! Answers carry their steps so that a report, or `working`, can show every figure's way.

/// One line of a derivation.
#[derive(Debug, Clone, PartialEq)]
pub struct Step {
    /// What is computed, in words: "weight of the prior".
    pub label: String,
    /// The formula in symbols: "B = (σ²/n) / (v0 + σ²/n)".
    pub formula: String,
    /// The values put in, by symbol.
    pub put_in: Vec<(String, f64)>,
    pub result: f64,
}

impl Step {
    pub fn new(label: &str, formula: &str, put_in: &[(&str, f64)], result: f64) -> Step {
        Step {
            label: label.to_string(),
            formula: formula.to_string(),
            put_in: put_in.iter().map(|(symbol, value)| (symbol.to_string(), *value)).collect(),
            result,
        }
    }
}
