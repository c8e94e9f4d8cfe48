//! The figures of one series as text: how many digits, which unit, what a verdict looks like.

use super::table::{self, plain};
use crate::math::fm;
use crate::plan::{Bounds, Condition, Plan, Rule, Threshold};
use crate::posterior::Law;
use crate::quantity::{Absent, Scale};
use crate::questions::figures::{Figures, Item, Meaning};
use crate::questions::rule::{self, Given};
use crate::report::text::{self, NO_BREAK_SPACE, Places};
use minijinja::Value;
use serde::Serialize;
use std::cell::RefCell;
use std::collections::BTreeSet;

/// Stands where there is nothing to print.
pub const NOTHING: &str = "–";

/// How the numbers of one series are printed.
#[derive(Debug)]
pub struct Numbers<'a> {
    pub plan: &'a Plan,
    /// No-break space and unit, or nothing.
    pub unit: String,
    pub scale: Scale,
    /// The limits as they hold for this series.
    bounds: Vec<f64>,
    /// At least the decimals of the limits.
    least: Places,
    /// The place of numbers that bring no uncertainty of their own.
    usual: Option<Places>,
    /// What had to be remarked while printing, each once.
    remarks: RefCell<BTreeSet<&'static str>>,
}

/// A verdict as printed.
#[derive(Debug, Clone, Serialize)]
pub struct VerdictView {
    /// Sign and words in bold.
    pub shown: Value,
    pub words: String,
    pub why: Option<String>,
    /// The program ends with status 1 because of it.
    pub fail: bool,
}

impl<'a> Numbers<'a> {
    /// `usual_sd` is an uncertainty of the series' level, in the quantity's unit.
    pub fn of_series(plan: &'a Plan, series: &str, usual_sd: Option<f64>) -> Numbers<'a> {
        let mut bounds = Vec::new();
        for limit in &plan.limits {
            match plan.bounds(&limit.name, series) {
                Some(Bounds::Value(value)) => bounds.push(value),
                Some(Bounds::Range(lower, upper)) => bounds.extend([lower, upper]),
                None => {}
            }
        }
        let decimals = plan.limits.iter().map(|limit| limit.decimals).max().unwrap_or(0);
        Numbers {
            plan,
            unit: unit(plan),
            scale: plan.quantity.scale,
            bounds,
            least: Places::decimals(decimals.min(12) as i32),
            usual: usual_sd.and_then(Places::of_uncertainty),
            remarks: RefCell::default(),
        }
    }

    /// Remarks on digits that were added so that a comparison stays visible.
    pub fn remarks(&self) -> Vec<&'static str> {
        self.remarks.borrow().iter().copied().collect()
    }

    fn note(&self, remark: Option<&'static str>) {
        self.remarks.borrow_mut().extend(remark);
    }

    /// The place for numbers with this uncertainty.
    pub fn places(&self, uncertainty: Option<f64>, number: f64) -> Places {
        let own = uncertainty.and_then(Places::of_uncertainty);
        let places = own.or(self.usual).or_else(|| Places::of_significant(number, 4));
        let places = places.unwrap_or(Places::decimals(0));
        // Without any limit there is nothing that asks for decimals.
        if self.bounds.is_empty() { places } else { places.at_least(self.least) }
    }

    /// A level, reading or bound, without its unit; digits are added where a limit is near.
    pub fn value(&self, number: f64, uncertainty: Option<f64>) -> String {
        let places = self.places(uncertainty, number);
        let nearest = self
            .bounds
            .iter()
            .copied()
            .filter(|bound| bound.is_finite())
            .min_by(|a, b| (a - number).abs().total_cmp(&(b - number).abs()));
        match nearest {
            Some(bound) => {
                let compared = places.against(number, bound);
                self.note(compared.remark());
                compared.text
            }
            None => places.value(number),
        }
    }

    /// A number by its meaning, with its unit.
    pub fn number(&self, number: f64, meaning: Meaning, uncertainty: Option<f64>) -> String {
        match meaning {
            Meaning::Value => format!("{}{}", self.value(number, uncertainty), self.unit),
            Meaning::Spread => {
                let places = uncertainty.and_then(Places::of_uncertainty);
                let text = match places {
                    Some(places) => places.value(number),
                    None => text::significant(number, 2),
                };
                format!("{text}{}", self.unit)
            }
            Meaning::Ratio | Meaning::Factor => text::significant(number, 4),
            Meaning::Chance => text::probability(number),
            Meaning::Share => text::percent(number),
            Meaning::Count if number >= 0.0 && number == fm::round(number) && number < 1e15 => {
                text::count(number as u64)
            }
            Meaning::Count | Meaning::Rank => text::significant(number, 3),
        }
    }

    /// A chance beside the thresholds of its rule.
    pub fn chance(&self, chance: f64, rule: Option<&Rule>) -> String {
        let thresholds = rule.into_iter().flat_map(|rule| &rule.verdicts).flat_map(|v| &v.conditions);
        let nearest = thresholds
            .filter_map(|(condition, threshold)| match (condition, threshold) {
                (Condition::ChanceAtLeast | Condition::ChanceAtMost, Threshold::Number(number)) => {
                    Some(*number)
                }
                _ => None,
            })
            .min_by(|a, b| (a - chance).abs().total_cmp(&(b - chance).abs()));
        match nearest {
            Some(threshold) => {
                let compared = text::probability_against(chance, threshold);
                self.note(compared.remark());
                compared.text
            }
            None => text::probability(chance),
        }
    }

    /// All figures of an answer in one line, e.g. "43.9 (42.7 to 45.1) mg/L".
    pub fn line(&self, figures: &Figures, rule: Option<&Rule>) -> String {
        self.said(figures, rule, false)
    }

    /// The same with chances in words.
    pub fn long_line(&self, figures: &Figures, rule: Option<&Rule>) -> String {
        self.said(figures, rule, true)
    }

    fn said(&self, figures: &Figures, rule: Option<&Rule>, in_words: bool) -> String {
        let mut parts: Vec<String> = Vec::new();
        let around = Around::of(figures);
        if around.middle.is_some() || around.lower.is_some() || around.upper.is_some() {
            parts.push(self.around(&around));
        }
        for (name, item) in &figures.0 {
            match (*name, item) {
                ("estimate" | "lower" | "upper", _) => {}
                ("chance", Item::Number(Ok(chance), _)) => {
                    let mut said = format!("probability {}", self.chance(*chance, rule));
                    if in_words {
                        said.push_str(&format!(" ({})", text::chance_in_words(*chance)));
                    }
                    parts.push(said);
                }
                ("count", Item::Whole(Some(1))) => parts.push("1 reading".to_string()),
                ("count", Item::Whole(Some(count))) => {
                    parts.push(format!("{} readings", text::count(*count)))
                }
                ("chances", Item::Numbers(chances, _)) => parts.push(named_chances(chances, figures)),
                (_, Item::Number(Ok(number), meaning)) => {
                    let said = self.number(*number, *meaning, around.uncertainty());
                    parts.push(format!("{} {said}", name.replace('_', " ")));
                }
                (_, Item::Whole(Some(count))) => {
                    parts.push(format!("{} {}", name.replace('_', " "), text::count(*count)));
                }
                (_, Item::Text(said)) => parts.push(said.clone()),
                _ => {}
            }
        }
        if parts.is_empty() { NOTHING.to_string() } else { parts.join("; ") }
    }

    /// An estimate and its ends.
    fn around(&self, around: &Around) -> String {
        let uncertainty = around.uncertainty();
        let one = |number: f64| match around.meaning {
            Meaning::Value => self.value(number, uncertainty),
            Meaning::Spread => match uncertainty.and_then(Places::of_uncertainty) {
                Some(places) => places.value(number),
                None => text::significant(number, 2),
            },
            meaning => self.number(number, meaning, uncertainty),
        };
        let unit = match around.meaning {
            Meaning::Value | Meaning::Spread => self.unit.as_str(),
            _ => "",
        };
        match (around.middle, around.lower, around.upper) {
            (Some(middle), Some(lower), Some(upper)) => {
                format!("{} ({} to {}){unit}", one(middle), one(lower), one(upper))
            }
            (Some(middle), Some(lower), None) => format!("{}, at least {}{unit}", one(middle), one(lower)),
            (Some(middle), None, Some(upper)) => format!("{}, at most {}{unit}", one(middle), one(upper)),
            (Some(middle), None, None) => format!("{}{unit}", one(middle)),
            (None, Some(lower), Some(upper)) => format!("{} to {}{unit}", one(lower), one(upper)),
            (None, Some(lower), None) => format!("at least {}{unit}", one(lower)),
            (None, None, Some(upper)) => format!("at most {}{unit}", one(upper)),
            (None, None, None) => NOTHING.to_string(),
        }
    }

    /// A law in the quantity's unit: mean (log scale: median), sd and central 95 % interval.
    pub fn law(&self, law: &Law, of_spread: bool) -> Result<String, Absent> {
        let (lower, upper) = law.central(0.95)?;
        let (middle, uncertainty) = match (law.mean(), law.sd()) {
            (Ok(mean), Ok(sd)) => (Some((mean, sd)), sd),
            _ => (None, 0.25 * (upper - lower)),
        };
        match (self.scale, of_spread) {
            (Scale::Linear, _) => {
                let places = self.places_of(uncertainty, lower, of_spread);
                let ends = format!("{} to {}", places.value(lower), places.value(upper));
                Ok(match middle {
                    Some((mean, sd)) => {
                        format!("{}; sd {}; {ends}", places.value(mean), places.value(sd))
                    }
                    None => format!("median {}; {ends}", places.value(law.median()?)),
                })
            }
            (Scale::Log, _) => {
                let [middle, lower, upper] = [law.median()?, lower, upper].map(fm::exp);
                let places = self.places_of(0.25 * (upper - lower), middle, of_spread);
                let said = places.value(middle);
                let name = if of_spread { "factor" } else { "median" };
                Ok(format!("{name} {said}; {} to {}", places.value(lower), places.value(upper)))
            }
        }
    }

    /// Estimate (mean; log scale: median) and central 95 % interval, without the unit.
    pub fn estimate_and_ends(&self, law: &Law) -> Result<String, Absent> {
        let (lower, upper) = law.central(0.95)?;
        let middle = match (self.scale, law.mean()) {
            (Scale::Linear, Ok(mean)) => mean,
            _ => law.median()?,
        };
        let [middle, lower, upper] = [middle, lower, upper].map(|value| match self.scale {
            Scale::Linear => value,
            Scale::Log => fm::exp(value),
        });
        let spread = Some(0.25 * (upper - lower));
        Ok(format!(
            "{} ({} to {})",
            self.value(middle, spread),
            self.value(lower, spread),
            self.value(upper, spread)
        ))
    }

    fn places_of(&self, uncertainty: f64, number: f64, of_spread: bool) -> Places {
        match Places::of_uncertainty(uncertainty).filter(|_| of_spread) {
            Some(places) => places,
            None => self.places(Some(uncertainty), number),
        }
    }
}

/// An estimate with its ends, as an answer holds them.
#[derive(Debug, Clone, Copy)]
pub struct Around {
    pub middle: Option<f64>,
    pub lower: Option<f64>,
    pub upper: Option<f64>,
    pub meaning: Meaning,
}

impl Around {
    pub fn of(figures: &Figures) -> Around {
        let meaning = ["estimate", "lower", "upper"].iter().find_map(|name| match figures.get(name) {
            Some(Item::Number(_, meaning)) => Some(*meaning),
            _ => None,
        });
        Around {
            middle: figures.value("estimate"),
            lower: figures.value("lower"),
            upper: figures.value("upper"),
            meaning: meaning.unwrap_or(Meaning::Value),
        }
    }

    /// About a standard uncertainty: what decides the digits, nothing else.
    pub fn uncertainty(&self) -> Option<f64> {
        let spread = match (self.middle, self.lower, self.upper) {
            (_, Some(lower), Some(upper)) => 0.25 * (upper - lower),
            (Some(middle), Some(end), None) | (Some(middle), None, Some(end)) => 0.5 * (middle - end).abs(),
            _ => return None,
        };
        (spread > 0.0 && spread.is_finite()).then_some(spread)
    }
}

fn named_chances(chances: &[f64], figures: &Figures) -> String {
    let names = match figures.get("names") {
        Some(Item::Texts(names)) => names.clone(),
        _ => (0..chances.len()).map(|count| count.to_string()).collect(),
    };
    let worth_showing = |chance: &&f64| **chance >= 0.0005;
    let shown: Vec<String> = names
        .iter()
        .zip(chances)
        .filter(|(_, chance)| worth_showing(chance))
        .take(12)
        .map(|(name, chance)| format!("{name}: {}", text::probability(*chance)))
        .collect();
    shown.join(", ")
}

/// No-break space and unit; nothing where the quantity has none.
pub fn unit(plan: &Plan) -> String {
    match plan.quantity.unit.as_str() {
        "1" => String::new(),
        unit => format!("{NO_BREAK_SPACE}{unit}"),
    }
}

/// Why figures do not exist: every reason once, in order.
pub fn reasons(figures: &Figures) -> Vec<String> {
    let mut reasons: Vec<String> = Vec::new();
    for (_, item) in &figures.0 {
        if let Item::Number(Err(absent), _) = item
            && !reasons.contains(&absent.reason)
        {
            reasons.push(absent.reason.clone());
        }
    }
    reasons
}

/// The sign before a verdict's words: ✗ fails the review; ○ leaves the matter open; ✓ only where the
/// rule says which verdict would have failed. A rule that names none has verdicts without a sign.
pub fn verdict(given: &Given, rule: Option<&Rule>) -> VerdictView {
    let Some(say) = &given.say else {
        return VerdictView {
            shown: table::bold("○ no verdict"),
            words: "no verdict".to_string(),
            why: given.why.clone(),
            fail: false,
        };
    };
    let verdicts = rule.map_or(&[][..], |rule| &rule.verdicts);
    let last = verdicts.last().is_some_and(|last| last.say == *say);
    let open = given.why.is_some() || (last && verdicts.len() > 2);
    let sign = match (given.fail, open, verdicts.iter().any(|verdict| verdict.fail)) {
        (true, ..) => "✗ ",
        (_, true, _) => "○ ",
        (_, _, true) => "✓ ",
        _ => "",
    };
    VerdictView {
        shown: table::bold(&format!("{sign}{say}")),
        words: say.clone(),
        why: given.why.clone(),
        fail: given.fail,
    }
}

/// A verdict as a cell.
pub fn verdict_cell(given: Option<&Given>, rule: Option<&Rule>) -> Value {
    given.map_or_else(|| plain(NOTHING), |given| verdict(given, rule).shown)
}

/// A rule in words: “above” if the probability is at least 0.95; … otherwise “not decided”.
pub fn rule_words(rule: &Rule, plan: &Plan, series: Option<&str>) -> String {
    let unit = unit(plan);
    let mut parts = Vec::new();
    for verdict in &rule.verdicts {
        if verdict.conditions.is_empty() {
            parts.push(format!("otherwise “{}”", verdict.say));
            continue;
        }
        let conditions: Vec<String> = verdict
            .conditions
            .iter()
            .map(|(condition, threshold)| {
                let value = threshold_words(*condition, threshold, plan, series, &unit);
                format!("{} {value}", condition_words(*condition))
            })
            .collect();
        parts.push(format!("“{}” if {}", verdict.say, conditions.join(" and ")));
    }
    parts.join("; ")
}

/// One condition in words: "the probability is at most 0.05".
pub fn one_condition(condition: Condition, threshold: &Threshold, plan: &Plan) -> String {
    let value = threshold_words(condition, threshold, plan, None, &unit(plan));
    format!("{} {value}", condition_words(condition))
}

fn threshold_words(
    condition: Condition,
    threshold: &Threshold,
    plan: &Plan,
    series: Option<&str>,
    unit: &str,
) -> String {
    match threshold {
        Threshold::Number(number) => match rule::figure_of(condition) {
            "chance" | "count" => text::record(*number),
            _ => format!("{}{unit}", text::record(*number)),
        },
        Threshold::Limit(name) => {
            let bounds = series.and_then(|series| plan.bounds(name, series));
            match bounds.or_else(|| plan.limit(name).map(|limit| limit.bounds)) {
                Some(bounds) => format!("the limit “{name}” ({})", bounds_words(bounds, plan, name)),
                None => format!("the limit “{name}”"),
            }
        }
    }
}

/// A limit's bounds with unit, with the decimals of the spec.
pub fn bounds_words(bounds: Bounds, plan: &Plan, name: &str) -> String {
    let decimals = plan.limit(name).map_or(0, |limit| limit.decimals).min(12) as i32;
    let unit = unit(plan);
    let one = |value: f64| {
        let written = Places::of_written(&text::record(value));
        written.at_least(Places::decimals(decimals)).value(value)
    };
    match bounds {
        Bounds::Value(value) => format!("{}{unit}", one(value)),
        Bounds::Range(lower, upper) => format!("{} to {}{unit}", one(lower), one(upper)),
    }
}

fn condition_words(condition: Condition) -> &'static str {
    match condition {
        Condition::ChanceAtLeast => "the probability is at least",
        Condition::ChanceAtMost => "the probability is at most",
        Condition::CountAtLeast => "the number is at least",
        Condition::CountAtMost => "the number is at most",
        Condition::EstimateAbove => "the estimate lies above",
        Condition::EstimateBelow => "the estimate lies below",
        Condition::LowerAbove => "the lower end lies above",
        Condition::UpperBelow => "the upper end lies below",
    }
}
