//! What a plan means: bases, overrides, alternatives, defaults, paths.

use super::*;
use crate::diagnostics::render::{Look, render};
use crate::diagnostics::{Fault, Faults, Outcome};
use crate::spec::table::{Kind, SpecText};
use std::path::Path;
use std::sync::Arc;

const HEAD: &str =
    "[review]\ntitle = \"t\"\nperiod = 2025\ndate = 2026-01-12\n[quantity]\nname = \"q\"\nunit = \"m\"\n";
const REST: &str = "[[readings]]\nvalues = [1.0]\n[within]\nfrom = \"stated\"\nsd = 1.0\nbasis = \"b\"\n[prior]\nfrom = \"history\"\nbetween = \"uniform\"\notherwise = { from = \"peers\" }\n";

/// The plan of files in memory; the spec is `specs/s.toml`.
fn plan_of(files: &[(&str, String)]) -> Outcome<Plan> {
    load(Path::new("specs/s.toml"), "s.toml", &|path| {
        let found = files.iter().find(|(name, _)| path == Path::new(name));
        found
            .map(|(_, text)| text.clone().into_bytes())
            .ok_or_else(|| Fault::unreadable("unreadable-file", format!("no file {}", path.display())))
    })
}

fn one(more: &str) -> Plan {
    match plan_of(&[("specs/s.toml", format!("{HEAD}{REST}{more}"))]) {
        Ok(plan) => plan,
        Err(faults) => panic!("{}", render(&faults, Look::default())),
    }
}

fn keys(table: &Table) -> Vec<(&str, String)> {
    let text = |value: &crate::spec::table::Value| value.as_plain_text().unwrap_or_default();
    table.entries.iter().map(|entry| (entry.key.as_str(), text(&entry.value))).collect()
}

#[test]
fn what_is_left_out_has_its_default() {
    let plan = one("[limit.a]\nvalue = 5.00\nbasis = \"b\"\napplies_to = \"level\"\n");
    assert_eq!(plan.review.id, "s");
    assert_eq!(plan.review.status, Status::Draft);
    assert_eq!(plan.quantity.scale, Scale::Linear);
    assert_eq!(plan.limits[0].decimals, 2);
    let source = &plan.sources[0];
    assert_eq!(source.period, PeriodOf::Always(Period::new("2025")));
    assert_eq!(source.series, SeriesOf::Always("q".to_string()));
    assert!(plan.report.markdown && plan.report.html && plan.report.inputs_copied);
    assert!(plan.prior.get("otherwise").is_none() && plan.otherwise.is_some());
}

#[test]
fn a_series_with_its_own_source_replaces_the_general_table_else_only_keys_change() {
    let plan = one(concat!(
        "[series.A]\nprior = { between = \"half-normal\", between_scale = 2.0 }\n",
        "[series.B]\nprior = { from = \"flat\" }\nwithin = { sd = 3.0 }\n",
    ));
    let half_normal = [("from", "history"), ("between", "half-normal"), ("between_scale", "2.0")];
    assert_eq!(keys(&plan.prior_table("A")), half_normal.map(|(key, text)| (key, text.to_string())));
    assert_eq!(keys(&plan.prior_table("B")), [("from", "flat".to_string())]);
    assert_eq!(keys(&plan.within_table("B"))[1], ("sd", "3.0".to_string()));
    assert_eq!(plan.prior_table("C"), plan.prior);
    assert!(plan.otherwise_table("A").is_some() && plan.otherwise_table("C").is_some());
    assert_eq!(
        plan.otherwise_table("B"),
        None,
        "a prior that replaces the general one replaces its otherwise too"
    );
}

#[test]
fn an_alternative_is_put_over_every_series() {
    let plan = one(concat!(
        "[series.A]\nprior = { between_sd = 2.0 }\n",
        "[[alternative]]\nid = \"x\"\nprior = { from = \"flat\" }\n",
        "[[alternative]]\nid = \"y\"\nprior = { pattern = \"random walk\" }\nscale = \"log\"\n",
    ));
    let replaced = plan.under(&plan.alternatives[0]);
    assert_eq!(keys(&replaced.prior_table("A")), [("from", "flat".to_string())]);
    assert_eq!(replaced.otherwise_table("A"), None);
    let changed = plan.under(&plan.alternatives[1]);
    assert_eq!(changed.quantity.scale, Scale::Log);
    let prior = changed.prior_table("A");
    let names = keys(&prior);
    for wanted in [("between_sd", "2.0"), ("pattern", "random walk"), ("from", "history")] {
        assert!(names.contains(&(wanted.0, wanted.1.to_string())), "{names:?}");
    }
}

#[test]
fn a_series_has_its_own_end_of_a_limit_and_its_own_bias() {
    let plan = one(concat!(
        "[limit.t]\nlower = -3\nupper = 3\nbasis = \"b\"\napplies_to = \"level\"\n",
        "[series.A]\nlimit.t.upper = 5\n",
    ));
    assert_eq!(plan.bounds("t", "A"), Some(Bounds::Range(-3.0, 5.0)));
    assert_eq!(plan.bounds("t", "B"), Some(Bounds::Range(-3.0, 3.0)));
}

#[test]
fn a_row_of_the_overrides_gives_way_to_the_series_table() {
    let mut plan = one(concat!(
        "[limit.t]\nlower = -3\nupper = 3\nbasis = \"b\"\napplies_to = \"level\"\n",
        "[series.A]\nlabel = \"from the spec\"\nprior = { between_sd = 2.0 }\n",
    ));
    let source = Arc::new(SpecText { file: "w.csv".into(), text: "g,x\nA,5\n".into() });
    let cell = |sets: &str, text: &str| OverrideCell {
        sets: sets.into(),
        text: text.into(),
        span: Span { source: source.clone(), bytes: 6..7 },
    };
    let mut faults = Faults::default();
    let row = [
        cell("label", "7"),
        cell("planned", "4"),
        cell("limit.t.upper", "2.5"),
        cell("limit.t.lower", " "),
        cell("prior.between_sd", "9"),
        cell("prior.pattern", "random walk"),
    ];
    plan.override_row("A", &row, &mut faults);
    plan.override_row("B", &row, &mut faults);
    assert!(faults.is_empty(), "{faults:?}");
    assert_eq!(plan.series["A"].label.as_deref(), Some("from the spec"));
    assert_eq!(plan.series["B"].label.as_deref(), Some("7"), "a label of digits is a text");
    assert_eq!(plan.series["A"].planned, Some(4));
    assert_eq!(plan.bounds("t", "A"), Some(Bounds::Range(-3.0, 2.5)));
    assert_eq!(
        plan.prior_table("A").get("between_sd").and_then(|value| value.as_plain_text()),
        Some("2.0".into())
    );
    assert_eq!(
        plan.prior_table("B").get("between_sd").and_then(|value| value.as_plain_text()),
        Some("9".into())
    );
    assert_eq!(
        plan.prior_table("A").get("pattern").map(|v| &v.kind),
        Some(&Kind::Text("random walk".into()))
    );

    plan.override_row("C", &[cell("limit.t.upper", "x"), cell("planned", "0.5")], &mut faults);
    assert_eq!(faults.0.len(), 2);
    assert!(
        faults.0.iter().all(|fault| fault.place.as_ref().is_some_and(|p| p.file == "w.csv" && p.line == 2))
    );
    plan.override_row("D", &[cell("label", "")], &mut faults);
    assert!(plan.series.contains_key("D"), "a row makes a series reviewed, even when it is blank");
}

#[test]
fn a_base_fills_tables_and_keys_and_its_paths_are_its_own() {
    let base = format!(
        "[review]\npurpose = \"p\"\ntitle = \"of the base\"\n[quantity]\nname = \"q\"\nunit = \"m\"\n[limit.a]\nlower = 1\nupper = 2\nbasis = \"base\"\napplies_to = \"level\"\n[[readings]]\nfile = \"../data/x.csv\"\nvalue = \"v\"\n{}",
        &REST[REST.find("[within]").unwrap()..]
    );
    let spec = "base = \"../shared/base.toml\"\n[review]\ntitle = \"own\"\nperiod = 2025\ndate = 2026-01-12\n[limit.a]\nvalue = 7\n[prior]\nfrom = \"flat\"\n";
    let files = [("specs/s.toml", spec.to_string()), ("specs/../shared/base.toml", base)];
    let plan = plan_of(&files).unwrap();
    assert_eq!(plan.review.title, "own");
    assert_eq!(plan.review.purpose.as_deref(), Some("p"));
    assert_eq!(plan.limits[0].bounds, Bounds::Value(7.0));
    assert_eq!(plan.limits[0].basis, "base");
    assert_eq!(keys(&plan.prior), [("from", "flat".to_string())], "a prior with its own source is not mixed");
    assert_eq!(plan.otherwise, None);
    let Whence::Files(files) = &plan.sources[0].from else { panic!("a file is meant") };
    assert_eq!(files[0].written, "../data/x.csv");
    assert_eq!(files[0].path, Path::new("specs/../data/x.csv"));
    assert_eq!(plan.spec_files.len(), 2);
}

#[test]
fn a_fault_in_the_base_is_shown_in_the_base() {
    let base = format!("{}{REST}", HEAD.replace("title", "titel"));
    let spec = "base = \"b.toml\"\n".to_string();
    let faults = plan_of(&[("specs/s.toml", spec), ("specs/b.toml", base)]).unwrap_err();
    assert_eq!(faults.0[0].place.as_ref().map(|place| place.file.as_str()), Some("b.toml"));
}
