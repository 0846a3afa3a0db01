//! Reads our drawings back: panels with the ends of their scales, and what is drawn in them.

#![allow(dead_code, reason = "each test program uses a part")]

/// A scale: from places in the drawing back to values.
#[derive(Debug, Clone, Copy)]
pub struct Scale {
    logarithmic: bool,
    low: f64,
    high: f64,
    from: f64,
    to: f64,
}

impl Scale {
    fn parse(text: &str) -> Self {
        let (kind, numbers) = text.split_once(' ').expect("kind and numbers");
        let numbers: Vec<f64> = numbers.split(' ').map(|part| part.parse().expect("a number")).collect();
        let [low, high, from, to] = numbers[..] else { panic!("{text}") };
        Self { logarithmic: kind == "log", low, high, from, to }
    }

    /// The value at a place.
    pub fn value(&self, at: f64) -> f64 {
        let share = (at - self.from) / (self.to - self.from);
        if self.logarithmic {
            self.low * (self.high / self.low).powf(share)
        } else {
            self.low + share * (self.high - self.low)
        }
    }

    /// What a hundredth of a unit of the drawing is worth at a value, and a little for rounding.
    pub fn grain(&self, value: f64) -> f64 {
        let share = 0.012 / (self.to - self.from).abs();
        if self.logarithmic {
            value * (self.high / self.low).ln() * share
        } else {
            (self.high - self.low).abs() * share
        }
    }
}

/// Something drawn: its name, its class and its path.
#[derive(Debug, Clone)]
pub struct Series {
    pub name: String,
    pub class: String,
    pub path: String,
}

/// A panel.
#[derive(Debug, Clone)]
pub struct Panel {
    pub x: Scale,
    pub y: Scale,
    pub series: Vec<Series>,
    /// Words with their place.
    pub texts: Vec<(f64, f64, String)>,
}

fn attribute<'a>(tag: &'a str, name: &str) -> Option<&'a str> {
    let start = tag.find(&format!(" {name}=\""))? + name.len() + 3;
    tag[start..].split('"').next()
}

/// All panels of a drawing, or of all drawings of a page.
pub fn panels(svg: &str) -> Vec<Panel> {
    let mut found = Vec::new();
    for part in svg.split("<g data-x=\"").skip(1) {
        let part = format!("<g data-x=\"{}", part.split("</g>").next().expect("it is closed"));
        let head = part.split('>').next().expect("a tag").to_owned();
        let series = part
            .split("<path")
            .skip(1)
            .filter_map(|tag| {
                let tag = format!("<path{}", tag.split('>').next()?);
                let of = |name| attribute(&tag, name).map(str::to_owned);
                Some(Series { name: of("data-series")?, class: of("class")?, path: of("d")? })
            })
            .collect();
        let texts = part
            .split("<text")
            .skip(1)
            .map(|text| {
                let (tag, rest) = text.split_once('>').expect("a tag");
                let tag = format!("<text{tag}");
                let number = |name| attribute(&tag, name).expect("a place").parse::<f64>().expect("a number");
                (number("x"), number("y"), rest.split('<').next().expect("words").to_owned())
            })
            .collect();
        let scale = |name: &str| Scale::parse(attribute(&head, name).expect("a scale"));
        found.push(Panel { x: scale("data-x"), y: scale("data-y"), series, texts });
    }
    found
}

impl Panel {
    /// What is drawn under a name.
    pub fn series(&self, name: &str) -> &Series {
        self.series.iter().find(|series| series.name == name).unwrap_or_else(|| panic!("nothing is drawn as {name}"))
    }

    /// Values of the marks of a name: a mark begins with `M x y`.
    pub fn marks(&self, name: &str) -> Vec<(f64, f64)> {
        self.points(name, &['M'])
    }

    /// Values of the corners of a line.
    pub fn corners(&self, name: &str) -> Vec<(f64, f64)> {
        self.points(name, &['M', 'L'])
    }

    fn points(&self, name: &str, pens: &[char]) -> Vec<(f64, f64)> {
        let path = &self.series(name).path;
        let mut found = Vec::new();
        for (at, _) in path.match_indices(pens) {
            let numbers = path[at + 1..].split(|c: char| !(c.is_ascii_digit() || matches!(c, '.' | '-' | ' '))).next();
            let mut numbers = numbers.expect("numbers").split(' ').map(|part| part.parse::<f64>().expect("a number"));
            let (x, y) = (numbers.next().expect("x"), numbers.next().expect("y"));
            found.push((self.x.value(x), self.y.value(y)));
        }
        found
    }

    /// Lengths of lying bars.
    pub fn lengths(&self, name: &str) -> Vec<f64> {
        let path = &self.series(name).path;
        path.split('M')
            .skip(1)
            .map(|bar| self.x.value(bar.split(['H', 'V']).nth(1).expect("a bar").parse().expect("a number")))
            .collect()
    }

    /// Heights of standing bars.
    pub fn heights(&self, name: &str) -> Vec<f64> {
        let path = &self.series(name).path;
        path.split('M')
            .skip(1)
            .map(|bar| self.y.value(bar.split(['H', 'V']).nth(1).expect("a bar").parse().expect("a number")))
            .collect()
    }

    /// Checks that points are drawn where they are.
    pub fn assert_drawn(&self, drawn: &[(f64, f64)], wanted: &[(f64, f64)]) {
        assert_eq!(drawn.len(), wanted.len(), "as many as there are");
        for (drawn, wanted) in drawn.iter().zip(wanted) {
            let off = ((drawn.0 - wanted.0).abs() / self.x.grain(wanted.0))
                .max((drawn.1 - wanted.1).abs() / self.y.grain(wanted.1));
            assert!(off <= 1.0, "{drawn:?} is not {wanted:?}: {off} grains off");
        }
    }
}

/// Fails unless every tag of a drawing is closed.
pub fn assert_well_formed(svg: &str) {
    let mut open: Vec<String> = Vec::new();
    for part in svg.split('<').skip(1) {
        let (tag, _) = part.split_once('>').expect("a tag ends");
        let name = tag.trim_start_matches('/').split([' ', '\n', '/']).next().expect("a name").to_owned();
        if tag.starts_with('/') {
            assert_eq!(open.pop(), Some(name), "closed in order");
        } else if !tag.ends_with('/') {
            open.push(name);
        }
    }
    assert!(open.is_empty(), "{open:?} stay open");
}
