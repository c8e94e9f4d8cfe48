//! The report: numbers to text, figures, Markdown and HTML. It computes nothing that is an answer.

pub mod escape;
pub mod text;
