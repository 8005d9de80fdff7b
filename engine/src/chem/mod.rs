//! What a constant is and how constants combine.
