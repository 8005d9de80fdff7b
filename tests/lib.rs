//! The project against the outside; each module names what it is compared with.
