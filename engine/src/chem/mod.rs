//! What a constant is and how constants combine.
//!
//! Reading order: an [`Element`] and its atomic mass; a [`Species`] read from a formula; an [`Equation`], balanced
//! when it is made; a [`LogK`], log10 K as a vector of temperature terms; the [`Conditions`] in which it holds and the
//! [`History`] of where it came from, told by its [`Trail`]; and a [`Reaction`], which is an equation with its constant and adds up as
//! chemistry does: written backwards K becomes 1/K, taken n times Kⁿ, and constants of added reactions multiply.

pub mod conditions;
mod conversion;
pub mod element;
pub mod equation;
pub mod formula;
pub mod history;
pub mod log_k;
pub mod pressure;
pub mod rational;
pub mod reaction;
pub mod salinity_term;
pub mod salt;
mod stated_conditions;
mod statement;
pub mod trail;

pub use conditions::{Conditions, GasStandard, GasUnit, Medium, PhScale, SoluteUnit};
pub use element::Element;
pub use equation::{Equation, EquationError, Imbalance};
pub use formula::{FormulaError, Species, State};
pub use history::{History, Influence, Origin, Provenance};
pub use log_k::{LogK, Range, Salinities, Term};
pub use rational::Rational;
pub use reaction::{Constant, Reaction, ReactionError};
pub use salinity_term::{Product, SalinityTerm};
pub use trail::Trail;
