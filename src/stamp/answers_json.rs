//! answers.json: every figure in full precision, in the order of the contract.

use crate::data::Data;
use crate::findings::compared::{Changed, Foretold, Prediction, Relation, SeriesThen};
use crate::findings::laws::{LawFigures, Laws};
use crate::findings::many::{OverSeries, WrongVerdicts};
use crate::findings::{AcrossFindings, Answer, Findings, SeriesFindings, UnderAlternative};
use crate::json::{Json, Object, of_toml, reason_against};
use crate::plan::{Action, Limit, Plan};
use crate::quantity::Absent;
use crate::questions::figures::{Figures, Item};
use crate::questions::rule::Given;

pub const FORMAT: &str = "reassay-answers/1";

/// The whole of answers.json.
pub fn answers_json(findings: &Findings) -> Json {
    let plan = &findings.plan;
    let series = findings.series.iter().map(|series| one_series(series, plan, &findings.data)).collect();
    let cautions = findings.cautions.iter().map(|caution| {
        Object::new()
            .text("code", caution.code)
            .text_if("series", caution.series.as_deref())
            .text_if("question", caution.question.as_deref())
            .text("text", caution.text.as_str())
            .done()
    });
    Object::new()
        .text("format", FORMAT)
        .put("review", review(plan))
        .put("quantity", quantity(plan))
        .put("series", Json::List(series))
        .put("limits", limits(plan))
        .put("actions", Json::List(plan.actions.iter().map(action).collect()))
        .put("checks_over_series", Json::List(findings.checks_over_series.iter().map(over_series).collect()))
        .put("verdicts_expected_wrong", Json::List(findings.wrong_verdicts.iter().map(wrong).collect()))
        .put("across", Json::List(findings.across.iter().map(across).collect()))
        .put("cautions", Json::List(cautions.collect()))
        .put("previous", beside(findings, Relation::Previous))
        .put("supersedes", beside(findings, Relation::Amended))
        .put("numerics", Object::new().number("quadrature_error", findings.quadrature_error).done())
        .done()
}

fn review(plan: &Plan) -> Json {
    let review = &plan.review;
    Object::new()
        .text("id", review.id.as_str())
        .text("title", review.title.as_str())
        .text("period", review.period.as_str())
        .text("date", review.date.to_string())
        .text("status", review.status.word())
        .done()
}

fn quantity(plan: &Plan) -> Json {
    Object::new()
        .text("name", plan.quantity.name.as_str())
        .text("unit", plan.quantity.unit.as_str())
        .text("scale", plan.quantity.scale.word())
        .done()
}

/// Every limit by its name: a value, or its lower and upper bound.
fn limits(plan: &Plan) -> Json {
    let ends = |limit: &Limit| Json::List(limit.bounds.ends().into_iter().map(Json::number).collect());
    plan.limits.iter().fold(Object::new(), |object, limit| object.put(&limit.name, ends(limit))).done()
}

fn action(action: &Action) -> Json {
    Object::new()
        .text("what", action.what.as_str())
        .text_if("owner", action.owner.as_deref())
        .text_if("due", action.due.map(|due| due.to_string()).as_deref())
        .text("state", action.state.as_str())
        .text_if("set_by", action.set_by.as_deref())
        .done()
}

/// This review beside another: empty where the spec names none.
fn beside(findings: &Findings, relation: Relation) -> Json {
    let Some(other) = findings.compared.iter().find(|other| other.relation == relation) else {
        return Object::new().done();
    };
    let differing = other.limits.iter().map(|limit| {
        let ends = |ends: &[f64]| Json::List(ends.iter().copied().map(Json::number).collect());
        Object::new()
            .text("name", limit.name.as_str())
            .put("then", ends(&limit.then))
            .put("now", ends(&limit.now))
            .done()
    });
    let lost = other.lost_actions.iter().map(Json::text);
    Object::new()
        .text("review", other.id.as_str())
        .text("stamp", other.stamp.as_str())
        .text("period", other.period.as_str())
        .put("limits", Json::List(differing.collect()))
        .put("lost_actions", Json::List(lost.collect()))
        .put("series", Json::List(other.series.iter().map(series_then).collect()))
        .done()
}

fn series_then(then: &SeriesThen) -> Json {
    let mut object = Object::new().text("name", then.name.as_str());
    if let Some(why) = &then.why {
        return object.absent("answers", why.as_str()).done();
    }
    if let Some(why) = &then.not_scored {
        object.because("predictions", why.as_str());
    }
    object
        .put("answers", Json::List(then.changes.iter().map(changed).collect()))
        .put("predictions", Json::List(then.predictions.iter().map(prediction).collect()))
        .done()
}

fn changed(changed: &Changed) -> Json {
    let number = |value: Option<f64>| value.map_or(Json::Null, Json::number);
    let object = Object::new().text("id", changed.id.as_str()).text("ask", changed.ask.as_str());
    let mut object = changed.figures.iter().fold(object, |object, (field, then, now)| {
        object.put(field, Object::new().put("then", number(*then)).put("now", number(*now)).done())
    });
    if changed.verdict_then.is_some() || changed.verdict_now.is_some() {
        let verdicts = Object::new()
            .text_if("then", changed.verdict_then.as_deref())
            .text_if("now", changed.verdict_now.as_deref());
        object = object.put("verdict", verdicts.done());
    }
    let differently = changed.asked_differently.iter().map(Json::text);
    object.put("asked_differently", Json::List(differently.collect())).done()
}

fn prediction(prediction: &Prediction) -> Json {
    let number = |value: Option<f64>| value.map_or(Json::Null, Json::number);
    Object::new()
        .text_if("id", prediction.question.as_deref())
        .text(
            "of",
            match prediction.of {
                Foretold::Mean => "mean of the readings",
                Foretold::EachReading => "each reading",
                Foretold::Level => "level",
            },
        )
        .number("probability", prediction.probability)
        .put("lower", number(prediction.lower))
        .put("upper", number(prediction.upper))
        .put("outcome", number(prediction.outcome))
        .whole("inside", prediction.inside)
        .whole("outcomes", prediction.outcomes)
        .figure("cdf", &prediction.cdf)
        .done()
}

fn one_series(series: &SeriesFindings, plan: &Plan, data: &Data) -> Json {
    let prior = Object::new().text("from", series.prior_from.as_str());
    let prior = put_law(prior, "level", &series.laws.prior).done();
    let influence = Object::new()
        .figure("prior_weight", &series.influence.prior_weight)
        .figure("prior_readings", &series.influence.prior_readings)
        .done();
    Object::new()
        .text("name", series.name.as_str())
        .put("readings", readings(series, plan, data))
        .put("prior", prior)
        .put("posterior", posterior(&series.laws))
        .put("influence", influence)
        .put("answers", Json::List(series.answers.iter().map(answer).collect()))
        .put("checks", Json::List(series.checks.iter().map(check).collect()))
        .put("sensitivity", Json::List(series.sensitivity.iter().map(under_alternative).collect()))
        .done()
}

fn readings(series: &SeriesFindings, plan: &Plan, data: &Data) -> Json {
    let found = data.series.iter().find(|own| own.name == series.name);
    let Some(period) = found.and_then(|own| own.period(&plan.review.period)) else {
        let none = "no readings in the period under review";
        let counts = Object::new().whole("n", 0).absent("mean", none).absent("sd", none);
        return ["marked_below", "marked_above", "missing", "excluded"]
            .iter()
            .fold(counts, |object, name| object.whole(name, 0))
            .done();
    };
    let facts = &period.facts;
    let reason = if facts.marked_below + facts.marked_above > 0 {
        "some readings are marked"
    } else if facts.from_summary {
        "the period is given as a summary without it"
    } else if facts.n == 0 {
        "no reading was used"
    } else {
        "a single reading"
    };
    let plain = |value: Option<f64>| value.ok_or_else(|| Absent::because(reason));
    Object::new()
        .whole("n", facts.n)
        .figure("mean", &plain(facts.mean))
        .figure("sd", &plain(facts.sd))
        .whole("marked_below", facts.marked_below)
        .whole("marked_above", facts.marked_above)
        .whole("missing", facts.missing)
        .whole("excluded", facts.excluded)
        .done()
}

fn posterior(laws: &Laws) -> Json {
    laws.posterior.iter().fold(Object::new(), |object, (name, law)| put_law(object, name, law)).done()
}

fn put_law(object: Object, name: &str, law: &Result<LawFigures, Absent>) -> Object {
    let law = match law {
        Ok(law) => law,
        Err(absent) => return object.absent(name, &absent.reason),
    };
    let quantiles =
        law.quantiles.iter().fold(Object::new(), |object, (name, figure)| object.figure(name, figure));
    let mut own = Object::new().figure("mean", &law.mean).figure("sd", &law.sd);
    if let Some((mean, sd)) = &law.logs {
        own = own.figure("log_mean", mean).figure("log_sd", sd);
    }
    object.put(name, own.put("quantiles", quantiles.done()).done())
}

fn answer(answer: &Answer) -> Json {
    let mut object = Object::new().text("id", answer.id.as_str()).text("ask", answer.ask.as_str());
    for (key, value) in &answer.settings {
        // A setting that has the name of a figure would hide it; the plan holds it too.
        if answer.figures.get(key).is_none() && !object.has(key) {
            object = object.put(key, of_toml(value));
        }
    }
    object = put_figures(object, &answer.figures);
    object = put_verdict(object, answer.verdict.as_ref());
    object = put_figures(object, &answer.rule_figures);
    object
        .put("prior_only", put_figures(Object::new(), &answer.prior_only).done())
        .put("readings_only", put_figures(Object::new(), &answer.readings_only).done())
        .done()
}

fn put_verdict(mut object: Object, given: Option<&Given>) -> Object {
    let Some(given) = given else { return object };
    if let Some(reason) = &given.why {
        object.because("verdict", reason.as_str());
    }
    match &given.say {
        Some(say) => object.text("verdict", say.as_str()),
        None => object.put("verdict", Json::Null),
    }
    .flag("fail", given.fail)
}

/// All figures as fields of an object.
pub fn put_figures(object: Object, figures: &Figures) -> Object {
    figures.0.iter().fold(object, |object, (name, item)| match item {
        Item::Number(figure, _) => object.figure(name, figure),
        Item::Whole(Some(count)) => object.whole(name, *count),
        Item::Whole(None) => object.absent(name, "there is none"),
        Item::Numbers(numbers, _) => {
            let mut object = object;
            if let Some(reason) = numbers.iter().find_map(|number| reason_against(*number)) {
                object.because(name, format!("null stands for {reason}"));
            }
            object.put(name, Json::List(numbers.iter().map(|number| Json::number(*number)).collect()))
        }
        Item::Texts(texts) => object.put(name, Json::List(texts.iter().map(Json::text).collect())),
        Item::Rows(rows) => {
            let rows = rows.iter().map(|row| put_figures(Object::new(), row).done());
            object.put(name, Json::List(rows.collect()))
        }
        Item::Text(text) => object.text(name, text.as_str()),
    })
}

fn check(check: &crate::checks::Check) -> Json {
    let reason = check.why.as_deref().unwrap_or("this check has none");
    let figure = |value: Option<f64>| value.ok_or_else(|| Absent::because(reason));
    let object = Object::new()
        .text("id", check.id)
        .figure("statistic", &figure(check.statistic))
        .figure("p", &figure(check.p))
        .flag("flag", check.concern == crate::checks::Concern::Flag);
    if check.extra.is_empty() {
        return object.done();
    }
    let extra = check.extra.iter().fold(Object::new(), |object, (name, value)| object.number(name, *value));
    object.put("figures", extra.done()).done()
}

fn over_series(over: &OverSeries) -> Json {
    let figures =
        over.check.extra.iter().fold(Object::new(), |object, (name, value)| object.number(name, *value));
    let stand_out = over.stand_out.iter().map(Json::text);
    Object::new()
        .text("check", over.kind)
        .put("flags", over.check.statistic.map_or(Json::Null, Json::number))
        .put("figures", figures.done())
        .put("stand_out", Json::List(stand_out.collect()))
        .done()
}

fn wrong(wrong: &WrongVerdicts) -> Json {
    Object::new()
        .text("id", wrong.question.as_str())
        .whole("verdicts", wrong.given as u64)
        .number("expected_wrong", wrong.expected_wrong)
        .done()
}

fn under_alternative(under: &UnderAlternative) -> Json {
    let answers = under.answers.iter().map(|(id, figures, verdict)| {
        let object = put_figures(Object::new().text("id", id.as_str()), figures);
        put_verdict(object, verdict.as_ref()).done()
    });
    let mut object = Object::new().text("alternative", under.alternative.as_str());
    if let Some(reason) = &under.why {
        object.because("answers", reason.as_str());
    }
    object.put("answers", Json::List(answers.collect())).done()
}

fn across(across: &AcrossFindings) -> Json {
    let object = Object::new().text("id", across.id.as_str()).text("ask", across.ask.as_str());
    let object = match across.series.as_slice() {
        // One answer for all: its figures stand beside the question's id.
        [(name, figures)] if name.is_empty() => put_figures(object, figures),
        series => {
            let rows = series.iter().map(|(name, figures)| {
                put_figures(Object::new().text("name", name.as_str()), figures).done()
            });
            object.put("series", Json::List(rows.collect()))
        }
    };
    put_verdict(object, across.verdict.as_ref()).done()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::questions::figures::Meaning;
    use proptest::prelude::*;

    #[test]
    fn an_absent_figure_is_null_with_its_reason() {
        let figures = Figures::default()
            .number("estimate", Ok(44.25), Meaning::Value)
            .number("lower", Err(Absent::because("an upper bound has no lower end")), Meaning::Value)
            .with("chances", Item::Numbers(vec![0.5, f64::NAN], Meaning::Chance));
        assert_eq!(
            put_figures(Object::new(), &figures).done().to_line(),
            "{\"estimate\": 44.25, \"lower\": null, \"chances\": [0.5, null], \
             \"why\": {\"lower\": \"an upper bound has no lower end\", \"chances\": \"null stands for undefined\"}}"
        );
    }

    #[test]
    fn a_verdict_held_back_says_why() {
        let given =
            Given { say: Some("not decided".into()), fail: false, why: Some("prior conflict".into()) };
        assert_eq!(
            put_verdict(Object::new(), Some(&given)).done().to_line(),
            "{\"verdict\": \"not decided\", \"fail\": false, \"why\": {\"verdict\": \"prior conflict\"}}"
        );
    }

    pub fn any_figures() -> impl Strategy<Value = Figures> {
        const NAMES: [&str; 6] = ["estimate", "lower", "upper", "chance", "chances", "table"];
        let number = prop_oneof![
            any::<f64>(),
            Just(f64::NAN),
            Just(f64::INFINITY),
            Just(f64::NEG_INFINITY),
            Just(-0.0),
            Just(5e-324),
            Just(f64::MAX),
        ];
        let figure =
            prop_oneof![number.clone().prop_map(Ok), ".{0,9}".prop_map(|why| Err(Absent::because(why)))];
        let item = prop_oneof![
            figure.prop_map(|figure| Item::Number(figure, Meaning::Value)),
            any::<Option<u64>>().prop_map(Item::Whole),
            prop::collection::vec(number, 0..4).prop_map(|numbers| Item::Numbers(numbers, Meaning::Chance)),
            prop::collection::vec(".{0,9}", 0..3).prop_map(Item::Texts),
            ".{0,9}".prop_map(Item::Text),
        ];
        let row = prop::collection::vec(item.clone(), 0..4)
            .prop_map(|items| Figures(NAMES.into_iter().zip(items).collect()));
        let items = prop_oneof![item, prop::collection::vec(row, 0..3).prop_map(Item::Rows)];
        prop::collection::vec(items, 0..6).prop_map(|items| Figures(NAMES.into_iter().zip(items).collect()))
    }

    proptest! {
        #[test]
        fn any_figures_give_valid_json(figures in any_figures()) {
            let json = put_figures(Object::new(), &figures).done();
            prop_assert_eq!(Json::read(&json.to_file()), Ok(json.clone()));
            let read: serde_json::Value = serde_json::from_str(&json.to_line()).unwrap();
            prop_assert!(read.is_object());
            for (name, item) in &figures.0 {
                if let Item::Number(Ok(number), _) = item {
                    let back = json.get(name).and_then(Json::as_f64).map(f64::to_bits);
                    prop_assert_eq!(back, number.is_finite().then(|| number.to_bits()));
                }
            }
        }
    }
}
