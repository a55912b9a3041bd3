//! Estimates and learning for water tests and mash readings: numbers in,
//! numbers out.
//!
//! Nothing here knows a clock, a file, a random number or any chemistry but the
//! names of what is tested. The unit of a level is the caller's (mg/L, µS/cm,
//! pH); every figure of one history must be in the same one, and results come
//! back in it. Times are days from an origin the caller chooses.
//!
//! - [`measurement`]: how precise a method of testing is.
//! - [`local_level`]: what a source's level is today, and how sure.
//! - [`learning`]: what mash readings teach about the brewery's malts.
//!
//! A history is always evaluated whole. A corrected, backdated or excluded
//! result needs no undoing: evaluate again.

pub mod learning;
pub mod local_level;
mod lower_tail;
pub mod measurement;
pub mod quantity;
