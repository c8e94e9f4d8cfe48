//! One draw of everything: the parameters from a prior, readings from them, and what the program makes of these.

use reassay::data::evidence::{Evidence, Seen, Single};
use reassay::math::fm;
use reassay::posterior::joint::{self, Member};
use reassay::posterior::{Basis, Posterior, When, solve};
use reassay::prior::{Between, LevelPrior, Model, Pattern, Periods, Within};
use reassay::quantity::{Absent, Period, Scale};

use super::random::Random;

/// What is asked of the posterior, and the true value.
#[derive(Debug, Clone)]
pub struct Asked {
    pub what: &'static str,
    pub of: Of,
    pub truth: f64,
}

#[derive(Debug, Clone)]
pub enum Of {
    Level(When),
    /// The mean of so many next readings, each with an uncertainty of its own.
    Readings(When, u64, f64),
    /// θ + z σ.
    Percentile(f64),
    /// ln of the arithmetic mean of lognormal readings, θ + σ²/2.
    ArithmeticMean,
    WithinSd,
    BetweenSd,
    /// This level less that of an earlier period.
    Change(Period, Evidence),
    /// This level less the long-run mean.
    ChangeFromLongRun,
    /// This level less a peer's.
    Difference(Box<Model>, Evidence),
}

#[derive(Debug)]
pub struct Trial {
    pub model: Model,
    pub readings: Evidence,
    pub basis: Basis,
    pub asked: Vec<Asked>,
}

impl Trial {
    pub fn new(within: Within, level: LevelPrior, readings: Evidence) -> Trial {
        let model = Model { scale: Scale::Linear, within, level, bias_sd: 0.0, adjust: None };
        Trial { model, readings, basis: Basis::Both, asked: Vec::new() }
    }

    pub fn ask(mut self, what: &'static str, of: Of, truth: f64) -> Trial {
        self.asked.push(Asked { what, of, truth });
        self
    }

    pub fn level(self, truth: f64) -> Trial {
        self.ask("level", Of::Level(When::This), truth)
    }

    pub fn next_level(self, truth: f64) -> Trial {
        self.ask("next level", Of::Level(When::Next), truth)
    }

    pub fn long_run(self, truth: f64) -> Trial {
        self.ask("long-run mean", Of::Level(When::LongRun), truth)
    }

    /// A reading of this level, drawn here.
    pub fn next_reading(self, random: &mut Random, level: f64, sigma: f64) -> Trial {
        let truth = random.normal(level, sigma);
        self.ask("next reading", Of::Readings(When::This, 1, 0.0), truth)
    }

    /// For each question the chance, by the program, of what is at or below the truth.
    pub fn chances(&self) -> Result<Vec<(&'static str, f64)>, Absent> {
        let posterior = solve(&self.model, &self.readings, self.basis)?;
        self.asked.iter().map(|asked| Ok((asked.what, self.chance(&posterior, asked)?))).collect()
    }

    fn chance(&self, posterior: &Posterior, asked: &Asked) -> Result<f64, Absent> {
        let law = match &asked.of {
            Of::Level(when) => posterior.level(*when),
            Of::Readings(when, count, own) => posterior.reading(*when, *count, Some(*own)),
            Of::Percentile(z) => posterior.affine(When::This, 1.0, &|sigma| (z * sigma, 0.0)),
            Of::ArithmeticMean => posterior.level_shifted(When::This, &|sigma| 0.5 * sigma * sigma),
            Of::WithinSd => posterior.within_sd(),
            Of::BetweenSd => posterior.between_sd(),
            Of::Change(period, readings) => posterior.change(period, readings),
            Of::ChangeFromLongRun => posterior.change_long_run(),
            Of::Difference(model, readings) => {
                let own = Member { name: "own", model: &self.model, readings: &self.readings };
                let other = Member { name: "other", model, readings };
                joint::difference(&own, &other, self.basis, false)
            }
        }?;
        Ok(law.cdf(asked.truth))
    }
}

pub fn sums(values: &[f64]) -> Evidence {
    let n = values.len() as f64;
    let mean = values.iter().sum::<f64>() / n;
    let ss = values.iter().map(|x| (x - mean) * (x - mean)).sum();
    Evidence::Sums { n: values.len() as u64, mean, ss: Some(ss), rest: 0.0 }
}

/// Readings that become "below" at their reporting limit, or "above" at another; without any such, sums.
pub fn marked(values: &[f64], lower: f64, upper: f64) -> Evidence {
    if values.iter().all(|x| (lower..=upper).contains(x)) {
        return sums(values);
    }
    let seen = |x: f64| {
        if x < lower {
            Seen::Below(lower)
        } else if x > upper {
            Seen::Above(upper)
        } else {
            Seen::At(x)
        }
    };
    Evidence::Singles(values.iter().map(|x| Single { seen: seen(*x), uncertainty: 0.0 }).collect())
}

pub fn rounded(values: &[f64], step: f64) -> Evidence {
    let seen = |x: f64| {
        let at = step * fm::floor(x / step + 0.5);
        Seen::Rounded { lower: at - 0.5 * step, at, upper: at + 0.5 * step }
    };
    Evidence::Singles(values.iter().map(|x| Single { seen: seen(*x), uncertainty: 0.0 }).collect())
}

/// Readings with uncertainties of their own beside σ.
pub fn uncertain(random: &mut Random, level: f64, sigma: f64, uncertainties: &[f64]) -> Evidence {
    let single = |u: &f64| Single {
        seen: Seen::At(random.normal(level, (sigma * sigma + u * u).sqrt())),
        uncertainty: *u,
    };
    Evidence::Singles(uncertainties.iter().map(single).collect())
}

/// Earlier periods, drawn.
pub struct Past {
    pub periods: Vec<(Period, Evidence)>,
    pub levels: Vec<f64>,
}

impl Past {
    /// Levels about a long-run mean.
    pub fn about(random: &mut Random, mean: f64, tau: f64, sigma: f64, sizes: &[usize]) -> Past {
        let levels = random.normals(sizes.len(), mean, tau);
        Past::of(random, levels, sigma, sizes)
    }

    /// Levels that move step by step, over `gaps` steps before each period; the last is this period's level.
    pub fn walk(
        random: &mut Random,
        (start, step, sigma): (f64, f64, f64),
        sizes: &[usize],
        (gaps, last_gap): (&[f64], f64),
    ) -> (Past, f64) {
        let mut levels = vec![start];
        for gap in gaps.iter().skip(1).chain([&last_gap]) {
            levels.push(random.normal(levels[levels.len() - 1], step * gap.sqrt()));
        }
        let level = levels.pop().expect("a level");
        (Past::of(random, levels, sigma, sizes), level)
    }

    fn of(random: &mut Random, levels: Vec<f64>, sigma: f64, sizes: &[usize]) -> Past {
        let evidence = levels.iter().zip(sizes).map(|(level, n)| sums(&random.normals(*n, *level, sigma)));
        let periods = evidence.enumerate().map(|(j, e)| (Period::new(&(2000 + j).to_string()), e)).collect();
        Past { periods, levels }
    }

    pub fn prior(&self, pattern: Pattern, between: Between) -> Periods {
        Periods { periods: self.periods.clone(), pattern, between, weight: 1.0 }
    }

    pub fn history(&self, between: Between) -> LevelPrior {
        LevelPrior::Periods(self.prior(Pattern::AboutAMean, between))
    }

    /// This level less that of the period at this place.
    pub fn change(&self, place: usize, level: f64) -> (Of, f64) {
        let (period, readings) = self.periods[place].clone();
        (Of::Change(period, readings), level - self.levels[place])
    }
}
