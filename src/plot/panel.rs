//! A panel: a frame with two axes, and what is drawn in it.

use super::picture::escaped;
use super::scale::Axis;
use std::fmt::Write;

/// Where a panel lies in its picture, in units of the drawing.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Area {
    /// Left edge of the frame.
    pub left: f64,
    /// Right edge.
    pub right: f64,
    /// Upper edge.
    pub top: f64,
    /// Lower edge.
    pub bottom: f64,
}

/// How a line is drawn; each has its own dashes besides its colour.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Stroke {
    /// What was measured: solid.
    Main,
    /// What a model says: dashed.
    Model,
    /// What another model says: dotted.
    Other,
    /// Many thin lines.
    Faint,
    /// A limit: dash and dot.
    Limit,
}

impl Stroke {
    pub(super) fn class(self) -> &'static str {
        match self {
            Self::Main => "main",
            Self::Model => "model",
            Self::Other => "other",
            Self::Faint => "faint",
            Self::Limit => "limit",
        }
    }
}

/// How a point is marked; each has its own shape besides its colour.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Mark {
    /// A filled dot.
    Dot,
    /// A small dot, for many.
    Fine,
    /// An open circle.
    Ring,
    /// A cross.
    Cross,
    /// An open square.
    Square,
    /// A short upright stroke.
    Tick,
}

impl Mark {
    pub(super) fn class(self) -> &'static str {
        match self {
            Self::Dot => "dot",
            Self::Fine => "fine",
            Self::Ring => "ring",
            Self::Cross => "cross",
            Self::Square => "square",
            Self::Tick => "tick",
        }
    }

    /// Its shape about a point to which the pen was moved. The first `M` of each mark is its centre.
    pub(super) fn shape(self) -> &'static str {
        match self {
            Self::Dot | Self::Fine => "h0",
            Self::Ring => "m-4 0a4 4 0 1 0 8 0a4 4 0 1 0-8 0",
            Self::Cross => "m-4-4l8 8m0-8l-8 8",
            Self::Square => "m-4-4h8v8h-8z",
            Self::Tick => "m0-5v10",
        }
    }
}

/// A frame with axes. Values go in; what lies beyond the ends of a scale is drawn at its edge.
#[derive(Debug, Clone)]
pub struct Panel {
    pub(super) area: Area,
    pub(super) x: Axis,
    pub(super) y: Axis,
    pub(super) under: String,
    pub(super) marks: String,
}

/// Two decimals at most, without trailing zeros.
pub(super) fn number(value: f64) -> String {
    let text = format!("{value:.2}");
    let text = text.trim_end_matches('0').trim_end_matches('.');
    if text == "-0" { "0".to_owned() } else { text.to_owned() }
}

impl Panel {
    /// An empty panel.
    #[must_use]
    pub fn new(area: Area, x: Axis, y: Axis) -> Self {
        Self { area, x, y, under: String::new(), marks: String::new() }
    }

    fn at_x(&self, value: f64) -> f64 {
        self.area.left + self.x.scale.share(value).clamp(0.0, 1.0) * (self.area.right - self.area.left)
    }

    fn at_y(&self, value: f64) -> f64 {
        self.area.bottom + self.y.scale.share(value).clamp(0.0, 1.0) * (self.area.top - self.area.bottom)
    }

    fn at(&self, x: f64, y: f64) -> String {
        format!("{} {}", number(self.at_x(x)), number(self.at_y(y)))
    }

    /// A line through points; a point that is not finite breaks it. `name` tells a reading program what it is.
    pub fn line(&mut self, name: &str, stroke: Stroke, points: impl IntoIterator<Item = (f64, f64)>) {
        let mut path = String::new();
        let mut pen = 'M';
        for (x, y) in points {
            if x.is_finite() && y.is_finite() {
                let _ = write!(path, "{pen}{}", self.at(x, y));
                pen = 'L';
            } else {
                pen = 'M';
            }
        }
        self.path(name, stroke.class(), &path);
    }

    /// Marks at points; those that are not finite are left out.
    pub fn marks(&mut self, name: &str, mark: Mark, points: impl IntoIterator<Item = (f64, f64)>) {
        let mut path = String::new();
        for (x, y) in points.into_iter().filter(|(x, y)| x.is_finite() && y.is_finite()) {
            let _ = write!(path, "M{}{}", self.at(x, y), mark.shape());
        }
        self.path(name, mark.class(), &path);
    }

    /// Upright strokes from a low to a high value, each at its x.
    pub fn spans(&mut self, name: &str, stroke: Stroke, spans: impl IntoIterator<Item = (f64, f64, f64)>) {
        let mut path = String::new();
        for (x, low, high) in spans.into_iter().filter(|(x, low, high)| (x + low + high).is_finite()) {
            let _ = write!(path, "M{}V{}", self.at(x, low), number(self.at_y(high)));
        }
        self.path(name, stroke.class(), &path);
    }

    /// Flat strokes from a low to a high value, each at its y.
    pub fn flat_spans(&mut self, name: &str, stroke: Stroke, spans: impl IntoIterator<Item = (f64, f64, f64)>) {
        let mut path = String::new();
        for (low, high, y) in spans.into_iter().filter(|(low, high, y)| (y + low + high).is_finite()) {
            let _ = write!(path, "M{}H{}", self.at(low, y), number(self.at_x(high)));
        }
        self.path(name, stroke.class(), &path);
    }

    /// Bars that stand on the lower edge: from, to, height.
    pub fn bars(&mut self, name: &str, bars: impl IntoIterator<Item = (f64, f64, f64)>) {
        let mut path = String::new();
        for (from, to, height) in bars {
            let _ = write!(
                path,
                "M{} {}V{}H{}V{}z",
                number(self.at_x(from)),
                number(self.area.bottom),
                number(self.at_y(height)),
                number(self.at_x(to)),
                number(self.area.bottom)
            );
        }
        self.path(name, "bar", &path);
    }

    /// Bars that lie from the left edge: length, from, to.
    pub fn lying_bars(&mut self, name: &str, bars: impl IntoIterator<Item = (f64, f64, f64)>) {
        let mut path = String::new();
        for (length, from, to) in bars {
            let _ = write!(
                path,
                "M{} {}H{}V{}H{}z",
                number(self.area.left),
                number(self.at_y(from)),
                number(self.at_x(length)),
                number(self.at_y(to)),
                number(self.area.left)
            );
        }
        self.path(name, "bar", &path);
    }

    /// The area between two lines: x, low, high.
    pub fn band(&mut self, name: &str, edges: &[(f64, f64, f64)]) {
        let mut path = String::new();
        let pen = |path: &String| if path.is_empty() { 'M' } else { 'L' };
        for (x, _, high) in edges {
            let _ = write!(path, "{}{}", pen(&path), self.at(*x, *high));
        }
        for (x, low, _) in edges.iter().rev() {
            let _ = write!(path, "L{}", self.at(*x, *low));
        }
        if !path.is_empty() {
            path.push('z');
            let _ = writeln!(self.under, "<path class=\"band\" data-series=\"{}\" d=\"{path}\"/>", escaped(name));
        }
    }

    /// A shaded stretch of the x axis over the whole height; `class` is `zone` or `off`.
    fn shaded(&mut self, name: &str, class: &str, from: f64, to: f64) {
        let (left, right) = (self.at_x(from), self.at_x(to));
        if right > left {
            let (top, bottom) = (number(self.area.top), number(self.area.bottom));
            let (left, right) = (number(left), number(right));
            let _ = writeln!(
                self.under,
                "<path class=\"{class}\" data-series=\"{}\" d=\"M{left} {top}H{right}V{bottom}H{left}z\"/>",
                escaped(name)
            );
        }
    }

    /// A stretch of the x axis that is pointed out.
    pub fn zone(&mut self, name: &str, from: f64, to: f64) {
        self.shaded(name, "zone", from, to);
    }

    /// A stretch of the x axis where nothing happens.
    pub fn off(&mut self, name: &str, from: f64, to: f64) {
        self.shaded(name, "off", from, to);
    }

    /// A line across the panel at a y.
    pub fn level(&mut self, name: &str, stroke: Stroke, y: f64) {
        self.line(name, stroke, [(self.x.scale.low, y), (self.x.scale.high, y)]);
    }

    /// An upright line at an x.
    pub fn upright(&mut self, name: &str, stroke: Stroke, x: f64) {
        self.line(name, stroke, [(x, self.y.scale.low), (x, self.y.scale.high)]);
    }

    /// Words beside an upright line, at the upper edge.
    pub fn words_at(&mut self, x: f64, line: usize, words: &str) {
        let at = self.at_x(x);
        let near_right = at > 0.62 * self.area.right;
        let (anchor, shift) = if near_right { ("end", -5.0) } else { ("start", 5.0) };
        let y = self.area.top + 14.0 + 16.0 * line as f64;
        self.text(at + shift, y, anchor, words);
    }

    /// Words at the end of something, in the units of the axes.
    pub fn words_after(&mut self, x: f64, y: f64, words: &str) {
        self.text(self.at_x(x) + 6.0, self.at_y(y) + 4.0, "start", words);
    }

    /// Words in the middle of an empty panel.
    pub fn words_in_the_middle(&mut self, words: &str) {
        let Area { left, right, top, bottom } = self.area;
        self.text(0.5 * (left + right), 0.5 * (top + bottom), "middle", words);
    }

    /// Words on the right of the frame, at a y.
    pub fn words_right(&mut self, y: f64, words: &str) {
        self.text(self.area.right + 6.0, self.at_y(y) + 4.0, "start", words);
    }

    fn text(&mut self, x: f64, y: f64, anchor: &str, words: &str) {
        let (x, y, words) = (number(x), number(y), escaped(words));
        let _ = writeln!(self.marks, "<text x=\"{x}\" y=\"{y}\" text-anchor=\"{anchor}\">{words}</text>");
    }

    fn path(&mut self, name: &str, class: &str, path: &str) {
        if !path.is_empty() {
            let _ = writeln!(self.marks, "<path class=\"{class}\" data-series=\"{}\" d=\"{path}\"/>", escaped(name));
        }
    }
}
