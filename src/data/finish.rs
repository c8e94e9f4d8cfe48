//! From what was gathered to evidence on the model's scale and plain facts in the quantity's unit.

use super::dates::Day;
use super::evidence::{Evidence, Seen, Single};
use super::fault_list::FaultList;
use super::gather::{Cell, Gather, Group, Observed, Sums, Tally, too_many_singles};
use super::{Facts, Mark, PeriodData};
use crate::math::fm;
use crate::math::sums::Moments;
use crate::quantity::Scale;

/// A reading, or the average of replicates, in the unit and on the model's scale.
#[derive(Debug, Clone, Copy)]
struct Datum {
    unit: f64,
    model: f64,
    mark: Mark,
    /// On the model's scale.
    uncertainty: f64,
}

/// Natural logarithms on the log scale. An uncertainty u of x is u/x there, to first order (JCGM
/// 100:2008, 5.1.2).
fn datum(observed: &Observed, scale: Scale) -> Datum {
    let Observed { value, mark, uncertainty } = *observed;
    match scale {
        Scale::Linear => Datum { unit: value, model: value, mark, uncertainty },
        Scale::Log => Datum { unit: value, model: fm::ln(value), mark, uncertainty: uncertainty / value },
    }
}

/// The average of a group's members, on the model's scale and in the unit apart: on the log scale the
/// model holds for logarithms, so these are averaged. Uncertainties of the members are independent.
fn average(group: &Group, with_excluded: bool, scale: Scale) -> Option<Datum> {
    let members: Vec<Datum> = group
        .members
        .iter()
        .filter(|member| with_excluded || !member.excluded)
        .map(|member| datum(&member.observed, scale))
        .collect();
    match members.as_slice() {
        [] => None,
        [only] => Some(*only),
        several => {
            let (mut unit, mut model, mut squares) = (Moments::new(), Moments::new(), Moments::new());
            for one in several {
                unit.add(one.unit);
                model.add(one.model);
                squares.add(one.uncertainty * one.uncertainty);
            }
            let uncertainty = (squares.mean() / several.len() as f64).sqrt();
            Some(Datum { unit: unit.mean(), model: model.mean(), mark: Mark::None, uncertainty })
        }
    }
}

/// Everything that one cell's likelihood sees.
struct View<'c> {
    /// Values of plain readings, where they are all kept.
    values: Option<&'c [f64]>,
    sums: Sums,
    data: Vec<Datum>,
}

fn view(cell: &Cell, with_excluded: bool, scale: Scale) -> View<'_> {
    let mut data: Vec<Datum> = cell.special.iter().map(|observed| datum(observed, scale)).collect();
    data.extend(cell.groups.values().filter_map(|group| average(group, with_excluded, scale)));
    if with_excluded {
        data.extend(cell.excluded.iter().map(|observed| datum(observed, scale)));
    }
    View { values: cell.plain.values(), sums: cell.plain.total(scale), data }
}

fn is_special(datum: &Datum) -> bool {
    datum.mark != Mark::None || datum.uncertainty > 0.0
}

fn evidence(view: &View<'_>, scale: Scale) -> Evidence {
    if let Some(values) = view.values
        && view.data.iter().any(is_special)
    {
        let plain = |value: &f64| Observed { value: *value, mark: Mark::None, uncertainty: 0.0 };
        let mut singles: Vec<Single> =
            values.iter().map(|value| single(&datum(&plain(value), scale))).collect();
        singles.extend(view.data.iter().map(single));
        return Evidence::of_singles(singles);
    }
    let mut moments = match scale {
        Scale::Linear => view.sums.unit.clone(),
        Scale::Log => view.sums.logs.clone().unwrap_or_default(),
    };
    for datum in &view.data {
        moments.add(datum.model);
    }
    if moments.n() == 0 {
        return Evidence::Nothing;
    }
    Evidence::Sums {
        n: moments.n(),
        mean: moments.mean(),
        ss: Some(moments.centred_ss()),
        rest: moments.mean_rest(),
    }
}

fn single(datum: &Datum) -> Single {
    let seen = match datum.mark {
        Mark::None => Seen::At(datum.model),
        Mark::Below => Seen::Below(datum.model),
        Mark::Above => Seen::Above(datum.model),
    };
    Single { seen, uncertainty: datum.uncertainty }
}

/// One period of one series as later stages see it.
pub fn period_data(cell: &mut Cell, scale: Scale) -> PeriodData {
    let rows = std::mem::take(&mut cell.rows);
    if let Some(summary) = &cell.summary {
        let facts = Facts {
            n: summary.n.unwrap_or(0),
            mean: summary.mean,
            sd: summary.sd,
            from_summary: true,
            ..Facts::default()
        };
        return PeriodData {
            period: cell.period.clone(),
            evidence: summary.evidence.clone(),
            restored: None,
            facts,
            readings: rows,
        };
    }
    let used = view(cell, false, scale);
    let restored = (cell.excluded_rows > 0).then(|| evidence(&view(cell, true, scale), scale));
    let facts = facts(cell, &used);
    let evidence = evidence(&used, scale);
    // Their work is done: a large review holds many cells.
    cell.plain = Tally::default();
    cell.special = Vec::new();
    PeriodData { period: cell.period.clone(), evidence, restored, facts, readings: rows }
}

fn facts(cell: &Cell, used: &View<'_>) -> Facts {
    let mut moments = used.sums.unit.clone();
    let (mut smallest, mut largest) = (cell.smallest, cell.largest);
    let (mut below, mut above) = (0, 0);
    for datum in &used.data {
        match datum.mark {
            Mark::None => {
                moments.add(datum.unit);
                smallest = smallest.min(datum.unit);
                largest = largest.max(datum.unit);
            }
            Mark::Below => below += 1,
            Mark::Above => above += 1,
        }
    }
    let mut by_month = cell.by_month;
    for group in cell.groups.values() {
        let days = group.members.iter().filter(|member| !member.excluded).filter_map(|member| member.day);
        if let Some(day) = days.min() {
            by_month[day.month() as usize - 1] += 1;
        }
    }
    let marked = below + above > 0;
    let n = moments.n();
    Facts {
        n: n + below + above,
        mean: (!marked && n > 0).then(|| moments.mean()),
        sd: (!marked && n > 1).then(|| moments.sd()),
        smallest: (n > 0).then_some(smallest),
        largest: (n > 0).then_some(largest),
        marked_below: below,
        marked_above: above,
        missing: cell.missing_rows,
        excluded: cell.excluded_rows,
        later: cell.later_rows,
        first_date: cell.first_day.and_then(Day::date),
        last_date: cell.last_day.and_then(Day::date),
        by_month,
        decimals: cell.decimals,
        from_summary: false,
    }
}

/// Marks and uncertainties of single readings need the other readings of their period singly.
pub fn refuse_lost_singles(gather: &Gather, faults: &mut FaultList) {
    let special = |observed: &Observed| is_special(&datum(observed, Scale::Linear));
    for cell in &gather.cells {
        let of_groups = cell.groups.values().flat_map(|group| &group.members).map(|member| &member.observed);
        let any = cell.special.iter().chain(of_groups).chain(&cell.excluded).any(special);
        if any && cell.plain.values().is_none() {
            faults.push(too_many_singles());
            return;
        }
    }
}
