//! Values as characters on a terminal. Every function returns text; who called it writes it.
#![allow(dead_code, reason = "the commands that draw are wired up elsewhere")]

mod notes;
pub mod number;
pub mod table;
