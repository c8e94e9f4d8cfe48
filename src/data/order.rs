//! The order of the periods in time.

use super::dates::Day;
use super::gather::Gather;
use crate::diagnostics::Fault;
use crate::plan::Plan;
use crate::quantity::Period;
use std::collections::BTreeMap;

/// All periods in their order: whole numbers by value, else as `order` in `[history]` says, else by
/// their dates.
pub fn periods(gather: &Gather, plan: &Plan) -> Result<Vec<Period>, Fault> {
    let mut spans: BTreeMap<&Period, Option<(Day, Day)>> = BTreeMap::new();
    for cell in &gather.cells {
        let own = cell.first_day.zip(cell.last_day);
        let span = spans.entry(&cell.period).or_insert(None);
        *span = match (*span, own) {
            (Some((a, b)), Some((c, d))) => Some((a.min(c), b.max(d))),
            (known, own) => known.or(own),
        };
    }
    let numbered: Option<BTreeMap<i64, &Period>> =
        spans.keys().map(|period| Some((period.number()?, *period))).collect();
    if let Some(numbered) = numbered
        && numbered.len() == spans.len()
    {
        return Ok(numbered.into_values().cloned().collect());
    }
    if let Some(order) = &plan.history.order {
        let place = |period: &Period| order.iter().position(|known| known == period);
        let unplaced: Vec<&str> =
            spans.keys().filter(|period| place(period).is_none()).map(|period| period.as_str()).collect();
        if !unplaced.is_empty() {
            let message = format!("`order` in [history] does not name {}", unplaced.join(", "));
            return Err(Fault::wrong("unordered-period", message)
                .expected("every period of the data")
                .repair("add the periods at their places"));
        }
        let mut periods: Vec<Period> = spans.keys().map(|period| (*period).clone()).collect();
        periods.sort_by_key(|period| place(period));
        return Ok(periods);
    }
    // Years named after two calendar years need no dates: "2023/24" sorts by its first.
    let mut dated: Vec<((Day, Day), &Period)> =
        spans.iter().filter_map(|(period, span)| span.map(|span| (span, *period))).collect();
    dated.sort();
    let apart = dated.windows(2).all(|pair| pair[0].0.1 < pair[1].0.0);
    if dated.len() == spans.len() && apart {
        return Ok(dated.into_iter().map(|(_, period)| period.clone()).collect());
    }
    let years: Option<BTreeMap<i64, &Period>> =
        spans.keys().map(|period| Some((first_of_two_years(period)?, *period))).collect();
    if let Some(years) = years
        && years.len() == spans.len()
    {
        return Ok(years.into_values().cloned().collect());
    }
    let names: Vec<&str> = spans.keys().map(|period| period.as_str()).take(12).collect();
    let why = if dated.len() == spans.len() { "their dates overlap" } else { "not all have dates" };
    Err(Fault::wrong(
        "unordered-periods",
        format!("the periods {} are no whole numbers, and {why}", names.join(", ")),
    )
    .expected("an order in time")
    .repair(format!("say it in [history]: order = [\"{}\", ...]", names.first().copied().unwrap_or(""))))
}

/// 2023 of "2023/24" and of "2023/2024".
fn first_of_two_years(period: &Period) -> Option<i64> {
    let (first, second) = period.as_str().split_once('/')?;
    let is_year = first.len() == 4 && first.bytes().all(|b| b.is_ascii_digit());
    let first_year: i64 = first.parse().ok().filter(|_| is_year)?;
    let second_year: i64 = second.parse().ok()?;
    let next = first_year + 1;
    (second_year == next || second.len() == 2 && second_year == next % 100).then_some(first_year)
}
