//! Readings in time: what every check of the order in time works on.

/// A value and its time, in whatever unit the caller counts (days for dated readings, the number
/// of the period for period means).
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Timed {
    /// When.
    pub at: f64,
    /// What was read.
    pub value: f64,
}

/// The readings in order of time, those of equal time averaged first.
///
/// Their order on one day is seldom known, and replicates of one day are not steps in time.
/// The result does not depend on the order of the input.
pub fn one_for_each_time(readings: &[Timed]) -> Vec<Timed> {
    let mut sorted = readings.to_vec();
    sorted.sort_by(|a, b| a.at.total_cmp(&b.at).then(a.value.total_cmp(&b.value)));
    let mut averaged: Vec<Timed> = Vec::with_capacity(sorted.len());
    for group in sorted.chunk_by(|a, b| a.at == b.at) {
        let sum: f64 = group.iter().map(|reading| reading.value).sum();
        averaged.push(Timed { at: group[0].at, value: sum / group.len() as f64 });
    }
    averaged
}

/// The values alone, in order of time.
pub fn values(series: &[Timed]) -> Vec<f64> {
    series.iter().map(|reading| reading.value).collect()
}
