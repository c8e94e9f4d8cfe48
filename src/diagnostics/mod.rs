//! What is wrong, where, and how to mend it: one shape for every message, one renderer.
//!
//! A [`Fault`] stops the run; every stage collects all it finds in a [`Faults`] before it stops.
//! A [`Caution`] does not stop: it is printed in the report beside the figures that it concerns.

pub mod render;

use std::ops::Range;

/// Where in a file something stands: the line itself travels along, so that a message can show it
/// without reading the file again.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Place {
    /// The file as the user named it (spec path as given on the command line, data path as in the spec).
    pub file: String,
    /// Line, from 1.
    pub line: u64,
    /// Column in characters, from 1.
    pub column: u64,
    /// The line's text, without its end.
    pub excerpt: String,
    /// The bytes of `excerpt` that are at fault; clamped by the renderer.
    pub mark: Range<usize>,
}

/// Whether the user's input is wrong (exit status 2) or a file could not be read or written (3).
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Cause {
    Wrong,
    Unreadable,
}

/// One thing that stops a run.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Fault {
    /// Stable, hyphenated words, e.g. `unknown-key`.
    pub code: &'static str,
    pub cause: Cause,
    /// What is wrong, one sentence, with the offending text.
    pub message: String,
    pub place: Option<Place>,
    /// What was expected instead.
    pub expected: Option<String>,
    /// One repair.
    pub repair: Option<String>,
}

impl Fault {
    pub fn wrong(code: &'static str, message: impl Into<String>) -> Fault {
        Fault {
            code,
            cause: Cause::Wrong,
            message: message.into(),
            place: None,
            expected: None,
            repair: None,
        }
    }

    pub fn unreadable(code: &'static str, message: impl Into<String>) -> Fault {
        Fault { cause: Cause::Unreadable, ..Fault::wrong(code, message) }
    }

    pub fn at(mut self, place: impl Into<Option<Place>>) -> Fault {
        self.place = place.into();
        self
    }

    pub fn expected(mut self, text: impl Into<String>) -> Fault {
        self.expected = Some(text.into());
        self
    }

    pub fn repair(mut self, text: impl Into<String>) -> Fault {
        self.repair = Some(text.into());
        self
    }
}

/// All faults of a stage, in the order in which they were found.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Faults(pub Vec<Fault>);

impl Faults {
    pub fn push(&mut self, fault: Fault) {
        self.0.push(fault);
    }

    pub fn is_empty(&self) -> bool {
        self.0.is_empty()
    }

    pub fn extend(&mut self, other: Faults) {
        self.0.extend(other.0);
    }

    /// `value` if nothing was found, else all that was found.
    pub fn or<T>(self, value: T) -> Outcome<T> {
        if self.is_empty() { Ok(value) } else { Err(self) }
    }
}

impl From<Fault> for Faults {
    fn from(fault: Fault) -> Faults {
        Faults(vec![fault])
    }
}

/// The result of a stage.
pub type Outcome<T> = Result<T, Faults>;

/// Something the reader of the report must know; never an error.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Caution {
    /// Stable, hyphenated words.
    pub code: &'static str,
    pub series: Option<String>,
    pub question: Option<String>,
    pub text: String,
}

impl Caution {
    pub fn new(code: &'static str, text: impl Into<String>) -> Caution {
        Caution { code, series: None, question: None, text: text.into() }
    }

    pub fn of_series(mut self, series: impl Into<String>) -> Caution {
        self.series = Some(series.into());
        self
    }

    pub fn of_question(mut self, question: impl Into<String>) -> Caution {
        self.question = Some(question.into());
        self
    }
}
