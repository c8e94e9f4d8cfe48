//! Conjugate updating with an unknown sd (JCSS Probabilistic Model Code, ISO 12491), mixtures, power priors and
//! elicited quantiles.

use super::asked::{Spec, answer, answers, linear, log};
use super::{case, cases_of};

#[test]
fn concrete_of_holicky_with_a_prior_of_the_spread() {
    // n' = 0: a flat prior of the level; s' = 4.4 is worth 6 degrees of freedom.
    let case = case("b-holicky-concrete-bayes");
    let spec = linear()
        .summary("n = 5, mean = 29.2, sd = 4.6")
        .within_worth(4.4, "6")
        .flat()
        .ask("strength", "\"characteristic value\"");
    let given = answer("holicky-prior", spec);
    case.hold("x_0.05", given.at("answers/strength/estimate"), 1e-12);
    case.hold("m2", given.at("posterior/level/mean"), 1e-14);
    // Student's t with nu'' df about m'' with scale s''/√n'': its variance is s''²/n'' · nu''/(nu'' − 2).
    let (nu, n) = (case.computed("nu2"), case.computed("n2"));
    let sd = given.at("posterior/level/sd");
    case.hold("s2", sd * (n * (nu - 2.0) / nu).sqrt(), 1e-12);
}

#[test]
fn priors_of_the_jcss_code() {
    let cases = cases_of("b-jcss-prior-");
    let specs: Vec<Spec> = cases
        .iter()
        .map(|case| {
            log()
                .within_worth(case.input("s"), &format!("{:?}", case.input("nu")))
                .worth(case.input("m"), case.input("n"))
                .ask("5", "\"characteristic value\"\npercentile = 5")
                .ask("50", "\"characteristic value\"\npercentile = 50")
                .ask("95", "\"characteristic value\"\npercentile = 95")
        })
        .collect();
    for (case, given) in cases.iter().zip(answers("jcss-priors", &specs)) {
        case.hold("x_0.05_MPa", given.at("answers/5/estimate"), 1e-12);
        case.hold("median_MPa", given.at("answers/50/estimate"), 1e-13);
        case.hold("x_0.95_MPa", given.at("answers/95/estimate"), 1e-12);
    }
}

#[test]
fn an_update_by_the_jcss_code() {
    let ready_mixed = case("b-jcss-update-C25");
    let first = log()
        .values(&ready_mixed.inputs("sample_MPa"))
        .within_worth(0.12, "10")
        .worth(3.65, 3.0)
        .ask("strength", "\"characteristic value\"")
        .ask("low", "\"reading chance\"\nbelow = 25");
    let round = case("b-jcss-update-formula-check");
    let second = linear()
        .summary("n = 6, mean = 33.5, sd = 3.1")
        .within_worth(4.0, "8")
        .worth(30.0, 2.0)
        .ask("strength", "\"characteristic value\"");
    let given = answers("jcss-updates", &[first, second]);
    ready_mixed.hold("x_0.05_MPa", given[0].at("answers/strength/estimate"), 1e-12);
    ready_mixed.hold("P_X<25MPa", given[0].at("answers/low/chance"), 1e-10);
    ready_mixed.hold("m2", given[0].at("posterior/level/log_mean"), 1e-13);
    round.hold("x_0.05", given[1].at("answers/strength/estimate"), 1e-12);
    round.hold("m2", given[1].at("posterior/level/mean"), 1e-14);
    for (case, sd) in
        [(ready_mixed, given[0].at("posterior/level/log_sd")), (round, given[1].at("posterior/level/sd"))]
    {
        let (nu, n) = (case.computed("nu2"), case.computed("n2"));
        case.hold("s2", sd * (n * (nu - 2.0) / nu).sqrt(), 1e-11);
    }
}

/// Three years at once under the stated prior; and the same prior put as two earlier readings of 48 whose
/// spread is known from 4 degrees of freedom, with the years before 2025 as a history whose levels do not differ:
/// 4 · 0.8 = 5 · 0.8², and the two equal readings add one degree of freedom and no square.
#[test]
fn year_by_year_is_as_all_at_once() {
    let case = case("b-carry-forward-equals-batch");
    let years = [
        ["47.9", "48.6", "47.2", "48.1"].as_slice(),
        ["49.0", "48.4", "49.3"].as_slice(),
        ["48.8", "47.7", "48.9", "48.2", "49.1"].as_slice(),
    ]
    .map(|year| year.iter().map(|reading| (*reading).to_owned()).collect::<Vec<String>>());
    let asked = |spec: Spec| {
        spec.ask("level", "\"level interval\"")
            .ask("reading", "\"reading interval\"\nprobability = 0.9")
            .ask("beyond", "\"reading chance\"\nabove = 50")
    };
    let at_once = linear().values(&years.concat()).within_worth(0.8, "5").worth(48.0, 2.0);
    let year_by_year = linear()
        .period(2022, "n = 2, mean = 48, sd = 0")
        .values_in(2023, &years[0])
        .values_in(2024, &years[1])
        .values(&years[2])
        .within_worth(0.8_f64.sqrt(), "4")
        .history("between = \"none\"");
    for given in answers("year-by-year", &[asked(at_once), asked(year_by_year)]) {
        case.hold("m2", given.at("answers/level/estimate"), 1e-13);
        case.hold("level_q025", given.at("answers/level/lower"), 1e-12);
        case.hold("level_q975", given.at("answers/level/upper"), 1e-12);
        case.hold("pred_q05", given.at("answers/reading/lower"), 1e-12);
        case.hold("pred_q95", given.at("answers/reading/upper"), 1e-12);
        case.hold("P_next>50", given.at("answers/beyond/chance"), 1e-10);
    }
}

#[test]
fn mixture_priors() {
    let cases = [case("k-robust-mixture-conflict"), case("k-robust-mixture-agreement")];
    let spec = |y: f64| {
        linear()
            .summary(format!("mean = {y:?}, uncertainty = 1.2"))
            .within("none")
            .prior(
                "from = \"mixture\"\nparts = [\n\
                 { weight = 0.8, from = \"stated\", mean = 50, sd = 1, basis = \"the case\" },\n\
                 { weight = 0.2, from = \"stated\", mean = 50, sd = 10, basis = \"the case\" } ]",
            )
            .ask("level", "\"level interval\"")
    };
    let specs = cases.map(|case| spec(case.input("y")));
    for (case, given) in cases.iter().zip(answers("mixtures", &specs)) {
        case.hold("mean", given.at("answers/level/estimate"), 1e-13);
        case.hold("sd", given.at("posterior/level/sd"), 1e-13);
        case.hold("q_0025", given.at("answers/level/lower"), 1e-12);
        case.hold("q_05", given.at("posterior/level/quantiles/0.5"), 1e-12);
        case.hold("q_0975", given.at("answers/level/upper"), 1e-12);
    }
}

#[test]
fn a_history_with_a_weight() {
    let cases = cases_of("k-power-prior-a");
    let specs: Vec<Spec> = cases
        .iter()
        .map(|case| {
            let spec = linear()
                .period(2024, "n = 12, mean = 49.2, sd = 1.5")
                .summary("n = 6, mean = 50.9, sd = 1.5")
                .within_sd(1.5)
                .ask("level", "\"level interval\"");
            match case.input("a0") {
                0.0 => spec.flat(),
                weight => spec.history(&format!("between = \"none\"\nweight_of_history = {weight:?}")),
            }
        })
        .collect();
    for (case, given) in cases.iter().zip(answers("weights", &specs)) {
        case.hold("mean", given.at("answers/level/estimate"), 1e-14);
        case.hold("sd", given.at("posterior/level/sd"), 1e-14);
        case.hold_within("ess_prior", given.at("influence/prior_readings"), 1e-12);
    }
}

#[test]
fn elicited_quantiles() {
    let quartiles = case("k-elicited-quartiles");
    let three = case("k-elicited-5-50-95");
    let spec = |quantiles: &str| {
        linear()
            .within_sd(1.0)
            .prior(&format!("from = \"quantiles\"\nquantiles = {quantiles}\nbasis = \"the case\""))
            .ask("level", "\"level interval\"")
    };
    let specs = [spec("[[0.25, 48.0], [0.75, 52.0]]"), spec("[[0.05, 41.0], [0.5, 46.0], [0.95, 51.0]]")];
    for (case, given) in [quartiles, three].iter().zip(answers("quantiles", &specs)) {
        case.hold("mean", given.at("prior/level/mean"), 1e-14);
        case.hold("sd", given.at("prior/level/sd"), 1e-14);
    }
}
