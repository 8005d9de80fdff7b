//! Titled columns with units: what every result is shown as.
