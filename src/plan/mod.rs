//! Stage 2: what the spec means. Every default is filled in, paths are found and names resolved;
//! past here nobody asks whether a key is missing. What belongs to one source of a prior or one kind
//! of question stays a [`Table`] until the stage that owns it reads it.

mod about;
mod compared;
mod linked;
mod load;
mod make;
mod questions;
mod rows;
mod series;
mod sources;
mod toml_text;
#[cfg(test)]
mod tests;
mod written;

pub use about::BUILT_IN_TEMPLATES;
pub use linked::{FoundFile, FoundReview, LinkedReview};
pub use load::{ReadBytes, load};
pub use make::in_order_of_text;
pub use series::{OverrideCell, STANDING_ALTERNATIVES};
pub use written::{Filled, plan_toml};

use crate::quantity::{Period, Scale, Sd};
pub use crate::spec::reader::Threshold;
use crate::spec::table::{Span, Table};
use jiff::civil::Date;
use std::collections::BTreeMap;
use std::path::PathBuf;

#[derive(Debug, Clone, PartialEq)]
pub struct Plan {
    pub review: ReviewPlan,
    pub quantity: Quantity,
    /// In the order of the spec.
    pub limits: Vec<Limit>,
    pub sources: Vec<Source>,
    pub excludes: Vec<Exclude>,
    pub events: Vec<Event>,
    pub history: History,
    pub within: Table,
    pub prior: Table,
    /// The prior of a series whose history is too short.
    pub otherwise: Option<Table>,
    pub alternatives: Vec<Alternative>,
    pub series: BTreeMap<String, SeriesOverride>,
    /// A file with more of the same, one row a series; whoever reads it hands each row to
    /// [`Plan::override_row`].
    pub overrides: Option<OverridesFile>,
    pub questions: Vec<QuestionPlan>,
    pub report: ReportPlan,
    /// The spec, and its base where it has one: their bytes are stamped.
    pub spec_files: Vec<SpecFile>,
    pub actions: Vec<Action>,
    /// The other reviews that the spec names.
    pub linked: Vec<LinkedReview>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct SpecFile {
    /// As the user named it.
    pub name: String,
    pub path: PathBuf,
    pub bytes: Vec<u8>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Status {
    Draft,
    Interim,
    Final,
}

impl Status {
    /// "draft", "interim" or "final", as the spec says it.
    pub fn word(self) -> &'static str {
        match self {
            Status::Draft => "draft",
            Status::Interim => "interim",
            Status::Final => "final",
        }
    }
}

#[derive(Debug, Clone, PartialEq)]
pub struct ReviewPlan {
    pub title: String,
    pub id: String,
    pub period: Period,
    pub date: Date,
    pub status: Status,
    pub until: Option<Date>,
    pub purpose: Option<String>,
    pub interpretation: Option<Opinion>,
    pub particulars: Vec<(String, String)>,
    pub previous: Option<Link>,
    pub supersedes: Option<Link>,
    pub sign_off: Vec<SignOff>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Opinion {
    pub text: String,
    pub by: Option<String>,
}

/// Another review that this one builds on or replaces.
#[derive(Debug, Clone, PartialEq)]
pub struct Link {
    pub folder: PathBuf,
    /// As written in the spec.
    pub written: String,
    pub stamp: Option<String>,
    pub reason: Option<String>,
    pub span: Span,
}

#[derive(Debug, Clone, PartialEq)]
pub struct SignOff {
    pub role: String,
    pub name: Option<String>,
    pub meaning: Option<String>,
    pub on: Option<Date>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Action {
    pub what: String,
    pub owner: Option<String>,
    pub due: Option<Date>,
    pub state: String,
    pub set_by: Option<String>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Quantity {
    pub name: String,
    pub unit: String,
    pub scale: Scale,
    pub method: Option<String>,
    /// Readings are rounded to this.
    pub step: Option<Sd>,
    pub bias: Option<Bias>,
}

/// A standard uncertainty common to all readings.
#[derive(Debug, Clone, PartialEq)]
pub struct Bias {
    pub sd: Sd,
    pub basis: String,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Limit {
    pub name: String,
    /// One-sided: `Value`; two-sided: `Range`.
    pub bounds: Bounds,
    pub basis: String,
    pub applies_to: AppliesTo,
    /// Decimals with which the limit was written; the report prints at least as many.
    pub decimals: usize,
    pub span: Span,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Bounds {
    Value(f64),
    Range(f64, f64),
}

impl Bounds {
    /// The value, or the lower and the upper bound.
    pub fn ends(self) -> Vec<f64> {
        match self {
            Bounds::Value(value) => vec![value],
            Bounds::Range(lower, upper) => vec![lower, upper],
        }
    }
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum AppliesTo {
    EachReading,
    Level,
    Percentile,
}

/// One `[[readings]]` or `[[summaries]]` table.
#[derive(Debug, Clone, PartialEq)]
pub struct Source {
    pub what: SourceKind,
    pub from: Whence,
    /// Columns that rows must match, each with the texts that serve.
    pub rows_where: Vec<(String, Vec<String>)>,
    pub period: PeriodOf,
    pub series: SeriesOf,
    pub date: Option<String>,
    pub date_order: DateOrder,
    pub id: Option<String>,
    pub missing: Vec<String>,
    pub delimiter: Option<u8>,
    pub decimal_comma: bool,
    pub encoding: Option<String>,
    /// Lines before the head.
    pub skip: u64,
    pub span: Span,
}

#[derive(Debug, Clone, PartialEq)]
pub enum SourceKind {
    Readings {
        value: String,
        uncertainty: Option<String>,
        coverage: Coverage,
        replicates: Option<String>,
        unit: Option<String>,
        marks: Marks,
        planned: Option<u64>,
    },
    Summaries(SummaryColumns),
}

#[derive(Debug, Clone, PartialEq)]
pub enum Coverage {
    Factor(f64),
    Column(String),
}

/// Which cells mean "below" and "above" something.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Marks {
    pub below: Vec<String>,
    pub above: Vec<String>,
    /// Where the mark stands apart from the number.
    pub column: Option<String>,
    /// The limit of a mark without a number.
    pub limit: Option<NumberOrColumn>,
}

#[derive(Debug, Clone, PartialEq)]
pub enum NumberOrColumn {
    Number(f64),
    Column(String),
}

/// The columns of summaries in a file; for inline rows the keys have the same names.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct SummaryColumns {
    pub n: Option<String>,
    pub mean: Option<String>,
    pub sd: Option<String>,
    pub uncertainty: Option<String>,
    pub log_mean: Option<String>,
    pub log_sd: Option<String>,
    pub geometric_mean: Option<String>,
    pub geometric_sd: Option<String>,
}

#[derive(Debug, Clone, PartialEq)]
pub enum Whence {
    Files(Vec<FileRef>),
    /// Values in the spec: the text of each as written ("61.2", "<0.5"), and own uncertainties.
    Values {
        values: Vec<(String, Span)>,
        uncertainties: Option<Vec<f64>>,
    },
    /// Summaries in the spec.
    Rows(Vec<SummaryRow>),
}

#[derive(Debug, Clone, PartialEq)]
pub struct FileRef {
    /// As the spec names it; with `/`.
    pub written: String,
    /// Found relative to the spec.
    pub path: PathBuf,
    /// The pinned hash, lower case.
    pub sha256: Option<String>,
    pub span: Span,
}

#[derive(Debug, Clone, PartialEq)]
pub struct SummaryRow {
    pub series: Option<String>,
    pub period: Option<Period>,
    pub n: Option<u64>,
    pub mean: Option<f64>,
    pub sd: Option<f64>,
    pub uncertainty: Option<f64>,
    pub log_mean: Option<f64>,
    pub log_sd: Option<f64>,
    pub geometric_mean: Option<f64>,
    pub geometric_sd: Option<f64>,
    pub span: Span,
}

#[derive(Debug, Clone, PartialEq)]
pub enum PeriodOf {
    Column(String),
    Always(Period),
    /// The year that the date falls in; years start on this month and day.
    YearOfDate {
        month: i8,
        day: i8,
    },
}

#[derive(Debug, Clone, PartialEq)]
pub enum SeriesOf {
    Column(String),
    Always(String),
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum DateOrder {
    YearMonthDay,
    DayMonthYear,
    MonthDayYear,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Exclude {
    pub rows_where: Vec<(String, Vec<String>)>,
    pub rows: u64,
    pub reason: String,
    pub by: String,
    pub on: Date,
    pub span: Span,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Event {
    pub date: Date,
    pub what: String,
    /// method, instrument, staff, site or incident.
    pub kind: Option<String>,
    pub series: Option<String>,
}

#[derive(Debug, Clone, PartialEq, Default)]
pub struct History {
    pub first: Option<Period>,
    pub last: Option<Period>,
    /// The order of the periods where they are not whole numbers and have no dates.
    pub order: Option<Vec<Period>>,
    pub leave_out: Vec<(Period, String)>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Alternative {
    pub id: String,
    pub prior: Option<Table>,
    pub within: Option<Table>,
    pub scale: Option<Scale>,
    pub span: Span,
}

#[derive(Debug, Clone, PartialEq, Default)]
pub struct SeriesOverride {
    pub label: Option<String>,
    pub planned: Option<u64>,
    /// By name of the limit: bounds that replace the general ones.
    pub limits: BTreeMap<String, Bounds>,
    /// As written: put over the general table by [`Plan::prior_table`].
    pub prior: Option<Table>,
    /// The `otherwise` of this series' own prior.
    pub otherwise: Option<Table>,
    /// As written: put over the general table by [`Plan::within_table`].
    pub within: Option<Table>,
    pub bias: Option<Bias>,
}

/// `[overrides]`: a table with one row a series.
#[derive(Debug, Clone, PartialEq)]
pub struct OverridesFile {
    pub file: FileRef,
    /// The column of the series.
    pub series: String,
    /// What a column sets (`label`, `limit.tolerance.upper`, `prior.mean`), the column, and where
    /// the spec says so.
    pub columns: Vec<(String, String, Span)>,
    pub delimiter: Option<u8>,
    pub decimal_comma: bool,
    pub encoding: Option<String>,
    pub skip: u64,
}

#[derive(Debug, Clone, PartialEq)]
pub struct QuestionPlan {
    pub id: String,
    pub ask: String,
    pub say: Option<String>,
    /// The series it is asked of; `None`: all.
    pub only: Option<Vec<String>>,
    pub rule: Option<Rule>,
    /// The whole table, for the kind's own keys.
    pub table: Table,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Rule {
    pub agreed: Option<Date>,
    pub agreed_by: Option<String>,
    /// Ids of checks that, when flagged, hold the verdict back.
    pub hold_on: Vec<String>,
    /// Tried in order; the last has no conditions.
    pub verdicts: Vec<Verdict>,
    pub span: Span,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Verdict {
    pub say: String,
    pub fail: bool,
    /// All must hold.
    pub conditions: Vec<(Condition, Threshold)>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Condition {
    ChanceAtLeast,
    ChanceAtMost,
    CountAtLeast,
    CountAtMost,
    EstimateAbove,
    EstimateBelow,
    LowerAbove,
    UpperBelow,
}

#[derive(Debug, Clone, PartialEq)]
pub struct ReportPlan {
    pub template: TemplateChoice,
    pub markdown: bool,
    pub html: bool,
    pub detail: Detail,
    pub inputs_copied: bool,
}

#[derive(Debug, Clone, PartialEq)]
pub enum TemplateChoice {
    BuiltIn(String),
    Own(FileRef),
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Detail {
    All,
    Flagged,
    None,
}

impl Plan {
    /// The limit of that name.
    pub fn limit(&self, name: &str) -> Option<&Limit> {
        self.limits.iter().find(|limit| limit.name == name)
    }

    /// A limit's bounds as they hold for one series.
    pub fn bounds(&self, name: &str, series: &str) -> Option<Bounds> {
        let own = self.series.get(series).and_then(|own| own.limits.get(name).copied());
        own.or_else(|| self.limit(name).map(|limit| limit.bounds))
    }
}
