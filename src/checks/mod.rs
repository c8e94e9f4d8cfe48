//! Stage 7: checks of the assumptions.

/// How much a check has against the assumption it looked at.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Concern {
    /// Nothing was found against the assumption, or the check was not made.
    None,
    /// p from 0.01 to 0.05, or a fact worth knowing.
    Remark,
    /// p below 0.01, or a fact that puts the answers in doubt.
    Flag,
}

/// What one check of an assumption found.
#[derive(Clone, Debug, PartialEq)]
pub struct Check {
    /// The name by which a spec and a report know the check, such as "prior conflict".
    pub id: &'static str,
    /// The statistic; none where the check was not made or has none.
    pub statistic: Option<f64>,
    /// What the statistic is, such as "SS / sd^2".
    pub statistic_name: &'static str,
    /// The law of the statistic under the assumption, such as "chi-square, 11 df".
    pub reference: String,
    /// The p-value; none where the check was not made or is not a test.
    pub p: Option<f64>,
    /// Nothing, a remark or a flag.
    pub concern: Concern,
    /// What was found, in plain words with its numbers.
    pub meaning: String,
    /// What follows for the reader.
    pub consequence: String,
    /// Further figures by name, such as the effective number of readings or the ends of a band.
    pub extra: Vec<(&'static str, f64)>,
    /// Why the check was not made; none when it was.
    pub why: Option<String>,
}
