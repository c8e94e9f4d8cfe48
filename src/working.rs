//! working
