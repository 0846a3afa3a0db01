//! What kind of file is it? Told from its first bytes, never from its name, except for bare MPEG streams that
//! begin with anything.

/// Bytes that are looked at.
pub(super) const HEAD_BYTES: u64 = 4096;

/// The kind of a file.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Kind {
    /// RIFF/RF64/BW64 WAVE.
    Wav,
    /// Another container or stream that the decoder knows.
    Sound,
    /// Not a sound file; the text says what it looks like.
    Other(&'static str),
}

/// Tells the kind from the first bytes.
pub(super) fn kind(head: &[u8], name: &str) -> Kind {
    let at = |offset: usize, mark: &[u8]| head.get(offset..offset + mark.len()) == Some(mark);
    if (at(0, b"RIFF") || at(0, b"RF64") || at(0, b"BW64")) && at(8, b"WAVE") {
        return Kind::Wav;
    }
    let container = at(0, b"fLaC") || at(0, b"OggS") || at(0, b"ID3") || at(4, b"ftyp") || at(0, b"caff");
    let aiff = at(0, b"FORM") && (at(8, b"AIFF") || at(8, b"AIFC"));
    if container || aiff || is_mpeg_frame(head) {
        return Kind::Sound;
    }
    if is_text(head) {
        return Kind::Other("this is text");
    }
    if has_mpeg_name(name) { Kind::Sound } else { Kind::Other("the first bytes are those of an unknown format") }
}

/// Frame sync of MPEG audio or ADTS: eleven ones, then a version and a layer that exist.
fn is_mpeg_frame(head: &[u8]) -> bool {
    let [0xff, second, third, ..] = *head else { return false };
    let sync = second & 0xe0 == 0xe0;
    let version_exists = second & 0x18 != 0x08;
    // Layer bits 00 belong to ADTS, whose sync is twelve ones; MPEG layers forbid the bit rate 15.
    let adts = second & 0xf6 == 0xf0;
    sync && version_exists && (adts || (second & 0x06 != 0 && third & 0xf0 != 0xf0))
}

fn has_mpeg_name(name: &str) -> bool {
    let extension = name.rsplit('.').next().unwrap_or_default().to_ascii_lowercase();
    matches!(extension.as_str(), "mp3" | "aac")
}

/// Printable UTF-8 with nothing but the usual control characters; the last character may be cut.
fn is_text(head: &[u8]) -> bool {
    let valid = match std::str::from_utf8(head) {
        Ok(text) => text,
        Err(error) if error.error_len().is_none() => std::str::from_utf8(&head[..error.valid_up_to()]).unwrap_or(""),
        Err(_) => return false,
    };
    !valid.is_empty() && !valid.chars().any(|c| c.is_control() && !matches!(c, '\n' | '\r' | '\t' | '\u{c}'))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_first_bytes_tell_the_kind_whatever_the_name() {
        assert_eq!(kind(b"RIFF\x24\0\0\0WAVEfmt ", "notes.txt"), Kind::Wav);
        assert_eq!(kind(b"RF64\xff\xff\xff\xffWAVEds64", "a"), Kind::Wav);
        assert_eq!(kind(b"fLaC\0\0\0\x22", "a.wav"), Kind::Sound);
        assert_eq!(kind(b"\0\0\0\x20ftypM4A ", "a.wav"), Kind::Sound);
        assert_eq!(kind(b"\xff\xfb\x90\x64", "a"), Kind::Sound);
        assert_eq!(kind(b"\xff\xf1\x50\x80", "a"), Kind::Sound);
    }

    #[test]
    fn text_named_as_a_recording_is_told_as_text() {
        assert_eq!(kind("title = \"gap\"\nµ".as_bytes(), "run.wav"), Kind::Other("this is text"));
        assert_eq!(kind(&"µµ".as_bytes()[..3], "run.wav"), Kind::Other("this is text"));
    }

    #[test]
    fn other_bytes_are_an_unknown_format() {
        for head in [&b"\x89PNG\r\n\x1a\n"[..], b"\x7fELF\x02", b"\xff\xd8\xff\xe0", b"RIFF\0\0\0\0AVI "] {
            assert!(matches!(kind(head, "run.wav"), Kind::Other(_)), "{head:?}");
        }
    }
}
