//! Published check values, each with its source. The figures are independent recomputations of the
//! printed ones to 10 digits and more; the printed digits are held against them where they differ.

use super::*;
use crate::math::normal;

/// EN 1990:2002 Annex D, clause D7.2, Table D1, 5 % characteristic value, σ known: k_n = z √(1 + 1/n).
/// The table's own figures (built with z = 1.64 and partly cut) agree within 0.02.
#[test]
fn characteristic_values_with_the_sd_known() {
    let table = [
        (1, 2.326174307353348, 2.31),
        (2, 2.014526043798670, 2.01),
        (3, 1.899313368595930, 1.89),
        (4, 1.839002261450287, 1.83),
        (5, 1.801846870551018, 1.80),
        (8, 1.744630730515011, 1.74),
        (10, 1.725137037891470, 1.72),
        (30, 1.672043132188460, 1.67),
    ];
    for (n, wanted, printed) in table {
        let readings = Evidence::Sums { n, mean: 50.0, ss: None, rest: 0.0 };
        let posterior = both(&model(Within::Known(2.0), LevelPrior::Flat), &readings);
        let got = (50.0 - value(&ask("ask = \"characteristic value\"", &posterior), "estimate")) / 2.0;
        near(got, wanted, 1e-13);
        within(got, printed, 0.02);
    }
}

/// The same table, σ unknown: k_n = t_{0.95, n−1} √(1 + 1/n).
#[test]
fn characteristic_values_with_the_sd_unknown() {
    let table = [
        (3, 3.371708921694098, 3.37),
        (5, 2.335321148032005, 2.33),
        (6, 2.176501000386648, 2.18),
        (8, 2.009504068725141, 2.00),
        (10, 1.922585063464997, 1.92),
        (30, 1.727213673533123, 1.73),
    ];
    for (n, wanted, printed) in table {
        let posterior = flat_unknown(n, 50.0, 2.0);
        let got = (50.0
            - value(&ask("ask = \"characteristic value\"\npercentile = 5", &posterior), "estimate"))
            / 2.0;
        near(got, wanted, 1e-10);
        within(got, printed, 0.012);
    }
}

/// Montgomery & Runger, Applied Statistics and Probability for Engineers, 7th ed., Table XII, and
/// MIL-HDBK-17 A- and B-basis: one-sided tolerance factors, upper bound of a percentile.
#[test]
fn one_sided_tolerance_limits() {
    let table = [
        (3, 95, 0.95, 7.655900133153343),
        (5, 95, 0.95, 4.202680741256179),
        (10, 95, 0.95, 2.910963413078167),
        (10, 90, 0.95, 2.354640131829060),
        (10, 99, 0.95, 3.981117845273060),
        (10, 95, 0.99, 3.738314964162107),
        (20, 95, 0.95, 2.396001683752170),
        (30, 95, 0.95, 2.219837532035056),
        (50, 95, 0.95, 2.064993417743976),
        (100, 95, 0.95, 1.926538850512316),
        (5, 90, 0.95, 3.406633262800809),
        (15, 90, 0.95, 2.068372099292308),
        (15, 99, 0.95, 3.520126964278592),
        (30, 99, 0.95, 3.063901126238169),
    ];
    for (n, percentile, probability, wanted) in table {
        let keys = format!(
            "ask = \"percentile\"\npercentile = {percentile}\nprobability = {probability}\ninterval = \"upper bound\""
        );
        let got = (value(&ask(&keys, &flat_unknown(n, 10.0, 0.5)), "upper") - 10.0) / 0.5;
        near(got, wanted, 1e-10);
        // The lower side mirrors it.
        let keys = format!(
            "ask = \"percentile\"\npercentile = {}\nprobability = {probability}\ninterval = \"lower bound\"",
            100 - percentile
        );
        let got = (10.0 - value(&ask(&keys, &flat_unknown(n, 10.0, 0.5)), "lower")) / 0.5;
        near(got, wanted, 1e-10);
    }
}

/// NIST/SEMATECH e-Handbook, 7.2.6.3: 43 wafers, 90 % with 99 % confidence; the handbook's factor
/// 1.8752 is Natrella's approximation, exact is 1.87395.
#[test]
fn wafers_of_the_handbook() {
    let keys = "ask = \"percentile\"\npercentile = 90\nprobability = 0.99\ninterval = \"upper bound\"";
    let got = value(&ask(keys, &flat_unknown(43, 97.07, 0.0268)), "upper");
    near(got, 97.12022195663681, 1e-12);
    within(got, 97.120255, 5e-5);
}

/// ISO 16269-6 (formerly ISO 3207), breaking load of 12 cotton yarns (from memory, recomputed): lower
/// 95/95 limit 154.7 with σ unknown, 181.74 with σ = 33.150 known.
#[test]
fn cotton_yarns() {
    let keys = "ask = \"percentile\"\npercentile = 5\ninterval = \"lower bound\"";
    let (mean, sd) = (3024.1 / 12.0, 35.54470829644);
    near(value(&ask(keys, &flat_unknown(12, mean, sd)), "lower"), 154.7458371653, 1e-11);
    let known = both(&model(Within::Known(33.150), LevelPrior::Flat), &sums(12, mean, sd));
    near(value(&ask(keys, &known), "lower"), 181.7408760577, 1e-12);
}

/// Berthouex & Brown, Statistics for Environmental Engineers, 2nd ed., ch. 21 p. 181–182: 27 lognormal
/// readings, mean of ln 4.01, sd 0.773, limit 300 ppm. Printed: bound 0.0562 (from K = 2.2, table 0.94380).
#[test]
fn share_above_a_limit_of_a_lognormal() {
    let model = Model { scale: Scale::Log, ..model(Within::Readings, LevelPrior::Flat) };
    let posterior = both(&model, &sums(27, 4.01, 0.773));
    let asked = put("log", "ask = \"share beyond\"\nabove = 300");
    let figures = asked.figures(&posterior);
    near(value(&figures, "estimate"), 0.02044246371144977, 1e-10);
    near(value(&figures, "upper"), 0.05597876939107469, 1e-10);
    within(value(&figures, "upper"), 0.0562, 0.0005);
    // At the book's rounded K = 2.2.
    let limit = fm::exp(4.01 + 2.2 * 0.773);
    let asked = put("log", &format!("ask = \"share beyond\"\nabove = {limit:?}"));
    near(value(&asked.figures(&posterior), "upper"), 0.05518223738658476, 1e-9);
    let asked = put("log", "ask = \"reading chance\"\nabove = 300");
    near(value(&asked.figures(&posterior), "chance"), 0.02044246371144977, 1e-10);
}

/// EPA QA/G-9, Box 3-12 (15 concentrations); tolerance limit, shares and predictive chance in closed form.
#[test]
fn fifteen_lognormal_concentrations() {
    let model = Model { scale: Scale::Log, ..model(Within::Readings, LevelPrior::Flat) };
    let posterior = both(&model, &sums(15, 2.0762786389258, 0.42622404026343));
    let upper = |keys: &str| value(&put("log", keys).figures(&posterior), "upper");
    near(upper("ask = \"percentile\"\npercentile = 95\ninterval = \"upper bound\""), 23.806763161124, 1e-11);
    let keys = "ask = \"percentile\"\npercentile = 95\ninterval = \"upper bound\"\nprobability = 0.70";
    near(upper(keys), 18.050053448017, 1e-11);
    near(upper("ask = \"share beyond\"\nabove = 20"), 0.088993493504441, 1e-9);
    let chance = put("log", "ask = \"reading chance\"\nabove = 20").figures(&posterior);
    near(value(&chance, "chance"), 0.027739665380828, 1e-10);
}

/// EN 689:2018 Annex F, factor U_T for 95 % coverage with 70 % confidence (from memory, recomputed).
#[test]
fn workplace_exposure_factors() {
    let table = [
        (6, 2.186744961285489),
        (8, 2.071696569914651),
        (10, 2.005306993019089),
        (15, 1.916527295017931),
        (30, 1.820277964446449),
    ];
    for (n, wanted) in table {
        let keys = "ask = \"percentile\"\npercentile = 95\nprobability = 0.7\ninterval = \"upper bound\"";
        near(value(&ask(keys, &flat_unknown(n, 0.0, 1.0)), "upper"), wanted, 1e-10);
    }
}

/// Berthouex & Brown, Example 21.2: five readings, mean 28.4, sd 1.18: all of the next 10 within
/// 22.2 to 34.6, the mean of the next five within 26.3 to 30.5.
#[test]
fn all_of_the_next_and_their_mean() {
    let posterior = flat_unknown(5, 28.4, 1.18);
    let all = ask("ask = \"reading interval\"\nreadings = 10\nof = \"all\"", &posterior);
    near(value(&all, "lower"), 22.23034231745, 1e-10);
    near(value(&all, "upper"), 34.56965768255, 1e-10);
    let mean = ask("ask = \"reading interval\"\nreadings = 5\nof = \"mean\"", &posterior);
    near(value(&mean, "lower"), 26.32794588191920, 1e-11);
    near(value(&mean, "upper"), 30.47205411808080, 1e-11);
}

/// Hahn & Meeker, Statistical Intervals, 1991: two-sided 95 % factors for one and for all of m readings
/// (from memory, recomputed); and one-sided ones in closed form.
#[test]
fn prediction_factors() {
    for (n, wanted) in [(4, 3.558083136678711), (10, 2.372570448294244), (60, 2.017601433596203)] {
        near(value(&ask("ask = \"reading interval\"", &flat_unknown(n, 0.0, 1.0)), "upper"), wanted, 1e-10);
    }
    for (m, wanted) in [(1, 3.041443227583), (2, 3.696695051544), (20, 5.851638636812)] {
        let keys = format!("ask = \"reading interval\"\nreadings = {m}\nof = \"all\"");
        near(value(&ask(&keys, &flat_unknown(5, 0.0, 1.0)), "upper"), wanted, 1e-10);
    }
    for (n, m, wanted) in [(8, 4, 2.926021028425), (12, 12, 3.238563456336)] {
        let keys =
            format!("ask = \"reading interval\"\nreadings = {m}\nof = \"all\"\ninterval = \"upper bound\"");
        near(value(&ask(&keys, &flat_unknown(n, 0.0, 1.0)), "upper"), wanted, 1e-10);
    }
}

/// Walpole et al., Probability & Statistics for Engineers: latex paint, 15 drying times, 95 % prediction
/// interval 1.636 to 5.937 (a widely copied 1.66 to 5.92 is wrong).
#[test]
fn latex_paint() {
    let figures = ask("ask = \"reading interval\"", &flat_unknown(15, 3.786666666666667, 0.9709102258533827));
    near(value(&figures, "lower"), 1.635978020289945, 1e-11);
    near(value(&figures, "upper"), 5.937355313043388, 1e-11);
}

/// Closed forms, inputs chosen here: Student's t of a flat prior, and a normal prior with σ known.
#[test]
fn next_readings_in_closed_form() {
    let t = flat_unknown(8, 41.2, 3.1);
    near(value(&ask("ask = \"reading chance\"\nabove = 50", &t), "chance"), 0.01585299970027, 1e-11);
    near(value(&ask("ask = \"level chance\"\nabove = 50", &t), "chance"), 0.00004453041238618, 1e-11);
    let keys = "ask = \"reading chance\"\nabove = 50\nreadings = 4\nat_least = 1";
    near(value(&ask(keys, &t), "chance"), 0.05609594791234, 1e-11);
    let known = example();
    near(value(&ask("ask = \"level interval\"", &known), "estimate"), 42.83428571428571, 1e-15);
    near(
        value(&ask("ask = \"reading chance\"\nabove = \"guideline\"", &known), "chance"),
        0.08931782684135407,
        1e-12,
    );
    near(value(&ask("ask = \"level chance\"\nabove = 45.0", &known), "chance"), 0.0001083698073498391, 1e-12);
    let keys = "ask = \"reading chance\"\nabove = 45\nreadings = 3\nof = \"mean\"";
    near(value(&ask(keys, &known), "chance"), 0.01914836126961624, 1e-12);
    let none = numbers(&ask("ask = \"count beyond\"\nabove = 45\nreadings = 3", &known), "chances")[0];
    near(none, 0.7654840466007764, 1e-12);
    let keys = "ask = \"reading chance\"\nabove = 45\nreadings = 3\nat_least = 1";
    near(value(&ask(keys, &known), "chance"), 1.0 - 0.7654840466007764, 1e-12);
}

/// Berthouex & Brown, Table 21.3: two-sided 95 % factors for σ.
#[test]
fn interval_of_the_within_sd() {
    let table = [
        (4, 0.5664895466022461, 3.728547275827744),
        (5, 0.5991331391341408, 2.873555634078219),
        (10, 0.6878352067489996, 1.825610182519574),
        (60, 0.8476340513517223, 1.219661937349885),
    ];
    for (n, lower, upper) in table {
        let figures = ask("ask = \"sd interval\"\nsd = \"within\"", &flat_unknown(n, 7.0, 1.0));
        near(value(&figures, "lower"), lower, 1e-10);
        near(value(&figures, "upper"), upper, 1e-10);
    }
}

/// JCGM 106:2012, clause 7 (from memory, recomputed): breakdown voltage of a Zener diode, viscosity of an oil.
#[test]
fn conformance_of_jcgm_106() {
    let measured = |mean: f64, uncertainty: f64| {
        both(&model(Within::None, LevelPrior::Flat), &Evidence::Mean { mean, uncertainty })
    };
    let zener = ask("ask = \"level chance\"\nbelow = -5.40", &measured(-5.47, 0.05));
    near(value(&zener, "chance"), 0.9192433407662290, 1e-12);
    let oil = ask("ask = \"level chance\"\nbetween = [12.5, 16.3]", &measured(13.6, 1.8));
    near(value(&oil, "chance"), 0.6626297864953078, 1e-12);
    let stated = model(Within::None, LevelPrior::Stated { mean: 100.012, sd: 0.010 });
    let weight = both(&stated, &Evidence::Mean { mean: 100.025, uncertainty: 0.008 });
    near(value(&ask("ask = \"level chance\"\nbelow = 100.03", &weight), "chance"), 0.9465727676830557, 1e-12);
}

/// Two-part mixture prior in the manner of Schmidli et al. 2014 (closed form, 16 digits).
#[test]
fn a_mixture_in_conflict_and_in_agreement() {
    let parts = vec![
        (0.8, LevelPrior::Stated { mean: 50.0, sd: 1.0 }),
        (0.2, LevelPrior::Stated { mean: 50.0, sd: 10.0 }),
    ];
    let model = model(Within::Known(1.2), LevelPrior::Mixture(parts));
    let table = [
        (56.0, [55.84951571345135, 53.13665179531665, 58.24029097959963]),
        (50.7, [50.30342004879040, 48.76508465878548, 51.87682109658430]),
    ];
    for (mean, [estimate, lower, upper]) in table {
        let posterior = both(&model, &Evidence::Sums { n: 1, mean, ss: None, rest: 0.0 });
        let figures = ask("ask = \"level interval\"", &posterior);
        near(value(&figures, "estimate"), estimate, 1e-12);
        near(value(&figures, "lower"), lower, 1e-11);
        near(value(&figures, "upper"), upper, 1e-11);
    }
}

/// Montgomery & Runger, Example 8-1 (10 values, σ = 1), and Walpole et al., Example 9.2 (from memory, recomputed).
#[test]
fn textbook_intervals_with_the_sd_known() {
    let charpy = both(
        &model(Within::Known(1.0), LevelPrior::Flat),
        &Evidence::Sums { n: 10, mean: 64.46, ss: None, rest: 0.0 },
    );
    let figures = ask("ask = \"level interval\"", &charpy);
    near(value(&figures, "lower"), 63.84020496769544, 1e-14);
    near(value(&figures, "upper"), 65.07979503230456, 1e-14);
    let zinc = both(
        &model(Within::Known(0.3), LevelPrior::Flat),
        &Evidence::Sums { n: 36, mean: 2.6, ss: None, rest: 0.0 },
    );
    let figures = ask("ask = \"level interval\"\nprobability = 0.99", &zinc);
    near(value(&figures, "lower"), 2.471208534822555, 1e-13);
    near(value(&figures, "upper"), 2.728791465177445, 1e-13);
}

/// The worked number on each kind's page, computed apart from the program.
#[test]
fn worked_numbers_of_the_pages() {
    let known = example();
    let interval = ask("ask = \"level interval\"", &known);
    within(value(&interval, "lower"), 41.68664831699223, 1e-11);
    within(value(&interval, "upper"), 43.98192311157919, 1e-11);
    let reading = ask("ask = \"reading interval\"", &known);
    within(value(&reading, "lower"), 39.67828287172864, 1e-11);
    within(value(&reading, "upper"), 45.990288556842785, 1e-11);
    let percentile = ask("ask = \"percentile\"\npercentile = 95\ninterval = \"upper bound\"", &known);
    within(value(&percentile, "estimate"), 45.30156615471292, 1e-11);
    within(value(&percentile, "upper"), 46.26469381943188, 1e-11);
    let share = ask("ask = \"share beyond\"\nabove = 45", &known);
    within(value(&share, "estimate"), 0.08931782684135392, 1e-13);
    within(value(&share, "upper"), 0.21135619507510306, 1e-12);
    let mean = ask("ask = \"period mean\"\nreadings = 6", &known);
    within(value(&mean, "lower"), 42.13683889872961, 1e-11);
    within(value(&mean, "upper"), 43.797446815556114, 1e-11);
    let classes = numbers(&ask("ask = \"classes\"\nbounds = [42, 44]", &known), "chances");
    for (got, wanted) in classes.iter().zip([0.07710547175838484, 0.8996450763506472, 0.023249451890968054]) {
        within(*got, wanted, 1e-13);
    }
    let strength = both(
        &model(Within::Known(2.75), LevelPrior::Flat),
        &Evidence::Sums { n: 10, mean: 55.0, ss: None, rest: 0.0 },
    );
    within(value(&ask("ask = \"characteristic value\"", &strength), "estimate"), 50.25587314579846, 1e-11);
}

/// Far tails keep their relative accuracy: Φ itself is the reference.
#[test]
fn tails_far_out() {
    let posterior = both(
        &model(Within::Known(1.0), LevelPrior::Flat),
        &Evidence::Sums { n: 1, mean: 0.0, ss: None, rest: 0.0 },
    );
    for z in [5.0, 10.0, 20.0, 30.0] {
        near(
            value(&ask(&format!("ask = \"level chance\"\nabove = {z}"), &posterior), "chance"),
            normal::sf(z),
            1e-12,
        );
        let outside =
            value(&ask(&format!("ask = \"level chance\"\noutside = [-{z}, {z}]"), &posterior), "chance");
        near(outside, 2.0 * normal::sf(z), 1e-12);
    }
    // A narrow interval far out: the density times its width.
    let keys = "ask = \"level chance\"\nbetween = [10, 10.0000001]";
    near(value(&ask(keys, &posterior), "chance"), normal::pdf(10.00000005) * 1e-7, 1e-7);
}
