//! The level: densities of the prior, of what the readings alone say and of both together, with the interval and
//! the limits.

use super::figure_axis::Axis;
use super::figure_frame::{Entry, FigureError, Frame, Mark, Sample, rows_above};
use super::figure_labels::{Rectangle, Spot};
use super::svg::{About, Ink, Side, UNIT};

const HEIGHT: i32 = 330 * UNIT;

/// A density as points (value, height), in the order of the values, and its name.
#[derive(Clone, Debug)]
pub struct Curve {
    pub label: String,
    pub points: Vec<(f64, f64)>,
}

/// A part of the axis under the last curve, with its name; an end that is absent lies at the edge of the figure.
#[derive(Clone, Debug)]
pub struct Interval {
    pub lower: Option<f64>,
    pub upper: Option<f64>,
    pub label: String,
}

/// What the figure of a level shows.
#[derive(Clone, Debug)]
pub struct LevelFigure {
    pub about: About,
    /// The quantity and its unit, for the axis.
    pub value_title: String,
    /// What the height means, for the other axis.
    pub height_title: String,
    /// Drawn dashed.
    pub prior: Option<Curve>,
    /// Drawn dotted.
    pub readings: Option<Curve>,
    /// Drawn solid.
    pub posterior: Curve,
    /// Shaded under the posterior and bracketed below it.
    pub interval: Option<Interval>,
    pub limits: Vec<Mark>,
    /// Single values, each a short upright on the axis, and their name.
    pub ticks: Option<(Vec<f64>, String)>,
}

/// Draws the figure of a level. Limits far outside the curves widen the axis only up to three times the range of
/// the curves; one farther away is named at the edge with an arrow.
pub fn level(figure: &LevelFigure) -> Result<String, FigureError> {
    let curves: Vec<(&Curve, Ink)> = [
        figure.prior.as_ref().map(|curve| (curve, Ink::Prior)),
        figure.readings.as_ref().map(|curve| (curve, Ink::Readings)),
        Some((&figure.posterior, Ink::Posterior)),
    ]
    .into_iter()
    .flatten()
    .collect();
    let all = || curves.iter().flat_map(|(curve, _)| curve.points.iter().copied());
    let (low, high) = range(all().map(|(x, _)| x)).ok_or(FigureError::NothingToDraw)?;
    let reach = (high - low).abs();
    let near = |mark: &&Mark| mark.value >= low - reach && mark.value <= high + reach;
    let shown = figure.limits.iter().filter(near).map(|mark| mark.value);
    let ticks = figure.ticks.iter().flat_map(|(values, _)| values.iter().copied());
    let x = Axis::covering(all().map(|(x, _)| x).chain(shown).chain(ticks), 0.03, 7, &figure.value_title)?;
    let y = Axis::heights(all().map(|(_, y)| y), &figure.height_title)?;
    let rows = rows_above(&figure.limits, &x);
    let frame = Frame::new(x, y, HEIGHT, rows);
    let plot = frame.plot();

    let mut labels = frame.labels();
    labels.keep_out_of(Rectangle { top: plot.bottom - 16 * UNIT, ..plot });
    for (curve, _) in &curves {
        labels.keep_clear_of(curve.points.iter().map(|point| frame.at(*point)).collect());
    }
    // The filled shape is kept free as well: every few points an upright from the curve to the axis.
    for point in figure.posterior.points.iter().filter(|(x, y)| x.is_finite() && y.is_finite()).step_by(3) {
        labels.keep_clear_of(vec![frame.at(*point), frame.at((point.0, 0.0))]);
    }
    let mut legend = Vec::new();
    let mut limit_lines = Vec::new();
    for mark in figure.limits.iter().filter(|mark| mark.value.is_finite()) {
        let inside = frame.shows_x(mark.value);
        if inside {
            let x = frame.x_at(mark.value);
            limit_lines.push(mark.value);
            labels.keep_clear_of(vec![(x, plot.top), (x, plot.bottom)]);
        }
        let text = match (inside, mark.value > frame.x.high) {
            (true, _) => mark.label.clone(),
            (false, true) => format!("{} →", mark.label),
            (false, false) => format!("← {}", mark.label),
        };
        let spots = frame.spots_above(mark.value, rows);
        if !labels.place(&text, Ink::Limit, true, spots) {
            legend.push(Entry { sample: Sample::Line(Ink::Limit), text });
        }
    }
    for (curve, ink) in curves.iter().rev() {
        let spots = spots_beside(curve, &frame);
        if !labels.place_within(plot, &curve.label, *ink, *ink == Ink::Posterior, spots) {
            legend.push(Entry { sample: Sample::Line(*ink), text: curve.label.clone() });
        }
    }
    if let Some(interval) = &figure.interval {
        legend.insert(0, Entry { sample: Sample::Area(Ink::Shade), text: interval.label.clone() });
    }
    if let Some((_, name)) = &figure.ticks {
        legend.push(Entry { sample: Sample::Line(Ink::Text), text: name.clone() });
    }

    frame.draw(&figure.about, &labels.placed, &legend, |painter| {
        if let Some(interval) = &figure.interval {
            let from = interval.lower.unwrap_or(frame.x.low).max(frame.x.low);
            let to = interval.upper.unwrap_or(frame.x.high).min(frame.x.high);
            painter.area(&under(&figure.posterior.points, from, to), Ink::Shade)?;
            let y = frame.y.high * 0.018;
            painter.line(&[(from, y), (to, y)], Ink::Posterior)?;
            let tick = frame.y.high * 0.036;
            for end in [interval.lower, interval.upper].into_iter().flatten() {
                if frame.shows_x(end) {
                    painter.line(&[(end, 0.0), (end, tick)], Ink::Posterior)?;
                }
            }
        }
        for value in &limit_lines {
            painter.line(&[(*value, 0.0), (*value, frame.y.high)], Ink::Limit)?;
        }
        for (curve, ink) in &curves {
            painter.line(&curve.points, *ink)?;
        }
        for value in figure.ticks.iter().flat_map(|(values, _)| values) {
            painter.line(&[(*value, 0.0), (*value, 0.045 * frame.y.high)], Ink::Text)?;
        }
        Ok(())
    })
}

fn range(values: impl Iterator<Item = f64>) -> Option<(f64, f64)> {
    values.filter(|value| value.is_finite()).fold(None, |range, value| match range {
        None => Some((value, value)),
        Some((low, high)) => Some((f64::min(low, value), f64::max(high, value))),
    })
}

/// Spots beside a curve: over its top, then right and left of it on the way down.
fn spots_beside(curve: &Curve, frame: &Frame) -> Vec<Spot> {
    let mut spots = Vec::new();
    let points: Vec<(f64, f64)> =
        curve.points.iter().copied().filter(|(x, y)| x.is_finite() && y.is_finite()).collect();
    let Some(top) = points.iter().copied().reduce(|best, point| if point.1 > best.1 { point } else { best })
    else {
        return spots;
    };
    let above = |share: f64| points.iter().filter(move |(_, y)| *y >= top.1 * share).map(|(x, _)| *x);
    let gap = 8 * UNIT;
    let (x, y) = frame.at(top);
    spots.push(Spot { x, y: y - 12 * UNIT, side: Side::Middle });
    for percent in (15..=95).rev().step_by(8) {
        let share = f64::from(percent) / 100.0;
        let y = frame.y_at(top.1 * share);
        if let Some((left, right)) = range(above(share)) {
            spots.push(Spot { x: frame.x_at(right) + gap, y, side: Side::Start });
            spots.push(Spot { x: frame.x_at(left) - gap, y, side: Side::End });
            spots.push(Spot { x: frame.x_at(right) + gap, y: y - 10 * UNIT, side: Side::Start });
            spots.push(Spot { x: frame.x_at(left) - gap, y: y - 10 * UNIT, side: Side::End });
        }
    }
    spots
}

/// The outline of the area under a curve between two values, its ends read off the straight pieces of the curve.
fn under(points: &[(f64, f64)], from: f64, to: f64) -> Vec<(f64, f64)> {
    let mut outline = vec![(from, 0.0)];
    outline.extend(height_at(points, from).map(|height| (from, height)));
    outline.extend(points.iter().copied().filter(|(x, _)| *x > from && *x < to));
    outline.extend(height_at(points, to).map(|height| (to, height)));
    outline.push((to, 0.0));
    outline
}

fn height_at(points: &[(f64, f64)], x: f64) -> Option<f64> {
    points.windows(2).find(|pair| pair[0].0 <= x && x <= pair[1].0).map(|pair| {
        let ((x0, y0), (x1, y1)) = (pair[0], pair[1]);
        if x1 > x0 { y0 + (y1 - y0) * ((x - x0) / (x1 - x0)) } else { y0 }
    })
}
