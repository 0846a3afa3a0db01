//! The plotting room: scales, panels and the SVG text of a picture. It owns how every picture looks.
//!
//! A picture is text without files, fonts or scripts: the viewer's own font is used, colours come from a style sheet with a light,
//! a dark and a printed form. No meaning is carried by colour alone: lines differ in their dashes, marks in their shape.
//! What is drawn also stands in `data-` attributes of the panels (the ends of each scale and where they lie), so that a
//! program can read the marks back into figures.

mod panel;
mod picture;
mod scale;
mod style;

pub use panel::{Area, Mark, Panel, Stroke};
pub use picture::{Legend, Medium, Picture, escaped};
pub use scale::{Axis, Scale};
pub use style::STYLE;
