//! Stage 4: what was known before this period's readings. One file a source; each reads its own keys
//! of `[prior]` and turns them, with the data of earlier periods or other series, into a [`Model`].

use crate::data::evidence::Evidence;
use crate::quantity::{Period, Scale};

/// How one series' readings of the period under review arise: everything that the posterior needs
/// beside these readings themselves. On the model's scale (logarithms where the scale is log).
#[derive(Debug, Clone, PartialEq)]
pub struct Model {
    pub scale: Scale,
    pub within: Within,
    pub level: LevelPrior,
    /// Standard uncertainty of a bias common to all readings; 0 where none.
    pub bias_sd: f64,
    /// Stretch and shift of the prior about its own median, for the sensitivity section.
    pub adjust: Option<Adjust>,
}

/// The prior's normal pieces N(m, v) become N(centre + stretch (m − centre) + shift, stretch² v);
/// long-run mean and between sd move alike.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Adjust {
    pub centre: f64,
    pub stretch: f64,
    pub shift: f64,
}

/// The within sd σ.
#[derive(Debug, Clone, PartialEq)]
pub enum Within {
    Known(f64),
    /// σ² ~ scaled inverse chi-square(df, sd²), updated by all readings used.
    Worth {
        sd: f64,
        df: f64,
    },
    /// p(σ²) ∝ 1/σ², from the history's readings and this period's, pooled. Where the prior of the
    /// level holds no periods, `others` brings the earlier periods' evidence for σ alone.
    Pooled {
        others: Vec<Evidence>,
    },
    /// p(σ²) ∝ 1/σ², from this period's readings alone; a history prior has a σ of its own.
    Readings,
    /// σ = 0: every reading brings its own uncertainty.
    None,
}

/// The prior of the level of the period under review.
#[derive(Debug, Clone, PartialEq)]
pub enum LevelPrior {
    Flat,
    Stated {
        mean: f64,
        sd: f64,
    },
    /// N(mean, σ²/readings).
    Worth {
        mean: f64,
        readings: f64,
    },
    /// Long-run mean N(mean, sd²), levels about it with a known between sd.
    LongRun {
        mean: f64,
        sd: f64,
        between_sd: f64,
    },
    /// Earlier periods of the series.
    Periods(Periods),
    /// Other series of the same period, exchangeable with this one; no model of periods.
    Peers(Periods),
    /// Proper densities, each with its weight before the readings.
    Mixture(Vec<(f64, LevelPrior)>),
}

/// Earlier periods (or peers) and how their levels hang together.
#[derive(Debug, Clone, PartialEq)]
pub struct Periods {
    /// In order of time; only those that count.
    pub periods: Vec<(Period, Evidence)>,
    pub pattern: Pattern,
    pub between: Between,
    /// Weight of the history in (0, 1]; other than 1 only with [`Between::None`].
    pub weight: f64,
}

#[derive(Debug, Clone, PartialEq)]
pub enum Pattern {
    AboutAMean,
    /// Steps elapsed before each period (the first is not used), and up to the period under review.
    RandomWalk {
        gaps: Vec<f64>,
        last_gap: f64,
    },
}

/// The law of the between sd τ.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Between {
    Uniform,
    HalfNormal(f64),
    HalfCauchy(f64),
    Known(f64),
    /// τ = 0.
    None,
    /// Plug-ins: τ estimated from the history and taken as known.
    Reml,
    Moments,
}
