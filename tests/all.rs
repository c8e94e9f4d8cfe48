//! All integration tests, in one binary: one link, one run.

mod tidiness;
mod reference;
