//! The figures: drawn from invented values, held to what every drawing must be.

use super::figure_frame::{FigureError, Mark};
use super::figure_level::{Curve, Interval, LevelFigure, level};
use super::figure_lines::{Line, LinesFigure, Upright, lines};
use super::figure_periods::{Across, Estimate, Period, PeriodsFigure, Single, periods};
use super::figure_quantiles::{BandPoint, QuantilePoint, QuantilesFigure, quantiles};
use super::figure_rows::{Row, RowsFigure, rows};
use super::svg::About;

fn about(name: &str, title: &str) -> About {
    About { name: name.into(), title: title.into(), description: format!("{title}: invented figures.") }
}

fn mark(value: f64, label: &str) -> Mark {
    Mark { value, label: label.into() }
}

/// A bell by a rational function, so that the tests need no exponential.
fn bell(centre: f64, width: f64, label: &str) -> Curve {
    let points = (0..=160)
        .map(|step| {
            let x = centre + (f64::from(step) / 80.0 - 1.0) * 4.0 * width;
            let z = (x - centre) / width;
            let base = 1.0 + z * z / 12.0;
            (x, 1.0 / (width * base * base * base * base * base * base))
        })
        .collect();
    Curve { label: label.into(), points }
}

pub(super) fn level_example() -> LevelFigure {
    LevelFigure {
        ticks: None,
        about: about("level-SF-01", "Level of nitrate at SF-01"),
        value_title: "nitrate, mg/L".into(),
        height_title: "probability density".into(),
        prior: Some(bell(42.0, 3.1, "prior")),
        readings: Some(bell(44.1, 0.9, "readings alone")),
        posterior: bell(43.9, 0.8, "posterior"),
        interval: Some(Interval {
            lower: Some(42.3),
            upper: Some(45.5),
            label: "95 % interval of the posterior, 42.3 to 45.5 mg/L".into(),
        }),
        limits: vec![mark(50.0, "limit 50 mg/L"), mark(37.5, "action value 37.5 mg/L")],
    }
}

pub(super) fn periods_example() -> PeriodsFigure {
    let means = [41.2, 42.8, 40.1, 43.9, 42.2, 41.0, 45.8, 43.1, 42.6, 44.1];
    let estimate =
        |value: f64, half: f64| Estimate { value, lower: Some(value - half), upper: Some(value + half) };
    PeriodsFigure {
        about: about("periods-SF-01", "Nitrate at SF-01 by year"),
        value_title: "nitrate, mg/L".into(),
        period_title: "year".into(),
        periods: means
            .iter()
            .enumerate()
            .map(|(place, mean)| Period {
                name: (2016 + place).to_string(),
                mean: (place != 3).then(|| estimate(*mean, 1.4)),
                level: (place == 9).then(|| estimate(43.9, 1.2)),
            })
            .collect(),
        means_label: "mean of the year's readings, 95 % interval".into(),
        level_label: "level of 2025 after prior and readings, 95 % interval".into(),
        long_run: Some(Across {
            lower: 41.2,
            middle: 42.6,
            upper: 44.0,
            label: "long-run mean, 95 % interval".into(),
        }),
        limits: vec![mark(50.0, "limit 50 mg/L")],
        events: vec![mark(5.5, "new pump"), mark(7.5, "method changed")],
        readings: [40.3, 44.9, 43.2, 46.1, 45.0].map(|value| Single { period: 9, value }).to_vec(),
        readings_label: "reading".into(),
        excluded: vec![Single { period: 9, value: 48.4 }, Single { period: 2, value: 36.0 }],
        excluded_label: "left out".into(),
    }
}

pub(super) fn quantiles_example() -> QuantilesFigure {
    let z = [-1.63, -1.12, -0.79, -0.54, -0.31, -0.10, 0.10, 0.31, 0.54, 0.79, 1.12, 1.63];
    let values = [40.2, 41.9, 42.5, 43.0, 43.4, 44.0, 44.3, 44.6, 45.2, 45.8, 46.4, 50.9];
    QuantilesFigure {
        about: about("quantiles-SF-01", "Normal quantile plot of SF-01"),
        quantile_title: "normal quantile, standard deviations".into(),
        value_title: "reading, mg/L".into(),
        points: z
            .into_iter()
            .zip(values)
            .map(|(quantile, value)| QuantilePoint { quantile, value, hollow: value > 50.0 })
            .collect(),
        points_label: "reading".into(),
        hollow_label: "flagged reading".into(),
        line: Some((44.1, 2.3)),
        line_label: "normal distribution".into(),
        band: (-10..=10)
            .map(|step| {
                let quantile = f64::from(step) * 0.18;
                let (middle, half) = (44.1 + 2.3 * quantile, 0.9 + 0.7 * quantile * quantile);
                BandPoint { quantile, lower: middle - half, upper: middle + half }
            })
            .collect(),
        band_label: "95 % band".into(),
    }
}

pub(super) fn lines_example() -> LinesFigure {
    let rise = |at: f64| {
        move |x: f64| {
            let z = (x - at) / 1.2;
            0.5 + 0.5 * z / (1.0 + z * z).sqrt()
        }
    };
    let xs: Vec<f64> = (0..=80).map(|step| 44.0 + f64::from(step) * 0.15).collect();
    let line = |label: &str, height: &dyn Fn(f64) -> f64| Line {
        label: label.into(),
        points: xs.iter().map(|x| (*x, height(*x))).collect(),
    };
    let (low, high) = (rise(48.4), rise(51.6));
    LinesFigure {
        about: about("verdicts-over", "Chance of each verdict"),
        x_title: "true level, mg/L".into(),
        y_title: "chance of the verdict".into(),
        upright: Upright::Chance,
        lines: vec![
            line("“not above”", &|x| 1.0 - low(x)),
            line("“not decided”", &|x| low(x) - high(x)),
            line("“above”", &|x| high(x)),
        ],
        x_marks: vec![mark(50.0, "limit 50 mg/L")],
        y_marks: vec![mark(0.05, "5 %")],
    }
}

pub(super) fn rows_example() -> RowsFigure {
    let row = |name: &str, value: f64, half: f64, remark: &str, main: bool| Row {
        name: name.into(),
        value: Some(value),
        lower: Some(value - half),
        upper: Some(value + half),
        remark: remark.into(),
        main,
    };
    RowsFigure {
        about: about("alternatives-level", "The level under each alternative"),
        value_title: "level, mg/L".into(),
        rows: vec![
            row("as specified", 43.9, 1.2, "✓ not above", true),
            row("flat prior", 44.1, 1.3, "✓ not above", false),
            row("prior sd halved", 43.5, 1.1, "✓ not above", false),
            row("within sd from readings", 44.0, 2.9, "? not decided", false),
            row("a name that is much longer than any margin could be", 49.1, 1.9, "? not decided", false),
            Row {
                name: "exclusions restored".into(),
                value: None,
                lower: None,
                upper: None,
                remark: "does not exist".into(),
                main: false,
            },
        ],
        rows_label: "level with its 95 % interval".into(),
        limits: vec![mark(50.0, "limit 50 mg/L")],
    }
}

pub(super) fn all() -> Vec<(&'static str, String)> {
    vec![
        ("level", level(&level_example()).unwrap()),
        ("periods", periods(&periods_example()).unwrap()),
        ("quantiles", quantiles(&quantiles_example()).unwrap()),
        ("lines", lines(&lines_example()).unwrap()),
        ("rows", rows(&rows_example()).unwrap()),
    ]
}

#[test]
fn every_figure_is_named_described_and_without_outside_parts() {
    for (name, text) in all() {
        assert!(text.starts_with("<svg xmlns=\"http://www.w3.org/2000/svg\""), "{name}");
        assert!(text.contains("role=\"img\"") && text.contains("<title id=\"fig-"), "{name}");
        for word in ["href", "url(", "<script", "<image", "NaN", "inf\""] {
            assert!(!text.contains(word), "{name} holds {word}");
        }
        assert_eq!(text.matches("<svg").count(), 1, "{name}");
    }
}

#[test]
fn the_same_values_give_the_same_bytes() {
    assert_eq!(all(), all());
}

#[test]
fn texts_of_users_cannot_leave_their_place() {
    let mut figure = level_example();
    figure.limits[0].label = "</text><script>alert(1)</script>".into();
    figure.value_title = "a & b < c \u{202e}".into();
    figure.about.title = "\u{0}\"'".into();
    let text = level(&figure).unwrap();
    assert!(!text.contains("<script") && text.contains("&lt;/text&gt;"));
    assert!(text.contains("a &amp; b &lt; c ⟨U+202E⟩"));
}

#[test]
fn dashes_tell_the_three_densities_apart() {
    let text = level(&level_example()).unwrap();
    for class in ["l-prior", "l-readings", "l-posterior", "l-limit", "f-shade"] {
        assert!(text.contains(&format!("class=\"{class}\"")), "{class}");
    }
    for label in ["prior", "readings alone", "posterior", "limit 50 mg/L", "action value 37.5 mg/L"] {
        assert!(text.contains(&format!(">{label}</text>")), "{label}");
    }
}

#[test]
fn every_label_of_limits_and_events_appears_however_many() {
    let mut figure = periods_example();
    figure.events =
        (0..9).map(|place| mark(f64::from(place), &format!("a long event number {place}"))).collect();
    figure.limits.extend((0..4).map(|place| mark(49.8 + f64::from(place) * 0.05, &format!("limit {place}"))));
    let text = periods(&figure).unwrap();
    for mark in figure.events.iter().chain(&figure.limits) {
        assert!(text.contains(&format!(">{}</text>", mark.label)), "{}", mark.label);
    }
}

#[test]
fn limits_out_of_reach_are_named_at_the_edge() {
    let mut figure = periods_example();
    figure.limits = vec![mark(500.0, "far limit"), mark(-500.0, "low limit")];
    let text = periods(&figure).unwrap();
    assert!(text.contains(">far limit ↑</text>") && text.contains(">low limit ↓</text>"));
    let mut figure = level_example();
    figure.limits = vec![mark(500.0, "far limit"), mark(-500.0, "low limit")];
    let text = level(&figure).unwrap();
    assert!(text.contains(">far limit →</text>") && text.contains(">← low limit</text>"));
}

#[test]
fn values_of_extreme_size_and_none() {
    let mut figure = level_example();
    figure.prior = None;
    figure.readings = None;
    figure.interval = None;
    figure.limits.clear();
    figure.posterior.points = vec![(1e150, 0.0), (2e150, 1e-150), (3e150, 0.0)];
    assert!(level(&figure).unwrap().contains("× 10¹⁵⁰"));
    figure.posterior.points = vec![(1e-150, 0.0), (2e-150, 1e150), (3e-150, f64::NAN)];
    assert!(level(&figure).is_ok());
    figure.posterior.points = vec![(f64::NAN, 1.0)];
    assert_eq!(level(&figure), Err(FigureError::NothingToDraw));
    let mut figure = rows_example();
    figure.rows.clear();
    figure.limits.clear();
    assert_eq!(rows(&figure), Err(FigureError::NothingToDraw));
}

/// Writes the figures and a page with all of them where one can look at them:
/// `FIGURES=folder cargo test --lib figure_tests -- --ignored`.
#[test]
#[ignore = "writes files to look at"]
fn write_the_figures() {
    let Some(folder) = std::env::var_os("FIGURES") else { return };
    let folder = std::path::Path::new(&folder);
    let figures = all();
    for (name, text) in &figures {
        std::fs::write(folder.join(format!("{name}.svg")), text).unwrap();
    }
    let figures: Vec<(&str, &str)> = figures.iter().map(|(name, text)| (*name, text.as_str())).collect();
    let head = super::html::PageHead {
        title: "Nitrate at the boreholes of Saltfen, 2025".into(),
        facts: [
            ("review", "SF-NO3-2025"),
            ("period", "2025"),
            ("status", "final"),
            ("date", "2026-01-20"),
            ("stamp", "3f9a 1c20 77be 04d1"),
        ]
        .map(|(name, value)| (name.to_owned(), value.to_owned()))
        .to_vec(),
        page_label: "SF-NO3-2025 · stamp 3f9a 1c20 77be 04d1".into(),
        footer: vec!["Saltfen is an invented place.".into(), "End of report SF-NO3-2025.".into()],
    };
    let page = super::html::page(include_str!("figure_tests_page.md"), &figures, &head).unwrap();
    std::fs::write(folder.join("page.html"), page).unwrap();
}
