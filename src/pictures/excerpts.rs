//! Pieces of the audio with every event that was found in them.

use super::{Measured, counted, seconds};
use crate::evidence::{Excerpt, Why};
use crate::firing::EventKind;
use crate::plot::{Axis, Legend, Mark, Panel, Picture, Scale, Stroke};
use crate::report::Measurement;
use crate::rhythm::{Reading, Verdict};

/// Height of a panel, and of a panel with its titles.
const HEIGHT: f64 = 130.0;
const PITCH: f64 = HEIGHT + 28.0 + 48.0;

pub(super) fn picture(measured: Measured<'_>) -> Option<Picture> {
    let excerpts = &measured.evidence.excerpts;
    if excerpts.is_empty() {
        return None;
    }
    let panels = excerpts.iter().enumerate().map(|(k, excerpt)| panel(excerpt, PITCH * k as f64)).collect();
    let events = || excerpts.iter().flat_map(|excerpt| &excerpt.events);
    let irregular = measured.measurement.reading.verdict == Verdict::Irregular;
    let marks = [
        (EventKind::Firing, Mark::Tick, "firing"),
        (EventKind::Missed, Mark::Ring, "missed: the rhythm demands it here"),
        (EventKind::Extra, Mark::Cross, if irregular { "click" } else { "extra: off the rhythm" }),
    ];
    let legend = marks
        .into_iter()
        .filter(|(kind, _, _)| events().any(|event| event.kind == *kind))
        .map(|(_, mark, words)| (Legend::Mark(mark), words.to_owned()))
        .collect();
    Some(Picture {
        kind: "excerpts",
        title: title(excerpts, measured.measurement),
        reading: reading(excerpts, &measured.measurement.reading),
        panels,
        legend,
    })
}

fn title(excerpts: &[Excerpt], measurement: &Measurement) -> String {
    let length = |excerpt: &Excerpt| seconds(excerpt.audio.to_s() - excerpt.audio.from_s);
    let counts = measurement.reading.firings;
    let begins = excerpts.iter().find(|excerpt| excerpt.why == Why::Beginning);
    match begins.or(excerpts.first()) {
        Some(first) if first.why == Why::Irregular && measurement.reading.verdict == Verdict::Irregular => format!(
            "{} hold {} without a rhythm, of {} in the whole recording",
            length(first),
            counted(first.events.len() as u64, "click", "clicks"),
            counts.extra
        ),
        Some(first) if first.why == Why::Nothing => format!("In {} from the middle no firing is found", length(first)),
        Some(first) => {
            let of = |kind: EventKind| first.events.iter().filter(|event| event.kind == kind).count() as u64;
            format!(
                "The first {} hold {}; in the whole recording {} missed, {} extra",
                length(first),
                counted(of(EventKind::Firing), "firing", "firings"),
                some(counts.missed),
                some(counts.extra)
            )
        }
        None => String::new(),
    }
}

/// `none is`, `1 is`, `3 are`.
fn some(count: u64) -> String {
    match count {
        0 => "none is".to_owned(),
        1 => "1 is".to_owned(),
        more => format!("{more} are"),
    }
}

fn reading(excerpts: &[Excerpt], reading: &Reading) -> String {
    let folded = excerpts.iter().any(|excerpt| !excerpt.audio.high.is_empty());
    let irregular = reading.verdict == Verdict::Irregular;
    let nothing = excerpts.iter().all(|excerpt| excerpt.why == Why::Nothing);
    let mut text = if nothing {
        "The audio as it was recorded. The clicks of a gap would stand out of it, short and all alike."
    } else if irregular {
        "The audio as it was recorded, with a mark above each click. Each mark should sit on a click, and each click should have \
         its mark; that they follow each other unevenly is why there is no rhythm."
    } else {
        "The audio as it was recorded, the marks of the events above it. Each firing should sit on a click, and each click should \
         have its mark."
    }
    .to_owned();
    if excerpts.len() > 1 {
        text.push_str(" The further pieces show the first place where a firing is missed, or a click is extra.");
    }
    if !reading.other_trains.is_empty() {
        text.push_str(" Clicks of other trains have no marks here.");
    }
    if folded {
        text.push_str(" A long piece is drawn from the least to the greatest sample of short stretches.");
    }
    text
}

fn panel(excerpt: &Excerpt, offset: f64) -> Panel {
    let trace = &excerpt.audio;
    let peak = trace.stretches().fold(1e-6f64, |peak, (_, low, high)| peak.max(low.abs()).max(high.abs()));
    let words = match excerpt.why {
        Why::Beginning => "the first firings: audio, full scale",
        Why::Missed => "where a firing is missed: audio, full scale",
        Why::Extra => "where a click is extra: audio, full scale",
        Why::Irregular => "clicks without a rhythm: audio, full scale",
        Why::Nothing => "from the middle: audio, full scale",
    };
    // Room above the audio for the marks.
    let y = Scale::linear(-1.1 * peak, 1.6 * peak);
    let mut panel = Panel::new(
        Picture::area_below(offset, HEIGHT),
        Axis::new(Scale::linear(trace.from_s, trace.to_s()), "time in the recording", "s", 5),
        Axis::new(y, words, "", 4),
    );
    if trace.high.is_empty() {
        panel.line("audio", Stroke::Main, trace.stretches().map(|(t, low, _)| (t, low)));
    } else {
        // Joined, so that the line does not break where a stretch is flat.
        panel.line("audio", Stroke::Main, trace.stretches().flat_map(|(t, low, high)| [(t, low), (t, high)]));
    }
    for (kind, name, mark) in [
        (EventKind::Firing, "firing", Mark::Tick),
        (EventKind::Missed, "missed", Mark::Ring),
        (EventKind::Extra, "extra", Mark::Cross),
    ] {
        let of_kind = excerpt.events.iter().filter(|event| event.kind == kind);
        panel.marks(name, mark, of_kind.map(|event| (event.time_s, 1.38 * peak)));
    }
    panel
}
