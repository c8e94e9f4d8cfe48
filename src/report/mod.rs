//! The report: numbers to text, figures, Markdown and HTML. It computes nothing that is an answer.

pub mod escape;
pub mod figure_axis;
pub mod figure_frame;
pub mod figure_labels;
pub mod figure_level;
pub mod figure_lines;
pub mod figure_periods;
pub mod figure_quantiles;
pub mod figure_rows;
pub mod html;
pub mod svg;
pub mod text;

/// A report as its files hold it.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Rendered {
    pub markdown: String,
    pub html: String,
    /// The figures by the name of their file, which the Markdown shows; each a whole SVG.
    pub figures: Vec<(String, String)>,
}

#[cfg(test)]
mod figure_tests;
