//! Published and closed-form cases of the posterior, at the function that computes it.

use super::*;
use crate::math::fm;
use crate::prior::{Between, LevelPrior, Pattern, Periods, Within};
use crate::quantity::{Period, Scale};

pub(super) fn model(within: Within, level: LevelPrior) -> Model {
    Model { scale: Scale::Linear, within, level, bias_sd: 0.0, adjust: None }
}

pub(super) fn about_mean(between: Between, periods: Vec<Evidence>) -> Periods {
    let periods =
        periods.into_iter().enumerate().map(|(j, e)| (Period::new(&(2000 + j).to_string()), e)).collect();
    Periods { periods, pattern: Pattern::AboutAMean, between, weight: 1.0 }
}

pub(super) fn near(got: f64, wanted: f64, relative: f64) {
    assert!((got - wanted).abs() <= relative * wanted.abs(), "{got} is not {wanted} to {relative}");
}

const SCHOOLS: [(f64, f64); 8] = [
    (28.0, 15.0),
    (8.0, 10.0),
    (-3.0, 16.0),
    (7.0, 11.0),
    (-1.0, 9.0),
    (1.0, 11.0),
    (18.0, 10.0),
    (12.0, 18.0),
];

fn school(this: usize, between: Between, basis: Basis) -> Posterior {
    let means = |j: usize| Evidence::Mean { mean: SCHOOLS[j].0, uncertainty: SCHOOLS[j].1 };
    let others = (0..8).filter(|j| *j != this).map(means).collect();
    let model = model(Within::None, LevelPrior::Periods(about_mean(between, others)));
    solve(&model, &means(this), basis).unwrap()
}

/// Gelman et al., Bayesian Data Analysis, 3rd ed., §5.5: eight schools, flat μ and τ; figures recomputed
/// by an independent quadrature to 12 digits (the book's are from 200 draws).
#[test]
fn eight_schools() {
    let table: [(usize, [f64; 5]); 6] = [
        (0, [-2.105016400487, 5.975574731076, 10.24072034294, 15.53382893141, 31.62342190600]),
        (1, [-4.659458810740, 3.978875972285, 7.857881675512, 11.77109967887, 20.66179448682]),
        (2, [-11.48226924223, 2.032335204513, 6.649390220788, 10.86150695932, 20.45918489404]),
        (4, [-8.904878297404, 1.358508668089, 5.602786276603, 9.398539490184, 16.46860761319]),
        (5, [-8.558850160664, 2.256510880576, 6.511423852432, 10.44344491881, 18.59209434372]),
        (7, [-7.077606615216, 3.884947604320, 8.205269107534, 12.72342145509, 25.57899086125]),
    ];
    for (this, wanted) in table {
        let posterior = school(this, Between::Uniform, Basis::Both);
        let level = posterior.level(When::This).unwrap();
        for (p, wanted) in [0.025, 0.25, 0.5, 0.75, 0.975].into_iter().zip(wanted) {
            near(level.quantile(p).unwrap(), wanted, 2e-11);
        }
        let long_run = posterior.level(When::LongRun).unwrap();
        near(long_run.quantile(0.025).unwrap(), -2.090220382173, 2e-11);
        near(long_run.mean().unwrap(), 7.932375018238, 2e-11);
        near(long_run.sd().unwrap(), 5.178394779723, 2e-11);
        let tau = posterior.between_sd().unwrap();
        near(tau.quantile(0.025).unwrap(), 0.2426961206987, 2e-11);
        near(tau.median().unwrap(), 5.238514723140, 2e-11);
        near(tau.quantile(0.975).unwrap(), 20.75245612862, 2e-11);
        near(tau.mean().unwrap(), 6.575483346722, 2e-10);
        near(tau.sd().unwrap(), 5.650379336974, 2e-9);
        let next = posterior.level(When::Next).unwrap();
        near(next.quantile(0.025).unwrap(), -12.4128342104, 2e-11);
        near(next.sf(20.0), 0.0786338485451, 2e-11);
    }
    let a = school(0, Between::HalfCauchy(25.0), Basis::Both);
    near(a.level(When::This).unwrap().mean().unwrap(), 10.9407755115, 2e-11);
    near(a.level(When::This).unwrap().sd().unwrap(), 7.87298213207, 2e-11);
    near(a.between_sd().unwrap().quantile(0.975).unwrap(), 18.0325696606, 2e-11);
    let a = school(0, Between::HalfNormal(10.0), Basis::Both);
    near(a.level(When::This).unwrap().mean().unwrap(), 10.1798129740, 2e-11);
    near(a.between_sd().unwrap().quantile(0.025).unwrap(), 0.188537741747, 2e-11);
}

/// Gelman et al., Bayesian Data Analysis, 3rd ed., exercise 2.8 (from memory; recomputed).
#[test]
fn a_normal_prior_and_a_known_sd() {
    let model = model(Within::Known(20.0), LevelPrior::Stated { mean: 180.0, sd: 40.0 });
    let posterior =
        solve(&model, &Evidence::Sums { n: 10, mean: 150.0, ss: None, rest: 0.0 }, Basis::Both).unwrap();
    let level = posterior.level(When::This).unwrap();
    near(level.mean().unwrap(), 150.7317073170732, 1e-14);
    near(level.sd().unwrap(), 6.246950475544243, 1e-14);
    near(level.quantile(0.025).unwrap(), 138.4879093718011, 1e-14);
    let reading = posterior.reading(When::This, 1, None).unwrap();
    near(reading.upper_quantile(0.025).unwrap(), 191.7986540796741, 1e-14);
    assert_eq!(posterior.quadrature_error, 0.0);
    assert!(posterior.level(When::Next).is_err() && posterior.within_sd().is_err());
}

/// Formulas of the JCSS Probabilistic Model Code, part 3.0, annex A; round inputs.
#[test]
fn a_prior_worth_readings() {
    let model = model(Within::Worth { sd: 4.0, df: 8.0 }, LevelPrior::Worth { mean: 30.0, readings: 2.0 });
    let posterior = solve(
        &model,
        &Evidence::Sums { n: 6, mean: 33.5, ss: Some(5.0 * 3.1 * 3.1), rest: 0.0 },
        Basis::Both,
    )
    .unwrap();
    near(posterior.level(When::This).unwrap().mean().unwrap(), 32.625, 1e-13);
    near(posterior.reading(When::This, 1, None).unwrap().quantile(0.05).unwrap(), 25.66315849944776, 1e-11);
}

/// A flat prior and p(σ²) ∝ 1/σ²: Student's t (closed form, 13 digits).
#[test]
fn a_flat_prior_and_an_unknown_sd() {
    let model = model(Within::Readings, LevelPrior::Flat);
    let readings = Evidence::Sums { n: 8, mean: 41.2, ss: Some(7.0 * 3.1 * 3.1), rest: 0.0 };
    let posterior = solve(&model, &readings, Basis::Both).unwrap();
    near(posterior.reading(When::This, 1, None).unwrap().sf(50.0), 0.01585299970027, 1e-11);
    near(posterior.level(When::This).unwrap().sf(50.0), 0.00004453041238618, 1e-11);
    // One or more of the next 4: 1 − E (chance of one inside)⁴.
    let any = posterior
        .expect(When::This, &|from_origin, sigma| {
            let inside = crate::math::normal::cdf((50.0 - posterior.origin() - from_origin) / sigma);
            1.0 - inside * inside * inside * inside
        })
        .unwrap();
    near(any, 0.05609594791234, 1e-11);
    assert!(solve(&model, &readings, Basis::PriorOnly).is_err());
}

/// Two-part mixture prior in the manner of Schmidli et al. 2014 (closed form, 16 digits).
#[test]
fn a_mixture_prior_and_data_in_conflict() {
    let parts = vec![
        (0.8, LevelPrior::Stated { mean: 50.0, sd: 1.0 }),
        (0.2, LevelPrior::Stated { mean: 50.0, sd: 10.0 }),
    ];
    let model = model(Within::Known(1.2), LevelPrior::Mixture(parts));
    let posterior =
        solve(&model, &Evidence::Sums { n: 1, mean: 56.0, ss: None, rest: 0.0 }, Basis::Both).unwrap();
    near(posterior.pieces().unwrap()[0].weight, 0.01889883500173906, 1e-12);
    let level = posterior.level(When::This).unwrap();
    near(level.mean().unwrap(), 55.84951571345135, 1e-13);
    near(level.quantile(0.025).unwrap(), 53.13665179531665, 1e-12);
}

/// σ of this period alone: integrals over the level, σ taken out in closed form, and sums over nodes of σ are two
/// roads to the same laws.
#[test]
fn the_level_alone_agrees_with_nodes_of_its_sd() {
    let readings = Evidence::Sums { n: 5, mean: 10.9, ss: Some(4.0 * 0.7 * 0.7), rest: 0.0 };
    let stated = LevelPrior::Stated { mean: 10.0, sd: 0.4 };
    let history = || {
        let periods = [(6, 9.6, 0.5), (5, 10.3, 0.9), (7, 10.1, 0.6), (4, 9.2, 0.8)]
            .map(|(n, mean, sd)| Evidence::Sums { n, mean, ss: Some((n as f64 - 1.0) * sd * sd), rest: 0.0 });
        LevelPrior::Periods(about_mean(Between::HalfNormal(0.6), periods.to_vec()))
    };
    for (within, level) in [
        (Within::Readings, stated.clone()),
        (Within::Worth { sd: 0.5, df: 7.0 }, stated),
        (Within::Readings, LevelPrior::LongRun { mean: 10.0, sd: 0.5, between_sd: 0.3 }),
        (Within::ReadingsBeside { history_sd: 0.7 }, history()),
    ] {
        let model = model(within, level);
        let (level, nodes) = (
            solve(&model, &readings, Basis::Both).unwrap(),
            solve::solve_on_nodes(&model, &readings, Basis::Both).unwrap(),
        );
        assert!(level.has_own_sd() && !nodes.has_own_sd(), "{model:?}");
        near(level.prior_weight().unwrap(), nodes.prior_weight().unwrap(), 1e-10);
        let laws = |p: &Posterior| {
            let mut laws = vec![
                p.level(When::This).unwrap(),
                p.reading(When::This, 1, None).unwrap(),
                p.reading(When::This, 40, None).unwrap(),
                p.affine(When::This, 0.4, &|s| (3.0, 0.05 * s * s)).unwrap(),
                p.within_sd().unwrap(),
            ];
            // Over nodes of several spreads these take a minute, or are refused.
            if matches!(p.model.level, LevelPrior::Stated { .. }) {
                laws.push(p.affine(When::This, 1.0, &|s| (1.6 * s, 0.0)).unwrap());
                laws.push(p.affine(When::This, 1.0, &|s| (-0.02 * s, 0.0)).unwrap());
                laws.push(p.level_shifted(When::This, &|s| 0.5 * s * s).unwrap());
            }
            laws
        };
        for (i, (a, b)) in laws(&level).iter().zip(&laws(&nodes)).enumerate() {
            let spread = b.quantile(0.75).unwrap() - b.quantile(0.25).unwrap();
            // Nodes hold laws that move with σ to 1e−6 only.
            for p in [1e-5, 0.025, 0.3, 0.5] {
                let both = [(a.quantile(p), b.quantile(p)), (a.upper_quantile(p), b.upper_quantile(p))];
                for (x, y) in both.map(|(x, y)| (x.unwrap(), y.unwrap())) {
                    assert!((x - y).abs() < 1e-10 * spread.max(y.abs()), "{model:?} {i} {p}: {x} {y}");
                    assert!(
                        (a.cdf(y) / b.cdf(y) - 1.0).abs() < 1e-9,
                        "{model:?} {i} {p} {} {}",
                        a.cdf(y),
                        b.cdf(y)
                    );
                    assert!(
                        (a.sf(y) / b.sf(y) - 1.0).abs() < 1e-9,
                        "{model:?} {i} {p} {} {}",
                        a.sf(y),
                        b.sf(y)
                    );
                    assert!(
                        (a.density(y) / b.density(y) - 1.0).abs() < 1e-8,
                        "{model:?} {i} {p} {y}: {} {}",
                        a.density(y),
                        b.density(y)
                    );
                }
            }
            match (a.mean(), b.mean()) {
                (Ok(x), Ok(y)) => assert!((x / y - 1.0).abs() < 1e-9, "mean {model:?} {i} {x} {y}"),
                (x, y) => assert!(x.is_err() == y.is_err(), "{i}"),
            }
            // The second moment of σ² hangs on nodes so far out that they are left out.
            match (a.sd(), b.sd()) {
                _ if i == 7 => {}
                (Ok(x), Ok(y)) => assert!((x / y - 1.0).abs() < 1e-8, "sd {model:?} {i} {x} {y}"),
                (x, y) => assert!(x.is_err() == y.is_err(), "{i}"),
            }
        }
        let beyond = |p: &Posterior| {
            let place = p.origin();
            p.expect(When::This, &|level, sd| crate::math::normal::sf((11.5 - place - level) / sd)).unwrap()
        };
        near(beyond(&level), beyond(&nodes), 1e-10);
    }
}

/// The same model's far tails and moments by mpmath, 30 digits: ∫ N(θ; 10, 0.16) S(θ)^{−5/2} P(…| θ) dθ,
/// S = 1.96 + 5 (θ − 10.9)², P by the incomplete gamma function.
#[test]
#[allow(clippy::excessive_precision)]
fn the_level_alone_in_its_far_tails() {
    let readings = Evidence::Sums { n: 5, mean: 10.9, ss: Some(1.96), rest: 0.0 };
    let stated = LevelPrior::Stated { mean: 10.0, sd: 0.4 };
    let posterior = solve(&model(Within::Readings, stated), &readings, Basis::Both).unwrap();
    let percentile = posterior.affine(When::This, 1.0, &|s| (1.6 * s, 0.0)).unwrap();
    near(percentile.sf(124.558681735706), 9.9999999999999715205336066811e-10, 1e-12);
    near(percentile.sf(124.63667715647328), 9.96603155998142888664390957554e-10, 1e-12);
    near(percentile.mean().unwrap(), 11.9990941664463750666818443903, 1e-13);
    near(percentile.sd().unwrap(), 0.676600817562379127716675814596, 1e-12);
    let within = posterior.within_sd().unwrap();
    near(within.mean().unwrap(), 0.961829540714202463415934466512, 1e-12);
    near(within.sd().unwrap(), 0.472461657104026332442472575826, 1e-12);
    let arithmetic = posterior.level_shifted(When::This, &|s| 0.5 * s * s).unwrap();
    near(arithmetic.mean().unwrap(), 11.0343349427156391448007969398, 1e-13);
    near(arithmetic.sd().unwrap(), 0.927097901929559951688175278689, 1e-12);
}

/// The pieces and the closed form are two roads to the same law.
#[test]
fn pieces_agree_with_the_closed_form() {
    let readings = Evidence::Sums { n: 4, mean: 33.5, ss: Some(3.0 * 3.1 * 3.1), rest: 0.0 };
    for (within, level) in [
        (Within::Worth { sd: 4.0, df: 8.0 }, LevelPrior::Worth { mean: 30.0, readings: 2.0 }),
        (Within::Readings, LevelPrior::Flat),
        (Within::Worth { sd: 4.0, df: 0.5 }, LevelPrior::Flat),
        (Within::Readings, LevelPrior::Worth { mean: 33.0, readings: 40.0 }),
    ] {
        let posterior = solve(&model(within, level), &readings, Basis::Both).unwrap();
        for share in [0.0, 1.0] {
            let closed = posterior.affine(When::This, 1.0, &|s| (0.0, share * s * s)).unwrap();
            let parts = posterior.pieces().unwrap().iter();
            let parts =
                parts.map(|p| (p.weight, p.level_mean, p.level_var + share * p.reading_sd * p.reading_sd));
            let pieces = mixture(parts.collect(), 9.0, "").unwrap();
            for t in [-200.0, 0.0, 25.0, 32.0, 35.0, 44.0, 90.0] {
                if closed.cdf(t) > 1e-12 {
                    near(pieces.cdf(t), closed.cdf(t), 1e-10);
                }
                if closed.sf(t) > 1e-12 {
                    near(pieces.sf(t), closed.sf(t), 1e-10);
                }
            }
            for p in [1e-6, 0.025, 0.3, 0.975] {
                near(pieces.quantile(p).unwrap(), closed.quantile(p).unwrap(), 1e-10);
            }
        }
        let closed = posterior.within_sd().unwrap();
        let panels =
            marginal::panels(&posterior.inner.weighted().unwrap(), plane::Coordinate::Sd, 4.0).unwrap();
        let scale = posterior.inner.units.scale;
        for p in [0.001, 0.025, 0.5, 0.9, 0.999] {
            near(scale * fm::exp(panels.quantile(p).unwrap()), closed.quantile(p).unwrap(), 1e-10);
        }
    }
}
