//! A recording that is being decoded, as a [`Source`].

use super::FileError;
use super::decode::Promise;
use super::place::Placer;
use crate::audio::{AudioError, Block, Source};
use std::io::ErrorKind;
use symphonia::core::codecs::CodecParameters;
use symphonia::core::codecs::audio::well_known::CODEC_ID_OPUS;
use symphonia::core::codecs::audio::{AudioCodecId, AudioCodecParameters, AudioDecoder, AudioDecoderOptions};
use symphonia::core::errors::Error;
use symphonia::core::formats::{FormatReader, TrackType};
use symphonia::core::packet::Packet;

/// Sample rates that can be analysed, Hz: below, no click fits between two samples; above, the head is wrong.
const SAMPLE_RATES_HZ: std::ops::RangeInclusive<u32> = 1000..=4_000_000;

/// Most frames of one packet: no coding packs more than 65 536, and memory is taken for what the head states.
const MOST_PACKET_FRAMES: u64 = 1 << 20;

/// Frames by which a lossy coding may miss the stated length without anything being cut: encoders pad.
const LOSSY_PADDING: u64 = 4608;

/// A recording that is being decoded.
pub struct Recording {
    reader: Box<dyn FormatReader>,
    decoder: Box<dyn AudioDecoder>,
    track: u32,
    placer: Placer,
    sample_rate_hz: u32,
    channels: u16,
    bits: Option<u32>,
    promised_frames: Option<u64>,
    length_missing: bool,
    /// Samples of the first packet, decoded at opening because only they tell the true rate and channels.
    first: Option<(Block, Vec<f32>)>,
    ended: bool,
    /// Why the stream ended before its end.
    broke_off: Option<String>,
}

impl Recording {
    pub(super) fn new(reader: Box<dyn FormatReader>, promise: Promise) -> Result<Self, FileError> {
        let track = reader.default_track(TrackType::Audio).ok_or(FileError::NoAudio)?;
        let Some(CodecParameters::Audio(parameters)) = &track.codec_params else {
            return Err(FileError::NoAudio);
        };
        let decoder = decoder_for(parameters)?;
        let tick = track.time_base.map(|base| (base.numer.get(), base.denom.get()));
        let sample_rate_hz = parameters.sample_rate.unwrap_or_default();
        let promised_frames = promise.frames.or(track.num_frames);
        let mut recording = Self {
            track: track.id,
            placer: Placer::new(tick.unwrap_or((1, sample_rate_hz)), sample_rate_hz, promised_frames),
            sample_rate_hz,
            channels: parameters.channels.as_ref().map_or(0, |channels| channels.count() as u16),
            bits: parameters.bits_per_sample,
            promised_frames,
            length_missing: promise.length_missing,
            reader,
            decoder,
            first: None,
            ended: false,
            broke_off: None,
        };
        recording.read_first()?;
        Ok(recording)
    }

    /// Decodes the first packet that holds samples and takes rate and channels from it.
    fn read_first(&mut self) -> Result<(), FileError> {
        let mut samples = Vec::new();
        let first = self.decode_next(&mut samples).map_err(FileError::Broken)?;
        if first.is_none() {
            if let Some(reason) = &self.broke_off {
                return Err(FileError::Broken(format!("nothing in it can be decoded ({reason})")));
            }
            if self.promised_frames.is_some_and(|frames| frames > 0) && self.placer.frames() == 0 {
                return Err(FileError::Broken("the file ends before its first sample".to_owned()));
            }
        }
        if self.channels == 0 || !SAMPLE_RATES_HZ.contains(&self.sample_rate_hz) {
            return Err(FileError::Broken(format!(
                "states {} channels at {} Hz; recordings between {} Hz and {} Hz can be analysed",
                self.channels,
                self.sample_rate_hz,
                SAMPLE_RATES_HZ.start(),
                SAMPLE_RATES_HZ.end()
            )));
        }
        self.first = first.map(|block| (block, samples));
        Ok(())
    }

    /// Decodes packets until one holds samples; `None` at the end.
    fn decode_next(&mut self, samples: &mut Vec<f32>) -> Result<Option<Block>, String> {
        while !self.ended {
            match self.reader.next_packet() {
                Ok(Some(packet)) if packet.track_id == self.track => {
                    if let Some(block) = self.decode(&packet, samples)? {
                        return Ok(Some(block));
                    }
                }
                Ok(Some(_)) => {}
                Ok(None) => self.ended = true,
                Err(Error::ResetRequired) => self.start_next_stream()?,
                Err(Error::IoError(error)) if error.kind() == ErrorKind::UnexpectedEof => self.ended = true,
                Err(Error::IoError(error)) => return Err(format!("reading failed: {error}")),
                Err(error) => self.break_off(&error.to_string()),
            }
        }
        Ok(None)
    }

    fn decode(&mut self, packet: &Packet, samples: &mut Vec<f32>) -> Result<Option<Block>, String> {
        let decoded = match self.decoder.decode(packet) {
            Ok(decoded) => decoded,
            // The packet is lost; the time stamp of the next one shows how much was in it.
            Err(Error::DecodeError(_) | Error::IoError(_)) => return Ok(None),
            Err(error) => {
                self.break_off(&error.to_string());
                return Ok(None);
            }
        };
        let (frames, spec) = (decoded.frames(), decoded.spec());
        if frames == 0 {
            return Ok(None);
        }
        let (rate_hz, channels) = (spec.rate(), spec.channels().count() as u16);
        if self.placer.frames() == 0 {
            (self.sample_rate_hz, self.channels) = (rate_hz, channels);
        }
        if (rate_hz, channels) != (self.sample_rate_hz, self.channels) {
            self.break_off("the sample rate or the number of channels changes");
            return Ok(None);
        }
        decoded.copy_to_vec_interleaved(samples);
        let ticks = packet.pts.get().saturating_add_unsigned(packet.trim_start.get());
        let position = self.placer.place(ticks, frames as u64);
        Ok(Some(Block { frames, position }))
    }

    /// Goes on with the stream that follows in the same file.
    fn start_next_stream(&mut self) -> Result<(), String> {
        let next = self.reader.default_track(TrackType::Audio);
        let Some((id, CodecParameters::Audio(parameters))) =
            next.and_then(|track| Some((track.id, track.codec_params.as_ref()?)))
        else {
            self.break_off("the stream that follows holds no audio");
            return Ok(());
        };
        match decoder_for(parameters) {
            Ok(decoder) => (self.track, self.decoder) = (id, decoder),
            Err(error) => self.break_off(&error.to_string()),
        }
        self.placer.restart();
        self.promised_frames = None;
        Ok(())
    }

    fn break_off(&mut self, reason: &str) {
        self.ended = true;
        self.broke_off = Some(reason.to_owned());
    }

    fn seconds(&self, frames: u64) -> f64 {
        frames as f64 / f64::from(self.sample_rate_hz)
    }

    /// Frames that may be missing from the stated length without anything being cut.
    fn tolerated_shortfall(&self) -> u64 {
        if self.bits.is_some() { 0 } else { LOSSY_PADDING }
    }
}

/// True if audio of this coding can be decoded.
#[must_use]
pub fn can_decode(coding: AudioCodecId) -> bool {
    coding != CODEC_ID_OPUS && symphonia::default::get_codecs().get_audio_decoder(coding).is_some()
}

fn decoder_for(parameters: &AudioCodecParameters) -> Result<Box<dyn AudioDecoder>, FileError> {
    if parameters.codec == CODEC_ID_OPUS {
        return Err(FileError::Coding("Opus audio".to_owned()));
    }
    let frames = parameters.max_frames_per_packet.max(parameters.frames_per_block).unwrap_or_default();
    if frames > MOST_PACKET_FRAMES {
        return Err(FileError::Broken(format!(
            "states packets of {frames} frames; at most {MOST_PACKET_FRAMES} can be decoded"
        )));
    }
    symphonia::default::get_codecs()
        .make_audio_decoder(parameters, &AudioDecoderOptions::default())
        .map_err(|error| FileError::Coding(format!("audio of coding {} ({error})", parameters.codec)))
}

impl Source for Recording {
    fn sample_rate_hz(&self) -> u32 {
        self.sample_rate_hz
    }

    fn channels(&self) -> u16 {
        self.channels
    }

    fn full_scale(&self) -> f32 {
        self.bits.map_or(1.0, |bits| 1.0 - 0.5_f32.powi(bits.clamp(1, 64) as i32 - 1))
    }

    fn next(&mut self, block: &mut Vec<f32>) -> Result<Option<Block>, AudioError> {
        if let Some((first, samples)) = self.first.take() {
            *block = samples;
            return Ok(Some(first));
        }
        self.decode_next(block).map_err(AudioError::Read)
    }

    fn notes(&self) -> Vec<String> {
        let mut notes = Vec::new();
        let there = self.placer.frames();
        if let Some(reason) = &self.broke_off {
            notes.push(format!("the recording breaks off at {:.2} s ({reason})", self.seconds(there)));
        }
        if self.length_missing {
            notes.push("the header states no length; everything behind it was read".to_owned());
        }
        if let Some(promised) = self.promised_frames
            && self.ended
            && there + self.tolerated_shortfall() < promised
        {
            notes.push(format!(
                "the recording is cut off: the header promises {:.2} s, {:.2} s are there",
                self.seconds(promised),
                self.seconds(there)
            ));
        }
        if let Some(frame) = self.placer.disordered_at() {
            let time_s = self.seconds(frame);
            notes.push(format!("time stamps break at {time_s:.2} s; samples were joined as they came"));
        }
        notes
    }
}
