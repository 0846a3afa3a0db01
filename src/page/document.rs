//! The frame of every page, and the pieces that all share.

use crate::pictures::capital;
use crate::plot::{Medium, Picture, STYLE, escaped};
use std::fmt::Write;

const PAGE_STYLE: &str = include_str!("page.css");
const SCRIPT: &str = include_str!("page.js");

/// What a page may load: nothing from outside of itself, and sound from where it lies.
const POLICY: &str =
    "default-src 'none'; style-src 'unsafe-inline'; script-src 'unsafe-inline'; media-src data: file: 'self'";

/// Characters from which on a value is a sentence, and not set in bold.
const LONG_VALUE: usize = 36;

/// A page of a title, a body and the text of its JSON.
pub(super) fn document(title: &str, body: &str, json: &str) -> String {
    let title = escaped(title);
    let version = env!("CARGO_PKG_VERSION");
    // "<" does not occur in JSON but in strings, where it can be written so; the page then holds no "</script>" of others.
    let json = json.replace('<', "\\u003c");
    format!(
        "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n\
         <meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n\
         <meta http-equiv=\"Content-Security-Policy\" content=\"{POLICY}\">\n\
         <meta name=\"generator\" content=\"gaptone {version}\">\n\
         <title>{title}</title>\n<style>\n{STYLE}{PAGE_STYLE}</style>\n</head>\n<body>\n<main>\n{body}\
         <footer><p>Made by gaptone {version}.</p></footer>\n</main>\n\
         <script type=\"application/json\" id=\"{}\">{json}</script>\n<script>\n{SCRIPT}</script>\n</body>\n</html>\n",
        super::kept::PLACE
    )
}

/// A name from outside, kept from mixing its direction of writing with ours.
pub(super) fn name(text: &str) -> String {
    format!("<bdi>{}</bdi>", escaped(text))
}

/// A picture with its sentence above and its note beside or below it; headings of a level.
pub(super) fn figure(picture: &Picture, level: usize, place: &str) -> String {
    format!(
        "<figure id=\"{place}\">\n<h{level}>{}</h{level}>\n<div class=\"drawing\">\n{}</div>\n<figcaption>{}</figcaption>\n</figure>\n",
        escaped(&picture.title),
        picture.svg(Medium::Page),
        escaped(&picture.reading)
    )
}

/// Rows of a name, a value and something beside it.
pub(super) fn figures(rows: &[(String, String, String)]) -> String {
    if rows.is_empty() {
        return String::new();
    }
    let mut out = "<dl class=\"figures\">\n".to_owned();
    for (label, value, aside) in rows {
        // Writing to a string cannot fail.
        let class = if value.chars().count() > LONG_VALUE { " class=\"sentence\"" } else { "" };
        let _ = write!(out, "<div><dt>{}</dt><dd{class}>{}</dd>", escaped(label), escaped(value));
        if !aside.is_empty() {
            let _ = write!(out, "<dd class=\"aside\">{}</dd>", escaped(aside));
        }
        out.push_str("</div>\n");
    }
    out + "</dl>\n"
}

/// Sentences as a list under a heading; nothing if there are none.
pub(super) fn list(heading: &str, level: usize, lines: &[String]) -> String {
    if lines.is_empty() {
        return String::new();
    }
    let items: String = lines.iter().map(|line| format!("<li>{}</li>\n", escaped(line))).collect();
    format!("<h{level}>{}</h{level}>\n<ul>\n{items}</ul>\n", escaped(heading))
}

/// A table that scrolls by itself where it is too wide. Cells are HTML already.
pub(super) fn table(caption: &str, heads: &[&str], rows: &[Vec<String>]) -> String {
    let head: String = heads.iter().map(|head| format!("<th scope=\"col\">{}</th>", escaped(head))).collect();
    let mut body = String::new();
    for row in rows {
        body.push_str("<tr>");
        for (k, cell) in row.iter().enumerate() {
            let _ =
                if k == 0 { write!(body, "<th scope=\"row\">{cell}</th>") } else { write!(body, "<td>{cell}</td>") };
        }
        body.push_str("</tr>\n");
    }
    let caption = escaped(caption);
    format!(
        "<div class=\"wide\" role=\"region\" tabindex=\"0\" aria-label=\"{caption}\"><table>\n<caption>{caption}</caption>\n\
         <thead><tr>{head}</tr></thead>\n<tbody>\n{body}</tbody>\n</table></div>\n"
    )
}

/// The caution that stands beside every voltage.
pub(super) fn caution(text: &str) -> String {
    let text = text.strip_prefix("caution: ").unwrap_or(text);
    format!("<p class=\"caution\"><strong>Caution.</strong> {}</p>\n", escaped(&capital(text)))
}

/// A text that is shown as it is, such as a bench.
pub(super) fn verbatim(label: &str, text: &str) -> String {
    let label = escaped(label);
    format!(
        "<pre class=\"wide\" role=\"region\" tabindex=\"0\" aria-label=\"{label}\"><code dir=\"auto\">{}</code></pre>\n",
        escaped(text)
    )
}

/// Something long that is opened when wanted.
pub(super) fn folded(summary: &str, content: &str) -> String {
    format!("<details><summary>{}</summary>\n{content}</details>\n", escaped(summary))
}
