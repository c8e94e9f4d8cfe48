//! The whole way in one function: [`run`]. Spec and data go in, findings come out; nothing is written.

use crate::checks::{Check, Concern, suite};
use crate::data::evidence::Evidence;
use crate::data::{self, Data, PeriodData, SeriesData};
use crate::diagnostics::{Caution, Fault, Faults, Outcome};
use crate::findings::{self, AcrossFindings, Answer, Findings, Influence, SeriesFindings, UnderAlternative};
use crate::plan::{self, Plan, QuestionPlan, ReadBytes};
use crate::posterior::{self, Basis, Posterior};
use crate::prior::ground::Ground;
use crate::prior::spread::spread_of_means;
use crate::prior::within::{self, WithinRead};
use crate::prior::{self, Built, LevelPrior, Model, Refusal, Source};
use crate::quantity::{Absent, Scale, natural_order};
use crate::questions::figures::{Figures, Item};
use crate::questions::{self, Question, Subject, acceptance, rule};
use crate::sensitivity::{self, Base, OwnAlternative};
use crate::source;
use crate::spec::reader::not_served;
use std::collections::{BTreeMap, BTreeSet};
use std::path::Path;

/// A spec read to its end: the plan, and every table that a later stage owns.
#[derive(Debug)]
pub struct Prepared {
    pub plan: Plan,
    /// With its index in the plan's questions.
    pub questions: Vec<(usize, Box<dyn Question>)>,
    general: Settings,
    /// For series whose spec replaces the prior or the within sd.
    own: BTreeMap<String, Settings>,
    otherwise: Option<Box<dyn Source>>,
    alternatives: Vec<OwnAlternative>,
}

#[derive(Debug)]
struct Settings {
    source: Box<dyn Source>,
    within: WithinRead,
}

/// The whole way, up to the findings.
///
/// `spec` is the file to read, `shown` its name in messages; `jobs` the number of threads, on which
/// no figure depends.
pub fn run(spec: &Path, shown: &str, jobs: usize) -> Outcome<Findings> {
    let prepared = prepare(spec, shown)?;
    let data = data::read(&prepared.plan)?;
    review(prepared, data, jobs)
}

/// Spec and plan, with every table read; computes nothing.
pub fn prepare(spec: &Path, shown: &str) -> Outcome<Prepared> {
    prepare_by(spec, shown, &|path| source::whole(path, &path.to_string_lossy(), "the spec"), &|_| ())
}

/// [`prepare`], where `read` gives the bytes of the spec and of its base, and `lead` leads the files that the
/// plan names to their places: an audit takes all of them from the review's folder.
pub fn prepare_by(
    spec: &Path,
    shown: &str,
    read: &ReadBytes<'_>,
    lead: &dyn Fn(&mut Plan),
) -> Outcome<Prepared> {
    let mut plan = plan::load(spec, shown, read)?;
    lead(&mut plan);
    // The overrides belong to the series' settings, so they are read before these.
    data::read_overrides(&mut plan)?;
    data::read_linked(&mut plan)?;
    let mut faults = Faults::default();
    let questions = questions::read_all(&plan, &mut faults);
    let scale = plan.quantity.scale;
    let read_settings =
        |prior: &crate::spec::table::Table, spread: &crate::spec::table::Table, faults: &mut Faults| {
            let source = prior::read(prior, scale, &plan, faults);
            let within = within::read(spread, scale, &plan, faults);
            Some(Settings { source: source?, within: within? })
        };
    let general = read_settings(&plan.prior, &plan.within, &mut faults);
    let mut own = BTreeMap::new();
    for (name, overrides) in &plan.series {
        if overrides.prior.is_some() || overrides.within.is_some() {
            let settings = read_settings(&plan.prior_table(name), &plan.within_table(name), &mut faults);
            own.extend(settings.map(|settings| (name.clone(), settings)));
        }
    }
    let otherwise = plan.otherwise.as_ref().and_then(|table| prior::read(table, scale, &plan, &mut faults));
    let alternatives = plan
        .alternatives
        .iter()
        .map(|alternative| OwnAlternative {
            id: alternative.id.clone(),
            source: alternative
                .prior
                .as_ref()
                .and_then(|table| prior::read(table, scale, &plan, &mut faults)),
            within: alternative
                .within
                .as_ref()
                .and_then(|table| within::read(table, scale, &plan, &mut faults)),
        })
        .collect();
    refuse_what_is_not_served(&plan, general.iter().chain(own.values()), &mut faults);
    match general {
        Some(general) if faults.is_empty() => {
            Ok(Prepared { plan, questions, general, own, otherwise, alternatives })
        }
        _ => Err(faults),
    }
}

/// What the language has and this version would leave out of the computation: refused, never ignored.
fn refuse_what_is_not_served<'a>(
    plan: &Plan,
    settings: impl Iterator<Item = &'a Settings>,
    faults: &mut Faults,
) {
    for alternative in &plan.alternatives {
        if alternative.scale.is_some_and(|scale| scale != plan.quantity.scale) {
            faults.push(not_served(
                &format!("another scale in the alternative \"{}\"", alternative.id),
                &alternative.span,
            ));
        }
    }
    let Some(step) = plan.quantity.step else { return };
    // Rounding to a step of at most half the within sd changes nothing that is printed.
    let coarse = |settings: &Settings| match (settings.within.stated_sd(), plan.quantity.scale) {
        (Ok(sd), Scale::Linear) => step.get() > 0.5 * sd,
        _ => true,
    };
    if settings.filter(|settings| coarse(settings)).count() > 0 {
        faults.push(
            Fault::wrong(
                "not-served-yet",
                format!(
                    "readings rounded to a step ({}) above half the within sd, or beside one that is not stated, are not served yet by this version",
                    step.get()
                ),
            )
            .expected("a step of at most half a stated within sd")
            .repair("leave `step` out of [quantity] if the readings shall count as printed"),
        );
    }
}

impl Prepared {
    fn settings(&self, series: &str) -> &Settings {
        self.own.get(series).unwrap_or(&self.general)
    }

    /// The names of the reviewed series, and of the others with their last period.
    pub fn reviewed(&self, data: &Data) -> (Vec<String>, Vec<(String, String)>) {
        let period = &self.plan.review.period;
        let named: BTreeSet<&str> = self.plan.series.keys().map(String::as_str).collect();
        let mut reviewed: Vec<String> = named.iter().map(|name| name.to_string()).collect();
        let mut others = Vec::new();
        for series in &data.series {
            if named.contains(series.name.as_str()) {
                continue;
            }
            if series.period(period).is_some() {
                reviewed.push(series.name.clone());
            } else if let Some(last) = series.periods.last() {
                others.push((series.name.clone(), last.period.to_string()));
            }
        }
        reviewed.sort_by(|a, b| natural_order(a, b));
        (reviewed, others)
    }
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
pub fn review(prepared: Prepared, data: Data, jobs: usize) -> Outcome<Findings> {
    let (names, not_reviewed) = prepared.reviewed(&data);
    if names.is_empty() {
        return Err(nothing_to_review(&prepared.plan, &data).into());
    }
    let worked = in_parallel(&names, jobs, |name| work(&prepared, &data, name))?;
    let series = in_parallel(&worked, jobs, |worked| findings_of(&prepared, &data, worked))?;
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
    let (series, faults) = keep_exact(series);
    let settings = settings_of(&prepared);
    let mut findings = Findings {
        plan: prepared.plan,
        data,
        series,
        not_reviewed,
        across,
        cautions,
        compared: Vec::new(),
        settings,
        quadrature_error,
    };
    findings.compared = findings::compared::of(&findings)?;
    let following = crate::findings::cautions::of(&findings);
    findings.cautions.extend(following);
    faults.or(findings)
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
        settings.within.within(&ground, &built.level).map_err(|refusal| match refusal {
            Refusal::TooShort(fault) | Refusal::Wrong(fault) => fault,
        })?;
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
        (Err(Refusal::TooShort(fault) | Refusal::Wrong(fault)), _) => Err(fault.into()),
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
fn findings_of(prepared: &Prepared, data: &Data, worked: &Worked<'_>) -> Outcome<SeriesFindings> {
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
    let sensitivity = sensitivity_of(prepared, data, worked, &asked, &flagged);
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

/// A figure of the review's own answers that could not be computed to the promised accuracy is an error, never
/// a doubtful digit; under an alternative it is left out with its reason.
fn keep_exact(series: Vec<SeriesFindings>) -> (Vec<SeriesFindings>, Faults) {
    let mut faults = Faults::default();
    let mut note = |series: &str, what: &str, reason: &str| {
        faults.push(
            Fault::wrong(
                "not-exact",
                format!("{series}: {what} could not be computed to the promised accuracy: {reason}"),
            )
            .expected("data and priors of ordinary size")
            .repair("look at the within sd, the units and the values of this series"),
        );
    };
    for found in &series {
        for (what, posterior) in [
            ("the prior", &found.prior),
            ("the readings alone", &found.readings_only),
            ("the posterior", &found.posterior),
        ] {
            if let Err(absent) = posterior
                && absent.failed
            {
                note(&found.name, what, &absent.reason);
            }
        }
        for answer in &found.answers {
            for figures in [&answer.figures, &answer.prior_only, &answer.readings_only, &answer.rule_figures]
            {
                for reason in failures(figures) {
                    note(&found.name, &format!("the answer \"{}\"", answer.id), reason);
                }
            }
        }
    }
    (series, faults)
}

fn failures(figures: &Figures) -> impl Iterator<Item = &str> {
    figures.0.iter().filter_map(|(_, item)| match item {
        Item::Number(Err(absent), _) if absent.failed => Some(absent.reason.as_str()),
        _ => None,
    })
}
