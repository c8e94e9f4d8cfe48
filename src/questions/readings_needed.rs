//! # readings needed
//! "How many samples shall we take next year?" Either for a level interval of a wanted half width
//! (`half_width`), or so that the rule of another question gives a wanted verdict with a wanted
//! probability (`rule_of`, `verdict`, `assurance`). The answer is the smallest such number, and a table for the
//! numbers of `try`: the half width and the chance of each verdict, "not decided" among them.
//!
//! With one piece and known σ: the half width is z √v1, v1 = 1/(1/v0 + n/σ²), and the chance that the rule
//! "chance above L at most p" will be met is Φ((L − z_{1−p} √v1 − m0)/√(v0 − v1)), (m0, v0) of the next
//! level. Else the expectation over what may come (x̄ and SS from every node). More readings do not always
//! raise an assurance: numbers up to `up_to` are searched (one piece: every number; else every one up to
//! 30, beyond by tenths, and between the last that fails and the first that serves). However many readings
//! are taken, an assurance has a limit, the chance that the next level itself lies on the right side; where
//! that is less than wanted the answer is null and says so. A bias common to all readings leaves a half width that no
//! number of them lowers; where that is wider than wanted the answer is null too.
//!
//! Assumes that the next period's level comes from the model of periods, and its readings from the same within
//! sd. On the log scale a half width is a factor above 1.
//!
//! Source: O'Hagan & Stevens 2001, Medical Decision Making 21; Gelman et al., Bayesian Data Analysis, 3rd ed., §2.5.
//!
//! A worked number: next level N(m0, 2²), σ = 1.5, half width 0.5 at 95 %: n = 1.5² ((1.959964/0.5)² − 1/4) =
//! 34.01, so 35 readings.

use super::figures::{Figures, Item, Meaning};
use super::preposterior::Outlook;
use super::{ALL, Question, QuestionKind, Subject, terms};
use crate::diagnostics::{Fault, Faults};
use crate::math::fm;
use crate::plan::{Plan, QuestionPlan, Rule};
use crate::posterior::Basis;
use crate::quantity::{Absent, Scale};
use crate::spec::keys::{Key, Takes, nearest, one_of};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::spec::table::Kind;
use crate::working::Step;

const KEYS: &[Key] = &[
    Key::optional("half_width", Takes::Positive, "the wanted half width (log scale: a factor above 1)"),
    terms::PROBABILITY,
    Key::optional("rule_of", Takes::Text, "the id of a question with a rule"),
    Key::optional("verdict", Takes::Text, "the wanted verdict of that rule, in its words"),
    Key::optional("assurance", Takes::Probability, "its wanted probability"),
    Key::optional("try", Takes::Other("whole numbers such as [4, 6, 12, 24]"), "the numbers of the table"),
    Key::optional("up_to", Takes::Count, "the largest number searched; default 1000"),
];

pub const KIND: QuestionKind =
    QuestionKind { ask: "readings needed", page: include_str!("readings_needed.rs"), keys: KEYS, read };

const MOST: u64 = 100_000;

#[derive(Debug)]
enum Aim {
    /// On the model's scale.
    HalfWidth(f64),
    Verdict {
        of: String,
        question: Box<dyn Question>,
        rule: Rule,
        verdict: usize,
        assurance: f64,
    },
}

#[derive(Debug)]
struct ReadingsNeeded {
    aim: Aim,
    probability: f64,
    tried: Vec<u64>,
    up_to: u64,
    scale: Scale,
}

fn read(asked: &QuestionPlan, plan: &Plan, faults: &mut Faults) -> Option<Box<dyn Question>> {
    let mut reader = Reader::new(&asked.table, KEYS, faults);
    let probability = terms::read_probability(&mut reader);
    let tried = read_tried(&mut reader);
    let up_to = reader.count("up_to").unwrap_or(1000);
    if up_to > MOST {
        let fault = Fault::wrong("out-of-range", format!("`up_to` is {up_to}; at most {MOST} are searched"))
            .expected(format!("a whole number from 1 to {MOST}"));
        reader.fault_at("up_to", fault);
    }
    let aim = match (reader.has("half_width"), reader.has("rule_of")) {
        (true, true) => {
            let fault = Fault::wrong(
                "either-or",
                "`rule_of` stands beside `half_width`, and the readings serve one aim",
            )
            .expected("`half_width`, or `rule_of` with `verdict` and `assurance`")
            .repair("ask two questions");
            reader.fault_at("rule_of", fault);
            None
        }
        (false, false) => {
            let fault = Fault::wrong(
                "missing-key",
                format!("{} does not say what the readings are to reach", reader.table.name),
            )
            .expected("`half_width`, or `rule_of` with `verdict` and `assurance`")
            .repair("add a line such as half_width = 0.5");
            reader.fault_at("ask", fault);
            None
        }
        (true, false) => read_half_width(&mut reader, plan.quantity.scale),
        (false, true) => read_verdict(&mut reader, asked, plan),
    };
    if !reader.has("rule_of") {
        for key in ["verdict", "assurance"] {
            if reader.has(key) {
                let fault = Fault::wrong("key-out-of-place", format!("`{key}` belongs to `rule_of`"))
                    .repair("add rule_of = \"the id of a question with a rule\"");
                reader.fault_at(key, fault);
            }
        }
    }
    reader.finish_beside(&[language::QUESTION]);
    let tried = tried?;
    Some(Box::new(ReadingsNeeded { aim: aim?, probability, tried, up_to, scale: plan.quantity.scale }))
}

fn read_half_width(reader: &mut Reader<'_>, scale: Scale) -> Option<Aim> {
    let width = reader.positive("half_width")?;
    match scale {
        Scale::Linear => Some(Aim::HalfWidth(width)),
        Scale::Log if width > 1.0 => Some(Aim::HalfWidth(fm::ln(width))),
        Scale::Log => {
            let fault = Fault::wrong(
                "out-of-range",
                format!("on the log scale `half_width` is a factor, not {width}"),
            )
            .expected("a number above 1, such as 1.1")
            .repair("write half_width = 1.1 for an interval from level / 1.1 to level · 1.1");
            reader.fault_at("half_width", fault);
            None
        }
    }
}

fn read_tried(reader: &mut Reader<'_>) -> Option<Vec<u64>> {
    let Some(value) = reader.value("try") else { return Some(Vec::new()) };
    let Kind::List(items) = &value.kind else { return reader.refuse("try") };
    let mut tried = Vec::with_capacity(items.len());
    for item in items {
        match item.kind {
            Kind::Number { whole: Some(whole), .. } if (1..=MOST as i64).contains(&whole) => {
                tried.push(whole as u64)
            }
            _ => return reader.refuse("try"),
        }
    }
    tried.sort_unstable();
    tried.dedup();
    Some(tried)
}

fn read_verdict(reader: &mut Reader<'_>, asked: &QuestionPlan, plan: &Plan) -> Option<Aim> {
    let of = reader.text("rule_of")?;
    for key in ["verdict", "assurance"] {
        if !reader.has(key) {
            let fault = Fault::wrong("missing-key", format!("`rule_of` needs `{key}` beside it"))
                .expected("`verdict` and `assurance` beside `rule_of`")
                .repair(if key == "verdict" {
                    "add verdict = \"…\", in the rule's words"
                } else {
                    "add assurance = 0.80"
                });
            reader.fault_at("rule_of", fault);
        }
    }
    let with_rule = || plan.questions.iter().filter(|other| other.rule.is_some() && other.id != asked.id);
    let Some(other) = with_rule().find(|other| other.id == of) else {
        let names: Vec<&str> = with_rule().map(|other| other.id.as_str()).collect();
        let fault =
            Fault::wrong("unknown-question-id", format!("\"{of}\" is not a question with a rule")).expected(
                if names.is_empty() { "a question with [question.rule]".to_string() } else { one_of(&names) },
            );
        let fault = match nearest(&of, names) {
            Some(meant) => fault.repair(format!("write rule_of = \"{meant}\"")),
            None => fault.repair("name a question that has a rule"),
        };
        reader.fault_at("rule_of", fault);
        return None;
    };
    let rule = other.rule.clone()?;
    let wanted = reader.text("verdict")?;
    let assurance = reader.probability("assurance").map(|assurance| assurance.get());
    let Some(verdict) = rule.verdicts.iter().position(|verdict| verdict.say == wanted) else {
        let says: Vec<&str> = rule.verdicts.iter().map(|verdict| verdict.say.as_str()).collect();
        let fault =
            Fault::wrong("unknown-verdict", format!("the rule of \"{of}\" has no verdict \"{wanted}\""))
                .expected(one_of(&says));
        let fault = match nearest(&wanted, says) {
            Some(meant) => fault.repair(format!("write verdict = \"{meant}\"")),
            None => fault.repair("write one of its verdicts, in its words"),
        };
        reader.fault_at("verdict", fault);
        return None;
    };
    // What is wrong with the other question is said where that one is read.
    let mut elsewhere = Faults::default();
    let kind = ALL.iter().find(|kind| kind.ask == other.ask && kind.ask != KIND.ask)?;
    let question = (kind.read)(other, plan, &mut elsewhere)?;
    Some(Aim::Verdict { of, question, rule, verdict, assurance: assurance? })
}

impl ReadingsNeeded {
    fn outlook(&self, subject: &Subject<'_>) -> Result<Outlook, Absent> {
        match &self.aim {
            Aim::HalfWidth(_) => Outlook::of(subject, None),
            Aim::Verdict { question, .. } => Outlook::of(subject, Some(question.as_ref())),
        }
    }

    /// Whether so many readings are enough.
    fn enough(&self, outlook: &Outlook, subject: &Subject<'_>, n: u64) -> Result<bool, Absent> {
        match &self.aim {
            Aim::HalfWidth(wanted) => Ok(outlook.half_width(n, self.probability)? <= *wanted),
            Aim::Verdict { rule, verdict, assurance, .. } => {
                let chances = outlook.verdicts(n, rule, subject)?;
                Ok(chances[*verdict] >= *assurance)
            }
        }
    }

    fn needed(&self, outlook: &Outlook, subject: &Subject<'_>) -> Result<u64, Absent> {
        if let Aim::Verdict { rule, verdict, assurance, .. } = &self.aim {
            let limit = outlook.verdicts_at_last(rule, subject)?[*verdict];
            if limit < *assurance && !self.enough(outlook, subject, 1)? {
                // A verdict such as "not decided" can be likelier with few readings than with many.
                let few = (2..=30.min(self.up_to)).find_map(|n| match self.enough(outlook, subject, n) {
                    Ok(true) => Some(Ok(n)),
                    Ok(false) => None,
                    Err(absent) => Some(Err(absent)),
                });
                return few.unwrap_or_else(|| {
                    Err(Absent::because(format!(
                        "no number of readings gives this assurance: even with the level known it is {limit:.3}"
                    )))
                });
            }
        }
        if let Aim::HalfWidth(wanted) = self.aim {
            let limit = outlook.half_width_at_last(self.probability)?;
            if limit >= wanted {
                return Err(Absent::because(format!(
                    "no number of readings gives this half width: the bias common to all of them leaves {}",
                    self.width_text(limit, subject)
                )));
            }
        }
        let mut last = 0;
        let mut n = 1;
        loop {
            if self.enough(outlook, subject, n)? {
                break;
            }
            if n == self.up_to {
                return Err(Absent::because(format!(
                    "{} readings are not enough, and more were not searched",
                    self.up_to
                )));
            }
            last = n;
            let step = if outlook.is_one_piece() || n < 30 { 1 } else { n / 10 };
            n = (n + step).min(self.up_to);
        }
        // The first that serves lies after the last that does not.
        while n - last > 1 {
            let middle = last + (n - last) / 2;
            if self.enough(outlook, subject, middle)? {
                n = middle;
            } else {
                last = middle;
            }
        }
        Ok(n)
    }

    fn width_text(&self, width: f64, subject: &Subject<'_>) -> String {
        match self.scale {
            Scale::Linear => format!("{width:.3}{}", subject.unit()),
            Scale::Log => format!("a factor {:.4}", fm::exp(width)),
        }
    }

    /// `widths` looks at the level itself, `outlook` at what the rule is on.
    fn row(&self, outlook: &Outlook, widths: &Outlook, subject: &Subject<'_>, n: u64) -> Figures {
        let (in_unit, meaning) = match self.scale {
            Scale::Linear => ((|width| width) as fn(f64) -> f64, Meaning::Spread),
            Scale::Log => (fm::exp as fn(f64) -> f64, Meaning::Ratio),
        };
        let row = Figures::default().with("readings", Item::Whole(Some(n))).number(
            "half_width",
            widths.half_width(n, self.probability).map(in_unit),
            meaning,
        );
        match &self.aim {
            Aim::HalfWidth(_) => row,
            Aim::Verdict { rule, .. } => match outlook.verdicts(n, rule, subject) {
                Ok(chances) => row.with("chances", Item::Numbers(chances, Meaning::Chance)),
                Err(absent) => row.number("chances", Err(absent), Meaning::Chance),
            },
        }
    }
}

impl Question for ReadingsNeeded {
    fn answer(&self, subject: &Subject<'_>) -> Figures {
        if subject.basis != Basis::Both {
            return Figures::default();
        }
        let outlook = match self.outlook(subject) {
            Ok(outlook) => outlook,
            Err(absent) => return Figures::default().number("readings_needed", Err(absent), Meaning::Count),
        };
        let figures = Figures::default();
        let mut figures = match self.needed(&outlook, subject) {
            Ok(needed) => figures.with("readings_needed", Item::Whole(Some(needed))),
            Err(absent) => figures.number("readings_needed", Err(absent), Meaning::Count),
        };
        if let Aim::Verdict { rule, verdict, .. } = &self.aim {
            let says = rule.verdicts.iter().map(|verdict| verdict.say.clone()).collect();
            let limit = outlook.verdicts_at_last(rule, subject).map(|chances| chances[*verdict]);
            figures =
                figures.number("assurance_limit", limit, Meaning::Chance).with("verdicts", Item::Texts(says));
        }
        let widths = Outlook::of(subject, None).unwrap_or_else(|_| outlook.clone());
        let rows = self.tried.iter().map(|n| self.row(&outlook, &widths, subject, *n)).collect();
        figures.with("table", Item::Rows(rows))
    }

    fn words(&self, subject: &Subject<'_>) -> String {
        let period = terms::period_words(subject.plan, crate::posterior::When::Next);
        match &self.aim {
            Aim::HalfWidth(width) => {
                let width = match self.scale {
                    Scale::Linear => format!("{width}{}", subject.unit()),
                    Scale::Log => format!("a factor {}", fm::exp(*width)),
                };
                let interval = terms::Interval::Central.words(self.probability);
                format!(
                    "number of readings of {period} for a {interval} of its level with half width {width}"
                )
            }
            Aim::Verdict { of, rule, verdict, assurance, .. } => format!(
                "number of readings of {period} for the verdict \"{}\" of the question \"{of}\" with {} assurance",
                rule.verdicts[*verdict].say,
                terms::percent(*assurance)
            ),
        }
    }

    fn symbols(&self, _: &Subject<'_>) -> String {
        match &self.aim {
            Aim::HalfWidth(_) => "smallest n with E[z √v1(n)] ≤ w".to_string(),
            Aim::Verdict { assurance, .. } => format!("smallest n with P(verdict | n) ≥ {assurance}"),
        }
    }

    fn working(&self, subject: &Subject<'_>) -> Vec<Step> {
        let Ok(outlook) = self.outlook(subject) else { return Vec::new() };
        let Ok(needed) = self.needed(&outlook, subject) else { return Vec::new() };
        let at = |n: u64| match &self.aim {
            Aim::HalfWidth(_) => outlook.half_width(n, self.probability).ok(),
            Aim::Verdict { rule, verdict, .. } => {
                outlook.verdicts(n, rule, subject).ok().map(|chances| chances[*verdict])
            }
        };
        let (label, formula) = match &self.aim {
            Aim::HalfWidth(_) => ("expected half width", "E[z √v1], v1 = 1/(1/v0 + n/σ²)"),
            Aim::Verdict { .. } => ("assurance", "P(verdict | n)"),
        };
        [needed.saturating_sub(1), needed]
            .into_iter()
            .filter(|n| *n > 0)
            .filter_map(|n| Some(Step::new(label, formula, &[("n", n as f64)], at(n)?)))
            .collect()
    }

    fn gives(&self) -> Vec<&'static str> {
        Vec::new()
    }

    fn settings(&self) -> Vec<(&'static str, String)> {
        let mut settings = match &self.aim {
            Aim::HalfWidth(width) => vec![("half_width", format!("{}", terms::printed(*width, self.scale)))],
            Aim::Verdict { of, rule, verdict, assurance, .. } => vec![
                ("rule_of", terms::quoted(of)),
                ("verdict", terms::quoted(&rule.verdicts[*verdict].say)),
                ("assurance", format!("{assurance}")),
            ],
        };
        let tried: Vec<String> = self.tried.iter().map(u64::to_string).collect();
        settings.push(("probability", format!("{}", self.probability)));
        settings.push(("try", format!("[{}]", tried.join(", "))));
        settings.push(("up_to", self.up_to.to_string()));
        settings
    }

    fn in_sensitivity(&self) -> bool {
        false
    }
}
