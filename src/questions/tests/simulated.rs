//! Every kind against a plain simulation that shares nothing with the program: draws from the prior,
//! weighted by the likelihood of the readings (importance sampling), then whatever the question asks is
//! simply counted. Seeded; agreement within five standard errors.

use super::*;

/// One draw of everything: the level, σ, the long-run mean, the next level, and its weight.
struct Draw {
    weight: f64,
    level: f64,
    sigma: f64,
    long_run: f64,
    next_level: f64,
}

const N: u64 = 6;
const MEAN: f64 = 43.1;
const SD: f64 = 1.7;
const DRAWS: usize = 200_000;

/// ln of N(x̄; θ, σ²/n) p(SS | σ).
fn ln_likelihood(level: f64, sigma: f64) -> f64 {
    let n = N as f64;
    let squares = (n - 1.0) * SD * SD + n * (MEAN - level) * (MEAN - level);
    -n * fm::ln(sigma) - 0.5 * squares / (sigma * sigma)
}

/// θ ~ N(40, 2²), σ² a scaled inverse χ² worth 8 readings' freedom about 1.5².
fn unknown_sd() -> (Posterior, Vec<Draw>) {
    let model = model(Within::Worth { sd: 1.5, df: 8.0 }, LevelPrior::Stated { mean: 40.0, sd: 2.0 });
    let mut pcg = Pcg::new(1);
    let draws = (0..DRAWS).map(|_| {
        let sigma = (8.0 * 1.5 * 1.5 / pcg.chi_square(8)).sqrt();
        let level = 40.0 + 2.0 * pcg.normal();
        Draw { weight: ln_likelihood(level, sigma), level, sigma, long_run: f64::NAN, next_level: f64::NAN }
    });
    (both(&model, &sums(N, MEAN, SD)), weighted(draws.collect()))
}

/// μ ~ N(41, 1.5²), levels about it with sd 1.8, σ = 1.5 known.
fn long_run() -> (Posterior, Vec<Draw>) {
    let level = LevelPrior::LongRun { mean: 41.0, sd: 1.5, between_sd: 1.8 };
    let model = model(Within::Known(1.5), level);
    let mut pcg = Pcg::new(2);
    let draws = (0..DRAWS).map(|_| {
        let long_run = 41.0 + 1.5 * pcg.normal();
        let level = long_run + 1.8 * pcg.normal();
        let next_level = long_run + 1.8 * pcg.normal();
        Draw { weight: ln_likelihood(level, 1.5), level, sigma: 1.5, long_run, next_level }
    });
    (both(&model, &sums(N, MEAN, SD)), weighted(draws.collect()))
}

fn weighted(mut draws: Vec<Draw>) -> Vec<Draw> {
    let top = draws.iter().map(|draw| draw.weight).fold(f64::NEG_INFINITY, f64::max);
    for draw in &mut draws {
        draw.weight = fm::exp(draw.weight - top);
    }
    draws
}

/// Weighted mean of f and its standard error.
fn mean_of(draws: &[Draw], mut f: impl FnMut(&Draw) -> f64) -> (f64, f64) {
    let values: Vec<(f64, f64)> = draws.iter().map(|draw| (draw.weight, f(draw))).collect();
    let whole: f64 = values.iter().map(|(weight, _)| weight).sum();
    let mean = values.iter().map(|(weight, value)| weight * value).sum::<f64>() / whole;
    let square: f64 =
        values.iter().map(|(weight, value)| weight * weight * (value - mean) * (value - mean)).sum();
    (mean, square.sqrt() / whole)
}

fn agrees(got: f64, (wanted, error): (f64, f64), what: &str) {
    assert!(error > 0.0 && (got - wanted).abs() < 5.0 * error, "{what}: {got}, simulated {wanted} ± {error}");
}

fn is(condition: bool) -> f64 {
    if condition { 1.0 } else { 0.0 }
}

/// Checks that the chance of `x` lying at or below each end is what the interval says.
fn interval_agrees(
    figures: &Figures,
    draws: &[Draw],
    mut x: impl FnMut(&Draw) -> f64,
    lower: f64,
    upper: f64,
    what: &str,
) {
    if let Some(end) = figures.value("lower") {
        agrees(lower, mean_of(draws, |draw| is(x(draw) <= end)), &format!("{what}, lower"));
    }
    if let Some(end) = figures.value("upper") {
        agrees(upper, mean_of(draws, |draw| is(x(draw) <= end)), &format!("{what}, upper"));
    }
}

#[test]
fn levels() {
    let (posterior, draws) = unknown_sd();
    let figures = ask("ask = \"level interval\"", &posterior);
    agrees(value(&figures, "estimate"), mean_of(&draws, |draw| draw.level), "level");
    interval_agrees(&figures, &draws, |draw| draw.level, 0.025, 0.975, "level");
    let one = ask("ask = \"level interval\"\ninterval = \"upper bound\"\nprobability = 0.9", &posterior);
    interval_agrees(&one, &draws, |draw| draw.level, 0.0, 0.9, "upper bound");
    let (lower, upper) = {
        let figures = ask("ask = \"level interval\"\ninterval = \"shortest\"", &posterior);
        (value(&figures, "lower"), value(&figures, "upper"))
    };
    agrees(0.95, mean_of(&draws, |draw| is(draw.level >= lower && draw.level <= upper)), "shortest");
    for (keys, beyond) in [
        ("above = 43", (|x| x > 43.0) as fn(f64) -> bool),
        ("below = 42", |x| x < 42.0),
        ("between = [42, 43]", |x| (42.0..=43.0).contains(&x)),
        ("outside = [42, 43]", |x| !(42.0..=43.0).contains(&x)),
    ] {
        let got = value(&ask(&format!("ask = \"level chance\"\n{keys}"), &posterior), "chance");
        agrees(got, mean_of(&draws, |draw| is(beyond(draw.level))), keys);
    }
}

#[test]
fn levels_of_other_periods() {
    let (posterior, draws) = long_run();
    for (period, of) in
        [("next", (|draw| draw.next_level) as fn(&Draw) -> f64), ("long run", |draw| draw.long_run)]
    {
        let keys = format!("ask = \"level interval\"\nof_period = \"{period}\"");
        let figures = ask(&keys, &posterior);
        agrees(value(&figures, "estimate"), mean_of(&draws, of), period);
        interval_agrees(&figures, &draws, of, 0.025, 0.975, period);
        let keys = format!("ask = \"level chance\"\nabove = 43\nof_period = \"{period}\"");
        agrees(value(&ask(&keys, &posterior), "chance"), mean_of(&draws, |draw| is(of(draw) > 43.0)), period);
    }
    let mut pcg = Pcg::new(3);
    let keys = "ask = \"reading chance\"\nabove = 44\nreadings = 5\nat_least = 2\nof_period = \"next\"";
    let simulated = mean_of(&draws, |draw| {
        let count = (0..5).filter(|_| draw.next_level + draw.sigma * pcg.normal() > 44.0).count();
        is(count >= 2)
    });
    agrees(value(&ask(keys, &posterior), "chance"), simulated, "at least 2 of 5 of the next period");
}

#[test]
fn readings_to_come() {
    let (posterior, draws) = unknown_sd();
    let mut pcg = Pcg::new(4);
    let figures = ask("ask = \"reading interval\"", &posterior);
    interval_agrees(&figures, &draws, |draw| draw.level + draw.sigma * pcg.normal(), 0.025, 0.975, "next");
    let figures = ask("ask = \"reading interval\"\nreadings = 4\nof = \"mean\"", &posterior);
    let mean = |draw: &Draw, pcg: &mut Pcg| draw.level + draw.sigma * pcg.normal() / 2.0;
    interval_agrees(&figures, &draws, |draw| mean(draw, &mut pcg), 0.025, 0.975, "mean of four");
    for interval in ["central", "lower bound", "upper bound"] {
        let keys =
            format!("ask = \"reading interval\"\nreadings = 7\nof = \"all\"\ninterval = \"{interval}\"");
        let figures = ask(&keys, &posterior);
        let (lower, upper) = (
            figures.value("lower").unwrap_or(f64::NEG_INFINITY),
            figures.value("upper").unwrap_or(f64::INFINITY),
        );
        let simulated = mean_of(&draws, |draw| {
            is((0..7).all(|_| {
                let x = draw.level + draw.sigma * pcg.normal();
                x >= lower && x <= upper
            }))
        });
        agrees(0.95, simulated, &format!("all of seven, {interval}"));
    }
    for (keys, beyond) in [
        ("above = 45", (|x| x > 45.0) as fn(f64) -> bool),
        ("outside = [40, 45]", |x| !(40.0..=45.0).contains(&x)),
        ("between = [42, 43]", |x| (42.0..=43.0).contains(&x)),
    ] {
        let got = value(&ask(&format!("ask = \"reading chance\"\n{keys}"), &posterior), "chance");
        agrees(got, mean_of(&draws, |draw| is(beyond(draw.level + draw.sigma * pcg.normal()))), keys);
        let keys = format!("{keys}\nreadings = 6");
        let chances = numbers(&ask(&format!("ask = \"count beyond\"\n{keys}"), &posterior), "chances");
        let counted: Vec<usize> = draws
            .iter()
            .map(|draw| (0..6).filter(|_| beyond(draw.level + draw.sigma * pcg.normal())).count())
            .collect();
        for (count, chance) in chances.iter().enumerate().filter(|(_, chance)| **chance > 1e-3) {
            let mut at = 0;
            let simulated = mean_of(&draws, |_| {
                at += 1;
                is(counted[at - 1] == count)
            });
            agrees(*chance, simulated, &format!("{keys}: {count}"));
        }
        let mut at = 0;
        let simulated = mean_of(&draws, |_| {
            at += 1;
            counted[at - 1] as f64
        });
        let mean = value(&ask(&format!("ask = \"count beyond\"\n{keys}"), &posterior), "estimate");
        agrees(mean, simulated, &keys);
    }
}

#[test]
fn shares_percentiles_and_spread() {
    let (posterior, draws) = unknown_sd();
    let p = |z: f64| 0.5 * fm::erfc(-z / std::f64::consts::SQRT_2);
    type ShareOf = fn(f64, f64, &dyn Fn(f64) -> f64) -> f64;
    let shares: [(&str, ShareOf); 4] = [
        ("above = 45", |level, sigma, p| p((level - 45.0) / sigma)),
        ("below = 42", |level, sigma, p| p((42.0 - level) / sigma)),
        ("outside = [41, 45]", |level, sigma, p| p((41.0 - level) / sigma) + p((level - 45.0) / sigma)),
        ("between = [41, 45]", |level, sigma, p| 1.0 - p((41.0 - level) / sigma) - p((level - 45.0) / sigma)),
    ];
    for (keys, share) in shares {
        let of = |draw: &Draw| share(draw.level, draw.sigma, &p);
        let figures = ask(
            &format!("ask = \"share beyond\"\n{keys}\ninterval = \"central\"\nmore_than = 0.3"),
            &posterior,
        );
        agrees(value(&figures, "estimate"), mean_of(&draws, of), keys);
        interval_agrees(&figures, &draws, of, 0.025, 0.975, keys);
        agrees(value(&figures, "chance"), mean_of(&draws, |draw| is(of(draw) > 0.3)), keys);
    }
    let z = 1.6448536269514722;
    let of = |draw: &Draw| draw.level + z * draw.sigma;
    let figures = ask("ask = \"percentile\"\npercentile = 95\nabove = 46", &posterior);
    agrees(value(&figures, "estimate"), mean_of(&draws, of), "percentile");
    interval_agrees(&figures, &draws, of, 0.025, 0.975, "percentile");
    agrees(value(&figures, "chance"), mean_of(&draws, |draw| is(of(draw) > 46.0)), "percentile");
    let mut pcg = Pcg::new(5);
    let end = value(&ask("ask = \"characteristic value\"\npercentile = 5", &posterior), "estimate");
    agrees(0.05, mean_of(&draws, |draw| is(draw.level + draw.sigma * pcg.normal() <= end)), "characteristic");
    let figures = ask("ask = \"sd interval\"\nsd = \"within\"", &posterior);
    interval_agrees(&figures, &draws, |draw| draw.sigma, 0.025, 0.975, "within sd");
    let chances = numbers(&ask("ask = \"classes\"\nbounds = [42, 43, 44]", &posterior), "chances");
    let edges = [f64::NEG_INFINITY, 42.0, 43.0, 44.0, f64::INFINITY];
    for (class, chance) in chances.iter().enumerate() {
        let simulated =
            mean_of(&draws, |draw| is(draw.level > edges[class] && draw.level <= edges[class + 1]));
        agrees(*chance, simulated, "class");
    }
    let figures = ask("ask = \"period mean\"\nreadings = 6\nabove = 43", &posterior);
    let mut of = |draw: &Draw| 0.5 * (MEAN + draw.level + draw.sigma * pcg.normal() / 6f64.sqrt());
    interval_agrees(&figures, &draws, &mut of, 0.025, 0.975, "period mean");
    agrees(value(&figures, "chance"), mean_of(&draws, |draw| is(of(draw) > 43.0)), "period mean");
}

/// On the log scale the same draws, exponentials taken: medians, ends and chances move along.
#[test]
fn on_the_log_scale() {
    let (linear, draws) = unknown_sd();
    let log = both(&Model { scale: Scale::Log, ..linear.model.clone() }, &linear.readings);
    let figures = put("log", "ask = \"level interval\"").figures(&log);
    interval_agrees(&figures, &draws, |draw| fm::exp(draw.level), 0.025, 0.975, "geometric mean");
    agrees(0.5, mean_of(&draws, |draw| is(fm::exp(draw.level) <= value(&figures, "estimate"))), "median");
    let figures = put("log", "ask = \"level interval\"\nmean = \"arithmetic\"").figures(&log);
    let arithmetic = |draw: &Draw| fm::exp(draw.level + 0.5 * draw.sigma * draw.sigma);
    interval_agrees(&figures, &draws, arithmetic, 0.025, 0.975, "arithmetic mean");
    let limit = fm::exp(44.0);
    let keys = format!("ask = \"level chance\"\nabove = {limit:?}\nmean = \"arithmetic\"");
    let simulated = mean_of(&draws, |draw| is(arithmetic(draw) > limit));
    agrees(value(&put("log", &keys).figures(&log), "chance"), simulated, "arithmetic mean");
}

/// With a bias common to all readings the arithmetic mean is that of the true level: the bias is drawn too.
#[test]
fn an_arithmetic_mean_under_a_bias() {
    let model = Model {
        scale: Scale::Log,
        bias_sd: 0.9,
        ..model(Within::Worth { sd: 1.5, df: 8.0 }, LevelPrior::Stated { mean: 40.0, sd: 2.0 })
    };
    let mut pcg = Pcg::new(6);
    let draws = (0..DRAWS).map(|_| {
        let sigma = (8.0 * 1.5 * 1.5 / pcg.chi_square(8)).sqrt();
        let level = 40.0 + 2.0 * pcg.normal();
        let measured = level + 0.9 * pcg.normal();
        Draw {
            weight: ln_likelihood(measured, sigma),
            level,
            sigma,
            long_run: measured,
            next_level: f64::NAN,
        }
    });
    let draws = weighted(draws.collect());
    let posterior = both(&model, &sums(N, MEAN, SD));
    let figures = put("log", "ask = \"level interval\"").figures(&posterior);
    interval_agrees(&figures, &draws, |draw| fm::exp(draw.level), 0.025, 0.975, "true level");
    let figures = put("log", "ask = \"level interval\"\nmean = \"arithmetic\"").figures(&posterior);
    let arithmetic = |draw: &Draw| fm::exp(draw.level + 0.5 * draw.sigma * draw.sigma);
    interval_agrees(&figures, &draws, arithmetic, 0.025, 0.975, "arithmetic mean");
    // Readings are meant as measured: the bias is in them.
    let figures = put("log", "ask = \"reading interval\"").figures(&posterior);
    let reading = |draw: &Draw, pcg: &mut Pcg| fm::exp(draw.long_run + draw.sigma * pcg.normal());
    interval_agrees(&figures, &draws, |draw| reading(draw, &mut pcg), 0.025, 0.975, "reading");
}
