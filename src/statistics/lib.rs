//! Statistics.
