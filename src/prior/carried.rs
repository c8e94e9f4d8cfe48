//! # carried
//! "What last year's review left is this year's prior." The handover of the previous review (or of the
//! one that `review` names) holds that review's model and the sums of every period that went into it;
//! the prior is built again from these, with the reviewed period put behind the earlier ones. It equals
//! `from = "history"` with the same keys, computed afresh from all readings, and no earlier reading
//! needs to be at hand. Plug-in estimates of the between sd (`reml`, `moments`) are made again; a
//! `weight_of_history` below 1 then holds for the reviewed period as well.
//!
//! The handover's ledger names every period that went in. A period that the data hold as well is
//! compared with it and not used again; one that neither holds is an error, as are readings that come
//! a second time. That review must be final, not amended by another, and of the same quantity, unit
//! and scale.
//!
//! Assumes what `history` assumes: no change of source, method or process between the periods.
//!
//! Source: Bayes' theorem in sequence (Gelman et al., Bayesian Data Analysis, 3rd ed., §1.3); the
//! chained hashes are our own.
//!
//! A worked number: a long-run mean known as N(42, 3²), τ = 2, σ/√n = 1 and a period mean of 45: the
//! long-run mean handed over has the variance 1/(1/9 + 1/5) = 3.214 and the mean
//! 3.214 × (42/9 + 45/5) = 43.93; the prior of the next level is N(43.93, 3.214 + 4).

use super::ground::Ground;
use super::handover::{Handed, Handover, LedgerLine};
use super::{Between, Built, LevelPrior, Refusal, Source, SourceKind};
use crate::diagnostics::{Caution, Fault, Faults, Place};
use crate::plan::{FoundReview, LinkedReview, Plan};
use crate::quantity::{Period, Scale};
use crate::spec::keys::{Key, Takes};
use crate::spec::reader::Reader;
use crate::spec::table::Table;

const KEYS: &[Key] = &[
    Key::required("from", Takes::OneOf(&["carried"]), "the handover of the previous review"),
    Key::optional("review", Takes::Text, "the folder of that review; default: [review] previous"),
    Key::optional("stamp", Takes::Text, "its stamp: 64 hexadecimal digits"),
];

pub const KIND: SourceKind =
    SourceKind { from: "carried", page: include_str!("carried.rs"), keys: KEYS, read };

/// Fewer equal readings than this may come about by chance.
const READINGS_THAT_TELL: u64 = 3;

#[derive(Debug)]
struct Carried {
    handed: HandedOver,
}

/// A handover with the review that left it.
#[derive(Debug, Clone, PartialEq)]
pub struct HandedOver {
    handover: Handover,
    written: String,
    stamp: String,
    /// Where a message about it points.
    place: Place,
}

fn read(table: &Table, _: Scale, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Source>> {
    let mut reader = Reader::new(table, KEYS, faults);
    let review = reader.text("review");
    let stamp = reader.text("stamp");
    if stamp.is_some() && review.is_none() {
        let fault = Fault::wrong("key-out-of-place", "a stamp without the review that it belongs to")
            .expected("review = \"…\" beside it, or the stamp in [review] previous")
            .repair("write previous = { review = \"…\", stamp = \"…\" } in [review]");
        reader.fault_at("stamp", fault);
    }
    let place = reader.span("from").place();
    reader.finish();
    let handed = HandedOver::of(plan, review.as_deref(), &place).map_err(|fault| faults.push(fault)).ok()?;
    Some(Box::new(Carried { handed }))
}

impl HandedOver {
    /// The handover of a review that the spec names: of `review`, or of the previous one.
    pub fn of(plan: &Plan, review: Option<&str>, place: &Place) -> Result<HandedOver, Fault> {
        let previous = plan.review.previous.as_ref().map(|link| link.written.as_str());
        let linked = review.or(previous).and_then(|written| plan.linked(written));
        let Some((linked, found)) = linked.and_then(|linked| Some((linked, linked.found.as_ref()?))) else {
            return Err(Fault::wrong("no-previous-review", "nothing says which review this is carried from")
                .at(place.clone())
                .expected(
                    "previous = { review = \"…\" } in [review]: the folder of the review before this one",
                )
                .repair("name that folder, or take the prior from the history"));
        };
        let wrong = |message: String, expected: &str, repair: &str| {
            Err(Fault::wrong("not-to-be-carried", message)
                .at(place.clone())
                .expected(expected)
                .repair(repair))
        };
        let written = &linked.link.written;
        let Some(bytes) = found.handover.as_ref().filter(|_| found.is_final) else {
            return wrong(
                format!("the review {written} is not final and leaves no handover"),
                "a review with status = \"final\"",
                "make that review final first, or take the prior from the history",
            );
        };
        if let Some(by) = &found.superseded_by {
            return wrong(
                format!("the review {written} is superseded by {by}"),
                "the review that holds good",
                "name the amendment's folder in its place",
            );
        }
        let handover = Handover::read(&bytes.bytes, &linked.handover.written)
            .map_err(|fault| fault.at(place.clone()))?;
        HandedOver::new(handover, linked, found, place).fits(plan)
    }

    fn new(handover: Handover, linked: &LinkedReview, found: &FoundReview, place: &Place) -> HandedOver {
        HandedOver {
            handover,
            written: linked.link.written.clone(),
            stamp: found.stamp.clone(),
            place: place.clone(),
        }
    }

    /// The id of the review that left it.
    pub fn review(&self) -> &str {
        &self.handover.review
    }

    /// Of the same quantity, and of an earlier period.
    fn fits(self, plan: &Plan) -> Result<HandedOver, Fault> {
        let own = &plan.quantity;
        let of = &self.handover;
        let differs = [
            ("quantity", of.quantity.as_str(), own.name.as_str()),
            ("unit", of.unit.as_str(), own.unit.as_str()),
            ("scale", of.scale.word(), own.scale.word()),
        ];
        for (what, theirs, ours) in differs {
            if theirs != ours {
                return Err(self.wrong(
                    format!(
                        "the {what} of the review {} is \"{theirs}\", here it is \"{ours}\"",
                        self.written
                    ),
                    "the same quantity, unit and scale in both",
                    "name a review of the same quantity",
                ));
            }
        }
        let period = &plan.review.period;
        let later = match (of.period.number(), period.number()) {
            (Some(theirs), Some(ours)) => theirs >= ours,
            _ => of.period == *period,
        };
        if later {
            return Err(self.wrong(
                format!(
                    "the review {} is of the period {}, which is not before {period}",
                    self.written, of.period
                ),
                "the review of an earlier period",
                "name the review before this one",
            ));
        }
        Ok(self)
    }

    fn wrong(&self, message: String, expected: &str, repair: &str) -> Fault {
        Fault::wrong("not-to-be-carried", message).at(self.place.clone()).expected(expected).repair(repair)
    }

    /// What is handed over of one series.
    pub fn series(&self, name: &str) -> Result<&Handed, Refusal> {
        self.handover.series.iter().find(|series| series.name == name).ok_or_else(|| {
            Refusal::TooShort(self.wrong(
                format!("{name}: the handover of {} does not hold this series", self.written),
                "a series that was reviewed there",
                "give this series a prior of its own in [series], or add otherwise = { from = … }",
            ))
        })
    }

    /// Why a series' handover cannot serve.
    pub fn unfit(&self, series: &str, why: String) -> Refusal {
        Refusal::TooShort(self.wrong(
            format!("{series}: the handover of {} cannot serve: {why}", self.written),
            "a handover whose model goes on to the next period",
            "take the prior from the history, or state it",
        ))
    }

    /// Holds the data against the ledger: which periods it knows already, and what differs.
    fn against(
        &self,
        ground: &Ground<'_>,
        ledger: &[LedgerLine],
    ) -> Result<(Vec<String>, Vec<Caution>), Refusal> {
        let series = ground.series;
        let twice = |what: String| {
            Refusal::Wrong(self.wrong(
                format!("{series}: {what}"),
                "readings that no earlier review has used",
                "correct the period of these readings, or name the review before them",
            ))
        };
        let period = &ground.plan.review.period;
        if ledger.iter().any(|line| line.period == *period) {
            return Err(twice(format!(
                "the period {period} went into the handover of {} already",
                self.written
            )));
        }
        if let Some((n, sha256)) = ground.hash_of_readings()
            && n >= READINGS_THAT_TELL
            && let Some(line) = ledger.iter().find(|line| line.sha256.as_deref() == Some(sha256.as_str()))
        {
            return Err(twice(format!(
                "the readings of {period} are those of {}, which went into the handover of {} already",
                line.period, self.written
            )));
        }
        let (mut known, mut cautions) = (Vec::new(), Vec::new());
        for (data, evidence, sha256) in ground.earlier_with_hashes() {
            let Some(line) = ledger.iter().find(|line| line.period == data.period) else {
                return Err(Refusal::Wrong(self.wrong(
                    format!(
                        "{series}: the data hold the period {}, which the handover of {} does not: it would count for nothing",
                        data.period, self.written
                    ),
                    "earlier periods that the handover's ledger names",
                    "leave it out with a reason in [history] leave_out, or take the prior from the history",
                )));
            };
            let same = match (&line.sha256, &sha256) {
                (Some(theirs), Some(ours)) => theirs == ours,
                _ => line.evidence == evidence,
            };
            if same {
                known.push(data.period.to_string());
            } else {
                cautions.push(
                    Caution::new(
                        "ledger-differs",
                        format!(
                            "The readings of {} in the data are not those that went into the handover of {}; the handover's are used.",
                            data.period, self.written
                        ),
                    )
                    .of_series(series),
                );
            }
        }
        Ok((known, cautions))
    }
}

impl Source for Carried {
    fn from(&self) -> &'static str {
        "carried"
    }

    fn level(&self, ground: &Ground<'_>) -> Result<Built, Refusal> {
        let handed = self.handed.series(ground.series)?;
        let reviewed = &self.handed.handover.period;
        let period = &ground.plan.review.period;
        let level = handed
            .next_level(reviewed, period, &|from: &Period, to: &Period| ground.gap(from, to))
            .map_err(|why| self.handed.unfit(ground.series, why))?;
        let (known, mut cautions) = self.handed.against(ground, &handed.ledger)?;
        let periods: Vec<&str> = handed.ledger.iter().map(|line| line.period.as_str()).collect();
        let mut notes = vec![format!(
            "The prior is carried from the review {} (stamp {}) of the period {reviewed}; its ledger holds {}: {}.",
            self.handed.handover.review,
            self.handed.stamp,
            if periods.len() == 1 { "one period".to_string() } else { format!("{} periods", periods.len()) },
            periods.join(", ")
        )];
        if !known.is_empty() {
            notes.push(format!(
                "The data hold {} too, equal to the ledger; not used again.",
                known.join(", ")
            ));
        }
        if estimates(&level) {
            cautions.push(Caution::new(
                "plug-in",
                "The between sd is an estimate taken as known, made again from all periods carried, which makes the prior too sure.",
            ));
        }
        Ok(Built { level, notes, cautions, ledger: handed.ledger.clone() })
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        vec![("review", format!("{:?}", self.handed.written)), ("stamp", format!("{:?}", self.handed.stamp))]
    }
}

/// Whether the between sd is a plug-in estimate.
fn estimates(level: &LevelPrior) -> bool {
    match level {
        LevelPrior::Periods(periods) => matches!(periods.between, Between::Reml | Between::Moments),
        LevelPrior::Mixture(parts) => parts.iter().any(|(_, part)| estimates(part)),
        _ => false,
    }
}
