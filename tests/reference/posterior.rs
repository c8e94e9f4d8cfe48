//! The posterior against brute force: `posterior.csv`, made by `posterior.py` (dense prediction equations
//! given σ and τ, Gauss–Legendre panels over both, Brent's roots).

use reassay::data::evidence::Evidence;
use reassay::posterior::{Basis, Posterior, When, solve};
use reassay::prior::{Between, LevelPrior, Model, Pattern, Periods, Within};
use reassay::quantity::{Period, Scale};

fn sums(n: u64, mean: f64, ss: f64) -> Evidence {
    Evidence::Sums { n, mean, ss: Some(ss), rest: 0.0 }
}

fn mean(mean: f64, uncertainty: f64) -> Evidence {
    Evidence::Mean { mean, uncertainty }
}

struct Case {
    within: Within,
    level: LevelPrior,
    readings: Evidence,
    /// The earlier period of the change, by its place.
    against: usize,
}

fn history(between: Between, pattern: Pattern, periods: Vec<Evidence>) -> LevelPrior {
    let named = periods.into_iter().enumerate();
    let periods = named.map(|(j, evidence)| (Period::new(&j.to_string()), evidence)).collect();
    LevelPrior::Periods(Periods { periods, pattern, between, weight: 1.0 })
}

/// The cases of posterior.py, once more.
fn case(name: &str) -> Case {
    let pooled = || Within::Pooled { others: Vec::new() };
    let six = vec![
        sums(4, 50.2, 13.0),
        sums(6, 52.9, 21.0),
        sums(5, 51.0, 30.0),
        sums(8, 49.4, 22.0),
        sums(4, 52.0, 9.0),
        sums(1, 50.0, 0.0),
    ];
    let about = Pattern::AboutAMean;
    let make = |within, level, readings, against| Case { within, level, readings, against };
    match name {
        "uniform known" => make(
            Within::Known(1.5),
            history(
                Between::Uniform,
                about,
                vec![
                    sums(4, 10.2, 0.0),
                    sums(7, 12.9, 0.0),
                    sums(3, 11.0, 0.0),
                    sums(12, 9.4, 0.0),
                    sums(5, 12.0, 0.0),
                ],
            ),
            sums(6, 13.7, 0.0),
            3,
        ),
        "uniform pooled" => make(pooled(), history(Between::Uniform, about, six), sums(6, 53.7, 17.5), 1),
        "uniform pooled prior" => make(pooled(), history(Between::Uniform, about, six), Evidence::Nothing, 1),
        "half-cauchy pooled" => make(
            pooled(),
            history(Between::HalfCauchy(3.0), about, vec![sums(3, 50.2, 13.0), sums(3, 52.9, 2.0)]),
            sums(2, 56.0, 4.0),
            0,
        ),
        "half-normal worth" => make(
            Within::Worth { sd: 2.2, df: 6.0 },
            history(
                Between::HalfNormal(1.0),
                about,
                vec![sums(12, 50.2, 40.0), sums(12, 51.2, 50.0), sums(12, 51.2, 44.0)],
            ),
            sums(5, 50.4, 21.0),
            2,
        ),
        "wild period" => make(
            Within::Known(0.4),
            history(
                Between::Uniform,
                about,
                [10.2, 10.3, 10.1, 10.25, 40.0].map(|m| sums(10, m, 0.0)).to_vec(),
            ),
            sums(10, 10.0, 0.0),
            4,
        ),
        "equal means" => make(
            Within::Known(3.0),
            history(Between::Uniform, about, vec![sums(9, 7.0, 0.0); 4]),
            sums(9, 7.1, 0.0),
            0,
        ),
        "means with uncertainties" => make(
            Within::Known(1.0),
            history(
                Between::HalfCauchy(0.5),
                about,
                vec![mean(10.2, 0.3), mean(10.6, 0.05), mean(11.9, 1.1)],
            ),
            mean(10.9, 0.4),
            2,
        ),
        "long run worth" => make(
            Within::Worth { sd: 1.8, df: 4.0 },
            LevelPrior::LongRun { mean: 20.0, sd: 2.5, between_sd: 1.3 },
            sums(4, 24.0, 12.0),
            0,
        ),
        "walk known" => make(
            Within::Known(1.5),
            history(
                Between::Uniform,
                Pattern::RandomWalk { gaps: vec![1.0, 1.0, 2.0, 1.0, 2.0], last_gap: 1.0 },
                vec![
                    sums(4, 10.2, 0.0),
                    sums(7, 11.1, 0.0),
                    sums(3, 11.0, 0.0),
                    sums(12, 12.4, 0.0),
                    sums(5, 13.0, 0.0),
                ],
            ),
            sums(6, 13.7, 0.0),
            2,
        ),
        "walk pooled" => make(
            pooled(),
            history(
                Between::HalfNormal(1.5),
                Pattern::RandomWalk { gaps: vec![1.0; 4], last_gap: 1.0 },
                vec![sums(4, 50.2, 13.0), sums(6, 52.9, 21.0), sums(5, 51.0, 30.0), sums(8, 49.4, 22.0)],
            ),
            sums(6, 47.7, 17.5),
            0,
        ),
        other => panic!("no case {other}"),
    }
}

#[test]
fn posterior_agrees_with_brute_force() {
    let table = include_str!("posterior.csv");
    let mut solved: Option<(String, Case, Posterior)> = None;
    let (mut worst_end, mut worst_chance, mut rows) = (0.0_f64, 0.0_f64, 0);
    let mut wrong = Vec::new();
    for line in table.lines().skip(1) {
        let fields: Vec<&str> = line.split(',').collect();
        let [name, quantity, function, argument, value] = fields[..] else { panic!("{line}") };
        let (argument, value): (f64, f64) = (argument.parse().unwrap(), value.parse().unwrap());
        if solved.as_ref().is_none_or(|s| s.0 != name) {
            let case = case(name);
            let model = Model {
                scale: Scale::Linear,
                within: case.within.clone(),
                level: case.level.clone(),
                bias_sd: 0.0,
                adjust: None,
            };
            let posterior = solve(&model, &case.readings, Basis::Both).unwrap();
            solved = Some((name.to_string(), case, posterior));
        }
        let Some((_, case, posterior)) = &solved else { panic!("{line}") };
        let law = match quantity {
            "level" => posterior.level(When::This),
            "next" => posterior.level(When::Next),
            "long" => posterior.level(When::LongRun),
            "reading" => posterior.reading(When::This, 1, None),
            "change" => {
                let LevelPrior::Periods(periods) = &case.level else { panic!("{line}") };
                let (period, readings) = &periods.periods[case.against];
                posterior.change(period, readings)
            }
            other => panic!("no quantity {other}"),
        }
        .unwrap();
        rows += 1;
        match function {
            "quantile" => {
                let got = law.quantile(argument).unwrap();
                let spread = law.quantile(0.75).unwrap() - law.quantile(0.25).unwrap();
                let error = (got - value).abs() / value.abs().max(spread);
                worst_end = worst_end.max(error);
                if error > 1e-10 {
                    wrong.push(format!("{line}: {got} ({error:e})"));
                }
            }
            _ => {
                let got = if function == "cdf" { law.cdf(argument) } else { law.sf(argument) };
                let error = (got - value).abs() / value;
                // Promised relative down to 1e-12.
                worst_chance = worst_chance.max(if value > 1e-12 { error } else { 0.0 });
                if error > 1e-9 && value > 1e-12 {
                    wrong.push(format!("{line}: {got} ({error:e})"));
                }
            }
        }
    }
    assert!(wrong.is_empty(), "{} of {rows} wrong:\n{}", wrong.len(), wrong.join("\n"));
    assert!(rows > 280 && worst_end < 1e-10 && worst_chance < 1e-9);
    println!("{rows} figures; worst end {worst_end:e}, worst chance {worst_chance:e}");
}
