//! Drawings as SVG text: the backend beneath the plotting library, and what it does not offer.
//!
//! * One drawing unit is a hundredth of a pixel. Coordinates are whole numbers until they are printed, so no
//!   floating-point formatting and no platform can move a digit.
//! * A drawing names no colour. A "colour" handed to the plotting library is the number of an [`Ink`]; it becomes a
//!   class, and [`STYLE`] gives the class its colour, dash and fill, in light, in dark and on paper.
//! * Text widths come from a table of advance widths, so that a layout does not depend on installed fonts.
//! * Every drawing has a title and a description for those who do not see it, with ids of its own.

use std::fmt::{self, Write as _};

use plotters::style::RGBColor;
use plotters_backend::text_anchor::{HPos, VPos};
use plotters_backend::{
    BackendColor, BackendCoord, BackendStyle, BackendTextStyle, DrawingBackend, DrawingErrorKind,
    FontTransform,
};

use super::escape;

/// Drawing units in one pixel.
pub const UNIT: i32 = 100;

/// What a stroke, an area or a text stands for; the style sheet decides how it looks.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[repr(u8)]
pub enum Ink {
    Text = 1,
    Faint,
    Axis,
    Grid,
    Prior,
    Readings,
    Posterior,
    Shade,
    Limit,
    Event,
    Band,
    LineA,
    LineB,
    LineC,
    LineD,
    LineE,
    LineF,
}

const INKS: [(Ink, &str); 17] = [
    (Ink::Text, "text"),
    (Ink::Faint, "faint"),
    (Ink::Axis, "axis"),
    (Ink::Grid, "grid"),
    (Ink::Prior, "prior"),
    (Ink::Readings, "readings"),
    (Ink::Posterior, "posterior"),
    (Ink::Shade, "shade"),
    (Ink::Limit, "limit"),
    (Ink::Event, "event"),
    (Ink::Band, "band"),
    (Ink::LineA, "a"),
    (Ink::LineB, "b"),
    (Ink::LineC, "c"),
    (Ink::LineD, "d"),
    (Ink::LineE, "e"),
    (Ink::LineF, "f"),
];

impl Ink {
    /// The stand-in for a colour that the plotting library carries.
    pub fn colour(self) -> RGBColor {
        RGBColor(0, 0, self as u8)
    }

    /// The name in class attributes.
    pub fn name(self) -> &'static str {
        name_of(self as u8)
    }
}

fn name_of(number: u8) -> &'static str {
    INKS.iter().find(|(ink, _)| *ink as u8 == number).map_or("text", |(_, name)| name)
}

/// The style element of every drawing. Colours are literal: not every viewer of SVG knows CSS variables. A page that
/// holds many drawings states it once.
pub const STYLE: &str = "<style>\
.rf{font-family:system-ui,'Segoe UI',Roboto,'Helvetica Neue',Arial,'Liberation Sans',sans-serif}\
.rf .paper{fill:#fcfcfa}\
.rf [class^=l-]{fill:none;stroke-width:1.6;stroke-linejoin:round;stroke-linecap:butt}\
.rf [class^=h-]{fill:#fcfcfa;stroke-width:1.6}\
.rf [class^=f-]{stroke:none}\
.rf text{font-variant-numeric:tabular-nums}\
.rf .halo{paint-order:stroke;stroke:#fcfcfa;stroke-width:4;stroke-linejoin:round}\
.rf .bold{font-weight:600}\
.rf .l-grid{stroke:#e2e4e1;stroke-width:1}\
.rf .l-axis{stroke:#5a646a;stroke-width:1}\
.rf .l-text{stroke:#1d2429}.rf .h-text{stroke:#1d2429}.rf .f-text,.rf .t-text{fill:#1d2429}\
.rf .l-faint{stroke:#5a646a}.rf .h-faint{stroke:#5a646a}.rf .f-faint,.rf .t-faint{fill:#5a646a}\
.rf .l-prior{stroke:#80570f;stroke-dasharray:8 4}.rf .h-prior{stroke:#80570f}.rf .f-prior,.rf .t-prior{fill:#80570f}\
.rf .l-readings{stroke:#2f6b3c;stroke-dasharray:1.6 3.4;stroke-width:2}.rf .h-readings{stroke:#2f6b3c}\
.rf .f-readings,.rf .t-readings{fill:#2f6b3c}\
.rf .l-posterior{stroke:#0b4f8a;stroke-width:2.4}.rf .h-posterior{stroke:#0b4f8a}\
.rf .f-posterior,.rf .t-posterior{fill:#0b4f8a}\
.rf .l-shade{stroke:#0b4f8a}.rf .f-shade{fill:#0b4f8a;fill-opacity:.16}.rf .t-shade{fill:#0b4f8a}\
.rf .l-limit{stroke:#a3262a;stroke-dasharray:14 5}.rf .h-limit{stroke:#a3262a}.rf .f-limit,.rf .t-limit{fill:#a3262a}\
.rf .l-event{stroke:#67478a;stroke-dasharray:9 3 2 3;stroke-width:1.2}.rf .f-event,.rf .t-event{fill:#67478a}\
.rf .l-band{stroke:#5a646a;stroke-dasharray:3 2;stroke-width:1}.rf .f-band{fill:#5a646a;fill-opacity:.13}\
.rf .t-band{fill:#4b555b}\
.rf .l-a{stroke:#0b4f8a;stroke-width:2.2}.rf .f-a,.rf .t-a{fill:#0b4f8a}\
.rf .l-b{stroke:#80570f;stroke-dasharray:8 4}.rf .f-b,.rf .t-b{fill:#80570f}\
.rf .l-c{stroke:#2f6b3c;stroke-dasharray:1.6 3.4;stroke-width:2.2}.rf .f-c,.rf .t-c{fill:#2f6b3c}\
.rf .l-d{stroke:#67478a;stroke-dasharray:9 3 2 3}.rf .f-d,.rf .t-d{fill:#67478a}\
.rf .l-e{stroke:#8a3668;stroke-dasharray:4 3}.rf .f-e,.rf .t-e{fill:#8a3668}\
.rf .l-f{stroke:#4b555b;stroke-dasharray:12 3 2 3 2 3}.rf .f-f,.rf .t-f{fill:#4b555b}\
@media screen and (prefers-color-scheme:dark){\
.rf .paper,.rf [class^=h-]{fill:#15191c}\
.rf .halo{stroke:#15191c}\
.rf .l-grid{stroke:#2c3338}\
.rf .l-axis{stroke:#9aa5ab}\
.rf .l-text,.rf .h-text{stroke:#e4e7e8}.rf .f-text,.rf .t-text{fill:#e4e7e8}\
.rf .l-faint,.rf .h-faint{stroke:#a3adb3}.rf .f-faint,.rf .t-faint{fill:#a3adb3}\
.rf .l-prior,.rf .h-prior{stroke:#dcb66a}.rf .f-prior,.rf .t-prior{fill:#dcb66a}\
.rf .l-readings,.rf .h-readings{stroke:#8fca86}.rf .f-readings,.rf .t-readings{fill:#8fca86}\
.rf .l-posterior,.rf .h-posterior{stroke:#83bcf2}.rf .f-posterior,.rf .t-posterior{fill:#83bcf2}\
.rf .l-shade{stroke:#83bcf2}.rf .f-shade{fill:#83bcf2;fill-opacity:.22}.rf .t-shade{fill:#83bcf2}\
.rf .l-limit,.rf .h-limit{stroke:#ff938c}.rf .f-limit,.rf .t-limit{fill:#ff938c}\
.rf .l-event{stroke:#c8ade9}.rf .f-event,.rf .t-event{fill:#c8ade9}\
.rf .l-band{stroke:#a3adb3}.rf .f-band{fill:#a3adb3;fill-opacity:.18}.rf .t-band{fill:#b4bdc2}\
.rf .l-a{stroke:#83bcf2}.rf .f-a,.rf .t-a{fill:#83bcf2}\
.rf .l-b{stroke:#dcb66a}.rf .f-b,.rf .t-b{fill:#dcb66a}\
.rf .l-c{stroke:#8fca86}.rf .f-c,.rf .t-c{fill:#8fca86}\
.rf .l-d{stroke:#c8ade9}.rf .f-d,.rf .t-d{fill:#c8ade9}\
.rf .l-e{stroke:#f09ccb}.rf .f-e,.rf .t-e{fill:#f09ccb}\
.rf .l-f{stroke:#b4bdc2}.rf .f-f,.rf .t-f{fill:#b4bdc2}\
}</style>";

/// What a drawing is called and what it shows, for those who do not see it.
#[derive(Clone, Debug)]
pub struct About {
    /// Unique in its report; becomes the file's name and part of its ids: letters, digits and hyphens.
    pub name: String,
    /// A short title.
    pub title: String,
    /// What the drawing shows, with the figures that matter.
    pub description: String,
}

/// The horizontal side of a text at which its position lies.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Side {
    Start,
    Middle,
    End,
}

/// A text at a place in drawing units; the place is the base line's.
#[derive(Clone, Debug)]
pub struct Writing {
    pub text: String,
    pub x: i32,
    pub y: i32,
    pub side: Side,
    pub size: i32,
    pub ink: Ink,
    pub bold: bool,
}

/// The whole SVG document around the elements in `body`. Width and height in drawing units.
pub fn document(about: &About, width: i32, height: i32, body: &str) -> String {
    let id = identifier(&about.name);
    let mut text = String::with_capacity(body.len() + STYLE.len() + 1024);
    text.push_str("<svg xmlns=\"http://www.w3.org/2000/svg\" class=\"rf\" viewBox=\"0 0 ");
    push_units(&mut text, width);
    text.push(' ');
    push_units(&mut text, height);
    text.push_str("\" width=\"");
    push_units(&mut text, width);
    text.push_str("\" height=\"");
    push_units(&mut text, height);
    // Writing to a String cannot fail.
    let _ =
        write!(text, "\" role=\"img\" aria-labelledby=\"{id}-title {id}-desc\">\n<title id=\"{id}-title\">");
    text.push_str(&xml(&about.title));
    let _ = write!(text, "</title>\n<desc id=\"{id}-desc\">");
    text.push_str(&xml(&about.description));
    text.push_str("</desc>\n");
    text.push_str(STYLE);
    text.push_str("\n<rect class=\"paper\" width=\"100%\" height=\"100%\"/>\n");
    text.push_str(body);
    text.push_str("</svg>\n");
    text
}

/// Text as XML character data or an attribute's value; nothing hidden, nothing invalid.
pub fn xml(text: &str) -> String {
    let mut safe = String::with_capacity(text.len());
    for character in escape::visible(text).chars() {
        match character {
            '&' => safe.push_str("&amp;"),
            '<' => safe.push_str("&lt;"),
            '>' => safe.push_str("&gt;"),
            '"' => safe.push_str("&quot;"),
            '\'' => safe.push_str("&#39;"),
            _ => safe.push(character),
        }
    }
    safe
}

/// A name as an id: letters, digits and hyphens of ASCII, after "fig-".
pub fn identifier(name: &str) -> String {
    let mut id = String::from("fig-");
    for character in name.chars() {
        if character.is_ascii_alphanumeric() || character == '-' {
            id.push(character);
        } else {
            let _ = write!(id, "_{:x}", u32::from(character));
        }
    }
    id
}

/// Writes a text over whatever is drawn beneath, with a margin of paper round its letters.
pub fn write_text(body: &mut String, writing: &Writing) {
    push_text(body, writing, true);
}

fn push_text(body: &mut String, writing: &Writing, halo: bool) {
    body.push_str("<text class=\"t-");
    body.push_str(writing.ink.name());
    if halo {
        body.push_str(" halo");
    }
    if writing.bold {
        body.push_str(" bold");
    }
    body.push_str("\" x=\"");
    push_units(body, writing.x);
    body.push_str("\" y=\"");
    push_units(body, writing.y);
    body.push_str("\" font-size=\"");
    push_units(body, writing.size);
    body.push_str(match writing.side {
        Side::Start => "\">",
        Side::Middle => "\" text-anchor=\"middle\">",
        Side::End => "\" text-anchor=\"end\">",
    });
    body.push_str(&xml(&writing.text));
    body.push_str("</text>\n");
}

/// The width of a text in drawing units at a font size in drawing units: a little generous, since the reader's
/// font is not known.
pub fn text_width(text: &str, size: i32) -> i32 {
    let thousandths: i64 = escape::visible(text).chars().map(|character| i64::from(advance(character))).sum();
    i32::try_from(thousandths * i64::from(size) / 1000).unwrap_or(i32::MAX)
}

/// The text, shortened with an ellipsis to fit the width.
pub fn fitted(text: &str, size: i32, width: i32) -> String {
    if text_width(text, size) <= width {
        return text.to_owned();
    }
    let mut kept: String = text.to_owned();
    while kept.pop().is_some() {
        let shorter = format!("{}…", kept.trim_end());
        if text_width(&shorter, size) <= width {
            return shorter;
        }
    }
    "…".to_owned()
}

/// Advance width in thousandths of the font size: the widths of common sans-serif faces by class of letter.
fn advance(character: char) -> i32 {
    match character {
        'i' | 'j' | 'l' | '\'' | '|' => 300,
        '.' | ',' | ':' | ';' | '!' | 'I' | ' ' | '\u{a0}' | '·' => 330,
        'f' | 't' | 'r' | '(' | ')' | '[' | ']' | '/' | '\\' | '"' | '-' | '`' => 410,
        '°' | '*' | '¹' | '²' | '³' | '⁰'..='⁹' | '⁻' => 460,
        'c' | 'k' | 's' | 'v' | 'x' | 'y' | 'z' | 'J' => 590,
        'm' | 'M' | 'W' | '@' | '%' => 980,
        'w' | 'O' | 'Q' | 'G' | 'D' | 'N' | 'H' | 'U' | 'C' | '…' | '—' => 830,
        'A'..='Z' => 720,
        '+' | '<' | '=' | '>' | '~' | '×' | '±' | '≤' | '≥' | '\u{2212}' | '–' | '_' | '^' => 840,
        '\u{300}'..='\u{36f}' => 0,
        '\u{2e80}'..='\u{ffef}' | '\u{1f000}'..='\u{3ffff}' => 1050,
        _ => 640,
    }
}

/// Drawing units as pixels with at most two decimals.
fn push_units(out: &mut String, units: i32) {
    let size = units.unsigned_abs();
    if units < 0 {
        out.push('-');
    }
    let (whole, hundredths) = (size / 100, size % 100);
    // Writing to a String cannot fail.
    let _ = match (hundredths / 10, hundredths % 10) {
        (0, 0) => write!(out, "{whole}"),
        (tenths, 0) => write!(out, "{whole}.{tenths}"),
        _ => write!(out, "{whole}.{hundredths:02}"),
    };
}

/// The backend: collects elements into a text that [`document`] completes.
pub struct SvgBackend<'a> {
    body: &'a mut String,
    width: i32,
    height: i32,
}

impl<'a> SvgBackend<'a> {
    /// Width and height in drawing units.
    pub fn new(body: &'a mut String, width: i32, height: i32) -> Self {
        SvgBackend { body, width, height }
    }

    fn path(&mut self, points: impl IntoIterator<Item = BackendCoord>, kind: &str, ink: u8, closed: bool) {
        let mut last: Option<BackendCoord> = None;
        let mut data = String::new();
        for point in points {
            match last {
                None => {
                    data.push('M');
                    push_units(&mut data, point.0);
                    data.push(' ');
                    push_units(&mut data, point.1);
                }
                Some(before) if before == point => {}
                Some(before) => {
                    data.push('l');
                    push_units(&mut data, point.0 - before.0);
                    data.push(' ');
                    push_units(&mut data, point.1 - before.1);
                }
            }
            last = Some(point);
        }
        if data.is_empty() {
            return;
        }
        let end = if closed { "z" } else { "" };
        let _ = writeln!(self.body, "<path class=\"{kind}-{}\" d=\"{data}{end}\"/>", name_of(ink));
    }
}

fn ink_of(colour: BackendColor) -> Option<u8> {
    (colour.alpha > 0.0).then_some(colour.rgb.2)
}

impl DrawingBackend for SvgBackend<'_> {
    type ErrorType = fmt::Error;

    fn get_size(&self) -> (u32, u32) {
        (self.width.unsigned_abs(), self.height.unsigned_abs())
    }

    fn ensure_prepared(&mut self) -> Result<(), DrawingErrorKind<fmt::Error>> {
        Ok(())
    }

    fn present(&mut self) -> Result<(), DrawingErrorKind<fmt::Error>> {
        Ok(())
    }

    fn draw_pixel(
        &mut self,
        point: BackendCoord,
        colour: BackendColor,
    ) -> Result<(), DrawingErrorKind<fmt::Error>> {
        if let Some(ink) = ink_of(colour) {
            let (x, y) = point;
            let dot = [(x, y), (x + UNIT, y), (x + UNIT, y + UNIT), (x, y + UNIT)];
            self.path(dot, "f", ink, true);
        }
        Ok(())
    }

    fn draw_line<S: BackendStyle>(
        &mut self,
        from: BackendCoord,
        to: BackendCoord,
        style: &S,
    ) -> Result<(), DrawingErrorKind<fmt::Error>> {
        if let Some(ink) = ink_of(style.color()) {
            self.path([from, to], "l", ink, false);
        }
        Ok(())
    }

    fn draw_rect<S: BackendStyle>(
        &mut self,
        upper_left: BackendCoord,
        bottom_right: BackendCoord,
        style: &S,
        fill: bool,
    ) -> Result<(), DrawingErrorKind<fmt::Error>> {
        let ((x0, y0), (x1, y1)) = (upper_left, bottom_right);
        if let Some(ink) = ink_of(style.color()) {
            self.path([(x0, y0), (x1, y0), (x1, y1), (x0, y1)], if fill { "f" } else { "l" }, ink, true);
        }
        Ok(())
    }

    fn draw_path<S: BackendStyle, I: IntoIterator<Item = BackendCoord>>(
        &mut self,
        path: I,
        style: &S,
    ) -> Result<(), DrawingErrorKind<fmt::Error>> {
        if let Some(ink) = ink_of(style.color()) {
            self.path(path, "l", ink, false);
        }
        Ok(())
    }

    fn draw_circle<S: BackendStyle>(
        &mut self,
        center: BackendCoord,
        radius: u32,
        style: &S,
        fill: bool,
    ) -> Result<(), DrawingErrorKind<fmt::Error>> {
        if let Some(ink) = ink_of(style.color()) {
            let _ = write!(
                self.body,
                "<circle class=\"{}-{}\" cx=\"",
                if fill { "f" } else { "h" },
                name_of(ink)
            );
            push_units(self.body, center.0);
            self.body.push_str("\" cy=\"");
            push_units(self.body, center.1);
            self.body.push_str("\" r=\"");
            push_units(self.body, i32::try_from(radius).unwrap_or(0));
            self.body.push_str("\"/>\n");
        }
        Ok(())
    }

    fn fill_polygon<S: BackendStyle, I: IntoIterator<Item = BackendCoord>>(
        &mut self,
        vert: I,
        style: &S,
    ) -> Result<(), DrawingErrorKind<fmt::Error>> {
        if let Some(ink) = ink_of(style.color()) {
            self.path(vert, "f", ink, true);
        }
        Ok(())
    }

    fn draw_text<T: BackendTextStyle>(
        &mut self,
        text: &str,
        style: &T,
        pos: BackendCoord,
    ) -> Result<(), DrawingErrorKind<fmt::Error>> {
        let Some(number) = ink_of(style.color()) else { return Ok(()) };
        let ink = INKS.iter().find(|(ink, _)| *ink as u8 == number).map_or(Ink::Text, |(ink, _)| *ink);
        let size = style.size() as i32;
        let anchor = style.anchor();
        let down = match anchor.v_pos {
            VPos::Top => size * 4 / 5,
            VPos::Center => size * 7 / 20,
            VPos::Bottom => -size / 5,
        };
        let side = match anchor.h_pos {
            HPos::Left => Side::Start,
            HPos::Center => Side::Middle,
            HPos::Right => Side::End,
        };
        let writing =
            Writing { text: text.to_owned(), x: pos.0, y: pos.1 + down, side, size, ink, bold: false };
        push_text(self.body, &writing, false);
        Ok(())
    }

    fn estimate_text_size<T: BackendTextStyle>(
        &self,
        text: &str,
        style: &T,
    ) -> Result<(u32, u32), DrawingErrorKind<fmt::Error>> {
        let size = style.size() as i32;
        let (along, across) = (text_width(text, size).unsigned_abs(), size.unsigned_abs());
        Ok(match style.transform() {
            FontTransform::Rotate90 | FontTransform::Rotate270 => (across, along),
            FontTransform::None | FontTransform::Rotate180 => (along, across),
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn printed(units: i32) -> String {
        let mut text = String::new();
        push_units(&mut text, units);
        text
    }

    #[test]
    fn units_are_hundredths_of_a_pixel() {
        for (units, text) in
            [(0, "0"), (100, "1"), (150, "1.5"), (-5, "-0.05"), (123456, "1234.56"), (-200, "-2")]
        {
            assert_eq!(printed(units), text);
        }
    }

    #[test]
    fn every_ink_has_its_place_in_the_style() {
        for (ink, name) in INKS {
            assert_eq!(ink.name(), name);
            assert!(STYLE.contains(&format!(".l-{name}{{")), "{name}");
        }
    }

    #[test]
    fn texts_and_ids_are_safe() {
        let about = About {
            name: "level a\"><script>".into(),
            title: "<b>&\u{1}".into(),
            description: "]]> \u{202e}".into(),
        };
        let text = document(&about, 100, 100, "");
        assert!(!text.contains("<script"));
        assert!(!text.contains("<b>"));
        assert!(text.contains("<title id=\"fig-level_20a_22_3e_3cscript_3e-title\">&lt;b&gt;&amp;␁</title>"));
        assert!(text.chars().all(|character| character == '\n' || !character.is_control()));
    }

    #[test]
    fn a_text_is_shortened_to_its_room() {
        let long = "a very long name of a series";
        let short = fitted(long, 1300, 8000);
        assert!(short.ends_with('…') && text_width(&short, 1300) <= 8000);
        assert_eq!(fitted("short", 1300, 8000), "short");
    }
}
