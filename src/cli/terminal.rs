//! What a terminal is shown beyond the text: a small drawing, in its width. Anything else gets the text alone.

use crate::evidence::Evidence;
use crate::report::{self, Measurement};
use std::io::{self, IsTerminal};

/// Width of a terminal that does not tell it, columns.
const USUAL_WIDTH: usize = 80;

/// A terminal that can draw.
pub(super) struct Terminal {
    width: usize,
}

impl Terminal {
    /// Standard output, if it is a terminal that can show block characters. No colour is used, so that NO_COLOR has nothing to
    /// turn off.
    pub fn of_standard_output() -> Option<Self> {
        let told = |name: &str| std::env::var(name).unwrap_or_default();
        if !io::stdout().is_terminal()
            || told("TERM") == "dumb"
            || !is_unicode(&[told("LC_ALL"), told("LC_CTYPE"), told("LANG")])
        {
            return None;
        }
        let width = terminal_size::terminal_size().map(|size| usize::from(size.0.0)).filter(|width| *width > 0);
        Some(Self { width: width.unwrap_or(USUAL_WIDTH) })
    }

    /// The drawing of a measurement.
    pub fn picture(&self, measurement: &Measurement, evidence: &Evidence) -> Option<String> {
        report::sketch(measurement, evidence, self.width)
    }
}

/// The first setting that is made decides; without any a terminal of today is taken for one of UTF-8.
fn is_unicode(settings: &[String]) -> bool {
    match settings.iter().find(|setting| !setting.is_empty()) {
        Some(setting) => {
            let setting = setting.to_ascii_lowercase();
            setting.contains("utf-8") || setting.contains("utf8")
        }
        None => true,
    }
}

#[cfg(test)]
mod tests {
    use super::is_unicode;

    #[test]
    fn the_first_setting_decides_about_characters() {
        let of = |texts: [&str; 3]| is_unicode(&texts.map(str::to_owned));
        assert!(of(["", "", "en_GB.UTF-8"]) && of(["", "", ""]) && of(["C.utf8", "C", "C"]));
        assert!(!of(["C", "", "en_GB.UTF-8"]) && !of(["", "POSIX", ""]));
    }
}
