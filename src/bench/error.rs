//! The one error of a bench file: where, the line, a caret line under the value, and what would be right.

use super::text::QuantityError;
use std::fmt;
use std::ops::Range;
use thiserror::Error;

/// What is wrong with a bench file.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum BenchFault {
    /// The text is not TOML.
    #[error("not readable as TOML: {message}")]
    Syntax {
        /// What the TOML reader says.
        message: String,
    },
    /// A section that does not exist.
    #[error("unknown section [{section}]{}; the sections are {allowed}", meant(.suggestion))]
    UnknownSection {
        /// The section as given.
        section: String,
        /// The one that is likely meant.
        suggestion: Option<String>,
        /// All of them.
        allowed: String,
    },
    /// A key that does not exist in its section.
    #[error("unknown key `{key}` {place}{}; allowed are {allowed}", meant(.suggestion))]
    UnknownKey {
        /// The key as given.
        key: String,
        /// Where it stands: `in [gap]`.
        place: String,
        /// The one that is likely meant.
        suggestion: Option<String>,
        /// All of them.
        allowed: String,
    },
    /// A value of the wrong TOML type.
    #[error("{key} is {given}; {needed} is needed")]
    WrongType {
        /// The key.
        key: String,
        /// What was given.
        given: &'static str,
        /// What is needed.
        needed: &'static str,
    },
    /// The text of a quantity is wrong.
    #[error("{key}: {cause}")]
    Quantity {
        /// The key.
        key: String,
        /// What is wrong with its text.
        cause: QuantityError,
    },
    /// A value that makes no sense.
    #[error("{key} is {given}; it must be {allowed}")]
    OutOfRange {
        /// The key.
        key: String,
        /// The text as given.
        given: String,
        /// What is allowed.
        allowed: String,
    },
    /// A word that is not one of those that the key takes.
    #[error("{key} is `{given}`{}; it must be {allowed}", meant(.suggestion))]
    Word {
        /// The key.
        key: String,
        /// The word as given.
        given: String,
        /// The one that is likely meant.
        suggestion: Option<String>,
        /// All of them.
        allowed: String,
    },
    /// Two values that cannot both hold.
    #[error("{key} contradicts {other} on line {other_line}: {why}")]
    Contradiction {
        /// The key that came second.
        key: String,
        /// The key that came first.
        other: String,
        /// Line of the first one.
        other_line: usize,
        /// Why both cannot hold, and what to do.
        why: &'static str,
    },
}

fn meant(suggestion: &Option<String>) -> String {
    suggestion.as_ref().map_or_else(String::new, |word| format!(" (did you mean {word}?)"))
}

/// The first fault of a bench file and its place. Displayed as a line with place and cause, the source line with a
/// caret line under the value, and a line with a right value.
#[derive(Debug, Clone, PartialEq)]
pub struct BenchError {
    /// Name of the file as given.
    pub file_name: String,
    /// Line, from 1.
    pub line: usize,
    /// Column in characters, from 1.
    pub column: usize,
    /// The line as it stands in the file; a very long one only around the fault.
    pub source_line: String,
    /// First and one past the last character of `source_line` that the carets mark.
    pub marked: Range<usize>,
    /// What is wrong.
    pub fault: Box<BenchFault>,
    /// A right line, if one can be given.
    pub help: Option<String>,
}

impl std::error::Error for BenchError {}

impl fmt::Display for BenchError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        let number = self.line.to_string();
        let margin = " ".repeat(number.len());
        writeln!(out, "{} line {}, column {}: {}", self.file_name, self.line, self.column, self.fault)?;
        writeln!(out, " {margin} |")?;
        writeln!(out, " {number} | {}", self.source_line)?;
        // A tab is repeated, so that the carets stand under the value whatever the width of a tab is.
        let before = self.source_line.chars().take(self.marked.start);
        let indent: String = before.map(|sign| if sign == '\t' { '\t' } else { ' ' }).collect();
        write!(out, " {margin} | {indent}{}", "^".repeat(self.marked.len().max(1)))?;
        match &self.help {
            Some(help) => write!(out, "\n {margin} = write for example {help}"),
            None => Ok(()),
        }
    }
}

/// The text of a file and its name: turns byte ranges into places.
#[derive(Debug, Clone, Copy)]
pub(super) struct Source<'a> {
    pub(super) text: &'a str,
    pub(super) file_name: &'a str,
}

impl Source<'_> {
    /// Line of a byte, from 1.
    pub(super) fn line(&self, byte: usize) -> usize {
        self.text.as_bytes().iter().take(byte).filter(|sign| **sign == b'\n').count() + 1
    }

    /// First byte of a line counted from 1; the end of the text if there are fewer.
    pub(super) fn start_of_line(&self, line: usize) -> usize {
        let ends = self.text.bytes().enumerate().filter(|(_, sign)| *sign == b'\n').map(|(at, _)| at + 1);
        std::iter::once(0).chain(ends).nth(line.saturating_sub(1)).unwrap_or(self.text.len())
    }

    /// The text of a byte range; empty if it is none.
    pub(super) fn slice(&self, span: &Range<usize>) -> &str {
        self.text.get(span.clone()).unwrap_or("")
    }

    /// The whole line that holds a byte, without its line end.
    pub(super) fn line_text(&self, byte: usize) -> &str {
        let byte = self.boundary(byte);
        let start = self.text[..byte].rfind('\n').map_or(0, |at| at + 1);
        let end = self.text[byte..].find('\n').map_or(self.text.len(), |at| byte + at);
        self.text[start..end].trim_end_matches('\r')
    }

    /// The error for a fault at a byte range.
    pub(super) fn error(&self, span: &Range<usize>, fault: BenchFault, help: Option<String>) -> BenchError {
        let start = self.boundary(span.start);
        let line = self.line_text(start);
        let line_start = self.text[..start].rfind('\n').map_or(0, |at| at + 1);
        let end = self.boundary(span.end).clamp(start, (line_start + line.len()).max(start));
        let column = self.text[line_start..start].chars().count();
        let marked = column..column + self.text[start..end].chars().count().max(1);
        let (source_line, marked) = shortened(line, marked);
        BenchError {
            file_name: self.file_name.to_owned(),
            line: self.line(start),
            column: column + 1,
            source_line,
            marked,
            fault: Box::new(fault),
            help,
        }
    }

    /// The nearest character boundary at or before a byte.
    fn boundary(&self, byte: usize) -> usize {
        let byte = byte.min(self.text.len());
        (0..=byte).rev().find(|at| self.text.is_char_boundary(*at)).unwrap_or(0)
    }
}

/// Cuts a very long line to the part around the marks; control characters become visible so that a broken file cannot
/// steer the terminal.
fn shortened(line: &str, marked: Range<usize>) -> (String, Range<usize>) {
    const LONGEST: usize = 160;
    const BEFORE: usize = 60;
    let start = if line.chars().count() > LONGEST { marked.start.saturating_sub(BEFORE) } else { 0 };
    let visible = |sign: char| if sign.is_control() && sign != '\t' { '\u{fffd}' } else { sign };
    let text: String = line.chars().skip(start).take(LONGEST).map(visible).collect();
    let last = text.chars().count().max(marked.start - start + 1);
    (text, marked.start - start..(marked.end - start).min(last))
}
