//! Stage 10: the files of a review, their hashes, the stamp, and the audit that makes them again.

// Ground of this stage: sums, listings.
pub mod sums;
mod listing;

// What a review leaves.
pub mod answers_csv;
pub mod answers_json;
pub mod handover;
pub mod inputs;
pub mod stamp_json;
pub mod run_json;
pub mod made;

// To disk, and back.
pub mod folder;
pub mod places;
mod differences;
pub mod audit;
mod audit_inputs;

#[cfg(test)]
mod tests;

pub use made::{Made, Texts};
pub use places::Places;
pub use stamp_json::Stamp;
