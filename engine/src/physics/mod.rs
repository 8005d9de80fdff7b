//! Physical constants and properties of pure water.
