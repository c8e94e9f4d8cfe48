//! Examples whose answers are known from outside: an alternative on the log scale, and readings rounded to a wide
//! step. Expected values by mpmath at 25 digits, from the formulas (the normal posterior of the logarithms; the
//! product of the chances of the ranges under a flat prior), not by this program.

use reassay::findings::Findings;
use reassay::questions::figures::Figures;
use std::path::Path;

fn findings(spec: &str) -> Findings {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("specs").join(spec);
    reassay::review::run(&path, spec, 1).expect("the example is reviewed")
}

fn near(figures: &Figures, name: &str, wanted: f64) {
    let got = figures.value(name).expect("a number");
    assert!((got - wanted).abs() <= 1e-10 * wanted.abs(), "{name}: {got} {wanted}");
}

#[test]
fn an_alternative_on_the_log_scale_is_computed_on_it() {
    let findings = findings("50-alternative-log-scale.toml");
    let under = findings.series[0].sensitivity.iter().find(|under| under.alternative == "lognormal");
    let answers = &under.expect("the alternative").answers;
    let level = &answers[0].1;
    near(level, "estimate", 144.62522284437658);
    near(level, "lower", 100.65533598437133);
    near(level, "upper", 207.80274466555125);
    near(&answers[1].1, "chance", 0.02199447992360042);
}

#[test]
fn an_alternative_that_cannot_stand_on_its_scale_says_so() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("specs");
    let text = std::fs::read_to_string(root.join("50-alternative-log-scale.toml")).expect("the example");
    let desk = std::env::temp_dir().join(format!("reassay-scale-{}", std::process::id()));
    std::fs::create_dir_all(&desk).expect("a folder");
    let review = |text: &str| {
        let path = desk.join("spec.toml");
        std::fs::write(&path, text).expect("a file");
        reassay::review::run(&path, "spec.toml", 1)
    };
    // A reading of 0 has no logarithm: that alternative alone is left out, with the reason.
    let findings = review(&text.replace("[120, 85,", "[0, 85,")).expect("the review itself stands");
    let under = findings.series[0].sensitivity.iter().find(|under| under.alternative == "lognormal");
    let why = under.expect("the alternative").why.clone().expect("a reason");
    assert!(why.contains("log scale"), "{why}");
    // The general prior is stated on the linear scale and cannot be taken over.
    let without: Vec<&str> = text.lines().filter(|line| !line.starts_with("prior  = {")).collect();
    let faults = review(&without.join("\n")).expect_err("the prior does not fit");
    let message = &faults.0[0].message;
    assert!(message.contains("the alternative \"lognormal\" cannot stand on its scale"), "{message}");
    let _ = std::fs::remove_dir_all(desk);
}

#[test]
fn readings_rounded_to_a_wide_step_count_as_all_that_rounds_to_them() {
    let findings = findings("82-step.toml");
    let level = &findings.series[0].answers[0].figures;
    near(level, "estimate", 80.06248590878064);
    near(level, "lower", 79.83170197054769);
    near(level, "upper", 80.2932546417134);
    assert!(findings.cautions.iter().any(|caution| caution.code == "rounded-widely"));
}
