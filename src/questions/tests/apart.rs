//! Changes, differences, rankings and plans: closed forms, published cases and plain simulation.

use super::*;
use crate::data::SeriesData;
use crate::math::normal;
use crate::prior::{Between, Pattern, Periods};

fn data(periods: &[(&str, Evidence)]) -> SeriesData {
    let periods = periods
        .iter()
        .map(|(name, evidence)| PeriodData {
            period: Period::new(name),
            evidence: evidence.clone(),
            restored: None,
            facts: Facts { n: evidence.n().unwrap_or(0), ..Facts::default() },
            readings: Vec::new(),
        })
        .collect();
    SeriesData { name: "nitrate".into(), periods }
}

fn answer(keys: &str, posterior: &Posterior, data: &SeriesData) -> Figures {
    let asked = put("linear", keys);
    let subject = Subject {
        data: Some(data),
        period: data.period(&Period::new("2025")),
        ..asked.subject(posterior, None)
    };
    asked.question.answer(&subject)
}

fn within_known(mean: f64) -> Evidence {
    Evidence::Sums { n: 6, mean, ss: Some(11.0), rest: 0.0 }
}

/// The page's worked number, and which period is the previous one.
#[test]
fn change_without_a_model_of_periods() {
    let all = data(&[
        ("2022", within_known(40.0)),
        ("2023", Evidence::Sums { n: 5, mean: 41.9, ss: Some(9.0), rest: 0.0 }),
        ("2024", Evidence::Nothing),
        ("2025", within_known(43.1)),
    ]);
    let posterior = both(&model(Within::Known(1.5), LevelPrior::Flat), &within_known(43.1));
    let figures = answer("ask = \"change\"\nband = 1.0", &posterior, &all);
    within(value(&figures, "estimate"), 1.2, 1e-12);
    let sd = 0.9082951062292476;
    near(value(&figures, "chance"), 0.9067754093900093, 1e-11);
    near(value(&figures, "lower"), 1.2 - 1.959963984540054 * sd, 1e-11);
    let band = normal::cdf((1.0 - 1.2) / sd) - normal::cdf((-1.0 - 1.2) / sd);
    near(value(&figures, "band_chance"), band, 1e-11);
    let figures = answer("ask = \"change\"\nagainst = 2022\nbelow = 3", &posterior, &all);
    within(value(&figures, "estimate"), 3.1, 1e-12);
    near(value(&figures, "chance"), normal::cdf(-0.1 / (1.5 * (2.0f64 / 6.0).sqrt())), 1e-10);
    let missing = answer("ask = \"change\"\nagainst = 2021", &posterior, &all);
    assert_eq!(why(&missing, "estimate").reason, "the series has no readings in 2021");
    let long_run = answer("ask = \"change\"\nagainst = \"long run\"", &posterior, &all);
    assert!(why(&long_run, "estimate").reason.contains("long-run mean"));
}

/// A history with τ known: both levels drawn from their joint law, weighted by all readings.
#[test]
fn change_with_a_history_by_simulation() {
    let history = [("2022", 41.0), ("2023", 42.5), ("2024", 40.6)];
    let mut all: Vec<(&str, Evidence)> =
        history.iter().map(|(name, mean)| (*name, within_known(*mean))).collect();
    all.push(("2025", within_known(43.1)));
    let all = data(&all);
    let periods = Periods {
        periods: history.iter().map(|(name, mean)| (Period::new(name), within_known(*mean))).collect(),
        pattern: Pattern::AboutAMean,
        between: Between::Known(1.2),
        weight: 1.0,
    };
    let posterior = both(&model(Within::Known(1.5), LevelPrior::Periods(periods)), &within_known(43.1));
    // μ is flat: drawn widely about the means and weighted by the density that is missing.
    let mut pcg = Pcg::new(21);
    let (mut whole, mut rows) = (0.0, Vec::new());
    for _ in 0..400_000 {
        let wide = pcg.normal();
        let mu = 41.8 + 3.0 * wide;
        let levels: Vec<f64> = (0..4).map(|_| mu + 1.2 * pcg.normal()).collect();
        let ln: f64 = [41.0, 42.5, 40.6, 43.1]
            .iter()
            .zip(&levels)
            .map(|(mean, level)| -0.5 * (mean - level) * (mean - level) * 6.0 / 2.25)
            .sum();
        let weight = fm::exp(ln + 0.5 * wide * wide);
        whole += weight;
        rows.push((weight, levels[3] - levels[2], levels[3] - levels[0], levels[3] - mu));
    }
    type Row = (f64, f64, f64, f64);
    let share = |of: &dyn Fn(&Row) -> bool| {
        let p = rows.iter().filter(|row| of(row)).map(|row| row.0).sum::<f64>() / whole;
        let square: f64 =
            rows.iter().map(|row| row.0 * row.0 * if of(row) { (1.0 - p) * (1.0 - p) } else { p * p }).sum();
        (p, square.sqrt() / whole)
    };
    let agree = |got: f64, (wanted, error): (f64, f64)| within(got, wanted, 5.0 * error);
    let previous = answer("ask = \"change\"\nabove = 1.5\nband = [0, 2]", &posterior, &all);
    agree(value(&previous, "chance"), share(&|row| row.1 > 1.5));
    agree(value(&previous, "band_chance"), share(&|row| (0.0..=2.0).contains(&row.1)));
    let upper = value(&previous, "upper");
    agree(0.975, share(&|row| row.1 <= upper));
    let first = answer("ask = \"change\"\nagainst = 2022\nabove = 1", &posterior, &all);
    agree(value(&first, "chance"), share(&|row| row.2 > 1.0));
    let long_run = answer("ask = \"change\"\nagainst = \"long run\"\nabove = 1", &posterior, &all);
    agree(value(&long_run, "chance"), share(&|row| row.3 > 1.0));
}

#[test]
fn ratios_on_the_log_scale() {
    let all = data(&[("2024", within_known(41.9)), ("2025", within_known(43.1))]);
    let log = Model { scale: Scale::Log, ..model(Within::Known(0.3), LevelPrior::Flat) };
    let posterior = both(&log, &Evidence::Sums { n: 4, mean: 2.0, ss: Some(0.2), rest: 0.0 });
    let asked = put("log", "ask = \"change\"\nband = 1.1");
    let earlier = data(&[("2024", Evidence::Sums { n: 4, mean: 1.9, ss: Some(0.2), rest: 0.0 })]);
    let subject = Subject { data: Some(&earlier), ..asked.subject(&posterior, None) };
    let figures = asked.question.answer(&subject);
    let sd = 0.3 * (2.0f64 / 4.0).sqrt();
    near(value(&figures, "estimate"), fm::exp(0.1), 1e-12);
    near(value(&figures, "upper"), fm::exp(0.1 + 1.959963984540054 * sd), 1e-11);
    near(value(&figures, "chance"), normal::cdf(0.1 / sd), 1e-11);
    let ln = fm::ln(1.1);
    near(value(&figures, "band_chance"), normal::cdf((ln - 0.1) / sd) - normal::cdf((-ln - 0.1) / sd), 1e-10);
    assert_eq!(all.periods.len(), 2);
}

fn across(keys: &str, members: &[(&str, &Posterior)]) -> Vec<(String, Figures)> {
    let asked = put("linear", keys);
    let subjects: Vec<Subject<'_>> = members
        .iter()
        .map(|(name, posterior)| Subject { series: name, ..asked.subject(posterior, None) })
        .collect();
    asked.question.across(&subjects).unwrap()
}

/// The worked numbers of `difference` and `ranking`.
#[test]
fn two_series_that_share_nothing() {
    let line = |n: u64, mean: f64| {
        both(&model(Within::Known(0.25), LevelPrior::Flat), &Evidence::Sums { n, mean, ss: None, rest: 0.0 })
    };
    let (a, b) = (line(5, 12.12), line(4, 11.65));
    let members = [("Line A", &a), ("Line B", &b)];
    let rows = across("ask = \"difference\"\nseries = [\"Line A\", \"Line B\"]\nband = 0.2", &members);
    assert_eq!(rows[0].0, "");
    within(value(&rows[0].1, "estimate"), 0.47, 1e-12);
    near(value(&rows[0].1, "chance"), 0.997464892030923, 1e-11);
    let other = across("ask = \"difference\"\nseries = [\"Line B\", \"Line A\"]\nabove = 0", &members);
    near(value(&other[0].1, "chance"), normal::sf(0.47 / 0.16770509831248423), 1e-10);
    let ranks = across("ask = \"ranking\"", &members);
    near(value(&ranks[0].1, "chance"), 0.997464892030923, 1e-9);
    near(value(&ranks[0].1, "expected_rank"), 1.0 + normal::sf(0.47 / 0.16770509831248423), 1e-9);
    let lowest = across("ask = \"ranking\"\nfirst = \"lowest\"", &members);
    near(value(&lowest[1].1, "chance"), 0.997464892030923, 1e-9);
    let missing = across("ask = \"difference\"\nseries = [\"Line A\", \"Line C\"]", &members);
    assert!(why(&missing[0].1, "estimate").reason.contains("Line C"));
}

#[test]
fn a_ranking_by_simulation() {
    let world = [(6u64, 43.1, 40.0), (4, 43.6, 42.0), (9, 42.8, 45.0), (2, 42.0, 42.0)];
    let posteriors: Vec<Posterior> = world
        .iter()
        .map(|(n, mean, prior)| {
            let model = model(Within::Known(1.5), LevelPrior::Stated { mean: *prior, sd: 2.0 });
            both(&model, &Evidence::Sums { n: *n, mean: *mean, ss: None, rest: 0.0 })
        })
        .collect();
    let names = ["A", "B", "C", "D"];
    let members: Vec<(&str, &Posterior)> = names.into_iter().zip(&posteriors).collect();
    let rows = across("ask = \"ranking\"", &members);
    let laws: Vec<(f64, f64)> = world
        .iter()
        .map(|(n, mean, prior)| {
            let v: f64 = 1.0 / (0.25 + *n as f64 / 2.25);
            (v * (prior * 0.25 + mean * *n as f64 / 2.25), v.sqrt())
        })
        .collect();
    let draws = 400_000;
    let (mut first, mut rank) = ([0.0; 4], [0.0; 4]);
    let mut pcg = Pcg::new(31);
    for _ in 0..draws {
        let levels: Vec<f64> = laws.iter().map(|(mean, sd)| mean + sd * pcg.normal()).collect();
        for i in 0..4 {
            let above = levels.iter().filter(|level| **level > levels[i]).count();
            rank[i] += 1.0 + above as f64;
            if above == 0 {
                first[i] += 1.0;
            }
        }
    }
    for i in 0..4 {
        let chance = value(&rows[i].1, "chance");
        let draws = f64::from(draws);
        within(first[i] / draws, chance, 5.0 * (chance * (1.0 - chance) / draws).sqrt());
        within(rank[i] / draws, value(&rows[i].1, "expected_rank"), 5.0 * 1.5 / draws.sqrt());
    }
}

/// A long run with (nearly) nothing else: the next level is N(mean, sd² + between²).
fn before(mean: f64, var: f64, within: Within) -> Posterior {
    let level = LevelPrior::LongRun { mean, sd: (0.25 * var).sqrt(), between_sd: (0.75 * var).sqrt() };
    both(&model(within, level), &Evidence::Nothing)
}

fn needed(posterior: &Posterior, keys: &str) -> Figures {
    ask(&format!("ask = \"readings needed\"\n{keys}"), posterior)
}

/// Montgomery & Runger, Example 8-2 (15.37, so 16); Walpole et al., Example 9.3 (138.3, so 139), both from
/// memory and recomputed, with next to no prior; and the closed form with one: 34.01, so 35.
#[test]
fn sample_sizes_for_a_half_width() {
    let charpy = before(0.0, 4e14, Within::Known(1.0));
    assert_eq!(value(&needed(&charpy, "half_width = 0.5"), "readings_needed"), 16.0);
    let zinc = before(0.0, 4e14, Within::Known(0.3));
    assert_eq!(value(&needed(&zinc, "half_width = 0.05"), "readings_needed"), 139.0);
    let prior = before(40.0, 4.0, Within::Known(1.5));
    let figures = needed(&prior, "half_width = 0.5\ntry = [34, 35]");
    assert_eq!(value(&figures, "readings_needed"), 35.0);
    let Some(Item::Rows(rows)) = figures.get("table") else { panic!("{figures:?}") };
    for (row, n) in rows.iter().zip([34.0, 35.0]) {
        near(value(row, "half_width"), 1.959963984540054 / (0.25f64 + n / 2.25).sqrt(), 1e-13);
    }
    assert!(why(&needed(&prior, "half_width = 0.01\nup_to = 100"), "readings_needed").reason.contains("100"));
}

/// A bias b ~ N(0, u²) common to all readings: however many they are, the level as measured is all they tell, and given
/// it b ~ N(…, u² − u⁴/(v + u²)), v the variance of the true level before them.
#[test]
fn a_bias_leaves_a_half_width_that_no_number_of_readings_lowers() {
    let (v, u2) = (4.0, 0.09f64);
    let plain = before(40.0, v, Within::Known(1.5));
    let biased = both(&Model { bias_sd: 0.3, ..plain.model.clone() }, &Evidence::Nothing);
    let floor = 1.959963984540054 * (u2 - u2 * u2 / (v + u2)).sqrt();
    let figures = needed(&biased, &format!("half_width = {}", 0.999 * floor));
    assert!(why(&figures, "readings_needed").reason.contains("the bias common to all of them leaves 0.58"));
    // And with n readings: the variance of the true level given their mean.
    let figures = needed(&biased, &format!("half_width = {}\ntry = [3, 40]", 1.1 * floor));
    assert!(value(&figures, "readings_needed") > 40.0);
    let Some(Item::Rows(rows)) = figures.get("table") else { panic!("{figures:?}") };
    for (row, n) in rows.iter().zip([3.0, 40.0]) {
        let left = v - v * v / (v + u2 + 2.25 / n);
        near(value(row, "half_width"), 1.959963984540054 * left.sqrt(), 1e-12);
    }
}

const RULED: &str = "[[question]]\nid = \"over\"\nask = \"level chance\"\nabove = 45\n[question.rule]\nverdicts = [ \
                     { say = \"above\", chance_at_least = 0.95 }, { say = \"not above\", chance_at_most = 0.05 }, { say = \"not decided\" } ]\n";

fn planned(posterior: &Posterior, keys: &str) -> Figures {
    let text =
        format!("{RULED}[[question]]\nid = \"plan\"\nask = \"readings needed\"\nrule_of = \"over\"\n{keys}");
    let plan = plan("linear", &text).unwrap();
    let mut faults = Faults::default();
    let questions = read_all(&plan, &mut faults);
    assert!(faults.is_empty(), "{:?}", faults.0);
    let subject = Subject {
        plan: &plan,
        series: "nitrate",
        data: None,
        period: None,
        basis: Basis::Both,
        posterior: Ok(posterior),
    };
    questions[1].1.answer(&subject)
}

/// O'Hagan & Stevens 2001 with a posterior rule: Φ((L − z √v1 − m0)/√(v0 − v1)) and its like, in closed form.
#[test]
fn assurance_in_closed_form() {
    let prior = before(43.0, 4.0, Within::Known(1.5));
    let figures = planned(&prior, "verdict = \"not above\"\nassurance = 0.60\ntry = [4, 12, 50]");
    let Some(Item::Rows(rows)) = figures.get("table") else { panic!("{figures:?}") };
    let assurance = |n: f64| {
        let v1 = 1.0 / (0.25 + n / 2.25);
        let z = 1.6448536269514722;
        let below = normal::cdf((45.0 - z * f64::sqrt(v1) - 43.0) / f64::sqrt(4.0 - v1));
        let above = normal::cdf((43.0 - 45.0 - z * f64::sqrt(v1)) / f64::sqrt(4.0 - v1));
        (above, below)
    };
    for (row, n) in rows.iter().zip([4.0, 12.0, 50.0]) {
        let (above, below) = assurance(n);
        let chances = numbers(row, "chances");
        near(chances[0], above, 1e-8);
        near(chances[1], below, 1e-8);
        near(chances[2], 1.0 - above - below, 1e-8);
    }
    let wanted = (1..200).find(|n| assurance(f64::from(*n)).1 >= 0.60).unwrap();
    assert_eq!(value(&figures, "readings_needed"), f64::from(wanted));
    near(value(&figures, "assurance_limit"), normal::cdf(1.0), 1e-12);
    let never = planned(&prior, "verdict = \"not above\"\nassurance = 0.90");
    assert!(why(&never, "readings_needed").reason.contains("0.841"));
}

/// With an unknown σ: levels, σ, means and sums of squares drawn from what is known before, the rule applied
/// to each posterior solved afresh.
#[test]
fn plans_with_an_unknown_sd_by_simulation() {
    let worth = || Within::Worth { sd: 1.5, df: 8.0 };
    let prior = before(43.5, 4.0, worth());
    let n = 5;
    let figures = planned(&prior, &format!("verdict = \"not above\"\nassurance = 0.5\ntry = [{n}]"));
    let Some(Item::Rows(rows)) = figures.get("table") else { panic!("{figures:?}") };
    let (chances, width) = (numbers(&rows[0], "chances"), value(&rows[0], "half_width"));
    let mut pcg = Pcg::new(41);
    let draws = 1500;
    let (mut counts, mut sum, mut square) = ([0.0; 3], 0.0, 0.0);
    let level = LevelPrior::Stated { mean: 43.5, sd: 2.0 };
    for _ in 0..draws {
        let sigma = (8.0 * 2.25 / pcg.chi_square(8)).sqrt();
        let theta = 43.5 + 2.0 * pcg.normal();
        let mean = theta + sigma / (n as f64).sqrt() * pcg.normal();
        let ss = sigma * sigma * pcg.chi_square(n as u32 - 1);
        let posterior =
            both(&model(worth(), level.clone()), &Evidence::Sums { n, mean, ss: Some(ss), rest: 0.0 });
        let chance = value(&ask("ask = \"level chance\"\nabove = 45", &posterior), "chance");
        let index = if chance >= 0.95 {
            0
        } else if chance <= 0.05 {
            1
        } else {
            2
        };
        counts[index] += 1.0;
        let interval = ask("ask = \"level interval\"", &posterior);
        let half = 0.5 * (value(&interval, "upper") - value(&interval, "lower"));
        sum += half;
        square += half * half;
    }
    let draws = f64::from(draws);
    for (chance, count) in chances.iter().zip(counts) {
        within(count / draws, *chance, 5.0 * (chance * (1.0 - chance) / draws).sqrt());
    }
    let mean = sum / draws;
    within(mean, width, 5.0 * ((square / draws - mean * mean) / draws).sqrt());
}
