//! How pictures look on a light and a dark screen and on paper.

/// Style sheet of all pictures.
///
/// Colours are those of Okabe and Ito (2008), told apart with every common colour blindness; on a dark ground their lighter
/// ones. On paper everything is black, and dashes and shapes tell what is what. On a narrow screen a picture shrinks with its
/// text, so the text is set larger there.
pub const STYLE: &str = include_str!("style.css");
