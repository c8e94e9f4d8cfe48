//! Laws that marked readings obey whatever the model: one that says nothing changes nothing, and no order does.

use super::{Basis, Law, Posterior, When, solve};
use crate::data::evidence::{Evidence, Seen, Single};
use crate::prior::{Between, LevelPrior, Model, Pattern, Periods, Within};
use crate::quantity::{Period, Scale};

fn singles(seen: &[Seen]) -> Evidence {
    Evidence::Singles(seen.iter().map(|s| Single { seen: *s, uncertainty: 0.0 }).collect())
}

fn readings(values: &[f64]) -> Vec<Seen> {
    values.iter().map(|x| Seen::At(*x)).collect()
}

fn posterior(within: Within, between: Between, history: &[Vec<Seen>], now: &[Seen]) -> Posterior {
    let named = history.iter().enumerate();
    let periods = named.map(|(j, seen)| (Period::new(&j.to_string()), singles(seen))).collect();
    let level = LevelPrior::Periods(Periods { periods, pattern: Pattern::AboutAMean, between, weight: 1.0 });
    let model = Model { scale: Scale::Linear, within, level, bias_sd: 0.0, adjust: None };
    solve(&model, &singles(now), Basis::Both).unwrap()
}

fn history() -> Vec<Vec<Seen>> {
    vec![
        readings(&[0.3, 1.1, -0.4]),
        readings(&[2.2, 1.7]),
        readings(&[-0.6, 0.5, 0.9, 0.2]),
        readings(&[1.4, 0.6]),
    ]
}

fn laws(posterior: &Posterior) -> Vec<Law> {
    let mut laws: Vec<Law> =
        [When::This, When::Next, When::LongRun].map(|when| posterior.level(when).unwrap()).to_vec();
    laws.push(posterior.reading(When::This, 1, None).unwrap());
    laws.push(posterior.reading(When::This, 30, None).unwrap());
    laws.push(posterior.reading(When::Next, 1, None).unwrap());
    laws.push(posterior.affine(When::This, 1.0, &|sigma| (-1.3 * sigma, 0.0)).unwrap());
    laws
}

fn changes(posterior: &Posterior) -> [Law; 2] {
    let against = posterior.change(&Period::new("1"), &singles(&history()[1])).unwrap();
    [posterior.change_long_run().unwrap(), against]
}

/// Chances to 1e-9 and ends to 1e-10 of the spread, as promised.
fn same(got: &Law, wanted: &Law, which: usize) {
    let spread = wanted.quantile(0.75).unwrap() - wanted.quantile(0.25).unwrap();
    for p in [1e-9, 1e-4, 0.025, 0.5, 0.9] {
        let (low, high) = (wanted.quantile(p).unwrap(), wanted.upper_quantile(p).unwrap());
        assert!((got.cdf(low) / p - 1.0).abs() < 1e-9, "law {which}, {p}: {:e}", got.cdf(low) / p - 1.0);
        assert!((got.sf(high) / p - 1.0).abs() < 1e-9, "law {which}, {p}: {:e}", got.sf(high) / p - 1.0);
        let (a, b) = (got.quantile(p).unwrap(), got.upper_quantile(p).unwrap());
        assert!((a - low).abs() < 1e-10 * spread.max(low.abs()), "law {which}, {p}: {a} {low}");
        assert!((b - high).abs() < 1e-10 * spread.max(high.abs()), "law {which}, {p}: {b} {high}");
    }
    for (a, b) in [(got.mean(), wanted.mean()), (got.sd(), wanted.sd())] {
        match (a, b) {
            (Ok(a), Ok(b)) => assert!((a - b).abs() < 1e-10 * spread.max(b.abs()), "law {which}: {a} {b}"),
            (a, b) => assert_eq!(a.is_ok(), b.is_ok()),
        }
    }
}

/// A mark far beyond all readings: the laws are those of the normal pieces, which know nothing of marks.
#[test]
fn a_mark_that_says_nothing_changes_no_law() {
    let now = readings(&[0.9, 1.6, 0.4]);
    let far = Seen::Below(1e6);
    let mut with_mark = now.clone();
    with_mark.push(far);
    let mut then = history();
    then[1].push(far);
    let (plain, known, pooled) = (history(), || Within::Known(0.8), || Within::Pooled { others: Vec::new() });
    let between = Between::HalfNormal(1.0);
    let exact = laws(&posterior(known(), between, &plain, &now));
    for (history, now) in [(&plain, &with_mark), (&then, &now), (&then, &with_mark)] {
        let marked = laws(&posterior(known(), between, history, now));
        for (which, (got, wanted)) in marked.iter().zip(&exact).enumerate() {
            same(got, wanted, which);
        }
    }
    let exact = laws(&posterior(pooled(), between, &plain, &now));
    let marked = laws(&posterior(pooled(), between, &plain, &with_mark));
    for (which, (got, wanted)) in marked.iter().zip(&exact).enumerate() {
        same(got, wanted, which);
    }
}

/// The same for changes, the between sd known.
#[test]
fn a_mark_that_says_nothing_alters_no_change() {
    let now = readings(&[0.9, 1.6, 0.4]);
    let far = Seen::Below(1e6);
    let of = |history: &[Vec<Seen>], now: &[Seen]| {
        changes(&posterior(Within::Known(0.8), Between::Known(0.7), history, now))
    };
    let exact = of(&history(), &now);
    let mut with_mark = now.clone();
    with_mark.push(far);
    let mut then = history();
    then[1].push(far);
    for (history, now) in [(&history(), &with_mark), (&then, &now), (&then, &with_mark)] {
        for (which, (got, wanted)) in of(history, now).iter().zip(&exact).enumerate() {
            same(got, wanted, which);
        }
    }
}

/// No figure depends on the order of marked readings (the first reading sets the unit, so last bits may).
#[test]
fn the_order_of_marked_readings_changes_nothing() {
    let mut now = readings(&[0.9, 1.6, 0.4]);
    now.extend([Seen::Below(0.2), Seen::Above(1.8), Seen::Below(0.1), Seen::Below(0.2)]);
    let mut then = history();
    then[2].extend([Seen::Above(0.8), Seen::Below(0.3)]);
    let backward = |seen: &[Seen]| -> Vec<Seen> { seen.iter().rev().copied().collect() };
    let reversed: Vec<Vec<Seen>> = then.iter().map(|seen| backward(seen)).collect();
    let within = || Within::Known(0.8);
    let one = posterior(within(), Between::HalfNormal(1.0), &then, &now);
    let other = posterior(within(), Between::HalfNormal(1.0), &reversed, &backward(&now));
    for (a, b) in laws(&one).iter().zip(&laws(&other)) {
        for p in [0.01, 0.5, 0.975] {
            let (a, b) = (a.quantile(p).unwrap(), b.quantile(p).unwrap());
            assert!((a - b).abs() < 1e-12, "{p}: {a} {b}");
        }
    }
}
