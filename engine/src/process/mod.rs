//! Many equilibria: runs, sweeps, paths.
