//! What a key is: its name, what it takes, whether it must be there, and one line of help.
//! One table of these per TOML table drives decoding, the nearest-key hint, the reference page and the schema.

/// What a key takes.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Takes {
    Text,
    /// Text that is Markdown in the report.
    Markdown,
    /// Any finite number; a whole number serves.
    Number,
    /// A finite number above 0.
    Positive,
    /// A finite number, 0 or above.
    NotNegative,
    /// A number above 0, or `inf`.
    PositiveOrInfinite,
    /// Strictly between 0 and 1.
    Probability,
    /// Above 0, up to and including 1.
    Share,
    /// A whole number, 1 or above.
    Count,
    /// A whole number or a text: the name of a period.
    Period,
    Date,
    Flag,
    /// A number, or the name of a limit.
    NumberOrLimit,
    OneOf(&'static [&'static str]),
    TextList,
    NumberList,
    /// A table or an inline table, decoded by whoever owns it.
    Table,
    /// A list of tables.
    Tables,
    /// Several shapes; decoded by hand, the text says which.
    Other(&'static str),
}

/// One key of a table.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Key {
    pub name: &'static str,
    pub takes: Takes,
    pub required: bool,
    /// False: a key of the language that this version cannot serve; it is refused, never ignored.
    pub served: bool,
    pub help: &'static str,
}

impl Key {
    pub const fn optional(name: &'static str, takes: Takes, help: &'static str) -> Key {
        Key { name, takes, required: false, served: true, help }
    }

    pub const fn required(name: &'static str, takes: Takes, help: &'static str) -> Key {
        Key { name, takes, required: true, served: true, help }
    }

    /// A key that the language has and this version does not serve yet.
    pub const fn later(name: &'static str, takes: Takes, help: &'static str) -> Key {
        Key { name, takes, required: false, served: false, help }
    }
}

impl Takes {
    /// What is expected, in words that end a sentence "expected …".
    pub fn in_words(&self) -> String {
        match self {
            Takes::Text | Takes::Markdown => "a text in quotes".into(),
            Takes::Number => "a finite number".into(),
            Takes::Positive => "a number above 0".into(),
            Takes::NotNegative => "a number, 0 or above".into(),
            Takes::PositiveOrInfinite => "a number above 0, or inf".into(),
            Takes::Probability => "a probability between 0 and 1, such as 0.95".into(),
            Takes::Share => "a number above 0, at most 1".into(),
            Takes::Count => "a whole number, 1 or above".into(),
            Takes::Period => "a period: a whole number such as 2025, or a text in quotes".into(),
            Takes::Date => "a date without quotes, such as 2026-01-31".into(),
            Takes::Flag => "true or false".into(),
            Takes::NumberOrLimit => "a number, or the name of a limit in quotes".into(),
            Takes::OneOf(choices) => one_of(choices),
            Takes::TextList => "a list of texts, such as [\"a\", \"b\"]".into(),
            Takes::NumberList => "a list of numbers, such as [25, 50]".into(),
            Takes::Table => "a table, such as { key = 1 }".into(),
            Takes::Tables => "a list of tables, such as [ { key = 1 } ]".into(),
            Takes::Other(words) => (*words).into(),
        }
    }
}

/// `"a"`, `"b"` or `"c"`.
pub fn one_of(choices: &[&str]) -> String {
    match choices {
        [] => "nothing".into(),
        [only] => format!("\"{only}\""),
        [first @ .., last] => {
            let first: Vec<String> = first.iter().map(|choice| format!("\"{choice}\"")).collect();
            format!("{} or \"{last}\"", first.join(", "))
        }
    }
}

/// The known name that was probably meant: at most two slips away, or a third of the name's
/// length where that is more; one slip for names of up to four letters.
pub fn nearest<'a>(written: &str, known: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let plain = |name: &str| name.to_lowercase().replace(['-', ' '], "_");
    let target = plain(written);
    let length = target.chars().count();
    // A long jumble is nobody's slip, and the distance takes time in the square of its length.
    if length > 64 {
        return None;
    }
    let allowed = if length <= 4 { 1 } else { 2.max(length / 3) };
    known
        .into_iter()
        .map(|name| (strsim::damerau_levenshtein(&target, &plain(name)), name))
        .filter(|(slips, _)| *slips <= allowed)
        .min_by_key(|(slips, _)| *slips)
        .map(|(_, name)| name)
}

#[cfg(test)]
mod tests {
    use super::nearest;

    #[test]
    fn the_nearest_name_is_found_and_a_far_one_is_not() {
        let known = ["title", "period", "date", "by", "on", "sign_off"];
        assert_eq!(nearest("titel", known), Some("title"));
        assert_eq!(nearest("Sign-Off", known), Some("sign_off"));
        assert_eq!(nearest("peroid", known), Some("period"));
        assert_eq!(nearest("weather", known), None);
        assert_eq!(nearest("xy", known), Some("by"));
        assert_eq!(nearest(&"x".repeat(100_000), known), None);
    }
}
