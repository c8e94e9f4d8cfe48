//! Readings needed, assurance, and the risks of a rule.

use super::asked::{Spec, answers, linear};
use super::{case, cases_of};
use reassay::math::normal;

/// What is known of the next level: N(mean, sd²) with nothing read yet. Half of the variance is the long run's.
fn outlook(mean: f64, sd: f64, sigma: f64) -> Spec {
    let half = sd / 2.0_f64.sqrt();
    linear().within_sd(sigma).prior(&format!(
        "from = \"stated\"\nmean = {mean:?}\nsd = {half:?}\nof_period = \"long run\"\nbetween_sd = {half:?}\nbasis = \"the case\""
    ))
}

/// The textbooks know nothing of the level beforehand: here a prior of 10⁷ sd, which moves n by less than 10⁻¹³ of it.
#[test]
fn readings_for_a_half_width() {
    let made = [
        (case("n-montgomery-8-2"), 1e7, 1.0, 0.5),
        (case("n-walpole-zinc"), 1e7, 0.3, 0.05),
        (case("n-posterior-halfwidth"), 2.0, 1.5, 0.5),
    ];
    let specs = made.map(|(_, sd, sigma, half_width)| {
        outlook(0.0, sd, sigma)
            .ask("n", &format!("\"readings needed\"\nhalf_width = {half_width:?}\ntry = [16, 40, 139]"))
    });
    for ((case, sd, sigma, half_width), given) in made.iter().zip(answers("needed", &specs)) {
        case.hold("n", given.at("answers/n/readings_needed"), 0.0);
        // 1/v1 = 1/v0 + n/σ², so that the half widths of the table give n itself: n = σ² ((z/h)² − 1/v0).
        let z2 = (half_width * half_width) * (case.computed("n_real") / (sigma * sigma) + 1.0 / (sd * sd));
        for (place, n) in [16.0, 40.0, 139.0].iter().enumerate() {
            let got = given.at(&format!("answers/n/table/{place}/half_width"));
            let wanted = (z2 / (1.0 / (sd * sd) + n / (sigma * sigma))).sqrt();
            assert!((got - wanted).abs() < 1e-12 * wanted, "{}: {got} is not {wanted}", case.id);
        }
    }
}

/// The case's rule is a test of its own readings alone, while the program's rules are on posterior chances, so the
/// assurance for 25 readings is not one of them. With the level known both come to the same.
#[test]
fn the_limit_of_an_assurance() {
    let case = case("n-assurance-1.0");
    let rule = "\"level chance\"\nabove = 0\n[question.rule]\nverdicts = [ { say = \"above\", chance_at_least = 0.975 }, \
                { say = \"not shown\" } ]";
    let spec = outlook(1.0, 0.5, 2.0)
        .ask("above", rule)
        .ask("n", "\"readings needed\"\nrule_of = \"above\"\nverdict = \"above\"\nassurance = 0.6");
    case.hold("limit_n_inf", answers("assurance", &[spec])[0].at("answers/n/assurance_limit"), 1e-12);
}

/// Accepting by the measured value is accepting by the chance that the value at the edge of acceptance gives.
#[test]
fn risks_of_a_process() {
    let cases = cases_of("c-jcgm106-resistor-");
    let (process, u): (f64, f64) = (0.12, 0.04);
    let pull = process * process / (process * process + u * u);
    let sd = u * pull.sqrt();
    let specs: Vec<Spec> = cases
        .iter()
        .map(|case| {
            let mean = pull * (0.2 - case.input("guard_band"));
            let chance = normal::cdf((0.2 - mean) / sd) - normal::cdf((-0.2 - mean) / sd);
            let rule = format!(
                "\"level chance\"\nbetween = [1499.8, 1500.2]\n[question.rule]\nverdicts = [ {{ say = \"accepted\", \
                 chance_at_least = {chance:?} }}, {{ say = \"rejected\" }} ]"
            );
            linear()
                .summary(format!("mean = 1500.05, uncertainty = {u:?}"))
                .within("none")
                .stated(1500.0, process)
                .ask("conforms", &rule)
        })
        .collect();
    for (case, given) in cases.iter().zip(answers("risks", &specs)) {
        case.hold("R_C", given.at("answers/conforms/global_risk_accepted"), 1e-9);
        case.hold("R_P", given.at("answers/conforms/global_risk_rejected"), 1e-9);
        case.hold("p_conforming", given.at("answers/conforms/prior_only/chance"), 1e-12);
    }
}
