//! sensitivity
