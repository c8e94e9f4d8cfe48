//! Stage 1: the spec as it was written. TOML text becomes tables of keys and values, every one with
//! its position; nothing is filled in and nothing is resolved here.

pub mod keys;
pub mod language;
pub mod reader;
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
    let text = Arc::new(SpecText { file: file.to_string(), text: text::decode(bytes, file)? });
    let mut faults = Faults::default();
    let root = text::parse(&text, &mut faults);
    faults.or(Spec { text, root })
}
