//! Service tests.
