//! A set of constants one can calculate with.
