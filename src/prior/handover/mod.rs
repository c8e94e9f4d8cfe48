//! handover.json: what a final review leaves for the next period's prior.
//!
//! Per series: the model and its period's evidence, from which a later review builds its prior again;
//! the pieces of the posterior, which say the same in figures that can be read off; and a ledger of the
//! periods that went in, so that no reading is ever counted twice. All numbers are on the model's scale
//! (natural logarithms where the scale is log) and as measured: a stated bias is not taken out.

mod model;
mod next;
mod read;

use crate::data::evidence::Evidence;
use crate::data::{Fate, Mark, ReadingRow};
use crate::json::{Json, Object};
use crate::prior::Model;
use crate::quantity::{Period, Scale};
use model::{evidence_json, model_json};

pub const FORMAT: &str = "reassay-handover/1";

/// All that a handover holds.
#[derive(Debug, Clone, PartialEq)]
pub struct Handover {
    /// The id of the review that left it.
    pub review: String,
    /// The period that it reviewed.
    pub period: Period,
    pub quantity: String,
    pub unit: String,
    pub scale: Scale,
    pub series: Vec<Handed>,
}

/// What is handed over of one series.
#[derive(Debug, Clone, PartialEq)]
pub struct Handed {
    pub name: String,
    /// Without the reviewed period; or why there is none.
    pub model: Result<Model, String>,
    /// What the reviewed period said.
    pub readings: Evidence,
    pub pieces: Vec<HandedPiece>,
    /// Of a mixture: what each part weighs after the readings. Empty for any other prior.
    pub part_weights: Vec<f64>,
    /// In order of time, the reviewed period last.
    pub ledger: Vec<LedgerLine>,
}

/// One piece of the posterior; pairs are mean and variance.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct HandedPiece {
    pub weight: f64,
    /// `None` where the prior is no model of periods.
    pub next_level: Option<(f64, f64)>,
    /// `None` where levels are held as densities (marked readings): the pieces are then the next level's.
    pub level: Option<(f64, f64)>,
    pub long_run_mean: Option<(f64, f64)>,
    pub between_sd: Option<f64>,
    pub reading_sd: f64,
}

/// A period whose readings went in.
#[derive(Debug, Clone, PartialEq)]
pub struct LedgerLine {
    pub period: Period,
    pub evidence: Evidence,
    /// The number of readings used; `None` where only a mean and its uncertainty are known.
    pub n: Option<u64>,
    /// SHA-256 of [`sorted_values`]; `None` where single readings are not held.
    pub sha256: Option<String>,
}

/// The used readings of a period as text: one line each, mark and value in shortest form, then a space
/// and the reading's own uncertainty where it has one; sorted by value, mark, uncertainty; LF after
/// every line. `None` where no single reading is held.
pub fn sorted_values(rows: &[ReadingRow]) -> Option<String> {
    let mut used: Vec<(f64, &str, f64)> = rows
        .iter()
        .filter(|row| row.fate == Fate::Used)
        .filter_map(|row| {
            let mark = match row.mark {
                Mark::None => "",
                Mark::Below => "<",
                Mark::Above => ">",
            };
            row.value.map(|value| (value, mark, row.uncertainty.unwrap_or(0.0)))
        })
        .collect();
    used.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(b.1)).then(a.2.total_cmp(&b.2)));
    let line = |(value, mark, uncertainty): &(f64, &str, f64)| {
        if *uncertainty > 0.0 {
            format!("{mark}{value:?} {uncertainty:?}\n")
        } else {
            format!("{mark}{value:?}\n")
        }
    };
    (!used.is_empty()).then(|| used.iter().map(line).collect())
}

impl Handover {
    /// The whole of handover.json.
    pub fn to_json(&self) -> Json {
        let quantity = Object::new()
            .text("name", self.quantity.as_str())
            .text("unit", self.unit.as_str())
            .text("scale", self.scale.word());
        Object::new()
            .text("format", FORMAT)
            .text("review", self.review.as_str())
            .text("period", self.period.as_str())
            .put("quantity", quantity.done())
            .put("series", Json::List(self.series.iter().map(Handed::to_json).collect()))
            .done()
    }
}

impl Handed {
    fn to_json(&self) -> Json {
        let object = Object::new().text("name", self.name.as_str());
        let mut object = match &self.model {
            Ok(model) => object.put("model", model_json(model)),
            Err(reason) => object.absent("model", reason.as_str()),
        };
        if self.model.is_ok() && self.pieces.is_empty() {
            object.because("pieces", "the level is held as a density; the model builds it again");
        } else if self.pieces.iter().any(|piece| piece.next_level.is_none()) {
            object.because(
                "next_level",
                "the prior is no model of periods: take it from the history, or state between_sd",
            );
        }
        if self.pieces.iter().any(|piece| piece.level.is_none()) {
            object.because("level", "with marked readings the pieces are points of the next level");
        }
        object
            .put("readings", evidence_json(&self.readings))
            .put("pieces", Json::List(self.pieces.iter().copied().map(HandedPiece::to_json).collect()))
            .put("part_weights", Json::List(self.part_weights.iter().copied().map(Json::number).collect()))
            .put("ledger", Json::List(self.ledger.iter().map(LedgerLine::to_json).collect()))
            .done()
    }
}

impl HandedPiece {
    fn to_json(self) -> Json {
        let pair =
            |(mean, variance): (f64, f64)| Json::List(vec![Json::number(mean), Json::number(variance)]);
        Object::new()
            .put("weight", Json::number(self.weight))
            .put("next_level", self.next_level.map_or(Json::Null, pair))
            .put("level", self.level.map_or(Json::Null, pair))
            .put("long_run_mean", self.long_run_mean.map_or(Json::Null, pair))
            .put("between_sd", self.between_sd.map_or(Json::Null, Json::number))
            .put("reading_sd", Json::number(self.reading_sd))
            .done()
    }
}

impl LedgerLine {
    fn to_json(&self) -> Json {
        let object = Object::new().text("period", self.period.as_str());
        let object = match self.n {
            Some(n) => object.whole("n", n),
            None => object.absent("n", "not counted"),
        };
        let object = match &self.sha256 {
            Some(sha256) => object.text("sha256", sha256.as_str()),
            None => object.absent("sha256", "single readings are not held"),
        };
        object.put("evidence", evidence_json(&self.evidence)).done()
    }
}
