//! Checks of the assumptions against values published elsewhere, and against general-purpose
//! libraries as a second opinion. Each value says where it comes from.
//!
//! "SciPy" is SciPy 1.17.1 with NumPy 2.4.6, "statsmodels" statsmodels 0.15.0; run once, offline,
//! the figures copied. Tolerances on published values are half a unit (or, where the source cuts
//! digits off instead of rounding, one unit) of the last printed place.

use reassay::checks::timed::Timed;
use reassay::checks::{
    Check, Concern, anderson_darling, bartlett, brown_forsythe, homogeneity, many_series, normality,
    outliers, predictive_extremes, predictive_skew, predictive_spread, prior_conflict, runs, season,
    serial_correlation, shapiro_wilk, trend, von_neumann, within_sd, within_sd_worth,
};

fn near(got: f64, want: f64, tolerance: f64) {
    assert!((got - want).abs() <= tolerance, "got {got}, want {want} within {tolerance}");
}

fn close(got: f64, want: f64, relative: f64) {
    near(got, want, relative * want.abs());
}

fn statistic(check: &Check) -> f64 {
    check.statistic.expect("a statistic")
}

fn p(check: &Check) -> f64 {
    check.p.expect("a p-value")
}

fn timed(values: &[f64]) -> Vec<Timed> {
    values.iter().enumerate().map(|(at, &value)| Timed { at: at as f64, value }).collect()
}

fn column(text: &str) -> Vec<f64> {
    text.lines().skip(1).map(|line| line.trim().parse().expect("a number")).collect()
}

fn sorted(values: &[f64]) -> Vec<f64> {
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    sorted
}

/// NIST StRD univariate data set Lew (200 deflections of a steel-concrete beam).
fn lew() -> Vec<f64> {
    column(include_str!("checks-lew.csv"))
}

/// NIST StRD univariate data set Michelso (100 readings of the speed of light).
fn michelson() -> Vec<f64> {
    column(include_str!("checks-michelso.csv"))
}

/// Weights of 11 men in pounds: Shapiro & Wilk 1965, Biometrika 52, 591, example 1.
const WEIGHTS: [f64; 11] = [148.0, 154.0, 158.0, 160.0, 161.0, 162.0, 166.0, 170.0, 182.0, 195.0, 236.0];

/// 50 two-digit numbers from a telephone book: Conover 1980, Practical Nonparametric Statistics.
const TELEPHONE: [f64; 50] = [
    23.0, 36.0, 54.0, 61.0, 73.0, 23.0, 37.0, 54.0, 61.0, 73.0, 24.0, 40.0, 56.0, 62.0, 74.0, 27.0, 42.0,
    57.0, 63.0, 75.0, 29.0, 43.0, 57.0, 64.0, 77.0, 31.0, 43.0, 58.0, 65.0, 81.0, 32.0, 44.0, 58.0, 66.0,
    87.0, 33.0, 45.0, 58.0, 68.0, 89.0, 33.0, 48.0, 58.0, 68.0, 93.0, 35.0, 48.0, 59.0, 70.0, 97.0,
];

/// Rosner 1983, 54 values, as in NIST/SEMATECH e-Handbook 1.3.5.17.3.
const ROSNER: [f64; 54] = [
    -0.25, 0.68, 0.94, 1.15, 1.20, 1.26, 1.26, 1.34, 1.38, 1.43, 1.49, 1.49, 1.55, 1.56, 1.58, 1.65, 1.69,
    1.70, 1.76, 1.77, 1.81, 1.91, 1.94, 1.96, 1.99, 2.06, 2.09, 2.10, 2.14, 2.15, 2.23, 2.24, 2.26, 2.35,
    2.37, 2.40, 2.47, 2.54, 2.62, 2.64, 2.90, 2.92, 2.92, 2.93, 3.21, 3.26, 3.30, 3.59, 3.68, 4.30, 4.64,
    5.34, 5.42, 6.01,
];

/// Gear diameters, 10 batches of 10: data set GEAR of NIST/SEMATECH e-Handbook 1.3.5.7 and 1.3.5.10.
const GEAR: [[f64; 10]; 10] = [
    [1.006, 0.996, 0.998, 1.000, 0.992, 0.993, 1.002, 0.999, 0.994, 1.000],
    [0.998, 1.006, 1.000, 1.002, 0.997, 0.998, 0.996, 1.000, 1.006, 0.988],
    [0.991, 0.987, 0.997, 0.999, 0.995, 0.994, 1.000, 0.999, 0.996, 0.996],
    [1.005, 1.002, 0.994, 1.000, 0.995, 0.994, 0.998, 0.996, 1.002, 0.996],
    [0.998, 0.998, 0.982, 0.990, 1.002, 0.984, 0.996, 0.993, 0.980, 0.996],
    [1.009, 1.013, 1.009, 0.997, 0.988, 1.002, 0.995, 0.998, 0.981, 0.996],
    [0.990, 1.004, 0.996, 1.001, 0.998, 1.000, 1.018, 1.010, 0.996, 1.002],
    [0.998, 1.000, 1.006, 1.000, 1.002, 0.996, 0.998, 0.996, 1.002, 1.006],
    [1.002, 0.998, 0.996, 0.995, 0.996, 1.004, 1.004, 0.998, 0.999, 0.991],
    [0.991, 0.995, 0.984, 0.994, 0.997, 0.997, 0.991, 0.998, 1.004, 0.997],
];

#[test]
fn within_sd_band_is_that_of_en_206() {
    // EN 206, check of an adopted sd at n = 15, as quoted in secondary sources: 0.63 and 1.37.
    let (low, high) = within_sd::band(15, 0.025).expect("a band");
    near(low, 0.63, 0.005);
    near(high, 1.37, 0.005);
    // SciPy: sqrt(chi2.ppf(0.025 | 0.975, n - 1) / (n - 1)).
    for (n, low, high) in [
        (15, 0.6340755984130267, 1.365884016333048),
        (20, 0.6846634394852612, 1.314941000512144),
        (25, 0.7188286251906766, 1.280691171246408),
        (30, 0.7438731745668536, 1.2556394964206625),
        (35, 0.7632410177351386, 1.2362894577670465),
    ] {
        let band = within_sd::band(n, 0.025).expect("a band");
        close(band.0, low, 1e-10);
        close(band.1, high, 1e-10);
    }
}

#[test]
fn within_sd_known_two_sided() {
    // SciPy: 2 * chi2.sf(27.44, 14); detectable ratios sqrt(chi2.ppf(0.975, 14)/chi2.ppf(0.2, 14)) and
    // sqrt(chi2.ppf(0.025, 14)/chi2.ppf(0.8, 14)).
    let check = within_sd::check(15, 14.0 * 49.0, 5.0);
    close(statistic(&check), 27.44, 1e-14);
    close(p(&check), 0.03373451492366629, 1e-9);
    assert_eq!(check.concern, Concern::Remark);
    let (fall, rise) = within_sd::detectable(15).expect("ratios");
    close(rise, 1.6609789524233323, 1e-9);
    close(fall, 0.5568747476192484, 1e-9);
}

#[test]
fn within_sd_worth_f() {
    // SciPy: 2 * f.sf(2.89, 5, 20) = 2 * 0.040189325583220366.
    let check = within_sd_worth::check(6, 5.0 * 3.4 * 3.4, 2.0, 20.0);
    close(statistic(&check), 2.89, 1e-14);
    close(p(&check), 2.0 * 0.040189325583220366, 1e-9);
    assert_eq!(check.concern, Concern::None);
}

#[test]
fn prior_conflict_box_check_of_the_great_trial() {
    // Spiegelhalter, Abrams & Myles 2004 (from memory, not confirmed): Box p 0.21 for prior N(-0.255, 2^2/236.7) and
    // log odds ratio -0.736 with variance 2^2/30.5. 16 digits: recomputed with mpmath, 50 digits.
    let sd = (4.0_f64 / 236.7 + 4.0 / 30.5).sqrt();
    let piece = prior_conflict::NormalPiece { weight: 1.0, mean: -0.255, sd };
    let check = prior_conflict::check(-0.736, 1, &[piece]);
    near(p(&check), 0.21, 0.005);
    close(p(&check), 0.2112618136016605, 1e-12);
    close(check.figure("z").expect("z"), -1.250103302374412, 1e-12);
}

#[test]
fn prior_conflict_of_the_ennerdale_prior() {
    // Prior N(370, 20^2), measurement 421 with sd 8; z and p recomputed with mpmath, 50 digits.
    let piece = prior_conflict::NormalPiece { weight: 1.0, mean: 370.0, sd: 464.0_f64.sqrt() };
    let check = prior_conflict::check(421.0, 1, &[piece]);
    close(p(&check), 0.01790312796785906, 1e-12);
    close(check.figure("z").expect("z"), 2.367615561757411, 1e-12);
    assert_eq!(check.concern, Concern::Remark);
}

/// W and p by Royston's algorithm, written once more in Python with mpmath (40 digits).
#[allow(clippy::approx_constant, reason = "3.14 is a reading")]
const SHAPIRO_WILK: [(&[f64], f64, f64); 6] = [
    // n = 3 (exact law), 4 and 5 (one outer weight), 11 and 20 (two outer weights; small- and large-n law), 50.
    (&[1.0, 2.0, 4.0], 0.9642857142857143, 0.63688684502897),
    (&[2.0, 3.0, 3.5, 7.0], 0.873078927781127, 0.309918174884729),
    (&[2.0, 3.0, 3.5, 7.0, 7.5], 0.8645034019639164, 0.244872795055799),
    (&WEIGHTS, 0.7888146948353874, 0.00670381405650301),
    (
        &[
            0.11, 7.87, 4.61, 10.14, 7.95, 3.14, 0.46, 4.43, 0.21, 4.75, 0.71, 1.52, 3.24, 0.93, 0.42, 4.97,
            9.53, 4.55, 0.47, 6.66,
        ],
        0.9004728793175612,
        0.042089575222258,
    ),
    (&TELEPHONE, 0.9744386510627832, 0.347302104201679),
];

/// The same by SciPy's stats.shapiro, whose normal scores are good to about 1e-9: so agreement to 1e-8.
const SHAPIRO_WILK_SCIPY: [(f64, f64); 6] = [
    (0.9642857142857142, 0.6368868450289689),
    (0.8730789274956463, 0.30991817373541736),
    (0.8645034014493627, 0.24487279310029775),
    (0.7888146948631716, 0.006703814061898823),
    (0.9004728794391273, 0.04208957544308365),
    (0.9744386510200158, 0.3473021028856781),
];

#[test]
fn shapiro_wilk_published() {
    // Shapiro & Wilk 1965 print W = 0.79 for the weights.
    let (w, _) = shapiro_wilk::of_sorted(&WEIGHTS).expect("made");
    near(w, 0.79, 0.005);
    // IMSL manual (shapiroWilkNormalityTest, example after Conover 1980) prints W = 0.9744 and p = 0.3473.
    let (w, p) = shapiro_wilk::of_sorted(&sorted(&TELEPHONE)).expect("made");
    near(w, 0.9744, 0.00005);
    near(p, 0.3473, 0.00005);
}

#[test]
fn shapiro_wilk_second_opinions_at_every_branch() {
    for ((values, w, p), (scipy_w, scipy_p)) in SHAPIRO_WILK.into_iter().zip(SHAPIRO_WILK_SCIPY) {
        let found = shapiro_wilk::of_sorted(&sorted(values)).expect("made");
        close(found.0, w, 1e-13);
        close(found.1, p, 1e-11);
        close(found.0, scipy_w, 1e-8);
        close(found.1, scipy_p, 1e-8);
    }
    // Lew, n = 200: mpmath and SciPy.
    let found = shapiro_wilk::of_sorted(&sorted(&lew())).expect("made");
    close(found.0, 0.9038350537314146, 1e-13);
    close(found.1, 4.44053122011983e-10, 1e-11);
    close(found.0, 0.9038350541689639, 1e-8);
}

#[test]
fn anderson_darling_second_opinion() {
    // statsmodels: A^2 and p of diagnostic.normal_ad, which prints A^2 without the factor; p uses the corrected one.
    let factor = |n: f64| 1.0 + 0.75 / n + 2.25 / (n * n);
    let (a, p) = anderson_darling::of_sorted(&sorted(&TELEPHONE)).expect("made");
    close(a, 0.3338742250754976 * factor(50.0), 1e-11);
    close(p, 0.5023699542012976, 1e-10);
    let (a, p) = anderson_darling::of_sorted(&WEIGHTS).expect("made");
    close(a, 0.946771879598888 * factor(11.0), 1e-11);
    close(p, 0.010454024005147656, 1e-9);
    let (a, p) = anderson_darling::of_sorted(&sorted(&lew())).expect("made");
    close(a, 6.000646915775917 * factor(200.0), 1e-11);
    close(p, 8.32482770383869e-15, 1e-9);
}

#[test]
fn anderson_darling_critical_values() {
    // D'Agostino & Stephens 1986, table 4.7, case 3 (mean and sd estimated): upper 10, 5, 2.5 and 1 % points of A*^2
    // 0.631, 0.752, 0.873, 1.035 (from memory). The curve of table 4.9 gives these levels within 2 % of themselves.
    for (level, point) in [(0.10, 0.631), (0.05, 0.752), (0.025, 0.873), (0.01, 1.035)] {
        close(anderson_darling::p_value(point), level, 0.02);
    }
}

#[test]
fn normality_changes_statistic_above_5000_readings() {
    let many: Vec<f64> = (0..5001).map(|i| f64::from(i % 83)).collect();
    assert_eq!(normality::check(&many).statistic_name, "Anderson-Darling A*^2");
    assert_eq!(normality::check(&many[..5000]).statistic_name, "Shapiro-Wilk W");
}

#[test]
fn outliers_of_rosner() {
    // NIST/SEMATECH e-Handbook 1.3.5.17.3 prints R and the critical values at 0.05 (digits cut off at the third place,
    // so within 0.001), and finds three outliers.
    let r = [3.118, 2.942, 3.179, 2.810, 2.815, 2.848, 2.279, 2.310, 2.101, 2.067];
    let critical = [3.158, 3.151, 3.143, 3.136, 3.128, 3.120, 3.111, 3.103, 3.094, 3.085];
    let steps = outliers::steps(&ROSNER, 10);
    assert_eq!(steps.len(), 10);
    for (step, (r, critical)) in steps.iter().zip(r.into_iter().zip(critical)) {
        near(step.deviate, r, 0.001);
        assert_eq!(step.p < 0.05, r > critical, "{step:?}");
    }
    assert_eq!(outliers::number(&steps, 0.05), 3);
    // p_i: the same formula with SciPy's t.sf.
    let p = [
        0.05898472711593914,
        0.11518450253472035,
        0.04303682813199629,
        0.17899727073762825,
        0.17067090226986814,
    ];
    for (step, p) in steps.iter().zip(p) {
        close(step.p, p, 1e-9);
    }
    // As a check, at most 54/10 = 5 are looked for.
    let found = outliers::check(&ROSNER);
    let named: Vec<f64> = found.named.iter().map(|step| step.value).collect();
    assert_eq!(named, [6.01, 5.42, 5.34]);
    assert_eq!(found.check.concern, Concern::Remark);
    assert_eq!(found.check.figure("looked for at most"), Some(5.0));
}

#[test]
fn lag_one_correlation_certified() {
    // NIST StRD univariate summary statistics, certified lag-1 correlations of Lew and Michelso.
    close(serial_correlation::lag_one(&lew()).expect("r"), -0.307304800605679, 1e-12);
    close(serial_correlation::lag_one(&michelson()).expect("r"), 0.535199668621283, 1e-11);
    // StRD NumAcc3: 1000000.2, then 1000000.1 and 1000000.3 in turn, 1001 readings: certified -0.999.
    let mut hard = vec![1_000_000.2];
    for _ in 0..500 {
        hard.extend([1_000_000.1, 1_000_000.3]);
    }
    near(serial_correlation::lag_one(&hard).expect("r"), -0.999, 1e-9);
}

#[test]
fn michelson_readings_are_worth_fewer() {
    let check = serial_correlation::check(&timed(&michelson()));
    assert_eq!(check.concern, Concern::Flag);
    // By hand from r = 0.5352, large n: inflation about (1 + r)/(1 - r) = 3.303, less an end correction of
    // 2 r (1 - r^n)/(n (1 - r)^2) = 0.0496: 3.253, so 30.74 readings.
    near(check.figure("effective readings").expect("given"), 100.0 / 3.2533, 0.01);
}

#[test]
fn variance_inflation_of_an_autoregression() {
    // rho = 0.3 and 0.5 with 12 readings: 1.76 and 2.67, computed apart for the project's notes on practice.
    near(serial_correlation::variance_inflation(0.3, 12), 1.76, 0.005);
    near(serial_correlation::variance_inflation(0.5, 12), 2.67, 0.005);
    // Closed form (1+r)/(1-r) - 2r(1-r^n)/(n(1-r)^2), r = 1/2, n = 12: 3 - (1/3)(1 - 2^-12).
    close(serial_correlation::variance_inflation(0.5, 12), 3.0 - (1.0 - 1.0 / 4096.0) / 3.0, 1e-14);
}

#[test]
fn von_neumann_ratio_by_hand() {
    // 1..8: 7/42; z = (1/6 - 2)/sqrt(24/63) and 2 norm.sf(|z|) by SciPy.
    let check = von_neumann::check(&timed(&[1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0]));
    close(statistic(&check), 1.0 / 6.0, 1e-14);
    close(p(&check), 0.002974708142008597, 1e-11);
    // Identity with the lag-1 correlation: ratio = 2(1 - r) - [(x_1 - m)^2 + (x_n - m)^2]/SS, on Michelso.
    let values = michelson();
    let mean = 299.8524;
    let squares: f64 = values.iter().map(|v| (v - mean) * (v - mean)).sum();
    let ends = (values[0] - mean) * (values[0] - mean) + (values[99] - mean) * (values[99] - mean);
    let expected = 2.0 * (1.0 - 0.535199668621283) - ends / squares;
    close(von_neumann::ratio(&values).expect("a ratio"), expected, 1e-9);
}

#[test]
fn runs_of_nist() {
    // NIST/SEMATECH e-Handbook 1.3.5.13 prints Z = 2.6938 for LEW; p by statsmodels runstest_1samp without correction.
    let check = runs::check(&timed(&lew()));
    near(check.figure("z").expect("z"), 2.6938, 0.00005);
    close(p(&check), 0.007064622954962975, 1e-10);
    assert_eq!(check.concern, Concern::Flag);
}

#[test]
fn mann_kendall_exact_and_normal() {
    // SciPy: stats.kendalltau(method="exact") of the six values, p = 0.0555...; by hand 2 * 20/720.
    let six = trend::mann_kendall(&[10.1, 10.4, 10.3, 10.9, 11.2, 11.0]).expect("made");
    assert_eq!((six.s, six.exact), (11.0, true));
    close(six.p, 0.05555555555555555, 1e-14);
    // Kendall 1975, table of S: n = 10, P(S >= 23) = 0.023, P(S >= 21) = 0.036 (from memory); two-sided twice that.
    let mut ten: Vec<f64> = (0..10).map(f64::from).collect();
    ten.swap(0, 3);
    ten.swap(5, 8);
    ten.swap(1, 2);
    let found = trend::mann_kendall(&ten).expect("made");
    assert_eq!((found.s, found.exact), (23.0, true));
    near(found.p, 2.0 * 0.023, 0.001);
    // 16 values with ties: S = 48, variance 481.33 by the formula in Python; z = 47/21.94, p by SciPy's norm.sf.
    let tied = [3.0, 1.0, 4.0, 1.0, 5.0, 9.0, 2.0, 6.0, 5.0, 3.0, 5.0, 8.0, 9.0, 7.0, 9.0, 3.0];
    let found = trend::mann_kendall(&tied).expect("made");
    assert_eq!((found.s, found.exact), (48.0, false));
    close(found.p, 0.03217149066350132, 1e-11);
    // SciPy: stats.theilslopes of the same.
    close(trend::median_slope(&timed(&tied)).expect("a slope"), 0.4, 1e-15);
}

#[test]
fn spread_over_the_gear_batches() {
    let groups: Vec<&[f64]> = GEAR.iter().map(|batch| batch.as_slice()).collect();
    // NIST/SEMATECH e-Handbook 1.3.5.10 prints 1.705910 (single precision; SciPy's levene(center="median") 1.7059177).
    let check = brown_forsythe::check(&groups);
    near(statistic(&check), 1.705910, 2e-5);
    close(statistic(&check), 1.705917693000894, 1e-9);
    close(p(&check), 0.09908297555220481, 1e-9);
    // NIST/SEMATECH e-Handbook 1.3.5.7 prints 20.78580 (SciPy's bartlett 20.7858734).
    let summaries: Vec<(usize, f64)> = GEAR
        .iter()
        .map(|batch| {
            let mean = batch.iter().sum::<f64>() / 10.0;
            (10, (batch.iter().map(|v| (v - mean) * (v - mean)).sum::<f64>() / 9.0).sqrt())
        })
        .collect();
    let check = bartlett::check(&summaries);
    near(statistic(&check), 20.78580, 2e-4);
    close(statistic(&check), 20.785873428064864, 1e-9);
    close(p(&check), 0.013635863278057483, 1e-9);
}

#[test]
fn difference_of_the_gear_batches() {
    // One-way analysis of variance of GEAR, NIST/SEMATECH e-Handbook 1.3.5.4: F = 2.297 (from memory); SciPy's f_oneway.
    let mut pooled = 0.0;
    let means: Vec<f64> = GEAR
        .iter()
        .map(|batch| {
            let mean = batch.iter().sum::<f64>() / 10.0;
            pooled += batch.iter().map(|v| (v - mean) * (v - mean)).sum::<f64>();
            mean
        })
        .collect();
    let uncertainty = (pooled / 90.0 / 10.0).sqrt();
    let periods: Vec<homogeneity::PeriodMean> =
        means.into_iter().map(|mean| homogeneity::PeriodMean { mean, uncertainty }).collect();
    let check = homogeneity::check(&periods, Some(90.0), false);
    near(statistic(&check), 2.297, 0.0005);
    close(statistic(&check), 2.296912413358539, 1e-9);
    close(p(&check), 0.02266081927864117, 1e-9);
    // Known uncertainties: 14 on 3 df, chi2.sf by SciPy.
    let four = [10.0, 12.0, 11.0, 15.0].map(|mean| homogeneity::PeriodMean { mean, uncertainty: 1.0 });
    let check = homogeneity::check(&four, None, false);
    close(statistic(&check), 14.0, 1e-14);
    close(p(&check), 0.002905152774267437, 1e-9);
}

#[test]
fn skewness_of_the_weights() {
    // SciPy: stats.skew and stats.skewtest (D'Agostino 1970).
    let check = predictive_skew::check(&WEIGHTS);
    close(statistic(&check), 1.678543901586165, 1e-12);
    close(check.figure("z").expect("z"), 2.7788579769903414, 1e-11);
    close(p(&check), 0.005455036974740185, 1e-10);
    let check = predictive_skew::check(&lew());
    close(check.figure("z").expect("z"), -0.29982495523850156, 1e-9);
    close(p(&check), 0.7643106790056589, 1e-9);
}

#[test]
fn predictive_spread_over_two_nodes() {
    // SciPy: mean of chi2.sf(25.27, 7) and chi2.sf(25.27/1.44, 7), twice.
    let nodes = [1.0, 1.2].map(|sd| predictive_spread::SdNode { weight: 0.5, sd });
    let check = predictive_spread::check(8, 25.27, &nodes, false);
    close(p(&check), 0.014860881756150034, 1e-9);
}

#[test]
fn predictive_extremes_against_adaptive_quadrature() {
    // Known level: 1 - Phi(3.5)^10 by SciPy.
    let known = predictive_extremes::Piece { weight: 1.0, level_mean: 0.0, level_sd: 0.0, reading_sd: 1.0 };
    close(predictive_extremes::largest(&[known], 10, 3.5).expect("made").upper, 0.0023238570674445204, 1e-12);
    let check = predictive_extremes::check(10, -1.5, 3.5, &[known]);
    close(p(&check), 4.0 * 0.0023238570674445204, 1e-12);
    // Level N(50, 0.8^2), sd 2.5, 12 readings: SciPy's integrate.quad to 1e-13.
    let piece = predictive_extremes::Piece { weight: 2.0, level_mean: 50.0, level_sd: 0.8, reading_sd: 2.5 };
    let high = predictive_extremes::largest(&[piece], 12, 57.0).expect("made");
    close(high.upper, 0.04397351465881782, 1e-11);
    close(high.lower, 0.9560264853411824, 1e-11);
    let low = predictive_extremes::smallest(&[piece], 12, 44.0).expect("made");
    close(low.lower, 0.1201909677234969, 1e-11);
}

#[test]
fn benjamini_and_hochberg_example() {
    // Benjamini & Hochberg 1995, section 4: 15 p-values; at q = 0.05 the procedure rejects the 4 smallest.
    let p_values = [
        0.0001, 0.0004, 0.0019, 0.0095, 0.0201, 0.0278, 0.0298, 0.0344, 0.0459, 0.3240, 0.4262, 0.5719,
        0.6528, 0.7590, 1.0,
    ];
    let adjusted = many_series::adjusted(&p_values);
    assert_eq!(adjusted.iter().filter(|&&q| q <= 0.05).count(), 4);
    // SciPy: stats.false_discovery_control.
    let want = [
        0.0015,
        0.003,
        0.0095,
        0.035625,
        0.0603,
        0.06385714285714286,
        0.06385714285714286,
        0.0645,
        0.0765,
        0.486,
        0.5811818181818181,
        0.7148749999999999,
        0.7532307692307693,
        0.8132142857142857,
        1.0,
    ];
    for (got, want) in adjusted.into_iter().zip(want) {
        close(got, want, 1e-14);
    }
    let check = many_series::check("normality", &p_values);
    assert_eq!(check.figure("stand out at q 0.05"), Some(4.0));
    assert_eq!(check.concern, Concern::Flag);
}

#[test]
fn wrong_flags_by_chance() {
    // 50 sound series at 0.05: 2.5 expected, chance of any 1 - 0.95^50 = 0.923 (by hand: 50 ln 0.95 = -2.5647).
    close(many_series::expected_by_chance(50, 0.05), 2.5, 1e-15);
    near(many_series::chance_of_any(50, 0.05), 0.9231, 0.0001);
    close(many_series::expected_wrong(&[0.2, 0.01, 0.04]), 0.25, 1e-15);
}

#[test]
fn season_against_history() {
    // SciPy: stats.chi2_contingency(correction does not apply).
    let check = season::check([24, 6, 4, 6], [50, 50, 50, 50]);
    close(statistic(&check), 19.433719433719432, 1e-12);
    close(p(&check), 0.00022236813853271164, 1e-9);
    assert!(season::check([12, 3, 2, 3], [50, 50, 50, 50]).why.is_some());
}
