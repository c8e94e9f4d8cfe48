//! The normal quantile plot: ordered readings against the normal quantiles of their ranks.

use super::figure_axis::Axis;
use super::figure_frame::{Entry, FigureError, Frame, Marker, Sample};
use super::svg::{About, Ink, UNIT};

const HEIGHT: i32 = 360 * UNIT;

/// A reading at the normal quantile of its rank.
#[derive(Clone, Copy, Debug)]
pub struct QuantilePoint {
    /// In standard deviations.
    pub quantile: f64,
    /// The reading, or its residual.
    pub value: f64,
    /// Drawn hollow: flagged, or left out.
    pub hollow: bool,
}

/// One abscissa of the band within which points are expected.
#[derive(Clone, Copy, Debug)]
pub struct BandPoint {
    pub quantile: f64,
    pub lower: f64,
    pub upper: f64,
}

/// What the quantile plot shows.
#[derive(Clone, Debug)]
pub struct QuantilesFigure {
    pub about: About,
    pub quantile_title: String,
    pub value_title: String,
    pub points: Vec<QuantilePoint>,
    pub points_label: String,
    pub hollow_label: String,
    /// Value at quantile 0 and rise per standard deviation.
    pub line: Option<(f64, f64)>,
    pub line_label: String,
    /// In order of the quantile; empty for none.
    pub band: Vec<BandPoint>,
    pub band_label: String,
}

/// Draws the normal quantile plot.
pub fn quantiles(figure: &QuantilesFigure) -> Result<String, FigureError> {
    let points: Vec<&QuantilePoint> =
        figure.points.iter().filter(|point| point.quantile.is_finite() && point.value.is_finite()).collect();
    if points.is_empty() {
        return Err(FigureError::NothingToDraw);
    }
    let quantiles =
        points.iter().map(|point| point.quantile).chain(figure.band.iter().map(|point| point.quantile));
    let x = Axis::covering(quantiles, 0.06, 7, &figure.quantile_title)?;
    let line = figure.line.map(|(at_zero, rise)| [x.low, x.high].map(|q| (q, at_zero + rise * q)));
    let values = points
        .iter()
        .map(|point| point.value)
        .chain(figure.band.iter().flat_map(|point| [point.lower, point.upper]))
        .chain(line.iter().flatten().map(|(_, value)| *value));
    let y = Axis::covering(values, 0.05, 6, &figure.value_title)?;
    let frame = Frame::new(x, y, HEIGHT, 0);

    let mut legend = Vec::new();
    let mut add = |drawn: bool, sample: Sample, text: &str| {
        if drawn {
            legend.push(Entry { sample, text: text.to_owned() });
        }
    };
    add(
        points.iter().any(|point| !point.hollow),
        Sample::Marker(Ink::Posterior, Marker::Disc),
        &figure.points_label,
    );
    add(
        points.iter().any(|point| point.hollow),
        Sample::Marker(Ink::Limit, Marker::Ring),
        &figure.hollow_label,
    );
    add(line.is_some(), Sample::Line(Ink::Text), &figure.line_label);
    add(figure.band.len() > 1, Sample::Area(Ink::Band), &figure.band_label);

    frame.draw(&figure.about, &[], &legend, |painter| {
        let upper = figure.band.iter().map(|point| (point.quantile, point.upper));
        let lower = figure.band.iter().rev().map(|point| (point.quantile, point.lower));
        painter.area(&upper.chain(lower).collect::<Vec<_>>(), Ink::Band)?;
        if let Some(line) = &line {
            painter.line(line, Ink::Text)?;
        }
        for point in &points {
            let (marker, ink) =
                if point.hollow { (Marker::Ring, Ink::Limit) } else { (Marker::Disc, Ink::Posterior) };
            painter.marker((point.quantile, point.value), marker, ink)?;
        }
        Ok(())
    })
}
