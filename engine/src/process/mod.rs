//! Many equilibria: a [`Run`] holds their states in order. [`sweep`] makes one over axes, [`Titration`] over volumes from a
//! burette, [`path`] step by step, [`monte_carlo`] over random draws; [`gran`] reads a measured titration.

pub mod diagram;
pub mod gran;
pub mod monte_carlo;
pub mod path;
pub mod run;
pub mod sweep;
pub mod titration;

pub use gran::{Gran, GranError, Readings, gran};
pub use monte_carlo::{MonteCarloError, Vary, monte_carlo};
pub use path::path;
pub use run::{Origin, Run, RunError};
pub use sweep::{Axis, SweepError, sweep};
pub use titration::{Titration, TitrationError, equivalence_points};
