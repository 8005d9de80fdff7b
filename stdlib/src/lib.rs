//! Published equilibrium constants and the ledgers made of them, embedded as text.
//!
//! One TOML file a publication in `constants/`, one list of entries a ledger in `ledgers/`; the engine reads them.
//! This crate holds data only: it parses nothing and computes nothing. The format and the known contradictions are
//! described in its README.

/// `(file name without extension, TOML text)` of every file in `constants/`, in alphabetical order.
pub const CONSTANTS: &[(&str, &str)] = &[
    ("busenberg1984", include_str!("../constants/busenberg1984.toml")),
    ("busenberg1986", include_str!("../constants/busenberg1986.toml")),
    ("felmy1990", include_str!("../constants/felmy1990.toml")),
    ("nordstrom1990", include_str!("../constants/nordstrom1990.toml")),
    ("olofsson1975", include_str!("../constants/olofsson1975.toml")),
    ("plummer1982", include_str!("../constants/plummer1982.toml")),
    ("rimstidt1980", include_str!("../constants/rimstidt1980.toml")),
];

/// `(file name without extension, TOML text)` of every file in `ledgers/`, in alphabetical order.
pub const LEDGERS: &[(&str, &str)] = &[("freshwater", include_str!("../ledgers/freshwater.toml"))];
