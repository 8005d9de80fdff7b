//! Activity coefficients of dissolved species: one equation family a file.
