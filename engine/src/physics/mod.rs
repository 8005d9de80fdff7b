//! Physical constants and properties of pure water.

pub mod constants;
pub mod electrode;
pub mod seawater;
pub mod water;
