//! posterior
