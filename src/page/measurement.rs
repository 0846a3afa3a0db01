//! The page of one measurement or several.

use super::document::{caution, document, figure, figures, folded, list, name, table, verbatim};
use super::{KeptRecording, MeasurementReport};
use crate::bench::{self, Bench};
use crate::evidence::{Evidence, Excerpt, Why};
use crate::pictures::{self, Measured};
use crate::plot::escaped;
use crate::report::{Figure, HIGH_VOLTAGE_CAUTION, Measurement, figure_rows, recording_line};
use crate::rhythm::Verdict;

/// A recording that is put into the page.
#[derive(Debug, Clone)]
pub struct Sound {
    /// Media type.
    pub media_type: &'static str,
    /// The bytes of its file.
    pub bytes: Vec<u8>,
}

/// The page; `sounds` has an entry for each recording, or none at all.
///
/// # Errors
/// A report whose figures are not finite.
pub fn measurement(report: &MeasurementReport, sounds: &[Option<Sound>]) -> serde_json::Result<String> {
    // A bench that was good when it was measured with is good still; a later version may see it otherwise.
    let bench = report.bench.as_ref().and_then(|kept| bench::parse(&kept.text, &kept.file).ok());
    let one = report.recordings.len() == 1;
    let mut body = String::new();
    if !one {
        body.push_str(&overview(report));
    }
    for (k, recording) in report.recordings.iter().enumerate() {
        let sound = sounds.get(k).and_then(Option::as_ref);
        body.push_str(&of_recording(recording, bench.as_ref(), sound, if one { None } else { Some(k + 1) })?);
    }
    body.push_str(&basis(report));
    let title = match report.recordings.as_slice() {
        [recording] => format!("{}: {}", recording.file, answer(recording)),
        several => format!("{} recordings measured", several.len()),
    };
    Ok(document(&title, &body, &serde_json::to_string(report)?))
}

/// The answer in one line.
fn answer(recording: &KeptRecording) -> String {
    let Some(measurement) = &recording.measurement else { return "Could not be read".to_owned() };
    let reading = &measurement.reading;
    let Some(rate) = reading.firing_rate_hz else { return "No gap is heard".to_owned() };
    if reading.verdict == Verdict::Irregular {
        return format!("{}, without a rhythm", Figure::plain(rate, "clicks a second").value_and_u());
    }
    let mut line = Figure::plain(rate, "firings a second").value_and_u();
    if let (Some(jitter), Some(period)) = (reading.period_jitter_s, reading.period_s) {
        line.push_str(&format!(", jitter {:.2} %", 100.0 * jitter.value / period.value));
    }
    if let Some(voltage) = measurement.gap_voltage_v {
        line.push_str(&format!(", gap voltage {}", Figure::prefixed(voltage, "V").value_and_u()));
    }
    line
}

fn verdict(measurement: &Measurement) -> String {
    let (word, reason) = (&measurement.reading.verdict, &measurement.reading.reason);
    let word = match word {
        Verdict::Steady => "Steady",
        Verdict::Unsteady => "Unsteady",
        Verdict::Irregular => "Irregular",
        Verdict::None => "No figure",
    };
    format!("<p class=\"verdict\"><strong>{word}:</strong> {}.</p>\n", escaped(reason))
}

/// All recordings in a table, before the first of them.
fn overview(report: &MeasurementReport) -> String {
    let rows: Vec<Vec<String>> = report
        .recordings
        .iter()
        .enumerate()
        .map(|(k, recording)| {
            let link = format!("<a href=\"#recording-{}\">{}</a>", k + 1, name(&recording.file));
            let told = recording.error.as_deref().map_or_else(|| answer(recording), str::to_owned);
            vec![link, escaped(&told)]
        })
        .collect();
    let measured = report
        .recordings
        .iter()
        .filter(|recording| recording.measurement.as_ref().is_some_and(|m| m.reading.firing_rate_hz.is_some()))
        .count();
    let heading = format!("{measured} of {} recordings hold a gap that can be measured", report.recordings.len());
    format!("<header>\n<h1>{heading}</h1>\n</header>\n{}", table("Recordings", &["recording", "answer"], &rows))
}

/// One recording; `number` if it is one of several.
fn of_recording(
    recording: &KeptRecording,
    bench: Option<&Bench>,
    sound: Option<&Sound>,
    number: Option<usize>,
) -> serde_json::Result<String> {
    let level = if number.is_some() { 2 } else { 1 };
    let place = number.map_or_else(String::new, |number| format!(" id=\"recording-{number}\""));
    let file = recording.measurement.as_ref().map_or(recording.file.clone(), |m| recording_line(&m.recording));
    let mut out = format!(
        "<section{place}>\n<h{level}>{}</h{level}>\n<p class=\"what\">{}</p>\n",
        escaped(&answer(recording)),
        name(&file)
    );
    let Some(measurement) = &recording.measurement else {
        let error = recording.error.as_deref().unwrap_or("was not measured");
        out.push_str(&format!("<p class=\"verdict\">{}</p>\n</section>\n", escaped(error)));
        return Ok(out);
    };
    out.push_str(&verdict(measurement));
    if measurement.gap_voltage_v.is_some() {
        out.push_str(&caution(HIGH_VOLTAGE_CAUTION));
    }
    out.push_str(&figures(&figure_rows(measurement)));
    if measurement.reading.firing_rate_hz.is_some() {
        out.push_str("<p class=\"key\">± is one standard uncertainty, .. the 95 % interval.</p>\n");
    }
    out.push_str(&list("Notes", level + 1, &measurement.reading.notes));
    if let Some(evidence) = &recording.evidence {
        if let Some(sound) = sound {
            out.push_str(&player(sound, evidence, measurement.recording.from_s));
        }
        if number.is_none() {
            out.push_str("<h2>Evidence</h2>\n");
        }
        let prefix = number.map_or_else(String::new, |number| format!("r{number}-"));
        for picture in pictures::all(Measured { measurement, evidence, bench }) {
            out.push_str(&figure(&picture, 3, &format!("{prefix}{}", picture.kind)));
        }
    }
    let json = serde_json::to_string_pretty(measurement)?;
    out.push_str(&folded("The figures as JSON", &verbatim("figures as JSON", &json)));
    Ok(out + "</section>\n")
}

/// Bench, options and program.
fn basis(report: &MeasurementReport) -> String {
    let mut rows: Vec<(String, String, String)> =
        report.options.iter().map(|(option, value)| (option.clone(), value.clone(), String::new())).collect();
    rows.push(("measured by".to_owned(), report.program.clone(), String::new()));
    rows.push(("on".to_owned(), report.made.clone(), String::new()));
    let bench = report.bench.as_ref().map_or_else(
        || "<p>No bench was given, so no voltage is told.</p>\n".to_owned(),
        |kept| format!("<p>The bench, {}:</p>\n{}", name(&kept.file), verbatim("bench", &kept.text)),
    );
    format!(
        "<section>\n<h2>What this rests on</h2>\n{}{bench}<p>This page holds all figures and what the pictures are drawn from; <code>gaptone \
         measure --from-report</code> reads them back.</p>\n</section>\n",
        figures(&rows)
    )
}

fn player(sound: &Sound, evidence: &Evidence, from_s: f64) -> String {
    let words = |excerpt: &Excerpt| match excerpt.why {
        Why::Beginning => Some("the first firings"),
        Why::Missed => Some("the missed firing"),
        Why::Extra => Some("the extra click"),
        Why::Irregular => Some("the first clicks"),
        Why::Nothing => None,
    };
    let places: Vec<serde_json::Value> = evidence
        .excerpts
        .iter()
        .filter_map(|excerpt| Some(serde_json::json!({"words": words(excerpt)?, "at_s": excerpt.audio.from_s})))
        .collect();
    let places = escaped(&serde_json::Value::Array(places).to_string());
    let aside = if from_s > 0.0 { format!(" The measurement begins at {from_s:.2} s.") } else { String::new() };
    format!(
        "<p>The recording.{aside}</p>\n<audio controls preload=\"metadata\" data-places=\"{places}\" src=\"data:{};base64,{}\"></audio>\n",
        sound.media_type,
        base64(&sound.bytes)
    )
}

/// Base 64 (RFC 4648, section 4).
fn base64(bytes: &[u8]) -> String {
    const DIGITS: &[u8; 64] = b"ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    let mut out = String::with_capacity(bytes.len().div_ceil(3) * 4);
    for three in bytes.chunks(3) {
        let word = three.iter().fold(0u32, |word, byte| word << 8 | u32::from(*byte)) << (8 * (3 - three.len()));
        for k in 0..4 {
            let digit = DIGITS[(word >> (18 - 6 * k) & 63) as usize];
            out.push(if k <= three.len() { char::from(digit) } else { '=' });
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn base64_gives_the_published_vectors() {
        // RFC 4648, section 10.
        for (bytes, text) in [
            ("", ""),
            ("f", "Zg=="),
            ("fo", "Zm8="),
            ("foo", "Zm9v"),
            ("foob", "Zm9vYg=="),
            ("fooba", "Zm9vYmE="),
            ("foobar", "Zm9vYmFy"),
        ] {
            assert_eq!(base64(bytes.as_bytes()), text);
        }
    }
}
