//! The index page of a series of clips, with a player for each.

use super::document::{document, name};
use crate::plot::escaped;
use std::fmt::Write;

/// A clip on the index page. Files are named from the folder of the page.
#[derive(Debug, Clone)]
pub struct SeriesClip {
    /// What it is.
    pub title: String,
    /// Its sound file.
    pub file: String,
    /// The file of its truth.
    pub truth: String,
    /// Length, s.
    pub duration_s: f64,
    /// Realised firing rate, Hz.
    pub firing_rate_hz: Option<f64>,
    /// Realised jitter over the period.
    pub relative_jitter: Option<f64>,
    /// What was changed of the bench, with its value.
    pub changes: Vec<(String, String)>,
    /// Seed.
    pub seed: u64,
}

/// The page.
#[must_use]
pub fn series(title: Option<&str>, clips: &[SeriesClip], json: &str) -> String {
    let title = title.unwrap_or("Series of clips");
    let total_s: f64 = clips.iter().map(|clip| clip.duration_s).sum();
    let mut body = format!(
        "<header>\n<h1>{}</h1>\n<p class=\"verdict\">{} clips with known truth, {total_s:.0} s in all. They are simulated.</p>\n</header>\n",
        name(title),
        clips.len()
    );
    for clip in clips {
        // Writing to a string cannot fail.
        let _ = write!(
            body,
            "<section>\n<h2>{}</h2>\n<audio controls preload=\"none\" src=\"{}\" aria-label=\"{}\"></audio>\n<p>{}</p>\n",
            name(&clip.title),
            escaped(&address(&clip.file)),
            escaped(&clip.title),
            told(clip)
        );
        if !clip.changes.is_empty() {
            let set: Vec<String> = clip
                .changes
                .iter()
                .map(|(key, value)| format!("<code>{}</code> {}", escaped(key), name(value)))
                .collect();
            let _ = writeln!(body, "<p>Set for this clip: {}</p>", set.join(", "));
        }
        body.push_str("</section>\n");
    }
    document(title, &body, json)
}

fn told(clip: &SeriesClip) -> String {
    let rate = clip.firing_rate_hz.map_or_else(|| "no gap".to_owned(), |rate| format!("{rate:.2} firings a second"));
    let jitter = clip.relative_jitter.map_or_else(String::new, |jitter| format!(", jitter {:.2} %", 100.0 * jitter));
    format!(
        "{rate}{jitter}; {:.1} s; seed {}; <a href=\"{}\">sound</a>, <a href=\"{}\">truth</a>",
        clip.duration_s,
        clip.seed,
        escaped(&address(&clip.file)),
        escaped(&address(&clip.truth))
    )
}

/// A file name as a relative address (RFC 3986): all but unreserved characters of its bytes in percent.
fn address(file: &str) -> String {
    let mut out = "./".to_owned();
    for byte in file.bytes() {
        if byte.is_ascii_alphanumeric() || b"-._~/".contains(&byte) {
            out.push(char::from(byte));
        } else {
            let _ = write!(out, "%{byte:02X}");
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_name_is_an_address_whatever_it_holds() {
        assert_eq!(address("a b#1?.wav"), "./a%20b%231%3F.wav");
        assert_eq!(address("\u{e9}.wav"), "./%C3%A9.wav");
    }
}
