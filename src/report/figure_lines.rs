//! Lines over a common axis, each with its own dash and its name beside it, and thresholds in both directions:
//! the chance of each verdict against the true level, for one.

use super::figure_axis::Axis;
use super::figure_frame::{Entry, FigureError, Frame, Mark, Sample, rows_above};
use super::figure_labels::Spot;
use super::svg::{About, Ink, Side, UNIT};

const HEIGHT: i32 = 350 * UNIT;
/// Each line's look; more lines than looks begin again.
const LOOKS: [Ink; 6] = [Ink::LineA, Ink::LineB, Ink::LineC, Ink::LineD, Ink::LineE, Ink::LineF];

/// A line and its name.
#[derive(Clone, Debug)]
pub struct Line {
    pub label: String,
    /// In order of the abscissa.
    pub points: Vec<(f64, f64)>,
}

/// The vertical axis of a chart of lines.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Upright {
    /// Probabilities from 0 to 1.
    Chance,
    /// As far as the lines and thresholds reach.
    Covering,
}

/// What a chart of lines shows.
#[derive(Clone, Debug)]
pub struct LinesFigure {
    pub about: About,
    pub x_title: String,
    pub y_title: String,
    pub upright: Upright,
    pub lines: Vec<Line>,
    /// Upright lines at values of the horizontal axis.
    pub x_marks: Vec<Mark>,
    /// Lying lines at values of the vertical axis.
    pub y_marks: Vec<Mark>,
}

/// Draws a chart of lines.
pub fn lines(figure: &LinesFigure) -> Result<String, FigureError> {
    let points = || figure.lines.iter().flat_map(|line| line.points.iter().copied());
    let marks = figure.x_marks.iter().map(|mark| mark.value);
    let x = Axis::covering(points().map(|(x, _)| x).chain(marks), 0.02, 7, &figure.x_title)?;
    let y = match figure.upright {
        Upright::Chance => Axis::chance(&figure.y_title),
        Upright::Covering => {
            let marks = figure.y_marks.iter().map(|mark| mark.value);
            Axis::covering(points().map(|(_, y)| y).chain(marks), 0.06, 6, &figure.y_title)?
        }
    };
    let rows = rows_above(&figure.x_marks, &x);
    let frame = Frame::new(x, y, HEIGHT, rows);
    let plot = frame.plot();

    let mut labels = frame.labels();
    for line in &figure.lines {
        labels.keep_clear_of(line.points.iter().map(|point| frame.at(*point)).collect());
    }
    let mut legend = Vec::new();
    for mark in &figure.x_marks {
        let x = frame.x_at(mark.value);
        labels.keep_clear_of(vec![(x, plot.top), (x, plot.bottom)]);
    }
    for mark in &figure.y_marks {
        let y = frame.y_at(mark.value);
        labels.keep_clear_of(vec![(plot.left, y), (plot.right, y)]);
    }
    for mark in &figure.x_marks {
        let spots = frame.spots_above(mark.value, rows);
        if !labels.place(&mark.label, Ink::Limit, true, spots) {
            legend.push(Entry { sample: Sample::Line(Ink::Limit), text: mark.label.clone() });
        }
    }
    for (line, ink) in figure.lines.iter().zip(LOOKS.into_iter().cycle()) {
        if !labels.place_within(plot, &line.label, ink, false, spots_along(line, &frame)) {
            legend.push(Entry { sample: Sample::Line(ink), text: line.label.clone() });
        }
    }
    for mark in figure.y_marks.iter().filter(|mark| frame.shows_y(mark.value)) {
        let y = frame.y_at(mark.value);
        let sides = [(plot.right - 4 * UNIT, Side::End), (plot.left + 6 * UNIT, Side::Start)];
        let inner = (1..8).map(|eighth| (plot.left + (plot.right - plot.left) / 8 * eighth, Side::Middle));
        let spots = sides
            .into_iter()
            .chain(inner)
            .flat_map(|(x, side)| [-11 * UNIT, 11 * UNIT].map(|offset| Spot { x, y: y + offset, side }));
        if !labels.place_within(plot, &mark.label, Ink::Band, false, spots) {
            legend.push(Entry { sample: Sample::Line(Ink::Band), text: mark.label.clone() });
        }
    }

    frame.draw(&figure.about, &labels.placed, &legend, |painter| {
        for mark in figure.y_marks.iter().filter(|mark| frame.shows_y(mark.value)) {
            painter.line(&[(frame.x.low, mark.value), (frame.x.high, mark.value)], Ink::Band)?;
        }
        for mark in figure.x_marks.iter().filter(|mark| frame.shows_x(mark.value)) {
            painter.line(&[(mark.value, frame.y.low), (mark.value, frame.y.high)], Ink::Limit)?;
        }
        for (line, ink) in figure.lines.iter().zip(LOOKS.into_iter().cycle()) {
            painter.line(&line.points, ink)?;
        }
        Ok(())
    })
}

/// Spots along a line, nearest its ends and its highest place first.
fn spots_along(line: &Line, frame: &Frame) -> Vec<Spot> {
    let points: Vec<(i32, i32)> = line
        .points
        .iter()
        .filter(|(x, y)| x.is_finite() && y.is_finite())
        .map(|point| frame.at(*point))
        .collect();
    let Some(last) = points.len().checked_sub(1) else { return Vec::new() };
    let peak = (0..points.len()).min_by_key(|place| points[*place].1).unwrap_or(0);
    let places =
        [peak, last * 3 / 4, last / 4, last / 2, last, 0, last * 7 / 8, last / 8, last * 5 / 8, last * 3 / 8];
    let mut spots = Vec::new();
    for place in places {
        let (x, y) = points[place];
        for (dx, dy, side) in [
            (0, -12, Side::Middle),
            (9, -8, Side::Start),
            (9, 8, Side::Start),
            (-9, -8, Side::End),
            (-9, 8, Side::End),
            (0, 14, Side::Middle),
            (9, 0, Side::Start),
            (-9, 0, Side::End),
            (0, -20, Side::Start),
            (0, -20, Side::End),
        ] {
            spots.push(Spot { x: x + dx * UNIT, y: y + dy * UNIT, side });
        }
    }
    spots
}
