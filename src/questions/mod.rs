//! questions
