//! Marked and rounded readings against brute force: `posterior_marked.csv`, made by `posterior_marked.py`.

use reassay::data::evidence::{Evidence, Seen, Single};
use reassay::posterior::{Basis, Posterior, When, solve};
use reassay::prior::{Between, LevelPrior, Model, Pattern, Periods, Within};
use reassay::quantity::{Period, Scale};
use std::collections::BTreeMap;

fn at(x: f64) -> Seen {
    Seen::At(x)
}

fn below(x: f64) -> Seen {
    Seen::Below(x)
}

fn singles(seen: &[Seen]) -> Evidence {
    Evidence::Singles(seen.iter().map(|s| Single { seen: *s, uncertainty: 0.0 }).collect())
}

fn history(between: Between, periods: &[&[Seen]]) -> LevelPrior {
    let named = periods.iter().enumerate();
    let periods = named.map(|(j, seen)| (Period::new(&j.to_string()), singles(seen))).collect();
    LevelPrior::Periods(Periods { periods, pattern: Pattern::AboutAMean, between, weight: 1.0 })
}

/// The cases of posterior_marked.py, once more.
fn case(name: &str) -> Posterior {
    let flat = || (Within::Readings, LevelPrior::Flat);
    let marked: [&[Seen]; 4] = [
        &[at(9.1), below(8.5), at(9.9)],
        &[at(12.0), at(11.5)],
        &[below(8.5), below(8.5)],
        &[at(10.0), at(10.4), Seen::Above(12.0)],
    ];
    let ((within, level), readings) = match name {
        "stated known" => (
            (Within::Known(0.8), LevelPrior::Stated { mean: 2.0, sd: 1.5 }),
            singles(&[at(2.1), at(1.4), below(1.0), below(1.0), Seen::Above(3.0)]),
        ),
        "all below" => {
            ((Within::Known(0.7), LevelPrior::Stated { mean: 5.0, sd: 2.0 }), singles(&[below(1.0); 6]))
        }
        "flat unknown" => (flat(), singles(&[at(2.1), at(1.4), at(2.9), at(2.2), below(1.0), below(1.5)])),
        "all rounded" => {
            let rounded = |x: f64| Seen::Rounded { lower: x - 0.5, at: x, upper: x + 0.5 };
            (flat(), singles(&[3.0, 4.0, 4.0, 6.0, 3.0].map(rounded)))
        }
        "history plain" => {
            let periods: [&[Seen]; 5] = [
                &[at(9.1), at(10.3), at(9.9)],
                &[at(12.0), at(11.5)],
                &[at(8.0), at(9.2), at(9.0)],
                &[at(10.0), at(10.4)],
                &[at(11.1)],
            ];
            (
                (Within::Known(1.0), history(Between::HalfNormal(2.0), &periods)),
                singles(&[at(8.2), below(8.5), below(8.5)]),
            )
        }
        "history marked" => (
            (Within::Known(1.0), history(Between::HalfNormal(1.5), &marked)),
            singles(&[at(9.2), at(8.7), at(9.0)]),
        ),
        "both marked" => (
            (Within::Known(1.0), history(Between::HalfNormal(1.5), &marked[..3])),
            singles(&[at(9.2), below(8.5)]),
        ),
        other => panic!("no case {other}"),
    };
    let model = Model { scale: Scale::Linear, within, level, bias_sd: 0.0, adjust: None };
    solve(&model, &readings, Basis::Both).unwrap()
}

#[test]
fn marked_readings_agree_with_brute_force() {
    let table = include_str!("posterior_marked.csv");
    let mut laws = BTreeMap::new();
    let mut wrong = Vec::new();
    let (mut worst, mut rows) = (0.0_f64, 0);
    for line in table.lines().skip(1) {
        let fields: Vec<&str> = line.split(',').collect();
        let [name, quantity, function, argument, value] = fields[..] else { panic!("{line}") };
        let (argument, value): (f64, f64) = (argument.parse().unwrap(), value.parse().unwrap());
        let law = laws.entry((name, quantity)).or_insert_with(|| {
            let posterior = case(name);
            match quantity {
                "level" => posterior.level(When::This),
                "next" => posterior.level(When::Next),
                "reading" => posterior.reading(When::This, 1, None),
                "within sd" => posterior.within_sd(),
                other => panic!("no quantity {other}"),
            }
            .unwrap()
        });
        rows += 1;
        let (got, error) = match function {
            "quantile" => {
                let got = law.quantile(argument).unwrap();
                let spread = law.quantile(0.75).unwrap() - law.quantile(0.25).unwrap();
                (got, (got - value).abs() / value.abs().max(spread))
            }
            // Probabilities are promised relative down to 1e-12.
            _ if value < 1e-12 => continue,
            "cdf" => (law.cdf(argument), (law.cdf(argument) - value).abs() / value),
            _ => (law.sf(argument), (law.sf(argument) - value).abs() / value),
        };
        worst = worst.max(error);
        if error > if function == "quantile" { 1e-10 } else { 1e-9 } {
            wrong.push(format!("{line}: {got} ({error:e})"));
        }
    }
    assert!(wrong.is_empty(), "{} of {rows} wrong:\n{}", wrong.len(), wrong.join("\n"));
    assert!(rows > 35);
    println!("{rows} figures; worst {worst:e}");
}
