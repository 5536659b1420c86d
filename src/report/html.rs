//! Markdown to the body of the page: tables that scroll, figures inline, headings that can be linked to.

use super::escape;
use super::figures::Figure;
use pulldown_cmark::{CowStr, Event, HeadingLevel, Options, Parser, Tag, TagEnd};
use serde::Serialize;

/// What the page template names.
#[derive(Debug, Serialize)]
pub(super) struct Page {
    pub title: String,
    pub style: String,
    pub contents: Vec<Link>,
    pub body: String,
}

/// An entry of the contents list.
#[derive(Debug, Clone, Serialize)]
pub(super) struct Link {
    pub id: String,
    pub text: String,
}

pub(super) struct Body {
    pub html: String,
    pub contents: Vec<Link>,
}

pub(super) fn body(markdown: &str, figures: &[Figure]) -> Body {
    let mut contents = Vec::new();
    let mut events = Vec::new();
    let mut heading: Option<(HeadingLevel, String)> = None;
    let mut skipping = false;
    let mut numbered = 0;
    let mut tables = 0;
    for event in Parser::new_ext(markdown, Options::ENABLE_TABLES) {
        match event {
            // The template holds no raw HTML, and no text of a plan may become any.
            Event::Html(text) | Event::InlineHtml(text) => events.push(Event::Text(text)),
            Event::Start(Tag::Heading { level, classes, attrs, .. }) => {
                numbered += 1;
                heading = Some((level, String::new()));
                events.push(Event::Start(Tag::Heading { level, id: Some(format!("part-{numbered}").into()), classes, attrs }));
            }
            Event::End(TagEnd::Heading(level)) => {
                if let Some((HeadingLevel::H2, text)) = heading.take() {
                    contents.push(Link { id: format!("part-{numbered}"), text: escape::html(&text) });
                }
                events.push(Event::End(TagEnd::Heading(level)));
            }
            Event::Start(Tag::Table(alignments)) => {
                tables += 1;
                events.push(Event::Html(CowStr::from(format!(
                    "<div class=\"wide\" tabindex=\"0\" role=\"region\" aria-label=\"Table {tables}\">\n"
                ))));
                events.push(Event::Start(Tag::Table(alignments)));
            }
            Event::End(TagEnd::Table) => {
                events.push(Event::End(TagEnd::Table));
                events.push(Event::Html(CowStr::from("</div>\n")));
            }
            Event::Start(Tag::Image { dest_url, .. }) => {
                skipping = true;
                let known = figures.iter().find(|figure| dest_url.strip_prefix("figures/") == Some(figure.file.as_str()));
                if let Some(figure) = known {
                    events.push(Event::InlineHtml(CowStr::from(format!("<span class=\"figure\">{}</span>", figure.svg.trim()))));
                }
            }
            Event::End(TagEnd::Image) => skipping = false,
            other => {
                if let (Some((_, text)), Event::Text(part)) = (&mut heading, &other) {
                    text.push_str(part);
                }
                if !skipping {
                    events.push(other);
                }
            }
        }
    }
    let mut html = String::with_capacity(markdown.len() * 2);
    pulldown_cmark::html::push_html(&mut html, events.into_iter());
    Body { html, contents }
}
