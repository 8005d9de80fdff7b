//! What was measured in a water, and what is done to it.

pub mod csv_text;
