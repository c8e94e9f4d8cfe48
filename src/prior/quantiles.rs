//! # quantiles
//! "I am nine parts in ten sure that the level lies between these two, and one in twenty that …":
//! `quantiles = [[0.05, 34.0], [0.5, 41.0], [0.95, 49.0]]` states values below which the level lies
//! with these probabilities. A normal prior is fitted: with two quantiles exactly, with more by
//! least squares of the values q on z = Φ⁻¹(p), so that q ≈ m + s z. The misfit is reported as the
//! largest |Φ((q − m)/s) − p| and the largest |q − m − s z|. On the log scale ln q takes q's place.
//!
//! Assumes that the belief has about a normal shape; a misfit above 0.05 gives a caution.
//! `of_period` and `between_sd` as for `stated`.
//!
//! Source: O'Hagan et al., Uncertain Judgements (2006), ch. 6, for fitting by least squares.
//!
//! A worked number: [[0.05, 34], [0.95, 50]] gives the mean 42 and the sd 16/(2 × 1.644854) = 4.8637.

use super::ground::Ground;
use super::{Built, LevelPrior, Refusal, Source, SourceKind, basis};
use crate::diagnostics::{Caution, Fault, Faults};
use crate::math::{fm, normal};
use crate::plan::Plan;
use crate::quantity::Scale;
use crate::spec::keys::{Key, Takes};
use crate::spec::reader::Reader;
use crate::spec::table::Table;

const KEYS: &[Key] = &[
    Key::required("from", Takes::OneOf(&["quantiles"]), "quantiles of the level are stated here"),
    Key::required(
        "quantiles",
        Takes::Other("a list of pairs [probability, value], such as [[0.05, 34.0], [0.95, 50.0]]"),
        "two or more pairs of a probability and the value below which the level lies with it",
    ),
    Key::optional(
        "of_period",
        Takes::OneOf(&["this", "long run"]),
        "what they speak of: this period's level (default) or the long-run mean",
    ),
    Key::optional(
        "between_sd",
        Takes::Positive,
        "with of_period = \"long run\": the known sd of the levels about the long-run mean",
    ),
    Key::optional("basis", Takes::Text, "where the quantiles come from"),
];

pub const KIND: SourceKind =
    SourceKind { from: "quantiles", page: include_str!("quantiles.rs"), keys: KEYS, read };

/// A misfit in probability above which the reader is cautioned (common practice, no source).
const MISFIT_CAUTION: f64 = 0.05;

#[derive(Debug)]
struct Quantiles {
    level: LevelPrior,
    /// Largest misfit in probability and in value (model's scale); `None` for an exact fit.
    misfit: Option<(f64, f64)>,
    basis: String,
}

/// A normal law fitted to quantiles.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Fit {
    mean: f64,
    sd: f64,
    misfit_p: f64,
    misfit_value: f64,
}

fn read(table: &Table, scale: Scale, _: &Plan, faults: &mut Faults) -> Option<Box<dyn Source>> {
    let mut reader = Reader::new(table, KEYS, faults);
    let pairs = pairs(&mut reader, scale);
    let long_run = reader.choice("of_period") == Some("long run");
    let between_sd = reader.positive("between_sd");
    let basis = basis::required(&mut reader, "quantiles");
    if long_run != table.get("between_sd").is_some() {
        let fault =
            Fault::wrong("key-out-of-place", "of_period = \"long run\" and between_sd belong together")
                .expected("both or neither")
                .repair("add the missing one, or leave the other out");
        reader.fault_at("of_period", fault);
    }
    let fit = pairs.and_then(|pairs| {
        let fit = fit(&pairs);
        if fit.is_none() {
            let fault = Fault::wrong("quantiles-out-of-order", "these quantiles fit no normal law")
                .expected("values that rise with their probabilities")
                .repair("put the smaller value to the smaller probability");
            reader.fault_at("quantiles", fault);
        }
        fit.map(|fit| (fit, pairs.len() > 2))
    });
    reader.finish();
    let (fit, fitted) = fit?;
    let level = match between_sd {
        Some(between_sd) => LevelPrior::LongRun { mean: fit.mean, sd: fit.sd, between_sd },
        None => LevelPrior::Stated { mean: fit.mean, sd: fit.sd },
    };
    Some(Box::new(Quantiles {
        level,
        misfit: fitted.then_some((fit.misfit_p, fit.misfit_value)),
        basis: basis?,
    }))
}

/// The pairs (probability, value on the model's scale), all checked, in order of probability.
fn pairs(reader: &mut Reader<'_>, scale: Scale) -> Option<Vec<(f64, f64)>> {
    let mut pairs = reader.pairs("quantiles")?;
    let outside = pairs.iter().find(|(p, _)| !(*p > 0.0 && *p < 1.0));
    let message = match outside {
        Some((p, _)) => format!("{p} is not the probability of a quantile: it must lie between 0 and 1"),
        None if scale == Scale::Log && pairs.iter().any(|(_, q)| *q <= 0.0) => {
            "on the log scale every value must lie above 0".to_string()
        }
        None => {
            pairs.sort_by(|a, b| a.0.total_cmp(&b.0));
            if pairs.len() >= 2 && pairs.windows(2).all(|two| two[0].0 < two[1].0) {
                let on_scale = |q: f64| if scale == Scale::Log { fm::ln(q) } else { q };
                return Some(pairs.into_iter().map(|(p, q)| (p, on_scale(q))).collect());
            }
            "two quantiles of different probability are needed".to_string()
        }
    };
    let fault = Fault::wrong("wrong-quantiles", message)
        .expected("at least two pairs [probability, value], such as [[0.05, 34.0], [0.95, 50.0]]")
        .repair("give each quantile as [probability, value]");
    reader.fault_at("quantiles", fault);
    None
}

/// Least squares of the values on z; `None` where they do not rise with the probabilities.
fn fit(pairs: &[(f64, f64)]) -> Option<Fit> {
    if pairs.windows(2).any(|two| two[0].1 >= two[1].1) {
        return None;
    }
    let points: Vec<(f64, f64)> =
        pairs.iter().map(|(p, q)| normal::quantile(*p).map(|z| (z, *q))).collect::<Result<_, _>>().ok()?;
    let n = points.len() as f64;
    let z_mean = points.iter().map(|(z, _)| z).sum::<f64>() / n;
    let q_mean = points.iter().map(|(_, q)| q).sum::<f64>() / n;
    let zz: f64 = points.iter().map(|(z, _)| (z - z_mean) * (z - z_mean)).sum();
    let zq: f64 = points.iter().map(|(z, q)| (z - z_mean) * (q - q_mean)).sum();
    let sd = zq / zz;
    if !(sd > 0.0 && sd.is_finite()) {
        return None;
    }
    let mean = q_mean - sd * z_mean;
    let misfit = |f: &dyn Fn(f64, f64, f64) -> f64| {
        points.iter().zip(pairs).map(|((z, q), (p, _))| f(*z, *q, *p).abs()).fold(0.0, f64::max)
    };
    Some(Fit {
        mean,
        sd,
        misfit_p: misfit(&|_, q, p| normal::cdf((q - mean) / sd) - p),
        misfit_value: misfit(&|z, q, _| q - mean - sd * z),
    })
}

impl Source for Quantiles {
    fn from(&self) -> &'static str {
        "quantiles"
    }

    fn level(&self, ground: &Ground<'_>) -> Result<Built, Refusal> {
        let mut notes = vec![format!(
            "The prior is a normal law fitted to stated quantiles. Their basis: {}.",
            self.basis.trim_end_matches('.')
        )];
        let mut cautions = Vec::new();
        if let Some((p, value)) = self.misfit {
            let scale = if ground.scale == Scale::Log { " (of the logarithm)" } else { "" };
            let text = format!(
                "The fitted law misses the stated quantiles by at most {p:.4} in probability and {value:.4}{scale} in value."
            );
            if p > MISFIT_CAUTION {
                cautions.push(Caution::new("quantiles-misfit", text.clone()));
            }
            notes.push(text);
        }
        Ok(Built { level: self.level.clone(), notes, cautions, ledger: Vec::new() })
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let of_period = match self.level {
            LevelPrior::LongRun { .. } => "\"long run\"",
            _ => "\"this\"",
        };
        vec![("of_period", of_period.to_string())]
    }
}

#[cfg(test)]
mod tests {
    use super::fit;

    #[test]
    fn two_quantiles_are_met_exactly() {
        let fit = fit(&[(0.05, 34.0), (0.95, 50.0)]).expect("rising");
        // z(0.95) = 1.6448536269514722 (Abramowitz & Stegun, table 26.5, extended).
        assert!((fit.mean - 42.0).abs() < 1e-12);
        assert!((fit.sd - 16.0 / (2.0 * 1.644_853_626_951_472_2)).abs() < 1e-12);
        assert!(fit.misfit_p < 1e-15);
    }

    #[test]
    fn falling_quantiles_fit_nothing() {
        assert_eq!(fit(&[(0.05, 50.0), (0.95, 34.0)]), None);
    }
}
