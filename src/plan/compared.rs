//! What readings and levels are held against: `[limit.*]`, and the bounds that one series has of its own.

use crate::diagnostics::Fault;
use crate::plan::make::{Ground, named_tables};
use crate::plan::{AppliesTo, Bounds, Limit};
use crate::spec::language;
use crate::spec::reader::Reader;
use crate::spec::table::{Kind, Table};

pub fn limits(root: &Table, ground: &mut Ground) -> Vec<Limit> {
    named_tables(root, "limit", ground)
        .into_iter()
        .filter_map(|(name, table)| limit(name, table, ground))
        .collect()
}

fn limit(name: &str, table: &Table, ground: &mut Ground) -> Option<Limit> {
    let mut reader = ground.reader(table, language::LIMIT);
    let written = Written::read(&mut reader);
    let basis = reader.text("basis");
    let applies_to = reader.choice("applies_to").map(|choice| match choice {
        "level" => AppliesTo::Level,
        "percentile" => AppliesTo::Percentile,
        _ => AppliesTo::EachReading,
    });
    let bounds = written.bounds(None, &mut reader);
    reader.finish();
    let decimals =
        ["value", "lower", "upper"].iter().filter_map(|key| table.get(key)).map(|value| match &value.kind {
            Kind::Number { written, .. } => decimals(written),
            _ => 0,
        });
    let decimals = decimals.max().unwrap_or(0);
    Some(Limit {
        name: name.to_string(),
        bounds: bounds?,
        basis: basis?,
        applies_to: applies_to?,
        decimals,
        span: table.span.clone(),
    })
}

/// The bounds of one series: what its table says, the rest from the general limit.
pub fn own_bounds(table: &Table, general: Bounds, ground: &mut Ground) -> Option<Bounds> {
    let mut reader = ground.reader(table, language::SERIES_LIMIT);
    let bounds = Written::read(&mut reader).bounds(Some(general), &mut reader);
    reader.finish();
    bounds
}

/// The three keys of a limit, and whether what was written could be read.
struct Written {
    value: Option<f64>,
    lower: Option<f64>,
    upper: Option<f64>,
    understood: bool,
}

impl Written {
    fn read(reader: &mut Reader<'_>) -> Written {
        let before = reader.faults.0.len();
        let (value, lower, upper) = (reader.number("value"), reader.number("lower"), reader.number("upper"));
        Written { value, lower, upper, understood: reader.faults.0.len() == before }
    }

    fn bounds(self, general: Option<Bounds>, reader: &mut Reader<'_>) -> Option<Bounds> {
        if !self.understood {
            return None;
        }
        let from_general = match general {
            Some(Bounds::Range(lower, upper)) => (Some(lower), Some(upper)),
            _ => (None, None),
        };
        match (self.value, self.lower, self.upper) {
            (Some(value), None, None) => Some(Bounds::Value(value)),
            (Some(_), _, _) => {
                let fault =
                    Fault::wrong("either-or", "a limit has one value, or a lower and an upper one; not both")
                        .expected("`value`, or `lower` and `upper`")
                        .repair("leave one of the two out");
                reader.fault_at("value", fault);
                None
            }
            (None, None, None) if general.is_some() => general,
            (None, None, None) => {
                let head = reader.table.span.place();
                let fault = Fault::wrong("missing-key", format!("{} has no value", reader.table.name));
                reader.faults.push(fault.at(head).expected("`value`, or `lower` and `upper`"));
                None
            }
            (None, lower, upper) => {
                let written = if lower.is_some() { "lower" } else { "upper" };
                let (lower, upper) = (lower.or(from_general.0), upper.or(from_general.1));
                let (Some(lower), Some(upper)) = (lower, upper) else {
                    let other = if written == "lower" { "upper" } else { "lower" };
                    let fault = Fault::wrong("missing-key", format!("`{written}` stands without `{other}`"))
                        .expected("`lower` and `upper` of a limit with two sides")
                        .repair(
                            "write `value` where the limit has one side; the question says above or below",
                        );
                    reader.fault_at(written, fault);
                    return None;
                };
                if lower < upper {
                    return Some(Bounds::Range(lower, upper));
                }
                let fault = Fault::wrong(
                    "bad-limit",
                    format!("the lower limit {lower} is not below the upper one {upper}"),
                )
                .expected("lower < upper");
                reader.fault_at(written, fault);
                None
            }
        }
    }
}

/// Digits after the decimal point of a number as written: 2 of `12.50`, 4 of `1.5e-3`.
pub fn decimals(written: &str) -> usize {
    let (mantissa, exponent) = match written.split_once(['e', 'E']) {
        Some((mantissa, exponent)) => (mantissa, exponent.parse::<i64>().unwrap_or(0)),
        None => (written, 0),
    };
    let digits = mantissa.split_once('.').map_or(0, |(_, fraction)| fraction.len()) as i64;
    usize::try_from(digits.saturating_sub(exponent)).unwrap_or(0).min(300)
}

#[cfg(test)]
mod tests {
    use super::decimals;

    #[test]
    fn decimals_are_those_written() {
        for (written, expected) in
            [("50", 0), ("50.0", 1), ("12.50", 2), ("1.5e-3", 4), ("1e2", 0), ("2.5E1", 0)]
        {
            assert_eq!(decimals(written), expected, "{written}");
        }
    }
}
