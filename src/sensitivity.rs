//! Stage 8: how much the answers hang on what was assumed. Every answer is given again under the
//! standing alternatives and under the spec's own; this file says which alternatives there are for
//! one series, and with which model and readings each is computed.

use crate::data::PeriodData;
use crate::data::evidence::{Evidence, Seen, Single};
use crate::math::fm;
use crate::posterior::{Posterior, When};
use crate::prior::ground::Ground;
use crate::prior::within::WithinRead;
use crate::prior::{Adjust, Between, LevelPrior, Model, Periods, Refusal, Source, Within};
use crate::quantity::{Absent, Scale};

/// With fewer earlier periods than this, the answers are also given under a half-normal between sd.
const PERIODS_BEFORE_BETWEEN_MATTERS_LITTLE: usize = 10;

/// One alternative for one series.
#[derive(Debug)]
pub struct Alternative {
    pub id: String,
    /// The model and the readings under it, or why there is none.
    pub model: Result<(Model, Evidence), Absent>,
}

/// What the alternatives of one series start from.
#[derive(Debug, Clone, Copy)]
pub struct Base<'a> {
    pub ground: Ground<'a>,
    pub source: &'a dyn Source,
    pub within: &'a WithinRead,
    pub model: &'a Model,
    pub period: Option<&'a PeriodData>,
    pub readings: &'a Evidence,
    /// The posterior without readings.
    pub prior_only: Result<&'a Posterior, &'a Absent>,
}

/// A `[[alternative]]` of the spec, read; what it leaves out is as in the review.
#[derive(Debug)]
pub struct OwnAlternative {
    pub id: String,
    pub source: Option<Box<dyn Source>>,
    pub within: Option<WithinRead>,
}

/// All alternatives that apply, in the order in which the report shows them.
pub fn alternatives(base: &Base<'_>, own: &[OwnAlternative]) -> Vec<Alternative> {
    let mut all = prior_alternatives(base);
    all.extend(within_alternatives(base));
    all.extend(between_alternative(base));
    all.extend(exclusions_restored(base));
    all.extend(half_the_reporting_limit(base));
    all.extend(own.iter().map(|own| own_alternative(base, own)));
    all
}

fn prior_alternatives(base: &Base<'_>) -> Vec<Alternative> {
    if base.model.level == LevelPrior::Flat {
        return Vec::new();
    }
    let with = |id: &str, model: Result<Model, Absent>| Alternative {
        id: id.to_string(),
        model: model.map(|model| (model, base.readings.clone())),
    };
    let flat =
        Model { level: LevelPrior::Flat, adjust: None, within: without_periods(base), ..base.model.clone() };
    let moved = |stretch: f64, sds: f64| {
        let (centre, sd) = centre_and_sd(base)?;
        Ok(Model { adjust: Some(Adjust { centre, stretch, shift: sds * sd }), ..base.model.clone() })
    };
    vec![
        with("flat prior", Ok(flat)),
        with("prior sd halved", moved(0.5, 0.0)),
        with("prior sd doubled", moved(2.0, 0.0)),
        with("prior mean one sd lower", moved(1.0, -1.0)),
        with("prior mean one sd higher", moved(1.0, 1.0)),
    ]
}

/// The within sd keeps its sources when the prior of the level goes: a pooled sd still draws on the
/// earlier periods.
fn without_periods(base: &Base<'_>) -> Within {
    match &base.model.within {
        Within::Pooled { .. } => match base.within.within(&base.ground, &LevelPrior::Flat) {
            Ok((within, _)) => within,
            Err(_) => base.model.within.clone(),
        },
        within => within.clone(),
    }
}

/// The prior's median and its sd, or half its 16–84 % range where it has no sd.
fn centre_and_sd(base: &Base<'_>) -> Result<(f64, f64), Absent> {
    let prior = base.prior_only.map_err(Absent::clone)?;
    let law = prior.affine(When::This, 1.0, &|_| (0.0, 0.0))?;
    let centre = law.median()?;
    let sd = match law.sd() {
        Ok(sd) => sd,
        Err(_) => 0.5 * (law.upper_quantile(0.16)? - law.quantile(0.16)?),
    };
    Ok((centre, sd))
}

fn within_alternatives(base: &Base<'_>) -> Vec<Alternative> {
    let with = |id: &str, within: Within| Alternative {
        id: id.to_string(),
        model: Ok((Model { within, ..base.model.clone() }, base.readings.clone())),
    };
    match base.model.within {
        Within::Known(sd) => vec![
            with("within sd x 0.8", Within::Known(0.8 * sd)),
            with("within sd x 1.25", Within::Known(1.25 * sd)),
            // The earlier periods keep the known sd: only this period's readings speak for themselves.
            with("within sd from readings", Within::ReadingsBeside { history_sd: sd }),
        ],
        Within::Worth { .. } | Within::Pooled { .. } => {
            vec![with("within sd from readings", Within::Readings)]
        }
        Within::Readings | Within::ReadingsBeside { .. } | Within::None => Vec::new(),
    }
}

/// A short history says little of the between sd: a half-normal law with the sd of the period means
/// as its scale keeps very large values out.
fn between_alternative(base: &Base<'_>) -> Option<Alternative> {
    let change = |periods: &Periods| {
        let few = periods.periods.len() < PERIODS_BEFORE_BETWEEN_MATTERS_LITTLE;
        let scale = sd_of_means(periods)?;
        (few && periods.between == Between::Uniform)
            .then(|| Periods { between: Between::HalfNormal(scale), ..periods.clone() })
    };
    let level = match &base.model.level {
        LevelPrior::Periods(periods) => LevelPrior::Periods(change(periods)?),
        LevelPrior::Peers(periods) => LevelPrior::Peers(change(periods)?),
        _ => return None,
    };
    let model = Model { level, ..base.model.clone() };
    Some(Alternative { id: "half-normal between".to_string(), model: Ok((model, base.readings.clone())) })
}

fn sd_of_means(periods: &Periods) -> Option<f64> {
    let means: Vec<f64> = periods
        .periods
        .iter()
        .filter_map(|(_, evidence)| match evidence {
            Evidence::Sums { mean, .. } | Evidence::Mean { mean, .. } => Some(*mean),
            _ => None,
        })
        .collect();
    if means.len() < 2 {
        return None;
    }
    let n = means.len() as f64;
    let mean = means.iter().sum::<f64>() / n;
    let sd = (means.iter().map(|m| (m - mean) * (m - mean)).sum::<f64>() / (n - 1.0)).sqrt();
    (sd > 0.0).then_some(sd)
}

fn exclusions_restored(base: &Base<'_>) -> Option<Alternative> {
    let touched = base.period.is_some_and(|period| period.restored.is_some())
        || base.ground.earlier_data().iter().any(|data| data.restored.is_some());
    if !touched {
        return None;
    }
    let ground = Ground { restored: true, ..base.ground };
    let readings = base.period.map_or(Evidence::Nothing, |period| {
        period.restored.clone().unwrap_or_else(|| period.evidence.clone())
    });
    Some(Alternative {
        id: "exclusions restored".to_string(),
        model: rebuilt(base, ground, base.source, base.within).map(|model| (model, readings)),
    })
}

/// As water rules order for means: every reading marked "below" counts as half its limit. A second
/// result, labelled as such.
fn half_the_reporting_limit(base: &Base<'_>) -> Option<Alternative> {
    let scale = base.ground.scale;
    let Evidence::Singles(singles) = base.readings else { return None };
    if !singles.iter().any(|single| matches!(single.seen, Seen::Below(_))) {
        return None;
    }
    let half = |single: &Single| match single.seen {
        Seen::Below(limit) => Single {
            seen: Seen::At(if scale == Scale::Log { limit - fm::ln(2.0) } else { 0.5 * limit }),
            ..*single
        },
        _ => *single,
    };
    let readings = Evidence::Singles(singles.iter().map(half).collect());
    Some(Alternative {
        id: "half the reporting limit".to_string(),
        model: Ok((base.model.clone(), readings)),
    })
}

fn own_alternative(base: &Base<'_>, own: &OwnAlternative) -> Alternative {
    let source = own.source.as_deref().unwrap_or(base.source);
    let within = own.within.as_ref().unwrap_or(base.within);
    let model = rebuilt(base, base.ground, source, within);
    Alternative { id: own.id.clone(), model: model.map(|model| (model, base.readings.clone())) }
}

fn rebuilt(
    base: &Base<'_>,
    ground: Ground<'_>,
    source: &dyn Source,
    within: &WithinRead,
) -> Result<Model, Absent> {
    let why = |refusal: Refusal| Absent::because(refusal.into_fault().message);
    let built = source.level(&ground).map_err(why)?;
    let (within, _) = within.within(&ground, &built.level).map_err(why)?;
    Ok(Model { within, level: built.level, adjust: None, ..base.model.clone() })
}
