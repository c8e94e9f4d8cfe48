//! Faults as text: code and message, the place with its line and the marked text, what was expected,
//! one repair. Plain characters; colour only where it is asked for.

use crate::diagnostics::{Fault, Faults, Place};
use annotate_snippets::{AnnotationKind, Group, Level, Origin, Renderer, Snippet};
use std::ops::Range;

/// How messages are to look.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Look {
    pub colour: bool,
    /// Columns of the screen; longer lines of a file are shown in part.
    pub width: usize,
}

impl Default for Look {
    /// Without colour, 100 columns: what files and tests get.
    fn default() -> Look {
        Look { colour: false, width: 100 }
    }
}

/// All faults, an empty line between them, and a last line that counts them.
pub fn render(faults: &Faults, look: Look) -> String {
    let mut text: String = faults.0.iter().map(|fault| one(fault, look) + "\n\n").collect();
    if !faults.is_empty() {
        let count = faults.0.len();
        let noun = if count == 1 { "fault" } else { "faults" };
        text.push_str(&format!("{count} {noun} found; nothing was written.\n"));
    }
    text
}

/// One fault, without a line end.
fn one(fault: &Fault, look: Look) -> String {
    let title = Level::ERROR.with_name(fault.code).primary_title(fault.message.as_str());
    let mut group = Group::with_title(title);
    if let Some(place) = &fault.place {
        group = with_place(group, place, look);
    }
    let notes = [("expected", &fault.expected), ("repair", &fault.repair)];
    for (name, text) in notes {
        if let Some(text) = text {
            group = group.element(Level::NOTE.with_name(name).message(text.as_str()));
        }
    }
    let renderer = if look.colour { Renderer::styled() } else { Renderer::plain() };
    renderer.term_width(look.width.clamp(40, 400)).render(&[group])
}

fn with_place<'a>(group: Group<'a>, place: &'a Place, look: Look) -> Group<'a> {
    let line = usize::try_from(place.line).unwrap_or(usize::MAX);
    let column = usize::try_from(place.column).unwrap_or(usize::MAX);
    if place.excerpt.trim().is_empty() {
        return group.element(Origin::path(place.file.as_str()).line(line).char_column(column));
    }
    let (excerpt, mark) = window(&place.excerpt, clamp(&place.excerpt, &place.mark), look.width.max(40));
    // A part of a line has other columns than the line: then the place is said beforehand.
    let is_whole = excerpt.len() == place.excerpt.len();
    let snippet = Snippet::source(excerpt).line_start(line).annotation(AnnotationKind::Primary.span(mark));
    if is_whole {
        group.element(snippet.path(place.file.as_str()))
    } else {
        group.element(Origin::path(place.file.as_str()).line(line).char_column(column)).element(snippet)
    }
}

/// The mark inside the excerpt, in order and on character boundaries: the snippet renderer panics on
/// any other.
fn clamp(excerpt: &str, mark: &Range<usize>) -> Range<usize> {
    let floor = |at: usize| {
        let mut at = at.min(excerpt.len());
        while !excerpt.is_char_boundary(at) {
            at -= 1;
        }
        at
    };
    let start = floor(mark.start);
    let mut end = floor(mark.end.max(start));
    if end < mark.end.min(excerpt.len()) {
        // The mark ended inside a character: take the whole of it.
        end += excerpt[end..].chars().next().map_or(0, char::len_utf8);
    }
    start..end
}

/// A part of a long line about the mark, so that a line of a million characters costs no more than
/// what is shown of it.
fn window(excerpt: &str, mark: Range<usize>, width: usize) -> (String, Range<usize>) {
    if excerpt.len() <= 4 * width {
        return (excerpt.to_string(), mark);
    }
    let before: Vec<(usize, char)> = excerpt[..mark.start].char_indices().rev().take(width / 3).collect();
    let from = before.last().map_or(mark.start, |(at, _)| *at);
    let to = excerpt[mark.start..]
        .char_indices()
        .nth(2 * width / 3)
        .map_or(excerpt.len(), |(at, _)| mark.start + at);
    let (head, tail) = (if from > 0 { "…" } else { "" }, if to < excerpt.len() { "…" } else { "" });
    let start = mark.start - from + head.len();
    let end = mark.end.clamp(mark.start, to) - from + head.len();
    (format!("{head}{}{tail}", &excerpt[from..to]), start..end)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn place(excerpt: &str, mark: Range<usize>) -> Place {
        Place { file: "s.toml".into(), line: 7, column: 1, excerpt: excerpt.into(), mark }
    }

    #[test]
    fn a_fault_shows_its_code_place_text_expectation_and_repair() {
        let fault = Fault::wrong("unknown-key", "`titel` is not a key of [review]")
            .at(place("titel = \"Nitrate\"", 0..5))
            .expected("one of title, period")
            .repair("write `title`");
        let text = render(&Faults(vec![fault]), Look::default());
        for part in
            ["unknown-key", "`titel` is not", "s.toml:7:1", "7 | titel", "^^^^^", "expected", "repair: write"]
        {
            assert!(text.contains(part), "{part} is not in\n{text}");
        }
        assert!(!text.contains('\u{1b}'));
        assert!(text.ends_with("1 fault found; nothing was written.\n"));
    }

    #[test]
    #[allow(clippy::reversed_empty_ranges)]
    fn no_mark_makes_it_panic() {
        let long = "µ".repeat(3000);
        for excerpt in ["", "µg/L", "a\tb", "\u{202e}x", "\u{1b}[31m", long.as_str()] {
            for mark in [0..0, 0..1, 1..1, 1..2, 3..1, 9..12, 0..9999, 2999..3001, 7000..7001] {
                render(&Faults(vec![Fault::wrong("x", "y").at(place(excerpt, mark))]), Look::default());
            }
        }
    }

    #[test]
    fn control_characters_of_the_input_do_not_reach_the_screen() {
        let fault = Fault::wrong("x", "found \u{1b}[31m").at(place("a\u{1b}[31m = 1\u{202e}", 0..1));
        let text = render(&Faults(vec![fault]), Look::default());
        assert!(!text.contains('\u{1b}') && !text.contains('\u{202e}'), "{text:?}");
    }
}
