//! A picture: panels with their axes and legend as SVG text.

use super::panel::{Area, Mark, Panel, Stroke, number};
use super::style::STYLE;
use std::fmt::Write;

/// Where a picture is to be seen.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Medium {
    /// Within a page that has the style sheet and shows the title.
    Page,
    /// Alone in a file: style sheet, ground and title are in it.
    File,
}

/// What an entry of a legend explains.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Legend {
    /// A line.
    Line(Stroke),
    /// A mark.
    Mark(Mark),
    /// A filled area: `bar`, `band`, `zone` or `off`.
    Area(&'static str),
}

/// A picture with what it says.
#[derive(Debug, Clone)]
pub struct Picture {
    /// Short name, for file names and places in a page.
    pub kind: &'static str,
    /// What it shows, as a sentence with figures.
    pub title: String,
    /// How to read it.
    pub reading: String,
    /// The panels, from top to bottom.
    pub panels: Vec<Panel>,
    /// What the lines and marks are.
    pub legend: Vec<(Legend, String)>,
}

/// Width of every picture in units of the drawing.
pub(super) const WIDTH: f64 = 600.0;
/// Widest character of a label on a narrow screen, in units of the drawing.
const CHARACTER: f64 = 10.0;
/// Height of a row of the legend.
const ROW: f64 = 22.0;
/// Room for a sample of a line.
const SAMPLE: f64 = 30.0;
/// Room for tick labels and title of the x axis.
const FOOT: f64 = 46.0;

impl Picture {
    /// The usual place of one panel of a height.
    #[must_use]
    pub fn area(height: f64) -> Area {
        Self::area_below(0.0, height)
    }

    /// The usual place of a panel below `offset`, with room for its titles.
    #[must_use]
    pub fn area_below(offset: f64, height: f64) -> Area {
        Area { left: 68.0, right: WIDTH - 12.0, top: offset + 28.0, bottom: offset + 28.0 + height }
    }

    /// The drawing as SVG text.
    #[must_use]
    pub fn svg(&self, medium: Medium) -> String {
        let head = if medium == Medium::File { wrapped(&self.title, 66) } else { Vec::new() };
        let head_height = if head.is_empty() { 0.0 } else { 12.0 + 20.0 * head.len() as f64 };
        let foot = self.panels.iter().map(|panel| panel.area.bottom).fold(0.0, f64::max) + FOOT;
        let rows = legend_rows(&self.legend);
        let height = head_height + foot + ROW * rows.len() as f64 + 4.0;
        let (width, height) = (number(WIDTH), number(height));
        let mut out = format!(
            "<svg xmlns=\"http://www.w3.org/2000/svg\" class=\"plot\" role=\"img\" viewBox=\"0 0 {width} {height}\" \
             data-kind=\"{}\">\n<title>{}</title>\n<desc>{}</desc>\n",
            self.kind,
            escaped(&self.title),
            escaped(&self.reading)
        );
        if medium == Medium::File {
            // "]]>" and markup do not occur in the style sheet.
            let _ =
                writeln!(out, "<style>{STYLE}</style>\n<rect class=\"ground\" width=\"{width}\" height=\"{height}\"/>");
            for (k, line) in head.iter().enumerate() {
                let y = number(22.0 + 20.0 * k as f64);
                let _ = writeln!(out, "<text class=\"head\" x=\"10\" y=\"{y}\">{}</text>", escaped(line));
            }
        }
        let _ = writeln!(out, "<g transform=\"translate(0 {})\">", number(head_height));
        for panel in &self.panels {
            put_panel(&mut out, panel);
        }
        for (k, row) in rows.iter().enumerate() {
            put_legend_row(&mut out, row, foot + ROW * (k as f64 + 0.5));
        }
        out.push_str("</g>\n</svg>\n");
        out
    }
}

fn put_panel(out: &mut String, panel: &Panel) {
    let Area { left, right, top, bottom } = panel.area;
    let ends = |scale: super::Scale, from: f64, to: f64| {
        let kind = if scale.logarithmic { "log" } else { "linear" };
        format!("{kind} {:e} {:e} {} {}", scale.low, scale.high, number(from), number(to))
    };
    let _ = writeln!(
        out,
        "<g data-x=\"{}\" data-y=\"{}\" data-xu=\"{}\" data-yu=\"{}\">",
        ends(panel.x.scale, left, right),
        ends(panel.y.scale, bottom, top),
        panel.x.unit,
        panel.y.unit
    );
    out.push_str(&panel.under);
    let at_x = |value: f64| number(left + panel.x.scale.share(value) * (right - left));
    let at_y = |value: f64| number(bottom + panel.y.scale.share(value) * (top - bottom));
    let (l, r, t, b) = (number(left), number(right), number(top), number(bottom));
    let mut grid = String::new();
    for (tick, _) in &panel.x.ticks {
        let _ = write!(grid, "M{} {b}V{t}", at_x(*tick));
    }
    for (tick, _) in &panel.y.ticks {
        let _ = write!(grid, "M{l} {}H{r}", at_y(*tick));
    }
    if !grid.is_empty() {
        let _ = writeln!(out, "<path class=\"grid\" d=\"{grid}\"/>");
    }
    out.push_str(&panel.marks);
    let _ = writeln!(out, "<path class=\"axis\" d=\"M{l} {t}V{b}H{r}\"/>");
    let mut free_from = f64::NEG_INFINITY;
    for (tick, label) in &panel.x.ticks {
        let at = left + panel.x.scale.share(*tick) * (right - left);
        let half = 0.5 * CHARACTER * label.chars().count() as f64;
        // Labels that would run into each other on a narrow screen are left out.
        if at - half < free_from {
            continue;
        }
        free_from = at + half + 0.5 * CHARACTER;
        // The outermost ones stay within the drawing.
        let centre = number(at.clamp(half, (WIDTH - half).max(half)));
        let y = number(bottom + 17.0);
        let _ = writeln!(
            out,
            "<text class=\"at-x\" x=\"{centre}\" y=\"{y}\" text-anchor=\"middle\">{}</text>",
            escaped(label)
        );
    }
    for (tick, label) in &panel.y.ticks {
        let y = number(bottom + panel.y.scale.share(*tick) * (top - bottom) + 4.0);
        let x = number(left - 6.0);
        let _ = writeln!(out, "<text x=\"{x}\" y=\"{y}\" text-anchor=\"end\">{}</text>", escaped(label));
    }
    let middle = number(0.5 * (left + right));
    let below = number(bottom + 37.0);
    let above = number(top - 11.0);
    let _ =
        writeln!(out, "<text x=\"{middle}\" y=\"{below}\" text-anchor=\"middle\">{}</text>", escaped(&panel.x.title));
    let _ = writeln!(out, "<text x=\"4\" y=\"{above}\">{}</text>\n</g>", escaped(&panel.y.title));
}

/// Entries with the x at which each begins, row by row.
type Row<'a> = Vec<(f64, &'a (Legend, String))>;

fn legend_rows(legend: &[(Legend, String)]) -> Vec<Row<'_>> {
    let mut rows: Vec<Row> = Vec::new();
    let mut x = f64::INFINITY;
    for entry in legend {
        let width = SAMPLE + CHARACTER * entry.1.chars().count() as f64 + 14.0;
        if x + width > WIDTH {
            rows.push(Vec::new());
            x = 10.0;
        }
        if let Some(row) = rows.last_mut() {
            row.push((x, entry));
        }
        x += width;
    }
    rows
}

fn put_legend_row(out: &mut String, row: &Row, y: f64) {
    for (x, (what, words)) in row {
        let sample = match what {
            Legend::Line(stroke) => {
                format!("<path class=\"{}\" d=\"M{} {}h24\"/>", stroke.class(), number(*x), number(y))
            }
            Legend::Mark(mark) => {
                format!("<path class=\"{}\" d=\"M{} {}{}\"/>", mark.class(), number(x + 12.0), number(y), mark.shape())
            }
            Legend::Area(class) => {
                format!("<path class=\"{class}\" d=\"M{} {}h20v10h-20z\"/>", number(x + 2.0), number(y - 5.0))
            }
        };
        let (x, y, words) = (number(x + SAMPLE), number(y + 4.0), escaped(words));
        let _ = writeln!(out, "{sample}\n<text x=\"{x}\" y=\"{y}\">{words}</text>");
    }
}

/// Text with everything that is markup in SVG, HTML or an attribute written out. Control characters, which no such document
/// may hold, become the sign for what cannot be shown.
#[must_use]
pub fn escaped(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for character in text.chars() {
        match character {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            '\'' => out.push_str("&#39;"),
            '\n' | '\t' => out.push(character),
            other if other.is_control() || matches!(other, '\u{fffe}' | '\u{ffff}') => out.push('\u{fffd}'),
            other => out.push(other),
        }
    }
    out
}

/// Lines of at most so many characters, broken between words.
fn wrapped(text: &str, most: usize) -> Vec<String> {
    let mut lines: Vec<String> = Vec::new();
    for word in text.split_whitespace() {
        match lines.last_mut() {
            Some(line) if line.chars().count() + 1 + word.chars().count() <= most => {
                line.push(' ');
                line.push_str(word);
            }
            _ => lines.push(word.to_owned()),
        }
    }
    lines
}

#[cfg(test)]
mod tests {
    use super::super::{Axis, Scale};
    use super::*;

    fn picture() -> Picture {
        let axis = |words| Axis::new(Scale::linear(0.0, 10.0), words, "s", 5);
        let mut panel = Panel::new(Picture::area(200.0), axis("x"), axis("y"));
        panel.marks("points", Mark::Ring, [(0.0, 0.0), (10.0, 10.0), (f64::NAN, 1.0)]);
        panel.bars("bars", [(1.0, 2.0, 5.0)]);
        Picture {
            kind: "test",
            title: "5 < 7 & \"so on\"".to_owned(),
            reading: "read it".to_owned(),
            panels: vec![panel],
            legend: vec![(Legend::Mark(Mark::Ring), "a point".to_owned())],
        }
    }

    #[test]
    fn marks_lie_where_their_values_are_and_text_is_escaped() {
        let svg = picture().svg(Medium::File);
        assert!(svg.contains("<title>5 &lt; 7 &amp; &quot;so on&quot;</title>"), "{svg}");
        assert!(svg.contains("role=\"img\"") && svg.contains("<desc>read it</desc>"));
        assert!(svg.contains("data-series=\"points\" d=\"M68 228m") && svg.contains("M588 28m"), "{svg}");
        // A bar of half the height from a tenth to two tenths of the width.
        assert!(svg.contains("d=\"M120 228V128H172V228z\""), "{svg}");
        assert!(!svg.contains("NaN"));
    }

    #[test]
    fn in_a_page_neither_style_nor_title_is_repeated() {
        let svg = picture().svg(Medium::Page);
        assert!(!svg.contains("<style>") && !svg.contains("class=\"head\""));
    }

    #[test]
    fn control_characters_do_not_get_into_a_document() {
        assert_eq!(escaped("a\u{1}b\u{1b}[0m'"), "a\u{fffd}b\u{fffd}[0m&#39;");
    }
}
