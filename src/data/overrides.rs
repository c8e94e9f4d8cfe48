//! The table of `[overrides]`: one row a series, handed to the plan cell by cell.

use super::InputFile;
use super::columns::{Head, trimmed};
use super::delimited::{Parser, Rows};
use super::fault_list::FaultList;
use super::number;
use super::record::Record;
use super::screen::ragged;
use crate::diagnostics::{Fault, Faults, Outcome, Place};
use crate::plan::{OverrideCell, OverridesFile, Plan};
use crate::quantity::Period;
use crate::source;
use crate::spec::table::{Span, SpecText};
use std::sync::Arc;

/// Reads the file of `[overrides]`, where the spec has one, into the plan; what was read.
pub fn read_overrides(plan: &mut Plan) -> Outcome<Option<InputFile>> {
    let Some(overrides) = plan.overrides.clone() else {
        return Ok(None);
    };
    let file = &overrides.file;
    let bytes = source::whole(&file.path, &file.written, "reading the overrides")
        .map_err(|fault| fault.at(file.span.place()))?;
    let sha256 = source::sha256_hex(&bytes);
    if let Some(pinned) = &file.sha256
        && *pinned != sha256
    {
        return Err(super::read::other_bytes(file, pinned, &sha256).into());
    }
    let mut faults = FaultList::default();
    let mut parser = Parser::new((&overrides).into(), &file.written, &mut faults, |head, faults| {
        OverrideRows::new(head, &overrides, faults)
    });
    parser.feed(&bytes);
    let (notes, rows) = parser.end();
    if !faults.is_empty() {
        return Err(faults.into_faults());
    }
    let mut wrong = Faults::default();
    for (series, cells) in rows.map(|rows| rows.found).unwrap_or_default() {
        plan.override_row(&series, &cells, &mut wrong);
    }
    wrong.or(Some(InputFile {
        written: file.written.clone(),
        path: file.path.clone(),
        sha256,
        bytes: bytes.len() as u64,
        notes,
    }))
}

struct OverrideRows<'p> {
    overrides: &'p OverridesFile,
    name: String,
    columns: usize,
    series: usize,
    /// Column, and what it sets.
    cells: Vec<(usize, &'p str)>,
    found: Vec<(String, Vec<OverrideCell>)>,
}

impl<'p> OverrideRows<'p> {
    fn new(head: &Head, overrides: &'p OverridesFile, faults: &mut FaultList) -> Option<OverrideRows<'p>> {
        let series = head.find(&overrides.series, "series", &overrides.file.span, faults);
        let mut cells = Vec::new();
        for (sets, column, span) in &overrides.columns {
            if let Some(found) = head.find(column, sets, span, faults) {
                cells.push((found, sets.as_str()));
            }
        }
        (cells.len() == overrides.columns.len()).then_some(OverrideRows {
            overrides,
            name: head.file.clone(),
            columns: head.names.len(),
            series: series?,
            cells,
            found: Vec::new(),
        })
    }
}

impl Rows for OverrideRows<'_> {
    fn row(&mut self, record: &Record<'_>, faults: &mut FaultList) {
        if record.is_blank() {
            return;
        }
        if record.len() != self.columns {
            faults.note("ragged-row", || ragged(record, &self.name, self.columns));
            return;
        }
        let text = |column: usize| String::from_utf8_lossy(trimmed(record.get(column))).into_owned();
        let series = Period::new(&text(self.series)).as_str().to_string();
        let place = record.place(&self.name, self.series);
        if series.is_empty() {
            faults.push(
                Fault::wrong("missing-series", "the row does not say which series it belongs to")
                    .at(place)
                    .expected("a name in this cell"),
            );
            return;
        }
        if self.found.iter().any(|(known, _)| *known == series) {
            faults.push(
                Fault::wrong("series-twice", format!("\"{series}\" has a second row here"))
                    .at(place)
                    .expected("one row for each series"),
            );
            return;
        }
        let cells = self
            .cells
            .iter()
            .map(|(column, sets)| {
                let mut cell = text(*column);
                if self.overrides.decimal_comma && number::parse(cell.as_bytes(), true).is_some() {
                    cell = cell.replace(',', ".");
                }
                let span = span_of(&record.place(&self.name, *column));
                OverrideCell { sets: sets.to_string(), text: cell, span }
            })
            .collect();
        self.found.push((series, cells));
    }
}

/// A span whose place is the given one: the line alone, after as many line ends as come before it.
fn span_of(place: &Place) -> Span {
    let before = usize::try_from(place.line - 1).unwrap_or(0);
    let text = format!("{}{}", "\n".repeat(before), place.excerpt);
    let bytes = before + place.mark.start..before + place.mark.end;
    Span { source: Arc::new(SpecText { file: place.file.clone(), text }), bytes }
}
