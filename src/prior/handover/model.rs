//! A model and a period's evidence as JSON, complete: what is read back equals what was written.

use crate::data::evidence::{Evidence, Seen, Single};
use crate::json::At;
use crate::json::{Json, Object};
use crate::prior::{Adjust, Between, LevelPrior, Model, Pattern, Periods, Within};
use crate::quantity::{Period, Scale};

pub fn model_json(model: &Model) -> Json {
    let object = Object::new()
        .text("scale", model.scale.word())
        .put("within", within_json(&model.within))
        .put("prior", prior_json(&model.level))
        .number("bias_sd", model.bias_sd);
    match &model.adjust {
        None => object.done(),
        Some(adjust) => {
            let moved = Object::new()
                .number("centre", adjust.centre)
                .number("stretch", adjust.stretch)
                .number("shift", adjust.shift);
            object.put("adjust", moved.done()).done()
        }
    }
}

pub fn read_model(at: &At<'_>) -> Result<Model, String> {
    let adjust = match at.maybe("adjust") {
        None => None,
        Some(own) => Some(Adjust {
            centre: own.number("centre")?,
            stretch: own.number("stretch")?,
            shift: own.number("shift")?,
        }),
    };
    Ok(Model {
        scale: read_scale(&at.key("scale")?)?,
        within: read_within(&at.key("within")?)?,
        level: read_prior(&at.key("prior")?)?,
        bias_sd: at.number("bias_sd")?,
        adjust,
    })
}

pub fn read_scale(at: &At<'_>) -> Result<Scale, String> {
    match at.as_text()? {
        "linear" => Ok(Scale::Linear),
        "log" => Ok(Scale::Log),
        _ => Err(at.fault("\"linear\" or \"log\"")),
    }
}

fn within_json(within: &Within) -> Json {
    match within {
        Within::Known(sd) => Object::new().text("kind", "known").number("sd", *sd).done(),
        // Worth infinitely many degrees of freedom is known.
        Within::Worth { sd, df } if df.is_infinite() => {
            Object::new().text("kind", "known").number("sd", *sd).done()
        }
        Within::Worth { sd, df } => {
            Object::new().text("kind", "worth").number("sd", *sd).number("df", *df).done()
        }
        Within::Pooled { others } => Object::new()
            .text("kind", "pooled")
            .put("others", Json::List(others.iter().map(evidence_json).collect()))
            .done(),
        Within::Readings => Object::new().text("kind", "readings").done(),
        Within::ReadingsBeside { history_sd } => {
            Object::new().text("kind", "readings beside").number("history_sd", *history_sd).done()
        }
        Within::None => Object::new().text("kind", "none").done(),
    }
}

fn read_within(at: &At<'_>) -> Result<Within, String> {
    match at.text("kind")? {
        "known" => Ok(Within::Known(at.number("sd")?)),
        "readings beside" => Ok(Within::ReadingsBeside { history_sd: at.number("history_sd")? }),
        "worth" => Ok(Within::Worth { sd: at.number("sd")?, df: at.number("df")? }),
        "pooled" => Ok(Within::Pooled { others: at.each("others", read_evidence)? }),
        "readings" => Ok(Within::Readings),
        "none" => Ok(Within::None),
        _ => Err(at.key("kind")?.fault("a kind of within sd")),
    }
}

fn prior_json(prior: &LevelPrior) -> Json {
    let kind = |kind: &str| Object::new().text("kind", kind);
    match prior {
        LevelPrior::Flat => kind("flat").done(),
        LevelPrior::Stated { mean, sd } => kind("stated").number("mean", *mean).number("sd", *sd).done(),
        LevelPrior::Worth { mean, readings } => {
            kind("worth").number("mean", *mean).number("readings", *readings).done()
        }
        LevelPrior::LongRun { mean, sd, between_sd } => {
            kind("long run").number("mean", *mean).number("sd", *sd).number("between_sd", *between_sd).done()
        }
        LevelPrior::Periods(periods) => periods_json(kind("periods"), periods),
        LevelPrior::Peers(periods) => periods_json(kind("peers"), periods),
        LevelPrior::Mixture(parts) => {
            let part = |(weight, prior): &(f64, LevelPrior)| {
                Object::new().number("weight", *weight).put("prior", prior_json(prior)).done()
            };
            kind("mixture").put("parts", Json::List(parts.iter().map(part).collect())).done()
        }
    }
}

fn read_prior(at: &At<'_>) -> Result<LevelPrior, String> {
    match at.text("kind")? {
        "flat" => Ok(LevelPrior::Flat),
        "stated" => Ok(LevelPrior::Stated { mean: at.number("mean")?, sd: at.number("sd")? }),
        "worth" => Ok(LevelPrior::Worth { mean: at.number("mean")?, readings: at.number("readings")? }),
        "long run" => Ok(LevelPrior::LongRun {
            mean: at.number("mean")?,
            sd: at.number("sd")?,
            between_sd: at.number("between_sd")?,
        }),
        "periods" => Ok(LevelPrior::Periods(read_periods(at)?)),
        "peers" => Ok(LevelPrior::Peers(read_periods(at)?)),
        "mixture" => {
            let part = |at: &At<'_>| Ok((at.number("weight")?, read_prior(&at.key("prior")?)?));
            Ok(LevelPrior::Mixture(at.each("parts", part)?))
        }
        _ => Err(at.key("kind")?.fault("a kind of prior")),
    }
}

fn periods_json(object: Object, periods: &Periods) -> Json {
    let object = match &periods.pattern {
        Pattern::AboutAMean => object.text("pattern", "about a mean"),
        Pattern::RandomWalk { gaps, last_gap } => object
            .text("pattern", "random walk")
            .put("gaps", Json::List(gaps.iter().map(|gap| Json::number(*gap)).collect()))
            .number("last_gap", *last_gap),
    };
    let object = match periods.between {
        Between::Uniform => object.text("between", "uniform"),
        Between::HalfNormal(scale) => object.text("between", "half-normal").number("between_scale", scale),
        Between::HalfCauchy(scale) => object.text("between", "half-cauchy").number("between_scale", scale),
        Between::Known(sd) => object.text("between", "known").number("between_sd", sd),
        Between::None => object.text("between", "none"),
        Between::Reml => object.text("between", "reml"),
        Between::Moments => object.text("between", "moments"),
    };
    let one = |(period, evidence): &(Period, Evidence)| {
        Object::new().text("period", period.as_str()).put("evidence", evidence_json(evidence)).done()
    };
    object
        .number("weight", periods.weight)
        .put("periods", Json::List(periods.periods.iter().map(one).collect()))
        .done()
}

fn read_periods(at: &At<'_>) -> Result<Periods, String> {
    let pattern = match at.text("pattern")? {
        "about a mean" => Pattern::AboutAMean,
        "random walk" => {
            Pattern::RandomWalk { gaps: at.each("gaps", At::as_number)?, last_gap: at.number("last_gap")? }
        }
        _ => return Err(at.key("pattern")?.fault("\"about a mean\" or \"random walk\"")),
    };
    let between = match at.text("between")? {
        "uniform" => Between::Uniform,
        "half-normal" => Between::HalfNormal(at.number("between_scale")?),
        "half-cauchy" => Between::HalfCauchy(at.number("between_scale")?),
        "known" => Between::Known(at.number("between_sd")?),
        "none" => Between::None,
        "reml" => Between::Reml,
        "moments" => Between::Moments,
        _ => return Err(at.key("between")?.fault("a law of the between sd")),
    };
    let one = |at: &At<'_>| Ok((Period::new(at.text("period")?), read_evidence(&at.key("evidence")?)?));
    Ok(Periods { periods: at.each("periods", one)?, pattern, between, weight: at.number("weight")? })
}

pub fn evidence_json(evidence: &Evidence) -> Json {
    match evidence {
        Evidence::Nothing => Object::new().text("kind", "nothing").done(),
        Evidence::Sums { n, mean, ss, rest } => {
            let object = Object::new()
                .text("kind", "sums")
                .whole("n", *n)
                .number("mean", *mean)
                .number("mean_rest", *rest);
            match ss {
                Some(ss) => object.number("ss", *ss).done(),
                None => object.absent("ss", "the summary gave no sd").done(),
            }
        }
        Evidence::Mean { mean, uncertainty } => Object::new()
            .text("kind", "mean")
            .number("mean", *mean)
            .number("uncertainty", *uncertainty)
            .done(),
        Evidence::Singles(singles) => Object::new()
            .text("kind", "singles")
            .put("singles", Json::List(singles.iter().map(single_json).collect()))
            .done(),
    }
}

pub fn read_evidence(at: &At<'_>) -> Result<Evidence, String> {
    match at.text("kind")? {
        "nothing" => Ok(Evidence::Nothing),
        "sums" => Ok(Evidence::Sums {
            n: at.whole("n")?,
            mean: at.number("mean")?,
            ss: at.number_if("ss")?,
            rest: at.number("mean_rest")?,
        }),
        "mean" => Ok(Evidence::Mean { mean: at.number("mean")?, uncertainty: at.number("uncertainty")? }),
        "singles" => Ok(Evidence::Singles(at.each("singles", read_single)?)),
        _ => Err(at.key("kind")?.fault("a kind of evidence")),
    }
}

fn single_json(single: &Single) -> Json {
    let object = match single.seen {
        Seen::At(value) => Object::new().number("at", value),
        Seen::Below(limit) => Object::new().number("below", limit),
        Seen::Above(limit) => Object::new().number("above", limit),
        Seen::Rounded { lower, at, upper } => {
            Object::new().number("lower", lower).number("at", at).number("upper", upper)
        }
    };
    object.number("uncertainty", single.uncertainty).done()
}

fn read_single(at: &At<'_>) -> Result<Single, String> {
    let seen = if at.maybe("below").is_some() {
        Seen::Below(at.number("below")?)
    } else if at.maybe("above").is_some() {
        Seen::Above(at.number("above")?)
    } else if at.maybe("lower").is_some() {
        Seen::Rounded { lower: at.number("lower")?, at: at.number("at")?, upper: at.number("upper")? }
    } else {
        Seen::At(at.number("at")?)
    };
    Ok(Single { seen, uncertainty: at.number("uncertainty")? })
}
