//! Values and messages as characters on a terminal. Every function returns text; who called it writes it.

pub mod diagnostic;
mod notes;
pub mod number;
pub mod table;
