//! Leat.
