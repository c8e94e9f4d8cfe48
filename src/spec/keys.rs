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
    pub help: &'static str,
}

impl Key {
    pub const fn optional(name: &'static str, takes: Takes, help: &'static str) -> Key {
        Key { name, takes, required: false, help }
    }

    pub const fn required(name: &'static str, takes: Takes, help: &'static str) -> Key {
        Key { name, takes, required: true, help }
    }
}
