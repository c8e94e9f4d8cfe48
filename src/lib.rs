//! reassay: the yearly review of a measured quantity, computed exactly and stamped.
//!
//! The folders are the stages that the data passes, in order. A stage imports only the ground
//! (the first group below) and stages before it; `tests/tidiness.rs` holds this to be true.

// Ground.
pub mod diagnostics;
pub mod json;
pub mod math;
pub mod quantity;
pub mod source;
pub mod working;

// The way of the data.
pub mod spec;
pub mod plan;
pub mod data;
pub mod prior;
pub mod posterior;
pub mod questions;
pub mod checks;
pub mod sensitivity;
pub mod findings;
pub mod report;
pub mod stamp;

// The whole way, and the outer face.
pub mod review;
pub mod cli;
