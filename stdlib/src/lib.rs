//! Published equilibrium constants and the ledgers made of them, embedded as text.
//!
//! One TOML file a publication in `constants/`, one list of entries a ledger in `ledgers/`; the engine reads them.
//! This crate holds data only: it parses nothing and computes nothing.

/// `(file name without extension, TOML text)` of every file in `constants/`, in alphabetical order.
pub const CONSTANTS: &[(&str, &str)] = &[];

/// `(file name without extension, TOML text)` of every file in `ledgers/`, in alphabetical order.
pub const LEDGERS: &[(&str, &str)] = &[];
