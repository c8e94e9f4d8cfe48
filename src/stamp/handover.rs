//! Putting the handover of a review together from its findings.

use crate::data::evidence::Evidence;
use crate::data::{Data, PeriodData};
use crate::findings::{Findings, SeriesFindings};
use crate::posterior::{Piece, Posterior};
use crate::prior::LevelPrior;
use crate::prior::handover::{Handed, HandedPiece, Handover, LedgerLine, sorted_values};
use crate::quantity::Period;
use crate::source::sha256_hex;

/// The handover of a review. Only final reviews leave one; the caller sees to that.
pub fn handover(findings: &Findings) -> Handover {
    let plan = &findings.plan;
    Handover {
        review: plan.review.id.clone(),
        period: plan.review.period.clone(),
        quantity: plan.quantity.name.clone(),
        unit: plan.quantity.unit.clone(),
        scale: plan.quantity.scale,
        series: findings.series.iter().map(|series| handed(series, findings)).collect(),
    }
}

fn handed(series: &SeriesFindings, findings: &Findings) -> Handed {
    let posterior = series.posterior.as_ref();
    Handed {
        name: series.name.clone(),
        model: posterior.map(|posterior| posterior.model.clone()).map_err(|absent| absent.reason.clone()),
        readings: posterior.map_or(Evidence::Nothing, |posterior| posterior.readings.clone()),
        pieces: posterior.map_or(Vec::new(), pieces),
        part_weights: posterior.map_or(Vec::new(), Posterior::part_weights),
        ledger: posterior.map_or(Vec::new(), |posterior| ledger(series, posterior, findings)),
    }
}

/// Where levels are held as densities the next level's are points, and stand for pieces without width.
fn pieces(posterior: &Posterior) -> Vec<HandedPiece> {
    let Some(points) = posterior.next_level_points() else {
        return posterior.pieces().unwrap_or_default().iter().map(handed_piece).collect();
    };
    let handed = |(weight, level, reading_sd): (f64, f64, f64)| HandedPiece {
        weight,
        next_level: Some((level, 0.0)),
        level: None,
        long_run_mean: None,
        between_sd: None,
        reading_sd,
    };
    points.into_iter().map(handed).collect()
}

fn handed_piece(piece: &Piece) -> HandedPiece {
    let periods = piece.periods;
    HandedPiece {
        weight: piece.weight,
        // N(M, τ² + V), methods §1; in a random walk M and V are the level's own.
        next_level: periods
            .map(|part| (part.long_run_mean, part.long_run_var + part.between_sd * part.between_sd)),
        level: Some((piece.level_mean, piece.level_var)),
        long_run_mean: periods.map(|part| (part.long_run_mean, part.long_run_var)),
        between_sd: periods.map(|part| part.between_sd),
        reading_sd: piece.reading_sd,
    }
}

/// The periods that went in, with the hashes of their readings: those of a handover that the prior was
/// carried from, those of the model's history, and the one under review.
fn ledger(series: &SeriesFindings, posterior: &Posterior, findings: &Findings) -> Vec<LedgerLine> {
    let mut lines = series.carried_ledger.clone();
    let mut periods = Vec::new();
    periods_of(&posterior.model.level, &mut periods);
    let reviewed = &findings.plan.review.period;
    if !posterior.readings.is_nothing() {
        periods.push((reviewed.clone(), posterior.readings.clone()));
    }
    periods.retain(|(period, _)| !lines.iter().any(|line| line.period == *period));
    lines.extend(periods.into_iter().map(|(period, evidence)| {
        let data = period_data(&findings.data, &series.name, &period);
        let n = data.map_or(evidence.n(), |data| Some(data.facts.n)).filter(|n| *n > 0);
        let sha256 =
            data.and_then(|data| sorted_values(&data.readings)).map(|text| sha256_hex(text.as_bytes()));
        LedgerLine { period, evidence, n, sha256 }
    }));
    lines
}

fn period_data<'a>(data: &'a Data, series: &str, period: &Period) -> Option<&'a PeriodData> {
    data.series.iter().find(|own| own.name == series)?.period(period)
}

/// The series' own earlier periods that a prior holds, each once.
fn periods_of(prior: &LevelPrior, found: &mut Vec<(Period, Evidence)>) {
    match prior {
        LevelPrior::Periods(periods) => {
            for (period, evidence) in &periods.periods {
                if !found.iter().any(|(known, _)| known == period) {
                    found.push((period.clone(), evidence.clone()));
                }
            }
        }
        LevelPrior::Mixture(parts) => parts.iter().for_each(|(_, part)| periods_of(part, found)),
        // Peers are other series: their readings stand in their own ledgers.
        LevelPrior::Peers(_)
        | LevelPrior::Flat
        | LevelPrior::Stated { .. }
        | LevelPrior::Worth { .. }
        | LevelPrior::LongRun { .. } => {}
    }
}
