//! Where labels go: beside what they name, over nothing else; what finds no place goes into the legend.

use super::svg::{Ink, Side, Writing, text_width};

/// Room kept free round a label, in drawing units.
const CLEARANCE: i32 = 300;

/// A rectangle in drawing units.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Rectangle {
    pub left: i32,
    pub top: i32,
    pub right: i32,
    pub bottom: i32,
}

impl Rectangle {
    fn meets(&self, other: &Rectangle) -> bool {
        self.left < other.right
            && other.left < self.right
            && self.top < other.bottom
            && other.top < self.bottom
    }

    fn within(&self, other: &Rectangle) -> bool {
        self.left >= other.left
            && self.right <= other.right
            && self.top >= other.top
            && self.bottom <= other.bottom
    }

    fn wider(&self, by: i32) -> Rectangle {
        Rectangle {
            left: self.left - by,
            top: self.top - by,
            right: self.right + by,
            bottom: self.bottom + by,
        }
    }

    /// Whether the straight line between two points passes through.
    fn crossed_by(&self, from: (i32, i32), to: (i32, i32)) -> bool {
        let hull = Rectangle {
            left: from.0.min(to.0),
            right: from.0.max(to.0) + 1,
            top: from.1.min(to.1),
            bottom: from.1.max(to.1) + 1,
        };
        if !self.meets(&hull) {
            return false;
        }
        // The line passes through unless all four corners lie on one side of it.
        let side = |x: i32, y: i32| {
            let along = (i64::from(to.0 - from.0), i64::from(to.1 - from.1));
            let corner = (i64::from(x - from.0), i64::from(y - from.1));
            (along.0 * corner.1 - along.1 * corner.0).signum()
        };
        let corners = [
            side(self.left, self.top),
            side(self.right, self.top),
            side(self.left, self.bottom),
            side(self.right, self.bottom),
        ];
        !(corners.iter().all(|side| *side > 0) || corners.iter().all(|side| *side < 0))
    }
}

/// A place a label may take: the middle of its height, and the side of the text that lies there.
#[derive(Clone, Copy, Debug)]
pub struct Spot {
    pub x: i32,
    pub y: i32,
    pub side: Side,
}

/// The labels of one drawing and all they must not cover.
pub struct Labels {
    bounds: Rectangle,
    size: i32,
    taken: Vec<Rectangle>,
    strokes: Vec<Vec<(i32, i32)>>,
    pub placed: Vec<Writing>,
}

impl Labels {
    pub fn new(bounds: Rectangle, size: i32) -> Labels {
        Labels { bounds, size, taken: Vec::new(), strokes: Vec::new(), placed: Vec::new() }
    }

    /// A line that labels keep clear of.
    pub fn keep_clear_of(&mut self, stroke: Vec<(i32, i32)>) {
        self.strokes.push(stroke);
    }

    /// A rectangle that labels keep clear of.
    pub fn keep_out_of(&mut self, rectangle: Rectangle) {
        self.taken.push(rectangle);
    }

    /// Places the label at the first free spot; false if there is none.
    pub fn place(&mut self, text: &str, ink: Ink, bold: bool, spots: impl IntoIterator<Item = Spot>) -> bool {
        self.place_within(self.bounds, text, ink, bold, spots)
    }

    /// Places the label at the first free spot within a rectangle; false if there is none.
    pub fn place_within(
        &mut self,
        bounds: Rectangle,
        text: &str,
        ink: Ink,
        bold: bool,
        spots: impl IntoIterator<Item = Spot>,
    ) -> bool {
        let width = text_width(text, self.size) * if bold { 110 } else { 100 } / 100;
        for spot in spots {
            let left = match spot.side {
                Side::Start => spot.x,
                Side::Middle => spot.x - width / 2,
                Side::End => spot.x - width,
            };
            let rectangle = Rectangle {
                left,
                right: left + width,
                top: spot.y - self.size * 11 / 20,
                bottom: spot.y + self.size * 11 / 20,
            };
            let roomy = rectangle.wider(CLEARANCE);
            let free = rectangle.within(&bounds)
                && !self.taken.iter().any(|taken| taken.meets(&roomy))
                && !self
                    .strokes
                    .iter()
                    .any(|stroke| stroke.windows(2).any(|pair| roomy.crossed_by(pair[0], pair[1])));
            if free {
                self.taken.push(rectangle);
                let y = spot.y + self.size * 7 / 20;
                let (text, size) = (text.to_owned(), self.size);
                self.placed.push(Writing { text, x: spot.x, y, side: spot.side, size, ink, bold });
                return true;
            }
        }
        false
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const BOUNDS: Rectangle = Rectangle { left: 0, top: 0, right: 60_000, bottom: 30_000 };

    fn spot(x: i32, y: i32) -> Spot {
        Spot { x, y, side: Side::Start }
    }

    #[test]
    fn labels_do_not_cover_labels() {
        let mut labels = Labels::new(BOUNDS, 1300);
        assert!(labels.place("limit 50 mg/L", Ink::Limit, false, [spot(1000, 2000)]));
        assert!(!labels.place("posterior", Ink::Posterior, false, [spot(2000, 2300)]));
        assert!(labels.place("posterior", Ink::Posterior, false, [spot(2000, 2300), spot(2000, 6000)]));
    }

    #[test]
    fn labels_do_not_cover_lines_nor_leave_the_drawing() {
        let mut labels = Labels::new(BOUNDS, 1300);
        labels.keep_clear_of(vec![(0, 0), (60_000, 30_000)]);
        assert!(!labels.place("on the line", Ink::Text, false, [spot(20_000, 10_000)]));
        assert!(!labels.place("off the edge", Ink::Text, false, [spot(58_000, 4000)]));
        assert!(labels.place("beside it", Ink::Text, false, [spot(30_000, 4000)]));
    }
}
