//! Normal models of textbooks and standards: known and unknown sd, stated priors, conformity.

use super::asked::{Spec, answer, answers, linear, log};
use super::{case, cases_of, columns};

const LEVEL: &str = "\"level interval\"";

#[test]
fn conformity_of_jcgm_106() {
    let measured = |row: &str| linear().summary(row).within("none");
    let specs = [
        measured("mean = -5.47, uncertainty = 0.05")
            .flat()
            .ask("conforms", "\"level chance\"\nbelow = -5.40"),
        measured("mean = 13.6, uncertainty = 1.8")
            .flat()
            .ask("conforms", "\"level chance\"\nbetween = [12.5, 16.3]"),
        measured("mean = 100.025, uncertainty = 0.008")
            .stated(100.012, 0.010)
            .ask("conforms", "\"level chance\"\nbelow = 100.03"),
    ];
    let given = answers("jcgm-106", &specs);
    case("c-jcgm106-zener").hold("p_c", given[0].at("answers/conforms/chance"), 1e-13);
    case("c-jcgm106-oil").hold("p_c", given[1].at("answers/conforms/chance"), 1e-13);
    let mass = case("c-jcgm106-posterior-mass");
    mass.hold("p_c_upper", given[2].at("answers/conforms/chance"), 1e-12);
    mass.hold("mean", given[2].at("posterior/level/mean"), 1e-15);
    mass.hold("u", given[2].at("posterior/level/sd"), 1e-14);
}

#[test]
fn temperatures_of_the_gum() {
    let case = case("d-gum-temperature-typeA");
    let readings = columns("gum-temperature.csv").remove(0);
    let given = answer("gum", linear().values(&readings).within("readings").flat().ask("level", LEVEL));
    case.hold("mean", given.at("readings/mean"), 1e-14);
    case.hold("s", given.at("readings/sd"), 1e-13);
    case.hold("u", given.at("readings/sd") / 20.0_f64.sqrt(), 1e-13);
    let half = given.at("answers/level/upper") - given.at("answers/level/estimate");
    case.hold("t95_halfwidth", half, 1e-11);
    case.hold("u_bayes_JCGM101_6.4.9", given.at("posterior/level/sd"), 1e-13);
}

#[test]
fn student_factors_of_the_gum() {
    let cases = cases_of("d-gum-t95-nu");
    let specs: Vec<Spec> = cases
        .iter()
        .map(|case| {
            // sd √n makes the standard uncertainty of the mean 1.
            let n = case.input("nu") + 1.0;
            let row = format!("n = {n:.0}, mean = 0, sd = {:?}", n.sqrt());
            linear().summary(row).within("readings").flat().ask("level", LEVEL)
        })
        .collect();
    for (case, given) in cases.iter().zip(answers("gum-t", &specs)) {
        case.hold("t", given.at("answers/level/upper"), 1e-11);
    }
}

#[test]
fn newcomb() {
    let readings = columns("newcomb.csv").remove(0);
    let kept: Vec<String> =
        readings.iter().filter(|x| !["-44", "-2"].contains(&x.as_str())).cloned().collect();
    let spec = |values: &[String]| {
        linear()
            .values(values)
            .within("readings")
            .flat()
            .ask("level", LEVEL)
            .ask("high", "\"level chance\"\nabove = 33")
            .ask("next", "\"reading interval\"")
    };
    let given = answers("newcomb", &[spec(&readings), spec(&kept)]);
    let all = case("e-newcomb-t-interval");
    all.hold("mean", given[0].at("readings/mean"), 1e-14);
    all.hold("s", given[0].at("readings/sd"), 1e-13);
    all.hold("lo", given[0].at("answers/level/lower"), 1e-12);
    all.hold("hi", given[0].at("answers/level/upper"), 1e-12);
    all.hold("P_mu>33", given[0].at("answers/high/chance"), 1e-10);
    all.hold("pred_lo", given[0].at("answers/next/lower"), 1e-11);
    all.hold("pred_hi", given[0].at("answers/next/upper"), 1e-12);
    // Printed from rounded moments.
    all.printed_within("lo", given[0].at("answers/level/lower"), 0.06);
    all.printed_within("hi", given[0].at("answers/level/upper"), 0.06);
    let most = case("e-newcomb-64");
    most.hold("mean", given[1].at("readings/mean"), 1e-14);
    most.hold("s", given[1].at("readings/sd"), 1e-13);
    most.hold("lo", given[1].at("answers/level/lower"), 1e-12);
    most.hold("hi", given[1].at("answers/level/upper"), 1e-12);
}

/// The spread about a known point: a mean square of 13.85² worth 672 degrees of freedom. Before any reading of
/// the period that is the law of σ.
#[test]
fn football_spreads() {
    let case = case("e-bda-football-sigma");
    let spec =
        linear().within_worth(13.85, "672").stated(0.0, 1.0).ask("sd", "\"sd interval\"\nsd = \"within\"");
    let given = answer("football", spec);
    case.hold("lo", given.at("answers/sd/lower"), 1e-12);
    case.hold("hi", given.at("answers/sd/upper"), 1e-12);
    case.hold("median", given.at("posterior/within_sd/quantiles/0.5"), 1e-12);
}

#[test]
fn normal_priors_with_a_known_sd() {
    let cases = cases_of("e-bda-ex2.8-n");
    let students = cases.iter().map(|case| {
        linear()
            .summary(format!("n = {:.0}, mean = 150, sd = 20", case.input("n")))
            .within_sd(20.0)
            .stated(180.0, 40.0)
            .ask("level", LEVEL)
            .ask("next", "\"reading interval\"")
    });
    let ennerdale = linear().summary("mean = 421, uncertainty = 8").within("none").stated(370.0, 20.0);
    let specs: Vec<Spec> = students.chain([ennerdale]).collect();
    let given = answers("normal-priors", &specs);
    for (case, given) in cases.iter().zip(&given) {
        case.hold("mean", given.at("answers/level/estimate"), 1e-14);
        case.hold("sd", given.at("posterior/level/sd"), 1e-14);
        case.hold("lo", given.at("answers/level/lower"), 1e-14);
        case.hold("hi", given.at("answers/level/upper"), 1e-14);
        case.hold("pred_sd", given.at("posterior/next_reading/sd"), 1e-14);
        case.hold("pred_lo", given.at("answers/next/lower"), 1e-13);
        case.hold("pred_hi", given.at("answers/next/upper"), 1e-13);
    }
    let lee = case("e-lee-ennerdale-1");
    let given = &given[cases.len()];
    lee.hold("mean", given.at("posterior/level/mean"), 1e-14);
    lee.hold("sd", given.at("posterior/level/sd"), 1e-14);
    lee.hold("box_p_two_sided", given.at("checks/prior conflict/p"), 1e-12);
    let box_check = case("k-box-ennerdale");
    box_check.hold("p_two_sided", given.at("checks/prior conflict/p"), 1e-12);
    box_check.hold("z", given.at("checks/prior conflict/figures/z"), 1e-12);
}

/// A trial's log odds ratio; on the log scale the level is the odds ratio itself.
#[test]
fn the_great_trial() {
    let case = case("k-great-trial");
    let (prior_sd, u) = (2.0 / 236.7_f64.sqrt(), 2.0 / 30.5_f64.sqrt());
    let logs = linear()
        .summary(format!("mean = -0.736, uncertainty = {u:?}"))
        .within("none")
        .stated(-0.255, prior_sd)
        .ask("benefit", "\"level chance\"\nbelow = 0");
    let ratios = log()
        .summary(format!("log_mean = -0.736, uncertainty = {u:?}"))
        .within("none")
        .stated(-0.255, prior_sd)
        .ask("level", LEVEL);
    let given = answers("great", &[logs, ratios]);
    case.hold("prior_sd", given[0].at("prior/level/sd"), 1e-14);
    case.hold("post_mean", given[0].at("posterior/level/mean"), 1e-14);
    case.hold("post_sd", given[0].at("posterior/level/sd"), 1e-14);
    case.hold("P_logOR<0", given[0].at("answers/benefit/chance"), 1e-13);
    case.hold("box_p", given[0].at("checks/prior conflict/p"), 1e-12);
    case.hold("box_z", given[0].at("checks/prior conflict/figures/z"), 1e-12);
    case.hold("OR", given[1].at("answers/level/estimate"), 1e-14);
    case.hold("OR_lo", given[1].at("answers/level/lower"), 1e-13);
    case.hold("OR_hi", given[1].at("answers/level/upper"), 1e-13);
}

#[test]
fn intervals_of_a_mean() {
    let sleep = linear()
        .values(&columns("student-sleep-diff.csv").remove(0))
        .within("readings")
        .flat()
        .ask("level", LEVEL)
        .ask("below", "\"level chance\"\nbelow = 0");
    let zarr = linear()
        .summary("n = 195, mean = 9.261460, sd = 0.02278881")
        .within("readings")
        .flat()
        .ask("level", LEVEL);
    let charpy = linear().values(&columns("charpy.csv").remove(0)).within_sd(1.0).flat().ask("level", LEVEL);
    let zinc = linear()
        .summary("n = 36, mean = 2.6, sd = 0.3")
        .within_sd(0.3)
        .flat()
        .ask("95", LEVEL)
        .ask("99", "\"level interval\"\nprobability = 0.99");
    let given = answers("means", &[sleep, zarr, charpy, zinc]);
    let student = case("e-student-sleep");
    student.hold("mean", given[0].at("readings/mean"), 1e-14);
    student.hold("s", given[0].at("readings/sd"), 1e-13);
    student.hold("lo", given[0].at("answers/level/lower"), 1e-12);
    student.hold("hi", given[0].at("answers/level/upper"), 1e-12);
    student.hold("P_mu<0", given[0].at("answers/below/chance"), 1e-10);
    student.hold("p_two_sided", 2.0 * given[0].at("answers/below/chance"), 1e-10);
    let heat = case("e-nist-zarr13");
    heat.hold("lo", given[1].at("answers/level/lower"), 1e-13);
    heat.hold("hi", given[1].at("answers/level/upper"), 1e-13);
    let half = given[1].at("answers/level/upper") - 9.261460;
    heat.hold("t", half / (0.02278881 / 195.0_f64.sqrt()), 1e-10);
    let charpy = case("n-montgomery-8-1");
    charpy.hold("mean", given[2].at("readings/mean"), 1e-14);
    charpy.hold("lo", given[2].at("answers/level/lower"), 1e-14);
    charpy.hold("hi", given[2].at("answers/level/upper"), 1e-14);
    let zinc = case("n-walpole-zinc-ci");
    zinc.hold("lo95", given[3].at("answers/95/lower"), 1e-13);
    zinc.hold("hi95", given[3].at("answers/95/upper"), 1e-13);
    zinc.hold("lo99", given[3].at("answers/99/lower"), 1e-13);
    zinc.hold("hi99", given[3].at("answers/99/upper"), 1e-13);
}
