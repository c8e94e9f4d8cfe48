//! A value and its interval in each row: the levels of all series against a limit, or one answer under each
//! alternative.

use super::figure_axis::Axis;
use super::figure_frame::{Entry, FigureError, Frame, LETTERS, Mark, Marker, Sample, rows_above};
use super::svg::{self, About, Ink, Side, UNIT, Writing, text_width};

const ROW: i32 = 26 * UNIT;
const NAMES_AT_MOST: i32 = 220 * UNIT;
const REMARKS_AT_MOST: i32 = 170 * UNIT;

/// One row of the chart.
#[derive(Clone, Debug)]
pub struct Row {
    pub name: String,
    /// Absent where the value does not exist; the row and its remark stay.
    pub value: Option<f64>,
    pub lower: Option<f64>,
    pub upper: Option<f64>,
    /// A word at the right: the verdict, for one.
    pub remark: String,
    /// Marked by a lozenge and bold letters: the main answer among alternatives.
    pub main: bool,
}

/// What a chart of rows shows.
#[derive(Clone, Debug)]
pub struct RowsFigure {
    pub about: About,
    pub value_title: String,
    /// From top to bottom.
    pub rows: Vec<Row>,
    pub rows_label: String,
    pub limits: Vec<Mark>,
}

/// Draws a chart of rows.
pub fn rows(figure: &RowsFigure) -> Result<String, FigureError> {
    let values = figure.rows.iter().flat_map(|row| [row.value, row.lower, row.upper]).flatten();
    let marks = figure.limits.iter().map(|mark| mark.value);
    let x = Axis::covering(values.chain(marks), 0.05, 6, &figure.value_title)?;
    let last = figure.rows.len().saturating_sub(1);
    // The vertical axis counts upwards, the rows downwards.
    let names = figure.rows.iter().rev().map(|row| svg::fitted(&row.name, LETTERS, NAMES_AT_MOST));
    let y = Axis::names(names, "")?;
    let remarks = figure.rows.iter().map(|row| text_width(&row.remark, LETTERS)).max().unwrap_or(0);
    let right = if remarks > 0 { remarks.min(REMARKS_AT_MOST) + 22 * UNIT } else { 18 * UNIT };
    let strip = rows_above(&figure.limits, &x);
    let count = i32::try_from(figure.rows.len()).map_err(|_| FigureError::NoRange)?;
    let height = 10 * UNIT + count * ROW + 48 * UNIT;
    let frame = Frame::new(x, y, height, strip).with_right_margin(right);
    let plot = frame.plot();
    let place = |row: usize| (last - row) as f64;

    let mut labels = frame.labels();
    let mut legend = Vec::new();
    for mark in &figure.limits {
        let spots = frame.spots_above(mark.value, strip);
        if !labels.place(&mark.label, Ink::Limit, true, spots) {
            legend.push(Entry { sample: Sample::Line(Ink::Limit), text: mark.label.clone() });
        }
    }
    if !figure.rows_label.is_empty() {
        let sample = Sample::MarkedLine(Ink::Posterior, Marker::Disc);
        legend.push(Entry { sample, text: figure.rows_label.clone() });
    }
    let mut writings = labels.placed;
    for (number, row) in figure.rows.iter().enumerate().filter(|(_, row)| !row.remark.is_empty()) {
        writings.push(Writing {
            text: svg::fitted(&row.remark, LETTERS, REMARKS_AT_MOST),
            x: plot.right + 12 * UNIT,
            y: frame.y_at(place(number)) + LETTERS * 7 / 20,
            side: Side::Start,
            size: LETTERS,
            ink: Ink::Text,
            bold: row.main,
        });
    }

    frame.draw(&figure.about, &writings, &legend, |painter| {
        for mark in figure.limits.iter().filter(|mark| frame.shows_x(mark.value)) {
            painter.line(&[(mark.value, frame.y.low), (mark.value, frame.y.high)], Ink::Limit)?;
        }
        for (number, row) in figure.rows.iter().enumerate() {
            let y = place(number);
            if let (Some(low), Some(high)) = (row.lower.or(row.value), row.upper.or(row.value)) {
                painter.lying(y, low, high, if high > low { 4 * UNIT } else { 0 }, Ink::Posterior)?;
            }
            if let Some(value) = row.value {
                let marker = if row.main { Marker::Lozenge } else { Marker::Disc };
                painter.marker((value, y), marker, Ink::Posterior)?;
            }
        }
        Ok(())
    })
}
