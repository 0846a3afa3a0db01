//! The spectrum with the line at the rate and the band of the receiver.

use super::{Measured, has_rhythm, mains};
use crate::bench::si;
use crate::plot::{Axis, Legend, Mark, Panel, Picture, Scale, Stroke};

/// Greatest extent shown, dB.
const EXTENT_DB: f64 = 90.0;
/// Multiples of the rate that are marked.
const MULTIPLES: u32 = 12;
/// Surroundings of a line, as ratios of its frequency.
const AROUND: (f64, f64) = (1.03, 1.25);
/// From here on a line is said to stand out, dB.
const STANDS_OUT_DB: f64 = 10.0;

pub(super) fn picture(measured: Measured<'_>) -> Option<Picture> {
    let spectrum = measured.evidence.spectrum.as_ref()?;
    let peaks = &spectrum.peaks;
    let (first, last) = (peaks.first()?, peaks.last()?);
    let top = peaks.iter().map(|peak| peak.1).fold(f64::NEG_INFINITY, f64::max);
    let bottom = peaks.iter().map(|peak| peak.1).fold(f64::INFINITY, f64::min).max(top - EXTENT_DB);
    let mut panel = Panel::new(
        Picture::area(230.0),
        Axis::new(Scale::logarithmic(first.0, last.0), "frequency", "Hz", 6),
        Axis::new(Scale::linear(bottom - 2.0, top + 8.0), "level, dB against a sine of full scale", "", 5),
    );
    let mut legend = vec![(Legend::Line(Stroke::Main), "audio".to_owned())];
    if let Some((low, high)) = measured.bench.and_then(|bench| bench.receiver.audio_band) {
        panel.zone("band", low.value, high.value);
        legend.push((Legend::Area("zone"), "audio band of the receiver, by the bench".to_owned()));
    }
    panel.line("spectrum", Stroke::Main, peaks.iter().copied());
    let reading = &measured.measurement.reading;
    let rate = reading.firing_rate_hz.filter(|_| has_rhythm(reading)).map(|rate| rate.value);
    let title = match rate {
        Some(rate_hz) if rate_hz < first.0 => {
            format!("The rate of {rate_hz:.2} /s lies below this spectrum, which begins at {}", si(first.0, "Hz", 2))
        }
        Some(rate_hz) => {
            panel.upright("rate", Stroke::Limit, rate_hz);
            panel.words_at(rate_hz, 0, &format!("rate {rate_hz:.1} /s"));
            let multiples =
                (1..=MULTIPLES).filter_map(|k| level_at(peaks, f64::from(k) * rate_hz, spectrum.resolution_hz));
            panel.marks("multiples", Mark::Ring, multiples);
            legend.push((Legend::Line(Stroke::Limit), "rate".to_owned()));
            legend.push((Legend::Mark(Mark::Ring), "rate and its multiples".to_owned()));
            title(peaks, rate_hz, spectrum.resolution_hz)
        }
        None => no_rate(peaks),
    };
    let of_mains = mark_mains(&mut panel, &mut legend, measured, rate);
    let (taken, heard) = spectrum.pieces;
    let part = if taken < heard {
        format!(" Of {heard} pieces {taken} are averaged, spread over the recording.")
    } else {
        String::new()
    };
    let text = format!(
        "Lines {:.2} Hz apart are told from each other; of the lines that share a column the highest is drawn. A gap gives lines \
         at the rate and its multiples, which grow wider and sink upwards the more the periods scatter. The receiver may \
         suppress the first of them; a tone that is no gap has few or none.{of_mains}{part}",
        spectrum.resolution_hz
    );
    Some(Picture { kind: "spectrum", title, reading: text, panels: vec![panel], legend })
}

/// Marks mains lines in the audio, and the ripple that shows in the firing; gives a sentence on them.
fn mark_mains(
    panel: &mut Panel,
    legend: &mut Vec<(Legend, String)>,
    measured: Measured<'_>,
    rate_hz: Option<f64>,
) -> String {
    let mut text = String::new();
    let Some(spectrum) = measured.evidence.spectrum.as_ref() else { return text };
    let peaks = &spectrum.peaks;
    if let Some(line_hz) = mains::in_the_firing(&measured.measurement.reading) {
        panel.upright("ripple", Stroke::Other, line_hz);
        panel.words_at(line_hz, 1, &format!("ripple {line_hz:.0} Hz"));
        legend.push((Legend::Line(Stroke::Other), "ripple of the supply, told from the firing".to_owned()));
        text.push_str(&format!(
            " The ripple of {line_hz:.0} Hz shows in the firing: it puts lines {line_hz:.0} Hz beside those of the rate."
        ));
    }
    let stands_out = |line: (f64, f64)| above_beside(peaks, line).is_some_and(|db| db > STANDS_OUT_DB);
    if let Some((mains_hz, lines)) = mains::in_the_audio(spectrum, rate_hz, stands_out) {
        panel.marks("mains", Mark::Square, lines);
        legend.push((Legend::Mark(Mark::Square), format!("mains of {mains_hz:.0} Hz and its multiples")));
        text.push_str(" Mains in the audio is hum; by itself it says nothing of the firing.");
    }
    text
}

fn no_rate(peaks: &[(f64, f64)]) -> String {
    let highest = peaks.iter().max_by(|a, b| a.1.total_cmp(&b.1));
    let line = highest.map_or_else(String::new, |line| format!("; its highest level is at {}", si(line.0, "Hz", 3)));
    format!("No rhythm was found in this audio, so no rate is marked{line}")
}

/// The highest line about a frequency.
fn level_at(peaks: &[(f64, f64)], frequency_hz: f64, resolution_hz: f64) -> Option<(f64, f64)> {
    let near = |peak: &&(f64, f64)| (peak.0 - frequency_hz).abs() < (0.012 * frequency_hz).max(2.0 * resolution_hz);
    peaks.iter().filter(near).max_by(|a, b| a.1.total_cmp(&b.1)).copied()
}

fn title(peaks: &[(f64, f64)], rate_hz: f64, resolution_hz: f64) -> String {
    let above = (1..=MULTIPLES)
        .filter_map(|k| Some((k, above_its_surroundings(peaks, f64::from(k) * rate_hz, resolution_hz)?)));
    let best = above.max_by(|a, b| a.1.total_cmp(&b.1));
    match best {
        Some((1, db)) if db > STANDS_OUT_DB => {
            format!("A line stands at the rate of {rate_hz:.1} /s, {db:.0} dB above what is beside it")
        }
        Some((k, db)) if db > STANDS_OUT_DB => {
            format!("A line stands at {k} times the rate of {rate_hz:.1} /s, {db:.0} dB above what is beside it")
        }
        _ => format!(
            "No line at the rate of {rate_hz:.1} /s stands out: the periods scatter too much for one, or are too long"
        ),
    }
}

/// How far the highest line about a frequency rises above the middle of its surroundings, dB.
fn above_its_surroundings(peaks: &[(f64, f64)], frequency_hz: f64, resolution_hz: f64) -> Option<f64> {
    above_beside(peaks, level_at(peaks, frequency_hz, resolution_hz)?)
}

/// How far a line rises above the middle of its surroundings, dB.
fn above_beside(peaks: &[(f64, f64)], line: (f64, f64)) -> Option<f64> {
    let apart = |f: f64| (f / line.0).max(line.0 / f);
    let mut around: Vec<f64> =
        peaks.iter().filter(|peak| (AROUND.0..AROUND.1).contains(&apart(peak.0))).map(|peak| peak.1).collect();
    around.sort_by(f64::total_cmp);
    Some(line.1 - around.get(around.len() / 2)?)
}
