//! review
