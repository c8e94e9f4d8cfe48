//! Simulation-based calibration (Cook, Gelman & Rubin 2006; Talts, Betancourt, Simpson, Vehtari & Gelman 2018):
//! parameters drawn from the prior, readings drawn from the parameters; then the posterior chance of what is at or
//! below the true value must be uniform on (0, 1), and its central intervals must hold the true value as
//! often as they say. The program's chances are exact, so the chance itself takes the place of a rank.
//!
//! The bounds were chosen before the first run: a family of five tests a row (chi-square over 20 bins, Kolmogorov,
//! and the coverage of 50, 90 and 95 %), each at 0.01 divided by the number of all tests (Bonferroni).
//! Seeds are fixed. `cargo test --release calibration_at_large -- --ignored --nocapture` draws more; its table
//! is in README.md beside this file.

mod combinations;
mod random;
mod trial;
mod uniform;

use combinations::{ALL, Combination};
use random::Random;
use reassay::prior::{Between, LevelPrior, Within};
use trial::Trial;
use uniform::Uniformity;

/// Chance that a sound program fails anywhere, had the seeds not been fixed.
const FAMILY: f64 = 0.01;
const TESTS_A_ROW: f64 = 5.0;

struct Row {
    name: &'static str,
    what: &'static str,
    found: Uniformity,
}

/// What makes a trial wrong, or leaves it.
type Spoil = fn(&mut Trial);

/// What came of one combination.
struct Drawn {
    rows: Vec<Row>,
    /// Trials for which the program said that it did not reach its promised accuracy.
    refused: usize,
}

/// Draws so many trials; `change` may spoil a trial before it is solved.
fn drawn(combination: &Combination, draws: usize, seed: u64, change: Spoil) -> Drawn {
    let mut random = Random::new(seed);
    let mut chances: Vec<(&'static str, Vec<f64>)> = Vec::new();
    let mut refused = 0;
    for draw in 0..draws {
        let mut trial = (combination.draw)(&mut random);
        change(&mut trial);
        let found = match trial.chances() {
            Ok(found) => found,
            Err(absent) if absent.failed => {
                println!("refused: {}, draw {draw}: {absent}", combination.name);
                refused += 1;
                continue;
            }
            Err(absent) => panic!("{}, draw {draw}: {absent} in {trial:?}", combination.name),
        };
        if chances.is_empty() {
            chances = found.iter().map(|(what, _)| (*what, Vec::with_capacity(draws))).collect();
        }
        for ((_, all), (_, chance)) in chances.iter_mut().zip(found) {
            all.push(chance);
        }
    }
    let name = combination.name;
    let row = |(what, all): (&'static str, Vec<f64>)| Row { name, what, found: Uniformity::of(&all) };
    Drawn { rows: chances.into_iter().map(row).collect(), refused }
}

/// Draws all combinations, prints their table, and holds every row against the bound.
fn table(draws_of: fn(&Combination) -> usize) {
    println!(
        "| prior and spread | of what | draws | chi-square p | Kolmogorov p | in 50 % | in 90 % | in 95 % |"
    );
    println!("| --- | --- | --- | --- | --- | --- | --- | --- |");
    let mut all = Vec::new();
    for (combination, seed) in ALL.iter().zip(1..) {
        let draws = draws_of(combination);
        if draws == 0 {
            continue;
        }
        let Drawn { rows, refused } = drawn(combination, draws, seed, |_| {});
        for Row { name, what, found } in &rows {
            let [half, nine, most] = found.coverage.map(|(share, _)| format!("{:.2}", 100.0 * share));
            let Uniformity { draws, chi_square_p, kolmogorov_p, .. } = found;
            println!(
                "| {name} | {what} | {draws} | {chi_square_p:.3} | {kolmogorov_p:.3} | {half} | {nine} | {most} |"
            );
        }
        assert!(200 * refused <= draws, "{}: {refused} of {draws} refused", combination.name);
        all.extend(rows);
    }
    let threshold = FAMILY / (TESTS_A_ROW * all.len() as f64);
    let smallest = all.iter().map(|row| row.found.smallest_p()).fold(1.0, f64::min);
    println!("{} rows; smallest of all p-values {smallest:.1e}, bound {threshold:.1e}", all.len());
    let wrong: Vec<String> = all
        .iter()
        .filter(|row| row.found.smallest_p() < threshold)
        .map(|row| format!("{}, {}: {:?}", row.name, row.what, row.found))
        .collect();
    assert!(wrong.is_empty(), "not calibrated:\n{}", wrong.join("\n"));
}

#[test]
fn calibration() {
    table(|combination| combination.draws.0);
}

#[test]
#[ignore = "minutes of computing; run in release"]
fn calibration_at_large() {
    table(|combination| combination.draws.1);
}

/// The tests can fail: what is a little wrong with the model is found.
#[test]
fn a_wrong_model_is_found() {
    let named = |name: &str| ALL.iter().find(|combination| combination.name == name).expect("a combination");
    let spoilt: [(&str, Spoil); 5] = [
        ("stated, sd known", |trial| trial.model.within = Within::Known(1.2)),
        ("stated, sd worth 5 df", |trial| trial.model.within = Within::Worth { sd: 1.5, df: 50.0 }),
        ("bias, stated, sd known", |trial| trial.model.bias_sd = 0.0),
        ("history between sd known, sd known", |trial| {
            if let LevelPrior::Periods(periods) = &mut trial.model.level {
                periods.between = Between::Moments;
            }
        }),
        ("mixture of two stated, sd known", |trial| {
            if let LevelPrior::Mixture(parts) = &mut trial.model.level {
                parts.remove(1);
            }
        }),
    ];
    for (name, spoil) in spoilt {
        let rows = drawn(named(name), 2000, 99, spoil).rows;
        let smallest = rows.iter().map(|row| row.found.smallest_p()).fold(1.0, f64::min);
        assert!(smallest < 1e-6, "{name}: {smallest}");
    }
}
