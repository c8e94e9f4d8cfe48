//! Next readings: intervals for one, for all of several, for their mean; factors of σ; chances.

use super::asked::{Spec, answer, answers, linear};
use super::{case, cases_of, columns};

fn sample(n: f64, mean: f64, sd: f64) -> Spec {
    linear().summary(format!("n = {n:.0}, mean = {mean:?}, sd = {sd:?}")).within("readings").flat()
}

fn all_of(m: f64) -> String {
    format!("\"reading interval\"\nreadings = {m:.0}\nof = \"all\"")
}

#[test]
fn berthouex_and_brown_21_2() {
    let spec = sample(5.0, 28.4, 1.18)
        .ask("all", &all_of(10.0))
        .ask("mean", "\"reading interval\"\nreadings = 5\nof = \"mean\"");
    let given = answer("bb-21-2", spec);
    for (id, question) in [("j-bb-ex21.2-all10", "all"), ("j-bb-ex21.2-mean5", "mean")] {
        let case = case(id);
        let (lo, hi) =
            (given.at(&format!("answers/{question}/lower")), given.at(&format!("answers/{question}/upper")));
        case.hold("lo", lo, 1e-11);
        case.hold("hi", hi, 1e-11);
        case.hold("factor", (hi - 28.4) / 1.18, 1e-10);
    }
}

#[test]
fn factors_of_hahn_and_meeker() {
    let cases = [cases_of("j-hm-n5-"), cases_of("j-hm-single-")].concat();
    let specs: Vec<Spec> =
        cases.iter().map(|c| sample(c.input("n"), 0.0, 1.0).ask("next", &all_of(c.input("m")))).collect();
    for (case, given) in cases.iter().zip(answers("hahn-meeker", &specs)) {
        case.hold("factor", given.at("answers/next/upper"), 1e-10);
        case.hold("factor", -given.at("answers/next/lower"), 1e-10);
    }
}

#[test]
fn one_sided_factors_for_all_of_the_next() {
    let cases = cases_of("j-one-sided-");
    let keys = |m: f64| format!("{}\ninterval = \"upper bound\"", all_of(m));
    let specs: Vec<Spec> =
        cases.iter().map(|c| sample(c.input("n"), 0.0, 1.0).ask("next", &keys(c.input("m")))).collect();
    for (case, given) in cases.iter().zip(answers("one-sided-next", &specs)) {
        case.hold("factor", given.at("answers/next/upper"), 1e-10);
    }
}

#[test]
fn factors_for_the_within_sd() {
    let cases = cases_of("j-bb-table21.3-");
    let specs: Vec<Spec> = cases
        .iter()
        .map(|case| sample(case.input("n"), 7.0, 1.0).ask("sd", "\"sd interval\"\nsd = \"within\""))
        .collect();
    for (case, given) in cases.iter().zip(answers("sd-factors", &specs)) {
        case.hold("k1", given.at("answers/sd/lower"), 1e-11);
        case.hold("k2", given.at("answers/sd/upper"), 1e-11);
    }
}

#[test]
fn circuit_packs() {
    let spec = sample(5.0, 50.10, 1.31)
        .ask("ci-mean", "\"level interval\"")
        .ask("pi-single", "\"reading interval\"")
        .ask("pi-all10", &all_of(10.0));
    let given = answer("circuit-packs", spec);
    for question in ["ci-mean", "pi-single", "pi-all10"] {
        let case = case(&format!("j-hm-circuit-pack-{question}"));
        let (lo, hi) =
            (given.at(&format!("answers/{question}/lower")), given.at(&format!("answers/{question}/upper")));
        case.hold("lo", lo, 1e-12);
        case.hold("hi", hi, 1e-12);
    }
}

#[test]
fn latex_paint() {
    let case = case("j-walpole-paint");
    let spec = linear()
        .values(&columns("latex-paint.csv").remove(0))
        .within("readings")
        .flat()
        .ask("next", "\"reading interval\"");
    let given = answer("paint", spec);
    case.hold("mean", given.at("readings/mean"), 1e-14);
    case.hold("s", given.at("readings/sd"), 1e-13);
    case.hold("lo", given.at("answers/next/lower"), 1e-12);
    case.hold("hi", given.at("answers/next/upper"), 1e-12);
}

#[test]
fn chances_of_the_next_readings() {
    let vague = sample(8.0, 41.2, 3.1)
        .ask("next", "\"reading chance\"\nabove = 50")
        .ask("level", "\"level chance\"\nabove = 50")
        .ask("any", "\"reading chance\"\nabove = 50\nreadings = 4\nat_least = 1");
    let known = linear()
        .summary("n = 6, mean = 43.1, sd = 1.5")
        .within_sd(1.5)
        .stated(40.0, 2.0)
        .ask("next", "\"reading chance\"\nabove = 45")
        .ask("level", "\"level chance\"\nabove = 45")
        .ask("mean", "\"reading chance\"\nabove = 45\nreadings = 3\nof = \"mean\"")
        .ask("count", "\"count beyond\"\nabove = 45\nreadings = 3");
    let given = answers("next", &[vague, known]);
    let vague = case("j-next-exceeds-t");
    vague.hold("P_next>L", given[0].at("answers/next/chance"), 1e-11);
    vague.hold("P_mu>L", given[0].at("answers/level/chance"), 1e-11);
    vague.hold("P_any_of_next_4>L", given[0].at("answers/any/chance"), 1e-11);
    let known = case("j-next-exceeds-normal");
    known.hold("post_mean", given[1].at("posterior/level/mean"), 1e-14);
    known.hold("post_sd", given[1].at("posterior/level/sd"), 1e-14);
    known.hold("P_next>L", given[1].at("answers/next/chance"), 1e-12);
    known.hold("P_mu>L", given[1].at("answers/level/chance"), 1e-12);
    known.hold("P_mean_of_next3>L", given[1].at("answers/mean/chance"), 1e-12);
    known.hold("P_max_of_next3<L", given[1].at("answers/count/chances/0"), 1e-12);
}

/// EN 206: the mean of 15 results and each of them against the criteria, with the true mean and σ known. "Known" is
/// a prior with an sd of 10⁻⁶.
#[test]
fn acceptance_of_concrete() {
    let case = case("m-en206-oc-point");
    let spec = linear()
        .within_sd(3.5)
        .stated(35.7, 1e-6)
        .ask("mean", "\"reading chance\"\nabove = 35.18\nreadings = 15\nof = \"mean\"")
        .ask("single", "\"reading chance\"\nbelow = 30")
        .ask("all", "\"count beyond\"\nbelow = 26\nreadings = 15");
    let given = answer("en-206", spec);
    case.hold("P_mean_passes", given.at("answers/mean/chance"), 1e-11);
    case.hold("P_single_below_fck", given.at("answers/single/chance"), 1e-11);
    case.hold("P_all15_above_fck-4", given.at("answers/all/chances/0"), 1e-11);
    let limits = self::case("m-en206-s15-limits");
    let at =
        |s: f64| linear().summary(format!("n = 15, mean = 40, sd = {s:?}")).within_sd(1.0).stated(40.0, 1.0);
    for given in answers("en-206-s15", &[at(limits.computed("lower")), at(limits.computed("upper"))]) {
        let p = given.at("checks/within sd/p");
        assert!((p - 0.05).abs() < 1e-13, "{p}");
    }
}
