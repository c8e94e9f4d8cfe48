//! Markdown to one HTML page that needs nothing else: no script, no request, no file beside it.
//!
//! The page is safe by what is written, not by what is taken out afterwards: raw HTML in the Markdown becomes
//! text, links lead only to http, https, mailto and places in the page, and the only pictures are the report's own
//! figures, set into the page as SVG.
//!
//! What the Markdown can say beyond its common rules:
//! * a paragraph that begins "Table: " right before a table is that table's caption;
//! * a column aligned right holds numbers; a first column aligned left (`:---`) holds the heads of its rows;
//! * `![text](figures/NAME.svg "caption")` alone in a paragraph is the figure NAME;
//! * strong text that begins with ✓, ✗ or ○ is a verdict: met, not met, open.

use std::collections::{BTreeMap, BTreeSet};
use std::fmt;

use minijinja::{AutoEscape, Environment, context};
use pulldown_cmark::{Alignment, CowStr, Event, HeadingLevel, LinkType, Options, Parser, Tag, TagEnd};

use super::svg::{self, xml};

/// The signs that begin a verdict, and the class each gives it.
pub const VERDICT_SIGNS: [(char, &str); 3] = [('✓', "met"), ('✗', "not-met"), ('○', "open")];

const PAGE: &str = include_str!("../../templates/page.html");
const STYLE: &str = include_str!("../../templates/style.css");
const CAPTION: &str = "Table: ";

/// What the page says besides the Markdown.
#[derive(Clone, Debug, Default)]
pub struct PageHead {
    /// The document's title; also the heading where the Markdown has none of the first level.
    pub title: String,
    /// Names and values beneath the heading: number, period, status, date, stamp.
    pub facts: Vec<(String, String)>,
    /// At the foot of each printed page, beside the page number.
    pub page_label: String,
    /// Lines at the end.
    pub footer: Vec<String>,
}

/// Why no page could be made.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum HtmlError {
    /// The Markdown shows a figure that was not given.
    NoSuchFigure(String),
    /// The Markdown shows a figure twice; its ids would no longer be unique.
    FigureTwice(String),
    /// The page's own template failed.
    Template(String),
}

impl fmt::Display for HtmlError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            HtmlError::NoSuchFigure(name) => {
                write!(out, "the report shows a figure `{name}` that does not exist")
            }
            HtmlError::FigureTwice(name) => {
                write!(out, "the report shows the figure `{name}` more than once")
            }
            HtmlError::Template(reason) => write!(out, "the page's template failed: {reason}"),
        }
    }
}

impl std::error::Error for HtmlError {}

/// The whole page. `figures` are names and SVG documents as [`svg::document`] makes them.
pub fn page(markdown: &str, figures: &[(&str, &str)], head: &PageHead) -> Result<String, HtmlError> {
    let body = Body::of(markdown, figures)?;
    let mut environment = Environment::new();
    environment.set_auto_escape_callback(|_| AutoEscape::Html);
    let page_label = css_string(&head.page_label);
    let values = context! {
        title => super::escape::visible(&head.title),
        heading => body.heading.unwrap_or_else(|| xml(&head.title)),
        facts => shown_pairs(&head.facts),
        contents => contents(&body.contents),
        style => STYLE,
        figure_style => if body.shown.is_empty() { "" } else { svg::STYLE },
        page_label,
        body => body.html,
        footer => head.footer.iter().map(|line| super::escape::visible(line)).collect::<Vec<_>>(),
    };
    environment
        .render_named_str("page.html", PAGE, values)
        .map_err(|error| HtmlError::Template(error.to_string()))
}

fn shown_pairs(pairs: &[(String, String)]) -> Vec<(String, String)> {
    let shown = super::escape::visible;
    pairs.iter().map(|(name, value)| (shown(name), shown(value))).collect()
}

/// Text inside a quoted CSS string: whatever is not a plain letter or digit by its number.
fn css_string(text: &str) -> String {
    super::escape::visible(text)
        .chars()
        .map(|character| match character {
            'a'..='z' | 'A'..='Z' | '0'..='9' | ' ' => character.to_string(),
            // The blank ends the number; it is not printed.
            _ => format!("\\{:06x} ", u32::from(character)),
        })
        .collect()
}

/// An entry of the table of contents.
struct Heading {
    deep: bool,
    id: String,
    text: String,
}

fn contents(headings: &[Heading]) -> String {
    // Long reports list their main parts only.
    let most = 24;
    let all = headings.len() <= most;
    let shown: Vec<&Heading> = headings.iter().filter(|heading| all || !heading.deep).collect();
    if shown.len() < 2 {
        return String::new();
    }
    let mut list = String::from("<ol>\n");
    for heading in shown {
        let class = if heading.deep { " class=\"deep\"" } else { "" };
        list.push_str(&format!("<li{class}><a href=\"#{}\">{}</a></li>\n", heading.id, xml(&heading.text)));
    }
    list.push_str("</ol>");
    list
}

/// The converted Markdown.
struct Body {
    heading: Option<String>,
    contents: Vec<Heading>,
    html: String,
    shown: BTreeSet<String>,
}

impl Body {
    fn of(markdown: &str, figures: &[(&str, &str)]) -> Result<Body, HtmlError> {
        let options = Options::ENABLE_TABLES | Options::ENABLE_FOOTNOTES;
        let events: Vec<Event<'_>> = Parser::new_ext(markdown, options).collect();
        let mut writer = Writer::new(figures, &events);
        let mut at = 0;
        while at < events.len() {
            at = writer.block(&events, at)?;
        }
        let mut html = String::with_capacity(markdown.len() * 2);
        pulldown_cmark::html::push_html(&mut html, writer.out.into_iter());
        Ok(Body { heading: writer.heading, contents: writer.contents, html, shown: writer.shown })
    }
}

/// Turns the events of the Markdown into those of the page.
struct Writer<'a> {
    figures: BTreeMap<&'a str, &'a str>,
    out: Vec<Event<'a>>,
    heading: Option<String>,
    contents: Vec<Heading>,
    ids: BTreeSet<String>,
    shown: BTreeSet<String>,
    tables: u32,
    columns: Vec<Alignment>,
    column: usize,
    in_head: bool,
    /// For each link, picture or table cell that is open, what closes it.
    closers: Vec<&'static str>,
    notes: BTreeMap<String, Note>,
    caption_pending: bool,
}

/// A footnote: its number and how often it has been referred to.
#[derive(Clone, Copy)]
struct Note {
    number: usize,
    defined: bool,
    references: usize,
}

impl<'a> Writer<'a> {
    fn new(figures: &[(&'a str, &'a str)], events: &[Event<'a>]) -> Writer<'a> {
        let mut notes: BTreeMap<String, Note> = BTreeMap::new();
        for event in events {
            if let Event::FootnoteReference(label) = event {
                let number = notes.len() + 1;
                notes.entry(label.to_string()).or_insert(Note { number, defined: false, references: 0 });
            }
        }
        for event in events {
            if let Event::Start(Tag::FootnoteDefinition(label)) = event
                && let Some(note) = notes.get_mut(label.as_ref())
            {
                note.defined = true;
            }
        }
        Writer {
            figures: figures.iter().copied().collect(),
            out: Vec::with_capacity(events.len()),
            heading: None,
            contents: Vec::new(),
            ids: BTreeSet::from(["main".to_owned(), "contents".to_owned()]),
            shown: BTreeSet::new(),
            tables: 0,
            columns: Vec::new(),
            column: 0,
            in_head: false,
            closers: Vec::new(),
            notes,
            caption_pending: false,
        }
    }

    fn raw(&mut self, html: impl Into<CowStr<'a>>) {
        self.out.push(Event::Html(html.into()));
    }

    fn raw_inline(&mut self, html: impl Into<CowStr<'a>>) {
        self.out.push(Event::InlineHtml(html.into()));
    }

    /// Writes what begins at `at`; gives the place after it.
    fn block(&mut self, events: &[Event<'a>], at: usize) -> Result<usize, HtmlError> {
        match &events[at] {
            Event::Start(Tag::Heading { level, .. }) => {
                let end = end_of(events, at, |tag| matches!(tag, TagEnd::Heading(_)));
                self.heading(*level, &events[at + 1..end])?;
                Ok(end + 1)
            }
            Event::Start(Tag::Paragraph) => {
                let end = end_of(events, at, |tag| *tag == TagEnd::Paragraph);
                let inner = &events[at + 1..end];
                if let Some((name, caption)) = lone_figure(inner) {
                    self.figure(name, caption, &plain(inner))?;
                    return Ok(end + 1);
                }
                if let (Some(Event::Start(Tag::Table(_))), Some(Event::Text(first))) =
                    (events.get(end + 1), inner.first())
                    && let Some(rest) = first.strip_prefix(CAPTION)
                {
                    let rest: CowStr<'a> = rest.to_owned().into();
                    let mut label = rest.to_string();
                    label.push_str(&plain(&inner[1..]));
                    self.open_table(&events[end + 1], &label);
                    self.raw("<caption>");
                    self.out.push(Event::Text(rest));
                    self.inline(&inner[1..])?;
                    self.raw("</caption>\n");
                    self.caption_pending = true;
                    return Ok(end + 1);
                }
                self.out.push(events[at].clone());
                self.inline(inner)?;
                self.out.push(events[end].clone());
                Ok(end + 1)
            }
            _ => {
                self.event(events, at)?;
                Ok(at + 1)
            }
        }
    }

    fn inline(&mut self, events: &[Event<'a>]) -> Result<(), HtmlError> {
        for at in 0..events.len() {
            self.event(events, at)?;
        }
        Ok(())
    }

    fn event(&mut self, events: &[Event<'a>], at: usize) -> Result<(), HtmlError> {
        let event = &events[at];
        match event {
            Event::Html(text) | Event::InlineHtml(text) => self.out.push(Event::Text(text.clone())),
            Event::Start(Tag::HtmlBlock) => self.out.push(Event::Start(Tag::Paragraph)),
            Event::End(TagEnd::HtmlBlock) => self.out.push(Event::End(TagEnd::Paragraph)),
            Event::Start(Tag::Link { link_type, dest_url, .. }) => self.link(*link_type, dest_url),
            // A picture that is not one of the figures stands as its text.
            Event::Start(Tag::Image { .. }) => self.closers.push(""),
            Event::End(TagEnd::Link | TagEnd::Image) => {
                let closer = self.closers.pop().unwrap_or_default();
                if !closer.is_empty() {
                    self.raw_inline(closer);
                }
            }
            Event::Start(Tag::Strong) => match verdict(events.get(at + 1)) {
                Some(class) => self.raw_inline(format!("<strong class=\"verdict {class}\">")),
                None => self.raw_inline("<strong>"),
            },
            Event::Start(Tag::Table(_)) => {
                if !std::mem::take(&mut self.caption_pending) {
                    let label = format!("Table {}", self.tables + 1);
                    self.open_table(event, &label);
                }
            }
            Event::End(TagEnd::Table) => self.raw("</tbody>\n</table></div>\n"),
            Event::Start(Tag::TableHead) => {
                self.in_head = true;
                self.column = 0;
                self.raw("<thead>\n<tr>");
            }
            Event::End(TagEnd::TableHead) => {
                self.in_head = false;
                self.raw("</tr>\n</thead>\n<tbody>\n");
            }
            Event::Start(Tag::TableRow) => {
                self.column = 0;
                self.raw("<tr>");
            }
            Event::End(TagEnd::TableRow) => self.raw("</tr>\n"),
            Event::Start(Tag::TableCell) => {
                let empty = matches!(events.get(at + 1), Some(Event::End(TagEnd::TableCell)));
                self.cell(empty);
            }
            Event::End(TagEnd::TableCell) => {
                let closer = self.closers.pop().unwrap_or_default();
                self.raw(closer);
                self.column += 1;
            }
            Event::FootnoteReference(label) => self.reference(label),
            Event::Start(Tag::FootnoteDefinition(label)) => self.note(label),
            Event::End(TagEnd::FootnoteDefinition) => {
                let closer = self.closers.pop().unwrap_or_default();
                self.raw(closer);
            }
            _ => self.out.push(event.clone()),
        }
        Ok(())
    }

    fn heading(&mut self, level: HeadingLevel, inner: &[Event<'a>]) -> Result<(), HtmlError> {
        let text = plain(inner);
        if level == HeadingLevel::H1 && self.heading.is_none() {
            let before = self.out.len();
            self.inline(inner)?;
            let mut html = String::new();
            pulldown_cmark::html::push_html(&mut html, self.out.drain(before..));
            self.heading = Some(html);
            return Ok(());
        }
        let level = if level == HeadingLevel::H1 { HeadingLevel::H2 } else { level };
        let id = self.new_id(&text);
        self.raw(format!("<{level} id=\"{}\">", xml(&id)));
        self.inline(inner)?;
        self.raw(format!("</{level}>\n"));
        if matches!(level, HeadingLevel::H2 | HeadingLevel::H3) {
            self.contents.push(Heading { deep: level == HeadingLevel::H3, id, text });
        }
        Ok(())
    }

    /// An id made of a heading's letters and digits, unlike every other id of the page.
    fn new_id(&mut self, text: &str) -> String {
        let mut slug = String::new();
        for character in text.to_lowercase().chars() {
            if character.is_alphanumeric() {
                slug.push(character);
            } else if !slug.is_empty() && !slug.ends_with('-') {
                slug.push('-');
            }
        }
        let slug = slug.trim_end_matches('-');
        let base = match slug {
            "" => "section".to_owned(),
            _ if slug.starts_with("fig-") || slug.starts_with("note-") => format!("section-{slug}"),
            _ => slug.to_owned(),
        };
        let mut id = base.clone();
        let mut counter = 2;
        while !self.ids.insert(id.clone()) {
            id = format!("{base}-{counter}");
            counter += 1;
        }
        id
    }

    fn figure(&mut self, name: &str, caption: &str, alternative: &str) -> Result<(), HtmlError> {
        let document = *self.figures.get(name).ok_or_else(|| HtmlError::NoSuchFigure(name.to_owned()))?;
        if !self.shown.insert(name.to_owned()) {
            return Err(HtmlError::FigureTwice(name.to_owned()));
        }
        let label = xml(if caption.is_empty() { alternative } else { caption });
        // The page states the drawings' style once.
        let drawing = document.replace(svg::STYLE, "");
        let drawing = drawing.replace("\n\n", "\n");
        self.raw(format!(
            "<figure>\n<div class=\"plot\" role=\"region\" tabindex=\"0\" aria-label=\"{label}\">\n{drawing}</div>\n"
        ));
        if !caption.is_empty() {
            self.raw(format!("<figcaption>{label}</figcaption>\n"));
        }
        self.raw("</figure>\n");
        Ok(())
    }

    fn link(&mut self, link_type: LinkType, target: &str) {
        let target = match link_type {
            LinkType::Email => format!("mailto:{target}"),
            _ => target.to_owned(),
        };
        if is_safe_target(&target) {
            self.raw_inline(format!("<a href=\"{}\">", xml(&target)));
            self.closers.push("</a>");
        } else {
            self.closers.push("");
        }
    }

    fn open_table(&mut self, start: &Event<'a>, label: &str) {
        if let Event::Start(Tag::Table(columns)) = start {
            self.columns.clone_from(columns);
        }
        self.tables += 1;
        let label = xml(label);
        self.raw(format!(
            "<div class=\"scroll\" role=\"region\" tabindex=\"0\" aria-label=\"{label}\"><table>\n"
        ));
    }

    fn cell(&mut self, empty: bool) {
        let alignment = self.columns.get(self.column).copied().unwrap_or(Alignment::None);
        let class = match alignment {
            Alignment::Right => " class=\"num\"",
            Alignment::Center => " class=\"mid\"",
            Alignment::Left | Alignment::None => "",
        };
        let row_head = self.column == 0 && alignment == Alignment::Left;
        let (tag, scope, closer) = match (self.in_head, row_head) {
            _ if empty => ("td", "", "</td>"),
            (true, _) => ("th", " scope=\"col\"", "</th>"),
            (false, true) => ("th", " scope=\"row\"", "</th>"),
            (false, false) => ("td", "", "</td>"),
        };
        self.raw(format!("<{tag}{scope}{class}>"));
        self.closers.push(closer);
    }

    fn reference(&mut self, label: &str) {
        let Some(note) = self.notes.get_mut(label).filter(|note| note.defined) else {
            // Without a definition there is nothing to lead to.
            self.out.push(Event::Text(format!("[^{label}]").into()));
            return;
        };
        note.references += 1;
        let Note { number, references, .. } = *note;
        self.raw_inline(format!(
            "<sup><a id=\"note-{number}-{references}\" href=\"#note-{number}\" aria-label=\"note {number}\">{number}</a></sup>"
        ));
    }

    fn note(&mut self, label: &str) {
        match self.notes.get(label).copied() {
            Some(Note { number, .. }) => {
                self.raw(format!(
                    "<div class=\"footnote\" id=\"note-{number}\"><a class=\"back\" href=\"#note-{number}-1\" \
                     aria-label=\"back to the text of note {number}\">{number}</a><div>\n"
                ));
            }
            None => self.raw("<div class=\"footnote\"><div>\n"),
        }
        self.closers.push("</div></div>\n");
    }
}

fn end_of(events: &[Event<'_>], start: usize, is_end: impl Fn(&TagEnd) -> bool) -> usize {
    let length = events[start..].iter().position(|event| matches!(event, Event::End(tag) if is_end(tag)));
    // The parser's starts and ends are balanced; without an end the rest of the text would belong to the block.
    start + length.unwrap_or(events.len() - start - 1)
}

/// The readable text of inline events.
fn plain(events: &[Event<'_>]) -> String {
    let mut text = String::new();
    for event in events {
        match event {
            Event::Text(part) | Event::Code(part) | Event::Html(part) | Event::InlineHtml(part) => {
                text.push_str(part);
            }
            Event::SoftBreak | Event::HardBreak => text.push(' '),
            _ => {}
        }
    }
    text
}

/// The name and caption of a figure that a paragraph consists of.
fn lone_figure<'e>(inner: &'e [Event<'_>]) -> Option<(&'e str, &'e str)> {
    match (inner.first()?, inner.last()?) {
        (Event::Start(Tag::Image { dest_url, title, .. }), Event::End(TagEnd::Image)) => {
            let pictures =
                inner.iter().filter(|event| matches!(event, Event::Start(Tag::Image { .. }))).count();
            let name = dest_url.strip_prefix("figures/")?.strip_suffix(".svg")?;
            (pictures == 1).then_some((name, title.as_ref()))
        }
        _ => None,
    }
}

fn verdict(first: Option<&Event<'_>>) -> Option<&'static str> {
    let Some(Event::Text(text)) = first else { return None };
    let sign = text.chars().next()?;
    VERDICT_SIGNS.iter().find(|(known, _)| *known == sign).map(|(_, class)| *class)
}

fn is_safe_target(target: &str) -> bool {
    let lower = target.to_ascii_lowercase();
    !target.chars().any(char::is_control)
        && ["http://", "https://", "mailto:", "#"].iter().any(|start| lower.starts_with(start))
}

#[cfg(test)]
#[path = "html_tests.rs"]
mod tests;
