//! A set of constants one can calculate with.
//!
//! A [`Ledger`] holds named reactions in whatever form and direction they were published; [`elimination`] turns them
//! into a formation reaction of every species from components that it picks itself; [`file`] reads and checks ledgers
//! written as TOML; [`shipped`] knows those that come with the program.

pub mod elimination;
pub mod file;
mod formation;
#[allow(clippy::module_inception)]
mod ledger;
pub mod shipped;

pub use formation::{Formation, Formations, Leftover};
pub use ledger::{ActivityChoice, Ledger, LedgerError, combine};
