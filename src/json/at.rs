//! Reading values out of JSON with faults that say where: `series[2].model.within.sd: expected a
//! number, found null`.

use crate::json::Json;

/// A value and the way to it.
#[derive(Debug, Clone)]
pub struct At<'a> {
    value: &'a Json,
    way: String,
}

impl<'a> At<'a> {
    pub fn root(value: &'a Json) -> At<'a> {
        At { value, way: String::new() }
    }

    /// What is wrong here, in one line.
    pub fn fault(&self, expected: &str) -> String {
        let way = if self.way.is_empty() { "the whole" } else { &self.way };
        let mut found = self.value.to_line();
        if let Some((cut, _)) = found.char_indices().nth(40) {
            found.truncate(cut);
            found.push('…');
        }
        format!("{way}: expected {expected}, found {found}")
    }

    /// The value of a key; an error where it is missing.
    pub fn key(&self, key: &str) -> Result<At<'a>, String> {
        match self.value.get(key) {
            Some(value) => Ok(At { value, way: self.way_to(key) }),
            None => Err(self.fault(&format!("an object with the key \"{key}\""))),
        }
    }

    /// The value of a key, where it is there and not null.
    pub fn maybe(&self, key: &str) -> Option<At<'a>> {
        let value = self.value.get(key).filter(|value| **value != Json::Null)?;
        Some(At { value, way: self.way_to(key) })
    }

    /// The value as it stands, on one line.
    pub fn as_written(&self) -> String {
        self.value.to_line()
    }

    pub fn as_text(&self) -> Result<&'a str, String> {
        self.value.as_text().ok_or_else(|| self.fault("a text"))
    }

    pub fn as_number(&self) -> Result<f64, String> {
        self.value.as_f64().filter(|value| value.is_finite()).ok_or_else(|| self.fault("a number"))
    }

    pub fn text(&self, key: &str) -> Result<&'a str, String> {
        self.key(key)?.as_text()
    }

    pub fn number(&self, key: &str) -> Result<f64, String> {
        self.key(key)?.as_number()
    }

    /// The number, or `None` where null stands.
    pub fn number_if(&self, key: &str) -> Result<Option<f64>, String> {
        self.key(key)?;
        self.maybe(key).map(|at| at.as_number()).transpose()
    }

    pub fn whole(&self, key: &str) -> Result<u64, String> {
        let at = self.key(key)?;
        at.value.as_whole().ok_or_else(|| at.fault("a whole number"))
    }

    /// All items of a list, each read by `read`.
    pub fn each<T>(&self, key: &str, read: impl Fn(&At<'a>) -> Result<T, String>) -> Result<Vec<T>, String> {
        let at = self.key(key)?;
        let items = at.value.as_list().ok_or_else(|| at.fault("a list"))?;
        let one = |(place, value)| read(&At { value, way: format!("{}[{place}]", at.way) });
        items.iter().enumerate().map(one).collect()
    }

    fn way_to(&self, key: &str) -> String {
        if self.way.is_empty() { key.to_string() } else { format!("{}.{key}", self.way) }
    }
}
