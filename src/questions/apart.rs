//! How far two levels lie apart: what `change` and `difference` share. On the log scale the answer is
//! the ratio of the two levels.

use super::figures::{Figures, Meaning};
use super::terms::{self, Interval};
use super::{Subject, beyond};
use crate::diagnostics::Fault;
use crate::math::fm;
use crate::posterior::Law;
use crate::quantity::{Absent, Beyond, Scale};
use crate::spec::keys::{Key, Takes};
use crate::spec::reader::Reader;
use crate::spec::table::Kind;

pub const ABOVE: Key =
    Key::optional("above", Takes::Number, "the chance of more than this; default 0 (log scale: 1)");
pub const BELOW: Key = Key::optional("below", Takes::Number, "the chance of less than this");
pub const BAND: Key = Key::optional(
    "band",
    Takes::Other("a number above 0 (log scale: a factor above 1), or two rising numbers such as [-0.5, 1.0]"),
    "no practical change: within ± this, or between these two",
);

/// The keys of a distance between two levels, read.
#[derive(Debug, Clone, PartialEq)]
pub struct Apart {
    pub probability: f64,
    /// In the unit; on the log scale a ratio.
    beyond: Beyond,
    band: Option<(f64, f64)>,
}

impl Apart {
    pub fn read(reader: &mut Reader<'_>, scale: Scale) -> Apart {
        let probability = terms::read_probability(reader);
        let (above, below) = (reader.number("above"), reader.number("below"));
        if reader.has("above") && reader.has("below") {
            let fault =
                Fault::wrong("either-or", "`below` stands beside `above`, and a question has one direction")
                    .expected("`above` or `below`")
                    .repair("leave one of them out, or ask two questions");
            reader.fault_at("below", fault);
        }
        for key in ["above", "below"] {
            let not_positive = [above, below].into_iter().flatten().any(|number| number <= 0.0);
            if scale == Scale::Log && reader.has(key) && not_positive {
                let fault = Fault::wrong(
                    "out-of-range",
                    format!("on the log scale `{key}` is a ratio of two levels"),
                )
                .expected("a number above 0; 1 means no difference")
                .repair(format!("write {key} = 1.0"));
                reader.fault_at(key, fault);
            }
        }
        let none = match scale {
            Scale::Linear => 0.0,
            Scale::Log => 1.0,
        };
        let beyond = match (above, below) {
            (_, Some(below)) if above.is_none() => Beyond::Below(below),
            (above, _) => Beyond::Above(above.unwrap_or(none)),
        };
        let band = read_band(reader, scale);
        Apart { probability, beyond, band }
    }

    /// `estimate`, `lower`, `upper`, `chance`, `band_chance` from the law of the difference on the model's scale.
    pub fn figures(&self, law: &Result<Law, Absent>, scale: Scale) -> Figures {
        let meaning = match scale {
            Scale::Linear => Meaning::Spread,
            Scale::Log => Meaning::Ratio,
        };
        let on_scale = |value: f64| match scale {
            Scale::Linear => value,
            Scale::Log => fm::ln(value),
        };
        let beyond = match self.beyond {
            Beyond::Above(value) => Beyond::Above(on_scale(value)),
            Beyond::Below(value) => Beyond::Below(on_scale(value)),
            other => other,
        };
        let chance =
            |beyond: Beyond| law.as_ref().map(|law| beyond::chance(law, beyond)).map_err(Absent::clone);
        let figures = terms::interval_figures(law, self.probability, Interval::Central, scale, meaning)
            .number("chance", chance(beyond), Meaning::Chance);
        match self.band {
            Some((lower, upper)) => {
                let band = Beyond::Between(on_scale(lower), on_scale(upper));
                figures.number("band_chance", chance(band), Meaning::Chance)
            }
            None => figures,
        }
    }

    /// "central 95 % interval, the probability that it is above 0 mg/L, and …".
    pub fn words(&self, unit: &str, scale: Scale) -> String {
        let unit = match scale {
            Scale::Linear => unit,
            Scale::Log => "",
        };
        let (side, value) = match self.beyond {
            Beyond::Below(value) => ("below", value),
            Beyond::Above(value) | Beyond::Between(value, _) | Beyond::Outside(value, _) => ("above", value),
        };
        let interval = Interval::Central.words(self.probability);
        let words = format!("{interval}, and the probability that it is {side} {value}{unit}");
        match self.band {
            Some((lower, upper)) => {
                format!("{words}, and that it lies between {lower} and {upper}{unit} (no practical change)")
            }
            None => words,
        }
    }

    /// "P(Δ > 0 | prior, readings)".
    pub fn symbols(&self, symbol: &str, subject: &Subject<'_>) -> String {
        let (sign, value) = match self.beyond {
            Beyond::Below(value) => ("<", value),
            Beyond::Above(value) | Beyond::Between(value, _) | Beyond::Outside(value, _) => (">", value),
        };
        format!("Δ = {symbol}; P(Δ {sign} {value} | {})", subject.known())
    }

    pub fn gives(&self) -> Vec<&'static str> {
        let mut names = Interval::Central.gives();
        names.push("chance");
        names
    }

    pub fn settings(&self) -> Vec<(&'static str, String)> {
        let mut settings = vec![("probability", format!("{}", self.probability))];
        settings.push(match self.beyond {
            Beyond::Below(value) => ("below", format!("{value}")),
            Beyond::Above(value) | Beyond::Between(value, _) | Beyond::Outside(value, _) => {
                ("above", format!("{value}"))
            }
        });
        settings.extend(self.band.map(|(lower, upper)| ("band", format!("[{lower:?}, {upper:?}]"))));
        settings
    }
}

fn read_band(reader: &mut Reader<'_>, scale: Scale) -> Option<(f64, f64)> {
    let value = reader.value("band")?;
    let least = match scale {
        Scale::Linear => f64::NEG_INFINITY,
        Scale::Log => 0.0,
    };
    match &value.kind {
        Kind::Number { value, .. } if scale == Scale::Linear && *value > 0.0 && value.is_finite() => {
            Some((-*value, *value))
        }
        Kind::Number { value, .. } if scale == Scale::Log && *value > 1.0 && value.is_finite() => {
            Some((1.0 / value, *value))
        }
        Kind::List(_) => match reader.number_list("band")?.as_slice() {
            [lower, upper] if lower < upper && *lower > least => Some((*lower, *upper)),
            _ => reader.refuse("band"),
        },
        _ => reader.refuse("band"),
    }
}
