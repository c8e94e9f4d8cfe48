//! The page: what it must hold, and what must never reach it.

use super::*;
use proptest::prelude::*;

fn head() -> PageHead {
    PageHead {
        title: "Nitrate <2025>".into(),
        facts: vec![("review".into(), "SF-NO3-2025".into()), ("status".into(), "draft & open".into())],
        page_label: "SF-NO3-2025 \"draft\"".into(),
        footer: vec!["End of report.".into()],
    }
}

fn body(markdown: &str) -> String {
    Body::of(markdown, &[]).unwrap().html
}

#[test]
fn the_page_is_whole_and_needs_nothing_else() {
    let text = page("# A *title*\n\n## One\n\ntext\n\n## Two\n", &[], &head()).unwrap();
    assert!(text.starts_with("<!DOCTYPE html>\n<html lang=\"en\">"));
    for part in [
        "<title>Nitrate &lt;2025&gt;</title>",
        "<h1>A <em>title</em></h1>",
        "<a class=\"skip\" href=\"#main\">",
        "default-src 'none'; style-src 'unsafe-inline'; img-src data:",
        "<main id=\"main\"",
        "<li><a href=\"#one\">One</a></li>",
        "<h2 id=\"two\">Two</h2>",
        "<dd>draft &amp; open</dd>",
        "content: \"SF\\00002d NO3\\00002d 2025 \\000022 draft\\000022 \"",
        "<p>End of report.</p>",
    ] {
        assert!(text.contains(part), "{part}");
    }
    for (tag, count) in
        [("<h1", 1), ("<header", 1), ("<main", 1), ("<footer", 1), ("<script", 0), ("<link", 0)]
    {
        assert_eq!(text.matches(tag).count(), count, "{tag}");
    }
}

#[test]
fn without_a_heading_the_title_is_it() {
    assert!(page("text", &[], &head()).unwrap().contains("<h1>Nitrate &lt;2025&gt;</h1>"));
}

#[test]
fn raw_html_is_text() {
    let text = body("<script>alert(1)</script>\n\na <b onclick=\"x\">b</b>\n\n<div>\n\n</div>");
    assert!(!text.contains("<script") && !text.contains("<b ") && !text.contains("<div"), "{text}");
    assert!(text.contains("&lt;script&gt;"));
}

#[test]
fn links_lead_only_where_they_may() {
    let text = body(
        "[a](https://example.org/x?a=1&b=2) [b](javascript:alert) [c](data:text/html,x) [d](#one) [e](file:///etc) \
         [f](JaVaScRiPt:x) [g](//example.org) <mailto:a@example.org> <b@example.org>",
    );
    assert!(
        text.contains("<a href=\"https://example.org/x?a=1&amp;b=2\">a</a> b c <a href=\"#one\">d</a> e f g")
    );
    assert!(
        text.contains("<a href=\"mailto:a@example.org\">")
            && text.contains("<a href=\"mailto:b@example.org\">")
    );
}

#[test]
fn only_own_figures_are_pictures() {
    assert_eq!(body("![outside](https://example.org/x.png)"), "<p>outside</p>\n");
    assert_eq!(Body::of("![x](figures/none.svg)", &[]).err(), Some(HtmlError::NoSuchFigure("none".into())));
    let drawing = svg::document(
        &svg::About { name: "level".into(), title: "Level".into(), description: "d".into() },
        100,
        100,
        "",
    );
    let figures = [("level", drawing.as_str())];
    let text = page("![Level](figures/level.svg \"The level & its limit\")", &figures, &head()).unwrap();
    assert!(text.contains("<figcaption>The level &amp; its limit</figcaption>"));
    assert_eq!(text.matches(svg::STYLE).count(), 1);
    assert_eq!(text.matches("<svg").count(), 1);
    assert!(!text.contains("<img"));
    let twice = page("![a](figures/level.svg)\n\n![a](figures/level.svg)", &figures, &head());
    assert_eq!(twice.err(), Some(HtmlError::FigureTwice("level".into())));
}

#[test]
fn tables_have_scopes_captions_and_a_region_to_scroll() {
    let text =
        body("Table: Levels of *all* series\n\n| series | level |\n| :--- | ---: |\n| SF-01 | 43.9 |\n");
    for part in [
        "<div class=\"scroll\" role=\"region\" tabindex=\"0\" aria-label=\"Levels of all series\"><table>",
        "<caption>Levels of <em>all</em> series</caption>",
        "<th scope=\"col\">series</th><th scope=\"col\" class=\"num\">level</th>",
        "<th scope=\"row\">SF-01</th><td class=\"num\">43.9</td>",
        "</tbody>\n</table></div>",
    ] {
        assert!(text.contains(part), "{part}\n{text}");
    }
    assert_eq!(text.matches("<table>").count(), 1);
    let text = body("|  | b |\n| --- | --- |\n| x | y |\n");
    assert!(
        text.contains("aria-label=\"Table 1\"") && text.contains("<td></td><th scope=\"col\">b</th>"),
        "{text}"
    );
    assert!(body("Table: not before a table\n\ntext").contains("<p>Table: not before a table</p>"));
}

#[test]
fn ids_are_unique() {
    let text = body("## One\n\n## One\n\n## one!\n\n## Main\n\n## fig-x\n\n## …\n\n# Zero\n\n# Again\n");
    for id in
        ["\"one\"", "\"one-2\"", "\"one-3\"", "\"main-2\"", "\"section-fig-x\"", "\"section\"", "\"again\""]
    {
        assert_eq!(text.matches(&format!("id={id}")).count(), 1, "{id}\n{text}");
    }
    assert!(!text.contains("<h1"));
}

#[test]
fn notes_lead_there_and_back() {
    let text = body("a[^x] b[^x] c[^y]\n\n[^x]: The note.\n");
    for part in ["id=\"note-1-1\" href=\"#note-1\"", "id=\"note-1-2\"", "id=\"note-1\"", "href=\"#note-1-1\""]
    {
        assert!(text.contains(part), "{part}\n{text}");
    }
    assert!(text.contains("c[^y]"));
}

#[test]
fn verdicts_carry_sign_word_and_class() {
    assert!(body("**✓ not above**").contains("<strong class=\"verdict met\">✓ not above</strong>"));
    assert!(body("**○ not decided**").contains("<strong class=\"verdict open\">"));
    assert!(body("**plain**").contains("<strong>plain</strong>"));
}

/// WCAG 2.2, success criterion 1.4.3: at least 4.5 to 1; relative luminance by its definition.
#[test]
fn colours_of_text_stand_out_from_the_paper() {
    fn luminance(colour: &str) -> f64 {
        let channel = |at: usize| {
            let value = f64::from(u8::from_str_radix(&colour[at..at + 2], 16).unwrap()) / 255.0;
            if value <= 0.04045 { value / 12.92 } else { crate::math::fm::pow((value + 0.055) / 1.055, 2.4) }
        };
        0.2126 * channel(1) + 0.7152 * channel(3) + 0.0722 * channel(5)
    }
    fn contrast(a: &str, b: &str) -> f64 {
        let (a, b) = (luminance(a), luminance(b));
        (a.max(b) + 0.05) / (a.min(b) + 0.05)
    }
    assert!((contrast("#000000", "#ffffff") - 21.0).abs() < 1e-9);

    let colours = |block: &str| -> BTreeMap<String, String> {
        let mut found = BTreeMap::new();
        for part in block.split("--").skip(1) {
            if let Some((name, rest)) = part.split_once(": #") {
                found.insert(name.to_owned(), format!("#{}", &rest[..6]));
            }
        }
        found
    };
    let dark_at = STYLE.find("prefers-color-scheme: dark").unwrap();
    let end = STYLE.find("* { box-sizing").unwrap();
    let themes = [colours(&STYLE[..dark_at]), colours(&STYLE[dark_at..end])];
    for theme in &themes {
        for name in ["ink", "muted", "accent", "good", "bad", "open"] {
            for ground in ["paper", "wash"] {
                let ratio = contrast(&theme[name], &theme[ground]);
                assert!(ratio >= 4.5, "{name} on {ground}: {ratio}");
            }
        }
    }

    let figure_dark = svg::STYLE.find("@media").unwrap();
    let parts = [
        (&svg::STYLE[..figure_dark], &themes[0]["paper"]),
        (&svg::STYLE[figure_dark..], &themes[1]["paper"]),
    ];
    for (part, paper) in parts {
        let mut seen = 0;
        for rule in part.split('}').filter(|rule| rule.contains(".t-")) {
            let colour = rule.split("fill:").nth(1).unwrap();
            assert!(contrast(&colour[..7], paper) >= 4.5, "{rule}");
            seen += 1;
        }
        assert!(seen >= 15, "{seen}");
    }
}

proptest! {
    #[test]
    fn no_markdown_makes_a_page_that_asks_for_anything(text in "[ -~\\n\u{202e}<>\"'&\\[\\]()!*_`|#-]{0,120}") {
        if let Ok(text) = page(&text, &[], &head()) {
            let start = text.find("<main").unwrap();
            let main = &text[start..];
            for word in ["<script", "<img", "<iframe", "<object", "<style", " onclick=\"", "href=\"javascript", " src=\""] {
                prop_assert!(!main.to_lowercase().contains(word), "{word}: {main}");
            }
            prop_assert_eq!(text.matches("<h1>").count(), 1);
            prop_assert_eq!(main.matches("<table>").count(), main.matches("</table>").count());
        }
    }
}
