//! Laws that hold for any data: halves in sequence, shift, change of unit, order, limits, two roads.

use super::published::{about_mean, model, near};
use super::*;
use crate::data::evidence::{Seen, Single};
use crate::math::fm;
use crate::prior::{Between, LevelPrior, Pattern, Periods, Within};
use crate::quantity::Period;
use proptest::prelude::*;

fn sums(n: u64, mean: f64, ss: f64) -> Evidence {
    Evidence::Sums { n, mean, ss: Some(ss), rest: 0.0 }
}

/// A period's number of readings, mean and sum of squares.
fn a_period() -> impl Strategy<Value = (u64, f64, f64)> {
    (2u64..15, -3.0..3.0, 0.3..2.0).prop_map(|(n, mean, s)| (n, mean, s * s * (n as f64 - 1.0)))
}

fn some_periods() -> impl Strategy<Value = Vec<(u64, f64, f64)>> {
    prop::collection::vec(a_period(), 3..9)
}

fn evidence(periods: &[(u64, f64, f64)], unit: f64, zero: f64) -> Vec<Evidence> {
    periods.iter().map(|(n, m, ss)| sums(*n, zero + unit * m, unit * unit * ss)).collect()
}

fn pooled() -> Within {
    Within::Pooled { others: Vec::new() }
}

/// Ends to 1e-10 of their size or of the spread, as promised.
fn same(got: &Law, wanted: &Law) {
    for p in [1e-5, 0.025, 0.3, 0.5, 0.8, 0.975] {
        let (a, b) = (got.quantile(p).unwrap(), wanted.quantile(p).unwrap());
        let spread = wanted.quantile(0.75).unwrap() - wanted.quantile(0.25).unwrap();
        assert!((a - b).abs() <= 1e-10 * b.abs().max(spread), "{p}: {a} {b}");
    }
}

proptest! {
    #![proptest_config(ProptestConfig {
        cases: 12,
        failure_persistence: None,
        rng_seed: proptest::test_runner::RngSeed::Fixed(20_260_120),
        ..ProptestConfig::default()
    })]

    #[test]
    fn a_batch_equals_its_halves_in_sequence(
        (n, a, _) in a_period(), (m, b, _) in a_period(), sd in 0.1..10.0f64,
    ) {
        let at_once = Evidence::Sums {
            n: n + m,
            mean: (n as f64 * a + m as f64 * b) / (n + m) as f64,
            ss: None, rest: 0.0 };
        let prior = LevelPrior::Stated { mean: 0.3, sd };
        let whole = solve(&model(Within::Known(1.3), prior.clone()), &at_once, Basis::Both).unwrap();
        let first = solve(&model(Within::Known(1.3), prior), &sums(n, a, 0.0), Basis::Both).unwrap();
        let carried = LevelPrior::Stated {
            mean: first.level(When::This).unwrap().mean().unwrap(),
            sd: first.level(When::This).unwrap().sd().unwrap(),
        };
        let second = solve(&model(Within::Known(1.3), carried), &sums(m, b, 0.0), Basis::Both).unwrap();
        same(&second.level(When::This).unwrap(), &whole.level(When::This).unwrap());
    }

    #[test]
    fn shift_and_unit_move_the_answers_along(
        periods in some_periods(), now in a_period(),
        exponent in -12i32..12, zero in -50.0..50.0f64,
    ) {
        let unit = fm::pow(10.0, f64::from(exponent));
        let of = |unit: f64, zero: f64| {
            let history = about_mean(Between::Uniform, evidence(&periods, unit, zero));
            let now = &evidence(&[now], unit, zero)[0];
            solve(&model(pooled(), LevelPrior::Periods(history)), now, Basis::Both).unwrap()
        };
        let (plain, moved) = (of(1.0, 0.0), of(unit, zero * unit));
        for when in [When::This, When::Next, When::LongRun] {
            let (a, b) = (plain.level(when).unwrap(), moved.level(when).unwrap());
            for p in [0.001, 0.3, 0.975] {
                let (a, b) = (a.quantile(p).unwrap(), b.quantile(p).unwrap() / unit - zero);
                prop_assert!((a - b).abs() < 1e-10 * (1.0 + zero.abs()), "{a} {b}");
            }
        }
    }

    #[test]
    fn the_order_of_periods_changes_nothing(periods in some_periods(), now in a_period()) {
        let mut turned = periods.clone();
        turned.reverse();
        let of = |periods: &[(u64, f64, f64)]| {
            let mut history = about_mean(Between::HalfCauchy(1.0), evidence(periods, 1.0, 0.0));
            history.periods.sort_by(|a, b| a.0.cmp(&b.0));
            let now = &evidence(&[now], 1.0, 0.0)[0];
            solve(&model(pooled(), LevelPrior::Periods(history)), now, Basis::Both).unwrap()
        };
        same(&of(&turned).level(When::Next).unwrap(), &of(&periods).level(When::Next).unwrap());
    }

    #[test]
    fn a_period_reviewed_is_next_years_history(
        periods in some_periods(), now in a_period(), walk in any::<bool>(), known in any::<bool>(),
    ) {
        let within = if known { Within::Known(0.9) } else { pooled() };
        let prior = |all: &[(u64, f64, f64)]| {
            let mut history = about_mean(Between::Uniform, evidence(all, 1.0, 0.0));
            if walk {
                history.pattern = Pattern::RandomWalk { gaps: vec![1.0; all.len()], last_gap: 1.0 };
            }
            model(within.clone(), LevelPrior::Periods(history))
        };
        let reviewed = solve(&prior(&periods), &evidence(&[now], 1.0, 0.0)[0], Basis::Both).unwrap();
        let mut all = periods.clone();
        all.push(now);
        let later = solve(&prior(&all), &Evidence::Nothing, Basis::PriorOnly).unwrap();
        same(&later.level(When::This).unwrap(), &reviewed.level(When::Next).unwrap());
        if !walk {
            same(&later.level(When::LongRun).unwrap(), &reviewed.level(When::LongRun).unwrap());
        }
        same(&later.between_sd().unwrap(), &reviewed.between_sd().unwrap());
    }

    #[test]
    fn a_vast_prior_is_a_flat_one(now in a_period()) {
        let now = evidence(&[now], 1.0, 0.0);
        let flat = solve(&model(Within::Readings, LevelPrior::Flat), &now[0], Basis::Both).unwrap();
        let vast = LevelPrior::Stated { mean: 0.0, sd: 1e7 };
        let vast = solve(&model(Within::Known(1.0), vast), &now[0], Basis::Both).unwrap();
        let known = solve(&model(Within::Known(1.0), LevelPrior::Flat), &now[0], Basis::Both).unwrap();
        same(&vast.level(When::This).unwrap(), &known.level(When::This).unwrap());
        prop_assert_eq!(flat.prior_weight().unwrap(), 0.0);
    }

    #[test]
    fn no_between_sd_is_one_batch(periods in some_periods(), now in a_period()) {
        let history = about_mean(Between::None, evidence(&periods, 1.0, 0.0));
        let now = &evidence(&[now], 1.0, 0.0)[0];
        let pooled_level =
            solve(&model(pooled(), LevelPrior::Periods(history)), now, Basis::Both).unwrap();
        // All readings in one period.
        let Evidence::Sums { n, mean, ss: Some(ss), .. } = now else { return Ok(()) };
        let all: Vec<(f64, f64, f64)> = periods
            .iter()
            .map(|(n, m, s)| (*n as f64, *m, *s))
            .chain([(*n as f64, *mean, *ss)])
            .collect();
        let count: f64 = all.iter().map(|a| a.0).sum();
        let centre = all.iter().map(|a| a.0 * a.1).sum::<f64>() / count;
        let squares = all.iter().map(|a| a.2 + a.0 * (a.1 - centre) * (a.1 - centre)).sum::<f64>();
        let batch = sums(count as u64, centre, squares);
        let flat = solve(&model(Within::Readings, LevelPrior::Flat), &batch, Basis::Both).unwrap();
        same(&pooled_level.level(When::This).unwrap(), &flat.level(When::This).unwrap());
        same(&pooled_level.within_sd().unwrap(), &flat.within_sd().unwrap());
    }

    #[test]
    fn quantile_and_chance_are_inverse_and_monotone(periods in some_periods(), now in a_period()) {
        let history = about_mean(Between::HalfNormal(1.0), evidence(&periods, 1.0, 0.0));
        let now = &evidence(&[now], 1.0, 0.0)[0];
        let posterior = solve(&model(pooled(), LevelPrior::Periods(history)), now, Basis::Both).unwrap();
        for law in [posterior.level(When::This).unwrap(), posterior.between_sd().unwrap()] {
            let mut before = f64::NEG_INFINITY;
            for p in [0.001, 0.025, 0.4, 0.7, 0.99] {
                let t = law.quantile(p).unwrap();
                prop_assert!(t > before);
                prop_assert!((law.cdf(t) - p).abs() < 1e-11 && (law.sf(t) - (1.0 - p)).abs() < 1e-11);
                before = t;
            }
            let (lo, hi) = law.shortest(0.9, false).unwrap();
            let (low, high) = law.central(0.9).unwrap();
            prop_assert!((law.cdf(hi) - law.cdf(lo) - 0.9).abs() < 1e-10 && hi - lo <= high - low + 1e-12);
        }
    }

    #[test]
    fn a_mark_far_away_says_nothing(
        now in prop::collection::vec(-2.0..2.0f64, 3..6), mean in -1.0..1.0f64,
    ) {
        let single = |seen: Seen| Single { seen, uncertainty: 0.0 };
        let plain: Vec<Single> = now.iter().map(|x| single(Seen::At(*x))).collect();
        let model = model(Within::Known(0.7), LevelPrior::Stated { mean, sd: 1.5 });
        let exact = solve(&model, &Evidence::Singles(plain.clone()), Basis::Both).unwrap();
        let mut open = plain;
        open.push(single(Seen::Below(1e6)));
        let open = solve(&model, &Evidence::Singles(open), Basis::Both).unwrap();
        same(&open.level(When::This).unwrap(), &exact.level(When::This).unwrap());
    }
}

/// A mark that says nothing, in an earlier period: all laws are as without it, those of other periods too.
#[test]
fn a_mark_far_away_in_the_history_says_nothing() {
    let first = [0.3, 1.1, -0.4];
    let mean = first.iter().sum::<f64>() / 3.0;
    let ss = first.iter().map(|x| (x - mean) * (x - mean)).sum();
    let single = |seen: Seen| Single { seen, uncertainty: 0.0 };
    let mut open: Vec<Single> = first.iter().map(|x| single(Seen::At(*x))).collect();
    open.push(single(Seen::Below(1e6)));
    let others = [sums(4, 1.2, 2.0), sums(2, -0.6, 0.5)];
    let of = |first: Evidence| {
        let periods = [first].into_iter().chain(others.clone()).collect();
        let history = LevelPrior::Periods(about_mean(Between::Known(0.7), periods));
        solve(&model(Within::Known(0.8), history), &sums(3, 0.9, 1.0), Basis::Both).unwrap()
    };
    let (open, exact) = (of(Evidence::Singles(open)), of(sums(3, mean, ss)));
    for when in [When::This, When::Next, When::LongRun] {
        same(&open.level(when).unwrap(), &exact.level(when).unwrap());
    }
}

/// A change so large that no change at all lies beyond every promise: the law is still given, and is the integral
/// over τ of methods §4, taken here by a plain trapezoid rule in ln τ.
#[test]
fn a_change_far_from_none() {
    let (scale, sigma2) = (0.7, 1.0);
    let means = [(3.0, 10.053), (2.0, 15.828), (5.0, 6.929), (2.0, 2.061)];
    let periods: Vec<Evidence> = means.iter().map(|(n, mean)| sums(*n as u64, *mean, 1.0)).collect();
    let history = about_mean(Between::HalfCauchy(scale), periods[..3].to_vec());
    let against = history.periods[1].0.clone();
    let posterior =
        solve(&model(Within::Known(1.0), LevelPrior::Periods(history)), &periods[3], Basis::Both).unwrap();
    let law = posterior.change(&against, &periods[1]).unwrap();
    let given = |tau2: f64| {
        let of = |(n, mean): (f64, f64)| (mean, sigma2 / n, 1.0 / (tau2 + sigma2 / n));
        let all = means.map(of);
        let v = 1.0 / all.iter().map(|p| p.2).sum::<f64>();
        let mu = v * all.iter().map(|p| p.2 * p.0).sum::<f64>();
        let ln_weight = all.iter().map(|p| 0.5 * (fm::ln(p.2) - p.2 * (p.0 - mu) * (p.0 - mu))).sum::<f64>();
        let pulled = |p: (f64, f64, f64)| (tau2 * p.2, p.0, tau2 * p.2 * p.1);
        let (now, then) = (pulled(all[3]), pulled(all[1]));
        let rest = then.0 - now.0;
        let mean = now.0 * now.1 - then.0 * then.1 + rest * mu;
        (ln_weight + 0.5 * fm::ln(v), mean, now.2 + then.2 + rest * rest * v)
    };
    for t in [-18.0, -14.5, -13.0, -11.0, -8.0] {
        let (mut whole, mut below) = (0.0, 0.0);
        for i in -6000..=6000 {
            let tau = fm::exp(f64::from(i) * 0.005);
            let (ln_weight, mean, var) = given(tau * tau);
            let weight = tau * fm::exp(ln_weight) / (1.0 + tau * tau / (scale * scale));
            whole += weight;
            below += weight * crate::math::normal::cdf((t - mean) / var.sqrt());
        }
        near(law.cdf(t), below / whole, 1e-9);
    }
}

/// Histories that are hard on a quadrature: an answer that moves with its unit or a clear failure, never a
/// silent wrong one.
#[test]
fn hard_histories_are_answered() {
    let plain = |n: u64, means: &[f64]| -> Vec<Evidence> {
        means.iter().map(|m| Evidence::Sums { n, mean: *m, ss: None, rest: 0.0 }).collect()
    };
    let many: Vec<f64> = (0..500).map(|j| fm::sin(f64::from(j) * 1.7)).collect();
    let cases: [(&str, Vec<Evidence>, f64); 8] = [
        ("one reading each", plain(1, &[1.0, 2.0, 0.5, 1.7]), 0.5),
        ("equal means", plain(5, &[3.0; 6]), 1.0),
        ("one wild period", plain(5, &[1.0, 1.1, 0.9, 1e6]), 0.5),
        ("sd a hundred times too large", plain(5, &[1.0, 1.1, 0.9, 1.05]), 50.0),
        ("sd a hundred times too small", plain(5, &[1.0, 2.0, 0.0, 1.5]), 0.01),
        ("five hundred periods", plain(5, &many), 0.4),
        ("three periods", plain(5, &[1.0, 2.0, 0.0]), 0.4),
        ("vast numbers of readings", plain(1_000_000_000, &[1.0, 2.0, 0.0, 1.2]), 1.0),
    ];
    let mut refused = Vec::new();
    for (name, periods, sd) in cases {
        for between in [Between::Uniform, Between::HalfCauchy(1.0), Between::HalfNormal(2.0)] {
            let of = |unit: f64| {
                let scaled = periods.iter().map(|e| match e {
                    Evidence::Sums { n, mean, ss, rest } => {
                        Evidence::Sums { n: *n, mean: mean * unit, ss: *ss, rest: rest * unit }
                    }
                    other => other.clone(),
                });
                let between = match between {
                    Between::HalfCauchy(s) => Between::HalfCauchy(s * unit),
                    Between::HalfNormal(s) => Between::HalfNormal(s * unit),
                    other => other,
                };
                let history = about_mean(between, scaled.collect());
                let now = Evidence::Sums { n: 4, mean: 1.4 * unit, ss: None, rest: 0.0 };
                solve(&model(Within::Known(sd * unit), LevelPrior::Periods(history)), &now, Basis::Both)
                    .inspect_err(|e| assert!(e.failed, "{name}, {between:?}: {e}"))
                    .ok()
            };
            let Some(plain) = of(1.0) else {
                refused.push(format!("{name}, {between:?}"));
                continue;
            };
            assert!(plain.quadrature_error < 1e-9, "{name}");
            for unit in [1e-150, 1e150, 1e-3] {
                let Some(scaled) = of(unit) else {
                    refused.push(format!("{name}, {between:?}, unit {unit}"));
                    continue;
                };
                for when in [When::This, When::Next] {
                    let (a, b) = match (plain.level(when), scaled.level(when)) {
                        (Ok(a), Ok(b)) => (a, b),
                        // A variance beyond the largest number is a clear failure, never a wrong figure.
                        (Ok(_), Err(absent)) if unit == 1e150 => {
                            assert!(absent.failed, "{name} {unit}: {absent}");
                            continue;
                        }
                        (a, b) => panic!("{name} {unit}: {a:?} {b:?}"),
                    };
                    for p in [0.01, 0.5, 0.99] {
                        let spread = a.quantile(0.75).unwrap() - a.quantile(0.25).unwrap();
                        let (a, b) = (a.quantile(p).unwrap(), b.quantile(p).unwrap() / unit);
                        assert!((a - b).abs() <= 1e-10 * a.abs().max(spread), "{name} {unit}: {a} {b}");
                    }
                }
            }
        }
    }
    assert!(refused.is_empty(), "{refused:#?}");
}

/// A σ of this period beside that of the history: three coordinates, and the unit changes nothing.
#[test]
#[cfg_attr(debug_assertions, ignore = "a minute without optimisation")]
fn two_sigmas_move_with_their_unit() {
    let periods = [(4, 0.3, 1.1), (6, -0.8, 2.4), (5, 1.2, 1.9), (3, 0.1, 0.4), (7, 0.9, 3.0)];
    let of = |unit: f64, zero: f64| {
        let history = about_mean(Between::Uniform, evidence(&periods, unit, zero));
        let now = &evidence(&[(6, 0.4, 2.1)], unit, zero)[0];
        solve(&model(Within::Readings, LevelPrior::Periods(history)), now, Basis::Both).unwrap()
    };
    let plain = of(1.0, 0.0);
    for (unit, zero) in [(1e7, 3e7)] {
        let moved = of(unit, zero);
        for when in [When::This, When::Next] {
            let (a, b) = (plain.level(when).unwrap(), moved.level(when).unwrap());
            for p in [0.001, 0.3, 0.975] {
                let (a, b) = (a.quantile(p).unwrap(), (b.quantile(p).unwrap() - zero) / unit);
                assert!((a - b).abs() < 1e-10 * a.abs().max(1.0), "{unit} {p}: {a} {b}");
            }
        }
    }
}

/// Bounds so close that they say what the reading itself says.
#[test]
fn tight_bounds_are_readings() {
    let xs = [1.2, 0.4, 2.1, 1.5, 0.9];
    let single = |seen: Seen| Single { seen, uncertainty: 0.0 };
    let plain = Evidence::Singles(xs.iter().map(|x| single(Seen::At(*x))).collect());
    for width in [1e-3, 1e-6, 1e-9] {
        let bounded = Evidence::Singles(
            xs.iter()
                .map(|x| single(Seen::Rounded { lower: x - 0.5 * width, at: *x, upper: x + 0.5 * width }))
                .collect(),
        );
        for within in [Within::Known(0.7), Within::Readings] {
            let model = model(within, LevelPrior::Stated { mean: 0.5, sd: 1.5 });
            let exact = solve(&model, &plain, Basis::Both).unwrap().level(When::This).unwrap();
            let close = solve(&model, &bounded, Basis::Both).unwrap().level(When::This).unwrap();
            for p in [0.01, 0.5, 0.99] {
                let (a, b) = (close.quantile(p).unwrap(), exact.quantile(p).unwrap());
                // Their width adds width²/12 to σ².
                assert!((a - b).abs() < 1e-10 + width * width, "{width} {p}: {a} {b}");
            }
        }
    }
}

/// Too little data is a reason, not a number.
#[test]
fn what_cannot_be_known_is_said() {
    let history = |between, n| Periods {
        periods: (0..n).map(|j| (Period::new(&j.to_string()), sums(3, 1.0 + j as f64, 1.0))).collect(),
        pattern: Pattern::AboutAMean,
        between,
        weight: 1.0,
    };
    let now = sums(4, 1.0, 2.0);
    let refused = |within: Within, level: LevelPrior, now: &Evidence, basis| {
        let error = solve(&model(within, level), now, basis).unwrap_err();
        assert!(!error.failed, "{error}");
        error.reason
    };
    let known = || Within::Known(1.0);
    let two = LevelPrior::Periods(history(Between::Uniform, 2));
    assert!(refused(known(), two, &now, Basis::Both).contains("at least 3"));
    refused(known(), LevelPrior::Flat, &now, Basis::PriorOnly);
    refused(known(), LevelPrior::Flat, &Evidence::Nothing, Basis::Both);
    refused(Within::Readings, LevelPrior::Flat, &sums(1, 1.0, 0.0), Basis::Both);
    refused(Within::Readings, LevelPrior::Flat, &sums(3, 1.0, 0.0), Basis::Both);
    refused(Within::None, LevelPrior::Flat, &now, Basis::Both);
    let below = Evidence::Singles(vec![Single { seen: Seen::Below(1.0), uncertainty: 0.0 }; 4]);
    refused(known(), LevelPrior::Flat, &below, Basis::Both);
    refused(Within::Readings, LevelPrior::Stated { mean: 0.0, sd: 1.0 }, &below, Basis::Both);
    // Three periods: quantiles stand, the sd does not exist; five and more: it does.
    let prior = |n| {
        let level = LevelPrior::Periods(history(Between::Uniform, n));
        solve(&model(known(), level), &Evidence::Nothing, Basis::PriorOnly)
            .unwrap()
            .level(When::This)
            .unwrap()
    };
    assert!(prior(3).sd().is_err() && prior(3).mean().is_err() && prior(3).quantile(0.9).is_ok());
    assert!(prior(4).sd().is_err() && prior(4).mean().is_ok());
    assert!(prior(5).sd().is_ok());
    // A reading cannot be foretold where σ comes from readings that are not there.
    let stated = model(Within::Readings, LevelPrior::Stated { mean: 0.0, sd: 1.0 });
    let prior = solve(&stated, &now, Basis::PriorOnly).unwrap();
    assert!(prior.reading(When::This, 1, None).is_err());
    near(prior.level(When::This).unwrap().sd().unwrap(), 1.0, 1e-15);
}
