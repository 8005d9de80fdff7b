//! The scripting language: the only room that imports rhai.
//!
//! A script is read by rhai's parser under our rules (`syntax`, `check`), runs with our functions (`vocabulary`, one
//! file for each native type), and fails in our words (`diagnostic`, `translate`). A native type joins in
//! [`vocabulary`] by one line:
//!
//! ```text
//! vocabulary
//!     .module(exported_module!(reaction_functions))            // documented functions, methods, getters
//!     .native::<Reaction>("Reaction", |r, style| r.text(style)) // name in messages; how it is shown
//!     .operator::<Reaction, Reaction>("+", add)                 // with a Reaction on either side
//!     .equality::<Reaction>(same)                               // == and !=
//!     .pure(&["reaction", "to_kc"])                             // dropping their result is refused
//!     .quoted(species_names);                                   // completed inside quotes
//! ```

pub mod closure;
pub mod diagnostic;
pub mod docs;
pub mod faults;
pub mod host;
pub mod input;
pub mod named;
pub mod numbers;
pub mod record;
pub mod sandbox;
pub mod show;
pub mod stop;
pub mod vocabulary;
pub mod words;

mod cells;
mod check;
mod column;
mod compare;
mod engine;
mod findings;
mod gases;
mod general;
mod ledger;
mod modules;
mod neighbours;
mod plot;
mod processes;
mod quantity;
mod reaction;
mod same;
mod sample;
mod seawater;
mod session;
mod slice;
mod sources;
mod state;
mod syntax;
mod table;
mod tableau;
mod translate;
mod treatments;

pub use closure::Closure;
pub use diagnostic::{Diagnostic, Fail, ScriptResult, fail};
pub use engine::{Options, ScriptEngine};
pub use host::{Host, OnShown, Progress, Shown};
pub use record::Record;
pub use rhai::Dynamic;
pub use same::same;
pub use session::{SESSION, Session};
pub use show::{Shows, Style};
pub use sources::Sources;
pub use stop::{Halt, Stop};
pub use vocabulary::Vocabulary;

#[cfg(test)]
mod tests;
