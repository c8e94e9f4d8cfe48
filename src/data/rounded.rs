//! Readings rounded to a wide step: each then stands for all that rounds to it. A step of at most half the
//! within sd changes nothing that is printed, and the readings count as printed (methods §1).

use super::evidence::{Evidence, Seen, Single};
use super::{Data, Fate, Mark, PeriodData, ReadingRow, SeriesData};
use crate::diagnostics::Caution;
use crate::math::fm;
use crate::quantity::Scale;

/// A step above this share of the within sd is a wide one.
const WIDE: f64 = 0.5;

/// Puts ranges in the place of readings where `step` is wide against the within sd of a series: the
/// stated one (on the model's scale) where `stated_sd` gives it, else that of the readings themselves.
pub fn widen_rounded(data: &mut Data, step: f64, scale: Scale, stated_sd: &dyn Fn(&str) -> Option<f64>) {
    let mut cautions = Vec::new();
    for series in &mut data.series {
        let sd = stated_sd(&series.name).or_else(|| sd_of(series));
        let on_scale = match (scale, typical(series)) {
            (Scale::Linear, _) => step,
            (Scale::Log, Some(value)) => step / value,
            (Scale::Log, None) => continue,
        };
        // Readings that are all alike show no sd: rounding hides it.
        if sd.is_some_and(|sd| sd > 0.0 && on_scale <= WIDE * sd) {
            continue;
        }
        let mut wide = 0_usize;
        let mut not_counted = Vec::new();
        for period in &mut series.periods {
            match widened(period, step, scale) {
                Some((evidence, restored)) => {
                    wide += 1;
                    period.evidence = evidence;
                    period.restored = restored;
                }
                None if !period.evidence.is_nothing() => not_counted.push(period.period.to_string()),
                None => {}
            }
        }
        if wide > 0 {
            let text = format!(
                "The step {step} to which readings are rounded is wide against the within sd: each reading counts as all that rounds to it."
            );
            cautions.push(Caution::new("rounded-widely", text).of_series(&series.name));
        }
        if !not_counted.is_empty() {
            let text = format!(
                "Single readings of {} are not held (summaries, averages of replicates, or too many): their rounding to the step {step} is not counted.",
                not_counted.join(", ")
            );
            cautions.push(Caution::new("rounding-not-counted", text).of_series(&series.name));
        }
    }
    data.cautions.extend(cautions);
}

/// The pooled sd of the readings about their periods' means, on the model's scale.
fn sd_of(series: &SeriesData) -> Option<f64> {
    let (mut squares, mut df) = (0.0, 0.0);
    for period in &series.periods {
        if let Evidence::Sums { n, ss: Some(ss), .. } = period.evidence
            && n > 1
        {
            squares += ss;
            df += (n - 1) as f64;
        }
    }
    (df > 0.0).then(|| (squares / df).sqrt())
}

/// The mean of a period, to set a step against on the log scale.
fn typical(series: &SeriesData) -> Option<f64> {
    series.periods.iter().rev().find_map(|period| period.facts.mean).filter(|mean| *mean > 0.0)
}

/// The evidence of a period with ranges, and the same with its exclusions restored.
fn widened(period: &PeriodData, step: f64, scale: Scale) -> Option<(Evidence, Option<Evidence>)> {
    let averaged = period.readings.iter().any(|row| row.replicate.is_some());
    if averaged || period.readings.is_empty() || period.facts.from_summary {
        return None;
    }
    let of = |taken: &dyn Fn(&ReadingRow) -> bool| {
        let singles: Vec<Single> = period
            .readings
            .iter()
            .filter(|row| taken(row))
            .filter_map(|row| single(row, step, scale))
            .collect();
        Evidence::of_singles(singles)
    };
    let used = of(&|row| row.fate == Fate::Used);
    let restored =
        period.restored.as_ref().map(|_| of(&|row| matches!(row.fate, Fate::Used | Fate::Excluded(_))));
    Some((used, restored))
}

fn single(row: &ReadingRow, step: f64, scale: Scale) -> Option<Single> {
    let value = row.value?;
    let half = 0.5 * step;
    let on_scale = |value: f64| if scale == Scale::Log { fm::ln(value) } else { value };
    let seen = match row.mark {
        Mark::Below => Seen::Below(on_scale(value)),
        Mark::Above => Seen::Above(on_scale(value)),
        // No logarithm reaches down to 0: such a reading is known from above only.
        Mark::None if scale == Scale::Log && value <= half => Seen::Below(on_scale(value + half)),
        Mark::None => Seen::Rounded {
            lower: on_scale(value - half),
            at: on_scale(value),
            upper: on_scale(value + half),
        },
    };
    let own = row.uncertainty.unwrap_or(0.0);
    Some(Single { seen, uncertainty: if scale == Scale::Log { own / value } else { own } })
}
