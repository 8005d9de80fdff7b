//! Many equilibria: a [`Run`] holds their states in order, [`sweep`] makes one over axes.

pub mod diagram;
pub mod run;
pub mod sweep;

pub use run::{Run, RunError};
pub use sweep::{Axis, SweepError, sweep};
