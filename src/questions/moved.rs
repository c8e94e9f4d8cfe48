//! What a chance would be, had the readings or the prior lain elsewhere: acceptance limits, operating
//! characteristics and tipping priors all ask this.
//!
//! The pieces of the posterior are moved, not solved for again. Piece k is N(m, v) after readings whose
//! mean x̄ has variance s² under it; B = 1 − v/s² is the prior's share, so its prior was N(m0, v0) with
//! m = B m0 + (1 − B) x̄ and v0 = s²(1 − B)/B. With the readings moved by δ (their number and scatter as
//! observed) and the prior by h, its mean becomes m + B h + (1 − B) δ and its weight is multiplied by
//! N(x̄ + δ; m0 + h, v0 + s²) / N(x̄; m0, v0 + s²).

use super::{Linear, Question, Subject, beyond};
use crate::data::evidence::{Evidence, Seen};
use crate::math::fm;
use crate::posterior::{Basis, Posterior, When};
use crate::quantity::{Absent, Beyond};

/// How far readings and prior are moved, on the model's scale.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Move {
    /// All readings.
    pub readings: f64,
    /// The prior's pieces: first stretched about `centre`, then moved.
    pub prior: f64,
    pub stretch: f64,
    pub centre: f64,
}

impl Move {
    pub const NONE: Move = Move { readings: 0.0, prior: 0.0, stretch: 1.0, centre: 0.0 };

    pub fn readings(by: f64) -> Move {
        Move { readings: by, ..Move::NONE }
    }

    pub fn prior(by: f64) -> Move {
        Move { prior: by, ..Move::NONE }
    }

    pub fn stretch(factor: f64, centre: f64) -> Move {
        Move { stretch: factor, centre, ..Move::NONE }
    }
}

/// The pieces of a posterior with what is needed to move them.
#[derive(Debug, Clone)]
pub struct Movable {
    parts: Vec<Part>,
    /// The readings' plain mean.
    pub mean: f64,
    /// Their number, where they were counted.
    pub n: Option<u64>,
}

#[derive(Debug, Clone, Copy)]
pub struct Part {
    pub weight: f64,
    /// After the readings.
    pub mean: f64,
    pub var: f64,
    /// Variance of the readings' (weighted) mean about the level.
    pub mean_var: f64,
    /// That mean.
    pub readings_mean: f64,
    /// The prior's share B.
    pub prior_share: f64,
    pub linear: Linear,
}

/// The readings' plain mean, on the model's scale; with marks there is none.
pub fn plain_mean(evidence: &Evidence) -> Result<f64, Absent> {
    match evidence {
        Evidence::Nothing => Err(Absent::because("there are no readings in this period")),
        Evidence::Sums { mean, .. } | Evidence::Mean { mean, .. } => Ok(*mean),
        Evidence::Singles(singles) => {
            let mut moments = crate::math::sums::Moments::new();
            for single in singles {
                match single.seen {
                    Seen::At(value) | Seen::Rounded { at: value, .. } => moments.add(value),
                    Seen::Below(_) | Seen::Above(_) => {
                        return Err(Absent::because("marked readings have no plain mean"));
                    }
                }
            }
            Ok(moments.mean())
        }
    }
}

/// All readings moved by so much.
pub fn moved(evidence: &Evidence, by: f64) -> Evidence {
    match evidence {
        Evidence::Nothing => Evidence::Nothing,
        Evidence::Sums { n, mean, ss, rest } => {
            Evidence::Sums { n: *n, mean: mean + by, ss: *ss, rest: *rest }
        }
        Evidence::Mean { mean, uncertainty } => Evidence::Mean { mean: mean + by, uncertainty: *uncertainty },
        Evidence::Singles(singles) => {
            let mut singles = singles.clone();
            for single in &mut singles {
                single.seen = match single.seen {
                    Seen::At(value) => Seen::At(value + by),
                    Seen::Below(value) => Seen::Below(value + by),
                    Seen::Above(value) => Seen::Above(value + by),
                    Seen::Rounded { lower, at, upper } => {
                        Seen::Rounded { lower: lower + by, at: at + by, upper: upper + by }
                    }
                };
            }
            Evidence::Singles(singles)
        }
    }
}

/// The readings' weighted mean and its variance about the level, given σ; `None` where that is not
/// all that the likelihood knows of the level.
pub fn mean_given(evidence: &Evidence, sigma: f64) -> Option<(f64, f64)> {
    match evidence {
        Evidence::Nothing => None,
        Evidence::Sums { n, mean, .. } => Some((*mean, sigma * sigma / *n as f64)),
        Evidence::Mean { mean, uncertainty } => Some((*mean, uncertainty * uncertainty)),
        Evidence::Singles(singles) => {
            let (mut whole, mut first) = (0.0, 0.0);
            for single in singles {
                let Seen::At(value) = single.seen else { return None };
                let weight = 1.0 / (single.uncertainty * single.uncertainty + sigma * sigma);
                whole += weight;
                first += weight * value;
            }
            Some((first / whole, 1.0 / whole))
        }
    }
}

impl Movable {
    /// The pieces behind a question's chance; absent where that chance is not of the linear shape of
    /// this period's level, or the likelihood is more than a normal mean.
    pub fn of(question: &dyn Question, subject: &Subject<'_>) -> Result<Movable, Absent> {
        let posterior: &Posterior = subject.posterior.clone()?;
        let mean = plain_mean(&posterior.readings)?;
        let not_so = || Absent::because("the chance does not move with the readings' mean in a simple way");
        if posterior.basis != Basis::Both {
            return Err(not_so());
        }
        let pieces = posterior.pieces()?;
        let mut parts = Vec::with_capacity(pieces.len());
        for piece in pieces {
            let linear = question.linear(subject, piece.reading_sd).ok_or_else(not_so)?;
            let (readings_mean, mean_var) =
                mean_given(&posterior.readings, piece.reading_sd).ok_or_else(not_so)?;
            let with_bias = linear.true_level && posterior.model.bias_sd > 0.0;
            // A level held on nodes, as with marked readings in the history, has no prior share of its own.
            let known = linear.shift.is_finite()
                && linear.variance.is_finite()
                && mean_var > 0.0
                && piece.level_var > 0.0;
            if linear.when != When::This || with_bias || !known {
                return Err(not_so());
            }
            parts.push(Part {
                weight: piece.weight,
                mean: piece.level_mean,
                var: piece.level_var,
                mean_var,
                readings_mean,
                prior_share: (1.0 - piece.level_var / mean_var).max(0.0),
                linear,
            });
        }
        let n = posterior.readings.n();
        Ok(Movable { parts, mean, n })
    }

    pub fn parts(&self) -> &[Part] {
        &self.parts
    }

    /// The one piece, where there is only one.
    pub fn single(&self) -> Option<&Part> {
        match self.parts.as_slice() {
            [part] => Some(part),
            _ => None,
        }
    }

    /// The usual size of the readings' mean's error, √(Σ w s²).
    pub fn mean_sd(&self) -> f64 {
        self.parts.iter().map(|part| part.weight * part.mean_var).sum::<f64>().sqrt()
    }

    /// The chance of lying beyond and that of not lying there, after the move.
    pub fn split(&self, by: Move) -> (f64, f64) {
        let logs: Vec<f64> = self.parts.iter().map(|part| part.ln_factor(by)).collect();
        let top = logs.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let (mut whole, mut beyond, mut not_beyond) = (0.0, 0.0, 0.0);
        for (part, ln) in self.parts.iter().zip(logs) {
            let weight = part.weight * fm::exp(ln - top);
            if weight == 0.0 {
                continue;
            }
            let (mean, var) = part.after(by);
            let sd = (var + part.linear.variance).sqrt();
            let (out, within) = beyond::normal_split(part.linear.beyond, mean + part.linear.shift, sd);
            whole += weight;
            beyond += weight * out;
            not_beyond += weight * within;
        }
        (beyond / whole, not_beyond / whole)
    }

    pub fn chance(&self, by: Move) -> f64 {
        self.split(by).0
    }

    /// Whether the pieces at hand still hold the whole posterior after the move. They were made where the
    /// unmoved one lies; a far move shifts its weight to where they are sparse or end, and then the model has to
    /// be solved again.
    pub fn reaches(&self, by: Move) -> bool {
        const AT_THE_EDGE: f64 = 1e-22;
        const SEEN: f64 = 1e-13;
        if self.parts.len() == 1 {
            return true;
        }
        let logs: Vec<f64> = self.parts.iter().map(|part| part.ln_factor(by)).collect();
        let top = self.parts.iter().zip(&logs).map(|(part, ln)| fm::ln(part.weight) + ln);
        let top = top.fold(f64::NEG_INFINITY, f64::max);
        let (mut whole, mut edge) = (0.0, 0.0);
        for (part, ln) in self.parts.iter().zip(logs) {
            let weight = fm::exp(fm::ln(part.weight) + ln - top);
            whole += weight;
            if part.weight < AT_THE_EDGE {
                edge += weight;
            }
        }
        edge <= SEEN * whole
    }

    /// The prior's share of the level, Σ w B, after the move.
    pub fn prior_share(&self, by: Move) -> f64 {
        let logs: Vec<f64> = self.parts.iter().map(|part| part.ln_factor(by)).collect();
        let top = logs.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let (mut whole, mut share) = (0.0, 0.0);
        for (part, ln) in self.parts.iter().zip(logs) {
            let weight = part.weight * fm::exp(ln - top);
            whole += weight;
            share += weight * part.share_after(by);
        }
        share / whole
    }

    /// The limits that the chance is about.
    pub fn limits(&self) -> Vec<f64> {
        match self.parts.first().map(|part| part.linear.beyond) {
            Some(Beyond::Above(limit) | Beyond::Below(limit)) => vec![limit],
            Some(Beyond::Between(lower, upper) | Beyond::Outside(lower, upper)) => vec![lower, upper],
            None => Vec::new(),
        }
    }
}

impl Part {
    /// B after the prior was stretched: s²/(c² v0 + s²).
    fn share_after(&self, by: Move) -> f64 {
        let share = self.prior_share;
        if by.stretch == 1.0 { share } else { share / (by.stretch * by.stretch * (1.0 - share) + share) }
    }

    /// The prior's mean m0; finite only with a prior.
    fn prior_mean(&self) -> f64 {
        self.readings_mean - (self.readings_mean - self.mean) / self.prior_share
    }

    /// ln of the factor by which the piece's weight changes.
    fn ln_factor(&self, by: Move) -> f64 {
        let share = self.prior_share;
        if share == 0.0 {
            return 0.0;
        }
        if by.stretch == 1.0 {
            // B (x̄ − m0) = x̄ − m: nothing is divided by a small B.
            let apart = by.readings - by.prior;
            let towards = self.readings_mean - self.mean;
            return -0.5 * apart * (share * apart + 2.0 * towards) / self.mean_var;
        }
        let new_share = self.share_after(by);
        let before = self.readings_mean - self.prior_mean();
        let new_mean = by.centre + by.stretch * (self.prior_mean() - by.centre) + by.prior;
        let after = self.readings_mean + by.readings - new_mean;
        let squares = share * before * before - new_share * after * after;
        0.5 * fm::ln(new_share / share) + 0.5 * squares / self.mean_var
    }

    /// Mean and variance of the level after the move.
    fn after(&self, by: Move) -> (f64, f64) {
        if by.stretch == 1.0 {
            let share = self.prior_share;
            return (self.mean + share * by.prior + (1.0 - share) * by.readings, self.var);
        }
        let share = self.share_after(by);
        let prior_mean = if self.prior_share == 0.0 {
            0.0
        } else {
            by.centre + by.stretch * (self.prior_mean() - by.centre) + by.prior
        };
        let mean = share * prior_mean + (1.0 - share) * (self.readings_mean + by.readings);
        (mean, (1.0 - share) * self.mean_var)
    }
}
