//! Which channel of a recording is heard.

use super::AudioError;
use std::fmt;
use std::str::FromStr;

/// Which channel to analyse.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub enum ChannelChoice {
    /// The first channel.
    Left,
    /// The second channel.
    Right,
    /// The mean of all channels.
    Mix,
    /// A channel by its number, counted from 1.
    Number(u16),
    /// The channel in which clicks stand out most.
    #[default]
    Clearest,
}

/// A text that names no channel.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("`{0}` is no channel; write left, right, mix or a number from 1")]
pub struct ChannelError(String);

impl FromStr for ChannelChoice {
    type Err = ChannelError;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        match text.trim().to_ascii_lowercase().as_str() {
            "left" | "l" => Ok(Self::Left),
            "right" | "r" => Ok(Self::Right),
            "mix" => Ok(Self::Mix),
            number => match number.parse() {
                Ok(number) if number > 0 => Ok(Self::Number(number)),
                _ => Err(ChannelError(text.to_owned())),
            },
        }
    }
}

/// What is taken from each frame once the choice is settled.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Pick {
    /// One channel, counted from 0.
    One(usize),
    /// The mean of all.
    Mix,
}

impl Pick {
    /// The pick for a choice that needs no listening; `None` for [`ChannelChoice::Clearest`] of several channels.
    pub(super) fn settled(choice: ChannelChoice, channels: u16) -> Result<Option<Self>, AudioError> {
        let one = |asked: u16| {
            if asked >= 1 && asked <= channels {
                Ok(Some(Self::One(usize::from(asked - 1))))
            } else {
                Err(AudioError::NoChannel { asked, channels })
            }
        };
        match choice {
            ChannelChoice::Left => one(1),
            ChannelChoice::Right => one(2),
            ChannelChoice::Number(number) => one(number),
            ChannelChoice::Mix if channels > 1 => Ok(Some(Self::Mix)),
            ChannelChoice::Clearest if channels > 1 => Ok(None),
            ChannelChoice::Mix | ChannelChoice::Clearest => one(1),
        }
    }

    /// One mono sample of a frame.
    pub(super) fn of(self, frame: &[f32]) -> f32 {
        match self {
            Self::One(channel) => frame.get(channel).copied().unwrap_or(0.0),
            Self::Mix => frame.iter().sum::<f32>() / frame.len() as f32,
        }
    }

    /// How it is called in a recording of so many channels.
    pub(super) fn label(self, channels: u16) -> String {
        match (self, channels) {
            (Self::Mix, _) => "mix".to_owned(),
            (Self::One(0), 2) => "left".to_owned(),
            (Self::One(1), 2) => "right".to_owned(),
            (Self::One(channel), _) => (channel + 1).to_string(),
        }
    }
}

impl fmt::Display for ChannelChoice {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Left => out.write_str("left"),
            Self::Right => out.write_str("right"),
            Self::Mix => out.write_str("mix"),
            Self::Number(number) => write!(out, "{number}"),
            Self::Clearest => out.write_str("clearest"),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn channels_are_read_by_name_and_by_number() {
        assert_eq!("left".parse(), Ok(ChannelChoice::Left));
        assert_eq!("Right".parse(), Ok(ChannelChoice::Right));
        assert_eq!("mix".parse(), Ok(ChannelChoice::Mix));
        assert_eq!("3".parse(), Ok(ChannelChoice::Number(3)));
    }

    #[test]
    fn a_channel_that_cannot_be_is_refused_with_what_would_be_right() {
        for text in ["0", "-1", "both", "", "70000"] {
            let error = text.parse::<ChannelChoice>().expect_err(text).to_string();
            assert!(error.contains("left, right, mix or a number from 1"), "{error}");
        }
    }

    #[test]
    fn a_channel_beyond_the_recording_is_refused() {
        assert_eq!(Pick::settled(ChannelChoice::Right, 1), Err(AudioError::NoChannel { asked: 2, channels: 1 }));
        assert_eq!(Pick::settled(ChannelChoice::Number(2), 2), Ok(Some(Pick::One(1))));
    }

    #[test]
    fn the_mix_is_the_mean_of_the_channels() {
        assert_eq!(Pick::Mix.of(&[0.5, -0.25]), 0.125);
    }
}
