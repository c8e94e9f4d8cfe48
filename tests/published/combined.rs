//! Results combined: weighted means, between sds, eight schools, batches.

use super::asked::{Answers, Spec, answers, linear};
use super::{Case, case, columns, numbers};

const DIFFERENCE: &str = "checks/difference of periods";

/// Means with whole uncertainties as earlier periods; nothing in 2025, so that all answers are the history's.
fn results(values: &[f64], uncertainties: &[f64]) -> Spec {
    let rows: Vec<String> =
        values.iter().zip(uncertainties).map(|(x, u)| format!("mean = {x:?}, uncertainty = {u:?}")).collect();
    linear().earlier(&rows).within("none").ask("level", "\"level interval\"\nof_period = \"long run\"")
}

/// The same with the last result as the period under review, for the check of their difference.
fn results_reviewed(values: &[f64], uncertainties: &[f64]) -> Spec {
    let rows: Vec<String> =
        values.iter().zip(uncertainties).map(|(x, u)| format!("mean = {x:?}, uncertainty = {u:?}")).collect();
    let (last, earlier) = rows.split_last().expect("results");
    linear().earlier(earlier).summary(last).within("none")
}

fn kacker() -> (Vec<f64>, Vec<f64>) {
    let columns = columns("kacker2004.csv");
    (numbers(&columns[0]), numbers(&columns[1]).into_iter().map(f64::sqrt).collect())
}

fn bcg() -> (Vec<f64>, Vec<f64>) {
    let columns = columns("bcg.csv");
    (numbers(&columns[5]), numbers(&columns[6]).into_iter().map(f64::sqrt).collect())
}

/// A between sd that was taken as known, from the widths of the next level and of the long-run mean.
fn plug_in(given: &Answers) -> f64 {
    let (next, long_run) = (given.at("posterior/next_level/sd"), given.at("posterior/long_run_mean/sd"));
    ((next - long_run) * (next + long_run)).sqrt()
}

/// Mean and standard uncertainty of the long run.
fn hold_mean(case: &Case, given: &Answers, relative: f64) {
    case.hold("mean", given.at("posterior/long_run_mean/mean"), relative);
    case.hold("se", given.at("posterior/long_run_mean/sd"), relative);
}

#[test]
fn nine_laboratories_of_kacker() {
    let (x, u) = kacker();
    let spec = |keys: &str| results(&x, &u).history(keys);
    let known =
        format!("between_sd = {:?}\nbasis = \"the case\"", case("d-kacker-paule-mandel").computed("tau"));
    let given = answers(
        "kacker",
        &[
            spec("between = \"moments\""),
            spec("between = \"reml\""),
            spec(&known),
            spec("between = \"uniform\""),
        ],
    );
    let moments = case("d-kacker-dersimonian-laird");
    hold_mean(moments, &given[0], 1e-13);
    moments.hold("tau", plug_in(&given[0]), 1e-12);
    moments.hold("ci_lo", given[0].at("answers/level/lower"), 1e-13);
    moments.hold("ci_hi", given[0].at("answers/level/upper"), 1e-13);
    let reml = case("d-kacker-reml");
    hold_mean(reml, &given[1], 1e-10);
    reml.hold("tau", plug_in(&given[1]), 1e-10);
    // The method of Paule & Mandel is not offered; given its tau, mean and uncertainty follow.
    let paule_mandel = case("d-kacker-paule-mandel");
    hold_mean(paule_mandel, &given[2], 1e-12);
    paule_mandel.hold("ci_lo", given[2].at("answers/level/lower"), 1e-12);
    paule_mandel.hold("ci_hi", given[2].at("answers/level/upper"), 1e-12);
    let flat = case("l-kacker-bayes-flat-tau");
    // The case counts from 62.
    let long_run = |key: &str| given[3].at(&format!("posterior/long_run_mean/{key}")) - 62.0;
    flat.hold_within("mu_mean", long_run("mean"), 2e-11);
    flat.hold("mu_sd", given[3].at("posterior/long_run_mean/sd"), 1e-10);
    flat.hold_within("mu_q2.5", long_run("quantiles/0.025"), 2e-11);
    flat.hold_within("mu_q50", long_run("quantiles/0.5"), 2e-11);
    flat.hold_within("mu_q97.5", long_run("quantiles/0.975"), 2e-11);
    flat.hold("tau_mean", given[3].at("posterior/between_sd/mean"), 1e-9);
    flat.hold("tau_sd", given[3].at("posterior/between_sd/sd"), 1e-9);
    let next = |p: &str| given[3].at(&format!("posterior/next_level/quantiles/{p}")) - 62.0;
    flat.hold_within("new_q2.5", next("0.025"), 5e-11);
    flat.hold_within("new_q50", next("0.5"), 5e-11);
    flat.hold_within("new_q97.5", next("0.975"), 5e-11);
}

#[test]
fn weighted_means_and_their_chi_square() {
    let (x, u) = kacker();
    let codata = columns("codata-g-2018.csv");
    let (g, u_g) = (numbers(&codata[1]), numbers(&codata[2]));
    let none = "between = \"none\"";
    let specs = [
        results_reviewed(&x, &u).history(none),
        results_reviewed(&[10.03, 9.98], &[0.02, 0.03]).history(none),
        results_reviewed(&g, &u_g).history(none),
    ];
    let given = answers("weighted", &specs);
    let [labs, two, newton] =
        [case("d-kacker-weighted-mean-birge"), case("d-two-values"), case("d-codata2018-G")];
    for (case, given) in [(labs, &given[0]), (two, &given[1])] {
        case.hold("mean", given.at("posterior/level/mean"), 1e-14);
        case.hold("u", given.at("posterior/level/sd"), 1e-13);
        case.hold("Q", given.at(&format!("{DIFFERENCE}/statistic")), 1e-12);
    }
    labs.hold("p", given[0].at(&format!("{DIFFERENCE}/p")), 1e-11);
    newton.hold("mean", given[2].at("posterior/level/mean"), 1e-14);
    newton.hold("u_internal", given[2].at("posterior/level/sd"), 1e-12);
    newton.hold("chi2", given[2].at(&format!("{DIFFERENCE}/statistic")), 1e-10);
    // The recommended value uses correlations too; 2e-5 is the band in which the plain mean agrees.
    newton.printed_within("mean", given[2].at("posterior/level/mean"), 2e-5);
}

/// Gelman et al., Bayesian Data Analysis: eight schools. Seven are the history of the eighth.
fn school(this: usize, keys: &str) -> Spec {
    let columns = columns("eight-schools.csv");
    let (y, sigma) = (numbers(&columns[1]), numbers(&columns[2]));
    let row = |j: usize| format!("mean = {:?}, uncertainty = {:?}", y[j], sigma[j]);
    let others: Vec<String> = (0..8).filter(|j| *j != this).map(row).collect();
    linear()
        .earlier(&others)
        .summary(row(this))
        .within("none")
        .history(keys)
        .ask("level", "\"level interval\"")
        .ask("new", "\"level chance\"\nabove = 20\nof_period = \"next\"")
        .ask("new interval", "\"level interval\"\nof_period = \"next\"")
}

#[test]
fn eight_schools() {
    let places = [("A", 0), ("B", 1), ("C", 2), ("E", 4), ("F", 5), ("H", 7)];
    let specs: Vec<Spec> = places.iter().map(|(_, place)| school(*place, "between = \"uniform\"")).collect();
    let given = answers("schools", &specs);
    for ((name, _), given) in places.iter().zip(&given) {
        let case = case(&format!("e-eight-schools-theta-{name}"));
        let level = |key: &str| given.at(&format!("posterior/level/{key}"));
        case.hold("q2.5", level("quantiles/0.025"), 2e-11);
        case.hold("q25", level("quantiles/0.25"), 2e-11);
        case.hold("q50", level("quantiles/0.5"), 2e-11);
        case.hold("q75", level("quantiles/0.75"), 2e-11);
        case.hold("q97.5", level("quantiles/0.975"), 2e-11);
        case.hold("mean", level("mean"), 2e-11);
        case.hold("sd", level("sd"), 2e-11);
        for (key, law) in [("mu", "long_run_mean"), ("tau", "between_sd")] {
            let case = self::case("e-eight-schools-mu-tau");
            let at = |figure: &str| given.at(&format!("posterior/{law}/{figure}"));
            for (name, p) in
                [("q2.5", "0.025"), ("q25", "0.25"), ("q50", "0.5"), ("q75", "0.75"), ("q97.5", "0.975")]
            {
                case.hold(&format!("{key}_{name}"), at(&format!("quantiles/{p}")), 5e-11);
            }
            case.hold(&format!("{key}_mean"), at("mean"), 2e-10);
            case.hold(&format!("{key}_sd"), at("sd"), 2e-9);
        }
        let ninth = self::case("e-eight-schools-new-group");
        ninth.hold("q2.5", given.at("answers/new interval/lower"), 5e-11);
        ninth.hold("q97.5", given.at("answers/new interval/upper"), 5e-11);
        ninth.hold("q50", given.at("posterior/next_level/quantiles/0.5"), 5e-11);
        ninth.hold("P_theta_new>20", given.at("answers/new/chance"), 5e-11);
    }
}

#[test]
fn eight_schools_pooled_and_with_other_priors() {
    let cauchy = "between = \"half-cauchy\"\nbetween_scale = 25\nbasis = \"the case\"";
    let normal = "between = \"half-normal\"\nbetween_scale = 10\nbasis = \"the case\"";
    let specs = [
        school(0, "between = \"none\""),
        school(0, cauchy),
        school(7, cauchy),
        school(0, normal),
        school(7, normal),
    ];
    let given = answers("schools-other", &specs);
    let pooled = case("e-eight-schools-pooled");
    pooled.hold("mean", given[0].at("posterior/level/mean"), 1e-14);
    pooled.hold("se", given[0].at("posterior/level/sd"), 1e-14);
    pooled.hold("Q", given[0].at(&format!("{DIFFERENCE}/statistic")), 1e-13);
    pooled.hold("Q_pvalue_chi2_7", given[0].at(&format!("{DIFFERENCE}/p")), 1e-12);
    for (id, a, h) in [("half-cauchy25", &given[1], &given[2]), ("half-normal10", &given[3], &given[4])] {
        let case = case(&format!("e-eight-schools-{id}"));
        case.hold("theta_A_mean", a.at("posterior/level/mean"), 5e-11);
        case.hold("theta_A_sd", a.at("posterior/level/sd"), 5e-11);
        case.hold("theta_H_mean", h.at("posterior/level/mean"), 5e-11);
        case.hold("theta_H_sd", h.at("posterior/level/sd"), 5e-11);
        for given in [a, h] {
            case.hold("mu_mean", given.at("posterior/long_run_mean/mean"), 5e-11);
            case.hold("mu_sd", given.at("posterior/long_run_mean/sd"), 5e-11);
            case.hold("mu_q2.5", given.at("posterior/long_run_mean/quantiles/0.025"), 5e-11);
            case.hold("mu_q50", given.at("posterior/long_run_mean/quantiles/0.5"), 5e-11);
            case.hold("mu_q97.5", given.at("posterior/long_run_mean/quantiles/0.975"), 5e-11);
            case.hold("tau_mean", given.at("posterior/between_sd/mean"), 5e-11);
            case.hold("tau_q2.5", given.at("posterior/between_sd/quantiles/0.025"), 5e-11);
            case.hold("tau_q50", given.at("posterior/between_sd/quantiles/0.5"), 5e-11);
            case.hold("tau_q97.5", given.at("posterior/between_sd/quantiles/0.975"), 5e-11);
        }
    }
}

#[test]
fn vaccine_trials() {
    let (x, u) = bcg();
    let paule_mandel = case("l-bcg-paule-mandel");
    let known = |tau2: f64| format!("between_sd = {:?}\nbasis = \"the case\"", tau2.sqrt());
    let moments = case("l-bcg-dl");
    // Log odds ratios, and their variances 1/a + 1/b + 1/c + 1/d, from the table's counts.
    let counts = columns("bcg.csv");
    let count = |column: usize| numbers(&counts[column]);
    let cells = count(1).into_iter().zip(count(2)).zip(count(3)).zip(count(4));
    let (mut odds, mut u_odds) = (Vec::new(), Vec::new());
    for (((a, n1), c), n2) in cells {
        let (b, d) = (n1 - a, n2 - c);
        odds.push(reassay::math::fm::ln(a * d / (b * c)));
        u_odds.push((1.0 / a + 1.0 / b + 1.0 / c + 1.0 / d).sqrt());
    }
    let van_houwelingen = case("l-bcg-logor-vanhouwelingen");
    let specs = [
        results(&x, &u).history("between = \"moments\""),
        results(&x, &u).history(&known(paule_mandel.computed("tau2"))),
        results(&x, &u).history("between = \"uniform\""),
        results_reviewed(&x, &u).history("between = \"none\""),
        results_reviewed(&odds, &u_odds).history("between = \"none\""),
        results(&odds, &u_odds).history(&known(van_houwelingen.computed("ml_tau2"))),
    ];
    let given = answers("bcg", &specs);
    hold_mean(moments, &given[0], 1e-12);
    let tau = plug_in(&given[0]);
    moments.hold("tau2", tau * tau, 1e-12);
    moments.hold("ci_lo", given[0].at("answers/level/lower"), 1e-12);
    moments.hold("ci_hi", given[0].at("answers/level/upper"), 1e-12);
    moments.hold("Q", given[3].at(&format!("{DIFFERENCE}/statistic")), 1e-12);
    hold_mean(paule_mandel, &given[1], 1e-12);
    let flat = case("l-bcg-bayes-flat-tau");
    flat.hold("mu_mean", given[2].at("posterior/long_run_mean/mean"), 5e-11);
    flat.hold("mu_sd", given[2].at("posterior/long_run_mean/sd"), 5e-11);
    flat.hold("mu_q2.5", given[2].at("answers/level/lower"), 5e-11);
    flat.hold("mu_q50", given[2].at("posterior/long_run_mean/quantiles/0.5"), 5e-11);
    flat.hold("mu_q97.5", given[2].at("answers/level/upper"), 5e-11);
    flat.hold("tau_mean", given[2].at("posterior/between_sd/mean"), 5e-11);
    flat.hold("tau_sd", given[2].at("posterior/between_sd/sd"), 5e-10);
    flat.hold("new_q2.5", given[2].at("posterior/next_level/quantiles/0.025"), 5e-11);
    flat.hold("new_q50", given[2].at("posterior/next_level/quantiles/0.5"), 5e-11);
    flat.hold("new_q97.5", given[2].at("posterior/next_level/quantiles/0.975"), 5e-11);
    van_houwelingen.hold("fixed_mean", given[4].at("posterior/level/mean"), 1e-12);
    van_houwelingen.hold("fixed_se", given[4].at("posterior/level/sd"), 1e-12);
    // Maximum likelihood is not offered; given its tau, mean and uncertainty follow.
    van_houwelingen.hold("ml_mean", given[5].at("posterior/long_run_mean/mean"), 1e-11);
    van_houwelingen.hold("ml_se", given[5].at("posterior/long_run_mean/sd"), 1e-11);
}

/// Six batches of five, the batches as periods: reml at the pooled sd is the textbook's fit, because the design
/// is balanced.
fn batches(file: &str, sd: f64) -> Spec {
    let columns = columns(file);
    let names = ["A", "B", "C", "D", "E", "F"];
    let spec = names.iter().zip(2019..).fold(linear(), |spec, (name, period)| {
        let of_batch = columns[0].iter().zip(&columns[1]).filter(|(batch, _)| batch == name);
        spec.values_in(period, &of_batch.map(|(_, value)| value.clone()).collect::<Vec<_>>())
    });
    spec.within_sd(sd)
        .history("between = \"reml\"")
        .ask("level", "\"level interval\"\nof_period = \"long run\"")
}

#[test]
fn dyestuff() {
    let [first, second] = [case("l-dyestuff-reml"), case("l-dyestuff2-zero")];
    let specs = [
        batches("dyestuff.csv", first.computed("reml_sigma")),
        batches("dyestuff2.csv", second.computed("reml_sigma")),
    ];
    let given = answers("dyestuff", &specs);
    first.hold("grand_mean", given[0].at("posterior/long_run_mean/mean"), 1e-13);
    first.hold("reml_sigma_b", plug_in(&given[0]), 1e-10);
    first.hold("reml_se", given[0].at("posterior/long_run_mean/sd"), 1e-10);
    second.hold("grand_mean", given[1].at("posterior/long_run_mean/mean"), 1e-13);
    second.hold("reml_sigma_b", plug_in(&given[1]), 0.0);
    second.hold("reml_se", given[1].at("posterior/long_run_mean/sd"), 1e-13);
}

/// One-way analysis of variance as the check of the periods' means.
#[test]
fn analysis_of_variance() {
    let strd = case("f-strd-SiRstv-anova");
    let sirstv = columns("strd-sirstv.csv");
    let instruments = (2021..=2025).fold(linear(), |spec, period| {
        let name = (period - 2020).to_string();
        let rows = sirstv[0].iter().zip(&sirstv[1]).filter(|(instrument, _)| **instrument == name);
        spec.values_in(period, &rows.map(|(_, value)| value.clone()).collect::<Vec<_>>())
    });
    let dyes = columns("dyestuff.csv");
    let batches = ["A", "B", "C", "D", "E", "F"].iter().zip(2020..).fold(linear(), |spec, (name, period)| {
        let rows = dyes[0].iter().zip(&dyes[1]).filter(|(batch, _)| batch == name);
        spec.values_in(period, &rows.map(|(_, value)| value.clone()).collect::<Vec<_>>())
    });
    let pooled = |spec: Spec| {
        spec.within("history").history("between = \"none\"").ask("sd", "\"sd interval\"\nsd = \"within\"")
    };
    let given = answers("anova", &[pooled(instruments), pooled(batches)]);
    // The readings are decimal with an sd of 1/2000 of their size: as binary numbers they are off by 1e-13 of it.
    strd.hold_recomputed("F", given[0].at(&format!("{DIFFERENCE}/statistic")), 1e-12);
    case("l-dyestuff-reml").hold("F", given[1].at(&format!("{DIFFERENCE}/statistic")), 1e-12);
}
