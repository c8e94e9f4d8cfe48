//! Stage 1: the spec as it was written. TOML text becomes tables of keys and values, every one with
//! its position; nothing is filled in and nothing is resolved here.

pub mod keys;
pub mod table;
