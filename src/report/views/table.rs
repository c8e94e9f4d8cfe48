//! Tables as templates see them: a caption, heads and rows whose cells are ready to print.

use crate::report::escape;
use minijinja::Value;
use serde::Serialize;

/// How a column is set.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Column {
    /// The first column: heads of the rows.
    Head,
    Text,
    Number,
}

/// A table of text cells. Cells made by [`plain`] are escaped when printed, others are Markdown.
#[derive(Debug, Clone, Default, Serialize)]
pub struct TableView {
    pub caption: String,
    pub head: Vec<String>,
    /// The Markdown of the line under the heads, cell by cell.
    pub align: Vec<&'static str>,
    pub rows: Vec<Vec<Value>>,
}

impl TableView {
    pub fn new(caption: impl Into<String>, columns: &[(&str, Column)]) -> TableView {
        let mut table = TableView { caption: caption.into(), ..TableView::default() };
        for (head, column) in columns {
            table.column(*head, *column);
        }
        table
    }

    /// Adds a column at the right; before any row.
    pub fn column(&mut self, head: impl Into<String>, column: Column) {
        self.head.push(head.into());
        self.align.push(match column {
            Column::Head => ":---",
            Column::Text => "---",
            Column::Number => "---:",
        });
    }

    pub fn row(&mut self, cells: Vec<Value>) {
        self.rows.push(cells);
    }

    /// `None` where there is no row.
    pub fn some(self) -> Option<TableView> {
        (!self.rows.is_empty()).then_some(self)
    }
}

/// A cell of text.
pub fn plain(text: impl Into<String>) -> Value {
    Value::from(text.into())
}

/// A cell of text in bold.
pub fn bold(text: &str) -> Value {
    Value::from_safe_string(format!("**{}**", escape::markdown(text)))
}

/// A cell of literal text in fixed letters.
pub fn code(text: &str) -> Value {
    Value::from_safe_string(escape::code_span(text))
}
