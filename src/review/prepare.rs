//! A spec read to its end, before any data: the plan, and the tables that later stages own.

use crate::data::{self, Data};
use crate::diagnostics::{Fault, Faults, Outcome};
use crate::plan::{self, Plan, ReadBytes};
use crate::prior::within::{self, WithinRead};
use crate::prior::{self, Source};
use crate::quantity::natural_order;
use crate::questions::{self, Question};
use crate::sensitivity::OwnAlternative;
use crate::source;
use crate::spec::table::Table;
use std::collections::{BTreeMap, BTreeSet};
use std::path::Path;

/// A spec read to its end: the plan, and every table that a later stage owns.
#[derive(Debug)]
pub struct Prepared {
    pub plan: Plan,
    /// With its index in the plan's questions.
    pub questions: Vec<(usize, Box<dyn Question>)>,
    pub(super) general: Settings,
    /// For series whose spec replaces the prior or the within sd.
    pub(super) own: BTreeMap<String, Settings>,
    pub(super) otherwise: Option<Box<dyn Source>>,
    pub(super) alternatives: Vec<OwnAlternative>,
    /// Alternatives on another scale, by id: the same spec read as if it stated that scale.
    pub(super) on_another_scale: Vec<(String, Prepared)>,
}

#[derive(Debug)]
pub(super) struct Settings {
    pub source: Box<dyn Source>,
    pub within: WithinRead,
}

/// Spec and plan, with every table read; computes nothing.
pub fn prepare(spec: &Path, shown: &str) -> Outcome<Prepared> {
    prepare_by(spec, shown, &|path| source::whole(path, &path.to_string_lossy(), "the spec"), &|_| ())
}

/// [`prepare`], where `read` gives the bytes of the spec and of its base, and `lead` leads the files that the
/// plan names to their places: an audit takes all of them from the review's folder.
pub fn prepare_by(
    spec: &Path,
    shown: &str,
    read: &ReadBytes<'_>,
    lead: &dyn Fn(&mut Plan),
) -> Outcome<Prepared> {
    let mut plan = plan::load(spec, shown, read)?;
    lead(&mut plan);
    // The overrides belong to the series' settings, so they are read before these.
    data::read_overrides(&mut plan)?;
    data::read_linked(&mut plan)?;
    let mut faults = Faults::default();
    let spec_files = plan.spec_files.clone();
    let on_another_scale: Vec<(String, Option<Prepared>)> = plan
        .alternatives
        .iter()
        .filter(|alternative| alternative.scale.is_some_and(|scale| scale != plan.quantity.scale))
        .map(|alternative| (alternative.id.clone(), other_scale(&plan, alternative, &mut faults)))
        .collect();
    let prepared = read_tables(plan, &mut faults).map(|prepared| Prepared {
        on_another_scale: on_another_scale
            .into_iter()
            .filter_map(|(id, prepared)| Some((id, prepared?)))
            .collect(),
        ..prepared
    });
    match prepared {
        Some(prepared) if faults.is_empty() => Ok(prepared),
        _ => {
            plan::in_order_of_text(&mut faults, &spec_files);
            Err(faults)
        }
    }
}

/// The questions, priors and within sds of a plan; alternatives on another scale are left out.
fn read_tables(plan: Plan, faults: &mut Faults) -> Option<Prepared> {
    let questions = questions::read_all(&plan, faults);
    let scale = plan.quantity.scale;
    let read_settings = |prior: &Table, spread: &Table, faults: &mut Faults| {
        let source = prior::read(prior, scale, &plan, faults);
        let within = within::read(spread, scale, &plan, faults);
        Some(Settings { source: source?, within: within? })
    };
    let general = read_settings(&plan.prior, &plan.within, faults);
    let mut own = BTreeMap::new();
    for (name, overrides) in &plan.series {
        if overrides.prior.is_some() || overrides.within.is_some() {
            let settings = read_settings(&plan.prior_table(name), &plan.within_table(name), faults);
            own.extend(settings.map(|settings| (name.clone(), settings)));
        }
    }
    let otherwise = plan.otherwise.as_ref().and_then(|table| prior::read(table, scale, &plan, faults));
    let mut alternatives = Vec::new();
    for alternative in &plan.alternatives {
        if alternative.scale.is_some_and(|own| own != scale) {
            continue;
        }
        let source = alternative.prior.as_ref().and_then(|table| prior::read(table, scale, &plan, faults));
        let within = alternative.within.as_ref().and_then(|table| within::read(table, scale, &plan, faults));
        alternatives.push(OwnAlternative { id: alternative.id.clone(), source, within });
    }
    Some(Prepared {
        questions,
        general: general?,
        own,
        otherwise,
        alternatives,
        on_another_scale: Vec::new(),
        plan,
    })
}

/// The whole spec as if it stated the alternative's scale, prior and within sd.
fn other_scale(plan: &Plan, alternative: &plan::Alternative, faults: &mut Faults) -> Option<Prepared> {
    let mut other = plan.clone();
    other.quantity.scale = alternative.scale?;
    other.alternatives.clear();
    if let Some(prior) = &alternative.prior {
        other.prior = prior.clone();
        other.otherwise = None;
        other.series.values_mut().for_each(|series| series.prior = None);
    }
    if let Some(within) = &alternative.within {
        other.within = within.clone();
        other.series.values_mut().for_each(|series| series.within = None);
    }
    let mut found = Faults::default();
    let prepared = read_tables(other, &mut found);
    let Some(first) = found.0.into_iter().next() else { return prepared };
    let mut fault = Fault::wrong(
        "unfit-on-that-scale",
        format!("the alternative \"{}\" cannot stand on its scale: {}", alternative.id, first.message),
    )
    .at(first.place.unwrap_or_else(|| alternative.span.place()))
    .repair("give the alternative a prior and a within of its own, stated on that scale");
    fault.expected = first.expected;
    faults.push(fault);
    None
}

impl Prepared {
    pub(super) fn settings(&self, series: &str) -> &Settings {
        self.own.get(series).unwrap_or(&self.general)
    }

    /// The names of the reviewed series, and of the others with their last period.
    pub fn reviewed(&self, data: &Data) -> (Vec<String>, Vec<(String, String)>) {
        let period = &self.plan.review.period;
        let named: BTreeSet<&str> = self.plan.series.keys().map(String::as_str).collect();
        let mut reviewed: Vec<String> = named.iter().map(|name| name.to_string()).collect();
        let mut others = Vec::new();
        for series in &data.series {
            if named.contains(series.name.as_str()) {
                continue;
            }
            if series.period(period).is_some() {
                reviewed.push(series.name.clone());
            } else if let Some(last) = series.periods.last() {
                others.push((series.name.clone(), last.period.to_string()));
            }
        }
        reviewed.sort_by(|a, b| natural_order(a, b));
        (reviewed, others)
    }
}
