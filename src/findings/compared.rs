//! This review beside another that the spec names: how each answer has changed since the previous review
//! (or since the review that this one amends), and how the previous review's predictions fared.

use super::{Answer, Findings, SeriesFindings};
use crate::data::evidence::{Evidence, Seen};
use crate::data::{Fate, Mark, PeriodData};
use crate::diagnostics::{Fault, Outcome};
use crate::json::{At, Json};
use crate::math::fm;
use crate::math::mixture::NormalMixture;
use crate::plan::{LinkedReview, Plan};
use crate::prior::handover::{Handed, Handover};
use crate::quantity::{Absent, Figure, Period, Scale};

/// The figures of an answer that are compared.
pub const FIELDS: [&str; 5] = ["estimate", "lower", "upper", "chance", "count"];
/// The probability of the interval in which the mean of this period's readings was expected.
pub const EXPECTED_WITHIN: f64 = 0.95;

/// Another review, held against this one.
#[derive(Debug, Clone, PartialEq)]
pub struct Compared {
    pub id: String,
    /// Its folder as the spec names it.
    pub written: String,
    pub stamp: String,
    pub period: Period,
    pub relation: Relation,
    /// Per series of this review.
    pub series: Vec<SeriesThen>,
    /// Limits that were others then.
    pub limits: Vec<LimitThen>,
    /// Actions that were open there and are not named here.
    pub lost_actions: Vec<String>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Relation {
    /// The review of the period before, whose predictions are scored.
    Previous,
    /// The review that this one amends.
    Amended,
}

/// A limit that has moved: its value, or its two bounds, then and now.
#[derive(Debug, Clone, PartialEq)]
pub struct LimitThen {
    pub name: String,
    pub then: Vec<f64>,
    pub now: Vec<f64>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct SeriesThen {
    pub name: String,
    /// Why there is nothing to compare with.
    pub why: Option<String>,
    pub changes: Vec<Changed>,
    pub predictions: Vec<Prediction>,
    /// Why the mean of this period's readings is not scored.
    pub not_scored: Option<String>,
}

/// One answer then; what it is now stands in this review's own answer.
#[derive(Debug, Clone, PartialEq)]
pub struct Changed {
    pub id: String,
    pub ask: String,
    /// Then and now, by field.
    pub figures: Vec<(&'static str, Option<f64>, Option<f64>)>,
    pub verdict_then: Option<String>,
    pub verdict_now: Option<String>,
    /// Settings of the question that were others then.
    pub asked_differently: Vec<String>,
}

/// A prediction of the previous review, held against what came.
#[derive(Debug, Clone, PartialEq)]
pub struct Prediction {
    /// The question that made it; `None` for the mean of the readings, which every handover foretells.
    pub question: Option<String>,
    pub of: Foretold,
    /// The probability of the interval.
    pub probability: f64,
    /// In the quantity's unit; a one-sided interval has one end.
    pub lower: Option<f64>,
    pub upper: Option<f64>,
    /// The mean that came, or the estimate of the level; absent for single readings.
    pub outcome: Option<f64>,
    /// How many outcomes the interval holds, and of how many.
    pub inside: u64,
    pub outcomes: u64,
    /// The probability, as foretold, of an outcome no greater than the one that came.
    pub cdf: Figure,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Foretold {
    /// The mean of this period's readings (log scale: their geometric mean).
    Mean,
    /// Each reading of this period.
    EachReading,
    /// This period's level, as estimated now.
    Level,
}

/// The previous review, and the one that this review amends, held against the findings.
pub fn of(findings: &Findings) -> Outcome<Vec<Compared>> {
    let review = &findings.plan.review;
    let links = [(&review.previous, Relation::Previous), (&review.supersedes, Relation::Amended)];
    let mut all = Vec::new();
    for (link, relation) in links {
        let linked = link.as_ref().and_then(|link| findings.plan.linked(&link.written));
        let Some(linked) = linked else { continue };
        all.extend(compared(findings, linked, relation)?);
    }
    Ok(all)
}

fn compared(
    findings: &Findings,
    linked: &LinkedReview,
    relation: Relation,
) -> Result<Option<Compared>, Fault> {
    let Some(found) = &linked.found else { return Ok(None) };
    let wrong = |why: String| {
        Fault::wrong("bad-review", format!("{} cannot be read as answers: {why}", linked.answers.written))
            .at(linked.link.span.place())
            .expected("the answers.json of a review, unchanged")
            .repair("take that review's folder from where it is kept, and audit it")
    };
    let answers = Json::read(&found.answers.bytes).map_err(wrong)?;
    let handover = match &found.handover {
        Some(file) => Some(Handover::read(&file.bytes, &linked.handover.written)?),
        None => None,
    };
    let then = Then { at: At::root(&answers), handover, relation };
    then.compared(findings, linked, &found.stamp).map(Some).map_err(wrong)
}

/// The other review, read.
struct Then<'a> {
    at: At<'a>,
    handover: Option<Handover>,
    relation: Relation,
}

impl Then<'_> {
    fn compared(&self, findings: &Findings, linked: &LinkedReview, stamp: &str) -> Result<Compared, String> {
        let plan = &findings.plan;
        let review = self.at.key("review")?;
        let quantity = self.at.key("quantity")?;
        let same = quantity.text("unit")? == plan.quantity.unit
            && quantity.text("scale")? == plan.quantity.scale.word();
        let theirs =
            self.at.each("series", |series| Ok((series.text("name")?.to_string(), series.clone())))?;
        let mut series = Vec::new();
        for own in &findings.series {
            let then = theirs.iter().find(|(name, _)| *name == own.name).map(|(_, at)| at);
            series.push(match then {
                Some(_) if !same => SeriesThen::none(own, "that review had another unit or scale"),
                Some(at) => self.one_series(findings, own, at)?,
                None => SeriesThen::none(own, "that review did not hold this series"),
            });
        }
        Ok(Compared {
            id: review.text("id")?.to_string(),
            written: linked.link.written.clone(),
            stamp: stamp.to_string(),
            period: Period::new(review.text("period")?),
            relation: self.relation,
            series,
            limits: self.limits(plan)?,
            lost_actions: self.lost_actions(plan)?,
        })
    }

    fn one_series(
        &self,
        findings: &Findings,
        own: &SeriesFindings,
        at: &At<'_>,
    ) -> Result<SeriesThen, String> {
        let then = at.each("answers", |answer| Ok((answer.text("id")?.to_string(), answer.clone())))?;
        let answer_then = |answer: &Answer| {
            then.iter()
                .find(|(id, _)| *id == answer.id)
                .map(|(_, then)| then)
                .filter(|then| then.text("ask").is_ok_and(|ask| ask == answer.ask))
        };
        let changes = own
            .answers
            .iter()
            .filter_map(|answer| answer_then(answer).map(|then| changed(answer, then)))
            .collect();
        let mut one = SeriesThen {
            name: own.name.clone(),
            why: None,
            changes,
            predictions: Vec::new(),
            not_scored: None,
        };
        if self.relation == Relation::Amended {
            return Ok(one);
        }
        let period = findings.data.series.iter().find(|series| series.name == own.name);
        let period = period.and_then(|series| series.period(&findings.plan.review.period));
        let scale = findings.plan.quantity.scale;
        match self.mean_foretold(own, period, scale) {
            Ok(prediction) => one.predictions.push(prediction),
            Err(absent) => one.not_scored = Some(absent.reason),
        }
        for (id, then) in &then {
            one.predictions.extend(answer_foretold(id, then, own, period));
        }
        Ok(one)
    }

    /// The mean of this period's readings under the handed-over pieces: N(M, V + τ² + σ²/n) each.
    fn mean_foretold(
        &self,
        own: &SeriesFindings,
        period: Option<&PeriodData>,
        scale: Scale,
    ) -> Result<Prediction, Absent> {
        let because = |reason: &str| Absent::because(reason);
        let handover =
            self.handover.as_ref().ok_or_else(|| because("that review is not final and left no handover"))?;
        let handed = handover.series.iter().find(|handed| handed.name == own.name);
        let handed = handed.ok_or_else(|| because("its handover does not hold this series"))?;
        let evidence = period.map_or(&Evidence::Nothing, |period| &period.evidence);
        let law = foretold(handed, evidence)?;
        let outcome =
            mean_of(evidence).ok_or_else(|| because("there is no plain mean of this period's readings"))?;
        let tail = 0.5 * (1.0 - EXPECTED_WITHIN);
        let end = |end: Result<f64, crate::math::error::MathError>| {
            end.map_err(|error| Absent::failed(error.to_string()))
        };
        let (lower, upper) = (end(law.quantile(tail))?, end(law.upper_quantile(tail))?);
        let shown = |value: f64| if scale == Scale::Log { fm::exp(value) } else { value };
        Ok(Prediction {
            question: None,
            of: Foretold::Mean,
            probability: EXPECTED_WITHIN,
            lower: Some(shown(lower)),
            upper: Some(shown(upper)),
            outcome: Some(shown(outcome)),
            inside: u64::from(lower <= outcome && outcome <= upper),
            outcomes: 1,
            cdf: Ok(law.cdf(outcome)),
        })
    }

    fn limits(&self, plan: &Plan) -> Result<Vec<LimitThen>, String> {
        let Some(limits) = self.at.maybe("limits") else { return Ok(Vec::new()) };
        let mut differ = Vec::new();
        for limit in &plan.limits {
            if limits.maybe(&limit.name).is_none() {
                continue;
            }
            let then = limits.each(&limit.name, At::as_number)?;
            let now = limit.bounds.ends();
            if then != now {
                differ.push(LimitThen { name: limit.name.clone(), then, now });
            }
        }
        Ok(differ)
    }

    fn lost_actions(&self, plan: &Plan) -> Result<Vec<String>, String> {
        if self.relation == Relation::Amended || self.at.maybe("actions").is_none() {
            return Ok(Vec::new());
        }
        let then = self.at.each("actions", |action| {
            Ok((action.text("what")?.to_string(), action.text("state")? == "open"))
        })?;
        let named = |what: &str| plan.actions.iter().any(|action| action.what == what);
        Ok(then.into_iter().filter(|(what, open)| *open && !named(what)).map(|(what, _)| what).collect())
    }
}

impl SeriesThen {
    fn none(own: &SeriesFindings, why: &str) -> SeriesThen {
        SeriesThen {
            name: own.name.clone(),
            why: Some(why.to_string()),
            changes: Vec::new(),
            predictions: Vec::new(),
            not_scored: None,
        }
    }
}

fn changed(now: &Answer, then: &At<'_>) -> Changed {
    let number = |field: &str| then.maybe(field).and_then(|at| at.as_number().ok());
    let own = |field: &str| match now.figures.get(field) {
        Some(crate::questions::figures::Item::Whole(Some(count))) => Some(*count as f64),
        _ => now.figures.value(field),
    };
    let figures = FIELDS.map(|field| (field, number(field), own(field)));
    let differs = |(key, value): &(&'static str, String)| {
        let written = then.maybe(key).map(|at| at.as_written());
        let own = crate::json::of_toml(value).to_line();
        (now.figures.get(key).is_none() && written.as_deref() != Some(own.as_str())).then(|| key.to_string())
    };
    Changed {
        id: now.id.clone(),
        ask: now.ask.clone(),
        figures: figures.into_iter().filter(|(_, then, now)| then.is_some() || now.is_some()).collect(),
        verdict_then: then.maybe("verdict").and_then(|at| at.as_text().ok().map(str::to_string)),
        verdict_now: now.verdict.as_ref().and_then(|given| given.say.clone()),
        asked_differently: now.settings.iter().filter_map(differs).collect(),
    }
}

/// The law of the mean of such readings, before they came.
fn foretold(handed: &Handed, evidence: &Evidence) -> Result<NormalMixture, Absent> {
    let mut parts = Vec::with_capacity(handed.pieces.len());
    for piece in &handed.pieces {
        let (mean, variance) = piece.next_level.ok_or_else(|| {
            Absent::because("that review's prior was about its own period only and foretold no next level")
        })?;
        let error = error_of_mean(evidence, piece.reading_sd)?;
        parts.push((piece.weight, mean, (variance + error).sqrt()));
    }
    if parts.is_empty() {
        return Err(Absent::because("its handover holds no pieces for this series"));
    }
    NormalMixture::new(parts).map_err(|error| Absent::failed(error.to_string()))
}

/// The variance of the readings' mean about their level.
fn error_of_mean(evidence: &Evidence, reading_sd: f64) -> Result<f64, Absent> {
    match evidence {
        Evidence::Sums { n, .. } if *n > 0 && reading_sd.is_finite() => {
            Ok(reading_sd * reading_sd / *n as f64)
        }
        Evidence::Mean { uncertainty, .. } => Ok(uncertainty * uncertainty),
        Evidence::Nothing | Evidence::Sums { n: 0, .. } => {
            Err(Absent::because("there is no reading of this period"))
        }
        Evidence::Sums { .. } => Err(Absent::because("that review said nothing of the within sd")),
        Evidence::Singles(_) => Err(Absent::because(
            "readings that are marked, or have uncertainties of their own, have no plain mean to hold against it",
        )),
    }
}

fn mean_of(evidence: &Evidence) -> Option<f64> {
    match evidence {
        Evidence::Sums { mean, .. } | Evidence::Mean { mean, .. } => Some(*mean),
        Evidence::Nothing | Evidence::Singles(_) => None,
    }
}

/// What an answer about the next period said of this one: where its single readings would lie, or its level.
fn answer_foretold(
    id: &str,
    then: &At<'_>,
    own: &SeriesFindings,
    period: Option<&PeriodData>,
) -> Option<Prediction> {
    if then.text("of_period") != Ok("next") {
        return None;
    }
    let end = |field: &str| then.maybe(field).and_then(|at| at.as_number().ok());
    let (lower, upper) = (end("lower"), end("upper"));
    if lower.is_none() && upper.is_none() {
        return None;
    }
    let holds =
        |value: f64| lower.is_none_or(|lower| lower <= value) && upper.is_none_or(|upper| value <= upper);
    let prediction = |of, outcome, inside, outcomes| Prediction {
        question: Some(id.to_string()),
        of,
        probability: then.number("probability").unwrap_or(f64::NAN),
        lower,
        upper,
        outcome,
        inside,
        outcomes,
        cdf: Err(Absent::because("answers.json holds the ends of the interval only")),
    };
    match then.text("ask") {
        Ok("level interval") => {
            let level =
                own.answers.iter().find(|answer| answer.ask == "level interval" && is_of_this(answer))?;
            let estimate = level.readings_only.value("estimate")?;
            Some(prediction(Foretold::Level, Some(estimate), u64::from(holds(estimate)), 1))
        }
        Ok("reading interval") if is_each_single(then) => {
            let plain = used_readings(period?)?;
            let inside = plain.iter().filter(|value| holds(**value)).count() as u64;
            Some(prediction(Foretold::EachReading, None, inside, plain.len() as u64))
        }
        _ => None,
    }
}

/// Whether a level interval is about this period's level itself.
fn is_of_this(answer: &Answer) -> bool {
    let is = |key: &str, wanted: &str| {
        answer.settings.iter().all(|(own, value)| *own != key || value.trim_matches('"') == wanted)
    };
    is("of_period", "this") && is("mean", "geometric")
}

fn is_each_single(then: &At<'_>) -> bool {
    let one = then.maybe("readings").is_none_or(|readings| readings.as_number() == Ok(1.0));
    one && then.maybe("of").is_none_or(|of| of.as_text() == Ok("each"))
}

/// The values of the used readings; `None` where some are marked, or single ones are not kept.
fn used_readings(period: &PeriodData) -> Option<Vec<f64>> {
    if let Evidence::Singles(singles) = &period.evidence
        && singles.iter().any(|single| !matches!(single.seen, Seen::At(_)))
    {
        return None;
    }
    // Rows of replicates are averaged first: the rows are then no readings.
    if period.readings.iter().any(|row| row.replicate.is_some()) {
        return None;
    }
    let used: Vec<_> = period.readings.iter().filter(|row| row.fate == Fate::Used).collect();
    let plain: Option<Vec<f64>> =
        used.iter().map(|row| row.value.filter(|_| row.mark == Mark::None)).collect();
    plain.filter(|plain| !plain.is_empty())
}
