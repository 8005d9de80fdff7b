//! Physical constants and properties of pure water.

pub mod constants;
pub mod electrode;
pub mod gas_exchange;
pub mod seawater;
pub mod virial;
pub mod water;
