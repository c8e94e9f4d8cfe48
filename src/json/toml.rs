//! TOML values, such as the settings of a question, as JSON.

use super::Json;
use toml::de::{DeTable, DeValue};

/// A TOML value as JSON; text that is none is kept as text.
pub fn of_toml(written: &str) -> Json {
    let line = format!("x = {written}");
    match DeTable::parse(&line) {
        Ok(table) => {
            let value = table.get_ref().iter().find(|(key, _)| key.get_ref() == "x");
            value.map_or_else(|| Json::text(written), |(_, value)| from_toml(value.get_ref()))
        }
        Err(_) => Json::text(written),
    }
}

fn from_toml(value: &DeValue<'_>) -> Json {
    match value {
        DeValue::String(text) => Json::text(text.as_ref()),
        DeValue::Boolean(flag) => Json::Flag(*flag),
        DeValue::Integer(whole) => {
            let digits = whole.as_str().replace('_', "");
            match u64::from_str_radix(&digits, whole.radix()) {
                Ok(whole) => Json::Whole(whole),
                Err(_) => digits.parse().map_or(Json::Null, Json::number),
            }
        }
        DeValue::Float(float) => {
            let number = float.as_str().replace('_', "").parse().unwrap_or(f64::NAN);
            // A spec may say `inf`, JSON may not.
            if f64::is_finite(number) { Json::number(number) } else { Json::text(float.as_str()) }
        }
        DeValue::Datetime(date) => Json::text(date.to_string()),
        DeValue::Array(items) => Json::List(items.iter().map(|item| from_toml(item.get_ref())).collect()),
        DeValue::Table(table) => {
            let field = |key: &str, value| (key.to_string(), from_toml(value));
            Json::Object(table.iter().map(|(key, value)| field(key.get_ref(), value.get_ref())).collect())
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn settings_become_json_values() {
        assert_eq!(of_toml("0.95").to_line(), "0.95");
        assert_eq!(of_toml("12").to_line(), "12");
        assert_eq!(of_toml("-3").to_line(), "-3.0");
        assert_eq!(of_toml("\"central\"").to_line(), "\"central\"");
        assert_eq!(of_toml("[25.0, 50.0]").to_line(), "[25.0, 50.0]");
        assert_eq!(of_toml("true").to_line(), "true");
        assert_eq!(of_toml("inf").to_line(), "\"inf\"");
        assert_eq!(of_toml("not a value").to_line(), "\"not a value\"");
    }
}
