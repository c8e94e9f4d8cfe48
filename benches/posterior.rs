//! How fast posteriors are solved and asked, and how the cost of many series grows with their number.
//! `cargo bench --bench posterior -- [SERIES …] [NAME …]`: only posteriors with one of the words in their name, if
//! any are given; all data are invented.

use reassay::data::evidence::{Evidence, Seen, Single};
use reassay::posterior::{Basis, Posterior, When, solve};
use reassay::prior::{Between, LevelPrior, Model, Pattern, Periods, Within};
use reassay::quantity::{Period, Scale};
use std::fmt::Write as _;
use std::hint::black_box;
use std::time::{Duration, Instant};

fn main() {
    // `cargo bench` adds `--bench`; `cargo test --benches` runs the program too, on few series.
    let is_bench = std::env::args().any(|word| word == "--bench");
    let words: Vec<String> = std::env::args().skip(1).filter(|word| !word.starts_with("--")).collect();
    let mut sizes: Vec<usize> = words.iter().filter_map(|word| word.parse().ok()).collect();
    if sizes.is_empty() {
        sizes = if is_bench { vec![100, 250, 500, 1000] } else { vec![3] };
    }
    println!("{:28} {:>8} {:>12} {:>12}", "posterior", "pieces", "solve", "5 questions");
    let wanted: Vec<&String> = words.iter().filter(|word| word.parse::<usize>().is_err()).collect();
    for (name, model, readings) in cases() {
        if !wanted.is_empty() && !wanted.iter().any(|word| name.contains(word.as_str())) {
            continue;
        }
        let pieces = solve(&model, &readings, Basis::Both).unwrap().pieces().unwrap().len();
        let solving = best(|| {
            black_box(solve(&model, &readings, Basis::Both).unwrap());
        });
        let both = best(|| asked(&solve(&model, &readings, Basis::Both).unwrap()));
        println!(
            "{name:28} {pieces:8} {:9.3} ms {:9.3} ms",
            solving.as_secs_f64() * 1e3,
            (both.saturating_sub(solving)).as_secs_f64() * 1e3
        );
    }
    println!("{:28} {:>12} {:>12}", "series of 11 periods", "review", "a series");
    for series in sizes {
        let time = many_series(series);
        let each = time.as_secs_f64() * 1e3 / series as f64;
        println!("{series:28} {:10.2} s {each:9.3} ms", time.as_secs_f64());
    }
}

/// The shortest of five runs.
fn best(mut run: impl FnMut()) -> Duration {
    let time = |_| {
        let start = Instant::now();
        run();
        start.elapsed()
    };
    (0..5).map(time).min().unwrap()
}

/// Interval of the level, a chance, an interval of the next reading, the next level, a percentile.
fn asked(posterior: &Posterior) {
    let level = posterior.level(When::This).unwrap();
    black_box(level.central(0.95).unwrap());
    black_box(level.sf(11.0));
    black_box(posterior.reading(When::This, 1, None).unwrap().central(0.9).unwrap());
    black_box(posterior.level(When::Next).and_then(|law| law.central(0.95)).ok());
    // Refused over two sigmas and with marks then and now.
    let upper = posterior.affine(When::This, 1.0, &|sigma| (1.644_853_626_951_472_7 * sigma, 0.0));
    black_box(upper.and_then(|law| law.upper_quantile(0.05)).ok());
}

/// Numbers that scatter about 0 with sd 1 or so, the same on every run.
struct Scatter(u64);

impl Scatter {
    fn next(&mut self) -> f64 {
        let mut total = 0.0;
        for _ in 0..12 {
            self.0 = self.0.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            total += (self.0 >> 11) as f64 / (1u64 << 53) as f64;
        }
        total - 6.0
    }
}

fn period(scatter: &mut Scatter, level: f64, sd: f64) -> Vec<f64> {
    (0..8).map(|_| level + sd * scatter.next()).collect()
}

fn sums(readings: &[f64]) -> Evidence {
    let mean = readings.iter().sum::<f64>() / readings.len() as f64;
    let ss = readings.iter().map(|x| (x - mean) * (x - mean)).sum();
    Evidence::Sums { n: readings.len() as u64, mean, rest: 0.0, ss: Some(ss) }
}

fn cases() -> Vec<(&'static str, Model, Evidence)> {
    let mut scatter = Scatter(11);
    let plain = |level: f64, scatter: &mut Scatter| sums(&period(scatter, level, 0.8));
    let evidence: Vec<Evidence> = (0..10)
        .map(|_| {
            let level = 10.0 + 0.6 * scatter.next();
            plain(level, &mut scatter)
        })
        .collect();
    let now = plain(10.4, &mut scatter);
    let single = |seen: Seen| Single { seen, uncertainty: 0.0 };
    let marked = Evidence::Singles(
        period(&mut scatter, 10.2, 0.8)
            .into_iter()
            .map(|x| single(if x < 10.0 { Seen::Below(10.0) } else { Seen::At(x) }))
            .collect(),
    );
    let with_marks = |periods: &[Evidence]| {
        let mut periods = periods.to_vec();
        periods[2] = marked.clone();
        periods[7] = marked.clone();
        periods
    };
    let history = |between: Between, evidence: &[Evidence]| {
        let periods =
            evidence.iter().enumerate().map(|(j, e)| (Period::new(&(2015 + j).to_string()), e.clone()));
        LevelPrior::Periods(Periods {
            periods: periods.collect(),
            pattern: Pattern::AboutAMean,
            between,
            weight: 1.0,
        })
    };
    let model = |within: Within, level: LevelPrior| Model {
        scale: Scale::Linear,
        within,
        level,
        bias_sd: 0.0,
        adjust: None,
    };
    let pooled = || Within::Pooled { others: Vec::new() };
    let uniform = || history(Between::Uniform, &evidence);
    vec![
        ("σ and τ known", model(Within::Known(0.8), history(Between::Known(0.6), &evidence)), now.clone()),
        ("σ known, τ unknown", model(Within::Known(0.8), uniform()), now.clone()),
        ("σ and τ unknown", model(pooled(), uniform()), now.clone()),
        (
            "random walk",
            {
                let LevelPrior::Periods(mut periods) = uniform() else { unreachable!() };
                periods.pattern = Pattern::RandomWalk { gaps: vec![1.0; 10], last_gap: 1.0 };
                model(pooled(), LevelPrior::Periods(periods))
            },
            now.clone(),
        ),
        (
            "σ from readings, τ, σ_h known",
            model(Within::ReadingsBeside { history_sd: 0.8 }, uniform()),
            now.clone(),
        ),
        ("two sigmas and τ", model(Within::Readings, uniform()), now),
        (
            "marks, σ known",
            model(Within::Known(0.8), LevelPrior::Stated { mean: 10.0, sd: 1.0 }),
            marked.clone(),
        ),
        ("marks, τ", model(Within::Known(0.8), uniform()), marked.clone()),
        ("marks, σ", model(Within::Readings, LevelPrior::Stated { mean: 10.0, sd: 1.0 }), marked.clone()),
        ("marks, σ and τ", model(pooled(), uniform()), marked.clone()),
        (
            "marks then and now, τ",
            model(Within::Known(0.8), history(Between::Uniform, &with_marks(&evidence))),
            marked.clone(),
        ),
        (
            "marks then and now, σ and τ",
            model(pooled(), history(Between::Uniform, &with_marks(&evidence))),
            marked,
        ),
    ]
}

/// A whole review of so many series, 10 earlier periods and this one, 8 readings a period.
fn many_series(series: usize) -> Duration {
    let folder = std::env::temp_dir().join(format!("reassay-posterior-{}", std::process::id()));
    std::fs::create_dir_all(&folder).unwrap();
    let mut scatter = Scatter(series as u64);
    let mut rows = String::from("station,year,value\n");
    for station in 0..series {
        let long_run = 10.0 + scatter.next();
        for year in 2015..=2025 {
            let level = long_run + 0.6 * scatter.next();
            for value in period(&mut scatter, level, 0.8) {
                writeln!(rows, "ST-{station:04},{year},{value:.3}").unwrap();
            }
        }
    }
    std::fs::write(folder.join("rows.csv"), rows).unwrap();
    let spec = folder.join("spec.toml");
    std::fs::write(&spec, SPEC).unwrap();
    let prepared = reassay::review::prepare(&spec, "spec.toml").unwrap();
    let data = reassay::data::read(&prepared.plan).unwrap();
    let jobs = std::thread::available_parallelism().map_or(1, usize::from);
    let start = Instant::now();
    let findings = reassay::review::review(prepared, data, jobs).unwrap();
    let time = start.elapsed();
    black_box(findings);
    std::fs::remove_dir_all(&folder).unwrap();
    time
}

const SPEC: &str = "[review]\ntitle = \"Many series\"\nperiod = 2025\ndate = 2026-01-20\n\
    [quantity]\nname = \"level\"\nunit = \"mm\"\n[limit.guide]\nvalue = 11.0\nbasis = \"invented\"\napplies_to = \"level\"\n\
    [[readings]]\nfile = \"rows.csv\"\nvalue = \"value\"\nperiod = \"year\"\nseries = \"station\"\n\
    [within]\nfrom = \"history\"\n[prior]\nfrom = \"history\"\nbetween = \"uniform\"\n\
    [[question]]\nid = \"level\"\nask = \"level interval\"\n\
    [[question]]\nid = \"over\"\nask = \"level chance\"\nabove = \"guide\"\n\
    [report]\ninputs = \"hashed\"\ndetail = \"none\"\n";
