//! Acceptance limits, guard bands and risks against published figures and brute force.

use super::*;
use crate::math::normal;
use crate::plan::Rule;
use crate::quantity::Beyond;
use crate::questions::acceptance::{World, rule_figures};
use crate::questions::moved::{self, Movable, Move};
use crate::questions::risks;
use crate::questions::rule::{self, Given};

const ABOVE: &str = "ask = \"level chance\"\nabove = 45\n[question.rule]\nagreed = 2024-11-30\nverdicts = [ { say = \"above\", \
                     chance_at_least = 0.95, fail = true }, { say = \"not above\", chance_at_most = 0.05 }, { say = \"not decided\" } ]";

fn rule_of(put: &Put) -> &Rule {
    put.plan.questions[0].rule.as_ref().unwrap()
}

/// Two-part priors make a mixture of pieces without any quadrature.
fn mixture() -> Posterior {
    let parts = vec![
        (0.6, LevelPrior::Stated { mean: 41.0, sd: 0.8 }),
        (0.4, LevelPrior::Stated { mean: 44.0, sd: 4.0 }),
    ];
    both(
        &model(Within::Known(1.5), LevelPrior::Mixture(parts)),
        &Evidence::Sums { n: 6, mean: 43.1, ss: Some(11.0), rest: 0.0 },
    )
}

/// ILAC-G8:09/2019 and JCGM 106:2012: with a flat prior the guard band is z/2 of U: 0.82 U for 5 %,
/// 0.98 U for 2.5 %.
#[test]
fn guard_bands_of_ilac_g8() {
    let posterior = both(&model(Within::Known(1.5), LevelPrior::Flat), &sums(6, 43.1, 1.4));
    for (alpha, printed) in [("0.05", 0.82), ("0.025", 0.98)] {
        let asked =
            put("linear", &ABOVE.replace("chance_at_most = 0.05", &format!("chance_at_most = {alpha}")));
        let subject = asked.subject(&posterior, None);
        let figures = rule_figures(asked.question.as_ref(), rule_of(&asked), &subject);
        let share = value(&figures, "guard_band_share_of_u");
        within(share, printed, 0.005);
        near(share, 0.5 * normal::upper_quantile(alpha.parse().unwrap()).unwrap(), 1e-11);
        let band = value(&figures, "guard_band");
        near(band, 45.0 - value(&figures, "acceptance_limit"), 1e-13);
    }
}

/// methods: P(θ > L) ≤ α iff x̄ ≤ (σ²/n) [(L − z √v)/v − m0/v0], in closed form for one piece.
#[test]
fn the_acceptance_limit_is_the_closed_form() {
    let posterior = example();
    let asked = put("linear", ABOVE);
    let subject = asked.subject(&posterior, None);
    let figures = rule_figures(asked.question.as_ref(), rule_of(&asked), &subject);
    let (v0, s2, m0, l) = (4.0, 2.25 / 6.0, 40.0, 45.0);
    let v: f64 = 1.0 / (1.0 / v0 + 1.0 / s2);
    let z = normal::upper_quantile(0.05).unwrap();
    near(value(&figures, "acceptance_limit"), s2 * ((l - z * v.sqrt()) / v - m0 / v0), 1e-12);
    // At that mean the chance is the threshold.
    let there = both(&posterior.model, &sums(6, value(&figures, "acceptance_limit"), 1.4));
    near(value(&ask("ask = \"level chance\"\nabove = 45", &there), "chance"), 0.05, 1e-10);
}

/// JCGM 106:2012, clause 9.5 (from memory; risks recomputed): resistors, process N(1500, 0.12²), u = 0.04,
/// tolerance 1499.8 to 1500.2, accepted within it or within guard bands of U = 0.08.
#[test]
fn global_risks_of_jcgm_106() {
    let bad = Beyond::Outside(1499.8, 1500.2);
    for (guard, consumer, producer) in
        [(0.0, 0.01894220671702911, 0.03720780017805775), (0.08, 0.0004686335988703545, 0.2476696402011523)]
    {
        let accepted = [(1499.8 + guard, 1500.2 - guard)];
        let (got_consumer, got_producer) = risks::global_risks((1500.0, 0.12), 0.04, bad, &accepted).unwrap();
        near(got_consumer, consumer, 1e-9);
        near(got_producer, producer, 1e-9);
    }
}

/// The pieces moved agree with the model solved again at the moved readings.
#[test]
fn moving_is_solving_again() {
    let worth = both(
        &model(Within::Worth { sd: 1.5, df: 8.0 }, LevelPrior::Stated { mean: 40.0, sd: 2.0 }),
        &sums(6, 43.1, 1.4),
    );
    for posterior in [example(), mixture(), worth] {
        for keys in [
            "ask = \"level chance\"\nabove = 45",
            "ask = \"reading chance\"\noutside = \"band\"",
            "ask = \"percentile\"\npercentile = 95\nabove = 45",
        ] {
            let asked = put("linear", keys);
            let subject = asked.subject(&posterior, None);
            let movable = Movable::of(asked.question.as_ref(), &subject).unwrap();
            for by in [-3.0, -0.4, 0.0, 1.1, 2.5] {
                let again = both(&posterior.model, &moved::moved(&posterior.readings, by));
                let wanted = value(&asked.figures(&again), "chance");
                within(movable.chance(Move::readings(by)), wanted, 1e-9);
            }
        }
    }
    // A prior moved, or stretched: a model with that prior.
    let asked = put("linear", "ask = \"level chance\"\nabove = 45");
    let posterior = example();
    let movable = Movable::of(asked.question.as_ref(), &asked.subject(&posterior, None)).unwrap();
    let with = |mean: f64, sd: f64| {
        let other = both(&model(Within::Known(1.5), LevelPrior::Stated { mean, sd }), &posterior.readings);
        value(&asked.figures(&other), "chance")
    };
    near(movable.chance(Move::prior(3.0)), with(43.0, 2.0), 1e-11);
    near(movable.chance(Move::stretch(0.5, 40.0)), with(40.0, 1.0), 1e-11);
    near(movable.chance(Move::stretch(7.0, 40.0)), with(40.0, 14.0), 1e-11);
}

/// Every verdict's range found by brute force along the readings' mean.
#[test]
fn ranges_are_where_the_verdicts_are() {
    for posterior in [example(), mixture()] {
        for keys in [
            ABOVE.to_string(),
            ABOVE.replace("above = 45", "outside = \"band\""),
            "ask = \"level interval\"\n[question.rule]\nverdicts = [ { say = \"a\", lower_above = \"guideline\" }, \
             { say = \"b\", upper_below = 44 }, { say = \"c\" } ]"
                .to_string(),
        ] {
            let asked = put("linear", &keys);
            let subject = asked.subject(&posterior, None);
            let world = World::new(asked.question.as_ref(), rule_of(&asked), &subject).unwrap();
            let ranges = world.ranges(&world.crossings().unwrap()).unwrap();
            assert!(ranges.len() >= 2, "{keys}: {ranges:?}");
            for step in 0..300 {
                let mean = 35.0 + 0.05 * f64::from(step) + 0.003;
                let there = both(&posterior.model, &moved::moved(&posterior.readings, mean - 43.1));
                let given = rule::decide(rule_of(&asked), &asked.figures(&there), &asked.plan, "nitrate", &[]);
                let range = ranges.iter().find(|range| range.from < mean && mean <= range.to).unwrap();
                assert_eq!(given.say.as_deref(), Some(rule_of(&asked).verdicts[range.verdict].say.as_str()), "{mean}");
            }
        }
    }
}

/// The operating characteristic against plain simulation: x̄ drawn about a true level, the rule applied.
#[test]
fn operating_characteristic_by_simulation() {
    let posterior = example();
    let asked = put("linear", ABOVE);
    let subject = asked.subject(&posterior, None);
    let rule = rule_of(&asked);
    let figures = rule_figures(asked.question.as_ref(), rule, &subject);
    let Some(Item::Rows(rows)) = figures.get("operating_characteristic") else { panic!("{figures:?}") };
    let mut pcg = Pcg::new(11);
    for row in rows.iter().step_by(10) {
        let level = value(row, "level");
        let chances = numbers(row, "chances");
        within(chances.iter().sum::<f64>(), 1.0, 1e-12);
        let draws = 4000;
        let mut counts = vec![0.0; chances.len()];
        for _ in 0..draws {
            let mean = level + (2.25f64 / 6.0).sqrt() * pcg.normal();
            let there = both(&posterior.model, &sums(6, mean, 1.4));
            let index = rule::first_holding(rule, &asked.figures(&there), &asked.plan, "nitrate").unwrap();
            counts[index] += 1.0;
        }
        for (chance, count) in chances.iter().zip(counts) {
            let draws = f64::from(draws);
            within(count / draws, *chance, 5.0 * (chance * (1.0 - chance) / draws).sqrt() + 1e-9);
        }
    }
}

#[test]
fn a_tipping_prior_tips() {
    let posterior = example();
    let asked = put("linear", ABOVE);
    let subject = asked.subject(&posterior, None);
    let rule = rule_of(&asked);
    let figures = rule_figures(asked.question.as_ref(), rule, &subject);
    let given = |mean: f64, sd: f64| -> Given {
        let other = both(&model(Within::Known(1.5), LevelPrior::Stated { mean, sd }), &posterior.readings);
        rule::decide(rule, &asked.figures(&other), &asked.plan, "nitrate", &[])
    };
    assert_eq!(given(40.0, 2.0).say.as_deref(), Some("not above"));
    let tipping = value(&figures, "tipping_prior_mean");
    assert_eq!(given(tipping - 1e-6, 2.0).say.as_deref(), Some("not above"));
    assert_eq!(given(tipping + 1e-6, 2.0).say.as_deref(), Some("not decided"));
    // Nothing that widens or narrows a prior below the readings can bring them above the limit.
    assert_eq!(why(&figures, "tipping_prior_readings").reason, "no size of the prior changes the verdict");
    // Readings above the limit, a prior below: a narrower prior tips the verdict.
    let high = both(&posterior.model, &sums(6, 46.8, 1.4));
    let subject = asked.subject(&high, None);
    let figures = rule_figures(asked.question.as_ref(), rule, &subject);
    let readings = value(&figures, "tipping_prior_readings");
    let sd = (2.25 / readings).sqrt();
    let with = |sd: f64| {
        let other = both(&model(Within::Known(1.5), LevelPrior::Stated { mean: 40.0, sd }), &high.readings);
        rule::decide(rule, &asked.figures(&other), &asked.plan, "nitrate", &[]).say
    };
    assert_ne!(with(sd * 1.0001), with(sd * 0.9999));
}

#[test]
fn verdicts_are_given_in_order_and_held_back() {
    let posterior = example();
    let keys = ABOVE.replace("agreed = 2024-11-30", "agreed = 2024-11-30\nhold_on = [\"prior conflict\"]");
    let asked = put("linear", &keys);
    let rule = rule_of(&asked);
    let figures = asked.figures(&posterior);
    let given = rule::decide(rule, &figures, &asked.plan, "nitrate", &[]);
    assert_eq!(given, Given { say: Some("not above".into()), fail: false, why: None });
    let held = rule::decide(rule, &figures, &asked.plan, "nitrate", &["normality", "prior conflict"]);
    assert_eq!(held.say.as_deref(), Some("not decided"));
    assert!(held.why.unwrap().contains("prior conflict"));
    let absent = Figures::default().number(
        "chance",
        Err(Absent::because("no prior")),
        super::super::figures::Meaning::Chance,
    );
    let none = rule::decide(rule, &absent, &asked.plan, "nitrate", &[]);
    assert_eq!(none, Given { say: None, fail: false, why: Some("no prior".into()) });
    // Unrounded figures are compared: 0.05 itself is not above 5 %, the next number is.
    let at = |chance: f64| {
        let figures = Figures::default().number("chance", Ok(chance), super::super::figures::Meaning::Chance);
        rule::decide(rule, &figures, &asked.plan, "nitrate", &[]).say.unwrap()
    };
    assert_eq!(at(0.05), "not above");
    assert_eq!(at(0.05000000000000001), "not decided");
    assert_eq!(at(0.95), "above");
    let near = |chance: f64| {
        let figures = Figures::default().number("chance", Ok(chance), super::super::figures::Meaning::Chance);
        rule::near_threshold(rule, &figures)
    };
    assert_eq!(near(0.0496), Some(0.05));
    assert_eq!(near(0.0494), None);
    assert_eq!(near(0.9504), Some(0.95));
}
