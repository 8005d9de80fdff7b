//! The marine carbonate system: constants and samples of seawater for the general solver.
//!
//! In a ledger of seawater every dissolved species is a concentration in mol/kg(solution), and so are its totals; a gas is
//! a fugacity. Constants are published on three scales of pH. [`constants`] evaluates each at temperature, salinity and
//! pressure and brings it to the free scale, where `H^+` is the hydrogen ion alone and HSO4^- and HF are species like
//! others; [`scales`] says what the other scales count. The solver then works with ideal activities: nothing here solves
//! an equilibrium.

pub mod buffers;
pub mod constants;
pub mod estuary;
pub mod profile;
pub mod scales;
