//! Titled columns with units: what every result is shown as.
//!
//! A [`Table`] is made of [`Column`]s, a column of [`Cell`]s under a [`Title`]. Everything here is an immutable value:
//! an operation returns a new table and shares the cells it did not change. [`write`](mod@write) turns a table into a file,
//! [`number`] and [`notation`] into text for people; drawing it on a terminal is the program's business.

pub mod cell;
pub mod column;
pub mod error;
pub mod notation;
pub mod number;
pub mod plot;
mod plot_axis;
#[cfg(feature = "png")]
pub mod plot_png;
pub mod plot_svg;
pub mod statistics;
pub mod table;
pub mod title;
pub mod write;

pub use cell::Cell;
pub use column::{Column, Operation};
pub use error::TableError;
pub use table::{Order, Row, Table};
pub use title::Title;
pub use write::Overwrite;

/// How text for people is set.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct Style {
    /// ASCII only: `Ca^2+` and `+/-` instead of `Ca²⁺` and `±`.
    pub plain: bool,
    /// The number of characters a line may have; `None` where nothing limits it.
    pub width: Option<usize>,
}
