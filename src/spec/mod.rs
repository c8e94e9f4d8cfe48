//! spec
