//! User text into Markdown, so that every character prints as itself.
//!
//! A title, a note or a cell of a data file may hold anything. [`markdown`] makes it plain text of one line that
//! no Markdown rule reads as markup, wherever a template puts it: at the start of a line, in a heading, a list
//! item or a table cell. Characters that cannot be seen or that turn the direction of reading are shown by name,
//! so that nobody is misled by what a report displays.

use std::fmt::Write as _;

use minijinja::value::ValueKind;
use minijinja::{AutoEscape, Environment, Error, ErrorKind};

/// The name of the escaping in the template engine.
const MARKDOWN: &str = "md";

/// Makes every template whose name ends in `.md` escape the strings it prints by [`markdown`]. Values marked
/// safe, numbers and truth values are printed as they are; lists and maps are refused, since a template that
/// prints one whole shows the program's inner form.
pub fn escape_in_templates(environment: &mut Environment<'_>) {
    environment.set_auto_escape_callback(|name| {
        if name.ends_with(".md") { AutoEscape::Custom(MARKDOWN.into()) } else { AutoEscape::Html }
    });
    environment.set_formatter(|out, state, value| {
        if !matches!(state.auto_escape(), AutoEscape::Custom(name) if name == MARKDOWN) {
            return minijinja::escape_formatter(out, state, value);
        }
        match value.kind() {
            ValueKind::String if !value.is_safe() => {
                let text = value.as_str().unwrap_or_default();
                out.write_str(&markdown(text)).map_err(Error::from)
            }
            ValueKind::String | ValueKind::Number | ValueKind::Bool => {
                write!(out, "{value}").map_err(Error::from)
            }
            // A strict environment reports what is undefined itself; none prints nothing.
            ValueKind::Undefined | ValueKind::None => minijinja::escape_formatter(out, state, value),
            kind => Err(Error::new(ErrorKind::BadEscape, format!("a {kind} cannot be printed whole"))),
        }
    });
}

/// One line of text that Markdown shows literally. Line breaks and tabs become spaces, spaces at the ends go.
pub fn markdown(text: &str) -> String {
    let visible = visible(text);
    let line = visible.trim_matches(' ');
    let mut escaped = String::with_capacity(line.len() + 8);
    let list_mark = end_of_list_number(line);
    let mut before = ' ';
    for (position, character) in line.char_indices() {
        let rest = &line[position + character.len_utf8()..];
        let special = match character {
            '\\' | '`' | '*' | '_' | '[' | ']' | '<' | '|' | '~' | '$' | '#' => true,
            '&' => {
                rest.is_empty() || rest.starts_with(|next: char| next.is_ascii_alphanumeric() || next == '#')
            }
            '!' => rest.is_empty() || rest.starts_with('['),
            '+' | '-' | '=' | '>' | ':' | '.' | ')' => position == 0 || Some(position) == list_mark,
            _ => false,
        };
        if special {
            escaped.push('\\');
        }
        // Markdown keeps runs of spaces but HTML shows one: written as one, both show the same.
        if character != ' ' || before != ' ' {
            escaped.push(character);
        }
        before = character;
    }
    escaped
}

/// Text of several paragraphs: a blank line parts paragraphs, a line break stays one. Each line is literal.
pub fn markdown_paragraphs(text: &str) -> String {
    let mut paragraphs: Vec<Vec<String>> = vec![Vec::new()];
    for line in text.lines() {
        let escaped = markdown(line);
        if escaped.is_empty() {
            paragraphs.push(Vec::new());
        } else if let Some(paragraph) = paragraphs.last_mut() {
            paragraph.push(escaped);
        }
    }
    paragraphs.retain(|paragraph| !paragraph.is_empty());
    paragraphs.iter().map(|paragraph| paragraph.join("\\\n")).collect::<Vec<_>>().join("\n\n")
}

/// A literal code span, its fence longer than any run of back-ticks in the text.
pub fn code_span(text: &str) -> String {
    let visible = visible(text);
    if visible.trim_matches(' ').is_empty() {
        return String::new();
    }
    let fence = "`".repeat(longest_run(&visible, '`') + 1);
    // A bar would end a table cell even inside a code span; there it is written with a backslash, elsewhere the
    // backslash would show. Such text is given as plain literal text instead.
    if visible.contains('|') {
        return markdown(text);
    }
    let padded = visible.starts_with(['`', ' ']) || visible.ends_with(['`', ' ']);
    if padded { format!("{fence} {visible} {fence}") } else { format!("{fence}{visible}{fence}") }
}

/// A literal code block, its fence longer than any run of back-ticks in the text. Ends with a line break.
pub fn code_block(text: &str) -> String {
    let fence = "`".repeat((longest_run(text, '`') + 1).max(3));
    let mut block = format!("{fence}text\n");
    for line in text.lines() {
        block.push_str(&shown(line, |character| character == '\t'));
        block.push('\n');
    }
    block.push_str(&fence);
    block.push('\n');
    block
}

/// Text of one line in which nothing is hidden: line breaks and tabs become spaces, other control characters
/// their pictures (␀), characters that steer direction or have no width their code (⟨U+202E⟩).
pub fn visible(text: &str) -> String {
    shown(text, |_| false)
}

fn shown(text: &str, kept: impl Fn(char) -> bool) -> String {
    let mut line = String::with_capacity(text.len());
    let mut characters = text.chars().peekable();
    while let Some(character) = characters.next() {
        match character {
            _ if kept(character) => line.push(character),
            '\r' if characters.peek() == Some(&'\n') => {}
            '\n' | '\r' | '\t' | '\u{85}' | '\u{2028}' | '\u{2029}' => line.push(' '),
            '\u{0}'..='\u{1f}' => line.push(char::from_u32(0x2400 + u32::from(character)).unwrap_or(' ')),
            '\u{7f}' => line.push('\u{2421}'),
            _ if is_hidden(character) => {
                // Writing to a String cannot fail.
                let _ = write!(line, "⟨U+{:04X}⟩", u32::from(character));
            }
            _ => line.push(character),
        }
    }
    line
}

/// Characters without a picture of their own, or that change how others are displayed.
fn is_hidden(character: char) -> bool {
    matches!(character,
        '\u{80}'..='\u{9f}'
        | '\u{ad}' | '\u{61c}' | '\u{180e}' | '\u{200b}' | '\u{200e}' | '\u{200f}'
        | '\u{202a}'..='\u{202e}'
        | '\u{2060}'..='\u{206f}'
        | '\u{feff}' | '\u{fff9}'..='\u{fffb}'
        | '\u{e0000}'..='\u{e007f}')
        || u32::from(character) & 0xfffe == 0xfffe
        || ('\u{fdd0}'..='\u{fdef}').contains(&character)
}

/// The position of the mark of "12. " or "3) " at the start of a line.
fn end_of_list_number(line: &str) -> Option<usize> {
    let digits = line.bytes().take_while(u8::is_ascii_digit).count();
    let rest = line.get(digits..)?;
    let after = rest.strip_prefix(['.', ')'])?;
    (digits > 0 && (after.is_empty() || after.starts_with(' '))).then_some(digits)
}

fn longest_run(text: &str, mark: char) -> usize {
    let mut longest = 0;
    let mut run = 0;
    for character in text.chars() {
        run = if character == mark { run + 1 } else { 0 };
        longest = longest.max(run);
    }
    longest
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;
    use pulldown_cmark::{Event, Options, Parser, Tag};

    /// The text a reader sees, and whether any markup beyond the expected kinds came about.
    fn read(source: &str) -> (String, Vec<String>) {
        let options = Options::ENABLE_TABLES | Options::ENABLE_FOOTNOTES | Options::ENABLE_STRIKETHROUGH;
        let mut text = String::new();
        let mut tags = Vec::new();
        for event in Parser::new_ext(source, options) {
            match event {
                Event::Text(part) => text.push_str(&part),
                Event::Start(tag) => tags.push(match tag {
                    Tag::Heading { level, .. } => format!("{level}"),
                    Tag::Table(_) => "table".into(),
                    Tag::List(start) => format!("list {start:?}"),
                    other => format!("{other:?}"),
                }),
                Event::End(_) => {}
                other => tags.push(format!("{other:?}")),
            }
        }
        (text, tags)
    }

    fn expected(text: &str) -> String {
        let visible = visible(text);
        visible.split(' ').filter(|word| !word.is_empty()).collect::<Vec<_>>().join(" ")
    }

    #[test]
    fn common_text_stays_readable_in_the_source() {
        assert_eq!(markdown("Borehole 3 (north), pH 7.2: R & D"), "Borehole 3 (north), pH 7.2: R & D");
        assert_eq!(markdown("12.50"), "12.50");
        assert_eq!(markdown("SF-NO3-2025"), "SF-NO3-2025");
    }

    #[test]
    fn markup_is_disarmed() {
        for text in [
            "<script>alert(1)</script>",
            "[x](javascript:alert(1))",
            "![x](http://example.org/x.png)",
            "**bold**",
            "# head",
            "1. item",
            "12)",
            "- item",
            "+ item",
            "> quote",
            "---",
            "===",
            "a | b",
            "`code`",
            "~~x~~",
            "&lt;",
            "&#60;",
            "[^1]",
            "[^1]: note",
            "~~~",
            "```",
            "snake_case_name",
            "a\\",
            "C#",
            "\\*",
            "*",
            ": x",
            "<http://example.org>",
            "    four spaces",
            "x  ",
            "$5",
            "a\n\n# b",
        ] {
            let (shown, tags) = read(&markdown(text));
            assert_eq!(shown, expected(text), "{text:?}");
            assert_eq!(tags, ["Paragraph"], "{text:?}");
        }
    }

    #[test]
    fn hidden_characters_are_shown() {
        assert_eq!(visible("a\u{0}b\u{1b}[31m"), "a␀b␛[31m");
        assert_eq!(visible("paid\u{202e}001"), "paid⟨U+202E⟩001");
        assert_eq!(visible("a\u{200b}b\u{7f}"), "a⟨U+200B⟩b␡");
        assert_eq!(visible("a\r\nb\tc"), "a b c");
        assert_eq!(visible("µg/L · 5 °C"), "µg/L · 5 °C");
    }

    #[test]
    fn code_is_literal() {
        let (_, tags) = read(&code_span("a `b` c"));
        assert!(tags.contains(&"Code(Borrowed(\"a `b` c\"))".to_owned()), "{tags:?}");
        let (text, _) = read(&code_block("x = 1\n```\n\tindented"));
        assert_eq!(text, "x = 1\n```\n\tindented\n");
    }

    #[test]
    fn paragraphs_and_lines_stay() {
        assert_eq!(markdown_paragraphs("one\ntwo\n\n- three\n"), "one\\\ntwo\n\n\\- three");
    }

    #[test]
    fn templates_escape_strings_and_nothing_else() {
        let mut environment = Environment::new();
        escape_in_templates(&mut environment);
        let context = minijinja::context! { text => "a*b", safe => minijinja::Value::from_safe_string("**b**".into()), n => 3 };
        let text = environment.render_named_str("x.md", "{{ text }} {{ safe }} {{ n }}", &context);
        assert_eq!(text.unwrap(), "a\\*b **b** 3");
        assert!(environment.render_named_str("x.md", "{{ [1, 2] }}", ()).is_err());
    }

    fn nasty() -> impl Strategy<Value = String> {
        let piece = prop_oneof![
            proptest::sample::select(vec![
                "*",
                "_",
                "`",
                "[",
                "]",
                "(",
                ")",
                "<",
                ">",
                "|",
                "\\",
                "#",
                "&",
                "amp;",
                "!",
                "-",
                "+",
                "=",
                "~",
                "$",
                ":",
                ".",
                "1",
                "23",
                "a",
                "b ",
                " ",
                "  ",
                "\n",
                "\t",
                "µ",
                "x",
                "<b>",
                "http://e.org",
                "^",
                "{",
                "}",
                "\"",
                "'",
                "\u{202e}",
                "\u{0}",
                "\r",
                "/",
                "@",
                "%",
            ])
            .prop_map(str::to_owned),
            "\\PC{1,3}",
        ];
        proptest::collection::vec(piece, 0..12).prop_map(|pieces| pieces.concat())
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(2000))]

        #[test]
        fn any_text_prints_as_itself(text in nasty()) {
            let literal = expected(&text);
            prop_assume!(!literal.is_empty());
            let escaped = markdown(&text);

            let (shown, tags) = read(&escaped);
            prop_assert_eq!(&shown, &literal);
            prop_assert_eq!(tags, ["Paragraph"]);

            let (shown, tags) = read(&format!("## {escaped}\n"));
            prop_assert_eq!(&shown, &literal);
            prop_assert_eq!(tags, ["h2"]);

            let (shown, tags) = read(&format!("- {escaped}\n"));
            prop_assert_eq!(&shown, &literal);
            prop_assert_eq!(tags, ["list None", "Item"]);

            let (shown, tags) = read(&format!("| a | b |\n| --- | --- |\n| {escaped} | end |\n"));
            prop_assert_eq!(shown, format!("ab{literal}end"));
            prop_assert!(tags.iter().all(|tag| tag.starts_with("table") || tag.starts_with("Table")), "{:?}", tags);

            let (shown, _) = read(&format!("before {escaped} after"));
            prop_assert_eq!(shown, format!("before {literal} after"));
        }
    }
}
