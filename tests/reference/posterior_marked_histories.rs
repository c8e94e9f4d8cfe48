//! Marked readings with a history, the within sd or the between sd unknown or both, against direct integration:
//! `posterior_marked_histories.csv`, made by `posterior_marked_histories.py`.

use reassay::data::evidence::{Evidence, Seen, Single};
use reassay::posterior::law::Law;
use reassay::posterior::{Basis, Posterior, When, solve};
use reassay::prior::{Between, LevelPrior, Model, Pattern, Periods, Within};
use reassay::quantity::{Absent, Period, Scale};
use std::collections::BTreeMap;

fn plain(values: &[f64]) -> Vec<Seen> {
    values.iter().map(|x| Seen::At(*x)).collect()
}

fn with(values: &[f64], marks: &[Seen]) -> Vec<Seen> {
    plain(values).into_iter().chain(marks.iter().copied()).collect()
}

fn singles(seen: &[Seen]) -> Evidence {
    Evidence::Singles(seen.iter().map(|s| Single { seen: *s, uncertainty: 0.0 }).collect())
}

/// The cases of posterior_marked_histories.py, once more.
fn case(name: &str) -> Posterior {
    let below = Seen::Below(8.5);
    let unmarked = [
        plain(&[9.1, 10.3, 9.9]),
        plain(&[12.0, 11.5, 11.1]),
        plain(&[8.0, 9.2, 9.0]),
        plain(&[10.0, 10.4]),
        plain(&[11.1, 10.2]),
    ];
    let marked = [
        with(&[9.1, 9.9], &[below]),
        plain(&[12.0, 11.5, 11.1]),
        with(&[9.3], &[below; 2]),
        with(&[10.0, 10.4], &[Seen::Above(12.0)]),
        plain(&[11.1, 10.2, 9.5]),
    ];
    let now = with(&[9.2, 9.9, 9.4], &[Seen::Below(8.8); 2]);
    let half_normal = Between::HalfNormal(1.5);
    let (history, now, between, is_known) = match name {
        "now: tau" => (unmarked, now, Between::Uniform, true),
        "now: sigma and tau" => (unmarked, now, half_normal, false),
        "then: tau" => (marked, plain(&[9.2, 9.9, 9.4, 10.3]), half_normal, true),
        "then and now: tau" => (marked, now, half_normal, true),
        "then and now: sigma and tau" => (marked, now, half_normal, false),
        other => panic!("no case {other}"),
    };
    let named = history.iter().enumerate();
    let periods = named.map(|(j, seen)| (Period::new(&j.to_string()), singles(seen))).collect();
    let level = LevelPrior::Periods(Periods { periods, pattern: Pattern::AboutAMean, between, weight: 1.0 });
    let within = if is_known { Within::Known(0.8) } else { Within::Pooled { others: Vec::new() } };
    let model = Model { scale: Scale::Linear, within, level, bias_sd: 0.0, adjust: None };
    solve(&model, &singles(&now), Basis::Both).unwrap()
}

fn law(posterior: &Posterior, quantity: &str) -> Result<Law, Absent> {
    match quantity {
        "level" => posterior.level(When::This),
        "next" => posterior.level(When::Next),
        "long run" => posterior.level(When::LongRun),
        "reading" => posterior.reading(When::This, 1, None),
        "percentile" => posterior.affine(When::This, 1.0, &|sigma| (1.644_853_626_951_472_7 * sigma, 0.0)),
        other => panic!("no quantity {other}"),
    }
}

#[test]
fn marked_histories_agree_with_direct_integration() {
    let table = include_str!("posterior_marked_histories.csv");
    let mut posteriors = BTreeMap::new();
    let mut laws = BTreeMap::new();
    let mut wrong = Vec::new();
    let mut worst: BTreeMap<(&str, &str), f64> = BTreeMap::new();
    for line in table.lines().skip(1) {
        let fields: Vec<&str> = line.split(',').collect();
        let [name, quantity, function, argument, value] = fields[..] else { panic!("{line}") };
        let (argument, value): (f64, f64) = (argument.parse().unwrap(), value.parse().unwrap());
        let posterior = posteriors.entry(name).or_insert_with(|| case(name));
        let law = laws.entry((name, quantity)).or_insert_with(|| law(posterior, quantity).unwrap());
        let spread = law.quantile(0.75).unwrap() - law.quantile(0.25).unwrap();
        let got = match function {
            "quantile" => law.quantile(argument).unwrap(),
            "mean" => law.mean().unwrap(),
            "sd" => law.sd().unwrap(),
            "cdf" => law.cdf(argument),
            _ => law.sf(argument),
        };
        // In units of the promise: ends 1e-10 of their size or the spread, probabilities 1e-9 relative or 1e-21.
        let promise = match function {
            "quantile" | "mean" | "sd" => 1e-10 * value.abs().max(spread),
            _ => (1e-9 * value).max(1e-21),
        };
        let error = (got - value).abs() / promise;
        let kind = if matches!(function, "cdf" | "sf") { "chances" } else { "ends" };
        let of_kind = worst.entry((quantity, kind)).or_default();
        *of_kind = of_kind.max(error);
        if error.is_nan() || error > 1.0 {
            wrong.push(format!("{line}: {got} ({error:e} of the promise)"));
        }
    }
    for ((quantity, kind), error) in &worst {
        println!("{quantity:12} {kind:8} worst {error:.1e} of the promise");
    }
    assert!(wrong.is_empty(), "{} wrong:\n{}", wrong.len(), wrong.join("\n"));
    assert!(table.lines().count() > 130);
}
