//! What differs for one series, or under an alternative, and how it is put over the general tables:
//! a table with its own `from` replaces the general one, any other changes only its keys.

use crate::diagnostics::{Fault, Faults};
use crate::plan::about::{bias, scale_of};
use crate::plan::compared::own_bounds;
use crate::plan::make::{Ground, named_tables, unknown_name};
use crate::plan::{Alternative, Bias, Limit, Plan, SeriesOverride};
use crate::spec::keys::Key;
use crate::spec::language;
use crate::spec::table::{Entry, Kind, Span, Table, Value};
use std::collections::BTreeMap;

/// The standing alternatives of the sensitivity section; a spec's own must have other names.
pub const STANDING_ALTERNATIVES: &[&str] = &[
    "flat prior",
    "prior sd halved",
    "prior sd doubled",
    "prior mean one sd lower",
    "prior mean one sd higher",
    "within sd x 0.8",
    "within sd x 1.25",
    "within sd from readings",
    "exclusions restored",
    "half the reporting limit",
];

/// `own` put over `general`.
pub fn put_over(general: &Table, own: &Table) -> Table {
    if own.get("from").is_some() {
        return own.clone();
    }
    let mut table =
        Table { name: own.name.clone(), span: own.span.clone(), entries: general.entries.clone() };
    for entry in &own.entries {
        match table.entries.iter_mut().find(|known| known.key == entry.key) {
            Some(known) => *known = entry.clone(),
            None => table.entries.push(entry.clone()),
        }
    }
    table
}

/// A prior's table without `otherwise`, and that.
pub fn without_otherwise(table: &Table, ground: &mut Ground) -> (Table, Option<Table>) {
    const KEYS: &[Key] = &[language::OTHERWISE];
    let otherwise = ground.reader(table, KEYS).table("otherwise").cloned();
    let mut prior = table.clone();
    prior.entries.retain(|entry| entry.key != "otherwise");
    (prior, otherwise)
}

pub fn alternatives(tables: Vec<&Table>, ground: &mut Ground) -> Vec<Alternative> {
    let mut alternatives: Vec<Alternative> = Vec::new();
    for table in tables {
        let mut reader = ground.reader(table, language::ALTERNATIVE);
        let id = reader.text("id");
        let (prior, within) = (reader.table("prior").cloned(), reader.table("within").cloned());
        let scale = scale_of(reader.choice("scale"));
        if !["prior", "within", "scale"].iter().any(|key| reader.has(key)) {
            let fault = Fault::wrong("missing-key", format!("{} replaces nothing", table.name))
                .at(table.span.place())
                .expected("`prior`, `within` or `scale`");
            reader.faults.push(fault);
        }
        if let Some(id) = &id {
            let standing = STANDING_ALTERNATIVES.contains(&id.as_str());
            if standing || alternatives.iter().any(|other| &other.id == id) {
                let whose = if standing { "is always computed" } else { "stands here for the second time" };
                let fault = Fault::wrong("duplicate-name", format!("an alternative \"{id}\" {whose}"))
                    .expected("an id of its own");
                reader.fault_at("id", fault);
            }
        }
        reader.finish();
        if let Some(id) = id {
            alternatives.push(Alternative { id, prior, within, scale, span: table.span.clone() });
        }
    }
    alternatives
}

/// `[series.*]`, by name.
pub fn all(
    root: &Table,
    limits: &[Limit],
    general_bias: Option<&Bias>,
    ground: &mut Ground,
) -> BTreeMap<String, SeriesOverride> {
    let mut all = BTreeMap::new();
    for (name, table) in named_tables(root, "series", ground) {
        let series = one(table, limits, general_bias, ground);
        if all.insert(name.trim().to_string(), series).is_some() {
            let fault =
                Fault::wrong("duplicate-name", format!("the series \"{}\" stands twice", name.trim()));
            ground.faults.push(fault.at(table.span.place()).expected("one table for one series"));
        }
    }
    all
}

fn one(table: &Table, limits: &[Limit], general_bias: Option<&Bias>, ground: &mut Ground) -> SeriesOverride {
    let mut reader = ground.reader(table, language::SERIES);
    let (label, planned) = (reader.text("label"), reader.count("planned"));
    let within = reader.table("within").cloned();
    reader.table("prior");
    reader.table("bias");
    reader.finish();
    let (prior, otherwise) = match table.table("prior") {
        Some(table) => {
            let (prior, otherwise) = without_otherwise(table, ground);
            (Some(prior), otherwise)
        }
        None => (None, None),
    };
    let bias = table.table("bias").and_then(|table| bias(table, general_bias, ground));
    let mut bounds = BTreeMap::new();
    for (name, own) in named_tables(table, "limit", ground) {
        let Some(general) = limits.iter().find(|limit| limit.name == name) else {
            let known: Vec<&str> = limits.iter().map(|limit| limit.name.as_str()).collect();
            ground.faults.push(unknown_name("limit", name, &known, &own.span));
            continue;
        };
        if let Some(own) = own_bounds(own, general.bounds, ground) {
            bounds.insert(name.to_string(), own);
        }
    }
    SeriesOverride { label, planned, limits: bounds, prior, otherwise, within, bias }
}

/// Whether a column of `[overrides]` may set this.
pub fn is_target(target: &str) -> bool {
    match target.split('.').collect::<Vec<_>>().as_slice() {
        ["label" | "planned"] => true,
        ["limit", name, "value" | "lower" | "upper"] => !name.is_empty(),
        ["prior" | "within", key] => !key.is_empty(),
        ["bias", "sd" | "basis"] => true,
        _ => false,
    }
}

/// One cell of a row of the overrides' file.
#[derive(Debug, Clone, PartialEq)]
pub struct OverrideCell {
    /// What it sets, as `[overrides] columns` says: `label`, `limit.tolerance.upper`.
    pub sets: String,
    /// The cell's text; blank means the general value.
    pub text: String,
    /// Where it stands in its file.
    pub span: Span,
}

impl Plan {
    /// The `[prior]` of one series.
    pub fn prior_table(&self, series: &str) -> Table {
        self.over(series, &self.prior, |own| own.prior.as_ref())
    }

    /// The `[within]` of one series.
    pub fn within_table(&self, series: &str) -> Table {
        self.over(series, &self.within, |own| own.within.as_ref())
    }

    fn over(&self, series: &str, general: &Table, own: impl Fn(&SeriesOverride) -> Option<&Table>) -> Table {
        match self.series.get(series).and_then(own) {
            Some(own) => put_over(general, own),
            None => general.clone(),
        }
    }

    /// The prior of one series where its history is too short.
    pub fn otherwise_table(&self, series: &str) -> Option<&Table> {
        let Some(own) = self.series.get(series) else { return self.otherwise.as_ref() };
        let replaced = own.prior.as_ref().is_some_and(|prior| prior.get("from").is_some());
        own.otherwise.as_ref().or(self.otherwise.as_ref().filter(|_| !replaced))
    }

    /// The bias of one series.
    pub fn bias(&self, series: &str) -> Option<&Bias> {
        let own = self.series.get(series).and_then(|own| own.bias.as_ref());
        own.or(self.quantity.bias.as_ref())
    }

    /// The plan with an alternative's prior, within sd or scale in the place of the standing ones, for
    /// every series.
    pub fn under(&self, alternative: &Alternative) -> Plan {
        let mut plan = self.clone();
        if let Some(scale) = alternative.scale {
            plan.quantity.scale = scale;
        }
        if let Some(prior) = &alternative.prior {
            let mut prior = prior.clone();
            let position = prior.entries.iter().position(|entry| entry.key == "otherwise");
            let otherwise =
                position.map(|at| prior.entries.remove(at)).and_then(|entry| match entry.value.kind {
                    Kind::Table(table) => Some(table),
                    _ => None,
                });
            let replaces = prior.get("from").is_some();
            plan.prior = put_over(&plan.prior, &prior);
            plan.otherwise = otherwise.or(plan.otherwise.filter(|_| !replaces));
            for own in plan.series.values_mut() {
                own.otherwise = own.otherwise.take().filter(|_| !replaces);
                own.prior = own.prior.take().filter(|_| !replaces).map(|own| put_over(&own, &prior));
            }
        }
        if let Some(within) = &alternative.within {
            let replaces = within.get("from").is_some();
            plan.within = put_over(&plan.within, within);
            for own in plan.series.values_mut() {
                own.within = own.within.take().filter(|_| !replaces).map(|own| put_over(&own, within));
            }
        }
        plan
    }

    /// Takes one row of the overrides' file. What `[series]` says of the same series wins.
    /// `decimal_comma` cells must have been written with a point before.
    pub fn override_row(&mut self, series: &str, cells: &[OverrideCell], faults: &mut Faults) {
        let filled: Vec<&OverrideCell> = cells.iter().filter(|cell| !cell.text.trim().is_empty()).collect();
        let Some(first) = filled.first() else {
            self.series.entry(series.to_string()).or_default();
            return;
        };
        let mut table =
            Table { name: format!("the row of \"{series}\""), span: first.span.clone(), entries: vec![] };
        for cell in &filled {
            let path: Vec<&str> = cell.sets.split('.').collect();
            set(&mut table, &path, cell);
        }
        let mut ground = Ground {
            folder: Default::default(),
            spec_text: first.span.source.clone(),
            base_folder: String::new(),
            spec_stem: String::new(),
            faults: Faults::default(),
        };
        let row = one(&table, &self.limits, self.quantity.bias.as_ref(), &mut ground);
        faults.extend(ground.faults);
        let own = self.series.entry(series.to_string()).or_default();
        let over = |row: Option<Table>, own: Option<Table>| match (row, own) {
            (Some(row), Some(own)) => Some(put_over(&row, &own)),
            (row, own) => own.or(row),
        };
        own.label = own.label.take().or(row.label);
        own.planned = own.planned.or(row.planned);
        own.prior = over(row.prior, own.prior.take());
        own.within = over(row.within, own.within.take());
        own.bias = own.bias.take().or(row.bias);
        for (name, bounds) in row.limits {
            own.limits.entry(name).or_insert(bounds);
        }
    }
}

/// Puts a cell into a table, as `a.b.c = cell` would.
fn set(table: &mut Table, path: &[&str], cell: &OverrideCell) {
    let [key, rest @ ..] = path else { return };
    let entry = |kind: Kind| Entry {
        key: key.to_string(),
        key_span: cell.span.clone(),
        value: Value { kind, span: cell.span.clone() },
    };
    if rest.is_empty() {
        let text = cell.text.trim();
        let number = if matches!(*key, "label" | "basis" | "from") { None } else { text.parse::<f64>().ok() };
        let kind = match number {
            Some(value) => Kind::Number { value, whole: text.parse().ok(), written: text.to_string() },
            None => Kind::Text(text.to_string()),
        };
        table.entries.push(entry(kind));
        return;
    }
    let name = format!("{} of {}", key, table.name);
    let at = match table.entries.iter().position(|known| known.key == *key) {
        Some(at) => at,
        None => {
            table.entries.push(entry(Kind::Table(Table { name, span: cell.span.clone(), entries: vec![] })));
            table.entries.len() - 1
        }
    };
    if let Kind::Table(inner) = &mut table.entries[at].value.kind {
        set(inner, rest, cell);
    }
}
