//! What a source of a prior may look at: the plan, and the data that came before the period under
//! review or beside the series. The period under review of the series itself is never handed out,
//! so no source can let it into a prior.

use crate::data::evidence::Evidence;
use crate::data::{Data, PeriodData, SeriesData};
use crate::plan::Plan;
use crate::prior::handover::sorted_values;
use crate::quantity::{Period, Scale};
use crate::source::sha256_hex;

/// The data as one source of a prior, for one series, sees them.
#[derive(Debug, Clone, Copy)]
pub struct Ground<'a> {
    pub plan: &'a Plan,
    pub data: &'a Data,
    pub series: &'a str,
    pub scale: Scale,
    /// With the exclusions put back, for the sensitivity section.
    pub restored: bool,
}

impl<'a> Ground<'a> {
    /// The periods of this series before the one under review that `[history]` lets count, in order.
    pub fn earlier(&self) -> Vec<(Period, Evidence)> {
        self.earlier_data()
            .into_iter()
            .map(|data| (data.period.clone(), self.evidence(data)))
            .filter(|(_, evidence)| !evidence.is_nothing())
            .collect()
    }

    /// The same with all that was read of them.
    pub fn earlier_data(&self) -> Vec<&'a PeriodData> {
        let Some(series) = self.own() else { return Vec::new() };
        series.periods.iter().filter(|data| self.counts(&data.period)).collect()
    }

    /// The same with the evidence of each and the hash of its readings, where single ones are held.
    pub fn earlier_with_hashes(&self) -> Vec<(&'a PeriodData, Evidence, Option<String>)> {
        let with = |data: &'a PeriodData| (data, self.evidence(data), hash(data));
        self.earlier_data().into_iter().map(with).filter(|(_, evidence, _)| !evidence.is_nothing()).collect()
    }

    /// How many readings of the period under review there are, and their hash: enough to tell whether
    /// an earlier review has used them, and no more.
    pub fn hash_of_readings(&self) -> Option<(u64, String)> {
        let data = self.own()?.period(&self.plan.review.period)?;
        Some((data.facts.n, hash(data)?))
    }

    /// The other series of the period under review, by name.
    pub fn beside(&self) -> Vec<(Period, Evidence)> {
        let review = &self.plan.review.period;
        self.data
            .series
            .iter()
            .filter(|series| series.name != self.series)
            .filter_map(|series| {
                let evidence = self.evidence(series.period(review)?);
                (!evidence.is_nothing()).then(|| (Period::new(&series.name), evidence))
            })
            .collect()
    }

    /// How many periods lie between two, the later one included: the difference of whole-number
    /// periods, 1 where they are not whole numbers.
    pub fn gap(&self, earlier: &Period, later: &Period) -> f64 {
        match (earlier.number(), later.number()) {
            (Some(from), Some(to)) if to > from => (to - from) as f64,
            _ => 1.0,
        }
    }

    fn own(&self) -> Option<&'a SeriesData> {
        self.data.series.iter().find(|series| series.name == self.series)
    }

    fn evidence(&self, data: &PeriodData) -> Evidence {
        match &data.restored {
            Some(restored) if self.restored => restored.clone(),
            _ => data.evidence.clone(),
        }
    }

    fn counts(&self, period: &Period) -> bool {
        let history = &self.plan.history;
        self.before(period, &self.plan.review.period)
            && history.first.as_ref().is_none_or(|first| !self.before(period, first))
            && history.last.as_ref().is_none_or(|last| !self.before(last, period))
            && !history.leave_out.iter().any(|(left_out, _)| left_out == period)
    }

    /// Whole numbers are ordered by value, else the data's order of periods decides; a period that
    /// the data do not hold comes after all that they hold.
    fn before(&self, period: &Period, other: &Period) -> bool {
        if let (Some(a), Some(b)) = (period.number(), other.number()) {
            return a < b;
        }
        let place = |wanted: &Period| {
            let listed = self.plan.history.order.as_ref().unwrap_or(&self.data.periods);
            listed.iter().position(|known| known == wanted).unwrap_or(listed.len())
        };
        place(period) < place(other)
    }
}

/// The hash by which a ledger knows a period's readings.
fn hash(data: &PeriodData) -> Option<String> {
    sorted_values(&data.readings).map(|text| sha256_hex(text.as_bytes()))
}
