//! Beyond what a question asks: `above`, `below`, `between` or `outside`, against numbers or a limit.
//! Ends of an interval belong to the inside.

use super::Subject;
use super::terms::{number_text, unit};
use crate::diagnostics::{Caution, Fault};
use crate::math::{fm, normal};
use crate::plan::{AppliesTo, Bounds, Limit, Plan};
use crate::posterior::Law;
use crate::quantity::{Absent, Beyond, Scale};
use crate::spec::keys::{Key, Takes, nearest, one_of};
use crate::spec::reader::Reader;
use crate::spec::table::{Kind, Value};

const PAIR: Takes =
    Takes::Other("two rising numbers such as [40, 60], or the name of a two-sided limit in quotes");

pub const ABOVE: Key = Key::optional("above", Takes::NumberOrLimit, "above this number or limit");
pub const BELOW: Key = Key::optional("below", Takes::NumberOrLimit, "below this number or limit");
pub const BETWEEN: Key = Key::optional("between", PAIR, "between these two, ends included");
pub const OUTSIDE: Key = Key::optional("outside", PAIR, "outside these two, ends excluded");

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Side {
    Above,
    Below,
    Between,
    Outside,
}

pub const ANY_SIDE: &[Side] = &[Side::Above, Side::Below, Side::Between, Side::Outside];

impl Side {
    pub fn key(self) -> &'static str {
        match self {
            Side::Above => "above",
            Side::Below => "below",
            Side::Between => "between",
            Side::Outside => "outside",
        }
    }

    fn two_sided(self) -> bool {
        matches!(self, Side::Between | Side::Outside)
    }
}

#[derive(Debug, Clone, PartialEq)]
enum Against {
    Limit(String),
    /// With the digits as written.
    One(f64, String),
    Two((f64, String), (f64, String)),
}

/// What was asked, limits still by name: they may differ from series to series.
#[derive(Debug, Clone, PartialEq)]
pub struct Asked {
    pub side: Side,
    against: Against,
}

/// What a question is about, for the caution where a limit is meant for something else.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum About {
    Reading,
    Level,
    Percentile,
}

/// Reads the one of the keys of `sides` that is there. None of them is a fault where `required`, two are always.
pub fn read(reader: &mut Reader<'_>, plan: &Plan, sides: &[Side], required: bool) -> Option<Asked> {
    let given: Vec<Side> = sides.iter().copied().filter(|side| reader.has(side.key())).collect();
    let keys: Vec<&str> = sides.iter().map(|side| side.key()).collect();
    match given.as_slice() {
        [] => {
            if required {
                let fault =
                    Fault::wrong("missing-key", format!("{} does not say beyond what", reader.table.name))
                        .expected(format!("exactly one of the keys {}", one_of(&keys).replace('"', "`")))
                        .repair("add a line such as above = 50");
                reader.fault_at("ask", fault);
            }
            None
        }
        [side] => {
            let against = against(reader, plan, *side)?;
            Some(Asked { side: *side, against })
        }
        [first, second, ..] => {
            let fault = Fault::wrong(
                "either-or",
                format!(
                    "`{}` stands beside `{}`, and a question has one direction",
                    second.key(),
                    first.key()
                ),
            )
            .expected(format!("exactly one of the keys {}", one_of(&keys).replace('"', "`")))
            .repair("leave one of them out, or ask two questions");
            reader.fault_at(second.key(), fault);
            None
        }
    }
}

fn against(reader: &mut Reader<'_>, plan: &Plan, side: Side) -> Option<Against> {
    let key = side.key();
    let value = reader.value(key)?;
    let found = match &value.kind {
        Kind::Text(name) => Against::Limit(limit_named(reader, plan, side, name)?),
        Kind::Number { value, written, .. } if value.is_finite() && !side.two_sided() => {
            Against::One(*value, written.clone())
        }
        Kind::List(items) if side.two_sided() => match items.as_slice() {
            [lower, upper] => match (number(lower), number(upper)) {
                (Some(lower), Some(upper)) if lower.0 < upper.0 => Against::Two(lower, upper),
                (Some(lower), Some(upper)) => {
                    let fault = Fault::wrong(
                        "out-of-order",
                        format!("`{key}` goes from {} to {}, which is not upwards", lower.1, upper.1),
                    )
                    .expected("the lower number first")
                    .repair(format!("write {key} = [{}, {}]", upper.1, lower.1));
                    reader.fault_at(key, fault);
                    return None;
                }
                _ => return reader.refuse(key),
            },
            _ => return reader.refuse(key),
        },
        _ => return reader.refuse(key),
    };
    if plan.quantity.scale == Scale::Log {
        let smallest = match &found {
            Against::One(value, _) => *value,
            Against::Two((lower, _), _) => *lower,
            Against::Limit(name) => smallest_of(plan, name),
        };
        if smallest <= 0.0 {
            let fault = Fault::wrong(
                "out-of-range",
                format!("on the log scale nothing lies at or below 0, and `{key}` is {smallest}"),
            )
            .expected("a number above 0")
            .repair("ask against a number above 0, or set scale = \"linear\" in [quantity]");
            reader.fault_at(key, fault);
            return None;
        }
    }
    Some(found)
}

fn number(value: &Value) -> Option<(f64, String)> {
    match &value.kind {
        Kind::Number { value, written, .. } if value.is_finite() => Some((*value, written.clone())),
        _ => None,
    }
}

/// The smallest bound that a limit has for any series.
fn smallest_of(plan: &Plan, name: &str) -> f64 {
    let general = plan.limit(name).map(|limit| limit.bounds);
    let own = plan.series.values().filter_map(|series| series.limits.get(name).copied());
    own.chain(general)
        .map(|bounds| match bounds {
            Bounds::Value(value) => value,
            Bounds::Range(lower, _) => lower,
        })
        .fold(f64::INFINITY, f64::min)
}

fn limit_named(reader: &mut Reader<'_>, plan: &Plan, side: Side, name: &str) -> Option<String> {
    let key = side.key();
    let Some(limit) = plan.limit(name) else {
        let fault = unknown_limit(plan, key, name);
        reader.fault_at(key, fault);
        return None;
    };
    let fault = match (limit.bounds, side.two_sided()) {
        (Bounds::Value(_), false) | (Bounds::Range(..), true) => return Some(name.to_string()),
        (Bounds::Range(..), false) => Fault::wrong(
            "two-sided-limit",
            format!("the limit \"{name}\" has two sides, and `{key}` takes one"),
        )
        .expected("a number, or the name of a limit with one value")
        .repair(format!("write outside = \"{name}\" (or between), or name a limit with one value")),
        (Bounds::Value(_), true) => Fault::wrong(
            "one-sided-limit",
            format!("the limit \"{name}\" has one value, and `{key}` takes two"),
        )
        .expected("two rising numbers, or the name of a limit with lower and upper")
        .repair(format!("write above = \"{name}\" (or below), or give two numbers")),
    };
    reader.fault_at(key, fault);
    None
}

/// The fault for a limit that the spec does not have.
pub fn unknown_limit(plan: &Plan, key: &str, name: &str) -> Fault {
    let names: Vec<&str> = plan.limits.iter().map(|limit| limit.name.as_str()).collect();
    let fault = Fault::wrong(
        "unknown-limit",
        format!("`{key}` names the limit \"{name}\", which the spec does not have"),
    );
    match nearest(name, names.iter().copied()) {
        Some(meant) => {
            fault.expected(format!("one of {}", names.join(", "))).repair(format!("write \"{meant}\""))
        }
        None if names.is_empty() => {
            fault.repair(format!("add a table [limit.{name}], or write a number without quotes"))
        }
        None => fault
            .expected(format!("one of {}", names.join(", ")))
            .repair("name one of these limits, or write a number without quotes"),
    }
}

impl Asked {
    /// What the question holds a series against, in the quantity's unit.
    pub fn resolve(&self, plan: &Plan, series: &str) -> Result<Beyond, Absent> {
        let bounds = match &self.against {
            Against::One(value, _) => Bounds::Value(*value),
            Against::Two((lower, _), (upper, _)) => Bounds::Range(*lower, *upper),
            Against::Limit(name) => plan.bounds(name, series).ok_or_else(|| {
                Absent::because(format!("the limit \"{name}\" has no value for this series"))
            })?,
        };
        match (self.side, bounds) {
            (Side::Above, Bounds::Value(value)) => Ok(Beyond::Above(value)),
            (Side::Below, Bounds::Value(value)) => Ok(Beyond::Below(value)),
            (Side::Between, Bounds::Range(lower, upper)) => Ok(Beyond::Between(lower, upper)),
            (Side::Outside, Bounds::Range(lower, upper)) => Ok(Beyond::Outside(lower, upper)),
            _ => Err(Absent::because(
                "for this series the limit has one value where two are needed, or two for one",
            )),
        }
    }

    /// The same on the model's scale.
    pub fn on_scale(&self, plan: &Plan, series: &str) -> Result<Beyond, Absent> {
        let beyond = self.resolve(plan, series)?;
        if plan.quantity.scale == Scale::Linear {
            return Ok(beyond);
        }
        let ln = |value: f64| {
            if value > 0.0 {
                Ok(fm::ln(value))
            } else {
                Err(Absent::because("on the log scale nothing lies at or below 0"))
            }
        };
        Ok(match beyond {
            Beyond::Above(value) => Beyond::Above(ln(value)?),
            Beyond::Below(value) => Beyond::Below(ln(value)?),
            Beyond::Between(lower, upper) => Beyond::Between(ln(lower)?, ln(upper)?),
            Beyond::Outside(lower, upper) => Beyond::Outside(ln(lower)?, ln(upper)?),
        })
    }

    /// "above 50.0 mg/L (guideline)".
    pub fn words(&self, subject: &Subject<'_>) -> String {
        let unit = unit(subject.plan);
        let named = match &self.against {
            Against::Limit(name) => format!(" ({name})"),
            _ => String::new(),
        };
        match self.texts(subject) {
            Some((one, None)) => format!("{} {one}{unit}{named}", self.side.key()),
            Some((lower, Some(upper))) => {
                let joined = match self.side {
                    Side::Outside => "to",
                    _ => "and",
                };
                format!("{} {lower} {joined} {upper}{unit}{named}", self.side.key())
            }
            None => format!("{} its limit{named}", self.side.key()),
        }
    }

    /// "θ > 50.0" for the symbol θ.
    pub fn symbols(&self, symbol: &str, subject: &Subject<'_>) -> String {
        match (self.side, self.texts(subject)) {
            (Side::Above, Some((one, None))) => format!("{symbol} > {one}"),
            (Side::Below, Some((one, None))) => format!("{symbol} < {one}"),
            (Side::Between, Some((lower, Some(upper)))) => format!("{lower} ≤ {symbol} ≤ {upper}"),
            (Side::Outside, Some((lower, Some(upper)))) => {
                format!("{symbol} < {lower} or {symbol} > {upper}")
            }
            _ => format!("{symbol} {} L", self.side.key()),
        }
    }

    /// The numbers as they are printed: as written, limits with their decimals at least.
    fn texts(&self, subject: &Subject<'_>) -> Option<(String, Option<String>)> {
        match &self.against {
            Against::One(_, written) => Some((written.clone(), None)),
            Against::Two((_, lower), (_, upper)) => Some((lower.clone(), Some(upper.clone()))),
            Against::Limit(name) => {
                let decimals = subject.plan.limit(name).map_or(0, |limit| limit.decimals);
                match subject.plan.bounds(name, subject.series)? {
                    Bounds::Value(value) => Some((number_text(value, decimals), None)),
                    Bounds::Range(lower, upper) => {
                        Some((number_text(lower, decimals), Some(number_text(upper, decimals))))
                    }
                }
            }
        }
    }

    /// The key and its TOML value.
    pub fn setting(&self) -> (&'static str, String) {
        let value = match &self.against {
            Against::Limit(name) => super::terms::quoted(name),
            Against::One(_, written) => written.clone(),
            Against::Two((_, lower), (_, upper)) => format!("[{lower}, {upper}]"),
        };
        (self.side.key(), value)
    }

    /// A caution where the limit's basis sets it for something other than what is asked about.
    pub fn caution(&self, about: About, plan: &Plan) -> Option<Caution> {
        let Against::Limit(name) = &self.against else { return None };
        let limit: &Limit = plan.limit(name)?;
        let (set_for, fits) = match limit.applies_to {
            AppliesTo::EachReading => ("each reading", about == About::Reading),
            AppliesTo::Level => ("the level", about == About::Level),
            AppliesTo::Percentile => ("a percentile of the readings", about == About::Percentile),
        };
        let asked = match about {
            About::Reading => "single readings",
            About::Level => "the level",
            About::Percentile => "a percentile of the readings",
        };
        (!fits).then(|| {
            let mut text = format!("The limit \"{name}\" applies to {set_for}; this question is about {asked}.");
            if limit.applies_to == AppliesTo::EachReading {
                text.push_str(
                    " A small probability is not permission to exceed it: one confirmed reading beyond it counts, \
                     whatever is printed here.",
                );
            }
            Caution::new("limit-applies-to-other", text)
        })
    }
}

/// P(X lies beyond) under a law on the same scale, taken in the tail where it is exact.
pub fn chance(law: &Law, beyond: Beyond) -> f64 {
    match beyond {
        Beyond::Above(limit) => law.sf(limit),
        Beyond::Below(limit) => law.cdf(limit),
        Beyond::Between(lower, upper) => inside(law, lower, upper),
        Beyond::Outside(lower, upper) => law.cdf(lower) + law.sf(upper),
    }
}

/// P(lower ≤ X ≤ upper), from the side on which less is cancelled.
fn inside(law: &Law, lower: f64, upper: f64) -> f64 {
    let (left, right) = (law.cdf(lower), law.sf(upper));
    if left + right < 0.5 {
        // Most lies inside: what is outside is small and known well.
        return (0.5 - left) + (0.5 - right);
    }
    let (larger, smaller) = if left <= right { (law.cdf(upper), left) } else { (law.sf(lower), right) };
    let difference = larger - smaller;
    if difference > 1e-4 * larger {
        return difference.max(0.0);
    }
    // So narrow an interval cancels; on it the density hardly bends, and five points integrate it to
    // the last digit.
    const PLACES: [f64; 5] = [
        -0.906_179_845_938_664,
        -0.538_469_310_105_683_1,
        0.0,
        0.538_469_310_105_683_1,
        0.906_179_845_938_664,
    ];
    const WEIGHTS: [f64; 5] = [
        0.236_926_885_056_189_08,
        0.478_628_670_499_366_47,
        0.568_888_888_888_888_9,
        0.478_628_670_499_366_47,
        0.236_926_885_056_189_08,
    ];
    let (middle, half) = (0.5 * (lower + upper), 0.5 * (upper - lower));
    let sum: f64 =
        PLACES.iter().zip(WEIGHTS).map(|(at, weight)| weight * law.density(middle + half * at)).sum();
    half * sum
}

/// For X ~ N(mean, sd²), the chance of lying beyond and the chance of not lying there, each exact in
/// its own tail.
pub fn normal_split(beyond: Beyond, mean: f64, sd: f64) -> (f64, f64) {
    let z = |limit: f64| (limit - mean) / sd;
    match beyond {
        Beyond::Above(limit) => (normal::sf(z(limit)), normal::cdf(z(limit))),
        Beyond::Below(limit) => (normal::cdf(z(limit)), normal::sf(z(limit))),
        Beyond::Between(lower, upper) => {
            (fm::exp(normal::ln_interval(z(lower), z(upper))), normal::cdf(z(lower)) + normal::sf(z(upper)))
        }
        Beyond::Outside(lower, upper) => {
            (normal::cdf(z(lower)) + normal::sf(z(upper)), fm::exp(normal::ln_interval(z(lower), z(upper))))
        }
    }
}
