//! The checks as the review makes them, on the demos: which numbers reach which check. The expected values were
//! computed from the demos' data files by an independent script (Python, SciPy 1.17.1: `stats.chi2`, and
//! `integrate.quad` over the between sd), not by this program.

use reassay::checks::Check;
use reassay::findings::Findings;
use std::path::Path;

fn findings(spec: &str) -> Findings {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("specs").join(spec);
    reassay::review::run(&path, spec, 2).expect("the demo is reviewed")
}

fn check<'f>(findings: &'f Findings, series: &str, id: &str) -> &'f Check {
    let series = findings.series.iter().find(|found| found.name == series).expect("the series");
    series.checks.iter().find(|check| check.id == id).expect("the check was made")
}

fn near(got: Option<f64>, wanted: f64) {
    let got = got.expect("a number");
    assert!((got - wanted).abs() <= 1e-9 * wanted.abs(), "{got} {wanted}");
}

#[test]
fn summaries_and_batches_reach_the_checks_as_sds_and_points() {
    let concrete = findings("concrete.toml");
    let bartlett = check(&concrete, "Ashlode", "Bartlett");
    near(bartlett.statistic, 12.535021355777655);
    near(bartlett.p, 0.25084292179915646);
    // The file has decimal commas; the readings are still printed numbers.
    assert_eq!(check(&concrete, "Ashlode", "rounding").why, None);
}

#[test]
fn a_certificate_with_its_own_uncertainty_is_held_against_the_prior() {
    let weights = findings("weights.toml");
    near(check(&weights, "K1-11", "prior conflict").p, 0.015614080946296616);
}

/// By the definition of the check: the ends are the 2.5 % and 97.5 % points of a reading before the period.
#[test]
fn the_interval_of_the_prior_predictive_check_is_the_one_it_names() {
    let weights = findings("weights.toml");
    let found = check(&weights, "K1-11", "prior predictive");
    let series = weights.series.iter().find(|series| series.name == "K1-11").expect("the series");
    let prior = series.prior.as_ref().expect("a prior");
    let law = prior.reading(reassay::posterior::When::This, 1, None).expect("a law");
    for (name, chance) in [("interval from", 0.025), ("interval to", 0.975)] {
        let end = found.extra.iter().find(|(own, _)| *own == name).expect("the end").1;
        assert!((law.cdf(end) - chance).abs() < 1e-9, "{name}: {}", law.cdf(end));
    }
}
