//! The equilibrium solver: numbers and indices, no names.
