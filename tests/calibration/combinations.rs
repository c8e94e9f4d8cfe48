//! The combinations of priors, spreads and kinds of readings, each as a way of drawing a trial.
//!
//! Parameters with a proper prior are drawn from it. Where the prior is flat for a location, or p(σ²) ∝ 1/σ² for a
//! scale, no draw is possible and none is needed: those are the right Haar measures of their groups, under which
//! the posterior chance of what is at or below the truth is uniform whatever the true value is. So these are
//! drawn from ranges of our own choice. (A flat prior of the between sd is no such measure, and is no part here.)

use super::random::Random;
use super::trial::{Of, Past, Trial, marked, rounded, sums, uncertain};
use reassay::data::evidence::Evidence;
use reassay::posterior::{Basis, When};
use reassay::prior::{Between, LevelPrior, Pattern, Within};
use reassay::quantity::{Period, Scale};

pub struct Combination {
    pub name: &'static str,
    /// Draws of the daily run, and of the large one.
    pub draws: (usize, usize),
    pub draw: fn(&mut Random) -> Trial,
}

/// How many draws, by what a trial costs: microseconds, a millisecond or some, or ten. The last two, a good part
/// of a second and more, are part of the large run alone.
const CHEAP: (usize, usize) = (1000, 20_000);
const FAIR: (usize, usize) = (200, 10_000);
const DEAR: (usize, usize) = (100, 2000);
const DEARER: (usize, usize) = (0, 200);
const DEAREST: (usize, usize) = (0, 100);

const fn made(name: &'static str, draws: (usize, usize), draw: fn(&mut Random) -> Trial) -> Combination {
    Combination { name, draws, draw }
}

pub const ALL: &[Combination] = &[
    made("stated, sd known", CHEAP, stated_known),
    made("stated, sd worth 5 df", DEAR, stated_worth),
    made("worth readings, sd worth 4 df", FAIR, worth_readings),
    made("stated long run, sd known", CHEAP, long_run_known),
    made("stated long run, sd worth 6 df", DEAR, long_run_worth),
    made("flat, sd known", CHEAP, flat_known),
    made("flat, sd worth 3 df", FAIR, flat_worth),
    made("flat, sd from readings", FAIR, flat_readings),
    made("flat, sd of peers", CHEAP, flat_peers_sd),
    made("history half-normal, sd known", DEAR, half_normal_known),
    made("history half-normal, sd worth 8 df", DEARER, half_normal_worth),
    made("history half-normal, sd worth 8 df", DEAREST, changes_worth),
    made("history half-cauchy, sd known", DEAR, half_cauchy_known),
    made("history between sd known, sd known", CHEAP, between_known),
    made("history without between, sd of history", DEAR, none_pooled),
    made("history half-normal, no readings yet", DEAR, prior_only),
    made("random walk half-normal, sd known", DEAR, walk_known),
    made("random walk half-cauchy, sd worth 6 df", DEARER, walk_worth),
    made("peers half-normal, sd known", DEAR, peers_known),
    made("mixture of two stated, sd known", CHEAP, mixture_known),
    made("mixture of long runs, sd worth 5 df", DEAR, mixture_worth),
    made("own uncertainties alone, stated", CHEAP, own_alone),
    made("own uncertainties, sd worth 5 df", DEAR, own_worth),
    made("means with uncertainties, half-cauchy", DEAR, means_half_cauchy),
    made("bias, stated, sd known", CHEAP, bias_stated),
    made("bias, stated long run, sd worth 6 df", DEAR, bias_long_run),
    made("bias, history half-normal, sd known", DEAR, bias_history),
    made("log scale, stated, sd worth 9 df", DEAR, log_scale),
    made("marked, stated, sd known", DEAR, marked_known),
    made("marked, stated, sd worth 6 df", DEAREST, marked_worth),
    made("marked, history between sd known, sd known", DEAR, marked_now),
    made("history with marks, between sd known, sd known", DEAR, marked_past),
    made("rounded, stated, sd known", DEAR, rounded_known),
    made("rounded, flat, sd worth 5 df", DEAREST, rounded_worth),
];

fn stated_known(random: &mut Random) -> Trial {
    let (mean, sd, sigma) = (42.0, 2.0, 1.5);
    let level = random.normal(mean, sd);
    let n = random.of(&[1, 3, 12]);
    let readings = sums(&random.normals(n, level, sigma));
    let mean_of_3 = random.normal(level, sigma / 3.0_f64.sqrt());
    Trial::new(Within::Known(sigma), LevelPrior::Stated { mean, sd }, readings)
        .level(level)
        .next_reading(random, level, sigma)
        .ask("mean of next 3", Of::Readings(When::This, 3, 0.0), mean_of_3)
}

fn stated_worth(random: &mut Random) -> Trial {
    let (mean, sd, typical) = (42.0, 2.0, 1.5);
    let sigma = random.sd_worth(typical, 5);
    let level = random.normal(mean, sd);
    let n = random.of(&[1, 2, 6, 15]);
    let readings = sums(&random.normals(n, level, sigma));
    let mean_of_3 = random.normal(level, sigma / 3.0_f64.sqrt());
    Trial::new(Within::Worth { sd: typical, df: 5.0 }, LevelPrior::Stated { mean, sd }, readings)
        .level(level)
        .next_reading(random, level, sigma)
        .ask("mean of next 3", Of::Readings(When::This, 3, 0.0), mean_of_3)
        .ask("95th percentile", Of::Percentile(1.6448536269514722), level + 1.6448536269514722 * sigma)
        .ask("within sd", Of::WithinSd, sigma)
}

fn worth_readings(random: &mut Random) -> Trial {
    let (mean, readings, typical) = (-3.0, 2.5_f64, 0.8);
    let sigma = random.sd_worth(typical, 4);
    let level = random.normal(mean, sigma / readings.sqrt());
    let n = random.of(&[1, 4, 10]);
    let own = sums(&random.normals(n, level, sigma));
    Trial::new(Within::Worth { sd: typical, df: 4.0 }, LevelPrior::Worth { mean, readings }, own)
        .level(level)
        .next_reading(random, level, sigma)
        .ask("within sd", Of::WithinSd, sigma)
        .ask("95th percentile", Of::Percentile(1.6448536269514722), level + 1.6448536269514722 * sigma)
}

fn long_run_known(random: &mut Random) -> Trial {
    let (mean, sd, between_sd, sigma) = (10.0, 1.2, 0.9, 1.4);
    let mu = random.normal(mean, sd);
    let level = random.normal(mu, between_sd);
    let n = random.of(&[1, 5]);
    let readings = sums(&random.normals(n, level, sigma));
    let next = random.normal(mu, between_sd);
    let reading = random.normal(next, sigma);
    Trial::new(Within::Known(sigma), LevelPrior::LongRun { mean, sd, between_sd }, readings)
        .level(level)
        .next_level(next)
        .long_run(mu)
        .ask("reading of the next period", Of::Readings(When::Next, 1, 0.0), reading)
        .ask("change from the long run", Of::ChangeFromLongRun, level - mu)
}

fn long_run_worth(random: &mut Random) -> Trial {
    let (mean, sd, between_sd, typical) = (10.0, 1.2, 0.9, 1.4);
    let sigma = random.sd_worth(typical, 6);
    let mu = random.normal(mean, sd);
    let level = random.normal(mu, between_sd);
    let n = random.of(&[2, 5]);
    let readings = sums(&random.normals(n, level, sigma));
    let next = random.normal(mu, between_sd);
    let reading = random.normal(next, sigma);
    let prior = LevelPrior::LongRun { mean, sd, between_sd };
    Trial::new(Within::Worth { sd: typical, df: 6.0 }, prior, readings)
        .level(level)
        .next_level(next)
        .long_run(mu)
        .ask("reading of the next period", Of::Readings(When::Next, 1, 0.0), reading)
        .ask("change from the long run", Of::ChangeFromLongRun, level - mu)
}

fn flat_known(random: &mut Random) -> Trial {
    let (level, sigma) = (random.between(-1e4, 1e4), 2.0);
    let n = random.of(&[1, 8]);
    let readings = sums(&random.normals(n, level, sigma));
    Trial::new(Within::Known(sigma), LevelPrior::Flat, readings)
        .level(level)
        .next_reading(random, level, sigma)
}

fn flat_worth(random: &mut Random) -> Trial {
    let level = random.between(-100.0, 100.0);
    let sigma = random.sd_worth(2.0, 3);
    let n = random.of(&[1, 2, 8]);
    let readings = sums(&random.normals(n, level, sigma));
    Trial::new(Within::Worth { sd: 2.0, df: 3.0 }, LevelPrior::Flat, readings)
        .level(level)
        .next_reading(random, level, sigma)
        .ask("within sd", Of::WithinSd, sigma)
}

fn flat_readings(random: &mut Random) -> Trial {
    let level = random.between(-100.0, 100.0);
    let sigma = random.between(0.01, 30.0);
    let n = random.of(&[2, 3, 10]);
    let readings = sums(&random.normals(n, level, sigma));
    Trial::new(Within::Readings, LevelPrior::Flat, readings)
        .level(level)
        .next_reading(random, level, sigma)
        .ask("within sd", Of::WithinSd, sigma)
        .ask("95th percentile", Of::Percentile(1.6448536269514722), level + 1.6448536269514722 * sigma)
}

fn flat_peers_sd(random: &mut Random) -> Trial {
    let level = random.between(-100.0, 100.0);
    let sigma = random.between(0.1, 3.0);
    let readings = sums(&random.normals(2, level, sigma));
    let others = (0..4).map(|k| sums(&random.normals(3, 50.0 * f64::from(k), sigma))).collect();
    Trial::new(Within::Pooled { others }, LevelPrior::Flat, readings)
        .level(level)
        .next_reading(random, level, sigma)
        .ask("within sd", Of::WithinSd, sigma)
}

/// What a model of periods about a mean is asked.
fn ask_about_mean(
    random: &mut Random,
    trial: Trial,
    (mu, tau): (f64, f64),
    (level, sigma): (f64, f64),
) -> Trial {
    let next = random.normal(mu, tau);
    let reading = random.normal(next, sigma);
    trial
        .level(level)
        .next_level(next)
        .long_run(mu)
        .next_reading(random, level, sigma)
        .ask("reading of the next period", Of::Readings(When::Next, 1, 0.0), reading)
        .ask("between sd", Of::BetweenSd, tau)
}

/// Changes, whose laws are steep about 0 and take a finer grid.
fn ask_changes(trial: Trial, past: &Past, mu: f64, level: f64) -> Trial {
    let (change, truth) = past.change(1, level);
    trial.ask("change from an earlier period", change, truth).ask(
        "change from the long run",
        Of::ChangeFromLongRun,
        level - mu,
    )
}

fn half_normal_known(random: &mut Random) -> Trial {
    let (mu, tau, sigma) = (random.between(-50.0, 50.0), random.half_normal(1.5), 2.0);
    let past = Past::about(random, mu, tau, sigma, &[4, 6, 1, 5]);
    let level = random.normal(mu, tau);
    let readings = sums(&random.normals(4, level, sigma));
    let trial = Trial::new(Within::Known(sigma), past.history(Between::HalfNormal(1.5)), readings);
    let trial = ask_about_mean(random, trial, (mu, tau), (level, sigma));
    ask_changes(trial, &past, mu, level)
}

fn half_normal_worth(random: &mut Random) -> Trial {
    let (mu, tau) = (random.between(-50.0, 50.0), random.half_normal(1.5));
    let sigma = random.sd_worth(2.0, 8);
    let past = Past::about(random, mu, tau, sigma, &[4, 6, 5]);
    let level = random.normal(mu, tau);
    let readings = sums(&random.normals(4, level, sigma));
    let within = Within::Worth { sd: 2.0, df: 8.0 };
    let trial = Trial::new(within, past.history(Between::HalfNormal(1.5)), readings);
    ask_about_mean(random, trial, (mu, tau), (level, sigma)).ask("within sd", Of::WithinSd, sigma)
}

fn changes_worth(random: &mut Random) -> Trial {
    let (mu, tau) = (random.between(-50.0, 50.0), random.half_normal(1.5));
    let sigma = random.sd_worth(2.0, 8);
    let past = Past::about(random, mu, tau, sigma, &[4, 6, 5]);
    let level = random.normal(mu, tau);
    let readings = sums(&random.normals(4, level, sigma));
    let within = Within::Worth { sd: 2.0, df: 8.0 };
    let trial = Trial::new(within, past.history(Between::HalfNormal(1.5)), readings);
    ask_changes(trial, &past, mu, level)
}

fn half_cauchy_known(random: &mut Random) -> Trial {
    let (mu, tau, sigma) = (random.between(-50.0, 50.0), random.half_cauchy(0.7), 1.0);
    let past = Past::about(random, mu, tau, sigma, &[3, 2, 5]);
    let level = random.normal(mu, tau);
    let readings = sums(&random.normals(2, level, sigma));
    let trial = Trial::new(Within::Known(sigma), past.history(Between::HalfCauchy(0.7)), readings);
    let trial = ask_about_mean(random, trial, (mu, tau), (level, sigma));
    ask_changes(trial, &past, mu, level)
}

fn between_known(random: &mut Random) -> Trial {
    let (mu, tau, sigma) = (random.between(-50.0, 50.0), 0.8, 1.0);
    let past = Past::about(random, mu, tau, sigma, &[3, 2, 5]);
    let level = random.normal(mu, tau);
    let n = random.of(&[1, 6]);
    let readings = sums(&random.normals(n, level, sigma));
    let next = random.normal(mu, tau);
    let (change, truth) = past.change(0, level);
    Trial::new(Within::Known(sigma), past.history(Between::Known(tau)), readings)
        .level(level)
        .next_level(next)
        .long_run(mu)
        .ask("change from an earlier period", change, truth)
}

/// One level for all periods: readings of a location and scale family.
fn none_pooled(random: &mut Random) -> Trial {
    let (level, sigma) = (random.between(-50.0, 50.0), random.between(0.1, 5.0));
    let past = Past::about(random, level, 0.0, sigma, &[2, 3, 1]);
    let readings = sums(&random.normals(3, level, sigma));
    Trial::new(Within::Pooled { others: Vec::new() }, past.history(Between::None), readings)
        .level(level)
        .next_reading(random, level, sigma)
        .ask("within sd", Of::WithinSd, sigma)
}

fn prior_only(random: &mut Random) -> Trial {
    let (mu, tau, sigma) = (random.between(-50.0, 50.0), random.half_normal(1.5), 2.0);
    let past = Past::about(random, mu, tau, sigma, &[4, 6, 5, 3]);
    let level = random.normal(mu, tau);
    let mut trial =
        Trial::new(Within::Known(sigma), past.history(Between::HalfNormal(1.5)), Evidence::Nothing)
            .level(level)
            .long_run(mu)
            .next_reading(random, level, sigma)
            .ask("between sd", Of::BetweenSd, tau);
    trial.basis = Basis::PriorOnly;
    trial
}

const GAPS: ([f64; 4], f64) = ([1.0, 1.0, 2.0, 1.0], 2.0);

fn walk_known(random: &mut Random) -> Trial {
    let (start, step, sigma) = (random.between(-50.0, 50.0), random.half_normal(1.0), 1.5);
    let (past, level) = Past::walk(random, (start, step, sigma), &[4, 2, 6, 3], (&GAPS.0, GAPS.1));
    let readings = sums(&random.normals(3, level, sigma));
    let (change, truth) = past.change(2, level);
    walked(random, Within::Known(sigma), Between::HalfNormal(1.0), past, readings, (level, step, sigma)).ask(
        "change from an earlier period",
        change,
        truth,
    )
}

fn walk_worth(random: &mut Random) -> Trial {
    let (start, step) = (random.between(-50.0, 50.0), random.half_cauchy(0.5));
    let sigma = random.sd_worth(1.5, 6);
    let (past, level) = Past::walk(random, (start, step, sigma), &[4, 2, 6, 3], (&GAPS.0, GAPS.1));
    let readings = sums(&random.normals(3, level, sigma));
    let within = Within::Worth { sd: 1.5, df: 6.0 };
    walked(random, within, Between::HalfCauchy(0.5), past, readings, (level, step, sigma)).ask(
        "within sd",
        Of::WithinSd,
        sigma,
    )
}

fn walked(
    random: &mut Random,
    within: Within,
    between: Between,
    past: Past,
    readings: Evidence,
    (level, step, sigma): (f64, f64, f64),
) -> Trial {
    let next = random.normal(level, step);
    let pattern = Pattern::RandomWalk { gaps: GAPS.0.to_vec(), last_gap: GAPS.1 };
    Trial::new(within, LevelPrior::Periods(past.prior(pattern, between)), readings)
        .level(level)
        .next_level(next)
        .next_reading(random, level, sigma)
        .ask("between sd", Of::BetweenSd, step)
}

fn peers_known(random: &mut Random) -> Trial {
    let (mu, tau, sigma) = (random.between(-50.0, 50.0), random.half_normal(1.5), 2.0);
    let past = Past::about(random, mu, tau, sigma, &[4, 6, 1, 5]);
    let level = random.normal(mu, tau);
    let readings = sums(&random.normals(4, level, sigma));
    let peers = LevelPrior::Peers(past.prior(Pattern::AboutAMean, Between::HalfNormal(1.5)));
    let other = past.periods[1].1.clone();
    let trial = Trial::new(Within::Known(sigma), peers, readings);
    let model = Box::new(trial.model.clone());
    trial.level(level).next_reading(random, level, sigma).ask("between sd", Of::BetweenSd, tau).ask(
        "difference from a peer",
        Of::Difference(model, other),
        level - past.levels[1],
    )
}

fn mixture_known(random: &mut Random) -> Trial {
    let parts = [(0.8, 50.0, 1.0), (0.2, 52.0, 6.0)];
    let (_, mean, sd) = parts[usize::from(random.uniform() > 0.8)];
    let level = random.normal(mean, sd);
    let readings = sums(&random.normals(3, level, 2.0));
    let parts = parts.map(|(weight, mean, sd)| (weight, LevelPrior::Stated { mean, sd })).to_vec();
    Trial::new(Within::Known(2.0), LevelPrior::Mixture(parts), readings)
        .level(level)
        .next_reading(random, level, 2.0)
}

fn mixture_worth(random: &mut Random) -> Trial {
    let parts = [(0.7, 50.0, 1.0, 0.5), (0.3, 53.0, 2.0, 3.0)];
    let (_, mean, sd, between_sd) = parts[usize::from(random.uniform() > 0.7)];
    let sigma = random.sd_worth(1.5, 5);
    let mu = random.normal(mean, sd);
    let level = random.normal(mu, between_sd);
    let readings = sums(&random.normals(3, level, sigma));
    let next = random.normal(mu, between_sd);
    let part = |(weight, mean, sd, between_sd)| (weight, LevelPrior::LongRun { mean, sd, between_sd });
    let level_prior = LevelPrior::Mixture(parts.map(part).to_vec());
    Trial::new(Within::Worth { sd: 1.5, df: 5.0 }, level_prior, readings)
        .level(level)
        .next_level(next)
        .long_run(mu)
        .ask("within sd", Of::WithinSd, sigma)
}

const OWN: [f64; 4] = [0.5, 2.0, 1.0, 0.7];

fn own_alone(random: &mut Random) -> Trial {
    let (mean, sd) = (7.0, 1.0);
    let level = random.normal(mean, sd);
    let readings = uncertain(random, level, 0.0, &OWN);
    let reading = random.normal(level, 0.6);
    Trial::new(Within::None, LevelPrior::Stated { mean, sd }, readings).level(level).ask(
        "next reading",
        Of::Readings(When::This, 1, 0.6),
        reading,
    )
}

fn own_worth(random: &mut Random) -> Trial {
    let (mean, sd) = (7.0, 1.0);
    let sigma = random.sd_worth(1.0, 5);
    let level = random.normal(mean, sd);
    let readings = uncertain(random, level, sigma, &OWN);
    let reading = random.normal(level, (sigma * sigma + 0.36).sqrt());
    Trial::new(Within::Worth { sd: 1.0, df: 5.0 }, LevelPrior::Stated { mean, sd }, readings)
        .level(level)
        .ask("next reading", Of::Readings(When::This, 1, 0.6), reading)
        .ask("within sd", Of::WithinSd, sigma)
}

fn means_half_cauchy(random: &mut Random) -> Trial {
    let (mu, tau) = (random.between(-50.0, 50.0), random.half_cauchy(1.0));
    let period = |random: &mut Random, uncertainty: f64| {
        let level = random.normal(mu, tau);
        (level, Evidence::Mean { mean: random.normal(level, uncertainty), uncertainty })
    };
    let made: Vec<(f64, Evidence)> = [0.5, 1.5, 0.9, 0.3].iter().map(|u| period(random, *u)).collect();
    let (level, readings) = period(random, 0.8);
    let next = random.normal(mu, tau);
    let periods = made.into_iter().enumerate().map(|(j, (_, e))| (Period::new(&j.to_string()), e)).collect();
    let past = Past { periods, levels: Vec::new() };
    Trial::new(Within::None, past.history(Between::HalfCauchy(1.0)), readings)
        .level(level)
        .next_level(next)
        .long_run(mu)
        .ask("between sd", Of::BetweenSd, tau)
}

fn bias_stated(random: &mut Random) -> Trial {
    let (mean, sd, sigma, bias_sd) = (42.0, 2.0, 1.5, 1.0);
    let level = random.normal(mean, sd);
    let measured = random.normal(level, bias_sd);
    let readings = sums(&random.normals(6, measured, sigma));
    let mut trial = Trial::new(Within::Known(sigma), LevelPrior::Stated { mean, sd }, readings)
        .level(level)
        .next_reading(random, measured, sigma);
    trial.model.bias_sd = bias_sd;
    trial
}

fn bias_long_run(random: &mut Random) -> Trial {
    let (mean, sd, between_sd, bias_sd) = (10.0, 1.2, 0.9, 0.7);
    let sigma = random.sd_worth(1.4, 6);
    let mu = random.normal(mean, sd);
    let level = random.normal(mu, between_sd);
    let bias = random.normal(0.0, bias_sd);
    let readings = sums(&random.normals(5, level + bias, sigma));
    let next = random.normal(mu, between_sd);
    let prior = LevelPrior::LongRun { mean, sd, between_sd };
    let mut trial = Trial::new(Within::Worth { sd: 1.4, df: 6.0 }, prior, readings)
        .level(level)
        .next_level(next)
        .long_run(mu)
        .next_reading(random, level + bias, sigma);
    trial.model.bias_sd = bias_sd;
    trial
}

fn bias_history(random: &mut Random) -> Trial {
    let (mu, tau, sigma, bias_sd) = (random.between(-50.0, 50.0), random.half_normal(1.5), 2.0, 0.8);
    let bias = random.normal(0.0, bias_sd);
    let past = Past::about(random, mu + bias, tau, sigma, &[4, 6, 5]);
    let level = random.normal(mu, tau);
    let readings = sums(&random.normals(4, level + bias, sigma));
    let next = random.normal(mu, tau);
    let (change, truth) = past.change(1, level + bias);
    let mut trial = Trial::new(Within::Known(sigma), past.history(Between::HalfNormal(1.5)), readings)
        .level(level)
        .next_level(next)
        .long_run(mu)
        .next_reading(random, level + bias, sigma)
        .ask("change from an earlier period", change, truth);
    trial.model.bias_sd = bias_sd;
    trial
}

fn log_scale(random: &mut Random) -> Trial {
    let (mean, sd) = (3.0, 0.5);
    let sigma = random.sd_worth(0.6, 9);
    let level = random.normal(mean, sd);
    let readings = sums(&random.normals(5, level, sigma));
    let prior = LevelPrior::Stated { mean, sd };
    let mut trial = Trial::new(Within::Worth { sd: 0.6, df: 9.0 }, prior, readings)
        .level(level)
        .next_reading(random, level, sigma)
        .ask("arithmetic mean", Of::ArithmeticMean, level + 0.5 * sigma * sigma);
    trial.model.scale = Scale::Log;
    trial
}

fn marked_known(random: &mut Random) -> Trial {
    let (mean, sd, sigma) = (2.0, 1.5, 1.0);
    let level = random.normal(mean, sd);
    let n = random.of(&[1, 2, 6]);
    let readings = marked(&random.normals(n, level, sigma), 1.5, 4.0);
    Trial::new(Within::Known(sigma), LevelPrior::Stated { mean, sd }, readings)
        .level(level)
        .next_reading(random, level, sigma)
}

fn marked_worth(random: &mut Random) -> Trial {
    let (mean, sd) = (2.0, 1.5);
    let sigma = random.sd_worth(1.0, 6);
    let level = random.normal(mean, sd);
    let n = random.of(&[2, 6]);
    let readings = marked(&random.normals(n, level, sigma), 1.5, 4.0);
    Trial::new(Within::Worth { sd: 1.0, df: 6.0 }, LevelPrior::Stated { mean, sd }, readings)
        .level(level)
        .next_reading(random, level, sigma)
        .ask("within sd", Of::WithinSd, sigma)
}

fn marked_now(random: &mut Random) -> Trial {
    let (mu, tau, sigma) = (random.between(-50.0, 50.0), 0.8, 1.0);
    let past = Past::about(random, mu, tau, sigma, &[4, 3, 2]);
    let level = random.normal(mu, tau);
    let readings = marked(&random.normals(3, level, sigma), mu - 0.5, mu + 2.0);
    let next = random.normal(mu, tau);
    Trial::new(Within::Known(sigma), past.history(Between::Known(tau)), readings)
        .level(level)
        .next_level(next)
        .long_run(mu)
}

/// Marks in two earlier periods.
fn marked_past(random: &mut Random) -> Trial {
    let (mu, tau, sigma) = (random.between(-50.0, 50.0), 0.8, 1.0);
    let mut past = Past::about(random, mu, tau, sigma, &[4, 3, 2]);
    for (place, n) in [(0, 4), (2, 3)] {
        let values = random.normals(n, past.levels[place], sigma);
        past.periods[place].1 = marked(&values, mu - 0.5, mu + 2.0);
    }
    let level = random.normal(mu, tau);
    let readings = sums(&random.normals(3, level, sigma));
    let next = random.normal(mu, tau);
    Trial::new(Within::Known(sigma), past.history(Between::Known(tau)), readings)
        .level(level)
        .next_level(next)
        .long_run(mu)
}

fn rounded_known(random: &mut Random) -> Trial {
    let (mean, sd, sigma) = (2.0, 1.5, 1.0);
    let level = random.normal(mean, sd);
    let n = random.of(&[1, 5]);
    let readings = rounded(&random.normals(n, level, sigma), 2.0);
    Trial::new(Within::Known(sigma), LevelPrior::Stated { mean, sd }, readings)
        .level(level)
        .next_reading(random, level, sigma)
}

fn rounded_worth(random: &mut Random) -> Trial {
    let level = random.between(-100.0, 100.0);
    let sigma = random.sd_worth(1.0, 5);
    let readings = rounded(&random.normals(4, level, sigma), 1.0);
    Trial::new(Within::Worth { sd: 1.0, df: 5.0 }, LevelPrior::Flat, readings)
        .level(level)
        .next_reading(random, level, sigma)
        .ask("within sd", Of::WithinSd, sigma)
}
