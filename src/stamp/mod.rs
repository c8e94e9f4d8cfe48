//! stamp
