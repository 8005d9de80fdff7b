//! Physical constants and properties of pure water.

pub mod constants;
pub mod water;
