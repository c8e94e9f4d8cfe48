//! Stage 10: the files of a review, their hashes, the stamp, and the audit that makes them again.

pub mod json;
mod reading;
mod laws;
pub mod answers_csv;
pub mod answers_json;
pub mod handover;
mod handover_model;
mod handover_read;
