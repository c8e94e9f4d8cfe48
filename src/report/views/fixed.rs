//! What every report says alike: the meaning of each caution's code, the words of the trade, and where
//! the items of the reporting guideline are.

use super::table::{Column, TableView, code, plain};

/// What a caution's code stands for, whatever its text.
pub const CODES: &[(&str, &str)] = &[
    (
        "asked-differently",
        "A question's settings are not those of the review that this one is compared with.",
    ),
    (
        "check-flagged",
        "A check of an assumption is flagged (p below 0.01, or a fact that puts answers in doubt).",
    ),
    ("few-periods", "The history has few periods, so the between sd is known only roughly."),
    ("fewer-than-planned", "Fewer readings were used than were planned."),
    (
        "ids-not-compared",
        "Rows bear no id, so the same reading found twice could not be told from two equal readings.",
    ),
    ("ledger-differs", "Readings of an earlier period are not those that went into the handover."),
    ("limit-differs", "A limit is not that of the review that this one is compared with."),
    (
        "limit-far-off",
        "A limit lies more than 8 standard deviations of a reading from all readings: is its unit right?",
    ),
    ("limit-applies-to-other", "A limit is held against something other than what its basis sets it for."),
    ("limit-for-something-else", "A limit is held against something other than what its basis sets it for."),
    (
        "mark-beyond-limit",
        "Readings known only to lie below a value beyond the limit cannot show that it was kept.",
    ),
    ("many-excluded", "More than one reading in ten is excluded."),
    ("many-readings-marked", "More than half of the readings are known only to lie below or above a value."),
    (
        "method-changed",
        "The method or an instrument changed since the earlier periods of which the prior is made.",
    ),
    (
        "most-readings-marked",
        "More than four fifths of the readings are known only to lie below or above a value.",
    ),
    (
        "near-threshold",
        "A probability lies so near to a threshold that the printed digits alone could mislead.",
    ),
    (
        "no-common-bias",
        "No uncertainty common to all readings was given; intervals cover random variation only.",
    ),
    ("no-readings", "The period under review has no readings."),
    ("open-action-missing", "An action that was open in the previous review is not named in this one."),
    ("plug-in", "An estimated between sd is used as if it were known."),
    ("prior-alone-decides", "The prior alone would give the verdict."),
    ("prior-nearly-decides", "The prior alone nearly meets what the rule asks."),
    ("prior-otherwise", "The history is too short, and another prior took its place."),
    ("prior-outweighs-readings", "The prior carries more weight than the readings of the period."),
    ("quantiles-misfit", "The stated quantiles do not fit the shape of the prior exactly."),
    (
        "rounded-widely",
        "Readings are rounded to a step above half the within sd; each counts as all that rounds to it.",
    ),
    ("rounding-not-counted", "A wide rounding step could not be counted where single readings are not held."),
    ("rule-after-readings", "The rule was agreed after the first reading was taken."),
    ("rule-without-date", "The rule states no date on which it was agreed."),
    ("uncertainty-on-log-scale", "Standard uncertainties were taken over to the scale of the logarithms."),
    ("within-sd-counted-twice", "The stated within sd may rest on the same readings as this review."),
];

/// The meaning of a code; a code without an entry says so by its own words.
pub fn meaning(code: &str) -> String {
    CODES
        .iter()
        .find(|(known, _)| *known == code)
        .map_or_else(|| code.replace('-', " "), |(_, meaning)| (*meaning).to_string())
}

/// The codes that this report uses.
pub fn codes<'a>(used: impl Iterator<Item = &'a str>) -> Option<TableView> {
    let mut table = TableView::new(
        "Codes of the cautions in this report",
        &[("code", Column::Head), ("what it means", Column::Text)],
    );
    for used in used {
        table.row(vec![code(used), plain(meaning(used))]);
    }
    table.some()
}

const GLOSSARY: &[(&str, &str, &str)] = &[
    ("reading", "x", "one measured value"),
    ("series", "", "what is followed from period to period: a station, a product, an instrument"),
    ("period", "j", "a year, a lot, a campaign; the period under review is the one this report is about"),
    ("level", "θ", "the mean about which one period’s readings scatter"),
    ("long-run mean", "μ", "the mean about which the levels of the periods scatter"),
    ("within sd", "σ", "standard deviation of single readings about the level of their period"),
    (
        "between sd",
        "τ",
        "standard deviation of the periods’ levels about the long-run mean; for a random walk, of one step",
    ),
    (
        "prior",
        "",
        "what was known before the readings of the period under review, as a probability distribution",
    ),
    ("posterior", "", "what is known with these readings: prior and readings together"),
    (
        "interval",
        "",
        "a range that holds the true value with the stated probability, given model, prior and readings",
    ),
    (
        "limit",
        "L",
        "a value, or a lower and an upper one, that readings or levels are held against, with its basis",
    ),
    ("mark", "", "what stands for a reading known only to lie below or above something, such as “<0.5”"),
    (
        "rule, verdict",
        "",
        "a decision rule on an answer, and the words it gives; “not decided” is a normal verdict",
    ),
    ("prior weight", "B", "the share of the level’s estimate that comes from the prior, between 0 and 1"),
    (
        "check",
        "",
        "a test of an assumption of the model; it never removes a reading and never changes an answer",
    ),
    ("stamp", "", "the SHA-256 that identifies the inputs and the answers of a review"),
];

pub fn glossary() -> TableView {
    let mut table = TableView::new(
        "The words of this report",
        &[("word", Column::Head), ("symbol", Column::Text), ("meaning", Column::Text)],
    );
    for (word, symbol, meaning) in GLOSSARY {
        table.row(vec![plain(*word), plain(*symbol), plain(*meaning)]);
    }
    table
}

const BARG: &[(&str, &str, &str)] = &[
    ("Preamble A", "why Bayesian", "section 3"),
    ("Preamble B", "goals of the analysis", "section 2: the fixed questions"),
    ("1A", "data and variables", "section 4 and the pages of the series"),
    ("1B", "likelihood and parameters", "section 5 and the pages of the series"),
    ("1C", "prior", "pages of the series, “Prior”: source, figures, basis"),
    ("1D", "formal specification", "section 5; the spec, word for word, in the last appendix"),
    (
        "1E",
        "prior predictive check",
        "pages of the series: the prior’s column for the next reading, and the check “prior conflict”",
    ),
    ("2A", "software", "section 10"),
    ("2B, 2C", "convergence and resolution of sampling chains", "does not apply: no sampling is used"),
    ("2D", "other computation", "section 5: quadrature and the error it reached"),
    ("3A", "posterior predictive check", "pages of the series, “Checks”"),
    ("3B", "summary of the posterior", "pages of the series, “Result”"),
    ("3C, 4D", "Bayes factors, model probabilities", "does not apply: no models are compared by their odds"),
    ("4A", "why a decision", "section 2: questions with a rule call for a decision, the others do not"),
    ("4B", "loss or threshold", "section 2: the thresholds of each rule; no loss function is used"),
    ("4C", "region of practical equivalence", "only where a question of change states a band"),
    ("4E", "estimates beside decisions", "every verdict is printed beside its figure"),
    ("5A–5E", "sensitivity to the prior, and of decisions", "pages of the series, “Sensitivity”"),
    ("6A–6G", "reproducibility", "section 10; the files beside this report"),
];

/// Where each item of the reporting guideline is answered (Kruschke 2021, Bayesian Analysis Reporting
/// Guidelines, Nature Human Behaviour 5, 1282; the wording of the items is shortened here).
pub fn barg() -> TableView {
    let mut table = TableView::new(
        "Items of the Bayesian analysis reporting guidelines",
        &[("item", Column::Head), ("what it asks for", Column::Text), ("where it is", Column::Text)],
    );
    for (item, asks, place) in BARG {
        table.row(vec![plain(*item), plain(*asks), plain(*place)]);
    }
    table
}
