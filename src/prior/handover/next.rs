//! What a handover says before the next period's readings: the model that it holds, with the reviewed
//! period put behind the earlier ones. It is built again from the periods' own sums, so that its nodes
//! fit the new readings; the pieces of the handover would not (methods, carried).

use super::Handed;
use crate::data::evidence::Evidence;
use crate::prior::{LevelPrior, Model, Pattern, Periods, Within};
use crate::quantity::Period;

/// How many periods lie between two, the later one included.
pub type Gap<'a> = dyn Fn(&Period, &Period) -> f64 + 'a;

impl Handed {
    /// The prior of the level of `period`, where the handover is of the review of `reviewed`; or why
    /// it holds none.
    pub fn next_level(
        &self,
        reviewed: &Period,
        period: &Period,
        gap: &Gap<'_>,
    ) -> Result<LevelPrior, String> {
        let model = self.model.as_ref().map_err(String::clone)?;
        match &model.level {
            LevelPrior::Mixture(parts) => {
                if self.part_weights.len() != parts.len() {
                    return Err("its mixture does not say what the parts weigh after the readings".into());
                }
                let next = |((_, part), weight): (&(f64, LevelPrior), &f64)| {
                    Ok((*weight, self.after(model, part, reviewed, period, gap)?))
                };
                Ok(LevelPrior::Mixture(
                    parts.iter().zip(&self.part_weights).map(next).collect::<Result<_, String>>()?,
                ))
            }
            level => self.after(model, level, reviewed, period, gap),
        }
    }

    fn after(
        &self,
        model: &Model,
        level: &LevelPrior,
        reviewed: &Period,
        period: &Period,
        gap: &Gap<'_>,
    ) -> Result<LevelPrior, String> {
        match level {
            LevelPrior::Periods(periods) => {
                Ok(LevelPrior::Periods(lengthened(periods, reviewed, &self.readings, period, gap)))
            }
            LevelPrior::LongRun { between_sd, .. } => {
                if model.bias_sd > 0.0 {
                    return Err(
                        "its prior was stated about the true long run, beside a bias of the readings: the two cannot be parted again".into(),
                    );
                }
                // σ known: one piece, whose long-run mean is normal again.
                match self.pieces.as_slice() {
                    [piece] => match piece.long_run_mean {
                        Some((mean, variance)) => Ok(LevelPrior::LongRun {
                            mean,
                            sd: variance.sqrt(),
                            between_sd: *between_sd,
                        }),
                        None => Err("its prior was no model of periods".into()),
                    },
                    _ => Err(
                        "its prior was stated about the long run beside an unknown within sd: what is known of both together has no short form".into(),
                    ),
                }
            }
            LevelPrior::Peers(_) => {
                Err("its prior came from peers, which say nothing of another period".into())
            }
            LevelPrior::Mixture(_) => Err("it holds a mixture inside a mixture".into()),
            LevelPrior::Flat | LevelPrior::Stated { .. } | LevelPrior::Worth { .. } => Err(
                "its prior was about that period's level only; one from a history, or stated about the long run with between_sd, can be carried".into(),
            ),
        }
    }

    /// The within sd, beside `level`; or why the handover holds none.
    pub fn next_within(&self, level: &LevelPrior) -> Result<Within, String> {
        let model = self.model.as_ref().map_err(String::clone)?;
        let unheld = || {
            let lines = self.ledger.iter().filter(|line| !holds(level, &line.period));
            lines.map(|line| line.evidence.clone()).collect::<Vec<_>>()
        };
        match &model.within {
            Within::Known(sd) => Ok(Within::Known(*sd)),
            Within::None => Ok(Within::None),
            Within::Worth { sd, df } => {
                // σ² ~ scaled inverse chi-square, updated by the squares of periods that the level's
                // prior does not bring: closed form (Gelman et al., Bayesian Data Analysis, §2.6).
                let (mut more_df, mut squares) = (*df, df * sd * sd);
                for evidence in unheld() {
                    match evidence {
                        Evidence::Sums { n, ss: Some(ss), .. } if n > 0 => {
                            more_df += (n - 1) as f64;
                            squares += ss;
                        }
                        Evidence::Singles(_) => {
                            return Err("a period of its ledger has marked readings or own uncertainties, whose say on the within sd has no short form".into());
                        }
                        _ => {}
                    }
                }
                Ok(Within::Worth { sd: (squares / more_df).sqrt(), df: more_df })
            }
            Within::Pooled { others } => {
                let mut all = others.clone();
                all.extend(unheld());
                Ok(Within::Pooled { others: all })
            }
            Within::Readings | Within::ReadingsBeside { .. } => {
                Err("its within sd came from the readings of that period alone and says nothing of the next"
                    .into())
            }
        }
    }
}

fn lengthened(
    periods: &Periods,
    reviewed: &Period,
    readings: &Evidence,
    period: &Period,
    gap: &Gap<'_>,
) -> Periods {
    let mut next = periods.clone();
    if !readings.is_nothing() {
        next.periods.push((reviewed.clone(), readings.clone()));
    }
    if let Pattern::RandomWalk { gaps, last_gap } = &mut next.pattern {
        if !readings.is_nothing() {
            gaps.push(*last_gap);
        }
        let last = next.periods.last().map_or(reviewed, |(last, _)| last);
        *last_gap = gap(last, period);
    }
    next
}

/// Whether a prior of the level already brings the readings of a period.
fn holds(level: &LevelPrior, period: &Period) -> bool {
    match level {
        LevelPrior::Periods(periods) => periods.periods.iter().any(|(own, _)| own == period),
        LevelPrior::Mixture(parts) => parts.iter().any(|(_, part)| holds(part, period)),
        _ => false,
    }
}
