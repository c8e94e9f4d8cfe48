//! Checks of the assumptions: one file a check, each a pure function over plain numbers.
//!
//! A check never excludes a reading, never changes an answer and never stops a review. It gives
//! a statistic, the law the statistic would follow if the assumption held, a p-value, and in plain
//! words what was found and what follows from it. A check that cannot be made says why.
//!
//! p < 0.01 is a flag, 0.01 to 0.05 a remark. A two-sided p is min(1, 2 min(lower, upper)). The
//! two levels are common practice, no source.
//!
//! The head comment of each file is the user's page of that check; [`ALL`] carries it.

pub mod anderson_darling;
pub mod bartlett;
pub mod brown_forsythe;
pub mod coverage;
pub mod duplicates;
pub mod homogeneity;
pub mod last_digits;
pub mod many_series;
pub mod normality;
pub mod outliers;
pub mod page;
pub mod predictive_extremes;
pub mod predictive_skew;
pub mod predictive_spread;
pub mod printed;
pub mod prior_conflict;
pub mod prior_predictive;
pub mod rounding;
pub mod runs;
pub mod season;
pub mod serial_correlation;
pub mod shapiro_wilk;
pub mod suite;
pub mod tails;
pub mod timed;
pub mod trend;
pub mod unit_jump;
pub mod von_neumann;
pub mod within_sd;
pub mod within_sd_worth;
pub mod words;

#[cfg(test)]
mod tests;

/// p below which a check raises a flag (common practice, no source).
pub const FLAG_BELOW: f64 = 0.01;
/// p below which a check makes a remark (common practice, no source).
pub const REMARK_BELOW: f64 = 0.05;

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

impl Concern {
    /// The concern that belongs to a p-value.
    pub fn of_p(p: f64) -> Concern {
        if p < FLAG_BELOW {
            Concern::Flag
        } else if p < REMARK_BELOW {
            Concern::Remark
        } else {
            Concern::None
        }
    }

    /// The word printed for it.
    pub fn word(self) -> &'static str {
        match self {
            Concern::None => "none",
            Concern::Remark => "remark",
            Concern::Flag => "flag",
        }
    }
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
    /// True where the model allows for what p speaks of: p then tells a fact and tests no assumption.
    pub describes: bool,
    /// Why the check was not made; none when it was.
    pub why: Option<String>,
}

/// What a check says when it found nothing.
const NOTHING_FOLLOWS: &str = "No action follows from this check.";

impl Check {
    /// A check that was made, with its statistic; the rest is added by the methods below.
    pub(crate) fn of(id: &'static str, statistic_name: &'static str, statistic: f64) -> Check {
        Check {
            id,
            statistic: Some(statistic),
            statistic_name,
            reference: String::new(),
            p: None,
            concern: Concern::None,
            meaning: String::new(),
            consequence: NOTHING_FOLLOWS.to_owned(),
            extra: Vec::new(),
            describes: false,
            why: None,
        }
    }

    /// A check that was not made, with the reason. It carries no concern.
    pub fn not_made(id: &'static str, statistic_name: &'static str, why: impl Into<String>) -> Check {
        let why = why.into();
        Check {
            id,
            statistic: None,
            statistic_name,
            reference: String::new(),
            p: None,
            concern: Concern::None,
            meaning: format!("Not made: {why}."),
            consequence: "The assumption stands unchecked.".to_owned(),
            extra: Vec::new(),
            describes: false,
            why: Some(why),
        }
    }

    /// Sets the law of the statistic.
    pub(crate) fn reference(mut self, law: impl Into<String>) -> Check {
        self.reference = law.into();
        self
    }

    /// Sets the p-value and the concern that belongs to it.
    pub(crate) fn p(mut self, p: f64) -> Check {
        self.p = Some(p);
        self.concern = Concern::of_p(p);
        self
    }

    /// The p-value of a test of an assumption, where this is one that was made.
    pub fn tested(&self) -> Option<f64> {
        self.p.filter(|_| !self.describes && self.why.is_none())
    }

    /// Marks what the model allows for: a small p is no concern.
    pub(crate) fn describing(mut self) -> Check {
        self.describes = true;
        self.concern = Concern::None;
        self
    }

    /// Sets the concern of a check that is not a test.
    pub(crate) fn concern(mut self, concern: Concern) -> Check {
        self.concern = concern;
        self
    }

    /// Sets what was found.
    pub(crate) fn meaning(mut self, meaning: impl Into<String>) -> Check {
        self.meaning = meaning.into();
        self
    }

    /// Sets what follows if there is a concern; with none, nothing follows and this is not used.
    pub(crate) fn if_concerned(mut self, consequence: impl Into<String>) -> Check {
        if self.concern != Concern::None {
            self.consequence = consequence.into();
        }
        self
    }

    /// Adds a named figure.
    pub(crate) fn extra(mut self, name: &'static str, value: f64) -> Check {
        self.extra.push((name, value));
        self
    }

    /// The named figure, if the check has it.
    pub fn figure(&self, name: &str) -> Option<f64> {
        self.extra.iter().find(|(known, _)| *known == name).map(|(_, value)| *value)
    }
}

/// One kind of check: its name, its page and where the method was published.
#[derive(Clone, Copy, Debug)]
pub struct CheckKind {
    /// The name by which a spec and a report know the check.
    pub id: &'static str,
    /// The head comment of the check's file, each line still led by its comment mark;
    /// [`CheckKind::text`] gives it plain.
    pub page: &'static str,
    /// Where the method was published.
    pub source: &'static str,
}

impl CheckKind {
    /// The user's page of this check as plain text.
    pub fn text(&self) -> String {
        page::plain(self.page)
    }
}

/// The kind of check with this name.
pub fn kind(id: &str) -> Option<&'static CheckKind> {
    ALL.iter().find(|kind| kind.id == id)
}

macro_rules! kind {
    ($module:ident, $file:literal) => {
        CheckKind { id: $module::ID, page: page::head(include_str!($file)), source: $module::SOURCE }
    };
}

/// Every check, in the order of a report.
pub const ALL: &[CheckKind] = &[
    kind!(within_sd, "within_sd.rs"),
    kind!(within_sd_worth, "within_sd_worth.rs"),
    kind!(prior_predictive, "prior_predictive.rs"),
    kind!(prior_conflict, "prior_conflict.rs"),
    kind!(normality, "normality.rs"),
    kind!(outliers, "outliers.rs"),
    kind!(trend, "trend.rs"),
    kind!(von_neumann, "von_neumann.rs"),
    kind!(serial_correlation, "serial_correlation.rs"),
    kind!(runs, "runs.rs"),
    kind!(brown_forsythe, "brown_forsythe.rs"),
    kind!(bartlett, "bartlett.rs"),
    kind!(homogeneity, "homogeneity.rs"),
    kind!(predictive_spread, "predictive_spread.rs"),
    kind!(predictive_extremes, "predictive_extremes.rs"),
    kind!(predictive_skew, "predictive_skew.rs"),
    kind!(rounding, "rounding.rs"),
    kind!(last_digits, "last_digits.rs"),
    kind!(duplicates, "duplicates.rs"),
    kind!(unit_jump, "unit_jump.rs"),
    kind!(coverage, "coverage.rs"),
    kind!(season, "season.rs"),
    kind!(many_series, "many_series.rs"),
];
