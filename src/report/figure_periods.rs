//! The periods in time: each period's mean with its interval, the reviewed period's level, limits and events.

use super::figure_axis::Axis;
use super::figure_frame::{Entry, FigureError, Frame, Mark, Marker, Sample, rows_above};
use super::figure_labels::{Labels, Rectangle, Spot};
use super::svg::{About, Ink, Side, UNIT};

const HEIGHT: i32 = 350 * UNIT;

/// A value with the interval round it; an absent end is not drawn.
#[derive(Clone, Copy, Debug)]
pub struct Estimate {
    pub value: f64,
    pub lower: Option<f64>,
    pub upper: Option<f64>,
}

/// One period: its name and, where it has readings, what they say.
#[derive(Clone, Debug)]
pub struct Period {
    pub name: String,
    /// The mean of its readings with its interval.
    pub mean: Option<Estimate>,
    /// The level after both prior and readings, drawn beside the mean with a larger mark.
    pub level: Option<Estimate>,
}

/// A stretch of values across all periods.
#[derive(Clone, Debug)]
pub struct Across {
    pub lower: f64,
    pub middle: f64,
    pub upper: f64,
    pub label: String,
}

/// A single value in a period, counted from 0.
#[derive(Clone, Copy, Debug)]
pub struct Single {
    pub period: usize,
    pub value: f64,
}

/// What the figure of the periods shows. Labels that stand for nothing drawn do not appear.
#[derive(Clone, Debug)]
pub struct PeriodsFigure {
    pub about: About,
    pub value_title: String,
    pub period_title: String,
    /// In order of time.
    pub periods: Vec<Period>,
    pub means_label: String,
    pub level_label: String,
    /// The long-run mean and its interval.
    pub long_run: Option<Across>,
    pub limits: Vec<Mark>,
    /// `value` is the place among the periods: 3.0 at the fourth period, 3.5 between it and the fifth.
    pub events: Vec<Mark>,
    /// Single readings that count, small dots.
    pub readings: Vec<Single>,
    pub readings_label: String,
    /// Readings or periods left out, drawn hollow.
    pub excluded: Vec<Single>,
    pub excluded_label: String,
}

/// Draws the figure of the periods.
pub fn periods(figure: &PeriodsFigure) -> Result<String, FigureError> {
    let frame = frame(figure)?;
    let plot = frame.plot();
    let mut labels = frame.labels();
    keep_clear_of_marks(figure, &frame, &mut labels);

    let mut legend = Vec::new();
    for mark in figure.limits.iter().filter(|mark| frame.shows_y(mark.value)) {
        let y = frame.y_at(mark.value);
        let (right, left) = (plot.right - 4 * UNIT, plot.left + 6 * UNIT);
        let mut spots = Vec::new();
        for offset in [-11 * UNIT, 11 * UNIT] {
            spots.push(Spot { x: right, y: y + offset, side: Side::End });
            spots.push(Spot { x: left, y: y + offset, side: Side::Start });
            spots.push(Spot { x: (left + right) / 2, y: y + offset, side: Side::Middle });
        }
        if !labels.place_within(plot, &mark.label, Ink::Limit, true, spots) {
            legend.push(Entry { sample: Sample::Line(Ink::Limit), text: mark.label.clone() });
        }
    }
    for mark in figure.limits.iter().filter(|mark| mark.value.is_finite() && !frame.shows_y(mark.value)) {
        let above = mark.value > frame.y.high;
        let text = format!("{} {}", mark.label, if above { '↑' } else { '↓' });
        let y = if above { plot.top + 11 * UNIT } else { plot.bottom - 11 * UNIT };
        let spots = [(plot.right - 4 * UNIT, Side::End), (plot.left + 6 * UNIT, Side::Start)]
            .map(|(x, side)| Spot { x, y, side });
        if !labels.place_within(plot, &text, Ink::Limit, true, spots) {
            legend.push(Entry { sample: Sample::Line(Ink::Limit), text });
        }
    }
    for mark in figure.events.iter().filter(|mark| frame.shows_x(mark.value)) {
        let spots = frame.spots_above(mark.value, rows_above(&figure.events, &frame.x));
        if !labels.place(&mark.label, Ink::Event, false, spots) {
            legend.push(Entry { sample: Sample::Line(Ink::Event), text: mark.label.clone() });
        }
    }
    legend.extend(entries(figure));

    frame.draw(&figure.about, &labels.placed, &legend, |painter| {
        let (first, last) = (frame.x.low, frame.x.high);
        if let Some(band) = &figure.long_run {
            let outline = [(first, band.lower), (last, band.lower), (last, band.upper), (first, band.upper)];
            painter.area(&outline, Ink::Band)?;
            painter.line(&[(first, band.middle), (last, band.middle)], Ink::Band)?;
        }
        for mark in figure.events.iter().filter(|mark| frame.shows_x(mark.value)) {
            painter.line(&[(mark.value, frame.y.low), (mark.value, frame.y.high)], Ink::Event)?;
        }
        for mark in figure.limits.iter().filter(|mark| frame.shows_y(mark.value)) {
            painter.line(&[(first, mark.value), (last, mark.value)], Ink::Limit)?;
        }
        for single in &figure.readings {
            painter.marker((single.period as f64 - 0.2, single.value), Marker::Dot, Ink::Faint)?;
        }
        for single in &figure.excluded {
            painter.marker((single.period as f64 - 0.2, single.value), Marker::Ring, Ink::Faint)?;
        }
        for (place, period) in figure.periods.iter().enumerate() {
            let place = place as f64;
            if let Some(mean) = &period.mean {
                upright(painter, place, mean, Ink::Text)?;
                painter.marker((place, mean.value), Marker::Disc, Ink::Text)?;
            }
            if let Some(level) = &period.level {
                upright(painter, place + 0.24, level, Ink::Posterior)?;
                painter.marker((place + 0.24, level.value), Marker::Lozenge, Ink::Posterior)?;
            }
        }
        Ok(())
    })
}

fn upright(
    painter: &mut super::figure_frame::Painter<'_, '_>,
    place: f64,
    estimate: &Estimate,
    ink: Ink,
) -> Result<(), FigureError> {
    let lower = estimate.lower.unwrap_or(estimate.value);
    let upper = estimate.upper.unwrap_or(estimate.value);
    painter.upright(place, lower, upper, if upper > lower { 4 * UNIT } else { 0 }, ink)
}

fn values(figure: &PeriodsFigure) -> Vec<f64> {
    let mut values = Vec::new();
    for estimate in figure.periods.iter().flat_map(|period| [period.mean, period.level]).flatten() {
        values.push(estimate.value);
        values.extend(estimate.lower);
        values.extend(estimate.upper);
    }
    if let Some(band) = &figure.long_run {
        values.extend([band.lower, band.middle, band.upper]);
    }
    values.extend(figure.readings.iter().chain(&figure.excluded).map(|single| single.value));
    values
}

fn frame(figure: &PeriodsFigure) -> Result<Frame, FigureError> {
    let mut shown: Vec<f64> = values(figure).into_iter().filter(|value| value.is_finite()).collect();
    let low = shown.iter().copied().reduce(f64::min).ok_or(FigureError::NothingToDraw)?;
    let high = shown.iter().copied().reduce(f64::max).ok_or(FigureError::NothingToDraw)?;
    // A limit far from everything else would flatten the rest; it is then named at the edge with an arrow.
    let reach = if high > low { 1.5 * (high - low) } else { 0.2 * high.abs() };
    let near = |value: &f64| *value >= low - reach && *value <= high + reach;
    shown.extend(figure.limits.iter().map(|mark| mark.value).filter(near));
    let x = Axis::names(figure.periods.iter().map(|period| period.name.clone()), &figure.period_title)?;
    let y = Axis::covering(shown, 0.08, 6, &figure.value_title)?;
    let rows = rows_above(&figure.events, &x);
    Ok(Frame::new(x, y, HEIGHT, rows).thin_names())
}

fn keep_clear_of_marks(figure: &PeriodsFigure, frame: &Frame, labels: &mut Labels) {
    let around = |(x, y): (i32, i32), reach: i32| Rectangle {
        left: x - reach,
        right: x + reach,
        top: y - reach,
        bottom: y + reach,
    };
    for (place, period) in figure.periods.iter().enumerate() {
        for (estimate, shift) in [(period.mean, 0.0), (period.level, 0.24)] {
            let Some(estimate) = estimate else { continue };
            let place = place as f64 + shift;
            labels.keep_out_of(around(frame.at((place, estimate.value)), 6 * UNIT));
            let lower = estimate.lower.unwrap_or(estimate.value);
            let upper = estimate.upper.unwrap_or(estimate.value);
            labels.keep_clear_of(vec![frame.at((place, lower)), frame.at((place, upper))]);
        }
    }
    for single in figure.readings.iter().chain(&figure.excluded) {
        labels.keep_out_of(around(frame.at((single.period as f64 - 0.2, single.value)), 4 * UNIT));
    }
    let plot = frame.plot();
    for mark in figure.limits.iter().filter(|mark| frame.shows_y(mark.value)) {
        let y = frame.y_at(mark.value);
        labels.keep_clear_of(vec![(plot.left, y), (plot.right, y)]);
    }
    for mark in figure.events.iter().filter(|mark| frame.shows_x(mark.value)) {
        let x = frame.x_at(mark.value);
        labels.keep_clear_of(vec![(x, plot.top), (x, plot.bottom)]);
    }
}

fn entries(figure: &PeriodsFigure) -> Vec<Entry> {
    let mut entries = Vec::new();
    let mut add = |drawn: bool, sample: Sample, text: &str| {
        if drawn {
            entries.push(Entry { sample, text: text.to_owned() });
        }
    };
    let any = |pick: fn(&Period) -> bool| figure.periods.iter().any(pick);
    add(
        any(|period| period.mean.is_some()),
        Sample::MarkedLine(Ink::Text, Marker::Disc),
        &figure.means_label,
    );
    add(
        any(|period| period.level.is_some()),
        Sample::MarkedLine(Ink::Posterior, Marker::Lozenge),
        &figure.level_label,
    );
    if let Some(band) = &figure.long_run {
        add(true, Sample::Area(Ink::Band), &band.label);
    }
    add(!figure.readings.is_empty(), Sample::Marker(Ink::Faint, Marker::Dot), &figure.readings_label);
    add(!figure.excluded.is_empty(), Sample::Marker(Ink::Faint, Marker::Ring), &figure.excluded_label);
    entries
}
