//! What all figures share: a frame with axes, a painter on it, and a legend below.
//!
//! The plotting library draws axes, mesh and series on the backend of [`super::svg`]; the frame knows where in the
//! drawing each value lies, so that labels can be placed before anything is drawn.

use std::fmt;

use plotters::chart::{ChartBuilder, ChartContext};
use plotters::coord::cartesian::Cartesian2d;
use plotters::coord::ranged1d::{KeyPointHint, NoDefaultFormatting, Ranged, ValueFormatter};
use plotters::drawing::{DrawingArea, DrawingAreaErrorKind, IntoDrawingArea};
use plotters::element::{Circle, EmptyElement, PathElement, Polygon};
use plotters::series::LineSeries;
use plotters::style::{Color, IntoFont, ShapeStyle, TextStyle};

use super::figure_axis::Axis;
use super::figure_labels::{Labels, Rectangle, Spot};
use super::svg::{self, About, Ink, Side, SvgBackend, UNIT, Writing, text_width};

/// Size of all letters, in drawing units.
pub const LETTERS: i32 = 1300;
/// Width of every drawing, in drawing units.
pub const WIDTH: i32 = 680 * UNIT;
const LINE_OF_LEGEND: i32 = 22 * UNIT;
const SAMPLE: i32 = 30 * UNIT;

/// Height of a row of labels above the plot, in drawing units.
const ROW_ABOVE: i32 = 20 * UNIT;

/// Rows above the plot that the names of upright lines need on a horizontal axis: as many as it takes for names
/// centred on their lines not to touch, three at most.
pub fn rows_above(marks: &[Mark], axis: &Axis) -> i32 {
    let mut rows: [Vec<(i32, i32)>; 3] = Default::default();
    for mark in marks {
        // The plot is a little narrower than the drawing; the difference is on the safe side of a row too many.
        let middle = along(axis, mark.value, 0, WIDTH * 4 / 5);
        let half = text_width(&mark.label, LETTERS) * 11 / 20 + 5 * UNIT;
        let span = (middle - half, middle + half);
        let free = rows.iter().position(|row| row.iter().all(|other| span.1 < other.0 || other.1 < span.0));
        rows[free.unwrap_or(2)].push(span);
    }
    rows.iter().filter(|row| !row.is_empty()).count() as i32
}

/// Why a figure could not be drawn.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum FigureError {
    /// No finite value was given.
    NothingToDraw,
    /// The values span no range that can be drawn.
    NoRange,
    /// The plotting library failed.
    Drawing(String),
}

impl fmt::Display for FigureError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            FigureError::NothingToDraw => out.write_str("there is no finite value to draw"),
            FigureError::NoRange => out.write_str("the values span no range that can be drawn"),
            FigureError::Drawing(reason) => write!(out, "the figure could not be drawn: {reason}"),
        }
    }
}

impl std::error::Error for FigureError {}

impl<E: std::error::Error + Send + Sync> From<DrawingAreaErrorKind<E>> for FigureError {
    fn from(error: DrawingAreaErrorKind<E>) -> Self {
        FigureError::Drawing(error.to_string())
    }
}

/// A value at which a line runs across the drawing, with its name: a limit, a threshold.
#[derive(Clone, Debug)]
pub struct Mark {
    pub value: f64,
    pub label: String,
}

/// The look of a marker.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Marker {
    /// A filled disc.
    Disc,
    /// An empty ring.
    Ring,
    /// A filled lozenge, larger.
    Lozenge,
    /// A small dot.
    Dot,
}

/// How an entry of the legend looks.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Sample {
    Line(Ink),
    Area(Ink),
    /// A marker on the line of its interval.
    MarkedLine(Ink, Marker),
    Marker(Ink, Marker),
}

/// An entry of the legend below the drawing.
#[derive(Clone, Debug)]
pub struct Entry {
    pub sample: Sample,
    pub text: String,
}

/// Room round the plot, in drawing units.
#[derive(Clone, Copy, Debug)]
pub struct Margins {
    pub left: i32,
    pub right: i32,
    pub top: i32,
    pub bottom: i32,
}

/// Two axes and where they lie in the drawing.
pub struct Frame {
    pub x: Axis,
    pub y: Axis,
    margins: Margins,
    height: i32,
}

impl Frame {
    /// A frame whose left margin suits the ticks of the vertical axis, with so many rows for labels above the plot.
    /// `height` is that of the whole drawing without those rows and without its legend.
    pub fn new(x: Axis, y: Axis, height: i32, rows: i32) -> Frame {
        let strip = rows * ROW_ABOVE;
        let widest = y.ticks.iter().map(|(_, text)| text_width(text, LETTERS)).max().unwrap_or(0);
        let title = if y.title.is_empty() { 0 } else { 22 * UNIT };
        let margins = Margins {
            left: widest.max(8 * UNIT) + 14 * UNIT,
            // Half of the last name of the horizontal axis may reach beyond the plot.
            right: x
                .ticks
                .last()
                .map_or(0, |(_, text)| text_width(text, LETTERS) / 2 + 4 * UNIT)
                .max(18 * UNIT),
            top: 10 * UNIT + title + strip,
            bottom: 28 * UNIT + if x.title.is_empty() { 0 } else { 20 * UNIT },
        };
        Frame { x, y, margins, height: height + strip }
    }

    /// The same frame with more room at the right.
    pub fn with_right_margin(mut self, right: i32) -> Frame {
        self.margins.right = right;
        self
    }

    /// Leaves out ticks of the horizontal axis that would touch each other, keeping evenly spaced ones and the last.
    pub fn thin_names(mut self) -> Frame {
        let width =
            self.x.ticks.iter().map(|(_, text)| text_width(text, LETTERS)).max().unwrap_or(0) + 8 * UNIT;
        let room = self.plot().right - self.plot().left;
        let fitting = (room / width.max(1)).max(1) as usize;
        let every = self.x.ticks.len().div_ceil(fitting).max(1);
        let last = self.x.ticks.len().saturating_sub(1);
        let mut place = 0;
        self.x.ticks.retain(|_| {
            let keep = (last - place).is_multiple_of(every);
            place += 1;
            keep
        });
        self
    }

    /// The plot's rectangle in drawing units.
    pub fn plot(&self) -> Rectangle {
        Rectangle {
            left: self.margins.left,
            top: self.margins.top,
            right: WIDTH - self.margins.right,
            bottom: self.height - self.margins.bottom,
        }
    }

    /// Spots for the name of an upright line, in rows above the plot.
    pub fn spots_above(&self, value: f64, rows: i32) -> Vec<Spot> {
        let plot = self.plot();
        let x = self.x_at(value).clamp(plot.left, plot.right);
        (0..rows)
            .flat_map(|row| {
                let y = plot.top - 12 * UNIT - row * ROW_ABOVE;
                [Side::Middle, Side::End, Side::Start].map(|side| Spot { x, y, side })
            })
            .collect()
    }

    /// Labels that stay within the drawing; those placed by [`Labels::place_within`] the plot stay in it.
    pub fn labels(&self) -> Labels {
        let whole = Rectangle { left: 2 * UNIT, right: WIDTH - 2 * UNIT, top: 0, bottom: self.height };
        Labels::new(whole, LETTERS)
    }

    /// Where a value of the horizontal axis lies.
    pub fn x_at(&self, value: f64) -> i32 {
        let plot = self.plot();
        along(&self.x, value, plot.left, plot.right)
    }

    /// Where a value of the vertical axis lies.
    pub fn y_at(&self, value: f64) -> i32 {
        let plot = self.plot();
        along(&self.y, value, plot.bottom, plot.top)
    }

    /// A point in drawing units.
    pub fn at(&self, point: (f64, f64)) -> (i32, i32) {
        (self.x_at(point.0), self.y_at(point.1))
    }

    /// Whether a value can be shown on the horizontal axis.
    pub fn shows_x(&self, value: f64) -> bool {
        value.is_finite() && value >= self.x.low && value <= self.x.high
    }

    /// Whether a value can be shown on the vertical axis.
    pub fn shows_y(&self, value: f64) -> bool {
        value.is_finite() && value >= self.y.low && value <= self.y.high
    }

    /// Draws: axes first, then what `paint` paints, then the writings, then the legend.
    pub fn draw(
        &self,
        about: &About,
        writings: &[Writing],
        legend: &[Entry],
        paint: impl FnOnce(&mut Painter<'_, '_>) -> Result<(), FigureError>,
    ) -> Result<String, FigureError> {
        let mut body = String::new();
        let legend_places = places_of_legend(legend, self.margins.left);
        let lines = legend_places.iter().map(|(line, _)| line + 1).max().unwrap_or(0);
        let legend_top = self.height + 12 * UNIT;
        let full_height = if lines > 0 { legend_top + lines * LINE_OF_LEGEND } else { self.height };
        {
            let root = SvgBackend::new(&mut body, WIDTH, full_height).into_drawing_area();
            let mut chart = ChartBuilder::on(&root)
                .margin_top(self.margins.top)
                .margin_right(self.margins.right)
                .margin_bottom(full_height - self.height)
                .x_label_area_size(self.margins.bottom)
                .y_label_area_size(self.margins.left)
                .build_cartesian_2d(Scale(self.x.clone()), Scale(self.y.clone()))?;
            let mut mesh = chart.configure_mesh();
            mesh.axis_style(stroke(Ink::Axis))
                .bold_line_style(stroke(Ink::Grid))
                .light_line_style(plotters::style::TRANSPARENT)
                .label_style(letters(Ink::Text))
                .set_all_tick_mark_size(4 * UNIT);
            if !self.x.mesh {
                mesh.disable_x_mesh();
            }
            if !self.y.mesh {
                mesh.disable_y_mesh();
            }
            mesh.draw()?;
            let mut painter = Painter { chart, root: &root };
            paint(&mut painter)?;
            for ((line, left), entry) in legend_places.iter().zip(legend) {
                painter.sample(entry.sample, *left, legend_top + line * LINE_OF_LEGEND)?;
            }
        }
        for writing in self.titles().iter().chain(writings) {
            svg::write_text(&mut body, writing);
        }
        for ((line, left), entry) in legend_places.iter().zip(legend) {
            let y = legend_top + line * LINE_OF_LEGEND + LETTERS * 7 / 20;
            let (x, text) = (left + SAMPLE + 7 * UNIT, entry.text.clone());
            let writing =
                Writing { text, x, y, side: Side::Start, size: LETTERS, ink: Ink::Text, bold: false };
            svg::write_text(&mut body, &writing);
        }
        Ok(svg::document(about, WIDTH, full_height, &body))
    }

    fn titles(&self) -> Vec<Writing> {
        let plot = self.plot();
        let mut titles = Vec::new();
        if !self.y.title.is_empty() {
            titles.push(faint(
                svg::fitted(&self.y.title, LETTERS, WIDTH - 10 * UNIT),
                4 * UNIT,
                18 * UNIT,
                Side::Start,
            ));
        }
        if !self.x.title.is_empty() {
            let text = svg::fitted(&self.x.title, LETTERS, WIDTH - plot.left);
            // Right of the plot's middle it could leave the drawing; a title as wide as the plot starts with it.
            let (x, side) = if text_width(&text, LETTERS) > plot.right - plot.left {
                (plot.left, Side::Start)
            } else {
                ((plot.left + plot.right) / 2, Side::Middle)
            };
            titles.push(faint(text, x, self.height - 8 * UNIT, side));
        }
        titles
    }
}

fn faint(text: String, x: i32, y: i32, side: Side) -> Writing {
    Writing { text, x, y, side, size: LETTERS, ink: Ink::Faint, bold: false }
}

/// An axis as the plotting library wants it: our own ticks and texts, and a mapping without its fallbacks.
struct Scale(Axis);

impl Ranged for Scale {
    type FormatOption = NoDefaultFormatting;
    type ValueType = f64;

    fn map(&self, value: &f64, limit: (i32, i32)) -> i32 {
        along(&self.0, *value, limit.0, limit.1)
    }

    fn key_points<Hint: KeyPointHint>(&self, hint: Hint) -> Vec<f64> {
        if hint.weight().allow_light_points() {
            return Vec::new();
        }
        self.0.ticks.iter().map(|(place, _)| *place).collect()
    }

    fn range(&self) -> std::ops::Range<f64> {
        self.0.low..self.0.high
    }
}

impl ValueFormatter<f64> for Scale {
    fn format(place: &f64) -> String {
        super::text::record(*place)
    }

    fn format_ext(&self, place: &f64) -> String {
        let tick = self.0.ticks.iter().find(|(tick, _)| tick == place);
        tick.map(|(_, text)| text.clone()).unwrap_or_default()
    }
}

/// Where a value lies between two ends in drawing units, to the nearest unit; never far outside.
fn along(axis: &Axis, value: f64, start: i32, end: i32) -> i32 {
    let share = ((value - axis.low) / (axis.high - axis.low)).clamp(-1.0, 2.0);
    start + (share * f64::from(end - start)).round() as i32
}

fn letters(ink: Ink) -> TextStyle<'static> {
    ("sans-serif", LETTERS).into_font().color(&ink.colour())
}

fn stroke(ink: Ink) -> ShapeStyle {
    ShapeStyle { color: ink.colour().to_rgba(), filled: false, stroke_width: 1 }
}

fn fill(ink: Ink) -> ShapeStyle {
    ink.colour().filled()
}

/// The line and the left edge of each entry.
fn places_of_legend(legend: &[Entry], left: i32) -> Vec<(i32, i32)> {
    let mut places = Vec::new();
    let (mut line, mut x) = (0, left);
    for entry in legend {
        let width = SAMPLE + 7 * UNIT + text_width(&entry.text, LETTERS) + 18 * UNIT;
        if x > left && x + width > WIDTH {
            line += 1;
            x = left;
        }
        places.push((line, x));
        x += width;
    }
    places
}

type Chart<'area, 'body> = ChartContext<'area, SvgBackend<'body>, Cartesian2d<Scale, Scale>>;

/// Paints series on the frame, in the values of its axes.
pub struct Painter<'area, 'body> {
    chart: Chart<'area, 'body>,
    root: &'area DrawingArea<SvgBackend<'body>, plotters::coord::Shift>,
}

impl Painter<'_, '_> {
    /// A line through points; those that are not finite are left out.
    pub fn line(&mut self, points: &[(f64, f64)], ink: Ink) -> Result<(), FigureError> {
        let finite = points.iter().copied().filter(|(x, y)| x.is_finite() && y.is_finite());
        self.chart.draw_series(LineSeries::new(finite, stroke(ink)))?;
        Ok(())
    }

    /// The area within a closed outline.
    pub fn area(&mut self, outline: &[(f64, f64)], ink: Ink) -> Result<(), FigureError> {
        let finite: Vec<_> =
            outline.iter().copied().filter(|(x, y)| x.is_finite() && y.is_finite()).collect();
        if finite.len() > 2 {
            self.chart.draw_series([Polygon::new(finite, fill(ink))])?;
        }
        Ok(())
    }

    /// An interval upright at `x`, with caps of half the given width in drawing units.
    pub fn upright(&mut self, x: f64, low: f64, high: f64, cap: i32, ink: Ink) -> Result<(), FigureError> {
        self.line(&[(x, low), (x, high)], ink)?;
        for end in [low, high].into_iter().filter(|end| end.is_finite()) {
            let cap = PathElement::new(vec![(-cap, 0), (cap, 0)], stroke(ink));
            self.chart.draw_series([EmptyElement::at((x, end)) + cap])?;
        }
        Ok(())
    }

    /// An interval lying at `y`, with caps of half the given height in drawing units.
    pub fn lying(&mut self, y: f64, low: f64, high: f64, cap: i32, ink: Ink) -> Result<(), FigureError> {
        self.line(&[(low, y), (high, y)], ink)?;
        for end in [low, high].into_iter().filter(|end| end.is_finite()) {
            let cap = PathElement::new(vec![(0, -cap), (0, cap)], stroke(ink));
            self.chart.draw_series([EmptyElement::at((end, y)) + cap])?;
        }
        Ok(())
    }

    /// A marker at a point.
    pub fn marker(&mut self, point: (f64, f64), marker: Marker, ink: Ink) -> Result<(), FigureError> {
        if !(point.0.is_finite() && point.1.is_finite()) {
            return Ok(());
        }
        match marker {
            Marker::Lozenge => {
                let outline = lozenge(0, 0);
                self.chart.draw_series([EmptyElement::at(point) + Polygon::new(outline, fill(ink))])?;
            }
            round => {
                let (radius, style) = disc(round, ink);
                self.chart.draw_series([Circle::new(point, radius, style)])?;
            }
        }
        Ok(())
    }

    fn sample(&mut self, sample: Sample, left: i32, y: i32) -> Result<(), FigureError> {
        let across = vec![(left, y), (left + SAMPLE, y)];
        let middle = (left + SAMPLE / 2, y);
        match sample {
            Sample::Line(ink) => self.root.draw(&PathElement::new(across, stroke(ink)))?,
            Sample::Area(ink) => {
                let (top, bottom) = (y - 6 * UNIT, y + 6 * UNIT);
                let outline =
                    vec![(left, top), (left + SAMPLE, top), (left + SAMPLE, bottom), (left, bottom)];
                self.root.draw(&Polygon::new(outline, fill(ink)))?;
            }
            Sample::MarkedLine(ink, marker) => {
                self.root.draw(&PathElement::new(across, stroke(ink)))?;
                self.sample_marker(marker, ink, middle)?;
            }
            Sample::Marker(ink, marker) => self.sample_marker(marker, ink, middle)?,
        }
        Ok(())
    }

    fn sample_marker(&mut self, marker: Marker, ink: Ink, at: (i32, i32)) -> Result<(), FigureError> {
        match marker {
            Marker::Lozenge => self.root.draw(&Polygon::new(lozenge(at.0, at.1), fill(ink)))?,
            round => {
                let (radius, style) = disc(round, ink);
                self.root.draw(&Circle::new(at, radius, style))?;
            }
        }
        Ok(())
    }
}

fn lozenge(x: i32, y: i32) -> Vec<(i32, i32)> {
    let reach = 6 * UNIT;
    vec![(x - reach, y), (x, y - reach), (x + reach, y), (x, y + reach)]
}

fn disc(marker: Marker, ink: Ink) -> (i32, ShapeStyle) {
    match marker {
        Marker::Ring => (4 * UNIT, stroke(ink)),
        Marker::Dot => (2 * UNIT, fill(ink)),
        Marker::Disc | Marker::Lozenge => (4 * UNIT, fill(ink)),
    }
}
