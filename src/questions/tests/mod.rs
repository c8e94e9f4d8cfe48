//! Questions asked of posteriors that are made by hand: no data files, no sources of priors.

#![allow(clippy::excessive_precision, reason = "figures stand as their sources have them")]

mod acceptance;
mod apart;
mod faults;
mod published;
mod simulated;

use super::figures::{Figures, Item};
use super::{Question, Subject, read_all};
use crate::data::evidence::Evidence;
use crate::data::{Facts, PeriodData};
use crate::diagnostics::{Fault, Faults};
use crate::math::fm;
use crate::plan::Plan;
use crate::posterior::{Basis, Posterior, solve};
use crate::prior::{LevelPrior, Model, Within};
use crate::quantity::{Absent, Period, Scale};

/// The plan of a small invented spec with these questions in it.
pub fn plan(scale: &str, questions: &str) -> Result<Plan, Faults> {
    let text = format!(
        r#"
        [review]
        title = "An invented pond"
        id = "pond"
        period = 2025
        date = 2026-01-20
        [quantity]
        name = "nitrate"
        unit = "mg/L"
        scale = "{scale}"
        [limit.guideline]
        value = 45.0
        basis = "invented"
        applies_to = "level"
        [limit.single]
        value = 50.0
        basis = "invented"
        applies_to = "each reading"
        [limit.band]
        lower = 40.0
        upper = 46
        basis = "invented"
        applies_to = "level"
        [[readings]]
        values = [43.1]
        [within]
        from = "none"
        [prior]
        from = "flat"
        {questions}
        "#
    );
    let path = std::path::Path::new("pond.toml");
    crate::plan::load(path, "pond.toml", &|_| Ok(text.clone().into_bytes()))
}

/// All faults of reading these questions.
pub fn faults(scale: &str, questions: &str) -> Vec<Fault> {
    let plan = match plan(scale, questions) {
        Ok(plan) => plan,
        Err(faults) => return faults.0,
    };
    let mut faults = Faults::default();
    read_all(&plan, &mut faults);
    faults.0
}

/// A question with its plan.
pub struct Put {
    pub plan: Plan,
    pub question: Box<dyn Question>,
}

pub fn put(scale: &str, keys: &str) -> Put {
    let plan = plan(scale, &format!("[[question]]\nid = \"q\"\n{keys}"))
        .unwrap_or_else(|faults| panic!("{keys}: {:?}", faults.0));
    let mut faults = Faults::default();
    let mut questions = read_all(&plan, &mut faults);
    assert!(faults.is_empty(), "{keys}: {:?}", faults.0);
    let (_, question) = questions.remove(0);
    Put { plan, question }
}

impl Put {
    pub fn subject<'a>(&'a self, posterior: &'a Posterior, period: Option<&'a PeriodData>) -> Subject<'a> {
        Subject {
            plan: &self.plan,
            series: "nitrate",
            data: None,
            period,
            basis: posterior.basis,
            posterior: Ok(posterior),
        }
    }

    pub fn figures(&self, posterior: &Posterior) -> Figures {
        let period = PeriodData {
            period: Period::new("2025"),
            evidence: posterior.readings.clone(),
            restored: None,
            facts: Facts { n: posterior.readings.n().unwrap_or(0), ..Facts::default() },
            readings: Vec::new(),
        };
        self.question.answer(&self.subject(posterior, Some(&period)))
    }
}

/// The figures of one question on the linear scale.
pub fn ask(keys: &str, posterior: &Posterior) -> Figures {
    put("linear", keys).figures(posterior)
}

/// A figure that must exist.
pub fn value(figures: &Figures, name: &str) -> f64 {
    figures.value(name).unwrap_or_else(|| panic!("no {name} in {figures:?}"))
}

/// Why a figure does not exist.
pub fn why(figures: &Figures, name: &str) -> Absent {
    match figures.get(name) {
        Some(Item::Number(Err(absent), _)) => absent.clone(),
        other => panic!("{name} is {other:?}"),
    }
}

pub fn numbers(figures: &Figures, name: &str) -> Vec<f64> {
    match figures.get(name) {
        Some(Item::Numbers(numbers, _)) => numbers.clone(),
        other => panic!("{name} is {other:?}"),
    }
}

pub fn model(within: Within, level: LevelPrior) -> Model {
    Model { scale: Scale::Linear, within, level, bias_sd: 0.0, adjust: None }
}

pub fn sums(n: u64, mean: f64, sd: f64) -> Evidence {
    Evidence::Sums { n, mean, ss: (n > 1).then(|| (n - 1) as f64 * sd * sd), rest: 0.0 }
}

pub fn both(model: &Model, readings: &Evidence) -> Posterior {
    solve(model, readings, Basis::Both).unwrap_or_else(|absent| panic!("{absent}"))
}

/// Prior N(40, 2²), σ = 1.5, six readings of mean 43.1: the example of most pages.
pub fn example() -> Posterior {
    both(
        &model(Within::Known(1.5), LevelPrior::Stated { mean: 40.0, sd: 2.0 }),
        &Evidence::Sums { n: 6, mean: 43.1, ss: Some(11.0), rest: 0.0 },
    )
}

/// A flat prior and p(σ²) ∝ 1/σ².
pub fn flat_unknown(n: u64, mean: f64, sd: f64) -> Posterior {
    both(&model(Within::Readings, LevelPrior::Flat), &sums(n, mean, sd))
}

pub fn near(got: f64, wanted: f64, relative: f64) {
    assert!((got - wanted).abs() <= relative * wanted.abs(), "{got} is not {wanted} to {relative}");
}

pub fn within(got: f64, wanted: f64, absolute: f64) {
    assert!((got - wanted).abs() <= absolute, "{got} is not {wanted} ± {absolute}");
}

/// A small generator of our own (PCG-XSH-RR 64/32, O'Neill 2014), so that simulations are the same everywhere.
pub struct Pcg(u64);

impl Pcg {
    pub fn new(seed: u64) -> Pcg {
        let mut pcg = Pcg(seed.wrapping_add(0x9E37_79B9_7F4A_7C15));
        pcg.next();
        pcg
    }

    fn next(&mut self) -> u32 {
        let old = self.0;
        self.0 = old.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        let shifted = (((old >> 18) ^ old) >> 27) as u32;
        shifted.rotate_right((old >> 59) as u32)
    }

    /// In (0, 1).
    pub fn uniform(&mut self) -> f64 {
        (f64::from(self.next()) + 0.5) / 4_294_967_296.0
    }

    /// Standard normal, by Box and Muller's way.
    pub fn normal(&mut self) -> f64 {
        let (a, b) = (self.uniform(), self.uniform());
        (-2.0 * fm::ln(a)).sqrt() * fm::cos(2.0 * std::f64::consts::PI * b)
    }

    pub fn chi_square(&mut self, df: u32) -> f64 {
        (0..df)
            .map(|_| {
                let z = self.normal();
                z * z
            })
            .sum()
    }
}
