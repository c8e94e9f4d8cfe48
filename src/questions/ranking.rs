//! # ranking
//! "Which station is the worst?" For each series the answer is the chance that its level is the highest
//! (or the lowest) of all in the period under review, and its expected rank, 1 being first.
//!
//! P(i first) = ∫ f_i Π_{j ≠ i} F_j dt for levels that are independent given what they share, averaged over
//! what they share (the within sd, the spreads and the mean of a prior made of peers, a bias); expected
//! rank = 1 + Σ P(θ_j beyond θ_i). The chances of all series add to 1.
//!
//! Assumes the model of the readings and the priors named in the report. The series asked about are those of
//! `only`, or all that are reviewed.
//!
//! Source: Gelman et al., Bayesian Data Analysis, 3rd ed., §5.5; Goldstein & Spiegelhalter 1996, Journal of
//! the Royal Statistical Society A 159 (on ranks and their uncertainty).
//!
//! A worked number: two series with flat priors, σ = 0.25, five readings of mean 12.12 and four of 11.65: the
//! first is the highest with probability Φ(0.47/0.167705) = 0.997465, its expected rank is 1.002535.

use super::difference::{member, shares_within_sd};
use super::figures::{Figures, Meaning};
use super::{Question, QuestionKind, Subject, terms};
use crate::diagnostics::Faults;
use crate::plan::{Plan, QuestionPlan};
use crate::posterior::When;
use crate::posterior::joint::{self, Member};
use crate::quantity::Absent;
use crate::spec::keys::{Key, Takes};
use crate::spec::language;
use crate::spec::reader::Reader;

const KEYS: &[Key] = &[Key::optional(
    "first",
    Takes::OneOf(&["highest", "lowest"]),
    "which level comes first; default highest",
)];

pub const KIND: QuestionKind =
    QuestionKind { ask: "ranking", page: include_str!("ranking.rs"), keys: KEYS, read };

#[derive(Debug)]
struct Ranking {
    highest: bool,
}

fn read(asked: &QuestionPlan, _: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let highest = reader.choice("first") != Some("lowest");
    reader.finish_beside(&[language::QUESTION]);
    Some(Box::new(Ranking { highest }))
}

impl Ranking {
    fn first(&self) -> &'static str {
        if self.highest { "highest" } else { "lowest" }
    }
}

impl Question for Ranking {
    fn answer(&self, _: &Subject<'_>) -> Figures {
        Figures::default()
    }

    fn across(&self, subjects: &[Subject<'_>]) -> Option<Vec<(String, Figures)>> {
        let members: Vec<Result<Member<'_>, Absent>> = subjects.iter().map(member).collect();
        let known: Vec<Member<'_>> = members.iter().flatten().copied().collect();
        let ranks = match subjects.first() {
            Some(subject) => {
                joint::ranking(&known, self.highest, subject.basis, shares_within_sd(subject.plan))
            }
            None => Err(Absent::because("there is no series to rank")),
        };
        let mut next = 0;
        let mut rows = Vec::with_capacity(subjects.len());
        for (subject, member) in subjects.iter().zip(&members) {
            let rank = match (member, &ranks) {
                (Err(absent), _) | (Ok(_), Err(absent)) => Err(absent.clone()),
                (Ok(_), Ok(ranks)) => {
                    next += 1;
                    ranks.get(next - 1).copied().ok_or_else(|| Absent::failed("a series has no rank"))
                }
            };
            let (chance, expected) = match rank {
                Ok(rank) => (Ok(rank.chance), Ok(rank.expected_rank)),
                Err(absent) => (Err(absent.clone()), Err(absent)),
            };
            let figures = Figures::default().number("chance", chance, Meaning::Chance).number(
                "expected_rank",
                expected,
                Meaning::Rank,
            );
            rows.push((subject.series.to_string(), figures));
        }
        Some(rows)
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let period = terms::period_words(subject.plan, When::This);
        format!(
            "for each series the probability that its level of {period} is the {}, and its expected rank",
            self.first()
        )
    }

    fn symbols(&self, subject: &Subject<'_>) -> String {
        let sign = if self.highest { ">" } else { "<" };
        format!("P(θ_i {sign} all θ_j | {})", subject.known())
    }

    fn gives(&self) -> Vec<&'static str> {
        Vec::new()
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        vec![("first", terms::quoted(self.first()))]
    }
}
