//! Writing FLAC as the samples come: the head first with what is known, one frame after the other, then the head again.

use super::encode::ClipFacts;
use flacenc::bitsink::ByteSink;
use flacenc::component::{BitRepr, MetadataBlockData, Stream};
use flacenc::error::Verify;
use flacenc::source::{Context, Fill, FrameBuf};
use std::io::{self, Seek, SeekFrom, Write};

/// Samples of each channel in a frame.
const FRAME: usize = 4096;
/// Number of the block of Vorbis comments (RFC 9639, 8.1).
const VORBIS_COMMENT: u8 = 4;

/// Writes integer samples, interleaved, as they come; no more than one frame of them is held.
pub(super) fn write_flac(
    mut out: impl Write + Seek,
    samples: impl IntoIterator<Item = f32>,
    facts: &ClipFacts,
) -> io::Result<()> {
    let told = |what: &str, error: &dyn std::fmt::Debug| {
        io::Error::other(format!("cannot be encoded as FLAC: {what} ({error:?})"))
    };
    let (channels, bits) = (usize::from(facts.width()), usize::from(facts.format.bits()));
    let config = flacenc::config::Encoder::default().into_verified().map_err(|error| told("settings", &error.1))?;
    let mut head = Stream::new(facts.sample_rate_hz as usize, channels, bits).map_err(|error| told("head", &error))?;
    if facts.title.is_some() || facts.comment.is_some() {
        let block = MetadataBlockData::new_unknown(VORBIS_COMMENT, &vorbis_comment(facts))
            .map_err(|error| told("tags", &error))?;
        head.add_metadata_block(block);
    }
    let start = out.stream_position()?;
    out.write_all(&bytes(&head).map_err(|error| told("head", &error))?)?;
    let mut frame_samples = FrameBuf::with_size(channels, FRAME).map_err(|error| told("frame", &error))?;
    let mut seen = Context::new(bits, channels);
    let mut samples = samples.into_iter().map(|sample| facts.format.quantize(sample));
    let mut block: Vec<i32> = Vec::with_capacity(channels * FRAME);
    loop {
        block.clear();
        block.extend(samples.by_ref().take(channels * FRAME));
        if block.is_empty() {
            break;
        }
        // A shorter last block fills only a part of the buffer.
        frame_samples.fill_interleaved(&block).map_err(|error| told("samples", &error))?;
        seen.fill_interleaved(&block).map_err(|error| told("samples", &error))?;
        let number = seen.current_frame_number().unwrap_or(0);
        let frame = flacenc::encode_fixed_size_frame(&config, &frame_samples, number, head.stream_info())
            .map_err(|error| told("samples", &error))?;
        head.stream_info_mut().update_frame_info(&frame);
        out.write_all(&bytes(&frame).map_err(|error| told("output", &error))?)?;
    }
    let info = head.stream_info_mut();
    // The smallest block leaves the last one out (RFC 9639, 8.2); the encoder counts it, and readers then take the
    // stream for one of varying blocks.
    info.set_block_sizes(FRAME, FRAME).map_err(|error| told("block size", &error))?;
    info.set_md5_digest(&seen.md5_digest());
    info.set_total_samples(seen.total_samples());
    out.seek(SeekFrom::Start(start))?;
    out.write_all(&bytes(&head).map_err(|error| told("head", &error))?)?;
    out.seek(SeekFrom::End(0))?;
    Ok(())
}

fn bytes(component: &impl BitRepr) -> Result<Vec<u8>, impl std::fmt::Debug> {
    let mut sink = ByteSink::new();
    component.write(&mut sink).map(|()| sink.into_inner())
}

/// Vorbis comments: vendor and `NAME=text`, each with its length in front (RFC 9639, 8.6).
fn vorbis_comment(facts: &ClipFacts) -> Vec<u8> {
    let named = |name: &str, text: &Option<String>| text.as_ref().map(|text| format!("{name}={text}"));
    let comments: Vec<String> =
        [named("TITLE", &facts.title), named("COMMENT", &facts.comment)].into_iter().flatten().collect();
    let mut block = Vec::new();
    push_text(&mut block, &super::encode::software());
    block.extend_from_slice(&(comments.len() as u32).to_le_bytes());
    comments.iter().for_each(|comment| push_text(&mut block, comment));
    block
}

fn push_text(block: &mut Vec<u8>, text: &str) {
    block.extend_from_slice(&(text.len() as u32).to_le_bytes());
    block.extend_from_slice(text.as_bytes());
}
