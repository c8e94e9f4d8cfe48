//! Stage 10: the files of a review, their hashes, the stamp, and the audit that makes them again.

pub mod json;
mod laws;
pub mod answers_csv;
pub mod answers_json;
