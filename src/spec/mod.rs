//! Stage 1: the spec as it was written. TOML text becomes tables of keys and values, every one with
//! its position; nothing is filled in and nothing is resolved here.

pub mod keys;
pub mod language;
pub mod reader;
pub mod schema;
pub mod table;
pub mod text;

use crate::diagnostics::{Faults, Outcome};
use std::sync::Arc;
use table::{SpecText, Table};

/// A spec as written: its text, and the tables in it.
#[derive(Debug, Clone, PartialEq)]
pub struct Spec {
    pub text: Arc<SpecText>,
    pub root: Table,
}

/// Reads a spec's bytes. `file` is the name under which messages speak of it.
///
/// All faults of the TOML are found in one run; which keys there may be is asked by the plan.
pub fn read(bytes: &[u8], file: &str) -> Outcome<Spec> {
    let mut faults = Faults::default();
    match read_on(bytes, file, &mut faults) {
        Some(spec) => faults.or(spec),
        None => Err(faults),
    }
}

/// As [`read`], but a spec with single values that cannot be used is returned all the same, with these
/// noted, so that what is wrong elsewhere can be told in the same run.
pub fn read_on(bytes: &[u8], file: &str, faults: &mut Faults) -> Option<Spec> {
    let text = match text::decode(bytes, file) {
        Ok(text) => text,
        Err(fault) => {
            faults.push(fault);
            return None;
        }
    };
    let text = Arc::new(SpecText { file: file.to_string(), text });
    let root = text::parse(&text, faults)?;
    Some(Spec { text, root })
}
