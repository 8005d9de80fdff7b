//! The engine of lysocline: everything between text and tables.

pub mod activity;
pub mod chem;
pub mod equilibrium;
pub mod ledger;
pub mod named;
pub mod nearest;
pub mod physics;
pub mod present;
pub mod process;
pub mod quantity;
pub mod script;
pub mod seawater;
pub mod solve;
pub mod tableau;
pub mod text;
pub mod units;
pub mod water;
