//! The keys of the spec, section by section: the language in one place. Sources of a prior, of the
//! within sd, and kinds of question bring the tables of their own keys where they are computed.

use crate::spec::keys::{Key, Takes};

/// The version of the language that this program reads.
pub const VERSION: i64 = 1;

pub const TOP: &[Key] = &[
    Key::optional("language", Takes::Count, "the version of this language: 1"),
    Key::optional("base", Takes::Text, "a spec from which tables and keys left out here are taken"),
    Key::required("review", Takes::Table, "what this review is about"),
    Key::required("quantity", Takes::Table, "what is measured"),
    Key::optional("limit", Takes::Other("tables such as [limit.guideline]"), "limits, each by its name"),
    Key::optional("readings", Takes::Tables, "sources of single readings"),
    Key::optional("summaries", Takes::Tables, "sources of n, mean and sd per series and period"),
    Key::optional("exclude", Takes::Tables, "rows left out, with the reason, by whom and when"),
    Key::optional("event", Takes::Tables, "what happened, for the plots in time"),
    Key::optional("action", Takes::Tables, "what is to be done"),
    Key::optional("history", Takes::Table, "which earlier periods count"),
    Key::required("within", Takes::Table, "the standard deviation of single readings about their level"),
    Key::required("prior", Takes::Table, "what was known before this period's readings"),
    Key::optional("alternative", Takes::Tables, "other priors and spreads, for the sensitivity section"),
    Key::optional("series", Takes::Other("tables such as [series.\"A-1\"]"), "what differs for one series"),
    Key::optional("overrides", Takes::Table, "what differs for single series, by a file"),
    Key::optional("question", Takes::Tables, "what is asked"),
    Key::optional("report", Takes::Table, "how the report is laid out"),
];

pub const REVIEW: &[Key] = &[
    Key::required("title", Takes::Text, "the title of the report"),
    Key::optional(
        "id",
        Takes::Text,
        "names the review's folder; default: the spec's file name without ending",
    ),
    Key::required("period", Takes::Period, "the period under review"),
    Key::required("date", Takes::Date, "the date of the report"),
    Key::optional(
        "status",
        Takes::OneOf(&["draft", "interim", "final"]),
        "draft (default), interim or final",
    ),
    Key::optional("until", Takes::Date, "interim only: later readings are counted, not used"),
    Key::optional("purpose", Takes::Markdown, "what the review is for"),
    Key::optional("interpretation", Takes::Table, "{ text, by }: printed as opinion"),
    Key::optional("particulars", Takes::Table, "texts printed in the head, in this order"),
    Key::optional("previous", Takes::Table, "{ review, stamp }: the review before this one"),
    Key::optional("supersedes", Takes::Table, "{ review, stamp, reason }: the review that this one amends"),
    Key::optional("sign_off", Takes::Tables, "{ role, name, meaning, on }: who signs"),
];

pub const INTERPRETATION: &[Key] = &[
    Key::required("text", Takes::Markdown, "the opinion"),
    Key::optional("by", Takes::Text, "whose opinion it is"),
];

pub const PREVIOUS: &[Key] = &[
    Key::required("review", Takes::Text, "the folder of that review"),
    Key::optional("stamp", Takes::Text, "its stamp: 64 hexadecimal digits"),
];

pub const SUPERSEDES: &[Key] = &[
    Key::required("review", Takes::Text, "the folder of that review"),
    Key::optional("stamp", Takes::Text, "its stamp: 64 hexadecimal digits"),
    Key::required("reason", Takes::Text, "why it is amended"),
];

pub const SIGN_OFF: &[Key] = &[
    Key::required("role", Takes::Text, "prepared by, approved by"),
    Key::optional("name", Takes::Text, "who signs"),
    Key::optional("meaning", Takes::Text, "what the signature means"),
    Key::optional("on", Takes::Date, "when it was signed"),
];

pub const ACTION: &[Key] = &[
    Key::required("what", Takes::Text, "what is to be done"),
    Key::optional("owner", Takes::Text, "who does it"),
    Key::optional("due", Takes::Date, "by when"),
    Key::optional("state", Takes::OneOf(&["open", "done", "dropped"]), "open (default), done or dropped"),
    Key::optional("set_by", Takes::Text, "the id of the review that set it"),
];

pub const QUANTITY: &[Key] = &[
    Key::required("name", Takes::Text, "what is measured"),
    Key::required("unit", Takes::Text, "its unit; \"1\" where there is none"),
    Key::optional("scale", Takes::OneOf(&["linear", "log"]), "log: readings are lognormal"),
    Key::optional("method", Takes::Text, "how it is measured"),
    Key::optional("step", Takes::Positive, "readings are rounded to this"),
    Key::optional("bias", Takes::Table, "{ sd, basis }: standard uncertainty common to all readings"),
];

pub const BIAS: &[Key] = &[
    Key::required("sd", Takes::Positive, "standard uncertainty common to all readings"),
    Key::required("basis", Takes::Text, "where the figure comes from"),
];

pub const APPLIES_TO: &[&str] = &["each reading", "level", "percentile"];

pub const LIMIT: &[Key] = &[
    Key::optional("value", Takes::Number, "the limit"),
    Key::optional("lower", Takes::Number, "the lower of two"),
    Key::optional("upper", Takes::Number, "the upper of two"),
    Key::required("basis", Takes::Text, "who sets it"),
    Key::required("applies_to", Takes::OneOf(APPLIES_TO), "what is held against it"),
];

const WHERE: Takes = Takes::Other("a table of columns and cells, such as { site = \"A\" }");
const FILES: Takes = Takes::Other("a file's path in quotes, or a list of them");
const COVERAGE: Takes = Takes::Other("a number above 0, or a column's name in quotes");

/// Keys that `[[readings]]` and `[[summaries]]` share.
pub const SOURCE: &[Key] = &[
    Key::optional("file", FILES, "path of a .csv or .tsv file, or a list of them"),
    Key::optional(
        "sha256",
        Takes::Other("64 hexadecimal digits in quotes, or a list of them"),
        "the file's hash",
    ),
    Key::optional("where", WHERE, "rows taken; the others are counted"),
    Key::optional("period", Takes::Text, "the column of the period"),
    Key::optional("in_period", Takes::Period, "the one period of all rows"),
    Key::optional("year_starts", Takes::Text, "\"01-01\": the period is the year that the date falls in"),
    Key::optional("series", Takes::Text, "the column of the series"),
    Key::optional("in_series", Takes::Text, "the one series of all rows"),
    Key::optional("date", Takes::Text, "the column of the date"),
    Key::optional("date_order", Takes::OneOf(&["y-m-d", "d.m.y", "m/d/y"]), "default \"y-m-d\""),
    Key::optional("id", Takes::Text, "the column that names rows"),
    Key::optional("missing", Takes::TextList, "cells that mean no reading; default [\"\"]"),
    Key::optional("delimiter", Takes::Text, "between cells; default: found where only one fits"),
    Key::optional("decimal", Takes::OneOf(&[".", ","]), "decimal mark; default \".\""),
    Key::optional("encoding", Takes::Text, "default: UTF-8, or UTF-16 with a mark"),
    Key::optional("skip", Takes::Other("a whole number, 0 or above"), "lines before the head"),
    Key::later("sheet", Takes::Text, "the sheet of a workbook"),
    Key::later("query", Takes::Text, "a database query"),
    Key::later("database_env", Takes::Text, "the variable that holds a database's connection"),
];

/// Keys of `[[readings]]` alone.
pub const READINGS: &[Key] = &[
    Key::optional("value", Takes::Text, "the column of the reading"),
    Key::optional(
        "values",
        Takes::Other("a list of numbers, or texts such as \"<0.5\""),
        "readings in the spec",
    ),
    Key::optional("uncertainties", Takes::NumberList, "a standard uncertainty for each of the values"),
    Key::optional("uncertainty", Takes::Text, "the column of each reading's own uncertainty"),
    Key::optional("coverage_factor", COVERAGE, "what the uncertainty was multiplied by; default 1"),
    Key::optional("replicates", Takes::Text, "the column that names rows of one reading"),
    Key::optional("unit", Takes::Text, "the column of the unit"),
    Key::optional("marks", Takes::Table, "{ below, above, column, limit }: marks such as \"<0.5\""),
    Key::optional("planned", Takes::Count, "readings planned per series and period"),
];

pub const MARKS: &[Key] = &[
    Key::optional("below", Takes::TextList, "marks that mean below; default [\"<\"]"),
    Key::optional("above", Takes::TextList, "marks that mean above; default [\">\"]"),
    Key::optional("column", Takes::Text, "the column of the mark, where it stands apart"),
    Key::optional(
        "limit",
        Takes::Other("a number, or a column's name in quotes"),
        "the limit of a mark without a number",
    ),
];

/// Keys of `[[summaries]]` alone: the columns of a file.
pub const SUMMARIES: &[Key] = &[
    Key::optional("rows", Takes::Tables, "summaries in the spec"),
    Key::optional("n", Takes::Text, "the column of the number of readings"),
    Key::optional("mean", Takes::Text, "the column of the mean"),
    Key::optional("sd", Takes::Text, "the column of the readings' standard deviation"),
    Key::optional("uncertainty", Takes::Text, "the column of the mean's whole standard uncertainty"),
    Key::optional("log_mean", Takes::Text, "the column of the mean of the logarithms"),
    Key::optional("log_sd", Takes::Text, "the column of the sd of the logarithms"),
    Key::optional("geometric_mean", Takes::Text, "the column of the geometric mean"),
    Key::optional("geometric_sd", Takes::Text, "the column of the geometric sd"),
];

pub const SUMMARY_ROW: &[Key] = &[
    Key::optional("series", Takes::Text, "default: that of the source"),
    Key::optional("period", Takes::Period, "default: that of the source"),
    Key::optional("n", Takes::Count, "number of readings"),
    Key::optional("mean", Takes::Number, "their mean"),
    Key::optional("sd", Takes::NotNegative, "their standard deviation"),
    Key::optional("uncertainty", Takes::Positive, "whole standard uncertainty of the mean"),
    Key::optional("log_mean", Takes::Number, "mean of the natural logarithms"),
    Key::optional("log_sd", Takes::NotNegative, "sd of the natural logarithms"),
    Key::optional("geometric_mean", Takes::Positive, "geometric mean"),
    Key::optional("geometric_sd", Takes::Other("a number, 1 or above"), "geometric standard deviation"),
];

pub const EXCLUDE: &[Key] = &[
    Key::required("where", WHERE, "which rows"),
    Key::optional("rows", Takes::Count, "how many rows that is; default 1"),
    Key::required("reason", Takes::Text, "why they are left out"),
    Key::required("by", Takes::Text, "who decided it"),
    Key::required("on", Takes::Date, "when it was decided"),
];

pub const EVENT: &[Key] = &[
    Key::required("date", Takes::Date, "when it happened"),
    Key::required("what", Takes::Text, "what happened"),
    Key::optional(
        "kind",
        Takes::OneOf(&["method", "instrument", "staff", "site", "incident"]),
        "of what kind",
    ),
    Key::optional("series", Takes::Text, "the one series that it concerns"),
];

pub const HISTORY: &[Key] = &[
    Key::optional("first", Takes::Period, "the first period that counts; default: all"),
    Key::optional("last", Takes::Period, "the last period that counts; default: the one before this"),
    Key::optional(
        "order",
        Takes::Other("a list of periods"),
        "the order of periods that are not whole numbers",
    ),
    Key::optional("leave_out", Takes::Tables, "{ period, reason }: periods that do not count"),
];

pub const LEAVE_OUT: &[Key] = &[
    Key::required("period", Takes::Period, "the period left out"),
    Key::required("reason", Takes::Text, "why it is left out"),
];

pub const ALTERNATIVE: &[Key] = &[
    Key::required("id", Takes::Text, "names the alternative"),
    Key::optional("prior", Takes::Table, "the prior instead"),
    Key::optional("within", Takes::Table, "the within sd instead"),
    Key::optional("scale", Takes::OneOf(&["linear", "log"]), "the scale instead"),
];

pub const SERIES: &[Key] = &[
    Key::optional("label", Takes::Text, "the name printed"),
    Key::optional("planned", Takes::Count, "readings planned per period"),
    Key::optional(
        "limit",
        Takes::Other("tables by the name of a limit"),
        "bounds that replace the general ones",
    ),
    Key::optional("prior", Takes::Table, "the prior of this series"),
    Key::optional("within", Takes::Table, "the within sd of this series"),
    Key::optional("bias", Takes::Table, "{ sd, basis } of this series"),
];

pub const SERIES_LIMIT: &[Key] = &[
    Key::optional("value", Takes::Number, "the limit"),
    Key::optional("lower", Takes::Number, "the lower of two"),
    Key::optional("upper", Takes::Number, "the upper of two"),
];

pub const OVERRIDES: &[Key] = &[
    Key::required("file", Takes::Text, "the table: one row a series"),
    Key::optional("sha256", Takes::Text, "the file's hash"),
    Key::required("series", Takes::Text, "the column of the series"),
    Key::required("columns", Takes::Table, "{ label = \"column\", \"limit.name.upper\" = \"column\" }"),
    Key::optional("delimiter", Takes::Text, "between cells; default: found where only one fits"),
    Key::optional("decimal", Takes::OneOf(&[".", ","]), "decimal mark; default \".\""),
    Key::optional("encoding", Takes::Text, "default: UTF-8, or UTF-16 with a mark"),
    Key::optional("skip", Takes::Other("a whole number, 0 or above"), "lines before the head"),
];

/// Keys that every question has, whatever it asks.
pub const QUESTION: &[Key] = &[
    Key::required("id", Takes::Text, "names the question; unique"),
    Key::required("ask", Takes::Text, "what is asked"),
    Key::optional("say", Takes::Text, "the question in the reader's words"),
    Key::optional("only", Takes::TextList, "the series that it is asked of; default: all"),
    Key::optional("rule", Takes::Table, "a decision rule on the answer"),
];

pub const RULE: &[Key] = &[
    Key::optional("agreed", Takes::Date, "when the rule was agreed"),
    Key::optional("agreed_by", Takes::Text, "by whom"),
    Key::optional("hold_on", Takes::TextList, "checks that, when flagged, hold the verdict back"),
    Key::required("verdicts", Takes::Tables, "tried in order; the last has no condition"),
];

pub const VERDICT: &[Key] = &[
    Key::required("say", Takes::Text, "the verdict in words"),
    Key::optional("fail", Takes::Flag, "the run then ends with status 1"),
    Key::optional("chance_at_least", Takes::Probability, "the answer's chance is this or more"),
    Key::optional("chance_at_most", Takes::Probability, "the answer's chance is this or less"),
    Key::optional("count_at_least", Takes::NotNegative, "the answer's count is this or more"),
    Key::optional("count_at_most", Takes::NotNegative, "the answer's count is this or less"),
    Key::optional("estimate_above", Takes::NumberOrLimit, "the estimate is above this"),
    Key::optional("estimate_below", Takes::NumberOrLimit, "the estimate is below this"),
    Key::optional("lower_above", Takes::NumberOrLimit, "the lower end is above this"),
    Key::optional("upper_below", Takes::NumberOrLimit, "the upper end is below this"),
];

pub const REPORT: &[Key] = &[
    Key::optional("template", Takes::Text, "a built-in template, or the path of one's own"),
    Key::optional("formats", Takes::TextList, "of \"md\" and \"html\"; default both"),
    Key::optional("detail", Takes::OneOf(&["all", "flagged", "none"]), "pages per series; default all"),
    Key::optional(
        "inputs",
        Takes::OneOf(&["copied", "hashed"]),
        "copied (default): the data are kept beside",
    ),
];

/// What a `[prior]` may hold beside the keys of its source.
pub const OTHERWISE: Key =
    Key::optional("otherwise", Takes::Table, "the prior of a series whose history is too short");

/// Every section whose keys are settled here, by the name that a reader knows it by. What belongs to
/// a source of a prior or a kind of question is listed where it is computed.
pub const SECTIONS: &[(&str, &[&[Key]])] = &[
    ("[review]", &[REVIEW]),
    ("[review] interpretation", &[INTERPRETATION]),
    ("[review] previous", &[PREVIOUS]),
    ("[review] supersedes", &[SUPERSEDES]),
    ("[review] sign_off", &[SIGN_OFF]),
    ("[[action]]", &[ACTION]),
    ("[quantity]", &[QUANTITY]),
    ("[quantity] bias", &[BIAS]),
    ("[limit.NAME]", &[LIMIT]),
    ("[[readings]]", &[SOURCE, READINGS]),
    ("[[readings]] marks", &[MARKS]),
    ("[[summaries]]", &[SOURCE, SUMMARIES]),
    ("[[summaries]] rows", &[SUMMARY_ROW]),
    ("[[exclude]]", &[EXCLUDE]),
    ("[[event]]", &[EVENT]),
    ("[history]", &[HISTORY]),
    ("[history] leave_out", &[LEAVE_OUT]),
    ("[[alternative]]", &[ALTERNATIVE]),
    ("[series.NAME]", &[SERIES]),
    ("[overrides]", &[OVERRIDES]),
    ("[[question]]", &[QUESTION]),
    ("[question.rule]", &[RULE]),
    ("[question.rule] verdicts", &[VERDICT]),
    ("[report]", &[REPORT]),
];
