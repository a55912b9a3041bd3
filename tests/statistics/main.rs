//! The statistics against reference figures (see qa/README.md), printed tables,
//! and what must hold for any history.

mod learning;
mod local_level;
mod measurement;
mod reference;
