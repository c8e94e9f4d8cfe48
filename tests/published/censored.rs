//! Readings below a limit. The sources give maximum-likelihood estimates of mean and sd; the program gives
//! posterior laws, which are not those. Where σ is stated as the source's sd and the prior is flat, the posterior
//! density of the level is the likelihood, and its most probable value is the source's mean: the two
//! maximise the likelihood together, so each does, given the other. A shortest interval of small probability
//! holds that value in its middle.

use super::asked::{Answers, Spec, answers, linear, log};
use super::{case, cases_of, columns};
use reassay::math::fm;

/// The probability of the interval: its half width is about 0.0025 sd, and its middle differs from the mode by
/// about the square of that.
const NARROW: &str = "\"level interval\"\ninterval = \"shortest\"\nprobability = 0.002";

fn middle(given: &Answers) -> f64 {
    0.5 * (given.at("answers/mode/lower") + given.at("answers/mode/upper"))
}

fn spec_of(start: Spec, values: &[String], sd: f64) -> Spec {
    start.values(values).within_sd(sd).flat().ask("mode", NARROW)
}

#[test]
fn environmental_data() {
    let book = case("i-bb-ex15.4");
    let sulfate = case("i-epa-sulfate");
    let specs = [
        spec_of(linear(), &columns("bb-ex15.4-censored.csv").remove(0), book.computed("sd")),
        spec_of(linear(), &columns("epa-sulfate.csv").remove(0), sulfate.computed("sd")),
    ];
    for (case, given) in [book, sulfate].iter().zip(answers("censored", &specs)) {
        case.hold("mean", middle(&given), 1e-6);
    }
}

/// Cohen's λ(h, γ): readings with mean 1 and mean square γ about it, above a limit of 0, a share h of all being
/// below. Mean 1 − λ, variance γ + λ.
#[test]
fn factors_of_cohen() {
    let cases = cases_of("i-cohen-lambda");
    let specs: Vec<Spec> = cases
        .iter()
        .map(|case| {
            let lambda = case.computed("lambda");
            spec_of(
                linear(),
                &detected(case.input("h"), case.input("gamma")),
                (case.input("gamma") + lambda).sqrt(),
            )
        })
        .collect();
    for (case, given) in cases.iter().zip(answers("cohen", &specs)) {
        case.hold("lambda", 1.0 - middle(&given), 1e-5);
    }
}

/// Ten readings: a share below 0, the others at 1 and at equal distances to both sides of it.
fn detected(below: f64, gamma: f64) -> Vec<String> {
    let censored = (10.0 * below).round() as usize;
    let pairs = (10 - censored) / 2;
    let distance = (gamma * (10 - censored) as f64 / (2 * pairs) as f64).sqrt();
    let mut values = vec!["<0".to_owned(); censored];
    values.extend(vec![format!("{:?}", 1.0 - distance); pairs]);
    values.extend(vec![format!("{:?}", 1.0 + distance); pairs]);
    values.extend(vec!["1".to_owned(); 10 - censored - 2 * pairs]);
    values
}

/// The mode is asked of the logarithms, given as they are; the same readings on the log scale must then have the
/// exponentials of the same quantiles.
#[test]
fn lognormal_concentrations() {
    let ln = |value: f64| format!("{:?}", fm::ln(value));
    // Example 15.5 gives only n, mean and variance of the logarithms: nine readings to each side have them.
    let summary = case("i-bb-ex15.5");
    let (mean, distance) = (summary.input("mean_ln_detected"), summary.input("var_ln_detected").sqrt());
    let value = |ln: f64| format!("{:?}", fm::exp(ln));
    let mut values = vec![value(mean - distance); 9];
    values.extend(vec![value(mean + distance); 9]);
    values.extend(vec!["<18".to_owned(); 12]);
    let mut made = vec![(summary, "mean_ln", values, summary.computed("var_ln").sqrt())];
    for id in ["i-bb-exercise15.6-lognormal", "i-bb-exercise15.7-lognormal"] {
        let case = case(id);
        let below = case.inputs("censored_below").into_iter().map(|limit| format!("<{limit}"));
        let values = case.inputs("detected").into_iter().chain(below).collect();
        made.push((case, "mu", values, case.computed("sigma")));
    }
    let on_logs = |text: &String| match text.strip_prefix('<') {
        Some(limit) => format!("<{}", ln(limit.parse().expect("a limit"))),
        None => ln(text.parse().expect("a reading")),
    };
    let specs: Vec<Spec> = made
        .iter()
        .flat_map(|(_, _, values, sd)| {
            let logs: Vec<String> = values.iter().map(on_logs).collect();
            [spec_of(linear(), &logs, *sd), spec_of(log(), values, *sd)]
        })
        .collect();
    let given = answers("censored-log", &specs);
    for ((case, key, _, _), given) in made.iter().zip(given.chunks(2)) {
        case.hold(key, middle(&given[0]), 1e-6);
        for p in ["0.025", "0.25", "0.5", "0.75", "0.975"] {
            let quantile = |given: &Answers| given.at(&format!("posterior/level/quantiles/{p}"));
            let (of_logs, of_values) = (quantile(&given[0]), fm::ln(quantile(&given[1])));
            assert!(
                (of_logs - of_values).abs() < 1e-12 * of_logs.abs(),
                "{} {p}: {of_logs}, {of_values}",
                case.id
            );
        }
    }
}
