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
pub mod sandbox;
pub mod show;
pub mod stop;
pub mod vocabulary;
pub mod words;

mod check;
mod column;
mod compare;
mod engine;
mod expect;
mod general;
mod ledger;
mod modules;
mod processes;
mod quantity;
mod reaction;
mod sample;
mod seawater;
mod session;
mod state;
mod syntax;
mod table;
mod tableau;
mod translate;
mod treatments;

pub use closure::Closure;
pub use diagnostic::{Diagnostic, Fail, ScriptResult, fail};
pub use engine::{Options, ScriptEngine};
pub use host::{Host, Progress};
pub use rhai::Dynamic;
pub use session::{SESSION, Session};
pub use show::{Shows, Style};
pub use stop::{Halt, Stop};
pub use vocabulary::Vocabulary;

#[cfg(test)]
mod tests;
