//! Values and messages as characters.

pub mod diagnostic;
