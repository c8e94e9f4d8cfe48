//! prior
