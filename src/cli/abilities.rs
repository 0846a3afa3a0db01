//! What this build can do: kinds of file, sound card, devices. Asked of the decoders and of the machine, not written down.

use super::args::AbilitiesArguments;
use super::exit::{Exit, Failure, say};
use super::files::can_decode;
use serde::Serialize;
use symphonia::core::codecs::audio::AudioCodecId;
use symphonia::core::codecs::audio::well_known::{
    CODEC_ID_AAC, CODEC_ID_ADPCM_IMA_WAV, CODEC_ID_ADPCM_MS, CODEC_ID_ALAC, CODEC_ID_FLAC, CODEC_ID_MP3, CODEC_ID_OPUS,
    CODEC_ID_PCM_F32LE, CODEC_ID_PCM_S16LE, CODEC_ID_PCM_S24LE, CODEC_ID_VORBIS,
};

/// Codings that recorders use, with the files that they come in.
const CODINGS: [(&str, AudioCodecId); 11] = [
    ("WAV, AIFF and CAF, 16 bit", CODEC_ID_PCM_S16LE),
    ("WAV, AIFF and CAF, 24 bit", CODEC_ID_PCM_S24LE),
    ("WAV and CAF, float", CODEC_ID_PCM_F32LE),
    ("WAV, ADPCM (Microsoft)", CODEC_ID_ADPCM_MS),
    ("WAV, ADPCM (IMA)", CODEC_ID_ADPCM_IMA_WAV),
    ("FLAC", CODEC_ID_FLAC),
    ("Ogg Vorbis", CODEC_ID_VORBIS),
    ("MP3", CODEC_ID_MP3),
    ("M4A, AAC", CODEC_ID_AAC),
    ("M4A and CAF, ALAC", CODEC_ID_ALAC),
    ("Opus", CODEC_ID_OPUS),
];

/// Kinds of file that are written.
const WRITES: [&str; 4] = ["WAV, 16 bit", "WAV, 24 bit", "WAV, float", "FLAC"];

/// What this build can do.
#[derive(Debug, Serialize)]
struct Abilities {
    format: &'static str,
    version: &'static str,
    system: String,
    cores: usize,
    reads: Vec<&'static str>,
    does_not_read: Vec<&'static str>,
    writes: [&'static str; 4],
    /// Whether `watch` has a screen on a terminal.
    live_view: bool,
    /// None in a build without the sound card.
    sound_outputs: Option<Vec<String>>,
}

/// Runs `abilities`.
pub fn run(arguments: &AbilitiesArguments) -> Result<Exit, Failure> {
    let abilities = Abilities::of_this_build();
    let text = if arguments.json {
        serde_json::to_string_pretty(&abilities).map_err(Failure::usage)? + "\n"
    } else {
        abilities.text()
    };
    say(&text)?;
    Ok(Exit::Done)
}

impl Abilities {
    fn of_this_build() -> Self {
        let names =
            |wanted: bool| CODINGS.iter().filter(move |(_, id)| can_decode(*id) == wanted).map(|(name, _)| *name);
        Self {
            format: "gaptone.abilities/1",
            version: env!("CARGO_PKG_VERSION"),
            system: format!("{} {}", std::env::consts::OS, std::env::consts::ARCH),
            cores: std::thread::available_parallelism().map_or(1, usize::from),
            reads: names(true).collect(),
            does_not_read: names(false).collect(),
            writes: WRITES,
            live_view: cfg!(feature = "live-view"),
            sound_outputs: sound_outputs(),
        }
    }

    fn text(&self) -> String {
        let sound = match &self.sound_outputs {
            None => "not in this build; build with --features sound-card to play clips".to_owned(),
            Some(outputs) if outputs.is_empty() => "in this build, but no output was found".to_owned(),
            Some(outputs) => outputs.join("; "),
        };
        format!(
            "gaptone {} on {}, {} cores\n  reads          {}\n  does not read  {}\n  writes         {}\n  watch          {}\n  sound card     {sound}\n",
            self.version,
            self.system,
            self.cores,
            self.reads.join("; "),
            self.does_not_read.join("; "),
            self.writes.join("; "),
            if self.live_view {
                "on a terminal with a screen"
            } else {
                "in lines; build with the feature live-view for a screen"
            },
        )
    }
}

#[cfg(feature = "sound-card")]
fn sound_outputs() -> Option<Vec<String>> {
    Some(super::play::outputs())
}

#[cfg(not(feature = "sound-card"))]
fn sound_outputs() -> Option<Vec<String>> {
    None
}
