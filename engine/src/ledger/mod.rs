//! A set of constants one can calculate with.
//!
//! A [`Ledger`] holds named reactions in whatever form and direction they were published; [`elimination`] turns them
//! into a formation reaction of every species from components that it picks itself. Where constants imply each other,
//! [`combine`] weighs the routes, an [`Audit`] tables how far cycles fail to close, and a [`Reconciliation`] closes them;
//! [`standard_formation`] brings enthalpies and entropies of formation to bear on them. [`file`] reads and checks ledgers
//! written as TOML, [`save`] writes them; [`shipped`] knows those that come with the program.

mod activity_choice;
mod alternative;
mod audit;
pub mod chi_square;
mod combine;
mod composition;
mod couple;
pub mod elimination;
pub mod file;
mod formation;
mod gas_model;
pub mod in_force;
mod influence;
mod least_squares;
#[allow(clippy::module_inception)]
mod ledger;
mod network;
mod reconcile;
pub mod save;
pub mod shipped;
pub mod standard_formation;

pub use activity_choice::{ActivityChoice, Interactions, IonParameters};
pub use alternative::Alternative;
pub use audit::{Audit, Cycle};
pub use combine::{Combined, Routes, combine, combine_routes};
pub use composition::{Constituent, Sea};
pub use couple::Couple;
pub use formation::{Formation, Formations, Leftover};
pub use gas_model::GasModel;
pub use ledger::{Ledger, LedgerError};
pub use reconcile::{Move, Reconciliation};
