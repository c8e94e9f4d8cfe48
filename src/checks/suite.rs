//! Which checks are made of one series, and on what: the one place where a check meets the data, the
//! model and the posterior. The checks themselves know only plain numbers.

use super::homogeneity::PeriodMean;
use super::prior_conflict;
use super::tails::Tails;
use super::timed::Timed;
use super::{
    Check, bartlett, brown_forsythe, coverage, duplicates, homogeneity, last_digits, normality, outliers,
    predictive_extremes, predictive_skew, predictive_spread, prior_predictive, rounding, runs, season,
    serial_correlation, trend, unit_jump, von_neumann, within_sd, within_sd_worth,
};
use crate::data::evidence::{Evidence, Seen};
use crate::data::{Fate, Mark, PeriodData, ReadingRow};
use crate::math::fm;
use crate::posterior::{Posterior, When};
use crate::prior::{LevelPrior, Model, Within};
use crate::quantity::{Absent, Scale};
use jiff::civil::Date;
use std::collections::BTreeMap;

/// One series as the checks see it.
#[derive(Debug, Clone, Copy)]
pub struct Subject<'a> {
    pub model: &'a Model,
    /// The period under review.
    pub period: &'a PeriodData,
    pub readings: &'a Evidence,
    /// The earlier periods that count.
    pub earlier: &'a [&'a PeriodData],
    pub planned: Option<u64>,
    pub prior_only: Result<&'a Posterior, &'a Absent>,
    pub posterior: Result<&'a Posterior, &'a Absent>,
}

/// Every check that fits the series, in the order of the report.
pub fn all(subject: &Subject<'_>) -> Vec<Check> {
    let scale = subject.model.scale;
    let values = values(subject.period, scale);
    let plain: Vec<f64> = values.iter().map(|(_, value)| *value).collect();
    let dated = dated(&values);
    let mut checks: Vec<Check> = of_spread(subject).into_iter().collect();
    checks.extend(of_prior(subject, &plain));
    // Readings known by their bounds have no plain values for these (methods §1).
    if subject.period.facts.n > 0 && !has_marks(subject.period) && !are_ranges(subject.readings) {
        if !plain.is_empty() {
            checks.push(normality::check(&plain));
            checks.push(outliers::check(&plain).check);
            checks.push(trend::check(&dated, "day"));
            checks.push(von_neumann::check(&dated));
            checks.push(serial_correlation::check(&dated));
            checks.push(runs::check(&dated));
        }
        checks.extend(of_posterior(subject, &plain));
    }
    checks.extend(of_periods(subject));
    checks.extend(of_print(subject));
    checks.push(of_coverage(subject));
    checks.extend(of_season(subject));
    checks
}

fn has_marks(period: &PeriodData) -> bool {
    period.facts.marked_below + period.facts.marked_above > 0
}

/// Whether readings count as all that rounds to them.
fn are_ranges(readings: &Evidence) -> bool {
    let Evidence::Singles(singles) = readings else { return false };
    singles.iter().any(|single| matches!(single.seen, Seen::Rounded { .. }))
}

fn used(period: &PeriodData) -> impl Iterator<Item = &ReadingRow> {
    period.readings.iter().filter(|row| row.fate == Fate::Used)
}

/// The used, unmarked readings on the model's scale with their dates, replicates averaged first.
fn values(period: &PeriodData, scale: Scale) -> Vec<(Option<Date>, f64)> {
    let on_scale = |value: f64| if scale == Scale::Log { fm::ln(value) } else { value };
    let mut values = Vec::new();
    let mut place_of: BTreeMap<&str, (usize, f64)> = BTreeMap::new();
    for row in used(period).filter(|row| row.mark == Mark::None) {
        let Some(value) = row.value.map(on_scale) else { continue };
        match row.replicate.as_deref() {
            None => values.push((row.date, value)),
            Some(name) => match place_of.get_mut(name) {
                None => {
                    place_of.insert(name, (values.len(), 1.0));
                    values.push((row.date, value));
                }
                Some((place, count)) => {
                    *count += 1.0;
                    values[*place].1 += (value - values[*place].1) / *count;
                }
            },
        }
    }
    values
}

fn dated(values: &[(Option<Date>, f64)]) -> Vec<Timed> {
    values
        .iter()
        .filter_map(|(date, value)| Some(Timed { at: day_number((*date)?) as f64, value: *value }))
        .collect()
}

/// Days since 1970-01-01.
fn day_number(date: Date) -> i64 {
    let epoch = Date::constant(1970, 1, 1);
    date.duration_since(epoch).as_hours() / 24
}

fn of_spread(subject: &Subject<'_>) -> Option<Check> {
    let Evidence::Sums { n, ss: Some(ss), .. } = subject.readings else { return None };
    match subject.model.within {
        Within::Known(sd) => Some(within_sd::check(*n as usize, *ss, sd)),
        Within::Worth { sd, df } => Some(within_sd_worth::check(*n as usize, *ss, sd, df)),
        _ => None,
    }
}

fn of_prior(subject: &Subject<'_>, plain: &[f64]) -> Vec<Check> {
    let mut checks = Vec::new();
    let Ok(prior) = subject.prior_only else { return checks };
    let n = subject.readings.n().unwrap_or(1) as usize;
    if let (Ok(mean), Ok((lower, upper))) = (prior.observed_mean(), prior.predictive_mean_tails()) {
        let expected = prior.affine(When::This, 1.0, &|_| (0.0, 0.0)).and_then(|law| law.median()).ok();
        checks.push(prior_conflict::from_tails(mean, n, Tails { lower, upper }, expected));
    }
    if !plain.is_empty()
        && let Ok(ends) = prior.reading(When::This, 1, None).and_then(|law| law.central(0.95))
    {
        checks.push(prior_predictive::check(plain, ends));
    }
    if let (Evidence::Sums { mean, .. } | Evidence::Mean { mean, .. }, Scale::Linear) =
        (subject.readings, subject.model.scale)
        && let Ok(law) = prior.affine(When::This, 1.0, &|_| (0.0, 0.0))
        && let (Ok(centre), Ok(sd)) = (law.median(), law.sd())
    {
        checks.push(unit_jump::check(*mean, centre, sd));
    }
    checks
}

fn of_posterior(subject: &Subject<'_>, plain: &[f64]) -> Vec<Check> {
    let mut checks = Vec::new();
    let Ok(posterior) = subject.posterior else { return checks };
    let spread_is_unknown = !matches!(subject.model.within, Within::Known(_) | Within::None);
    if let Evidence::Sums { n, ss: Some(ss), .. } = subject.readings
        && spread_is_unknown
        && let Ok(pieces) = posterior.summed()
    {
        let nodes: Vec<predictive_spread::SdNode> = pieces
            .iter()
            .map(|piece| predictive_spread::SdNode { weight: piece.weight, sd: piece.reading_sd })
            .collect();
        let alone = matches!(subject.model.within, Within::Readings);
        checks.push(predictive_spread::check(*n as usize, *ss, &nodes, alone));
    }
    let pieces: Vec<predictive_extremes::Piece> = posterior
        .summed()
        .unwrap_or_default()
        .iter()
        .map(|piece| predictive_extremes::Piece {
            weight: piece.weight,
            level_mean: piece.level_mean,
            level_sd: piece.level_var.sqrt(),
            reading_sd: piece.reading_sd,
        })
        .collect();
    let smallest = plain.iter().copied().fold(f64::INFINITY, f64::min);
    let largest = plain.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if plain.len() > 1 && pieces.iter().all(|piece| piece.reading_sd > 0.0) && !pieces.is_empty() {
        checks.push(predictive_extremes::check(plain.len(), smallest, largest, &pieces));
    }
    if !plain.is_empty() {
        checks.push(predictive_skew::check(plain));
    }
    checks
}

/// Whether the periods scatter alike, and whether their means differ.
fn of_periods(subject: &Subject<'_>) -> Vec<Check> {
    let all: Vec<&PeriodData> = subject.earlier.iter().copied().chain([subject.period]).collect();
    let mut checks = Vec::new();
    let readings: Vec<Vec<f64>> = all
        .iter()
        .map(|period| values(period, subject.model.scale).into_iter().map(|(_, value)| value).collect())
        .collect();
    let single = all.iter().zip(&readings).all(|(period, values)| values.len() as u64 == period.facts.n);
    let sums: Vec<(u64, f64, f64)> = all
        .iter()
        .filter_map(|period| match period.evidence {
            Evidence::Sums { n, mean, ss: Some(ss), .. } if n > 1 => Some((n, mean, ss)),
            _ => None,
        })
        .collect();
    if sums.len() >= 2 && !matches!(subject.model.within, Within::None) {
        if single {
            let groups: Vec<&[f64]> =
                readings.iter().filter(|values| values.len() > 1).map(Vec::as_slice).collect();
            checks.push(brown_forsythe::check(&groups));
        } else {
            let groups: Vec<(usize, f64)> =
                sums.iter().map(|(n, _, ss)| (*n as usize, (ss / (*n as f64 - 1.0)).sqrt())).collect();
            checks.push(bartlett::check(&groups));
        }
    }
    let may_differ = matches!(
        subject.model.level,
        LevelPrior::Periods(_) | LevelPrior::LongRun { .. } | LevelPrior::Peers(_)
    );
    let (known_variance, df) = match subject.model.within {
        Within::Known(sd) => (Some(sd * sd), None),
        Within::None => (Some(0.0), None),
        _ => {
            let (ss, df) =
                sums.iter().fold((0.0, 0.0), |(ss, df), (n, _, own)| (ss + own, df + *n as f64 - 1.0));
            (((df > 0.0) && ss > 0.0).then(|| ss / df), Some(df))
        }
    };
    let means: Option<Vec<PeriodMean>> = all
        .iter()
        .filter(|period| !period.evidence.is_nothing())
        .map(|period| match &period.evidence {
            Evidence::Sums { n, mean, .. } => {
                let uncertainty = (known_variance? / *n as f64).sqrt();
                (uncertainty > 0.0).then_some(PeriodMean { mean: *mean, uncertainty })
            }
            Evidence::Mean { mean, uncertainty } => {
                Some(PeriodMean { mean: *mean, uncertainty: *uncertainty })
            }
            _ => None,
        })
        .collect();
    if let Some(means) = means.filter(|means| means.len() > 1) {
        checks.push(homogeneity::check(&means, df, may_differ));
    }
    checks
}

/// What the printed digits say.
fn of_print(subject: &Subject<'_>) -> Vec<Check> {
    let rows: Vec<&ReadingRow> = used(subject.period).filter(|row| row.mark == Mark::None).collect();
    let mut checks = Vec::new();
    if rows.is_empty() {
        return checks;
    }
    let printed: Vec<String> = rows.iter().map(|row| with_point(&row.text)).collect();
    let texts: Vec<&str> = printed.iter().map(String::as_str).collect();
    if subject.model.scale == Scale::Linear
        && let Some(sd) = reading_sd(subject)
    {
        checks.push(match are_ranges(subject.readings) {
            true => rounding::counted(),
            false => rounding::check(&texts, sd),
        });
        checks.push(last_digits::check(&texts, sd));
    }
    let dates: Vec<String> =
        rows.iter().map(|row| row.date.map(|date| date.to_string()).unwrap_or_default()).collect();
    let places: Vec<String> = rows.iter().map(|row| row.line.to_string()).collect();
    let seen: Vec<duplicates::Row<'_>> = rows
        .iter()
        .zip(&dates)
        .zip(&places)
        .filter_map(|((row, date), place)| {
            let id = row.id.as_deref().unwrap_or("");
            Some(duplicates::Row { series: &row.series, date, id, value: row.value?, place })
        })
        .collect();
    checks.push(duplicates::check(&seen).check);
    checks
}

/// The printed number with a decimal point, whatever its file has: a used cell was read as a number, so
/// a comma in it is the decimal one.
fn with_point(text: &str) -> String {
    text.replace(',', ".")
}

/// The within sd that readings are held against: the known one, else the posterior's median.
fn reading_sd(subject: &Subject<'_>) -> Option<f64> {
    match subject.model.within {
        Within::Known(sd) | Within::Worth { sd, .. } => Some(sd),
        Within::None => None,
        _ => subject.posterior.ok()?.within_sd().and_then(|law| law.median()).ok(),
    }
}

fn of_coverage(subject: &Subject<'_>) -> Check {
    let facts = &subject.period.facts;
    let days: Vec<i64> = used(subject.period).filter_map(|row| row.date.map(day_number)).collect();
    let year = facts.first_date.map(|date| date.year());
    let months: Vec<coverage::Month> = match year {
        Some(year) if facts.last_date.map(|date| date.year()) == Some(year) => facts
            .by_month
            .iter()
            .enumerate()
            .map(|(month, readings)| coverage::Month {
                name: format!("{year}-{:02}", month + 1),
                readings: *readings as usize,
            })
            .collect(),
        _ => Vec::new(),
    };
    coverage::check(&coverage::Made {
        planned: subject.planned.map(|planned| planned as usize),
        used: facts.n as usize,
        months: &months,
        period: None,
        days: &days,
    })
}

fn of_season(subject: &Subject<'_>) -> Option<Check> {
    let quarters = |period: &PeriodData| {
        let month = &period.facts.by_month;
        [0, 3, 6, 9].map(|first: usize| month[first..first + 3].iter().sum::<u64>() as usize)
    };
    let earlier = subject.earlier.iter().map(|period| quarters(period)).fold([0; 4], |mut sum, own| {
        for (total, part) in sum.iter_mut().zip(own) {
            *total += part;
        }
        sum
    });
    let own = quarters(subject.period);
    (own.iter().sum::<usize>() > 0 && earlier.iter().sum::<usize>() > 0).then(|| season::check(own, earlier))
}
