//! How a firing rate is heard: musical pitch, or clicks.

use serde::{Deserialize, Serialize};

/// Tuning note: A4 in Hz (ISO 16:1975).
pub const A4_HZ: f64 = 440.0;

/// Below this rate clicks are heard one by one, Hz (common practice: the lower end of hearing as a tone).
const SEPARATE_BELOW_HZ: f64 = 20.0;
/// Below this rate a train of clicks flutters more than it sounds, Hz (published listening descriptions of click
/// trains: below about 40 Hz separate events, a clear pitch from 43 Hz).
const FLUTTER_BELOW_HZ: f64 = 40.0;

/// What the ear makes of a train of clicks.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Hearing {
    /// Below 20 /s.
    SeparateClicks,
    /// 20 to 40 /s.
    Flutter,
    /// Above.
    Pitch,
}

/// A rate as a musical pitch.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Pitch {
    /// Nearest note of the equal-tempered scale, C4 being middle C.
    pub note: String,
    /// Distance from it in cents, −50 to 50.
    pub cents: f64,
    /// MIDI note number with its fraction: 69 + 12·log2(f/440).
    pub midi: f64,
    /// What the ear makes of it.
    pub hearing: Hearing,
}

/// The pitch of a rate in Hz; none unless it is positive and finite.
#[must_use]
pub fn pitch(rate_hz: f64) -> Option<Pitch> {
    const NAMES: [&str; 12] = ["C", "C#", "D", "D#", "E", "F", "F#", "G", "G#", "A", "A#", "B"];
    if !(rate_hz.is_finite() && rate_hz > 0.0) {
        return None;
    }
    let midi = 69.0 + 12.0 * (rate_hz / A4_HZ).log2();
    let nearest = midi.round();
    let name = NAMES[nearest.rem_euclid(12.0) as usize % NAMES.len()];
    let octave = (nearest / 12.0).floor() - 1.0;
    let hearing = if rate_hz < SEPARATE_BELOW_HZ {
        Hearing::SeparateClicks
    } else if rate_hz < FLUTTER_BELOW_HZ {
        Hearing::Flutter
    } else {
        Hearing::Pitch
    };
    Some(Pitch { note: format!("{name}{octave}"), cents: 100.0 * (midi - nearest), midi, hearing })
}

impl Pitch {
    /// In words: `G2 +35 cents`, `flutter`, `separate clicks`.
    #[must_use]
    pub fn words(&self) -> String {
        let note = format!("{} {:+.0} cents", self.note, self.cents);
        match self.hearing {
            Hearing::SeparateClicks => "separate clicks, no pitch".to_owned(),
            Hearing::Flutter => format!("flutter, hardly a pitch yet (near {note})"),
            Hearing::Pitch => format!("{note} (MIDI {:.2}; A4 = 440 Hz)", self.midi),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn midi_numbers_follow_the_definition() {
        // 69 + 12·log2(f/440) worked out to the printed digits; 27.5 Hz is A0 exactly.
        let rows = [(100.0, 43.35), (120.0, 46.506), (50.0, 31.350), (60.0, 34.506), (27.5, 21.0), (1000.0, 83.213)];
        for (rate, midi) in rows {
            // Half a unit of the last printed digit.
            let digits = if rate == 100.0 { 0.005 } else { 0.0005 };
            assert!((pitch(rate).unwrap().midi - midi).abs() <= digits, "{rate}");
        }
    }

    #[test]
    fn published_notes_are_named() {
        // ISO 16:1975 A4 = 440 Hz; published: 453 Hz lies 50.4 cents above A4, 261.63 Hz is middle C, number 60; notes
        // 0 and 127 are 8.18 and 12543.85 Hz.
        assert!((100.0 * (pitch(453.0).unwrap().midi - 69.0) - 50.4).abs() < 0.05);
        let middle_c = pitch(261.63).unwrap();
        assert_eq!((middle_c.note.as_str(), middle_c.midi.round()), ("C4", 60.0));
        assert_eq!(pitch(12_543.85).unwrap().midi.round(), 127.0);
        assert_eq!(pitch(8.18).unwrap().note, "C-1");
        let hum = pitch(100.0).unwrap();
        assert_eq!(hum.words(), "G2 +35 cents (MIDI 43.35; A4 = 440 Hz)");
    }

    #[test]
    fn slow_trains_are_clicks_then_flutter_then_a_pitch() {
        assert_eq!(pitch(2.0).unwrap().words(), "separate clicks, no pitch");
        assert_eq!(pitch(19.9).unwrap().hearing, Hearing::SeparateClicks);
        assert!(pitch(25.0).unwrap().words().starts_with("flutter"));
        assert_eq!(pitch(40.0).unwrap().hearing, Hearing::Pitch);
    }

    #[test]
    fn no_rate_has_no_pitch() {
        for rate in [0.0, -1.0, f64::NAN, f64::INFINITY] {
            assert_eq!(pitch(rate), None);
        }
    }
}
