//! The whole way in one function: [`run`]. Spec and data go in, findings come out; nothing is written.

mod exact;
mod prepare;

pub use prepare::{Prepared, prepare, prepare_by};

use crate::checks::{Check, Concern, suite};
use crate::data::evidence::Evidence;
use crate::data::{self, Data, PeriodData, SeriesData};
use crate::diagnostics::{Caution, Fault, Faults, Outcome};
use crate::findings::laws::Laws;
use crate::findings::{self, AcrossFindings, Answer, Findings, Influence, SeriesFindings, UnderAlternative};
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::{self, Basis, Posterior};
use crate::prior::ground::Ground;
use crate::prior::spread::spread_of_means;
use crate::prior::within::WithinRead;
use crate::prior::{Built, LevelPrior, Model, Refusal, Source};
use crate::quantity::Absent;
use crate::questions::figures::Figures;
use crate::questions::{Question, Subject, acceptance, rule};
use crate::sensitivity::{self, Base};
use exact::keep_exact;
use std::path::Path;

/// The whole way, up to the findings.
///
/// `spec` is the file to read, `shown` its name in messages; `jobs` the number of threads, on which
/// no figure depends.
pub fn run(spec: &Path, shown: &str, jobs: usize) -> Outcome<Findings> {
    let prepared = prepare(spec, shown)?;
    let data = data::read(&prepared.plan)?;
    review(prepared, data, jobs)
}

/// Everything of one series that stays alive while answers are computed.
struct Worked<'a> {
    name: &'a str,
    data: Option<&'a SeriesData>,
    period: Option<&'a PeriodData>,
    readings: Evidence,
    built: Built,
    from: &'static str,
    source: &'a dyn Source,
    within: &'a WithinRead,
    within_cautions: Vec<Caution>,
    model: Model,
    prior: Result<Posterior, Absent>,
    readings_only: Result<Posterior, Absent>,
    posterior: Result<Posterior, Absent>,
}

/// Priors, posteriors, answers, checks and sensitivity for every reviewed series.
pub fn review(prepared: Prepared, mut data: Data, jobs: usize) -> Outcome<Findings> {
    widen_rounded(&prepared, &mut data);
    let others: Vec<OtherScale<'_>> =
        prepared.on_another_scale.iter().map(|(id, prepared)| OtherScale::new(id, prepared)).collect();
    let (names, not_reviewed) = prepared.reviewed(&data);
    if names.is_empty() {
        return Err(nothing_to_review(&prepared.plan, &data).into());
    }
    let worked = in_parallel(&names, jobs, |name| work(&prepared, &data, name))?;
    let series = in_parallel(&worked, jobs, |worked| findings_of(&prepared, &data, &others, worked))?;
    let across = across(&prepared, &worked);
    let mut cautions: Vec<Caution> = data.cautions.clone();
    let mut quadrature_error = 0.0f64;
    for worked in worked {
        let tag = |caution: Caution| match caution.series {
            Some(_) => caution,
            None => caution.of_series(worked.name),
        };
        cautions.extend(worked.built.cautions.into_iter().chain(worked.within_cautions).map(tag));
        for posterior in [&worked.prior, &worked.readings_only, &worked.posterior].into_iter().flatten() {
            quadrature_error = quadrature_error.max(posterior.quadrature_error);
        }
    }
    for (index, question) in &prepared.questions {
        let asked = &prepared.plan.questions[*index];
        let of_question = |caution: Caution| caution.of_question(&asked.id);
        cautions.extend(question.cautions(&prepared.plan).into_iter().map(of_question));
    }
    let (mut series, faults) = keep_exact(series);
    let checks_over_series = findings::many::over_series(&mut series);
    let wrong_verdicts = findings::many::wrong_verdicts(&prepared.plan, &series);
    let settings = settings_of(&prepared);
    let mut findings = Findings {
        plan: prepared.plan,
        data,
        series,
        not_reviewed,
        across,
        cautions,
        compared: Vec::new(),
        checks_over_series,
        wrong_verdicts,
        settings,
        quadrature_error,
    };
    findings.compared = findings::compared::of(&findings)?;
    let following = crate::findings::cautions::of(&findings);
    findings.cautions.extend(following);
    faults.or(findings)
}

/// Where readings are rounded to a wide step, each counts as all that rounds to it.
fn widen_rounded(prepared: &Prepared, data: &mut Data) {
    let quantity = &prepared.plan.quantity;
    if let Some(step) = quantity.step {
        let stated = |series: &str| prepared.settings(series).within.stated_sd().ok();
        data::widen_rounded(data, step.get(), quantity.scale, &stated);
    }
}

/// An alternative on another scale: the spec read for it, and the data read on it.
struct OtherScale<'a> {
    id: &'a str,
    prepared: &'a Prepared,
    /// Or why the data cannot stand on it, such as a reading of 0 on the log scale.
    data: Result<Data, String>,
}

impl<'a> OtherScale<'a> {
    fn new(id: &'a str, prepared: &'a Prepared) -> OtherScale<'a> {
        let data = data::read(&prepared.plan).map_err(|faults| why(&faults)).map(|mut data| {
            widen_rounded(prepared, &mut data);
            data
        });
        OtherScale { id, prepared, data }
    }

    /// All answers of one series on this scale.
    fn answers(&self, worked: &Worked<'_>, flagged: &[&str]) -> UnderAlternative {
        let plan = &self.prepared.plan;
        let there = self
            .data
            .as_ref()
            .map_err(String::clone)
            .and_then(|data| work(self.prepared, data, worked.name).map_err(|faults| why(&faults)));
        let there = match there {
            Ok(there) => there,
            Err(why) => {
                return UnderAlternative {
                    alternative: self.id.to_string(),
                    answers: Vec::new(),
                    why: Some(why),
                };
            }
        };
        let subject = there.subject(plan, Basis::Both);
        let why = there.posterior.as_ref().err().map(|absent| absent.reason.clone());
        let answers = self
            .prepared
            .questions
            .iter()
            .map(|(index, question)| (&plan.questions[*index], question))
            .filter(|(asked, question)| asked_of(asked, worked.name) && question.in_sensitivity())
            .map(|(asked, question)| {
                let figures = question.answer(&subject);
                let verdict = there.verdict(plan, asked, &figures, flagged);
                (asked.id.clone(), figures, verdict)
            });
        UnderAlternative {
            alternative: self.id.to_string(),
            answers: if why.is_none() { answers.collect() } else { Vec::new() },
            why,
        }
    }
}

fn why(faults: &Faults) -> String {
    faults.0.first().map_or_else(String::new, |fault| fault.message.clone())
}

/// The keys of priors and within sds with their defaults, by the path of their table.
fn settings_of(prepared: &Prepared) -> Vec<(String, Vec<(&'static str, String)>)> {
    let general = std::iter::once((String::new(), &prepared.general));
    let own = prepared.own.iter().map(|(name, settings)| (format!("series.{name}."), settings));
    general
        .chain(own)
        .flat_map(|(path, settings)| {
            [
                (format!("{path}prior"), settings.source.settings()),
                (format!("{path}within"), settings.within.settings()),
            ]
        })
        .collect()
}

fn nothing_to_review(plan: &Plan, data: &Data) -> Fault {
    let periods: Vec<&str> = data.periods.iter().map(|period| period.as_str()).collect();
    Fault::wrong(
        "nothing-to-review",
        format!("no series has a reading in the period under review, {}", plan.review.period),
    )
    .expected(
        "readings of that period, or [series.\"name\"] tables that name what is reviewed without readings",
    )
    .repair(if periods.is_empty() {
        "the data hold no reading at all: look at `where`, `missing` and the columns".to_string()
    } else {
        format!("set review.period to one of the data's periods: {}", periods.join(", "))
    })
}

/// One result per item, in the order of the items whatever the number of threads; all faults.
fn in_parallel<'a, T: Sync, R: Send>(
    items: &'a [T],
    jobs: usize,
    work: impl Fn(&'a T) -> Outcome<R> + Sync,
) -> Outcome<Vec<R>> {
    let chunk = items.len().div_ceil(jobs.max(1)).max(1);
    let results: Vec<Outcome<R>> = std::thread::scope(|scope| {
        let threads: Vec<_> = items
            .chunks(chunk)
            .map(|part| scope.spawn(|| part.iter().map(&work).collect::<Vec<_>>()))
            .collect();
        threads
            .into_iter()
            .flat_map(|thread| match thread.join() {
                Ok(results) => results,
                Err(panic) => std::panic::resume_unwind(panic),
            })
            .collect()
    });
    let mut faults = Faults::default();
    let mut values = Vec::with_capacity(results.len());
    for result in results {
        match result {
            Ok(value) => values.push(value),
            Err(found) => faults.extend(found),
        }
    }
    faults.or(values)
}

/// The prior, the model and the three posteriors of one series.
fn work<'a>(prepared: &'a Prepared, data: &'a Data, name: &'a str) -> Outcome<Worked<'a>> {
    let plan = &prepared.plan;
    let settings = prepared.settings(name);
    let scale = plan.quantity.scale;
    let ground = Ground { plan, data, series: name, scale, restored: false };
    let (source, built) = build(settings.source.as_ref(), prepared.otherwise.as_deref(), &ground)?;
    let (within, within_cautions) =
        settings.within.within(&ground, &built.level).map_err(Refusal::into_fault)?;
    let bias = plan.series.get(name).and_then(|own| own.bias.as_ref()).or(plan.quantity.bias.as_ref());
    let model = Model {
        scale,
        within,
        level: built.level.clone(),
        bias_sd: bias.map_or(0.0, |bias| bias.sd.get()),
        adjust: None,
    };
    let series = data.series.iter().find(|series| series.name == name);
    let period = series.and_then(|series| series.period(&plan.review.period));
    let readings = period.map_or(Evidence::Nothing, |period| period.evidence.clone());
    let solve = |basis: Basis| posterior::solve(&model, &readings, basis);
    let (prior, readings_only, posterior) =
        (solve(Basis::PriorOnly), solve(Basis::ReadingsOnly), solve(Basis::Both));
    Ok(Worked {
        name,
        data: series,
        period,
        built,
        from: source.from(),
        source,
        within: &settings.within,
        within_cautions,
        prior,
        readings_only,
        posterior,
        readings,
        model,
    })
}

/// The prior of a series by its own source, or by `otherwise` where its history is too short.
fn build<'a>(
    source: &'a dyn Source,
    otherwise: Option<&'a dyn Source>,
    ground: &Ground<'_>,
) -> Outcome<(&'a dyn Source, Built)> {
    match (source.level(ground), otherwise) {
        (Ok(built), _) => Ok((source, built)),
        (Err(Refusal::TooShort(fault)), Some(otherwise)) => match otherwise.level(ground) {
            Ok(mut built) => {
                let text = format!("{}; the prior comes from {} instead.", fault.message, otherwise.from());
                built.cautions.push(Caution::new("prior-otherwise", text));
                Ok((otherwise, built))
            }
            Err(Refusal::TooShort(other) | Refusal::Wrong(other)) => Err(Faults(vec![fault, other])),
        },
        (Err(refusal), _) => Err(refusal.into_fault().into()),
    }
}

impl<'a> Worked<'a> {
    fn subject(&'a self, plan: &'a Plan, basis: Basis) -> Subject<'a> {
        let posterior = match basis {
            Basis::PriorOnly => &self.prior,
            Basis::ReadingsOnly => &self.readings_only,
            Basis::Both => &self.posterior,
        };
        self.subject_of(plan, basis, posterior.as_ref().map_err(Absent::clone))
    }

    fn subject_of(
        &'a self,
        plan: &'a Plan,
        basis: Basis,
        posterior: Result<&'a Posterior, Absent>,
    ) -> Subject<'a> {
        Subject { plan, series: self.name, data: self.data, period: self.period, basis, posterior }
    }

    /// The verdict of a question's rule; none is given on a period without readings.
    fn verdict(
        &self,
        plan: &Plan,
        asked: &QuestionPlan,
        figures: &Figures,
        flagged: &[&str],
    ) -> Option<rule::Given> {
        let rule = asked.rule.as_ref()?;
        Some(if self.readings.is_nothing() {
            rule::Given::none(format!("there is no reading of {}", plan.review.period))
        } else {
            rule::decide(rule, figures, plan, self.name, flagged)
        })
    }
}

fn flagged(checks: &[Check]) -> Vec<&'static str> {
    checks.iter().filter(|check| check.concern == Concern::Flag).map(|check| check.id).collect()
}

fn asked_of(question: &QuestionPlan, series: &str) -> bool {
    question.only.as_ref().is_none_or(|only| only.iter().any(|name| name == series))
}

/// Answers, checks and sensitivity of one series.
fn findings_of(
    prepared: &Prepared,
    data: &Data,
    others: &[OtherScale<'_>],
    worked: &Worked<'_>,
) -> Outcome<SeriesFindings> {
    let plan = &prepared.plan;
    let checks = checks_of(prepared, data, worked);
    let flagged = flagged(&checks);
    let asked: Vec<(&QuestionPlan, &dyn Question)> = prepared
        .questions
        .iter()
        .map(|(index, question)| (&plan.questions[*index], question.as_ref()))
        .filter(|(asked, _)| asked_of(asked, worked.name))
        .collect();
    let both = worked.subject(plan, Basis::Both);
    let prior_only = worked.subject(plan, Basis::PriorOnly);
    let readings_only = worked.subject(plan, Basis::ReadingsOnly);
    let mut answers = Vec::new();
    for (asked, question) in &asked {
        let figures = question.answer(&both);
        if figures.is_empty() {
            continue;
        }
        let verdict = worked.verdict(plan, asked, &figures, &flagged);
        answers.push(Answer {
            id: asked.id.clone(),
            ask: asked.ask.clone(),
            say: asked.say.clone(),
            words: question.words(&both),
            symbols: question.symbols(&both),
            settings: question.settings(),
            prior_only: question.answer(&prior_only),
            readings_only: question.answer(&readings_only),
            verdict,
            rule_figures: match &asked.rule {
                Some(rule) if !worked.readings.is_nothing() => {
                    acceptance::rule_figures(*question, rule, &both)
                }
                _ => Figures::default(),
            },
            working: question.working(&both),
            figures,
        });
    }
    let mut sensitivity = sensitivity_of(prepared, data, worked, &asked, &flagged);
    sensitivity.extend(others.iter().map(|other| other.answers(worked, &flagged)));
    let posterior = worked.posterior.as_ref().map_err(Absent::clone);
    Ok(SeriesFindings {
        name: worked.name.to_string(),
        label: plan.series.get(worked.name).and_then(|own| own.label.clone()),
        prior_from: worked.from.to_string(),
        prior_notes: worked.built.notes.clone(),
        within_words: worked.within.in_words(plan.quantity.scale),
        spread_of_means: match &worked.model.level {
            LevelPrior::Periods(periods) => {
                Some(spread_of_means(&periods.periods, worked.within.stated_sd().ok()))
            }
            _ => None,
        },
        carried_ledger: worked.built.ledger.clone(),
        prior: worked.prior.clone(),
        readings_only: worked.readings_only.clone(),
        posterior: worked.posterior.clone(),
        laws: Laws::of(&worked.prior, &worked.posterior),
        influence: Influence {
            prior_weight: posterior.clone().and_then(Posterior::prior_weight),
            prior_readings: posterior.and_then(Posterior::prior_readings),
        },
        answers,
        sensitivity,
        without_readings: worked.readings.is_nothing(),
        checks,
    })
}

fn sensitivity_of(
    prepared: &Prepared,
    data: &Data,
    worked: &Worked<'_>,
    asked: &[(&QuestionPlan, &dyn Question)],
    flagged: &[&str],
) -> Vec<UnderAlternative> {
    let plan = &prepared.plan;
    let base = Base {
        ground: Ground { plan, data, series: worked.name, scale: plan.quantity.scale, restored: false },
        source: worked.source,
        within: worked.within,
        model: &worked.model,
        period: worked.period,
        readings: &worked.readings,
        prior_only: worked.prior.as_ref(),
    };
    let asked: Vec<_> = asked.iter().filter(|(_, question)| question.in_sensitivity()).copied().collect();
    sensitivity::alternatives(&base, &prepared.alternatives)
        .into_iter()
        .map(|alternative| {
            let solved = alternative
                .model
                .and_then(|(model, readings)| posterior::solve(&model, &readings, Basis::Both));
            let subject = worked.subject_of(plan, Basis::Both, solved.as_ref().map_err(Absent::clone));
            let answer = |(asked, question): &(&QuestionPlan, &dyn Question)| {
                let figures = question.answer(&subject);
                let verdict = worked.verdict(plan, asked, &figures, flagged);
                (asked.id.clone(), figures, verdict)
            };
            UnderAlternative {
                alternative: alternative.id,
                why: solved.as_ref().err().map(|absent| absent.reason.clone()),
                answers: if solved.is_ok() { asked.iter().map(answer).collect() } else { Vec::new() },
            }
        })
        .collect()
}

fn across(prepared: &Prepared, worked: &[Worked<'_>]) -> Vec<AcrossFindings> {
    let plan = &prepared.plan;
    let mut found = Vec::new();
    for (index, question) in &prepared.questions {
        let asked = &plan.questions[*index];
        let subjects: Vec<Subject<'_>> = worked
            .iter()
            .filter(|worked| asked_of(asked, worked.name))
            .map(|worked| worked.subject(plan, Basis::Both))
            .collect();
        let (Some(series), Some(first)) = (question.across(&subjects), subjects.first()) else { continue };
        let verdict = match (&asked.rule, series.as_slice()) {
            (Some(rule), [(_, figures)]) => Some(rule::decide(rule, figures, plan, "", &[])),
            _ => None,
        };
        found.push(AcrossFindings {
            id: asked.id.clone(),
            ask: asked.ask.clone(),
            say: asked.say.clone(),
            words: question.words(first),
            series,
            verdict,
        });
    }
    found
}

/// The checks of one series; none without readings.
fn checks_of(prepared: &Prepared, data: &Data, worked: &Worked<'_>) -> Vec<Check> {
    let Some(period) = worked.period.filter(|_| !worked.readings.is_nothing()) else { return Vec::new() };
    let plan = &prepared.plan;
    let ground = Ground { plan, data, series: worked.name, scale: plan.quantity.scale, restored: false };
    suite::all(&suite::Subject {
        model: &worked.model,
        period,
        readings: &worked.readings,
        earlier: &ground.earlier_data(),
        planned: findings::cautions::planned(plan, worked.name),
        prior_only: worked.prior.as_ref(),
        posterior: worked.posterior.as_ref(),
    })
}
