//! Units of measurement, and quantities read from text with them.
