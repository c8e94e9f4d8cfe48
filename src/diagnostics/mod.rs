//! diagnostics
